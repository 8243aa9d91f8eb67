"""Stretches of time in which a feature stands over the horizon, in days.

Over a level horizon everything turns on the body's height: the heights at which the feature is up follow from its shape, the
instants at which the body passes their ends from its track, between culminations, so that none is missed, however
short. A profile, and whatever the caller asks of a standing, are looked at in steps inside these stretches.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from datetime import datetime, timedelta, tzinfo
from itertools import pairwise

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.light import position
from skyoptics.light.position import EPOCH
from skyoptics.planning import track as tracks
from skyoptics.planning.answers import Place, Standing
from skyoptics.planning.feature import Feature
from skyoptics.planning.horizons import Horizon, all_round, floor_of, level_of
from skyoptics.planning.track import SECOND, Track
from skyoptics.planning.visible import margin
from skyoptics.units import DEG, BoolArray, FloatArray

Span = tuple[float, float]
Test = Callable[[Standing], bool]

STEP = 3.0 / 1440.0
"""Over a profile shorter stretches, and shorter gaps, may be missed [day]."""
HOLDS_STEP = 5.0 / 1440.0
"""The same of what is asked of a standing [day]."""

_BEST_STEP = 10.0 / 1440.0
_HALVINGS = 16


@dataclass(frozen=True)
class Search:
    """What is looked for, where and when; made by `prepare`.

    Parameters
    ----------
    feature : Feature
    track : Track
        Of the body that lights it.
    horizon : object or None
        See `skyoptics.planning.horizons`.
    level : float or None
        Elevation of a level horizon, None for a profile [rad].
    zone : tzinfo
        Of all times given out.
    begin, end : datetime
        What is looked through.
    """

    feature: Feature
    track: Track
    horizon: Horizon | None
    level: float | None
    zone: tzinfo
    begin: datetime
    end: datetime

    def standings(self, days: Sequence[float] | FloatArray) -> list[Standing]:
        """Return how the feature stands at some instants."""
        azimuths, elevations = self.track.apparent(np.asarray(days, dtype=np.float64))
        found = []
        for day, azimuth, elevation in zip(days, azimuths.tolist(), elevations.tolist(), strict=True):
            seen = self.feature.standing(azimuth, elevation, self.horizon, self.level)
            found.append(
                Standing(
                    self.moment(float(day)),
                    azimuth / DEG % 360.0,
                    elevation / DEG,
                    seen.crown_elevation / DEG,
                    seen.crown_azimuth / DEG % 360.0,
                    tuple(foot / DEG % 360.0 for foot in seen.feet),
                    seen.share,
                )
            )
        return found

    def moment(self, day: float) -> datetime:
        """Return an instant in the zone."""
        if day == self.track.begin:
            return self.begin.astimezone(self.zone)
        if day == self.track.end:
            return self.end.astimezone(self.zone)
        microseconds = round(day * 86400e6 / 1e3) * 1000  # what days as numbers are good for
        return (EPOCH + timedelta(microseconds=microseconds)).astimezone(self.zone)

    def whole_seconds(self, start: float, best: float, end: float) -> tuple[float, float, float]:
        """Return three instants at whole seconds inside the stretch from first to last, save where the dates cut it."""
        tiny = 1e-4  # [s]
        first = start if start == self.track.begin else math.ceil(start / SECOND - tiny) * SECOND
        last = end if end == self.track.end else math.floor(end / SECOND + tiny) * SECOND
        if first > last:  # shorter than a second
            return best, best, best
        return first, min(max(round(best / SECOND) * SECOND, first), last), last


def prepare(
    place: Place,
    zone: str | tzinfo,
    begin: datetime,
    end: datetime,
    feature: Feature,
    horizon: Horizon | None,
    pressure_hpa: float,
    temperature_c: float,
) -> Search:
    """Return a search; arguments as in `skyoptics.planning.windows.find`."""
    observer = tracks.observer_of(place, pressure_hpa, temperature_c)
    first, last = tracks.days_between(begin, end)
    followed = Track(feature.body, observer, first, last)
    return Search(feature, followed, horizon, level_of(horizon), tracks.zone_of(zone), begin, end)


def find(
    search: Search,
    sun_height_deg: tuple[float, float] | None = None,
    least_share: float = 0.0,
    least_moon: float = 0.0,
    holds: Test | None = None,
    sun_below_deg: float | None = 0.0,
) -> list[Span]:
    """Return the stretches in order of time; arguments as in `skyoptics.planning.windows.find`."""
    low, high = (-90.0, 90.0) if sun_height_deg is None else sun_height_deg
    for name, value in (("share of the arc", least_share), ("lit share of the moon", least_moon)):
        if not 0.0 <= value <= 1.0:
            raise DomainError(f"the least {name} must be between 0 and 1, got {value:g}")
    if not -90.0 <= low <= high <= 90.0:
        raise DomainError(f"sun heights must rise from -90 to 90 degrees, got {low:g} to {high:g}")
    level, feature, track = search.level, search.feature, search.track
    lowest = float(np.min(all_round(search.horizon))) if level is None else level
    wanted = feature.heights(lowest, 0.0 if level is None else least_share, (low * DEG, high * DEG))
    spans = _by_height(track, wanted)
    if feature.body == "moon" and sun_below_deg is not None and spans:
        sun = Track("sun", track.place, track.begin, track.end)
        spans = _common(spans, _by_height(sun, ((-math.pi / 2.0, sun_below_deg * DEG),)))
    if level is None:
        spans = _sifted(spans, STEP, lambda days: _shows(search, days, lowest))
    tests: list[Test] = [] if holds is None else [holds]
    if level is None and least_share > 0.0:
        tests.append(lambda standing: standing.share_up >= least_share)
    if tests:
        spans = _sifted(spans, HOLDS_STEP, lambda days: _passes(search, days, tests))
    if feature.body == "moon" and least_moon > 0.0:
        lit = [moon_illuminated(search, float(day)) >= least_moon for day in best(search, spans)]
        spans = [span for span, enough in zip(spans, lit, strict=True) if enough]
    return spans


def best(search: Search, spans: list[Span]) -> FloatArray:
    """Return of each stretch the instant at which the crown is highest, to 1 s."""
    if not spans:
        return np.empty(0)

    def crown(when: FloatArray) -> FloatArray:
        return np.nan_to_num(search.feature.curve.crown(search.track.apparent(when)[1])[0], nan=-np.inf)

    grids = [np.linspace(a, b, max(3, math.ceil((b - a) / _BEST_STEP) + 1)) for a, b in spans]
    days = np.concatenate(grids)
    heights = crown(days)
    first = np.cumsum([0, *(len(grid) for grid in grids)])
    top = np.array([i + int(np.argmax(heights[i:j])) for i, j in pairwise(first.tolist())])
    low, high = days[np.maximum(top - 1, first[:-1])], days[np.minimum(top + 1, first[1:] - 1)]
    between = tracks.highest(crown, low, high)
    return np.where(crown(between) > heights[top], between, days[top])


def moon_illuminated(search: Search, day: float) -> float:
    """Return the lit share of the moon's disc."""
    place = search.track.place
    when = EPOCH + timedelta(days=day)
    return position.moon(place.latitude / DEG, place.longitude / DEG, when, place.height).illuminated_fraction


