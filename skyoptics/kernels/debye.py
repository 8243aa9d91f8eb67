"""Debye series of a sphere: each partial wave split by the number p of chords inside.

P. Debye, Phys. Z. 9, 775 (1908); H. M. Nussenzveig, J. Math. Phys. 10, 82 (1969). Written out here with Riccati–Bessel
functions of Bohren & Huffman's kind: ζ1 = ψ − iχ goes outwards, ζ2 = ψ + iχ inwards, y = mx, and for either polarisation

    N(f, g) = A f'(y) g(x) − B f(y) g'(x),   (A, B) = (1, m) electric (a_n), (m, 1) magnetic (b_n).

A wave meeting the surface from outside is reflected by R22 = −N(ζ2, ζ2)/N(ζ2, ζ1), one from inside by
R11 = −N(ζ1, ζ1)/N(ζ2, ζ1); the product of both transmissions is −4m/N(ζ2, ζ1)² (the Wronskian of ζ1, ζ2 is −2i).
With 1 − R22 = 2 N(ζ2, ψ)/N(ζ2, ζ1) and 1 − R11 = 2 N(ψ, ζ1)/N(ζ2, ζ1), neither of which cancels,

    p = 0        N(ζ2, ψ)/N(ζ2, ζ1)              diffraction and external reflection
    p ≥ 1        2m R11^(p−1)/N(ζ2, ζ1)²
    p > P        m R11^P/(N(ζ2, ζ1) N(ψ, ζ1))    closed sum of the geometric series

and all of them add up to a_n or b_n. Functions of y carry the factor exp(±iy) apart, since absorption makes ζ1 and ζ2
differ by exp(2 Im y).
"""

from __future__ import annotations

import numpy as np
from numba import njit

from skyoptics.kernels.mie import Complexes, logarithmic_derivative, mie_coefficients, riccati_bessel

EVANESCENT = 1e120
"""|ζ1(y)| above this: no light gets inside in this order, all of it belongs to p = 0 (only for m < 1)."""


@njit(cache=True, nogil=True, error_model="numpy")
def inner_functions(y: complex, psi: Complexes, outgoing: Complexes, ingoing: Complexes) -> complex:
    """Fill ψ exp(iy), ζ1 exp(−iy), ζ2 exp(iy), n = 0 … len − 1.

    ζ1 climbs safely in n for any absorption, ψ by its ratios from above; ζ2 = 2ψ − ζ1, since ζ2 itself loses
    exp(2 Im y) on the way up.
    """
    count = len(psi)
    derivative = np.empty(count, dtype=np.complex128)
    logarithmic_derivative(y, derivative)
    square = np.exp(2.0j * y)
    inverse = 1.0 / y
    psi[0] = (square - 1.0) / 2.0j
    psi[1] = psi[0] * inverse - 0.5 * (square + 1.0)
    if abs(psi[0]) > abs(psi[1]):  # start from the larger one: near a zero the ratio has no digits
        psi[1] = psi[0] / (derivative[1] + inverse)
    outgoing[0] = -1.0j
    outgoing[1] = -1.0j * inverse - 1.0
    for n in range(2, count):
        psi[n] = psi[n - 1] / (derivative[n] + n / y)
        outgoing[n] = (2 * n - 1) / y * outgoing[n - 1] - outgoing[n - 2]
    for n in range(count):
        ingoing[n] = 2.0 * psi[n] - square * outgoing[n]
    return square


@njit(cache=True, nogil=True, error_model="numpy")
def debye_coefficients(m: complex, x: float, a: Complexes, b: Complexes) -> None:
    """Fill a, b (last + 2, orders): rows p = 0 … last, then the sum of all higher ones."""
    last = a.shape[0] - 2
    count = a.shape[1]
    psi_x = np.empty(count + 1)
    chi_x = np.empty(count + 1)
    riccati_bessel(x, psi_x, chi_x)
    y = m * x
    psi_y = np.empty(count + 1, dtype=np.complex128)
    out_y = np.empty(count + 1, dtype=np.complex128)
    in_y = np.empty(count + 1, dtype=np.complex128)
    square = inner_functions(y, psi_y, out_y, in_y)
    whole_a = np.empty(count, dtype=np.complex128)
    whole_b = np.empty(count, dtype=np.complex128)
    mie_coefficients(m, x, whole_a, whole_b)
    inside = True
    for n in range(1, count + 1):
        inside = inside and abs(out_y[n]) < EVANESCENT
        column = n - 1
        if not inside:
            a[:, column] = 0.0
            b[:, column] = 0.0
            a[0, column] = whole_a[column]
            b[0, column] = whole_b[column]
            continue
        psi_slope = psi_x[n - 1] - n / x * psi_x[n]
        wave = complex(psi_x[n], -chi_x[n])
        wave_slope = complex(psi_slope, -(chi_x[n - 1] - n / x * chi_x[n]))
        order = n / y
        in_slope = in_y[n - 1] - order * in_y[n]
        out_slope = out_y[n - 1] - order * out_y[n]
        inner_slope = psi_y[n - 1] - order * psi_y[n]
        for magnetic in range(2):
            first = m if magnetic else 1.0 + 0.0j
            second = 1.0 + 0.0j if magnetic else m
            rows = b if magnetic else a
            passing = first * in_slope * wave - second * in_y[n] * wave_slope
            rows[0, column] = (first * in_slope * psi_x[n] - second * in_y[n] * psi_slope) / passing
            reflected = -square * (first * out_slope * wave - second * out_y[n] * wave_slope) / passing
            inner = first * inner_slope * wave - second * psi_y[n] * wave_slope
            power = square / passing
            for p in range(1, last + 1):
                rows[p, column] = 2.0 * m * power / passing
                power = power * reflected
            rows[last + 1, column] = m * power / inner
