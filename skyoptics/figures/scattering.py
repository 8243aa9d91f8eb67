"""Scattering curves worth printing: linear or logarithmic, over the angle or around the particle.

Lines are wavelengths in their own hues, or parts (orders of a drop, halos of crystals) in categorical colours with a dash
of their own. Below, by choice, the colour of the light in each direction as the eye would see it; above, closed-form angles.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.figures.lettering import font_of
from skyoptics.figures.palette import FAINT, GRID, INK
from skyoptics.figures.scattering_lines import Plot, colours, limits, lines, named, spreads
from skyoptics.units import DEG, FloatArray
from skyoptics.words.table import say

if TYPE_CHECKING:
    from matplotlib.figure import Figure

SUFFIXES = (".png", ".svg", ".pdf")
RESOLUTION = 200
"""Dots an inch of a PNG."""


def draw(plot: Plot) -> Figure:
    """Return the figure."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=(8.0, 8.4) if plot.polar else (10.0, 6.2), layout="constrained", facecolor="white")
    FigureCanvasAgg(figure)
    if plot.polar:
        _polar(figure, plot)
    else:
        _level(figure, plot)
    if plot.title:
        figure.suptitle(plot.title, color=INK, fontproperties=font_of(14.0, "bold"))
    return figure


def write(plot: Plot, path: Any) -> None:
    """Write the figure as .png, .svg or .pdf; the same plot is the same file.

    Raises
    ------
    DomainError
        If the file is to be of another kind.
    ResourceError
        If it cannot be written.
    """
    from pathlib import Path

    from matplotlib import rc_context

    from skyoptics.colour.images import replacing

    suffix = Path(path).suffix.lower()
    if suffix not in SUFFIXES:
        raise DomainError(f"a plot is a .png, .svg or .pdf file; got {Path(path).name}")
    own: dict[str, dict[str, Any]] = {
        ".svg": {"Date": None},
        ".pdf": {"CreationDate": None},
        ".png": {"Software": "skyoptics"},
    }
    about = {"Title": plot.title} | own[suffix]
    with replacing(path) as aside, rc_context({"svg.hashsalt": "skyoptics"}):
        draw(plot).savefig(aside, format=suffix[1:], dpi=RESOLUTION, metadata=about)


def _level(figure: Figure, plot: Plot) -> None:
    """Draw over the scattering angle."""
    rows = figure.subplots(2, 1, sharex=True, height_ratios=(12, 1)) if plot.colour_band else [figure.subplots()]
    panel = rows[0]
    angle = plot.angle / DEG
    low, high = limits(plot)
    for label, values, colour, dash in lines(plot):
        shown = np.where(values > 0.0, values, np.nan) if plot.scale == "log" else values
        panel.plot(angle, shown, color=colour, linestyle=dash, linewidth=1.6, label=label)
    _errors(panel, plot, angle)
    panel.set_yscale(plot.scale)
    panel.set_xlim(0.0, 180.0)
    room = (1.3, 12.0) if plot.marks else (1.05, 1.6)  # names of marks stand above the curves
    panel.set_ylim(*((0.7 * low, room[1] * high) if plot.scale == "log" else (0.0, room[0] * high)))
    panel.set_xticks(np.arange(0.0, 181.0, 20.0))
    panel.set_ylabel(say("curve.intensity", plot.lang), color=INK)
    panel.grid(color=GRID, linewidth=0.7)
    panel.tick_params(colors=INK)
    for mark, name in named(plot, 3.2):
        panel.axvline(mark, color=FAINT, linewidth=1.0, linestyle=(0, (2, 2)), zorder=1.5)
        box = {"facecolor": "white", "edgecolor": "none", "alpha": 0.85, "pad": 0.6}
        panel.text(
            mark,
            0.985,
            name,
            transform=panel.get_xaxis_transform(),
            rotation=90,
            ha="center",
            va="top",
            color=FAINT,
            fontproperties=font_of(8.5),
            bbox=box,
        )
    _legend(panel, plot)
    if plot.colour_band:
        band = rows[1]
        edges = np.concatenate([[0.0], 0.5 * (angle[1:] + angle[:-1]), [180.0]])
        band.pcolormesh(edges, [0.0, 1.0], colours(plot)[np.newaxis])
        band.set_yticks([])
        band.tick_params(colors=INK)
    rows[-1].set_xlabel(say("axis.scattering_angle", plot.lang), color=INK)
    figure.supxlabel(_notes(plot), color=FAINT, fontproperties=font_of(9.0))


