"""A clear sheet to draw texts, leaders and marks on, laid over a picture at the end."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skyoptics.camera.overlay import CompassTick
from skyoptics.figures.lettering import CASING, INK, LINE, Box, Point, cut, drawn_width, font_of, meets
from skyoptics.units import FloatArray

_ARC_TEXT = 0.62
"""Where the text of a dotted line is wanted, as a share of the width."""


class Sheet:
    """A clear sheet of a picture's size to draw on, laid over it at the end; `size` is an em [pixel]."""

    def __init__(self, shape: tuple[int, int], size: float) -> None:
        from matplotlib.backends.backend_agg import FigureCanvasAgg
        from matplotlib.figure import Figure

        self.shape, self.size = shape, size
        # 72 dots an inch make points of pixels; a hundredth keeps rounding from losing one
        figure = Figure(figsize=((shape[1] + 0.01) / 72.0, (shape[0] + 0.01) / 72.0), dpi=72, facecolor="none")
        self.canvas: Any = FigureCanvasAgg(figure)
        self.axes = figure.add_axes((0.0, 0.0, shape[1] / (shape[1] + 0.01), shape[0] / (shape[0] + 0.01)))
        self.axes.set(xlim=(-0.5, shape[1] - 0.5), ylim=(shape[0] - 0.5, -0.5))
        self.axes.set_axis_off()

    def over(self, picture: NDArray[np.uint8]) -> NDArray[np.uint8]:
        """Return the picture with the sheet on it."""
        self.canvas.draw()
        sheet = np.asarray(self.canvas.buffer_rgba()).astype(np.float32)[: self.shape[0], : self.shape[1]]
        alpha = sheet[..., 3:] / 255.0
        result = np.round(picture * (1.0 - alpha) + sheet[..., :3] * alpha)
        return result.astype(np.uint8)

    def text(
        self, lines: Sequence[str], box: Box, align: str, size: float | None = None, weight: str = "normal"
    ) -> None:
        """Set lines into a box."""
        from matplotlib.patches import PathPatch
        from matplotlib.textpath import TextPath
        from matplotlib.transforms import Affine2D

        size = size or self.size
        measure = drawn_width(size, weight)
        for k, line in enumerate(lines):
            x = box[0] if align == "left" else box[2] - measure(line)
            place_ = Affine2D().scale(1.0, -1.0).translate(x, box[1] + (k * LINE + 0.97) * size)
            glyphs = TextPath((0.0, 0.0), line, prop=font_of(size, weight)).transformed(place_)
            self.axes.add_patch(
                PathPatch(glyphs, facecolor=INK, edgecolor="none", zorder=5, path_effects=self._cased(0.24 * size))
            )

    def leader(self, leader: tuple[Point, Point]) -> None:
        """Draw a leader and its dot."""
        from matplotlib.patches import Circle

        (x, y), (end_x, end_y) = leader
        width = max(1.0, 0.065 * self.size)
        self._plot([x, end_x], [y, end_y], width, 0.09 * self.size)
        # a patch, since markers are moved to whole pixels
        style = {"facecolor": INK, "edgecolor": CASING, "linewidth": max(1.0, 0.08 * self.size)}
        self.axes.add_patch(Circle((end_x, end_y), 0.19 * self.size, snap=False, zorder=4, **style))

    def line(self, points: FloatArray) -> None:
        """Draw the horizon."""
        self._plot(
            points[:, 0], points[:, 1], max(0.8, 0.05 * self.size), 0.07 * self.size, linestyle=(0, (6, 5)), alpha=0.75
        )

    def arc(self, points: FloatArray, text: str, taken: Sequence[Box]) -> list[Box]:
        """Draw a dotted line with a text upon it, right of the middle where there is room."""
        width = max(1.0, 0.07 * self.size)
        self._plot(points[:, 0], points[:, 1], width, 0.05 * self.size, linestyle=(0, (1.0, 6.0)), alpha=0.85)
        half = drawn_width(self.size)(text) / 2.0
        places = points[np.isfinite(points).all(axis=1)]
        wanted = np.abs(places[:, 0] - _ARC_TEXT * self.shape[1]) + 0.25 * places[:, 1]  # high before low
        for x, y in places[np.argsort(wanted, kind="stable")].tolist():
            box = self._box(x - half, y, 2.0 * half)
            if self._free(box, taken):
                self.text([text], box, "left")
                return [box]
        return []

    def tick(self, tick: CompassTick, taken: Sequence[Box]) -> list[Box]:
        """Draw a compass tick, its letters under the horizon or, where the picture ends there, above."""
        size, (right, down) = self.size, tick.up
        reach = (0.45 if tick.text else 0.25) * size
        x, y = np.array([tick.column, tick.column + right * reach]), np.array([tick.row, tick.row + down * reach])
        width = max(0.8, 0.06 * size)
        self._plot(x, y, width, 0.07 * size)
        if not tick.text:
            return []
        half = drawn_width(size, "bold")(tick.text) / 2.0
        for side in (-1.0, 1.0):
            far = (0.75 + 0.5 * abs(down) + abs(right) * half / size) * size * side
            box = self._box(tick.column + right * far - half, tick.row + down * far, 2.0 * half)
            if self._free(box, taken):
                self.text([tick.text], box, "left", weight="bold")
                return [box]
        return []

    def mark(self, point: Point, name: str, ring: bool, taken: Sequence[Box]) -> list[Box]:
        """Draw the mark of the source (ring) or of the point opposite (cross), with its name beside it."""
        size, (x, y) = 0.85 * self.size, point
        r = 0.55 * self.size
        width = max(1.0, 0.08 * self.size)
        if ring:
            turn = np.linspace(0.0, 2.0 * np.pi, 73)
            self._plot(x + r * np.cos(turn), y + r * np.sin(turn), width, 0.09 * self.size)
        else:
            gap = [np.nan]
            self._plot([x - r, x + r, *gap, x, x], [y, y, *gap, y - r, y + r], width, 0.09 * self.size)
        boxes = [(x - r, y - r, x + r, y + r)]
        wide = drawn_width(size)(name)
        for left, middle in (
            (x + 1.6 * r, y + 1.2 * r),
            (x - wide / 2.0, y + 2.3 * r),
            (x - wide / 2.0, y - 2.3 * r),
            (x - 1.6 * r - wide, y + 1.2 * r),
        ):
            box = self._box(left, middle, wide, size)
            if self._free(box, taken):
                self.text([name], box, "left", size)
                return [*boxes, box]
        return boxes

    def title(self, text: str) -> Box:
        """Set a title at the top left."""
        size, margin = 1.35 * self.size, 0.8 * self.size
        measure = drawn_width(size, "bold")
        line = cut(" ".join(text.split()), measure, self.shape[1] - 1 - 2.0 * margin)
        box = (margin, margin, margin + measure(line), margin + LINE * size)
        if line:
            self.text([line], box, "left", size, "bold")
        return box

    def scale(self, length: float, text: str) -> Box:
        """Draw the angle scale at the bottom right."""
        margin, size, r = 1.0 * self.size, self.size, 0.3 * self.size
        right, y = self.shape[1] - 1 - margin, self.shape[0] - 1 - margin
        left = right - length
        gap = np.nan
        self._plot(
            [left, right, gap, left, left, gap, right, right],
            [y, y, gap, y - r, y + r, gap, y - r, y + r],
            max(1.2, 0.1 * size),
            0.1 * size,
        )
        wide = drawn_width(size)(text)
        box = self._box(min((left + right - wide) / 2.0, right - wide), y - 0.95 * size, wide)
        self.text([text], box, "left")
        return (min(left, box[0]), box[1], right, y + r)

    def _plot(self, x: Any, y: Any, width: float, casing: float, **style: Any) -> None:
        effects = self._cased(width + 2.0 * max(casing, 1.0))
        caps = {"solid_capstyle": "round", "dash_capstyle": "butt", "snap": False}
        self.axes.plot(
            x, y, color=INK, linewidth=width, path_effects=effects, scalex=False, scaley=False, **caps, **style
        )

    def _cased(self, width: float) -> list[Any]:
        from matplotlib.patheffects import withStroke

        return [withStroke(linewidth=max(width, 2.5), foreground=CASING, joinstyle="round")]

    def _box(self, left: float, middle: float, width: float, size: float | None = None) -> Box:
        half = LINE * (size or self.size) / 2.0
        return left, middle - half, left + width, middle + half

    def _free(self, box: Box, taken: Sequence[Box]) -> bool:
        inside = box[0] >= 0 and box[1] >= 0 and box[2] <= self.shape[1] - 1 and box[3] <= self.shape[0] - 1
        return inside and not any(meets(box, other) for other in taken)
