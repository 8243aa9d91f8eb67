"""Windows: when a bow or a halo can stand at a place."""

from __future__ import annotations

from datetime import datetime, tzinfo

from skyoptics.light.position import days_of
from skyoptics.planning import spans
from skyoptics.planning.answers import Place, Standing, Window
from skyoptics.planning.feature import Feature
from skyoptics.planning.horizons import Horizon
from skyoptics.planning.spans import Search, Span, Test
from skyoptics.units import DEG

_DAY = 1.0


def find(
    place: Place,
    zone: str | tzinfo,
    begin: datetime,
    end: datetime,
    feature: Feature,
    *,
    horizon: Horizon | None = None,
    pressure_hpa: float = 1013.25,
    temperature_c: float = 10.0,
    sun_height_deg: tuple[float, float] | None = None,
    least_share: float = 0.0,
    least_moon: float = 0.0,
    holds: Test | None = None,
    sun_below_deg: float | None = 0.0,
) -> tuple[Window, ...]:
    """Return the windows in which a feature can stand.

    A window is a stretch of time in which any point of the feature is above the horizon there and the centre of the body that
    lights it is above the horizon at its own azimuth. Over a flat horizon that is: upper edge of the feature and centre of
    the body above an apparent 0°. By moonlight the sun's centre must be below `sun_below_deg` besides. Whether there will be
    rain or ice crystals is another matter.

    Parameters
    ----------
    place : Place
        The observer.
    zone : str or tzinfo
        Zone of all times given out; a name of the IANA database or a `zoneinfo.ZoneInfo`.
    begin, end : datetime
        With zones; what is looked through, as instants, `end` not included. At most 20 years.
    feature : Feature
        As from `skyoptics.planning.features.find`.
    horizon : object or None
        With ``elevation(azimuth)``, arrays [rad]; None for a flat horizon at 0°.
    pressure_hpa, temperature_c : float
        Of the air at the observer, for refraction.
    sun_height_deg : tuple of float or None
        Least and greatest apparent height of the body.
    least_share : float
        Part of the feature's length that must be up, 0 to 1.
    least_moon : float
        Part of the moon's disc that must be lit, at the best time, 0 to 1; nothing to features lit by the sun.
    holds : callable or None
        Given a `Standing`, returns whether it will do, such as whether it fits a lens. Looked at every 5 minutes: shorter
        stretches may be missed.
    sun_below_deg : float or None
        For features by moonlight: apparent height of the sun's centre from which down it is dark enough; None for any.

    Returns
    -------
    tuple of Window
        In order of time. Start and end are whole seconds inside the window, save where `begin` or `end` cut it, which its
        note says.

    Raises
    ------
    DomainError
        For times without zone, `end` before `begin`, years outside 1600 to 2200, and numbers out of range.

    Notes
    -----
    Ends lie within 1 s of where the body's apparent height, as `skyoptics.light.refraction` has it, passes its limit. Over a
    profile stretches and gaps shorter than 3 minutes may be missed. Real refraction near the horizon moves rise and set
    by minutes of time from day to day.
    """
    search = spans.prepare(place, zone, begin, end, feature, horizon, pressure_hpa, temperature_c)
    found = spans.find(search, sun_height_deg, least_share, least_moon, holds, sun_below_deg)
    best = spans.best(search, found)
    days = [search.whole_seconds(a, float(top), b) for (a, b), top in zip(found, best, strict=True)]
    standings = iter(search.standings([day for three in days for day in three]))
    triples = zip(standings, standings, standings, strict=True)
    return tuple(_window(search, span, three) for span, three in zip(found, triples, strict=True))


def _window(search: Search, span: Span, three: tuple[Standing, Standing, Standing]) -> Window:
    start, top, end = three
    # whole seconds may put an end above a best next to it
    top = max((top, start, end), key=lambda standing: standing.crown_elevation_deg)
    feature = search.feature
    lit = spans.moon_illuminated(search, days_of(top.time)) if feature.body == "moon" else None
    weak = feature.weak(top.sun_elevation_deg * DEG)
    return Window(feature.name, feature.body, start, top, end, weak, lit, _note(search, span))


def _note(search: Search, span: Span) -> str:
    notes = []
    if span[0] == search.track.begin:
        notes.append("already stands when the time looked through begins")
    if span[1] == search.track.end:
        notes.append("still stands when the time looked through ends")
    if span[1] - span[0] > _DAY:
        notes.append(f"lasts {span[1] - span[0]:.1f} days: the {search.feature.body} does not set")
    return "; ".join(notes)
