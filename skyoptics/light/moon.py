"""The moon as a source: Allen's magnitudes, a reddened solar spectrum, an even disc.

The disc is taken as full and even at every phase: a crescent's shape is not drawn by a halo or bow.
"""

from __future__ import annotations

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.geometry.axes import direction
from skyoptics.light import spectrum
from skyoptics.light.air import Air
from skyoptics.optics.bins import Bins
from skyoptics.optics.source import Disc, Source
from skyoptics.units import ARCMIN, DEG, NM, ArrayLike, FloatArray

RADIUS = 15.54 * ARCMIN
"""Mean semi-diameter [rad] (from memory; it ranges from 14.7' to 16.8')."""
SUN_MAGNITUDE = -26.74
"""Apparent visual magnitude of the sun (from memory)."""
REDNESS = 1.11
"""Exponent of wavelength by which moonlight is redder than sunlight: B − V of 0.92 against 0.65 (Allen; from memory)."""


def magnitude(phase_angle: ArrayLike) -> FloatArray:
    """Return the moon's apparent visual magnitude.

    Parameters
    ----------
    phase_angle : array_like
        Sun–moon–earth angle, 0 at full moon [rad], at most 150°.

    Returns
    -------
    ndarray
        V = −12.73 + 0.026 |α| + 4e-9 α⁴, α in degrees (Allen; Krisciunas & Schaefer, PASP 103, 1033 (1991), eq. 9),
        without the surge of brightness at full moon.
    """
    alpha = np.abs(np.asarray(phase_angle, dtype=np.float64)) / DEG
    if np.any(~(alpha <= 150.0)):
        raise DomainError("the moon's phase angle lies between 0 (full) and 150 degrees")
    return -12.73 + 0.026 * alpha + 4e-9 * alpha**4


def moonlight(phase_angle: float) -> FloatArray:
    """Return the moon's irradiance above the air at the wavelengths of `skyoptics.light.spectrum.samples` [W m⁻² nm⁻¹].

    Parameters
    ----------
    phase_angle : float
        0 at full moon [rad].
    """
    wavelength, irradiance = spectrum.samples()
    share = 10.0 ** (-0.4 * (float(magnitude(phase_angle)) - SUN_MAGNITUDE))
    return np.asarray(irradiance * share * (wavelength / (550.0 * NM)) ** REDNESS)


def moon(
    elevation: float, azimuth: float, phase_angle: float, bins: Bins, air: Air | None, disc: bool = True
) -> Source:
    """Return the moon as a source.

    Parameters
    ----------
    elevation, azimuth : float
        [rad]
    phase_angle : float
        0 at full moon [rad].
    bins : Bins
        Spectral bins.
    air : Air or None
        What weakens its light on the way; None for nothing.
    disc : bool
        Its even disc, or a point.
    """
    wavelength, _ = spectrum.samples()
    seen = moonlight(phase_angle)
    if air is not None:
        seen = seen * air.transmission(wavelength, elevation)
    point = Disc.point(len(bins))
    stokes = np.zeros((len(bins), 4))
    stokes[:, 0] = 1.0
    return Source(
        direction(azimuth, elevation),
        Disc(RADIUS, point.darkening) if disc else point,
        bins.mean(wavelength, seen),
        stokes,
    )
