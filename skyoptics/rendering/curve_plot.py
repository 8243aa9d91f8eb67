"""Scattering curves as figures: what ``skyoptics phase --plot`` draws."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from skyoptics.crystals import arcs
from skyoptics.crystals.arc_regions import circle_radius
from skyoptics.errors import DomainError, ResourceError
from skyoptics.figures import scattering
from skyoptics.figures.scattering_lines import FEWEST_COLOURS, Plot
from skyoptics.optics import bows
from skyoptics.rendering.curve import Curve
from skyoptics.words.table import check_language, say


@dataclass(frozen=True)
class Look:
    """How a curve is drawn: `skyoptics.figures.scattering_lines.Plot`, as the command line has it."""

    scale: str = "log"
    polar: bool = False
    colour_band: bool = False
    by_part: bool = False
    errors: bool = False
    marks: bool = False
    lang: str = "en"


def check(path: Path, look: Look, wavelengths: int) -> None:
    """Refuse what cannot be drawn, before anything is worked out.

    Raises
    ------
    DomainError
        For a file of another kind, too few wavelengths for colours, an unknown language.
    ResourceError
        For a folder that is not there.
    """
    if path.suffix.lower() not in scattering.SUFFIXES:
        raise DomainError(f"--plot writes a {', '.join(scattering.SUFFIXES)} file; got {path.name}")
    if not path.parent.is_dir():
        raise ResourceError(f"{path.name}: the folder {path.parent} does not exist; make it or choose another one")
    if look.colour_band and wavelengths < FEWEST_COLOURS:
        raise DomainError(
            f"--colour-band needs {FEWEST_COLOURS} wavelengths at least, such as --wavelength-nm 450,550,650; "
            f"got {wavelengths}"
        )
    check_language(look.lang)


def draw(curve: Curve, path: Path, look: Look) -> None:
    """Write the figure of a curve.

    Parameters
    ----------
    curve : Curve
        From `skyoptics.rendering.curve`.
    path : Path
        .png, .svg or .pdf.
    look : Look
    """
    scattering.write(plotted(curve, look), path)


def plotted(curve: Curve, look: Look) -> Plot:
    """Return what is drawn of a curve.

    Raises
    ------
    DomainError
        If parts are wanted of a method that does not part the light.
    """
    table = curve.table
    source = table
    if look.by_part:
        parted = curve.parts if curve.parts is not None else curve.orders
        if parted is None:
            raise DomainError(
                "Mie theory does not part the light by order; take --method rays or airy, or no --by-order"
            )
        source = parted
    names = [_name(part, look.lang) for part in source.parts]
    errors = dict(zip(names, source.error, strict=True)) if look.errors else None
    return Plot(
        table.angle,
        table.wavelength,
        dict(zip(names, source.elements[..., 0], strict=True)),
        errors,
        closed_forms(curve, look.lang) if look.marks else (),
        _title(curve, look.lang),
        look.scale,
        look.polar,
        look.colour_band,
        look.lang,
    )


def closed_forms(curve: Curve, lang: str) -> list[tuple[float, str]]:
    """Return the closed-form angles of a curve, [rad] and name, at the mean of its indices: bows, or circles of halos."""
    index = float(np.mean(curve.index))
    found: list[tuple[float, str]] = []
    if curve.report["particle"] == "drop":
        for p in (p for p in curve.report.get("orders", (2, 3)) if 2 <= p <= 5):
            angle = float(bows.scattering_angle(index, p))
            if np.isfinite(angle):
                named = {2: "feature.primary_bow", 3: "feature.secondary_bow"}
                found.append((angle, say(named[p], lang) if p in named else say("curve.order", lang, p=p)))
        return found
    for name in () if curve.parts is None else curve.parts.parts:
        if name.startswith("halo_"):
            angle = circle_radius(arcs.feature(name).crystals[0].sequences[0], index)
            found.append((angle, say(f"feature.{name}", lang)))
    return found


def _name(part: str, lang: str) -> str:
    if part in ("other", "all"):
        return say("curve.other", lang)
    return say("curve.order", lang, p=int(part)) if part.isdigit() else say(f"feature.{part}", lang)


def _title(curve: Curve, lang: str) -> str:
    report: dict[str, Any] = curve.report
    if report["particle"] == "drop":
        return say("curve.title_drop", lang, radius=report["radius_um"], method=report["method"])
    return say("curve.title_crystal", lang, shape=report["shape"])
