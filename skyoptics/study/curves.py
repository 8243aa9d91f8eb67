"""Scattering curves of one step of a study, by each method, on one scale.

Intensities are differential scattering ÷ extinction of the drops [sr⁻¹]: Mie has its own extinction, rays and Airy have
2π⟨r²⟩. Airy's curve holds the primary and the secondary bow at every angle, and light reflected outside (p = 0) by
Fresnel's formulas; no other orders. Airy's fringes beyond `airy.trusted_angle` lie wrong.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import pi

import numpy as np

from skyoptics.droplets import airy, airy_table, geometric, waves
from skyoptics.droplets.bin_averages import average_bins
from skyoptics.droplets.sizes import effective_radius
from skyoptics.droplets.wave_angles import COARSE, FRINGE_STEP, GROWTH, SHADOW, fill, fringes, typical_radius
from skyoptics.light.disc import SUN_RADIUS, sun_disc
from skyoptics.optics.axisymmetric import over_disc
from skyoptics.optics.batches import Executor
from skyoptics.optics.bins import Bins
from skyoptics.optics.table import ScatteringTable
from skyoptics.study.metrics import Window
from skyoptics.study.question import Question, Step
from skyoptics.units import DEG, FloatArray

RESOLUTION = 0.3
"""Angle over which the error of a size average is judged, in Airy's unit of the primary bow."""
RAY_ERROR = 0.01
"""Light-weighted relative error of ray curves."""


@dataclass(frozen=True, eq=False)
class Curves:
    """Curves of one step by one method.

    Parameters
    ----------
    angle : ndarray, shape (nθ,)
        [rad].
    perpendicular, parallel : ndarray, shape (nλ, nθ)
        I⊥ and I∥ of unpolarised light; their sum is differential scattering ÷ extinction [sr⁻¹].
    error : float
        Relative error of the size average reached in the worst wavelength, over `RESOLUTION`; 0 for Airy.
    sizes : int
        Drops summed.
    warnings : tuple of str
        Where the method leaves its range.
    """

    angle: FloatArray
    perpendicular: FloatArray
    parallel: FloatArray
    error: float
    sizes: int
    warnings: tuple[str, ...]

    @property
    def intensity(self) -> FloatArray:
        """Their sum, shape (nλ, nθ) [sr⁻¹]."""
        return self.perpendicular + self.parallel


def cell_means(angle: FloatArray, curves: FloatArray, edges: FloatArray) -> FloatArray:
    """Return the means of curves (n, nθ), straight lines between their points, over cells of angle; shape (n, cells)."""
    step = np.diff(angle)
    cell = np.clip(np.searchsorted(angle, edges, side="right") - 1, 0, len(step) - 1)
    inside = edges - angle[cell]
    running = np.zeros_like(curves)
    np.cumsum(0.5 * (curves[:, 1:] + curves[:, :-1]) * step, axis=1, out=running[:, 1:])
    slope = (curves[:, cell + 1] - curves[:, cell]) / step[cell]
    integral = running[:, cell] + inside * (curves[:, cell] + 0.5 * slope * inside)
    return np.asarray(np.diff(integral, axis=1) / np.diff(edges))


def unit(step: Step, wavelength: float, order: int) -> float:
    """Return Airy's unit of angle h^(1/3) x^(−2/3) for a step's drops [rad]."""
    n = complex(step.law(np.array([wavelength])).item())
    x = 2.0 * pi * effective_radius(step.distribution) / wavelength
    return float(airy.curvature(n, order) ** (1.0 / 3.0) * x ** (-2.0 / 3.0))


def window(step: Step, wavelength: float) -> Window:
    """Return where both bows are looked for [rad]: reduced angles −1.5 … 2.3, Airy's first maximum being at 1.02.

    For drops so small that the two would meet, each ends halfway between the geometric bows.
    """
    n = complex(step.law(np.array([wavelength])).item())
    first, second = airy.bow_angle(n, 2), airy.bow_angle(n, 3)
    middle = 0.5 * (first + second)
    u, v = unit(step, wavelength, 2), unit(step, wavelength, 3)
    return Window(
        primary=(max(first - 1.5 * u, middle), min(first + 2.3 * u, 176.0 * DEG)),
        secondary=(max(second - 2.3 * v, 60.0 * DEG), min(second + 1.5 * v, middle)),
    )


def angles(question: Question, step: Step) -> FloatArray:
    """Return the nodes that a step's curves are computed at, shape (nθ,) [rad]: both bows with fringes, and the map."""
    ends = question.wavelength[[0, -1]]
    typical = typical_radius(step.distribution) / effective_radius(step.distribution)
    reach = fringes(step.distribution)
    spans = {}
    for order, far in ((2, reach), (3, 3.5)):
        found = []
        for wavelength in ends:
            n = complex(step.law(np.array([wavelength])).item())
            x = 2.0 * pi * effective_radius(step.distribution) / wavelength
            found += [float(airy.angle_at(n, x, zeta, order)) for zeta in (-SHADOW, far)]
        spans[order] = min(found), max(found)
    low = max(min(spans[3][0], question.map_deg[0] * DEG), 60.0 * DEG)
    high = min(max(spans[2][1], question.map_deg[1] * DEG), 178.0 * DEG)
    margin = SUN_RADIUS if question.disc else 0.0
    margin += 0.1 * DEG  # for the outer cells of the map
    low, high = low - margin, min(high + margin, 179.6 * DEG)
    grid = np.linspace(low, high, 20_001)
    width = np.full_like(grid, COARSE)
    for order in airy.ORDERS:
        away = np.maximum(np.maximum(spans[order][0] - grid, grid - spans[order][1]), 0.0)
        finest = FRINGE_STEP * unit(step, float(ends.mean()), order) / max(typical, 1.0) ** (2.0 / 3.0)
        width = np.minimum(width, finest + GROWTH * away)
    return fill(grid, width)


