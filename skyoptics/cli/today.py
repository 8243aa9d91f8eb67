"""The sentence "To see this today", for a place: when what a picture shows can stand there."""

from __future__ import annotations

from collections.abc import Callable

PLANNED = {"primary_bow": "primary", "secondary_bow": "secondary"}
"""Names of pictures that go by another one in plans."""


def teller(where: str, zone: str | None, lang: str, body: str) -> Callable[[str], str | None]:
    """Return what says when a feature of a picture can be seen today, None of one that no plan knows.

    Parameters
    ----------
    where : str
        Coordinates, or a name in the user's own places.
    zone : str or None
        Time zone; None for that of the place.
    lang : str
        Of the sentence.
    body : str
        "sun" or "moon".

    Raises
    ------
    SkyopticsError
        If place or zone cannot be found.
    """
    from skyoptics.planning import days, features, place, windows
    from skyoptics.rendering import caption

    found = place.find(where)
    there = place.zone_of(found.place, zone or found.zone).zone
    begin, end = days.span(None, None, there)
    end = days.span(begin.date().isoformat(), begin.date().isoformat(), there)[1]
    known = features.names()

    def tell(name: str) -> str | None:
        planned = PLANNED.get(name, name)
        if planned not in known:
            return None
        feature = features.find(planned, body="moon") if body == "moon" else features.find(planned)
        open_today = windows.find(found.place, there, begin, end, feature)
        if not open_today:
            return caption.today(name, None, None, None, body=body, lang=lang)
        best = max(open_today, key=lambda window: window.best.crown_elevation_deg)
        return caption.today(
            name,
            best.start.time,
            best.best.time,
            best.end.time,
            best.best.sun_elevation_deg,
            best.best.sun_azimuth_deg,
            body,
            lang,
        )

    return tell
