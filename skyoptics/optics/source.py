"""A source of light as scatterers see it: direction, disc, irradiance, polarisation. Made in `skyoptics.light`."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from skyoptics.units import FloatArray


@dataclass(frozen=True, eq=False)
class Disc:
    """A round, limb-darkened disc.

    Parameters
    ----------
    radius : float
        Angular radius [rad]; 0 for a point.
    darkening : ndarray, shape (nλ, 6)
        Coefficients A_j of brightness ∝ Σ A_j µ^j, µ the cosine at the disc's surface, µ² = 1 − (ρ/radius)²; one row
        a spectral bin; scaled so that the mean over the disc is 1.
    """

    radius: float
    darkening: FloatArray

    @classmethod
    def point(cls, count: int) -> Disc:
        """Return a disc of no size for `count` spectral bins."""
        darkening = np.zeros((count, 6))
        darkening[:, 0] = 1.0
        return cls(0.0, darkening)


@dataclass(frozen=True, eq=False)
class Source:
    """One source of light.

    Parameters
    ----------
    direction : ndarray, shape (3,)
        Unit vector from the observer towards the source (east, north, up): a viewing direction; light travels along
        its negative.
    disc : Disc
        What it looks like.
    irradiance : ndarray, shape (nλ,)
        On a surface facing it, bin means [W m⁻² nm⁻¹], after the air.
    stokes : ndarray, shape (nλ, 4)
        Polarisation, normalised to I = 1, in the source's own frame of elevation (see `skyoptics.optics.polarisation`).
    """

    direction: FloatArray
    disc: Disc
    irradiance: FloatArray
    stokes: FloatArray
