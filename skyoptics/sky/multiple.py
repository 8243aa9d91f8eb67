"""Light scattered again and again in an atmosphere above a reflecting ground, by successive orders.

Order 1 is sunlight scattered once (exact phase functions) or reflected once by the ground; each order is the light of the
order before, scattered or reflected once more. All of it runs on the sphere: every ray is followed through the curved
atmosphere, and every point sees the sun at its own zenith angle, so the same scheme serves noon and twilight. The field of
an order is kept as the 15 moments up to l = 4 that are even about the sun's plane, on the levels and on a few sun zenith
angles; Rayleigh scattering needs no more than l = 2, and what aerosol adds above l = 4 is a sharpening of the twice
scattered aureole. Orders beyond the first are hence exact for molecules up to the grid. Polarisation is left out, which
costs up to some 10 % in pure Rayleigh scattering (Mishchenko, Lacis & Travis, J. Quant. Spectrosc. Radiat. Transf. 51, 491
(1994); from memory). Rays are straight: no refraction.
"""

from __future__ import annotations

import os
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np

from skyoptics.kernels import sky as kernels
from skyoptics.light.slant import EARTH_RADIUS
from skyoptics.units import DEG, FloatArray

LEVELS = 1e3 * np.array(
    [0, 0.25, 0.6, 1, 1.5, 2.2, 3, 4, 5.5, 7, 9, 11.5, 14, 17, 20, 23, 26, 30, 35, 41, 48, 57, 68, 82, 100]
)
"""Heights of the grid; the last is the top of the atmosphere [m]."""
DENSITY_STEP = 100.0
"""Height step of density tables [m]."""
TOLERANCE = 1e-3
"""Change of the sum by one more order at which orders end."""

LOW_SUN = 76.0 * DEG
"""Zenith angle from which the sun counts as low: grids are finer there [rad]."""

_MOST_ORDERS = 100
_TABLE_STEP = 0.25 * DEG
_TABLE_MARGIN = 14.0 * DEG


@dataclass(frozen=True, eq=False)
class Medium:
    """An atmosphere of molecules, aerosol and an absorber over a Lambertian ground.

    Parameters
    ----------
    density : ndarray, shape (n, 3)
        Extinction coefficients for a vertical depth of 1, every `DENSITY_STEP` from 0 to the top [m⁻¹].
    depth : ndarray, shape (3, nλ)
        Vertical optical depths [1].
    albedo : ndarray, shape (2, nλ)
        Scattered share of the extinction by molecules and by aerosol [1].
    depolarisation : float
        Of molecular scattering of natural light at a right angle [1].
    lobes : ndarray, shape (2, 2)
        Share and asymmetry of the two Henyey–Greenstein functions of aerosol.
    ground : float
        Albedo of the ground [1].
    radius : float
        Of the sphere [m]; something huge makes the atmosphere plane-parallel.
    """

    density: FloatArray
    depth: FloatArray
    albedo: FloatArray
    depolarisation: float
    lobes: FloatArray
    ground: float
    radius: float = EARTH_RADIUS

    @property
    def gamma(self) -> float:
        """Return ρ / (2 − ρ) (Chandrasekhar, *Radiative Transfer* (1950), §18)."""
        return self.depolarisation / (2.0 - self.depolarisation)

    @property
    def legendre(self) -> FloatArray:
        """Return the moments χ_l, l = 0 … 4, of both phase functions, shape (2, 5), χ_0 = 1."""
        order = np.arange(5)
        molecules = np.array([1.0, 0.0, 0.1 * (1.0 - self.gamma) / (1.0 + 2.0 * self.gamma), 0.0, 0.0])
        aerosol = sum(share * asymmetry**order for share, asymmetry in self.lobes)
        return np.stack([molecules, np.asarray(aerosol)])


@dataclass(frozen=True, eq=False)
class Field:
    """Scattered light of all orders.

    Parameters
    ----------
    theta : ndarray, shape (nθ,)
        Zenith angles of the sun, evenly spaced [rad].
    moments : ndarray, shape (nh, nθ, 15, nλ)
        At the levels, per unit irradiance of the sun above the air, divided by `skyoptics.kernels.sky.fall`.
    flux : ndarray, shape (nh, nθ, 2, nλ)
        Scattered irradiance from below and from above on a level surface, per unit irradiance.
    direct : ndarray, shape (nθ, nλ)
        Direct irradiance of the level ground, per unit irradiance.
    orders : int
        How many were added up.
    """

    theta: FloatArray
    moments: FloatArray
    flux: FloatArray
    direct: FloatArray
    orders: int


