"""From absolute XYZ to a picture that a display can show: exposure, shoulder, gamut."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from skyoptics.colour.display import adaptation, automatic_exposure, bend_highlights, exposure_scale, linear_rgb
from skyoptics.colour.gamut import out_of_gamut, to_gamut
from skyoptics.errors import DomainError
from skyoptics.units import ArrayLike, Float32Array

_CHUNK = 1 << 16
"""Pixels developed at once, so that a large picture needs no large intermediates."""


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
    """

    rgb: Float32Array
    exposure_ev: float
    automatic: bool
    clipped: float
    out_of_gamut: float


def develop(xyz: ArrayLike, exposure_ev: float | None = None, white: ArrayLike | None = None) -> Developed:
    """Return a picture ready to be encoded and written.

    Parameters
    ----------
    xyz : array_like, shape (..., 3)
        [cd m⁻²]; a pixel with a value that is not finite lies outside the image and comes out black.
    exposure_ev : float, optional
        Exposure value at ISO 100 [EV]; metered if not given.
    white : array_like, shape (3,), optional
        XYZ of what is to look neutral; nothing is adapted if not given.

    Returns
    -------
    Developed

    Raises
    ------
    DomainError
        If the last axis is not X, Y, Z, or the exposure is not a finite number.

    Notes
    -----
    Exposure and shoulder keep chromaticity; only the gamut step takes chroma away.
    """
    xyz = np.asarray(xyz)
    if xyz.ndim == 0 or xyz.shape[-1] != 3:
        raise DomainError(f"XYZ has shape {xyz.shape}, its last axis has to hold X, Y, Z")
    automatic = exposure_ev is None
    exposure = automatic_exposure(xyz[..., 1]) if exposure_ev is None else float(exposure_ev)
    if not np.isfinite(exposure):
        raise DomainError(f"exposure is {exposure} EV, it has to be a finite number")
    scale = exposure_scale(exposure)
    matrix = None if white is None else adaptation(white).T

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
    return Developed(rgb.reshape(xyz.shape), exposure, automatic, clipped / count, outside / count)
