"""Scattering curves as tables to print: what ``skyoptics phase`` works out.

Columns: wavelength_nm, angle_deg (bin centre), intensity (phase function, mean over the bin; mean 1 over the sphere for
all orders together, so chosen orders keep their share; no diffraction in ray curves), polarization = (I⊥ − I∥) / (I⊥ + I∥)
to the scattering plane, intensity_error (one standard error), index (real, at this wavelength). Crystals add two columns
for each named halo that has light, and for "other": its own part of the intensity, and the polarization of that part.
"""

from __future__ import annotations

import json
import sys
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.light.disc import sun_disc
from skyoptics.materials import index as material
from skyoptics.optics.axisymmetric import over_disc
from skyoptics.optics.bins import Bins
from skyoptics.optics.table import ScatteringTable
from skyoptics.rendering.run import usable_cores
from skyoptics.rendering.scatter import ICE_INDEX, QUALITY, Progress, silent
from skyoptics.units import CELSIUS_ZERO, DEG, NM, UM, FloatArray

COLUMNS = ("wavelength_nm", "angle_deg", "intensity", "polarization", "intensity_error", "index")


@dataclass(frozen=True)
class DropCurve:
    """What is asked of a drop's curve; human units, as the command line gives them."""

    radius_um: float = 500.0
    method: str = "rays"
    spread: float = 0.0
    wavelength_nm: tuple[float, ...] = (450.0, 550.0, 650.0)
    temperature_c: float = 20.0
    index: float | None = None
    medium: str = "air"
    orders: tuple[int, ...] | None = None
    step_deg: float = 0.1
    disc: bool = False
    quality: str = "normal"
    seed: int = 1
    threads: int | None = None


@dataclass(frozen=True)
class CrystalCurve:
    """What is asked of the curve of randomly oriented crystals; human units, as the command line gives them."""

    shape: str = "prism"
    aspect: float | None = None
    pyramid_upper: float | None = None
    pyramid_lower: float | None = None
    trigonality: float | None = None
    miller: tuple[int, int, int, int] = (1, 0, -1, 1)
    face_distances: tuple[float, ...] | None = None
    aspect_spread: float = 0.0
    distance_spread: float = 0.0
    diameter_um: float = 100.0
    diffraction: bool = False
    angle_spread_deg: float = 0.0
    extraordinary_index: float | None = None
    birefringence: bool = False
    wavelength_nm: tuple[float, ...] = (450.0, 550.0, 650.0)
    index: float | None = None
    medium: str = "air"
    step_deg: float = 0.1
    disc: bool = False
    quality: str = "normal"
    seed: int = 1
    threads: int | None = None


@dataclass(frozen=True, eq=False)
class Curve:
    """A curve, ready to be written.

    Parameters
    ----------
    table : ScatteringTable
        One part: the chosen orders together.
    index : ndarray, shape (nλ,)
        Real refractive index at each wavelength.
    report : dict
        Asymmetry, energies by order, absorbed, cut off, …; JSON types.
    """

    table: ScatteringTable
    index: Any
    report: dict[str, Any]
    parts: ScatteringTable | None = None
    """The same by named halo; None for drops."""
    orders: ScatteringTable | None = None
    """The same by order of a drop's light; None for crystals and Mie theory."""