def _errors(panel: Any, plot: Plot, angle: FloatArray) -> None:
    """Shade one standard error either side of each line."""
    for values, error, colour in spreads(plot):
        low = np.maximum(values - error, 1e-12 * values.max())
        panel.fill_between(angle, low, values + error, color=colour, alpha=0.3, linewidth=0.0)


def _polar(figure: Figure, plot: Plot) -> None:
    """Draw around the particle, light coming from the left."""
    panel: Any = figure.add_subplot(projection="polar")
    low, high = limits(plot)
    floor = np.log10(low) if plot.scale == "log" else 0.0

    def radius(values: FloatArray) -> FloatArray:
        if plot.scale == "linear":
            return values
        return np.log10(np.maximum(values, low)) - floor

    around = np.concatenate([plot.angle, 2.0 * np.pi - plot.angle[::-1]])
    for label, values, colour, dash in lines(plot):
        both = radius(np.concatenate([values, values[::-1]]))
        panel.plot(around, both, color=colour, linestyle=dash, linewidth=1.5, label=label)
    outer = float(radius(np.array([high]))[0]) * 1.05
    for values, error, colour in spreads(plot):
        low_side, high_side = (radius(np.maximum(values + sign * error, low)) for sign in (-1.0, 1.0))
        for side in (plot.angle, 2.0 * np.pi - plot.angle):
            panel.fill_between(side, low_side, high_side, color=colour, alpha=0.3, linewidth=0.0)
    if plot.colour_band:
        edges = np.concatenate([[0.0], 0.5 * (plot.angle[1:] + plot.angle[:-1]), [np.pi]])
        ring = [outer * 1.02, outer * 1.1]
        for sign in (1.0, -1.0):
            panel.pcolormesh(sign * edges, ring, colours(plot)[np.newaxis])
        outer *= 1.1
    for mark, name in named(plot, 5.0):
        panel.plot([mark * DEG] * 2, [0.0, outer], color=FAINT, linewidth=1.0, linestyle=(0, (2, 2)))
        panel.text(
            mark * DEG,
            outer * 1.17,
            name,
            ha="left" if mark < 70.0 else "right" if mark > 110.0 else "center",
            va="center",
            color=FAINT,
            fontproperties=font_of(8.5),
        )
    panel.set_ylim(0.0, outer)
    panel.set_thetagrids(np.arange(0, 360, 30), [f"{min(k, 360 - k)}°" for k in range(0, 360, 30)], color=INK)
    if plot.scale == "log":
        decades = np.arange(np.ceil(floor), np.floor(np.log10(high)) + 1.0)
        panel.set_rgrids(
            decades - floor + 1e-9, [f"{10.0**k:g}" for k in decades], angle=270.0, color=INK, fontsize=8.0
        )
    panel.grid(color=GRID, linewidth=0.7)
    told = f"{say('axis.scattering_angle', plot.lang)} · {say('curve.intensity', plot.lang)}"
    panel.set_xlabel(f"{told}\n{_notes(plot)}".rstrip(), color=INK, labelpad=14.0)
    _legend(panel, plot)


def _legend(panel: Any, plot: Plot) -> None:
    look = {"prop": font_of(9.5), "framealpha": 0.9, "edgecolor": "none", "labelcolor": INK}
    if plot.polar:
        handles, labels = panel.get_legend_handles_labels()
        panel.figure.legend(handles, labels, loc="outside lower center", ncols=min(5, len(labels)), **look)
    else:
        panel.legend(loc="upper right", **look)


def _notes(plot: Plot) -> str:
    """Return what shading and band mean."""
    told = [key for key, there in (("error", plot.errors is not None), ("band", plot.colour_band)) if there]
    return "; ".join(say(f"curve.{key}", plot.lang) for key in told)
