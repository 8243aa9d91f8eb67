"""Colours of a study: chromaticity, purity, differences, display colours of a map.

Light is the sun's above the air (ASTM G173-03); observer CIE 1931 2°. The white that purity and CIELAB refer to is that of
the light itself, with the luminance of the brightest point of the curves compared.
"""

from __future__ import annotations

import numpy as np

from skyoptics.colour import display, gamut, observer
from skyoptics.light import spectrum
from skyoptics.optics.bins import Bins
from skyoptics.units import NM, ArrayLike, FloatArray

FEWEST = 8
"""Wavelengths that make a white of their own, at least."""


def bands(wavelength: FloatArray) -> Bins:
    """Return the spectral bins that single wavelengths stand for: halfway to their neighbours; one alone is a line."""
    if len(wavelength) == 1:
        return Bins.lines(wavelength)
    middle = 0.5 * (wavelength[1:] + wavelength[:-1])
    first, last = 1.5 * wavelength[0] - 0.5 * wavelength[1], 1.5 * wavelength[-1] - 0.5 * wavelength[-2]
    low, high = spectrum.samples()[0][[0, -1]]
    return Bins.adjoining(
        np.concatenate([[max(first, min(low, wavelength[0]))], middle, [min(last, max(high, wavelength[-1]))]])
    )


def sunlight(wavelength: FloatArray) -> FloatArray:
    """Return the matrix that turns scattering by wavelength (…, nλ) into XYZ under sunlight, shape (nλ, 3)."""
    bins = bands(wavelength)
    samples = spectrum.samples()
    inside = Bins(np.clip(bins.edges, samples[0][0], samples[0][-1]))
    return observer.weights(bins, light=samples) * spectrum.irradiance(inside)[:, np.newaxis]


def light(wavelength: FloatArray) -> FloatArray:
    """Return XYZ of the light itself, shape (3,), on the scale of `sunlight`.

    Few wavelengths make no white: with fewer than eight, or less than 430–650 nm between them, that of full sunlight is
    returned, as bright as theirs.
    """
    own = sunlight(wavelength).sum(axis=0)
    if len(wavelength) >= FEWEST and wavelength[0] <= 430.0 * NM and wavelength[-1] >= 650.0 * NM:
        return own
    full = sunlight(np.linspace(380.0, 780.0, 81) * NM).sum(axis=0)
    return np.asarray(full * (own[1] / full[1]))


def chromaticity(xyz: ArrayLike) -> FloatArray:
    """Return x, y of XYZ, shape (..., 2); nan for black."""
    xyz = np.asarray(xyz, dtype=np.float64)
    total = xyz.sum(axis=-1, keepdims=True)
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.asarray(np.where(total > 0.0, xyz[..., :2] / total, np.nan))


def purity(xy: ArrayLike, white: ArrayLike) -> FloatArray:
    """Return the excitation purity (CIE 15): distance from white ÷ that of the spectral colour or purple beyond.

    Parameters
    ----------
    xy : array_like, shape (..., 2)
        Chromaticities.
    white : array_like, shape (2,)
        Chromaticity of the light.

    Returns
    -------
    ndarray, shape (...)
        0 for white, 1 on the spectral locus and the purple line [1]; nan for nan.
    """
    locus = chromaticity(observer.matching_functions()[1])
    locus = locus[np.all(np.isfinite(locus), axis=1)]
    start, side = locus, np.roll(locus, -1, axis=0) - locus
    ray = np.asarray(xy, dtype=np.float64) - np.asarray(white, dtype=np.float64)
    offset = start - np.asarray(white, dtype=np.float64)
    flat = ray.reshape(-1, 2)
    with np.errstate(invalid="ignore", divide="ignore"):
        cross = flat[:, :1] * side[:, 1] - flat[:, 1:] * side[:, 0]
        reach = (offset[:, 0] * side[:, 1] - offset[:, 1] * side[:, 0]) / cross
        along = (offset[:, 0] * flat[:, 1:] - offset[:, 1] * flat[:, :1]) / cross
        hit = (along >= -1e-9) & (along <= 1.0 + 1e-9) & (reach > 0.0)
        nearest = np.min(np.where(hit, reach, np.inf), axis=1)
    result = np.where(np.all(np.isfinite(flat), axis=1), 1.0 / nearest, np.nan)
    return np.asarray(result.reshape(ray.shape[:-1]))


def difference(first: ArrayLike, second: ArrayLike, white: ArrayLike) -> FloatArray:
    """Return ΔE2000 between two rows of XYZ, shape (...).

    Parameters
    ----------
    first, second : array_like, shape (..., 3)
        XYZ, one scale.
    white : array_like, shape (3,)
        XYZ of the light; its luminance is set to the largest one met.
    """
    from colour.difference import delta_E_CIE2000

    top = max(float(np.nanmax(np.asarray(first)[..., 1])), float(np.nanmax(np.asarray(second)[..., 1])))
    scaled = np.asarray(white, dtype=np.float64) * (top / np.asarray(white)[1])
    return np.asarray(delta_E_CIE2000(lab(first, scaled), lab(second, scaled)))


def lab(xyz: ArrayLike, white: ArrayLike) -> FloatArray:
    """Return CIELAB 1976 (CIE 15), shape (..., 3)."""
    ratio = np.asarray(xyz, dtype=np.float64) / np.asarray(white, dtype=np.float64)
    f = np.where(ratio > (6.0 / 29.0) ** 3, np.cbrt(ratio), ratio / (3.0 * (6.0 / 29.0) ** 2) + 4.0 / 29.0)
    x, y, z = np.moveaxis(f, -1, 0)
    return np.stack([116.0 * y - 16.0, 500.0 * (x - y), 200.0 * (y - z)], axis=-1)


def shown(xyz: FloatArray, white: FloatArray) -> FloatArray:
    """Return encoded sRGB of a map, 0 … 1, shape (..., 3): each row as bright as its brightest point, white as the light.

    Rows are adapted to the light and scaled to their own maximum, so that small drops, whose bow is faint, show their
    colours too; what lies outside sRGB loses chroma at constant hue.
    """
    adapted = xyz @ display.adaptation(white).T
    linear = display.linear_rgb(adapted)
    top = np.maximum(np.nanmax(adapted[..., 1], axis=-1), 1e-300)
    return np.asarray(
        np.clip(display.encode(gamut.to_gamut(0.9 * linear / top[..., np.newaxis, np.newaxis])), 0.0, 1.0)
    )
