"""Subjects: azimuth and distance against Vincenty's formula, elevation against surveying practice."""

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skyoptics.errors import DomainError
from skyoptics.planning.answers import Place
from skyoptics.planning.subject import along, hidden, seen_from, toward


def vincenty(lat1, lon1, lat2, lon2):
    """Return distance [m] and azimuth [degrees]: T. Vincenty, Survey Review 23 (176), 88 (1975), inverse formula (from memory)."""
    a, f = 6378137.0, 1 / 298.257223563
    b = a * (1 - f)
    u1, u2 = (math.atan((1 - f) * math.tan(math.radians(lat))) for lat in (lat1, lat2))
    big = lam = math.radians(lon2 - lon1)
    for _ in range(200):
        sin_s = math.hypot(
            math.cos(u2) * math.sin(lam),
            math.cos(u1) * math.sin(u2) - math.sin(u1) * math.cos(u2) * math.cos(lam),
        )
        cos_s = math.sin(u1) * math.sin(u2) + math.cos(u1) * math.cos(u2) * math.cos(lam)
        sigma = math.atan2(sin_s, cos_s)
        sin_a = math.cos(u1) * math.cos(u2) * math.sin(lam) / sin_s
        cos2a = 1 - sin_a**2
        cos2m = cos_s - 2 * math.sin(u1) * math.sin(u2) / cos2a if cos2a else 0.0
        c = f / 16 * cos2a * (4 + f * (4 - 3 * cos2a))
        new = big + (1 - c) * f * sin_a * (sigma + c * sin_s * (cos2m + c * cos_s * (2 * cos2m**2 - 1)))
        if abs(new - lam) < 1e-13:
            break
        lam = new
    square = cos2a * (a**2 - b**2) / b**2
    big_a = 1 + square / 16384 * (4096 + square * (-768 + square * (320 - 175 * square)))
    big_b = square / 1024 * (256 + square * (-128 + square * (74 - 47 * square)))
    delta = big_b * sin_s * (cos2m + big_b / 4 * (cos_s * (2 * cos2m**2 - 1)))
    azimuth = math.atan2(
        math.cos(u2) * math.sin(lam), math.cos(u1) * math.sin(u2) - math.sin(u1) * math.cos(u2) * math.cos(lam)
    )
    return b * big_a * (sigma - delta), math.degrees(azimuth) % 360


def test_vincenty_itself():
    """Flinders Peak to Buninyong on GRS80, a widely published example: 54 972.271 m, 306°52′05.37″ (from memory)."""
    distance, azimuth = vincenty(-(37 + 57 / 60 + 3.72030 / 3600), 144 + 25 / 60 + 29.52440 / 3600,
                                 -(37 + 39 / 60 + 10.15610 / 3600), 143 + 55 / 60 + 35.38390 / 3600)  # fmt: skip
    assert distance == pytest.approx(54972.271, abs=0.002)
    assert azimuth == pytest.approx(306 + 52 / 60 + 5.37 / 3600, abs=1e-5)


@settings(deadline=None, max_examples=40)
@given(st.floats(-85, 85), st.floats(-180, 180), st.floats(-0.5, 0.5), st.floats(-0.5, 0.5))
def test_azimuth_and_distance(latitude, longitude, north, east):
    """Within 100 km the plumb-line section and the geodesic part by less than 0.001°, chord and arc by 1e-5."""
    there = latitude + north, (longitude + east + 180) % 360 - 180
    if abs(north) + abs(east) < 0.01:
        return
    distance, azimuth = vincenty(latitude, longitude, *there)
    if not 200 < distance < 100e3:
        return
    found = seen_from(Place(latitude, longitude), *there, 0.0)
    assert abs((found.azimuth_deg - azimuth + 180) % 360 - 180) < 0.001
    assert found.distance_m == pytest.approx(distance, rel=2e-5)


def test_elevation_by_surveying_practice():
    """Trigonometric levelling: Δh = d tan(E) + (1 − k) d² / 2R with Gauss's k = 0.13 (common surveying practice)."""
    place = Place(47.0, 8.0, 500.0)
    for distance_deg, height in ((0.05, 500.0), (0.2, 900.0), (0.4, 2500.0), (0.4, 0.0)):
        found = seen_from(place, 47.0, 8.0 + distance_deg, height)
        level = vincenty(47.0, 8.0, 47.0, 8.0 + distance_deg)[0]
        radius = 6388e3  # across the meridian at 47°, for R = a / √(1 − e² sin² φ)
        rise = level * math.tan(math.radians(found.elevation_deg)) + (1 - 0.13) * level**2 / (2 * radius)
        assert rise == pytest.approx(height - 500.0, rel=5e-4, abs=0.1)  # refraction: up to 9 m


def test_due_north_east_and_up():
    place = Place(0.0, 0.0, 0.0)
    assert seen_from(place, 0.1, 0.0, 0.0).azimuth_deg == pytest.approx(0.0, abs=1e-9)
    assert seen_from(place, 0.0, 0.1, 0.0).azimuth_deg == pytest.approx(90.0, abs=1e-9)
    assert seen_from(place, 0.0, 0.0, 100.0).elevation_deg == pytest.approx(90.0)
    assert seen_from(Place(0.0, 179.95), 0.0, -179.95, 0.0).distance_m == pytest.approx(11131.9, abs=0.1)
    assert seen_from(Place(89.99, 0.0), 89.99, 180.0, 0.0).azimuth_deg % 360 == pytest.approx(0.0, abs=1e-6)


def test_hidden_behind_the_sea():
    """The sea's horizon: 3.83 km √(height/m) each (k = 0.13), so a lamp of 25 m shows to an eye of 4 m over 26.8 km."""
    eye = Place(0.0, 0.0, 4.0)
    for km, expected in ((26.0, False), (28.0, True)):
        assert hidden(eye, seen_from(eye, 0.0, km / 111.3195, 25.0)) is expected
    assert not hidden(eye, toward(10.0, -3.0))


def test_along_inverts_seen_from():
    place = Place(47.2, 8.9, 430.0)
    for azimuth in range(0, 360, 37):
        latitude, longitude = along(place, azimuth, 0.0, 50e3)
        found = seen_from(place, latitude, longitude, 430.0)
        assert abs((found.azimuth_deg - azimuth + 180) % 360 - 180) < 2e-4
        assert vincenty(47.2, 8.9, latitude, longitude)[0] == pytest.approx(50e3, rel=1e-4)


def test_faults():
    with pytest.raises(DomainError, match="own coordinates"):
        seen_from(Place(47.0, 8.0), 47.0, 8.0, 0.0)
    with pytest.raises(DomainError, match="swapped"):
        seen_from(Place(47.2, 8.9), 8.9, 47.2, 0.0)
    with pytest.raises(DomainError, match="elevation"):
        toward(10.0, 91.0)
    assert toward(-10.0, 3.0).azimuth_deg == 350.0
