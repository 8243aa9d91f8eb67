"""What of a feature shows over a horizon that is not level."""

from __future__ import annotations

import math

import numpy as np

from skyoptics.geometry.axes import around, azimuth_elevation, direction
from skyoptics.planning.curves import Circle, Tabulated
from skyoptics.planning.feature import Feature
from skyoptics.planning.horizons import Horizon, floor_of
from skyoptics.units import DEG, FloatArray

_TURN = 2.0 * np.pi
_CHUNK = 256
_CIRCLE_STEP = 0.5 * DEG
_TABLE_STEP = 0.5 * DEG


def margin(
    feature: Feature, azimuth: FloatArray, elevation: FloatArray, horizon: Horizon | None, lowest: float
) -> FloatArray:
    """Return by how much the point of a feature that stands highest over the horizon does so.

    Parameters
    ----------
    feature : Feature
    azimuth, elevation : ndarray, shape (n,)
        Of the body, apparent [rad].
    horizon : object
    lowest : float
        The horizon's least elevation [rad].

    Returns
    -------
    ndarray, shape (n,)
        [rad]; −1 where the feature does not exist. Where its sign is plain from the crown alone, a bound of the same sign.
    """
    top, where = feature.crown(azimuth, elevation)
    exists = np.isfinite(top)
    # the highest point may not be the one that shows first, but it bounds what does
    result = np.where(exists, top - lowest, -1.0)
    at_crown = np.where(exists, top - floor_of(horizon, where), -1.0)
    plain = exists & (at_crown >= 0.0)
    result = np.where(plain, at_crown, result)
    for place in np.array_split(unsure := np.flatnonzero(exists & ~plain & (result >= 0.0)), 1 + unsure.size // _CHUNK):
        if place.size:
            result[place] = _highest(feature, azimuth[place], elevation[place], horizon)
    return result


def _highest(feature: Feature, azimuth: FloatArray, elevation: FloatArray, horizon: Horizon | None) -> FloatArray:
    if isinstance(feature.curve, Circle):
        return _highest_of_circle(feature, azimuth, elevation, horizon)
    found = np.empty(len(azimuth))
    for i, (a, h) in enumerate(zip(azimuth, elevation, strict=True)):
        found[i] = _most_over(feature, float(a), float(h), horizon)
    return found


def _most_over(feature: Feature, azimuth: float, height: float, horizon: Horizon | None) -> float:
    """Return the same for one instant; between rows of outlines of an arc without closed form it is interpolated."""
    if not isinstance(feature.curve, Tabulated):
        return _over(feature, azimuth, height, horizon)
    low = math.floor(height / _TABLE_STEP) * _TABLE_STEP
    part = (height - low) / _TABLE_STEP
    a, b = (_over(feature, azimuth, grid, horizon) for grid in (low, low + _TABLE_STEP))
    if not np.isfinite(a) or not np.isfinite(b):  # the arc ends between the rows
        return _over(feature, azimuth, height, horizon)
    return a + part * (b - a)


def _over(feature: Feature, azimuth: float, height: float, horizon: Horizon | None) -> float:
    """Return by how much the outline stands over the horizon at most, −inf where there is none."""
    offset, elevation = feature.curve.outline(height)
    if not len(offset):
        return -np.inf
    over = elevation - floor_of(horizon, offset + float(feature.origin(azimuth)))
    return float(np.nanmax(over))


def _highest_of_circle(
    feature: Feature, azimuth: FloatArray, elevation: FloatArray, horizon: Horizon | None
) -> FloatArray:
    curve = feature.curve
    assert isinstance(curve, Circle)
    sign = -1.0 if curve.antisolar else 1.0
    turns = np.arange(0.0, _TURN, _CIRCLE_STEP / np.sin(curve.radius))
    unit = around(direction(0.0, 0.0), curve.radius, turns)  # about north on the horizon
    c, s = np.cos(sign * elevation)[:, None], np.sin(sign * elevation)[:, None]
    points = np.stack(
        [
            np.broadcast_to(unit[:, 0], (len(elevation), len(turns))),
            unit[:, 1] * c - unit[:, 2] * s,
            unit[:, 1] * s + unit[:, 2] * c,
        ],
        axis=-1,
    )
    offset, height = azimuth_elevation(points)
    over = height - floor_of(horizon, offset + feature.origin(azimuth)[:, None])
    return np.asarray(np.max(over, axis=1))
