import math
import subprocess
import sys
from concurrent.futures import ThreadPoolExecutor
from datetime import UTC, datetime, timedelta, timezone
from zoneinfo import ZoneInfo

import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.light import refraction
from skyoptics.light.position import moon, sun
from skyoptics.units import ARCMIN, DEG

SPA_TIME = datetime(2003, 10, 17, 12, 30, 30, tzinfo=timezone(timedelta(hours=-7)))
SPA_PLACE = (39.742476, -105.1786)
NOON = datetime(2026, 6, 21, 12, tzinfo=UTC)


def random_places(count, first, last, seed):
    """Yield latitude, longitude [degrees], height [m] and time, even over the sphere and the years."""
    random = np.random.default_rng(seed)
    begin, end = datetime(first, 1, 1, tzinfo=UTC), datetime(last + 1, 1, 1, tzinfo=UTC)
    for _ in range(count):
        latitude_deg = math.degrees(math.asin(random.uniform(-1, 1)))
        yield (
            latitude_deg,
            random.uniform(-180, 180),
            random.uniform(0, 4000),
            begin + (end - begin) * random.uniform(),
        )


def oracle(body, latitude_deg, longitude_deg, elevation_m, when):
    """Topocentric airless azimuth, elevation [degrees] and distance [AU] by astronomy-engine."""
    import astronomy

    place = astronomy.Observer(latitude_deg, longitude_deg, elevation_m)
    time = astronomy.Time((when - datetime(2000, 1, 1, 12, tzinfo=UTC)) / timedelta(days=1))
    kind = astronomy.Body.Sun if body == "sun" else astronomy.Body.Moon
    found = astronomy.Equator(kind, time, place, True, True)
    level = astronomy.Horizon(time, place, found.ra, found.dec, astronomy.Refraction.Airless)
    return level.azimuth, level.altitude, found.dist


def differences(call, count, first, last, seed):
    """Largest differences of azimuth · cos(elevation), elevation [arcmin] and angular radius × distance, relative."""
    worst = np.zeros(2)
    radii = []
    for latitude_deg, longitude_deg, elevation_m, when in random_places(count, first, last, seed):
        ours = call(latitude_deg, longitude_deg, when, elevation_m, pressure_hpa=0)
        azimuth_deg, elevation_deg, distance = oracle(call.__name__, latitude_deg, longitude_deg, elevation_m, when)
        turn = (ours.azimuth_deg - azimuth_deg + 180) % 360 - 180
        across, up = turn * math.cos(elevation_deg * DEG), ours.elevation_deg - elevation_deg
        worst = np.maximum(worst, [abs(across) * 60, abs(up) * 60])
        radii.append(math.sin(ours.angular_radius_deg * DEG) * distance)
    return worst, np.array(radii)


def test_spa_worked_example():
    """Reda & Andreas, Solar Energy 76, 577 (2004), NREL/TP-560-34302, table A5.1."""
    found = sun(*SPA_PLACE, SPA_TIME, elevation_m=1830.14, pressure_hpa=820, temperature_c=11)
    assert 90 - found.elevation_deg == pytest.approx(50.111622, abs=2e-4)
    assert found.azimuth_deg == pytest.approx(194.340241, abs=2e-4)
    dry = sun(*SPA_PLACE, SPA_TIME, 1830.14, pressure_hpa=0)
    assert dry.elevation_deg == pytest.approx(39.872046, abs=2e-4)
    # 959.63″ at 1 AU over the example's R of 0.9965422974 AU; from the place the sun is 6371 km sin(e0) nearer.
    assert found.angular_radius_deg * 3600 == pytest.approx(959.63 / 0.9965422974, rel=5e-5)


@pytest.mark.parametrize("call", [sun, moon])
def test_fifty_places_and_times(call):
    """astronomy-engine, an independent library: VSOP87 and NOVAS's lunar theory, cut short."""
    worst, _ = differences(call, 50, 1975, 2030, seed=6)
    assert np.all(worst < 0.5)
    assert np.all(worst < 0.15)  # 0.09 was the most of 2000


