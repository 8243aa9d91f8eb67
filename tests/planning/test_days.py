"""Spans of days: ends included, changes of clocks (IANA time zone database), faults."""

from datetime import UTC, date, datetime, timedelta
from zoneinfo import ZoneInfo

import pytest

from skyoptics.errors import DomainError
from skyoptics.planning.days import day_begins, offset, span, to_minute, to_second

ZURICH = ZoneInfo("Europe/Zurich")


def test_last_day_is_included():
    begin, end = span("2027-05-01", "2027-05-31", ZURICH)
    assert begin.isoformat() == "2027-05-01T00:00:00+02:00"
    assert end.isoformat() == "2027-06-01T00:00:00+02:00"
    begin, end = span("2027-03-28", "2027-03-28", ZURICH)  # summer time begins: 23 hours
    assert end.astimezone(UTC) - begin.astimezone(UTC) == timedelta(hours=23)
    begin, end = span("2027-10-31", "2027-10-31", ZURICH)
    assert end.astimezone(UTC) - begin.astimezone(UTC) == timedelta(hours=25)


def test_times_and_defaults():
    begin, end = span("2027-05-01T12:00", "2027-05-01T13:00Z", ZURICH)
    assert (begin.hour, end.hour) == (12, 15)
    begin, end = span(None, None, ZURICH, date(2027, 5, 1))
    assert (begin.date(), end.date()) == (date(2027, 5, 1), date(2027, 5, 8))
    # both read 02:30 on the wall, an hour apart
    begin, end = span("2027-10-31T02:30+02:00", "2027-10-31T02:30+01:00", ZURICH)
    assert end.timestamp() - begin.timestamp() == 3600


def test_midnight_that_clocks_skip_or_repeat():
    """Cairo put clocks forward at 00:00 on 2024-04-26; Havana puts them back at 01:00, so 00:00 comes twice."""
    assert day_begins(date(2024, 4, 26), ZoneInfo("Africa/Cairo")).isoformat() == "2024-04-26T01:00:00+03:00"
    assert day_begins(date(2024, 11, 3), ZoneInfo("America/Havana")).isoformat() == "2024-11-03T00:00:00-04:00"


def test_a_day_that_never_was():
    """Samoa crossed the date line: no 30 December 2011."""
    with pytest.raises(DomainError, match="there is no 2011-12-30 in Pacific/Apia"):
        span("2011-12-30", "2011-12-30", ZoneInfo("Pacific/Apia"))
    begin, end = span("2011-12-29", "2011-12-31", ZoneInfo("Pacific/Apia"))
    assert end.timestamp() - begin.timestamp() == 2 * 86400


@pytest.mark.parametrize(
    ("first", "last", "words"),
    [
        ("2027-05-31", "2027-05-01", "did you mean --from 2027-05-01 --to 2027-05-31"),
        (None, "2020-01-01", "give an earlier --from"),
        ("1599-01-01", "1600-01-02", "--from: the year 1599 is out of range"),
        ("2027-01-01", "2201-01-01", "--to: the year 2201 is out of range"),
        ("1.5.2027", None, "write year-month-day"),
        ("tomorrow", None, "write year-month-day"),
        ("2027-02-30", None, "no day"),
        ("2027-03-28T02:30", None, "there is no 2027-03-28T02:30"),
        ("2027-01-01", "2060-01-01", "20 years at most"),
    ],
)
def test_faults(first, last, words):
    with pytest.raises(DomainError) as caught:
        span(first, last, ZURICH)
    assert words in str(caught.value)


def test_edges_of_the_ephemeris():
    begin, end = span("1600-01-01", "1600-01-01", ZURICH)
    assert begin.astimezone(UTC).year == 1600
    begin, end = span("2200-12-31", "2200-12-31", ZoneInfo("Pacific/Honolulu"))
    assert end.astimezone(UTC).year == 2200


def test_rounding():
    moment = datetime(2027, 3, 28, 0, 59, 59, 600000, tzinfo=UTC).astimezone(ZURICH)
    assert to_second(moment).isoformat() == "2027-03-28T03:00:00+02:00"
    assert [to_minute(moment, side).isoformat()[11:] for side in (-1, 0, 1)] == [
        "01:59:00+01:00", "03:00:00+02:00", "03:00:00+02:00",
    ]  # fmt: skip
    assert offset(moment) == "+01:00"
