"""Places: the user's own file, coordinates, zones, faults."""

import sys
from zoneinfo import ZoneInfo

import pytest

from skyoptics.errors import DataFileError, DomainError, NothingFoundError
from skyoptics.planning import place as places
from skyoptics.planning.answers import Place

FILE = """
mill = "47.2N 8.9E"

["Old tower"]
coordinates = "+4712+00854+430/"
zone = "Europe/Zurich"

[ridge]
latitude_deg = -33.5
longitude_deg = 151
height_m = 900
"""


@pytest.fixture
def own(tmp_path):
    file = tmp_path / "places.toml"
    file.write_text(FILE, encoding="utf-8")
    return file


def test_names(own):
    assert places.find("mill", own) == (Place(47.2, 8.9, 0.0, "mill"), None)
    found = places.find("old_TOWER", own)
    assert found == (Place(47.2, 8.9, 430.0, "Old tower"), "Europe/Zurich")
    assert places.find("ridge", own, 5.0).place == Place(-33.5, 151.0, 5.0, "ridge")
    assert places.find("10N 20E", own).place == Place(10.0, 20.0)
    assert places.find("+10+020+300/", own, 12.0).place.height_m == 12.0


def test_unknown_names(own, tmp_path, monkeypatch):
    with pytest.raises(NothingFoundError, match="did you mean mill"):
        places.find("mil", own)
    monkeypatch.setattr(places, "own_file", lambda: tmp_path / "none.toml")
    with pytest.raises(NothingFoundError, match=r"none\.toml, which does not exist"):
        places.find("mill")
    assert places.find("1 2").place == Place(1.0, 2.0)


def test_own_file_lies_in_the_platforms_folder(monkeypatch, tmp_path):
    if not sys.platform.startswith("linux"):
        pytest.skip("the variable is that of the XDG base directory specification")
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path))
    assert places.own_file() == tmp_path / "skyoptics" / "places.toml"


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("mill = 5", "mill: must be coordinates in quotes"),
        ('mill = "95 200"', "mill: latitude 95 is out of range"),
        ('[mill]\ncoordinates = "1 2"\nheigth_m = 3', "did you mean height_m"),
        ("[mill]\nlatitude_deg = 5", "needs either coordinates, or both"),
        ('[mill]\ncoordinates = "1 2"\nlatitude_deg = 1\nlongitude_deg = 2', "needs either"),
        ("[mill]\nlatitude_deg = true\nlongitude_deg = 2", "latitude_deg must be a number"),
        ('[mill]\ncoordinates = "1 2"\nheight_m = 20000', "-500 to 10000 m"),
        ('[mill]\ncoordinates = "1 2"\nheight_m = nan', "-500 to 10000 m"),
        ('[mill]\ncoordinates = "1 2"\nzone = "Europe/Zurch"', "did you mean Europe/Zurich"),
        ("mill == 3", "no valid TOML"),
    ],
)
def test_faults_in_the_file(tmp_path, text, words):
    file = tmp_path / "places.toml"
    file.write_text(text, encoding="utf-8")
    with pytest.raises(DataFileError) as caught:
        places.find("mill", file)
    assert words in str(caught.value)
    assert str(file) in str(caught.value)


def test_files_that_cannot_be_read(tmp_path):
    with pytest.raises(DataFileError, match="cannot read places"):
        places.find("mill", tmp_path / "none.toml")
    file = tmp_path / "latin.toml"
    file.write_bytes(b'm\xfchle = "1 2"')
    with pytest.raises(DataFileError, match="UTF-8"):
        places.find("mill", file)


def test_zone_asked_for():
    assert places.zone_of(Place(47.2, 8.9), "Europe/Zurich").zone == ZoneInfo("Europe/Zurich")
    assert places.zone_of(Place(47.2, 8.9), "UTC").note == ""
    with pytest.raises(DomainError, match="no time zone"):
        places.zone_of(Place(47.2, 8.9), "Europe/Bern")


def test_zone_by_coordinates():
    pytest.importorskip("tzfpy")
    found = places.zone_of(Place(47.2, 8.9), None)
    assert found.zone.key == "Europe/Zurich"
    assert "Europe/Zurich, looked up" in found.note
    assert "were the two swapped" in places.zone_of(Place(8.9, 47.2), "Europe/Zurich").note
    assert places.zone_of(Place(47.2, 8.9), "Europe/Paris").note == ""


def test_zone_without_the_package(monkeypatch):
    monkeypatch.setitem(sys.modules, "tzfpy", None)
    with pytest.raises(DomainError, match="give --tz"):
        places.zone_of(Place(47.2, 8.9), None)
    assert places.zone_of(Place(8.9, 47.2), "Europe/Zurich").note == ""
