"""The sun as a source."""

from __future__ import annotations

import numpy as np

from skyoptics.geometry.axes import direction
from skyoptics.light import spectrum
from skyoptics.light.air import Air
from skyoptics.light.disc import sun_disc
from skyoptics.materials.ranges import within
from skyoptics.optics.bins import Bins
from skyoptics.optics.source import Disc, Source
from skyoptics.units import DEG


def sun(elevation: float, azimuth: float, bins: Bins, air: Air | None, disc: bool = True) -> Source:
    """Return the sun as scatterers near the observer see it.

    Parameters
    ----------
    elevation : float
        Apparent elevation of its centre, −90° to 90°, from −1° up with air [rad].
    azimuth : float
        Clockwise from north [rad].
    bins : Bins
        Spectral bins within 280 to 1100 nm.
    air : Air or None
        What dims and reddens it; None for sunlight above the air.
    disc : bool
        False for a point.

    Returns
    -------
    Source
        Unpolarised, at 1 AU; the spectrum is dimmed sample by sample before it is averaged over bins.

    Raises
    ------
    DomainError
        For an elevation or bins outside these ranges.
    """
    within("elevation", elevation, -90.0 * DEG, 90.0 * DEG, "°", DEG)
    within("azimuth", azimuth, -np.inf, np.inf, "°", DEG)
    if air is None:
        irradiance = spectrum.irradiance(bins)
    else:
        irradiance = spectrum.bin_means(bins, air.transmission(spectrum.samples()[0], elevation))
    stokes = np.zeros((len(bins), 4))
    stokes[:, 0] = 1.0
    return Source(
        direction=direction(azimuth, elevation),
        disc=sun_disc(bins) if disc else Disc.point(len(bins)),
        irradiance=irradiance,
        stokes=stokes,
    )
