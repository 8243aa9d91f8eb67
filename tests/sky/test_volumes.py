"""Volumes one behind the other: against the factors of each, and in their limits."""

import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.geometry.axes import direction
from skyoptics.light.air import Air
from skyoptics.light.mirror import in_water
from skyoptics.light.sun import sun
from skyoptics.optics.bins import Bins
from skyoptics.sky.compose import Background
from skyoptics.sky.haze import LONGEST, Haze, layer_front
from skyoptics.sky.shaft import Shaft
from skyoptics.sky.slab import transmission
from skyoptics.sky.volumes import Layer, SeenThrough, Way, aloft, ambient
from skyoptics.units import DEG, NM

LINES = Bins.lines(np.array([450, 550, 650]) * NM)
SUN = 20 * DEG
FIELD = np.array([0.03, 0.02, 0.01])
ELEVATIONS = np.concatenate([np.linspace(-60, 90, 301), np.linspace(-0.2, 0.2, 41), [26.5, 63.4]]) * DEG


def even(cosine):
    return np.ones_like(cosine)


class Plain:
    """A sky that is brighter towards the horizon, ground of its own."""

    def radiance(self, vectors):
        light = np.where(vectors[..., 2] >= 0.0, 1.0 - 0.5 * vectors[..., 2], 0.3)
        return light[..., None] * np.array([3.0, 2.0, 1.0])


def rain(extinction=1e-3, near=1e3, far=4e3):
    return Shaft(near, far, 2e3, extinction)


def seen(stops, haze=None, air=None, field=FIELD, eye=2.0):
    way = Way(LINES, stops, haze, air, field, SUN, eye)
    views = direction(0.4, ELEVATIONS)
    return way, SeenThrough(Plain(), way).radiance(views), Plain().radiance(views)


def test_rain_alone_is_as_its_factors_say():
    way, ours, sky = seen([rain()])
    factors = rain().factors(LINES, ELEVATIONS, SUN, veil=FIELD)
    np.testing.assert_allclose(ours, factors.behind * sky + factors.airlight, rtol=2e-3)
    np.testing.assert_allclose(way.fade(0, ELEVATIONS), 1.0, rtol=1e-12)


@pytest.mark.parametrize("haze", [None, Haze(5e3), Haze(40e3)])
def test_amount_of_rain_in_haze(haze):
    way, _, _ = seen([rain()], haze)
    factors = rain().factors(LINES, ELEVATIONS, SUN, haze=haze)
    ours = rain().amount(ELEVATIONS, 0.0, SUN)[:, None] * way.fade(0, ELEVATIONS)
    expected = np.broadcast_to(factors.amount * factors.front, ours.shape)
    np.testing.assert_allclose(ours, expected, atol=2e-3 * float(expected.max()))


@pytest.mark.parametrize("haze", [Haze(2e3), Haze(20e3), Haze(LONGEST)])
@pytest.mark.parametrize("extinction", [0.0, 1e-12])
def test_air_without_rain_leaves_the_sky_as_it_is(haze, extinction):
    """Above the horizon the air is in the sky already; below, what is far and dark takes on the horizon's light."""
    _, ours, sky = seen([rain(extinction)], haze, Air())
    up = ELEVATIONS >= 0.0
    np.testing.assert_allclose(ours[up], sky[up], rtol=1e-6)
    down = (ELEVATIONS < 0.0) & (ELEVATIONS > -0.1 * DEG)
    assert np.all(ours[down] > sky[down])


def test_thick_rain_hides_all_behind_it():
    _, ours, _ = seen([rain(1.0)])
    inside = (ELEVATIONS > 0.5 * DEG) & (ELEVATIONS < 25 * DEG)
    np.testing.assert_allclose(ours[inside], np.broadcast_to(FIELD, ours[inside].shape), rtol=1e-9)


def test_thick_haze_hides_the_rain():
    way, ours, sky = seen([rain(1e-2)], Haze(100.0), Air())
    low = (ELEVATIONS >= 0.0) & (ELEVATIONS < 5 * DEG)
    assert way.fade(0, ELEVATIONS[low]).max() < 1e-12
    np.testing.assert_allclose(ours[low], sky[low], rtol=1e-2)


