"""Windows against brute force with another ephemeris (astronomy-engine) and formulas written again here.

Refraction is Sæmundsson's (Sky & Telescope 72, 70 (1986)) with the factor for pressure and temperature and the constant at the
zenith as in J. Meeus, Astronomical Algorithms, chapter 16 (from memory). The brute force looks every 10 seconds round every
passage, and every 5 minutes elsewhere: what a body's height can do between two such looks and be gone, a turn of
less than 0.004°, is inside the margin of 0.02° within which windows may differ.
"""

from collections.abc import Callable
from datetime import UTC, datetime, timedelta
from functools import lru_cache
from typing import NamedTuple
from zoneinfo import ZoneInfo

import astronomy
import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.planning import features, windows
from skyoptics.planning.answers import Place, Standing, Window
from skyoptics.units import DEG

COARSE, FINE = 300.0, 10.0  # [s]
SLACK_DEG = 0.02


class Somewhere(NamedTuple):
    place: Place
    zone: str


PLACES = {
    "mid-latitude": Somewhere(Place(47.2, 8.9, 400.0), "Europe/Zurich"),
    "tropics": Somewhere(Place(-4.3, 179.8, 10.0), "Pacific/Fiji"),  # beside the date line
    "arctic": Somewhere(Place(71.3, 25.1, 50.0), "Europe/Oslo"),
    "southern": Somewhere(Place(-43.6, -72.4, 200.0), "America/Santiago"),
}
LIMITS: dict[str, tuple[float, float]] = {  # heights of the sun, closed forms
    "primary": (0.0, 42.37),
    "secondary": (0.0, 53.48),
    "circumzenithal": (0.0, float(np.degrees(np.arccos(np.sqrt(1.31**2 - 1.0))))),
    "circumhorizontal": (float(np.degrees(np.arcsin(np.sqrt(1.31**2 - 1.0)))), 90.0),
    "parhelia": (0.0, float(np.degrees(np.arcsin(np.sqrt((4.0 - 1.31**2) / 3.0))))),
}


class Seen:
    """The sun's apparent height by astronomy-engine and Sæmundsson, at 1013.25 hPa and 10 °C."""

    def __init__(self, place: Place, begin: datetime) -> None:
        self.there = astronomy.Observer(place.latitude_deg, place.longitude_deg, place.height_m)
        self.begin = begin

    def height(self, second: float) -> float:
        when = self.begin.astimezone(UTC) + timedelta(seconds=second)
        at = astronomy.Time.Make(
            when.year, when.month, when.day, when.hour, when.minute, when.second + when.microsecond * 1e-6
        )
        from_equator = astronomy.Equator(astronomy.Body.Sun, at, self.there, True, True)
        airless = astronomy.Horizon(
            at, self.there, from_equator.ra, from_equator.dec, astronomy.Refraction.Airless
        ).altitude
        if airless < -1.0:
            return airless  # surely below; the formula is for what is seen
        lift = 1.02 / np.tan(np.radians(airless + 10.3 / (airless + 5.11))) + 0.0019279
        return float(airless + lift / 60.0 * (1013.25 / 1010.0))


def excess(height: float, limits: tuple[float, float]) -> float:
    return min(height - limits[0], limits[1] - height)


class Stretch(NamedTuple):
    start: float
    end: float


@lru_cache(maxsize=1)
def coarse(place: Place, begin: datetime, seconds: float) -> tuple[np.ndarray, list[float]]:
    """Looks that all features of a place share."""
    seen, times = Seen(place, begin), np.arange(0.0, seconds + 1.0, COARSE)
    return times, [seen.height(t) for t in times]


