"""What a frame has to hold of a feature, and the line along which it is measured what is missing.

``whole``: all of the feature that is above a flat horizon, its feet on the horizon with it; measured along the feature.
``feet``: where it meets the horizon, left and right; measured along the horizon.
``pair``: two spots such as the parhelia; measured along the great circle through them.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from skyoptics.errors import DomainError, NothingFoundError, nearest
from skyoptics.geometry.axes import angle_between, azimuth_elevation, direction
from skyoptics.units import DEG, ArrayLike, BoolArray, FloatArray

HOLDS = ("whole", "feet", "pair")
"""What may be asked for."""

_STEP = 0.05 * DEG
_EVEN = 1e-3
"""Share by which points must lean to the side opposite the sun to be counted there: a ring around the zenith does not."""
_UP = -1e-12
"""Elevation from which a point counts as above the horizon [rad]; rounding is not."""


class Held(NamedTuple):
    """What has to be in the frame.

    Parameters
    ----------
    hold : str
        One of `HOLDS`.
    points : ndarray, shape (n, 3)
        Unit vectors of what has to be in it.
    line : ndarray, shape (m, 3)
        Points close to each other, branches parted by nan: what is missing is measured along it.
    needed : ndarray of bool, shape (m,)
        Which part of the line has to be in the frame; the rest only says how much room there is.
    middle : float
        Azimuth of the feature's middle [rad]: of the sun or of the point opposite it.
    """

    hold: str
    points: FloatArray
    line: FloatArray
    needed: BoolArray
    middle: float

    @property
    def span(self) -> float:
        """Length of the part of the line that is needed [rad]."""
        pieces = angle_between(self.line[:-1], self.line[1:])
        return float(np.nansum(np.where(self.needed[:-1] & self.needed[1:], pieces, 0.0)))


def held(azimuth: ArrayLike, elevation: ArrayLike, sun_azimuth: float, hold: str = "whole") -> Held:
    """Return what a frame has to hold of a feature.

    Parameters
    ----------
    azimuth, elevation : array_like, shape (n,)
        The whole curve, also below the horizon; points at most 0.1° apart, branches parted by nan, a spot as a branch of one
        point [rad].
    sun_azimuth : float
        Azimuth of what lights it [rad]; the feature is alike on both sides of this vertical.
    hold : str
        One of `HOLDS`.

    Returns
    -------
    Held

    Raises
    ------
    DomainError
        For another word, for feet of what does not meet the horizon twice, and for a pair of what is not two spots.
    NothingFoundError
        If nothing of the feature is above the horizon.
    """
    if hold not in HOLDS:
        raise DomainError(f"no hold {hold!r}; there are {', '.join(HOLDS)}{nearest(hold, HOLDS)}")
    line = with_crossings(direction(azimuth, elevation))
    up = line[:, 2] >= _UP
    if not up.any():
        raise NothingFoundError("nothing of the feature is above the horizon")
    middle = _middle(line[up], sun_azimuth)
    if hold == "feet":
        return _feet(line, middle)
    if hold == "pair":
        return _pair(line[up], hold, middle)
    wanted = Held(hold, line[up], line, up, middle)
    # two spots have no length of their own
    return _pair(line[up], hold, middle) if wanted.span == 0.0 and up.sum() == 2 else wanted


def feet(azimuth: ArrayLike, elevation: ArrayLike, middle: float) -> tuple[float, ...]:
    """Return the azimuths at which a feature meets a flat horizon.

    Parameters
    ----------
    azimuth, elevation :
        As for `held`.
    middle : float
        Azimuth of its middle [rad].

    Returns
    -------
    tuple of float
        Of the outermost left and right of the middle, left first [rad]; empty where it does not meet the horizon on both
        sides.
    """
    line = with_crossings(direction(azimuth, elevation))
    offset = _offset(line[line[:, 2] == 0.0], middle)
    if not len(offset) or not (offset.min() < 0.0 < offset.max()):
        return ()
    return tuple(float(np.mod(middle + end, 2.0 * np.pi)) for end in (offset.min(), offset.max()))


def with_crossings(line: FloatArray) -> FloatArray:
    """Return a line with the points put in at which it crosses the horizon, their z exactly 0, shape (m, 3)."""
    z = line[:, 2]
    here = np.flatnonzero((z[:-1] * z[1:] < 0.0) & np.isfinite(z[:-1] * z[1:]))
    share = z[here] / (z[here] - z[here + 1])
    points = line[here] + share[:, None] * (line[here + 1] - line[here])
    points[:, 2] = 0.0
    points /= np.linalg.norm(points, axis=1, keepdims=True)
    return np.insert(line, here + 1, points, axis=0)


def _feet(line: FloatArray, middle: float) -> Held:
    """Return both feet, and the horizon."""
    offset = _offset(line[line[:, 2] == 0.0], middle)
    if not len(offset) or not (offset.min() < 0.0 < offset.max()):
        raise DomainError(
            "the feature does not meet the horizon on both sides, so it has no two feet; hold the whole of it"
        )
    left, right = float(offset.min()), float(offset.max())
    turn = np.linspace(-np.pi, np.pi, round(2.0 * np.pi / _STEP) + 1)
    turn = np.unique(np.concatenate([turn, [left, right]]))
    ends = direction(middle + np.array([left, right]), 0.0)
    return Held("feet", ends, direction(middle + turn, np.zeros_like(turn)), (turn >= left) & (turn <= right), middle)


def _pair(spots: FloatArray, hold: str, middle: float) -> Held:
    """Return two spots, and the great circle through them."""
    apart = float(angle_between(spots[0], spots[-1]))
    if len(spots) != 2 or apart < _STEP:
        raise DomainError("the feature is no pair of spots above the horizon; hold the whole of it")
    across = spots[1] - (spots[1] @ spots[0]) * spots[0]
    across /= np.linalg.norm(across)
    turn = np.linspace(-np.pi, np.pi, round(2.0 * np.pi / _STEP) + 1)
    turn = np.unique(np.concatenate([turn, [0.0, apart]]))
    circle = np.cos(turn)[:, None] * spots[0] + np.sin(turn)[:, None] * across
    return Held(hold, spots, circle, (turn >= 0.0) & (turn <= apart), middle)


def _middle(points: FloatArray, sun_azimuth: float) -> float:
    """Return the azimuth of the sun, or that opposite it, whichever most of the points lie towards."""
    towards = float(np.mean(points @ direction(sun_azimuth, 0.0)))
    return float(np.mod(sun_azimuth + (np.pi if towards < -_EVEN else 0.0), 2.0 * np.pi))


def _offset(points: FloatArray, middle: float) -> FloatArray:
    """Return azimuths from the middle, −π to π [rad]."""
    azimuth, _ = azimuth_elevation(points)
    return np.mod(azimuth - middle + np.pi, 2.0 * np.pi) - np.pi
