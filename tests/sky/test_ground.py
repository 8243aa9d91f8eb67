"""Light of the land: Lambert's law, slopes, haze, the edge to the sky."""

import time

import numpy as np
import pytest

from skyoptics.camera import frame
from skyoptics.colour.observer import weights
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import direction
from skyoptics.geometry.horizon import Profile, dip, flat
from skyoptics.geometry.silhouettes import silhouette
from skyoptics.light.air import Air
from skyoptics.light.sun import sun
from skyoptics.optics.bins import Bins
from skyoptics.optics.source import Disc, Source
from skyoptics.sky.compose import Background
from skyoptics.sky.ground import TILT, Ground, share_below
from skyoptics.sky.haze import Haze
from skyoptics.sky.illumination import Illumination
from skyoptics.sky.overcast import OVERCAST, StandardSky, horizontal_ratio
from skyoptics.sky.reflectance import SPECTRA, reflectance
from skyoptics.units import DEG, NM

BINS = Bins.adjoining(np.linspace(380, 780, 9) * NM)
EVEN = Background(2.0, 0.5, len(BINS))
DARK = Background(0.0, 0.0, len(BINS))


def lamp(elevation_deg, azimuth_deg=0.0, irradiance=3.0):
    stokes = np.tile([1.0, 0.0, 0.0, 0.0], (len(BINS), 1))
    light = np.full(len(BINS), irradiance)
    return Source(direction(azimuth_deg * DEG, elevation_deg * DEG), Disc.point(len(BINS)), light, stokes)


def view(azimuth_deg, elevation_deg):
    return direction(np.asarray(azimuth_deg) * DEG, np.asarray(elevation_deg) * DEG)


def test_white_ground_under_an_even_sky_is_as_bright_as_the_sky():
    ground = Ground(EVEN, BINS, [], kind=1.0, relief=1.0, eye_height=0.0)
    assert ground.light.diffuse == pytest.approx(np.pi * 2.0, rel=1e-12)
    assert ground.radiance(view([0, 100, 200, 0], [-90, -30, -1, 40])) == pytest.approx(2.0, rel=1e-12)
    # a white wall sees half sky, half white ground
    walls = Ground(EVEN, BINS, [], silhouette("hills"), kind=1.0, relief=1.0, eye_height=0.0)
    assert walls.radiance(view(np.arange(0, 360, 7), 0.2)) == pytest.approx(2.0, rel=2e-3)


@pytest.mark.parametrize("elevation", [5.0, 30.0, 60.0, 90.0])
def test_a_grey_card_in_the_sun(elevation):
    """Lambert: L = ρ E sin h / π; nothing from a sun below the horizon or in the shadow of a cloud."""
    sunlit = Ground(DARK, BINS, [lamp(elevation)], kind=0.18)
    assert sunlit.radiance(view(200, -20)) == pytest.approx(0.18 * 3.0 * np.sin(elevation * DEG) / np.pi, rel=1e-12)
    partly = Ground(DARK, BINS, [lamp(elevation), lamp(-elevation)], kind=0.18, sunlit=0.25)
    assert partly.level == pytest.approx(0.25 * sunlit.level)


def test_diffuse_light_against_the_closed_integral_of_standard_skies():
    """Moon & Spencer's overcast sky (1942): E = 7π/9 of the zenith's radiance; ISO types by `horizontal_ratio`."""
    light = Illumination(StandardSky(16, view(0, 30), np.ones(len(BINS))), [])
    assert light.diffuse == pytest.approx(7.0 * np.pi / 9.0, rel=1e-4)
    for kind in (OVERCAST, 12, 15):
        sky = StandardSky(kind, view(77, 30), np.ones(len(BINS)))
        found = Illumination(sky, [lamp(30, 77)]).diffuse
        assert found == pytest.approx(horizontal_ratio(kind, 30 * DEG), rel=2e-3)


def test_slopes_against_closed_forms():
    light = Illumination(EVEN, [lamp(20, 180)])
    ground = np.full(len(BINS), 0.7)
    tilt = np.array([0.0, 30.0, 90.0]) * DEG
    normals = direction(np.pi, 0.5 * np.pi - tilt)  # towards the sun
    sky = np.pi * 2.0 * 0.5 * (1.0 + np.cos(tilt)) + np.pi * 0.7 * 0.5 * (1.0 - np.cos(tilt))
    expected = sky + 3.0 * np.cos(70 * DEG - tilt)
    assert light.on(normals, ground) == pytest.approx(np.repeat(expected[:, None], len(BINS), 1), rel=2e-3)
    away = light.on(direction(0.0, np.zeros(1)), ground)
    assert away == pytest.approx(np.pi * (2.0 + 0.7) / 2.0, rel=2e-3)


