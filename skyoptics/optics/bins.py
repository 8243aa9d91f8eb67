"""Spectral bins: the wavelength axis of everything past `skyoptics.rendering.build`."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.units import NM, ArrayLike, FloatArray


@dataclass(frozen=True, eq=False)
class Bins:
    """Wavelength bins; an array with a wavelength axis holds means over them, never values at a centre.

    Parameters
    ----------
    edges : ndarray, shape (nλ, 2)
        Lower and upper edge [m], adjoining or not; equal edges mean one wavelength.

    Raises
    ------
    DomainError
        If the shape is wrong, an edge is not positive, or an upper edge lies below the lower one.
    """

    edges: FloatArray

    def __post_init__(self) -> None:
        edges = np.array(self.edges, dtype=np.float64)
        if edges.ndim != 2 or edges.shape[1] != 2 or len(edges) == 0:
            raise DomainError(f"bins need an array of shape (n, 2), got {edges.shape}")
        if not np.all(np.isfinite(edges)) or np.any(edges <= 0.0) or np.any(edges[:, 1] < edges[:, 0]):
            raise DomainError("bins need 0 < lower edge <= upper edge in metres")
        edges.setflags(write=False)
        object.__setattr__(self, "edges", edges)

    def __len__(self) -> int:
        return len(self.edges)

    @classmethod
    def lines(cls, wavelength: ArrayLike) -> Bins:
        """Return bins of no width, one for each wavelength [m]."""
        wavelength = np.atleast_1d(np.asarray(wavelength, dtype=np.float64))
        return cls(np.stack([wavelength, wavelength], axis=1))

    @classmethod
    def adjoining(cls, edges: ArrayLike) -> Bins:
        """Return bins that share their edges, given n + 1 ascending edges [m]."""
        edges = np.asarray(edges, dtype=np.float64)
        return cls(np.stack([edges[:-1], edges[1:]], axis=1))

    @property
    def centre(self) -> FloatArray:
        """Middle of each bin, shape (nλ,) [m]: a label, not a place where anything is evaluated."""
        return self.edges.mean(axis=1)

    @property
    def width(self) -> FloatArray:
        """Width of each bin, shape (nλ,) [m]; 0 for a single wavelength."""
        return self.edges[:, 1] - self.edges[:, 0]

    @property
    def weight_nm(self) -> FloatArray:
        """Width used for integrals over wavelength, shape (nλ,) [nm]; a single wavelength counts as 1 nm."""
        width = self.width / NM
        return np.where(width > 0.0, width, 1.0)

    def at(self, place: ArrayLike) -> FloatArray:
        """Return wavelengths at places 0 … 1 (m,) in each bin, never outside it by rounding; shape (nλ, m) [m]."""
        low, high = self.edges[:, :1], self.edges[:, 1:]
        return np.clip(low + np.asarray(place, dtype=np.float64) * (high - low), low, high)

    def mean(self, wavelength: ArrayLike, values: ArrayLike) -> FloatArray:
        """Return the mean over each bin of a curve that is linear between its samples.

        Parameters
        ----------
        wavelength : array_like, shape (m,)
            Ascending samples [m].
        values : array_like, shape (m, ...)
            The curve at the samples; outside them it is 0.

        Returns
        -------
        ndarray, shape (nλ, ...)
            Exact integral of the broken line over the bin, divided by its width; the value itself for a bin of no width.
        """
        wavelength = np.asarray(wavelength, dtype=np.float64)
        values = np.asarray(values, dtype=np.float64)
        flat = values.reshape(len(wavelength), -1)
        low, high = self.edges.T
        width = np.where(high > low, high - low, 1.0)
        integral = (_running(high, wavelength, flat) - _running(low, wavelength, flat)) / width[:, None]
        line = np.stack([np.interp(low, wavelength, column, 0.0, 0.0) for column in flat.T], axis=1)
        result = np.where((high > low)[:, None], integral, line)
        return result.reshape((len(self), *values.shape[1:]))


def _running(x: FloatArray, knots: FloatArray, values: FloatArray) -> FloatArray:
    """Return the integral of a broken line (n, m) from its first knot to x (k,), shape (k, m)."""
    step = np.diff(knots)
    whole = np.zeros_like(values)
    np.cumsum(0.5 * (values[1:] + values[:-1]) * step[:, None], axis=0, out=whole[1:])
    x = np.clip(x, knots[0], knots[-1])
    cell = np.clip(np.searchsorted(knots, x, side="right") - 1, 0, len(knots) - 2)
    inside = (x - knots[cell])[:, None]
    slope = (values[cell + 1] - values[cell]) / step[cell][:, None]
    return whole[cell] + inside * (values[cell] + 0.5 * slope * inside)
