"""``skyoptics study``: published places of Airy's bow, files, bad input."""

from __future__ import annotations

import csv
import json

import pytest

from skyoptics.cli import main


@pytest.fixture(autouse=True)
def listed(monkeypatch):
    """Make the command known here whether or not the table lists it already."""
    monkeypatch.setitem(main.COMMANDS, "study", ("skyoptics.cli.study", "Sweep drop size."))


def rows(path):
    with open(path, encoding="utf-8") as file:
        return list(csv.DictReader(file))


def test_airy_places(command, tmp_path):
    """Airy 1838, van de Hulst 1957 §13.2, n = 4/3, 600 nm: shift from 137.970° and first supernumerary, within 0.03°."""
    done = command(
        "study", "--radius-um", "100,250,500,1000", "--method", "airy", "--index", "1.3333333", "--wavelength-nm", 600,
        "--spread", 0, "--out", "s",
    )  # fmt: skip
    assert done.code == 0, done.err
    expected = {"100": (0.961, 2.102), "250": (0.522, 1.141), "500": (0.329, 0.719), "1000": (0.207, 0.453)}
    found = rows(tmp_path / "s" / "study.csv")
    assert len(found) == 4
    for row in found:
        shift, spacing = expected[row["radius_um"]]
        peak = float(row["bow_angle_deg"])
        assert peak - 137.970 == pytest.approx(shift, abs=0.03)
        assert float(row["supernumerary_1_deg"]) - peak == pytest.approx(spacing, abs=0.03)
        assert row["purity"].startswith(("1", "0.999"))


def test_default_methods_and_report(command, tmp_path):
    done = command(
        "study", "--radius-um", "20:40:2", "--wavelength-nm", "450,550,650", "--tolerance", 0.1, "--out", "s", "--json"
    )
    assert done.code == 0, done.err
    report = json.loads(done.out)
    assert report["methods"] == ["mie", "airy"]
    assert {"study.csv", "study.nc", "study.md"} <= set(report["files"])
    assert "note: airy" in done.err
    assert len(rows(tmp_path / "s" / "study.csv")) == 12
    page = (tmp_path / "s" / "study.md").read_text(encoding="utf-8")
    assert "skyoptics study --radius-um 20:40:2 --wavelength-nm 450,550,650 --tolerance 0.1 --out s" in page


def test_one_step_and_transfer(command, tmp_path):
    done = command("study", "--radius-um", "5:5:1", "--wavelength-nm", 550, "--transfer", "--out", "s")
    assert done.code == 0, done.err
    assert (tmp_path / "s" / "transfer-radius-um-5.nc").is_file()
    assert str(done.out).count("\n") == 8


@pytest.mark.parametrize(
    ("words", "code", "said"),
    [
        (["--radius-um", "0"], 2, "1 to 5000 µm is allowed"),
        (["--radius-um", "1000000"], 2, "1 to 5000 µm is allowed"),
        (["--radius-um", "10:1000:0"], 2, "0 steps"),
        (["--radius-um", "10:1000"], 2, "start:stop:steps"),
        (["--radius-um", "4000"], 1, "mie allows 50000"),
        (["--radius-um", "50", "--method", "mie,ary"], 1, "did you mean airy"),
        (["--radius-um", "10:100:3", "--spread", "0:0.1:3"], 1, "one of them at a time"),
        (["--radius-um", "50", "--index", "0.9"], 1, "between 1 and 2"),
        (["--radius-um", "50", "--map-deg", "130"], 2, "two angles"),
        (["--radius-um", "2000", "--transfer", "--wavelength-nm", "550"], 1, "is allowed with this spread"),
        ([], 1, "needs radius_um or rain_mm_h"),
    ],
)
def test_bad_input_writes_nothing(command, tmp_path, words, code, said):
    done = command("study", *words, "--out", "s")
    assert done.code == code
    assert said in done.err
    assert list(tmp_path.iterdir()) == []


def test_help_has_an_example(command):
    done = command("study", "--help")
    assert "Example: skyoptics study --radius-um 10:1000:24 --method mie,airy --spread 0.05" in " ".join(
        done.out.split()
    )
