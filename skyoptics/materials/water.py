"""Liquid water: real index, density, absorption.

The real index follows IAPWS R9-97, *Release on the Refractive Index of Ordinary Water Substance as a Function of
Wavelength, Temperature and Pressure* (Erlangen, 1997), which covers supercooled water down to −12 °C. The density it
needs follows IAPWS SR6-08(2011), *Revised Supplementary Release on Properties of Liquid Water at 0.1 MPa*, valid from
−20 to 110 °C. Absorption: G. M. Hale & M. R. Querry, Appl. Opt. 12, 555 (1973), doi 10.1364/AO.12.000555, 25 °C; their
rounded real index is not used.
"""

from __future__ import annotations

import numpy as np

from skyoptics.materials.ranges import within
from skyoptics.units import CELSIUS_ZERO, NM, ArrayLike, FloatArray

MINIMUM_WAVELENGTH = 0.2e-6
MAXIMUM_WAVELENGTH = 1.1e-6
"""Range of R9-97 [m]; the absorption rows cover it."""
MINIMUM_TEMPERATURE = 261.15
MAXIMUM_TEMPERATURE = 373.15
"""R9-97 starts at the lower one; at 1 atm water boils at the upper one [K]."""

# R9-97, table 1
_A0, _A1, _A2, _A3 = 0.244257733, 9.74634476e-3, -3.73234996e-3, 2.68678472e-4
_A4, _A5, _A6, _A7 = 1.58920570e-3, 2.45934259e-3, 0.900704920, -1.66626219e-2
_UV, _IR = 0.229202, 5.432937

# SR6-08(2011), table 1: exponents and factors of α = 10 K/(593 K − T) and β = 10 K/(T − 232 K)
_CONSTANT = 1.93763157e-2
_ALPHA = ((4, 6.74458446e3), (5, -2.22521604e5), (7, 1.00231247e8), (8, -1.63552118e9), (9, 8.32299658e9))
_BETA = (
    (1, 5.78545292e-3),
    (2, -1.53195665e-2),
    (3, 3.11337859e-2),
    (4, -4.23546241e-2),
    (5, 3.38713507e-2),
    (6, -1.19946761e-2),
)
_VOLUME_SCALE = 461.51805 * 10.0 / 1e5  # R · 10 K / 0.1 MPa [m³ kg⁻¹]
_TO_ONE_ATMOSPHERE = 1.0 + 4.7e-10 * 1325.0  # compressibility [Pa⁻¹], 4.4 to 5.1e-10 over the range

# Hale & Querry 1973, table I: wavelength [nm], k
_HALE_QUERRY = """
200 1.10e-7   225 4.90e-8   250 3.35e-8   275 2.35e-8   300 1.60e-8   325 1.08e-8   350 6.50e-9   375 3.50e-9
400 1.86e-9   425 1.30e-9   450 1.02e-9   475 9.35e-10  500 1.00e-9   525 1.32e-9   550 1.96e-9   575 3.60e-9
600 1.09e-8   625 1.39e-8   650 1.64e-8   675 2.23e-8   700 3.35e-8   725 9.15e-8   750 1.56e-7   775 1.48e-7
800 1.25e-7   825 1.82e-7   850 2.93e-7   875 3.91e-7   900 4.86e-7   925 1.06e-6   950 2.93e-6   975 3.48e-6
1000 2.89e-6  1200 9.89e-6
"""
_ROWS = np.array(_HALE_QUERRY.split(), dtype=np.float64).reshape(-1, 2)


def index(wavelength: ArrayLike, temperature: ArrayLike) -> FloatArray:
    """Return the real index of water at 1 atm, relative to vacuum.

    Parameters
    ----------
    wavelength : array_like
        Vacuum wavelength, 0.2 to 1.1 µm [m].
    temperature : array_like, broadcastable
        261.15 to 373.15 K; below 273.15 K the water is supercooled [K].

    Returns
    -------
    ndarray
        n; physical uncertainty about 1.5e-5 in the visible.

    Raises
    ------
    DomainError
        Outside these ranges.
    """
    temperature = within(
        "water temperature", temperature, MINIMUM_TEMPERATURE, MAXIMUM_TEMPERATURE, "°C", zero=CELSIUS_ZERO
    )
    return index_at_density(wavelength, temperature, density(temperature))


def index_at_density(wavelength: ArrayLike, temperature: ArrayLike, density: ArrayLike) -> FloatArray:
    """Return the real index of water or steam of known density, relative to vacuum.

    Parameters
    ----------
    wavelength : array_like
        Vacuum wavelength, 0.2 to 1.1 µm [m].
    temperature : array_like, broadcastable
        261.15 to 773.15 K [K].
    density : array_like, broadcastable
        0 to 1060 kg m⁻³ [kg m⁻³].

    Returns
    -------
    ndarray
        n by R9-97, equation 1.

    Raises
    ------
    DomainError
        Outside these ranges.
    """
    wavelength = within("wavelength in water", wavelength, MINIMUM_WAVELENGTH, MAXIMUM_WAVELENGTH, "nm", NM)
    temperature = within("water temperature", temperature, MINIMUM_TEMPERATURE, 773.15, "°C", zero=CELSIUS_ZERO)
    rho = within("water density", density, 0.0, 1060.0, "kg m⁻³") / 1000.0
    t = temperature / 273.15
    square = (wavelength / 0.589e-6) ** 2
    right = (
        _A0
        + _A1 * rho
        + _A2 * t
        + _A3 * square * t
        + _A4 / square
        + _A5 / (square - _UV**2)
        + _A6 / (square - _IR**2)
        + _A7 * rho**2
    )
    refraction = right * rho  # (n² − 1)/(n² + 2)
    n: FloatArray = np.sqrt((1.0 + 2.0 * refraction) / (1.0 - refraction))
    return n


def density(temperature: ArrayLike) -> FloatArray:
    """Return the density of water at 1 atm, supercooled water too.

    Parameters
    ----------
    temperature : array_like
        253.15 to 383.15 K [K].

    Returns
    -------
    ndarray
        [kg m⁻³], by SR6-08(2011), equation for the specific volume at 0.1 MPa, carried to 1 atm (6e-7 more); good to
        1e-6 near room temperature.

    Raises
    ------
    DomainError
        Outside this range.
    """
    temperature = within("water temperature", temperature, 253.15, 383.15, "°C", zero=CELSIUS_ZERO)
    alpha = 10.0 / (593.0 - temperature)
    beta = 10.0 / (temperature - 232.0)
    volume = _CONSTANT + sum(a * alpha**n for n, a in _ALPHA) + sum(b * beta**m for m, b in _BETA)
    rho: FloatArray = _TO_ONE_ATMOSPHERE / (_VOLUME_SCALE * volume)
    return rho


def absorption(wavelength: ArrayLike) -> FloatArray:
    """Return the imaginary index k of water.

    Parameters
    ----------
    wavelength : array_like
        Vacuum wavelength, 0.2 to 1.2 µm [m].

    Returns
    -------
    ndarray
        k ≥ 0 at 25 °C, ln k linear between the rows of Hale & Querry; the absorption coefficient is 4πk divided by the
        vacuum wavelength.

    Raises
    ------
    DomainError
        Outside this range.
    """
    wavelength = within("wavelength of the water absorption data", wavelength, 0.2e-6, 1.2e-6, "nm", NM)
    k: FloatArray = np.exp(np.interp(wavelength, _ROWS[:, 0] * NM, np.log(_ROWS[:, 1])))
    return k
