"""Nodes of scattering angle for wave curves: fine where diffraction, bows and glory are, as fine as the drops ask for."""

from __future__ import annotations

from collections.abc import Callable
from math import pi, sqrt
from typing import Any

import numpy as np

from skyoptics.droplets import airy
from skyoptics.droplets.sizes import SizeDistribution, effective_variance
from skyoptics.optics.bins import Bins
from skyoptics.units import DEG, FloatArray

COARSE = 0.25 * DEG
"""Widest step [rad]."""
RING_STEP = 0.3
"""Step near the axis, in 1/x: a tenth of a ring of corona or glory, which are π/x apart."""
CORE_STEP = 0.12
"""Step within the innermost ring, in 1/x, where straight lines between nodes would add 1 % to the forward peak."""
RING_REACH = 40.0
"""How far from the axis rings are followed, in 1/x: a dozen."""
FRINGE_STEP = 0.12
"""Step at a bow, in Airy's unit h^(1/3) x^(−2/3): an eighth of the narrowest fringe followed."""
SHADOW = 4.0
"""How far into the dark side of a bow its step is kept, in Airy's unit."""
GROWTH = 0.12
"""Growth of the step by distance from where it is fine [1]."""


def typical_radius(distribution: SizeDistribution) -> float:
    """Return ⟨r⁴⟩/⟨r³⟩ [m]: of the larger drops among those that carry the light."""
    return float(distribution.moment(4) / distribution.moment(3))


def fringes(distribution: SizeDistribution) -> float:
    """Return how far a bow's fringes are followed into the bright side, in Airy's unit [1].

    The phase between the two rays, 4/3 ζ^1.5, spreads as the sizes do; where its deviation exceeds 2 nothing is left.
    """
    spread = sqrt(max(effective_variance(distribution), 0.0))
    return min(max((1.5 / max(spread, 1e-6)) ** (2.0 / 3.0), 3.5), 12.0)


def nodes(distribution: SizeDistribution, index: Callable[[FloatArray], Any], bins: Bins) -> FloatArray:
    """Return nodes of scattering angle fit for pictures and curves.

    Parameters
    ----------
    distribution : SizeDistribution
        Of the drops.
    index : callable
        Wavelengths [m] → complex index relative to the medium.
    bins : Bins
        Spectral bins.

    Returns
    -------
    ndarray, shape (nθ,)
        From 0 to π, ascending, uneven [rad]: steps of 0.12/x on both axes and 0.3/x over twelve
        rings about them, of 0.12 h^(1/3) x^(−2/3) over
        the fringes of the primary and the secondary bow of all wavelengths, growing from there to 0.25°.
    """
    near = np.concatenate([[0.0], np.geomspace(1e-6, 0.01, 500)])  # half of the light of large drops lies in there
    grid = np.concatenate([near, np.linspace(0.01, pi - 0.01, 18_001)[1:-1], pi - near[::-1]])
    width = np.full_like(grid, COARSE)
    radius = typical_radius(distribution)
    wavelength = np.unique(bins.edges)[[0, -1]]
    x = 2.0 * pi * radius / float(wavelength.mean())
    axis = np.minimum(grid, pi - grid)
    width = np.minimum(width, RING_STEP / x + GROWTH * np.maximum(axis - RING_REACH / x, 0.0))
    width = np.minimum(width, CORE_STEP / x + GROWTH * np.maximum(axis - 4.0 / x, 0.0))
    reach = fringes(distribution)
    n = np.real(np.broadcast_to(index(wavelength), wavelength.shape))
    for order in airy.ORDERS:
        if np.all((n > 1.0) & (n < order)):
            ends = [float(airy.angle_at(value, x, zeta, order)) for value in n for zeta in (-SHADOW, reach)]
            away = np.maximum(np.maximum(min(ends) - grid, grid - max(ends)), 0.0)
            unit = airy.curvature(float(n.mean()), order) ** (1.0 / 3.0) * x ** (-2.0 / 3.0)
            width = np.minimum(width, FRINGE_STEP * unit + GROWTH * away)
    return fill(grid, width)


def fill(grid: FloatArray, width: FloatArray) -> FloatArray:
    """Return nodes from the first to the last value of a grid, spaced by `width`, given on the grid."""
    density = 1.0 / width
    count = np.concatenate([[0.0], np.cumsum(0.5 * (density[1:] + density[:-1]) * np.diff(grid))])
    number = int(np.ceil(count[-1]))
    found: FloatArray = np.interp(np.linspace(0.0, count[-1], number + 1), count, grid)
    found[[0, -1]] = grid[[0, -1]]
    return found
