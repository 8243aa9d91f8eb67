"""Marks of angles, and where labels go: beside what they speak of, on nothing else."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import pairwise
from typing import Any

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.figures.drawing_svg import Circle, Drawing, Shape, Style, Text
from skyoptics.figures.lettering import drawn_width
from skyoptics.units import FloatArray
from skyoptics.words.table import number

_REACH = (0.0, 10.0, 22.0, 38.0, 60.0, 90.0)
_STEP = 3.0


def bearing(vector: Any) -> float:
    """Return the direction of a vector on the sheet, counter-clockwise from the x-axis [rad]."""
    return float(np.arctan2(vector[1], vector[0]))


def unit(angle: float) -> FloatArray:
    """Return the unit vector in a direction on the sheet [rad]."""
    return np.array([np.cos(angle), np.sin(angle)])


def meeting(start: Any, along: Any, other: Any, other_along: Any) -> FloatArray | None:
    """Return where two straight lines meet, shape (2,); None for parallel ones."""
    matrix = np.stack([np.asarray(along, dtype=float), -np.asarray(other_along, dtype=float)], axis=1)
    if abs(np.linalg.det(matrix)) < 1e-9:
        return None
    far = np.linalg.solve(matrix, np.asarray(other, dtype=float) - np.asarray(start, dtype=float))
    return np.asarray(np.asarray(start) + far[0] * np.asarray(along), dtype=np.float64)


def angle_mark(
    drawing: Drawing, vertex: Any, first: float, turn: float, radius: float, style: Style, **data: Any
) -> FloatArray:
    """Draw an arc about a vertex and return its middle, shape (2,).

    Parameters
    ----------
    vertex : array_like, shape (2,)
    first, turn : float
        Where the arc begins and how far it goes, counter-clockwise [rad].
    radius : float
        [pixel]
    """
    count = max(3, int(abs(turn) / 0.06) + 2)
    angle = first + turn * np.linspace(0.0, 1.0, count)
    points = np.asarray(vertex) + radius * np.stack([np.cos(angle), np.sin(angle)], axis=1)
    drawing.items.append(Shape(points, style, "angle", data))
    return np.asarray(np.asarray(vertex) + radius * unit(first + 0.5 * turn))


@dataclass
class Labels:
    """Labels of a drawing, each put where it covers least.

    Parameters
    ----------
    drawing : Drawing
        All lines should be there before the first label.
    area : tuple of float
        Left, bottom, right, top of where labels may stand [pixel].
    first : int
        Items of the drawing before this one are far away and not looked at.
    """

    drawing: Drawing
    area: tuple[float, float, float, float]
    first: int = 0
    crowd: FloatArray = field(init=False)
    written: FloatArray = field(init=False)

    def __post_init__(self) -> None:
        taken, self.written = [np.zeros((0, 2))], np.zeros((0, 2))
        for item in self.drawing.items[self.first :]:
            if isinstance(item, Shape) and item.style.stroke is not None:
                taken.append(_along(np.asarray(item.points, dtype=float), item.closed))
            elif isinstance(item, Shape) and item.kind == "arrowhead":
                taken.append(_along(np.asarray(item.points, dtype=float), True))
            elif isinstance(item, Circle) and item.style.stroke is not None:
                angle = np.linspace(0.0, 2.0 * np.pi, max(8, int(2.0 * np.pi * item.radius / _STEP)))
                taken.append(np.asarray(item.centre) + item.radius * np.stack([np.cos(angle), np.sin(angle)], axis=1))
            elif isinstance(item, Text):
                taken.append(_filled(_box(item)))
                self.written = np.concatenate([self.written, taken[-1]])
        self.crowd = np.concatenate(taken)

    def put(
        self,
        lines: str | Sequence[str],
        about: Any,
        size: float,
        colour: str,
        kind: str,
        towards: float = 0.0,
        leader: bool = True,
        far: float = 90.0,
        **more: Any,
    ) -> Text:
        """Write a label beside a point, if it may be in a direction `towards` [rad], and return it.

        A label that had to go more than 30 pixels away is joined to its point by a thin line.
        """
        lines = (lines,) if isinstance(lines, str) else tuple(lines)
        trial = Text(lines, (0.0, 0.0), size, colour, kind, **more)
        width, height = trial.box
        about = np.asarray(about, dtype=float)
        best, least = about, np.inf
        for reach in (step for step in _REACH if step <= far):
            for turn in np.arange(24) * (np.pi / 12.0):
                away = unit(towards + turn)
                # the box touches the circle of that radius about the point
                half = np.array([0.5 * width, 0.5 * height])
                inner = min(half[0] / max(abs(away[0]), 1e-9), half[1] / max(abs(away[1]), 1e-9))
                centre = about + away * (reach + 7.0 + inner)
                cost = 0.12 * reach + 2.2 * (1.0 - np.cos(turn))
                if cost < least:
                    cost += self._cost(centre, half + np.array([4.0, 3.0]))
                if leader and reach > 30.0 and cost < least:
                    cost += self._crossed(about, centre, half)
                if cost < least - 1e-9:
                    best, least = centre, cost
        text = Text(lines, tuple(best), size, colour, kind, **more)
        self.drawing.items.append(text)
        box = _box(text)
        gap = np.maximum(np.maximum(np.array(box[:2]) - about, about - np.array(box[2:])), 0.0)
        if leader and np.hypot(*gap) > 30.0:
            end = np.clip(about, np.array(box[:2]), np.array(box[2:]))
            self.drawing.line(about, end, Style(stroke=colour, width=0.8), "leader")
            self.crowd = np.concatenate([self.crowd, _along(np.array([about, end]), False)])
        self.crowd = np.concatenate([self.crowd, _filled(box)])
        self.written = np.concatenate([self.written, _filled(box)])
        return text

    def _crossed(self, about: FloatArray, centre: FloatArray, half: FloatArray) -> float:
        """Return what a leader through other labels costs."""
        along = np.clip(about, centre - half, centre + half) - about
        share = np.clip((self.written - about) @ along / max(float(along @ along), 1e-9), 0.0, 1.0)
        near = np.linalg.norm(self.written - about - share[:, None] * along, axis=1)
        return 2.0 * float(np.count_nonzero(near < 4.0))

    def _cost(self, centre: FloatArray, half: FloatArray) -> float:
        low, high = centre - half, centre + half
        left, bottom, right, top = self.area
        outside = max(left - low[0], bottom - low[1], high[0] - right, high[1] - top, 0.0)
        hit = np.count_nonzero(np.all((self.crowd > low) & (self.crowd < high), axis=1))
        return 1.5 * float(hit) + 20.0 * float(outside)


def wrapped(text: str, size: float, width: float) -> list[str]:
    """Return a text as lines no wider than that [pixel]."""
    measure = drawn_width(size)
    lines: list[str] = []
    for word in text.split(" "):
        if lines and measure(f"{lines[-1]} {word}") <= width:
            lines[-1] += f" {word}"
        else:
            lines.append(word)
    return lines


def foot(drawing: Drawing, notes: Sequence[str], size: float, colour: str, margin: float = 24.0) -> float:
    """Write notes along the foot of the sheet and return the height they take [pixel]."""
    rows = [line for note in notes for line in wrapped(note, size, drawing.width - 2.0 * margin)]
    height = size * 1.35
    for row, line in enumerate(rows):
        drawing.text(line, (margin, 16.0 + height * (len(rows) - row - 0.5)), size, colour, "note", anchor="left")
    return 16.0 + height * len(rows) + 10.0


def percent(share: float, lang: str = "en") -> str:
    """Return a share in per cent, to two digits at least: 93.4 %, 4.4 %, 0.18 %."""
    value = 100.0 * share
    form = ".0f" if value > 99.9995 else ".2f" if value >= 99.95 else ".1f" if value >= 1.0 else ".2g"
    if value < 1e-4:
        value, form = 0.0 if value < 1e-9 else value, ".0f" if value < 1e-9 else ".0e"
    return f"{number(value, lang, form)} %"


def line_width(share: float, full: float) -> float:
    """Return the width of a line that carries a share of the light: by its square root, thin lines still to be seen.

    Raises
    ------
    DomainError
        If it is no share.
    """
    if not -1e-9 <= share <= 1.0 + 1e-9:
        raise DomainError(f"a share of the light is 0 to 1; got {share:g}")
    return max(0.9, full * float(np.sqrt(max(share, 0.0))))


def _along(points: FloatArray, closed: bool) -> FloatArray:
    """Return points every few pixels along a line."""
    if closed:
        points = np.concatenate([points, points[:1]])
    parts = [
        start + np.linspace(0.0, 1.0, max(2, int(np.linalg.norm(end - start) / _STEP) + 1))[:, None] * (end - start)
        for start, end in pairwise(points)
    ]
    return np.concatenate(parts)


def _filled(box: tuple[float, float, float, float]) -> FloatArray:
    """Return points all over a box: text is crowded throughout, and weighs more than lines do."""
    x, y = (np.arange(low, high + 2.0, 4.0) for low, high in ((box[0], box[2]), (box[1], box[3])))
    return np.stack(np.meshgrid(x, y), axis=-1).reshape(-1, 2)


def _box(text: Text) -> tuple[float, float, float, float]:
    width, height = text.box
    x, y = float(text.place[0]), float(text.place[1])
    left = x - width * {"left": 0.0, "middle": 0.5, "right": 1.0}[text.anchor]
    return left, y - 0.5 * height, left + width, y + 0.5 * height
