"""Air in front: Koschmieder's law, limits, and the layer's air against the whole atmosphere."""

import numpy as np
import pytest
from scipy.integrate import quad

from skyoptics.errors import DomainError
from skyoptics.light.air import Air
from skyoptics.optics.bins import Bins
from skyoptics.sky.haze import Haze, layer_front, mean_exponential, split
from skyoptics.units import DEG, NM

LINES = Bins.lines(np.array([450, 550, 650]) * NM)
GREEN = Bins.lines(550 * NM)


@pytest.mark.parametrize("visual_range", [50.0, 2e3, 20e3, 300e3])
def test_contrast_at_the_visual_range(visual_range):
    """Koschmieder (1924): e^(−σ V) = 0.02, V = 3.912/σ (AMS Glossary of Meteorology)."""
    haze = Haze(visual_range)
    assert haze.extinction(GREEN)[0] == pytest.approx(3.912 / visual_range, rel=1e-4)
    through = haze.transmission(GREEN, 0.0, visual_range)
    assert through[0] == pytest.approx(0.02, rel=1e-6)
    seen = through * 0.0 + 7.0 * (1.0 - through)  # a black object before a horizon of radiance 7
    assert (7.0 - seen[0]) / 7.0 == pytest.approx(0.02, rel=1e-6)


def test_pure_air_is_blue_and_limits_the_view():
    """Molecules alone: 340 km; their extinction goes with λ^−4.1 (Bodhaine et al. 1999)."""
    assert Haze(339e3).extinction(LINES)[0] / Haze(339e3).extinction(LINES)[2] == pytest.approx(4.5, rel=0.02)
    assert np.ptp(Haze(100.0, exponent=0.0).extinction(LINES)) < 1e-3 * Haze(100.0).extinction(GREEN)[0]
    with pytest.raises(DomainError, match=r"visual range must lie between 0\.01 and 34"):
        Haze(400e3)


@pytest.mark.parametrize("elevation_deg", [-2.0, 0.0, 5.0, 90.0])
def test_depth_is_the_integral_of_extinction(elevation_deg):
    haze, elevation, eye, distance = Haze(20e3, 1.0, 1000.0), elevation_deg * DEG, 500.0, 8e3
    for band in range(3):
        depth, _ = quad(lambda s, b=band: haze.extinction(LINES, eye + s * np.sin(elevation))[b], 0.0, distance)
        ours = haze.transmission(LINES, elevation, distance, eye)[band]
        assert ours == pytest.approx(np.exp(-depth), rel=1e-8)


def test_near_far_and_upwards():
    haze = Haze(10e3)
    np.testing.assert_array_equal(haze.transmission(LINES, 0.1, 0.0), 1.0)
    assert np.all(haze.transmission(LINES, 0.0, 1e6) < 1e-10)
    zenith = haze.transmission(GREEN, 90 * DEG, 1e12)[0]
    expected = (3.912 / 10e3 - 0.097065 / 8454) * 2000 + 0.097065
    assert -np.log(zenith) == pytest.approx(expected, rel=1e-4)
    assert haze.transmission(LINES, np.zeros((4, 1)), np.full(5, 1e3)).shape == (4, 5, 3)


@pytest.mark.parametrize("height", [0.0, 100e3])
def test_a_layer_on_the_ground_and_one_above_all_air(height):
    """Empty: nothing in front. Full: the whole atmosphere, with `Air.transmission`."""
    elevation = np.array([0.0, 0.7, 11.3, 42.0, 90.0]) * DEG
    front = layer_front(Air(), LINES, elevation, height)
    expected = Air().transmission(LINES.centre, elevation[:, None]) if height else np.ones((5, 3))
    np.testing.assert_allclose(front, expected, rtol=0, atol=1e-3)


def test_air_in_front_of_cirrus():
    elevation = np.linspace(0.0, 90.0, 200) * DEG
    front = layer_front(Air(), LINES, elevation, 9e3)
    exact = Air().between(LINES.centre, elevation[:, None], 0.0, 9e3)
    np.testing.assert_allclose(front, exact, rtol=0, atol=1e-3)
    assert np.all(np.diff(front, axis=0) > 0)
    edges = layer_front(Air(), LINES, np.array([[-0.2, np.nan]]), 9e3)
    assert np.all(edges[0, 0] == 1.0)
    assert np.all(np.isnan(edges[0, 1]))


def test_a_sky_is_split_and_whole_again():
    sky, whole = np.array([3.0, 2.0, 1.0]), np.array([0.3, 0.5, 0.7])
    for front in (whole, np.sqrt(whole), np.ones(3)):
        behind, airlight = split(sky, front, whole)
        np.testing.assert_allclose(front * behind + airlight, sky, rtol=1e-14)
        assert np.all((behind >= 0) & (airlight >= 0))
    np.testing.assert_array_equal(split(sky, 1.0, whole)[1], 0.0)  # nothing in front
    np.testing.assert_allclose(split(sky, whole, whole)[0], 0.0, atol=1e-14)  # all of it in front
    np.testing.assert_array_equal(split(sky, 1.0, 1.0)[0], sky)  # no air at all
    np.testing.assert_array_equal(split(sky, 0.0, 0.0), [np.zeros(3), sky])  # fog


def test_mean_exponential():
    x = np.array([-30.0, -1.0, -1e-9, 0.0, 1e-9, 1.0, 800.0])
    expected = [(np.exp(30) - 1) / 30, np.e - 1, 1, 1, 1, 1 - 1 / np.e, 1 / 800]
    np.testing.assert_allclose(mean_exponential(x), expected, rtol=1e-8)
