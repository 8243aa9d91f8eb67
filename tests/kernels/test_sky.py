"""Paths, harmonics, successive orders and the look-up of the clear sky's kernels."""

import numpy as np
import pytest

from skyoptics.kernels import shells, sky
from skyoptics.light import layers
from skyoptics.light.air import air_mass, ozone_air_mass
from skyoptics.sky.amount import EARTH_RADIUS
from skyoptics.sky.multiple import DENSITY_STEP, LEVELS, Medium, solve
from skyoptics.units import DEG

NO_AEROSOL = np.array([[1.0, 0.0], [0.0, 0.0]])
FLAT = 1e12  # radius at which a sphere is a plane [m]


def air_density(height):
    return layers.density(height)[..., 0]


def ozone_density(height):
    return layers.density(height)[..., 1]


def density(*profiles):
    height = np.arange(0.0, LEVELS[-1] + 1.0, DENSITY_STEP)
    columns = [np.ones_like(height) if profile is None else profile(height) for profile in profiles]
    stacked = np.stack(columns, axis=1)
    return stacked / np.trapezoid(stacked, dx=DENSITY_STEP, axis=0)


def molecules(tau, radius=FLAT, ground=0.0):
    """Rayleigh scattering alone, no absorption, no depolarisation."""
    depth = np.zeros((3, len(tau)))
    depth[0] = tau
    profile = density(lambda h: np.exp(-h / 8e3), None, None)
    return Medium(profile, depth, np.ones((2, len(tau))), 0.0, NO_AEROSOL, ground, radius)


def zenith_radiance(medium, field, sun):
    """Radiance of the zenith per unit irradiance."""
    out = np.empty((1, 1, 3, medium.depth.shape[1]))
    sky.lines_of_sight(
        np.array([np.pi / 2]),
        np.zeros(1),
        2e4,
        sun,
        LEVELS,
        medium.density,
        DENSITY_STEP,
        medium.radius,
        medium.depth,
        medium.albedo,
        medium.legendre,
        field.theta,
        field.moments,
        out,
    )
    return 0.75 * (1.0 + np.cos(sun) ** 2) / (4.0 * np.pi) * out[0, 0, 0] + out[0, 0, 2]


def successive_orders(tau, mu0, layers=200, streams=16, orders=200):
    """Conservative Rayleigh scattering between two planes, by another route: optical depth, mean over azimuth.

    Chandrasekhar, Radiative Transfer (1950): the azimuth-free part of the scalar phase function is 1 + P2(µ) P2(µ') / 2.
    Returns reflected and diffusely transmitted flux and the zenith's radiance, for an irradiance of 1.
    """
    node, weight = np.polynomial.legendre.leggauss(streams)
    mu, weight = 0.5 * (1.0 + node), 0.5 * weight
    mu = np.append(mu, 1.0)  # the zenith rides along without weight
    weight = np.append(weight, 0.0)
    t = np.linspace(0.0, tau, layers + 1)
    step = tau / layers
    p2 = 0.5 * (3.0 * mu**2 - 1.0)
    beam = np.exp(-t / mu0)[:, None]
    source = beam / (4.0 * np.pi) * (1.0 + 0.5 * p2 * 0.5 * (3.0 * mu0**2 - 1.0))
    up, down = np.zeros((layers + 1, len(mu))), np.zeros((layers + 1, len(mu)))
    through = np.exp(-step / mu)
    near = 1.0 - mu / step * (1.0 - through)  # a source that is straight across the layer: weights of its ends
    far = (1.0 - through) - near
    for _ in range(orders):
        new_up, new_down = np.zeros_like(up), np.zeros_like(down)
        for k in range(layers):
            new_down[k + 1] = new_down[k] * through + source[k + 1] * near + source[k] * far
        for k in range(layers - 1, -1, -1):
            new_up[k] = new_up[k + 1] * through + source[k] * near + source[k + 1] * far
        up += new_up
        down += new_down
        mean = (new_up + new_down) @ weight
        second = (new_up + new_down) @ (weight * p2)
        source = 0.5 * (mean[:, None] + 0.5 * p2 * second[:, None])
    return 2 * np.pi * up[0] @ (weight * mu), 2 * np.pi * down[-1] @ (weight * mu), down[-1, -1]