def drop(asked: DropCurve, progress: Progress = silent) -> Curve:
    """Return the curve of drops by rays or waves.

    Parameters
    ----------
    asked : DropCurve
        What is wanted.
    progress : callable
        Told about batches.

    Raises
    ------
    DomainError
        If the physics refuses a value.
    """
    from skyoptics.droplets import angles, geometric, waves
    from skyoptics.droplets.sizes import Gaussian, Single

    bins = Bins.lines(np.array(asked.wavelength_nm) * NM)
    if asked.index is not None:
        law = material.constant(asked.index)
    else:
        law = material.water(asked.temperature_c + CELSIUS_ZERO, asked.medium)
    edges = angles.uniform_edges(asked.step_deg * DEG)
    radius = asked.radius_um * UM
    sizes = Gaussian(radius, asked.spread) if asked.spread > 0.0 else Single(radius)
    method, reason = asked.method, "asked for"
    if method == "auto":
        method, reason = waves.choose_method(sizes, law, bins, asked.orders)
    if method == "mie" and asked.orders is not None:
        raise DomainError(
            "Mie theory does not part the light by order; take --method rays or airy, or leave --orders out"
        )
    target = QUALITY[asked.quality]
    with _threads(asked.threads) as executor:
        shared: dict[str, Any] = {
            "seed": asked.seed,
            "executor": executor,
            "progress": lambda done, total: progress("working out the curve", done, total),
        }
        if method == "rays":
            whole = geometric.scattering_table(law, radius, bins, edges=edges, relative_error=target, **shared)
        else:
            whole = waves.scattering_table(sizes, law, bins, method=method, angles=edges, tolerance=target, **shared)
    orders = tuple(range(11)) if asked.orders is None else asked.orders
    kept = whole.select([str(order) for order in orders]) if "2" in whole.parts else None
    table = _in_bins(whole.total(), edges) if kept is None else kept.total()
    report: dict[str, Any] = {
        "method": method,
        "reason": reason,
        "warnings": list(waves.warnings(method, sizes, law, bins)),
        "particle": "drop",
        "radius_um": asked.radius_um,
        "spread": asked.spread,
    }
    if "2" in whole.parts:
        report["orders"] = list(orders)
        report["energy_by_order"] = whole.report["energy"]
    found = _curve(table, whole, law, bins, asked, report)
    if kept is not None and asked.disc:
        kept = over_disc(kept, sun_disc(bins), kept.angle)
    return replace(found, orders=kept)


def _in_bins(table: ScatteringTable, edges: FloatArray) -> ScatteringTable:
    """Return a table of nodes at bin edges as means over the bins."""
    return replace(
        table,
        angle=0.5 * (edges[1:] + edges[:-1]),
        elements=0.5 * (table.elements[:, 1:] + table.elements[:, :-1]),
        error=0.5 * (table.error[:, 1:] + table.error[:, :-1]),
        edges=edges,
    )


def crystal(asked: CrystalCurve, progress: Progress = silent) -> Curve:
    """Return the curve of randomly oriented crystals by ray optics.

    Parameters
    ----------
    asked : CrystalCurve
        What is wanted.
    progress : callable
        Told about batches.

    Raises
    ------
    DomainError
        If the physics refuses a value.
    """
    from skyoptics.crystals import habits
    from skyoptics.crystals import table as tables
    from skyoptics.crystals.prepared import Imperfections
    from skyoptics.crystals.sorting import sorter
    from skyoptics.rendering.clouds import BIREFRINGENCE, shapes_of

    bins = Bins.lines(np.array(asked.wavelength_nm) * NM)
    law = material.constant(asked.index) if asked.index is not None else material.ice(asked.medium)
    split = 0.0
    if asked.extraordinary_index is not None:
        if asked.index is None or asked.birefringence:
            raise DomainError(
                "--extraordinary-index goes with --index, the ordinary one; for that of ice take --birefringence"
            )
        split = asked.extraordinary_index - asked.index
    elif asked.birefringence:
        if asked.index is not None:
            raise DomainError("--birefringence is that of ice; beside --index take --extraordinary-index")
        split, law = BIREFRINGENCE, material.shifted(law, -BIREFRINGENCE / 3.0)
    shapes = shapes_of(asked)
    with _threads(asked.threads) as executor:
        whole = tables.scattering_table(
            shapes,
            law,
            bins,
            size=asked.diameter_um * UM if asked.diffraction else 0.0,
            imperfections=Imperfections(asked.angle_spread_deg * DEG, split, asked.diffraction),
            sorter=sorter(shapes[0].face_normals, "random", 0.0, ICE_INDEX),
            count=max(2, round(180.0 / asked.step_deg)),
            seed=asked.seed,
            relative_error=QUALITY[asked.quality],
            executor=executor,
            progress=lambda done, total: progress("tracing", done, total),
        )
    report: dict[str, Any] = {"method": "rays", "particle": "crystal", "shape": asked.shape}
    report["crystals"] = len(shapes)
    report["crystal"] = habits.describe(shapes[0])
    report |= {name: whole.report[name] for name in ("scattered", "straight_on", "below_cutoff", "roulette")}
    report["share_by_halo"] = dict(zip(whole.parts, whole.energy().tolist(), strict=True))
    return _curve(whole, whole, law, bins, asked, report)


