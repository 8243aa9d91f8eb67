"""Fit colours into the sRGB cube by taking away chroma, at constant Oklch hue and lightness.

Oklab and its matrices: Björn Ottosson, "A perceptual color space for image processing" (2020); the space of gamut
mapping in CSS Color Module Level 4. Colours inside the cube are returned bit for bit.

At constant hue and lightness Oklab chroma runs on a straight line in the cube roots of LMS, from the colour to the grey
of equal lightness; each channel of linear sRGB is a cubic along it. The line leaves the cube once, and bisection finds
where. The one exception is a fold beside the blue corner (hue 264.06° to 264.20°, lightness below 0.47; measured), where
red dips below 0 by at most 6e-4 and comes back; across it chroma steps. Light of 459.5 nm crosses it, bows with a sun of
finite size do not.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from skyoptics.units import ArrayLike, BoolArray, FloatArray

RGB_TO_LMS: FloatArray = np.array(
    [
        [0.4122214708, 0.5363325363, 0.0514459929],
        [0.2119034982, 0.6806995451, 0.1073969566],
        [0.0883024619, 0.2817188376, 0.6299787005],
    ]
)
"""Linear sRGB to LMS (Ottosson 2020)."""
ROOTS_TO_OKLAB: FloatArray = np.array(
    [
        [0.2104542553, 0.7936177850, -0.0040720468],
        [1.9779984951, -2.4285922050, 0.4505937099],
        [0.0259040371, 0.7827717662, -0.8086757660],
    ]
)
"""Cube roots of LMS to L, a, b (Ottosson 2020)."""
LMS_TO_RGB: FloatArray = np.linalg.inv(RGB_TO_LMS).astype(np.float64)
OKLAB_TO_ROOTS: FloatArray = np.linalg.inv(ROOTS_TO_OKLAB).astype(np.float64)

_CHUNK = 1 << 14
"""Pixels worked on at once: their arrays stay in the processor's cache."""
_CHROMA_BOUND = 0.5
"""More chroma than any colour of the cube has (0.3225, at magenta) [1]."""
_HALVINGS = 26
"""Steps of bisection: chroma is found to 0.5 · 2⁻²⁶ = 7e-9."""


def oklab(linear: ArrayLike) -> FloatArray:
    """Return Oklab of linear sRGB.

    Parameters
    ----------
    linear : array_like, shape (..., 3)
        1 is white; may lie outside the cube [1].

    Returns
    -------
    ndarray, shape (..., 3)
        L, a, b [1].
    """
    roots = np.cbrt(np.asarray(linear, dtype=np.float64) @ RGB_TO_LMS.T)
    result: FloatArray = roots @ ROOTS_TO_OKLAB.T
    return result


def oklch(linear: ArrayLike) -> FloatArray:
    """Return Oklch of linear sRGB.

    Parameters
    ----------
    linear : array_like, shape (..., 3)
        1 is white; may lie outside the cube [1].

    Returns
    -------
    ndarray, shape (..., 3)
        Lightness [1], chroma [1], hue from 0 to 2π [rad].
    """
    lightness, a, b = np.moveaxis(oklab(linear), -1, 0)
    return np.stack([lightness, np.hypot(a, b), np.arctan2(b, a) % (2.0 * np.pi)], axis=-1)


def from_oklab(lab: ArrayLike) -> FloatArray:
    """Return linear sRGB of Oklab: the inverse of `oklab`.

    Parameters
    ----------
    lab : array_like, shape (..., 3)
        L, a, b [1].

    Returns
    -------
    ndarray, shape (..., 3)
        1 is white; may lie outside the cube [1].
    """
    result: FloatArray = (np.asarray(lab, dtype=np.float64) @ OKLAB_TO_ROOTS.T) ** 3 @ LMS_TO_RGB.T
    return result


def out_of_gamut(linear: ArrayLike) -> BoolArray:
    """Return where a colour lies outside the sRGB cube; nan counts as outside.

    Parameters
    ----------
    linear : array_like, shape (..., 3)
        1 is white [1].

    Returns
    -------
    ndarray of bool, shape (...)
    """
    linear = np.asarray(linear)
    red, green, blue = linear[..., 0], linear[..., 1], linear[..., 2]
    low = np.minimum(np.minimum(red, green), blue)
    high = np.maximum(np.maximum(red, green), blue)
    result: BoolArray = ~((low >= 0.0) & (high <= 1.0))
    return result


def to_gamut(linear: ArrayLike) -> NDArray[Any]:
    """Return colours inside the sRGB cube.

    Parameters
    ----------
    linear : array_like, shape (..., 3)
        1 is white [1].

    Returns
    -------
    ndarray, shape (..., 3)
        From 0 to 1 [1]; float32 for float32, else float64. A colour inside the cube is unchanged. One outside keeps Oklch
        hue and lightness and loses chroma until it touches the cube; at lightness 1 and above it is white, at 0 and
        below, or where a component is nan, black.
    """
    linear = np.asarray(linear)
    dtype = np.float32 if linear.dtype == np.float32 else np.float64
    result: NDArray[Any] = linear.astype(dtype).reshape(-1, 3)
    outside = np.flatnonzero(out_of_gamut(result))
    for start in range(0, outside.size, _CHUNK):
        rows = outside[start : start + _CHUNK]
        result[rows] = _reduced(result[rows].T.astype(np.float64)).T
    return result.reshape(linear.shape)


def _reduced(linear: FloatArray) -> FloatArray:
    """Return (3, n) colours, all of them outside the cube, moved onto it."""
    with np.errstate(invalid="ignore"):  # ∞ − ∞ is nan, and nan is black
        roots = np.cbrt(RGB_TO_LMS @ linear)
        # The matrix row adds up to 1 − 6.5e-9: dividing by its sum keeps lightness exactly.
        grey = ROOTS_TO_OKLAB[0] @ roots / ROOTS_TO_OKLAB[0].sum()
        chroma = np.hypot(*(ROOTS_TO_OKLAB[1:] @ roots))
        step = (roots - grey) / np.maximum(chroma, 1e-12)
    # Linear sRGB at chroma t: c0 + c1 t + c2 t² + c3 t³ in each channel.
    solve = (grey > 0.0) & (grey < 1.0)
    grey_in, step_in, chroma_in = grey[solve], step[:, solve], chroma[solve]
    c1 = 3.0 * grey_in**2 * (LMS_TO_RGB @ step_in)
    c2 = 3.0 * grey_in * (LMS_TO_RGB @ step_in**2)
    c3 = LMS_TO_RGB @ step_in**3
    c0 = grey_in**3
    # The chromas tried depend on hue and lightness alone, so in the fold neighbours of unequal chroma end on one branch.
    inside = np.zeros_like(grey_in)
    width = _CHROMA_BOUND
    for _ in range(_HALVINGS):
        width *= 0.5
        t = inside + width
        value = ((c3 * t + c2) * t + c1) * t + c0
        inside += width * ((value.min(axis=0) >= 0.0) & (value.max(axis=0) <= 1.0) & (t <= chroma_in))
    result = np.broadcast_to(np.where(grey >= 1.0, 1.0, 0.0), linear.shape).copy()
    result[:, solve] = np.clip(((c3 * inside + c2) * inside + c1) * inside + c0, 0.0, 1.0)
    return result
