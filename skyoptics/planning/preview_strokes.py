"""Strokes of a preview: coloured bands, lines of the sky, compass ticks, thirds, strips of text."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skyoptics.camera import overlay
from skyoptics.camera.overlay import CompassTick
from skyoptics.figures.lettering import LINE, cut, drawn_width
from skyoptics.figures.sheet import Sheet
from skyoptics.geometry.axes import direction
from skyoptics.geometry.directions import Directions
from skyoptics.planning.aiming import Aim
from skyoptics.planning.bands import Band
from skyoptics.planning.framing import Camera
from skyoptics.planning.words import point
from skyoptics.units import DEG, BoolArray, FloatArray

BESIDE = (22, 24, 28)
"""Colour outside the lens's image and behind texts."""
SPOT = 0.4 * DEG
"""Radius that spots are drawn with: a little larger than the sun [rad]."""

_EVERY_DEG = (1.0, 2.0, 5.0, 10.0, 15.0, 30.0)


def draw_band(sheet: Sheet, grid: Directions, band: Band, scale: float) -> None:
    """Draw strips, a line or spots."""
    from matplotlib.patches import Circle, PathPatch
    from matplotlib.path import Path as Outline

    if band.edges.shape[1] == 1:
        radius = max(SPOT * scale, 2.5)
        for spot, colour in reversed(list(zip(band.edges[:, 0], band.colours, strict=True))):
            row, column = grid.project(spot)
            if np.isfinite(row):
                sheet.axes.add_patch(Circle((float(column), float(row)), radius, facecolor=colour, edgecolor="none"))
        return
    if len(band.edges) == 1:
        style = (0, (4, 3)) if band.diffuse else "solid"
        width = max(0.1 * sheet.size, 1.5) if band.diffuse else max(0.3 * DEG * scale, 1.5)
        draw_line(sheet, grid, band.edges[0], band.colours[0], width, style)
        return
    row, column = grid.project(band.edges)
    points = np.stack([column, row], axis=-1)
    for first, last in _runs(points, max(grid.shape) / 4.0):
        # each strip reaches to the far edge and the next ones cover it: no seams
        for number, colour in enumerate(band.colours):
            ring = np.concatenate([points[number, first:last], points[-1, first:last][::-1]])
            sheet.axes.add_artist(PathPatch(Outline(ring), facecolor=colour, edgecolor="none"))


def _runs(points: FloatArray, longest: float) -> list[tuple[int, int]]:
    """Return stretches (first, last + 1) in which all lines (s, n, 2) stand in the image without leaps."""
    fine: BoolArray = np.asarray(np.isfinite(points).all(axis=(0, 2)))
    joined = fine[:-1] & fine[1:]
    joined &= (np.nan_to_num(np.linalg.norm(np.diff(points, axis=1), axis=-1), nan=np.inf) < longest).all(axis=0)
    padded = np.concatenate([[False], joined, [False]])
    starts, ends = np.flatnonzero(padded[1:] & ~padded[:-1]), np.flatnonzero(padded[:-1] & ~padded[1:])
    return [(int(a), int(b) + 1) for a, b in zip(starts, ends, strict=True)]


def draw_line(sheet: Sheet, grid: Directions, line: FloatArray, colour: str, width: float, style: Any) -> None:
    """Draw a line of the sky."""
    row, column = grid.project(line)
    jump = np.concatenate([[False], np.hypot(np.diff(row), np.diff(column)) > max(grid.shape) / 4.0])
    sheet.axes.plot(
        np.where(jump, np.nan, column),
        row,
        color=colour,
        linewidth=width,
        linestyle=style,
        alpha=0.6,
        solid_capstyle="butt",
        scalex=False,
        scaley=False,
    )


def compass_ticks(grid: Directions) -> list[CompassTick]:
    """Return the ticks of the compass: about eight with degrees over the picture's width, letters where they belong."""
    middle = (grid.shape[0] - 1) / 2.0
    ends = grid.unproject(np.array([middle, middle]), (grid.shape[1] - 1) / 2.0 + np.array([-0.5, 0.5]))
    width_deg = float(np.linalg.norm(ends[1] - ends[0])) / DEG * grid.shape[1]
    every = next((step for step in _EVERY_DEG if width_deg / step <= 9.0), _EVERY_DEG[-1])
    degrees = sorted({*np.arange(0.0, 360.0, every).tolist(), *np.arange(0.0, 360.0, 45.0).tolist()})
    named = [value for value in degrees if value % 45.0 == 0.0]
    order = named + [value for value in degrees if value % 45.0 != 0.0]
    ticks = []
    for value in order:
        here = overlay.mark(grid, direction(value * DEG, 0.0))
        if here is None:
            continue
        row, column = grid.project(direction(value * DEG, 0.1 * DEG))
        rise = np.array([float(column) - here[0], float(row) - here[1]])
        length = float(np.hypot(*rise))
        if not length > 0.0:
            continue
        letters = f"{point(value)} " if value % 45.0 == 0.0 or width_deg < 60.0 else ""
        ticks.append(CompassTick(f"{letters}{value:g}°", *here, (float(rise[0] / length), float(rise[1] / length))))
    return ticks


def thirds(camera: Camera, aim: Aim) -> list[FloatArray]:
    """Return the four lines at thirds of a frame, as directions."""
    columns = 600
    grid = camera.looking(aim, columns)
    rows = grid.shape[0]
    across, down = np.linspace(-0.5, columns - 0.5, 121), np.linspace(-0.5, rows - 0.5, 121)
    lines = []
    for share in (1.0 / 3.0, 2.0 / 3.0):
        lines.append(grid.unproject(down, np.full_like(down, share * columns - 0.5)))
        lines.append(grid.unproject(np.full_like(across, share * rows - 0.5), across))
    return lines


def with_texts(picture: NDArray[np.uint8], heading: str, below_it: Sequence[str], size: float) -> NDArray[np.uint8]:
    """Return the picture between its title and its facts, on plain strips."""
    rows, columns = picture.shape[:2]
    margin = round(0.8 * size)
    room = columns - 2.0 * margin
    title = _lines([heading], 1.25 * size, "bold", room)
    facts = _lines(below_it, size, "normal", room)
    above = round(len(title) * LINE * 1.25 * size + 1.2 * size)
    below = round(len(facts) * LINE * size + 1.2 * size) if facts else 0
    whole = np.empty((above + rows + below, columns, 3), dtype=np.uint8)
    whole[...] = BESIDE
    whole[above : above + rows] = picture
    sheet = Sheet((whole.shape[0], columns), size)
    top = 0.6 * size
    sheet.text(title, (margin, top, columns - margin, above), "left", 1.25 * size, "bold")
    if facts:
        sheet.text(facts, (margin, above + rows + top, columns - margin, whole.shape[0]), "left")
    return sheet.over(whole)


def _lines(texts: Sequence[str], size: float, weight: str, room: float) -> list[str]:
    """Return texts broken to the room between words."""
    measure = drawn_width(size, weight)
    lines: list[str] = []
    for text in texts:
        line = ""
        for word in text.split():
            joined = f"{line} {word}" if line else word
            if line and measure(joined) > room:
                lines.append(line)
                joined = word
            line = cut(joined, measure, room)
        lines.append(line)
    return lines
