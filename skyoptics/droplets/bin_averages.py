"""Lorenz–Mie scattering averaged over sizes and over the wavelengths inside spectral bins at once.

Each drop of the size rule gets a wavelength of its own inside the bin (the golden-ratio sequence, evenly spread over any
run of drops), so that averaging over a bin costs nothing beyond the average over sizes, and the ripple of single drops,
which depends on size ÷ wavelength, is sampled at random instead of in step. At single wavelengths the steps in size follow
the ripple where that is cheap; where not, sizes are moved at random within their steps.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from math import pi, sqrt
from typing import Any

import numpy as np

from skyoptics.droplets.averages import BATCH, SizeAverage
from skyoptics.droplets.mie import checked, sorted_cosines, terms_needed
from skyoptics.droplets.sizes import COARSEST, SizeDistribution
from skyoptics.errors import DomainError
from skyoptics.kernels.mie import accumulate_sizes
from skyoptics.optics.batches import Executor, in_order
from skyoptics.optics.bins import Bins
from skyoptics.units import ComplexArray, FloatArray

IndexLaw = Callable[[FloatArray], Any]
Progress = Callable[[int, int], None]

GOLDEN = (sqrt(5.0) - 1.0) / 2.0
SILVER = sqrt(2.0) - 1.0
"""Together with `GOLDEN` it spreads points evenly over a square."""
FOLLOWED = 0.2
"""Step in size parameter that averages the ripple of single drops out: evenly spaced sums do so, to all digits, for every
period longer than the step. Resonances of water drops come every 0.8, and are sharp: with 0.7 the peak of a fogbow is off by
0.08°, with 0.14 by 0.01°."""
AFFORDED = 1e6
"""Drops times size parameter up to which that is paid for."""
NOT_FOLLOWED = 1.0
"""Step from which even spacing does harm: beyond, single wavelengths are summed over sizes at random within their steps."""
LEAST_LEVEL = 1
"""Halvings of the size steps at least."""


def average_bins(
    distribution: SizeDistribution,
    index: IndexLaw,
    bins: Bins,
    angle: FloatArray,
    *,
    tolerance: float = 0.02,
    resolution: float = 0.0,
    least_level: int = LEAST_LEVEL,
    largest_level: int = 7,
    executor: Executor | None = None,
    progress: Progress | None = None,
) -> SizeAverage:
    """Average over sizes and bins, doubling the number of drops until the curves keep still.

    Parameters
    ----------
    distribution : SizeDistribution
        Of the drops.
    index : callable
        Vacuum wavelengths [m] → complex index relative to the medium.
    bins : Bins
        Spectral bins; bins of no width are single wavelengths.
    angle : ndarray, shape (nθ,)
        Scattering angles, ascending [rad].
    tolerance : float
        Root mean square over angles and bins of the relative change of |S1|² + |S2|² by the last doubling; in single bins
        up to twice that is let pass [1]. Half the drops of a doubling being new, that change is as large as the error that is left.
    resolution : float
        Width in angle over which curves are averaged before they are compared [rad]: what will be seen under a disc of
        that size. 0 compares them as they are.
    least_level, largest_level : int
        Halvings of the size steps at least, and at most.
    executor : optional
        Anything with `submit`; without it all runs in this thread. Results are the same bits.
    progress : callable, optional
        Told the work done and the work planned so far, in batches.

    Returns
    -------
    SizeAverage
        `wavelength` the bins' centres, `products` such that dσ/dΩ = products/(2π/wavelength)², bin means; `change` by
        angle, over `resolution`.

    Raises
    ------
    DomainError
        As `skyoptics.droplets.mie.amplitudes`, for any size met; if angles do not ascend.
    """
    angle = np.asarray(angle, dtype=np.float64)
    if angle.ndim != 1 or len(angle) < 2 or not np.all(np.diff(angle) > 0.0):
        raise DomainError("scattering angles must be a list of at least two growing numbers")
    _, cosine, first_backward, _ = sorted_cosines(np.cos(angle))
    count = len(bins)
    products = np.zeros((count, 4, cosine.size))
    totals = np.zeros((count, 3))
    change = np.full((count, cosine.size), np.inf)
    sizes, done = 0, 0
    scattered = False
    if np.all(bins.width == 0.0):
        follow = _following(distribution, float(bins.edges.min()))
        scattered = follow is None
        least_level = max(least_level, min(follow or 0, largest_level))
    for level, keep, radius, weight in _levels(distribution, bins, largest_level):
        number = np.arange(sizes, sizes + len(radius)) + 0.5
        if scattered:
            radius, weight = _scattered(distribution, radius, weight, np.modf(number * SILVER)[0])
        place = np.modf(number * GOLDEN)[0]
        wavelength = bins.at(place)
        medium = np.broadcast_to(np.asarray(index(wavelength.ravel()), np.complex128), (wavelength.size,))
        m, x = checked(medium.reshape(wavelength.shape), 2.0 * pi * radius / wavelength)
        share = weight * (wavelength / bins.centre[:, np.newaxis]) ** 2
        before = _smooth(products[:, 0] + products[:, 1], angle, resolution)
        products *= keep
        totals *= keep
        where = [(row, slice(first, first + BATCH)) for first in range(0, len(radius), BATCH) for row in range(count)]
        planned = (done + len(where)) << max(least_level - level, 0)
        tasks = ((m[row, part], x[row, part], share[row, part], cosine, first_backward) for row, part in where)
        for (row, _), (gain, total) in zip(where, in_order(_batch, tasks, executor), strict=True):
            products[row] += gain
            totals[row] += total
            done += 1
            if progress is not None:
                progress(done, planned)
        sizes += len(radius)
        if level > 0:
            after = _smooth(products[:, 0] + products[:, 1], angle, resolution)
            change = np.abs(before / np.maximum(after, 1e-300) - 1.0)
            by_bin = np.sqrt(np.mean(change**2, axis=1))
            if level >= least_level and np.sqrt(np.mean(by_bin**2)) <= tolerance and by_bin.max() <= 2.0 * tolerance:
                break
    if sizes == 1:
        change = np.zeros_like(change)
    area = pi * (bins.centre / (2.0 * pi)) ** 2
    return SizeAverage(
        wavelength=bins.centre,
        products=np.moveaxis(products, 0, 1),
        change=change,
        extinction=totals[:, 0] * area,
        scattering=totals[:, 1] * area,
        asymmetry=totals[:, 2] / totals[:, 1],
        sizes=sizes,
    )


def _levels(
    distribution: SizeDistribution, bins: Bins, largest: int
) -> Iterator[tuple[int, float, FloatArray, FloatArray]]:
    """Yield (level, keep, radius, weight); one size in bins of width is repeated, for wavelengths alone."""
    single = len(distribution.refinement(1)[1]) == 0
    if single and np.all(bins.width == 0.0):
        yield 0, *distribution.refinement(0)
        return
    for level in range(largest + 1):
        if single:
            _, radius, _ = distribution.refinement(0)
            new = COARSEST if level == 0 else COARSEST << (level - 1)
            whole = COARSEST << level
            yield level, (0.5 if level else 0.0), np.full(new, radius[0]), np.full(new, 1.0 / whole)
        else:
            yield level, *distribution.refinement(level)


def _following(distribution: SizeDistribution, wavelength: float) -> int | None:
    """Return the level at which steps in size follow the ripple of single drops, as far as afforded; None if too far off."""
    radius = np.sort(distribution.refinement(0)[1])
    if len(radius) < 2:
        return 0
    x = 2.0 * pi / wavelength * radius
    widest = float(np.diff(x).max())
    afforded = max(int(np.log2(max(AFFORDED / (x.mean() * COARSEST), 1.0))), 0)
    if widest / 2.0**afforded > NOT_FOLLOWED:
        return None
    return min(max(int(np.ceil(np.log2(widest / FOLLOWED))), 0), afforded)


def _scattered(
    distribution: SizeDistribution, radius: FloatArray, weight: FloatArray, place: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Return radii and weights, each radius moved within its step.

    Even steps near a multiple of the ripple's period would see it in step: a false ring at some angle.
    """
    density = distribution.density(radius)
    there = np.isfinite(density) & (density > 0.0)
    step = np.zeros_like(radius)
    step[there] = weight[there] / density[there]
    moved = radius + (place - 0.5) * step
    there &= moved > 0.0
    weight = weight.copy()
    weight[there] = step[there] * distribution.density(moved[there])
    return np.where(there, moved, radius), weight


