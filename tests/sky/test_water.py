"""Calm water: Fresnel's share, polarisation, the mirror image."""

import numpy as np
import pytest

from skyoptics.camera import frame
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import azimuth_elevation, direction
from skyoptics.geometry.horizon import dip
from skyoptics.geometry.silhouettes import silhouette
from skyoptics.light.mirror import in_water
from skyoptics.materials import index as material
from skyoptics.optics.bins import Bins
from skyoptics.optics.interface import reflectances, transmittances
from skyoptics.optics.source import Disc, Source
from skyoptics.sky.compose import Background
from skyoptics.sky.ground import Ground
from skyoptics.sky.overcast import StandardSky
from skyoptics.sky.reflectance import reflectance
from skyoptics.sky.water import Water, mirrored_grid
from skyoptics.units import CELSIUS_ZERO, DEG, NM

BINS = Bins.lines(np.array([450, 550, 650]) * NM)
EVEN = Background(2.0, 0.5, len(BINS))
INDEX = material.water(CELSIUS_ZERO + 10.0)(BINS.centre).real


def view(azimuth_deg, elevation_deg):
    return direction(np.asarray(azimuth_deg) * DEG, np.asarray(elevation_deg) * DEG)


def pond(above=EVEN, kind=0.0, eye_height=0.0, sources=()):
    return Water(above, BINS, list(sources), kind, eye_height)


def test_two_percent_straight_down_and_all_of_it_at_grazing_sight():
    """Fresnel: ((n − 1)/(n + 1))² = 2.0–2.2 % for water; 1 at grazing."""
    water = pond()
    assert water.radiance(view(0, -90)) / 2.0 == pytest.approx(((INDEX - 1) / (INDEX + 1)) ** 2, rel=1e-4)
    assert 0.020 < water.radiance(view(0, -90))[1] / 2.0 < 0.0215
    assert water.radiance(view(0, -1e-5)) == pytest.approx(2.0, rel=1e-4)
    assert water.radiance(view(0, [0.0, 30.0])) == pytest.approx(2.0)


@pytest.mark.parametrize("depression", [0.05, 0.5, 3.0, 20.0, 53.0, 77.7])
def test_reflectance_against_fresnels_formulas(depression):
    r_s, r_p = reflectances(INDEX, (90.0 - depression) * DEG)
    turned, s, p = pond().mirrored(view(40, -depression))
    assert turned == pytest.approx(view(40, depression), abs=1e-12)
    assert s == pytest.approx(r_s, rel=1e-4)
    assert p == pytest.approx(r_p, rel=1e-4, abs=1e-5)


def test_brewsters_angle():
    """tan i = n: what is mirrored 36.9° below the horizontal is polarised along the horizon, wholly."""
    brewster = np.arctan(INDEX[1])
    assert 90.0 - brewster / DEG == pytest.approx(36.8, abs=0.2)
    light = pond().stokes(direction(0.0, brewster - 0.5 * np.pi))[1]
    assert light[1] / light[0] == pytest.approx(-1.0, abs=1e-4)
    assert light[2:] == pytest.approx(0.0)


def test_the_surface_keeps_or_lets_through_all_light():
    """Even light above and below (n² times as bright within): the water is as bright as the sky, unpolarised."""
    water = pond(kind=1.0 - ((INDEX - 1) / (INDEX + 1)) ** 2)
    assert water.leaving(view(0, 10)) == pytest.approx(0.0)
    light = water.stokes(view([0, 90, 180], [-80, -30, -2]))
    assert light[..., 0] == pytest.approx(2.0, rel=1e-3)
    assert light[..., 1] == pytest.approx(0.0, abs=2e-3)
    half = pond(kind=0.5, above=Background(2.0, 0.0, 3))
    t_s, t_p = transmittances(INDEX, 30 * DEG)
    straight = transmittances(INDEX, 0.0)[0]
    assert half.leaving(view(0, -60)) == pytest.approx(0.5 * 2.0 * 0.5 * (t_s + t_p) / straight, rel=1e-3)


def test_a_clear_lake_by_day_is_dark_and_bluish_green_straight_down():
    water = pond(kind="lake")
    assert water.leaving(view(0, -90)) == pytest.approx(2.0 * reflectance("lake", BINS), rel=1e-3)
    sea = pond(kind="sea").leaving(view(0, -90))
    assert np.all(np.diff(sea) < 0.0)


def test_the_mirror_image_of_a_polarised_sky():
    """Mueller matrix of a reflection, from amplitudes: van de Hulst (1957), §12.21; signs of U checked by hand.

    Straight down a mirror turns a slant to the other side; at grazing sight light keeps its slant: a change of sign of both
    components, seen along almost the same line.
    """
    water = pond()
    slanted = np.tile([1.0, 0.0, 1.0, 0.0], (1, len(BINS), 1))
    steep = water.reflect(view([0], [-89.9]), slanted)[0, 1]
    assert steep[2] / steep[0] == pytest.approx(-1.0, abs=1e-3)
    grazing = water.reflect(view([0], [-0.001]), slanted)[0, 1]
    assert grazing[2] / grazing[0] == pytest.approx(1.0, abs=1e-2)
    for depression in (5.0, 36.8, 60.0):
        pure = water.reflect(view([0], [-depression]), slanted)[0]
        assert pure[:, 0] ** 2 == pytest.approx(pure[:, 1] ** 2 + pure[:, 2] ** 2, rel=1e-3)  # stays wholly polarised
    above = water.reflect(view([0], [10.0]), slanted)
    assert np.array_equal(above, slanted)
    upright = np.tile([1.0, 1.0, 0.0, 0.0], (1, len(BINS), 1))
    _, r_p = reflectances(INDEX, 60 * DEG)
    assert water.reflect(view([0], [-30.0]), upright)[0, :, 0] == pytest.approx(r_p, rel=1e-3)


