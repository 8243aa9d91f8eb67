"""Slant paths: layers against the tables, rays against an independent integration, masses against published fits."""

import numpy as np
import pytest
from scipy.integrate import quad, solve_ivp

from skyoptics.errors import DomainError
from skyoptics.light.air import air_mass, ozone_air_mass
from skyoptics.light.layers import MOLECULE_HEIGHT, REFRACTIVITY, TOP, Profile, density, log_molecules
from skyoptics.light.slant import EARTH_RADIUS, aloft, bending, between, dip, to_space
from skyoptics.units import ARCMIN, DEG

NAMES = ("molecules", "ozone", "haze", "vapour")
ELEVATIONS = np.array([0, 0.5, 1, 2, 3, 5, 10, 20, 42, 60, 90]) * DEG


def parts(path):
    return np.stack([getattr(path, name) for name in NAMES], axis=-1)


def test_molecules_of_the_standard_atmosphere():
    """US Standard Atmosphere, 1976: temperature and pressure at the bases of its layers (from memory)."""
    geopotential = np.array([11e3, 20e3, 32e3, 47e3, 51e3, 71e3])
    temperature = np.array([216.65, 216.65, 228.65, 270.65, 270.65, 214.65])
    pressure = np.array([22632.06, 5474.889, 868.0187, 110.9063, 66.93887, 3.956420])
    height = 6356766.0 * geopotential / (6356766.0 - geopotential)
    expected = pressure / 101325.0 * 288.15 / temperature
    np.testing.assert_allclose(np.exp(log_molecules(height)), expected, rtol=5e-4)
    assert pytest.approx(101325 / (1.2250 * 9.80665), rel=3e-3) == MOLECULE_HEIGHT  # pressure ÷ weight


def test_ozone_of_lacis_and_hansen():
    """J. Atmos. Sci. 31, 118 (1974) (from memory): share above h is (1 + e^(−b/c)) / (1 + e^((h − b)/c))."""
    for height in (0.0, 10e3, 25e3):
        above, _ = quad(lambda h: float(density(h)[1]), height, TOP, epsabs=0.0, epsrel=1e-10)
        assert above == pytest.approx((1 + np.exp(-4)) / (1 + np.exp((height - 20e3) / 5e3)), rel=1e-6)


@pytest.mark.parametrize("part", range(4))
def test_a_column_is_one(part):
    height = np.linspace(0.0, TOP, 100_001)
    assert np.trapezoid(density(height)[:, part], height) == pytest.approx(1.0, rel=1e-5)
    assert parts(to_space(90 * DEG))[part] == pytest.approx(1.0, rel=3e-5)


@pytest.mark.parametrize("elevation_deg", [0.0, 3.0, 42.0])
def test_straight_rays_against_quadrature(elevation_deg):
    """Without refraction: height over a sphere by the law of cosines, along the ray."""
    elevation, profile = elevation_deg * DEG, Profile(haze_height=1200.0, vapour_height=3000.0, refractivity=0.0)

    end = 1.3e6 if elevation_deg < 1 else TOP / np.sin(elevation)
    s = end * np.linspace(0.0, 1.0, 200_001) ** 2
    height = np.sqrt(EARTH_RADIUS**2 + s * s + 2 * EARTH_RADIUS * s * np.sin(elevation)) - EARTH_RADIUS
    expected = np.trapezoid(density(height, profile), s, axis=0)
    np.testing.assert_allclose(parts(to_space(elevation, 0.0, profile)), expected, rtol=5e-5)


@pytest.mark.parametrize(("height", "elevation_deg"), [(0.0, 0.0), (0.0, 2.0), (0.0, 30.0), (9e3, 1.0), (9e3, -2.0)])
def test_bent_rays_against_their_differential_equation(height, elevation_deg):
    """dr/ds = sin e, dφ/ds = cos e / r, de/ds = cos e / r + (n′/n) cos e: curvature −∂ ln n (Born & Wolf, §3.2)."""

    def n(h):
        return 1.0 + REFRACTIVITY * np.exp(log_molecules(np.clip(h, 0.0, TOP)))

    def step(s, state):
        h, e = state[:2]
        slope = (n(h + 5.0) - n(h - 5.0)) / 10.0 if h > 5.0 else (n(h + 5.0) - n(h)) / 5.0
        curve = -slope / n(h) * np.cos(e)
        return [np.sin(e), np.cos(e) / (EARTH_RADIUS + h) - curve, curve, *density(h)]

    def out(s, state):
        return state[0] - 0.999 * TOP

    out.terminal = True
    start = [height, elevation_deg * DEG, 0.0, 0.0, 0.0, 0.0, 0.0]
    ray = solve_ivp(step, (0.0, 5e6), start, events=out, rtol=1e-8, atol=1e-9, max_step=2e4)
    assert ray.status == 1
    assert bending(elevation_deg * DEG, height) == pytest.approx(ray.y[2, -1], rel=2e-3)
    np.testing.assert_allclose(parts(to_space(elevation_deg * DEG, height)), ray.y[3:, -1], rtol=1e-3)


def test_molecules_against_kasten_and_young():
    """Appl. Opt. 28, 4735 (1989): a fit to a refracting standard atmosphere, said to be good to 0.5 % at the horizon."""
    mass = to_space(ELEVATIONS).molecules
    np.testing.assert_allclose(mass[1:], air_mass(ELEVATIONS[1:]), rtol=2.5e-3)
    assert mass[0] == pytest.approx(37.92, rel=0.01)


