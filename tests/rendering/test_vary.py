"""One key through several values: what is read, which scenes come of it, and faults in the usual words."""

from datetime import UTC, datetime, timedelta
from itertools import pairwise

import pytest

from skyoptics.errors import SceneError
from skyoptics.rendering.vary import MOST_VALUES, read, steps
from skyoptics.rendering.vary_words import caption, quantity

CLOCK = """
[light]
latitude_deg = 47
longitude_deg = 8
time = "2027-05-12T18:00"
zone = "Europe/Zurich"

[[air]]
kind = "drops"
"""


@pytest.fixture
def clock(tmp_path):
    path = tmp_path / "clock.toml"
    path.write_text(CLOCK, encoding="utf-8")
    return path


def test_a_list_gives_scenes_in_its_order(tiny):
    found = steps(tiny, (), read("air.1.radius_um=10,1000,250"))
    assert [step.scene.air[0].radius_um for step in found] == [10.0, 1000.0, 250.0]
    assert all(step.scene.title == "Tiny" for step in found)


def test_a_range_is_even_and_holds_its_ends(tiny):
    found = steps(tiny, (), read("light.elevation_deg=0:40"), 126)
    heights = [step.scene.light.elevation_deg for step in found]
    assert heights[0] == 0.0
    assert heights[-1] == 40.0
    assert len(heights) == 126
    assert heights == pytest.approx([0.32 * k for k in range(126)], abs=1e-9)


def test_a_range_may_fall_and_may_bring_its_count(tiny):
    found = steps(tiny, (), read("light.elevation_deg=30:10:3"))
    assert [step.value for step in found] == [30.0, 20.0, 10.0]


def test_equal_ratios(tiny):
    found = steps(tiny, (), read("air.1.radius_um=10:1000:5:log"))
    values = [step.value for step in found]
    assert values[0] == 10.0
    assert values[-1] == 1000.0
    assert [b / a for a, b in pairwise(values)] == pytest.approx([10**0.5] * 4, rel=1e-8)


def test_whole_numbers_stay_whole(tiny):
    found = steps(tiny, (), read("camera.width_px=60:80:4"))
    assert [step.value for step in found] == [60, 67, 73, 80]


def test_choices_and_flags(tiny):
    lenses = steps(tiny, (), read("camera.lens=rectilinear,equidistant"))
    assert [step.scene.camera.lens for step in lenses] == ["rectilinear", "equidistant"]
    assert [caption(step, read("camera.lens=rectilinear,equidistant")) for step in lenses] == [
        "rectilinear",
        "equidistant",
    ]


@pytest.mark.parametrize("between", [":", "/", ".."])
def test_a_clock_runs_evenly(clock, between):
    vary = read(f"light.time=2027-05-12T18:00+02:00{between}2027-05-12T20:30+02:00")
    found = steps(clock, (), vary, 6)
    start = datetime(2027, 5, 12, 16, tzinfo=UTC)
    assert [step.scene.light.when for step in found] == [start + k * timedelta(minutes=30) for k in range(6)]
    assert caption(found[1], vary) == "2027-05-12 18:30"


def test_a_clock_in_the_zone_of_the_scene_over_a_change_of_clocks(clock):
    """Summer time began on 2027-03-28 at 02:00 in the EU (Directive 2000/84/EC): from 01:30 to 03:30 it is one hour."""
    found = steps(clock, (), read("light.time=2027-03-28T01:30/2027-03-28T03:30"), 3)
    times = [step.scene.light.when.astimezone(UTC) for step in found]
    assert times[1] - times[0] == timedelta(minutes=30)
    assert times[2] - times[0] == timedelta(hours=1)


def test_overrides_come_first_and_the_value_wins(tiny):
    found = steps(tiny, ("light.elevation_deg=3", "air.1.optical_depth=0.4"), read("light.elevation_deg=5,6"))
    assert [step.scene.light.elevation_deg for step in found] == [5.0, 6.0]
    assert found[0].scene.air[0].optical_depth == 0.4