@pytest.mark.parametrize("elevation", [20.0, 60.0])
def test_successive_orders_keep_all_light_and_agree_with_a_plane_parallel_solution(elevation):
    """τ = 0.1, 0.5, 1, black ground: reflected + transmitted + direct = incident; zenith by the scheme above."""
    tau = np.array([0.1, 0.5, 1.0])
    sun = (90.0 - elevation) * DEG
    medium = molecules(tau)
    field = solve(medium, np.array([sun]))
    reflected, transmitted = field.flux[-1, 0, 0], field.flux[0, 0, 1]
    assert field.direct[0] == pytest.approx(np.cos(sun) * np.exp(-tau / np.cos(sun)), rel=0.003)
    assert reflected + transmitted + field.direct[0] == pytest.approx(np.cos(sun), rel=0.02)
    zenith = zenith_radiance(medium, field, sun)
    for k in range(3):
        up, down, overhead = successive_orders(tau[k], np.cos(sun))
        assert up + down + np.cos(sun) * np.exp(-tau[k] / np.cos(sun)) == pytest.approx(np.cos(sun), rel=1e-3)
        assert reflected[k] == pytest.approx(up, rel=0.02)
        assert transmitted[k] == pytest.approx(down, rel=0.02)
        assert zenith[k] == pytest.approx(overhead, rel=0.05)


def test_over_a_white_ground_what_comes_down_goes_up_again():
    """Nothing absorbs: at every height as much light goes up as comes down, the sun's own beam included."""
    sun = 50.0 * DEG
    medium = molecules(np.array([0.3]), ground=1.0)
    field = solve(medium, np.array([sun]))
    assert field.flux[-1, 0, 0, 0] == pytest.approx(np.cos(sun), rel=0.02)
    assert field.flux[0, 0, 0, 0] == pytest.approx(field.flux[0, 0, 1, 0] + field.direct[0, 0], rel=0.02)


def test_harmonics_obey_the_addition_theorem():
    """Σ_m Y_lm(a) Y_lm(b) = (2l + 1) / 4π · P_l(a·b); the parts odd in azimuth, left out, cancel for a in the sun's plane."""
    generator = np.random.default_rng(1)
    one, two = np.empty(15), np.empty(15)
    for _ in range(20):
        angle = generator.uniform(0.0, np.pi)
        a = np.array([np.sin(angle), 0.0, np.cos(angle)])
        b = generator.normal(size=3)
        b /= np.linalg.norm(b)
        sky.harmonics(a[2], a[0], one)
        sky.harmonics(b[2], b[0], two)
        first = 0
        for order in range(5):
            part = slice(first, first + order + 1)
            legendre = np.polynomial.legendre.Legendre.basis(order)(a @ b)
            assert one[part] @ two[part] == pytest.approx((2 * order + 1) / (4 * np.pi) * legendre, abs=1e-12)
            first += order + 1


def test_phase_functions_have_mean_one_and_the_moments_that_the_orders_use():
    node, weight = np.polynomial.legendre.leggauss(200)
    lobes = np.array([[0.9, 0.7], [0.1, -0.4]])
    medium = Medium(np.ones((2, 3)), np.ones((3, 1)), np.ones((2, 1)), 0.0279, lobes, 0.0)
    rayleigh = np.array([sky.phase_molecules(x, medium.gamma) for x in node])
    haze = np.array([sky.phase_aerosol(x, lobes) for x in node])
    for order in range(5):
        legendre = np.polynomial.legendre.Legendre.basis(order)(node)
        assert 0.5 * weight @ (rayleigh * legendre) == pytest.approx(medium.legendre[0, order], abs=1e-12)
        assert 0.5 * weight @ (haze * legendre) == pytest.approx(medium.legendre[1, order], abs=1e-9)


def test_columns_to_the_sun_are_air_masses():
    """Kasten & Young (1989) for air, to the small effect of refraction; Bird & Riordan's shell at 22 km for ozone."""
    profile = density(air_density, None, ozone_density)
    breaks, column = np.empty(shells.LARGEST), np.empty(3)
    for elevation, tolerance in ((90.0, 1e-3), (30.0, 2e-3), (15.0, 3e-3), (10.0, 5e-3), (5.0, 0.015)):
        share = shells.columns(
            0.0, (90.0 - elevation) * DEG, LEVELS, profile, DENSITY_STEP, EARTH_RADIUS, breaks, column
        )
        assert share == 1.0
        assert column[0] == pytest.approx(float(air_mass(elevation * DEG)), rel=tolerance)
        assert column[2] == pytest.approx(float(ozone_air_mass(elevation * DEG)), rel=0.04)


