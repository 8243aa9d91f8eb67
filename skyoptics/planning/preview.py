"""A picture of a frame and what lies around it: horizon, compass, arcs with their true widths, frame edge, subject, sun.

Drawn light on dark: every text is white with a dark casing (contrast above 4.5:1 on any picture, `skyoptics.figures.lettering`),
and what a colour tells a label or a shape tells too.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from skyoptics.camera import overlay
from skyoptics.errors import ResourceError
from skyoptics.figures.lettering import LINE, Box, drawn_width, text_size
from skyoptics.figures.placement import Label, arrange
from skyoptics.figures.sheet import Sheet
from skyoptics.geometry.axes import azimuth_elevation, direction
from skyoptics.geometry.directions import Directions
from skyoptics.planning.aiming import Aim
from skyoptics.planning.bands import WHITE, bands
from skyoptics.planning.features import Feature
from skyoptics.planning.framing import Camera, image
from skyoptics.planning.preview_strokes import BESIDE, SPOT, compass_ticks, draw_band, draw_line, thirds, with_texts
from skyoptics.planning.view import View, edge
from skyoptics.units import DEG, FloatArray

SKY, SKY_HIGH = (62, 78, 98), (30, 40, 58)
"""At the horizon and at the zenith."""
GROUND = (38, 38, 36)
"""Below the horizon."""
EDGE = "#ffffff"
THIRDS, BEHIND = "#cfd8e4", "#8f9aa8"
DIM = 0.55
"""Light that is left outside the frame."""
BELOW = 0.22
"""How much of an arc is shown below the horizon."""


@dataclass(frozen=True)
class Preview:
    """What to draw.

    Parameters
    ----------
    view : View
        From `skyoptics.planning.view`.
    camera : Camera
        Whose frames are drawn.
    aims : tuple of Aim
        One, or those of a panorama.
    features : tuple of Feature
        The one asked for first.
    sun_azimuth, sun_elevation : float
        Of what lights them [rad].
    title : str
        Set above the picture.
    facts : tuple of str
        Lines set below it.
    thirds : bool
        Whether lines are drawn at thirds of the frame.
    subject : tuple of float or None
        Its azimuth and elevation [rad].
    """

    view: View
    camera: Camera
    aims: tuple[Aim, ...]
    features: tuple[Feature, ...]
    sun_azimuth: float
    sun_elevation: float
    title: str
    facts: tuple[str, ...] = ()
    thirds: bool = False
    subject: tuple[float, float] | None = None


def draw(asked: Preview, under: FloatArray | None = None) -> NDArray[np.uint8]:
    """Return the preview.

    Parameters
    ----------
    asked : Preview
    under : ndarray, shape (ny, nx, 3), optional
        A render of the view, display-encoded, 0 to 1, nan outside the image: drawn instead of a plain sky, and arcs as thin
        lines only.

    Returns
    -------
    ndarray of uint8, shape (rows, columns, 3)
        The view's picture between a title and the facts.
    """
    grid = asked.view.directions
    size = text_size(grid.shape)
    vectors = grid.vectors()
    picture = _ground(vectors) if under is None else _rendered(under)
    arcs = Sheet(grid.shape, size)
    labels = [_draw_feature(arcs, grid, feature, asked, under is not None) for feature in reversed(asked.features)][
        ::-1
    ]
    drawn = arcs.over(picture)
    faint = np.round((1.0 - BELOW) * picture + BELOW * drawn).astype(np.uint8)
    picture = np.where(vectors[..., 2:] >= 0.0, drawn, faint)
    if len(asked.aims) == 1:
        picture = _dimmed(picture, vectors, asked.camera, asked.aims[0])
    picture = _drawn_over(picture, grid, asked, [label for label in labels if label is not None], size)
    return with_texts(picture, asked.title, asked.facts, size)


def write(path: Path, picture: NDArray[np.uint8], title: str) -> None:
    """Write a preview as PNG, its title in the metadata.

    Raises
    ------
    ResourceError
        If it cannot be written.
    """
    from PIL import Image, PngImagePlugin

    words = PngImagePlugin.PngInfo()
    words.add_itxt("Title", title)
    words.add_itxt("Software", "skyoptics")
    try:
        Image.fromarray(picture).save(path, format="PNG", pnginfo=words)
    except OSError as error:
        raise ResourceError(f"{path}: cannot be written ({error.strerror or error})") from None


def _ground(vectors: FloatArray) -> NDArray[np.uint8]:
    """Return a plain sky over a plain ground."""
    _, elevation = azimuth_elevation(vectors)
    share = np.clip(elevation / (np.pi / 2.0), 0.0, 1.0)[..., None] ** 0.7
    sky = (1.0 - share) * np.array(SKY) + share * np.array(SKY_HIGH)
    picture = np.where((elevation >= 0.0)[..., None], sky, np.array(GROUND, dtype=float))
    picture = np.where(np.isnan(elevation)[..., None], np.array(BESIDE, dtype=float), picture)
    return np.round(picture).astype(np.uint8)


def _rendered(under: FloatArray) -> NDArray[np.uint8]:
    """Return a render as it is, what is outside the image plain."""
    picture = np.round(np.clip(np.nan_to_num(under), 0.0, 1.0) * 255.0)
    beside = np.isnan(under).any(axis=-1, keepdims=True)
    return np.where(beside, np.array(BESIDE, dtype=float), picture).astype(np.uint8)


def _dimmed(picture: NDArray[np.uint8], vectors: FloatArray, camera: Camera, aim: Aim) -> NDArray[np.uint8]:
    """Return a picture darker outside the frame."""
    x, y = image(camera, aim, vectors)
    outside = ~((np.abs(x - 0.5) <= 0.5) & (np.abs(y - 0.5) <= 0.5))
    return np.where(outside[..., None], np.round(picture * DIM), picture).astype(np.uint8)


def _draw_feature(sheet: Sheet, grid: Directions, feature: Feature, asked: Preview, thin: bool) -> Label | None:
    """Draw a feature's bands and return its label, tied to where it is above the horizon."""
    anchors = []
    scale = grid.map[0]
    for band in bands(feature, asked.sun_azimuth, asked.sun_elevation):
        if thin and band.edges.shape[1] > 1:
            for line in (band.edges[0], band.edges[-1]):
                draw_line(sheet, grid, line, WHITE, max(1.0, 0.06 * sheet.size), (0, (2, 3)))
        else:
            draw_band(sheet, grid, band, scale)
        middle = band.edges[len(band.edges) // 2]
        row, column = grid.project(middle)
        if len(middle) == 1:  # a leader's dot would hide a spot
            row = row - SPOT * scale - 0.4 * sheet.size
        up = middle[:, 2] >= 0.0
        # a foot is a poor place for a label: there stands what is on the horizon
        high = np.clip(0.4 + middle[up, 2] / np.sin(15.0 * DEG), 0.4, 1.0)
        anchors.append(np.stack([column[up], row[up], high], axis=-1))
    points = np.concatenate(anchors) if anchors else np.empty((0, 3))
    if len(asked.aims) == 1 and len(points):
        points[:, 2] *= np.where(_in_frame(grid, points, asked), 1.0, 0.5)
    title = feature.title[:1].upper() + feature.title[1:]
    return Label(title, points) if len(points) else None


def _in_frame(grid: Directions, points: FloatArray, asked: Preview) -> NDArray[np.bool_]:
    """Return which points of the picture stand in the frame."""
    x, y = image(asked.camera, asked.aims[0], grid.unproject(points[:, 1], points[:, 0]))
    return np.asarray((np.abs(x - 0.5) <= 0.48) & (np.abs(y - 0.5) <= 0.48))


def _drawn_over(
    picture: NDArray[np.uint8], grid: Directions, asked: Preview, labels: Sequence[Label], size: float
) -> NDArray[np.uint8]:
    """Return the picture with frames, thirds, horizon, compass, marks and labels on it."""
    sheet = Sheet(grid.shape, size)
    taken: list[Box] = []
    for number, aim in enumerate(asked.aims):
        _draw_frame(sheet, grid, asked, aim, number if len(asked.aims) > 1 else None, taken)
    line = overlay.horizon(grid)
    if len(line):
        sheet.line(line)
    lined = _along_edge(grid, asked) if len(asked.aims) == 1 else []
    for tick in compass_ticks(grid):
        taken += sheet.tick(tick, [*taken, *lined])
    source = direction(asked.sun_azimuth, asked.sun_elevation)
    for vector, name, ring in (
        (source, asked.features[0].body.capitalize(), True),
        (-source, "Antisolar point" if asked.features[0].body == "sun" else "Point opposite the moon", False),
    ):
        here = overlay.mark(grid, vector)
        if here is not None:
            taken += sheet.mark(here, name, ring, taken)
    if asked.subject is not None:
        taken += _draw_subject(sheet, grid, asked.subject, taken)
    placed, _ = arrange(labels, grid.shape, taken, line)
    for one in placed:
        sheet.leader(one.leader)
    for one in placed:
        sheet.text(one.lines, one.box, one.align)
    return sheet.over(picture)


def _along_edge(grid: Directions, asked: Preview) -> list[Box]:
    """Return small boxes along the edge of the frame, where figures of the compass would be hard to read."""
    row, column = grid.project(edge(asked.camera, asked.aims[0]))
    return [(float(x) - 1.0, float(y) - 1.0, float(x) + 1.0, float(y) + 1.0) for x, y in zip(column, row, strict=True)]


def _draw_frame(sheet: Sheet, grid: Directions, asked: Preview, aim: Aim, number: int | None, taken: list[Box]) -> None:
    """Draw the edge of a frame, its thirds by choice, and its number in a panorama."""
    size = sheet.size
    row, column = grid.project(edge(asked.camera, aim))
    width = max(1.5, 0.14 * size) if number is None else max(1.0, 0.08 * size)
    sheet.axes.plot(column, row, color="#0a0d14", linewidth=width + 2.0, scalex=False, scaley=False, zorder=2)
    sheet.axes.plot(column, row, color=EDGE, linewidth=width, scalex=False, scaley=False, zorder=2)
    if asked.thirds:
        for line in thirds(asked.camera, aim):
            row, column = grid.project(line)
            sheet.axes.plot(
                column, row, color=THIRDS, linewidth=max(0.8, 0.05 * size), alpha=0.7, linestyle=(0, (1, 3)),
                scalex=False, scaley=False,
            )  # fmt: skip
    if number is not None:
        row, column = grid.project(aim.rotation[2])
        wide = drawn_width(1.3 * size, "bold")(str(number + 1))
        half = LINE * 1.3 * size / 2.0
        box = (float(column) - wide / 2.0, float(row) - half, float(column) + wide / 2.0, float(row) + half)
        sheet.text([str(number + 1)], box, "left", 1.3 * size, "bold")
        taken.append(box)


def _draw_subject(sheet: Sheet, grid: Directions, subject: tuple[float, float], taken: Sequence[Box]) -> list[Box]:
    """Draw a diamond where the subject stands, its name beside it."""
    here = overlay.mark(grid, direction(*subject))
    if here is None:
        return []
    (x, y), r, size = here, 0.7 * sheet.size, 0.85 * sheet.size
    corners = np.array([[x, y - r], [x + r, y], [x, y + r], [x - r, y], [x, y - r]])
    for colour, width in (("#0a0d14", 0.34 * sheet.size), (EDGE, 0.14 * sheet.size)):
        sheet.axes.plot(corners[:, 0], corners[:, 1], color=colour, linewidth=width, scalex=False, scaley=False)
    boxes: list[Box] = [(x - r, y - r, x + r, y + r)]
    wide, half = drawn_width(size)("Subject"), LINE * size / 2.0
    for left, middle in ((x + 1.5 * r, y - r), (x - 1.5 * r - wide, y - r), (x - wide / 2.0, y - 2.2 * r)):
        box = (left, middle - half, left + wide, middle + half)
        inside = left >= 0.0 and box[2] <= grid.shape[1] - 1 and box[1] >= 0.0
        free = not any(box[0] < b[2] and b[0] < box[2] and box[1] < b[3] and b[1] < box[3] for b in taken)
        if inside and free:
            sheet.text(["Subject"], box, "left", size)
            return [*boxes, box]
    return boxes
