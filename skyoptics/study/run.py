"""The study itself, and its Python face.

```python
from skyoptics.study.run import run

study = run(radius_um="10:1000:24", method="mie,airy", spread=0.05)
study.dataset()["bow_angle"]                       # xarray: (method, step, wavelength) [degree]
study.save("outputs/drop-size")                    # study.csv, study.nc, study.md, plots
```
"""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from math import nan

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.optics.table import ScatteringTable
from skyoptics.study import colours
from skyoptics.study.curves import Curves, cell_means, curves, window
from skyoptics.study.metrics import BowMetrics, measure
from skyoptics.study.question import DEFAULT_WAVELENGTHS, Question, Step, values
from skyoptics.study.report import report
from skyoptics.study.result import Progress, Study
from skyoptics.units import DEG, FloatArray

MAP_STEP = 0.05 * DEG
"""Step of the colour maps [rad]."""


def run(
    radius_um: str | float | Sequence[float] | None = None,
    method: str | Sequence[str] = ("mie", "airy"),
    spread: str | float | Sequence[float] = 0.05,
    wavelength_nm: str | float | Sequence[float] | None = None,
    *,
    rain_mm_h: str | float | Sequence[float] | None = None,
    temperature_c: str | float | Sequence[float] = 20.0,
    index: float | None = None,
    medium: str = "air",
    disc: bool = False,
    map_deg: tuple[float, float] = (130.0, 150.0),
    tolerance: float = 0.02,
    threads: int | None = None,
    progress: Progress | None = None,
) -> Study:
    """Run a droplet-size study.

    Parameters
    ----------
    radius_um : str, float or sequence
        Radii of the drops [µm]: one, several, or "start:stop:steps" in even ratios.
    method : str or sequence of str
        Of "mie", "airy", "rays"; others are compared with the first.
    spread : str, float or sequence
        Gaussian, standard deviation ÷ radius [1]; 0 for one size.
    wavelength_nm : str, float or sequence, optional
        In vacuum [nm]; default 400:700:31.
    rain_mm_h : str, float or sequence, optional
        Rain rates [mm h⁻¹] instead of radii: Marshall & Palmer's spectra, cut at 4 mm radius.
    temperature_c : str, float or sequence
        Of the water [°C].
    index : float, optional
        Constant refractive index instead of that of water.
    medium : str
        "air" or "vacuum": what the water's index is relative to.
    disc : bool
        Average over the sun's disc.
    map_deg : (float, float)
        Scattering angles of the colour maps [°].
    tolerance : float
        Relative error of size averages (root mean square over angle).
    threads : int, optional
        Default all cores; results do not depend on it.
    progress : callable, optional
        Told (stage, done, total).

    Returns
    -------
    Study

    Raises
    ------
    DomainError
        Before anything is computed, if a value is out of range or more than one quantity is swept.

    Examples
    --------
    >>> study = run(radius_um=[250, 500], method="airy", spread=0, wavelength_nm=600, index=1.3333333)
    >>> [round(row["bow_angle_deg"], 2) for row in study.rows()]
    [138.49, 138.3]
    """
    asked = question(
        radius_um,
        method,
        spread,
        wavelength_nm,
        rain_mm_h=rain_mm_h,
        temperature_c=temperature_c,
        index=index,
        medium=medium,
        disc=disc,
        map_deg=map_deg,
        tolerance=tolerance,
    )
    return answer(asked, threads, progress)


def question(
    radius_um: str | float | Sequence[float] | None = None,
    method: str | Sequence[str] = ("mie", "airy"),
    spread: str | float | Sequence[float] = 0.05,
    wavelength_nm: str | float | Sequence[float] | None = None,
    *,
    rain_mm_h: str | float | Sequence[float] | None = None,
    temperature_c: str | float | Sequence[float] = 20.0,
    index: float | None = None,
    medium: str = "air",
    disc: bool = False,
    map_deg: tuple[float, float] = (130.0, 150.0),
    tolerance: float = 0.02,
) -> Question:
    """Return the checked question that `run` answers; arguments as there."""
    names = tuple(word.strip() for word in method.split(",")) if isinstance(method, str) else tuple(method)
    if radius_um is None and rain_mm_h is None:
        raise DomainError('a study needs radius_um or rain_mm_h, such as radius_um="10:1000:24"')
    return Question(
        radius_um=() if radius_um is None else values("radius_um", radius_um),
        rain_mm_h=() if rain_mm_h is None else values("rain_mm_h", rain_mm_h),
        spread=values("spread", spread),
        temperature_c=values("temperature_c", temperature_c),
        methods=names,
        wavelength_nm=DEFAULT_WAVELENGTHS
        if wavelength_nm is None
        else tuple(sorted(values("wavelength_nm", wavelength_nm))),
        index=index,
        medium=medium,
        disc=disc,
        map_deg=map_deg,
        tolerance=tolerance,
    )


