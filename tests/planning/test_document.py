"""The JSON document, its schema, tables for people and machines."""

import csv
import io
import json
from dataclasses import replace
from datetime import datetime, timedelta
from zoneinfo import ZoneInfo

import jsonschema
import pytest
from sample_plans import plan, standing, window

from skyoptics.planning import schema
from skyoptics.planning.document import document, iso
from skyoptics.planning.listing import COLUMNS, listing
from skyoptics.planning.miss import Miss
from skyoptics.planning.rows import minutes, rows, summary
from skyoptics.planning.table import show


@pytest.fixture(scope="module")
def checker():
    return jsonschema.Draft202012Validator(json.loads(schema.FILE.read_text(encoding="utf-8")))


def test_shipped_schema_is_that_of_the_code():
    assert json.loads(schema.FILE.read_text(encoding="utf-8")) == schema.schema()
    jsonschema.Draft202012Validator.check_schema(schema.schema())


def test_documents_fit_the_schema(checker):
    moment = datetime(2027, 1, 1, 12, tzinfo=ZoneInfo("Europe/Zurich"))
    miss = Miss("sun", moment, 180.0, 19.8, 57.8, 90.0, 38.0)
    for one in (
        document(plan(2)),
        document(plan(3, 2)),
        document(replace(plan(1), windows=(), nearest_miss=plan(3, 1).meetings[0]), miss),
    ):
        checker.validate(json.loads(json.dumps(one)))


def test_schema_refuses_what_is_wrong(checker):
    good = document(plan(1))
    for bad in (
        {**good, "further": 1},
        {**good, "begin": "2027-05-01T00:00:00"},
        {key: value for key, value in good.items() if key != "zone"},
        {**good, "windows": [{**good["windows"][0], "sun_elevation_deg": 91.0}]},
    ):
        with pytest.raises(jsonschema.ValidationError):
            checker.validate(bad)


def test_keys_asked_for_by_scripts():
    first = document(plan(1))["windows"][0]
    assert first["start"] == "2027-05-01T16:38:12+02:00"
    assert first["end"] == "2027-05-01T20:50:12+02:00"
    best = plan(1).windows[0].best
    assert first["sun_elevation_deg"] == pytest.approx(best.sun_elevation_deg, abs=5e-4)
    assert first["crown_elevation_deg"] == pytest.approx(42.37 - 0.03, abs=5e-4)
    assert first["foot_azimuths_deg"] == pytest.approx(best.foot_azimuths_deg, abs=5e-4)


def test_azimuths_stay_below_360(checker):
    time = datetime(2027, 5, 1, tzinfo=ZoneInfo("UTC"))
    at = standing(time, 359.9999, 0.0)
    one = replace(plan(1), windows=(replace(window(1), start=at, best=at, end=at),))
    found = document(one)
    assert found["windows"][0]["sun_azimuth_deg"] == 0.0
    checker.validate(found)


def test_csv_holds_the_same_instants():
    given = document(plan(3))
    read = list(csv.DictReader(io.StringIO(listing(plan(3)))))
    assert tuple(read[0]) == COLUMNS
    assert [row["best"] for row in read] == [one["best"] for one in given["windows"]]
    assert float(read[1]["left_foot_azimuth_deg"]) == given["windows"][1]["foot_azimuths_deg"][0]
    read = list(csv.DictReader(io.StringIO(listing(plan(3, 2)))))
    assert [row["part"] for row in read] == ["foot", "foot"]
    assert float(read[0]["distance_deg"]) == 0.25


def test_table_fits_80_columns_without_codes(monkeypatch):
    monkeypatch.delenv("COLUMNS", raising=False)
    for one in (plan(31), plan(3, 2), replace(plan(2), windows=(window(1, note="cut", weak=True),))):
        text = io.StringIO()
        show(one, stream=text)
        lines = text.getvalue().splitlines()
        assert max(map(len, lines)) <= 80
        assert "\x1b" not in text.getvalue()
        assert not any(line.endswith(" ") for line in lines)
        assert any("2027-05-01" in line and "20:50" in line for line in lines)
    assert "* weak" in text.getvalue()
    assert "| cut." in text.getvalue()


def test_minutes_lie_inside():
    start, best, end = minutes(window(1))
    assert start.isoformat() == "2027-05-01T16:39:00+02:00"
    assert end.isoformat() == best.isoformat() == "2027-05-01T20:50:00+02:00"


def test_clocks_put_back_during_a_window():
    """Central Europe, 2027-10-31: 03:00 summer time becomes 02:00 (IANA time zone database)."""
    zurich = ZoneInfo("Europe/Zurich")
    moments = [
        (datetime(2027, 10, 31, tzinfo=ZoneInfo("UTC")) + timedelta(minutes=m)).astimezone(zurich) for m in (50, 55, 65)
    ]
    at = [standing(moment, 90.0, 5.0) for moment in moments]
    one = replace(window(1), start=at[0], best=at[1], end=at[2])
    assert [iso(moment)[11:] for moment in minutes(one)] == ["02:50:00+02:00", "02:55:00+02:00", "02:05:00+01:00"]
    later = replace(one, best=at[2])
    found = rows(replace(plan(1), windows=(one, later)))
    assert [cells[0] for cells in found.cells if len(cells) == 1] == [
        "UTC+02:00 from here on",
        "UTC+01:00 from here on",
    ]


def test_summary():
    assert summary(plan(1)) == "1 window in which it can stand."
    assert "2 meetings with the subject at azimuth 66.00°, 1.50° high, 5.20 km away" in summary(plan(3, 2))
