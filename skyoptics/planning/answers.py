"""What planning answers with: standings, windows, meetings and the plan that holds them.

Degrees and aware datetimes throughout: these records are what people read. Azimuths lie in 0 to 360.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import datetime
from typing import Literal

Body = Literal["sun", "moon"]


@dataclass(frozen=True)
class Place:
    """Where the observer stands.

    Parameters
    ----------
    latitude_deg, longitude_deg : float
        North and east positive.
    height_m : float
        Of the eye above the sea.
    name : str
        Empty where it has none.
    """

    latitude_deg: float
    longitude_deg: float
    height_m: float = 0.0
    name: str = ""


@dataclass(frozen=True)
class Standing:
    """How a feature stands at an instant.

    Parameters
    ----------
    time : datetime
        With its zone.
    sun_azimuth_deg, sun_elevation_deg : float
        Apparent, of the centre of the body that lights it (the moon for a moonbow).
    crown_elevation_deg : float
        Of the feature's highest point.
    crown_azimuth_deg : float
        Of the same point.
    foot_azimuths_deg : tuple of float
        Where the feature meets the horizon, left one first as seen by the observer; empty where it does not.
    share_up : float
        Part of the feature's length that is above the horizon, 0 to 1.
    """

    time: datetime
    sun_azimuth_deg: float
    sun_elevation_deg: float
    crown_elevation_deg: float
    crown_azimuth_deg: float
    foot_azimuths_deg: tuple[float, ...]
    share_up: float


@dataclass(frozen=True)
class Window:
    """A stretch of time in which a feature can stand.

    Parameters
    ----------
    feature : str
        Its name.
    body : {"sun", "moon"}
        What lights it.
    start, best, end : Standing
        Ends of the window, and where its crown is highest.
    weak : bool
        Whether the best is within 1° of a limit of the sun's height at which the feature fades.
    moon_illuminated : float or None
        Share of the moon's disc that is lit, at best; None for the sun.
    note : str
        What to know of this window, such as an end given by the dates asked for.
    """

    feature: str
    body: Body
    start: Standing
    best: Standing
    end: Standing
    weak: bool = False
    moon_illuminated: float | None = None
    note: str = ""


@dataclass(frozen=True)
class Meeting:
    """A time at which part of a feature meets a subject.

    Parameters
    ----------
    feature : str
        Its name.
    part : {"bow", "foot", "crown"}
        What meets the subject: any point of the feature, a foot, the crown.
    start, best, end : Standing
        While the distance is within the tolerance, and where it is least.
    distance_deg : float
        Least distance, on the sky.
    """

    feature: str
    part: Literal["bow", "foot", "crown"]
    start: Standing
    best: Standing
    end: Standing
    distance_deg: float


@dataclass(frozen=True)
class Subject:
    """What is to be met.

    Parameters
    ----------
    azimuth_deg, elevation_deg : float
        As seen from the place, apparent.
    distance_m : float or None
        From the place, where the subject has coordinates.
    latitude_deg, longitude_deg, height_m : float or None
        Of the subject, where it was given so.
    """

    azimuth_deg: float
    elevation_deg: float
    distance_m: float | None = None
    latitude_deg: float | None = None
    longitude_deg: float | None = None
    height_m: float | None = None


@dataclass(frozen=True)
class Plan:
    """All answers to one question.

    Parameters
    ----------
    place : Place
        The observer.
    zone : str
        Name of the zone of all times.
    begin, end : datetime
        What was looked through.
    feature : str
        Its name.
    title : str
        Its name in words.
    radius_deg : float or None
        Angular radius of a bow's upper edge; None for what has none.
    windows : tuple of Window
        In order of time.
    subject : Subject or None
        What was to be met.
    meetings : tuple of Meeting
        In order of time; empty without a subject.
    nearest_miss : Meeting or None
        The nearest approach, where nothing met the subject.
    notes : tuple of str
        Warnings and cautions.
    """

    place: Place
    zone: str
    begin: datetime
    end: datetime
    feature: str
    title: str
    radius_deg: float | None
    windows: tuple[Window, ...]
    subject: Subject | None = None
    meetings: tuple[Meeting, ...] = ()
    nearest_miss: Meeting | None = None
    notes: tuple[str, ...] = field(default=())
