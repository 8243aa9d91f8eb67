"""Where the sun and the moon stand, from place and time.

Positions are topocentric: from the observer's own place on a flattened earth, so the moon's parallax is in them. They come
from PyEphem's analytic theories, which need no data files. Azimuth is clockwise from north; elevation is apparent
(`skyoptics.light.refraction`), airless where the pressure is 0. Coordinated universal time is taken as the angle of the
earth (UT1): at most 0.9 s, 14″, apart since 1972. Years are those of the Gregorian calendar.

Against an independent library the airless positions agree to 0.1′ from 1975 to 2030 and to 0.6′ from 1600 to 2200, where
most of the difference is what the two take for the slowing of the earth.

References
----------
The theories behind PyEphem (from memory): P. Bretagnon & G. Francou, A&A 202, 309 (1988), VSOP87, for the sun;
S. L. Moshier, A&A 262, 613 (1992), for the moon.
"""

from __future__ import annotations

import math
from datetime import UTC, datetime, timedelta
from threading import Lock
from typing import Literal, NamedTuple

from skyoptics.errors import DomainError
from skyoptics.light import refraction
from skyoptics.materials.ranges import within
from skyoptics.units import CELSIUS_ZERO, DEG, HPA

FIRST_YEAR, LAST_YEAR = 1600, 2200
"""Years in which positions are given."""
EPOCH = datetime(1899, 12, 31, 12, tzinfo=UTC)
"""From which days are counted."""

Body = Literal["sun", "moon"]

_SUN_RADIUS = 959.63 / 3600.0 * DEG  # from 1 AU [rad]; Auwers's semi-diameter, as in light/disc
_MOON_RADIUS = 1737.4  # [km]; mean, IAU (from memory)
_AU = 149597870.7  # [km]; IAU 2012 resolution B2

_lock = Lock()  # PyEphem keeps its last place and day in C


class SunPosition(NamedTuple):
    """Where the sun's centre is seen, and its angular radius before refraction flattens it."""

    azimuth_deg: float
    elevation_deg: float
    angular_radius_deg: float


class MoonPosition(NamedTuple):
    """The same of the moon; its phase angle (sun–moon–observer, 0 at full moon) and how much of its disc is lit."""

    azimuth_deg: float
    elevation_deg: float
    angular_radius_deg: float
    phase_angle_deg: float
    illuminated_fraction: float


class Observer(NamedTuple):
    """An observer [rad, rad, m] and the air there [Pa, K], all checked."""

    latitude: float
    longitude: float
    height: float
    pressure: float
    temperature: float


class Airless(NamedTuple):
    """Azimuth and airless elevation [rad], distance from the observer [AU], angular radius [rad]."""

    azimuth: float
    elevation: float
    distance: float
    radius: float


def sun(
    latitude_deg: float,
    longitude_deg: float,
    when: datetime,
    elevation_m: float = 0.0,
    pressure_hpa: float = 1013.25,
    temperature_c: float = 10.0,
) -> SunPosition:
    """Return where the sun is seen.

    Parameters
    ----------
    latitude_deg : float
        Geodetic, north positive, −90 to 90 [degrees].
    longitude_deg : float
        East positive, −180 to 180 [degrees].
    when : datetime
        With offset or zone, 1600 to 2200.
    elevation_m : float
        Height of the observer above the sea, −500 to 20 000 [m]. It shifts the parallax only: the horizon stays at 0°.
    pressure_hpa : float
        Air pressure at the observer, not reduced to sea level, 0 to 1100; 0 for no air [hPa].
    temperature_c : float
        Air temperature at the observer, −90 to 60 [°C].

    Returns
    -------
    SunPosition
        ``azimuth_deg`` (0 to 360), ``elevation_deg``, ``angular_radius_deg``.

    Raises
    ------
    DomainError
        Outside these ranges, and for a datetime without offset and zone.
    """
    place = observer(latitude_deg, longitude_deg, elevation_m, pressure_hpa, temperature_c)
    seen = airless("sun", place, days_of(when))
    return SunPosition(seen.azimuth / DEG, apparent(seen, place) / DEG, seen.radius / DEG)


