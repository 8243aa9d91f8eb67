"""Camera settings and metering against published equations and common practice."""

import numpy as np
import pytest

from skyoptics.camera import exposure
from skyoptics.colour import display
from skyoptics.colour.observer import weights
from skyoptics.errors import DomainError
from skyoptics.light.air import Air
from skyoptics.light.sun import sun
from skyoptics.optics.bins import Bins
from skyoptics.units import DEG, NM


def test_exposure_values_of_known_settings():
    # Definition (ISO 2720:1974): EV 0 is f/1 for 1 s. Full stops: f/16 at 1/125 s is marked EV 15 (f/16 · 1/128 s exactly).
    assert exposure.exposure_value(1.0, 1.0) == 0.0
    assert exposure.exposure_value(16.0, 1.0 / 128.0) == pytest.approx(15.0, abs=1e-12)
    assert exposure.exposure_value(16.0, 1.0 / 125.0) == pytest.approx(15.0, abs=0.05)
    # One stop each.
    start = exposure.exposure_value(8.0, 0.01, 200.0)
    assert exposure.exposure_value(8.0 * np.sqrt(2.0), 0.01, 200.0) == pytest.approx(start + 1.0)
    assert exposure.exposure_value(8.0, 0.005, 200.0) == pytest.approx(start + 1.0)
    assert exposure.exposure_value(8.0, 0.01, 400.0) == pytest.approx(start - 1.0)


def test_meter_equation_closes():
    # ISO 2720: N²/t = L S / K with K = 12.5, so that a metered surface is exposed as middle grey, whatever the settings.
    aperture, seconds, iso = 5.6, 1 / 60, 400.0
    luminance = 12.5 * aperture**2 / (seconds * iso)
    value = exposure.exposure_value(aperture, seconds, iso)
    assert display.metered_exposure(np.full((3, 4), luminance)) == pytest.approx(value, abs=1e-12)
    assert luminance * display.exposure_scale(value) == pytest.approx(0.18)


def test_sensor_sees_what_the_standard_says():
    # ISO 12232 (from memory): H = 0.65 L t / N²; saturation at 78 lx s / S, that is log2(78 / (0.65 · 12.5)) = 3.26 stops
    # above a metered surface.
    assert exposure.focal_plane_exposure(4000.0, 8.0, 1 / 500) == pytest.approx(0.65 * 4000.0 / 500 / 64)
    full = exposure.saturation_luminance(8.0, 1 / 500, 100.0)
    assert exposure.focal_plane_exposure(full, 8.0, 1 / 500) == pytest.approx(0.78)
    metered = 0.125 * 2.0 ** exposure.exposure_value(8.0, 1 / 500)
    assert np.log2(full / metered) == pytest.approx(3.263, abs=1e-3)


def test_grey_card_in_the_sun_is_sunny_sixteen():
    # Common practice, no source ("sunny 16"): EV 15 at ISO 100 for a subject in full sun. Here the sun's beam alone, through
    # clear air, on a card of 18 % reflectance that faces up; skylight adds a tenth or so.
    bins = Bins.adjoining(np.arange(380.0, 781.0, 5.0) * NM)
    source = sun(60.0 * DEG, np.pi, bins, Air())
    illuminance = float(source.irradiance @ weights(bins)[:, 1] * np.sin(60.0 * DEG))
    assert 7e4 < illuminance < 1.1e5
    card = np.full((10, 10), 0.18 / np.pi * illuminance)
    assert display.metered_exposure(card) == pytest.approx(15.0, abs=0.7)


def test_meter_averages_what_it_sees():
    picture = np.array([[1000.0, 3000.0], [np.nan, -5.0]])
    assert display.metered_exposure(picture) == pytest.approx(np.log2(2000.0 / 0.125))
    assert display.metered_exposure(np.zeros((2, 2))) == display.EXPOSURE_WITHOUT_LIGHT


def test_what_was_asked_for():
    assert exposure.chosen(None, None, None, None) is None
    assert exposure.chosen(12.0, None, None, None) == 12.0
    assert exposure.chosen(None, 16.0, 1 / 128, 100.0) == pytest.approx(15.0)
    with pytest.raises(DomainError, match=r"come to 15\.00 EV"):
        exposure.chosen(12.0, 16.0, 1 / 128, 100.0)
    with pytest.raises(DomainError, match="nothing to decide"):
        exposure.chosen(None, 16.0, 1 / 128, 100.0, metered=True)
    with pytest.raises(DomainError, match="all three"):
        exposure.chosen(None, 16.0, None, 100.0)


@pytest.mark.parametrize("settings", [(0.0, 1.0, 100.0), (8.0, -1.0, 100.0), (8.0, 1.0, np.inf), (np.nan, 1.0, 100.0)])
def test_settings_no_camera_has(settings):
    with pytest.raises(DomainError, match="finite and above 0"):
        exposure.exposure_value(*settings)
