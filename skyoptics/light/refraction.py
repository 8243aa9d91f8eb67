"""Refraction of air: how much higher the sun, the moon or a star is seen than it stands.

*Airless* elevation is where a body stands as seen through no air, *apparent* elevation where it is seen.

Down to the apparent horizon (airless about −0.57°) refraction is Sæmundsson's formula scaled by pressure and
temperature, with the constant that makes it nil at the zenith. Light from below the horizon meets the ground, so there the
formula means nothing (it has a pole at −5.11°): from the apparent horizon down to an airless −6°, the end of civil
twilight, refraction is the cubic of the elevation that begins with the formula's value and slope and ends with nil
and slope nil; further down it is nil. So depths of twilight are airless ones, and apparent elevation is a smooth and
everywhere rising function of airless elevation.

References
----------
Þ. Sæmundsson, Sky & Telescope 72, 70 (1986); J. Meeus, Astronomical Algorithms, 2nd ed., chapter 16: the formula, its
inverse by G. G. Bennett (J. Inst. Navigation 35, 255 (1982)), the constant at the zenith and the factor for pressure and
temperature (from memory). The same formula and factor as in Reda & Andreas, Solar Energy 76, 577 (2004), equation 42.
"""

from __future__ import annotations

from functools import lru_cache
from typing import Any

import numpy as np

from skyoptics.light.air import STANDARD_PRESSURE
from skyoptics.materials.ranges import within
from skyoptics.units import ARCMIN, CELSIUS_ZERO, DEG, HPA, ArrayLike, FloatArray

STANDARD_TEMPERATURE = 10.0 + CELSIUS_ZERO
"""Temperature at the observer [K] where none is given."""
FADED = -6.0 * DEG
"""Airless elevation from which down there is no refraction: the end of civil twilight [rad]."""

_PRESSURE = 1010.0 * HPA  # the formula's own air
_TEMPERATURE = 10.0 + CELSIUS_ZERO
_AT_ZENITH = 0.0019279  # [arcmin]
_ROUNDS = 100  # each takes more than half of the error away


def refraction(
    elevation: ArrayLike, pressure: float = STANDARD_PRESSURE, temperature: float = STANDARD_TEMPERATURE
) -> FloatArray:
    """Return by how much air lifts a body.

    Parameters
    ----------
    elevation : array_like
        Airless elevation, −90° to 90° [rad].
    pressure : float
        At the observer, 0 (no air) to 1100 hPa [Pa].
    temperature : float
        At the observer, −90 °C to 60 °C [K].

    Returns
    -------
    ndarray
        Apparent minus airless elevation, same shape [rad]: 0 at the zenith, 0.57° on the horizon.

    Raises
    ------
    DomainError
        Outside these ranges.

    Notes
    -----
    1.02′ / tan(h + 10.3 / (h + 5.11)) (p / 1010 hPa) (283.15 K / T), h in degrees, the tangent's argument too. It is a mean:
    within a few degrees of the horizon the real air differs from it by minutes of arc from one day to the next.
    """
    height = within("airless elevation", elevation, -90.0 * DEG, 90.0 * DEG, "°", DEG)
    scale = _scale(pressure, temperature)
    horizon, slope = _horizon(scale)
    above = scale * _formula(np.maximum(height, horizon))
    width = horizon - FADED
    u = np.clip((height - FADED) / width, 0.0, 1.0)
    below = u * u * (-horizon * (3.0 - 2.0 * u) - slope * width * (1.0 - u))
    return np.where(height >= horizon, above, below)


def apparent(
    elevation: ArrayLike, pressure: float = STANDARD_PRESSURE, temperature: float = STANDARD_TEMPERATURE
) -> FloatArray:
    """Return where a body is seen.

    Parameters
    ----------
    elevation : array_like
        Airless elevation, −90° to 90° [rad].
    pressure, temperature : float
        At the observer [Pa], [K], as in `refraction`.

    Returns
    -------
    ndarray
        Apparent elevation, rising with the airless one [rad].

    Raises
    ------
    DomainError
        Outside these ranges.
    """
    return np.asarray(elevation, dtype=np.float64) + refraction(elevation, pressure, temperature)


def airless(
    elevation: ArrayLike, pressure: float = STANDARD_PRESSURE, temperature: float = STANDARD_TEMPERATURE
) -> FloatArray:
    """Return where a body stands that is seen at some elevation: the inverse of `apparent`.

    Parameters
    ----------
    elevation : array_like
        Apparent elevation, −90° to 90° [rad].
    pressure, temperature : float
        At the observer [Pa], [K], as in `refraction`.

    Returns
    -------
    ndarray
        Airless elevation [rad].

    Raises
    ------
    DomainError
        Outside these ranges.
    """
    seen = within("apparent elevation", elevation, -90.0 * DEG, 90.0 * DEG, "°", DEG)
    height = seen
    for _ in range(_ROUNDS):
        nearer = seen - refraction(np.clip(height, -90.0 * DEG, 90.0 * DEG), pressure, temperature)
        if np.all(np.abs(nearer - height) < 1e-15):
            break
        height = nearer
    return nearer


def horizon(pressure: float = STANDARD_PRESSURE, temperature: float = STANDARD_TEMPERATURE) -> float:
    """Return the airless elevation of what is seen at an apparent 0°.

    Parameters
    ----------
    pressure, temperature : float
        At the observer [Pa], [K], as in `refraction`.

    Returns
    -------
    float
        About −0.57°, 0 without air [rad].

    Raises
    ------
    DomainError
        Outside the ranges of `refraction`.
    """
    return _horizon(_scale(pressure, temperature))[0]


def _scale(pressure: float, temperature: float) -> float:
    """Return the checked factor for pressure and temperature."""
    within("air pressure", pressure, 0.0, 1100.0 * HPA, "hPa", HPA)
    within("air temperature", temperature, CELSIUS_ZERO - 90.0, CELSIUS_ZERO + 60.0, "°C", 1.0, CELSIUS_ZERO)
    return max(float(pressure), 0.0) / _PRESSURE * (_TEMPERATURE / float(temperature))


@lru_cache(maxsize=256)
def _horizon(scale: float) -> tuple[float, float]:
    """Return the airless elevation seen at 0° and the slope of refraction there."""
    height = 0.0
    for _ in range(_ROUNDS):
        height = -scale * float(_formula(height))
    degrees = height / DEG
    argument = (degrees + 10.3 / (degrees + 5.11)) * DEG
    slope = -1.02 / 60.0 * (1.0 - 10.3 / (degrees + 5.11) ** 2) / np.sin(argument) ** 2 * DEG
    return height + 0.0, scale * float(slope) + 0.0  # no minus zero without air


def _formula(height: Any) -> Any:
    """Return Sæmundsson's refraction in his air for an airless elevation [rad] above −1.9°."""
    degrees = height / DEG
    return (1.02 / np.tan((degrees + 10.3 / (degrees + 5.11)) * DEG) + _AT_ZENITH) * ARCMIN