def moon(
    latitude_deg: float,
    longitude_deg: float,
    when: datetime,
    elevation_m: float = 0.0,
    pressure_hpa: float = 1013.25,
    temperature_c: float = 10.0,
) -> MoonPosition:
    """Return where the moon is seen, and its phase.

    Parameters
    ----------
    latitude_deg, longitude_deg, when, elevation_m, pressure_hpa, temperature_c
        As in `sun`.

    Returns
    -------
    MoonPosition
        ``azimuth_deg`` (0 to 360), ``elevation_deg``, ``angular_radius_deg``, ``phase_angle_deg`` (0 full, 180 new) as
        seen from the place, ``illuminated_fraction``.

    Raises
    ------
    DomainError
        As in `sun`.

    Notes
    -----
    With elongation ψ and the distances R of the sun and Δ of the moon: tan i = R sin ψ / (Δ − R cos ψ), lit (1 + cos i) / 2
    (J. Meeus, Astronomical Algorithms, 2nd ed., equations 48.3 and 48.1; from memory).
    """
    place = observer(latitude_deg, longitude_deg, elevation_m, pressure_hpa, temperature_c)
    day = days_of(when)
    seen, light = airless("moon", place, day), airless("sun", place, day)
    one, other = _vector(seen), _vector(light)
    # Not an arc cosine, which loses half the digits near full and new moon.
    cross = math.hypot(*(one[i - 2] * other[i - 1] - one[i - 1] * other[i - 2] for i in range(3)))
    dot = sum(a * b for a, b in zip(one, other, strict=True))
    phase = math.atan2(light.distance * cross, seen.distance - light.distance * dot)
    return MoonPosition(
        seen.azimuth / DEG,
        apparent(seen, place) / DEG,
        seen.radius / DEG,
        phase / DEG,
        (1.0 + math.cos(phase)) / 2.0,
    )


def observer(
    latitude_deg: float, longitude_deg: float, elevation_m: float, pressure_hpa: float, temperature_c: float
) -> Observer:
    """Return a place, checked."""
    return Observer(
        number("latitude (north positive)", latitude_deg, -90.0, 90.0, "°") * DEG,
        number("longitude (east positive)", longitude_deg, -180.0, 180.0, "°") * DEG,
        number("height above the sea", elevation_m, -500.0, 20000.0, "m"),
        number("air pressure", pressure_hpa, 0.0, 1100.0, "hPa") * HPA,
        number("air temperature", temperature_c, -90.0, 60.0, "°C") + CELSIUS_ZERO,
    )


def number(name: str, value: float, low: float, high: float, unit: str) -> float:
    """Return a number, checked."""
    try:
        taken = float(value)
    except (TypeError, ValueError, OverflowError):
        raise DomainError(f"{name} must be a number between {low:g} and {high:g} {unit}, got {value!r}") from None
    return taken if low <= taken <= high else float(within(name, taken, low, high, unit))


def days_of(when: datetime) -> float:
    """Return a checked time as days from `EPOCH`."""
    if not isinstance(when, datetime):
        raise DomainError(f"the time must be a datetime with a zone, got {when!r}")
    if when.utcoffset() is None:
        raise DomainError(
            f"{when.isoformat()} is a local time without a zone: give the datetime an offset or a zone, as in "
            'when.replace(tzinfo=zoneinfo.ZoneInfo("Europe/Paris"))'
        )
    if not FIRST_YEAR <= when.year <= LAST_YEAR:
        raise DomainError(
            f"the sun and the moon are known from {FIRST_YEAR} to {LAST_YEAR}, got the year {when.year}; take a time in "
            "these years, or give the elevation and azimuth yourself"
        )
    return (when - EPOCH) / timedelta(days=1)


def airless(body: Body, place: Observer, day: float) -> Airless:
    """Return the topocentric position without air."""
    import ephem

    with _lock:
        there = ephem.Observer()
        there.lat, there.lon, there.elevation = place.latitude, place.longitude, place.height
        there.pressure = 0.0
        there.date = day
        found = ephem.Sun() if body == "sun" else ephem.Moon()
        found.compute(there)
        azimuth, elevation, distance = float(found.az), float(found.alt), float(found.earth_distance)
    radius = _SUN_RADIUS / distance if body == "sun" else math.asin(_MOON_RADIUS / (distance * _AU))
    return Airless(azimuth, elevation, distance, radius)


def apparent(seen: Airless, place: Observer) -> float:
    """Return the apparent elevation [rad]."""
    return float(refraction.apparent(seen.elevation, place.pressure, place.temperature))


def _vector(seen: Airless) -> tuple[float, float, float]:
    """Return the unit vector east, north, up."""
    level = math.cos(seen.elevation)
    return level * math.sin(seen.azimuth), level * math.cos(seen.azimuth), math.sin(seen.elevation)
