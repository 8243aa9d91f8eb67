"""Drawings of crystals: from the side and along the c-axis, with the numbers of their faces.

All is laid out in points (1/72 inch) on one sheet: the two views are orthographic, hidden edges dashed. A number stands in
its face, or beside the crystal with a leader where the face is too narrow; side faces seen edge-on have theirs outside.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from skyoptics.crystals.faces import face_labels
from skyoptics.crystals.shapes import Shape
from skyoptics.errors import DomainError
from skyoptics.figures.lettering import Box, cut, drawn_width, font_of, meets
from skyoptics.figures.palette import FAINT, INK
from skyoptics.units import DEG, FloatArray

if TYPE_CHECKING:
    from matplotlib.figure import Figure

SUFFIXES = (".png", ".svg")
RESOLUTION = 150
"""Dots an inch of a PNG."""
SHEET = (720.0, 430.0)
"""Width and height [point]."""
ELEVATION = 20.0 * DEG
"""How far the view from the side is from above [rad]."""
PALE = "#ffffff"
DARK_FACE, LIGHT_FACE = np.array([150.0, 188.0, 219.0]) / 255.0, np.array([240.0, 248.0, 254.0]) / 255.0

_ROOM = (240.0, 250.0)
_MIDDLES = ((190.0, 220.0), (540.0, 220.0))
_TEXT = (13.0, 11.0, 9.5, 8.0)
_STUB = 26.0
_EDGE_ON = 1e-6
_LIGHT = np.array([-0.45, 0.65, 0.62])
_TURN = 12.0 * DEG


def draw(shape: Shape, path: str | Path | None = None, title: str | None = None) -> Figure:
    """Draw a crystal.

    Parameters
    ----------
    shape : Shape
        The crystal.
    path : path, optional
        A .png or .svg file to write.
    title : str, optional
        Above the drawing.

    Returns
    -------
    matplotlib.figure.Figure
        The drawing, two views side by side; scale bars in units of the diameter across corners.

    Raises
    ------
    DomainError
        If the file is to be of another kind.
    """
    suffix = None if path is None else Path(path).suffix.lower()
    if suffix is not None and suffix not in SUFFIXES:
        raise DomainError(f"a drawing is a .png or .svg file; got {Path(str(path)).name}")
    from matplotlib import rc_context
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=(SHEET[0] / 72.0, SHEET[1] / 72.0), dpi=RESOLUTION, facecolor="white")
    FigureCanvasAgg(figure)
    axes = figure.add_axes((0.0, 0.0, 1.0, 1.0))
    axes.set(xlim=(0.0, SHEET[0]), ylim=(0.0, SHEET[1]))
    axes.set_axis_off()
    aside, along = (_View(axes, shape, turn, middle) for turn, middle in zip(_turns(shape), _MIDDLES, strict=True))
    common = min(aside.scale, along.scale)
    if max(aside.scale, along.scale) < 1.6 * common:
        aside.scale = along.scale = common
    for view, caption in ((aside, "from the side, 20° above the basal plane"), (along, "along the c-axis, from above")):
        view.show()
        axes.text(view.middle[0], 18.0, caption, ha="center", va="baseline", color=FAINT, fontproperties=font_of(9.0))
    if title:
        line = cut(" ".join(title.split()), drawn_width(13.0, "bold"), SHEET[0] - 40.0)
        axes.text(SHEET[0] / 2.0, SHEET[1] - 26.0, line, ha="center", color=INK, fontproperties=font_of(13.0, "bold"))
    if path is not None and suffix is not None:
        # the same drawing is the same file
        with rc_context({"svg.hashsalt": "skyoptics"}):
            figure.savefig(path, format=suffix[1:], metadata={"Date": None} if suffix == ".svg" else None)
    return figure


def _turns(shape: Shape) -> tuple[FloatArray, FloatArray]:
    """Return the rotations body → view (right, up, towards the viewer) from the side and from above, shape (3, 3)."""
    best, seen = np.eye(3), -1.0
    for k in range(6):
        azimuth = _TURN + k * np.pi / 3.0  # off the planes of symmetry, where edges in front would hide those behind
        level = np.array([np.cos(azimuth), np.sin(azimuth), 0.0])
        towards = np.cos(ELEVATION) * level + np.array([0.0, 0.0, np.sin(ELEVATION)])
        right = np.array([-level[1], level[0], 0.0])
        area = np.maximum(shape.face_normals @ towards, 0.0) * shape.face_areas
        if np.sqrt(area).sum() > seen + 1e-6:  # many faces, none of them narrow
            best, seen = np.stack([right, np.cross(towards, right), towards]), float(np.sqrt(area).sum())
    return best, np.eye(3)


@dataclass
class _View:
    """One view of a crystal on the sheet."""

    axes: Any
    shape: Shape
    turn: FloatArray
    middle: tuple[float, float]
    scale: float = field(init=False)
    taken: list[Box] = field(init=False, default_factory=list)

    def __post_init__(self) -> None:
        extent = np.ptp(self._corners(), axis=0)
        self.centre = self._corners().min(axis=0) + extent / 2.0
        self.scale = float(min(_ROOM[0] / extent[0], _ROOM[1] / extent[1]))

    def show(self) -> None:
        """Draw the view."""
        self.outline = self.place(np.concatenate(self.shape.faces))
        self._fill()
        self._edges()
        self._axis()
        self._numbers()
        self._scale_bar()

    def place(self, points: FloatArray) -> FloatArray:
        """Return where points of the body, shape (m, 3), lie on the sheet [point], shape (m, 2)."""
        return np.asarray(((points @ self.turn.T)[:, :2] - self.centre) * self.scale + np.array(self.middle))

    @property
    def facing(self) -> FloatArray:
        """Cosine of each face's normal with the line of sight."""
        return np.where(self.shape.face_areas > 0.0, self.shape.face_normals @ self.turn[2], -1.0)

    def _corners(self) -> FloatArray:
        return np.asarray(np.concatenate(self.shape.faces) @ self.turn.T)[:, :2]

    def _fill(self) -> None:
        from matplotlib.patches import Polygon

        for face in np.flatnonzero(self.facing > _EDGE_ON):
            normal = self.turn @ self.shape.face_normals[face]
            shade = 0.5 + 0.5 * float(normal @ _LIGHT / np.linalg.norm(_LIGHT))
            colour = tuple(np.clip(DARK_FACE + (LIGHT_FACE - DARK_FACE) * shade, 0.0, 1.0))
            self.axes.add_patch(
                Polygon(self.place(self.shape.faces[face]), facecolor=colour, edgecolor="none", zorder=1)
            )

    def _edges(self) -> None:
        facing = self.facing
        narrow = float(np.ptp(self.outline, axis=0).min())
        width = float(np.clip(0.04 * narrow, 0.4, 1.5))
        for edge in self.shape.edges:
            ends = self.place(edge.corners)
            if np.linalg.norm(ends[1] - ends[0]) < 0.05:
                continue
            seen = any(facing[face] > _EDGE_ON for face in edge.faces)
            style: dict[str, Any] = {"color": INK, "linewidth": width, "solid_capstyle": "round", "zorder": 3}
            if not seen:
                style = {"color": FAINT, "linewidth": 0.55 * width, "linestyle": (0, (5, 4)), "zorder": 2}
            self.axes.plot(*ends.T, **style)

    def _axis(self) -> None:
        """Mark the c-axis: a line out of both ends, or an arrow's head seen from the front."""
        from matplotlib.patches import Circle

        normals, distance = self.shape.face_normals, self.shape.offsets.ravel()
        with np.errstate(divide="ignore", invalid="ignore"):
            reach = distance / normals[:, 2]
        top, bottom = reach[normals[:, 2] > _EDGE_ON].min(), reach[normals[:, 2] < -_EDGE_ON].max()
        up, down = self.place(np.array([[0.0, 0.0, top], [0.0, 0.0, bottom]]))
        font = font_of(12.0, "bold")
        if self.turn[2, 2] > 0.99:
            for radius, fill in ((4.2, PALE), (1.2, INK)):
                self.axes.add_patch(Circle(tuple(up), radius, facecolor=fill, edgecolor=INK, linewidth=1.1, zorder=6))
            self._write(up[0] + 10.5, up[1] + 0.5, "c", 12.0, "bold")
            self.taken.append((up[0] - 7.0, up[1] - 8.0, up[0] + 16.0, up[1] + 8.0))
            return
        head, foot = self.outline[:, 1].max() + _STUB, self.outline[:, 1].min() - 0.7 * _STUB
        self.axes.annotate(
            "",
            (up[0], head),
            (up[0], up[1]),
            arrowprops={"arrowstyle": "-|>", "color": INK, "linewidth": 1.1, "shrinkA": 0.0, "shrinkB": 0.0},
            zorder=6,
        )
        self.axes.plot([down[0], down[0]], [down[1], foot], color=INK, linewidth=1.1, zorder=0)
        self.axes.text(up[0] + 7.0, head - 8.0, "c", color=INK, va="center", ha="left", fontproperties=font)
        self.taken.append((up[0] - 4.0, up[1] - 3.0, up[0] + 4.0, head))

    def _numbers(self) -> None:
        labels = face_labels(self.shape.face_normals)
        facing = self.facing
        beside = []
        for face, label in enumerate(labels):
            if label == 0 or facing[face] < -_EDGE_ON:
                continue
            polygon = self.place(self.shape.faces[face])
            if facing[face] <= _EDGE_ON:
                normal = self.turn[:2] @ self.shape.face_normals[face]
                x, y = 0.5 * (polygon.min(axis=0) + polygon.max(axis=0)) + 12.0 * normal
                self._write(x, y, str(label), 9.5, colour=FAINT)
            elif (spot := _spot(polygon, str(label), self.taken)) is not None:
                self._write(*spot[:2], str(label), spot[2])
            else:
                beside.append((self._target(polygon), str(label)))
        self._leaders(beside, 32.0 if np.any(np.abs(facing) <= _EDGE_ON) else 16.0)

    def _target(self, polygon: FloatArray) -> FloatArray:
        """Return where a leader ends in a face: in the middle, or clear of the mark of the axis."""
        centre = polygon.mean(axis=0)
        middles = 0.5 * (polygon + np.roll(polygon, -1, axis=0))
        for spot in (centre, *(centre + 0.7 * (middle - centre) for middle in middles)):
            if not any(meets((*(spot - 2.0), *(spot + 2.0)), box) for box in self.taken):
                return np.asarray(spot)
        return np.asarray(centre)

    def _leaders(self, beside: Sequence[tuple[FloatArray, str]], away: float) -> None:
        """Set numbers into columns left and right of the crystal, so far away, each with a line to its face."""
        from matplotlib.patches import Circle

        left, right = self.outline[:, 0].min(), self.outline[:, 0].max()
        for side, column in ((-1.0, left - away), (1.0, right + away)):
            own = sorted((item for item in beside if (item[0][0] >= self.middle[0]) == (side > 0.0)), key=_height)
            heights = _parted(np.array([point[1] for point, _ in own]), 13.0)
            for (point, label), y in zip(own, heights, strict=True):
                start = column - side * (2.0 + drawn_width(9.5)(label) / 2.0)
                self.axes.plot([start, point[0]], [y, point[1]], color=INK, linewidth=0.7, zorder=4)
                self.axes.add_patch(Circle(tuple(point), 1.5, facecolor=INK, edgecolor="none", zorder=4))
                self._write(column, y, label, 9.5)

    def _scale_bar(self) -> None:
        length = max(
            step * 10.0**power
            for power in range(-4, 4)
            for step in (1.0, 2.0, 5.0)
            if step * 10.0**power * self.scale <= 95.0
        )
        text, font = f"{length:g} × diameter", font_of(9.0)
        half, y = 0.5 * length * self.scale, 38.0
        x = self.middle[0] - 0.5 * (6.0 + drawn_width(9.0)(text))
        ends, ticks = [x - half, x + half], [[x - half] * 2, [x + half] * 2]
        for across, upright in ((ends, [y, y]), (ticks[0], [y - 3.0, y + 3.0]), (ticks[1], [y - 3.0, y + 3.0])):
            self.axes.plot(across, upright, color=FAINT, linewidth=1.0, zorder=1)
        self.axes.text(x + half + 6.0, y, text, va="center", color=FAINT, fontproperties=font)

    def _write(self, x: float, y: float, text: str, size: float, weight: str = "normal", colour: str = INK) -> None:
        from matplotlib.patheffects import withStroke

        halo = [withStroke(linewidth=2.2, foreground=(1.0, 1.0, 1.0, 0.75))]
        style = {"ha": "center", "va": "center_baseline", "fontproperties": font_of(size, weight)}
        self.axes.text(x, y, text, color=colour, zorder=7, path_effects=halo, **style)


