"""Absolute XYZ to what an sRGB display is told to show: primaries, exposure, shoulder, transfer curve.

The white is D65 and nothing is adapted unless a white is given: then a colour on the display has the chromaticity it has in
the sky. With a white, XYZ is adapted by Bradford's transform, as a camera's white balance does. Exposure is the
exposure value of a camera at ISO 100, so a larger value makes a darker picture.

Sources: Lam, *Metamerism and colour constancy*, PhD thesis, University of Bradford (1985) (adaptation, matrix as in ICC.1);
IEC 61966-2-1:1999 (primaries, transfer curve); ISO 2720:1974 (exposure meters: N²/t = L S / K, K = 12.5 cd s m⁻²).
The metering rule and the shoulder are this program's own.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from skyoptics.errors import DomainError
from skyoptics.units import ArrayLike, FloatArray

RGB_TO_XYZ: FloatArray = np.array([[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]])
"""Linear sRGB to XYZ, Y = 1 for white, as printed in IEC 61966-2-1."""
XYZ_TO_RGB: FloatArray = np.linalg.inv(RGB_TO_XYZ).astype(np.float64)
"""Its exact inverse; the standard prints four digits of it."""

BRADFORD: FloatArray = np.array(
    [[0.8951, 0.2664, -0.1614], [-0.7502, 1.7135, 0.0367], [0.0389, -0.0685, 1.0296]], dtype=np.float64
)
"""XYZ to the sharpened cone responses of Bradford's transform."""
WHITE: FloatArray = RGB_TO_XYZ.sum(axis=1)
"""XYZ of the display's white, Y = 1."""

METER_CONSTANT = 12.5
"""K of reflected-light meters [cd s m⁻²]; with ISO 100 a surface of 0.125 · 2^EV cd m⁻² is exposed as middle grey."""
MIDDLE_GREY = 0.18
"""Linear display value of middle grey [1]."""
EXPOSURE_WITHOUT_LIGHT = 15.0
"""Exposure value given to a picture with no light in it [EV]: that of a sunlit scene."""

SHOULDER_START = 0.6
"""Linear display value below which luminance is shown as it is [1]."""
BLEACH_FROM, BLEACH_TO = 50.0, 5000.0
"""Levels between which highlights lose their colour: what is so far over-exposed is white on film, on a sensor and to the eye
(common practice, no source). No bow or halo comes near; the sun's disc goes beyond [1]."""

_SKY = 0.26
"""Linear display value of the metered mean [1]; half a stop above middle grey, as a sky is usually exposed."""
_HIGHLIGHT = 0.7
"""Highest linear display value of the 99th percentile before the shoulder [1]."""
_LIT = 1e-3
"""Share of the 99th percentile below which a pixel counts as unlit (a black foreground) and is not metered [1]."""


def linear_rgb(xyz: ArrayLike) -> NDArray[Any]:
    """Return linear sRGB of XYZ in the same unit; outside the gamut components are negative.

    Parameters
    ----------
    xyz : array_like, shape (..., 3)
        [any].

    Returns
    -------
    ndarray, shape (..., 3)
        [as given]; float32 for float32, else float64.
    """
    xyz = np.asarray(xyz)
    matrix = XYZ_TO_RGB.T
    dtype = np.float32 if xyz.dtype == np.float32 else np.float64
    result: NDArray[Any] = xyz.astype(dtype, copy=False) @ matrix.astype(dtype)
    return result


def adaptation(white: ArrayLike, display: ArrayLike = WHITE) -> FloatArray:
    """Return the matrix that makes a white look like the display's white.

    Parameters
    ----------
    white : array_like, shape (3,)
        XYZ of what is to look neutral [any].
    display : array_like, shape (3,)
        XYZ of the white it is brought to, Y = 1 [1].

    Returns
    -------
    ndarray, shape (3, 3)
        XYZ → XYZ; luminance of the white itself is kept.

    Raises
    ------
    DomainError
        If the white has no luminance, or a cone response that is not positive.
    """
    white = np.asarray(white, dtype=np.float64)
    if not white[1] > 0.0 or not np.all(BRADFORD @ white > 0.0):
        raise DomainError('a white to adapt to needs light in every part of the spectrum; choose white = "display"')
    gain = (BRADFORD @ np.asarray(display, dtype=np.float64)) / (BRADFORD @ (white / white[1]))
    result: FloatArray = np.linalg.inv(BRADFORD) @ (gain[:, None] * BRADFORD)
    return result


def encode(linear: ArrayLike) -> NDArray[Any]:
    """Return sRGB values of linear ones (IEC 61966-2-1); values below 0 stay on the straight part.

    Parameters
    ----------
    linear : array_like
        1 is white [1].

    Returns
    -------
    ndarray
        Same shape, 1 is white [1].
    """
    linear = np.asarray(linear)
    curve = 1.055 * np.maximum(linear, 0.0031308) ** (1.0 / 2.4) - 0.055
    result: NDArray[Any] = np.where(linear <= 0.0031308, 12.92 * linear, curve)
    return result


def decode(encoded: ArrayLike) -> NDArray[Any]:
    """Return linear values of sRGB ones: the inverse of `encode`.

    Parameters
    ----------
    encoded : array_like
        1 is white [1].

    Returns
    -------
    ndarray
        Same shape, 1 is white [1].
    """
    encoded = np.asarray(encoded)
    curve = ((np.maximum(encoded, 0.04045) + 0.055) / 1.055) ** 2.4
    result: NDArray[Any] = np.where(encoded <= 0.04045, encoded / 12.92, curve)
    return result


