"""``skyoptics phase drop``: columns, bow angles, share of orders."""

import json

import numpy as np
import pytest

from skyoptics.cli.main import run
from skyoptics.optics import bows
from skyoptics.units import DEG

HEADER = "wavelength_nm,angle_deg,intensity,polarization,intensity_error"


def read(path):
    with open(path) as file:
        assert file.readline().startswith(HEADER)
        return np.loadtxt(file, delimiter=",")


def test_caustics_stand_at_the_closed_form(command):
    words = (
        "phase",
        "drop",
        "--radius-um",
        500,
        "--method",
        "rays",
        "--wavelength-nm",
        "450,650",
        "--temperature-c",
        20,
    )
    for order in (2, 3):
        done = command(*words, "--orders", order, "--step-deg", 0.01, "--quality", "draft", "--csv", "b.csv", "--json")
        assert done.code == 0
        data = read("b.csv")
        for wavelength, index in zip((450, 650), json.loads(done.out)["index"], strict=True):
            rows = data[data[:, 0] == wavelength]
            brightest = rows[rows[:, 2].argmax(), 1]
            assert brightest == pytest.approx(float(bows.scattering_angle(index, order)) / DEG, abs=0.02)


def test_mean_is_one_and_orders_keep_their_share(command):
    shares = {}
    for orders in ("0,1,2,3,4,5,6,7,8,9,10", "2"):
        done = command(
            "phase", "drop", "--index", 1.333, "--wavelength-nm", 550, "--orders", orders, "--csv", "a.csv", "--json"
        )
        data = read("a.csv")
        half = 0.5 * (data[1, 1] - data[0, 1])
        weight = np.cos((data[:, 1] - half) * DEG) - np.cos((data[:, 1] + half) * DEG)
        shares[orders] = (data[:, 2] * weight).sum() / 2
        report = json.loads(done.out)
    assert shares["0,1,2,3,4,5,6,7,8,9,10"] == pytest.approx(1.0, abs=1e-4)
    energy = {part: values[0] for part, values in report["energy_by_order"].items()}
    assert shares["2"] == pytest.approx(energy["2"] / sum(energy.values()), rel=1e-4)
    assert sum(energy.values()) + report["absorbed"][0] + report["cut_off"][0] == pytest.approx(1.0, abs=1e-6)


def test_the_disc_smooths(command):
    words = ("phase", "drop", "--wavelength-nm", 600, "--orders", 2, "--step-deg", 0.02, "--quality", "draft", "--csv")
    command(*words, "p.csv")
    command(*words, "d.csv", "--disc")
    point, disc = read("p.csv"), read("d.csv")
    assert disc[:, 2].max() < 0.5 * point[:, 2].max()
    assert 0.05 < disc[disc[:, 2].argmax(), 1] - point[point[:, 2].argmax(), 1] < 0.3


def test_the_curve_on_stdout(command):
    done = command("phase", "drop", "--wavelength-nm", 550, "--step-deg", 5, "--quality", "draft", "--csv", "-")
    assert done.out.startswith(HEADER)
    assert len(done.out.splitlines()) == 37


@pytest.mark.parametrize(
    ("words", "code", "said"),
    [
        (["--wavelength-nm", "550,x"], 2, "not a number"),
        (["--wavelength-nm", "50"], 2, "out of range"),
        (["--orders", "11"], 2, "out of range"),
        (["--method", "ray"], 2, "did you mean rays"),
        (["--csv", "no/such/file.csv"], 1, "does not exist"),
    ],
)
def test_bad_input(command, words, code, said):
    done = command("phase", "drop", "--quality", "draft", "--step-deg", 5, *words)
    assert done.code == code
    assert said in done.err


def test_halos_begin_at_minimum_deviation(command):
    """Light of the 60° and 90° face pairs begins at 2 asin(n sin(A/2)) − A: 21.839° and 45.733° for n = 1.31."""
    done = command(
        "phase",
        "crystal",
        "--index",
        1.31,
        "--wavelength-nm",
        550,
        "--step-deg",
        0.05,
        "--quality",
        "draft",
        "--csv",
        "h.csv",
    )
    assert done.code == 0
    data = read("h.csv")
    for angle, apex in ((21.839, 60.0), (45.733, 90.0)):
        assert angle == pytest.approx((2 * np.arcsin(1.31 * np.sin(apex / 2 * DEG)) - apex * DEG) / DEG, abs=5e-4)
        near = data[np.abs(data[:, 1] - angle) < 1.0]
        dark = near[near[:, 1] < angle - 0.1, 2]
        step = 0.5 * (near[:, 2].max() + dark.mean())
        edge = near[(near[:, 2] > step).argmax(), 1] - 0.025  # lower edge of the first bright bin
        assert edge == pytest.approx(angle, abs=0.05)
        assert near[:, 2].max() > 2.0 * dark.mean()


