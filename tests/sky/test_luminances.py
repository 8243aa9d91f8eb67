"""Luminances of rain, snow, twilight and moonlit skies against what handbooks and measurements give, each named."""

from functools import lru_cache

import numpy as np
import pytest

from skyoptics.colour.observer import weights
from skyoptics.droplets.geometric import scattering_table
from skyoptics.geometry.axes import direction
from skyoptics.light.air import Air
from skyoptics.light.moon import moon, moonlight
from skyoptics.light.sun import sun
from skyoptics.materials import index as material
from skyoptics.optics.bins import Bins
from skyoptics.sky.clear import ClearSky
from skyoptics.sky.ground import Ground
from skyoptics.sky.overcast import OVERCAST, StandardSky
from skyoptics.sky.shaft import Shaft
from skyoptics.units import CELSIUS_ZERO, DEG, NM

BINS = Bins.adjoining(np.linspace(380, 780, 17) * NM)
LUMINANCE = weights(BINS)[:, 1]
ZENITH = direction(0.0, 90.0 * DEG)


@lru_cache
def clear(elevation_deg):
    return ClearSky(BINS, direction(0.0, elevation_deg * DEG))


@lru_cache
def by_moon(elevation_deg):
    full = moon(elevation_deg * DEG, 0.0, 0.0, BINS, Air())
    return ClearSky(BINS, full.direction, above=moonlight(0.0)), full


@pytest.mark.parametrize("elevation", [60.0, pytest.param(30.0, marks=pytest.mark.slow)])
def test_snow_under_the_full_moon(elevation):
    """0.03–0.1 cd m⁻²: 0.1–0.3 lx of full moonlight (RCA Electro-Optics Handbook (1974), from memory) on white ground."""
    sky, full = by_moon(elevation)
    ground = Ground(sky, BINS, [full], kind="snow")
    assert 0.1 < ground.light.level @ LUMINANCE < 0.3
    assert 0.03 < ground.radiance(direction(1.0, -0.3)) @ LUMINANCE < 0.1


def test_snow_in_the_sun():
    """100 klx on level ground (lighting handbooks, from memory; within 15 %) make snow 25–33 kcd m⁻² bright."""
    ground = Ground(clear(60.0), BINS, [sun(60 * DEG, 0.0, BINS, Air())], kind="snow")
    assert ground.light.level @ LUMINANCE == pytest.approx(100e3, rel=0.15)
    assert 25e3 < ground.level @ LUMINANCE < 33e3


def test_a_grey_card_in_the_sun():
    """18 % facing up at sun height 60°, EV 15 by a meter of K = 12.5 (ISO 2720): 4096 cd m⁻² within 0.7 EV (common practice)."""
    ground = Ground(clear(60.0), BINS, [sun(60 * DEG, 0.0, BINS, Air())], kind=0.18)
    assert abs(np.log2(float(ground.level @ LUMINANCE) / (2**15 * 0.125))) < 0.7


def test_the_moonlit_sky():
    """About 10⁻² cd m⁻² in fairly bright moonlight (RCA Electro-Optics Handbook (1974), from memory; its steps are tenfold)."""
    sky, _ = by_moon(60.0)
    assert 3e-3 < sky.radiance(ZENITH) @ LUMINANCE < 3e-2


@pytest.mark.parametrize("azimuth", [0.0, 90.0, 180.0])
def test_the_sky_near_the_horizon_on_a_clear_day(azimuth):
    """About 10⁴ cd m⁻² (RCA Electro-Optics Handbook (1974), from memory; its steps are tenfold)."""
    light = clear(60.0).radiance(direction(azimuth * DEG, 10.0 * DEG)) @ LUMINANCE
    assert 10**3.5 < light < 10**4.5


@pytest.mark.parametrize(
    "depression", [6.0, pytest.param(8.0, marks=pytest.mark.slow), pytest.param(10.0, marks=pytest.mark.slow)]
)
def test_the_zenith_of_twilight(depression):
    """Measured in V at Paranal, within a factor of 1.8: 11.84 + 1.411 x − 0.041 x², x = depression − 5°, magnitudes per arcsec².

    F. Patat, O. S. Ugolnikov & O. V. Postylyakov, A&A 455, 385 (2006), from memory; 1.08e5 cd m⁻² for magnitude 0 (common
    practice). Brown's illuminances of twilight, which agree with them: `test_clear`.
    """
    x = depression - 5.0
    measured = 1.08e5 * 10.0 ** (-0.4 * (11.84 + 1.411 * x - 0.041 * x * x))
    assert measured / 1.8 < clear(-depression).radiance(ZENITH) @ LUMINANCE < measured * 1.8


def rain(optical_depth):
    """Return luminances of 3 km of rain, sunlit and not, and of the cloud behind it; sun at 20°, seen 30° from its antipole.

    The rain is Marshall & Palmer's of 10 mm h⁻¹; it shines by its drops (rays, away from the bows' rims wavelength hardly matters)
    and by the light under the cloud.
    """
    green = Bins.lines([550 * NM])
    edges = np.linspace(0.0, np.pi, 91)
    table = scattering_table(
        material.water(10.0 + CELSIUS_ZERO), 5e-4, green, edges=edges, relative_error=0.2, max_batches=8
    )
    phase = 0.5 * float(np.interp(150 * DEG, table.angle, table.elements[:, :, 0, 0].sum(axis=0))) / (4.0 * np.pi)
    sky = clear(20.0)
    cloud = StandardSky.cloud(OVERCAST, sky.sun, sky.diffuse + sky.direct, optical_depth)
    shaft = Shaft(near=1e3, far=4e3, top=2e3, extinction=1.6e-3)
    view = direction(np.pi, 10.0 * DEG)
    veil = cloud.diffuse / np.pi
    factors = shaft.factors(BINS, 10.0 * DEG, 20.0 * DEG, veil=veil)
    behind = cloud.radiance(view)
    shade = factors.front * factors.behind * behind + factors.airlight
    source = sun(20.0 * DEG, 0.0, BINS, Air())
    lit = shade + factors.front * source.irradiance * phase * factors.amount
    return (float((light @ LUMINANCE).squeeze()) for light in (lit, shade, behind))


def test_rain_under_a_storm_cloud():
    """A heavily overcast day is about 10² cd m⁻² bright, an overcast one 10³ (RCA Electro-Optics Handbook (1974), from memory)."""
    lit, shade, behind = rain(100.0)
    assert 100.0 < shade < 1000.0
    assert 100.0 < behind < 1000.0
    assert 300.0 < lit < 3000.0  # sunlit rain stands out against it, yet is no clear day's sky
    assert lit > 1.3 * shade
