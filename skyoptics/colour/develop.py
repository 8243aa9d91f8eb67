"""From absolute XYZ to a picture that a display can show: exposure, shoulder, gamut."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from skyoptics.colour import white as whites
from skyoptics.colour.display import (
    adaptation,
    automatic_exposure,
    bend_highlights,
    exposure_scale,
    linear_rgb,
    metered_exposure,
)
from skyoptics.colour.gamut import out_of_gamut, to_gamut
from skyoptics.errors import DomainError
from skyoptics.units import ArrayLike, Float32Array, FloatArray

_CHUNK = 1 << 16
"""Pixels developed at once, so that a large picture needs no large intermediates."""
_METERS = {"sky": automatic_exposure, "average": metered_exposure}


@dataclass(frozen=True, eq=False)
class Developed:
    """A developed picture and what was done to it.

    Parameters
    ----------
    rgb : ndarray of float32, shape (..., 3)
        Linear sRGB, 0 to 1; black outside the image [1].
    exposure_ev : float
        Exposure value at ISO 100 [EV].
    automatic : bool
        Whether the exposure was metered.
    clipped : float
        Share of the pixels inside the image whose luminance, as exposed, is above the display's white: they are shown by
        the shoulder alone [1].
    out_of_gamut : float
        Share of the pixels inside the image that lost chroma [1].
    white : ndarray of shape (3,) or None
        XYZ of what was made neutral; None if nothing was adapted.
    """

    rgb: Float32Array
    exposure_ev: float
    automatic: bool
    clipped: float
    out_of_gamut: float
    white: FloatArray | None = None


def develop(
    xyz: ArrayLike,
    exposure_ev: float | None = None,
    white: ArrayLike | Literal["auto"] | None = None,
    metering: Literal["sky", "average"] = "sky",
) -> Developed:
    """Return a picture ready to be encoded and written.

    Parameters
    ----------
    xyz : array_like, shape (..., 3)
        [cd m⁻²]; a pixel with a value that is not finite lies outside the image and comes out black.
    exposure_ev : float, optional
        Exposure value at ISO 100 [EV]; metered if not given.
    white : array_like of shape (3,), or "auto", optional
        XYZ of what is to look neutral, or found in the picture (`skyoptics.colour.white.automatic`); nothing is adapted if
        not given.
    metering : {"sky", "average"}
        What chooses the exposure: `display.automatic_exposure` or `display.metered_exposure`.

    Returns
    -------
    Developed

    Raises
    ------
    DomainError
        If the last axis is not X, Y, Z, the exposure is not a finite number, or a word is unknown.

    Notes
    -----
    Exposure and shoulder keep chromaticity; only the gamut step takes chroma away.
    """
    xyz = np.asarray(xyz)
    if xyz.ndim == 0 or xyz.shape[-1] != 3:
        raise DomainError(f"XYZ has shape {xyz.shape}, its last axis has to hold X, Y, Z")
    automatic = exposure_ev is None
    if metering not in _METERS:
        raise DomainError(f"metering is {metering!r}, allowed are {', '.join(_METERS)}")
    exposure = _METERS[metering](xyz[..., 1]) if exposure_ev is None else float(exposure_ev)
    if not np.isfinite(exposure):
        raise DomainError(f"exposure is {exposure} EV, it has to be a finite number")
    scale = exposure_scale(exposure)
    if isinstance(white, str):
        if white != "auto":
            raise DomainError(f'white is {white!r}, it has to be "auto" or X, Y, Z')
        white = whites.white(whites.automatic(xyz))
    neutral = None if white is None else np.asarray(white, dtype=np.float64)
    matrix = None if neutral is None else adaptation(neutral).T

    flat = xyz.reshape(-1, 3)
    rgb = np.zeros(flat.shape, dtype=np.float32)
    seen = clipped = outside = 0
    for start in range(0, len(flat), _CHUNK):
        part = scale * flat[start : start + _CHUNK].astype(np.float64)
        finite = np.isfinite(part).all(axis=-1)
        part[~finite] = 0.0
        if matrix is not None:
            part = part @ matrix
        linear = bend_highlights(linear_rgb(part))
        rgb[start : start + _CHUNK] = to_gamut(linear)
        seen += int(finite.sum())
        clipped += int((part[:, 1] > 1.0).sum())
        outside += int(out_of_gamut(linear).sum())
    count = max(seen, 1)
    return Developed(rgb.reshape(xyz.shape), exposure, automatic, clipped / count, outside / count, neutral)
