"""Dip and distance of the horizon, profiles and their files."""

import numpy as np
import pytest

from skyoptics.errors import DataFileError, DomainError
from skyoptics.geometry.axes import direction
from skyoptics.geometry.horizon import EARTH_RADIUS, Profile, dip, distance, flat, ground_distance, read
from skyoptics.light import slant
from skyoptics.units import ARCMIN, DEG


@pytest.mark.parametrize("height", [2.0, 10.0, 100.0, 1000.0])
def test_dip_of_the_sea_horizon(height):
    """N. Bowditch, American Practical Navigator (from memory): dip = 1.76′ √h with refraction; 1.93′ √h without air."""
    assert dip(height) / ARCMIN == pytest.approx(1.76 * np.sqrt(height), rel=2e-3)
    assert dip(height, refraction=0.0) / ARCMIN == pytest.approx(1.926 * np.sqrt(height), rel=1e-3)


def test_distance_of_the_sea_horizon():
    """Bowditch (from memory): 1.17 nautical miles √(height / foot), that is 3.92 km √(height / m)."""
    assert distance(100.0) == pytest.approx(1.17 * 1852.0 * np.sqrt(100.0 / 0.3048), rel=5e-3)
    assert distance(np.array([0.0, 2.0])) == pytest.approx([0.0, 5530.0], rel=5e-3)


def test_dip_against_rays_through_the_standard_air():
    """The coefficient stands for what light really does in the standard atmosphere's gradient: within 3 %."""
    heights = np.array([10.0, 100.0, 1000.0])
    assert dip(heights) == pytest.approx(-slant.dip(heights), rel=0.03)
    assert EARTH_RADIUS == slant.EARTH_RADIUS


def test_the_ground_comes_nearer_the_further_down_one_looks():
    h = 100.0
    down = np.array([90.0, 45.0, 5.0]) * DEG
    assert ground_distance(-down, h) == pytest.approx(h / np.sin(down), rel=3e-3)  # nearly a flat earth
    assert ground_distance(-dip(h) * (1.0 + 1e-12), h) == pytest.approx(distance(h), rel=1e-4)
    assert ground_distance(0.3, h) == pytest.approx(distance(h))
    assert np.isnan(ground_distance(np.nan, h))
    assert np.all(np.diff(ground_distance(np.linspace(-90, -0.1, 500) * DEG, h)) >= 0.0)
    assert ground_distance(np.array([-1.0, 0.0]), 0.0) == pytest.approx([0.0, 0.0])


@pytest.mark.parametrize("height", [-1.0, 2e4, np.nan])
def test_heights_that_are_none(height):
    with pytest.raises(DomainError, match="height of the eye above the plain must lie between 0 and 10 km"):
        dip(height)


def test_a_profile_is_periodic_and_straight_between_its_points():
    profile = Profile(np.array([10.0, 100.0, 350.0]) * DEG, np.array([1.0, 4.0, 3.0]) * DEG)
    azimuth = np.array([10.0, 55.0, 100.0, 225.0, 350.0, 0.0, 360.0, -10.0, 730.0]) * DEG
    expected = [1.0, 2.5, 4.0, 3.5, 3.0, 2.0, 2.0, 3.0, 1.0]
    assert profile.elevation(azimuth) / DEG == pytest.approx(expected)
    assert np.isnan(profile.elevation([np.nan])).all()
    assert (profile.lowest / DEG, profile.highest / DEG) == pytest.approx((1.0, 4.0))


def test_what_is_seen_above_a_profile():
    profile = Profile(np.array([0.0, 180.0]) * DEG, np.array([0.0, 10.0]) * DEG)
    vectors = direction(np.array([90.0, 90.0, 180.0, 0.0]) * DEG, np.array([5.1, 4.9, 9.0, 0.0]) * DEG)
    assert profile.visible(vectors).tolist() == [True, False, False, True]
    assert profile.clearance(vectors) / DEG == pytest.approx([0.1, -0.1, -1.0, 0.0], abs=1e-9)
    assert not profile.visible(np.full(3, np.nan))


def test_a_level_horizon_with_its_dip():
    assert flat().elevation([0.0, 3.0]).tolist() == [0.0, 0.0]
    assert flat(0.01).elevation(100.0) == -0.01


@pytest.mark.parametrize(
    ("azimuths", "elevations", "words"),
    [
        ([0.0, 1.0], [0.0], "as many azimuths as elevations"),
        ([1.0, 1.0], [0.0, 0.1], "rise from point to point"),
        ([0.0, 7.0], [0.0, 0.1], "below 360 degrees"),
        ([0.0], [2.0], "between -90 and 90 degrees"),
        ([0.0], [np.nan], "between -90 and 90 degrees"),
    ],
)
def test_profiles_that_are_none(azimuths, elevations, words):
    with pytest.raises(DomainError, match=words):
        Profile(np.array(azimuths), np.array(elevations))


