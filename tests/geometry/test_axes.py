"""Axes: numbers one can check by hand."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from skyoptics.geometry.axes import angle_between, around, azimuth_elevation, direction
from skyoptics.units import DEG

angles = st.floats(-360.0, 360.0)


@pytest.mark.parametrize(
    ("azimuth", "elevation", "expected"),
    [(0, 0, (0, 1, 0)), (90, 0, (1, 0, 0)), (180, 0, (0, -1, 0)), (270, 0, (-1, 0, 0)), (45, 90, (0, 0, 1))],
)
def test_compass(azimuth, elevation, expected):
    assert direction(azimuth * DEG, elevation * DEG) == pytest.approx(expected, abs=1e-15)


@given(azimuth=st.floats(0.0, 359.999), elevation=st.floats(-89.9, 89.9))
def test_there_and_back(azimuth, elevation):
    back = azimuth_elevation(direction(azimuth * DEG, elevation * DEG))
    assert direction(*back) == pytest.approx(direction(azimuth * DEG, elevation * DEG), abs=1e-12)


def test_small_and_flat_angles_keep_their_digits():
    a = direction(0.0, 0.0)
    assert angle_between(a, direction(0.0, 1e-9)) == pytest.approx(1e-9, rel=1e-6)
    assert angle_between(a, -direction(0.0, 1e-9)) == pytest.approx(np.pi - 1e-9, abs=1e-15)


@given(azimuth=angles, elevation=st.floats(-89.0, 89.0), angle=st.floats(0.1, 179.0), position=angles)
def test_around_keeps_its_angle(azimuth, elevation, angle, position):
    centre = direction(azimuth * DEG, elevation * DEG)
    assert angle_between(centre, around(centre, angle * DEG, position * DEG)) == pytest.approx(angle * DEG, abs=1e-12)


def test_position_angle_runs_clockwise_from_the_zenith():
    centre = direction(0.0, 0.0)
    assert around(centre, 10 * DEG, 0.0) == pytest.approx(direction(0.0, 10 * DEG), abs=1e-15)
    assert around(centre, 10 * DEG, 90 * DEG) == pytest.approx(direction(10 * DEG, 0.0), abs=1e-15)