def test_asymmetry_of_random_prisms(command):
    """(g + 1)/2 with the straight-through part at aspect 1: 0.7704 (Takano & Liou, J. Atmos. Sci. 46, 3 (1989), from memory)."""
    done = command(
        "phase", "crystal", "--aspect", 1.0, "--index", 1.311, "--wavelength-nm", 550, "--step-deg", 1, "--json"
    )
    report = json.loads(done.out)
    assert (report["asymmetry"][0] + 1) / 2 == pytest.approx(0.7704, abs=0.004)
    assert report["scattered"][0] + report["absorbed"][0] == pytest.approx(1.0, abs=2e-4)


# ---------------------------------------------------------------- crystals of other shapes


def own_edges(text):
    rows = [line.split(",") for line in text.splitlines()]
    angle = np.array([float(row[1]) for row in rows[1:]])
    result = {}
    for column, name in enumerate(rows[0]):
        if name.startswith("halo_") and not name.endswith("_polarization"):
            own = np.array([float(row[column]) for row in rows[1:]])
            result[name] = angle[np.flatnonzero(own > 1e-3 * own.max())[0]] - 0.025
    return result


# Least deviation at n = 1.31 of the wedges of ice with c/a = 1.629 (wedges: Tape & Moilanen, Atmospheric Halos and the
# Search for Angle x, AGU 2006, from memory; deviations by 2 asin(n sin(A/2)) - A)
CIRCLES = {9: 8.952, 18: 18.271, 20: 19.902, 22: 21.839, 23: 22.864, 24: 23.818, 35: 34.925, 46: 45.733}


@pytest.mark.parametrize(
    ("shape", "circles"),
    [
        ("bipyramid", (18, 20, 35)),
        ("prism", (22, 46)),
        pytest.param("truncated-bipyramid", tuple(CIRCLES), marks=pytest.mark.slow),
    ],
)
def test_circles_begin_at_their_closed_form(shape, circles, tmp_path):
    file = tmp_path / "curve.csv"
    words = ["phase", "crystal", "--shape", shape, "--index", "1.31", "--wavelength-nm", "589", "--step-deg", "0.05"]
    assert run([*words, "--quality", "draft", "--csv", str(file)]) == 0
    found = own_edges(file.read_text())
    assert set(found) == {f"halo_{circle}" for circle in circles}
    for circle in circles:
        assert found[f"halo_{circle}"] == pytest.approx(CIRCLES[circle], abs=0.05)


def test_parts_add_up_to_the_intensity(tmp_path):
    file = tmp_path / "curve.csv"
    words = ["phase", "crystal", "--index", "1.3194", "--wavelength-nm", "400", "--step-deg", "0.05"]
    assert run([*words, "--quality", "draft", "--csv", str(file)]) == 0
    found = own_edges(file.read_text())
    assert found["halo_22"] == pytest.approx(22.554, abs=0.05)  # 2 asin(n/2) - 60 at n = 1.3194
    assert found["halo_46"] == pytest.approx(47.801, abs=0.05)
    table = np.genfromtxt(file, delimiter=",", names=True)
    assert table["halo_22"] + table["halo_46"] + table["other"] == pytest.approx(table["intensity"], rel=1e-5, abs=1e-6)


@pytest.mark.parametrize(
    ("words", "told"),
    [
        (["--shape", "bipyramd"], "did you mean bipyramid"),
        (["--shape", "bipyramid", "--aspect", "2"], "not for bipyramid"),
        (["--shape", "bipyramid", "--miller", "1,1,-1,1"], "Miller"),
        (["--face-distances", "1,1,1"], "six"),
        (["--face-distances", "1,5,1,1,1,1"], "does not touch"),
        (["--index", "1.31", "--birefringence"], "--extraordinary-index"),
        (["--extraordinary-index", "1.32"], "--index"),
        (["--draw", "crystal.gif"], ".png or .svg"),
    ],
)
def test_wrong_shapes_are_told(words, told, capsys):
    assert run(["phase", "crystal", *words]) != 0
    assert told in capsys.readouterr().err


def test_a_crystal_is_drawn(tmp_path, capsys):
    file = tmp_path / "crystal.svg"
    assert run(["phase", "crystal", "--shape", "truncated-bipyramid", "--draw", str(file)]) == 0
    assert file.read_text().startswith("<?xml")
    assert "faces 20" in capsys.readouterr().out
