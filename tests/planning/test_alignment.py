"""Alignments against dense looking with another ephemeris (astronomy-engine) and outlines of points.

The sun's airless direction by astronomy-engine is taken every 5 minutes and interpolated by a cubic spline to 10 s: between nodes
it turns by 1.25°, x = 0.022 rad, which a spline follows to 5 x⁴ / 384, far below 1e-5°. Refraction is Sæmundsson's,
as in test_windows.
"""

import time
from datetime import UTC, datetime, timedelta
from typing import NamedTuple

import astronomy
import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.planning import alignment, features
from skyoptics.planning.answers import Meeting, Place, Subject
from skyoptics.units import DEG

PLACE = Place(47.2, 8.9, 400.0)
BEGIN = datetime(2027, 5, 1, tzinfo=UTC)
NODE, DENSE = 300.0, 10.0  # [s]


def vector(azimuth: np.ndarray, elevation: np.ndarray) -> np.ndarray:
    """East, north, up, from degrees."""
    a, e = np.radians(azimuth), np.radians(elevation)
    return np.stack([np.cos(e) * np.sin(a), np.cos(e) * np.cos(a), np.sin(e)], axis=-1)


def apart(one: np.ndarray, other: np.ndarray) -> np.ndarray:
    return np.degrees(2.0 * np.arcsin(np.clip(np.linalg.norm(one - other, axis=-1) / 2.0, 0.0, 1.0)))


