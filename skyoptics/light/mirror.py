"""A source's mirror image in calm water: where it stands, how bright and how polarised it is."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.optics.interface import reflectances
from skyoptics.optics.source import Source
from skyoptics.units import ArrayLike


def in_water(source: Source, index: ArrayLike) -> Source:
    """Return the mirror image of an unpolarised source in level water.

    Parameters
    ----------
    source : Source
        Above the horizon.
    index : array_like, shape (nλ,)
        Refractive index of the water relative to the air, by bin.

    Returns
    -------
    Source
        As far below the horizon as the source stands above, its irradiance times Fresnel's reflectance, Q/I =
        (R_p − R_s)/(R_p + R_s): the plane of incidence is upright, so p is the meridian's own direction.

    Raises
    ------
    DomainError
        If the source is below the horizon, or polarised.
    """
    if source.direction[2] < 0.0 or np.any(source.stokes[:, 1:]):
        raise DomainError("only an unpolarised source above the horizon has its mirror image in water here")
    r_s, r_p = reflectances(np.asarray(index, dtype=np.float64), np.arccos(source.direction[2]))
    mean = 0.5 * (r_s + r_p)
    stokes = np.zeros_like(source.stokes)
    stokes[:, 0] = 1.0
    stokes[:, 1] = 0.5 * (r_p - r_s) / mean
    direction = source.direction * np.array([1.0, 1.0, -1.0])
    return replace(source, direction=direction, irradiance=source.irradiance * mean, stokes=stokes)
