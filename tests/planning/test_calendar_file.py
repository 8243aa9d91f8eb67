"""iCalendar (RFC 5545), read back by another library."""

from dataclasses import replace
from datetime import UTC, datetime, timedelta

import pytest
import vobject
from sample_plans import MILL, Place, plan

from skyoptics.planning.calendar_file import calendar, identity
from skyoptics.planning.cautions import for_feature
from skyoptics.planning.document import document

NOTES = for_feature("primary")
STAMP = datetime(2027, 1, 2, 3, 4, 5, tzinfo=UTC)


def events(content):
    return list(vobject.readOne(content.decode()).vevent_list)


def test_instants_are_those_of_the_json():
    for one, key in ((plan(3, notes=NOTES), "windows"), (plan(3, 2, notes=NOTES), "alignments")):
        given = document(one)[key]
        read = events(calendar(one))
        assert len(read) == len(given)
        for event, entry in zip(read, given, strict=True):
            assert event.dtstart.value == datetime.fromisoformat(entry["start"])
            assert event.dtend.value == datetime.fromisoformat(entry["end"])


def test_required_properties_and_alarm():
    event = events(calendar(plan(1, notes=NOTES), alarm_minutes=90, stamp=STAMP))[0]
    assert event.dtstamp.value == STAMP
    assert event.valarm.trigger.value == timedelta(minutes=-90)
    assert event.valarm.action.value == "DISPLAY"
    assert event.valarm.description.value
    assert event.location.value == "mill (47.2N 8.9E)"
    assert "When thunder roars" in event.description.value
    assert "highest point 42.3°" in event.description.value.lower()
    assert calendar(plan(1)).count(b"DTSTART:20270501T143812Z") == 1


def test_lines_are_short_and_end_properly():
    place = Place(47.2, 8.9, 430.0, "Mühle am See – 水車小屋 " * 6)
    content = calendar(plan(4, place=place, notes=("Ä" * 200, "水" * 150)))
    lines = content.split(b"\r\n")
    assert lines[-1] == b""
    assert max(map(len, lines)) <= 75
    assert b"\n" not in content.replace(b"\r\n", b"")
    for line in lines:
        line.decode()  # no letter is cut in two
    assert "水" * 150 in events(content)[0].description.value


def test_identity_is_stable():
    one, other = plan(3), replace(plan(5, notes=("else",)), begin=plan(3).begin - timedelta(days=3))
    first = [event.uid.value for event in events(calendar(one, stamp=STAMP))]
    again = [event.uid.value for event in events(calendar(other))]
    assert len(set(again)) == 5
    assert first == again[:3]
    assert calendar(one, stamp=STAMP) == calendar(one, stamp=STAMP)
    assert identity(one, one.windows[0]) != identity(plan(3, place=replace(MILL, latitude_deg=47.3)), one.windows[0])
    assert identity(plan(3, 2), plan(3, 2).meetings[0]) != first[0]


def test_midnight_alarm_zero():
    event = events(calendar(plan(1), alarm_minutes=0))[0]
    assert event.valarm.trigger.value == timedelta(0)


@pytest.mark.parametrize("body", ["sun", "moon"])
def test_body_is_named(body):
    assert f"The {body} 0.0° high" in events(calendar(plan(1), body))[0].description.value
