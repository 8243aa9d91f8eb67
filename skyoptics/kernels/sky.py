"""Sunlight scattered in a spherical atmosphere: paths, successive orders, lines of sight, and the look-up of a picture.

Heights h [m] above the ground of a sphere of `radius`; the atmosphere ends at the last of the `levels`, whose first is 0.
Three things weaken light: molecules, aerosol, ozone (the last only absorbs). `density` (n, 3) holds their extinction
coefficients for a vertical depth of 1 [m⁻¹] at equal height steps; `depth` (3, nλ) the vertical depths.
The sun is given by zenith angles, `theta` at the points of a grid, and is one for all: its rays are parallel.

Radiance is kept as moments over real spherical harmonics up to l = 4, even in azimuth about the sun's plane (15 of them,
`harmonics`), on a grid of heights and sun zenith angles. By the addition theorem the light scattered into a direction is
Σ χ_l Y_lm M_lm, χ_l the Legendre moments of the phase function (1 for l = 0). Moments are divided by `fall`, a fixed guess of
how twilight fades, so that interpolation between sun zenith angles stays good where light falls by a factor of 3 a degree.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from skyoptics.kernels.shells import LARGEST, columns, pieces

MOMENTS = 15
_DEGREE = np.pi / 180.0


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def fall(theta: Any) -> Any:
    """Return a guess of the sky's light at a sun zenith angle: 1 by day, one e-fold less each 1.1° in twilight."""
    return (1.0 + np.exp((theta / _DEGREE - 91.0) / 1.5)) ** (-1.5 / 1.1)


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def harmonics(z: Any, x: Any, out: Any) -> None:
    """Fill out (15,) with the orthonormal real harmonics, l major, of a unit vector with up z and sunward x."""
    z2 = z * z
    y2 = max(1.0 - z2 - x * x, 0.0)
    c2 = x * x - y2
    c3 = x * (x * x - 3.0 * y2)
    out[0] = 0.28209479177387814
    out[1] = 0.4886025119029199 * z
    out[2] = 0.4886025119029199 * x
    out[3] = 0.31539156525252005 * (3.0 * z2 - 1.0)
    out[4] = 1.0925484305920792 * x * z
    out[5] = 0.5462742152960396 * c2
    out[6] = 0.3731763325901154 * z * (5.0 * z2 - 3.0)
    out[7] = 0.4570457994644658 * x * (5.0 * z2 - 1.0)
    out[8] = 1.445305721320277 * c2 * z
    out[9] = 0.5900435899266435 * c3
    out[10] = 0.10578554691520431 * (35.0 * z2 * z2 - 30.0 * z2 + 3.0)
    out[11] = 0.6690465435572892 * x * z * (7.0 * z2 - 3.0)
    out[12] = 0.47308734787878004 * c2 * (7.0 * z2 - 1.0)
    out[13] = 1.7701307697799304 * c3 * z
    out[14] = 0.6258357354491761 * (c2 * c2 - 4.0 * x * x * y2)


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def _order(lm: Any) -> Any:
    """Return l of a moment."""
    return (lm > 0) + (lm > 2) + (lm > 5) + (lm > 9)


@njit(cache=True, nogil=True, error_model="numpy")
def sun_table(
    heights: Any, thetas: Any, levels: Any, density: Any, step: Any, radius: Any, depth: Any, out: Any
) -> None:
    """Fill out (heights, thetas, nλ) with the share of sunlight that arrives."""
    breaks = np.empty(LARGEST)
    column = np.empty(3)
    for i in range(len(heights)):
        for j in range(len(thetas)):
            share = columns(heights[i], thetas[j], levels, density, step, radius, breaks, column)
            for w in range(depth.shape[1]):
                tau = depth[0, w] * column[0] + depth[1, w] * column[1] + depth[2, w] * column[2]
                out[i, j, w] = share * np.exp(-tau) if share > 0.0 else 0.0


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def _cell(value: Any, first: Any, step: Any, count: Any) -> Any:
    """Return the cell and the place in it of a value on an even grid, held inside; a grid of one point has one cell."""
    place = min(max((value - first) / step, 0.0), count - 1.0)
    cell = max(min(int(place), count - 2), 0)
    return cell, place - cell


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def _find(value: Any, grid: Any) -> Any:
    """Return the cell and the place in it of a value on an uneven ascending grid, held inside."""
    cell = min(max(np.searchsorted(grid, value) - 1, 0), len(grid) - 2)
    return cell, min(max((value - grid[cell]) / (grid[cell + 1] - grid[cell]), 0.0), 1.0)


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def phase_molecules(cosine: Any, gamma: Any) -> Any:
    """Return Rayleigh's phase function, mean 1 over the sphere; gamma = ρ / (2 − ρ), ρ the depolarisation."""
    return 0.75 / (1.0 + 2.0 * gamma) * (1.0 + 3.0 * gamma + (1.0 - gamma) * cosine * cosine)


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def phase_aerosol(cosine: Any, lobes: Any) -> Any:
    """Return the sum of two Henyey–Greenstein functions, mean 1; lobes (2, 2) holds share and asymmetry of each."""
    total = 0.0
    for k in range(2):
        g = lobes[k, 1]
        base = 1.0 + g * g - 2.0 * g * cosine
        total += lobes[k, 0] * (1.0 - g * g) / (base * np.sqrt(base))
    return total


