"""Sky radiance on a grid of directions.

    radiance = Σ over sources and sheets of irradiance · phase · amount + background,

the thin-layer sum: light is scattered once, and sheets neither shade each other nor the background. It holds while the
amount is well below 1; `THIN` is where it is a tenth too bright (1 − exp(−a) ≈ a (1 − a/2)).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.geometry.directions import Directions
from skyoptics.optics.source import Source
from skyoptics.units import FloatArray

THIN = 0.2
"""Amount up to which single scattering is within about a tenth."""


class Scatterer(Protocol):
    """What answers how much light goes where; see `skyoptics.optics.axisymmetric`."""

    def phase(self, source: Source, directions: Directions, rows: slice) -> FloatArray:
        """Return differential scattering ÷ reference extinction cross-section, shape (ny, nx, nλ) [sr⁻¹]."""

    def extinction(self, cos_zenith: FloatArray) -> FloatArray:
        """Return extinction towards a direction ÷ reference, shape (…, nλ)."""


@dataclass(frozen=True, eq=False)
class Sheet:
    """Particles of one kind, hung somewhere.

    Parameters
    ----------
    name : str
        For reports.
    scatterer : Scatterer
        What they do to light.
    amount : callable
        Elevation of the line of sight [rad] → path integral of the reference extinction [1].
    """

    name: str
    scatterer: Scatterer
    amount: Callable[[FloatArray], FloatArray]


@dataclass(frozen=True)
class Background:
    """A plain background: one spectral radiance above the horizon, a share of it below [W m⁻² sr⁻¹ nm⁻¹; 1]."""

    radiance: float
    ground: float

    def at(self, elevation: FloatArray) -> FloatArray:
        """Return the radiance at elevations [rad]; nan stays nan."""
        result = np.where(elevation >= 0.0, self.radiance, self.radiance * self.ground)
        return np.where(np.isnan(elevation), np.nan, result)


def radiance(
    directions: Directions,
    rows: slice,
    sources: Sequence[Source],
    sheets: Sequence[Sheet],
    background: Background,
) -> FloatArray:
    """Return the spectral radiance of some rows of a grid.

    Parameters
    ----------
    directions : Directions
        Grid of viewing directions.
    rows : slice
        Which rows.
    sources, sheets : sequence
        What shines and what scatters; at least one source.
    background : Background
        What lies behind.

    Returns
    -------
    ndarray, shape (ny, nx, nλ)
        Bin means [W m⁻² sr⁻¹ nm⁻¹]; nan outside the image.
    """
    _, elevation = azimuth_elevation(directions.vectors(rows))
    total = np.repeat(background.at(elevation)[..., None], len(sources[0].irradiance), axis=-1)
    for sheet in sheets:
        amount = sheet.amount(elevation)[..., None]
        for source in sources:
            light = sheet.scatterer.phase(source, directions, rows)
            light *= source.irradiance
            light *= amount
            total += light
    return total