def answer(asked: Question, threads: int | None = None, progress: Progress | None = None) -> Study:
    """Return the study that answers a question; arguments as `run`."""
    from skyoptics.rendering.run import usable_cores

    steps = asked.steps()
    low, high = (value * DEG for value in asked.map_deg)
    map_angle = np.linspace(low, high, round((high - low) / MAP_STEP) + 1)
    half = 0.5 * (map_angle[1] - map_angle[0])
    edges = np.append(map_angle - half, map_angle[-1] + half)
    shape = (len(asked.methods), len(steps), len(asked.wavelength), len(map_angle))
    intensity, polarization = np.empty(shape), np.empty(shape)
    error = np.zeros(shape[:2])
    metrics: list[list[tuple[BowMetrics, ...]]] = [[] for _ in asked.methods]
    notes: dict[str, list[str]] = {}
    traced: dict[str, ScatteringTable] = {}
    # what a step costs goes as radius; so does what is told
    work = [step.radius_um for step in steps for _ in asked.methods]
    done = 0.0
    with ThreadPoolExecutor(threads or usable_cores()) as executor:
        for s, step in enumerate(steps):
            for m, method in enumerate(asked.methods):
                found = curves(asked, step, method, executor, traced)
                metrics[m].append(_measured(asked, step, found))
                across = cell_means(found.angle, found.perpendicular, edges)
                along = cell_means(found.angle, found.parallel, edges)
                intensity[m, s] = across + along
                polarization[m, s] = (across - along) / (across + along)
                error[m, s] = found.error
                for note in found.warnings:
                    kind = f"{method}: " + " ".join(note.split()[:3])
                    notes.setdefault(kind, []).append(f"{method}: {note}")
                done += step.radius_um
                if progress is not None:
                    progress("scattering", round(1000 * done), round(1000 * sum(work)))
    weights = colours.sunlight(asked.wavelength)
    white = colours.light(asked.wavelength)
    xyz = np.moveaxis(intensity, 2, -1) @ weights
    bright = xyz[..., 1] >= 0.1 * xyz[..., 1].max(axis=-1, keepdims=True)
    white_xy = colours.chromaticity(white)
    pure = colours.purity(colours.chromaticity(xyz), white_xy)
    study = Study(
        question=asked,
        steps=steps,
        metrics=tuple(tuple(rows) for rows in metrics),
        map_angle=map_angle,
        map_intensity=intensity,
        map_polarization=polarization,
        map_xyz=xyz,
        white=white,
        colour=_at_bows(metrics, map_angle, xyz, white_xy),
        largest_purity=np.max(np.where(bright, pure, 0.0), axis=-1),
        difference=np.array([[colours.difference(xyz[0, s], row[s], white) for s in range(len(steps))] for row in xyz]),
        error=error,
        warnings=tuple(_worst(found, len(steps)) for found in notes.values()),
    )
    study.report.update(report(study))
    return study


def _worst(found: list[str], steps: int) -> str:
    """Return the first of some warnings of one kind, and how many steps have it."""
    return found[0] if len(found) == steps else f"{found[0]} ({len(found)} of {steps} steps)"


def _measured(question: Question, step: Step, found: Curves) -> tuple[BowMetrics, ...]:
    """Return the metrics of each wavelength, in degrees."""
    result = []
    for w, wavelength in enumerate(question.wavelength.tolist()):
        asked = window(step, wavelength)
        degrees = type(asked)(
            (asked.primary[0] / DEG, asked.primary[1] / DEG), (asked.secondary[0] / DEG, asked.secondary[1] / DEG)
        )
        result.append(measure(found.angle / DEG, found.perpendicular[w], found.parallel[w], degrees))
    return tuple(result)


def _at_bows(
    metrics: list[list[tuple[BowMetrics, ...]]], angle: FloatArray, xyz: FloatArray, white: FloatArray
) -> tuple[tuple[FloatArray, ...], ...]:
    """Return x, y, purity of the white-light bow at each wavelength's bow angle; nan outside the map."""
    result = []
    for m, rows in enumerate(metrics):
        found = []
        for s, row in enumerate(rows):
            place = np.array([one.bow_angle for one in row]) * DEG
            there = np.stack([np.interp(place, angle, xyz[m, s, :, k], nan, nan) for k in range(3)], axis=-1)
            xy = colours.chromaticity(there)
            found.append(np.concatenate([xy, colours.purity(xy, white)[:, np.newaxis]], axis=1))
        result.append(tuple(found))
    return tuple(result)
