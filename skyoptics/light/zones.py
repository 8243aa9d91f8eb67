"""Times as people write them: ISO 8601 with an offset, or local time in a named zone.

A time is taken only where it means one instant. A local time without a zone, one that the clocks skip and one that they
show twice are faults that say what to write instead. Zones are those of the IANA time zone database.
"""

from __future__ import annotations

import re
from datetime import UTC, date, datetime, timedelta
from difflib import get_close_matches
from zoneinfo import ZoneInfo, available_timezones

from skyoptics.errors import DomainError

_REFUSED = ("Factory", "localtime", "posix/", "posixrules", "right/")  # of this machine only, or with leap seconds
_LONGEST = 60
_OFFSET = re.compile(r"(UTC|GMT|Z)?\s*[+-]\s*\d{1,2}(:?\d\d)?", re.IGNORECASE)
_ABBREVIATION = re.compile(r"[A-Z]{3,5}")


def parse_time(text: str | datetime, zone: str | None = None) -> datetime:
    """Return the instant that a text means.

    Parameters
    ----------
    text : str or datetime
        ISO 8601, such as ``2026-06-21T18:30+02:00``, ``2026-06-21T16:30Z`` or, with a zone, ``2026-06-21T18:30``; or
        a datetime as a TOML file holds it.
    zone : str or None
        Name in the IANA database, such as ``Europe/Paris``. Where `text` has an offset too, that decides the instant and the
        zone is what it is shown in.

    Returns
    -------
    datetime
        With its offset or zone.

    Raises
    ------
    DomainError
        For a text that is no time, a day alone, a local time without a zone, an unknown zone, and a local time that
        does not exist or comes twice where clocks are changed.
    """
    place = None if zone is None else find_zone(zone)
    moment = text if isinstance(text, datetime) else _read(text)
    if not 1 < moment.year < 9999:
        raise DomainError(f"the year {moment.year} is too far away")
    if moment.utcoffset() is not None:
        return moment if place is None else moment.astimezone(place)
    moment = moment.replace(tzinfo=None)
    if place is None:
        raise DomainError(
            f"{_iso(moment)} is a local time without a zone: add its offset, as in {_iso(moment)}+02:00 (Z for UTC), or "
            'name a zone, as in zone = "Europe/Paris"'
        )
    return _localise(moment, place)


def find_zone(name: str) -> ZoneInfo:
    """Return a time zone by name.

    Parameters
    ----------
    name : str
        In the IANA database, such as ``Europe/Paris``.

    Returns
    -------
    ZoneInfo

    Raises
    ------
    DomainError
        For an unknown name, with the nearest known ones.
    """
    if isinstance(name, str) and not name.startswith(_REFUSED):
        try:
            return ZoneInfo(name)
        except (KeyError, ValueError, OSError):  # unknown; not a name; a folder or too long
            pass
    raise DomainError(f"there is no time zone {_shown(name)}{_hint(str(name))}")


def _read(text: str) -> datetime:
    """Return a text as date and time, with or without offset."""
    if not isinstance(text, str):
        raise DomainError(
            f"{_shown(text)} is no time: a day and a time of day are needed, as in 2026-06-21T18:30+02:00"
        )
    try:
        moment = datetime.fromisoformat(text.strip())
    except ValueError as error:
        reason = "" if "isoformat" in str(error) else f" ({error})"
        raise DomainError(
            f"{_shown(text)} is no time in ISO 8601{reason}; write year-month-day, T, hour:minute and the offset from "
            "UTC, as in 2026-06-21T18:30+02:00"
        ) from None
    try:
        day = date.fromisoformat(text.strip())
    except ValueError:
        return moment
    raise DomainError(f"{_shown(text)} is a day without a time; add one, as in {day.isoformat()}T18:30+02:00")


def _localise(local: datetime, place: ZoneInfo) -> datetime:
    """Return the one instant of a local time."""
    first, second = (local.replace(tzinfo=place, fold=fold) for fold in (0, 1))
    before, after = first.utcoffset() or timedelta(), second.utcoffset() or timedelta()
    if before == after:
        return first
    minutes = abs(after - before) / timedelta(minutes=1)
    if after > before:
        raise DomainError(
            f"there is no {_iso(local)} in {place.key}: the clocks are put forward by {minutes:g} minutes just then; did "
            f"you mean {_iso(local - (after - before))} or {_iso(local + (after - before))}?"
        )
    offsets = [_iso(moment.astimezone(UTC).astimezone(place)) for moment in (first, second)]
    raise DomainError(
        f"{_iso(local)} comes twice in {place.key}, where the clocks are put back by {minutes:g} minutes: write "
        f"{offsets[0]} for the first or {offsets[1]} for the second"
    )


def _hint(name: str) -> str:
    """Return what to write instead of an unknown zone."""
    asked = name.strip().replace(" ", "_").casefold()[:_LONGEST]
    if _OFFSET.fullmatch(name.strip()):
        return "; an offset belongs to the time itself, as in 2026-06-21T18:30+02:00"
    zones = sorted(zone for zone in available_timezones() if not zone.startswith(_REFUSED))
    spelt: dict[str, list[str]] = {}
    for zone in zones:
        for spelling in {zone.casefold(), zone.casefold().rpartition("/")[2]}:
            spelt.setdefault(spelling, []).append(zone)
    found = [zone for near in get_close_matches(asked, list(spelt), n=3, cutoff=0.75) for zone in spelt[near]]
    nearest = list(dict.fromkeys(spelt.get(asked, found)))[:3]
    if _ABBREVIATION.fullmatch(name) and asked not in spelt:
        return "; abbreviations mean different times in different countries, name a place, as in Europe/Paris"
    if not nearest:
        return "; names are such as Europe/Paris, America/New_York or UTC"
    return f"; did you mean {' or '.join(nearest)}?"


def _iso(moment: datetime) -> str:
    """Return ISO 8601 without needless seconds."""
    return moment.isoformat(timespec="auto" if moment.second or moment.microsecond else "minutes")


def _shown(value: object) -> str:
    """Return a value in quotes, printable and not too long."""
    text = "".join(letter if letter.isprintable() else "\N{REPLACEMENT CHARACTER}" for letter in str(value))
    return f'"{text if len(text) <= _LONGEST else text[:_LONGEST] + "…"}"'