def _batch(
    m: ComplexArray, x: FloatArray, weight: FloatArray, cosine: FloatArray, first_backward: int
) -> tuple[FloatArray, FloatArray]:
    """Return products (4, nθ) and totals (3,) of a few drops, each with its own index."""
    products = np.zeros((4, cosine.size))
    totals = np.zeros(3)
    terms = terms_needed(x)
    if np.all(m == m[0]):
        accumulate_sizes(complex(m[0]), x, terms, weight, cosine, first_backward, products, totals)
        return products, totals
    for one in range(len(x)):
        part = slice(one, one + 1)
        accumulate_sizes(complex(m[one]), x[part], terms[part], weight[part], cosine, first_backward, products, totals)
    return products, totals


def _smooth(curves: FloatArray, angle: FloatArray, width: float) -> FloatArray:
    """Return curves (n, nθ) averaged over a window of the given width in angle, cut at the ends."""
    if width <= 0.0:
        return curves.copy()
    low = np.maximum(angle - 0.5 * width, angle[0])
    high = np.minimum(angle + 0.5 * width, angle[-1])
    result = np.empty_like(curves)
    for row, curve in enumerate(curves):
        running = np.concatenate([[0.0], np.cumsum(0.5 * (curve[1:] + curve[:-1]) * np.diff(angle))])
        result[row] = (_integral(high, angle, curve, running) - _integral(low, angle, curve, running)) / (high - low)
    return result


def _integral(at: FloatArray, angle: FloatArray, curve: FloatArray, running: FloatArray) -> FloatArray:
    """Return the integral of a broken line from its first node."""
    cell = np.clip(np.searchsorted(angle, at, side="right") - 1, 0, len(angle) - 2)
    step = at - angle[cell]
    slope = (curve[cell + 1] - curve[cell]) / (angle[cell + 1] - angle[cell])
    return np.asarray(running[cell] + step * (curve[cell] + 0.5 * slope * step))
