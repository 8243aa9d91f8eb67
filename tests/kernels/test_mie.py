"""Partial-wave kernels: compiled against plain Python, and what the compiler made of the inner loop."""

from __future__ import annotations

import platform
import re

import numpy as np
import pytest
from numba import config, njit

from skyoptics.kernels import debye, mie

needs_compiler = pytest.mark.skipif(bool(config.DISABLE_JIT), reason="nothing is compiled")


def sums(function, a, b, cosine):
    s1 = np.empty(len(cosine), dtype=np.complex128)
    s2 = np.empty_like(s1)
    function(a, b, cosine, int(np.count_nonzero(cosine >= 0.0)), s1, s2)
    return s1, s2


def test_bessel_functions_against_closed_forms():
    # Bohren & Huffman eq. 4.11: ψ1 = sin x/x − cos x, χ1 = cos x/x + sin x, and the next order by hand
    for x in (0.01, 0.7, 3.0, 40.0):
        psi, chi = np.empty(12), np.empty(12)
        mie.riccati_bessel(x, psi, chi)
        if x > 0.1:  # the closed form itself cancels below
            np.testing.assert_allclose(psi[1], np.sin(x) / x - np.cos(x), rtol=1e-12)
        np.testing.assert_allclose(psi[1], x**2 / 3.0 if x < 0.1 else psi[1], rtol=1e-4)
        np.testing.assert_allclose(chi[2], (3 / x**2 - 1) * np.cos(x) + 3 / x * np.sin(x), rtol=1e-11)
        # Wronskian, Abramowitz & Stegun 10.1.31
        np.testing.assert_allclose(psi[:-1] * chi[1:] - psi[1:] * chi[:-1], 1.0, rtol=1e-10)


def test_bessel_functions_against_scipy_beyond_the_turning_point():
    from scipy.special import spherical_jn, spherical_yn

    x = 31.4159
    n = np.arange(60)
    psi, chi = np.empty(60), np.empty(60)
    mie.riccati_bessel(x, psi, chi)
    np.testing.assert_allclose(psi, x * spherical_jn(n, x), rtol=1e-10, atol=1e-13)
    np.testing.assert_allclose(chi, -x * spherical_yn(n, x), rtol=1e-10, atol=1e-13)


@pytest.mark.parametrize("z", [2.0 + 0.0j, 66.65 + 0.0j, 20.0 + 20.0j, 130.0 + 2.0j])
def test_logarithmic_derivative_obeys_riccati_equation_steps(z):
    from scipy.special import spherical_jn

    n = np.arange(1, 30)
    found = np.empty(30, dtype=np.complex128)
    mie.logarithmic_derivative(z, found)
    expected = spherical_jn(n - 1, z) / spherical_jn(n, z) - n / z
    np.testing.assert_allclose(found[1:], expected, rtol=1e-9)


@needs_compiler
@pytest.mark.parametrize("m", [1.333 + 0.0j, 1.5 + 0.1j])
def test_compiled_kernels_equal_plain_python(m, monkeypatch):
    x, terms = 9.0, 25
    cosine = np.linspace(1.0, -1.0, 21)
    arguments = (m, np.array([x]), np.array([terms]), np.array([0.5]), cosine, 11)

    def everything(plain):
        coefficients = np.empty((2, terms), dtype=np.complex128)
        totals, products = np.zeros(3), np.zeros((4, len(cosine)))
        pick = (lambda kernel: kernel.py_func) if plain else (lambda kernel: kernel)
        pick(mie_coefficients)(m, x, *coefficients)
        pick(accumulate_sizes)(*arguments, products, totals)
        return coefficients, sums(pick(amplitude_sums), *coefficients, cosine), products, totals

    mie_coefficients, accumulate_sizes, amplitude_sums = mie.mie_coefficients, mie.accumulate_sizes, mie.amplitude_sums
    fast = everything(plain=False)  # before the names are changed: compiling looks them up
    for name in (
        "riccati_bessel", "logarithmic_derivative", "mie_coefficients", "mie_efficiencies",
        "fold_coefficients", "sum_tile", "amplitude_sums",
    ):  # fmt: skip
        monkeypatch.setattr(mie, name, getattr(mie, name).py_func)
    for slow, quick in zip(everything(plain=True), fast, strict=True):
        np.testing.assert_allclose(slow, quick, rtol=1e-9, atol=1e-10)


@needs_compiler
def test_compiled_debye_coefficients_equal_plain_python(monkeypatch):
    fast = np.empty((2, 4, 20), dtype=np.complex128)
    slow = np.empty_like(fast)
    debye.debye_coefficients(1.33 + 0.01j, 8.0, *fast)
    monkeypatch.setattr(debye, "inner_functions", debye.inner_functions.py_func)
    debye.debye_coefficients.py_func(1.33 + 0.01j, 8.0, *slow)
    np.testing.assert_allclose(slow, fast, rtol=1e-9, atol=1e-15)


@needs_compiler
@pytest.mark.skipif(platform.machine() not in ("x86_64", "AMD64"), reason="looks for x86 vector registers")
def test_inner_loop_is_vectorised():
    # compiled anew: kernels loaded from the cache do not know their assembly
    fresh = njit(nogil=True, error_model="numpy")(mie.sum_tile.py_func)
    fresh(np.zeros((4, 8)), np.zeros(11 * mie.TILE), 8)
    text = "\n".join(fresh.inspect_asm().values())
    if "ymm" not in text and "zmm" not in text:
        pytest.skip("this machine has no wide registers")
    # four orders a visit, each with at least seven multiply-adds on packed doubles
    assert len(re.findall(r"vfn?m(?:add|sub)\w*pd\s.*[yz]mm|vmulpd\s.*[yz]mm", text)) >= 28


def test_tiles_do_not_change_results():
    """Angles past one tile, and any number of spare lanes, give the same numbers as one at a time."""
    a = np.array([0.3 + 0.1j, 0.2 - 0.1j, 0.05j, 0.01, 0.002])
    b = 0.5j * a
    cosine = np.cos(np.linspace(0.0, np.pi, 600))
    whole = np.array(sums(mie.amplitude_sums, a, b, cosine))
    single = np.array([sums(mie.amplitude_sums, a, b, cosine[k : k + 1]) for k in range(0, 600, 7)])[..., 0].T
    np.testing.assert_array_equal(whole[:, ::7], single)


def test_angular_functions_of_the_first_orders():
    # Bohren & Huffman p. 95: π1 = 1, π2 = 3µ, τ1 = µ, τ2 = 3 cos 2θ; S1 = Σ (2n+1)/(n(n+1)) (a π + b τ)
    cosine = np.array([1.0, 0.8, 0.3, 0.0, -0.3, -0.8, -1.0])
    zero = np.zeros(2, dtype=complex)
    for order, pi, tau in ((1, np.ones(7), cosine), (2, 3 * cosine, 3 * (2 * cosine**2 - 1))):
        one = zero.copy()
        one[order - 1] = 2.0 - 1.0j
        factor = (2 * order + 1) / (order * (order + 1)) * (2.0 - 1.0j)
        s1, s2 = sums(mie.amplitude_sums, one, zero, cosine)
        np.testing.assert_allclose(s1, factor * pi, atol=1e-14)
        np.testing.assert_allclose(s2, factor * tau, atol=1e-14)
        s1, s2 = sums(mie.amplitude_sums, zero, one, cosine)
        np.testing.assert_allclose(s1, factor * tau, atol=1e-14)
        np.testing.assert_allclose(s2, factor * pi, atol=1e-14)