def zenith_angles(sun: float) -> FloatArray:
    """Return the sun zenith angles that a field needs around that of the observer [rad].

    The horizon of an atmosphere 100 km high lies 10° away, so the grid reaches 12° to both sides by day; under a low sun it
    is finer, and shorter on the dark side, whose light is a small part.
    """
    if sun < LOW_SUN:
        step, before, behind = 6.0 * DEG, 2, 2
    else:
        step, before, behind = 2.0 * DEG, 6, 2
    theta: FloatArray = sun + step * np.arange(-before, behind + 1, dtype=np.float64)
    return theta[theta >= 0.0]


def solve(medium: Medium, theta: FloatArray, streams: int = 8, azimuths: int = 8) -> Field:
    """Return the scattered light of all orders.

    Parameters
    ----------
    medium : Medium
        The atmosphere.
    theta : ndarray, shape (nθ,)
        Zenith angles of the sun, evenly spaced [rad]; where a ray meets the sun at another one, the nearest is taken.
    streams : int
        Directions per hemisphere, in zenith cosine (Gauss).
    azimuths : int
        Directions over half a turn, evenly spaced.

    Returns
    -------
    Field
        Orders are added until the sum of the sky's irradiance of the ground, the rest taken as a geometric series, moves
        by less than `TOLERANCE`; that rest is in the result.
    """
    node, weight = np.polynomial.legendre.leggauss(streams)
    mu = np.concatenate([-0.5 * (1.0 + node), 0.5 * (1.0 + node)])
    mu_weight = 0.5 * np.concatenate([weight, weight])
    heights = np.sort(np.concatenate([LEVELS, 0.5 * (LEVELS[1:] + LEVELS[:-1])]))
    steps = np.arange(np.ceil(_TABLE_MARGIN / _TABLE_STEP) + 1.0)
    angles = np.arange(theta[0], theta[-1] + _TABLE_MARGIN, _TABLE_STEP)
    angles = np.concatenate([(theta[0] - _TABLE_STEP * steps[:0:-1]), angles])
    angles = angles[(angles >= 0.0) & (angles <= np.pi)]
    bands = medium.depth.shape[1]
    table = np.empty((len(heights), len(angles), bands))
    path = (LEVELS, medium.density, DENSITY_STEP, medium.radius, medium.depth)
    in_parts(
        lambda part: kernels.sun_table(heights, angles[part], *path, table[:, part]),
        len(angles),
    )
    beam = np.stack([np.interp(theta, angles, column) for column in table[0].T], axis=-1)
    direct = beam * np.maximum(np.cos(theta), 0.0)[:, None]
    guess = np.array([kernels.fall(angle) for angle in theta])
    shape = (len(LEVELS), len(theta), kernels.MOMENTS, bands)
    moments, total = np.zeros(shape), np.zeros(shape)
    flux = np.zeros((len(LEVELS), len(theta), 2, bands))
    falling, before = direct / guess[:, None], direct
    foreseen = np.zeros_like(direct)
    order = 0
    while order < _MOST_ORDERS:
        order += 1
        fresh, light = np.empty(shape), np.empty_like(flux)
        arguments: tuple[Any, ...] = (
            order == 1,
            *path,
            medium.albedo,
            medium.legendre,
            medium.gamma,
            medium.lobes,
            medium.ground,
            theta,
            mu,
            mu_weight,
            azimuths,
            heights,
            angles,
            table,
            moments,
            falling,
            fresh,
            light,
        )
        _each_level(arguments)
        total += fresh
        flux += light
        moments = fresh
        arriving = light[0, :, 1]
        falling = arriving / guess[:, None]
        ratio = np.clip(arriving / np.maximum(before, 1e-300), 0.0, 0.95)
        rest = ratio / (1.0 - ratio)
        before = arriving
        foreseen, foreseen_before = flux[0, :, 1] + arriving * rest, foreseen
        if order > 2 and np.all(np.abs(foreseen - foreseen_before) <= TOLERANCE * foreseen):
            total += fresh * rest[:, None]
            flux += light * rest[:, None]
            break
    return Field(theta, total, flux, direct, order)


def in_parts(work: Callable[[slice], object], count: int) -> None:
    """Run `work` on slices of range(count), one a processor; the slices must not meet."""
    workers = max(1, min(os.cpu_count() or 1, count))
    edges = [count * k // workers for k in range(workers + 1)]
    with ThreadPoolExecutor(workers) as pool:
        list(pool.map(work, [slice(low, high) for low, high in pairwise(edges)]))


def _each_level(arguments: tuple[Any, ...]) -> None:
    """Run one order at all levels, dealt out to the processors in turn (neighbours cost alike)."""
    count = len(LEVELS)
    workers = max(1, min(os.cpu_count() or 1, count))
    parts = [np.arange(first, count, workers) for first in range(workers)]
    with ThreadPoolExecutor(workers) as pool:
        list(pool.map(lambda nodes: kernels.scatter(nodes, *arguments), parts))
