"""Lorenz–Mie scattering averaged over a size distribution, refined until the curve no longer changes."""

from __future__ import annotations

from concurrent.futures import Future
from dataclasses import dataclass
from math import pi
from typing import Any, Protocol

import numpy as np

from skyoptics.droplets.mie import checked, mueller_elements, sorted_cosines, terms_needed
from skyoptics.droplets.sizes import SizeDistribution
from skyoptics.errors import DomainError
from skyoptics.kernels.mie import accumulate_sizes
from skyoptics.units import ArrayLike, FloatArray

BATCH = 16
"""Sizes a task takes; fixed, so that sums do not depend on the number of threads."""


class Executor(Protocol):
    """Anything with `submit`; kernels release the interpreter, so threads do."""

    def submit(self, function: Any, /, *arguments: Any) -> Future[Any]:
        """Start a task."""
        ...


@dataclass(frozen=True, eq=False)
class SizeAverage:
    """Means over drops (each drop of the distribution counts once).

    Parameters
    ----------
    wavelength : ndarray, shape (nλ,)
        [m].
    products : ndarray, shape (4, nλ, nθ)
        Means of |S1|², |S2|², Re S1 S2*, Im S1 S2* [1].
    change : ndarray, shape (nλ, nθ)
        Relative change of |S1|² + |S2|² by the last refinement: the error stated [1].
    extinction, scattering : ndarray, shape (nλ,)
        Mean cross-sections of a drop [m²].
    asymmetry : ndarray, shape (nλ,)
        Mean cosine of the scattering angle, weighted by scattered light [1].
    sizes : int
        Number of radii summed.
    """

    wavelength: FloatArray
    products: FloatArray
    change: FloatArray
    extinction: FloatArray
    scattering: FloatArray
    asymmetry: FloatArray
    sizes: int

    @property
    def elements(self) -> FloatArray:
        """P11 P12 P22 P33 P34 P44, shape (nθ, nλ, 6), ∫P11 dΩ = 4π, diffraction included [1]."""
        scale = 4.0 * pi / ((2.0 * pi / self.wavelength) ** 2 * self.scattering)
        return np.moveaxis(mueller_elements(self.products, scale[:, np.newaxis]), 0, 1)

    @property
    def albedo(self) -> FloatArray:
        """Scattered ÷ removed light, shape (nλ,) [1]."""
        return self.scattering / self.extinction


def average(
    distribution: SizeDistribution,
    index: ArrayLike,
    wavelength: ArrayLike,
    cos_angle: ArrayLike,
    *,
    tolerance: float = 0.01,
    largest_level: int = 7,
    executor: Executor | None = None,
) -> SizeAverage:
    """Average over sizes, halving the steps in radius until the curves no longer change.

    Parameters
    ----------
    distribution : SizeDistribution
        Any of `skyoptics.droplets.sizes` or a measured spectrum.
    index : array_like, complex, shape (nλ,)
        n + ik of the drops in the medium [1].
    wavelength : array_like, shape (nλ,)
        In the medium [m].
    cos_angle : array_like, shape (nθ,)
        Cosine of the scattering angle [1].
    tolerance : float
        Largest relative change of |S1|² + |S2|² at any angle and wavelength by each of the last two halvings [1].
    largest_level : int
        Halvings at most; `SizeAverage.change` says what was reached.
    executor : optional
        Anything with `submit`; without it all runs in this thread. Results are the same bits.

    Returns
    -------
    SizeAverage

    Raises
    ------
    DomainError
        As `skyoptics.droplets.mie.amplitudes`, for any size met; cut the distribution (`sizes.Cut`) where drops are too
        large.
    """
    wavelength = np.atleast_1d(np.asarray(wavelength, dtype=np.float64))
    index = np.broadcast_to(np.asarray(index, dtype=np.complex128), wavelength.shape)
    if not (np.all(np.isfinite(wavelength)) and np.all(wavelength > 0.0) and np.ndim(cos_angle) == 1):
        raise DomainError("wavelengths must be positive, in metres, and angles one axis")
    order, cosine, first_backward, _ = sorted_cosines(cos_angle)
    count = len(wavelength)
    products = np.zeros((count, 4, cosine.size))
    totals = np.zeros((count, 3))
    change = np.full((count, cosine.size), np.inf)
    sizes = 0
    calm = 0
    for level in range(largest_level + 1):
        keep, radius, weight = distribution.refinement(level)
        x = 2.0 * pi * radius / wavelength[:, np.newaxis]
        for row in range(count):
            checked(index[row], x[row])
        before = products[:, 0] + products[:, 1]
        products *= keep
        totals *= keep
        tasks = [(row, slice(first, first + BATCH)) for row in range(count) for first in range(0, len(radius), BATCH)]
        arguments = [(complex(index[row]), x[row, part], weight[part], cosine, first_backward) for row, part in tasks]
        if executor is None:
            results = map(_batch, *zip(*arguments, strict=True)) if arguments else iter(())
        else:
            futures = [executor.submit(_batch, *values) for values in arguments]
            results = (future.result() for future in futures)
        for (row, _), (share, total) in zip(tasks, results, strict=True):
            products[row] += share
            totals[row] += total
        sizes += len(radius)
        if level > 0:
            change = np.abs(before / np.maximum(products[:, 0] + products[:, 1], 1e-300) - 1.0)
            calm = calm + 1 if np.all(change <= tolerance) else 0
            if calm == 2:  # once may be chance: steps far above the ripple's period sample it at random
                break
    unsorted = np.argsort(order)
    area = (wavelength / (2.0 * pi)) ** 2 * pi
    return SizeAverage(
        wavelength=wavelength,
        products=np.moveaxis(products, 0, 1)[:, :, unsorted],
        change=change[:, unsorted],
        extinction=totals[:, 0] * area,
        scattering=totals[:, 1] * area,
        asymmetry=totals[:, 2] / totals[:, 1],
        sizes=sizes,
    )


def _batch(
    index: complex, x: FloatArray, weight: FloatArray, cosine: FloatArray, first_backward: int
) -> tuple[FloatArray, FloatArray]:
    """Return products (4, nθ) and totals (3,) of a few sizes at one wavelength."""
    products = np.zeros((4, cosine.size))
    totals = np.zeros(3)
    accumulate_sizes(index, x, terms_needed(x), weight, cosine, first_backward, products, totals)
    return products, totals
