"""``skyoptics when``: spellings, outputs, exit codes, faults."""

import json
import subprocess
import sys
from datetime import UTC, datetime
from math import acos, cos, degrees, radians

import astronomy
import jsonschema
import pytest
import vobject

from skyoptics.planning import schema

MAY = ("--lat", "47.2", "--lon", "8.9", "--from", "2027-05-01", "--to", "2027-05-02", "--tz", "Europe/Zurich")


def sun_height(latitude, longitude, text):
    """Return the sun's height by astronomy-engine, with its own refraction [degrees]."""
    utc = datetime.fromisoformat(text).astimezone(UTC)
    time = astronomy.Time.Make(utc.year, utc.month, utc.day, utc.hour, utc.minute, float(utc.second))
    there = astronomy.Observer(latitude, longitude, 0.0)
    seen = astronomy.Equator(astronomy.Body.Sun, time, there, True, True)
    return astronomy.Horizon(time, there, seen.ra, seen.dec, astronomy.Refraction.Normal).altitude


def test_json_of_the_spelling_in_the_manual(command):
    """Crown 42.37° − h, feet cos(Δ) = cos r / cos h: spherical geometry; heights by another ephemeris library."""
    done = command("when", *MAY[:-4], "--to", "2027-05-31", "--tz", "Europe/Zurich", "--feature", "primary", "--json")
    assert done.code == 0, done.err
    found = json.loads(done.out)
    jsonschema.validate(found, json.loads(schema.FILE.read_text(encoding="utf-8")))
    assert len(found["windows"]) == 62
    assert {one["start"][:10] for one in found["windows"]} == {f"2027-05-{day:02d}" for day in range(1, 32)}
    for one in found["windows"][::20]:
        height = one["sun_elevation_deg"]
        assert height == pytest.approx(0.0, abs=0.01)
        assert sun_height(47.2, 8.9, one["best"]) == pytest.approx(height, abs=0.05)
        far = one["end"] if one["best"] == one["start"] else one["start"]
        assert sun_height(47.2, 8.9, far) == pytest.approx(42.37, abs=0.02)
        assert one["crown_elevation_deg"] == pytest.approx(42.37 - height, abs=0.002)
        half = degrees(acos(cos(radians(42.37)) / cos(radians(height))))
        opposite = one["sun_azimuth_deg"] + 180.0
        assert one["foot_azimuths_deg"] == pytest.approx([(opposite - half) % 360, (opposite + half) % 360], abs=0.002)
        assert one["best"].endswith("+02:00")


def test_table_and_files(command, tmp_path):
    done = command(
        "when", *MAY, "--csv", "a.csv", "--ics", "a.ics", "--pdf", "a.pdf", "--geojson", "a.geojson", "--alarm-minutes", 30
    )  # fmt: skip
    assert done.code == 0, done.err
    assert max(map(len, done.out.splitlines())) <= 80
    assert "4 windows in which it can stand." in done.out
    assert "When thunder roars" in done.out
    assert done.out.splitlines()[-4:] == ["a.csv", "a.ics", "a.pdf", "a.geojson"]
    given = json.loads(command("when", *MAY, "--json").out)["windows"]
    read = vobject.readOne((tmp_path / "a.ics").read_bytes().decode()).vevent_list
    assert [event.dtstart.value for event in read] == [datetime.fromisoformat(one["start"]) for one in given]
    assert [event.dtend.value for event in read] == [datetime.fromisoformat(one["end"]) for one in given]
    uids = [event.uid.value for event in read]
    again = command("when", *MAY, "--ics", "a.ics")
    assert again.code == 1
    assert "--force" in again.err
    assert command("when", *MAY, "--ics", "a.ics", "--force").code == 0
    read = vobject.readOne((tmp_path / "a.ics").read_bytes().decode()).vevent_list
    assert [event.uid.value for event in read] == uids


def test_alignment(command):
    done = command("when", *MAY, "--subject", "70,10", "--json")
    found = json.loads(done.out)
    jsonschema.validate(found, json.loads(schema.FILE.read_text(encoding="utf-8")))
    assert len(found["alignments"]) == 4
    for one in found["alignments"]:
        # the angle from the antisolar point is the radius within the tolerance of 0.5°
        a, h = radians(one["sun_azimuth_deg"] + 180.0 - 70.0), radians(-one["sun_elevation_deg"])
        apart = acos(cos(h) * cos(radians(10)) * cos(a) + cos(radians(90) - h) * cos(radians(80)))
        assert degrees(apart) == pytest.approx(42.37, abs=0.02)
    assert "4 meetings with the subject" in command("when", *MAY, "--subject", "70,10").out


def test_subject_by_coordinates_and_nearest_miss(command):
    where = ("--subject-lat", "47.22", "--subject-lon", "8.96", "--subject-height-m", 610, "--height-m", 430)
    done = command("when", *MAY, *where, "--part", "crown", "--json")
    assert done.code == 3
    assert "nearest miss 2027-05-" in done.err
    found = json.loads(done.out)
    assert found["alignments"] == []
    assert found["nearest_miss"]["distance_deg"] > 0.5
    assert found["subject"]["distance_m"] == pytest.approx(5063, abs=15)
    assert found["place"]["height_m"] == 430.0


def test_nothing_found_tells_when_the_sun_comes_closest(command, tmp_path):
    year = ("--from", "2027-01-01", "--to", "2027-12-31", "--tz", "Europe/Oslo")
    done = command("when", "--lat", 60, "--lon", 10, *year, "--feature", "circumhorizontal", "--ics", "a.ics")
    assert done.code == 3
    assert done.out == ""
    assert "needs the sun at 57.80° to 90.00°; nearest miss 2027-06-2" in done.err
    assert "no file written" in done.err
    assert not (tmp_path / "a.ics").exists()
    done = command("when", *MAY, "--least-share", 0.9, "--json")
    assert done.code == 3
    assert "4 windows without the filters, none with them; loosen the share" in done.err
    assert json.loads(done.out)["nearest_height"]["missing_deg"] == 0.0


