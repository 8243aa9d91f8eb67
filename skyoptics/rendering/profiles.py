"""Brightness across a feature, all along it: what is on it and what is beside it.

The profile across is averaged over the whole length first: it says where the feature is brighter than half its height, so
that noise of single places cannot pick a maximum of its own. "On" is the middle half of that width; "beside" are two bands
as wide as that, one on each side, their middles a width from its edges.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from skyoptics.geometry.axes import angle_between, around, azimuth_elevation
from skyoptics.geometry.directions import CYLINDRICAL, Directions
from skyoptics.optics.source import Source
from skyoptics.rendering.features import Line, framed
from skyoptics.units import DEG, BoolArray, FloatArray

WINDOW = 1.0 * DEG
"""Length along a feature over which values are averaged [rad]."""
DAZZLED = 2.0 * DEG
"""Nearer than this to the source nothing is judged [rad]."""

_POINTS = 2000
_OFFSETS = 121
_SPAN = 4.0  # widths across that are looked at on each side, beyond where the maximum may be
_TURNS = 36
_SAME = 0.06 * DEG
_AGAIN = 0.5 * DEG


@dataclass(frozen=True, eq=False)
class Measured:
    """What was measured of a feature.

    Parameters
    ----------
    views : ndarray, shape (m, 3)
        Viewing directions of its places.
    across : ndarray, shape (m, turns, 3)
        Unit vectors across it: one for a curve, all around for a spot.
    weight : ndarray, shape (m,)
        Length that each place stands for [rad]; 1 for a spot.
    on, beside : ndarray, shape (m, c)
        Values.
    width : float
        [rad]
    noise : float
        Standard error of the contrast [1].
    one_sided : bool
        Whether nowhere both sides are there to compare with: a slope of the sky then counts as contrast.
    peaked : bool
        Whether the mean profile has a maximum near the line at all.
    """

    views: FloatArray
    across: FloatArray
    weight: FloatArray
    on: FloatArray
    beside: FloatArray
    width: float
    noise: float
    one_sided: bool
    peaked: bool


def sampled(grid: Directions, picture: FloatArray, views: FloatArray) -> FloatArray:
    """Return a picture (ny, nx, c) between its pixels at directions (…, 3); nan outside it."""
    from scipy.ndimage import map_coordinates

    row, column = grid.project(views)
    outside = ~framed(grid, views)
    place = [np.where(outside, 0.0, row), np.where(outside, 0.0, column)]
    mode = "grid-wrap" if grid.kind == CYLINDRICAL and abs(grid.map[1]) * grid.shape[1] > 6.283 else "nearest"
    values = np.stack(
        [map_coordinates(picture[..., k], place, order=1, mode=mode) for k in range(picture.shape[-1])], -1
    )
    values[outside] = np.nan
    return np.asarray(values)


def measure(line: Line, grid: Directions, picture: FloatArray, source: Source, key: int = 1) -> Measured | None:
    """Return values on and beside a feature along its length.

    Parameters
    ----------
    line : Line
        A curve or spots.
    grid : Directions
        Of the picture.
    picture : ndarray, shape (ny, nx, c)
        Values, linear in light; nan outside the image.
    source : Source
        Near which nothing is judged.
    key : int, optional
        Which value is the luminance: it decides where the maximum is and how wide; default the second, as in XYZ.

    Returns
    -------
    Measured or None
        `on` and `beside` of shape (m, c); None where no point can be measured.
    """
    views, across, weight, branch = _course(line, source)
    keep = framed(grid, views)
    if not keep.any():
        return None
    every = max(1, int(np.ceil(keep.sum() / _POINTS)))
    keep &= np.arange(len(keep)) % every == 0
    views, across, weight, branch = views[keep], across[keep], weight[keep] * every, branch[keep]
    span = line.reach + _SPAN * line.width
    offset = np.linspace(-span, span, 2 * _OFFSETS + 1)
    spot = line.kind == "spot"
    if spot:
        offset = offset[_OFFSETS:]
    looked = np.cos(offset)[:, None] * views[:, None, None, :] + np.sin(offset)[:, None] * across[:, :, None, :]
    values = sampled(grid, picture, looked)  # (m, turns, offsets, c)
    # the ground is no surroundings of what hangs in the sky, nor pixels that both share
    pixel = float(np.median(grid.pixel_size()))
    values[looked[..., 2] * np.where(views[:, 2] >= 0.0, 1.0, -1.0)[:, None, None] < np.sin(pixel)] = np.nan
    profile = _mean_profile(values[..., key])
    peak, width, peaked = _peak(offset, profile, line, spot)
    quarter = max(0.25 * width, 0.6 * float(offset[1] - offset[0]))
    inner = np.abs(offset - peak) <= quarter
    sides = [np.abs(offset - peak - sign * 1.5 * width) <= quarter for sign in ((1,) if spot else (-1, 1))]
    on = _mean(values[:, :, inner], 2)
    bands = np.stack([_mean(values[:, :, band], 2) for band in sides])
    both = np.isfinite(bands).all(axis=0)
    # one side alone would take the slope of the sky for contrast: only where no place has both
    beside = np.where(both, bands.mean(axis=0), np.nan) if both.any() else _mean(bands, 0)
    if spot:
        noise = _ring_noise(on[..., key], beside[..., key])
        on, beside = _mean(on, 1), _mean(beside, 1)
    else:
        on, beside, noise = _smoothed(on[:, 0], beside[:, 0], weight, branch, key, pixel)
    there = np.isfinite(on).all(axis=1) & np.isfinite(beside).all(axis=1)
    if not there.any():
        return None
    alone = not spot and not both.any()
    return Measured(
        views[there], across[there], weight[there], on[there], beside[there], width, noise, bool(alone), peaked
    )


def _course(line: Line, source: Source) -> tuple[FloatArray, FloatArray, FloatArray, Any]:
    """Return a feature's points that can be judged: views (m, 3), directions across (m, turns, 3), lengths, branches."""
    finite = np.isfinite(line.views).all(axis=1)
    branch = np.cumsum(~finite)
    views, branch = line.views[finite], branch[finite]
    step = np.where(branch[1:] == branch[:-1], angle_between(views[1:], views[:-1]), 0.0)
    padded = np.concatenate([[0.0], step, [0.0]])
    weight = 0.5 * (padded[1:] + padded[:-1])
    if line.kind == "spot":
        turn = np.linspace(0.0, 2.0 * np.pi, _TURNS, endpoint=False)
        across = np.stack([around(view, np.pi / 2.0, turn) for view in views])
        weight = np.ones(len(views))
    else:
        ahead = np.arange(len(views))
        last, first = np.minimum(ahead + 1, len(views) - 1), np.maximum(ahead - 1, 0)
        last = np.where(branch[last] == branch, last, ahead)
        first = np.where(branch[first] == branch, first, ahead)
        normal = np.cross(views, views[last] - views[first])
        normal /= np.maximum(np.linalg.norm(normal, axis=1, keepdims=True), 1e-300)
        normal *= np.where(normal @ line.centre > 0.0, -1.0, 1.0)[:, None]  # away from the centre
        across = normal[:, None, :]
    fair = line.lit(*azimuth_elevation(views)) & (angle_between(views, source.direction) > DAZZLED)
    fair &= np.linalg.norm(across[:, 0], axis=1) > 0.5
    fair &= ~_repeated(views, step)
    return views[fair], across[fair], weight[fair], branch[fair]


