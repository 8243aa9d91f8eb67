"""What can be drawn over a picture, as data: horizon, compass, marks, loci and an angle scale in pixel coordinates.

Points are (column, row); pixel centres are whole numbers, so the picture reaches from −½ to nx − ½ and ny − ½. Lines that
leave the picture end at its edge and are parted by nan from where they come back.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from skyoptics.geometry.axes import angle_between, direction
from skyoptics.geometry.directions import CYLINDRICAL, Directions
from skyoptics.units import DEG, ArrayLike, BoolArray, FloatArray

POINTS = ("N", "NE", "E", "SE", "S", "SW", "W", "NW")
"""Compass points, every 45°."""
TICK = 15.0 * DEG
"""Between the ticks of the compass [rad]."""
BARS_DEG = (0.1, 0.2, 0.5, 1.0, 2.0, 5.0, 10.0, 20.0)
"""Angles that a scale may show [°]; above 20° no lens but an equidistant one keeps its scale."""
BAR_SHARE = 0.2
"""Length of a scale, as a share of the picture's width, that is aimed at."""
_STEP = 0.1 * DEG


class CompassTick(NamedTuple):
    """A tick on the horizon.

    Parameters
    ----------
    text : str
        One of `POINTS`, or empty.
    column, row : float
        Where [pixel].
    up : tuple of float
        Unit vector (column, row) of growing elevation there.
    """

    text: str
    column: float
    row: float
    up: tuple[float, float]


class AngleScale(NamedTuple):
    """A bar of a round angle.

    Parameters
    ----------
    angle : float
        [rad]
    length : float
        Of that angle at the middle of the picture, along its rows [pixel].
    """

    angle: float
    length: float


def horizon(directions: Directions) -> FloatArray:
    """Return the horizon, shape (m, 2): column, row [pixel], parts divided by nan; empty where it is outside."""
    azimuth = np.linspace(0.0, 2.0 * np.pi, round(2.0 * np.pi / _STEP) + 1)
    return curve(directions, azimuth, np.zeros_like(azimuth))


def compass(directions: Directions) -> list[CompassTick]:
    """Return the ticks that stand in the picture: every `TICK` along the horizon, named every 45°."""
    ticks = []
    count = round(2.0 * np.pi / TICK)
    each = count // len(POINTS)
    for number in range(count):
        here = mark(directions, direction(number * TICK, 0.0))
        if here is None:
            continue
        row, column = directions.project(direction(number * TICK, _STEP))
        rise = np.array([column - here[0], row - here[1]])
        length = float(np.hypot(*rise))
        up = (float(rise[0] / length), float(rise[1] / length)) if length > 0.0 else (0.0, -1.0)
        ticks.append(CompassTick(POINTS[number // each] if number % each == 0 else "", *here, up))
    return ticks


def mark(directions: Directions, vector: ArrayLike) -> tuple[float, float] | None:
    """Return where a viewing direction stands.

    Parameters
    ----------
    directions : Directions
    vector : array_like, shape (3,)
        Unit vector: the source, or minus it for the antisolar point.

    Returns
    -------
    tuple of float or None
        Column, row [pixel]; None outside the picture.
    """
    row, column = directions.project(np.asarray(vector, dtype=np.float64))
    point = np.array([float(column), float(row)])
    return (float(column), float(row)) if _inside(directions, point[None, :])[0] else None


def angle_scale(directions: Directions) -> AngleScale | None:
    """Return the bar of one of `BARS_DEG` that comes nearest to `BAR_SHARE` of the width; None if the middle is outside."""
    rows, columns = directions.shape
    ends = directions.unproject(np.array((rows - 1) / 2.0), (columns - 1) / 2.0 + np.array([-0.5, 0.5]))
    pixel = float(angle_between(ends[0], ends[1]))
    if not pixel > 0.0:
        return None
    lengths = np.array(BARS_DEG) * DEG / pixel
    best = int(np.argmin(np.abs(np.log(lengths / (BAR_SHARE * columns)))))
    return AngleScale(BARS_DEG[best] * DEG, float(lengths[best]))


def curve(directions: Directions, azimuth: ArrayLike, elevation: ArrayLike) -> FloatArray:
    """Return a line of the sky in the picture.

    Parameters
    ----------
    directions : Directions
    azimuth, elevation : array_like, shape (n,)
        Points close to each other, branches parted by nan (a locus of `skyoptics.crystals.arcs` with the sun's azimuth
        added) [rad].

    Returns
    -------
    ndarray, shape (m, 2)
        Column, row [pixel], cut at the edges of the picture, parted by nan; a branch of one point stays one point.
    """
    row, column = directions.project(direction(azimuth, elevation))
    points = np.stack([np.atleast_1d(column), np.atleast_1d(row)], axis=-1)
    inside = _inside(directions, points)
    turn = 2.0 * np.pi / abs(directions.map[1]) if directions.kind == CYLINDRICAL else np.inf
    lines: list[list[FloatArray]] = []
    joined = False
    for here in range(len(points)):
        drawn = False
        if here + 1 < len(points):
            for first, second in _pieces(points[here], points[here + 1], turn):
                cut = _clipped(first, second, directions.shape)
                if cut is None:
                    continue
                drawn = True
                if lines and np.allclose(lines[-1][-1], cut[0], rtol=0.0, atol=1e-9):
                    lines[-1].append(cut[1])
                else:
                    lines.append([cut[0], cut[1]])
        if inside[here] and not drawn and not joined:
            lines.append([points[here]])
        joined = drawn
    gap = np.full((1, 2), np.nan)
    parts = [part for line in lines for part in (gap, np.array(line))]
    return np.concatenate(parts[1:]) if parts else np.empty((0, 2))


def _inside(directions: Directions, points: FloatArray) -> BoolArray:
    """Return which points (m, 2) stand in the picture."""
    rows, columns = directions.shape
    column, row = points[:, 0], points[:, 1]
    return (column >= -0.5) & (column <= columns - 0.5) & (row >= -0.5) & (row <= rows - 0.5)


def _pieces(first: FloatArray, second: FloatArray, turn: float) -> list[tuple[FloatArray, FloatArray]]:
    """Return the straight pieces between neighbours: two where a panorama ends and begins anew, none next to a pole."""
    if not np.all(np.isfinite([first, second])):
        return []
    if not np.isfinite(turn):
        return [(first, second)]
    shift = np.array([turn * np.round((second[0] - first[0]) / turn), 0.0])
    if abs(second[0] - shift[0] - first[0]) > turn / 4.0:
        return []
    return [(first, second)] if shift[0] == 0.0 else [(first, second - shift), (first + shift, second)]


def _clipped(first: FloatArray, second: FloatArray, shape: tuple[int, int]) -> tuple[FloatArray, FloatArray] | None:
    """Return the part of a segment inside the picture (Liang & Barsky, ACM Trans. Graph. 3, 1 (1984)), if any."""
    step = second - first
    enter, leave = 0.0, 1.0
    for axis, size in enumerate((shape[1], shape[0])):
        for distance, speed in ((first[axis] + 0.5, -step[axis]), (size - 0.5 - first[axis], step[axis])):
            if speed == 0.0:
                if distance < 0.0:
                    return None
            elif speed < 0.0:
                enter = max(enter, distance / speed)
            else:
                leave = min(leave, distance / speed)
    return (first + enter * step, first + leave * step) if enter < leave else None
