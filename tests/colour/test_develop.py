import numpy as np
import pytest

from skyoptics.colour import display, gamut
from skyoptics.colour.develop import develop
from skyoptics.errors import DomainError

WHITE = np.array([0.9505, 1.0, 1.0890])


def test_grey_is_shown_by_the_meter_equation():
    # ISO 2720: 0.125 · 2^EV cd m⁻² is exposed as middle grey.
    picture = develop(np.full((4, 5, 3), 4096.0) * WHITE, exposure_ev=15.0)
    np.testing.assert_allclose(picture.rgb, 0.18, atol=1e-4)
    assert (picture.exposure_ev, picture.automatic, picture.clipped) == (15.0, False, 0.0)
    darker = develop(np.full((4, 5, 3), 4096.0) * WHITE, exposure_ev=16.0)
    np.testing.assert_allclose(2.0 * darker.rgb, picture.rgb, rtol=1e-6)


def test_colours_in_range_pass_unchanged():
    rng = np.random.default_rng(6)
    linear = rng.uniform(0.01, 0.59, (200_000, 3))  # more than one chunk
    xyz = linear @ display.RGB_TO_XYZ.T / display.exposure_scale(12.0)
    picture = develop(xyz.reshape(400, 500, 3), exposure_ev=12.0)
    np.testing.assert_allclose(picture.rgb.reshape(-1, 3), linear, rtol=0, atol=1e-7)
    assert picture.out_of_gamut == 0.0


def test_outside_the_image_circle_is_black_and_not_counted():
    xyz = np.full((10, 10, 3), 1000.0) * WHITE
    xyz[:5] = np.nan
    xyz[5, 0] = np.inf
    plain = develop(np.full((4, 10, 3), 1000.0) * WHITE)
    picture = develop(xyz)
    assert picture.automatic
    assert picture.exposure_ev == plain.exposure_ev
    assert np.array_equal(picture.rgb[:5], np.zeros((5, 10, 3)))
    assert np.array_equal(picture.rgb[5, 0], np.zeros(3))
    assert picture.rgb[6:].min() > 0.2


def test_shares_count_what_was_done():
    xyz = np.full((10, 10, 3), 100.0) * WHITE
    scale = display.exposure_scale(9.0)
    xyz[0] = 3.0 / scale * WHITE  # beyond white
    xyz[1] = np.array([-0.1, 0.3, 0.1]) @ display.RGB_TO_XYZ.T / scale  # a green no display has
    xyz[2] = np.nan
    picture = develop(xyz, exposure_ev=9.0)
    assert picture.clipped == pytest.approx(10 / 90)
    # White beyond the display's is not quite neutral: four digits of D65.
    assert picture.out_of_gamut == pytest.approx(10 / 90)
    after = gamut.oklch(picture.rgb[1, 0].astype(float))
    before = gamut.oklch(np.array([-0.1, 0.3, 0.1]))
    np.testing.assert_allclose(after[[0, 2]], before[[0, 2]], atol=1e-5)


def test_dark_negative_and_empty_pictures_are_allowed():
    for xyz in (np.zeros((3, 3, 3)), np.full((3, 3, 3), np.nan), np.full((3, 3, 3), -2.0), np.empty((0, 4, 3))):
        picture = develop(xyz)
        assert picture.rgb.shape == xyz.shape
        assert not picture.rgb.any()
        assert picture.clipped == 0.0


def test_range_holds_for_any_spectrum():
    rng = np.random.default_rng(9)
    xyz = rng.lognormal(5.0, 3.0, (300, 300, 3)).astype(np.float32)
    picture = develop(xyz)
    assert picture.rgb.dtype == np.float32
    assert picture.rgb.min() >= 0.0
    assert picture.rgb.max() <= 1.0
    assert np.isfinite(picture.rgb).all()


def test_faults_are_worded():
    with pytest.raises(DomainError, match="has to hold X, Y, Z"):
        develop(np.zeros((4, 4)))
    with pytest.raises(DomainError, match="finite number"):
        develop(np.zeros((4, 4, 3)), exposure_ev=float("nan"))
