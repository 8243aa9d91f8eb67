from datetime import UTC, date, datetime, timedelta
from zoneinfo import ZoneInfo

import pytest
from hypothesis import given
from hypothesis import strategies as st

from skyoptics.errors import DomainError
from skyoptics.light.zones import find_zone, parse_time

PARIS = ZoneInfo("Europe/Paris")


@pytest.mark.parametrize(
    "text",
    [
        "2026-06-21T18:30+02:00",
        "2026-06-21 18:30+0200",
        "2026-06-21T16:30Z",
        "20260621T1630Z",
        "2026-W25-7T16:30:00.000Z",
        "  2026-06-21T16:30:00+00:00 ",
        "2026-06-21T11:00-05:30",
    ],
)
def test_forms_of_iso_8601(text):
    assert parse_time(text) == datetime(2026, 6, 21, 16, 30, tzinfo=UTC)


def test_local_time_in_a_zone():
    """Central European (summer) time: one and two hours before UTC, since 1996 changed on the last Sundays of March, October."""
    summer, winter = parse_time("2026-06-21T18:30", "Europe/Paris"), parse_time("2026-12-21T18:30", "Europe/Paris")
    assert summer == datetime(2026, 6, 21, 16, 30, tzinfo=UTC)
    assert winter == datetime(2026, 12, 21, 17, 30, tzinfo=UTC)
    assert summer.tzinfo is PARIS


def test_the_offset_decides_and_the_zone_shows():
    found = parse_time("2026-06-21T16:30Z", "Europe/Paris")
    assert found.isoformat() == "2026-06-21T18:30:00+02:00"


def test_datetimes_of_a_toml_file():
    import tomllib

    given_ = tomllib.loads("local = 2026-06-21T18:30:00\nwhole = 2026-06-21T18:30:00+02:00\nday = 2026-06-21")
    assert parse_time(given_["local"], "Europe/Paris") == parse_time(given_["whole"])
    with pytest.raises(DomainError, match="local time without a zone"):
        parse_time(given_["local"])
    with pytest.raises(DomainError, match='"2026-06-21" is no time: a day and a time of day are needed'):
        parse_time(given_["day"])


@given(st.datetimes(datetime(1970, 1, 1), datetime(2037, 1, 1)), st.sampled_from(["Europe/Paris", "America/St_Johns"]))
def test_a_time_is_taken_only_where_it_is_one_instant(local, zone):
    place = ZoneInfo(zone)
    instants = [local.replace(tzinfo=place, fold=fold).astimezone(UTC) for fold in (0, 1)]
    # What the clocks show: each instant within a day that reads as this local time.
    shown = {moment for moment in instants if moment.astimezone(place).replace(tzinfo=None) == local}
    if len(shown) == 1:
        assert {parse_time(local.isoformat(), zone).astimezone(UTC)} == shown
    else:
        with pytest.raises(DomainError, match="comes twice" if shown else "there is no"):
            parse_time(local.isoformat(), zone)


def test_a_time_that_the_clocks_skip():
    with pytest.raises(DomainError) as caught:
        parse_time("2026-03-29T02:30", "Europe/Paris")
    assert str(caught.value) == (
        "there is no 2026-03-29T02:30 in Europe/Paris: the clocks are put forward by 60 minutes just then; did you mean "
        "2026-03-29T01:30 or 2026-03-29T03:30?"
    )
    before, after = parse_time("2026-03-29T01:30", "Europe/Paris"), parse_time("2026-03-29T03:30", "Europe/Paris")
    assert after.astimezone(UTC) - before.astimezone(UTC) == timedelta(hours=1)


def test_a_time_that_comes_twice():
    with pytest.raises(DomainError) as caught:
        parse_time("2026-10-25T02:30", "Europe/Paris")
    text = str(caught.value)
    assert "2026-10-25T02:30 comes twice in Europe/Paris" in text
    first, second = (parse_time(word) for word in text.split() if word.startswith("2026-10-25T02:30+"))
    assert second - first == timedelta(hours=1)
    for moment in (first, second):
        assert moment.astimezone(PARIS).replace(tzinfo=None) == datetime(2026, 10, 25, 2, 30)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("2026-06-21T18:30", "local time without a zone: add its offset, as in 2026-06-21T18:30.02:00 .* name a zone"),
        ("2026-06-21", "is a day without a time; add one, as in 2026-06-21T18:30"),
        ("20260621", "is a day without a time; add one, as in 2026-06-21T18:30"),
        ("18:30", '"18:30" is no time in ISO 8601; write year-month-day'),
        ("21.6.2026 18:30", "is no time in ISO 8601; write year-month-day"),
        ("2026-13-21T18:30Z", "is no time in ISO 8601 .*month"),
        ("2026-06-31T18:30Z", "is no time in ISO 8601 .*day"),
        ("2026-06-21T18:61Z", "is no time in ISO 8601"),
        ("", '"" is no time'),
        ("soon\x1b[31m", "soon\N{REPLACEMENT CHARACTER}"),
        ("9999-12-31T23:59+00:00", "the year 9999 is too far away"),
        (17, '"17" is no time'),
        (date(2026, 6, 21), "a day and a time of day are needed"),
    ],
)
def test_texts_that_are_no_time(text, words):
    with pytest.raises(DomainError, match=words):
        parse_time(text)


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("Europe/Pariss", "did you mean Europe/Paris"),
        ("Pariss", "did you mean Europe/Paris"),
        ("europe/paris", r"did you mean Europe/Paris\?"),
        ("New York", r"did you mean America/New_York\?"),
        ("America/NewYork", "did you mean America/New_York"),
        ("right/Europe/Paris", "did you mean Europe/Paris"),
        ("UTC+2", "an offset belongs to the time itself"),
        ("+02:00", "an offset belongs to the time itself"),
        ("CEST", "abbreviations mean different times"),
        ("Europe", "names are such as Europe/Paris"),
        ("../etc/passwd", "there is no time zone"),
        ("localtime", "there is no time zone"),
        ("", 'there is no time zone ""'),
        ("a\0b", "there is no time zone"),
        ("x" * 5000, "there is no time zone"),
        (5, "there is no time zone"),
    ],
)
def test_unknown_zones(name, words):
    with pytest.raises(DomainError, match=words) as caught:
        find_zone(name)
    assert len(str(caught.value)) < 250
    with pytest.raises(DomainError, match="there is no time zone"):
        parse_time("2026-06-21T18:30", name)


def test_known_zones():
    assert find_zone("Asia/Kathmandu").key == "Asia/Kathmandu"
    assert find_zone("UTC").utcoffset(datetime(2026, 1, 1)) == timedelta()