def test_the_sun_in_the_water_is_the_sources_own_mirror_image():
    """`skyoptics.light.mirror` by the same formulas: same place, brightness and polarisation."""
    stokes = np.tile([1.0, 0.0, 0.0, 0.0], (3, 1))
    source = Source(view(123, 25), Disc.point(3), np.full(3, 5.0), stokes)
    image = in_water(source, INDEX)
    water = pond()
    turned, s, p = water.mirrored(image.direction)
    assert turned == pytest.approx(source.direction)
    assert 0.5 * (s + p) * 5.0 == pytest.approx(image.irradiance, rel=1e-4)
    assert water.reflect(image.direction[None], stokes[None])[0, :, 1] * 5.0 == pytest.approx(
        image.stokes[:, 1] * image.irradiance, rel=1e-3
    )


def test_a_shore_is_mirrored_with_its_profile():
    shore = Ground(EVEN, BINS, [], silhouette("trees"), kind=0.1, relief=0.1, eye_height=0.0)
    water = pond(above=shore)
    azimuth = np.linspace(0, 60, 500)
    up, down = view(azimuth, 2.2), view(azimuth, -2.2)
    turned, s, p = water.mirrored(down)
    assert turned == pytest.approx(up)
    assert water.radiance(down) == pytest.approx(0.5 * (s + p) * shore.radiance(up), rel=1e-9)
    assert len(np.unique(np.round(water.radiance(down)[:, 1], 3))) >= 2  # trees and gaps


@pytest.mark.parametrize("height", [2.0, 100.0, 3000.0])
def test_seen_from_a_hill_the_image_joins_its_object_on_the_waters_horizon(height):
    water = Water(StandardSky(12, view(0, 20), np.ones(3)), BINS, [], 0.0, height)
    line = -float(dip(height))
    assert water.waterline == pytest.approx(line)
    below = line - np.array([1e-9, 1e-7, 1e-5, 1e-3, 0.1, 1.0])
    _, elevation = azimuth_elevation(water.mirrored(direction(0.5, below))[0])
    assert elevation[0] == pytest.approx(line, abs=1e-4)
    assert np.all(np.diff(elevation) > 0.0)
    # far down the earth's curve is nothing: as far up as down, less the small angle between the two plumb lines
    steep = np.arccos((1.0 + height * (5.0 / 6.0) / 6.371e6) * np.cos(below[-1]))
    assert elevation[-1] == pytest.approx(2.0 * steep + below[-1])
    assert elevation[-1] == pytest.approx(-below[-1], abs=1e-3)
    light = water.radiance(direction(0.5, line + np.array([1e-7, -1e-9])))
    assert light[1] == pytest.approx(light[0], rel=2e-2)


def test_light_of_water_as_stokes_and_as_radiance_agree():
    sun = Source(view(0, 40), Disc.point(3), np.full(3, 5.0), np.tile([1.0, 0.0, 0.0, 0.0], (3, 1)))
    water = pond(StandardSky(12, view(0, 40), np.ones(3)), "lake", 2.0, [sun])
    vectors = view(np.linspace(0, 300, 50), np.linspace(30, -90, 40)[:, None])
    vectors[0, 0] = np.nan
    light, stokes = water.radiance(vectors), water.stokes(vectors)
    assert light.shape == (40, 50, 3)
    assert stokes[..., 0] == pytest.approx(light, rel=1e-12, nan_ok=True)
    assert np.isnan(light[0, 0]).all()
    turned, s, p = water.mirrored(vectors)
    parts = 0.5 * (s + p) * water.above.radiance(turned) + water.leaving(vectors)
    high = turned[..., 2] > 0.0
    assert parts[high] == pytest.approx(light[high], rel=1e-9)
    unpolarised = np.zeros_like(stokes)
    unpolarised[..., 0] = np.where(high[..., None], water.above.radiance(turned), np.nan)
    assert water.reflect(vectors, unpolarised)[high] == pytest.approx(stokes[high], rel=1e-9, abs=1e-12)


def test_the_mirrored_grid_sees_what_the_water_shows():
    grid = frame.photograph("rectilinear", 28e-3, (36e-3, 24e-3), (20, 30), frame.aim(1.0, -0.1, 0.2))
    mirror = mirrored_grid(grid)
    assert mirror.vectors() == pytest.approx(grid.vectors() * [1.0, 1.0, -1.0])
    row, column = mirror.project(grid.vectors() * [1.0, 1.0, -1.0])
    assert row == pytest.approx(np.repeat(np.arange(20.0)[:, None], 30, 1), abs=0.01)
    assert column == pytest.approx(np.repeat(np.arange(30.0)[None], 20, 0), abs=0.01)
    assert mirror.solid_angle() == pytest.approx(grid.solid_angle())
    share = pond().share_of_water(grid)
    assert share.mean() == pytest.approx((grid.vectors()[..., 2] < 0.0).mean(), abs=0.01)


def test_water_that_is_none():
    with pytest.raises(DomainError, match="height of the eye"):
        pond(eye_height=-3.0)
    with pytest.raises(DomainError, match="no ground 'see'; did you mean sea"):
        pond(kind="see")