def _repeated(views: FloatArray, step: FloatArray) -> BoolArray:
    """Return which points (m, 3) lie where the line, of steps (m − 1,), has been before: a locus may be run twice."""
    from scipy.spatial import cKDTree

    pairs = cKDTree(views).query_pairs(_SAME, output_type="ndarray")
    way = np.concatenate([[0.0], np.cumsum(step)]) + 2.0 * _AGAIN * np.concatenate([[0.0], np.cumsum(step == 0.0)])
    result = np.zeros(len(views), dtype=bool)
    result[pairs[:, 1][way[pairs[:, 1]] - way[pairs[:, 0]] > _AGAIN]] = True
    return result


def _mean(values: FloatArray, axis: int) -> FloatArray:
    """Return the mean over an axis of what is finite; nan where nothing is."""
    there = np.isfinite(values)
    count = there.sum(axis=axis)
    total = np.where(there, values, 0.0).sum(axis=axis)
    return np.asarray(np.where(count > 0, total / np.maximum(count, 1), np.nan))


def _ring_noise(on: FloatArray, beside: FloatArray) -> float:
    """Return the standard error of the contrast of the noisiest spot, from its spread over position angles (m, turns)."""
    ratio = np.divide(on, beside, out=np.full_like(on, np.nan), where=beside > 0.0)
    spread = np.sqrt(_mean((ratio - _mean(ratio, 1)[:, None]) ** 2, 1) / _TURNS)
    return float(np.nan_to_num(spread).max(initial=0.0))


