"""Sizes and shapes of a shower: samples of a distribution, shadows and axes of spheroids."""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, pi

import numpy as np

from skyoptics.droplets.axis_ratio import LIMITS, axis_ratio
from skyoptics.droplets.sizes import SizeDistribution, quadrature
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import azimuth_elevation, direction
from skyoptics.units import FloatArray

TILTS = 32
"""Axes that stand for a canting spread."""
GOLDEN = 0.6180339887498949


@dataclass(frozen=True, eq=False)
class Samples:
    """Samples: radius [m], share of number times r² [m²], axis ratio, relative step of radius between neighbours."""

    radius: FloatArray
    weight: FloatArray
    ratio: FloatArray
    cell: FloatArray


def samples_of(distribution: SizeDistribution, law: str, count: int, wide: bool) -> Samples:
    """Return samples: dense where cross-section lies and where the bow moves with size."""
    if law not in LIMITS:
        axis_ratio(0.0, law)  # says so
    radius, number = quadrature(distribution, 4)
    weight = number * radius**2
    inside = 2.0 * radius <= LIMITS[law] * (1.0 + 1e-12)
    if not weight[inside].sum() > 0.99 * weight.sum():
        raise DomainError(
            f"more than 1 % of the cross-section lies in drops beyond {LIMITS[law] * 1e3:g} mm diameter, the end of "
            f"{law}: cut the distribution"
        )
    radius, weight = radius[inside], weight[inside]
    running = np.cumsum(weight) / weight.sum()
    kept = (running > 1e-4) & (running - weight / weight.sum() < 1.0 - 1e-4)
    radius, weight = radius[kept], weight[kept]
    if len(radius) <= 8:
        copies = ceil(24 / len(radius)) if wide else 1
        radius, weight = np.repeat(radius, copies), np.repeat(weight / copies, copies)
        return Samples(radius, weight, axis_ratio(2.0 * radius, law), np.zeros(len(radius)))
    log = np.log(radius)
    middle = np.concatenate([log[:1], 0.5 * (log[1:] + log[:-1]), log[-1:]])
    travel = np.abs(np.diff(axis_ratio(2.0 * np.exp(np.minimum(middle, np.log(0.5 * LIMITS[law]))), law)))
    measure = 0.5 * weight / weight.sum() + 0.25 * np.diff(middle) / (middle[-1] - middle[0])
    measure += 0.25 * travel / max(travel.sum(), 1e-12)
    place = np.interp(np.linspace(0.0, measure.sum(), count + 1), _summed(measure), middle)
    mass = np.diff(np.interp(place, middle, _summed(weight)))
    centre = np.diff(np.interp(place, middle, _summed(weight * log))) / np.maximum(mass, 1e-300)
    good = mass > 1e-12 * mass.sum()
    radius = np.minimum(np.exp(np.clip(centre, place[:-1], place[1:])), 0.5 * LIMITS[law])[good]
    return Samples(radius, mass[good], axis_ratio(2.0 * radius, law), np.diff(place)[good])


def _summed(values: FloatArray) -> FloatArray:
    return np.concatenate([[0.0], np.cumsum(values)])


def tilted_axes(canting: float, light: FloatArray) -> FloatArray:
    """Return axes of equal weight, shape (1 or TILTS, 3): half of them mirror images in the vertical through the light."""
    if canting == 0.0:
        return np.array([[0.0, 0.0, 1.0]])
    count = np.arange(TILTS // 2) + 0.5
    tilt = canting * np.sqrt(-2.0 * np.log(1.0 - count / (TILTS // 2)))
    turn = 2.0 * pi * np.mod(count * GOLDEN, 1.0)
    azimuth = float(azimuth_elevation(light)[0])
    turn = np.concatenate([turn, -turn])
    tilt = np.minimum(np.concatenate([tilt, tilt]), 0.5 * pi)
    return direction(azimuth + turn, 0.5 * pi - tilt)


def axes_with_power(axes: FloatArray, ratio: float, light: FloatArray) -> FloatArray:
    """Return axes with the area a drop of unit volume radius shows along the light, ÷ π, shape (k, 4)."""
    return np.ascontiguousarray(np.column_stack([axes, shadow(ratio, (axes @ light) ** 2)]))


def shadow(ratio: float, square: FloatArray) -> FloatArray:
    """Return the projected area ÷ π r², r of equal volume, given the squared cosine between axis and direction."""
    return np.asarray(ratio ** (-2.0 / 3.0) * np.sqrt(ratio**2 * (1.0 - square) + square))


def surface(ratio: FloatArray) -> FloatArray:
    """Return the surface ÷ 4π r², the mean of `_area` over all orientations (Cauchy's theorem)."""
    q = np.minimum(ratio, 1.0 - 1e-9)
    e = np.sqrt(1.0 - q**2)
    return np.asarray(0.5 * q ** (-2.0 / 3.0) * (1.0 + q**2 / e * np.arctanh(e)))
