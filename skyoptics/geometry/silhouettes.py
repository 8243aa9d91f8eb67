"""Simple horizons by name: land, trees and houses as profiles of our own making, no real place.

Each is periodic in azimuth, depends on its seed alone, and reaches its stated height at one place at least. A height other than
the usual one stretches it upright.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from skyoptics.errors import DomainError, nearest
from skyoptics.geometry.horizon import Profile, flat
from skyoptics.units import DEG, FloatArray

HEIGHTS = {"flat": 0.0, "hills": 2.5 * DEG, "ridge": 6.0 * DEG, "trees": 4.0 * DEG, "town": 5.0 * DEG}
"""Names of silhouettes and how high they reach if nothing else is said [rad]."""
TALLEST = 45.0 * DEG
"""[rad]"""

_TURN = 2.0 * np.pi
_EDGE = 1e-5  # width of an upright wall [rad]
_STEP = 0.02 * DEG  # between points of a tree line [rad]


def silhouette(name: str, height: float | None = None, seed: int = 0, base: float = 0.0) -> Profile:
    """Return a horizon by name.

    Parameters
    ----------
    name : str
        flat; hills: low and rounded; ridge: a jagged range of mountains; trees: the edge of a near wood; town: roofs and a
        few towers.
    height : float, optional
        Of the highest point above `base`, 0 to 45° [rad]; default by `HEIGHTS`.
    seed : int
        Another number draws another horizon of the same kind.
    base : float
        Elevation of the level horizon that it stands on: minus the dip, seen from a hill [rad].

    Returns
    -------
    Profile

    Raises
    ------
    DomainError
        For an unknown name, a height outside its range, or a base outside −45° to 45°.
    """
    if name not in HEIGHTS:
        raise DomainError(f"no silhouette {name!r}{nearest(name, HEIGHTS)} (there are {', '.join(HEIGHTS)})")
    height = HEIGHTS[name] if height is None else height
    if not 0.0 <= height <= TALLEST:
        raise DomainError(f"a silhouette is 0 to {TALLEST / DEG:g} degrees high, got {height / DEG:g}")
    if not abs(base) <= TALLEST:
        raise DomainError(f"a silhouette stands within {TALLEST / DEG:g} degrees of level, got {base / DEG:g}")
    if height == 0.0:
        return flat(-base)
    azimuth, shape = _SHAPES[name](seed)
    return Profile(azimuth, base + height / shape.max() * shape)


def _hills(seed: int) -> tuple[FloatArray, FloatArray]:
    """Return low waves of land that fall off in steepness."""
    azimuth = np.linspace(0.0, _TURN, 1440, endpoint=False, dtype=np.float64)
    return azimuth, 0.1 + _noise(azimuth, seed, (9, 14, 23, 41, 97), 0.9)


def _ridge(seed: int) -> tuple[FloatArray, FloatArray]:
    """Return peaks: 1 − |noise| has creases where the noise passes 0, finer ones where it is high already."""
    azimuth = np.linspace(0.0, _TURN, 7200, endpoint=False, dtype=np.float64)
    shape = np.zeros_like(azimuth)
    above = np.ones_like(azimuth)
    for octave in range(6):
        wave = 2.0 * _noise(azimuth, seed + 101 * octave, (9 * 2**octave, 14 * 2**octave, 23 * 2**octave), 0.5) - 1.0
        crease = (1.0 - np.abs(wave)) ** 2
        shape += 0.5**octave * crease * above
        above = np.clip(crease * above * 1.6, 0.25, 1.0)
    return azimuth, 0.15 + shape


def _trees(seed: int) -> tuple[FloatArray, FloatArray]:
    """Return the outline of round crowns and pointed ones, some near and tall, most farther."""
    azimuth = np.linspace(0.0, _TURN, round(_TURN / _STEP), endpoint=False, dtype=np.float64)
    count = 700
    place, size, kind, slim, rough = _draws(seed, 5 * count).reshape(5, count)
    shape = 0.30 + 0.05 * _noise(azimuth, seed + 7, (13, 29), 0.5)
    wood = 0.6 + 0.4 * _noise(place * _TURN, seed + 8, (3, 5, 9), 1.0)  # clearings and stands of tall trees
    tall = wood * (0.55 + 0.45 * size)
    for at, top, pointed, narrow, bumps in zip(place * _TURN, tall, kind < 0.45, slim, rough, strict=True):
        half = (0.25 if pointed else 0.45) * (0.7 + 0.6 * narrow) * top * HEIGHTS["trees"]
        cells = np.arange(int((at - half) / _STEP), int((at + half) / _STEP) + 1)
        u = np.clip((cells * _STEP - at) / half, -1.0, 1.0)
        if pointed:
            crown = top * (1.0 - np.abs(u)) + 0.04 * top * np.mod(9.0 * np.abs(u) + bumps, 1.0) * (np.abs(u) > 0.05)
        else:
            crown = top * (0.5 + 0.5 * np.sqrt(1.0 - u * u)) + 0.02 * top * np.sin(23.0 * u + 6.0 * bumps)
            crown *= np.abs(u) < 1.0
        cells %= len(azimuth)
        shape[cells] = np.maximum(shape[cells], crown)
    return azimuth, shape


def _town(seed: int) -> tuple[FloatArray, FloatArray]:
    """Return roofs side by side: flat ones, gables, and now and then a spire."""
    draws = _draws(seed, 4 * 400).reshape(400, 4)
    widths = (0.5 + 1.6 * draws[:, 0]) * DEG
    houses = int(np.searchsorted(np.cumsum(widths), _TURN))
    widths = widths[:houses] * (_TURN / widths[:houses].sum())
    left = np.concatenate([[0.0], np.cumsum(widths)])
    azimuth: list[float] = []
    shape: list[float] = []
    district = 0.6 + 0.4 * _noise(left, seed + 3, (3, 7), 0.5)
    for number in range(houses):
        start, end = left[number] + _EDGE, left[number + 1] - _EDGE
        _, tall, kind, pitch = draws[number]
        eaves = district[number] * (0.18 + 0.25 * tall)
        middle = 0.5 * (start + end)
        if kind < 0.03:  # a tower with its spire
            half = 0.22 * (end - start)
            points = [(start, eaves), (middle - half, eaves), (middle - half + _EDGE, 2.0 * eaves)]
            points += [(middle, 2.0 * eaves + 0.25 + 0.25 * pitch), (middle + half - _EDGE, 2.0 * eaves)]
            points += [(middle + half, eaves), (end, eaves)]
        elif kind < 0.35:
            points = [(start, eaves), (end, eaves)]
        else:
            ridge = eaves + (0.14 + 0.35 * pitch) * (end - start) / (2.0 * DEG)
            points = [(start, eaves), (middle, ridge), (end, eaves)]
        azimuth += [point[0] for point in points]
        shape += [point[1] for point in points]
    return np.array(azimuth), np.array(shape)


_SHAPES: dict[str, Callable[[int], tuple[FloatArray, FloatArray]]] = {
    "hills": _hills,
    "ridge": _ridge,
    "trees": _trees,
    "town": _town,
}


def _noise(azimuth: FloatArray, seed: int, waves: tuple[int, ...], fall: float) -> FloatArray:
    """Return smooth periodic noise within 0 to 1; `waves` are numbers a turn, the strength falls as their power."""
    phase, stretch = _draws(seed, 2 * len(waves)).reshape(2, -1)
    strength = (0.6 + 0.8 * stretch) * (waves[0] / np.array(waves, dtype=np.float64)) ** fall
    total = np.zeros_like(azimuth)
    for number, (turn, part) in enumerate(zip(phase, strength, strict=True)):
        total += part * np.sin(waves[number] * azimuth + _TURN * turn)
    return 0.5 + 0.5 * total / strength.sum()


def _draws(seed: int, count: int) -> FloatArray:
    """Return numbers in 0 to 1 that are the same on every machine for ever (SplitMix64; G. L. Steele et al., 2014)."""
    state = np.arange(1, count + 1, dtype=np.uint64) * np.uint64(0x9E3779B97F4A7C15)
    state += np.uint64(seed % 2**64)
    for shift, factor in ((30, 0xBF58476D1CE4E5B9), (27, 0x94D049BB133111EB)):
        state = (state ^ (state >> np.uint64(shift))) * np.uint64(factor)
    return np.asarray((state ^ (state >> np.uint64(31))) >> np.uint64(11), dtype=np.float64) * 2.0**-53