@njit(cache=True, nogil=True, error_model="numpy")
def scatter(
    nodes: Any,
    first: Any,
    levels: Any,
    density: Any,
    step: Any,
    radius: Any,
    depth: Any,
    albedo: Any,
    legendre: Any,
    gamma: Any,
    lobes: Any,
    ground: Any,
    theta: Any,
    mu: Any,
    mu_weight: Any,
    azimuths: int,
    table_heights: Any,
    table_thetas: Any,
    table: Any,
    moments: Any,
    falling: Any,
    new_moments: Any,
    flux: Any,
) -> None:
    """Make the radiance field of one order from that of the order before, at the level numbers `nodes`.

    nodes : level numbers to do. first : whether this is order 1, made from sunlight instead of moments.
    legendre (2, 5) : χ_l of molecules and aerosol. ground : albedo. theta : even grid of sun zenith angles.
    mu, mu_weight : zenith cosines and weights [∑ = 2]; azimuths : number of even steps over half a turn.
    table (table_heights, table_thetas, nλ) : sunlight. moments (nh, nθ, 15, nλ), falling (nθ, nλ) : of the order before;
    falling is the irradiance of the ground. new_moments and flux (nh, nθ, 2, nλ) : to fill, flux from below and from
    above, per unit irradiance of the sun above the air. Moments and falling are divided by `fall`, flux is not.
    """
    bands = depth.shape[1]
    nt = len(theta)
    theta_step = theta[1] - theta[0] if nt > 1 else 1.0
    way = np.empty(LARGEST)
    height = np.empty(LARGEST)
    weight = np.empty((LARGEST, 2, bands))
    end = np.empty(bands)
    field = np.empty((nt, azimuths, bands))
    mixed = np.empty((nt, MOMENTS, bands))
    basis = np.empty(MOMENTS)
    sunlight = np.empty(bands)
    for node in nodes:
        h = levels[node]
        r = radius + h
        new_moments[node] = 0.0
        flux[node] = 0.0
        for q in range(len(mu)):
            n, hit = pieces(h, mu[q], np.inf, levels, density, step, radius, depth, albedo, way, height, weight, end)
            field[:] = 0.0
            flat = np.sqrt(1.0 - mu[q] * mu[q])
            for s in range(n + (1 if hit else 0)):
                at_ground = s == n
                if at_ground:
                    there = 0.0
                    distance = _ground_way(h, mu[q], radius)
                else:
                    there = height[s]
                    distance = way[s]
                reach = radius + there
                up = (r * mu[q] + distance) / reach
                level, part = _find(there, levels)
                if not first and not at_ground:
                    for j in range(nt):
                        for lm in range(MOMENTS):
                            order = _order(lm)
                            for w in range(bands):
                                strength = weight[s, 0, w] * legendre[0, order] + weight[s, 1, w] * legendre[1, order]
                                low = moments[level, j, lm, w]
                                mixed[j, lm, w] = strength * (low + part * (moments[level + 1, j, lm, w] - low))
                sun_level, sun_part = _find(there, table_heights)
                for j in range(nt):
                    cos_sun = np.cos(theta[j])
                    sin_sun = np.sin(theta[j])
                    for p in range(azimuths):
                        nu = mu[q] * cos_sun + flat * sin_sun * np.cos((p + 0.5) * np.pi / azimuths)
                        here = min(max((r * cos_sun + distance * nu) / reach, -1.0), 1.0)
                        angle = np.arccos(here)
                        if at_ground:
                            cell, share = _cell(angle, theta[0], theta_step, nt)
                            other = min(cell + 1, nt - 1)
                            factor = ground / np.pi * fall(angle)
                            for w in range(bands):
                                light = falling[cell, w] + share * (falling[other, w] - falling[cell, w])
                                field[j, p, w] += factor * end[w] * light
                        elif first:
                            cell, share = _find(angle, table_thetas)
                            molecules = phase_molecules(nu, gamma) / (4.0 * np.pi)
                            aerosol = phase_aerosol(nu, lobes) / (4.0 * np.pi)
                            a = (1.0 - sun_part) * (1.0 - share)
                            b = (1.0 - sun_part) * share
                            c = sun_part * (1.0 - share)
                            d = sun_part * share
                            for w in range(bands):
                                sunlight[w] = (
                                    a * table[sun_level, cell, w]
                                    + b * table[sun_level, cell + 1, w]
                                    + c * table[sun_level + 1, cell, w]
                                    + d * table[sun_level + 1, cell + 1, w]
                                )
                            for w in range(bands):
                                field[j, p, w] += sunlight[w] * (
                                    weight[s, 0, w] * molecules + weight[s, 1, w] * aerosol
                                )
                        else:
                            cell, share = _cell(angle, theta[0], theta_step, nt)
                            other = min(cell + 1, nt - 1)
                            sine = max(np.sqrt(1.0 - here * here), 1e-9)
                            side = np.sqrt(max(1.0 - up * up, 0.0))
                            x = min(max((nu - up * here) / sine, -side), side)
                            harmonics(up, x, basis)
                            guess = fall(angle)
                            for lm in range(MOMENTS):
                                a = basis[lm] * guess * (1.0 - share)
                                b = basis[lm] * guess * share
                                for w in range(bands):
                                    field[j, p, w] += a * mixed[cell, lm, w] + b * mixed[other, lm, w]
            for j in range(nt):
                scale = 1.0 / fall(theta[j])
                for p in range(azimuths):
                    part = mu_weight[q] * 2.0 * np.pi / azimuths
                    harmonics(mu[q], flat * np.cos((p + 0.5) * np.pi / azimuths), basis)
                    side = 1 if mu[q] > 0.0 else 0
                    for w in range(bands):
                        flux[node, j, side, w] += part * abs(mu[q]) * field[j, p, w]
                    for lm in range(MOMENTS):
                        for w in range(bands):
                            new_moments[node, j, lm, w] += part * scale * basis[lm] * field[j, p, w]


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def _ground_way(h: Any, mu: Any, radius: Any) -> Any:
    """Return the way from height h down to the ground in a direction that meets it."""
    b = -(radius + h) * mu
    c = h * (2.0 * radius + h)
    return c / (b + np.sqrt(max(b * b - c, 0.0)))


