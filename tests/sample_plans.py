"""Plans for tests of reports: a bow opposite a sun that sinks 10° an hour, by closed forms."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from math import acos, cos, degrees, radians
from zoneinfo import ZoneInfo

from skyoptics.planning.answers import Meeting, Place, Plan, Standing, Subject, Window

ZURICH = ZoneInfo("Europe/Zurich")
MILL = Place(47.2, 8.9, 430.0, "mill")
RADIUS = 42.37


def standing(time, azimuth, elevation):
    """Return a bow of 42.37° about the antisolar point."""
    half = degrees(acos(cos(radians(RADIUS)) / cos(radians(elevation))))
    opposite = (azimuth + 180.0) % 360.0
    feet = ((opposite - half) % 360.0, (opposite + half) % 360.0)
    return Standing(time, azimuth, elevation, RADIUS - elevation, opposite, feet, 0.5 - elevation / 180.0)


def window(day, zone=ZURICH, note="", weak=False):
    """Return the evening of a day of May 2027, in times that are no whole seconds."""
    end = datetime(2027, 5, day, 18, 50, 12, 345678, tzinfo=UTC).astimezone(zone)
    best = end - timedelta(seconds=0.2)
    start = end - timedelta(hours=4.2)
    return Window(
        "primary", "sun", standing(start, 250.0, 42.0), standing(best, 300.0 + 0.2 * day, 0.03), standing(end, 300.0, 0.0),
        weak=weak, note=note,
    )  # fmt: skip


def plan(days=3, meetings=0, zone=ZURICH, place=MILL, notes=("A caution.",)):
    """Return a plan of some evenings."""
    windows = tuple(window(day, zone) for day in range(1, days + 1))
    subject = Subject(66.0, 1.5, 5200.0, 47.22, 8.96, 610.0) if meetings else None
    met = tuple(
        Meeting("primary", "foot", one.start, one.best, one.end, 0.25 + 0.01 * k)
        for k, one in enumerate(windows[:meetings])
    )
    begin = datetime(2027, 5, 1, tzinfo=zone)
    return Plan(
        place, zone.key, begin, begin + timedelta(days=days), "primary", "Primary rainbow", RADIUS, windows,
        subject, met, None, notes,
    )  # fmt: skip