def written(tmp_path, text, encoding="utf-8"):
    path = tmp_path / "horizon.csv"
    path.write_text(text, encoding=encoding)
    return path


def all_round(step=30, elevation=1.0):
    return "".join(f"{azimuth},{elevation}\n" for azimuth in range(0, 360, step))


def test_a_file_in_any_order(tmp_path):
    body = "# the garden\nElevation_deg; azimuth_deg\n" + "".join(
        f"{1 + (azimuth == 90)};{azimuth if azimuth <= 180 else azimuth - 360}\n" for azimuth in range(330, -30, -30)
    )
    profile = read(written(tmp_path, body, "utf-8-sig"))
    assert profile.azimuths / DEG == pytest.approx(np.arange(0, 360, 30))
    assert profile.elevation(np.array([90.0, 75.0, 345.0]) * DEG) / DEG == pytest.approx([2.0, 1.5, 1.0])


def test_north_may_be_given_at_both_ends(tmp_path):
    profile = read(written(tmp_path, "azimuth_deg,elevation_deg\n" + all_round() + "360,1.0\n"))
    assert len(profile.azimuths) == 12


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "no data; expected the header azimuth_deg,elevation_deg"),
        ("azimuth_deg,elevation_deg\n", "no rows below the header; give points all round, at most 30 degrees apart"),
        ("azimut_deg,elevation_deg\n", r":1: unknown column 'azimut_deg'; did you mean azimuth_deg\?"),
        ("azimuth_deg\n1\n", ":1: no column elevation_deg"),
        ("azimuth_deg,azimuth_deg\n", ":1: column azimuth_deg given twice"),
        ("0,1\n30,2\n", ":1: unknown column '0'; the first line names the columns"),
        (
            "azimuth_deg,elevation_deg\n1,2,3\n",
            ":2: 3 value.s. where the header names 2 columns; write a decimal point",
        ),
        (
            "azimuth_deg;elevation_deg\n# x\n1;2,5\n",
            ":3: elevation_deg is '2,5'; a finite number is needed; write a dec",
        ),
        ("azimuth_deg,elevation_deg\n1,nan\n", ":2: elevation_deg is 'nan'; a finite number is needed"),
        ("azimuth_deg,elevation_deg\n1,1_0\n", ":2: elevation_deg is '1_0'"),
        ("azimuth_deg,elevation_deg\n400,1\n", ":2: azimuth_deg is 400; allowed are -180 to 360"),
        ("azimuth_deg,elevation_deg\n40,91\n", ":2: elevation_deg is 91; allowed are -90 to 90"),
        (
            "azimuth_deg,elevation_deg\n" + all_round() + "-90,3\n",
            ":14: azimuth 270 stands in line 11 too, with another elevation",
        ),
        (
            "azimuth_deg,elevation_deg\n" + all_round().replace("90,1.0\n120,1.0\n", ""),
            ":4: no point between azimuth 60 and 150 .line 5., a gap of 90 degrees; add points there, at most 30 degrees",
        ),
        (
            "azimuth_deg,elevation_deg\n" + all_round().replace("0,1.0\n30,1.0\n", "", 1),
            ":11: no point between azimuth 330 and 60 .line 2., a gap of 90 degrees",
        ),
    ],
)
def test_faulty_files(tmp_path, text, words):
    with pytest.raises(DataFileError, match=words) as caught:
        read(written(tmp_path, text))
    assert "horizon.csv" in str(caught.value)


def test_every_fault_is_told_at_once(tmp_path):
    rows = "".join(f"{azimuth},x\n" for azimuth in range(50))
    with pytest.raises(DataFileError) as caught:
        read(written(tmp_path, "azimuth_deg,elevation_deg\n" + rows))
    lines = str(caught.value).splitlines()
    assert len(lines) == 21
    assert lines[-1].endswith("and 30 more")
    assert "gap" not in str(caught.value)


def test_files_that_cannot_be_read(tmp_path):
    with pytest.raises(DataFileError, match="no such file"):
        read(tmp_path / "none.csv")
    with pytest.raises(DataFileError, match="is a folder"):
        read(tmp_path)
    path = tmp_path / "latin.csv"
    path.write_bytes("azimuth_deg,elevation_deg\n# Höhe\n".encode("latin-1"))
    with pytest.raises(DataFileError, match=":2: not UTF-8"):
        read(path)


def test_the_widest_gap_can_be_chosen(tmp_path):
    path = written(tmp_path, "azimuth_deg,elevation_deg\n0,1\n90,2\n180,3\n270,2\n")
    with pytest.raises(DataFileError, match="gap of 90 degrees"):
        read(path)
    assert read(path, widest_gap=90 * DEG).elevation(45 * DEG) / DEG == pytest.approx(1.5)