@njit(cache=True, nogil=True, error_model="numpy")
def lines_of_sight(
    elevations: Any,
    azimuths: Any,
    longest: Any,
    sun: Any,
    levels: Any,
    density: Any,
    step: Any,
    radius: Any,
    depth: Any,
    albedo: Any,
    legendre: Any,
    theta: Any,
    moments: Any,
    out: Any,
) -> None:
    """Follow lines of sight from the ground up.

    Fill out (elevations, azimuths from the sun, 3, nλ): single scattering by molecules and by aerosol, each without its phase
    function (both being one angle along a straight line), and light scattered more than once, per unit irradiance.
    sun : its zenith angle. moments (nh, nθ, 15, nλ) : of all orders from 1.
    """
    bands = depth.shape[1]
    nt = len(theta)
    theta_step = theta[1] - theta[0] if nt > 1 else 1.0
    way = np.empty(LARGEST)
    height = np.empty(LARGEST)
    weight = np.empty((LARGEST, 2, bands))
    end = np.empty(bands)
    breaks = np.empty(LARGEST)
    column = np.empty(3)
    basis = np.empty(MOMENTS)
    strength = np.empty((5, bands))
    cos_sun = np.cos(sun)
    sin_sun = np.sin(sun)
    for i in range(len(elevations)):
        mu = np.sin(elevations[i])
        flat = np.cos(elevations[i])
        n, _ = pieces(0.0, mu, longest, levels, density, step, radius, depth, albedo, way, height, weight, end)
        out[i] = 0.0
        for s in range(n):
            reach = radius + height[s]
            up = (radius * mu + way[s]) / reach
            level, part = _find(height[s], levels)
            for order in range(5):
                for w in range(bands):
                    strength[order, w] = weight[s, 0, w] * legendre[0, order] + weight[s, 1, w] * legendre[1, order]
            for p in range(len(azimuths)):
                nu = mu * cos_sun + flat * sin_sun * np.cos(azimuths[p])
                here = min(max((radius * cos_sun + way[s] * nu) / reach, -1.0), 1.0)
                angle = np.arccos(here)
                share = columns(height[s], angle, levels, density, step, radius, breaks, column)
                if share > 0.0:
                    for w in range(bands):
                        tau = depth[0, w] * column[0] + depth[1, w] * column[1] + depth[2, w] * column[2]
                        light = share * np.exp(-tau)
                        out[i, p, 0, w] += light * weight[s, 0, w]
                        out[i, p, 1, w] += light * weight[s, 1, w]
                cell, place = _cell(angle, theta[0], theta_step, nt)
                other = min(cell + 1, nt - 1)
                sine = max(np.sqrt(1.0 - here * here), 1e-9)
                side = np.sqrt(max(1.0 - up * up, 0.0))
                harmonics(up, min(max((nu - up * here) / sine, -side), side), basis)
                guess = fall(angle)
                for lm in range(MOMENTS):
                    order = _order(lm)
                    a = basis[lm] * guess * (1.0 - part) * (1.0 - place)
                    b = basis[lm] * guess * (1.0 - part) * place
                    c = basis[lm] * guess * part * (1.0 - place)
                    d = basis[lm] * guess * part * place
                    for w in range(bands):
                        out[i, p, 2, w] += strength[order, w] * (
                            a * moments[level, cell, lm, w]
                            + b * moments[level, other, lm, w]
                            + c * moments[level + 1, cell, lm, w]
                            + d * moments[level + 1, other, lm, w]
                        )


