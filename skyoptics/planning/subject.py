"""Where a subject is seen from a place: azimuth, distance and elevation over a curved earth, with the bending of the line of sight.

Straight lines between points on and above the WGS84 ellipsoid; heights above the sea are taken as heights above it. The line of
sight is bent like a circle of radius R / k.

References
----------
Coefficient k = 0.13 of terrestrial refraction: C. F. Gauss's mean from the survey of Hanover, common surveying practice (from
memory). World Geodetic System 1984: NIMA TR8350.2. From the centre of the earth back to latitude: B. R. Bowring, Survey
Review 23, 323 (1976) (from memory).
"""

from __future__ import annotations

import math

from skyoptics.errors import DomainError
from skyoptics.planning.answers import Place, Subject
from skyoptics.units import DEG

REFRACTION = 0.13
"""Earth's radius ÷ radius of curvature of a level line of sight, by day."""
FARTHEST = 500_000.0
"""Largest distance of a subject [m]; a mountain of 8 km shows over 340 km of sea."""
NEAREST = 1.0
"""Smallest distance [m]."""

_SEMI_MAJOR = 6378137.0  # [m]
_FLATTENING = 1.0 / 298.257223563
_SQUARE = _FLATTENING * (2.0 - _FLATTENING)  # of the first eccentricity
_MEAN_RADIUS = 6371008.8  # [m]

Vector = tuple[float, float, float]


def toward(azimuth_deg: float, elevation_deg: float) -> Subject:
    """Return a subject given by its direction.

    Parameters
    ----------
    azimuth_deg : float
        Clockwise from north, any turn.
    elevation_deg : float
        Apparent, −90 to 90.

    Raises
    ------
    DomainError
        For other elevations, and what is no number.
    """
    if not (math.isfinite(azimuth_deg) and -90.0 <= elevation_deg <= 90.0):
        raise DomainError(
            f"the subject's elevation must be -90 to 90 degrees, got {elevation_deg:g} at {azimuth_deg:g}"
        )
    return Subject(azimuth_deg % 360.0, elevation_deg)


def seen_from(place: Place, latitude_deg: float, longitude_deg: float, height_m: float) -> Subject:
    """Return where a subject at known coordinates is seen.

    Parameters
    ----------
    place : Place
        The observer; its height is that of the eye above the sea.
    latitude_deg, longitude_deg : float
        Of the subject, north and east positive, geodetic (WGS84).
    height_m : float
        Of the subject above the sea.

    Returns
    -------
    Subject
        Apparent direction and straight distance.

    Raises
    ------
    DomainError
        Nearer than 1 m or farther than 500 km.

    Notes
    -----
    The apparent elevation is the geometric one and k d / 2R.
    """
    here = position(place.latitude_deg, place.longitude_deg, place.height_m)
    there = position(latitude_deg, longitude_deg, height_m)
    line = (there[0] - here[0], there[1] - here[1], there[2] - here[2])
    east, north, up = _local(place, line)
    level, distance = math.hypot(east, north), math.hypot(east, north, up)
    if not NEAREST <= distance <= FARTHEST:
        hint = "; the subject has the place's own coordinates" if distance < NEAREST else "; were coordinates swapped?"
        raise DomainError(
            f"the subject is {distance / 1000.0:.4g} km away: {NEAREST:g} m to {FARTHEST / 1000.0:g} km are allowed{hint}"
        )
    elevation = math.atan2(up, level) + REFRACTION * distance / (2.0 * _MEAN_RADIUS)
    azimuth = math.atan2(east, north) / DEG % 360.0
    return Subject(azimuth, min(elevation / DEG, 90.0), distance, latitude_deg, longitude_deg, height_m)


