"""``skyoptics frame``."""

import json
import math

import numpy as np
import pytest
from PIL import Image

from skyoptics.planning import view

SUN = ("frame", "--sun-azimuth-deg", "270", "--sun-elevation-deg", "0")
PLACE = ("frame", "--lat", "47.2", "--lon", "8.9", "--time", "2027-05-12T19:40+02:00", "--focal-mm", "20")


@pytest.fixture(autouse=True)
def small(monkeypatch):
    monkeypatch.setattr(view, "LONG_PX", 400)


def answer(done):
    assert done.code == 0, done.err
    return json.loads(done.out)


# Rectilinear projection by hand, red edge 42.37° (handbook of optics ch. 57, Table 57-1): 18 / tan r; 12 / tan r;
# 18 cos e / tan r = 12 / tan(r − e)
@pytest.mark.parametrize(
    ("words", "longest_mm"),
    [
        (("--hold", "feet", "--aim", "level"), 19.73),
        (("--hold", "feet"), 19.73),
        (("--hold", "whole"), 19.39),
        (("--hold", "whole", "--orientation", "portrait"), 13.16),
    ],
)
def test_longest_focal_lengths(command, words, longest_mm):
    found = answer(command(*SUN, "--focal-mm", "20", "--sensor", "36x24", "--radius-deg", "42.37", *words, "--json"))
    assert found["longest_focal_mm"] == pytest.approx(longest_mm, abs=0.05)
    assert found["fits"] is False


def test_twenty_millimetres_miss(command):
    found = answer(command(*SUN, "--focal-mm", "20", "--hold", "feet", "--aim", "level", "--json"))
    assert found["missing_deg"] == pytest.approx(84.74 - 2.0 * math.degrees(math.atan(0.9)), abs=0.005)
    assert found["span_deg"] == pytest.approx(84.74, abs=0.001)
    raised = answer(command(*SUN, "--focal-mm", "19.3", "--json"))
    assert raised["fits"] is True
    assert raised["missing_deg"] <= 0.0
    assert raised["aim"]["elevation_deg"] == pytest.approx(10.65, abs=0.05)
    crown = next(point for point in raised["points"] if point["name"] == "crown")
    assert (crown["elevation_deg"], crown["x"]) == pytest.approx((42.37, 0.5), abs=1e-3)
    assert crown["in_frame"] is True


def test_place_and_time(command):
    from datetime import datetime, timedelta, timezone

    from skyoptics.light.position import sun

    found = answer(command(*PLACE, "--json"))
    where = sun(47.2, 8.9, datetime(2027, 5, 12, 19, 40, tzinfo=timezone(timedelta(hours=2))))
    assert found["sun_azimuth_deg"] == pytest.approx(where.azimuth_deg, abs=1e-3)
    assert found["sun_elevation_deg"] == pytest.approx(where.elevation_deg, abs=1e-3)
    assert found["time"] == "2027-05-12T19:40:00+02:00"
    local = answer(command(*PLACE[:6], "2027-05-12T19:40", "--tz", "Europe/Zurich", "--focal-mm", "20", "--json"))
    assert local["sun_azimuth_deg"] == found["sun_azimuth_deg"]


def test_equivalent_and_crop(command):
    found = answer(command(*SUN, "--equivalent-mm", "20", "--sensor", "four-thirds", "--crop", "16:9", "--json"))
    assert found["focal_mm"] == pytest.approx(20.0 * math.hypot(17.3, 13.0) / math.hypot(36.0, 24.0), abs=1e-3)
    assert found["sensor_mm"] == pytest.approx([17.3, 17.3 * 9 / 16], abs=1e-3)


def test_pair(command):
    words = (
        "frame",
        "--sun-azimuth-deg",
        "200",
        "--sun-elevation-deg",
        "20",
        "--feature",
        "parhelia",
        "--focal-mm",
        "50",
    )
    found = answer(command(*words, "--hold", "pair", "--json"))
    assert found["fits"] is False
    # 2 asin(n'/2) − 60°, n' = √(n² − sin² h)/cos h (Bravais 1847), n = 1.31: the angle in azimuth
    h = math.radians(20.0)
    turn = 2.0 * math.degrees(math.asin(math.sqrt(1.31**2 - math.sin(h) ** 2) / math.cos(h) / 2.0)) - 60.0
    half = math.asin(math.cos(h) * math.sin(math.radians(turn)))
    assert found["longest_focal_mm"] == pytest.approx(18.0 / math.tan(half), abs=0.05)
    assert any("sun" in note.lower() for note in found["notes"])


def test_sun_in_the_back_gives_no_warning(command):
    assert answer(command(*SUN, "--focal-mm", "20", "--json"))["notes"] == []
    near = answer(command(*SUN, "--focal-mm", "20", "--aim", "225,0,0", "--json"))
    assert any("near the frame" in note or "in the frame" in note for note in near["notes"])


