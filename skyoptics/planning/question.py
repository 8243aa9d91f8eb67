"""One question of ``skyoptics when``, and how it is answered."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from datetime import datetime
from typing import Any, Literal, NamedTuple

from skyoptics.errors import DomainError
from skyoptics.planning import alignment, cautions, windows
from skyoptics.planning.answers import Meeting, Place, Plan, Standing, Subject
from skyoptics.planning.days import to_minute
from skyoptics.planning.features import Feature
from skyoptics.planning.miss import Miss, nearest_height
from skyoptics.planning.place import Zone
from skyoptics.planning.subject import hidden
from skyoptics.planning.words import direction

Part = Literal["bow", "foot", "crown"]


@dataclass(frozen=True)
class Filters:
    """What a window must have besides standing above the horizon.

    Parameters
    ----------
    sun_height_deg : (float, float) or None
        Lowest and highest elevation of the sun (or moon).
    least_share : float
        Of the feature's length above the horizon, 0 to 1.
    least_moon : float
        Lit share of the moon's disc, 0 to 1.
    holds : callable or None
        Standing → bool, such as whether it fits a lens.
    """

    sun_height_deg: tuple[float, float] | None = None
    least_share: float = 0.0
    least_moon: float = 0.0
    holds: Callable[[Standing], bool] | None = None

    @property
    def words(self) -> tuple[str, ...]:
        """What is filtered by, in words."""
        named = {
            "the height": self.sun_height_deg is not None,
            "the share above the horizon": self.least_share > 0.0,
            "the moon's lit share": self.least_moon > 0.0,
            "the lens": self.holds is not None,
        }
        return tuple(name for name, used in named.items() if used)


@dataclass(frozen=True)
class Question:
    """What is asked.

    Parameters
    ----------
    place : Place
        The observer.
    zone : Zone
        Of all times.
    begin, end : datetime
        Between which to look.
    feature : Feature
        What is to stand.
    filters : Filters
        What else it must have.
    subject : Subject or None
        What is to be met.
    part : {"bow", "foot", "crown"}
        By which part.
    tolerance_deg : float
        How near.
    horizon : object or None
        With ``elevation(azimuth)``; None for a flat one.
    pressure_hpa, temperature_c : float
        Of the air at the place.
    """

    place: Place
    zone: Zone
    begin: datetime
    end: datetime
    feature: Feature
    filters: Filters = Filters()
    subject: Subject | None = None
    part: Part = "bow"
    tolerance_deg: float = 0.5
    horizon: Any = None
    pressure_hpa: float = 1013.25
    temperature_c: float = 10.0


class Answer(NamedTuple):
    """A plan; how near the sun came where there is no window; and what to say where nothing was found, else empty."""

    plan: Plan
    miss: Miss | None
    nothing: str


def answer(asked: Question) -> Answer:
    """Return the answer to a question.

    Parameters
    ----------
    asked : Question
        Checked, save what the search itself checks.

    Returns
    -------
    Answer

    Raises
    ------
    DomainError
        For a lit share of the moon asked of what the sun lights, and as the search does.
    """
    if asked.filters.least_moon > 0.0 and asked.feature.body != "moon":
        raise DomainError(
            f"the sun lights {asked.feature.name}: the moon's lit share says nothing about it; leave --least-moon out, or take "
            "--feature moonbow"
        )
    found = _windows(asked, asked.filters)
    meetings: tuple[Meeting, ...] = ()
    nearest: Meeting | None = None
    if asked.subject is not None:
        meetings, nearest = alignment.find(
            asked.place,
            asked.zone.zone,
            asked.begin,
            asked.end,
            asked.feature,
            asked.subject,
            asked.part,
            asked.tolerance_deg,
            **_common(asked, asked.filters),
        )
    plan = Plan(
        place=asked.place,
        zone=asked.zone.zone.key,
        begin=asked.begin,
        end=asked.end,
        feature=asked.feature.name,
        title=asked.feature.title[:1].upper() + asked.feature.title[1:],
        radius_deg=asked.feature.radius_deg,
        windows=found,
        subject=asked.subject,
        meetings=meetings,
        nearest_miss=None if meetings else nearest,
        notes=_notes(asked),
    )
    miss = None if found else _miss(asked)
    return Answer(plan, miss, _nothing(asked, plan, miss))


def _windows(asked: Question, filters: Filters) -> Any:
    """Return the windows that pass some filters."""
    return windows.find(asked.place, asked.zone.zone, asked.begin, asked.end, asked.feature, **_common(asked, filters))


def _common(asked: Question, filters: Filters) -> dict[str, Any]:
    """Return what both searches are told."""
    return {
        "horizon": asked.horizon,
        "pressure_hpa": asked.pressure_hpa,
        "temperature_c": asked.temperature_c,
        "sun_height_deg": filters.sun_height_deg,
        "least_share": filters.least_share,
        "least_moon": filters.least_moon,
        "holds": filters.holds,
    }


def _miss(asked: Question) -> Miss:
    """Return how near the sun or moon came to the heights that were wanted."""
    low, high = asked.feature.limits_deg or (0.0, 90.0)
    if asked.filters.sun_height_deg is not None:
        own_low, own_high = asked.filters.sun_height_deg
        if max(low, own_low) > min(high, own_high):
            raise DomainError(
                f"{asked.feature.title} stands with {asked.feature.body} heights from {low:.2f}° to {high:.2f}°, none of "
                f"which lies within {own_low:g} to {own_high:g}°; ask for other heights"
            )
        low, high = max(low, own_low), min(high, own_high)
    return nearest_height(
        asked.place, asked.begin, asked.end, asked.feature.body, low, high, asked.pressure_hpa, asked.temperature_c
    )


def _nothing(asked: Question, plan: Plan, miss: Miss | None) -> str:
    """Return what to say where nothing was found; empty where something was."""
    title, body = plan.title, asked.feature.body
    if miss is not None:
        time = to_minute(miss.time).isoformat(timespec="minutes")
        height = f"the {body} at {miss.elevation_deg:.2f}° in the {direction(miss.azimuth_deg)}"
        wanted = f"{miss.low_deg:.2f}° to {miss.high_deg:.2f}°"
        if miss.missing_deg > 0.0:
            return (
                f"nothing found: {title} needs the {body} at {wanted}; nearest miss {time}, {height}: {miss.missing_deg:.2f}° "
                "outside"
            )
        without = len(_windows(asked, Filters())) if asked.filters.words else 0
        if without:
            return (
                f"nothing found: {without} window{'s' if without > 1 else ''} without the filters, none with them; loosen "
                + " or ".join(asked.filters.words)
            )
        return f"nothing found: the {body}'s height would do ({time}, {height}), but the horizon hides the feature"
    if asked.subject is None or plan.meetings:
        return ""
    near = plan.nearest_miss
    if near is None:
        return f"nothing found: while {title} stands, its {asked.part} never has a point above the horizon to meet the subject"
    time = to_minute(near.best.time).isoformat(timespec="minutes")
    high = asked.subject.elevation_deg
    hint = ""
    if asked.part == "foot" and asked.horizon is None and abs(high) > asked.tolerance_deg:
        hint = f"; a foot lies on the horizon, the subject {high:.2f}° from it: take a larger tolerance or part bow"
    return (
        f"nothing found: {title} ({asked.part}) does not come within {asked.tolerance_deg:g}° of the subject; nearest miss "
        f"{time}, {near.distance_deg:.2f}° away{hint}"
    )


def _notes(asked: Question) -> tuple[str, ...]:
    """Return warnings and cautions."""
    notes = [asked.zone.note] if asked.zone.note else []
    if asked.feature.body == "moon" and asked.filters.least_moon < 0.5:
        notes.append(
            "By a moon less than half lit a bow or halo is seldom bright enough to be seen (common practice, no source)."
        )
    if asked.subject is not None:
        if hidden(asked.place, asked.subject):
            notes.append("The earth's curve hides the subject from here, even over open sea.")
        elif asked.subject.elevation_deg < 0.0:
            notes.append("The subject is lower than the eye's level: what meets it must be seen against land or sea.")
    return (*notes, *cautions.for_feature(asked.feature.name, asked.feature.body))
