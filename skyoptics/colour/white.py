"""White balance in kelvin: which light looks neutral.

A colour temperature stands for the CIE's reference illuminant of that temperature: Planck's radiator up to 4000 K, daylight
from 5000 K up, between them a mixture (CIE 224:2017, §4.2; daylight: CIE 15:2004, §3.1; from memory). All whites are those of the
CIE 1931 observer, as the display's own.
"""

from __future__ import annotations

from functools import cache

import numpy as np

from skyoptics.colour.observer import matching_functions
from skyoptics.errors import DomainError
from skyoptics.units import ArrayLike, FloatArray

COOLEST, HOTTEST = 2000.0, 25000.0
"""Range of colour temperatures [K]; the daylight formula ends at 25 000 K."""
DAYLIGHT_KELVIN = 5500.0
"""Of photographic daylight [K] (D55; ISO 7589:2002, from memory)."""
AUTOMATIC_KELVIN = (3000.0, 7000.0)
"""How far an automatic white balance goes [K], as makers of cameras state (common practice, no source)."""

_MIXED = (4000.0, 5000.0)
"""Between Planck's radiator and daylight [K]."""
_SECOND_RADIATION = 1.438776877e-2
"""c₂ = h c / k [m K] (CODATA 2018)."""
_LIT = 1e-3
"""Share of the 99th percentile of luminance below which a pixel says nothing about the light [1]."""


def white(kelvin: float) -> FloatArray:
    """Return the white of a colour temperature.

    Parameters
    ----------
    kelvin : float
        2000 to 25 000 K.

    Returns
    -------
    ndarray, shape (3,)
        XYZ, Y = 1 [1].

    Raises
    ------
    DomainError
        Outside this range.
    """
    if not COOLEST <= kelvin <= HOTTEST:
        raise DomainError(f"a white has a colour temperature of {COOLEST:g} to {HOTTEST:g} K, got {kelvin:g}")
    share = float(np.clip((kelvin - _MIXED[0]) / (_MIXED[1] - _MIXED[0]), 0.0, 1.0))
    result = np.zeros(3)
    if share > 0.0:
        result += share * _daylight(kelvin)
    if share < 1.0:
        result += (1.0 - share) * _radiator(kelvin)
    return result


def temperature(xyz: ArrayLike) -> float:
    """Return the colour temperature whose white is nearest to a colour.

    Parameters
    ----------
    xyz : array_like, shape (3,)
        [any].

    Returns
    -------
    float
        2000 to 25 000 K, nearest in the CIE 1960 (u, v) plane, in which correlated colour temperature is defined
        (CIE 15:2004, §9.5).

    Raises
    ------
    DomainError
        If it has no luminance.
    """
    colour = np.asarray(xyz, dtype=np.float64)
    if not (np.isfinite(colour).all() and colour[1] > 0.0):
        raise DomainError("a colour without luminance has no colour temperature")
    mired, places = _line()
    point = _uv(colour)
    step = np.diff(places, axis=0)
    along = np.clip(np.sum((point - places[:-1]) * step, axis=1) / np.sum(step * step, axis=1), 0.0, 1.0)
    away = np.hypot(*(places[:-1] + along[:, None] * step - point).T)
    nearest = int(away.argmin())
    return float(1e6 / (mired[nearest] + along[nearest] * (mired[nearest + 1] - mired[nearest])))


def automatic(xyz: ArrayLike) -> float:
    """Return the colour temperature that an automatic white balance would take for a picture.

    Parameters
    ----------
    xyz : array_like, shape (..., 3)
        [cd m⁻²]; what is not finite is left out.

    Returns
    -------
    float
        Within `AUTOMATIC_KELVIN` [K]; 5500 for a picture without light.

    Notes
    -----
    The grey world (G. Buchsbaum, J. Franklin Inst. 310, 1 (1980)): the mean of the picture is taken for the colour of its light,
    each pixel counted with at most the 99th percentile of luminance. Then, as cameras do, only as far as light has such
    colours: the nearest temperature within a range. A blue sky so stays bluish, a sunset reddish.
    """
    flat = np.asarray(xyz).reshape(-1, 3)
    luminance = flat[:, 1]
    seen = np.isfinite(flat).all(axis=1) & (luminance > 0.0)
    if not seen.any():
        return DAYLIGHT_KELVIN
    flat, luminance = flat[seen].astype(np.float64), luminance[seen].astype(np.float64)
    bright = float(np.partition(luminance, place := int(0.99 * (luminance.size - 1)))[place])
    weight = np.where(luminance >= _LIT * bright, np.minimum(luminance, bright) / luminance, 0.0)
    return float(np.clip(temperature(weight @ flat), *AUTOMATIC_KELVIN))


def _radiator(kelvin: float) -> FloatArray:
    """Return XYZ of Planck's radiator, Y = 1."""
    wavelength, values = matching_functions("1931")
    power = wavelength**-5 / np.expm1(_SECOND_RADIATION / (wavelength * kelvin))
    total = power @ values
    return np.asarray(total / total[1])


def _daylight(kelvin: float) -> FloatArray:
    """Return XYZ of CIE daylight, Y = 1 (CIE 15:2004, equations 3.2 to 3.4)."""
    inverse = 1e3 / kelvin
    if kelvin <= 7000.0:
        x = ((-4.6070 * inverse + 2.9678) * inverse + 0.09911) * inverse + 0.244063
    else:
        x = ((-2.0064 * inverse + 1.9018) * inverse + 0.24748) * inverse + 0.237040
    y = (-3.0 * x + 2.870) * x - 0.275
    return np.array([x / y, 1.0, (1.0 - x - y) / y])


def _uv(xyz: FloatArray) -> FloatArray:
    """Return CIE 1960 u, v."""
    total = xyz[..., 0] + 15.0 * xyz[..., 1] + 3.0 * xyz[..., 2]
    return np.stack([4.0 * xyz[..., 0] / total, 6.0 * xyz[..., 1] / total], axis=-1)


@cache
def _line() -> tuple[FloatArray, FloatArray]:
    """Return reciprocal temperatures [10⁻⁶ K⁻¹], one apart, and u, v of their whites."""
    mired = np.linspace(1e6 / HOTTEST, 1e6 / COOLEST, 461)
    mired[-1] = 1e6 / COOLEST
    kelvins = np.clip(1e6 / mired, COOLEST, HOTTEST)
    return mired, _uv(np.stack([white(float(kelvin)) for kelvin in kelvins]))
