"""Spectral radiance to CIE XYZ.

XYZ is absolute: Y is luminance in cd m⁻², K_m = 683.002 lm W⁻¹ being part of the weights. (The same factor is used for
the CIE 1964 observer, whose Y is a luminance only by courtesy.) Nothing is adapted or normalised.

The tables are those of CIE 15 (ISO/CIE 11664-1), taken as straight lines between their 1 nm samples and as 0 outside
360–830 nm; ``docs/tools/bake_observers.py`` writes the file.
"""

from __future__ import annotations

from functools import cache
from pathlib import Path
from typing import Any, Literal, TypeAlias

import numpy as np
from numpy.typing import NDArray

from skyoptics.errors import DataFileError, DomainError, nearest
from skyoptics.optics.bins import Bins
from skyoptics.units import NM, ArrayLike, FloatArray

Observer: TypeAlias = Literal["1931", "1964", "scotopic"]

LUMINOUS_EFFICACY = 683.002
"""K_m [lm W⁻¹]: 683 lm W⁻¹ at 540 THz, moved to the peak of the tabulated curve (CIE 15)."""
SCOTOPIC_EFFICACY = 1700.06
"""K'_m of the dark-adapted eye [lm W⁻¹] (CIE 1951; ISO 23539)."""
NIGHT_CHROMATICITY = (0.28, 0.29)
"""x, y given to the dark-adapted eye, which sees no colours: a slightly bluish grey (common practice, no source)."""
OBSERVERS = ("1931", "1964", "scotopic")
"""CIE 1931 2°, CIE 1964 10°, and the dark-adapted eye: V'(λ) of CIE 1951 in one colour."""

_FILE = Path(__file__).with_name("observers.npz")


def matching_functions(observer: Observer = "1931") -> tuple[FloatArray, FloatArray]:
    """Return a CIE standard observer.

    Parameters
    ----------
    observer : {"1931", "1964", "scotopic"}
        CIE 1931 2°, CIE 1964 10°, or V'(λ) times the tristimulus values of `NIGHT_CHROMATICITY`, scaled so that Y comes out
        as scotopic luminance.

    Returns
    -------
    wavelength : ndarray, shape (471,)
        [m].
    values : ndarray, shape (471, 3)
        x̄, ȳ, z̄ [1]; read only.

    Raises
    ------
    DomainError
        For an observer that does not exist.
    DataFileError
        If the table that belongs to the program cannot be read.
    """
    if observer not in OBSERVERS:
        hint = nearest(str(observer), OBSERVERS)
        raise DomainError(f"observer is {observer!r}, allowed are {', '.join(OBSERVERS)}{hint}")
    tables = _tables()
    return tables["wavelength"], tables[observer]


def weights(bins: Bins, observer: Observer = "1931", light: tuple[ArrayLike, ArrayLike] | None = None) -> FloatArray:
    """Return the matrix that turns bin means of spectral radiance into XYZ.

    Parameters
    ----------
    bins : Bins
        The nλ spectral bins.
    observer : {"1931", "1964", "scotopic"}
        As for `matching_functions`.
    light : (wavelength, values), optional
        Spectrum of the light, shapes (m,) [m] and (m,) [any unit], straight lines between its samples, 0 outside them.
        With it, radiance proportional to the light inside each bin gives the XYZ of the fine spectrum, however wide the
        bins; without it, radiance is taken as constant inside a bin.

    Returns
    -------
    ndarray, shape (nλ, 3)
        [lm W⁻¹ nm], such that ``radiance @ weights`` is XYZ [cd m⁻²] for radiance [W m⁻² sr⁻¹ nm⁻¹].

    Notes
    -----
    K_m ∫ light · cmf dλ / mean(light) over each bin, exact for the broken lines. A bin of no width counts as 1 nm.
    """
    wavelength, values = matching_functions(observer)
    # A step down to 0 at the ends of the table, so that a bin across them holds no sloping edge.
    outer = [np.nextafter(wavelength[0], 0.0), np.nextafter(wavelength[-1], 1.0)]
    wavelength = np.concatenate([outer[:1], wavelength, outer[1:]])
    values = np.pad(values, ((1, 1), (0, 0)))
    mean = bins.mean(wavelength, values)
    if light is not None:
        _mean_under_light(mean, bins, wavelength, values, light)
    return LUMINOUS_EFFICACY * mean * bins.weight_nm[:, None]


