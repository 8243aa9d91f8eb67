"""A drawing as a list of lines, shapes and texts, written as SVG or PNG.

Coordinates are in pixels of the sheet, x to the right and y *up*, origin in its lower left corner; the SVG's own y runs
down. SVG files hold plain ``<line>``, ``<polyline>``, ``<polygon>``, ``<circle>`` and ``<text>`` elements without any
transform, coordinates to 1e-6 pixel, so that every angle can be measured from them. The same list is painted as PNG.
"""

from __future__ import annotations

import xml.etree.ElementTree as ET
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, TypeAlias

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.figures.lettering import LINE, drawn_width, font_of
from skyoptics.units import FloatArray

FONTS = "DejaVu Sans, Verdana, Arial, Helvetica, sans-serif"
"""Families of an SVG's texts: the one measured with, its kin of equal widths, then any."""
RESOLUTION = 144
"""Dots of a PNG for 72 pixels of the sheet."""
SUFFIXES = (".svg", ".png")

_SVG = "http://www.w3.org/2000/svg"
Point: TypeAlias = Any
"""x and y [pixel]."""


@dataclass(frozen=True)
class Style:
    """How a thing is painted; widths in pixels."""

    stroke: str | None = None
    width: float = 1.0
    fill: str | None = None
    dash: tuple[float, ...] = ()
    opacity: float = 1.0


@dataclass(frozen=True)
class Shape:
    """A line through points.

    Parameters
    ----------
    points : array_like, shape (m, 2)
        Two points make a ``<line>``.
    style : Style
    kind : str
        Class in the SVG.
    data : mapping
        Written as ``data-…`` attributes; the key ``id`` as id.
    closed : bool
        A polygon.
    """

    points: Any
    style: Style
    kind: str
    data: Mapping[str, Any] = field(default_factory=dict)
    closed: bool = False


@dataclass(frozen=True)
class Circle:
    """A circle; arguments as for `Shape`."""

    centre: Point
    radius: float
    style: Style
    kind: str
    data: Mapping[str, Any] = field(default_factory=dict)


@dataclass(frozen=True)
class Text:
    """Lines of text about a point: its middle in height, and by `anchor` its left, middle or right."""

    lines: tuple[str, ...]
    place: Point
    size: float
    colour: str
    kind: str
    anchor: str = "middle"
    weight: str = "normal"
    data: Mapping[str, Any] = field(default_factory=dict)

    @property
    def box(self) -> tuple[float, float]:
        """Width and height [pixel]."""
        measure = drawn_width(self.size, self.weight)
        return max(measure(line) for line in self.lines), self.size * (0.9 + LINE * (len(self.lines) - 1))

    def baselines(self) -> list[float]:
        """Return the heights of the lines' baselines."""
        top = float(self.place[1]) + 0.5 * LINE * self.size * (len(self.lines) - 1) - 0.36 * self.size
        return [top - LINE * self.size * row for row in range(len(self.lines))]


Item: TypeAlias = Shape | Circle | Text


