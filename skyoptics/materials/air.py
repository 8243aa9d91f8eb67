"""Air: real index by temperature, pressure and humidity.

P. E. Ciddor, *Refractive index of air: new equations for the visible and near infrared*, Appl. Opt. 35, 1566 (1996),
doi 10.1364/AO.35.001566, for 450 ppm of carbon dioxide.
"""

from __future__ import annotations

import numpy as np

from skyoptics.materials.ranges import within
from skyoptics.units import CELSIUS_ZERO, NM, UM, ArrayLike, FloatArray

STANDARD_TEMPERATURE = 288.15
"""15 °C [K]."""
STANDARD_PRESSURE = 101325.0
"""1 atm [Pa]."""
MINIMUM_WAVELENGTH = 0.23e-6
MAXIMUM_WAVELENGTH = 1.69e-6
"""Range of the formula for dry air [m]; moist air was measured from 0.35 to 1.3 µm."""

_VAPOUR_MASS, _AIR_MASS = 0.018015, 0.0289635 + 1.2011e-8 * 50.0  # [kg mol⁻¹], equation before (4), 450 ppm
_GAS_CONSTANT = 8.314510  # [J mol⁻¹ K⁻¹], Ciddor's own value; it cancels in the density ratios


def index(
    wavelength: ArrayLike,
    temperature: ArrayLike = STANDARD_TEMPERATURE,
    pressure: ArrayLike = STANDARD_PRESSURE,
    humidity: ArrayLike = 0.0,
) -> FloatArray:
    """Return the real index of air, relative to vacuum.

    Parameters
    ----------
    wavelength : array_like
        Vacuum wavelength, 0.23 to 1.69 µm [m].
    temperature : array_like, broadcastable
        233.15 to 373.15 K [K].
    pressure : array_like, broadcastable
        10 to 140 kPa [Pa].
    humidity : array_like, broadcastable
        Relative humidity over liquid water, 0 to 1 [1].

    Returns
    -------
    ndarray
        n; Ciddor states an uncertainty of 2 to 5e-8.

    Raises
    ------
    DomainError
        Outside these ranges.
    """
    wavelength = within("wavelength in air", wavelength, MINIMUM_WAVELENGTH, MAXIMUM_WAVELENGTH, "nm", NM)
    temperature = within("air temperature", temperature, 233.15, 373.15, "°C", zero=CELSIUS_ZERO)
    pressure = within("air pressure", pressure, 1e4, 1.4e5, "hPa", 100.0)
    humidity = within("relative humidity", humidity, 0.0, 1.0, "%", 0.01)
    s = (UM / wavelength) ** 2
    vapour = humidity * _enhancement(temperature, pressure) * _saturation(temperature) / pressure
    molar = pressure / (_compressibility(temperature, pressure, vapour) * _GAS_CONSTANT * temperature)
    dry_density = (1.0 - vapour) * molar * _AIR_MASS
    vapour_density = vapour * molar * _VAPOUR_MASS
    n: FloatArray = 1.0 + dry_density / _DRY_REFERENCE * _dry(s) + vapour_density / _VAPOUR_REFERENCE * _vapour(s)
    return n


def standard(wavelength: ArrayLike) -> FloatArray:
    """Return the real index of standard air: dry, 15 °C, 101 325 Pa, 450 ppm of carbon dioxide.

    Parameters
    ----------
    wavelength : array_like
        Vacuum wavelength, 0.23 to 1.69 µm [m].

    Returns
    -------
    ndarray
        n, by Ciddor's equation 1.

    Raises
    ------
    DomainError
        Outside this range.
    """
    wavelength = within("wavelength in air", wavelength, MINIMUM_WAVELENGTH, MAXIMUM_WAVELENGTH, "nm", NM)
    return 1.0 + _dry((UM / wavelength) ** 2)


def _dry(s: FloatArray) -> FloatArray:
    """Refractivity of standard air; equation 1, s = 1/λ² [µm⁻²]."""
    return 0.05792105 / (238.0185 - s) + 0.00167917 / (57.362 - s)


def _vapour(s: FloatArray) -> FloatArray:
    """Refractivity of water vapour at 20 °C and 1333 Pa; equation 3."""
    return 1.022e-8 * (295.235 + s * (2.6422 + s * (-0.032380 + s * 0.004028)))


def _saturation(temperature: FloatArray) -> FloatArray:
    """Saturation vapour pressure over liquid water [Pa]; Davis, Metrologia 29, 67 (1992), as in Ciddor's appendix A."""
    return np.exp(1.2378847e-5 * temperature**2 - 1.9121316e-2 * temperature + 33.93711047 - 6.3431645e3 / temperature)


def _enhancement(temperature: FloatArray, pressure: FloatArray) -> FloatArray:
    """Enhancement factor of water vapour in air [1]; Ciddor's appendix A."""
    return 1.00062 + 3.14e-8 * pressure + 5.60e-7 * (temperature - CELSIUS_ZERO) ** 2


def _compressibility(temperature: FloatArray, pressure: FloatArray, vapour: FloatArray) -> FloatArray:
    """Compressibility of moist air [1]; equation 12, `vapour` is the molar fraction."""
    t = temperature - CELSIUS_ZERO
    ratio = pressure / temperature
    first = (
        1.58123e-6
        + t * (-2.9331e-8 + t * 1.1043e-10)
        + (5.707e-6 - 2.051e-8 * t) * vapour
        + (1.9898e-4 - 2.376e-6 * t) * vapour**2
    )
    return 1.0 - ratio * first + ratio**2 * (1.83e-11 - 0.765e-8 * vapour**2)


def _reference(temperature: float, pressure: float, vapour: float, mass: float) -> float:
    """Density at one of the two reference states [kg m⁻³]."""
    z = _compressibility(np.asarray(temperature), np.asarray(pressure), np.asarray(vapour))
    return float(pressure * mass / (z * _GAS_CONSTANT * temperature))


_DRY_REFERENCE = _reference(STANDARD_TEMPERATURE, STANDARD_PRESSURE, 0.0, _AIR_MASS)
_VAPOUR_REFERENCE = _reference(293.15, 1333.0, 1.0, _VAPOUR_MASS)
