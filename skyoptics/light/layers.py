"""How the atmosphere is layered: molecules, ozone, haze and water vapour by height.

Each is a share of its own vertical column above the ground at the observer, where the standard profile starts:

- molecules: density of the US Standard Atmosphere, 1976;
- ozone: A. A. Lacis & J. E. Hansen, J. Atmos. Sci. 31, 118 (1974): above height h lies the share
  (1 + e^(−b/c)) / (1 + e^((h − b)/c)) of the column, b = 20 km, c = 5 km;
- haze and water vapour: exponentials with scale heights of their own.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from skyoptics.materials.ranges import within
from skyoptics.units import ArrayLike, FloatArray

TOP = 100.0e3
"""Above this height there is nothing [m]; it holds 3e-7 of the molecules."""
REFRACTIVITY = 2.78e-4
"""n − 1 of air at 15 °C and 1 atm near 550 nm (P. E. Ciddor, Appl. Opt. 35, 1566 (1996))."""

_OZONE_PEAK, _OZONE_WIDTH = 20.0e3, 5.0e3  # b, c
# US Standard Atmosphere, 1976, table 4: geopotential height [m], temperature [K], its gradient above [K m⁻¹]
_BASE = np.array([0.0, 11e3, 20e3, 32e3, 47e3, 51e3, 71e3, 84852.0])
_TEMPERATURE = np.array([288.15, 216.65, 216.65, 228.65, 270.65, 270.65, 214.65, 186.946])
_GRADIENT = np.array([-6.5e-3, 0.0, 1.0e-3, 2.8e-3, 0.0, -2.8e-3, -2.0e-3, 0.0])
_HYDROSTATIC = 9.80665 * 28.9644e-3 / 8.31432  # g0 M / R* [K m⁻¹]
_GEOPOTENTIAL_RADIUS = 6356.766e3

HEIGHTS = np.linspace(0.0, TOP, 2001)


@dataclass(frozen=True)
class Profile:
    """How the air is layered.

    Parameters
    ----------
    haze_height : float
        Scale height of haze, 100 m to 10 km [m]; default 2 km (common practice: 1 to 2 km).
    vapour_height : float
        Scale height of water vapour, 100 m to 10 km [m]; default 2 km (common practice).
    refractivity : float
        n − 1 of the air at the ground, 0 to 4e-4 [1]; 0 for straight rays.

    Raises
    ------
    DomainError
        Outside these ranges.
    """

    haze_height: float = 2000.0
    vapour_height: float = 2000.0
    refractivity: float = REFRACTIVITY

    def __post_init__(self) -> None:
        within("scale height of haze", self.haze_height, 100.0, 1e4, "m")
        within("scale height of water vapour", self.vapour_height, 100.0, 1e4, "m")
        within("refractivity of air", self.refractivity, 0.0, 4e-4)


STANDARD = Profile()


def density(height: ArrayLike, profile: Profile = STANDARD) -> FloatArray:
    """Return how densely each constituent lies at a height.

    Parameters
    ----------
    height : array_like
        Above the ground, 0 to `TOP` [m]; above it the densities are 0.
    profile : Profile
        Layering.

    Returns
    -------
    ndarray, shape (…, 4)
        Molecules, ozone, haze, vapour: share of the vertical column in a metre [m⁻¹].
    """
    height = np.asarray(height, dtype=np.float64)
    at = np.clip(height, 0.0, TOP)
    ozone = np.exp(-np.abs(at - _OZONE_PEAK) / _OZONE_WIDTH)  # symmetric; no overflow high up
    ozone = (1.0 + np.exp(-_OZONE_PEAK / _OZONE_WIDTH)) / _OZONE_WIDTH * ozone / (1.0 + ozone) ** 2
    parts = [np.exp(log_molecules(at)) / MOLECULE_HEIGHT, ozone]
    parts += [np.exp(-at / scale) / scale for scale in (profile.haze_height, profile.vapour_height)]
    return np.where((height <= TOP)[..., None], np.stack(parts, axis=-1), 0.0)


def log_molecules(height: FloatArray) -> FloatArray:
    """Return ln (density ÷ density at the ground) at heights [m], linear between `HEIGHTS`."""
    return np.interp(height, HEIGHTS, _LOG)


def log_slope(height: FloatArray) -> FloatArray:
    """Return d ln density / dh [m⁻¹]."""
    return np.interp(height, HEIGHTS, _LOG_SLOPE)


def _standard_atmosphere() -> tuple[FloatArray, FloatArray]:
    """Return ln relative density and its slope at `HEIGHTS` by the barometric formula of each layer."""
    factor = _GEOPOTENTIAL_RADIUS / (_GEOPOTENTIAL_RADIUS + HEIGHTS)
    geopotential = factor * HEIGHTS
    log_pressure = np.zeros(len(_BASE))
    for i in range(len(_BASE) - 1):
        log_pressure[i + 1] = log_pressure[i] + _log_pressure_step(i, _BASE[i + 1] - _BASE[i])
    layer = np.searchsorted(_BASE, geopotential, side="right") - 1
    rise = geopotential - _BASE[layer]
    temperature = _TEMPERATURE[layer] + _GRADIENT[layer] * rise
    step = np.array([_log_pressure_step(int(i), float(x)) for i, x in zip(layer, rise, strict=True)])
    log_density = log_pressure[layer] + step - np.log(temperature / _TEMPERATURE[0])
    return log_density, -(_HYDROSTATIC + _GRADIENT[layer]) / temperature * factor**2


def _log_pressure_step(layer: int, rise: float) -> float:
    if _GRADIENT[layer] == 0.0:
        return float(-_HYDROSTATIC * rise / _TEMPERATURE[layer])
    warmth = 1.0 + _GRADIENT[layer] * rise / _TEMPERATURE[layer]
    return float(-_HYDROSTATIC / _GRADIENT[layer] * np.log(warmth))


def _column() -> float:
    """Return the integral of the relative density up to `TOP` [m]: the exact one of an exponential in each cell."""
    density = np.exp(_LOG)
    return float(np.sum(np.diff(HEIGHTS) * np.diff(density) / np.diff(_LOG)))


_LOG, _LOG_SLOPE = _standard_atmosphere()
MOLECULE_HEIGHT = _column()
"""Vertical column of the molecules ÷ their density at the ground, 8.45 km [m]."""
