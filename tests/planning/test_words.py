"""Directions and angles in words."""

from datetime import UTC, datetime

from sample_plans import standing

from skyoptics.planning.words import degrees, direction, feet, point


def test_points_of_the_compass():
    """Sixteen points of 22.5°, each in the middle of its sector."""
    assert [point(azimuth) for azimuth in (0, 11.2, 11.3, 90, 180, 270, 348.7, 348.8, 360)] == [
        "N", "N", "NNE", "E", "S", "W", "NNW", "N", "N",
    ]  # fmt: skip
    assert direction(112.4) == "ESE (112°)"
    assert direction(359.7) == "N (0°)"


def test_angles():
    assert degrees(-0.04) == "0.0°"
    assert degrees(42.37) == "42.4°"
    at = standing(datetime(2027, 5, 1, tzinfo=UTC), 300.0, 0.0)
    assert feet(at) == "78° and 162°"
    assert feet(standing(at.time, 300.0, 42.369)) == "120° and 120°"
