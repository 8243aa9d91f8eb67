"""Slant paths through a round, refracting atmosphere.

The earth is a sphere, the air lies in spherical shells. Along a ray n r cos e is constant (Bouguer): with m = n r and
p = m cos e the length along m² = p² + t² is ds = dt / (dm/dr), t running from m sin e at the lower end upwards. This form
has no singularity anywhere, the horizon and the lowest point of a ray that comes from below it included. (L. H. Auer &
E. M. Standish, Astron. J. 119, 2472 (2000; from memory), mend the same singularity with the zenith distance as variable.)

Columns are those of `skyoptics.light.layers`. Molecules refract, with one index for all colours.

*Elevation* is always that of the ray where it passes the stated height. Heights are above the ground at the observer,
where the standard profile starts. A ray below the dip, which would meet the ground, is taken as the ray that grazes it.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from skyoptics.light.layers import HEIGHTS, STANDARD, TOP, Profile, density, log_molecules, log_slope
from skyoptics.materials.ranges import within
from skyoptics.units import DEG, ArrayLike, FloatArray

EARTH_RADIUS = 6.371e6
"""Mean radius of the earth [m] (GRS 80 mean radius R1, rounded)."""

_PANELS = np.array([0.0, 0.5, 1, 2, 4, 7, 11, 15, 20, 26, 32, 40, 47, 60, 80, 100]) * 1e3
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(6)


@dataclass(frozen=True, eq=False)
class Path:
    """What lies on a ray, in vertical columns from the ground up; paths add [1]."""

    molecules: FloatArray
    ozone: FloatArray
    haze: FloatArray
    vapour: FloatArray

    def __add__(self, other: Path) -> Path:
        return Path(
            self.molecules + other.molecules,
            self.ozone + other.ozone,
            self.haze + other.haze,
            self.vapour + other.vapour,
        )


def to_space(elevation: ArrayLike, height: ArrayLike = 0.0, profile: Profile = STANDARD) -> Path:
    """Return what lies between a point and the top of the atmosphere.

    Parameters
    ----------
    elevation : array_like
        Of the ray at that point, −90° to 90° [rad]; a ray from below the horizon passes its lowest point on the way.
    height : array_like, broadcastable
        Of the point, 0 to `TOP` [m].
    profile : Profile
        Layering.

    Returns
    -------
    Path
        Relative air masses.

    Raises
    ------
    DomainError
        Outside these ranges.
    """
    elevation, height = np.broadcast_arrays(_elevation(elevation), _height(height))
    p, lowest = _bouguer(elevation, height, profile)
    up = _leg(p, height, np.full_like(height, TOP), profile)
    return _path(up + np.where((elevation < 0.0)[..., None], 2.0 * _leg(p, lowest, height, profile), 0.0))


def between(elevation: ArrayLike, low: ArrayLike, high: ArrayLike, profile: Profile = STANDARD) -> Path:
    """Return what lies on a ray that leaves one height and rises to another.

    Parameters
    ----------
    elevation : array_like
        At the lower end, 0° to 90° [rad].
    low, high : array_like, broadcastable
        Heights, 0 to `TOP`, ascending [m].
    profile : Profile
        Layering.

    Returns
    -------
    Path
        In vertical columns; a leg whose ends coincide holds nothing.

    Raises
    ------
    DomainError
        Outside these ranges.
    """
    elevation = within("elevation at the lower end", elevation, 0.0, 90.0 * DEG, "°", DEG)
    elevation, low, high = np.broadcast_arrays(elevation, _height(low), _height(high))
    within("height of the upper end above the lower one", high - low, 0.0, np.inf, "m")
    p, _ = _bouguer(elevation, low, profile)
    return _path(_leg(p, low, high, profile))


def bending(elevation: ArrayLike, height: ArrayLike = 0.0, profile: Profile = STANDARD) -> FloatArray:
    """Return by how much the air above a point has turned a ray from space.

    Parameters
    ----------
    elevation, height, profile
        As in `to_space`.

    Returns
    -------
    ndarray
        Astronomical refraction: elevation as seen less elevation without air [rad].
    """
    elevation, height = np.broadcast_arrays(_elevation(elevation), _height(height))
    p, lowest = _bouguer(elevation, height, profile)
    up = _turn(p, height, np.full_like(height, TOP), profile)
    return up + np.where(elevation < 0.0, 2.0 * _turn(p, lowest, height, profile), 0.0)


def dip(height: ArrayLike, profile: Profile = STANDARD) -> FloatArray:
    """Return the elevation of the sea's horizon seen from a height, 0 or below [rad]."""
    height = _height(height)
    return -np.arccos(np.clip(_modified(np.zeros(()), profile) / _modified(height, profile), 0.0, 1.0))


