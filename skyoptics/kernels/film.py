"""Planes of traced light: adding a batch, and mean and variance of a weighted sum over bins, each in one pass."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit


@njit(cache=True, nogil=True, error_model="numpy")
def add_plane(total: Any, squares: Any, plane: Any, weight: float, stride: int) -> None:
    """Add a plane to a sum (both flat float32), and the weighted square of every stride-th value to squares (float64)."""
    for i in range(len(plane)):
        total[i] += plane[i]
    for i in range(len(squares)):
        value = weight * np.float64(plane[i * stride])
        squares[i] += value * value


@njit(cache=True, nogil=True, error_model="numpy")
def luminance_and_variance(sums: Any, squares: Any, factor: Any, count: float, luminance: Any, variance: Any) -> None:
    """Fill mean and variance of the mean of Σ factor · sum over bins.

    sums (nλ, n, stride) float32, the first component counting, and squares (n,) float64 of `count` batches of each bin;
    factor (nλ,) float64; luminance and variance (n,) float64. Bins are independent; fewer than two batches give an
    infinite variance.
    """
    bands, n, _ = sums.shape
    for i in range(n):
        luminance[i] = 0.0
        variance[i] = 0.0
    for band in range(bands):
        for i in range(n):
            value = factor[band] * np.float64(sums[band, i, 0])
            luminance[i] += value
            variance[i] += value * value
    for i in range(n):
        spread = squares[i] - variance[i] * count
        variance[i] = max(spread, 0.0) / (count * (count - 1.0)) if count > 1.0 else np.inf
