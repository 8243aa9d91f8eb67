"""Coordinates: spellings (ISO 6709 annex H forms, from memory), back and forth, faults."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skyoptics.errors import DomainError
from skyoptics.planning.coordinates import Coordinates, decimal, iso6709, parse, parse_pair, sexagesimal

SPELLINGS = [
    "47.2 8.9", "47.2, 8.9", "47.2N 8.9E", "47.2 N, 8.9 E", "N47.2 E8.9", "8.9E 47.2N", "E8.9,N47.2", "47,2 8,9", "47,2; 8,9",
    "47°12'00\"N 8°54'00\"E", "47°12′0″N, 8°54′0″E", "47º12’0” N 8º54’0” E", "47 12 0 N, 8 54 0 E", "47 12 0 8 54 0",
    "47° 12' N 8° 54' E", "N 47°12.0' E 8°54.0'", "47°12' 8°54'", "+47.2+8.9", "+47.2+008.9/", "+4712+00854/", "+471200+0085400/",
    "+4712.0+00854.0/", "+47.2+008.9CRSWGS_84/", "47.2n 8.9e", " 47.2\N{NO-BREAK SPACE}N  8.9 E ",
]  # fmt: skip


@pytest.mark.parametrize("text", SPELLINGS)
def test_spellings(text):
    found = parse(text)
    assert found.latitude_deg == pytest.approx(47.2, abs=1e-12)
    assert found.longitude_deg == pytest.approx(8.9, abs=1e-12)
    assert found.height_m is None


def test_height_and_signs():
    assert parse("+471200+0085400+500/").height_m == 500.0
    assert parse("-3354.5+15112.25-12.5CRSEPSG_4326/") == pytest.approx((-33.908333333, 151.204166667, -12.5))
    assert parse("−33.9 −70.6") == (-33.9, -70.6, None)
    assert parse("33.9S 70.6W") == (-33.9, -70.6, None)
    assert parse("-0 30 0, -0 30 0")[:2] == (-0.5, -0.5)
    assert parse_pair("33°54'S", "151 12 0 E") == pytest.approx((-33.9, 151.2, None))
    assert parse_pair("8.9E", "47.2N") == (47.2, 8.9, None)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("95 200", "latitude 95 is out of range"),
        ("120 8.9", "did you swap the two? Latitude comes first: 8.9 120"),
        ("8.9 190", "longitude 190 is out of range"),
        ("47.2N 8.9S", "two latitudes"),
        ("47 75 0 N 8 0 0 E", "75 minutes are too many"),
        ("+4760+00854/", "60 minutes are too many"),
        ("+475+008/", "2, 4 or 6 digits"),
        ("47.2 O 8.9 N", "write E or W"),
        ("-47.2S 8.9E", "both a sign and the letter S"),
        ("47.5 12 8 54", "only the last number a fraction"),
        ("47'12° 8°54'", "in this order"),
        ("47.2", "no pair of coordinates"),
        ("", "no pair of coordinates"),
        ("mill", "cannot read"),
        ("1 2 3 4 5 6 7 8", "no pair"),
        ("nan nan", "cannot read"),
    ],
)
def test_faults(text, words):
    with pytest.raises(DomainError, match=r".") as caught:
        parse(text)
    assert words in str(caught.value)


def test_long_and_unprintable_text_is_cut():
    with pytest.raises(DomainError) as caught:
        parse("\x1b[31m" + "x" * 500)
    assert "\x1b" not in str(caught.value)
    assert len(str(caught.value)) < 400


@settings(max_examples=50)
@given(st.floats(-90, 90), st.floats(-180, 180), st.none() | st.integers(-400, 9000))
def test_round_trips(latitude, longitude, height):
    place = Coordinates(latitude, longitude, height)
    for text, error in (
        (iso6709(place), 5.1e-6),
        (iso6709(place, 8), 5.1e-9),
        (decimal(place), 5.1e-6),
        (sexagesimal(place), 0.51 / 3600),
        (sexagesimal(place, 2), 0.0051 / 3600),
    ):
        found = parse(text)
        assert found.latitude_deg == pytest.approx(latitude, abs=error)
        assert found.longitude_deg == pytest.approx(longitude, abs=error)
    assert parse(iso6709(place)).height_m == height


def test_seconds_carry():
    assert sexagesimal(Coordinates(46.9999999, -8.9999999)) == "47°00′00″N 9°00′00″W"
    assert iso6709(Coordinates(-5.25, 5.5, -3.0)) == "-05.25000+005.50000-3/"


@settings(max_examples=50)
@given(st.text(max_size=40))
def test_any_text_is_read_or_refused_in_words(text):
    try:
        found = parse(text)
    except DomainError:
        return
    assert abs(found.latitude_deg) <= 90
    assert abs(found.longitude_deg) <= 180