def curves(
    question: Question,
    step: Step,
    method: str,
    executor: Executor | None = None,
    traced: dict[str, ScatteringTable] | None = None,
) -> Curves:
    """Return the curves of a step by one method, averaged over the sun's disc if the question says so.

    Parameters
    ----------
    question, step
        What is asked.
    method : str
        "mie", "airy" or "rays".
    executor : optional
        Where work over (wavelength, radius) runs.
    traced : dict, optional
        Ray tables by index, kept for later steps: radius matters to absorption alone, which is below 0.2 % in a bow of
        visible light.
    """
    bins = Bins.lines(question.wavelength)
    angle = angles(question, step)
    error, sizes = 0.0, 0
    if method == "mie":
        mean = average_bins(
            step.distribution,
            step.law,
            bins,
            angle,
            tolerance=question.tolerance,
            resolution=RESOLUTION * unit(step, float(question.wavelength.min()), 2),
            largest_level=5,
            executor=executor,
        )
        scale = (bins.centre / (2.0 * pi)) ** 2 / mean.extinction
        across, along = 0.5 * mean.products[:2] * scale[:, np.newaxis]
        error, sizes = float(np.sqrt(np.mean(mean.change**2, axis=1)).max()), mean.sizes
    elif method == "airy":
        across, along = _airy(step, bins, angle)
    else:
        angle, across, along, error = _rays(step, bins, angle, executor, {} if traced is None else traced)
    notes = waves.warnings(method, step.distribution, step.law, bins)
    found = Curves(angle, across, along, error, sizes, notes)
    return _under_disc(found, bins) if question.disc else found


def external_reflection(index: float, angle: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return |S1|²/x² and |S2|²/x² of light reflected outside, r²/4 (van de Hulst §12.22), shape (nθ,) each [1]."""
    i = 0.5 * (pi - angle)
    r = np.arcsin(np.sin(i) / index)
    return 0.25 * (np.sin(i - r) / np.sin(i + r)) ** 2, 0.25 * (np.tan(i - r) / np.tan(i + r)) ** 2


def _airy(step: Step, bins: Bins, angle: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return I⊥, I∥ (nλ, nθ) of both bows and of external reflection."""
    across, along = np.empty((2, len(bins), len(angle)))
    for band in range(len(bins)):
        n = complex(step.law(bins.centre[band : band + 1]).item())
        s, p = external_reflection(n.real, angle)
        across[band], along[band] = s / (4.0 * pi), p / (4.0 * pi)  # half the light, of extinction 2 π⟨r²⟩
        for order in airy.ORDERS:
            found = airy_table.bow(step.distribution, step.law, bins, band, angle, order, everywhere=True).elements
            # P11 ± P12 over 4π, half of the extinction being scattered
            across[band] += 0.5 * (found[:, 0] - found[:, 1]) / (8.0 * pi)
            along[band] += 0.5 * (found[:, 0] + found[:, 1]) / (8.0 * pi)
    return across, along


def _rays(
    step: Step, bins: Bins, angle: FloatArray, executor: Executor | None, traced: dict[str, ScatteringTable]
) -> tuple[FloatArray, FloatArray, FloatArray, float]:
    """Return angles, I⊥, I∥ (nλ, nθ) and the error of a ray table, at the middle of its bins within the span of `angle`."""
    if step.law.key not in traced:
        traced[step.law.key] = geometric.scattering_table(
            step.law, effective_radius(step.distribution), bins, relative_error=RAY_ERROR, executor=executor
        )
    table = traced[step.law.key]
    inside = (table.angle >= angle[0]) & (table.angle <= angle[-1])
    elements = table.elements[:, inside].sum(axis=0) * (0.5 * table.albedo / (8.0 * pi))[:, np.newaxis]
    across = (elements[..., 0] - elements[..., 1]).T
    along = (elements[..., 0] + elements[..., 1]).T
    return table.angle[inside], across, along, float(max(table.report["relative_error"]))


def _under_disc(found: Curves, bins: Bins) -> Curves:
    """Return the curves averaged over the sun's disc; its brightness by wavelength is that of the disc."""
    elements = np.stack([found.perpendicular.T, found.parallel.T], axis=-1)[np.newaxis]
    flat = np.ones(len(bins))
    table = ScatteringTable(
        angle=found.angle,
        wavelength=bins.centre,
        elements=elements,
        error=np.zeros(elements.shape[:3]),
        albedo=flat,
        asymmetry=flat,
        parts=("all",),
    )
    inside = (found.angle >= found.angle[0] + SUN_RADIUS) & (found.angle <= found.angle[-1] - SUN_RADIUS)
    mean = over_disc(table, sun_disc(bins), found.angle[inside]).elements[0]
    return replace(found, angle=found.angle[inside], perpendicular=mean[..., 0].T, parallel=mean[..., 1].T)