def brute_force(place: Place, begin: datetime, seconds: float, limits: tuple[float, float]) -> list[Stretch]:
    """Return stretches, ends interpolated between looks 10 s apart."""
    seen = Seen(place, begin)
    times, heights = coarse(place, begin, seconds)
    inside = [excess(height, limits) for height in heights]
    marks: list[float] = [0.0] if inside[0] >= 0.0 else []
    for i in range(len(times) - 1):
        if (inside[i] >= 0.0) == (inside[i + 1] >= 0.0):
            continue
        fine = np.arange(times[i], times[i + 1] + 0.5 * FINE, FINE)
        values = [excess(seen.height(t), limits) for t in fine]
        for j in range(len(fine) - 1):
            if (values[j] >= 0.0) != (values[j + 1] >= 0.0):
                marks.append(fine[j] + FINE * values[j] / (values[j] - values[j + 1]))
    if inside[-1] >= 0.0:
        marks.append(times[-1])
    return [Stretch(*pair) for pair in zip(marks[::2], marks[1::2], strict=True)]


def settled(stretches: list[Stretch], seen: Seen, limits: tuple[float, float]) -> list[Stretch]:
    """Leave out windows, and close gaps, whose peak passes a limit by less than 0.02°."""

    def peak(start: float, end: float, sign: float) -> float:
        if end - start > 7200.0:
            return np.inf
        return max(sign * excess(seen.height(t), limits) for t in np.linspace(start, end, 25))

    joined: list[Stretch] = []
    for stretch in stretches:
        if joined and peak(joined[-1].end, stretch.start, -1.0) < SLACK_DEG:
            joined[-1] = Stretch(joined[-1].start, stretch.end)
        else:
            joined.append(stretch)
    return [stretch for stretch in joined if peak(*stretch, 1.0) >= SLACK_DEG]


def compare(name: str, somewhere: Somewhere, begin: datetime, days: int) -> int:
    end = begin + timedelta(days=days)
    limits, seen = LIMITS[name], Seen(somewhere.place, begin)
    found = windows.find(somewhere.place, somewhere.zone, begin, end, features.find(name))
    ours = [
        Stretch((window.start.time - begin).total_seconds(), (window.end.time - begin).total_seconds())
        for window in found
    ]
    ours = settled(ours, seen, limits)
    theirs = settled(brute_force(somewhere.place, begin, days * 86400.0, limits), seen, limits)
    assert len(ours) == len(theirs)
    for mine, other in zip(ours, theirs, strict=True):
        for one, two in zip(mine, other, strict=True):
            rate = abs(seen.height(two + 5.0) - seen.height(two - 5.0)) / 10.0
            assert abs(one - two) <= max(10.0, SLACK_DEG / max(rate, 1e-9))
    for window in found:
        check_order(window)
    return len(theirs)


def check_order(window: Window) -> None:
    assert window.start.time <= window.best.time <= window.end.time
    assert (
        window.best.crown_elevation_deg >= max(window.start.crown_elevation_deg, window.end.crown_elevation_deg) - 1e-9
    )


# the arctic weeks begin in polar night, or run into polar day
@pytest.mark.parametrize(
    ("where", "name", "begin", "days"),
    [
        ("mid-latitude", "primary", datetime(2027, 3, 24, tzinfo=UTC), 8),
        ("tropics", "primary", datetime(2027, 6, 1, tzinfo=UTC), 6),
        ("arctic", "primary", datetime(2027, 5, 8, tzinfo=UTC), 8),
        ("arctic", "circumzenithal", datetime(2027, 1, 14, tzinfo=UTC), 10),
        ("southern", "primary", datetime(2027, 12, 20, tzinfo=UTC), 6),
        ("southern", "circumhorizontal", datetime(2027, 1, 5, tzinfo=UTC), 6),
        ("mid-latitude", "parhelia", datetime(2027, 6, 3, tzinfo=UTC), 5),
    ],
)
def test_some_weeks_against_brute_force(where: str, name: str, begin: datetime, days: int) -> None:
    assert compare(name, PLACES[where], begin, days) >= 3 or where == "arctic"