def xyz(
    radiance: ArrayLike,
    bins: Bins,
    observer: Observer = "1931",
    light: tuple[ArrayLike, ArrayLike] | None = None,
) -> NDArray[Any]:
    """Return the tristimulus values of spectral radiance.

    Parameters
    ----------
    radiance : array_like, shape (..., nλ)
        Bin means [W m⁻² sr⁻¹ nm⁻¹].
    bins, observer, light
        As for `weights`.

    Returns
    -------
    ndarray, shape (..., 3)
        X, Y, Z [cd m⁻²]; float32 for float32 radiance, else float64; nan where a radiance is nan.

    Raises
    ------
    DomainError
        If the last axis does not hold one value for each bin.
    """
    radiance = np.asarray(radiance)
    if radiance.ndim == 0 or radiance.shape[-1] != len(bins):
        raise DomainError(f"radiance has shape {radiance.shape}, its last axis has to hold {len(bins)} spectral bins")
    dtype = np.float32 if radiance.dtype == np.float32 else np.float64
    result: NDArray[Any] = radiance.astype(dtype, copy=False) @ weights(bins, observer, light).astype(dtype)
    return result


@cache
def _tables() -> dict[str, FloatArray]:
    """Return the baked file, wavelength in metres."""
    try:
        with np.load(_FILE) as file:
            tables = {observer: file[f"cie_{observer}"] for observer in OBSERVERS}
            tables["wavelength"] = file["wavelength_nm"] * NM
        x, y = NIGHT_CHROMATICITY
        night = np.array([x / y, 1.0, (1.0 - x - y) / y]) * (SCOTOPIC_EFFICACY / LUMINOUS_EFFICACY)
        tables["scotopic"] = tables["scotopic"][:, None] * night
    except (OSError, KeyError, ValueError) as error:
        raise DataFileError(f"{_FILE.name}: cannot be read ({error}); install skyoptics again") from error
    for table in tables.values():
        table.setflags(write=False)
    return tables


def _mean_under_light(
    mean: FloatArray,
    bins: Bins,
    wavelength: FloatArray,
    values: FloatArray,
    light: tuple[ArrayLike, ArrayLike],
) -> None:
    """Put ∫ light · cmf / ∫ light into the rows of `mean` (nλ, 3) where a bin has width and light."""
    grid = np.asarray(light[0], dtype=np.float64)
    power = np.asarray(light[1], dtype=np.float64)
    if grid.ndim != 1 or power.shape != grid.shape or np.any(np.diff(grid) <= 0.0):
        raise DomainError("light needs ascending wavelengths in metres and as many values")
    knots = np.union1d(wavelength, grid)
    for row, (low, high) in enumerate(bins.edges):
        edge = np.concatenate([[low], knots[(knots > low) & (knots < high)], [high]])
        # Simpson's rule is exact: a product of two straight lines between neighbouring knots.
        place = np.stack([edge[:-1], 0.5 * (edge[:-1] + edge[1:]), edge[1:]])
        share = np.diff(edge) * np.array([[1.0], [4.0], [1.0]]) / 6.0 * np.interp(place, grid, power, 0.0, 0.0)
        if share.sum() > 0.0:
            curve = np.stack([np.interp(place, wavelength, column, 0.0, 0.0) for column in values.T], axis=-1)
            mean[row] = np.tensordot(share, curve, axes=2) / share.sum()
