"""The nearest miss, against another ephemeris library (astronomy-engine)."""

from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo

import astronomy
import pytest

from skyoptics.planning.answers import Place
from skyoptics.planning.miss import nearest_height

TOKYO = ZoneInfo("Asia/Tokyo")


def noon_height(place, moment):
    """Return the sun's height by astronomy-engine, with its own refraction, which differs little above 20°."""
    utc = moment.astimezone(UTC)
    time = astronomy.Time.Make(utc.year, utc.month, utc.day, utc.hour, utc.minute, utc.second + utc.microsecond / 1e6)
    there = astronomy.Observer(place.latitude_deg, place.longitude_deg, place.height_m)
    seen = astronomy.Equator(astronomy.Body.Sun, time, there, True, True)
    return astronomy.Horizon(time, there, seen.ra, seen.dec, astronomy.Refraction.Normal).altitude


def test_highest_sun_of_a_year():
    place = Place(60.0, 139.0)
    found = nearest_height(
        place, datetime(2027, 1, 1, tzinfo=TOKYO), datetime(2028, 1, 1, tzinfo=TOKYO), "sun", 57.8, 90.0
    )
    assert (found.time.month, found.time.day) in ((6, 21), (6, 22))
    assert found.time.tzinfo is TOKYO
    height = noon_height(place, found.time)
    assert found.elevation_deg == pytest.approx(height, abs=0.01)
    assert found.missing_deg == pytest.approx(57.8 - height, abs=0.01)
    for shift in (timedelta(minutes=5), timedelta(minutes=-5), timedelta(days=1), timedelta(days=-1)):
        assert noon_height(place, found.time + shift) <= height + 0.002


def test_lowest_sun_where_it_stands_too_high():
    """Quito at the equinox: a range below any noon is met at its edge; a span around noon alone is above it."""
    begin = datetime(2027, 3, 20, 16, 0, tzinfo=UTC)
    found = nearest_height(Place(-0.2, -78.5), begin, begin + timedelta(hours=3), "sun", 0.0, 40.0)
    assert found.time in (begin, begin + timedelta(hours=3)) or found.missing_deg > 0.0
    assert found.elevation_deg - 40.0 == pytest.approx(found.missing_deg)


def test_range_that_is_reached():
    begin = datetime(2027, 5, 1, tzinfo=TOKYO)
    found = nearest_height(Place(35.0, 139.0), begin, begin + timedelta(days=2), "moon", 0.0, 42.0)
    assert found.missing_deg == 0.0
    assert 0.0 <= found.elevation_deg <= 42.0