@pytest.mark.slow
@pytest.mark.parametrize("name", LIMITS)
@pytest.mark.parametrize("where", PLACES)
def test_a_year_against_brute_force(where: str, name: str) -> None:
    found = compare(name, PLACES[where], datetime(2027, 1, 1, tzinfo=UTC), 365)
    assert found > 100 or name == "circumhorizontal"


def year_of(where: str, name: str = "primary") -> tuple[Window, ...]:
    place, zone = PLACES[where]
    begin = datetime(2027, 1, 1, tzinfo=ZoneInfo(zone))
    return windows.find(place, zone, begin, begin.replace(year=2028), features.find(name))


def test_polar_day_is_one_window_and_polar_night_none() -> None:
    found = year_of("arctic", "halo_22")
    longest = max(found, key=lambda window: window.end.time - window.start.time)
    assert 60.0 < (longest.end.time - longest.start.time) / timedelta(days=1) < 90.0  # about 76 days at 71° (almanacs)
    assert "does not set" in longest.note
    assert longest.start.time.month == 5
    assert longest.end.time.month in (7, 8)
    dark = [window for window in found if window.start.time.month == 12 or window.end.time.month == 12]
    assert dark == []


def test_clocks_put_forward_move_the_hour_and_not_the_instant() -> None:
    place, zone = PLACES["mid-latitude"]
    local = ZoneInfo(zone)
    begin, end = datetime(2027, 3, 27, tzinfo=local), datetime(2027, 3, 30, tzinfo=local)
    found = windows.find(place, zone, begin, end, features.find("halo_22"))
    in_utc = windows.find(place, "UTC", begin, end, features.find("halo_22"))
    assert [window.start.time for window in found] == [window.start.time for window in in_utc]
    assert [window.start.time.utcoffset() for window in found] == [timedelta(hours=h) for h in (1, 2, 2)]
    assert [window.start.time.day for window in found] == [27, 28, 29]
    starts = [window.start.time.astimezone(UTC) for window in found]
    assert starts[1] - starts[0] == pytest.approx(timedelta(days=1, minutes=-2), abs=timedelta(minutes=1))
    # the day on which clocks are changed has 23 hours, and all of them are looked through
    only = windows.find(
        place,
        zone,
        datetime(2027, 3, 28, tzinfo=local),
        datetime(2027, 3, 29, tzinfo=local),
        features.find("halo_22"),
    )
    assert [window.start.time for window in only] == [found[1].start.time]


def test_beside_the_date_line_days_are_local() -> None:
    place, zone = PLACES["tropics"]
    local = ZoneInfo(zone)
    begin = datetime(2027, 6, 1, tzinfo=local)
    found = windows.find(place, zone, begin, begin + timedelta(days=3), features.find("halo_22"))
    assert [window.start.time.day for window in found] == [1, 2, 3]
    assert all(5 <= window.start.time.hour <= 7 for window in found)
    assert all(window.note == "" for window in found)


def test_windows_cut_by_the_dates_say_so() -> None:
    place, zone = PLACES["mid-latitude"]
    local = ZoneInfo(zone)
    begin, end = datetime(2027, 6, 1, 8, 0, 0, 250000, tzinfo=local), datetime(2027, 6, 1, 20, tzinfo=local)
    first, last = windows.find(place, zone, begin, end, features.find("primary"))
    assert first.start.time == begin
    assert "already stands" in first.note
    assert last.end.time == end
    assert "still stands" in last.note


def test_standings_hold_at_their_own_instant() -> None:
    (morning, evening) = year_of("mid-latitude")[260:262]
    for window in (morning, evening):
        for standing in (window.start, window.best, window.end):
            assert standing.crown_elevation_deg == pytest.approx(42.37 - standing.sun_elevation_deg)
            assert standing.time.microsecond == 0
            assert standing.sun_elevation_deg >= 0.0
            assert standing.crown_elevation_deg >= 0.0
            cosine = np.cos(42.37 * DEG) / np.cos(standing.sun_elevation_deg * DEG)
            aside = np.degrees(np.arccos(cosine))
            antisolar = standing.sun_azimuth_deg + 180.0
            expected = [(antisolar - aside) % 360.0, (antisolar + aside) % 360.0]
            assert standing.foot_azimuths_deg == pytest.approx(expected, abs=1e-6)


