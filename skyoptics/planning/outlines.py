"""What can be read off the outline of a feature: its highest point, where it meets the horizon, how much of it is up.

An outline is what `skyoptics.crystals.arcs.locus` gives: azimuths and elevations of neighbouring points, nan between
branches, a spot as a branch of one point.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from skyoptics.geometry.axes import direction
from skyoptics.units import ArrayLike, BoolArray, FloatArray, IntArray

_TURN = 2.0 * np.pi


class Stance(NamedTuple):
    """How a feature stands [rad]; azimuths in [0, 2π), or from the sun where a text says so."""

    crown_elevation: float
    """Of the highest point."""
    crown_azimuth: float
    """Of the same point; of two that are equally high the left one."""
    feet: tuple[float, ...]
    """Azimuths where the outline meets the horizon: leftmost and rightmost as seen when facing the side of the sky, to the
    sun or from it, on which the crown is."""
    share: float
    """Part of the length (of spots: of their number) that is above the horizon, 0 to 1."""


class Pieces(NamedTuple):
    """An outline as pieces between neighbouring points; a spot is a piece of no length. Shape (m,) each."""

    first: FloatArray
    """Unit vectors of the beginnings, shape (m, 3)."""
    last: FloatArray
    """Of the ends, shape (m, 3)."""


def measure(azimuth: FloatArray, elevation: FloatArray, floor: FloatArray | float = 0.0) -> Stance:
    """Return how an outline stands over a horizon.

    Parameters
    ----------
    azimuth, elevation : ndarray, shape (m,)
        The outline, azimuth from the sun, nan between branches [rad].
    floor : ndarray, shape (m,), or float
        Elevation of the horizon at these azimuths [rad].

    Returns
    -------
    Stance
        Azimuths from the sun in (−π, π]; nan and 0 for an empty outline. The crown is the highest point, not the one that is
        highest over the horizon; of a pair, one on each side of the sun, the left one. Where the outline crosses the
        horizon between two points it is taken as straight.
    """
    there = np.isfinite(azimuth)
    if not there.any():
        return Stance(np.nan, np.nan, (), 0.0)
    over = elevation - floor
    top = float(np.max(elevation[there]))
    crown = float(azimuth[np.argmax(np.where(there, elevation, -np.inf))])
    crown = crown if np.pi - abs(crown) < 1e-6 else -abs(crown)
    first, last = segment_places(there)
    steps = 2.0 * np.arcsin(
        np.clip(0.5 * np.linalg.norm(_at(azimuth, elevation, last) - _at(azimuth, elevation, first), axis=1), 0.0, 1.0)
    )
    low, high = np.minimum(over[first], over[last]), np.maximum(over[first], over[last])
    rise = np.where(high > low, high - low, 1.0)
    up = np.where(low >= 0.0, 1.0, np.where(high <= 0.0, 0.0, high / rise))
    weight = steps if float(steps.sum()) > 0.0 else np.ones_like(steps)
    share = float(np.sum(up * weight) / np.sum(weight))
    crossing = (over[first] >= 0.0) != (over[last] >= 0.0)
    if not crossing.any():
        return Stance(top, crown, (), share)
    a, b = first[crossing], last[crossing]
    part = over[a] / (over[a] - over[b])
    where = azimuth[a] + part * wrapped(azimuth[b] - azimuth[a])
    # a feature lies about the sun's vertical: one faces the sun, or turns one's back on it
    facing = 0.0 if abs(crown) <= np.pi / 2.0 else np.pi
    offset = wrapped(where - facing)
    left, right = float(offset.min()), float(offset.max())
    ends = (left,) if right - left < 1e-9 else (left, right)
    return Stance(top, crown, tuple(float(wrapped(facing + end)) for end in ends), share)


def pieces(azimuth: FloatArray, elevation: FloatArray, over: FloatArray | None = None) -> Pieces:
    """Return an outline as pieces, cut off where it is below the horizon.

    Parameters
    ----------
    azimuth, elevation : ndarray, shape (m,)
        The outline, nan between branches [rad].
    over : ndarray, shape (m,), or None
        Elevation above the horizon there [rad]; None keeps everything.
    """
    there = np.isfinite(azimuth)
    a, b = segment_places(there)
    first, last = _at(azimuth, elevation, a), _at(azimuth, elevation, b)
    if over is None:
        return Pieces(first, last)
    kept = (over[a] >= 0.0) | (over[b] >= 0.0)
    a, b, first, last = a[kept], b[kept], first[kept], last[kept]
    part = np.clip(over[a] / np.where(over[a] == over[b], 1.0, over[a] - over[b]), 0.0, 1.0)[:, None]
    edge = first + part * (last - first)
    edge /= np.maximum(np.linalg.norm(edge, axis=1, keepdims=True), 1e-300)
    return Pieces(np.where(over[a, None] >= 0.0, first, edge), np.where(over[b, None] >= 0.0, last, edge))


def thinned(azimuth: FloatArray, elevation: FloatArray, every: int) -> tuple[FloatArray, FloatArray]:
    """Return an outline with every few points of its branches, their ends among them."""
    there = np.isfinite(azimuth)
    place = np.arange(len(azimuth))
    begins = there & ~np.concatenate([[False], there[:-1]])
    ends = there & ~np.concatenate([there[1:], [False]])
    along = place - np.maximum.accumulate(np.where(begins, place, 0))
    kept = ~there | ends | (along % every == 0)
    return azimuth[kept], elevation[kept]


def nearest_points(targets: FloatArray, outline: Pieces) -> FloatArray:
    """Return the point of an outline that is nearest to each of some directions.

    Parameters
    ----------
    targets : ndarray, shape (n, 3)
        Unit vectors.
    outline : Pieces
        Not empty.

    Returns
    -------
    ndarray, shape (n, 3)
        Unit vectors. Pieces are taken as straight: at 0.1° of length that is 2e-5° off.
    """
    centre = 0.5 * (outline.first + outline.last)
    best = np.empty_like(targets)
    for begin in range(0, len(targets), 512):  # what fits the cache
        part = targets[begin : begin + 512]
        place = np.argmax(part @ centre.T, axis=1)
        nearest, distance = part, np.full(len(part), np.inf)
        for shift in (0, -1, 1):  # the nearest middle does not always belong to the nearest piece
            index = np.clip(place + shift, 0, len(centre) - 1)
            start, along = outline.first[index], outline.last[index] - outline.first[index]
            length = np.sum(along**2, axis=1)
            position = np.sum((part - start) * along, axis=1) / np.where(length > 0.0, length, 1.0)
            point = start + np.clip(position, 0.0, 1.0)[:, None] * along
            away = np.linalg.norm(point - part, axis=1)
            nearer = away < distance
            nearest = np.where(nearer[:, None], point, nearest)
            distance = np.where(nearer, away, distance)
        best[begin : begin + 512] = nearest / np.linalg.norm(nearest, axis=1, keepdims=True)
    return best


def segment_places(there: BoolArray) -> tuple[IntArray, IntArray]:
    """Return the places of both ends of every piece; a point without neighbours is a piece of its own."""
    joined = there[:-1] & there[1:]
    a = np.flatnonzero(joined)
    lone = there.copy()
    lone[:-1] &= ~joined
    lone[1:] &= ~joined
    alone = np.flatnonzero(lone)
    first, last = np.concatenate([a, alone]), np.concatenate([a + 1, alone])
    order = np.argsort(first, kind="stable")
    return first[order], last[order]


def wrapped(angle: ArrayLike) -> FloatArray:
    """Return angles in (−π, π]."""
    return np.asarray(np.pi - np.mod(np.pi - np.asarray(angle, dtype=np.float64), _TURN))


def _at(azimuth: FloatArray, elevation: FloatArray, places: IntArray) -> FloatArray:
    return direction(azimuth[places], elevation[places])
