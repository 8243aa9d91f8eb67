"""Sky radiance on a grid of directions.

    radiance = Σ over sources and sheets of irradiance · phase · amount + background.

What volumes do to each other's light and to the sky behind (`skyoptics.sky.volumes`) is in the amounts and in the background
that are given. Curtains and thin layers are no volumes: their light is scattered once, and they neither shade each other nor
the background. That holds while the amount is well below 1; `THIN` is where it is a tenth too bright (1 − exp(−a) ≈ a (1 − a/2)).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from skyoptics.geometry.axes import angle_between, azimuth_elevation
from skyoptics.geometry.directions import Directions
from skyoptics.optics.source import Source
from skyoptics.units import FloatArray

THIN = 0.2
"""Amount up to which single scattering is within about a tenth."""


COVER_LIGHT = 0.02
"""Light from the dark side of a disc held over the sun ÷ the background."""


Amount = Callable[[FloatArray, FloatArray, Source], FloatArray]
"""Azimuth, elevation [rad], source → amount, shape (…, nλ) or (…, 1) [1]."""


class Scatterer(Protocol):
    """What answers how much light goes where; see `skyoptics.optics.axisymmetric`."""

    def phase(self, source: Source, directions: Directions, rows: slice, stokes: bool = False) -> FloatArray:
        """Return differential scattering ÷ reference extinction cross-section, (ny, nx, nλ[, 4]) [sr⁻¹]."""

    def extinction(self, cos_zenith: FloatArray) -> FloatArray:
        """Return extinction towards a direction ÷ reference, shape (…, nλ)."""


@dataclass(frozen=True, eq=False)
class Sheet:
    """Particles of one kind, hung somewhere.

    Parameters
    ----------
    name : str
        For reports.
    scatterers : tuple of Scatterer
        What they do to the light of each source.
    amount : callable
        Azimuth and elevation of the line of sight [rad] and source → path integral of the reference extinction, weighted by
        what gets to the particles and from them to the observer, shape (…, nλ) or, where it is grey, (…, 1) [1].
    """

    name: str
    scatterers: tuple[Scatterer, ...]
    amount: Amount


class Behind(Protocol):
    """What lies behind the particles: `Background`, or a sky (`skyoptics.sky.clear`, `skyoptics.sky.overcast`)."""

    def radiance(self, vectors: FloatArray) -> FloatArray:
        """Return the spectral radiance in viewing directions (..., 3), shape (..., nλ); nan for nan."""


@dataclass(frozen=True, eq=False)
class Background:
    """A plain background: one spectral radiance above the horizon, a share of it below.

    Parameters
    ----------
    level : float
        Above the horizon, at every wavelength [W m⁻² sr⁻¹ nm⁻¹].
    ground : float
        Share of it below [1].
    bands : int
        Number of spectral bins.
    """

    level: float
    ground: float
    bands: int

    def radiance(self, vectors: FloatArray) -> FloatArray:
        """Return the radiance in viewing directions, shape (..., nλ); nan for nan."""
        _, elevation = azimuth_elevation(vectors)
        result = np.where(elevation >= 0.0, self.level, self.level * self.ground)
        result = np.where(np.isnan(elevation), np.nan, result)
        return np.repeat(result[..., None], self.bands, axis=-1)


def radiance(
    directions: Directions,
    rows: slice,
    sources: Sequence[Source],
    sheets: Sequence[Sheet],
    background: Behind,
    polariser: FloatArray | None = None,
    cover: float = 0.0,
) -> FloatArray:
    """Return the spectral radiance of some rows of a grid.

    Parameters
    ----------
    directions : Directions
        Grid of viewing directions.
    rows : slice
        Which rows.
    sources, sheets : sequence
        What shines and what scatters; at least one source. Each sheet has a scatterer for each source.
    background : Behind
        What lies behind, taken as unpolarised.
    polariser : ndarray, shape (ny, nx), optional
        Position angle of the axis of an ideal linear polariser in front of each direction's light [rad].
    cover : float, optional
        Angular radius of a dark disc held over the first source [rad]; 0 for none.

    Returns
    -------
    ndarray, shape (ny, nx, nλ)
        Bin means [W m⁻² sr⁻¹ nm⁻¹]; nan outside the image.
    """
    vectors = directions.vectors(rows)
    azimuth, elevation = azimuth_elevation(vectors)
    behind = background.radiance(vectors)
    if polariser is not None:
        behind *= 0.5
    total = behind.copy() if cover > 0.0 else behind
    for sheet in sheets:
        for source, scatterer in zip(sources, sheet.scatterers, strict=True):
            amount = sheet.amount(azimuth, elevation, source)
            if polariser is None:
                light = scatterer.phase(source, directions, rows)
            else:
                i, q, u, _ = np.moveaxis(scatterer.phase(source, directions, rows, stokes=True), -1, 0)
                axis = 2.0 * polariser[..., None]
                light = 0.5 * (i + q * np.cos(axis) + u * np.sin(axis))
            light *= source.irradiance
            light *= amount
            total += light
    if cover > 0.0:
        seen = _seen_past(directions, rows, sources[0], cover)
        total = total * seen[..., None] + (1.0 - seen)[..., None] * (COVER_LIGHT * behind)
    return total


def _seen_past(directions: Directions, rows: slice, source: Source, cover: float) -> FloatArray:
    """Return the share of light seen past a disc over a source, shape (ny, nx); its edge is as wide as a pixel."""
    away = angle_between(source.direction, directions.vectors(rows))
    width = np.maximum(directions.pixel_size(rows), 1e-9)
    return np.clip((away - cover) / width + 0.5, 0.0, 1.0)


def stokes(
    directions: Directions,
    rows: slice,
    sources: Sequence[Source],
    sheets: Sequence[Sheet],
    background: Behind,
    cover: float = 0.0,
) -> FloatArray:
    """Return the Stokes vector of radiance, shape (ny, nx, nλ, 4), in each direction's meridian frame."""
    vectors = directions.vectors(rows)
    azimuth, elevation = azimuth_elevation(vectors)
    total = np.zeros((*elevation.shape, len(sources[0].irradiance), 4))
    behind = background.radiance(vectors)
    total[..., 0] = behind
    for sheet in sheets:
        for source, scatterer in zip(sources, sheet.scatterers, strict=True):
            amount = sheet.amount(azimuth, elevation, source)[..., None]
            total += scatterer.phase(source, directions, rows, stokes=True) * source.irradiance[:, None] * amount
    if cover > 0.0:
        seen = _seen_past(directions, rows, sources[0], cover)
        total *= seen[..., None, None]
        total[..., 0] += (1.0 - seen)[..., None] * (COVER_LIGHT * behind)
    return total