@dataclass
class Drawing:
    """What is drawn, the first item below the others.

    Parameters
    ----------
    width, height : float
        Of the sheet [pixel].
    title, description : str
        For screen readers and the metadata.
    """

    width: float
    height: float
    title: str
    description: str = ""
    items: list[Item] = field(default_factory=list)

    def line(self, start: Point, end: Point, style: Style, kind: str, **data: Any) -> None:
        """Add a straight line."""
        self.items.append(Shape(np.array([start, end], dtype=float), style, kind, data))

    def ray(self, start: Point, end: Point, style: Style, kind: str, head: float | None = 0.55, **data: Any) -> None:
        """Add a straight line with an arrow's head, its middle that share of the way along; none for None."""
        self.line(start, end, style, kind, **data)
        start, end = np.asarray(start, dtype=float), np.asarray(end, dtype=float)
        length = float(np.linalg.norm(end - start))
        size = 7.5 + 1.6 * style.width
        if head is None or length < 1.2 * size:
            return
        along = (end - start) / length
        across = np.array([-along[1], along[0]])
        tip = start + along * min(max(head * length + 0.5 * size, size), length + (0.5 * size if head >= 1.0 else 0.0))
        corners = [tip, tip - size * along + 0.42 * size * across, tip - size * along - 0.42 * size * across]
        self.items.append(
            Shape(np.array(corners), Style(fill=style.stroke, opacity=style.opacity), "arrowhead", closed=True)
        )

    def text(self, lines: str | Sequence[str], place: Point, size: float, colour: str, kind: str, **more: Any) -> Text:
        """Add text, and return it."""
        item = Text((lines,) if isinstance(lines, str) else tuple(lines), place, size, colour, kind, **more)
        self.items.append(item)
        return item

    def write(self, path: str | Path) -> None:
        """Write a .svg or .png file; the same drawing is the same file.

        Raises
        ------
        DomainError
            If the file is to be of another kind.
        ResourceError
            If it cannot be written.
        """
        from skyoptics.colour.images import replacing

        suffix = Path(path).suffix.lower()
        if suffix not in SUFFIXES:
            raise DomainError(f"a drawing is a .svg or .png file; got {Path(path).name}")
        with replacing(path) as aside:
            if suffix == ".svg":
                aside.write_text(svg(self), encoding="utf-8", newline="\n")
            else:
                _paint(self, aside)


def svg(drawing: Drawing) -> str:
    """Return a drawing as the text of an SVG file."""
    ET.register_namespace("", _SVG)
    root = ET.Element(
        f"{{{_SVG}}}svg",
        {
            "width": f"{drawing.width:g}",
            "height": f"{drawing.height:g}",
            "viewBox": f"0 0 {drawing.width:g} {drawing.height:g}",
            "role": "img",
            "aria-labelledby": "title desc",
            "font-family": FONTS,
        },
    )
    ET.SubElement(root, f"{{{_SVG}}}title", {"id": "title"}).text = drawing.title
    ET.SubElement(root, f"{{{_SVG}}}desc", {"id": "desc"}).text = drawing.description
    ET.SubElement(root, f"{{{_SVG}}}rect", {"width": "100%", "height": "100%", "fill": "#ffffff", "class": "paper"})
    for item in drawing.items:
        if isinstance(item, Text):
            _write_text(root, item, drawing.height)
        elif isinstance(item, Circle):
            x, y = _down(item.centre, drawing.height)
            _element(root, "circle", item, {"cx": x, "cy": y, "r": _number(item.radius)})
        else:
            places = [_down(point, drawing.height) for point in np.asarray(item.points)]
            if len(places) == 2 and not item.closed:
                (x1, y1), (x2, y2) = places
                _element(root, "line", item, {"x1": x1, "y1": y1, "x2": x2, "y2": y2})
            else:
                name = "polygon" if item.closed else "polyline"
                _element(root, name, item, {"points": " ".join(f"{x},{y}" for x, y in places)})
    ET.indent(root)
    return f'<?xml version="1.0" encoding="UTF-8"?>\n{ET.tostring(root, encoding="unicode")}\n'


def _element(root: ET.Element, name: str, item: Shape | Circle, attributes: dict[str, str]) -> None:
    style = item.style
    about = {"class": item.kind, **_data(item.data), **attributes, "fill": style.fill or "none"}
    if style.stroke is not None:
        about |= {"stroke": style.stroke, "stroke-width": f"{style.width:.3f}"}
        about |= {"stroke-linejoin": "round"} | ({} if style.dash else {"stroke-linecap": "round"})
    if style.dash:
        about["stroke-dasharray"] = " ".join(f"{step:g}" for step in style.dash)
    if style.opacity < 1.0:
        about["opacity"] = f"{style.opacity:g}"
    ET.SubElement(root, f"{{{_SVG}}}{name}", about)


