"""Straight paths through a spherical atmosphere: where they cut its levels, and what lies along them.

Heights h [m] above the ground of a sphere of `radius`; the atmosphere ends at the last of the `levels`, whose first is 0.
`density` (n, 3) holds extinction coefficients for a vertical depth of 1 [m⁻¹] at equal height steps.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

_SUN_RADIUS = 0.266 * np.pi / 180.0  # of the disc whose setting fades the light
LARGEST = 1000
"""Most pieces of one path."""


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def add_column(h: Any, length: Any, density: Any, step: Any, out: Any) -> None:
    """Add density at h times a length to out (3,)."""
    place = min(max(h / step, 0.0), len(density) - 1.000001)
    cell = int(place)
    part = place - cell
    for k in range(3):
        out[k] += length * (density[cell, k] + part * (density[cell + 1, k] - density[cell, k]))


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def height_along(h: Any, mu: Any, s: Any, radius: Any) -> Any:
    """Return the height after a way s from height h in the direction of zenith cosine mu; no difference of large squares."""
    r = radius + h
    rise = s * (2.0 * r * mu + s)
    return h + rise / (r + np.sqrt(r * r + rise))


@njit(cache=True, nogil=True, error_model="numpy")
def _break_path(h: Any, mu: Any, levels: Any, radius: Any, breaks: Any) -> Any:
    """Fill breaks with the ways to each crossing of a level; return their number and whether the path ends on the ground."""
    top = len(levels) - 1
    b = (radius + h) * mu
    n = 1
    breaks[0] = 0.0
    lowest = h
    if mu < 0.0:
        lowest = height_along(h, mu, -b, radius) if -mu < 1.0 else -1.0
        for k in range(top, -1, -1):
            if levels[k] < h and levels[k] > lowest:
                c = (h - levels[k]) * (2.0 * radius + h + levels[k])
                breaks[n] = c / (np.sqrt(max(b * b - c, 0.0)) - b)
                n += 1
        if lowest <= 0.0:
            return n, True
        breaks[n] = -b
        n += 1
    for k in range(1, top + 1):
        if levels[k] > lowest:
            c = (levels[k] - h) * (2.0 * radius + h + levels[k])
            root = np.sqrt(max(b * b + c, 0.0))
            s = c / (b + root) if mu >= 0.0 else root - b
            if s > breaks[n - 1]:
                breaks[n] = s
                n += 1
    return n, False


@njit(cache=True, nogil=True, error_model="numpy")
def columns(h: Any, theta: Any, levels: Any, density: Any, step: Any, radius: Any, breaks: Any, out: Any) -> Any:
    """Fill out (3,) with the columns [1] from height h to the sun; return the share of its disc above the horizon."""
    r = radius + h
    mu = np.cos(theta)
    dip = np.arctan2(np.sqrt(h * (2.0 * radius + h)), radius)
    x = (0.5 * np.pi - theta + dip) / _SUN_RADIUS
    out[:] = 0.0
    if x <= -1.0:
        return 0.0
    share = 1.0
    if x < 1.0:
        share = 0.5 + (x * np.sqrt(1.0 - x * x) + np.arcsin(x)) / np.pi
    mu = max(mu, -np.sqrt(h * (2.0 * radius + h)) / r * (1.0 - 1e-9))
    n, _ = _break_path(h, mu, levels, radius, breaks)
    for i in range(n - 1):
        half = 0.5 * (breaks[i + 1] - breaks[i])
        middle = 0.5 * (breaks[i + 1] + breaks[i])
        add_column(height_along(h, mu, middle - 0.5773502691896257 * half, radius), half, density, step, out)
        add_column(height_along(h, mu, middle + 0.5773502691896257 * half, radius), half, density, step, out)
    return share


@njit(cache=True, nogil=True, error_model="numpy")
def pieces(
    h: Any,
    mu: Any,
    longest: Any,
    levels: Any,
    density: Any,
    step: Any,
    radius: Any,
    depth: Any,
    albedo: Any,
    way: Any,
    height: Any,
    weight: Any,
    end: Any,
) -> Any:
    """Cut a path at the levels and into pieces no longer than `longest`.

    Fill way (n,), height (n,) of their middles and weight (n, 2, nλ): by molecules and by aerosol, scattering coefficient ×
    length as seen from the start, exact for a piece of even stuff; end (nλ,) the transmission of the whole. Return the
    number of pieces and whether the path ends on the ground. albedo (2, nλ): share of the extinction that scatters.
    """
    breaks = np.empty(LARGEST)
    column = np.empty(3)
    count, ground = _break_path(h, mu, levels, radius, breaks)
    end[:] = 1.0
    n = 0
    for i in range(count - 1):
        parts = int(np.ceil((breaks[i + 1] - breaks[i]) / longest))
        parts = max(min(parts, LARGEST - n - count), 1)
        length = (breaks[i + 1] - breaks[i]) / parts
        for part in range(parts):
            middle = breaks[i] + (part + 0.5) * length
            half = 0.5 * length
            column[:] = 0.0
            add_column(height_along(h, mu, middle - 0.5773502691896257 * half, radius), half, density, step, column)
            add_column(height_along(h, mu, middle + 0.5773502691896257 * half, radius), half, density, step, column)
            way[n] = middle
            height[n] = height_along(h, mu, middle, radius)
            for w in range(depth.shape[1]):
                tau = depth[0, w] * column[0] + depth[1, w] * column[1] + depth[2, w] * column[2]
                through = np.exp(-tau)
                share = end[w] * ((1.0 - through) / tau if tau > 1e-9 else 1.0)
                weight[n, 0, w] = share * albedo[0, w] * depth[0, w] * column[0]
                weight[n, 1, w] = share * albedo[1, w] * depth[1, w] * column[1]
                end[w] *= through
            n += 1
    return n, ground
