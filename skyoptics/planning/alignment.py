"""Alignments: when part of a feature meets a subject, such as a bow's foot a mill."""

from __future__ import annotations

import math
from datetime import datetime, tzinfo
from itertools import pairwise
from typing import Literal, NamedTuple

import numpy as np

from skyoptics.errors import DomainError, nearest
from skyoptics.planning import spans
from skyoptics.planning import track as tracks
from skyoptics.planning.answers import Meeting, Place, Subject
from skyoptics.planning.approach import PARTS, Distance, distance_to
from skyoptics.planning.feature import Feature
from skyoptics.planning.horizons import Horizon
from skyoptics.planning.spans import Search, Span, Test, runs_of
from skyoptics.planning.track import SECOND
from skyoptics.units import DEG, FloatArray, IntArray

Part = Literal["bow", "foot", "crown"]

STEP = 1.0 / 1440.0
"""Between looks, before turning points are refined [day]."""
SLOW_STEP = 4.0 / 1440.0
"""The same for features without a closed form."""

_CUT = 2.0 * DEG  # beyond the tolerance, more than a bow moves between two looks
_NEAR_ENDS = (1.0, 3.0, 7.0, 15.0, 30.0)  # [s]; feet run fastest where the crown sets
_HALVINGS = 24


class _Look(NamedTuple):
    """Distances [rad] at instants [day]."""

    search: Search
    away: Distance

    def __call__(self, days: FloatArray) -> FloatArray:
        return self.away(*self.search.track.apparent(days))


class _Course(NamedTuple):
    """Distances at rising instants, and to which stretch these belong; shape (n,) each."""

    days: FloatArray
    distance: FloatArray
    span: IntArray


class _Hit(NamedTuple):
    """A stretch within the tolerance [day], and the place of its least distance in the course."""

    start: float
    best: int
    end: float


def find(
    place: Place,
    zone: str | tzinfo,
    begin: datetime,
    end: datetime,
    feature: Feature,
    subject: Subject,
    part: Part = "bow",
    tolerance_deg: float = 0.5,
    *,
    horizon: Horizon | None = None,
    pressure_hpa: float = 1013.25,
    temperature_c: float = 10.0,
    sun_height_deg: tuple[float, float] | None = None,
    least_share: float = 0.0,
    least_moon: float = 0.0,
    holds: Test | None = None,
    sun_below_deg: float | None = 0.0,
) -> tuple[tuple[Meeting, ...], Meeting | None]:
    """Return when part of a feature meets a subject, while the feature stands.

    Parameters
    ----------
    place, zone, begin, end, feature
        As in `skyoptics.planning.windows.find`.
    subject : Subject
        Its azimuth and elevation are used.
    part : {"bow", "foot", "crown"}
        Any point of the feature that is above the horizon; the nearer foot; the highest point.
    tolerance_deg : float
        Distance on the sky that counts as met, 0.001 to 30.
    horizon, pressure_hpa, temperature_c, sun_height_deg, least_share, least_moon, holds, sun_below_deg
        As in `skyoptics.planning.windows.find`.

    Returns
    -------
    meetings : tuple of Meeting
        In order of time. Every stretch within the tolerance is one, however often the distance turns within it.
    nearest_miss : Meeting or None
        The nearest approach, where nothing meets the subject; None with meetings, and where the feature never stands.

    Raises
    ------
    DomainError
        As `skyoptics.planning.windows.find`, for an unknown part, for feet of what has none, and outside these ranges.

    Notes
    -----
    Distances are looked at every minute, closer towards the ends of windows, and every turning point between is refined: ends
    lie within 1 s of where the distance passes the tolerance. Features without a closed form are looked at every 4 minutes; for
    them and over profiles the accuracy is that of `skyoptics.planning.approach`.
    """
    if part not in PARTS:
        raise DomainError(f'the part must be {", ".join(PARTS)}; got "{part}"{nearest(str(part), PARTS)}')
    if not 0.001 <= tolerance_deg <= 30.0:
        raise DomainError(f"the tolerance must be between 0.001 and 30 degrees, got {tolerance_deg:g}")
    if not -90.0 <= subject.elevation_deg <= 90.0:
        raise DomainError(f"the subject's elevation must be -90 to 90 degrees, got {subject.elevation_deg:g}")
    if part == "foot" and not feature.has_feet:
        raise DomainError(f'{feature.name} has no feet: it does not cross the horizon; ask for "bow" or "crown"')
    search = spans.prepare(place, zone, begin, end, feature, horizon, pressure_hpa, temperature_c)
    found = spans.find(search, sun_height_deg, least_share, least_moon, holds, sun_below_deg)
    if not found:
        return (), None
    tolerance = tolerance_deg * DEG
    cut = tolerance + _CUT
    while True:
        look = _Look(search, distance_to(search.feature, part, _target(subject), search.horizon, search.level, cut))
        course = _course(look, found, tolerance)
        hits = _hits(look, course, tolerance)
        least = int(np.argmin(course.distance))
        # over a profile what is farther than the cut is a bound only
        if hits or search.level is not None or course.distance[least] <= cut or cut > math.pi:
            break
        cut *= 3.0
    if hits:
        return tuple(_meetings(search, course, hits, part)), None
    if not np.isfinite(course.distance[least]):
        return (), None
    day, distance = float(course.days[least]), float(course.distance[least])
    low, high = found[int(course.span[least])]
    (standing,) = search.standings([search.whole_seconds(low, day, high)[1]])
    return (), Meeting(feature.name, part, standing, standing, standing, distance / DEG)