def _spot(polygon: FloatArray, text: str, taken: Sequence[Box]) -> tuple[float, float, float] | None:
    """Return where a text fits into a convex polygon, as large as it may be: x, y, size; None if nowhere."""
    sides = np.roll(polygon, -1, axis=0) - polygon
    outward = np.stack([sides[:, 1], -sides[:, 0]], axis=1)
    reach = np.einsum("ij,ij->i", outward, polygon)
    for size in _TEXT:
        half = np.array([0.5 * drawn_width(size)(text) + 1.5, 0.37 * size + 1.5])
        for spot in _places(polygon):
            inside = np.all(outward @ spot + np.abs(outward) @ half <= reach)
            box = (*(spot - half), *(spot + half))
            if inside and not any(meets(box, other) for other in taken):
                return float(spot[0]), float(spot[1]), size
    return None


def _places(polygon: FloatArray) -> list[FloatArray]:
    """Return places in a convex polygon where a text may stand, the best first."""
    centre = polygon.mean(axis=0)
    aside = [centre + np.array(step) for step in ((0.0, -20.0), (-18.0, 0.0), (18.0, 0.0), (0.0, 20.0))]
    middles = 0.5 * (polygon + np.roll(polygon, -1, axis=0))
    return [centre, *aside, *(centre + share * (middle - centre) for share in (0.35, 0.55) for middle in middles)]


def _height(item: tuple[FloatArray, str]) -> float:
    return float(item[0][1])


def _parted(heights: FloatArray, least: float) -> FloatArray:
    """Move rising heights as little as it takes to have them `least` apart."""
    steps = least * np.arange(len(heights))
    # what is wanted less the steps must not fall: pool neighbours that do (isotonic regression)
    pools: list[list[float]] = []
    for height in heights - steps:
        pools.append([float(height)])
        while len(pools) > 1 and np.mean(pools[-2]) > np.mean(pools[-1]):
            last = pools.pop()
            pools[-1] += last
    return np.asarray([float(np.mean(pool)) for pool in pools for _ in pool] + steps, dtype=np.float64)