def hidden(place: Place, subject: Subject) -> bool:
    """Say whether the sea's own curve hides a subject, whatever the land between.

    Parameters
    ----------
    place : Place
        The observer.
    subject : Subject
        With coordinates; one given by its direction is never hidden.

    Returns
    -------
    bool
        Whether the distance is more than those of both horizons, √(2 h R / (1 − k)), together.
    """
    if subject.distance_m is None or subject.height_m is None:
        return False
    radius = _MEAN_RADIUS / (1.0 - REFRACTION)
    reach = sum(math.sqrt(2.0 * radius * max(height, 0.0)) for height in (place.height_m, subject.height_m))
    return subject.distance_m > reach > 0.0 or (reach == 0.0 and subject.distance_m > 5000.0)


def along(place: Place, azimuth_deg: float, elevation_deg: float, distance_m: float) -> tuple[float, float]:
    """Return what lies under a point of a straight line of sight.

    Parameters
    ----------
    place : Place
        Where the line begins.
    azimuth_deg, elevation_deg : float
        Its direction.
    distance_m : float
        Along the line.

    Returns
    -------
    latitude_deg, longitude_deg : float
        Geodetic, longitude −180 to 180.
    """
    azimuth, elevation = azimuth_deg * DEG, elevation_deg * DEG
    level = math.cos(elevation) * distance_m
    east, north, up = level * math.sin(azimuth), level * math.cos(azimuth), math.sin(elevation) * distance_m
    sin_f, cos_f, sin_l, cos_l = _turns(place)
    start = position(place.latitude_deg, place.longitude_deg, place.height_m)
    x = start[0] - sin_l * east - cos_l * sin_f * north + cos_l * cos_f * up
    y = start[1] + cos_l * east - sin_l * sin_f * north + sin_l * cos_f * up
    z = start[2] + cos_f * north + sin_f * up
    return _geodetic((x, y, z))


def position(latitude_deg: float, longitude_deg: float, height_m: float) -> Vector:
    """Return a point as a vector from the earth's centre.

    Parameters
    ----------
    latitude_deg, longitude_deg, height_m : float
        Geodetic, above the ellipsoid.

    Returns
    -------
    tuple of float
        Toward 0° N 0° E, 0° N 90° E and the north pole [m].
    """
    latitude, longitude = latitude_deg * DEG, longitude_deg * DEG
    normal = _SEMI_MAJOR / math.sqrt(1.0 - _SQUARE * math.sin(latitude) ** 2)
    level = (normal + height_m) * math.cos(latitude)
    return (
        level * math.cos(longitude),
        level * math.sin(longitude),
        (normal * (1.0 - _SQUARE) + height_m) * math.sin(latitude),
    )


def _turns(place: Place) -> tuple[float, float, float, float]:
    """Return sine and cosine of latitude and longitude."""
    latitude, longitude = place.latitude_deg * DEG, place.longitude_deg * DEG
    return math.sin(latitude), math.cos(latitude), math.sin(longitude), math.cos(longitude)


def _local(place: Place, line: Vector) -> Vector:
    """Return a vector as east, north, up of a place."""
    sin_f, cos_f, sin_l, cos_l = _turns(place)
    x, y, z = line
    outward = cos_l * x + sin_l * y
    return -sin_l * x + cos_l * y, -sin_f * outward + cos_f * z, cos_f * outward + sin_f * z


def _geodetic(point: Vector) -> tuple[float, float]:
    """Return latitude and longitude; Bowring's step, here good to 1e-9° up to some hundred km."""
    x, y, z = point
    axis = math.hypot(x, y)
    semi_minor = _SEMI_MAJOR * (1.0 - _FLATTENING)
    reduced = math.atan2(z * _SEMI_MAJOR, axis * semi_minor)
    latitude = math.atan2(
        z + _SQUARE / (1.0 - _SQUARE) * semi_minor * math.sin(reduced) ** 3,
        axis - _SQUARE * _SEMI_MAJOR * math.cos(reduced) ** 3,
    )
    return latitude / DEG, math.atan2(y, x) / DEG
