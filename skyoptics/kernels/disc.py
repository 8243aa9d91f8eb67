"""Average of an axisymmetric function over a limb-darkened disc on the sphere.

Around a point at angle θ0 from the axis, a disc of radius R cuts an arc −ψm … ψm from the circle at angle θ. With
t = θ − θ0, D = cos t − cos R and B = sin θ sin θ0, the surface cosine of the disc is
µ² = (D − 2 B sin²(ψ/2)) / (1 − cos R) (1 − (ρ/R)² to a relative 2e-6 for the sun), and the weight of the circle is

    sin θ ∫ µ^j dψ = 2 sin θ (D / (1 − cos R))^(j/2) s ∫ cos^(j+1) v (1 − s² sin² v)^(−1/2) dv,   s² = D / 2B,

v from −π/2 to π/2, where the circle leaves the disc (s < 1), and the plain integral over ψ where it lies inside. Both
integrands are smooth, so twelve Gauss points do.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

POWERS = 6


@njit(cache=True, nogil=True, error_model="numpy")
def _arc(theta: float, theta0: float, radius: float, node: Any, weight: Any, out: Any) -> None:
    """Fill out[j] with the weight of the circle at theta for brightness µ^j."""
    t = theta - theta0
    whole = 2.0 * np.sin(0.5 * radius) ** 2
    d = 2.0 * np.sin(0.5 * (radius + t)) * np.sin(0.5 * (radius - t))
    b = np.sin(theta) * np.sin(theta0)
    for j in range(POWERS):
        out[j] = 0.0
    if d <= 0.0:
        return
    if d >= 2.0 * b:  # the whole circle lies inside the disc
        for i in range(len(node)):
            half = 0.5 * np.pi * node[i]
            mu = np.sqrt(max((d - 2.0 * b * np.sin(half) ** 2) / whole, 0.0))
            value = 2.0 * np.pi * weight[i] * np.sin(theta)
            for j in range(POWERS):
                out[j] += value
                value *= mu
        return
    s2 = d / (2.0 * b)
    scale = np.sqrt(d / whole)
    for i in range(len(node)):
        v = 0.5 * np.pi * node[i]
        c = np.cos(v)
        value = 2.0 * np.pi * weight[i] * np.sin(theta) * np.sqrt(s2 / (1.0 - s2 * np.sin(v) ** 2)) * c
        for j in range(POWERS):
            out[j] += value
            value *= c * scale


@njit(cache=True, nogil=True, error_model="numpy")
def disc_average(
    centre: Any,
    knots: Any,
    linear: bool,
    values: Any,
    variance: Any,
    radius: float,
    darkening: Any,
    node: Any,
    weight: Any,
    out: Any,
    out_variance: Any,
) -> None:
    """Average values over a disc around each centre.

    centre (m,); knots: bin edges (nv + 1) or, linear, nodes (nv,); values (nv, nλ, ne); variance (nv, nλ); darkening
    (nλ, POWERS); node, weight: Gauss rule on [0, 1]; out (m, nλ, ne), out_variance (m, nλ).
    """
    cells = len(knots) - 1
    nv, bands, elements = values.shape
    arc = np.empty(POWERS)
    local = np.zeros((nv, POWERS))
    three = np.array([0.5 - np.sqrt(0.15), 0.5, 0.5 + np.sqrt(0.15)])
    third = np.array([5.0 / 18.0, 8.0 / 18.0, 5.0 / 18.0])
    for m in range(len(centre)):
        low = max(centre[m] - radius, knots[0])
        high = min(centre[m] + radius, knots[cells])
        first = min(max(np.searchsorted(knots, low, side="right") - 1, 0), cells - 1)
        last = first
        for cell in range(first, cells):
            left, right = max(knots[cell], low), min(knots[cell + 1], high)
            if right <= left:
                break
            last = cell
            steps = int(np.ceil((right - left) / (radius / 16.0)))
            h = (right - left) / steps
            for step in range(steps):
                for g in range(3):
                    theta = left + (step + three[g]) * h
                    _arc(theta, centre[m], radius, node, weight, arc)
                    if linear:
                        f = (theta - knots[cell]) / (knots[cell + 1] - knots[cell])
                        for j in range(POWERS):
                            local[cell, j] += third[g] * h * arc[j] * (1.0 - f)
                            local[cell + 1, j] += third[g] * h * arc[j] * f
                    else:
                        for j in range(POWERS):
                            local[cell, j] += third[g] * h * arc[j]
        stop = last + 2 if linear else last + 1
        for band in range(bands):
            total = 0.0
            spread = 0.0
            for e in range(elements):
                out[m, band, e] = 0.0
            for row in range(first, stop):
                w = 0.0
                for j in range(POWERS):
                    w += darkening[band, j] * local[row, j]
                total += w
                spread += w * w * variance[row, band]
                for e in range(elements):
                    out[m, band, e] += w * values[row, band, e]
            for e in range(elements):
                out[m, band, e] /= total
            out_variance[m, band] = spread / (total * total)
        for row in range(first, stop):
            for j in range(POWERS):
                local[row, j] = 0.0