def _write_text(root: ET.Element, item: Text, height: float) -> None:
    anchor = {"left": "start", "middle": "middle", "right": "end"}[item.anchor]
    about = {"class": item.kind, **_data(item.data), "fill": item.colour, "font-size": f"{item.size:g}"}
    about |= {"text-anchor": anchor, "stroke": "#ffffff", "stroke-width": "3", "paint-order": "stroke"}
    about |= {"stroke-linejoin": "round"} | ({} if item.weight == "normal" else {"font-weight": item.weight})
    places = [_down((item.place[0], y), height) for y in item.baselines()]
    if len(item.lines) == 1:
        ET.SubElement(root, f"{{{_SVG}}}text", about | {"x": places[0][0], "y": places[0][1]}).text = item.lines[0]
        return
    element = ET.SubElement(root, f"{{{_SVG}}}text", about)
    for line, (x, y) in zip(item.lines, places, strict=True):
        ET.SubElement(element, f"{{{_SVG}}}tspan", {"x": x, "y": y}).text = line


def _data(data: Mapping[str, Any]) -> dict[str, str]:
    named = {key: f"{value:.9g}" if isinstance(value, float) else str(value) for key, value in data.items()}
    return {key if key == "id" else f"data-{key.replace('_', '-')}": value for key, value in named.items()}


def _down(point: Point, height: float) -> tuple[str, str]:
    return _number(float(point[0])), _number(height - float(point[1]))


def _number(value: float) -> str:
    return f"{value:.6f}".rstrip("0").rstrip(".")


def figure(drawing: Drawing) -> Any:
    """Return a drawing as a matplotlib figure, a pixel of the sheet a point."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure
    from matplotlib.patches import Circle as Disc
    from matplotlib.patches import Polygon
    from matplotlib.patheffects import withStroke

    result = Figure(figsize=(drawing.width / 72.0, drawing.height / 72.0), dpi=RESOLUTION, facecolor="white")
    FigureCanvasAgg(result)
    axes = result.add_axes((0.0, 0.0, 1.0, 1.0))
    axes.set(xlim=(0.0, drawing.width), ylim=(0.0, drawing.height))
    axes.set_axis_off()
    for order, item in enumerate(drawing.items):
        if isinstance(item, Text):
            align = {"left": "left", "middle": "center", "right": "right"}[item.anchor]
            halo = [withStroke(linewidth=3.0, foreground="white")]
            font = {"fontproperties": font_of(item.size, item.weight), "color": item.colour, "path_effects": halo}
            for line, y in zip(item.lines, item.baselines(), strict=True):
                # a dollar sign is one, no formula
                axes.text(item.place[0], y, line, ha=align, va="baseline", zorder=order, parse_math=False, **font)
            continue
        style = item.style
        paint: dict[str, Any] = {"facecolor": style.fill or "none", "edgecolor": style.stroke or "none"}
        paint |= {"linewidth": style.width if style.stroke else 0.0, "alpha": style.opacity, "zorder": order}
        # matplotlib counts dashes in widths of the line
        dashes: Any = (0.0, tuple(step / max(style.width, 1e-9) for step in style.dash)) if style.dash else "-"
        if isinstance(item, Circle):
            axes.add_patch(Disc(tuple(item.centre), item.radius, linestyle=dashes, **paint))
        elif item.closed:
            axes.add_patch(Polygon(np.asarray(item.points), linestyle=dashes, joinstyle="round", **paint))
        else:
            ends: dict[str, Any] = {"solid_capstyle": "round", "solid_joinstyle": "round", "linestyle": dashes}
            colour: dict[str, Any] = {
                "color": style.stroke,
                "linewidth": style.width,
                "alpha": style.opacity,
                "zorder": order,
            }
            axes.plot(*np.asarray(item.points, dtype=np.float64).T, **ends, **colour)
    return result


def _paint(drawing: Drawing, path: Path) -> None:
    about = {"Title": drawing.title, "Description": drawing.description, "Software": "skyoptics"}
    figure(drawing).savefig(path, format="png", metadata=about)


def as_points(values: Any) -> FloatArray:
    """Return places as an array of floats, shape (m, 2)."""
    return np.asarray(values, dtype=np.float64).reshape(-1, 2)