@pytest.mark.parametrize("call", [sun, moon])
@pytest.mark.parametrize(("first", "last"), [(1600, 1699), (1900, 1974), (2031, 2200)])
def test_further_years(call, first, last):
    """astronomy-engine; its forecast of the earth's turn differs from PyEphem's."""
    worst, _ = differences(call, 30, first, last, seed=first)
    assert np.all(worst < 0.6)


@pytest.mark.slow
@pytest.mark.parametrize("call", [sun, moon])
def test_all_years(call):
    """astronomy-engine."""
    worst, _ = differences(call, 3000, 1600, 2200, seed=1)
    assert np.all(worst < 0.75)


def test_angular_radii():
    """Sun 959.63″ at 1 AU (Auwers, as in almanacs), moon 1737.4 km (IAU), both from the place."""
    _, suns = differences(sun, 20, 1975, 2030, seed=7)
    np.testing.assert_allclose(suns, 959.63 * ARCMIN / 60, rtol=5e-5)
    _, moons = differences(moon, 20, 1975, 2030, seed=7)
    np.testing.assert_allclose(moons, 1737.4 / 149597870.7, rtol=1e-4)


def test_ranges_of_the_discs():
    """Published ranges of the whole disc: sun 31′27″ to 32′31″, moon 29′24″ to 33′40″ from the earth's centre.

    From a place that is turned to it the moon is about 1/58 nearer, from one turned away farther.
    """
    for latitude_deg, longitude_deg, elevation_m, when in random_places(300, 1975, 2030, seed=8):
        assert 31.44 < sun(latitude_deg, longitude_deg, when, elevation_m).angular_radius_deg * 120 < 32.54
        found = moon(latitude_deg, longitude_deg, when, elevation_m, pressure_hpa=0)
        nearer = 1 + math.sin(found.elevation_deg * DEG) / 58
        assert 29.35 < found.angular_radius_deg * 120 / nearer < 33.7


def test_phase_of_the_moon_as_seen_from_the_place():
    """The angle at the moon between vectors of astronomy-engine, to 0.01°."""
    import astronomy

    for latitude_deg, longitude_deg, elevation_m, when in random_places(40, 1975, 2030, seed=9):
        place = astronomy.Observer(latitude_deg, longitude_deg, elevation_m)
        time = astronomy.Time((when - datetime(2000, 1, 1, 12, tzinfo=UTC)) / timedelta(days=1))
        bodies = []
        for kind in (astronomy.Body.Sun, astronomy.Body.Moon):
            vector = astronomy.Equator(kind, time, place, True, True).vec
            bodies.append(np.array([vector.x, vector.y, vector.z]))
        to_sun, to_eye = bodies[0] - bodies[1], -bodies[1]
        cosine = to_sun @ to_eye / np.linalg.norm(to_sun) / np.linalg.norm(to_eye)
        found = moon(latitude_deg, longitude_deg, when, elevation_m)
        assert found.phase_angle_deg == pytest.approx(math.degrees(math.acos(cosine)), abs=0.01)
        assert found.illuminated_fraction == pytest.approx((1 + cosine) / 2, abs=1e-4)


def test_meeus_example():
    """J. Meeus, Astronomical Algorithms, example 48.a: 12 April 1992, 0h TD, i = 69.0756°, k = 0.6786 (from memory).

    His are from the earth's centre, up to 1° of parallax from ours.
    """
    found = moon(0.0, 0.0, datetime(1992, 4, 11, 23, 59, 1, tzinfo=UTC))
    assert found.phase_angle_deg == pytest.approx(69.0756, abs=1.0)
    assert found.illuminated_fraction == pytest.approx(0.6786, abs=0.009)


@pytest.mark.parametrize("call", [sun, moon])
def test_air_lifts(call):
    for latitude_deg, longitude_deg, elevation_m, when in random_places(30, 1975, 2030, seed=10):
        place = (latitude_deg, longitude_deg, when, elevation_m)
        seen, dry = call(*place, 950, -5), call(*place, 0)
        expected = refraction.apparent(dry.elevation_deg * DEG, 95000.0, 268.15) / DEG
        assert seen.elevation_deg == pytest.approx(float(expected), abs=1e-12)
        assert seen._replace(elevation_deg=0) == dry._replace(elevation_deg=0)