def sun(days: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Seconds from `BEGIN`, azimuth and apparent height in degrees, while the sun is up."""
    from scipy.interpolate import CubicSpline

    there = astronomy.Observer(PLACE.latitude_deg, PLACE.longitude_deg, PLACE.height_m)
    nodes = np.arange(0.0, days * 86400.0 + 1.0, NODE)
    places = []
    start = astronomy.Time.Make(BEGIN.year, BEGIN.month, BEGIN.day, 0, 0, 0.0)
    for node in nodes:
        at = start.AddDays(node / 86400.0)
        seen = astronomy.Equator(astronomy.Body.Sun, at, there, True, True)
        level = astronomy.Horizon(at, there, seen.ra, seen.dec, astronomy.Refraction.Airless)
        places.append((level.azimuth, level.altitude))
    azimuth, elevation = np.array(places).T
    seconds = np.arange(0.0, days * 86400.0, DENSE)
    towards = CubicSpline(nodes, vector(azimuth, elevation))(seconds)
    airless = np.degrees(np.arctan2(towards[:, 2], np.hypot(towards[:, 0], towards[:, 1])))
    up = airless > -1.0
    seconds, towards, airless = seconds[up], towards[up], airless[up]
    lift = 1.02 / np.tan(np.radians(airless + 10.3 / (airless + 5.11))) + 0.0019279
    height = airless + lift / 60.0 * (1013.25 / 1010.0)
    azimuth = np.degrees(np.arctan2(towards[:, 0], towards[:, 1])) % 360.0
    return seconds[height >= 0.0], azimuth[height >= 0.0], height[height >= 0.0]


def ring(azimuth: float, height: float, radius: float) -> np.ndarray:
    """Points 0.05° apart of what is up of the bow."""
    centre = vector(np.array(azimuth + 180.0), np.array(-height))
    right = vector(np.array(azimuth + 270.0), np.array(0.0))
    over = np.cross(right, centre)
    turn = np.arange(-110.0, 110.0, 0.07) * DEG
    points = np.cos(radius * DEG) * centre + np.sin(radius * DEG) * (
        np.cos(turn)[:, None] * over + np.sin(turn)[:, None] * right
    )
    return points[points[:, 2] >= 0.0]


def brute_distance(part: str, azimuth: np.ndarray, height: np.ndarray, target: np.ndarray, near: float) -> np.ndarray:
    """Distances in degrees; beyond `near` any number beyond it."""
    radius = 42.37
    found = np.full(len(azimuth), np.inf)
    stands = height <= radius
    if part == "crown":
        found[stands] = apart(vector(azimuth[stands] + 180.0, radius - height[stands]), target)
    elif part == "foot":
        aside = np.degrees(np.arccos(np.cos(radius * DEG) / np.cos(height[stands] * DEG)))
        feet = [vector(azimuth[stands] + 180.0 + sign * aside, np.zeros(stands.sum())) for sign in (-1.0, 1.0)]
        found[stands] = np.minimum(*(apart(foot, target) for foot in feet))
    else:
        bound = np.abs(apart(vector(azimuth + 180.0, -height), target) - radius)
        for i in np.flatnonzero(stands & (bound <= near)):
            points = ring(azimuth[i], height[i], radius)
            found[i] = apart(points, target).min() if len(points) else np.inf
    return found


class Stretch(NamedTuple):
    start: float
    end: float
    least: float
    grain: float
    """What the distance changes between the least look and its neighbours: feet run fast where the crown is low."""


def stretches(seconds: np.ndarray, distance: np.ndarray, tolerance: float) -> list[Stretch]:
    close = np.flatnonzero(distance <= tolerance)
    if not close.size:
        return []
    groups = np.split(close, np.flatnonzero((np.diff(close) > 1) | (np.diff(seconds[close]) > 1.5 * DENSE)) + 1)
    found = []
    for group in groups:
        least = group[np.argmin(distance[group])]
        beside = distance[max(least - 1, 0) : least + 2]
        grain = np.max(np.abs(beside[np.isfinite(beside)] - distance[least]))
        found.append(Stretch(seconds[group[0]], seconds[group[-1]], distance[least], grain))
    return found


def compare(subject: Subject, part: alignment.Part, days: int, track: tuple[np.ndarray, ...], tolerance: float) -> int:
    seconds, azimuth, height = track
    target = vector(np.array(subject.azimuth_deg), np.array(subject.elevation_deg))
    distance = brute_distance(part, azimuth, height, target, tolerance + 0.1)
    # a touch by less than the grain of the points may be on either list
    theirs = [one for one in stretches(seconds, distance, tolerance) if one.least < tolerance - 0.02]
    feature = features.find("primary")
    meetings, _ = alignment.find(PLACE, "UTC", BEGIN, BEGIN + timedelta(days=days), feature, subject, part, tolerance)
    ours = [one for one in meetings if one.distance_deg < tolerance - 0.02]
    assert len(ours) == len(theirs)
    for mine, other in zip(ours, theirs, strict=True):
        check(mine, tolerance)
        assert other.least - other.grain - 0.03 <= mine.distance_deg <= other.least + 0.03
        rate_known = 20.0  # [s]: points 0.05° apart, 10 s between looks, an end where the distance changes slowly
        if mine.distance_deg < 0.5 * tolerance:
            assert abs((mine.start.time - BEGIN).total_seconds() - other.start) <= rate_known
            assert abs((mine.end.time - BEGIN).total_seconds() - other.end) <= rate_known
    assert [one.best.time for one in meetings] == sorted(one.best.time for one in meetings)
    return len(theirs)


def check(meeting: Meeting, tolerance: float) -> None:
    assert meeting.start.time <= meeting.best.time <= meeting.end.time
    assert meeting.distance_deg <= tolerance
    assert meeting.best.crown_elevation_deg >= 0.0
    assert meeting.best.sun_elevation_deg >= 0.0


@pytest.fixture(scope="module")
def some_days() -> tuple[np.ndarray, ...]:
    return sun(6)


@pytest.mark.parametrize(
    ("part", "azimuth", "elevation", "tolerance"),
    [
        ("bow", 95.0, 4.0, 0.5),
        ("bow", 100.0, 38.0, 0.3),  # beside the crown: two passages, or a touch
        ("bow", 300.0, -0.3, 0.5),  # a boat below the horizon, met by the foot only
        ("foot", 130.0, 0.0, 0.2),
        ("crown", 105.0, 32.5, 1.5),
    ],
)
def test_some_days_against_dense_looking(
    some_days: tuple[np.ndarray, ...], part: alignment.Part, azimuth: float, elevation: float, tolerance: float
) -> None:
    assert compare(Subject(azimuth, elevation), part, 6, some_days, tolerance) >= 3


@pytest.mark.slow
def test_a_year_against_dense_looking() -> None:
    year = sun(365)
    for part, azimuth, elevation in (
        ("bow", 95.0, 4.0),
        ("foot", 20.0, 0.0),
        ("crown", 60.0, 35.0),
        ("bow", 140.0, 15.0),
    ):
        assert compare(Subject(azimuth, elevation), part, 365, year, 0.5) > 0  # type: ignore[arg-type]


@pytest.mark.parametrize(
    "name", ["primary", "secondary", "halo_22", "parhelia", "circumzenithal", "parhelic_circle", "parhelia_120"]
)
@pytest.mark.parametrize("seed", [0, 1])
def test_a_subject_put_on_the_feature_is_met_just_then(name: str, seed: int) -> None:
    from skyoptics.light import position

    random, feature = np.random.default_rng(seed), features.find(name)
    while True:
        when = BEGIN + timedelta(seconds=int(random.integers(0, 3 * 86400)))
        seen = position.sun(PLACE.latitude_deg, PLACE.longitude_deg, when, PLACE.height_m)
        if seen.elevation_deg > 0.5 and feature.up(seen.elevation_deg * DEG):
            break
    azimuth, elevation = feature.outline(seen.azimuth_deg * DEG, seen.elevation_deg * DEG)
    place = random.choice(np.flatnonzero(np.nan_to_num(elevation, nan=-1.0) >= 0.0))
    subject = Subject(azimuth[place] / DEG, elevation[place] / DEG)
    meetings, miss = alignment.find(PLACE, "UTC", BEGIN, BEGIN + timedelta(days=3), feature, subject, "bow", 0.05)
    assert miss is None
    assert any(one.start.time <= when <= one.end.time for one in meetings)


def test_distance_at_best_is_the_distance_of_the_outline() -> None:
    feature, subject = features.find("halo_22"), Subject(285.0, 25.0)
    end = BEGIN + timedelta(days=5)
    meetings, _ = alignment.find(PLACE, "UTC", BEGIN, end, feature, subject, "bow", 0.5)
    assert len(meetings) >= 5
    target = vector(np.array(285.0), np.array(25.0))
    for one in meetings:
        for standing, expected in ((one.best, one.distance_deg), (one.start, 0.5), (one.end, 0.5)):
            where = feature.outline(standing.sun_azimuth_deg * DEG, standing.sun_elevation_deg * DEG)
            points = vector(*(angle / DEG for angle in where))
            assert apart(points[points[:, 2] >= 0.0], target).min() == pytest.approx(
                expected, abs=0.05
            )  # points 0.09° apart


def test_an_arc_without_closed_form_is_met() -> None:
    """Against the outline at the meetings' own instants: `skyoptics.planning.approach` promises 0.1°."""
    from skyoptics.light import position

    feature, begin = features.find("upper_sunvex_parry"), datetime(2027, 1, 10, 8, tzinfo=UTC)
    end = begin + timedelta(hours=2)
    seen = position.sun(PLACE.latitude_deg, PLACE.longitude_deg, begin + timedelta(hours=1), PLACE.height_m)
    first, second = feature.outline(seen.azimuth_deg * DEG, seen.elevation_deg * DEG)
    subject = Subject(first[len(first) // 3] / DEG, second[len(first) // 3] / DEG)
    meetings, _ = alignment.find(PLACE, "UTC", begin, end, feature, subject, "bow", 0.5)
    assert meetings
    target = vector(np.array(subject.azimuth_deg), np.array(subject.elevation_deg))
    assert any(one.start.time <= begin + timedelta(hours=1) <= one.end.time for one in meetings)
    for one in meetings:
        where = feature.outline(one.best.sun_azimuth_deg * DEG, one.best.sun_elevation_deg * DEG)
        points = vector(*(angle / DEG for angle in where))
        assert np.nanmin(apart(points, target)) == pytest.approx(one.distance_deg, abs=0.1)


def test_nearest_miss_where_nothing_meets() -> None:
    feature, subject = features.find("primary"), Subject(180.0, 60.0)
    meetings, miss = alignment.find(PLACE, "UTC", BEGIN, BEGIN + timedelta(days=5), feature, subject)
    assert meetings == ()
    assert miss is not None
    # nothing nearer on any of these days
    _, azimuth, height = sun(5)
    target = vector(np.array(180.0), np.array(60.0))
    distance = brute_distance("bow", azimuth[::3], height[::3], target, miss.distance_deg + 0.5)
    assert distance.min() == pytest.approx(miss.distance_deg, abs=0.05)
    assert miss.start == miss.best == miss.end


def test_nothing_where_the_feature_never_stands() -> None:
    dark = datetime(2027, 12, 10, tzinfo=UTC)
    feature, arctic = features.find("primary"), Place(75.0, 20.0)
    assert alignment.find(arctic, "UTC", dark, dark + timedelta(days=5), feature, Subject(0.0, 10.0)) == ((), None)


class Wall:
    """10° high in the east half, none in the west."""

    def elevation(self, azimuth: np.ndarray) -> np.ndarray:
        return np.where(np.degrees(azimuth) % 360.0 < 180.0, 10.0, 0.0) * DEG


def test_behind_a_profile_nothing_meets() -> None:
    feature, end = features.find("primary"), BEGIN + timedelta(days=1)
    low, high = Subject(95.0, 4.0), Subject(95.0, 14.0)
    assert alignment.find(PLACE, "UTC", BEGIN, end, feature, low)[0]
    hidden, miss = alignment.find(PLACE, "UTC", BEGIN, end, feature, low, horizon=Wall())
    assert hidden == ()
    assert miss is not None
    assert miss.distance_deg == pytest.approx(6.0, abs=0.3)  # the lowest that shows stands at 10°, 6° over the subject
    over, _ = alignment.find(PLACE, "UTC", BEGIN, end, feature, high, horizon=Wall())
    free, _ = alignment.find(PLACE, "UTC", BEGIN, end, feature, high)
    assert [one.best.time for one in over] == [one.best.time for one in free]


def test_a_year_takes_seconds() -> None:
    begin, subject = datetime(2027, 1, 1, tzinfo=UTC), Subject(95.0, 4.0)
    started = time.process_time()
    meetings, _ = alignment.find(
        PLACE, "Europe/Zurich", begin, begin.replace(year=2028), features.find("primary"), subject
    )
    assert time.process_time() - started < 5.0
    assert len(meetings) > 300


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"part": "fot"}, "did you mean foot"),
        ({"tolerance_deg": 0.0}, "between 0.001 and 30"),
        ({"feature": features.find("parhelia"), "part": "foot"}, "parhelia has no feet"),
        ({"subject": Subject(10.0, 95.0)}, "elevation must be -90 to 90"),
    ],
)
def test_what_cannot_be_is_refused_in_words(change: dict, message: str) -> None:
    asked = {
        "place": PLACE,
        "zone": "UTC",
        "begin": BEGIN,
        "end": BEGIN + timedelta(days=1),
        "feature": features.find("primary"),
        "subject": Subject(95.0, 4.0),
    } | change
    with pytest.raises(DomainError, match=message):
        alignment.find(**asked)
