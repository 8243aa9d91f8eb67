"""Airy's bows as parts of a scattering table: averaged over sizes and spectral bins, joined to rays."""

from __future__ import annotations

from dataclasses import replace
from math import pi
from typing import NamedTuple

import numpy as np

from skyoptics.droplets import airy, mie
from skyoptics.droplets.bin_averages import GOLDEN, IndexLaw
from skyoptics.droplets.sizes import Gaussian, Single, SizeDistribution, quadrature
from skyoptics.droplets.wave_angles import typical_radius
from skyoptics.optics.batches import Executor, in_order
from skyoptics.optics.bins import Bins
from skyoptics.optics.table import ScatteringTable
from skyoptics.units import DEG, FloatArray

AIRY_SIZES = 200
"""Pairs of size and wavelength that Airy's curves are averaged over in a bin, at least."""
DARK = -6.0
"""Reduced angle below which a bow's light is 1e-10 of its peak and is left out."""


def with_bows(
    table: ScatteringTable, distribution: SizeDistribution, index: IndexLaw, bins: Bins, executor: Executor | None
) -> ScatteringTable:
    """Return a ray table with Airy's bows in it, and its normalisation right again.

    Parameters
    ----------
    table : ScatteringTable
        From `skyoptics.droplets.geometric`, for the same bins.
    distribution, index, bins, executor
        As `skyoptics.droplets.waves.scattering_table`.

    Returns
    -------
    ScatteringTable
        Parts "2" and "3" replaced as far as Airy's fringes lie right; absolute, so `albedo` takes up what the two differ
        in. `report` says how far, and by how much.
    """
    elements = table.elements.copy()
    error = table.error.copy()
    report = dict(table.report)
    reach: dict[str, list[float]] = {}
    tasks = [(order, band) for order in airy.ORDERS for band in range(len(bins))]
    arguments = (
        (distribution, index, bins, band, table.angle, order, float(table.albedo[band])) for order, band in tasks
    )
    for (order, band), found in zip(tasks, in_order(bow, arguments, executor), strict=True):
        row = table.parts.index(str(order))
        weight = found.weight[:, np.newaxis]
        elements[row, :, band] = weight * found.elements + (1.0 - weight) * elements[row, :, band]
        error[row, :, band] *= 1.0 - found.weight
        reach.setdefault(str(order), []).append(found.limit / DEG)
    whole = replace(table, elements=elements, error=error)
    excess = whole.energy().sum(axis=0)
    report.update(
        airy_trusted_to_deg=reach,
        airy_energy_excess=(excess - 1.0).tolist(),
    )
    cosine = np.einsum("ptw,t,t->w", elements[..., 0], whole.solid_angle(), np.cos(table.angle)) / (4.0 * pi)
    return replace(
        whole,
        elements=elements / excess[:, np.newaxis],
        error=error / excess,
        albedo=table.albedo * excess,
        asymmetry=cosine / excess,
        report=report,
    )


class Bow(NamedTuple):
    """One of Airy's bows, see `bow`."""

    elements: FloatArray
    weight: FloatArray
    limit: float


def bow(
    distribution: SizeDistribution,
    index: IndexLaw,
    bins: Bins,
    band: int,
    angle: FloatArray,
    order: int,
    albedo: float = 1.0,
    everywhere: bool = False,
) -> Bow:
    """Return one of Airy's bows, averaged over sizes and one spectral bin.

    Parameters
    ----------
    distribution, index, bins
        As `scattering_table`.
    band : int
        Which bin.
    angle : ndarray, shape (nθ,)
        0 < angle < π [rad].
    order : int
        2 or 3.
    albedo : float
        Of the ray table it goes into: elements are normalised so that the scattered cross-section albedo · π⟨r²⟩ makes
        ∫ P11 dΩ = 4π over all orders.
    everywhere : bool
        Whether to go on beyond the trusted angle; `weight` is 1 then.

    Returns
    -------
    Bow
        `elements` (nθ, 6) P11 P12 P22 P33 P34 P44 [1], 0 where `weight` is 0 and deep in the dark; `weight` (nθ,), 1 where
        Airy's fringes lie right, falling to 0 at the trusted angle, 1 in the dark; `limit`, the trusted angle [rad].
    """
    middle = complex(np.asarray(index(bins.centre[band : band + 1]), np.complex128).item())
    x = 2.0 * pi * typical_radius(distribution) / float(bins.centre[band])
    limit = airy.trusted_angle(middle, x, order)
    start = airy.bow_angle(middle, order)
    place = np.clip((angle - start) / (limit - start), 0.0, 1.0)
    weight = np.where((place < 0.5) | everywhere, 1.0, np.cos(pi * (place - 0.5)) ** 2)

    narrow = isinstance(distribution, Single | Gaussian)
    radius, number = quadrature(distribution, 1 if narrow else 3)  # so that far fringes of neighbours overlap
    seen = number > 1e-12 * number.max()
    radius, number = radius[seen], number[seen]
    copies = 1 if bins.width[band] == 0.0 else -(-AIRY_SIZES // len(radius))
    radius, number = np.repeat(radius, copies), np.repeat(number, copies) / copies
    wavelength = bins.at(np.modf((np.arange(len(radius)) + 0.5) * GOLDEN)[0])[band]
    medium = np.broadcast_to(np.asarray(index(wavelength), np.complex128), wavelength.shape)
    products = np.zeros((4, len(angle)))
    area = 0.0
    for m, r, w, length in zip(medium.tolist(), radius, number, wavelength, strict=True):
        size = 2.0 * pi * r / length
        area += w * pi * r**2
        lit = (weight > 0.0) & (airy.reduced_angle(m, size, angle, order) > DARK)
        if np.any(lit):
            products[:, lit] += w * length**2 * mie.products(*airy.amplitudes(m, size, angle[lit], order))
    # dσ/dΩ = (λ/2π)² |S|², over the scattered cross-section ÷ 4π
    return Bow(mie.mueller_elements(products, 1.0 / (pi * albedo * area)), weight, limit)
