"""The track against positions asked for directly, which are tested against another library in tests/light."""

from datetime import UTC, datetime, timedelta
from itertools import pairwise
from zoneinfo import ZoneInfo

import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.geometry.axes import angle_between, direction
from skyoptics.light import position
from skyoptics.light.position import Body, days_of
from skyoptics.planning.track import SECOND, Track, days_between
from skyoptics.units import DEG

BEGIN = datetime(2027, 3, 1, tzinfo=UTC)


def track(body: Body, latitude_deg: float, days: float = 20.0) -> Track:
    place = position.observer(latitude_deg, 8.9, 400.0, 960.0, 15.0)
    return Track(body, place, days_of(BEGIN), days_of(BEGIN) + days)


@pytest.mark.parametrize("body", ["sun", "moon"])
@pytest.mark.parametrize("latitude_deg", [47.2, -35.0, 0.0, 89.9])
def test_agrees_with_positions_asked_for(body: Body, latitude_deg: float) -> None:
    way = track(body, latitude_deg)
    days = np.random.default_rng(7).uniform(way.begin, way.end, 100)
    days[:2] = way.begin, way.end
    azimuth, elevation = way.airless(days)
    seen = [position.airless(body, way.place, float(day)) for day in days]
    there = direction([one.azimuth for one in seen], [one.elevation for one in seen])
    assert np.max(angle_between(direction(azimuth, elevation), there)) < 0.0002 * DEG
    apparent = [position.apparent(one, way.place) for one in seen]
    assert way.apparent(days)[1] == pytest.approx(np.array(apparent), abs=0.0002 * DEG)


def test_culminates_twice_a_day_and_keeps_its_direction_between() -> None:
    way = track("sun", 47.2)
    turning = way.turning()
    assert len(turning) - 2 == 40
    for first, last in pairwise(turning):
        height = way.airless(np.linspace(first + SECOND * 5.0, last - SECOND * 5.0, 200))[1]
        assert np.all(np.diff(height) > 0.0) or np.all(np.diff(height) < 0.0)


def test_crossings_are_where_the_height_is() -> None:
    way = track("sun", 47.2)
    found = way.crossings(10.0 * DEG, way.turning())
    assert len(found) == 40
    # within a second's worth of height, the sun rising at most 15″ a second
    assert way.apparent(found)[1] == pytest.approx(np.full(40, 10.0 * DEG), abs=0.0005 * DEG)
    assert np.all(np.diff(found) > 0.0)


def test_a_culmination_just_over_a_height_is_not_missed() -> None:
    way = track("sun", 47.2, days=1.0)
    top = float(np.max(way.apparent(way.turning())[1]))
    assert len(way.crossings(top - 0.00005 * DEG, way.turning())) == 2
    assert len(way.crossings(top + 0.00005 * DEG, way.turning())) == 0


def test_instants_are_checked() -> None:
    zone = ZoneInfo("Europe/Zurich")
    with pytest.raises(DomainError, match="without a zone"):
        days_between(datetime(2027, 1, 1), datetime(2027, 2, 1, tzinfo=zone))
    with pytest.raises(DomainError, match="does not lie after"):
        days_between(BEGIN, BEGIN - timedelta(days=1))
    with pytest.raises(DomainError, match="too many"):
        Track("sun", position.observer(0.0, 0.0, 0.0, 1013.25, 10.0), 0.0, 9000.0)
