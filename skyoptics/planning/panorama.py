"""Rows and columns of frames that, stitched, cover all of a feature that is above the horizon.

Every frame is upright and holds a *tile*: a patch of so much azimuth to both sides of its axis, from a lower to an upper
elevation, that lies inside the frame whatever the lens. Tiles of a row overlap by the stated share of their width, rows by
the stated share of the lower tile's height. Frames are wider than their tiles, so the frames overlap by more: the share is the
least there is on any line.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.geometry.axes import azimuth_elevation, direction
from skyoptics.planning.aiming import Aim
from skyoptics.planning.framing import Camera, frame_of, image
from skyoptics.planning.held import Held
from skyoptics.units import DEG, BoolArray, FloatArray

OVERLAP = 0.3
"""Share of a tile that neighbours have in common, if nothing is said: common practice, no source."""
MOST_FRAMES = 200
"""Frames from which a panorama is refused."""

_MARGIN = 0.5 * DEG
"""Kept free around the feature [rad]."""
_REACHES = np.linspace(0.3, 1.0, 11)
"""Tile widths that are tried, as shares of the frame's at its middle."""


@dataclass(frozen=True)
class Row:
    """Frames side by side.

    Parameters
    ----------
    aims : tuple of Aim
        From left to right.
    step : float
        Azimuth between neighbours [rad]; 0 for a single frame.
    closed : bool
        Whether the row goes all around, so that the last frame is a neighbour of the first.
    """

    aims: tuple[Aim, ...]
    step: float
    closed: bool = False


@dataclass(frozen=True)
class Panorama:
    """Frames to be stitched, rows from the lowest up.

    Parameters
    ----------
    rows : tuple of Row
    overlap : float
        Share that neighbours have in common at least [1].
    """

    rows: tuple[Row, ...]
    overlap: float

    @property
    def aims(self) -> tuple[Aim, ...]:
        """All aims, row by row."""
        return tuple(aim for row in self.rows for aim in row.aims)

    @property
    def columns(self) -> int:
        """Frames in the longest row."""
        return max(len(row.aims) for row in self.rows)


def panorama(camera: Camera, wanted: Held, overlap: float = OVERLAP) -> Panorama:
    """Return the aims of a panorama that covers a feature.

    Parameters
    ----------
    camera : Camera
        As it is held.
    wanted : Held
        What has to be covered; its points.
    overlap : float
        0 to 0.8 [1].

    Returns
    -------
    Panorama
        One frame at the best aim where that holds it; else the fewest frames of the tile widths tried.

    Raises
    ------
    DomainError
        For an overlap outside the range, and for a lens so long that it would take more than `MOST_FRAMES`.
    """
    if not 0.0 <= overlap <= 0.8:
        raise DomainError(
            f"an overlap of {overlap:g} is outside 0 to 0.8, the share of a frame that neighbours have in common"
        )
    alone = frame_of(camera, wanted, "best")
    if alone.fits:
        return Panorama((Row((alone.aim,), 0.0),), overlap)
    azimuth, elevation = azimuth_elevation(wanted.points)
    offset = np.mod(azimuth - wanted.middle + np.pi, 2.0 * np.pi) - np.pi
    plans = [_plan(camera, offset, elevation, wanted.middle, overlap, float(share)) for share in _REACHES]
    found = [plan for plan in plans if plan is not None]
    if not found:
        raise DomainError(
            f"a panorama with this lens would take more than {MOST_FRAMES} frames; take a shorter focal length or less overlap"
        )
    return Panorama(min(found, key=lambda rows: (sum(len(row.aims) for row in rows), len(rows))), overlap)


def _plan(
    camera: Camera, offset: FloatArray, elevation: FloatArray, middle: float, overlap: float, share: float
) -> tuple[Row, ...] | None:
    """Return the rows made with one width of tiles, or None where it does not do or takes too many frames.

    The width is a share of the frame's at its middle, so it grows in azimuth towards the zenith.
    """
    low, high = float(elevation.min()) - _MARGIN, min(float(elevation.max()) + _MARGIN, math.pi / 2.0)
    rows: list[Row] = []
    bottom, total = low, 0
    while True:
        found = _next_row(camera, bottom, high, share)
        if found is None:
            return None
        aim_elevation, reach, top = found
        row = _row(offset, elevation, (bottom, top), reach, aim_elevation, middle, overlap)
        rows.append(row)
        total += len(row.aims)
        if total > MOST_FRAMES:
            return None
        if top >= high - 1e-9:
            return tuple(rows)
        bottom = top - overlap * (top - bottom)


