"""What a frame has to hold."""

import numpy as np
import pytest
from sky_circles import circle

from skyoptics.errors import DomainError, NothingFoundError
from skyoptics.geometry.axes import direction
from skyoptics.planning.held import feet, held
from skyoptics.units import DEG


@pytest.mark.parametrize("h", [0.0, 3.0, 12.0, 25.0, 38.0])
def test_feet_by_spherical_geometry(h):
    # cos Δaz = cos r / cos h from the antisolar azimuth (spherical cosine rule)
    expected = np.degrees(np.arccos(np.cos(42.37 * DEG) / np.cos(h * DEG)))
    found = held(*circle(42.37, 270.0, h), 270.0 * DEG, "feet")
    ends = feet(*circle(42.37, 270.0, h), found.middle)
    assert np.degrees(ends) == pytest.approx([90.0 - expected, 90.0 + expected], abs=1e-4)
    assert found.span / DEG == pytest.approx(2.0 * expected, abs=2e-4)
    assert found.middle / DEG == pytest.approx(90.0)


def test_whole_is_what_is_above_the_horizon():
    # half a circle of radius r with the sun on the horizon: length π sin r
    found = held(*circle(42.37, 10.0, 0.0), 10.0 * DEG)
    assert found.span == pytest.approx(np.pi * np.sin(42.37 * DEG), rel=1e-5)
    assert found.points[:, 2].min() >= -1e-12
    lowest = found.points[np.abs(found.points[:, 2]) < 1e-12] @ direction(100.0 * DEG, 0.0)
    assert sorted(set(np.round(lowest, 9))) == pytest.approx([-np.sin(42.37 * DEG), np.sin(42.37 * DEG)])
    # a halo that is all up is needed all around
    found = held(*circle(22.0, 10.0, 40.0, 1.0), 10.0 * DEG)
    assert found.span == pytest.approx(2.0 * np.pi * np.sin(22.0 * DEG), rel=1e-5)
    assert found.middle == pytest.approx(10.0 * DEG)


def test_feet_of_halos_lie_towards_the_sun():
    found = held(*circle(22.0, 200.0, 10.0, 1.0), 200.0 * DEG, "feet")
    assert found.middle / DEG == pytest.approx(200.0)
    assert (found.points @ direction(200.0 * DEG, 0.0)).min() > 0.9


def test_pair():
    azimuth = np.array([170.0, np.nan, 230.0]) * DEG
    elevation = np.array([20.0, np.nan, 20.0]) * DEG
    found = held(azimuth, elevation, 200.0 * DEG, "pair")
    apart = 2.0 * np.arcsin(np.cos(20.0 * DEG) * np.sin(30.0 * DEG))  # chord of the small circle
    assert found.span == pytest.approx(apart, rel=1e-9)
    whole = held(azimuth, elevation, 200.0 * DEG)
    assert whole.hold == "whole"
    assert whole.span == pytest.approx(apart)


def test_refused():
    bow = circle(42.37, 270.0, 10.0)
    with pytest.raises(DomainError, match="did you mean whole"):
        held(*bow, 0.0, "hole")
    with pytest.raises(DomainError, match="no pair"):
        held(*bow, 270.0 * DEG, "pair")
    with pytest.raises(DomainError, match="no two feet"):
        held(*circle(22.0, 10.0, 40.0, 1.0), 10.0 * DEG, "feet")
    with pytest.raises(NothingFoundError):
        held(*circle(42.37, 270.0, 43.0), 270.0 * DEG)
    assert feet(*circle(22.0, 10.0, 40.0, 1.0), 10.0 * DEG) == ()
