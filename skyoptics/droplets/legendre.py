"""Legendre moments of a phase function, for radiative transfer: P(µ) = Σ (2l + 1) χ_l P_l(µ), χ_0 = 1, χ_1 = g.

The elements of one sphere are polynomials in µ of degree below twice the number of partial waves, so a Gauss–Legendre rule
with `nodes_needed` points gives their moments exactly (Wiscombe, J. Atmos. Sci. 34, 1408 (1977), for the use in
radiative transfer, from memory).
"""

from __future__ import annotations

import numpy as np

from skyoptics.droplets.mie import terms_needed
from skyoptics.errors import DomainError
from skyoptics.units import ArrayLike, FloatArray


def nodes_needed(size_parameter: float) -> int:
    """Return how many Gauss–Legendre nodes, and how many moments, hold all of a sphere of the largest size parameter."""
    return 2 * int(terms_needed(size_parameter)) + 1


def gauss_legendre(count: int) -> tuple[FloatArray, FloatArray]:
    """Return nodes (descending cosines) and weights of the Gauss–Legendre rule, shape (count,) each.

    Newton's method in the angle, from Tricomi's estimate (Abramowitz & Stegun 22.16.6): count² work, weights good to
    1e-10, in seconds for 10 000 nodes.
    """
    if count < 1:
        raise DomainError(f"a quadrature needs at least one node, got {count}")
    half = (count + 1) // 2
    k = np.arange(1, half + 1)
    angle = np.pi * (k - 0.25) / (count + 0.5)
    angle += 0.125 / count**2 / np.tan(angle) * (1.0 - 1.0 / count)
    slope = np.ones_like(angle)
    for _ in range(3):
        cosine = np.cos(angle)
        before, value = np.ones_like(angle), cosine.copy()
        for degree in range(2, count + 1):
            before, value = value, ((2 * degree - 1) * cosine * value - (degree - 1) * before) / degree
        # (1 − µ²) P' = n (P_{n−1} − µ P_n), and dP/dθ = −sin θ P'
        slope = count * (before - cosine * value) / np.sin(angle)
        angle += value / slope
    weight = 2.0 / slope**2
    nodes = np.cos(angle)
    if count % 2:
        nodes[-1] = 0.0
    tail = slice(-2, None, -1) if count % 2 else slice(None, None, -1)
    return np.concatenate([nodes, -nodes[tail]]), np.concatenate([weight, weight[tail]])


def moments(values: ArrayLike, nodes: ArrayLike, weights: ArrayLike, count: int) -> FloatArray:
    """Return the moments χ_l = ½ ∫ P(µ) P_l(µ) dµ.

    Parameters
    ----------
    values : array_like, shape (nθ, ...)
        An element (or several) at the nodes, ∫ P11 dΩ = 4π [1].
    nodes, weights : array_like, shape (nθ,)
        From `gauss_legendre`.
    count : int
        Moments wanted: l = 0 … count − 1.

    Returns
    -------
    ndarray, shape (count, ...)
        χ_l [1].
    """
    mu = np.asarray(nodes, dtype=np.float64)
    values = np.asarray(values, dtype=np.float64)
    weighted = 0.5 * np.asarray(weights, dtype=np.float64)[:, np.newaxis] * values.reshape(len(mu), -1)
    result = np.empty((count, weighted.shape[1]))
    before, value = np.zeros_like(mu), np.ones_like(mu)
    for degree in range(count):
        result[degree] = value @ weighted
        before, value = value, ((2 * degree + 1) * mu * value - degree * before) / (degree + 1)
    return result.reshape((count, *values.shape[1:]))


def series(moments: ArrayLike, cos_angle: ArrayLike) -> FloatArray:
    """Return Σ (2l + 1) χ_l P_l(µ), shape (nθ,), from moments (count,) at cosines (nθ,) [1]."""
    mu = np.asarray(cos_angle, dtype=np.float64)
    total = np.zeros_like(mu)
    before, value = np.zeros_like(mu), np.ones_like(mu)
    for degree, moment in enumerate(np.asarray(moments, dtype=np.float64)):
        total += (2 * degree + 1) * moment * value
        before, value = value, ((2 * degree + 1) * mu * value - degree * before) / (degree + 1)
    return total
