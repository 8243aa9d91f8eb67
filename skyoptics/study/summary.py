"""The study on one page of Markdown."""

from __future__ import annotations

from math import isfinite

import numpy as np

from skyoptics.study.result import Study
from skyoptics.units import NM

MOST_ROWS = 12
"""Steps in the table at most."""
NAMES = {"radius_um": "radius [µm]", "rain_mm_h": "rain [mm/h]", "spread": "spread", "temperature_c": "water [°C]"}


def markdown(study: Study, command: str = "") -> str:
    """Return the page: what was asked, a table at the middle wavelength, differences, what a finer sweep would change."""
    asked = study.question
    middle = len(asked.wavelength_nm) // 2
    first = study.steps[0]
    index = float(first.law(np.array([asked.wavelength_nm[middle] * NM])).real.item())
    lines = [
        "# Droplet-size study",
        "",
        f"{len(study.steps)} steps of {NAMES[asked.sweep]} from {study.steps[0].value:g} to {study.steps[-1].value:g}; "
        f"methods {', '.join(asked.methods)}; {len(asked.wavelength_nm)} wavelengths, {asked.wavelength_nm[0]:g} to "
        f"{asked.wavelength_nm[-1]:g} nm; {first.law.label}, n = {index:.5f} at {asked.wavelength_nm[middle]:g} nm; "
        f"{_drops(study)}; {'averaged over the sun’s disc' if asked.disc else 'a point for a sun'}.",
        "",
        *([f"    {command}", ""] if command else []),
        f"## At {asked.wavelength_nm[middle]:g} nm",
        "",
        f"| {NAMES[asked.sweep]} | method | bow [°] | width [°] | supernumeraries [°] | contrast | secondary/primary | "
        "polarisation | largest purity |",
        "|---" * 9 + "|",
    ]
    places = sorted({round(p) for p in np.linspace(0, len(study.steps) - 1, min(len(study.steps), MOST_ROWS))})
    for s in places:
        for m, method in enumerate(asked.methods):
            one = study.metrics[m][s][middle]
            others = ", ".join(f"{one.supernumerary(k):.2f}" for k in (1, 2) if isfinite(one.supernumerary(k))) or "–"
            cells = [f"{study.steps[s].value:.4g}", method, _text(one.bow_angle, 3), _text(one.width, 3), others]
            cells += [_text(one.contrast, 3), _text(one.secondary_over_primary, 3), _text(one.polarization, 3)]
            cells.append(_text(float(study.largest_purity[m, s]), 3))
            lines.append("| " + " | ".join(cells) + " |")
    lines += [
        "",
        "Definitions of all metrics: `skyoptics.study.metrics`; colours are those of sunlight above the air.",
        "",
    ]
    lines += ["![Metrics](metrics.png)", "", "![Colours](colours.png)", "", "## Accuracy", ""]
    for m, method in enumerate(asked.methods):
        change = study.report["halving_the_step"][method]
        error = float(study.error[m].max())
        text = f"- **{method}**: " + (f"relative error of the size average at most {error:.2g}; " if error else "")
        if isfinite(change["bow_angle_deg"]):
            text += (
                f"a step half as wide would change the bow angle by {change['bow_angle_deg']:.2g}°, the width by "
                f"{_text(change['width_deg'], 3)}°, colours by ΔE2000 {change['delta_e']:.2g} at most"
            )
        else:
            text += "too few steps to say what finer ones would change"
        if m > 0:
            text += (
                f"; against {asked.methods[0]} ΔE2000 is {float(np.mean(study.difference[m])):.2g} in the mean, "
                f"{float(np.max(study.difference[m])):.2g} at most over the map"
            )
        lines.append(text + ".")
    if study.warnings:
        lines += ["", "## Limits met", "", *(f"- {note}" for note in study.warnings)]
    lines += [
        "",
        "Files: study.csv (all metrics), study.nc (metrics and maps), metrics.png, colours.png, chromaticity.png, curves.png.",
    ]
    return "\n".join(lines) + "\n"


def _drops(study: Study) -> str:
    asked = study.question
    if asked.rain_mm_h:
        return "Marshall–Palmer spectra"
    spread = "" if asked.sweep == "spread" else f", spread {asked.spread[0]:g} (Gaussian)"
    radius = "" if asked.sweep == "radius_um" else f", radius {asked.radius_um[0]:g} µm"
    return f"round drops{radius}{spread}"


def _text(value: float, digits: int) -> str:
    return f"{value:.{digits}f}" if isfinite(value) else "–"
