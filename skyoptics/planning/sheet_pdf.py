"""A plan on one page of A4, to print and take along."""

from __future__ import annotations

import math
import textwrap
import warnings
from typing import Any

from skyoptics.planning.answers import Meeting, Plan, Window
from skyoptics.planning.days import offset
from skyoptics.planning.rows import headings, minutes, rows, summary
from skyoptics.planning.words import degrees, direction, feet
from skyoptics.units import DEG

WIDTH_MM, HEIGHT_MM = 210.0, 297.0
"""A4, upright (ISO 216)."""
MOST_ROWS = 31
"""Rows on the page; a longer list goes into CSV or the calendar."""

_PATCH = {"facecolor": "white", "edgecolor": "none", "pad": 0.8}  # keeps lines out of letters
_FEW_ROWS = 12
_MARGIN = 15.0  # [mm]
_SIDE = 66.0  # of a compass [mm]
_INK, _FAINT, _BAND = "#1a1a1a", "#5c5c5c", "#f0f0ee"
_COLOURS = {"body": "#b35900", "crown": "#00589b", "feet": "#00589b", "subject": "#8a1c5c"}  # each ≥ 4.5:1 on white


def write(plan: Plan, body: str = "sun") -> bytes:
    """Return a plan as a PDF page.

    Parameters
    ----------
    plan : Plan
        The answer.
    body : {"sun", "moon"}
        What lights the feature.

    Returns
    -------
    bytes
        One page: headings, a compass of the first window or meeting, the table (its first 31 rows), cautions.
    """
    import io

    from matplotlib import rc_context
    from matplotlib.backends.backend_pdf import FigureCanvasPdf
    from matplotlib.figure import Figure

    with (
        rc_context({"pdf.fonttype": 3, "font.family": "DejaVu Sans", "text.parse_math": False}),
        warnings.catch_warnings(),
    ):
        warnings.filterwarnings("ignore", message="Glyph .* missing from font")  # drawn as a box, which says so itself
        figure = Figure(figsize=(WIDTH_MM / 25.4, HEIGHT_MM / 25.4))
        FigureCanvasPdf(figure)
        page = _Page(figure)
        _head(page, plan, body)
        _compasses(page, plan, body)
        _table(page, plan, body)
        _foot(page, plan)
        buffer = io.BytesIO()
        title, where, _ = headings(plan, body)
        figure.savefig(
            buffer, format="pdf", metadata={"Title": f"{title}, {where}", "Creator": "skyoptics", "CreationDate": None}
        )
    return buffer.getvalue()


class _Page:
    """A page with millimetres from its top left corner."""

    def __init__(self, figure: Any) -> None:
        self.figure = figure
        self.y = _MARGIN

    def text(self, x: float, y: float, words: str, size: float = 9.0, **style: Any) -> None:
        """Set a text with its top at y."""
        style = {"color": _INK, "va": "top", "ha": "left", **style}
        self.figure.text(x / WIDTH_MM, 1.0 - y / HEIGHT_MM, words, fontsize=size, **style)

    def line(self, y: float, width: float = 0.6) -> None:
        """Draw a line from margin to margin."""
        from matplotlib.lines import Line2D

        ends = [_MARGIN / WIDTH_MM, 1.0 - _MARGIN / WIDTH_MM]
        height = 1.0 - y / HEIGHT_MM
        self.figure.add_artist(Line2D(ends, [height, height], color=_INK, linewidth=width))

    def band(self, y: float, height: float) -> None:
        """Tint a row."""
        from matplotlib.patches import Rectangle

        corner = (_MARGIN / WIDTH_MM, 1.0 - (y + height) / HEIGHT_MM)
        size = (1.0 - 2.0 * _MARGIN / WIDTH_MM, height / HEIGHT_MM)
        self.figure.add_artist(Rectangle(corner, *size, facecolor=_BAND, edgecolor="none", zorder=-1))