def test_ozone_against_a_thin_layer():
    """Bird & Riordan (1984), equation 2-10, a layer at 22 km; ozone lies low too, which only a grazing ray notices."""
    high = ELEVATIONS >= 10 * DEG
    np.testing.assert_allclose(to_space(ELEVATIONS[high]).ozone, ozone_air_mass(ELEVATIONS[high]), rtol=0.02)
    assert 12.1 < to_space(0.0).ozone < 16.0


def test_haze_and_vapour_against_gueymard():
    """C. Gueymard, SMARTS2, FSEC-PF-270-95 (1995), optical masses (from memory); both have scale heights near 2 km."""
    elevation = ELEVATIONS[ELEVATIONS >= 3 * DEG][:-1]
    zenith = 90 - elevation / DEG
    haze = 1 / (np.sin(elevation) + 0.16851 * zenith**0.18198 * (95.318 - zenith) ** -1.9542)
    vapour = 1 / (np.sin(elevation) + 0.10648 * zenith**0.11423 * (93.781 - zenith) ** -1.9203)
    np.testing.assert_allclose(to_space(elevation).haze, haze, rtol=0.03)
    np.testing.assert_allclose(to_space(elevation).vapour, vapour, rtol=0.005)


def test_bending_against_bennett():
    """G. G. Bennett, J. Navigation 35, 255 (1982): R = cot(h + 7.31/(h + 4.4)) at 1010 hPa, 10 °C; scaled to 15 °C, 1 atm."""
    h = np.array([0, 5, 10, 20, 45, 80])
    bennett = 1 / np.tan((h + 7.31 / (h + 4.4)) * DEG) * (1013.25 / 1010) * (283.15 / 288.15)
    ours = bending(h * DEG) / ARCMIN
    np.testing.assert_allclose(ours[1:], bennett[1:], rtol=0, atol=0.1)
    assert ours[0] == pytest.approx(bennett[0], abs=1.0)
    assert bending(90 * DEG) == pytest.approx(0.0, abs=1e-12)


@pytest.mark.parametrize("height", [500.0, 9e3, 40e3])
def test_legs_of_one_ray_add_up(height):
    """A ray that grazes the ground stands at the dip, up or down, where it passes a height."""
    down = float(dip(height))
    whole, leg = parts(to_space(0.0)), parts(between(0.0, 0.0, height))
    np.testing.assert_allclose(leg + parts(to_space(-down, height)), whole, rtol=1e-5)
    np.testing.assert_allclose(parts(to_space(down, height)), whole + leg, rtol=1e-4)
    summed = between(0.0, 0.0, height) + to_space(-down, height)
    np.testing.assert_allclose(parts(summed), whole, rtol=1e-5)
    assert down == pytest.approx(-np.sqrt(2 * height / EARTH_RADIUS), rel=0.1)


def test_empty_legs():
    np.testing.assert_array_equal(parts(between(0.3, 5e3, 5e3)), 0.0)
    np.testing.assert_array_equal(parts(to_space(0.3, TOP)), 0.0)
    assert np.all(parts(between(ELEVATIONS, 0.0, TOP)) == parts(to_space(ELEVATIONS)))


@pytest.mark.parametrize("height", [0.0, 9e3])
def test_masses_run_on_through_the_horizon(height):
    """No step and no kink: successive differences change little; below the dip the grazing ray stays."""
    low = float(dip(height))
    elevation = np.linspace(low - 1.0 * DEG, low + 2.0 * DEG, 601)
    mass = parts(to_space(elevation, height))
    below = elevation < low - 1e-12
    np.testing.assert_allclose(mass[below], np.broadcast_to(parts(to_space(low, height)), mass[below].shape), rtol=1e-6)
    assert np.all(
        np.diff(mass[~below][:, [0, 2, 3]], axis=0) < 0
    )  # ozone: a ray that stays in its layer has more of it
    assert np.all(np.abs(np.diff(mass, axis=0)) < 0.035 * mass.max(axis=0))


def test_aloft_the_same_sun_stands_lower():
    elevation = np.linspace(-1.0, 90.0, 183) * DEG
    np.testing.assert_allclose(aloft(elevation[2:], 0.0), elevation[2:], rtol=0, atol=1e-6)
    seen = aloft(elevation, 9e3)
    np.testing.assert_allclose(seen - bending(seen, 9e3), elevation - bending(np.maximum(elevation, 0.0)), atol=2e-6)
    assert np.all(np.diff(seen) > 0)
    assert elevation[2] - seen[2] == pytest.approx(0.3 * DEG, abs=0.15 * DEG)
    assert elevation[-1] - seen[-1] == pytest.approx(0.0, abs=1e-9)


def test_shapes_broadcast():
    path = to_space(np.full((3, 1), 0.2), np.array([0.0, 1e3, 2e3, 3e3]))
    assert path.haze.shape == (3, 4)
    assert to_space(0.2).haze.shape == ()
    assert bending(np.full((2, 1), 0.2), np.zeros(5)).shape == (2, 5)


@pytest.mark.parametrize(
    ("call", "text"),
    [
        (lambda: to_space(91 * DEG), "elevation must lie between -90 and 90 °"),
        (lambda: to_space(0.1, -5.0), "height must lie between 0 and 100 km"),
        (lambda: to_space(np.nan), "got nan"),
        (lambda: between(-0.1, 0.0, 1e3), "elevation at the lower end must lie between 0 and 90 °"),
        (lambda: between(0.1, 2e3, 1e3), "height of the upper end above the lower one"),
        (lambda: Profile(haze_height=20.0), "scale height of haze must lie between 100 and 10000 m"),
        (lambda: Profile(refractivity=0.01), "refractivity of air"),
    ],
)
def test_what_makes_no_sense(call, text):
    with pytest.raises(DomainError, match=text):
        call()