def test_the_earth_hides_the_sun():
    """From 30 km up the horizon lies arccos(R / (R + h)) below the level; half a disc is left there."""
    profile = density(air_density, None, None)
    breaks, column = np.empty(shells.LARGEST), np.empty(3)
    dip = np.arccos(EARTH_RADIUS / (EARTH_RADIUS + 30e3))

    def share(below):
        return shells.columns(
            30e3, np.pi / 2 + dip + below, LEVELS, profile, DENSITY_STEP, EARTH_RADIUS, breaks, column
        )

    assert share(-0.3 * DEG) == 1.0
    assert share(0.0) == pytest.approx(0.5, abs=1e-6)
    assert share(0.3 * DEG) == 0.0
    # Just above the ground: down and up again through all air below, and up from 30 km is next to nothing.
    share(0.0)
    grazing = column[0]
    shells.columns(0.0, np.pi / 2, LEVELS, profile, DENSITY_STEP, EARTH_RADIUS, breaks, column)
    assert grazing == pytest.approx(2.0 * column[0], rel=0.02)


def test_pieces_of_a_path_lose_what_they_scatter():
    profile = density(air_density, air_density, None)
    depth, albedo = np.array([[0.3, 2.0], [0.0, 0.0], [0.0, 0.0]]), np.ones((2, 2))
    way, height = np.empty(shells.LARGEST), np.empty(shells.LARGEST)
    weight, end = np.empty((shells.LARGEST, 2, 2)), np.empty(2)
    for start, mu, to_ground in ((0.0, 1.0, False), (0.0, 0.0, False), (20e3, -0.5, True), (20e3, -0.05, False)):
        n, ground = shells.pieces(
            start,
            mu,
            2e4,
            LEVELS,
            profile,
            DENSITY_STEP,
            EARTH_RADIUS,
            depth,
            albedo,
            way,
            height,
            weight,
            end,
        )
        assert ground == to_ground
        assert weight[:n].sum(axis=(0, 1)) == pytest.approx(1.0 - end, rel=1e-9)
        r = EARTH_RADIUS + start
        exact = np.sqrt(r**2 + 2 * r * mu * way[:n] + way[:n] ** 2) - EARTH_RADIUS
        assert height[:n] == pytest.approx(exact, abs=1e-3)


def test_look_up_gives_the_entries_at_their_own_directions_and_straight_lines_between():
    generator = np.random.default_rng(3)
    rows, turns, bands = 6, 5, 3
    table = generator.uniform(1.0, 2.0, (rows, turns, 3, bands))
    table[:, :, :2] = 0.0
    sun, below = np.array([0.6, 0.0, 0.8]), np.full(bands, 7.0)
    elevation = 0.5 * np.pi * np.linspace(0.0, 1.0, rows)[:-1] ** 2
    turn = np.linspace(0.0, np.pi, turns)

    def at(elevation, turn):
        flat = np.cos(elevation)
        return [flat * np.cos(turn), flat * np.sin(turn), np.sin(elevation)]  # the sun stands in the east

    vectors = np.array([at(e, a) for e in elevation for a in turn])
    out = np.empty((len(vectors), bands))
    sky.look_up(vectors, sun, table, 0.0, NO_AEROSOL, below, out)
    assert out == pytest.approx(table[:-1, :, 2].reshape(-1, bands), rel=1e-9)
    between = np.array([at(elevation[2], 0.5 * (turn[1] + turn[2]))])
    sky.look_up(between, sun, table, 0.0, NO_AEROSOL, below, out[:1])
    assert out[0] == pytest.approx(0.5 * (table[2, 1, 2] + table[2, 2, 2]), rel=1e-9)
    odd = np.array([[np.nan] * 3, at(-0.1, 0.0), at(elevation[1], -turn[1])])
    sky.look_up(odd, sun, table, 0.0, NO_AEROSOL, below, out[:3])
    assert np.all(np.isnan(out[0]))
    assert np.all(out[1] == 7.0)
    assert out[2] == pytest.approx(table[1, 1, 2], rel=1e-9)  # the other side of the sun is its mirror image


@pytest.mark.skipif(not hasattr(sky.look_up, "py_func"), reason="numba is switched off")
def test_compiled_and_plain_look_up_are_the_same():
    generator = np.random.default_rng(4)
    table = generator.uniform(1.0, 2.0, (6, 5, 3, 2))
    vectors = generator.normal(size=(50, 3))
    vectors /= np.linalg.norm(vectors, axis=1)[:, None]
    lobes, sun = np.array([[0.9, 0.7], [0.1, -0.4]]), np.array([0.0, 0.6, 0.8])
    one, two = np.empty((50, 2)), np.empty((50, 2))
    sky.look_up(vectors, sun, table, 0.01, lobes, np.zeros(2), one)
    sky.look_up.py_func(vectors, sun, table, 0.01, lobes, np.zeros(2), two)
    assert one == pytest.approx(two, rel=1e-12)