def test_lens(command):
    """36 × 24 landscape holds the whole primary with the sun at 0° up to 19.39 mm, the feet alone, level, up to 19.73 mm."""
    windows = {}
    for focal in (19.3, 19.5):
        done = command("when", *MAY[:6], "--to", "2027-05-01T12:00", *MAY[8:], "--focal-mm", focal, "--json")
        (windows[focal],) = json.loads(done.out)["windows"]
    assert windows[19.3]["sun_elevation_deg"] == pytest.approx(0.0, abs=0.01)
    assert windows[19.5]["sun_elevation_deg"] > 0.1
    assert windows[19.5]["end"] == windows[19.3]["end"]


def test_horizon_hill_and_places(command, tmp_path):
    flat = json.loads(command("when", *MAY, "--json").out)["windows"][0]
    (tmp_path / "h.csv").write_text("azimuth_deg,elevation_deg\n" + "".join(f"{a},5\n" for a in range(0, 360, 20)))
    high = json.loads(command("when", *MAY, "--horizon", "h.csv", "--json").out)["windows"][0]
    assert high["sun_elevation_deg"] == pytest.approx(5.0, abs=0.01)
    hill = json.loads(command("when", *MAY, "--hill-m", 100, "--json").out)["windows"][0]
    # dip 1.76′ √(h / m), N. Bowditch, American Practical Navigator (from memory)
    assert hill["sun_elevation_deg"] == pytest.approx(-17.6 / 60.0, abs=0.01)
    assert hill["start"] < flat["start"] < high["start"]
    (tmp_path / "p.toml").write_text('[mill]\ncoordinates = "47.2N 8.9E"\nzone = "Europe/Zurich"\n', encoding="utf-8")
    day = ("--from", "2027-05-01", "--to", "2027-05-02")
    mill = json.loads(command("when", "--place", "mill", "--places", "p.toml", *day, "--json").out)
    assert mill["windows"][0] == flat
    assert mill["place"]["name"] == "mill"
    done = command("when", "--place", "mil", "--places", "p.toml", *day)
    assert done.code == 3
    assert "did you mean mill" in done.err


def test_moonbow(command):
    done = command("when", *MAY[:4], "--from", "2027-05-15", "--to", "2027-05-25", "--tz", "UTC", "--feature", "moonbow",
                   "--least-moon", 0.9, "--json")  # fmt: skip
    found = json.loads(done.out)
    assert found["body"] == "moon"
    # full moon 2027-05-20 10:59 UTC, from memory; lit by nine tenths within 3 days of it
    assert {one["best"][:10] for one in found["windows"]} <= {f"2027-05-{day}" for day in range(16, 25)}
    assert all(one["moon_illuminated"] >= 0.9 for one in found["windows"])
    assert len(found["windows"]) >= 4


@pytest.mark.parametrize(
    ("words", "code", "message"),
    [
        (("--lat", 95, "--lon", 200), 1, "latitude 95 is out of range: -90 to 90 degrees are allowed"),
        (("--lat", 120, "--lon", 8.9), 1, "did you swap the two? Latitude comes first: 8.9 120"),
        ((*MAY[:4], "--from", "2027-05-31", "--to", "2027-05-01", "--tz", "UTC"), 1, "the end is before the start"),
        ((*MAY[:4], "--from", "1500-05-31", "--tz", "UTC"), 1, "the year 1500 is out of range"),
        ((*MAY, "--feature", "primay"), 1, "did you mean primary"),
        ((*MAY, "--tz", "Europe/Zurch"), 1, "did you mean Europe/Zurich"),
        ((*MAY, "--least-moon", 0.5), 1, "leave --least-moon out"),
        ((*MAY, "--sun-height-deg", "50:60"), 1, "ask for other heights"),
        ((*MAY, "--horizon", "none.csv"), 1, "none.csv"),
        ((*MAY, "--focal-mm", 20, "--sensor", "ful-frame"), 1, "did you mean full-frame"),
        ((), 2, "where? give --lat and --lon"),
        ((*MAY, "--place", "1 2"), 2, "one or the other"),
        ((*MAY, "--subject", "70"), 2, "give azimuth and elevation"),
        ((*MAY, "--subject-lat", 3), 2, "all three"),
        ((*MAY, "--subject", "1,2", "--subject-lat", 3), 2, "leave out --subject-lat"),
        ((*MAY, "--sensor", "36x24"), 2, "a lens needs a focal length"),
        ((*MAY, "--focal-mm", 20, "--equivalent-mm", 20), 2, "exclude each other"),
        ((*MAY, "--horizon", "h.csv", "--hill-m", 5), 2, "exclude each other"),
        ((*MAY, "--sun-height-deg", "20:5"), 2, "the lowest comes first"),
        ((*MAY, "--part", "crwn"), 2, "did you mean crown"),
    ],
)
def test_faults(command, words, code, message):
    done = command("when", *words)
    assert done.code == code
    assert message in done.err
    assert done.out == ""


def test_loads_no_numba():
    """The planner answers without the machinery of renders."""
    program = (
        "import sys; from skyoptics.cli.main import run; code = run(sys.argv[1:]); "
        "heavy = {'numba', 'scipy', 'colour', 'matplotlib', 'xarray'} & set(sys.modules); "
        "sys.exit(f'{code} {heavy}' if heavy else code)"
    )
    done = subprocess.run(
        [sys.executable, "-c", program, "when", *MAY, "--json"], capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr
    assert json.loads(done.stdout)["windows"]