def test_hills_are_bright_before_the_sun_and_dark_against_it():
    hills = flat(-3 * DEG)  # a level crest 3 degrees up
    ground = Ground(DARK, BINS, [lamp(30, 180)], hills, kind=0.0, relief=0.3)
    lit, unlit, side = ground.radiance(view([0, 180, 90], 1.0))
    assert lit == pytest.approx(0.3 / np.pi * 3.0 * np.cos(60 * DEG - TILT), rel=1e-6)
    assert unlit == pytest.approx(0.0, abs=1e-12)
    assert np.all(side < lit)
    assert ground.radiance(view(0, 3.01)) == pytest.approx(0.0)  # sky
    assert ground.radiance(view(0, -1.0)) == pytest.approx(0.0)  # level ground, black


def test_the_sky_reaches_down_to_the_horizon_seen_from_a_hill():
    """Bowditch (from memory): dip 1.76′ √100 = 17.6′."""
    ground = Ground(EVEN, BINS, [], kind=0.0, eye_height=100.0)
    assert ground.radiance(view(10, -17.4 / 60)) == pytest.approx(2.0)
    assert ground.radiance(view(10, -17.8 / 60)) == pytest.approx(0.0)
    assert ground.sky_radiance(view(10, [-17.8 / 60, -90.0])) == pytest.approx(2.0)


def test_haze_before_the_land():
    """Koschmieder (1924): at the visual range a black object keeps 2 % contrast to the horizon (at 550 nm)."""
    line = Bins.lines([550 * NM])
    sky = Background(2.0, 0.0, 1)
    haze = Haze(20e3)
    crest = flat(-2 * DEG)
    ground = Ground(sky, line, [], crest, kind=0.0, relief=0.0, eye_height=0.0, distance=20e3, haze=haze)
    assert 1.0 - ground.radiance(view(0, 1.0)) / 2.0 == pytest.approx(0.02, rel=1e-6)
    near = Ground(sky, line, [], crest, kind=0.0, relief=0.0, eye_height=0.0, distance=0.0, haze=haze)
    assert near.radiance(view(0, 1.0)) == pytest.approx(0.0)
    hill = Ground(sky, line, [], kind=0.0, eye_height=500.0, haze=haze)
    down = np.array([90.0, 20.0, 5.0, 2.0]) * DEG
    through = haze.transmission(line, -down, 500.0 / np.sin(down), 500.0)
    assert hill.radiance(direction(0.3, -down)) == pytest.approx(2.0 * (1.0 - through), rel=0.02)
    light = hill.radiance(direction(0.3, -np.linspace(1.0, 90.0, 300) * DEG))[:, 0]
    assert np.all(np.diff(light) < 0.0)


def test_directions_outside_the_image_stay_nan():
    ground = Ground(EVEN, BINS, [lamp(30)], silhouette("town"), haze=Haze(30e3))
    vectors = view([0, 0], [10, -10])
    vectors[0] = np.nan
    for light in (ground.radiance(vectors), ground.land_radiance(vectors)):
        assert np.isnan(light[0]).all()
        assert np.isfinite(light[1]).all()
    assert ground.radiance(np.zeros((0, 3))).shape == (0, len(BINS))


def test_sky_and_land_make_up_the_picture():
    ground = Ground(EVEN, BINS, [lamp(30)], silhouette("ridge"), haze=Haze(30e3))
    vectors = view(np.linspace(0, 50, 80), np.linspace(8, -8, 60)[:, None])
    land = ~ground.profile.visible(vectors)
    expected = np.where(land[..., None], ground.land_radiance(vectors), ground.sky_radiance(vectors))
    assert np.array_equal(ground.radiance(vectors), expected)
    assert 0.3 < land.mean() < 0.7


@pytest.mark.parametrize("roll", [0.0, 25.0])
def test_coverage_of_pixels_against_many_small_ones(roll):
    """A coarse pixel's share is the mean over 16 × 16 fine ones; the sum over the picture keeps the land's area."""
    profile = silhouette("trees")

    def grid(n):
        return frame.photograph(
            "rectilinear", 28e-3, (36e-3, 24e-3), (16 * n, 24 * n), frame.aim(1.0, 0.05, roll * DEG)
        )

    coarse = share_below(profile, grid(2))
    fine = profile.visible(grid(32).vectors()).reshape(32, 16, 48, 16)
    exact = 1.0 - fine.mean(axis=(1, 3))
    assert np.sqrt(np.mean((coarse - exact) ** 2)) < (0.01 if roll == 0.0 else 0.03)
    assert coarse.sum() == pytest.approx(exact.sum(), rel=2e-3)
    assert np.array_equal(share_below(profile, grid(2), slice(5, 9)), coarse[5:9])


