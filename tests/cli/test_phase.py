"""``skyoptics phase drop``: columns, bow angles, share of orders."""

import json

import numpy as np
import pytest

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