def _head(page: _Page, plan: Plan, body: str) -> None:
    """Set the headings."""
    title, where, when = headings(plan, body)
    page.text(_MARGIN, page.y, _cut(plan.title, 60), 18.0, weight="bold")
    page.y += 10.0
    radius = title.removeprefix(plan.title).strip(" ()")
    lines = [*([radius] if radius else []), where, when, summary(plan, body)]
    for row in [row for line in lines for row in textwrap.wrap(line, 104)]:
        page.text(_MARGIN, page.y, row, 9.5)
        page.y += 5.0


def _compasses(page: _Page, plan: Plan, body: str) -> None:
    """Draw the directions at the first meeting or window, and at the second where the list leaves room."""
    entries: tuple[Window | Meeting, ...] = plan.windows if plan.subject is None else plan.meetings
    page.y += 3.0
    for k, entry in enumerate(entries[: 2 if len(entries) <= _FEW_ROWS else 1]):
        _compass(page, plan, entry, body)
        for j, (words, style) in enumerate(_facts(plan, entry, body, ("First", "Second")[k])):
            page.text(_MARGIN + _SIDE + 8.0, page.y + 4.0 + 5.6 * j, words, 9.5, **style)
        page.y += _SIDE + 2.0


def _compass(page: _Page, plan: Plan, entry: Window | Meeting, body: str) -> None:
    """Draw a compass seen from above, with lines toward what matters."""
    at = entry.best
    axes = page.figure.add_axes(
        (_MARGIN / WIDTH_MM, 1.0 - (page.y + _SIDE) / HEIGHT_MM, _SIDE / WIDTH_MM, _SIDE / HEIGHT_MM)
    )
    axes.set(xlim=(-1.36, 1.36), ylim=(-1.36, 1.36), aspect="equal")
    axes.set_axis_off()
    ticks: tuple[list[float], list[float]] = [], []
    for turn in range(0, 360, 10):
        inner = 0.92 if turn % 30 == 0 else 0.96
        for line, way in zip(ticks, (math.sin(turn * DEG), math.cos(turn * DEG)), strict=True):
            line += [inner * way, way, math.nan]
    axes.plot(*ticks, color=_FAINT, linewidth=0.6)
    circle = [k * DEG for k in range(361)]
    axes.plot([math.sin(t) for t in circle], [math.cos(t) for t in circle], color=_INK, linewidth=0.9)
    for name, turn in (("N", 0), ("E", 90), ("S", 180), ("W", 270)):
        x, y = 0.78 * math.sin(turn * DEG), 0.78 * math.cos(turn * DEG)
        axes.text(x, y, name, color=_INK, fontsize=9, ha="center", va="center", zorder=4, bbox=_PATCH)
    marks = [(at.sun_azimuth_deg, "body", body, "-", 2.0), (at.crown_azimuth_deg, "crown", "crown", "-", 2.0)]
    marks += [(azimuth, "feet", "foot", "--", 1.4) for azimuth in at.foot_azimuths_deg]
    if plan.subject is not None:
        marks.insert(0, (plan.subject.azimuth_deg, "subject", "subject", ":", 2.0))
    taken: list[float] = []
    for azimuth, kind, label, dash, width in marks:
        x, y = math.sin(azimuth * DEG), math.cos(azimuth * DEG)
        axes.plot([0.0, x], [0.0, y], color=_COLOURS[kind], linestyle=dash, linewidth=width)
        if all(abs((azimuth - other + 180.0) % 360.0 - 180.0) > 9.0 for other in taken):
            side = "center" if abs(x) < 0.3 else "left" if x > 0.0 else "right"
            axes.text(1.05 * x, 1.12 * y, label, color=_COLOURS[kind], fontsize=8, ha=side, va="center")
            taken.append(azimuth)


