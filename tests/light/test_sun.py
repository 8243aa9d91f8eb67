import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.light import spectrum
from skyoptics.light.air import Air
from skyoptics.light.sun import sun
from skyoptics.optics.bins import Bins
from skyoptics.units import DEG, NM

VISIBLE = Bins.adjoining(np.linspace(380, 780, 41) * NM)


@pytest.mark.parametrize(
    ("elevation_deg", "azimuth_deg", "expected"),
    [
        (0, 0, (0, 1, 0)),
        (0, 90, (1, 0, 0)),
        (0, 180, (0, -1, 0)),
        (0, -90, (-1, 0, 0)),
        (90, 123, (0, 0, 1)),
        (30, 90, (np.sqrt(3) / 2, 0, 0.5)),
    ],
)
def test_direction_is_east_north_up(elevation_deg, azimuth_deg, expected):
    source = sun(elevation_deg * DEG, azimuth_deg * DEG, VISIBLE, None)
    assert source.direction.shape == (3,)
    np.testing.assert_allclose(source.direction, expected, atol=1e-15)


def test_above_the_air():
    source = sun(-30 * DEG, 0.0, VISIBLE, None)
    np.testing.assert_array_equal(source.irradiance, spectrum.irradiance(VISIBLE))


def test_unpolarised():
    np.testing.assert_array_equal(sun(0.3, 0.0, VISIBLE, Air()).stokes, np.tile([1.0, 0, 0, 0], (len(VISIBLE), 1)))


def test_disc_or_point():
    with_disc, point = sun(0.3, 0.0, VISIBLE, Air()), sun(0.3, 0.0, VISIBLE, Air(), disc=False)
    assert with_disc.disc.radius == pytest.approx(959.63 / 3600 * DEG, rel=1e-12)
    assert with_disc.disc.darkening.shape == (len(VISIBLE), 6)
    assert point.disc.radius == 0.0
    np.testing.assert_array_equal(with_disc.irradiance, point.irradiance)


def test_one_wavelength_is_the_plain_product():
    lines = Bins.lines(np.array([450, 550, 650]) * NM)
    air = Air()
    source = sun(10 * DEG, 0.0, lines, air)
    expected = spectrum.irradiance(lines) * air.transmission(lines.edges[:, 0], 10 * DEG)
    np.testing.assert_allclose(source.irradiance, expected, rtol=1e-12)


def test_dimming_goes_before_averaging():
    """One bin over all of the visible on the horizon: the mean of the product, not the product of means."""
    wide = Bins(np.array([[380, 780]]) * NM)
    air = Air()
    fine = sun(0.0, 0.0, VISIBLE, air).irradiance.mean()
    assert sun(0.0, 0.0, wide, air).irradiance[0] == pytest.approx(fine, rel=1e-12)
    assert spectrum.irradiance(wide)[0] * air.transmission(580 * NM, 0.0) < 0.6 * fine


def test_direct_light_of_the_standard_spectrum():
    """ASTM G173-03, direct and circumsolar, air mass 1.5, made for haze of 0.084 at 500 nm and 344 DU (from memory).

    Its model has another haze law: 2.5 %. At 700 nm, inside a water band, 5 % would be missed.
    """
    nm = np.array([450, 500, 550, 600, 650, 750])
    expected = [1.2881, 1.3391, 1.3648, 1.3278, 1.2299, 1.1273]
    air = Air(ozone=343.8, aerosol_depth_550=0.084 * 1.1**-1.14, aerosol_exponent=1.14)
    elevation = np.arcsin(1 / 1.4987)
    source = sun(float(elevation), 0.0, Bins.lines(nm * NM), air)
    np.testing.assert_allclose(source.irradiance, expected, rtol=0.025)


def test_a_low_sun_is_red():
    lines = Bins.lines(np.array([450, 550, 650]) * NM)

    def ratios(elevation_deg):
        blue, green, red = sun(elevation_deg * DEG, 0.0, lines, Air()).irradiance
        return red / green, green / blue

    heights = [60, 30, 10, 5, 2, 0]
    assert ratios(60)[0] < 1.0
    assert ratios(2)[0] > 1.7
    assert ratios(2)[1] > 10
    for lower, higher in zip(heights[1:], heights[:-1], strict=True):
        assert ratios(lower)[0] > ratios(higher)[0]
        assert ratios(lower)[1] > ratios(higher)[1]


def test_a_setting_sun_keeps_the_horizons_light():
    horizon, setting = (sun(angle * DEG, 0.0, VISIBLE, Air()) for angle in (0.0, -0.8))
    np.testing.assert_array_equal(horizon.irradiance, setting.irradiance)
    assert setting.direction[2] < 0


@pytest.mark.parametrize(
    ("elevation", "azimuth", "air", "text"),
    [
        (-1.5 * DEG, 0.0, Air(), "elevation must lie between -1 and 90 °, got -1.5 °"),
        (91 * DEG, 0.0, None, "elevation must lie between -90 and 90 °, got 91 °"),
        (np.nan, 0.0, None, "got nan"),
        (0.5, np.inf, None, "azimuth"),
    ],
)
def test_places_where_no_sun_is(elevation, azimuth, air, text):
    with pytest.raises(DomainError, match=text):
        sun(elevation, azimuth, VISIBLE, air)


def test_bins_beyond_the_spectrum():
    with pytest.raises(DomainError, match="280 to 1100 nm"):
        sun(0.5, 0.0, Bins.lines(1.2e-6), Air())
