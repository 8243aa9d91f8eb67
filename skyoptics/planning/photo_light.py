"""Where the sun or the moon stood when a photograph was taken: as given, or from place and time, completed by EXIF entries."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

from skyoptics.errors import DomainError
from skyoptics.light import position
from skyoptics.light.zones import find_zone, parse_time
from skyoptics.planning import coordinates
from skyoptics.planning.answers import Body, Place
from skyoptics.planning.photo_exif import Exif


@dataclass(frozen=True)
class Light:
    """Where the body stood.

    Parameters
    ----------
    azimuth_deg, elevation_deg : float
        Of its centre, apparent.
    source : str
        What it rests on.
    time : datetime or None
        With its offset; None where the position was given.
    place : Place or None
        Likewise.
    notes : tuple of str
        What to know of it.
    """

    azimuth_deg: float
    elevation_deg: float
    source: str
    time: datetime | None = None
    place: Place | None = None
    notes: tuple[str, ...] = ()


def find(
    exif: Exif,
    body: Body = "sun",
    latitude: str | None = None,
    longitude: str | None = None,
    height_m: float | None = None,
    time: str | None = None,
    zone: str | None = None,
    azimuth_deg: float | None = None,
    elevation_deg: float | None = None,
) -> Light:
    """Return where the body stood.

    Parameters
    ----------
    exif : Exif
        Used for what is not given.
    body : {"sun", "moon"}
    latitude, longitude : str, optional
        In the usual spellings (`skyoptics.planning.coordinates`).
    height_m : float, optional
        Above the sea.
    time : str, optional
        ISO 8601 (`skyoptics.light.zones.parse_time`).
    zone : str, optional
        Of a time without offset.
    azimuth_deg, elevation_deg : float, optional
        Of the body itself, instead of place and time.

    Raises
    ------
    DomainError
        If something is missing, given by half or given twice.
    """
    given = azimuth_deg is not None or elevation_deg is not None
    if given and not (latitude is None and longitude is None and time is None):
        raise DomainError(
            f"the {body} is given twice: by azimuth and elevation, and by place or time; leave out one of them"
        )
    if azimuth_deg is not None and elevation_deg is not None:
        return Light(azimuth_deg % 360.0, elevation_deg, "given")
    if given:
        missing = "--sun-azimuth-deg" if azimuth_deg is None else "--sun-elevation-deg"
        raise DomainError(f"the {body}'s position needs azimuth and elevation: {missing} is missing")
    place, place_notes = _place(exif, latitude, longitude, height_m)
    moment, time_notes = _time(exif, time, zone)
    found = (position.sun if body == "sun" else position.moon)(
        place.latitude_deg, place.longitude_deg, moment, place.height_m
    )
    notes = [*place_notes, *time_notes]
    if found.elevation_deg < 0.0:
        notes.append(
            f"the {body} was {-found.elevation_deg:.2f}° below the horizon then: are place, time and offset right?"
        )
    source = f"place: {'EXIF' if place_notes else 'given'}; time: {'EXIF' if time_notes else 'given'}"
    return Light(found.azimuth_deg, found.elevation_deg, source, moment, place, tuple(notes))


def _place(exif: Exif, latitude: str | None, longitude: str | None, height_m: float | None) -> tuple[Place, list[str]]:
    """Return the place, and a note where it is the file's."""
    if latitude is not None and longitude is not None:
        where = coordinates.parse_pair(latitude, longitude)
        height = height_m if height_m is not None else where.height_m or 0.0
        return Place(where.latitude_deg, where.longitude_deg, height), []
    if latitude is not None or longitude is not None:
        raise DomainError(
            f"a place needs latitude and longitude: {'--lat' if latitude is None else '--lon'} is missing"
        )
    if exif.latitude_deg is None or exif.longitude_deg is None:
        raise DomainError(
            "no place: the EXIF entries hold none; give --lat and --lon (and --time), or --sun-azimuth-deg and "
            "--sun-elevation-deg"
        )
    height = height_m if height_m is not None else exif.height_m or 0.0
    return Place(exif.latitude_deg, exif.longitude_deg, height), ["the place is that of the EXIF entries"]


def _time(exif: Exif, time: str | None, zone: str | None) -> tuple[datetime, list[str]]:
    """Return the instant, and a note where it is the file's."""
    if time is not None:
        return parse_time(time, zone), []
    taken = exif.taken
    if taken is not None and taken.utcoffset() is not None:
        moment = taken if zone is None else taken.astimezone(find_zone(zone))
        return moment, [f"the time is that of the EXIF entries: {moment.isoformat(timespec='seconds')}"]
    if taken is not None and zone is not None:
        moment = parse_time(taken, zone)
        return moment, [f"the time is that of the EXIF entries, read in {zone}: {moment.isoformat(timespec='seconds')}"]
    if exif.satellite_time is not None:
        moment = exif.satellite_time if zone is None else exif.satellite_time.astimezone(find_zone(zone))
        return moment, [f"the time is that of the EXIF position: {moment.isoformat(timespec='seconds')}"]
    if taken is not None:
        raise DomainError(
            f"the EXIF entries give the time {taken.isoformat(timespec='seconds')} without its offset from UTC: add the zone of "
            f"the camera's clock, as in --tz Europe/Zurich, or give --time {taken.isoformat(timespec='seconds')}+02:00"
        )
    raise DomainError(
        "no time: the EXIF entries hold none; give --time 2027-05-12T19:40+02:00, or --sun-azimuth-deg and --sun-elevation-deg"
    )