def exposure_scale(exposure_ev: float) -> float:
    """Return the linear display value of 1 cd m⁻².

    Parameters
    ----------
    exposure_ev : float
        Exposure value at ISO 100 [EV].

    Returns
    -------
    float
        0.18 / (0.125 · 2^EV) [cd⁻¹ m²].
    """
    return float(MIDDLE_GREY / (METER_CONSTANT / 100.0 * 2.0**exposure_ev))


def automatic_exposure(luminance: ArrayLike) -> float:
    """Return the exposure value a photographer would choose for a bow or halo in front of a sky.

    Parameters
    ----------
    luminance : array_like
        [cd m⁻²]; nan, infinite and negative values are left out.

    Returns
    -------
    float
        At ISO 100, rounded to 0.1 [EV]; 15 for a picture without light.

    Notes
    -----
    Like a camera's averaging meter, with two cautions. The mean is taken over lit pixels (above 1/1000 of the 99th
    percentile, so a black foreground does not brighten the sky), each counted with at most the 99th percentile (so the
    sun's disc, or a few bright pixels, do not rule), and is shown at 0.26. If that put the 99th percentile
    above 0.7, as for a bow on a dark sky, the 99th percentile is shown at 0.7 instead: colours of a bow need more room
    below white than a grey cloud.
    """
    luminance = np.asarray(luminance)
    seen = luminance[np.isfinite(luminance) & (luminance > 0.0)].astype(np.float64)
    if seen.size == 0:
        return EXPOSURE_WITHOUT_LIGHT
    bright = _percentile_99(seen)
    lit = seen[seen >= _LIT * bright]
    bright = _percentile_99(lit)
    mean = float(np.minimum(lit, bright).mean())
    one = max(mean / _SKY, bright / _HIGHLIGHT)
    return round(float(np.log2(MIDDLE_GREY * one / (METER_CONSTANT / 100.0))), 1)


def metered_exposure(luminance: ArrayLike) -> float:
    """Return the exposure value that a reflected-light meter reads, the whole picture averaged.

    Parameters
    ----------
    luminance : array_like
        [cd m⁻²]; nan, infinite and negative values are left out.

    Returns
    -------
    float
        log2(mean · 100 / K) at ISO 100, K = 12.5 cd s m⁻² [EV]; 15 for a picture without light.

    Notes
    -----
    ISO 2720:1974. As with a real meter a sun in the frame, or a black foreground, counts for all it is.
    """
    luminance = np.asarray(luminance)
    seen = luminance[np.isfinite(luminance) & (luminance >= 0.0)]
    mean = float(seen.mean(dtype=np.float64)) if seen.size else 0.0
    return float(np.log2(mean * 100.0 / METER_CONSTANT)) if mean > 0.0 else EXPOSURE_WITHOUT_LIGHT


def roll_off(value: ArrayLike) -> NDArray[Any]:
    """Return linear display luminance with the highlights bent under 1.

    Parameters
    ----------
    value : array_like
        Exposed luminance, 1 is the display's white [1].

    Returns
    -------
    ndarray
        The value itself up to s = 0.6 (bit for bit), then rising for ever towards 1 [1].

    Notes
    -----
    s + (1 − s) u / √(1 + u²) with u = (value − s)/(1 − s). First and second derivative are continuous, so no edge appears
    where the shoulder begins.
    """
    value = np.asarray(value)
    room = 1.0 - SHOULDER_START
    u = np.maximum(value - SHOULDER_START, 0.0) / room
    with np.errstate(divide="ignore", over="ignore"):
        bent = SHOULDER_START + room / np.hypot(1.0, 1.0 / u)  # this form holds at u = 0 and at u = ∞
    result: NDArray[Any] = np.where(value > SHOULDER_START, bent, value)
    return result


def bend_highlights(linear: ArrayLike) -> NDArray[Any]:
    """Return linear sRGB with highlights under the display's white, chromaticity kept up to `BLEACH_FROM`.

    Parameters
    ----------
    linear : array_like, shape (..., 3)
        Exposed, 1 is white [1].

    Returns
    -------
    ndarray, shape (..., 3)
        All three components times one factor, roll_off(level)/level; beyond `BLEACH_FROM` on its way to white [1].

    Notes
    -----
    The level is luminance or the greatest component, whichever is larger: luminance alone would let a bright orange
    through with a red beyond the display's, and the gamut step could only pale it to cream. A colour whose level is at most
    0.6 is returned bit for bit.
    """
    linear = np.asarray(linear)
    brightest = np.maximum(
        np.maximum(linear[..., 0], linear[..., 1]), linear[..., 2]
    )  # a quarter of the time of max(axis=-1)
    level = np.maximum(linear @ RGB_TO_XYZ[1].astype(linear.dtype), brightest)
    bent = roll_off(level)
    factor = np.divide(bent, level, out=np.ones_like(bent), where=level > SHOULDER_START)
    result: NDArray[Any] = linear * factor[..., None]
    dazzling = level > BLEACH_FROM
    if np.any(dazzling):
        share = np.clip(np.log(level[dazzling] / BLEACH_FROM) / np.log(BLEACH_TO / BLEACH_FROM), 0.0, 1.0)[..., None]
        result[dazzling] += share * (bent[dazzling][..., None] - result[dazzling])
    return result


def _percentile_99(values: FloatArray) -> float:
    """Return the 99th percentile, the lower of two neighbours, so that one pixel among few cannot be it."""
    place = int(0.99 * (values.size - 1))
    return float(np.partition(values, place)[place])
