"""What clear air takes out of sunlight on its way to the observer, to a cloud, or between two heights.

Molecules, ozone, haze, water vapour and oxygen, each by its own published law along the true path through a round,
refracting atmosphere (`skyoptics.light.slant`). Elevations are apparent ones, as seen. `air_mass` and `ozone_air_mass` are
the usual closed forms for an observer on the ground.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from skyoptics.light import layers, slant
from skyoptics.light.gases import OXYGEN_PRESSURE, oxygen_transmission, vapour_transmission
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
    water_vapour_cm : float
        Vertical column of water vapour as liquid, 0 to 10 cm; default 1.42, the US Standard Atmosphere (ASTM G173-03).
    aerosol_height : float
        Scale height of haze, 100 m to 10 km [m]; default 2 km (common practice: 1 to 2 km).

    Raises
    ------
    DomainError
        Outside these ranges.
    """

    pressure: float = STANDARD_PRESSURE
    ozone: float = 300.0
    aerosol_depth_550: float = 0.1
    aerosol_exponent: float = 1.3
    water_vapour_cm: float = 1.42
    aerosol_height: float = 2000.0

    def __post_init__(self) -> None:
        within("air pressure", self.pressure, 0.0, 1.1e5, "hPa", 100.0)
        within("ozone column", self.ozone, 0.0, 1000.0, "DU")
        within("aerosol optical depth at 550 nm", self.aerosol_depth_550, 0.0, 5.0)
        within("aerosol exponent", self.aerosol_exponent, -1.0, 4.0)
        within("water vapour column", self.water_vapour_cm, 0.0, 10.0, "cm")
        within("scale height of haze", self.aerosol_height, 100.0, 1e4, "m")

    @property
    def profile(self) -> layers.Profile:
        """How it is layered; its refraction goes with its pressure."""
        refractivity = layers.REFRACTIVITY * self.pressure / STANDARD_PRESSURE
        return layers.Profile(haze_height=self.aerosol_height, refractivity=refractivity)

    def transmission(self, wavelength: ArrayLike, elevation: ArrayLike, height: float = 0.0) -> FloatArray:
        """Return the share of direct light that comes from outside the atmosphere down to a height.

        Parameters
        ----------
        wavelength : array_like
            0.25 to 1.7 µm [m].
        elevation : array_like, broadcastable
            Of the source as the observer on the ground sees it, from 1° below the horizon of that height to 90° [rad].
            Below that horizon the horizon's value is used: a sun that is setting.
        height : float
            Above the observer, 0 to 100 km [m]. Higher up the source stands lower by the refraction that is missing
            there (`skyoptics.light.slant.aloft`).

        Returns
        -------
        ndarray
            [1]

        Raises
        ------
        DomainError
            Outside these ranges.
        """
        profile = self.profile
        lowest = MINIMUM_ELEVATION + float(slant.dip(height, profile))
        seen = within("elevation", elevation, lowest, 90.0 * DEG, "°", DEG)
        if height > 0.0:
            seen = slant.aloft(seen, height, profile)
        return self.through(wavelength, slant.to_space(seen, height, profile))

    def between(self, wavelength: ArrayLike, elevation: ArrayLike, low: ArrayLike, high: ArrayLike) -> FloatArray:
        """Return the share of light that passes between two heights.

        Parameters
        ----------
        wavelength : array_like
            0.25 to 1.7 µm [m].
        elevation : array_like, broadcastable
            Of the line of sight at the lower end, 0° to 90° [rad].
        low, high : array_like, broadcastable
            Above the observer, 0 to 100 km, ascending [m].

        Returns
        -------
        ndarray
            1 where both heights are the same [1].

        Raises
        ------
        DomainError
            Outside these ranges.
        """
        return self.through(wavelength, slant.between(elevation, low, high, self.profile))

    def through(self, wavelength: ArrayLike, path: slant.Path) -> FloatArray:
        """Return the share of light that passes a path.

        Parameters
        ----------
        wavelength : array_like
            0.25 to 1.7 µm [m].
        path : Path, broadcastable
            From `skyoptics.light.slant`. Legs are to be added before, since bands of water vapour and oxygen saturate:
            the product of two transmissions is there less than that of both legs together.

        Returns
        -------
        ndarray
            exp(−Σ columns · τ) of molecules, ozone and haze, times what water vapour and oxygen let through [1].

        Raises
        ------
        DomainError
            For wavelengths outside this range.
        """
        depth = path.molecules * rayleigh_depth(wavelength, self.pressure)
        depth = depth + path.ozone * ozone_depth(wavelength, self.ozone)
        depth = depth + path.haze * aerosol_depth(wavelength, self.aerosol_depth_550, self.aerosol_exponent)
        vapour = vapour_transmission(wavelength, self.water_vapour_cm * path.vapour)
        oxygen = oxygen_transmission(wavelength, path.molecules * (self.pressure / OXYGEN_PRESSURE))
        return np.exp(-depth) * vapour * oxygen


def _height(elevation: ArrayLike) -> FloatArray:
    """Return the elevation, checked, not below the horizon."""
    return np.maximum(within("elevation", elevation, MINIMUM_ELEVATION, 90.0 * DEG, "°", DEG), 0.0)


def _wavelength(wavelength: ArrayLike) -> FloatArray:
    return within("wavelength for the air's extinction", wavelength, 0.25e-6, 1.7e-6, "nm", NM)
