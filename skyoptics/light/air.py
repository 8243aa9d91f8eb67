"""What clear air takes out of sunlight on its way to the observer.

Molecules, ozone and haze, each by its own published law. Water vapour and oxygen bands (from 690 nm up) and refraction
are left out. Elevations are apparent ones, as seen.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from skyoptics.materials.ranges import within
from skyoptics.units import DEG, NM, UM, ArrayLike, FloatArray

STANDARD_PRESSURE = 101325.0
"""1 atm [Pa]."""
MINIMUM_ELEVATION = -1.0 * DEG
"""A sun whose centre stands lower than this is no source any more [rad]."""

_OZONE_HEIGHT = 22.0 / 6370.0  # height of most ozone over the radius of the earth; Bird & Riordan 1984, equation 2-10
_DOBSON_PER_ATM_CM = 1000.0

# SPCTRAL2: wavelength [nm], ozone absorption coefficient [atm-cm⁻¹]; R. E. Bird & C. Riordan, SERI/TR-215-2436 (1984)
_SPCTRAL2_OZONE = """
300 10.0   305 4.8    310 2.7    315 1.35   320 0.8    325 0.38   330 0.16   335 0.075  340 0.04   345 0.019
350 0.007  360 0      440 0      450 0.003  460 0.006  470 0.009  480 0.014  490 0.021  500 0.030  510 0.040
520 0.048  530 0.063  540 0.075  550 0.085  570 0.120  593 0.119  610 0.120  630 0.090  656 0.065  667.6 0.051
690 0.028  710 0.018  718 0.015  724.4 0.012  740 0.010  752.5 0.008  757.5 0.007  762.5 0.006  767.5 0.005  780 0
"""
_OZONE = np.array(_SPCTRAL2_OZONE.split(), dtype=np.float64).reshape(-1, 2)


def air_mass(elevation: ArrayLike) -> FloatArray:
    """Return the relative optical air mass.

    Parameters
    ----------
    elevation : array_like
        Apparent elevation, −1° to 90° [rad]; below the horizon (a sun that is setting) the horizon's value is used.

    Returns
    -------
    ndarray
        1 near the zenith, 37.9 on the horizon [1].

    Raises
    ------
    DomainError
        Outside this range.

    References
    ----------
    F. Kasten & A. T. Young, Appl. Opt. 28, 4735 (1989): 1 / (sin h + 0.50572 (h + 6.07995°)^−1.6364).
    """
    height = _height(elevation)
    return 1.0 / (np.sin(height) + 0.50572 * (height / DEG + 6.07995) ** -1.6364)


def ozone_air_mass(elevation: ArrayLike) -> FloatArray:
    """Return the relative path through the ozone layer.

    Parameters
    ----------
    elevation : array_like
        Apparent elevation, −1° to 90° [rad]; below the horizon the horizon's value is used.

    Returns
    -------
    ndarray
        1 at the zenith, 12.1 on the horizon: ozone lies high, where a low sun's path is less slanted [1].

    Raises
    ------
    DomainError
        Outside this range.

    References
    ----------
    R. E. Bird & C. Riordan, SERI/TR-215-2436 (1984), doi 10.2172/5986936, equation 2-10.
    """
    height = _height(elevation)
    return (1.0 + _OZONE_HEIGHT) / np.sqrt(np.sin(height) ** 2 + 2.0 * _OZONE_HEIGHT)


def rayleigh_depth(wavelength: ArrayLike, pressure: float = STANDARD_PRESSURE) -> FloatArray:
    """Return the vertical optical depth of the air's molecules.

    Parameters
    ----------
    wavelength : array_like
        0.25 to 1.7 µm [m].
    pressure : float
        At the observer [Pa].

    Returns
    -------
    ndarray
        [1]

    Raises
    ------
    DomainError
        Outside this range.

    References
    ----------
    B. A. Bodhaine et al., J. Atmos. Oceanic Technol. 16, 1854 (1999), equation 30 (1013.25 hPa, 45°, 360 ppm).
    """
    square = (_wavelength(wavelength) / UM) ** 2
    fraction = (1.0455996 - 341.29061 / square - 0.90230850 * square) / (
        1.0 + 0.0027059889 / square - 85.968563 * square
    )
    return 0.0021520 * fraction * (pressure / STANDARD_PRESSURE)


def ozone_depth(wavelength: ArrayLike, column_du: float) -> FloatArray:
    """Return the vertical optical depth of ozone: the Chappuis band, and the edge of the Huggins bands.

    Parameters
    ----------
    wavelength : array_like
        0.25 to 1.7 µm [m]; below 300 nm the value at 300 nm is used.
    column_du : float
        Column in Dobson units (0.001 cm of ozone at 0 °C and 1 atm).

    Returns
    -------
    ndarray
        [1], linear between the rows of SPCTRAL2; good to 10 %.

    Raises
    ------
    DomainError
        Outside this range.
    """
    coefficient = np.interp(_wavelength(wavelength), _OZONE[:, 0] * NM, _OZONE[:, 1])
    return coefficient * (column_du / _DOBSON_PER_ATM_CM)


def aerosol_depth(wavelength: ArrayLike, depth_550: float, exponent: float) -> FloatArray:
    """Return the vertical optical depth of haze by Ångström's law, depth_550 · (λ / 550 nm)^−exponent.

    Parameters
    ----------
    wavelength : array_like
        0.25 to 1.7 µm [m].
    depth_550 : float
        At 550 nm [1].
    exponent : float
        About 1.3 for continental haze, near 0 for dust and sea salt [1].

    Returns
    -------
    ndarray
        [1]

    Raises
    ------
    DomainError
        Outside this range.

    References
    ----------
    A. Ångström, Geografiska Annaler 11, 156 (1929).
    """
    return depth_550 * (_wavelength(wavelength) / (550.0 * NM)) ** -exponent


@dataclass(frozen=True)
class Air:
    """A clear atmosphere above the observer.

    Parameters
    ----------
    pressure : float
        At the observer, 0 to 1100 hPa [Pa]; default 1 atm.
    ozone : float
        Column, 0 to 1000 Dobson units; default 300, about the global mean.
    aerosol_depth_550 : float
        Vertical optical depth of haze at 550 nm, 0 to 5 [1]; default 0.1, clean continental air (common practice).
    aerosol_exponent : float
        Ångström exponent, −1 to 4 [1]; default 1.3 (common practice).

    Raises
    ------
    DomainError
        Outside these ranges.
    """

    pressure: float = STANDARD_PRESSURE
    ozone: float = 300.0
    aerosol_depth_550: float = 0.1
    aerosol_exponent: float = 1.3

    def __post_init__(self) -> None:
        within("air pressure", self.pressure, 0.0, 1.1e5, "hPa", 100.0)
        within("ozone column", self.ozone, 0.0, 1000.0, "DU")
        within("aerosol optical depth at 550 nm", self.aerosol_depth_550, 0.0, 5.0)
        within("aerosol exponent", self.aerosol_exponent, -1.0, 4.0)

    def transmission(self, wavelength: ArrayLike, elevation: ArrayLike) -> FloatArray:
        """Return the share of direct light that reaches the observer from outside the atmosphere.

        Parameters
        ----------
        wavelength : array_like
            0.25 to 1.7 µm [m].
        elevation : array_like, broadcastable
            Apparent elevation, −1° to 90° [rad].

        Returns
        -------
        ndarray
            exp(−m (τ_molecules + τ_haze) − m_ozone τ_ozone) [1].

        Raises
        ------
        DomainError
            Outside these ranges.
        """
        low = rayleigh_depth(wavelength, self.pressure) + aerosol_depth(
            wavelength, self.aerosol_depth_550, self.aerosol_exponent
        )
        high = ozone_depth(wavelength, self.ozone)
        return np.exp(-air_mass(elevation) * low - ozone_air_mass(elevation) * high)


def _height(elevation: ArrayLike) -> FloatArray:
    """Return the elevation, checked, not below the horizon."""
    return np.maximum(within("elevation", elevation, MINIMUM_ELEVATION, 90.0 * DEG, "°", DEG), 0.0)


def _wavelength(wavelength: ArrayLike) -> FloatArray:
    return within("wavelength for the air's extinction", wavelength, 0.25e-6, 1.7e-6, "nm", NM)