def aloft(elevation: ArrayLike, height: float, profile: Profile = STANDARD) -> FloatArray:
    """Return the elevation at which a source is seen from above the observer's head.

    Parameters
    ----------
    elevation : array_like
        As seen by the observer on the ground [rad]; below his horizon, where he sees nothing, the horizon's refraction is
        kept.
    height : float
        Above the observer, 0 to `TOP` [m].
    profile : Profile
        Layering.

    Returns
    -------
    ndarray
        Less refracted, so lower by up to 0.4° for a setting sun seen at 9 km; not below the dip there [rad].

    Raises
    ------
    DomainError
        Outside these ranges.
    """
    elevation = _elevation(elevation)
    airless = elevation - bending(np.maximum(elevation, 0.0), 0.0, profile)
    low = float(dip(height, profile))
    grid = low + (90.0 * DEG - low) * np.linspace(0.0, 1.0, 721) ** 2  # fine where refraction is
    return np.asarray(np.interp(airless, grid - bending(grid, height, profile), grid))


def _leg(p: FloatArray, low: FloatArray, high: FloatArray, profile: Profile) -> FloatArray:
    """Return the columns on a leg that rises from `low` to `high`, shape (…, 4)."""
    h, weight = _quadrature(p, low, high, profile)
    return np.asarray(np.einsum("...n,...nc->...c", weight / _stretch(h, profile), density(h, profile)))


def _turn(p: FloatArray, low: FloatArray, high: FloatArray, profile: Profile) -> FloatArray:
    """Return the bending on a rising leg: dβ = −(dn/dr) p / (n m dm/dr) dt [rad]."""
    h, weight = _quadrature(p, low, high, profile)
    excess = profile.refractivity * np.exp(log_molecules(h))
    slope = excess * log_slope(h)
    integrand = -slope / (1.0 + excess) * p[..., None] / (_modified(h, profile) * _stretch(h, profile))
    return np.asarray(np.sum(integrand * weight, axis=-1))


def _quadrature(p: FloatArray, low: FloatArray, high: FloatArray, profile: Profile) -> tuple[FloatArray, FloatArray]:
    """Return heights and weights dt of Gauss points in panels between fixed heights, shapes (…, n)."""
    edges = np.clip(_PANELS, low[..., None], high[..., None])
    m, p = _modified(edges, profile), p[..., None]
    t = np.sqrt(np.maximum(m - p, 0.0) * (m + p))
    middle, half = 0.5 * (t[..., 1:] + t[..., :-1]), 0.5 * (t[..., 1:] - t[..., :-1])
    nodes = (middle[..., None] + half[..., None] * _NODES).reshape(*t.shape[:-1], -1)
    weights = (half[..., None] * _WEIGHTS).reshape(nodes.shape)
    # m − m(0) without the cancellation of hypot(p, t): what heights are looked up by
    ground = EARTH_RADIUS * (1.0 + profile.refractivity)
    above = (p - ground) + nodes * nodes / (p + np.hypot(p, nodes))
    return np.interp(above, _modified_table(profile.refractivity), HEIGHTS), weights


def _bouguer(elevation: FloatArray, height: FloatArray, profile: Profile) -> tuple[FloatArray, FloatArray]:
    """Return p, not below that of the ray which grazes the ground, and the height of the lowest point."""
    ground = EARTH_RADIUS * (1.0 + profile.refractivity)
    p = _modified(height, profile) * np.cos(elevation)
    p = np.where(elevation < 0.0, np.maximum(p, ground), p)
    return p, np.minimum(np.interp(p - ground, _modified_table(profile.refractivity), HEIGHTS), height)


def _modified(height: FloatArray, profile: Profile) -> FloatArray:
    """Return m = n r [m]."""
    return (EARTH_RADIUS + height) * (1.0 + profile.refractivity * np.exp(log_molecules(height)))


def _stretch(height: FloatArray, profile: Profile) -> FloatArray:
    """Return dm/dr [1]; above 0.8: the standard air has no ducts."""
    excess = profile.refractivity * np.exp(log_molecules(height))
    return 1.0 + excess + (EARTH_RADIUS + height) * excess * log_slope(height)


@lru_cache(maxsize=8)
def _modified_table(refractivity: float) -> FloatArray:
    """Return m − m(0) at `HEIGHTS` [m]."""
    m = _modified(HEIGHTS, Profile(refractivity=refractivity))
    return np.asarray(m - m[0])


def _path(columns: FloatArray) -> Path:
    return Path(*np.moveaxis(columns, -1, 0))


def _elevation(elevation: ArrayLike) -> FloatArray:
    return within("elevation", elevation, -90.0 * DEG, 90.0 * DEG, "°", DEG)


def _height(height: ArrayLike) -> FloatArray:
    return within("height", height, 0.0, TOP, "km", 1e3)