def _facts(plan: Plan, entry: Window | Meeting, body: str, place: str) -> list[tuple[str, dict[str, Any]]]:
    """Return what stands beside the compass."""
    at = entry.best
    kind = "window" if isinstance(entry, Window) else "meeting"
    start, best, end = minutes(entry)
    lines: list[tuple[str, dict[str, Any]]] = [
        (f"{place} {kind}, directions seen from above", {"weight": "bold"}),
        (f"best {best:%a %Y-%m-%d %H:%M} (UTC{offset(best)})", {}),
        (f"from {start:%H:%M} to {end:%H:%M}", {}),
        (f"{body}: {direction(at.sun_azimuth_deg)}, {degrees(at.sun_elevation_deg)} high", {"color": _COLOURS["body"]}),
        (
            f"crown: {direction(at.crown_azimuth_deg)}, {degrees(at.crown_elevation_deg)} high",
            {"color": _COLOURS["crown"]},
        ),
    ]
    if at.foot_azimuths_deg:
        lines.append((f"feet on the horizon: {feet(at)}", {"color": _COLOURS["feet"]}))
    if plan.subject is not None:
        subject = plan.subject
        lines.append(
            (
                f"subject: {direction(subject.azimuth_deg)}, {degrees(subject.elevation_deg)} high",
                {"color": _COLOURS["subject"]},
            )
        )
    lines.append((f"above the horizon: {100.0 * at.share_up:.0f} % of its length", {}))
    if isinstance(entry, Meeting):
        lines.append((f"nearest to the subject: {entry.distance_deg:.2f}°", {}))
    elif entry.weak:
        lines.append((f"weak: the {body} is within 1° of a limit", {}))
    return lines


def _table(page: _Page, plan: Plan, body: str) -> None:
    """Set the rows."""
    found = rows(plan, body)
    if not found.cells:
        return
    shown = found.cells[:MOST_ROWS]
    lines = [found.columns, *(cells for cells in shown if len(cells) > 1)]
    widths = [max(len(line[k]) for line in lines) for k in range(len(found.columns))]
    room = (WIDTH_MM - 2.0 * _MARGIN - 2.0) / (sum(widths) + 2.0 * (len(widths) - 1))
    edges = [_MARGIN + 1.0]
    for width in widths:
        edges.append(edges[-1] + (width + 2.0) * room)
    height = 4.0

    def put(cells: tuple[str, ...], y: float, **style: Any) -> None:
        for k, cell in enumerate(cells):
            x, side = (edges[k + 1] - 2.0 * room, "right") if k else (edges[k], "left")
            page.text(x, y + 0.7, cell, 8.0, ha=side, **style)

    put(found.columns, page.y, weight="bold")
    page.y += height + 0.6
    page.line(page.y - 0.3)
    for k, cells in enumerate(shown):
        if k % 2:
            page.band(page.y, height)
        put(cells, page.y)
        page.y += height
    page.line(page.y + 0.3)
    page.y += 1.5
    rest = len(found.cells) - len(shown)
    more = [f"{rest} more not shown: write them with --csv or --ics."] if rest else []
    for row in [row for line in (*more, *found.legend) for row in textwrap.wrap(line, 120)][:6]:
        page.text(_MARGIN, page.y, row, 7.5, color=_FAINT)
        page.y += 3.7


def _foot(page: _Page, plan: Plan) -> None:
    """Set cautions as far as they fit, from the bottom."""
    lines: list[str] = []
    for note in plan.notes:
        wrapped = textwrap.wrap(note, 118)
        lines += [f"–  {wrapped[0]}", *(f"    {line}" for line in wrapped[1:])]
    step = 3.8
    y = max(page.y + 2.0, HEIGHT_MM - _MARGIN - step * len(lines))
    for line in lines:
        if y > HEIGHT_MM - 8.0:
            break
        page.text(_MARGIN, y, line, 7.5)
        y += step


def _cut(text: str, most: int) -> str:
    """Return a text, or its beginning with an ellipsis."""
    return text if len(text) <= most else text[: most - 1].rstrip() + "…"
