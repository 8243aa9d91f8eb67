"""Plots of a study (matplotlib figures, no pyplot)."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from skyoptics.figures.palette import CATEGORICAL, wavelength_colour
from skyoptics.study import colours
from skyoptics.study.result import Study
from skyoptics.units import DEG

if TYPE_CHECKING:
    from matplotlib.figure import Figure

LABELS = {
    "radius_um": "radius [µm]",
    "rain_mm_h": "rain rate [mm/h]",
    "spread": "spread of radius [1]",
    "temperature_c": "temperature [°C]",
}
STYLES = ("-", "--", ":")
MOST_LINES = 5
"""Wavelengths drawn in one panel at most."""


def figures(study: Study) -> dict[str, Figure]:
    """Return the figures by name."""
    return {
        "metrics": metrics(study),
        "colours": colour_map(study),
        "chromaticity": chromaticity(study),
        "curves": curves(study),
    }


def metrics(study: Study) -> Figure:
    """Return six metrics against the swept value, a colour a wavelength and a style a method."""
    figure = _figure(11.0, 7.0)
    panels = figure.subplots(2, 3)
    what: tuple[tuple[str, Any], ...] = (
        ("bow angle [°]", lambda one: one.bow_angle),
        ("width [°]", lambda one: one.width),
        ("first supernumerary less bow [°]", lambda one: one.supernumerary(1) - one.bow_angle),
        ("contrast to the dark band [1]", lambda one: one.contrast),
        ("secondary / primary [1]", lambda one: one.secondary_over_primary),
        ("polarisation at the bow [1]", lambda one: one.polarization),
    )
    value = [step.value for step in study.steps]
    shown = _some(len(study.question.wavelength_nm), 3)
    for panel, (label, read) in zip(panels.flat, what, strict=True):
        found = study.metric(read)
        for m, method in enumerate(study.question.methods):
            for w in shown:
                wavelength = study.question.wavelength_nm[w]
                panel.plot(
                    value,
                    found[m, :, w],
                    STYLES[m],
                    marker="." if len(value) < 40 else None,
                    color=wavelength_colour(wavelength),
                    label=f"{method}, {wavelength:g} nm",
                )
        panel.set(xlabel=LABELS[study.question.sweep], ylabel=label)
        _axis(panel, study)
        panel.grid(alpha=0.3)
    handles, labels = panels.flat[0].get_legend_handles_labels()
    figure.legend(handles, labels, loc="outside lower center", ncols=min(len(labels), 6), frameon=False)
    return figure


def colour_map(study: Study) -> Figure:
    """Return the colours against scattering angle and swept value, a panel a method; each row as bright as it gets."""
    figure = _figure(5.0 * len(study.question.methods) + 1.0, 5.0)
    panels = np.atleast_1d(figure.subplots(1, len(study.question.methods), sharey=True))
    value = np.array([step.value for step in study.steps])
    angle = study.map_angle / DEG
    for m, (panel, method) in enumerate(zip(panels, study.question.methods, strict=True)):
        picture = colours.shown(study.map_xyz[m], study.white)
        panel.pcolormesh(_edges(angle, False), _edges(value, _ratios(study)), picture)
        panel.set(xlabel="scattering angle [°]", title=method)
        _axis(panel, study, vertical=True)
        if m == 0:
            panel.set_ylabel(LABELS[study.question.sweep])
    return figure


def chromaticity(study: Study) -> Figure:
    """Return the paths of chromaticity across the bow, between dark band and first fringes, with the spectral locus."""
    from skyoptics.colour import observer

    figure = _figure(5.0 * len(study.question.methods) + 1.0, 5.0)
    panels = np.atleast_1d(figure.subplots(1, len(study.question.methods), sharey=True))
    locus = colours.chromaticity(observer.matching_functions()[1])
    locus = locus[np.all(np.isfinite(locus), axis=1)]
    white = colours.chromaticity(study.white)
    for m, (panel, method) in enumerate(zip(panels, study.question.methods, strict=True)):
        panel.plot(*np.concatenate([locus, locus[:1]]).T, color="0.7", linewidth=1.0)
        panel.plot(*white, "k+")
        for number, s in enumerate(_some(len(study.steps), MOST_LINES)):
            xy = colours.chromaticity(study.map_xyz[m, s])
            panel.plot(*xy.T, color=CATEGORICAL[number], linewidth=1.0, label=f"{study.steps[s].value:.4g}")
        panel.set(xlabel="x", ylabel="y" if m == 0 else "", title=method, aspect="equal")
        panel.legend(title=LABELS[study.question.sweep], fontsize="small", frameon=False)
    return figure


def curves(study: Study) -> Figure:
    """Return intensity against scattering angle at the middle wavelength, for some steps."""
    figure = _figure(8.0, 5.0)
    panel = figure.subplots()
    w = len(study.question.wavelength_nm) // 2
    for number, s in enumerate(_some(len(study.steps), MOST_LINES)):
        for m, method in enumerate(study.question.methods):
            panel.semilogy(
                study.map_angle / DEG,
                study.map_intensity[m, s, w],
                STYLES[m],
                color=CATEGORICAL[number],
                linewidth=1.0,
                label=f"{study.steps[s].value:.4g}, {method}",
            )
    panel.set(
        xlabel="scattering angle [°]",
        ylabel="differential scattering ÷ extinction [1/sr]",
        title=f"{study.question.wavelength_nm[w]:g} nm",
    )
    panel.grid(alpha=0.3)
    panel.legend(title=LABELS[study.question.sweep], fontsize="small", frameon=False)
    return figure


def _figure(width: float, height: float) -> Figure:
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    figure = Figure(figsize=(width, height), layout="constrained", dpi=120)
    FigureCanvasAgg(figure)
    return figure


def _ratios(study: Study) -> bool:
    return study.question.sweep in ("radius_um", "rain_mm_h")


def _axis(panel: Any, study: Study, vertical: bool = False) -> None:
    """Make the axis of the swept value logarithmic where its steps are ratios."""
    if not _ratios(study) or len(study.steps) < 2:
        return
    from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter

    (panel.set_yscale if vertical else panel.set_xscale)("log")
    axis = panel.yaxis if vertical else panel.xaxis
    axis.set_major_locator(LogLocator(subs=(1.0, 2.0, 5.0)))
    axis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axis.set_minor_formatter(NullFormatter())


def _edges(middle: Any, ratios: bool) -> Any:
    """Return the edges of cells around their middles."""
    if len(middle) == 1:
        return middle[0] * np.array([0.99, 1.01]) if middle[0] else np.array([-0.01, 0.01])
    x = np.log(middle) if ratios else np.asarray(middle)
    between = 0.5 * (x[1:] + x[:-1])
    edges = np.concatenate([[1.5 * x[0] - 0.5 * x[1]], between, [1.5 * x[-1] - 0.5 * x[-2]]])
    return np.exp(edges) if ratios else edges


def _some(count: int, most: int) -> list[int]:
    """Return up to `most` places spread over 0 … count − 1."""
    return sorted({round(place) for place in np.linspace(0, count - 1, min(count, most))})
