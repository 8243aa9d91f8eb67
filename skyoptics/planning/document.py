"""An answer as one JSON document; its schema is `skyoptics.planning.schema`.

Times are ISO 8601 with offset, to the second; angles degrees, rounded to 0.001.
"""

from __future__ import annotations

from datetime import datetime
from typing import Any

from skyoptics.planning.answers import Meeting, Place, Plan, Standing, Subject, Window
from skyoptics.planning.coordinates import Coordinates, iso6709
from skyoptics.planning.days import to_second
from skyoptics.planning.miss import Miss

VERSION = 1
"""Of the document's form; it rises when a key changes its meaning or goes."""


def document(plan: Plan, miss: Miss | None = None, body: str = "sun") -> dict[str, Any]:
    """Return a plan as plain data.

    Parameters
    ----------
    plan : Plan
        The answer.
    miss : Miss or None
        How near the sun came, where there is no window.
    body : {"sun", "moon"}
        What lights the feature.

    Returns
    -------
    dict
        For `json.dumps`.
    """
    return {
        "version": VERSION,
        "place": _place(plan.place),
        "zone": plan.zone,
        "begin": iso(plan.begin),
        "end": iso(plan.end),
        "feature": plan.feature,
        "title": plan.title,
        "body": body,
        "radius_deg": plan.radius_deg,
        "windows": [_window(window) for window in plan.windows],
        "subject": None if plan.subject is None else _subject(plan.subject),
        "alignments": [_meeting(meeting) for meeting in plan.meetings],
        "nearest_miss": None if plan.nearest_miss is None else _meeting(plan.nearest_miss),
        "nearest_height": None if miss is None else _miss(miss),
        "notes": list(plan.notes),
    }


def iso(moment: datetime) -> str:
    """Return a time as ISO 8601 with offset, to the nearest second."""
    return to_second(moment).isoformat(timespec="seconds")


def standing(at: Standing) -> dict[str, Any]:
    """Return how a feature stands, without the time."""
    return {
        "sun_azimuth_deg": _azimuth(at.sun_azimuth_deg),
        "sun_elevation_deg": _angle(at.sun_elevation_deg),
        "crown_elevation_deg": _angle(at.crown_elevation_deg),
        "crown_azimuth_deg": _azimuth(at.crown_azimuth_deg),
        "foot_azimuths_deg": [_azimuth(azimuth) for azimuth in at.foot_azimuths_deg],
        "share_up": round(at.share_up, 4) + 0.0,
    }


def _window(window: Window) -> dict[str, Any]:
    """Return a window."""
    moon = window.moon_illuminated
    return {
        "start": iso(window.start.time),
        "best": iso(window.best.time),
        "end": iso(window.end.time),
        **standing(window.best),
        "at_start": standing(window.start),
        "at_end": standing(window.end),
        "weak": window.weak,
        "moon_illuminated": None if moon is None else round(moon, 4),
        "note": window.note,
    }


def _meeting(meeting: Meeting) -> dict[str, Any]:
    """Return a meeting."""
    return {
        "part": meeting.part,
        "start": iso(meeting.start.time),
        "best": iso(meeting.best.time),
        "end": iso(meeting.end.time),
        "distance_deg": _angle(meeting.distance_deg),
        **standing(meeting.best),
    }


def _place(place: Place) -> dict[str, Any]:
    """Return a place."""
    where = Coordinates(place.latitude_deg, place.longitude_deg, place.height_m or None)
    return {
        "name": place.name,
        "latitude_deg": place.latitude_deg,
        "longitude_deg": place.longitude_deg,
        "height_m": place.height_m,
        "iso6709": iso6709(where),
    }


def _subject(subject: Subject) -> dict[str, Any]:
    """Return a subject."""
    return {
        "azimuth_deg": _azimuth(subject.azimuth_deg),
        "elevation_deg": _angle(subject.elevation_deg),
        "distance_m": None if subject.distance_m is None else round(subject.distance_m, 1),
        "latitude_deg": subject.latitude_deg,
        "longitude_deg": subject.longitude_deg,
        "height_m": subject.height_m,
    }


def _miss(miss: Miss) -> dict[str, Any]:
    """Return how near the sun came."""
    return {
        "time": iso(miss.time),
        "sun_azimuth_deg": _azimuth(miss.azimuth_deg),
        "sun_elevation_deg": _angle(miss.elevation_deg),
        "wanted_deg": [_angle(miss.low_deg), _angle(miss.high_deg)],
        "missing_deg": _angle(miss.missing_deg),
    }


def _angle(value: float) -> float:
    """Return an angle, rounded, without minus zero."""
    return round(value, 3) + 0.0


def _azimuth(value: float) -> float:
    """Return an azimuth, rounded, below 360."""
    return round(value, 3) % 360.0