def test_two_showers_are_one_behind_the_other():
    """Either order in the list; the farther one is seen through the nearer one; two halves make a whole."""
    near, far = rain(1e-3, 1e3, 2e3), rain(1e-3, 2e3, 4e3)
    (one, ours, _), (other, turned, _) = seen([near, far], Haze(10e3)), seen([far, near], Haze(10e3))
    np.testing.assert_allclose(ours, turned, rtol=1e-12)
    np.testing.assert_allclose(one.fade(1, ELEVATIONS), other.fade(0, ELEVATIONS), rtol=1e-12)
    level = np.array([0.05])
    through = near.factors(LINES, level, SUN).behind
    clear, _, _ = seen([near, far])
    np.testing.assert_allclose(clear.fade(1, level), np.broadcast_to(through, (1, 3)), rtol=2e-3)
    _, whole, _ = seen([rain(1e-3, 1e3, 4e3)], Haze(10e3))
    low = (ELEVATIONS >= 0.0) & (
        ELEVATIONS < 8 * DEG
    )  # higher up, haze in the rain is taken at the height of its middle
    np.testing.assert_allclose(ours[low], whole[low], rtol=1e-2)


def test_a_cloud_with_air_above_and_below():
    air = Air()
    way, ours, sky = seen([Layer(9e3, 0.4, even)], None, air)
    up = ELEVATIONS > 0.0
    front = layer_front(air, LINES, ELEVATIONS[up], 9e3)
    whole = layer_front(air, LINES, ELEVATIONS[up], np.inf)
    through = transmission(ELEVATIONS[up], 0.4, even)[:, None]
    behind = sky[up] * (front - whole) / (1.0 - whole)
    expected = sky[up] * (1.0 - front) / (1.0 - whole) + through * behind + front * (1.0 - through) * FIELD
    np.testing.assert_allclose(ours[up], expected, rtol=5e-3)
    np.testing.assert_allclose(way.fade(0, ELEVATIONS[up]), front, rtol=5e-3)
    np.testing.assert_allclose(ours[~up & (ELEVATIONS < 0)], sky[~up & (ELEVATIONS < 0)], rtol=1e-9)


@pytest.mark.parametrize("height", [None, 0.0])
def test_a_cloud_that_is_not_there(height):
    _, ours, sky = seen([Layer(height, 0.0, even)], None, Air())
    np.testing.assert_allclose(ours, sky, rtol=1e-9)


def test_a_cloud_looked_down_on():
    _, ours, sky = seen([Layer(None, 1.0, even, above=True)], None, Air())
    down = ELEVATIONS < -1 * DEG
    through = transmission(ELEVATIONS[down], 1.0, even)[:, None]
    np.testing.assert_allclose(ours[down], through * sky[down] + (1.0 - through) * FIELD, rtol=5e-3)


def test_volumes_in_a_field_of_their_own_brightness_are_not_seen():
    """Rain and cloud take no visible light away: an even field stays even."""
    background = Background(1.0, 1.0, 3)
    way = Way(LINES, [rain(2e-3), rain(1e-3, 5e3, 9e3), Layer(None, 0.7, even)], None, None, np.ones(3), SUN, 2.0)
    views = direction(0.4, ELEVATIONS)
    np.testing.assert_allclose(way.seen(views, background), 1.0, rtol=1e-6)


def test_ambient_is_a_mean_over_all_directions():
    np.testing.assert_allclose(ambient(Background(2.0, 0.25, 3)), 2.0 * 1.25 / 2.0, rtol=1e-12)
    np.testing.assert_allclose(ambient(Plain())[0], 3.0 * 0.5 * (0.75 + 0.3), rtol=1e-9)


def test_the_sun_is_bluer_and_brighter_aloft():
    air = Air()
    source = sun(5 * DEG, 0.0, LINES, air)
    ratio = aloft(air, LINES, source, 9e3)
    assert ratio[0] > ratio[2] > 1.0
    above = air.transmission(LINES.edges[:, 0], 5 * DEG, 9e3)
    np.testing.assert_allclose(ratio, above / air.transmission(LINES.edges[:, 0], 5 * DEG), rtol=1e-9)
    np.testing.assert_allclose(aloft(air, LINES, source, 0.0), 1.0, rtol=1e-12)
    image = aloft(air, LINES, in_water(source, np.full(3, 1.33)), 9e3)
    assert np.all(image < 1.0)


def test_showers_that_overlap():
    with pytest.raises(DomainError, match="overlap: one from 1 to 4 km, another from 3 to 5 km"):
        seen([rain(), rain(1e-3, 3e3, 5e3)])


def test_outside_the_picture():
    way, _, _ = seen([rain()], Haze(10e3), Air())
    light = way.seen(np.full((2, 3), np.nan), Plain())
    assert np.all(np.isnan(light))
