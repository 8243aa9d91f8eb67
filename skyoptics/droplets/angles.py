"""Edges of angle bins for spheres: fine where bows stand, coarse elsewhere."""

from __future__ import annotations

from collections.abc import Callable
from itertools import pairwise
from math import ceil
from typing import Any

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.optics import bows
from skyoptics.optics.bins import Bins
from skyoptics.units import DEG, FloatArray

_GUARD = 1e-12  # rad; rounding must not carry light over an edge that stands on a caustic

# Width of angle bins around the caustics of order p [°]: at the caustic, on its lit side over `shelf`, growing beyond
_CAUSTICS = {
    2: {"core": 0.008, "lit": 0.02, "shelf": 2.5},
    3: {"core": 0.008, "lit": 0.02, "shelf": 2.5},
    4: {"core": 0.009, "lit": 0.05, "shelf": 3.0},
    5: {"core": 0.009, "lit": 0.05, "shelf": 3.0},
    6: {"core": 0.009, "lit": 0.05, "shelf": 3.0},
}
_WIDE_CORE = {4: 0.045, 5: 0.045, 6: 0.045}  # where a bin's own width smears the caustic anyway
_GROWTH = 0.15  # of the width per unit of distance
_WIDEST = 0.25
_END = 0.02


def uniform_edges(step: float) -> FloatArray:
    """Return edges of angle bins of one width from 0 to π.

    Parameters
    ----------
    step : float
        Width wanted [rad]; rounded so that a whole number of bins fits.

    Returns
    -------
    ndarray, shape (nθ + 1,)
        [rad]

    Raises
    ------
    DomainError
        If the step does not lie between 0.0001° and 180°.
    """
    if not 1e-4 * DEG * 0.999 <= step <= np.pi:
        raise DomainError(f"angle bins may be 0.0001 to 180 degrees wide, not {step / DEG:g}")
    return np.linspace(0.0, np.pi, max(round(np.pi / step), 1) + 1)


def default_edges(index: Callable[[FloatArray], Any], bins: Bins) -> FloatArray:
    """Return uneven edges of angle bins fit for pictures: fine where bows stand, coarse elsewhere.

    Parameters
    ----------
    index : callable
        Wavelengths [m] → complex index relative to the air.
    bins : Bins
        Spectral bins.

    Returns
    -------
    ndarray, shape (nθ + 1,)
        From 0 to π [rad]. At most 0.01° over the caustics of p = 2 and 3 of all wavelengths, 0.02° over 2.5° on the lit
        side; at most 0.05° around those of p = 4 … 6; growing away from there to 0.25°; finer at both ends. A bin of a
        single wavelength has an edge on each closed-form caustic (moved by 1e-12 rad into the dark, against rounding) and
        bins of at most 0.01° beside it for p = 4 … 6 too.
    """
    grid = np.linspace(0.0, 180.0, 36001)
    width = np.minimum(_WIDEST, _END + _GROWTH * np.minimum(grid, 180.0 - grid))
    wavelength = bins.at(np.linspace(0.0, 1.0, 5))
    n = np.real(np.broadcast_to(index(wavelength.ravel()), (wavelength.size,))).reshape(wavelength.shape)
    single = bins.width == 0.0
    fixed = [np.zeros(1), np.full(1, 180.0)]
    for p, shape in _CAUSTICS.items():
        caustic, side = bows.scattering_angle(n, p) / DEG, bows.side(n, p)
        there = np.isfinite(caustic[:, 0])
        for lines in (True, False):
            rows = there & (single == lines)
            low, high = caustic[rows].min(axis=1), caustic[rows].max(axis=1)
            core = shape["core"] if lines else _WIDE_CORE.get(p, shape["core"])
            for sense in (1.0, -1.0):
                lit, dark = _distances(grid, low, high, sense, side[rows, 0] == sense)
                near = np.where(lit <= shape["shelf"], shape["lit"], shape["lit"] + _GROWTH * (lit - shape["shelf"]))
                lit_width = np.minimum(np.maximum(core + _GROWTH * lit, core), near)
                width = np.minimum(width, np.minimum(lit_width, core + 2.0 * _GROWTH * dark))
        rows = there & single
        fixed.append(caustic[rows, 0] - side[rows, 0] * _GUARD / DEG)
    return _fill(grid, width, np.concatenate(fixed)) * DEG


def _distances(
    grid: FloatArray, low: FloatArray, high: FloatArray, sense: float, chosen: Any
) -> tuple[FloatArray, FloatArray]:
    """Return the distance of each grid point from the nearest interval, on its lit and on its dark side (inf: none).

    `sense` is +1 where light lies towards larger angles; points inside an interval have distance 0 on both.
    """
    above = np.full_like(grid, np.inf)
    below = np.full_like(grid, np.inf)
    for start, stop in zip(low[chosen], high[chosen], strict=True):
        above = np.minimum(above, np.where(grid >= start, np.maximum(grid - stop, 0.0), np.inf))
        below = np.minimum(below, np.where(grid <= stop, np.maximum(start - grid, 0.0), np.inf))
    return (above, below) if sense > 0.0 else (below, above)


def _fill(grid: FloatArray, width: FloatArray, fixed: FloatArray) -> FloatArray:
    """Return edges that include the fixed ones, spaced by `width` between them [°]."""
    fixed = np.unique(fixed)
    fixed = fixed[np.concatenate([[True], np.diff(fixed) > 1e-9])]
    fixed[-1] = 180.0
    # number of bins from 0 up to each angle; 1/width is summed by trapezoids
    density = 1.0 / width
    count = np.concatenate([[0.0], np.cumsum(0.5 * (density[1:] + density[:-1]) * np.diff(grid))])
    pieces = []
    for start, stop in pairwise(fixed):
        at = np.interp([start, stop], grid, count)
        number = max(ceil(at[1] - at[0]), 1)
        inner = np.interp(np.linspace(at[0], at[1], number + 1)[1:-1], count, grid)
        pieces.append(np.concatenate([[start], inner]))
    return np.concatenate([*pieces, fixed[-1:]])
