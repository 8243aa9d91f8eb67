"""Pieces of sentences that captions and alt texts share, made of the facts of a report."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from skyoptics.errors import DomainError
from skyoptics.words.table import listed, number, say

COMPASS = ("N", "NE", "E", "SE", "S", "SW", "W", "NW")
_MILLIMETRES = 100.0
"""Drop radius from which it is told in millimetres [µm]."""


def facts(report: Mapping[str, Any]) -> Mapping[str, Any]:
    """Return what a report says the picture shows.

    Raises
    ------
    DomainError
        If it does not say.
    """
    if not isinstance(report.get("shows"), Mapping):
        raise DomainError('this report does not say what its picture shows ("shows" is missing): render the scene anew')
    shown: Mapping[str, Any] = report["shows"]
    return shown


def features(
    names: Sequence[str], lang: str, most: int, angles: Mapping[str, float] | None = None, body: str = "sun"
) -> str:
    """Return features as a list, bows with their angle where it is given, the rest counted."""
    things = []
    for name in names[:most]:
        thing = say(f"feature.{name}", lang)
        if angles and name in angles:
            centre = say("feature.antilunar_point" if body == "moon" else "feature.antisolar_point", lang)
            thing = say("picture.angle", lang, feature=thing, angle=angles[name], centre=centre)
        things.append(thing)
    if len(names) > most:
        return say("listed.more", lang, items=", ".join(things), count=len(names) - most)
    return listed(things, lang)


def compass_point(azimuth_deg: float, lang: str) -> str:
    """Return the nearest of eight compass points."""
    return say(f"compass.{COMPASS[round(azimuth_deg / 45.0) % 8]}", lang)


def size(micrometres: float, lang: str) -> str:
    """Return a length in micrometres or millimetres."""
    if micrometres >= _MILLIMETRES:
        return say("size.mm", lang, size=micrometres / 1000.0)
    return say("size.um", lang, size=micrometres)


def particle(one: Mapping[str, Any], lang: str, short: bool = False) -> str:
    """Return one kind of particle: size, shape, orientation; its kind and orientation alone where it is to be short."""
    if one["kind"] == "drops":
        radius = size(one["radius_um"], lang)
        spread = one["spread"]
        key = "alike" if spread == 0.0 else "spread" if spread is None else "narrow"
        if short:
            key = "many" if spread is None else "short"
        parts = [say(f"drops.{key}", lang, radius=radius, spread=100.0 * (spread or 0.0))]
        return ", ".join(parts + [say("drops.flattened", lang)] * (one["flattened"] and not short))
    parts = [say(f"crystals.{one['habit']}", lang)]
    if not short:
        parts.append(say("crystals.diameter", lang, diameter=size(one["diameter_um"], lang)))
        if one["aspect"] is not None:
            parts.append(say("crystals.aspect", lang, aspect=one["aspect"]))
    parts.append(say(f"orientation.{one['orientation']}", lang))
    if one["tilt_law"] is not None and not short:
        tilt = one["tilt_deg"]
        key = (
            "table" if tilt is None else "straight" if tilt == 0.0 else "cone" if one["tilt_law"] == "cone" else "tilt"
        )
        parts.append(say(f"orientation.{key}", lang, tilt=tilt or 0.0))
    return ", ".join(parts)


def particles(these: Sequence[Mapping[str, Any]], lang: str, most: int, short: bool = False) -> str:
    """Return kinds of particles one after the other, each once, the rest counted."""
    told = list(dict.fromkeys(particle(one, lang, short) for one in these))
    if len(told) > most:
        return say("listed.more", lang, items="; ".join(told[:most]), count=len(told) - most)
    return "; ".join(told)


def light(shown: Mapping[str, Any], lang: str) -> str:
    """Return where the sun or moon stands, and from where it is seen so."""
    body = say(f"body.{shown['body']}", lang)
    height, azimuth = shown["elevation_deg"], shown["azimuth_deg"]
    key = "light.up" if height >= 0.0 else "light.down"
    text = say(key, lang, body=body, height=abs(height), azimuth=azimuth, point=compass_point(azimuth, lang))
    place = shown.get("place")
    if place is None:
        return text
    north, east = place["latitude_deg"], place["longitude_deg"]
    latitude = f"{number(abs(north), lang, '.2f')}° {say('compass.N' if north >= 0.0 else 'compass.S', lang)}"
    longitude = f"{number(abs(east), lang, '.2f')}° {say('compass.E' if east >= 0.0 else 'compass.W', lang)}"
    time = place["time"].replace("T", " ")
    return f"{text}, {say('light.seen_from', lang, latitude=latitude, longitude=longitude, time=time)}"


def unlike(points: Sequence[Mapping[str, Any]], body: str, lang: str, most: int) -> str:
    """Return in what a picture differs from nature."""
    told = []
    for point in points[:most]:
        values = {key: value for key, value in point.items() if key != "key"}
        for key in ("wavelengths_nm", "orders"):
            if key in values:
                values[key.removesuffix("_nm")] = listed([number(value, lang) for value in values.pop(key)], lang)
        told.append(say(f"unlike.{point['key']}", lang, body=say(f"body.{body}", lang), **values))
    return listed(told, lang)