@pytest.mark.parametrize("name", ["halo_22", "parhelia", "circumzenithal", "upper_tangent"])
def test_best_is_where_the_crown_is_highest(name: str) -> None:
    place, zone = PLACES["mid-latitude"]
    begin, feature = datetime(2027, 1, 20, tzinfo=UTC), features.find(name)
    for window in windows.find(place, zone, begin, begin + timedelta(days=2), feature):
        noon = window.best.time.astimezone(UTC)
        # all of them rise with a winter sun: best at its culmination, due south
        assert window.best.sun_azimuth_deg == pytest.approx(180.0, abs=0.3), noon


def test_weak_windows_are_those_whose_best_is_within_a_degree_of_the_limit() -> None:
    found = year_of("mid-latitude", "circumhorizontal")
    assert {window.weak for window in found} == {True, False}
    for window in found:
        assert window.weak == (window.best.sun_elevation_deg < LIMITS["circumhorizontal"][0] + 1.0)


def test_filters() -> None:
    place, zone = PLACES["mid-latitude"]
    begin, feature = datetime(2027, 5, 1, tzinfo=UTC), features.find("primary")

    def find(**more: object) -> tuple[Window, ...]:
        return windows.find(place, zone, begin, begin + timedelta(days=3), feature, **more)

    everything = find()
    for window in find(sun_height_deg=(5.0, 20.0)):
        heights = sorted((window.start.sun_elevation_deg, window.end.sun_elevation_deg))
        assert heights == pytest.approx([5.0, 20.0], abs=0.003)
    for window in find(least_share=0.3):
        assert min(window.start.share_up, window.end.share_up) == pytest.approx(0.3, abs=1e-4)
    assert find(least_share=0.6) == ()
    late = find(holds=lambda standing: standing.sun_azimuth_deg > 280.0)
    assert len(late) == 3
    assert all(window.start.sun_azimuth_deg == pytest.approx(280.0, abs=0.005) for window in late)
    assert [window.end for window in late] == [
        window.end for window in everything if window.end.sun_azimuth_deg > 280.0
    ]


def test_moonbow_needs_the_moon_up_and_the_sun_down() -> None:
    place, zone = PLACES["mid-latitude"]
    begin, feature = datetime(2027, 5, 1, tzinfo=UTC), features.find("moonbow")
    found = windows.find(place, zone, begin, begin + timedelta(days=29), feature)
    bright = windows.find(place, zone, begin, begin + timedelta(days=29), feature, least_moon=0.9)
    any_light = windows.find(place, zone, begin, begin + timedelta(days=29), feature, sun_below_deg=None)
    assert 0 < len(bright) < len(found) < len(any_light)
    assert all(window.moon_illuminated is not None and window.moon_illuminated >= 0.9 for window in bright)
    seen = Seen(place, begin)
    for window in found:
        assert window.body == "moon"
        middle = window.start.time + (window.end.time - window.start.time) / 2
        for when in (window.start.time, middle, window.end.time):
            assert seen.height((when - begin).total_seconds()) < 0.01
    # full moon 2027-05-20 10:59 UT (astronomy-engine)
    full = astronomy.SearchMoonPhase(180.0, astronomy.Time.Make(2027, 5, 1, 0, 0, 0.0), 30.0).Utc().replace(tzinfo=UTC)
    nearest = min(bright, key=lambda window: abs(window.best.time - full))
    assert abs(nearest.best.time - full) < timedelta(days=1)
    assert nearest.moon_illuminated > 0.98


