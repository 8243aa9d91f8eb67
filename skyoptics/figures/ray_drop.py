"""Drawings of rays through a drop: one ray, a fan around the rainbow ray, or white light in its colours.

All angles are true, in the plane of the ray. The width of a line goes with the square root of the share of the power it
carries; where light parts and the drawing follows only some of it, a pale stub says how much goes the other way.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from skyoptics.figures.angles_drawn import Labels, angle_mark, bearing, foot, line_width, meeting, percent
from skyoptics.figures.drawing_svg import Circle, Drawing, Style
from skyoptics.figures.drop_passage import HIGHEST, DropRays, Passage
from skyoptics.figures.palette import CATEGORICAL, FAINT, INK, PALE_WATER, STUB, text_colour, wavelength_colour
from skyoptics.units import DEG, FloatArray
from skyoptics.words.table import number, say

SHEET = (960.0, 720.0)
SIZE, SMALL, HEADING = 18.0, 14.5, 23.0
FULL = 7.0
"""Width of a line that carries all the light [pixel]."""


def draw(asked: DropRays) -> Drawing:
    """Return the drawing of what is asked for."""
    return _Sheet(asked).drawing


class _Sheet:
    """One drawing in the making."""

    def __init__(self, asked: DropRays) -> None:
        self.asked = asked
        self.rays = asked.passages()
        self.outgoing = _FAR if len(asked.index) > 1 else _OUTGOING
        self.main = self.rays[len(self.rays) // 2] if not asked.fan else self.rays[(asked.fan - 1) // 2]
        key = "title_fan" if asked.fan else ("title_white" if len(self.rays) > 1 else "title_ray")
        title = self._say(key, p=asked.orders[0])
        notes = self._notes()
        self.drawing = Drawing(*SHEET, title, " ".join(notes))
        self.drawing.text(title, (SHEET[0] / 2.0, SHEET[1] - 30.0), HEADING, INK, "title", weight="bold")
        low = foot(self.drawing, notes, SMALL, INK)
        self._fit(low, SHEET[1] - 52.0)
        self.drawing.items.insert(
            0, Circle(self.at([0.0, 0.0]), self.scale, Style(INK, 1.8, PALE_WATER), "drop", {"id": "drop"})
        )
        if asked.normals or asked.angles:
            self._normals()
        self.stubs = self._stubs() if len(self.rays) == 1 else []
        for ray, colour in zip(self.rays, self._colours(), strict=True):
            if not asked.fan or ray is not self.main:
                self._ray(ray, colour)
        if asked.fan:
            self._ray(self.main, CATEGORICAL[1])
        self.marks = self._angles() if asked.angles and len(self.rays) == 1 else []
        if asked.labels:
            self._labels(low)

    def _say(self, key: str, **values: Any) -> str:
        return say(f"path.{key}", self.asked.lang, **values)

    def _percent(self, share: float) -> str:
        return percent(share, self.asked.lang)

    def at(self, point: Any) -> FloatArray:
        """Return where a point of the drop's plane, in radii, lies on the sheet [pixel]."""
        return np.asarray(self.middle + self.scale * np.asarray(point, dtype=float))

    def _fit(self, low: float, high: float) -> None:
        """Choose scale and place so that everything is on the sheet, with room for labels."""
        points = [np.array([-1.0, -1.0]), np.array([1.0, 1.0])]
        for ray in self.rays:
            points.append(self._start(ray))
            points += [ray.meeting(p) + self.outgoing * ray.leaving(p) for p in self.asked.orders]
            points += [] if self.asked.angles is False else [self._crossing(ray)]
        low_corner, high_corner = np.min(points, axis=0), np.max(points, axis=0)
        room = np.array([SHEET[0] - 230.0, high - low - 84.0])
        self.scale = float(min((room / (high_corner - low_corner)).min(), 190.0))
        centre = 0.5 * (low_corner + high_corner)
        self.middle = np.array([SHEET[0] / 2.0, 0.5 * (low + high)]) - self.scale * centre

    def _start(self, ray: Passage) -> FloatArray:
        """Return where an incoming ray begins: all in one line."""
        first = min(float(one.meeting(0)[0]) for one in self.rays)
        return np.array([first - _INCOMING, float(ray.meeting(0)[1])])

    def _crossing(self, ray: Passage) -> FloatArray:
        """Return where the incoming ray, prolonged, meets the last one drawn; the centre where that is far off."""
        p = self.asked.orders[0]
        found = meeting(ray.meeting(0), [1.0, 0.0], ray.meeting(p), ray.leaving(p))
        near = found is not None and len(self.asked.orders) == 1 and np.abs(found).max() < 3.0
        return found if near and found is not None else np.zeros(2)

    def _colours(self) -> list[str]:
        if self.asked.fan:
            return [CATEGORICAL[1] if ray is self.main else CATEGORICAL[0] for ray in self.rays]
        if len(self.rays) > 1:
            return [wavelength_colour(wavelength) for wavelength in self.asked.wavelength_nm]
        return [INK]

    def _ray(self, ray: Passage, colour: str) -> None:
        """Draw one ray and all the exits asked for."""
        several = len(self.rays) > 1
        bow = self.asked.fan > 0 and ray is self.main
        thin = (0.6 if bow else 1.0) if bow or not several else min(0.45, 4.0 / len(self.rays))
        data: dict[str, Any] = {"impact": ray.impact}
        white = several and not self.asked.fan

        def style(share: float, shade: str) -> Style:
            return Style(shade, line_width(share, FULL * thin))

        entry = ray.meeting(0)
        if not white or ray is self.rays[0]:
            shade, head = INK if white else colour, 0.5 if ray in (self.main, self.rays[0], self.rays[-1]) else None
            ends = self.at(self._start(ray)), self.at(entry)
            self.drawing.ray(*ends, style(1.0, shade), "ray incoming", head, share=1.0, **data)
        top = max(self.asked.orders)
        for chord in range(1, top + 1):
            share = ray.inside(chord)
            ends = self.at(ray.meeting(chord - 1)), self.at(ray.meeting(chord))
            head = 0.55 if ray is self.main else None
            self.drawing.ray(*ends, style(share, colour), "ray inside", head, chord=chord, share=share, **data)
        for place, p in enumerate(self.asked.orders):
            shade = colour if several else self._order_colour(place)
            start, share = ray.meeting(p), ray.share(p)
            end = self.at(start + self.outgoing * ray.leaving(p))
            about = data | {"order": p, "share": share, "deviation_deg": ray.turned(p) / DEG}
            self.drawing.ray(self.at(start), end, style(share, shade), "ray exit", head=1.0, **about)

    def _order_colour(self, number: int) -> str:
        return CATEGORICAL[number % len(CATEGORICAL)]

    def _stubs(self) -> list[tuple[FloatArray, FloatArray, str]]:
        """Draw what goes another way while the light is followed: end, direction, label of each."""
        ray, result = self.main, []
        for p in range(max(self.asked.orders)):
            if p in self.asked.orders or ray.share(p) < 5e-5:
                continue
            place, along, share = ray.meeting(p), ray.leaving(p), ray.share(p)
            end = self.at(place + 0.42 * along)
            style = Style(STUB, line_width(share, FULL))
            self.drawing.ray(self.at(place), end, style, "ray stub", head=1.0, order=p, share=share)
            key = "stub_out" if p else "stub_reflected"
            result.append((end + 8.0 * along, along, self._say(key, share=self._percent(share))))
        return result

    def _normals(self) -> None:
        for ray in self.rays if len(self.rays) == 1 else [self.main]:
            for k in range(max(self.asked.orders) + 1):
                place = ray.meeting(k)
                ends = self.at(0.45 * place), self.at(1.42 * place)
                self.drawing.line(*ends, Style(FAINT, 1.2, dash=(7.0, 5.0)), "normal", meeting=k)

    def _angles(self) -> list[tuple[FloatArray, float, str]]:
        """Mark the angles: where, direction from the vertex, label."""
        ray, marks = self.main, []
        style = Style(CATEGORICAL[3], 1.8)
        top = max(self.asked.orders)
        inner = [self.at(ray.meeting(k)) for k in range(top + 1)]
        reach = 0.26 * self.scale

        def mark(vertex: FloatArray, normal: float, ray_to: float, key: str, size: float = reach) -> None:
            turn = float(np.angle(np.exp(1j * (ray_to - normal))))
            if abs(turn) < 0.5 * DEG:
                return
            middle = angle_mark(self.drawing, vertex, normal, turn, size, style, angle_deg=abs(turn) / DEG)
            text = self._say(key, angle=abs(turn) / DEG)
            marks.append((middle, normal + 0.5 * turn, text))

        for k in range(top + 1):
            outwards = bearing(ray.meeting(k))
            if k == 0:
                mark(inner[0], outwards, np.pi, "incidence")
                if 0 in self.asked.orders:
                    mark(inner[0], outwards, bearing(ray.leaving(0)), "incidence", 1.25 * reach)
            if k < top:
                mark(inner[k], outwards + np.pi, bearing(inner[k + 1] - inner[k]), "refraction")
            if k > 0:
                mark(inner[k], outwards + np.pi, bearing(inner[k - 1] - inner[k]), "refraction", 1.2 * reach)
                if k in self.asked.orders:
                    mark(inner[k], outwards, bearing(ray.leaving(k)), "incidence")
        crossing = self._crossing(ray)
        if np.any(crossing):
            self._deviation(crossing, marks)
        return marks

    def _deviation(self, crossing: FloatArray, marks: list[tuple[FloatArray, float, str]]) -> None:
        """Mark the total deviation where the first and the last ray, prolonged, meet."""
        ray, p = self.main, self.asked.orders[0]
        vertex, dotted = self.at(crossing), Style(CATEGORICAL[2], 1.2, dash=(2.0, 4.0))
        self.drawing.line(self.at(ray.meeting(0)), vertex, dotted, "prolonged")
        self.drawing.line(self.at(ray.meeting(p)), vertex, dotted, "prolonged")
        self.drawing.line(vertex, vertex + np.array([0.45 * self.scale, 0.0]), dotted, "prolonged")
        turn = ray.turned(p) * (1.0 if p == 0 else -1.0)
        style, angle = Style(CATEGORICAL[2], 1.8), abs(turn) / DEG
        middle = angle_mark(self.drawing, vertex, 0.0, turn, 0.3 * self.scale, style, deviation_deg=angle)
        marks.append((middle, 0.5 * turn, self._say("deviation", angle=angle)))

    def _labels(self, low: float) -> None:
        labels = Labels(self.drawing, (12.0, low, SHEET[0] - 12.0, SHEET[1] - 54.0))
        start = self.at(self._start(self.main))
        sun = self._say("sun" if len(self.asked.index) == 1 else "white_sun")
        labels.put([sun, self._percent(1.0)], start, SIZE, INK, "label incoming", towards=np.pi)
        for place, p in enumerate(self.asked.orders):
            along = self.main.leaving(p)
            end = self.at(self.main.meeting(p) + self.outgoing * along) + 8.0 * along
            colour = INK if len(self.rays) > 1 else self._order_colour(place)
            lines = self._exit_lines(p)
            labels.put(
                lines,
                end,
                SIZE,
                text_colour(colour),
                "label exit",
                towards=bearing(along),
                weight="bold",
                data={"order": p},
            )
        for end, along, text in self.stubs:
            labels.put(text, end, SMALL, INK, "label stub", towards=bearing(along))
        said: list[str] = []
        for middle, towards, text in self.marks:
            # equal angles follow from the circle: each is written twice at most
            if said.count(text) < 2:
                labels.put(text, middle, SMALL, INK, "label angle", towards=towards)
                said.append(text)

    def _exit_lines(self, p: int) -> list[str]:
        first = self._say("exit", p=p, share=self._percent(self.main.share(p)))
        if self.asked.fan:
            angle = self.main.turned(p) / DEG
            return [self._say("rainbow_ray", b=self.main.impact), self._say("least", angle=angle)]
        if len(self.rays) > 1:
            ends = ((self.rays[k], self.asked.wavelength_nm[k]) for k in (0, -1))
            found = [self._say("colour", wavelength=w, angle=one.turned(p) / DEG) for one, w in ends]
            return [first, *found]
        return [first, self._say("turned", angle=self.main.turned(p) / DEG)]

    def _notes(self) -> list[str]:
        ray, asked = self.main, self.asked
        drawn = sum(ray.share(p) for p in asked.orders)
        which = f" ({number(asked.wavelength_nm[0], asked.lang)} nm)" if len(asked.wavelength_nm) == 1 else ""
        others: Sequence[str] = [
            f"p = {p}: {self._percent(ray.share(p))}" for p in range(HIGHEST) if p not in asked.orders
        ][:4]
        named = drawn + sum(ray.share(p) for p in [p for p in range(HIGHEST) if p not in asked.orders][:4])
        others = [*others, self._say("further", share=self._percent(max(1.0 - named, 0.0)))]
        told = {
            "drawn": self._percent(drawn),
            "rest": self._percent(max(1.0 - drawn, 0.0)),
            "others": ", ".join(others),
        }
        if asked.fan:
            ends = {"low": self.rays[0].impact, "high": self.rays[-1].impact, "count": asked.fan}
            angle = ray.turned(asked.orders[0]) / DEG
            first = self._say("about_fan", n=ray.index, which=which, angle=angle, **ends)
            return [first, self._say("shares_fan", **told) + " " + self._say("partial")]
        if len(self.rays) > 1:
            ends = {"low": min(asked.index), "high": max(asked.index)}
            ends |= {"red": max(asked.wavelength_nm), "violet": min(asked.wavelength_nm)}
            middle = asked.wavelength_nm[len(self.rays) // 2]
            first = self._say("about_white", b=ray.impact, middle=middle, **ends)
        else:
            angles = {"i": ray.incidence / DEG, "r": ray.refraction / DEG}
            first = self._say("about", b=ray.impact, n=ray.index, which=which, **angles)
        return [first, self._say("shares", **told), self._say("partial")]


_INCOMING, _OUTGOING, _FAR = 1.15, 1.25, 2.6
"""Lengths of rays outside [radius]; colours part so slowly that they are followed farther."""
