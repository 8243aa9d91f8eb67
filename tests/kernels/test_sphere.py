"""Rays through a sphere: energy, polarisation, one ray at the rainbow's impact, kernel against its Python form."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.kernels import sphere
from skyoptics.kernels.random import batch_key
from skyoptics.optics import bows

EDGES = np.linspace(0.0, np.pi, 181)
FIRST = sphere.first_bins(EDGES)

compiled = pytest.mark.skipif(not hasattr(sphere.trace, "py_func"), reason="numba is switched off")


def run(index, depth=0.0, count=4096, key=(0, 0, 0), edges=EDGES, function=sphere.trace):
    low, high = batch_key(*key)
    real, dim = np.full(17, float(index)), np.full(17, float(depth))
    return function(low, high, count, real, dim, edges, sphere.first_bins(edges))


def balance(result, count):
    _, energy, _, absorbed, cut_off = result
    return (energy.sum() + absorbed + cut_off) / count


def squares(function, panels=32):
    """Mean over b² of a function of cos i, by Gauss–Legendre quadrature in panels."""
    node, weight = np.polynomial.legendre.leggauss(16)
    cosine = ((np.arange(panels)[:, None] + 0.5 * (node + 1.0)) / panels).ravel()
    return float(np.sum(np.tile(weight, panels) / panels * cosine * function(cosine)))


def fresnel(index, cosine):
    """Reflectances in the form of sines and tangents: Born & Wolf, Principles of Optics, §1.5.3 eqs. (32), (33)."""
    i = np.arccos(cosine)
    r = np.arcsin(np.sin(i) / index)
    return np.sin(i - r) ** 2 / np.sin(i + r) ** 2, np.tan(i - r) ** 2 / np.tan(i + r) ** 2


@pytest.mark.parametrize(
    ("p", "eps_s", "eps_p"),
    # ε at the rainbow ray, n = 4/3: (1 − R)² R^(p−1) with R_s = ((p−1)/(p+1))², R_p = ((n²−p)/(n²+p))² (derived from
    # van de Hulst 1957, ch. 13); ε_s = 64/729, 9/256 exactly
    [(2, 64.0 / 729.0, 0.003436), (3, 9.0 / 256.0, 0.003740), (4, 0.019110, 0.002350), (5, 0.012043, 0.001563)],
)
def test_a_ray_sent_at_the_rainbows_impact(p, eps_s, eps_p):
    index = 4.0 / 3.0
    s, parallel = sphere.ray(index, float(bows.impact(index, p)), 10)
    assert s[p] == pytest.approx(eps_s, abs=1e-6)
    assert parallel[p] == pytest.approx(eps_p, abs=1e-6)
    closed_s, closed_p = bows.energies(index, p)
    assert s[p] == pytest.approx(float(closed_s), abs=1e-12)
    assert parallel[p] == pytest.approx(float(closed_p), abs=1e-12)


@pytest.mark.parametrize("index", [1.0003, 1.331, 1.343, 1.5, 2.4])
@pytest.mark.parametrize("depth", [0.0, 1e-6, 0.4, 20.0])
def test_no_energy_is_lost(index, depth):
    assert balance(run(index, depth), 4096) == pytest.approx(1.0, abs=1e-12)


@compiled
@pytest.mark.parametrize(("which", "factor"), [("amplitudes", 1.001), ("transmittances", 0.999)])
def test_a_broken_coefficient_is_noticed(monkeypatch, which, factor):
    right = getattr(sphere, which)

    def broken(index, cos_i, cos_r):
        first, *rest = right(index, cos_i, cos_r)
        return (factor * first, *rest)

    enter = sphere._enter.py_func
    python = sphere.trace.py_func
    monkeypatch.setattr(sphere, "_enter", enter)
    assert balance(run(1.33, 0.1, count=256, function=python), 256) == pytest.approx(1.0, abs=1e-12)
    monkeypatch.setattr(sphere, which, broken)
    assert balance(run(1.33, 0.1, count=256, function=python), 256) != pytest.approx(1.0, abs=1e-6)


@compiled
def test_kernel_agrees_with_its_python_form():
    for depth in (0.0, 0.3):
        quick = run(1.335, depth, count=512)
        slow = run(1.335, depth, count=512, function=sphere.trace.py_func)
        for a, b in zip(quick, slow, strict=True):
            np.testing.assert_allclose(a, b, rtol=1e-11, atol=1e-12)
    for a, b in zip(sphere.ray(1.335, 0.86, 5), sphere.ray.py_func(1.335, 0.86, 5), strict=True):
        np.testing.assert_allclose(a, b, rtol=1e-13)


def test_external_reflection_is_the_diffuse_reflectance():
    # Duntley, The Optical Properties of Diffusing Materials, J. Opt. Soc. Am. 32, 61 (1942); formula from memory
    n = 4.0 / 3.0
    closed = (
        0.5
        + (n - 1) * (3 * n + 1) / (6 * (n + 1) ** 2)
        + n**2 * (n**2 - 1) ** 2 / (n**2 + 1) ** 3 * np.log((n - 1) / (n + 1))
        - 2 * n**3 * (n**2 + 2 * n - 1) / ((n**2 + 1) * (n**4 - 1))
        + 8 * n**4 * (n**4 + 1) / ((n**2 + 1) * (n**4 - 1) ** 2) * np.log(n)
    )
    count = 1 << 16
    assert run(n, count=count)[1][0] / count == pytest.approx(closed, abs=5e-6)


@pytest.mark.parametrize("depth", [0.0, 0.4])
def test_energies_by_order_against_quadrature(depth):
    n, count = 1.34, 1 << 16
    _, energy, _, absorbed, cut_off = run(n, depth, count=count)

    def left(cosine):
        return np.exp(-depth * np.sqrt(1.0 - (1.0 - cosine**2) / n**2))

    def order(p):
        def share(cosine):
            return sum(
                0.5 * (1.0 - reflected) ** 2 * reflected ** (p - 1) * left(cosine) ** p
                for reflected in fresnel(n, cosine)
            )

        return squares(share)

    def lost(cosine):
        q = [(reflected, reflected * left(cosine)) for reflected in fresnel(n, cosine)]
        return sum(0.5 * (1.0 - R) * (1.0 - left(cosine)) * (1.0 - g**10) / (1.0 - g) for R, g in q)

    for p in range(1, 11):
        assert energy[p] / count == pytest.approx(order(p), abs=5e-6)
    assert absorbed / count == pytest.approx(squares(lost), abs=5e-6)
    inside = squares(lambda c: sum(0.5 * (1.0 - R) * (R * left(c)) ** 10 for R in fresnel(n, c)))
    assert cut_off / count == pytest.approx(inside, abs=5e-6)


def test_absorption_near_mie():
    # m = 1.33 − 1e-5 i, x = 10 000: Qext − Qsca = 2.004089 − 1.723857 (Wiscombe, NCAR/TN-140+STR, 1979); edge rays
    # tunnel into the sphere in waves but not in rays, hence the tolerance
    depth = 4.0 * 1e-5 * 1e4
    assert run(1.33, depth, count=1 << 14)[3] / (1 << 14) == pytest.approx(2.004089 - 1.723857, rel=0.01)


def test_signs_forward_and_back():
    # §12.21 and §13.1 of van de Hulst 1957: no change of handedness forward, reversal in central backscatter
    edges = np.radians(np.array([0.0, 0.2, 1.0, 90.0, 179.0, 179.8, 180.0]))
    sums = run(4.0 / 3.0, count=1 << 18, edges=edges)[0]
    ratio = sums[..., 2] / np.where(sums[..., 0] > 0.0, sums[..., 0], np.nan)
    assert ratio[1, 0] == pytest.approx(1.0, abs=1e-4)
    assert ratio[0, -1] == pytest.approx(-1.0, abs=1e-4)
    assert ratio[2, -1] == pytest.approx(-1.0, abs=1e-4)
    assert np.all(sums[..., 2] ** 2 + sums[..., 1] ** 2 <= sums[..., 0] ** 2 * (1.0 + 1e-12))


def test_cosines_belong_to_the_angles():
    edges = np.linspace(0.0, np.pi, 18001)
    sums, energy, cosine, _, _ = run(1.335, count=1 << 14, edges=edges)
    middle = np.cos(0.5 * (edges[1:] + edges[:-1]))
    np.testing.assert_allclose((sums[..., 0] @ middle) / energy, cosine / energy, atol=1e-4)
    np.testing.assert_allclose(sums[..., 0].sum(axis=1), energy, rtol=1e-12)


def test_uneven_bins_hold_the_same_light():
    fine = np.linspace(0.0, np.pi, 3601)
    chosen = np.unique(np.concatenate([[0, 3600], np.random.default_rng(1).integers(1, 3600, 300)]))
    a = run(1.335, edges=fine)[0]
    b = run(1.335, edges=fine[chosen])[0]
    np.testing.assert_allclose(np.add.reduceat(a, chosen[:-1], axis=1), b, rtol=1e-11, atol=1e-12)


def test_wavelengths_fill_the_bin_evenly_beside_the_impact():
    # an index that is different in each of 16 parts of the bin and a depth large enough to tell them apart
    count = 1 << 12
    low, high = batch_key(5, 0, 0)
    depth = np.zeros(17)
    shares = []
    for node in range(16):
        depth[:] = 0.0
        depth[node : node + 2] = 1e-3
        shares.append(sphere.trace(low, high, count, np.full(17, 1.33), depth.copy(), EDGES, FIRST)[3])
    shares = np.array(shares)
    # hats at both ends of the bin are one and a half wide, those inside two
    np.testing.assert_allclose(shares[1:-1], shares[1:-1].mean(), rtol=0.02)
    np.testing.assert_allclose(shares[[0, -1]], 0.75 * shares[1:-1].mean(), rtol=0.02)


def test_batches_differ_and_repeat():
    first, again, other = run(1.33), run(1.33), run(1.33, key=(0, 0, 1))
    assert np.array_equal(first[0], again[0])
    assert not np.array_equal(first[0], other[0])
