"""Drawings of a named arc's ray through the crystal that makes it, as it floats.

Up to three views share a scale: perspective; along the c-axis; across the plane of the ray where it stays in one, and there
(or where the view along the axis is that one) all angles are true. The width of a line goes with the square root of the
share of the power it carries; pale stubs are light that goes another way; total reflection has none, and is named.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from skyoptics.figures.angles_drawn import Labels, angle_mark, bearing, foot, line_width, percent
from skyoptics.figures.crystal_passage import Meeting, Passage
from skyoptics.figures.crystal_views import View, extent, track, views
from skyoptics.figures.drawing_svg import Circle, Drawing, Shape, Style
from skyoptics.figures.palette import CATEGORICAL, FAINT, INK, PALE_ICE, STUB
from skyoptics.units import DEG, FloatArray
from skyoptics.words.table import number, say

SIZE, SMALL, HEADING = 17.0, 15.0, 23.0
FULL = 6.0
"""Width of a line that carries all the light [pixel]."""
RAY = CATEGORICAL[1]
"""Colour of the ray that is followed."""
PANEL, MARGIN, TALLEST = 430.0, 62.0, 560.0
"""Width of a panel, room for labels around what it shows, greatest height of that [pixel]."""


@dataclass(frozen=True)
class CrystalRay:
    """What is asked for.

    Parameters
    ----------
    passage : Passage
        From `skyoptics.figures.crystal_passage.passage`.
    wavelength_nm : float, optional
        Told in the notes.
    normals, angles, labels : bool
        Whether they are drawn; angles need normals and bring them along. Angles are marked where they are true.
    lang : str
        Language of the words.
    """

    passage: Passage
    wavelength_nm: float | None = None
    normals: bool = False
    angles: bool = False
    labels: bool = True
    lang: str = "en"

    def say(self, key: str, **values: Any) -> str:
        """Return words in the language asked for."""
        return say(key, self.lang, **values)


def draw(asked: CrystalRay) -> Drawing:
    """Return the drawing of what is asked for."""
    passage, shown = asked.passage, views(asked.passage)
    arc = asked.say(f"feature.{passage.entry.name}")
    title = asked.say("path.title_crystal", arc=arc[0].upper() + arc[1:], sun=passage.sun_elevation / DEG)
    notes = _notes(asked)
    width = PANEL * len(shown) if len(shown) > 2 else 1.15 * PANEL * len(shown)
    panel = width / len(shown)
    boxes = [_box(passage, view) for view in shown]
    size = np.max([high - low for low, high in boxes], axis=0)
    scale = float(min((panel - 2.3 * MARGIN) / size[0], TALLEST / size[1]))
    drawing = Drawing(width, 0.0, title, " ".join(notes))
    low = foot(drawing, notes, SMALL, INK)
    drawing.height = float(round(low + 40.0 + 2.0 * MARGIN + scale * size[1] + 50.0))
    top = drawing.height - 50.0
    drawing.text(title, (width / 2.0, drawing.height - 28.0), HEADING, INK, "title", weight="bold")
    for column, (view, (lowest, highest)) in enumerate(zip(shown, boxes, strict=True)):
        middle = np.array([(column + 0.5) * panel, 0.5 * (low + 40.0 + top)])
        area = (column * panel + 6.0, low + 40.0, (column + 1) * panel - 6.0, top)
        _Panel(asked, drawing, view, scale, middle - scale * 0.5 * (lowest + highest), area).show()
        key = "axis_true" if view.name == "axis" and view.true else view.name
        drawing.text(asked.say(f"path.{key}"), (middle[0], low + 20.0), SIZE, INK, "caption", weight="bold")
    return drawing


def _box(passage: Passage, view: View) -> tuple[FloatArray, FloatArray]:
    """Return the lower left and upper right corner of what a view shows."""
    corners = np.concatenate(passage.shape.faces) @ passage.rotation.T
    flat = view.flat(np.concatenate([corners, track(passage)]))
    return flat.min(axis=0), flat.max(axis=0)


def _notes(asked: CrystalRay) -> list[str]:
    passage = asked.passage
    azimuth, elevation = passage.seen
    lang = asked.lang
    which = "" if asked.wavelength_nm is None else f" ({number(asked.wavelength_nm, lang)} nm)"
    told = {"elevation": elevation / DEG, "azimuth": abs(azimuth) / DEG, "deviation": passage.deviation / DEG}
    law = asked.say(f"path.law_{passage.crystals.law}")
    if passage.entry.tilt > 0.0:
        law += " " + asked.say("path.tilted", tilt=passage.entry.tilt / DEG)
    faces = []
    for place, one in enumerate(passage.meetings, start=1):
        part = one.share_after / max(one.share_before, 1e-300)
        key = "totally" if one.total else one.does
        told_here = {
            "label": one.face,
            "i": one.incidence / DEG,
            "r": one.refraction / DEG,
            "part": percent(part, lang),
        }
        faces.append(f"{place}. " + asked.say(f"path.{key}", **told_here))
    share = passage.meetings[-1].share_after
    return [
        law + " " + asked.say("path.seen", n=passage.index, which=which, **told),
        *faces,
        asked.say("path.shares_crystal", share=percent(share, lang), rest=percent(max(1.0 - share, 0.0), lang)),
    ]


class _Panel:
    """One view on the sheet."""

    def __init__(
        self,
        asked: CrystalRay,
        drawing: Drawing,
        view: View,
        scale: float,
        origin: FloatArray,
        area: tuple[float, float, float, float],
    ) -> None:
        self.asked, self.passage, self.drawing, self.view = asked, asked.passage, drawing, view
        self.scale, self.origin, self.area = scale, origin, area
        self.unit = extent(self.passage.shape)

    def at(self, points: Any) -> FloatArray:
        """Return where world places lie on the sheet [pixel], shape (m, 2)."""
        return np.asarray(self.origin + self.scale * self.view.flat(np.asarray(points, dtype=float)))

    def spot(self, point: Any) -> FloatArray:
        """Return where one world place lies on the sheet, shape (2,)."""
        return np.asarray(self.at(point)[0])

    def show(self) -> None:
        """Draw the view."""
        shape, turn = self.passage.shape, self.passage.rotation
        self.normals = shape.face_normals @ turn.T
        self.corners = [own @ turn.T for own in shape.faces]
        self.seen = self.view.faces_eye(self.normals, self.corners)
        first = len(self.drawing.items)
        self._crystal()
        if self.asked.normals or self.asked.angles:
            self._normals()
        self._stubs()
        self._way()
        marks = self._angles() if self.asked.angles and self.view.true else []
        up = self._up() if self.view.upright else None
        if self.asked.labels:
            self._labels(first, marks, up)

    def _crystal(self) -> None:
        for own, seen in zip(self.corners, self.seen, strict=True):
            if seen and len(own):
                self.drawing.items.append(Shape(self.at(own), Style(fill=PALE_ICE), "face", closed=True))
        edges = [(any(self.seen[face] for face in edge.faces), edge) for edge in self.passage.shape.edges]
        for front, edge in sorted(edges, key=lambda one: one[0]):
            ends = self.at(edge.corners @ self.passage.rotation.T)
            if np.linalg.norm(ends[1] - ends[0]) < 0.3:
                continue
            style = Style(INK, 1.6) if front else Style(FAINT, 1.0, dash=(5.0, 4.0))
            self.drawing.line(ends[0], ends[1], style, "edge" if front else "edge hidden")

    def _normals(self) -> None:
        for one in self.passage.meetings:
            ends = self.at(one.place + np.outer([-0.3, 0.42], one.normal) * self.unit)
            if np.linalg.norm(ends[1] - ends[0]) > 6.0:
                self.drawing.line(ends[0], ends[1], Style(FAINT, 1.2, dash=(7.0, 5.0)), "normal", face=one.face)

    def _stubs(self) -> None:
        """Draw light that goes another way."""
        for one in self.passage.meetings:
            share = one.share_before - one.share_after
            if one.other is None or share < 5e-5:
                continue
            ends = self.at([one.place, one.place + 0.24 * self.unit * one.other])
            self.drawing.ray(
                ends[0], ends[1], Style(STUB, line_width(share, FULL)), "ray stub", head=1.0, face=one.face, share=share
            )

    def _way(self) -> None:
        meetings, way = self.passage.meetings, self.at(track(self.passage))
        shares = [1.0, *(one.share_after for one in meetings)]
        for step in range(len(way) - 1):
            kind = "incoming" if step == 0 else "exit" if step == len(way) - 2 else "inside"
            head = 1.0 if kind == "exit" else 0.55
            style = Style(RAY, line_width(shares[step], FULL))
            data: dict[str, Any] = {"view": self.view.name, "step": step, "share": shares[step]}
            self.drawing.ray(way[step], way[step + 1], style, f"ray {kind}", head, **data)
        for one in meetings:
            self.drawing.items.append(Circle(self.spot(one.place), 3.4, Style(fill=INK), "meeting", {"face": one.face}))

    def _angles(self) -> list[tuple[FloatArray, float, str]]:
        marks = []
        way = self.at(track(self.passage))
        length = np.linalg.norm(np.diff(way, axis=0), axis=1)
        for step, one in enumerate(self.passage.meetings):
            vertex, outwards = self.spot(one.place), bearing(self.view.turn[:2] @ one.normal)
            leaves = one.does == "leaves"
            before = outwards if one.does in ("enters", "mirrors") else outwards + np.pi
            ways = [(before, -one.before, min(46.0, 0.4 * length[step]))]
            after = outwards if leaves or one.does == "mirrors" else outwards + np.pi
            ways.append((after, one.after, min(46.0, 0.4 * length[step + 1])))
            for normal, way, radius in ways:
                turn = float(np.angle(np.exp(1j * (bearing(self.view.turn[:2] @ way) - normal))))
                if abs(turn) < 0.5 * DEG:
                    continue
                style, angle = Style(CATEGORICAL[3], 1.8), abs(turn) / DEG
                middle = angle_mark(self.drawing, vertex, normal, turn, radius, style, face=one.face, angle_deg=angle)
                marks.append((middle, normal + 0.5 * turn, self.asked.say("mark.angle", angle=angle)))
        return marks

    def _up(self) -> FloatArray:
        """Draw the arrow that says which way is up, and return its tip."""
        foot_place = np.array([self.area[0] + 30.0, self.area[1] + 14.0])
        tip = foot_place + np.array([0.0, 44.0])
        self.drawing.ray(foot_place, tip, Style(INK, 1.5), "up", head=1.0)
        return tip

    def _labels(self, first: int, marks: list[tuple[FloatArray, float, str]], up: FloatArray | None) -> None:
        labels = Labels(self.drawing, self.area, first)
        if up is not None:
            labels.put(self.asked.say("path.up"), up, SMALL, INK, "label", towards=0.0, leader=False)
        way = self.at(track(self.passage))
        labels.put(
            self.asked.say("path.from_sun"), way[0], SIZE, INK, "label incoming", towards=bearing(way[0] - way[1])
        )
        lines = [self.asked.say("path.eye"), percent(self.passage.meetings[-1].share_after, self.asked.lang)]
        tip = way[-1] + 8.0 * (way[-1] - way[-2]) / max(float(np.linalg.norm(way[-1] - way[-2])), 1e-9)
        labels.put(lines, tip, SIZE, RAY, "label exit", towards=bearing(way[-1] - way[-2]), weight="bold")
        named: set[int] = set()
        for one in self.passage.meetings:
            if one.face not in named:
                named.add(one.face)
                self._name(labels, one)
            if one.total:
                inwards = bearing(self.view.turn[:2] @ one.normal) if not self._edge_on(one) else np.pi / 2.0
                labels.put(
                    self.asked.say("path.total"),
                    self.spot(one.place),
                    SMALL,
                    CATEGORICAL[3],
                    "label total",
                    towards=inwards,
                )
        for middle, towards, text in marks:
            labels.put(text, middle, SMALL, INK, "label angle", towards=towards)

    def _edge_on(self, one: Meeting) -> bool:
        return bool(np.linalg.norm(self.view.turn[:2] @ one.normal) < 0.05)

    def _name(self, labels: Labels, one: Meeting) -> None:
        """Write the number of a face beside its middle."""
        face = int(np.argmax(self.normals @ one.normal))
        flat = self.at(self.corners[face])
        outwards = self.view.turn[:2] @ one.normal
        towards = bearing(outwards) if np.linalg.norm(outwards) > 0.05 else -np.pi / 2.0
        middle = flat.mean(axis=0)
        if not self.seen[face]:  # edge-on: where the ray is not
            middle = 0.5 * (middle + max(flat, key=lambda corner: float(np.linalg.norm(corner - self.spot(one.place)))))
        text = self.asked.say("path.face", label=one.face)
        labels.put(text, middle, SMALL, INK, "label face", towards=towards, data={"face": one.face})
