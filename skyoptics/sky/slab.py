"""A level, homogeneous layer of finite depth: single scattering in closed form.

Depth t is counted downwards, 0 on top and `depth` at the bottom, in *events*: light falls on a crystal's own area. Towards a
direction with vertical cosine µ it meets k/µ events a unit of depth, k the area the crystals show that way ÷ their mean. Light
that diffraction takes out goes straight on, within a fraction of a degree, so it counts as not taken out at all; the reference
extinction of the project is twice the mean area, and the depth in events half the optical depth of that reference.

Light that comes in at µ0 with k0 and leaves at µ with k after one event (Chandrasekhar, *Radiative Transfer*, 1950, §69, with
albedo and phase function taken out and an extinction of its own on either way):

    through    (1/µ) ∫ exp(−k0 t/µ0 − k (depth − t)/µ) dt = (1/µ) (e^(−k0 depth/µ0) − e^(−k depth/µ)) / (k/µ − k0/µ0),
    back       (1/µ) ∫ exp(−k0 t/µ0 − k t/µ) dt            = (1/µ) (1 − e^(−depth (k0/µ0 + k/µ))) / (k0/µ0 + k/µ).

µ is 1 / `skyoptics.sky.amount.path_factor`: sin e high up, finite at the horizon, so that a slab and a thin layer agree
where both hold.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.light.slant import EARTH_RADIUS
from skyoptics.sky.amount import LAYER_HEIGHT
from skyoptics.units import ArrayLike, FloatArray

EVENTS = 0.5
"""Depth in events ÷ optical depth of the reference extinction."""

_LEAST_COSINE = 1e-12


def rim(height: float = LAYER_HEIGHT) -> float:
    """Return the square of the vertical cosine at the horizon of a layer at a height [m], for `skyoptics.crystals.layer`."""
    return float(1.0 - (EARTH_RADIUS / (EARTH_RADIUS + height)) ** 2)


def vertical_cosine(elevation: ArrayLike, height: float = LAYER_HEIGHT) -> FloatArray:
    """Return the µ of a line of sight at elevations [rad], as far below the horizon as above; 1 / `path_factor`."""
    elevation = np.asarray(elevation, dtype=np.float64)
    return np.asarray(np.hypot(np.sin(elevation), np.sqrt(rim(height)) * np.cos(elevation)))


def through(depth: ArrayLike, sun_cosine: ArrayLike, cosine: ArrayLike, sun_k: ArrayLike, k: ArrayLike) -> FloatArray:
    """Return the single-scattering factor of light that leaves on the other side of the layer.

    Parameters
    ----------
    depth : array_like
        Vertical, in events; all arguments broadcast.
    sun_cosine, cosine : array_like
        µ0 and µ, 0 to 1.
    sun_k, k : array_like
        Area shown that way ÷ its mean, above 0.

    Returns
    -------
    ndarray
        Path integral of events along the line of sight, each weighted by what gets through before and after. It has no
        singularity: where both exponents are equal it is depth/µ · e^(−k depth/µ), at µ → 0 e^(−k0 depth/µ0) / k.
    """
    depth, cosine = np.asarray(depth, dtype=np.float64), np.maximum(cosine, _LEAST_COSINE)
    inward, outward = sun_k / np.maximum(sun_cosine, _LEAST_COSINE), k / cosine
    # symmetric in the two: the smaller exponent is taken out, what is left is 0 to 1
    return np.asarray(
        depth / cosine * np.exp(-np.minimum(inward, outward) * depth) * _escape(np.abs(outward - inward) * depth)
    )


def back(depth: ArrayLike, sun_cosine: ArrayLike, cosine: ArrayLike, sun_k: ArrayLike, k: ArrayLike) -> FloatArray:
    """Return the single-scattering factor of light that leaves where it came in; arguments as in `through`."""
    depth, cosine = np.asarray(depth, dtype=np.float64), np.maximum(cosine, _LEAST_COSINE)
    both = sun_k / np.maximum(sun_cosine, _LEAST_COSINE) + k / cosine
    return np.asarray(depth / cosine * _escape(both * depth))


def slab(
    elevation: ArrayLike,
    sun_elevation: float,
    optical_depth: float,
    extinction: Callable[[FloatArray], FloatArray],
    height: float = LAYER_HEIGHT,
) -> FloatArray:
    """Return the amount of a slab: the path integral of the reference extinction, weighted by what gets through.

    Parameters
    ----------
    elevation : array_like
        Of the line of sight [rad]. Above the horizon the observer stands below the layer, below it he looks down on it.
    sun_elevation : float
        Of the source [rad]; below the horizon its light comes from under the layer (mirrored in water).
    optical_depth : float
        Vertical, of the reference extinction of all kinds of crystals together.
    extinction : callable
        Cosine of the zenith angle → extinction ÷ reference of all kinds together, mean weighted by their optical depths.
    height : float, optional
        Of the layer above the observer [m], for the path at the horizon.

    Returns
    -------
    ndarray
        Radiance = irradiance · phase · amount; one kind's amount is its share of the optical depth times this. Tends to
        optical_depth · `path_factor` for a thin layer.

    Raises
    ------
    DomainError
        If the optical depth is negative or no number.
    """
    elevation = np.asarray(elevation, dtype=np.float64)
    depth = _depth(optical_depth)
    k, sun_k = _towards(elevation, extinction), _towards(np.asarray(sun_elevation, dtype=np.float64), extinction)
    cosines = vertical_cosine(sun_elevation, height), vertical_cosine(elevation, height)
    straight = (elevation >= 0.0) == (sun_elevation >= 0.0)
    return np.where(straight, through(depth, *cosines, sun_k, k), back(depth, *cosines, sun_k, k)) / EVENTS


def transmission(
    elevation: ArrayLike,
    optical_depth: float,
    extinction: Callable[[FloatArray], FloatArray],
    height: float = LAYER_HEIGHT,
) -> FloatArray:
    """Return the share of light from behind a slab that comes straight through, e^(−k depth/µ); arguments as in `slab`."""
    elevation = np.asarray(elevation, dtype=np.float64)
    k = _towards(elevation, extinction)
    return np.asarray(np.exp(-k * _depth(optical_depth) / vertical_cosine(elevation, height)))


def _depth(optical_depth: float) -> float:
    if not 0.0 <= optical_depth < np.inf:
        raise DomainError(f"optical depth of a slab is a number of at least 0; got {optical_depth!r}")
    return EVENTS * optical_depth


def _towards(elevation: FloatArray, extinction: Callable[[FloatArray], FloatArray]) -> FloatArray:
    """Return extinction ÷ reference, which knows angles by their true sine; nan where there is no direction."""
    held = np.isfinite(elevation)
    k = np.asarray(extinction(np.abs(np.sin(np.where(held, elevation, 0.0)))), dtype=np.float64)
    return np.where(held, k, np.nan)


def _escape(x: FloatArray) -> FloatArray:
    """Return (1 − e^(−x)) / x, 1 at 0."""
    some = np.where(x > 0.0, x, 1.0)
    return np.where(x > 0.0, -np.expm1(-some) / some, np.where(np.isnan(x), np.nan, 1.0))
