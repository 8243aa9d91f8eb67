"""Captions: what a picture shows, by what light and particles, and what is not as in nature; what to look for; cautions.

`write` speaks from a report alone, `what_to_look_for` and `cautions` from the physics before anything is traced.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from datetime import datetime
from typing import Any

import numpy as np

from skyoptics.crystals.arc_regions import circle_radius, parhelion_azimuth, tangent_join
from skyoptics.crystals.arcs import feature
from skyoptics.crystals.sorting import sorter
from skyoptics.geometry.axes import angle_between, azimuth_elevation
from skyoptics.optics import bows
from skyoptics.rendering import alt_text, phrases
from skyoptics.rendering.build import Job
from skyoptics.rendering.clouds import CrystalSheet
from skyoptics.rendering.rain import DropSheet
from skyoptics.units import DEG
from skyoptics.words.table import check_language, listed, number, say, sentence

_NAMES = {2: "primary_bow", 3: "secondary_bow"}
_MOST_FEATURES, _MOST_PARTICLES, _MOST_POINTS = 8, 3, 4


def write(report: Mapping[str, Any], lang: str = "en") -> str:
    """Return the caption of a picture.

    Parameters
    ----------
    report : mapping
        Of a render, with `shows` in it (`skyoptics.rendering.shows`).
    lang : str
        One of `skyoptics.words.table.languages`.

    Returns
    -------
    str
        Three or four sentences: what is seen; where the sun or moon stands; for which particles it was computed; what
        differs from nature, if anything does.

    Raises
    ------
    DomainError
        For a language that is not there, or a report without `shows`.
    """
    check_language(lang)
    shown = phrases.facts(report)
    sentences = [
        alt_text.what(shown, lang, _MOST_FEATURES, shown["angles_deg"]),
        phrases.light(shown["light"], lang),
        say("picture.computed", lang, particles=phrases.particles(shown["particles"], lang, _MOST_PARTICLES)),
    ]
    if points := phrases.unlike(shown["unlike"], shown["light"]["body"], lang, _MOST_POINTS):
        sentences.append(say("picture.unlike", lang, points=points))
    if report.get("today"):
        sentences.append(report["today"])
    return " ".join(sentence(text) for text in sentences)


def rights(report: Mapping[str, Any], lang: str = "en") -> str:
    """Return the lines on author and licence of a report's `author` and `licence`; empty where it has neither."""
    lines = [say(f"picture.{key}", lang, **{key: report[key]}) for key in ("author", "licence") if report.get(key)]
    return "\n".join(lines)


def page(report: Mapping[str, Any], lang: str = "en") -> str:
    """Return the text that lies beside a picture: title, caption, alt text, author and licence, parted by blank lines."""
    alt = say("picture.alt", lang, text=alt_text.write(report, lang))
    parts = [report.get("title"), write(report, lang), alt, rights(report, lang)]
    return "\n\n".join(part for part in parts if part) + "\n"


def today(
    name: str,
    start: datetime | None,
    best: datetime | None,
    end: datetime | None,
    elevation_deg: float = 0.0,
    azimuth_deg: float = 0.0,
    body: str = "sun",
    lang: str = "en",
) -> str:
    """Return the sentence "To see this today", from a window of time.

    Parameters
    ----------
    name : str
        Of the feature, a key of the group "feature" of `skyoptics.words.table`.
    start, best, end : datetime or None
        Ends of the window and its best time, in the zone they are to be told in; None where there is no window today.
    elevation_deg, azimuth_deg : float
        Of the sun or moon at best.
    body : str
        "sun" or "moon".
    lang : str
        Language.

    Returns
    -------
    str
        That the feature does not form, where any of the times is None.
    """
    words = {"feature": say(f"feature.{name}", lang), "body": say(f"body.{body}", lang)}
    if start is None or best is None or end is None:
        return say("today.never", lang, **words)
    times = {key: f"{time:%H:%M}" for key, time in (("start", start), ("best", best), ("end", end))}
    point = phrases.compass_point(azimuth_deg, lang)
    return say("today.window", lang, height=elevation_deg, azimuth=azimuth_deg % 360.0, point=point, **words, **times)


