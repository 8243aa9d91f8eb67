"""Cells of the tables that people read: on the terminal and on paper."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import datetime, timedelta
from typing import NamedTuple

from skyoptics.planning.answers import Meeting, Plan, Standing, Window
from skyoptics.planning.calendar_file import where
from skyoptics.planning.days import day_begins, offset, to_minute
from skyoptics.planning.words import BOWS, degrees, lit_by

WEAK = "*"
"""Marks a window whose best is near a limit of the sun's height."""
NOTED = "|"
"""Marks a window with a note, such as an end given by the span of days."""
_NOTES = 4


class Rows(NamedTuple):
    """A table: names of columns, cells by row (one cell alone goes across), and lines to say under it."""

    columns: tuple[str, ...]
    cells: tuple[tuple[str, ...], ...]
    legend: tuple[str, ...]


def rows(plan: Plan, body: str = "sun") -> Rows:
    """Return the table of a plan.

    Parameters
    ----------
    plan : Plan
        The answer; with a subject, a row a meeting, else a row a window.
    body : {"sun", "moon"}
        What lights the feature.

    Returns
    -------
    Rows
        Windows are given to the minutes that lie inside them. Where clocks are changed, a row says the offset from there on.
    """
    entries: Sequence[Window | Meeting] = plan.windows if plan.subject is None else plan.meetings
    last = "off" if plan.subject is not None else "up"
    moon = plan.subject is None and body == "moon"
    columns = ("day", "from", "best", "to", body, "crown", "feet", *(["lit"] if moon else []), last)
    several = len(offsets(plan)) > 1
    cells: list[tuple[str, ...]] = []
    before = ""
    for entry in entries:
        if several and before != (before := offset(entry.best.time)):
            cells.append((f"UTC{before} from here on",))
        row = _row(entry)
        if moon and isinstance(entry, Window):
            row.insert(-1, f"{100.0 * (entry.moon_illuminated or 0.0):.0f}%")
        cells.append(tuple(row))
    return Rows(columns, tuple(cells), tuple(_legend(plan, entries, body)))


def headings(plan: Plan, body: str = "sun") -> tuple[str, str, str]:
    """Return three lines to put over a table: what, where, when.

    Parameters
    ----------
    plan : Plan
        The answer.
    body : {"sun", "moon"}
        What lights the feature.
    """
    radius = ""
    if plan.radius_deg is not None:
        edge = f"upper edge {plan.radius_deg:.4g}° from the point opposite {lit_by(body)}"
        radius = f" ({edge})" if plan.feature in BOWS else f" (inner edge {plan.radius_deg:.4g}° from {lit_by(body)})"
    found = offsets(plan)
    zone = f"times in {plan.zone}" + (f", UTC{found[0]}" if len(found) == 1 and plan.zone != "UTC" else "")
    last = plan.end - timedelta(seconds=1)  # a day's end is the next one's beginning
    days = plan.begin == day_begins(plan.begin.date(), plan.begin.tzinfo) and last.date() != plan.end.date()
    span = (
        f"{plan.begin.date()} to {last.date()}" if days else f"{plan.begin:%Y-%m-%d %H:%M} to {plan.end:%Y-%m-%d %H:%M}"
    )
    place = plan.place
    height = f", {place.height_m:g} m above the sea" if place.height_m else ""
    return f"{plan.title}{radius}", f"{where(place)}{height}", f"{span}, {zone}"


def summary(plan: Plan, body: str = "sun") -> str:
    """Return how much was found, in a line.

    Parameters
    ----------
    plan : Plan
        The answer.
    body : {"sun", "moon"}
        What lights the feature.
    """
    count = len(plan.windows)
    found = f"{count} window{'' if count == 1 else 's'} in which it can stand"
    subject = plan.subject
    if subject is None:
        return f"{found}."
    distance = "" if subject.distance_m is None else f", {subject.distance_m / 1000.0:.2f} km away"
    met = len(plan.meetings)
    return (
        f"{found}; {met} meeting{'' if met == 1 else 's'} with the subject at azimuth {subject.azimuth_deg:.2f}°, "
        f"{subject.elevation_deg:.2f}° high{distance}."
    )


def offsets(plan: Plan) -> tuple[str, ...]:
    """Return the offsets from universal time that occur in a plan, in order of occurrence."""
    entries: Sequence[Window | Meeting] = plan.windows if plan.subject is None else plan.meetings
    times = [entry.best.time for entry in entries] or [plan.begin]
    return tuple(dict.fromkeys(offset(time) for time in times))


def minutes(entry: Window | Meeting) -> tuple[datetime, datetime, datetime]:
    """Return start, best and end at whole minutes inside a window or meeting, where it is a minute long.

    Parameters
    ----------
    entry : Window or Meeting
        With times to fractions of a second.
    """
    start, best, end = to_minute(entry.start.time, 1), to_minute(entry.best.time), to_minute(entry.end.time, -1)
    if end.timestamp() < start.timestamp():  # shorter than a minute; instants, for clocks may be put back in between
        start, end = to_minute(entry.start.time), to_minute(entry.end.time)
    best = min(max(best, start, key=datetime.timestamp), end, key=datetime.timestamp)
    return start, best, end


def _row(entry: Window | Meeting) -> list[str]:
    """Return the cells of a window or meeting."""
    start, best, end = minutes(entry)
    at = entry.best
    row = [f"{start:%a %Y-%m-%d}", f"{start:%H:%M}"]
    for time in (best, end):
        days = (time.date() - start.date()).days
        row.append(f"{time:%H:%M}" + (f"+{days}" if days else ""))
    row += [
        _spot(at.sun_azimuth_deg, at.sun_elevation_deg),
        _spot(at.crown_azimuth_deg, at.crown_elevation_deg),
        _feet(at),
    ]
    if isinstance(entry, Meeting):
        return [*row, f"{entry.distance_deg:.2f}°"]
    return [*row, f"{100.0 * at.share_up:.0f}%" + (WEAK if entry.weak else "") + (NOTED if entry.note else "")]


def _legend(plan: Plan, entries: Sequence[Window | Meeting], body: str) -> list[str]:
    """Return what the columns mean, as far as they need it."""
    last = "off: least distance from the subject." if plan.subject is not None else "up: share of it above the horizon."
    lines = [f"{body}, crown: azimuth and elevation at best; feet: azimuths on the horizon; {last}"]
    windows = [entry for entry in entries if isinstance(entry, Window)]
    if any(window.weak for window in windows):
        lines.append(f"{WEAK} weak: within 1° of a limit of {lit_by(body)}'s height.")
    notes = list(dict.fromkeys(window.note for window in windows if window.note))
    lines += [f"{NOTED} {note}." for note in notes[:_NOTES]]
    if len(notes) > _NOTES:
        lines.append(f"{NOTED} and {len(notes) - _NOTES} more such notes, told by --csv and --json.")
    if any("+" in cell for entry in entries for cell in _row(entry)[2:4]):
        lines.append("+1: on the next day.")
    return lines


def _spot(azimuth_deg: float, elevation_deg: float) -> str:
    """Return azimuth and elevation."""
    return f"{round(azimuth_deg) % 360}° {degrees(elevation_deg)}"


def _feet(at: Standing) -> str:
    """Return the azimuths of the feet."""
    return " ".join(f"{round(azimuth) % 360}°" for azimuth in at.foot_azimuths_deg) or "–"