def _row(
    offset: FloatArray,
    elevation: FloatArray,
    band: tuple[float, float],
    reach: float,
    aim_elevation: float,
    middle: float,
    overlap: float,
) -> Row:
    """Return the frames of a row: as few as cover the feature inside its band, alike on both sides of the middle."""
    mine = (elevation >= band[0] - _MARGIN) & (elevation <= band[1] + _MARGIN)
    half = float(np.abs(offset[mine]).max()) + _MARGIN if mine.any() else 0.0
    most = 2.0 * reach * (1.0 - overlap)
    if half + reach >= math.pi and 2.0 * reach < 2.0 * math.pi:
        count = max(2, math.ceil(2.0 * math.pi / most - 1e-9))
        step, first, closed = 2.0 * math.pi / count, -(count - 1) / 2.0 * 2.0 * math.pi / count, True
    else:
        count = 1 if half <= reach else 1 + math.ceil((2.0 * half - 2.0 * reach) / most - 1e-9)
        step = 0.0 if count == 1 else min(most, (2.0 * half - 2.0 * reach) / (count - 1))
        first, closed = -(count - 1) / 2.0 * step, False
    turns = middle + first + step * np.arange(count)
    return Row(tuple(Aim(float(np.mod(turn, 2.0 * np.pi)), aim_elevation) for turn in turns), step, closed)


def _next_row(camera: Camera, bottom: float, high: float, share: float) -> tuple[float, float, float] | None:
    """Return the elevation of the aim, the reach in azimuth and the top of the tiles that begin at `bottom` or below.

    The highest such row; if that is more than the feature needs, the one between it and the lowest that is enough.
    """
    step = _step(camera)
    number = math.ceil(max(bottom, -math.pi / 2.0) / step - 1e-9)
    found: list[tuple[float, float, float]] = []
    while number * step <= math.pi / 2.0 + 1e-9:
        tile = _tile(camera, number, share)
        if tile is not None and tile[1] <= bottom + 1e-9:
            found.append((number * step, tile[0], tile[2]))
        elif found:
            break
        number += 1
    if not found or found[-1][2] <= bottom + step:
        return None
    enough = [row for row in found if row[2] >= high]
    return enough[len(enough) // 2] if enough else found[-1]


@lru_cache(maxsize=20000)
def _tile(camera: Camera, number: int, share: float) -> tuple[float, float, float] | None:
    """Return reach in azimuth, bottom and top of the tile of a frame [rad]; None if it has none."""
    turn, elevation, start, inside = _seen(camera, number)
    at_middle = _run(inside[start])
    if at_middle < 2:
        return None
    steps = max(1, math.floor(share * (at_middle - 1)))
    within: BoolArray = np.asarray(inside[:, : steps + 1].all(axis=1))
    if not within[start]:
        return None
    above, below = _run(within[start:]), _run(within[start::-1])
    return float(turn[steps]), float(elevation[start - below + 1]), float(elevation[start + above - 1])


@lru_cache(maxsize=256)
def _seen(camera: Camera, number: int) -> tuple[FloatArray, FloatArray, int, BoolArray]:
    """Return azimuths from the axis (nt), elevations (ne), which of these is the axis', what the frame holds (ne, nt)."""
    step = _step(camera)
    reach = min(math.pi, camera.field[2] / 2.0 + 2.0 * step)
    low = max(-math.floor(math.pi / 2.0 / step + 1e-9), number - math.ceil(reach / step))
    high = min(math.floor(math.pi / 2.0 / step + 1e-9), number + math.ceil(reach / step))
    rows = np.arange(low, high + 1)
    steepest = max(abs(low), abs(high)) * step
    # a circle of that reach spans this azimuth, or all of it where it holds the zenith
    spread = math.sin(reach) / max(math.cos(number * step), 1e-9)
    widest = math.pi if steepest + 1e-9 >= math.pi / 2.0 - step or spread >= 1.0 else math.asin(spread)
    turn = np.linspace(0.0, widest, 2 + math.ceil(min(widest / step, 180.0)))
    x, y = image(camera, Aim(0.0, number * step), direction(turn[None, :], (rows * step)[:, None]))
    inside: BoolArray = np.asarray((np.abs(x - 0.5) <= 0.5) & (np.abs(y - 0.5) <= 0.5))
    elevation: FloatArray = np.asarray(rows * step, dtype=np.float64)
    return turn, elevation, number - low, inside


def _step(camera: Camera) -> float:
    """Return the step of elevations [rad]: it divides a right angle."""
    return math.pi / 2.0 / math.ceil(math.pi / 2.0 / min(1.0 * DEG, min(camera.field[:2]) / 40.0))


def _run(flags: BoolArray) -> int:
    """Return how many are true from the beginning on."""
    return len(flags) if flags.all() else int(np.argmin(flags))
