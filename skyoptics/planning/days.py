"""Spans of days as people name them, both ends included, and times as people read them."""

from __future__ import annotations

from datetime import UTC, date, datetime, timedelta, tzinfo
from zoneinfo import ZoneInfo

from skyoptics.errors import DomainError
from skyoptics.light.position import FIRST_YEAR, LAST_YEAR

LONGEST_DAYS = 20 * 366
"""Longest span of one question."""
USUAL_DAYS = 7
"""Days looked through where no last day is given."""

_DAY = timedelta(days=1)
_FIRST = datetime(FIRST_YEAR, 1, 1, tzinfo=UTC)
_LAST = datetime(LAST_YEAR, 12, 31, 23, 59, 59, tzinfo=UTC)


def span(first: str | None, last: str | None, zone: ZoneInfo, today: date | None = None) -> tuple[datetime, datetime]:
    """Return the instants between which to look.

    Parameters
    ----------
    first : str or None
        A day, from its beginning, or a time; None for today.
    last : str or None
        A day, to its end, or a time; None for a week from the first.
    zone : ZoneInfo
        Of days, and of times without an offset.
    today : date or None
        For tests; None asks the clock.

    Returns
    -------
    begin, end : datetime
        In the zone; the end itself is not part of the span. A day begins at midnight, or where the clocks skip that, at the
        first instant of the day.

    Raises
    ------
    DomainError
        For what is no day or time, an end before the start, years outside 1600 to 2200, a span of more than 20 years, and a
        day that the zone skipped.
    """
    now = today or datetime.now(zone).date()
    begin, first_day = _instant("--from", first, zone) if first is not None else (day_begins(now, zone), now)
    if last is None:
        end = day_begins((first_day or begin.date()) + USUAL_DAYS * _DAY, zone)
    else:
        end, last_day = _instant("--to", last, zone)
        if last_day is not None:
            end = day_begins(last_day + _DAY, zone)
    begin, end = max(begin.astimezone(UTC), _FIRST), min(end.astimezone(UTC), _LAST)
    if end <= begin:
        said = f"--from {first or now} and --to {last}"
        hint = f"; did you mean --from {last} --to {first}?" if first else "; give an earlier --from"
        if first and last and first_day is not None and first == last:
            raise DomainError(f"there is no {first} in {zone.key}: the calendar skipped that day there")
        raise DomainError(f"the end is before the start: {said}{hint}")
    if end - begin > timedelta(days=LONGEST_DAYS):
        raise DomainError(f"the span from {begin.date()} to {end.date()} is too long: 20 years at most")
    return begin.astimezone(zone), end.astimezone(zone)


def day_begins(day: date, zone: tzinfo | None) -> datetime:
    """Return the first instant of a day.

    Parameters
    ----------
    day : date
        In the zone.
    zone : tzinfo
        Where the day is counted.

    Returns
    -------
    datetime
        In the zone: midnight, its first one where clocks are put back over it; where they skip it, the instant of the change.
    """
    # fold 0 reads a skipped local time with the offset before the change, which is the instant of the change
    return datetime(day.year, day.month, day.day, tzinfo=zone).astimezone(UTC).astimezone(zone)


def to_second(moment: datetime) -> datetime:
    """Return a time at the nearest whole second, in its zone."""
    utc = moment.astimezone(UTC) + timedelta(milliseconds=500)
    return utc.replace(microsecond=0).astimezone(moment.tzinfo)


def to_minute(moment: datetime, side: int = 0) -> datetime:
    """Return a time at a whole minute, in its zone.

    Parameters
    ----------
    moment : datetime
        With its zone.
    side : int
        −1 for the minute before, 0 for the nearest, 1 for the one after.
    """
    shift = (timedelta(), timedelta(seconds=30), timedelta(seconds=59, microseconds=999999))[side + 1]
    utc = (moment.astimezone(UTC) + shift).replace(second=0, microsecond=0)
    return utc.astimezone(moment.tzinfo)


def offset(moment: datetime) -> str:
    """Return the offset from universal time, such as ``+02:00``."""
    return moment.isoformat(timespec="seconds")[19:]


def _instant(option: str, text: str, zone: ZoneInfo) -> tuple[datetime, date | None]:
    """Return an instant, and the day where a day was given."""
    from skyoptics.light.zones import parse_time

    words = text.strip()
    try:
        day = date.fromisoformat(words)
    except ValueError:
        if "T" not in words.upper() and ":" not in words:
            raise DomainError(f"{option} {words!r} is no day; write year-month-day, as in 2027-05-01") from None
        try:
            moment = parse_time(words, zone.key)
        except DomainError as error:
            raise DomainError(f"{option}: {error}") from None
        _within(option, moment.year)
        return moment, None
    _within(option, day.year)
    return day_begins(day, zone), day


def _within(option: str, year: int) -> None:
    """Refuse years without ephemeris."""
    if not FIRST_YEAR <= year <= LAST_YEAR:
        raise DomainError(
            f"{option}: the year {year} is out of range: the sun and the moon are known from {FIRST_YEAR} to {LAST_YEAR}"
        )
