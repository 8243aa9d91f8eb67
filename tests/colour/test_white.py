"""White balance in kelvin against the CIE's own illuminants."""

import numpy as np
import pytest

from skyoptics.colour import display, white
from skyoptics.colour.develop import develop
from skyoptics.errors import DomainError


# CIE 15:2004, table T.3 and §3.1 (from memory): x, y for the 2° observer. A: a radiator of 2856 K; D50, D55, D65, D75 by their
# temperatures on today's scale.
@pytest.mark.parametrize(
    ("kelvin", "x", "y"),
    [
        (2856, 0.44758, 0.40745),
        (5003, 0.34567, 0.35850),
        (5503, 0.33242, 0.34743),
        (6504, 0.31272, 0.32903),
        (7504, 0.29902, 0.31485),
    ],
)
def test_whites_are_the_standard_illuminants(kelvin, x, y):
    found = white.white(kelvin)
    np.testing.assert_allclose(found[:2] / found.sum(), [x, y], atol=2e-4)


def test_no_step_anywhere():
    kelvins = np.arange(2000.0, 25001.0, 10.0)
    places = np.stack([white.white(kelvin) for kelvin in kelvins])
    places /= places.sum(axis=1, keepdims=True)
    reciprocal = np.abs(np.diff(1e6 / kelvins))
    speed = np.hypot(*np.diff(places[:, :2], axis=0).T) / reciprocal
    assert speed.max() < 0.002  # per mired
    assert np.all(np.diff(places[:, 0]) < 0.0)


@pytest.mark.parametrize("kelvin", [2000.0, 3200.0, 4500.0, 5500.0, 6504.0, 12000.0, 25000.0])
def test_temperature_undoes_white(kelvin):
    assert white.temperature(3.0 * white.white(kelvin)) == pytest.approx(kelvin, rel=1e-4)


def test_temperature_of_the_display_white():
    # D65 as sRGB rounds it, (0.3127, 0.3290).
    assert white.temperature(display.WHITE) == pytest.approx(6504.0, abs=15.0)


def test_a_grey_card_under_that_light_comes_out_neutral():
    for kelvin in (2500.0, 5500.0, 10000.0):
        light = white.white(kelvin)
        shown = develop(np.full((3, 3, 3), 100.0) * light, exposure_ev=10.0, white=light).rgb
        np.testing.assert_allclose(shown, shown[0, 0, 1], rtol=2e-3)


def test_automatic_takes_the_light_from_the_picture_within_bounds():
    rng = np.random.default_rng(3)
    grey = rng.uniform(0.1, 1.0, (40, 60, 1))
    assert white.automatic(grey * white.white(4500.0)) == pytest.approx(4500.0, rel=1e-3)
    assert white.automatic(grey * white.white(20000.0)) == 7000.0  # blue sky stays bluish
    assert white.automatic(grey * white.white(2200.0)) == 3000.0
    assert white.automatic(np.full((3, 3, 3), np.nan)) == white.DAYLIGHT_KELVIN
    few = grey * white.white(5000.0)
    few[0, 0] = 1e6 * white.white(2000.0)  # the sun's disc does not rule
    assert white.automatic(few) == pytest.approx(5000.0, rel=0.01)
    few[:20] *= 1e-5  # nor does a black foreground
    few[:20, :, 2] *= 0.3
    assert white.automatic(few) == pytest.approx(5000.0, rel=0.01)


def test_development_tells_its_white():
    picture = np.full((4, 4, 3), 500.0) * white.white(4000.0)
    assert develop(picture).white is None
    automatic = develop(picture, white="auto")
    np.testing.assert_allclose(automatic.white, white.white(4000.0), rtol=1e-3)
    np.testing.assert_allclose(automatic.rgb, automatic.rgb[0, 0, 1], rtol=2e-3)
    with pytest.raises(DomainError, match='has to be "auto"'):
        develop(picture, white="sunny")


def test_metering_is_a_choice():
    picture = np.full((4, 4, 3), 4096.0) * display.WHITE
    assert develop(picture).exposure_ev == develop(picture, metering="sky").exposure_ev == 14.5
    average = develop(picture, metering="average")
    assert average.exposure_ev == pytest.approx(15.0, abs=1e-3)  # ISO 2720: 0.125 · 2^15 = 4096 cd m⁻²
    assert average.automatic
    with pytest.raises(DomainError, match="metering"):
        develop(picture, metering="spot")


@pytest.mark.parametrize("kelvin", [1999.0, 25001.0, float("nan")])
def test_whites_that_are_not_there(kelvin):
    with pytest.raises(DomainError, match="2000 to 25000 K"):
        white.white(kelvin)


def test_black_has_no_temperature():
    with pytest.raises(DomainError, match="without luminance"):
        white.temperature([0.0, 0.0, 0.0])