def what_to_look_for(job: Job, lang: str = "en") -> str:
    """Return one sentence on what a picture shows and where.

    Parameters
    ----------
    job : Job
        The scene as physics.
    lang : str
        Language.
    """
    azimuth, elevation = azimuth_elevation(-job.sources[0].direction)
    middle = job.bins.edges[np.argmin(np.abs(job.bins.centre - 600e-9))].mean()
    found = []
    for sheet in (sheet for sheet in job.sheets if isinstance(sheet, DropSheet)):
        for order in (p for p in sheet.orders if p in _NAMES):
            angle = np.pi - float(bows.scattering_angle(sheet.index(middle).real, order))
            if not np.isfinite(angle):  # no bow of this order at this index
                continue
            top = float(elevation) + angle
            if top > 0.0 or job.directions.project(-job.sources[0].direction)[0] > 0.0:
                name = say(f"feature.{_NAMES[order]}", lang)
                found.append(say("look.bow", lang, feature=name, angle=angle / DEG, height=_height(top, lang)))
    halos = list(dict.fromkeys(_halos(job, lang)))
    if not found and halos:
        sun = float(azimuth_elevation(job.sources[0].direction)[0] / DEG)
        body = say("body.moon" if job.by_moon else "body.sun", lang)
        return say("look.around", lang, body=body, azimuth=round(sun) % 360, things="; ".join(halos))
    if not found:
        return say("look.nothing", lang)
    towards = round(float(azimuth / DEG)) % 360
    return say("look.towards", lang, azimuth=towards, things="; ".join(dict.fromkeys(found)))


def _halos(job: Job, lang: str) -> Iterator[str]:
    """Yield the main halos of a job's crystals, from closed forms."""
    height = float(azimuth_elevation(job.sources[0].direction)[1])
    middle = job.bins.edges[np.argmin(np.abs(job.bins.centre - 600e-9))].mean()
    for sheet in (sheet for sheet in job.sheets if isinstance(sheet, CrystalSheet)):
        index = float(np.atleast_1d(sheet.index(middle).real)[0])
        law = sheet.orientation.name
        if law == "random":
            names = sorter(sheet.shapes[0].face_normals, law, height, index).names
            radii = [circle_radius(feature(name).crystals[0].sequences[0], index) / DEG for name in names[1:]]
            if radii:
                told = [f"{number(radius, lang, '.1f')}°" for radius in sorted(radii)]
                yield say("look.circles", lang, radii=listed(told, lang))
        elif law == "plate":
            away = parhelion_azimuth(height, index)
            if np.isfinite(away):
                yield say("look.sundogs", lang, angle=away / DEG, height=_height(height, lang))
            square = index**2 - np.cos(height) ** 2
            if height > 0.0 and square <= 1.0:
                yield say("look.zenith_arc", lang, angle=float(np.arcsin(np.sqrt(square))) / DEG)
        elif law in ("column", "parry"):
            joined = height >= tangent_join(index)
            yield say("look.joined" if joined else "look.tangents", lang, angle=circle_radius((3, 5), index) / DEG)


def cautions(job: Job, lang: str = "en") -> list[str]:
    """Return the cautions for whoever goes out to see this."""
    result = []
    if not job.by_moon and _sun_near_frame(job):
        result.append(say("caution.sun", lang))
    if any(isinstance(sheet, DropSheet) for sheet in job.sheets):
        result.append(say("caution.shower", lang))
    return result


def _height(elevation: float, lang: str) -> str:
    return say("look.high" if elevation >= 0.0 else "look.low", lang, height=abs(elevation) / DEG)


def _sun_near_frame(job: Job, margin: float = 15.0 * DEG) -> bool:
    """Return whether the sun stands in the frame or within a margin of a coarse grid over it."""
    rows, columns = job.directions.shape
    grid = job.directions.unproject(np.linspace(0, rows - 1, 25)[:, None], np.linspace(0, columns - 1, 25)[None, :])
    return bool(np.nanmin(angle_between(grid, job.sources[0].direction)) < margin)
