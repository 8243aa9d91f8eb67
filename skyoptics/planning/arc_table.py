"""How halo arcs stand at every height of the sun, tabulated, because following their light takes too long for a year.

A table holds the sun heights at which an arc exists, and there its crown, its feet and how much of it is up, read off
`skyoptics.crystals.arcs.locus`. Values between two sun heights are interpolated. Tables for the planner's index over a
level horizon come with the package (`docs/tools/bake_arc_standings.py`); others are made when asked for.
"""

from __future__ import annotations

from functools import lru_cache
from itertools import pairwise
from pathlib import Path
from typing import NamedTuple

import numpy as np

from skyoptics.crystals import arcs
from skyoptics.planning.outlines import measure
from skyoptics.units import DEG, ArrayLike, BoolArray, FloatArray

INDEX = 1.31
"""Refractive index of ice that the planner takes where none is given."""
LOWEST, HIGHEST = -2.0, 89.9
"""Sun heights tabulated [degrees]: from below the dip of a horizon seen from 3500 m."""
STEP = 1.0
"""Between sun heights, save near those at which an arc begins or ends, where there are more [degrees]."""

_FILE = Path(__file__).with_name("arc_standings.npz")
_EDGE = 0.002  # to which ends of existence are found [degrees]
_NEAR_EDGES = (0.02, 0.08, 0.2, 0.5)  # more rows there [degrees]
_FIELDS = ("height", "exists", "crown", "crown_azimuth", "foot", "share")


class Table(NamedTuple):
    """How an arc stands, shape (n,) each; nan where it does not exist [rad]."""

    height: FloatArray
    """Of the sun, rising."""
    exists: FloatArray
    """1 or 0."""
    crown: FloatArray
    crown_azimuth: FloatArray
    """From the sun: 0, π, or the left one of a pair."""
    foot: FloatArray
    """Azimuth of the right foot from the sun, the left one being its mirror image; nan without feet."""
    share: FloatArray

    def intervals(self) -> tuple[tuple[float, float], ...]:
        """Return the sun heights at which the arc exists."""
        there = np.concatenate([[False], self.exists > 0.5, [False]])
        starts = np.flatnonzero(there[1:] & ~there[:-1])
        ends = np.flatnonzero(there[:-1] & ~there[1:]) - 1
        return tuple((float(self.height[i]), float(self.height[j])) for i, j in zip(starts, ends, strict=True))

    def there(self, height: ArrayLike) -> BoolArray:
        """Return whether the arc exists."""
        h = np.asarray(height, dtype=np.float64)
        found = np.zeros(h.shape, dtype=bool)
        for low, high in self.intervals():
            found |= (h >= low) & (h <= high)
        return found

    def crown_at(self, height: ArrayLike) -> FloatArray:
        """Return the crown's elevation."""
        return self._interpolated(self.crown, height)

    def share_at(self, height: ArrayLike) -> FloatArray:
        """Return the share that is up."""
        return self._interpolated(self.share, height)

    def crown_azimuth_at(self, height: ArrayLike) -> FloatArray:
        """Return the crown's azimuth from the sun; where the crown jumps to another branch, that of the nearer row."""
        return self._interpolated(self.crown_azimuth, height, 5.0 * DEG)

    def foot_at(self, height: ArrayLike) -> FloatArray:
        """Return the right foot's azimuth from the sun; where it comes, goes or jumps, that of the nearer row."""
        return self._interpolated(self.foot, height, 20.0 * DEG)

    def _interpolated(self, values: FloatArray, height: ArrayLike, jump: float = np.inf) -> FloatArray:
        h = np.asarray(height, dtype=np.float64)
        right = np.clip(np.searchsorted(self.height, h), 1, len(self.height) - 1)
        left = right - 1
        part = np.clip((h - self.height[left]) / (self.height[right] - self.height[left]), 0.0, 1.0)
        a, b = values[left], values[right]
        mixed = np.where(part <= 0.0, a, np.where(part >= 1.0, b, a + part * (b - a)))
        nearer = np.where(part < 0.5, a, b)
        return np.where(self.there(h), np.where(np.abs(b - a) <= jump, mixed, nearer), np.nan)


@lru_cache(maxsize=64)
def table(name: str, index: float = INDEX, level: float = 0.0) -> Table:
    """Return the table of an arc.

    Parameters
    ----------
    name : str
        One of `skyoptics.crystals.arcs.names`.
    index : float
        Refractive index of ice.
    level : float
        Elevation of a level horizon [rad].
    """
    if index == INDEX and level == 0.0 and _FILE.exists():
        with np.load(_FILE) as stored:
            if name in stored.files:
                return Table(*np.asarray(stored[name], dtype=np.float64))
    return build(name, index, level)


def build(name: str, index: float, level: float, step: float = STEP) -> Table:
    """Return a table made from loci; `step` in degrees, other arguments as in `table`."""
    heights = [float(height) for height in np.arange(LOWEST, HIGHEST, step)] + [HIGHEST]
    alive = {height: arcs.exists(name, height * DEG, index) for height in heights}
    for low, high in pairwise(heights):
        if alive[low] == alive[high]:
            continue
        dead_end, live_end = (low, high) if alive[high] else (high, low)
        while abs(live_end - dead_end) > _EDGE:
            middle = 0.5 * (dead_end + live_end)
            dead_end, live_end = (dead_end, middle) if arcs.exists(name, middle * DEG, index) else (middle, live_end)
        alive[live_end], alive[dead_end] = True, False
        for distance in _NEAR_EDGES:
            height = live_end + np.sign(live_end - dead_end) * distance
            if low < height < high:
                alive[float(height)] = arcs.exists(name, float(height) * DEG, index)
    rows = [_row(name, height, alive[height], index, level) for height in sorted(alive)]
    return Table(*np.array(rows).T)


def _row(name: str, height: float, alive: bool, index: float, level: float) -> tuple[float, ...]:
    """Return height, existence, crown, its azimuth, right foot and share."""
    if not alive:
        return height * DEG, 0.0, np.nan, np.nan, np.nan, np.nan
    azimuth, elevation = arcs.locus(name, height * DEG, index)
    seen = measure(azimuth, elevation, level)
    foot = abs(seen.feet[0]) if seen.feet else np.nan
    crown = abs(seen.crown_azimuth)
    crown = 0.0 if crown < 0.2 * DEG else np.pi if crown > np.pi - 0.2 * DEG else -crown
    return height * DEG, 1.0, seen.crown_elevation, crown, foot, seen.share
