"""The nearest miss: when the sun or the moon came closest to the heights at which a feature can stand."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from datetime import datetime, timedelta

from skyoptics.light.position import EPOCH, Body, airless, apparent, days_of, observer
from skyoptics.planning.answers import Place
from skyoptics.units import DEG

_STEP = 1.0 / 24.0  # [day]
_UNSURE = 0.03  # of a parabola through an hour before and after a culmination [degrees]; (15°)⁴ / 24 and some


@dataclass(frozen=True)
class Miss:
    """Where the sun or the moon stood when it came closest.

    Parameters
    ----------
    body : {"sun", "moon"}
        Which.
    time : datetime
        In the zone asked for.
    azimuth_deg, elevation_deg : float
        Of its centre, apparent.
    low_deg, high_deg : float
        Elevations at which the feature can stand.
    missing_deg : float
        From the elevation to the nearer of the two; 0 where the height was reached and something else was missing.
    """

    body: Body
    time: datetime
    azimuth_deg: float
    elevation_deg: float
    low_deg: float
    high_deg: float
    missing_deg: float


def nearest_height(
    place: Place,
    begin: datetime,
    end: datetime,
    body: Body,
    low_deg: float,
    high_deg: float,
    pressure_hpa: float = 1013.25,
    temperature_c: float = 10.0,
) -> Miss:
    """Return when a body came closest to a range of elevations.

    Parameters
    ----------
    place : Place
        The observer.
    begin, end : datetime
        Between which to look; the answer is in the zone of `begin`.
    body : {"sun", "moon"}
        Which.
    low_deg, high_deg : float
        The range, apparent.
    pressure_hpa, temperature_c : float
        Of the air there.

    Returns
    -------
    Miss
        The first one, of equals; to a second or so where it is a culmination.

    Raises
    ------
    DomainError
        Outside the ranges of `skyoptics.light.position.sun`.
    """
    there = observer(place.latitude_deg, place.longitude_deg, place.height_m, pressure_hpa, temperature_c)
    first, last = days_of(begin), days_of(end)

    def missing(day: float) -> float:
        height = apparent(airless(body, there, day), there) / DEG
        return max(low_deg - height, height - high_deg, 0.0)

    count = max(2, int((last - first) / _STEP) + 2)
    days = [first + (last - first) * k / (count - 1) for k in range(count)]
    found = [missing(day) for day in days]
    best = min(zip(found, days, strict=True))[1]
    if min(found) > 0.0:
        spans = [(days[max(k - 1, 0)], days[min(k + 1, count - 1)]) for k in _candidates(found)]
        best = min((_least(missing, *span) for span in spans), key=lambda day: (missing(day), day))
    seen = airless(body, there, best)
    moment = (EPOCH + timedelta(days=best)).astimezone(begin.tzinfo)
    return Miss(body, moment, seen.azimuth / DEG, apparent(seen, there) / DEG, low_deg, high_deg, missing(best))


def _candidates(found: list[float]) -> list[int]:
    """Return the steps near which the least may lie, by parabolas through three of them."""
    guesses = {}
    for k, here in enumerate(found):
        before, after = found[max(k - 1, 0)], found[min(k + 1, len(found) - 1)]
        bend = before - 2.0 * here + after
        if here <= min(before, after):
            guesses[k] = here - (after - before) ** 2 / (8.0 * bend) if bend > 0.0 else here
    least = min(guesses.values())
    return [k for k, guess in guesses.items() if guess <= least + _UNSURE]


def _least(function: Callable[[float], float], low: float, high: float) -> float:
    """Return the place of the one minimum, by thirds, to 0.1 s."""
    while high - low > 1e-6:
        left, right = low + (high - low) / 3.0, high - (high - low) / 3.0
        low, high = (low, right) if function(left) <= function(right) else (left, high)
    return (low + high) / 2.0
