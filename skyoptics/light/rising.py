"""When the sun and the moon rise and set, and what to say of one that is below the horizon.

Rise and set are those of almanacs: the upper limb at an apparent 0°, refraction for the air given, no hills. The search
misses no short rise: between two steps sin(elevation) curves by no more than the earth's turn allows.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from datetime import UTC, datetime, timedelta

from skyoptics.errors import DomainError, nearest
from skyoptics.light import refraction
from skyoptics.light.position import EPOCH, Body, Observer, airless, apparent, days_of, number, observer
from skyoptics.units import DEG

_DAY = timedelta(days=1)
_STEP = 1.0 / 48.0  # [day]
_HIDDEN = (2.0 * math.pi * _STEP) ** 2 / 8.0 * 1.1  # what sin(elevation) can rise between two steps, and a little more
_LONGEST_SEARCH = 400.0  # [day]; more than a polar year


def next_rise(
    body: Body,
    latitude_deg: float,
    longitude_deg: float,
    when: datetime,
    elevation_m: float = 0.0,
    pressure_hpa: float = 1013.25,
    temperature_c: float = 10.0,
    days: float = 2.0,
) -> datetime | None:
    """Return when the upper limb next comes up through an apparent 0°.

    Parameters
    ----------
    body : {"sun", "moon"}
        What rises.
    latitude_deg, longitude_deg, when, elevation_m, pressure_hpa, temperature_c
        As in `sun`.
    days : float
        How far ahead to look, 0 to 400 [day]. Two days hold a rise of the sun except in polar day or night, and one of
        the moon except in high latitudes.

    Returns
    -------
    datetime or None
        After `when`, in its zone; None where there is none in these days. Real air near the horizon moves it by up to some
        minutes, in high latitudes more.

    Raises
    ------
    DomainError
        As in `sun`, and for another body.
    """
    place = observer(latitude_deg, longitude_deg, elevation_m, pressure_hpa, temperature_c)
    return _next(body, place, when, days, 1.0)


def next_set(
    body: Body,
    latitude_deg: float,
    longitude_deg: float,
    when: datetime,
    elevation_m: float = 0.0,
    pressure_hpa: float = 1013.25,
    temperature_c: float = 10.0,
    days: float = 2.0,
) -> datetime | None:
    """Return when the upper limb next goes down through an apparent 0°: the counterpart of `next_rise`."""
    place = observer(latitude_deg, longitude_deg, elevation_m, pressure_hpa, temperature_c)
    return _next(body, place, when, days, -1.0)


def describe(
    body: Body,
    latitude_deg: float,
    longitude_deg: float,
    when: datetime,
    elevation_m: float = 0.0,
    pressure_hpa: float = 1013.25,
    temperature_c: float = 10.0,
) -> str:
    """Return in words how high a body stands and when it next rises or sets, looking as far as 400 days ahead.

    Parameters
    ----------
    body, latitude_deg, longitude_deg, when, elevation_m, pressure_hpa, temperature_c
        As in `next_rise`.

    Returns
    -------
    str
        Such as "the sun stands at -12.3°, below the horizon; it rises at 2026-06-21T05:47+02:00". Times are in the zone of
        `when`, to the minute in which the body is up. Where the sun crosses the horizon only after more than a day, "(polar
        day)" or "(polar night)" is added.

    Raises
    ------
    DomainError
        As in `next_rise`.
    """
    place = observer(latitude_deg, longitude_deg, elevation_m, pressure_hpa, temperature_c)
    day = days_of(when)
    up = _upper_limb(body, place)(day) >= 0.0
    elevation_deg = apparent(airless(body, place, day), place) / DEG
    text = f"the {body} stands at {elevation_deg:.1f}°" + ("" if up else ", below the horizon")
    verb = "sets" if up else "rises"
    event = _next(body, place, when, _LONGEST_SEARCH, -1.0 if up else 1.0)
    # In universal time: a difference within one zone would be that of its clocks, which may have been changed.
    utc = None if event is None else event.astimezone(UTC)
    long = utc is None or utc - EPOCH > (day + 1.0) * _DAY
    if long and body == "sun":
        text += " (polar day)" if up else " (polar night)"
    if utc is None:
        return f"{text}; it never {verb} in the {_LONGEST_SEARCH:g} days after"
    # Rounded to the side on which the body is up, so that the time shown can be used.
    shown = utc + (timedelta() if up else timedelta(seconds=59, microseconds=999999))
    shown = shown.replace(second=0, microsecond=0).astimezone(when.tzinfo)
    return f"{text}; it {'next ' if long else ''}{verb} at {shown.isoformat(timespec='minutes')}"


def _upper_limb(body: Body, place: Observer) -> Callable[[float], float]:
    """Return a function of the day, positive while the upper limb is above an apparent 0°."""
    if body not in ("sun", "moon"):
        raise DomainError(f'the body must be "sun" or "moon", got "{body}"{nearest(str(body), ("sun", "moon"))}')
    horizon = refraction.horizon(place.pressure, place.temperature)

    def above(day: float) -> float:
        seen = airless(body, place, day)
        return math.sin(seen.elevation) - math.sin(horizon - seen.radius)

    return above


def _next(body: Body, place: Observer, when: datetime, days: float, sign: float) -> datetime | None:
    """Return the next crossing of the horizon, upward for sign 1, downward for −1."""
    limb, first = _upper_limb(body, place), days_of(when)
    number("days to look ahead", days, 0.0, _LONGEST_SEARCH, "days")

    def height(day: float) -> float:
        return sign * limb(day)

    start, low = first, height(first)
    while start < first + days:
        end = min(start + _STEP, first + days)
        high = height(end)
        span: tuple[float, float] | None = None
        if low < 0.0 <= high:
            span = start, end
        elif max(low, high) < 0.0 and max(low, high) > -_HIDDEN:  # it may show between the steps
            top = _highest(height, start, end)
            span = (start, top) if height(top) >= 0.0 else None
        elif min(low, high) >= 0.0 and min(low, high) < _HIDDEN:  # or hide
            bottom = _highest(lambda day: -height(day), start, end)
            span = (bottom, end) if height(bottom) < 0.0 else None
        if span is not None:
            found = EPOCH + _crossing(height, *span) * _DAY
            return found.astimezone(when.tzinfo)
        start, low = end, high
    return None


def _crossing(height: Callable[[float], float], low: float, high: float) -> float:
    """Return where a function crosses from below to above 0, by halving, to 0.01 s."""
    while high - low > 1e-7:
        middle = (low + high) / 2.0
        low, high = (low, middle) if height(middle) >= 0.0 else (middle, high)
    return high


def _highest(height: Callable[[float], float], low: float, high: float) -> float:
    """Return the place of the one maximum, by golden section."""
    ratio = (math.sqrt(5.0) - 1.0) / 2.0
    left, right = high - ratio * (high - low), low + ratio * (high - low)
    at_left, at_right = height(left), height(right)
    while high - low > 1e-6:
        if at_left < at_right:
            low, left, at_left = left, right, at_right
            right = low + ratio * (high - low)
            at_right = height(right)
        else:
            high, right, at_right = right, left, at_left
            left = high - ratio * (high - low)
            at_left = height(left)
    return (low + high) / 2.0