class Ridge:
    """A horizon at some elevation inside a range of azimuths, 0° elsewhere."""

    def __init__(self, elevation_deg: Callable[[np.ndarray], np.ndarray]) -> None:
        self.of = elevation_deg

    def elevation(self, azimuth: np.ndarray) -> np.ndarray:
        assert np.all(np.isfinite(azimuth))
        return self.of(np.degrees(azimuth) % 360.0) * DEG


def test_dip_of_a_hill_lengthens_windows_at_both_ends() -> None:
    place, zone = PLACES["mid-latitude"]
    begin, feature = datetime(2027, 5, 1, tzinfo=UTC), features.find("primary")
    hill = Ridge(lambda azimuth: np.full(azimuth.shape, -1.0))
    flat = windows.find(place, zone, begin, begin + timedelta(days=1), feature)
    found = windows.find(place, zone, begin, begin + timedelta(days=1), feature, horizon=hill)
    assert len(found) == len(flat) == 2
    assert found[0].start.sun_elevation_deg == pytest.approx(-1.0, abs=0.003)
    assert found[0].end.sun_elevation_deg == pytest.approx(43.37, abs=0.003)
    assert found[0].start.time < flat[0].start.time
    assert found[0].end.time > flat[0].end.time


def test_profile_hides_sun_and_bow() -> None:
    """Against the rule itself, looked at every minute on outlines: any point of the bow and the sun's centre over the profile."""
    place, zone = PLACES["mid-latitude"]
    begin, feature = datetime(2027, 5, 1, tzinfo=UTC), features.find("primary")
    # a wall in the east that the morning sun must clear, high ground in the north-west where the bow sets
    profile = Ridge(lambda a: np.where((a > 40.0) & (a < 120.0), 8.0, np.where((a > 250.0) & (a < 350.0), 12.0, 0.0)))
    found = windows.find(place, zone, begin, begin + timedelta(days=1), feature, horizon=profile)
    from skyoptics.light import position

    times = [begin + timedelta(seconds=60.0 * k) for k in range(1440)]
    ok = []
    for when in times:
        sun = position.sun(place.latitude_deg, place.longitude_deg, when, place.height_m)
        height, azimuth = sun.elevation_deg, sun.azimuth_deg
        up = height >= profile.of(np.array([azimuth]))[0] and height < 43.0
        if up:
            around, elevation = feature.outline(azimuth * DEG, height * DEG)
            up = bool(np.any(elevation >= profile.elevation(around)))
        ok.append(up)
    edges = [times[i + 1] for i in range(len(ok) - 1) if ok[i] != ok[i + 1]]
    ours = [when for window in found for when in (window.start.time, window.end.time)]
    assert len(ours) == len(edges) >= 4
    for mine, other in zip(ours, edges, strict=True):
        assert abs((mine - other).total_seconds()) <= 61.0
    for window in found:
        assert isinstance(window.best, Standing)
        assert 0.0 <= window.best.share_up <= 0.5


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"begin": datetime(2027, 1, 1)}, "without a zone"),
        ({"end": datetime(2026, 1, 1, tzinfo=UTC)}, "does not lie after"),
        ({"zone": "Europe/Zurick"}, "no time zone"),
        ({"place": Place(95.0, 0.0)}, "latitude"),
        ({"least_share": 2.0}, "between 0 and 1"),
        ({"sun_height_deg": (20.0, 10.0)}, "must rise"),
    ],
)
def test_what_cannot_be_is_refused_in_words(change: dict, message: str) -> None:
    asked = {
        "place": Place(47.0, 8.0),
        "zone": "UTC",
        "begin": datetime(2027, 1, 1, tzinfo=UTC),
        "end": datetime(2027, 1, 2, tzinfo=UTC),
        "feature": features.find("primary"),
    } | change
    with pytest.raises(DomainError, match=message):
        windows.find(**asked)
