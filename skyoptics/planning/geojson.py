"""Lines of sight for a map: from the place toward feet, crown, sun and subject.

Straight lines of sight over the WGS84 ellipsoid, dropped to the ground: on the map they begin with the azimuth and follow what is
seen, to a metre of a great circle's course at 100 km.

References
----------
RFC 7946 (GeoJSON): longitude first, degrees on WGS84; section 3.1.9: lines are cut at the 180th meridian.
"""

from __future__ import annotations

import math
from typing import Any

from skyoptics.planning.answers import Meeting, Place, Plan, Standing, Window
from skyoptics.planning.document import iso
from skyoptics.planning.subject import along

LONGEST_KM = 200.0
"""Longest line."""

_STEP = 2000.0  # between points of a line [m]
_DIGITS = 6  # of degrees: 0.1 m

Point = tuple[float, float]


def geojson(plan: Plan, length_km: float = 20.0, body: str = "sun") -> dict[str, Any]:
    """Return a plan as a collection of lines.

    Parameters
    ----------
    plan : Plan
        The answer; with a subject, lines are those at the best of its meetings, else at the best of the windows.
    length_km : float
        Of each line; that to a subject with coordinates ends there.
    body : {"sun", "moon"}
        What lights the feature.

    Returns
    -------
    dict
        A FeatureCollection: the place, then lines with ``what`` (sun, moon, crown, left foot, right foot, subject), ``time``,
        ``azimuth_deg`` and, where it has one, ``elevation_deg``.
    """
    place, length = plan.place, length_km * 1000.0
    features = [
        _feature(
            "Point",
            [round(place.longitude_deg, _DIGITS), round(place.latitude_deg, _DIGITS)],
            what="place",
            name=place.name,
        )
    ]
    subject = plan.subject
    if subject is not None:
        reach = subject.distance_m or length
        features.append(
            _line(place, subject.azimuth_deg, reach, what="subject", elevation_deg=round(subject.elevation_deg, 3))
        )
    entries: tuple[Window | Meeting, ...] = plan.windows if subject is None else plan.meetings
    for entry in entries:
        features.extend(_sights(place, entry.best, length, body, plan.feature))
    return {"type": "FeatureCollection", "features": features}


def sight(place: Place, azimuth_deg: float, length_m: float) -> list[list[Point]]:
    """Return a level line of sight on the ground.

    Parameters
    ----------
    place : Place
        Where it begins.
    azimuth_deg : float
        Clockwise from north.
    length_m : float
        Its length.

    Returns
    -------
    list of list of (longitude, latitude)
        One line, or two where it crosses the 180th meridian, each with a point at most every 2 km [degrees].
    """
    count = max(1, math.ceil(length_m / _STEP))
    lines: list[list[Point]] = [[(place.longitude_deg, place.latitude_deg)]]
    for k in range(1, count + 1):
        latitude, longitude = along(place, azimuth_deg, 0.0, length_m * k / count)
        before, low = lines[-1][-1]
        if abs(longitude - before) > 180.0:
            edge = math.copysign(180.0, before)
            beyond = longitude + 2.0 * edge
            share = (edge - before) / (beyond - before) if beyond != before else 0.0
            middle = low + share * (latitude - low)
            lines[-1].append((edge, middle))
            lines.append([(-edge, middle)])
        lines[-1].append((longitude, latitude))
    return lines


def _sights(place: Place, at: Standing, length: float, body: str, feature: str) -> list[dict[str, Any]]:
    """Return the lines at an instant."""
    feet = dict(zip(("left foot", "right foot"), at.foot_azimuths_deg, strict=False))
    lines = {body: at.sun_azimuth_deg, "crown": at.crown_azimuth_deg, **feet}
    heights = {body: at.sun_elevation_deg, "crown": at.crown_elevation_deg}
    return [
        _line(
            place,
            azimuth,
            length,
            what=what,
            feature=feature,
            time=iso(at.time),
            **({"elevation_deg": round(heights[what], 3) + 0.0} if what in heights else {}),
        )
        for what, azimuth in lines.items()
    ]


def _line(place: Place, azimuth_deg: float, length: float, **about: Any) -> dict[str, Any]:
    """Return a line of sight as a feature."""
    lines = [[[round(x, _DIGITS), round(y, _DIGITS)] for x, y in line] for line in sight(place, azimuth_deg, length)]
    about |= {"azimuth_deg": round(azimuth_deg, 3) % 360.0, "length_km": round(length / 1000.0, 3)}
    if len(lines) == 1:
        return _feature("LineString", lines[0], **about)
    return _feature("MultiLineString", lines, **about)


def _feature(kind: str, coordinates: Any, **about: Any) -> dict[str, Any]:
    """Return a feature."""
    return {"type": "Feature", "geometry": {"type": kind, "coordinates": coordinates}, "properties": about}
