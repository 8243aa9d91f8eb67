"""Calendar entries with alarms: an event a window, or an event a meeting where there is a subject.

References
----------
RFC 5545 (iCalendar): sections 3.1 (lines of 75 octets at most), 3.6.1 (events), 3.6.6 (alarms), 3.8.4.7 (UID).
"""

from __future__ import annotations

import hashlib
from datetime import UTC, datetime, timedelta
from typing import Any

from skyoptics import __version__
from skyoptics.planning.answers import Meeting, Place, Plan, Window
from skyoptics.planning.coordinates import Coordinates, decimal
from skyoptics.planning.days import to_minute, to_second
from skyoptics.planning.words import degrees, direction, feet, lit_by


def calendar(plan: Plan, body: str = "sun", alarm_minutes: int = 60, stamp: datetime | None = None) -> bytes:
    """Return a plan as an iCalendar file.

    Parameters
    ----------
    plan : Plan
        The answer; with a subject, its meetings become events, else its windows.
    body : {"sun", "moon"}
        What lights the feature.
    alarm_minutes : int
        Between alarm and start; 0 for an alarm at the start.
    stamp : datetime or None
        When the file is made; None asks the clock.

    Returns
    -------
    bytes
        UTF-8, lines of 75 octets at most that end in carriage return and line feed, times in UTC to the second. The UID of an
        event is a hash of place, feature, what is met, and the minute of its best: a calendar that reads the file of a
        later run finds the same events.
    """
    from icalendar import Calendar

    made = (stamp or datetime.now(UTC)).astimezone(UTC).replace(microsecond=0)
    whole = Calendar()
    whole.add("prodid", f"-//skyoptics//{__version__}//EN")
    whole.add("version", "2.0")
    whole.add("calscale", "GREGORIAN")
    entries: tuple[Window | Meeting, ...] = plan.windows if plan.subject is None else plan.meetings
    for entry in entries:
        whole.add_component(_event(plan, entry, body, alarm_minutes, made))
    return bytes(whole.to_ical())


def identity(plan: Plan, entry: Window | Meeting) -> str:
    """Return the UID of an event.

    Parameters
    ----------
    plan : Plan
        Whose place and subject count; not its dates.
    entry : Window or Meeting
        The event.
    """
    place, subject = plan.place, plan.subject
    words = [
        f"{place.latitude_deg:.5f} {place.longitude_deg:.5f} {place.height_m:.0f}",
        entry.feature,
        f"{plan.radius_deg or 0.0:.3f}",
        to_minute(entry.best.time.astimezone(UTC)).isoformat(),
    ]
    if isinstance(entry, Meeting) and subject is not None:
        words.append(f"{entry.part} {subject.azimuth_deg:.3f} {subject.elevation_deg:.3f}")
    return hashlib.sha256("|".join(words).encode()).hexdigest()[:32] + "@skyoptics"


def _event(plan: Plan, entry: Window | Meeting, body: str, alarm_minutes: int, made: datetime) -> Any:
    """Return an event with its alarm."""
    from icalendar import Alarm, Event

    event, alarm = Event(), Alarm()
    title = _title(plan, entry)
    event.add("uid", identity(plan, entry))
    event.add("dtstamp", made)
    event.add("dtstart", to_second(entry.start.time).astimezone(UTC))
    event.add("dtend", to_second(entry.end.time).astimezone(UTC))
    event.add("summary", title)
    event.add("description", _description(plan, entry, body))
    event.add("location", where(plan.place))
    event.add("geo", (round(plan.place.latitude_deg, 6), round(plan.place.longitude_deg, 6)))
    event.add("transp", "TRANSPARENT")
    alarm.add("action", "DISPLAY")
    alarm.add("trigger", -timedelta(minutes=alarm_minutes))
    alarm.add("description", title)
    event.add_component(alarm)
    return event


def where(place: Place) -> str:
    """Return name and coordinates of a place."""
    spot = decimal(Coordinates(place.latitude_deg, place.longitude_deg))
    return f"{place.name} ({spot})" if place.name else spot


def _title(plan: Plan, entry: Window | Meeting) -> str:
    """Return the one line of an event."""
    best = to_minute(entry.best.time)
    if isinstance(entry, Meeting):
        part = {"bow": "meets", "foot": "foot on", "crown": "crown on"}[entry.part]
        return f"{plan.title}: {part} the subject, {best:%H:%M}"
    return f"{plan.title} can stand, best {best:%H:%M}"


def _description(plan: Plan, entry: Window | Meeting, body: str) -> str:
    """Return what to know on the spot."""
    best = entry.best
    lines = [
        f"Best {to_minute(best.time).isoformat(timespec='minutes')} ({plan.zone}).",
        f"{lit_by(body).capitalize()} {degrees(best.sun_elevation_deg)} high in the {direction(best.sun_azimuth_deg)}.",
        f"Highest point {degrees(best.crown_elevation_deg)} in the {direction(best.crown_azimuth_deg)}.",
    ]
    if best.foot_azimuths_deg:
        lines.append(f"Meets the horizon at azimuth {feet(best)}.")
    if isinstance(entry, Meeting):
        lines.append(f"Nearest to the subject: {entry.distance_deg:.2f}°.")
    elif entry.note:
        lines.append(entry.note)
    return "\n".join([*lines, *plan.notes])