@njit(cache=True, nogil=True, error_model="numpy")
def look_up(vectors: Any, sun: Any, table: Any, gamma: Any, lobes: Any, below: Any, out: Any) -> None:
    """Fill out (n, nλ) with the sky's radiance at unit vectors (n, 3), east north up.

    sun (3,) : unit vector. table (nu, na, 3, nλ) : as `lines_of_sight` but times irradiance; rows at equal steps of
    √(elevation / 90°), columns of azimuth from the sun over half a turn. below (nλ,) : radiance below the horizon.
    Linear between entries; nan gives nan.
    """
    rows, turns, _, bands = table.shape
    mix = np.empty(12)
    level = np.hypot(sun[0], sun[1])
    east, north = (sun[0] / level, sun[1] / level) if level > 1e-12 else (0.0, 1.0)
    for i in range(len(vectors)):
        x, y, z = vectors[i, 0], vectors[i, 1], vectors[i, 2]
        if not (z >= 0.0):
            for w in range(bands):
                out[i, w] = below[w] + (x + y + z) * 0.0
            continue
        row = np.sqrt(np.arctan2(z, np.hypot(x, y)) * (2.0 / np.pi)) * (rows - 1)
        turn = np.arctan2(abs(x * north - y * east), x * east + y * north) * ((turns - 1) / np.pi)
        j = min(int(row), rows - 2)
        k = min(int(turn), turns - 2)
        row -= j
        turn -= k
        cosine = x * sun[0] + y * sun[1] + z * sun[2]
        part = (
            phase_molecules(cosine, gamma) / (4.0 * np.pi),
            phase_aerosol(cosine, lobes) / (4.0 * np.pi),
            1.0,
        )
        for c in range(3):
            mix[c] = (1.0 - row) * (1.0 - turn) * part[c]
            mix[3 + c] = (1.0 - row) * turn * part[c]
            mix[6 + c] = row * (1.0 - turn) * part[c]
            mix[9 + c] = row * turn * part[c]
        a, b, c0, d = table[j, k], table[j, k + 1], table[j + 1, k], table[j + 1, k + 1]
        for w in range(bands):
            out[i, w] = (
                mix[0] * a[0, w]
                + mix[1] * a[1, w]
                + mix[2] * a[2, w]
                + mix[3] * b[0, w]
                + mix[4] * b[1, w]
                + mix[5] * b[2, w]
                + mix[6] * c0[0, w]
                + mix[7] * c0[1, w]
                + mix[8] * c0[2, w]
                + mix[9] * d[0, w]
                + mix[10] * d[1, w]
                + mix[11] * d[2, w]
            )