def draw(asked: CrystalCurve, path: Path, say: Callable[[str], Any]) -> None:
    """Draw the crystal asked for into a PNG or SVG file, and say what it is."""
    from skyoptics.crystals import habits
    from skyoptics.figures.crystal import draw as draw_crystal
    from skyoptics.rendering.clouds import habit_of

    if path.suffix.lower() not in (".png", ".svg"):
        raise DomainError(f"a drawing is a .png or .svg file; got {path.name}")
    shape = habits.shape(habit_of(asked))
    draw_crystal(shape, path, title=shape.label)
    about = ", ".join(f"{name.replace('_', ' ')} {value:.6g}" for name, value in habits.describe(shape).items())
    say(f"{path}: {shape.label}; in units of the diameter across corners: {about}")


@contextmanager
def _threads(number: int | None) -> Iterator[ThreadPoolExecutor]:
    """Give a pool that drops what waits when the work is stopped."""
    with ThreadPoolExecutor(number or usable_cores()) as executor:
        try:
            yield executor
        except BaseException:
            executor.shutdown(wait=True, cancel_futures=True)
            raise


def _curve(
    table: ScatteringTable,
    whole: ScatteringTable,
    law: material.RefractiveIndex,
    bins: Bins,
    asked: DropCurve | CrystalCurve,
    report: dict[str, Any],
) -> Curve:
    """Put a curve under the sun's disc where that is asked for, and finish its report."""
    if asked.disc:
        table = over_disc(table, sun_disc(bins), table.angle)
    parts = table if isinstance(asked, CrystalCurve) else None
    table = table.total()
    shown = table.elements[0, :, :, 0]
    for name in ("absorbed", "cut_off", "rays", "relative_error"):
        if name in whole.report:
            report[name] = whole.report[name]
    report |= {
        "wavelength_nm": list(asked.wavelength_nm),
        "index": law(bins.centre).real.tolist(),
        "medium": asked.medium if asked.index is None else "as given by --index",
        "disc": asked.disc,
        "asymmetry": whole.asymmetry.tolist(),
        "brightest_deg": [float(table.angle[row] / DEG) for row in shown.argmax(axis=0)],
        "seed": asked.seed,
    }
    return Curve(table, law(bins.centre).real, report, parts)


def lines(curve: Curve) -> Iterator[str]:
    """Yield the curve as CSV lines, the header first."""
    names = () if curve.parts is None else curve.parts.parts
    yield ",".join([*COLUMNS, *(column for name in names for column in (name, f"{name}_polarization"))])
    angle = [f"{value / DEG:.9g}" for value in curve.table.angle]
    elements = curve.table.elements[0]
    for column, wavelength in enumerate(curve.table.wavelength):
        intensity = elements[:, column, 0]
        polarization = _polarization(elements[:, column])
        own = [] if curve.parts is None else [part[:, column] for part in curve.parts.elements]
        more = [(part[:, 0], _polarization(part)) for part in own]
        error = curve.table.error[0, :, column]
        label, index = f"{wavelength / NM:.6g}", f"{curve.index[column]:.9g}"
        for row in range(len(angle)):
            yield (
                f"{label},{angle[row]},{intensity[row]:.7g},{polarization[row]:.6f},{error[row]:.3g},{index}"
                + "".join(f",{part[row]:.7g},{share[row]:.6f}" for part, share in more)
            )


def _polarization(elements: FloatArray) -> FloatArray:
    """Return −P12 / P11, 0 where there is no light."""
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.where(elements[:, 0] > 0.0, -elements[:, 1] / elements[:, 0], 0.0)


def put_out(curve: Curve, csv: Path | None, as_json: bool, say: Callable[[str], Any]) -> None:
    """Write the curve and say what it is; with `csv` "-" the curve itself goes to stdout."""
    if csv is not None and str(csv) == "-":
        say("\n".join(lines(curve)))
    elif csv is not None:
        from skyoptics.colour.images import replacing

        with replacing(csv) as aside, aside.open("w", encoding="utf-8", newline="\n") as file:
            file.writelines(f"{line}\n" for line in lines(curve))
    if as_json:
        say(json.dumps(curve.report))
    elif csv is None or str(csv) != "-":
        for warning in curve.report.get("warnings", ()):
            sys.stderr.write(f"note: {warning}\n")
        if "reason" in curve.report:
            say(f"method {curve.report['method']}: {curve.report['reason']}")
        say("wavelength   index      brightest at   asymmetry")
        rows = zip(
            curve.table.wavelength, curve.index, curve.report["brightest_deg"], curve.table.asymmetry, strict=True
        )
        for wavelength, index, angle, asymmetry in rows:
            say(f"{wavelength / NM:7.1f} nm   {index:.5f}   {angle:9.3f}°     {asymmetry:.4f}")
        if csv is not None:
            say(str(csv))
