"""Arcs in a photograph: where they run through it, and how they are drawn on a copy."""

from __future__ import annotations

import csv
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skyoptics.camera import overlay
from skyoptics.crystals import arcs as halos
from skyoptics.crystals.arc_regions import circle_radius
from skyoptics.errors import DomainError
from skyoptics.figures.lettering import CASING, INK, Box, text_size
from skyoptics.figures.placement import Label, arrange
from skyoptics.figures.sheet import Sheet
from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.geometry.directions import Directions
from skyoptics.planning import features
from skyoptics.planning.answers import Body
from skyoptics.units import DEG, FloatArray

BOWS = ("primary", "secondary")
HALOS = ("halo_22", "parhelia")
ICE_INDEX = 1.31
"""Of the lines of halos."""
MEASURED_INK = "#ffd23f"
"""Colour of points that were measured."""
_ROWS = 512


@dataclass(frozen=True, eq=False)
class Arc:
    """A feature in a photograph.

    Parameters
    ----------
    name, title : str
        Of the feature.
    radius_deg : float or None
        Of the line that is drawn, about the sun or the point opposite it; None for what is no such circle.
    exists : bool
        Whether it is there at all at this height of the sun.
    points : ndarray, shape (m, 2)
        Column, row [pixel], branches parted by nan; empty where none of it is in the picture.
    sky : ndarray, shape (m, 2)
        Azimuth and elevation of the same points [rad].
    """

    name: str
    title: str
    radius_deg: float | None
    exists: bool
    points: FloatArray
    sky: FloatArray

    @property
    def label(self) -> str:
        """What is written beside it."""
        title = self.title[:1].upper() + self.title[1:]
        return title if self.radius_deg is None else f"{title}, {self.radius_deg:.2f}°"


def default_names(grid: Directions, sun: FloatArray) -> tuple[str, ...]:
    """Return the bows where the picture's middle is on the side opposite the sun, else halos."""
    middle = grid.unproject(np.array((grid.shape[0] - 1) / 2.0), np.array((grid.shape[1] - 1) / 2.0))
    return BOWS if float(middle @ sun) < 0.0 else HALOS


def arcs(
    grid: Directions, sun: FloatArray, names: Sequence[str], radius_deg: float | None = None, body: Body = "sun"
) -> list[Arc]:
    """Return where features run through a picture.

    Parameters
    ----------
    grid : Directions
        Of the photograph.
    sun : ndarray, shape (3,)
        Viewing direction of the sun or moon.
    names : sequence of str
        Features of `skyoptics.planning.features`, or halos of `skyoptics.crystals.arcs`, for ice of the index 1.31.
    radius_deg : float, optional
        Of the line of a bow, instead of its own.
    body : {"sun", "moon"}
        What lights them.

    Raises
    ------
    DomainError
        For an unknown name, or a radius for what is no bow or for several features.
    """
    if radius_deg is not None and len(names) != 1:
        raise DomainError("a radius is for one bow: name it with --feature")
    azimuth, elevation = (float(angle) for angle in azimuth_elevation(sun))
    found = []
    for name in dict.fromkeys(names):
        title, radius, outline = _sky(name, radius_deg, body, azimuth, elevation)
        line = overlay.curve(grid, *outline) if len(outline[0]) else np.empty((0, 2))
        sky = np.stack(azimuth_elevation(grid.unproject(line[:, 1], line[:, 0])), axis=-1)
        found.append(Arc(name, title, radius, len(outline[0]) > 0, line, sky))
    return found


def _sky(
    name: str, radius_deg: float | None, body: Body, azimuth: float, elevation: float
) -> tuple[str, float | None, tuple[FloatArray, FloatArray]]:
    """Return title, radius and outline of a feature: halos as exact loci, those below the horizon too, bows as circles."""
    if name in halos.names() and radius_deg is None:
        entry = halos.feature(name)
        away, height = halos.locus(name, elevation, ICE_INDEX)
        circle = circle_radius(entry.crystals[0].sequences[0], ICE_INDEX) / DEG if entry.kind == "circle" else None
        return entry.title, circle, (away + azimuth, height)
    feature = features.find(name, radius_deg, body=body)
    return feature.title, feature.radius_deg, feature.outline(azimuth, elevation)


