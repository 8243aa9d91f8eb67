"""The scattering curve beside a picture: phase of all its particles by scattering angle, weighted by their amounts in it.

Round drops and tumbling crystals have a curve from 0 to 180° of their own; of flattened drops it is the mean around the
sun. Light of crystals that stand in some way depends on more than the scattering angle: theirs is the mean over what the
picture shows at that angle, and there is none outside of it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from skyoptics.geometry.axes import angle_between, azimuth_elevation
from skyoptics.geometry.directions import Directions, frame_about
from skyoptics.optics.axisymmetric import Axisymmetric
from skyoptics.optics.source import Source
from skyoptics.rendering.flat import FlatScatterer
from skyoptics.rendering.memory import blocks
from skyoptics.rendering.named import FURTHER
from skyoptics.rendering.run import Result
from skyoptics.sky.compose import Scatterer, Sheet
from skyoptics.units import NM, FloatArray

STEPS = 720
"""Steps between 0 and 180°."""
WANTED = (450.0, 550.0, 650.0)
"""Wavelengths drawn, or the nearest there are [nm]."""
_TURNS = 24
_COARSE = 60


@dataclass(frozen=True, eq=False)
class Curve:
    """A curve by scattering angle.

    Parameters
    ----------
    bands : tuple of int
        Which spectral bins, by rising wavelength.
    values : ndarray, shape (STEPS, len(bands))
        Phase [sr⁻¹], means over even steps of angle from 0 to π; nan where nothing is known.
    framed : bool
        Whether some of it is a mean over the picture.
    """

    bands: tuple[int, ...]
    values: FloatArray
    framed: bool


def curve(result: Result) -> Curve:
    """Return the scattering curve of a picture's particles.

    Parameters
    ----------
    result : Result
        A finished render; the light of the first source counts.
    """
    job = result.job
    centre = job.bins.centre / NM
    bands = tuple(sorted({int(np.argmin(np.abs(centre - wavelength))) for wavelength in WANTED}))
    source = job.sources[0]
    total, weight, framed = np.zeros((STEPS, len(bands))), 0.0, False
    for sheet in result.sheets:
        if sheet.name == FURTHER:
            continue
        amount = _amount(sheet, job.directions, source)
        if not amount > 0.0:
            continue
        phase, in_frame = _phase(sheet.scatterers[0], source, job.directions, sheet)
        total += amount * phase[:, list(bands)]
        weight += amount
        framed |= in_frame
    return Curve(bands, total / weight if weight > 0.0 else np.full_like(total, np.nan), framed)


def _amount(sheet: Sheet, directions: Directions, source: Source) -> float:
    """Return the mean amount over a coarse grid of a picture."""
    grid = directions.coarse(max(1, max(directions.shape) // _COARSE))
    azimuth, elevation = azimuth_elevation(grid.vectors())
    there = np.isfinite(elevation)
    amount = sheet.amount(azimuth[there][None], elevation[there][None], source)
    return float(np.mean(amount)) if amount.size else 0.0


def _phase(scatterer: Scatterer, source: Source, directions: Directions, sheet: Sheet) -> tuple[FloatArray, bool]:
    """Return the phase (STEPS, nλ) of a scatterer, and whether it is a mean over the picture."""
    if isinstance(scatterer, Axisymmetric):
        axis = Directions.scattering_axis(source.direction, STEPS)
        return scatterer.phase(source, axis, slice(None))[:, 0], False
    if isinstance(scatterer, FlatScatterer):
        about, half = frame_about(source.direction), 0.5 * np.pi
        around = Directions.cylindrical((STEPS, _TURNS), about, (-np.pi, np.pi), (half, -half))
        return np.asarray(np.nanmean(scatterer.phase(source, around, slice(None)), axis=1)), False
    return _over_frame(scatterer, source, directions, sheet), True


def _over_frame(scatterer: Scatterer, source: Source, directions: Directions, sheet: Sheet) -> FloatArray:
    """Return the mean phase over the pixels that hold particles, by scattering angle; nan where there is none."""
    total, solid = np.zeros(0), np.zeros(STEPS)
    pixel = float(np.median(directions.coarse(8).pixel_size())) / 8.0
    wide = max(1, int(np.ceil(1.5 * pixel * STEPS / np.pi)))  # steps taken together, so that none falls between pixels
    for rows in blocks(directions.shape):
        views = directions.vectors(rows)
        azimuth, elevation = azimuth_elevation(views)
        there = np.isfinite(elevation)
        amount = sheet.amount(np.nan_to_num(azimuth), np.nan_to_num(elevation), source)
        there &= np.asarray(amount > 0.0).any(axis=-1)
        step = (angle_between(source.direction, views[there]) * (STEPS / np.pi)).astype(int).clip(0, STEPS - 1) // wide
        weight = directions.solid_angle(rows)[there]
        phase = scatterer.phase(source, directions, rows)[there]
        if not total.size:
            total = np.zeros((STEPS, phase.shape[-1]))
        solid += np.bincount(step, weight, STEPS)
        for band in range(phase.shape[-1]):
            total[:, band] += np.bincount(step, weight * phase[:, band], STEPS)
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = np.where(solid[:, None] > 0.0, total / solid[:, None], np.nan)
    return np.asarray(mean[np.arange(STEPS) // wide])
