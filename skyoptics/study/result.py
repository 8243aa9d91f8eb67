"""A finished study: metrics, maps, rows, files."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from skyoptics.study.metrics import BowMetrics
from skyoptics.study.question import Question, Step
from skyoptics.units import NM, FloatArray

if TYPE_CHECKING:
    import xarray

Progress = Callable[[str, int, int], None]

COLUMNS = (
    "radius_um", "method", "wavelength_nm", "bow_angle_deg", "width_deg", "supernumerary_1_deg", "supernumerary_2_deg",
    "contrast", "secondary_over_primary", "polarization", "x", "y", "purity", "supernumerary_3_deg",
    "supernumerary_spacing_deg", "secondary_angle_deg", "dark_band_deg", "peak_per_sr", "dark_per_sr", "largest_purity",
    "delta_e_mean", "delta_e_max", "average_error", "index", "spread", "temperature_c", "rain_mm_h",
)  # fmt: skip
"""Of study.csv."""


@dataclass(frozen=True, eq=False)
class Study:
    """A finished study.

    Parameters
    ----------
    question : Question
        What was asked.
    steps : tuple of Step
        Of the sweep.
    metrics : tuple of tuple of tuple of BowMetrics
        By method, step, wavelength; angles in degrees.
    map_angle : ndarray, shape (nθ,)
        Scattering angles of the maps, middles of cells that intensities are means over [rad].
    map_intensity : ndarray, shape (method, step, nλ, nθ)
        Differential scattering ÷ extinction, unpolarised [sr⁻¹].
    map_polarization : ndarray, shape (method, step, nλ, nθ)
        (I⊥ − I∥)/(I⊥ + I∥) [1].
    map_xyz : ndarray, shape (method, step, nθ, 3)
        Under sunlight, per unit optical depth of a thin cloud [cd m⁻²].
    white : ndarray, shape (3,)
        XYZ of the light [lx].
    colour : tuple of tuple of ndarray
        By method and step: x, y, purity at each wavelength's bow angle, shape (nλ, 3).
    largest_purity : ndarray, shape (method, step)
        Within the map, where it is brighter than a tenth of its brightest point [1].
    difference : ndarray, shape (method, step, nθ)
        ΔE2000 from the first method, on the map.
    error : ndarray, shape (method, step)
        Relative error of the size average [1].
    warnings : tuple of str
        Where methods leave their range.
    report : dict
        Halving estimates and the rest, plain types.
    """

    question: Question
    steps: tuple[Step, ...]
    metrics: tuple[tuple[tuple[BowMetrics, ...], ...], ...]
    map_angle: FloatArray
    map_intensity: FloatArray
    map_polarization: FloatArray
    map_xyz: FloatArray
    white: FloatArray
    colour: tuple[tuple[FloatArray, ...], ...]
    largest_purity: FloatArray
    difference: FloatArray
    error: FloatArray
    warnings: tuple[str, ...]
    report: dict[str, Any] = field(default_factory=dict)

    def __repr__(self) -> str:
        """Say what it covers."""
        asked = self.question
        return (
            f"<Study of {asked.sweep}: {len(self.steps)} steps, {', '.join(asked.methods)}, "
            f"{len(asked.wavelength_nm)} wavelengths>"
        )

    def metric(self, read: Callable[[BowMetrics], float]) -> FloatArray:
        """Return one metric as an array, shape (method, step, nλ)."""
        return np.array([[[read(one) for one in row] for row in rows] for rows in self.metrics], dtype=np.float64)

    def rows(self) -> Iterator[dict[str, Any]]:
        """Yield the rows of study.csv, keys `COLUMNS`: by method, step and wavelength."""
        for m, method in enumerate(self.question.methods):
            for s, step in enumerate(self.steps):
                for w, wavelength in enumerate(self.question.wavelength_nm):
                    one = self.metrics[m][s][w]
                    x, y, purity = self.colour[m][s][w].tolist()
                    found = (
                        step.radius_um, method, wavelength, one.bow_angle, one.width, one.supernumerary(1),
                        one.supernumerary(2), one.contrast, one.secondary_over_primary, one.polarization, x, y, purity,
                        one.supernumerary(3), one.supernumerary(2) - one.supernumerary(1), one.secondary_angle,
                        one.dark_angle, one.peak, one.dark, float(self.largest_purity[m, s]),
                        float(np.mean(self.difference[m, s])), float(np.max(self.difference[m, s])),
                        float(self.error[m, s]), float(step.law(np.array([wavelength * NM])).real.item()), step.spread,
                        step.temperature_c, step.rain_mm_h,
                    )  # fmt: skip
                    yield dict(zip(COLUMNS, found, strict=True))

    def dataset(self) -> xarray.Dataset:
        """Return all of it with CF names, units and provenance; see `skyoptics.study.dataset`."""
        from skyoptics.study.dataset import dataset

        return dataset(self)

    def save(self, folder: str | os.PathLike[str], command: Sequence[str] = ()) -> list[Path]:
        """Write study.csv, study.nc, study.md and plots into a folder, all of them or none; return the files."""
        from skyoptics.study.output import write

        return write(self, Path(folder), command)