def draw(
    picture: NDArray[np.uint8],
    grid: Directions,
    found: Sequence[Arc],
    sun: FloatArray,
    body: Body = "sun",
    measured: FloatArray | None = None,
) -> NDArray[np.uint8]:
    """Return a copy of a picture with arcs, horizon and the marks of the sun and the point opposite it.

    Parameters
    ----------
    picture : ndarray of uint8, shape (rows, columns, 3)
    grid, found, sun :
        As for and from `arcs`.
    body : {"sun", "moon"}
        What lights the arcs.
    measured : ndarray, shape (n, 2), optional
        Points that were measured, column, row [pixel].
    """
    shape = (picture.shape[0], picture.shape[1])
    size = text_size(shape)
    sheet = Sheet(shape, size)
    horizon = overlay.horizon(grid)
    if len(horizon):
        sheet.line(horizon)
    labels, taken = [], list[Box]()
    for arc in found:
        if len(arc.points):
            _line(sheet, arc.points, INK)
            whole = arc.points[np.isfinite(arc.points).all(axis=1)]
            labels.append(Label(arc.label, np.column_stack([whole, np.ones(len(whole))])))
    if measured is not None:
        _crosses(sheet, measured)
    for vector, name, ring in ((sun, body.capitalize(), True), (-sun, f"Anti{_OPPOSITE[body]} point", False)):
        place = overlay.mark(grid, vector)
        if place is not None:
            taken += sheet.mark(place, name, ring, taken)
    placed, _ = arrange(labels, shape, taken, horizon)
    for one in placed:
        sheet.leader(one.leader)
    for one in placed:
        sheet.text(one.lines, one.box, one.align)
    return _laid_over(sheet, picture)


def write_table(path: Path, found: Sequence[Arc]) -> None:
    """Write the points of arcs as CSV: feature, branch, x, y [pixel], azimuth and elevation [°]."""
    with path.open("w", encoding="utf-8", newline="") as file:
        out = csv.writer(file, lineterminator="\n")
        out.writerow(["feature", "branch", "x", "y", "azimuth_deg", "elevation_deg"])
        for arc in found:
            branch = 1
            for (x, y), (azimuth, elevation) in zip(arc.points, arc.sky / DEG, strict=True):
                if np.isnan(x):
                    branch += 1
                    continue
                out.writerow([arc.name, branch, f"{x:.3f}", f"{y:.3f}", f"{azimuth:.4f}", f"{elevation:.4f}"])


_OPPOSITE = {"sun": "solar", "moon": "lunar"}


def _line(sheet: Sheet, points: FloatArray, ink: str, weight: float = 1.0) -> None:
    """Draw a thin cased line, and a dot for each branch of one point."""
    width = weight * max(1.0, 0.075 * sheet.size)
    style: dict[str, Any] = {"solid_capstyle": "round", "solid_joinstyle": "round", "snap": False, "antialiased": True}
    for wide, colour, alpha in ((width + 2.0 * max(0.8, 0.05 * sheet.size), CASING, 0.55), (width, ink, 1.0)):
        sheet.axes.plot(*points.T, color=colour, linewidth=wide, alpha=alpha, scalex=False, scaley=False, **style)
    there = np.isfinite(points[:, 0])
    before, after = np.concatenate([[False], there[:-1]]), np.concatenate([there[1:], [False]])
    for x, y in points[there & ~before & ~after]:
        turn = np.linspace(0.0, 2.0 * np.pi, 49)
        r = 0.5 * sheet.size
        _line(sheet, np.column_stack([x + r * np.cos(turn), y + r * np.sin(turn)]), ink)


def _crosses(sheet: Sheet, points: FloatArray) -> None:
    """Draw upright crosses with an open middle, so that what was pointed at stays to be seen."""
    near, far = 0.25 * sheet.size, 0.75 * sheet.size
    gap = [np.nan, np.nan]
    for x, y in points:
        ends = []
        for right, down in ((1, 0), (-1, 0), (0, 1), (0, -1)):
            ends += [[x + right * near, y + down * near], [x + right * far, y + down * far], gap]
        _line(sheet, np.array(ends[:-1]), MEASURED_INK, 2.0)


def _laid_over(sheet: Sheet, picture: NDArray[np.uint8]) -> NDArray[np.uint8]:
    """Return a picture with a sheet on it, pixels mixed where something is drawn: photographs are large."""
    sheet.canvas.draw()
    drawn = np.asarray(sheet.canvas.buffer_rgba())
    result = picture.copy()
    for first in range(0, picture.shape[0], _ROWS):
        rows = slice(first, min(first + _ROWS, picture.shape[0]))
        there = drawn[rows, : picture.shape[1], 3] > 0
        over = drawn[rows, : picture.shape[1]][there].astype(np.float32)
        alpha = over[:, 3:] / np.float32(255.0)
        result[rows][there] = np.round(picture[rows][there] * (np.float32(1.0) - alpha) + over[:, :3] * alpha)
    return result