def _by_height(track: Track, wanted: tuple[Span, ...]) -> list[Span]:
    """Return when the body is within one of some ranges of height."""
    if not wanted:
        return []
    turning = track.turning()
    edges = {edge for pair in wanted for edge in pair}
    marks = np.unique(np.concatenate([[track.begin, track.end], *(track.crossings(edge, turning) for edge in edges)]))
    height = track.apparent(0.5 * (marks[1:] + marks[:-1]))[1]
    inside = np.zeros(height.shape, dtype=bool)
    for low, high in wanted:
        inside |= (height >= low) & (height <= high)
    return [(float(marks[i]), float(marks[j])) for i, j in runs_of(inside)]


def runs_of(inside: BoolArray) -> list[tuple[int, int]]:
    """Return first and one past the last place of every run."""
    padded = np.concatenate([[False], inside, [False]])
    starts, ends = np.flatnonzero(padded[1:] & ~padded[:-1]), np.flatnonzero(padded[:-1] & ~padded[1:])
    return list(zip(starts.tolist(), ends.tolist(), strict=True))


def _common(first: list[Span], second: list[Span]) -> list[Span]:
    pairs = [(max(a[0], b[0]), min(a[1], b[1])) for a in first for b in second if a[0] < b[1] and b[0] < a[1]]
    return sorted(pairs)


def _sifted(spans: list[Span], step: float, test: Callable[[FloatArray], BoolArray]) -> list[Span]:
    """Return the parts of stretches that pass a test of many instants, ends to 0.01 s."""
    if not spans:
        return []
    grids = [np.linspace(a, b, max(2, math.ceil((b - a) / step) + 1)) for a, b in spans]
    days = np.concatenate(grids)
    new = np.zeros(len(days), dtype=bool)
    new[np.cumsum([0, *(len(grid) for grid in grids[:-1])])] = True
    ok = test(days)
    change = np.flatnonzero((ok[1:] != ok[:-1]) & ~new[1:])
    good = np.where(ok[change], days[change], days[change + 1])
    bad = np.where(ok[change], days[change + 1], days[change])
    for _ in range(_HALVINGS):
        if not change.size:
            break
        middle = 0.5 * (good + bad)
        passed = test(middle)
        good, bad = np.where(passed, middle, good), np.where(passed, bad, middle)
    edge = dict(zip(change.tolist(), good.tolist(), strict=True))
    kept = []
    for first, size in zip(np.flatnonzero(new).tolist(), map(len, grids), strict=True):
        for i, j in runs_of(ok[first : first + size]):
            kept.append((edge.get(first + i - 1, days[first + i]), edge.get(first + j - 1, days[first + j - 1])))
    return [(float(a), float(b)) for a, b in kept if b > a]


def _shows(search: Search, days: FloatArray, lowest: float) -> BoolArray:
    """Return whether the body's centre and any point of the feature are over the profile."""
    azimuth, elevation = search.track.apparent(days)
    shown = elevation >= floor_of(search.horizon, azimuth)
    if shown.any():
        over = margin(search.feature, azimuth[shown], elevation[shown], search.horizon, lowest)
        shown[shown] = over >= 0.0
    return shown


def _passes(search: Search, days: FloatArray, tests: list[Test]) -> BoolArray:
    standings = search.standings(days)
    return np.array([all(bool(test(standing)) for test in tests) for standing in standings])