def test_coverage_of_a_level_horizon_is_exact():
    grid = frame.panorama(40 * DEG, 20 * DEG, (20, 40), 0.0, 0.0, 0.0)
    share = share_below(flat(), grid)
    assert share[:10] == pytest.approx(0.0, abs=1e-9)
    assert share[10:] == pytest.approx(1.0, abs=1e-9)


@pytest.mark.parametrize(
    ("name", "low", "high"),
    [("grass", 0.05, 0.12), ("forest", 0.02, 0.06), ("soil", 0.07, 0.2), ("sand", 0.2, 0.4), ("rock", 0.1, 0.3)],
)
def test_luminous_reflectances(name, low, high):
    """Ranges of lighting and photographic practice (common practice, no source)."""
    light = sun(60 * DEG, 0.0, BINS, Air()).irradiance * weights(BINS)[:, 1]
    assert low < np.sum(reflectance(name, BINS) * light) / light.sum() < high


def test_reflectances_have_the_right_colour():
    """Green bump and red edge of leaves; soil climbs towards the red; snow is white; natural water is bluish or green."""
    lines = Bins.lines(np.array([450, 550, 650, 760]) * NM)
    leaf, soil, snow, sea = (reflectance(name, lines) for name in ("grass", "soil", "snow", "sea"))
    assert leaf[1] > leaf[0]
    assert leaf[3] > 4 * leaf[2]
    assert leaf[1] > leaf[2]
    assert np.all(np.diff(soil) > 0.0)
    assert snow.min() > 0.85
    assert np.ptp(snow[:3]) < 0.03
    assert np.all(np.diff(sea) < 0.0)
    for name in SPECTRA:
        whole = reflectance(name, Bins.adjoining(np.linspace(300, 1000, 30) * NM))
        assert np.all((whole > 0.0) & (whole < 1.0))


def test_ground_that_is_none():
    with pytest.raises(DomainError, match=r"no ground 'gras'; did you mean grass\? \(there are grass, forest"):
        reflectance("gras", BINS)
    with pytest.raises(DomainError, match=r"reflectance of the ground must lie between 0 and 1, got 1\.2"):
        reflectance(1.2, BINS)
    with pytest.raises(DomainError, match="one number or 8 bin means"):
        reflectance(np.full(3, 0.1), BINS)
    with pytest.raises(DomainError, match="height of the eye"):
        Ground(EVEN, BINS, [], eye_height=-1.0)
    with pytest.raises(DomainError, match="distance of the land"):
        Ground(EVEN, BINS, [], distance=1e6)
    with pytest.raises(DomainError, match="sunlit share"):
        Ground(EVEN, BINS, [], sunlit=2.0)


def test_a_profile_from_a_table_near_the_true_horizon_is_level_ground():
    """A measured 0° is 2.5′ above the dip of an eye at 2 m: no strip of forest may appear there."""
    ground = Ground(EVEN, BINS, [], Profile(np.array([0.0]), np.array([0.0])), kind=0.4, relief=0.0)
    assert -dip(2.0) < -1.0 / 60 * DEG
    assert ground.radiance(view(0, -1.0 / 60)) == pytest.approx(0.8, rel=1e-6)


@pytest.mark.slow
def test_a_picture_costs_little_beside_its_sky():
    """1920 × 1080, 32 bins, trees and hazy ground: within 0.8 s of processor time, 0.4 s on two idle processors."""
    bins = Bins.adjoining(np.linspace(380, 780, 33) * NM)
    sky = Background(2.0, 0.5, len(bins))
    ground = Ground(sky, bins, [], silhouette("trees"), haze=Haze(20e3))
    vectors = view(np.linspace(0, 60, 1920), np.linspace(25, -15, 1080)[:, None])
    spent = []
    for scene in (sky, ground):
        start = time.process_time()
        for first in range(0, 1080, 120):
            scene.radiance(vectors[first : first + 120])
        spent.append(time.process_time() - start)
    assert spent[1] - spent[0] < 0.8