@pytest.mark.parametrize(
    ("words", "told"),
    [
        ("light.elevaton_deg=1,2", "did you mean elevation_deg?"),
        ("light.elevaton_deg=0:40", "did you mean elevation_deg?"),
        ("air.1.radius_um=0.1,20000", "must lie between 1 and 10000 µm, got 0.1"),
        ("light.elevation_deg=0:140", "must lie between -1 and 90 degrees, got 140"),
        ("air.2.radius_um=1,2", "without entry 2; it has 1 entry, counted from 1"),
        ("air.radius_um=1,2", "say which entry, as in air.1.radius_um"),
        ("picture.white=light,dayligt", "did you mean daylight?"),
        ("camera.lens=1:3", "must be"),
        ("light.elevation_deg", "not of the form KEY=VALUES"),
        ("=3", "not of the form KEY=VALUES"),
        ("light.elevation_deg=a:b", '"a" is no number'),
        ("light.elevation_deg=nan:4", '"nan" is no number'),
        ("light.elevation_deg=1,,2", "a value is missing"),
        ("light.elevation_deg=1,1", "stands twice"),
        ("light.elevation_deg=0:5:log", "above 0"),
        ("light.elevation_deg=1:5:1", "2 and more"),
        ("light.elevation_deg=1:5:lin", '"lin" cannot follow a range'),
        (f"light.elevation_deg=1:5:{MOST_VALUES + 1}", "too many"),
        ("light.elevation_deg=2027-05-12T18:00Z/2027-05-12T19:00Z", "must be a number"),
    ],
)
def test_faults_are_told_in_words(tiny, words, told):
    with pytest.raises(SceneError) as caught:
        steps(tiny, (), read(words), 5 if "T" in words or words.count(":") != 2 else None)
    assert told in str(caught.value)
    assert "--vary" in str(caught.value)


def test_all_faulty_values_are_told_at_once_and_one_fault_once(tiny):
    with pytest.raises(SceneError) as caught:
        steps(tiny, (), read("air.1.radius_um=0.1,300,20000"))
    assert [fault.where for fault in caught.value.faults] == [
        "--vary air.1.radius_um=0.1",
        "--vary air.1.radius_um=20000",
    ]
    with pytest.raises(SceneError) as caught:
        steps(tiny, (), read("air.1.radus_um=1,2,3"))
    assert len(caught.value.faults) == 1


def test_an_open_range_asks_for_its_number(tiny):
    with pytest.raises(SceneError, match=r"as in light\.elevation_deg=0:40:5"):
        steps(tiny, (), read("light.elevation_deg=0:40"))
    with pytest.raises(SceneError, match="asks for 3 values, 5 are needed"):
        steps(tiny, (), read("light.elevation_deg=0:40:3"), 5)


@pytest.mark.parametrize("times", ["2027-05-12T18:00/2027-05-12T17:00", "2027-05-12T18:00/2027-05-12T18:00"])
def test_a_clock_runs_forward(clock, times):
    with pytest.raises(SceneError, match="has to be later"):
        steps(clock, (), read(f"light.time={times}"), 5)


def test_a_faulty_file_is_told_as_ever(tmp_path):
    path = tmp_path / "bad.toml"
    path.write_text("[light]\nelevation_deg = 5\nazimut_deg = 3\n[[air]]\nkind = 'drops'\n", encoding="utf-8")
    with pytest.raises(SceneError, match=r"bad\.toml:3: light\.azimut_deg"):
        steps(path, (), read("light.elevation_deg=1,2"))


def test_words_of_quantities_and_values(tiny):
    vary = read("air.1.radius_um=10,12.5")
    first, second = steps(tiny, (), vary)
    assert (quantity(first, vary), caption(first, vary)) == ("drop radius", "10 µm")
    assert (quantity(second, vary, "de"), caption(second, vary, "de")) == ("Tropfenradius", "12,5 µm")
    vary = read("light.elevation_deg=-0.5,20")
    assert caption(steps(tiny, (), vary)[0], vary) == "−0.5°"
    vary = read("camera.focal_mm=14,50")
    first = steps(tiny, (), vary)[0]
    assert (quantity(first, vary), caption(first, vary)) == ("focal", "14 mm")


def test_what_was_read_can_be_written_again():
    for words in ("a.b=1,2", "a.b=0:4", "a.b=1:4:3:log", "t=2027-05-12T18:00Z/2027-05-12T19:00Z"):
        assert read(words).words == words
        assert read(read(words).words) == read(words)