def _target(subject: Subject) -> tuple[float, float]:
    return subject.azimuth_deg * DEG, subject.elevation_deg * DEG


def _course(look: _Look, found: list[Span], tolerance: float) -> _Course:
    """Return distances through all stretches, their turning points refined where it matters."""
    step = SLOW_STEP if look.search.feature.is_tabulated else STEP
    grids = [_grid(*span, step) for span in found]
    days = np.concatenate(grids)
    span = np.repeat(np.arange(len(grids)), [len(grid) for grid in grids])
    away = look(days)
    first, last = np.diff(span, prepend=-1) > 0, np.diff(span, append=len(grids)) > 0
    before, after = np.where(first, np.nan, np.roll(away, 1)), np.where(last, np.nan, np.roll(away, -1))
    with np.errstate(invalid="ignore"):  # inf − inf where nothing shows
        steps = np.fmax(np.abs(away - before), np.abs(after - away))
    slack = np.where(np.isfinite(steps), steps, 0.0)
    lowest = away <= np.fmin(np.nan_to_num(before, nan=np.inf), np.nan_to_num(after, nan=np.inf))
    lowest &= np.isfinite(away) & (away - slack <= max(tolerance, float(away.min())))
    highest = away >= np.fmax(np.nan_to_num(before, nan=-np.inf), np.nan_to_num(after, nan=-np.inf))
    highest &= (away <= tolerance) & (away + slack > tolerance)
    more = []
    for chosen, sign in ((np.flatnonzero(lowest), -1.0), (np.flatnonzero(highest), 1.0)):
        if chosen.size:
            low, high = np.where(first, days, np.roll(days, 1))[chosen], np.where(last, days, np.roll(days, -1))[chosen]
            refined = tracks.highest(lambda when, s=sign: s * look(when), low, high)  # type: ignore[misc]
            more.append(_Course(refined, look(refined), span[chosen]))
    parts = [_Course(days, away, span), *more]
    order = np.argsort(np.concatenate([part.days for part in parts]), kind="stable")
    return _Course(*(np.concatenate(values)[order] for values in zip(*parts, strict=True)))


def _grid(start: float, end: float, step: float) -> FloatArray:
    """Return instants a step apart, closer near the ends."""
    even = np.linspace(start, end, max(2, math.ceil((end - start) / step) + 1))
    close = np.array(_NEAR_ENDS) * SECOND
    near = np.concatenate([start + close, end - close])
    return np.unique(np.concatenate([even, near[(near > start) & (near < end)]]))


def _hits(look: _Look, course: _Course, tolerance: float) -> list[_Hit]:
    """Return the stretches within the tolerance."""
    close = course.distance <= tolerance
    runs = [(i + int(a), i + int(b)) for i, j in _stretches(course.span) for a, b in runs_of(close[i:j])]
    if not runs:
        return []
    first, last = np.array([run[0] for run in runs]), np.array([run[1] - 1 for run in runs])
    starts = _edge(look, course, tolerance, first, np.maximum(first - 1, 0))
    ends = _edge(look, course, tolerance, last, np.minimum(last + 1, len(close) - 1))
    best = [i + int(np.argmin(course.distance[i:j])) for i, j in runs]
    return [_Hit(float(a), place, float(b)) for a, place, b in zip(starts, best, ends, strict=True)]


def _stretches(span: IntArray) -> list[tuple[int, int]]:
    """Return first and one past the last place of every stretch."""
    bounds = [0, *(np.flatnonzero(np.diff(span)) + 1).tolist(), len(span)]
    return list(pairwise(bounds))


def _edge(look: _Look, course: _Course, tolerance: float, inner: IntArray, outer: IntArray) -> FloatArray:
    """Return where the distance passes the tolerance between places; the inner one where the stretch ends there."""
    same = course.span[inner] == course.span[outer]
    good, bad = course.days[inner].copy(), np.where(same, course.days[outer], course.days[inner])
    for _ in range(_HALVINGS):
        middle = 0.5 * (good + bad)
        close = look(middle) <= tolerance
        good, bad = np.where(close, middle, good), np.where(close, bad, middle)
    return good


def _meetings(search: Search, course: _Course, hits: list[_Hit], part: Part) -> list[Meeting]:
    days: list[float] = []
    for hit in hits:
        first, best, last = search.whole_seconds(hit.start, float(course.days[hit.best]), hit.end)
        days += [first, best, last]
    standings = iter(search.standings(days))
    triples = zip(standings, standings, standings, strict=True)
    return [
        Meeting(search.feature.name, part, *three, float(course.distance[hit.best]) / DEG)
        for hit, three in zip(hits, triples, strict=True)
    ]