def test_words_fit_the_terminal(command):
    for extra in (("--hold", "feet"), ("--lens", "equisolid", "--aim", "10,20,5")):
        done = command(*PLACE, *extra)
        assert done.code == 0
        assert max(map(len, done.out.splitlines())) <= 80
        assert "\x1b" not in done.out
    assert "Panorama: one row" not in done.out


def test_panorama(command):
    found = answer(command(*SUN, "--focal-mm", "50", "--overlap", "0.2", "--json"))["panorama"]
    assert found["overlap"] == 0.2
    assert found["rows"] > 1
    assert len({frame["row"] for frame in found["frames"]}) == found["rows"]
    assert max(sum(f["row"] == k + 1 for f in found["frames"]) for k in range(found["rows"])) == found["columns"]


def test_preview(command, tmp_path):
    words = (*PLACE, "--preview", "plan.png", "--thirds", "--subject", "110,2")
    found = answer(command(*words, "--json"))
    assert found["preview"] == "plan.png"
    with Image.open(tmp_path / "plan.png") as picture:
        assert picture.size[0] == 400
        assert "Primary rainbow" in picture.text["Title"]
    refused = command(*words)
    assert refused.code == 1
    assert "--force" in refused.err
    assert command(*words, "--force", "--panorama").code == 0


@pytest.mark.slow  # compiled kernels and their imports; fast sibling: tests/planning/test_under.py
def test_render_under_the_preview(command, tmp_path, tiny, monkeypatch):
    monkeypatch.setattr(view, "LONG_PX", 220)
    words = ("frame", "--sun-azimuth-deg", "30", "--sun-elevation-deg", "12", "--focal-mm", "24", "--aim", "210,20,0")
    done = command(*words, "--render", tiny, "--preview", "under.png", "--json")
    assert answer(done)["preview"] == "under.png"
    assert command(*words, "--preview", "plain.png").code == 0
    with Image.open("under.png") as one, Image.open("plain.png") as other:
        under, plain = np.asarray(one).astype(int), np.asarray(other).astype(int)
    assert under.shape == plain.shape
    # inside the bow it is brighter than in the dark band outside, in the middle column of the picture
    column = under[:, under.shape[1] // 2 - 30].sum(axis=-1)
    assert column[30:-30].max() > 1.3 * np.median(column)


def test_what_is_not_up(command):
    low = command("frame", "--sun-azimuth-deg", "200", "--sun-elevation-deg", "47", "--focal-mm", "20")
    assert low.code == 3
    assert "below the horizon with the sun 47.0° high; it needs a sun 0.0 to 42.4° high" in low.err
    none = command(*SUN[:4], "40", "--focal-mm", "20", "--feature", "circumzenithal")
    assert none.code == 3
    assert "32.2°" in none.err


@pytest.mark.parametrize(
    ("words", "code", "says"),
    [
        ((*PLACE[:6], "2027-05-12T23:40+02:00", "--focal-mm", "20"), 1, "it rises at 2027-05-13T05:5"),
        ((*PLACE[:6], "2027-05-12T19:40", "--focal-mm", "20"), 1, "--tz Europe/Paris"),
        (("frame", "--lat", "95", *PLACE[3:]), 1, "latitude 95"),
        ((*SUN[:4], "-3", "--focal-mm", "20"), 1, "below the horizon"),
        ((*SUN, "--lat", "4", "--focal-mm", "20"), 2, "exclude each other"),
        (("frame", "--sun-azimuth-deg", "20", "--focal-mm", "20"), 2, "needs both"),
        (("frame", "--focal-mm", "20"), 2, "where is the sun?"),
        (SUN, 2, "--focal-mm or --equivalent-mm"),
        ((*SUN, "--focal-mm", "20", "--sensor", "apsd"), 1, "did you mean aps-"),
        ((*SUN, "--focal-mm", "3"), 1, "or a fisheye"),
        ((*SUN, "--focal-mm", "20", "--feature", "primery"), 1, "did you mean primary"),
        ((*SUN, "--focal-mm", "20", "--aim", "up"), 2, "best, level"),
        ((*SUN, "--focal-mm", "20", "--aim", "1,100,0"), 2, "out of range"),
        ((*SUN, "--focal-mm", "20", "--hold", "feets"), 2, "did you mean feet"),
        ((*SUN, "--focal-mm", "20", "--hold", "pair"), 1, "no pair"),
        ((*SUN, "--focal-mm", "20", "--thirds"), 2, "give --preview too"),
        ((*SUN, "--focal-mm", "20", "--preview", "plan.jpg"), 2, "end in .png"),
        ((*SUN, "--focal-mm", "20", "--preview", "no/plan.png"), 1, "make it first"),
        ((*SUN, "--focal-mm", "20", "--crop", "wide"), 1, "such as 16:9"),
        ((*SUN, "--focal-mm", "nan"), 1, "0.5 to 5000"),
    ],
)
def test_bad_input(command, words, code, says):
    done = command(*words)
    assert done.code == code
    assert says in done.err
    assert done.out == ""