def _mean_profile(key: FloatArray) -> FloatArray:
    """Return the mean over points (m, turns, n) of values, each point relative to its own mean, shape (n,)."""
    flat = key.reshape(-1, key.shape[-1])
    level = _mean(flat, 1)[:, None]
    with np.errstate(invalid="ignore", divide="ignore"):
        return _mean(np.where(level > 0.0, flat / level, np.nan), 0)


def _peak(offset: FloatArray, profile: FloatArray, line: Line, spot: bool) -> tuple[float, float, bool]:
    """Return the middle of a profile's stretch above half height near the line, its width, and whether there is any.

    The slope between its ends is taken off first; half height is that over the lowest place on each side.
    """
    near = np.abs(offset) <= line.reach
    ends = np.flatnonzero(np.isfinite(profile))
    if not spot and len(ends) > 1:
        first, last = ends[0], ends[-1]
        rise = (profile[last] - profile[first]) / (offset[last] - offset[first])
        profile = profile - rise * offset
    if not np.isfinite(profile[near]).any():
        return 0.0, line.width, False
    top = int(np.nanargmax(np.where(near, profile, np.nan)))
    edges = np.flatnonzero(near & np.isfinite(profile))
    if top in (edges[0], edges[-1]) and not (spot and top == edges[0]):
        return 0.0, line.width, False  # a hollow, no maximum
    step = float(offset[1] - offset[0])
    reached = {}
    for side in (1,) if spot else (-1, 1):
        run = profile[top::side]
        run = run[: int(np.argmax(~np.isfinite(run)))] if not np.isfinite(run).all() else run
        half = 0.5 * (profile[top] + float(run.min(initial=np.inf)))
        below = np.flatnonzero(run < half)
        if len(below):
            high, low = run[below[0] - 1], run[below[0]]
            reached[side] = (below[0] - 1 + (high - half) / (high - low)) * step
    if not reached:
        return float(offset[top]), line.width, False
    if spot:
        return 0.0, min(2.0 * (float(offset[top]) + reached[1]), float(offset[-1]) / 1.75), True
    right, left = reached.get(1, reached.get(-1, 0.0)), reached.get(-1, reached.get(1, 0.0))
    middle = float(offset[top]) + 0.5 * (right - left)
    return middle, min(right + left, (float(offset[-1]) - abs(middle)) / 1.75), True


def _smoothed(
    on: FloatArray, beside: FloatArray, weight: FloatArray, branch: Any, key: int, pixel: float
) -> tuple[FloatArray, FloatArray, float]:
    """Return means over `WINDOW` along the branches, and the standard error of a contrast there.

    The error comes from second differences between places two pixels apart, which a feature hardly bends in.
    """
    first, second = np.full_like(on, np.nan), np.full_like(beside, np.nan)
    rough = []
    for number in np.unique(branch):
        here = np.flatnonzero(branch == number)
        reach = max(0, round(0.5 * WINDOW / max(float(weight[here].mean()), 1e-9)))
        low = np.maximum(np.arange(len(here)) - reach, 0)
        high = np.minimum(np.arange(len(here)) + reach + 1, len(here))
        for values, out in ((on, first), (beside, second)):
            there = np.isfinite(values[here]) & np.isfinite(on[here] + beside[here])
            total = np.concatenate([np.zeros((1, on.shape[1])), np.cumsum(np.where(there, values[here], 0.0), axis=0)])
            count = np.concatenate([np.zeros((1, on.shape[1])), np.cumsum(there, axis=0)])
            number_in = count[high] - count[low]
            mean = (total[high] - total[low]) / np.maximum(number_in, 1)
            out[here] = np.where(there & (number_in > 0), mean, np.nan)
        spacing = max(float(weight[here].mean()), 1e-9)
        lag = max(1, int(np.ceil(2.0 * pixel / spacing)))  # neighbours share pixels
        with np.errstate(invalid="ignore", divide="ignore"):
            contrast = on[here, key] / beside[here, key] - 1.0
        bend = contrast[: -2 * lag] - 2.0 * contrast[lag:-lag] + contrast[2 * lag :]
        rough.append(bend / np.sqrt(max(1.0, (2 * reach + 1) / lag)))
    bent = np.abs(np.concatenate(rough))
    bent = bent[np.isfinite(bent)]
    return first, second, float(1.4826 * np.median(bent) / np.sqrt(6.0)) if len(bent) else 0.0
