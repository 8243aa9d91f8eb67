"""How far a direction is from what shows of a feature, at many instants.

Over a level horizon circles, parhelia and arcs about the zenith are closed forms. For other arcs the nearest points are found on
outlines half a degree of sun height apart, and the way to them interpolated: within 0.1°, save where branches come or
go. Over a profile the outline of every instant is looked at, where a bound does not tell already that it is far.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache

import numpy as np

from skyoptics.geometry.axes import angle_between, direction
from skyoptics.planning.curves import Circle, Curve, Level, Tabulated, ZenithArc
from skyoptics.planning.feature import Feature
from skyoptics.planning.horizons import Horizon, all_round, floor_of
from skyoptics.planning.outlines import Pieces, nearest_points, pieces, thinned, wrapped
from skyoptics.units import DEG, FloatArray

PARTS = ("bow", "foot", "crown")
"""What may be asked to meet: any point, a foot, the crown."""

_ROW = 1.0 * DEG  # of sun height
_FINE_ROW = 0.1 * DEG  # near the heights at which the arc begins or ends
_SAME_BRANCH = 3.0 * DEG
_THIN = 4  # every fourth point: 0.4° apart, where a bow of 5° radius leaves its chord by 0.004°

Distance = Callable[[FloatArray, FloatArray], FloatArray]
"""From azimuth and elevation of the body, shape (n,), to distances, shape (n,) [rad]; inf where nothing shows."""


def distance_to(
    feature: Feature,
    part: str,
    subject: tuple[float, float],
    horizon: Horizon | None,
    level: float | None,
    cut: float = np.inf,
) -> Distance:
    """Return the distance of a direction from part of a feature as a function of where the body stands.

    Parameters
    ----------
    feature : Feature
    part : {"bow", "foot", "crown"}
        The foot is the nearer one.
    subject : (float, float)
        Azimuth and elevation of the direction [rad].
    horizon : object or None
        See `skyoptics.planning.horizons`.
    level : float or None
        Elevation of a level horizon, None for a profile [rad].
    cut : float
        Over a profile distances beyond this may be given too small, but not below it [rad].
    """
    if level is None and part != "crown":
        lowest = float(np.min(all_round(horizon)))
        bound = distance_to(feature, "bow", subject, None, lowest)
        exact = _over_profile if part == "bow" else _to_feet_over_profile

        def away(a: FloatArray, h: FloatArray) -> FloatArray:
            found = bound(a, h)
            near = np.flatnonzero(found <= cut)
            found[near] = exact(feature, direction(*subject), horizon, a[near], h[near])
            return found

        return away
    if part == "crown":
        return lambda a, h: _to_crown(feature, direction(*subject), horizon, level, a, h)
    assert level is not None
    if part == "foot":
        return lambda a, h: _to_feet(feature, direction(*subject), level, a, h)
    if isinstance(feature.curve, Circle):
        return lambda a, h: _to_circle(feature, direction(*subject), level, a, h)
    if isinstance(feature.curve, Tabulated):
        return lambda a, h: _to_outlines(feature, *subject, level, a, h)
    return lambda a, h: _to_level(feature, *subject, level, a, h)


def _to_crown(
    feature: Feature,
    target: FloatArray,
    horizon: Horizon | None,
    level: float | None,
    azimuth: FloatArray,
    height: FloatArray,
) -> FloatArray:
    top, where = feature.crown(azimuth, height)
    floor = floor_of(horizon, where) if level is None else level
    away = angle_between(direction(where, top), target)
    offset = feature.curve.crown(height)[1]
    pair = (np.abs(np.sin(offset)) > 1e-6) & np.isfinite(top)
    if pair.any():  # the other one of two that are equally high
        other = np.asarray(feature.origin(azimuth) - offset)
        away = np.where(pair, np.minimum(away, angle_between(direction(other, top), target)), away)
    return np.where(top >= floor, away, np.inf)


def _to_feet(feature: Feature, target: FloatArray, level: float, azimuth: FloatArray, height: FloatArray) -> FloatArray:
    feet = feature.feet(azimuth, height, level)
    away = [angle_between(direction(foot, np.full(foot.shape, level)), target) for foot in feet]
    return np.nan_to_num(np.fmin(*away), nan=np.inf)


def _to_feet_over_profile(
    feature: Feature, target: FloatArray, horizon: Horizon | None, azimuth: FloatArray, height: FloatArray
) -> FloatArray:
    found = np.full(len(azimuth), np.inf)
    for i, (a, h) in enumerate(zip(azimuth.tolist(), height.tolist(), strict=True)):
        where = np.array(feature.standing(a, h, horizon, None).feet)
        if where.size:
            found[i] = float(np.min(angle_between(direction(where, floor_of(horizon, where)), target)))
    return found


def _to_circle(
    feature: Feature, target: FloatArray, level: float, azimuth: FloatArray, height: FloatArray
) -> FloatArray:
    """The nearest point lies on the great circle through the centre; where it is hidden, a foot is nearest."""
    curve = feature.curve
    assert isinstance(curve, Circle)
    centre = direction(feature.origin(azimuth), -height if curve.antisolar else height)
    along = centre @ target
    towards = target - along[:, None] * centre
    length = np.linalg.norm(towards, axis=1)
    rise = np.where(length > 1e-12, towards[:, 2] / np.maximum(length, 1e-300), np.sqrt(1.0 - centre[:, 2] ** 2))
    shown = centre[:, 2] * np.cos(curve.radius) + rise * np.sin(curve.radius) >= np.sin(level)
    away = np.abs(np.arctan2(length, along) - curve.radius)
    return np.where(shown, away, _to_feet(feature, target, level, azimuth, height))


def _to_level(
    feature: Feature, azimuth: float, elevation: float, level: float, sun: FloatArray, height: FloatArray
) -> FloatArray:
    """Return the distance from spots or from a level arc: the nearest point has the same azimuth, or is an end."""
    curve: Curve = feature.curve
    top = curve.crown(height)[0]
    aside = wrapped(azimuth - feature.origin(sun))
    if isinstance(curve, ZenithArc):
        near = np.clip(aside, -curve.half_width(height), curve.half_width(height))
    elif isinstance(curve, Level) and curve.kind != "parhelic_circle":
        near = np.where(aside >= 0.0, 1.0, -1.0) * curve.offset(height)
    else:
        near = aside
    away = angle_between(direction(near, top), direction(aside, elevation))
    return np.where(top >= level, away, np.inf)


def _to_outlines(
    feature: Feature, azimuth: float, elevation: float, level: float, sun: FloatArray, height: FloatArray
) -> FloatArray:
    """Return distances from outlines on both sides in sun height, in finer rows where the arc soon begins or ends."""
    curve = feature.curve
    assert isinstance(curve, Tabulated)
    targets = direction(azimuth - feature.origin(sun), elevation)
    found = np.full(len(sun), np.inf)
    exists = feature.exists(height)
    row = np.floor(height / _ROW)
    steady = np.all([feature.exists((row + k) * _ROW) for k in (-1, 0, 1, 2)], axis=0)
    for step, chosen in ((_ROW, exists & steady), (_FINE_ROW, exists & ~steady)):
        row = np.floor(height / step).astype(np.int64)
        for number in np.unique(row[chosen]):
            members = np.flatnonzero(chosen & (row == number))
            sides = [_pieces(curve, float(number + k) * step, level) for k in (0, 1)]
            part = (height[members] / step - number)[:, None]
            found[members] = _between(targets[members], part, sides)
    return found


def _between(targets: FloatArray, part: FloatArray, sides: list[Pieces]) -> FloatArray:
    """Return distances from what lies between two outlines, one of which may show nothing."""
    near = [nearest_points(targets, side) for side in sides if len(side.first)]
    if not near:
        return np.full(len(targets), np.inf)
    away = np.min([angle_between(points, targets) for points in near], axis=0)
    if len(near) == 1:
        return np.asarray(away)
    mixed = near[0] + part * (near[1] - near[0])
    mixed /= np.linalg.norm(mixed, axis=1, keepdims=True)
    return np.where(angle_between(*near) > _SAME_BRANCH, away, angle_between(mixed, targets))


@lru_cache(maxsize=1024)
def _pieces(curve: Tabulated, height: float, level: float) -> Pieces:
    azimuth, elevation = thinned(*curve.outline(height), _THIN)
    return pieces(azimuth, elevation, elevation - level)


def _over_profile(
    feature: Feature, target: FloatArray, horizon: Horizon | None, azimuth: FloatArray, height: FloatArray
) -> FloatArray:
    found = np.full(len(azimuth), np.inf)
    for i, (a, h) in enumerate(zip(azimuth.tolist(), height.tolist(), strict=True)):
        if isinstance(feature.curve, Tabulated):
            h = round(h / _FINE_ROW) * _FINE_ROW if feature.exists(round(h / _FINE_ROW) * _FINE_ROW) else h
        where, up = feature.outline(a, h)
        if not len(where):
            continue
        shown = pieces(where, up, up - floor_of(horizon, where))
        if len(shown.first):
            found[i] = float(angle_between(nearest_points(target[None], shown)[0], target))
    return found