def test_the_zone_makes_no_difference():
    paris = NOON.astimezone(ZoneInfo("Europe/Paris"))
    assert sun(48.85, 2.35, paris) == sun(48.85, 2.35, NOON)


def test_the_suns_path():
    """At noon in midsummer it stands south, 90° − latitude + 23.4° high; in the southern hemisphere north."""
    north = sun(50.0, 0.0, datetime(2026, 6, 21, 12, 2, tzinfo=UTC), pressure_hpa=0)
    assert north.elevation_deg == pytest.approx(63.44, abs=0.02)
    assert north.azimuth_deg == pytest.approx(180, abs=1)
    south = sun(-50.0, 0.0, datetime(2026, 6, 21, 12, 2, tzinfo=UTC), pressure_hpa=0)
    assert south.elevation_deg == pytest.approx(16.56, abs=0.02)
    assert min(south.azimuth_deg, 360 - south.azimuth_deg) == pytest.approx(0, abs=1)
    east = sun(50.0, 0.0, datetime(2026, 6, 21, 6, tzinfo=UTC))
    assert 45 < east.azimuth_deg < 90


def test_pole_and_date_line():
    for latitude_deg in (-90, 90):
        found = sun(latitude_deg, 0, NOON, pressure_hpa=0)
        assert found.elevation_deg == pytest.approx(math.copysign(23.436, latitude_deg), abs=0.01)
    one, other = sun(10, 180, NOON), sun(10, -180, NOON)
    assert one == pytest.approx(other, abs=1e-4)


def test_threads_do_not_disturb_each_other():
    places = list(random_places(200, 1975, 2030, seed=11))

    def positions(place):
        latitude_deg, longitude_deg, elevation_m, when = place
        return sun(latitude_deg, longitude_deg, when, elevation_m), moon(latitude_deg, longitude_deg, when)

    alone = [positions(place) for place in places]
    with ThreadPoolExecutor(8) as pool:
        assert list(pool.map(positions, places)) == alone


def test_the_ephemeris_is_loaded_when_asked():
    script = (
        "import sys, skyoptics.light.position, skyoptics.light.rising, skyoptics.light.zones;"
        "print([name for name in ('ephem', 'numba') if name in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


@pytest.mark.parametrize(
    ("changes", "text"),
    [
        ({"latitude_deg": 90.5}, r"latitude \(north positive\) must lie between -90 and 90 °, got 90.5 °"),
        ({"latitude_deg": float("nan")}, "latitude .* got nan"),
        ({"latitude_deg": "north"}, "latitude .* must be a number between -90 and 90 °, got 'north'"),
        ({"longitude_deg": 247.3}, r"longitude \(east positive\) must lie between -180 and 180 °, got 247.3 °"),
        ({"elevation_m": 1e5}, "height above the sea must lie between -500 and 20000 m"),
        ({"pressure_hpa": -1}, "air pressure must lie between 0 and 1100 hPa, got -1 hPa"),
        ({"temperature_c": 300}, "air temperature must lie between -90 and 60 °C, got 300 °C"),
        ({"when": datetime(2026, 6, 21, 12)}, "2026-06-21T12:00:00 is a local time without a zone: give"),
        ({"when": "2026-06-21T12:00Z"}, "the time must be a datetime with a zone, got '2026-06-21T12:00Z'"),
        ({"when": datetime(1599, 12, 31, tzinfo=UTC)}, "known from 1600 to 2200, got the year 1599"),
        ({"when": datetime(2201, 1, 1, tzinfo=UTC)}, "known from 1600 to 2200, got the year 2201"),
        ({"when": datetime.max.replace(tzinfo=UTC)}, "got the year 9999"),
    ],
)
@pytest.mark.parametrize("call", [sun, moon])
def test_faults(call, changes, text):
    with pytest.raises(DomainError, match=text):
        call(**({"latitude_deg": 50.0, "longitude_deg": 10.0, "when": NOON} | changes))
