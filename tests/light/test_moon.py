"""The moon and the mirror image in water."""

import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.light.mirror import in_water
from skyoptics.light.moon import magnitude, moon
from skyoptics.light.sun import sun
from skyoptics.optics.bins import Bins
from skyoptics.optics.interface import brewster_angle
from skyoptics.units import DEG

BINS = Bins.adjoining(np.linspace(400e-9, 700e-9, 31))


@pytest.mark.parametrize(("phase_deg", "expected"), [(30, -11.94676), (60, -11.118), (90, -10.128), (120, -8.781)])
def test_magnitudes(phase_deg, expected):
    """Krisciunas & Schaefer, PASP 103, 1033 (1991): V = −12.73 + 0.026 |α| + 4e-9 α⁴."""
    assert magnitude(phase_deg * DEG) == pytest.approx(expected, abs=5e-4)


def test_full_moon_is_some_400_000_times_fainter_than_the_sun():
    """10^(0.4 · (26.74 − 12.73)) = 4.0e5 at 550 nm; moonlight is redder (B − V 0.92 against 0.65, from memory)."""
    ratio = sun(60 * DEG, 0.0, BINS, None).irradiance / moon(60 * DEG, 0.0, 0.0, BINS, None).irradiance
    middle = np.argmin(np.abs(BINS.centre - 550e-9))
    assert ratio[middle] == pytest.approx(4.0e5, rel=0.02)
    blue, green = (np.argmin(np.abs(BINS.centre - x)) for x in (440e-9, 550e-9))
    assert 2.5 * np.log10(ratio[blue] / ratio[green]) == pytest.approx(0.27, abs=0.03)


def test_phase_beyond_150_degrees_is_refused():
    with pytest.raises(DomainError, match=r"0 .full. and 150"):
        moon(0.5, 0.0, 160 * DEG, BINS, None)


def test_mirror_image_at_brewsters_angle_is_level_light():
    index = np.full(len(BINS), 4 / 3)
    height = 90 * DEG - float(brewster_angle(4 / 3))
    source = sun(height, 1.0, BINS, None)
    image = in_water(source, index)
    assert image.direction == pytest.approx(source.direction * [1, 1, -1])
    assert image.stokes[:, 1] == pytest.approx(-1.0, abs=1e-12)
    assert image.irradiance / source.irradiance == pytest.approx(
        0.5 * ((4 / 3) ** 2 - 1) ** 2 / ((4 / 3) ** 2 + 1) ** 2
    )


def test_mirror_image_of_the_zenith_is_unpolarised():
    """Normal incidence: R = ((n − 1)/(n + 1))² = 1/49 for n = 4/3."""
    image = in_water(sun(90 * DEG, 0.0, BINS, None), np.full(len(BINS), 4 / 3))
    assert image.stokes[:, 1] == pytest.approx(0.0, abs=1e-9)
    assert image.irradiance / sun(90 * DEG, 0.0, BINS, None).irradiance == pytest.approx(1 / 49)
