"""A whole study through the Python face: rows, dataset, files, halving."""

from __future__ import annotations

import csv
from dataclasses import replace

import numpy as np
import pytest
import xarray

from skyoptics.errors import DomainError, ResourceError
from skyoptics.study import plots
from skyoptics.study.report import halving
from skyoptics.study.result import COLUMNS
from skyoptics.study.run import run


@pytest.fixture(scope="module")
def study():
    return run(radius_um="20:80:3", method="mie,airy", spread=0.1, wavelength_nm="420:680:9", tolerance=0.05)


def test_rows(study):
    rows = list(study.rows())
    assert len(rows) == 2 * 3 * 9
    assert COLUMNS[:13] == (
        "radius_um",
        "method",
        "wavelength_nm",
        "bow_angle_deg",
        "width_deg",
        "supernumerary_1_deg",
        "supernumerary_2_deg",
        "contrast",
        "secondary_over_primary",
        "polarization",
        "x",
        "y",
        "purity",
    )
    red = [row for row in rows if row["method"] == "mie" and row["wavelength_nm"] == 680.0]
    assert [row["radius_um"] for row in red] == [20.0, 40.0, 80.0]
    assert red[0]["bow_angle_deg"] > red[1]["bow_angle_deg"] > red[2]["bow_angle_deg"]  # fogbows are smaller rings
    assert red[0]["width_deg"] > red[1]["width_deg"] > red[2]["width_deg"]
    purity = [row["largest_purity"] for row in red]
    assert purity[0] < purity[1] < purity[2]  # larger drops, purer colours
    same = [row for row in rows if row["method"] == "mie"]
    assert all(row["delta_e_max"] == 0.0 for row in same)
    assert all(row["delta_e_mean"] > 0.1 for row in rows if row["method"] == "airy")
    assert "Study of radius_um: 3 steps" in repr(study)


def test_chromaticity_goes_from_red_to_blue(study):
    """At the bow angle of long waves the white-light bow is redder than at that of short ones."""
    colour = study.colour[0][2]
    assert colour[-1, 0] > colour[0, 0] + 0.05
    assert np.all((colour[:, 2] > 0.0) & (colour[:, 2] < 1.0))


def test_dataset(study):
    data = study.dataset()
    assert data["bow_angle"].dims == ("method", "step", "wavelength")
    assert data["bow_angle"].attrs["units"] == "degree"
    assert data["wavelength"].attrs["standard_name"] == "radiation_wavelength"
    assert list(data["radius"].to_numpy()) == [20.0, 40.0, 80.0]
    assert data["xyz"].shape == (2, 3, 401, 3)
    assert data.attrs["Conventions"] == "CF-1.11"
    assert "skyoptics" in data.attrs["source"]
    for name, variable in data.data_vars.items():
        assert {"units", "long_name"} <= set(variable.attrs), name


def test_halving(study):
    """A quarter of what the middle step differs from its neighbours' line."""
    found = halving(study)["mie"]
    bow = study.metric(lambda one: one.bow_angle)[0]
    expected = 0.25 * np.median(np.abs(bow[1] - 0.5 * (bow[0] + bow[2])))
    assert found["bow_angle_deg"] == pytest.approx(expected)
    assert 0.0 < found["delta_e"] < 20.0
    # true halving: what the line between two steps misses in their middle
    finer = run(radius_um=[40.0, np.sqrt(40.0 * 80.0), 80.0], method="airy", spread=0.1, wavelength_nm=550.0)
    coarse = run(radius_um="20:80:3", method="airy", spread=0.1, wavelength_nm=550.0)
    b = finer.metric(lambda one: one.bow_angle)[0, :, 0]
    missed = abs(b[1] - 0.5 * (b[0] + b[2]))
    assert halving(coarse)["airy"]["bow_angle_deg"] == pytest.approx(missed, rel=0.6)
    one = run(radius_um=50.0, method="airy", wavelength_nm=550.0)
    assert np.isnan(halving(one)["airy"]["bow_angle_deg"])


def test_files(study, tmp_path):
    folder = tmp_path / "new" / "folder"
    files = study.save(folder, ("skyoptics", "study", "--out", "/home/somebody/folder"))
    names = {path.name for path in files}
    assert names == {path.name for path in folder.iterdir()}
    assert {
        "study.csv",
        "study.nc",
        "study.md",
        "metrics.png",
        "colours.png",
        "chromaticity.png",
        "curves.png",
    } == names
    with (folder / "study.csv").open(encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    assert len(rows) == 54
    assert float(rows[0]["bow_angle_deg"]) == pytest.approx(next(study.rows())["bow_angle_deg"], rel=1e-8)
    with xarray.open_dataset(folder / "study.nc", engine="h5netcdf") as data:
        np.testing.assert_allclose(data["bow_angle"], study.metric(lambda one: one.bow_angle))
        assert "somebody" not in data.attrs["history"]
        assert "_FillValue" not in data["wavelength"].encoding
    page = (folder / "study.md").read_text(encoding="utf-8")
    assert "a step half as wide would change the bow angle by" in page
    assert "ΔE2000" in page
    assert "/home" not in page


def test_nothing_is_left_when_writing_fails(study, tmp_path, monkeypatch):
    def broken(_):
        raise ValueError("no figure today")

    monkeypatch.setattr(plots, "figures", broken)
    with pytest.raises(ValueError, match="today"):
        study.save(tmp_path / "out")
    assert list(tmp_path.iterdir()) == []
    (tmp_path / "file").write_text("x")
    with pytest.raises(ResourceError, match="is a file"):
        study.save(tmp_path / "file" / "out")


def test_threads_do_not_matter():
    asked = {"radius_um": 15.0, "method": "mie", "spread": 0.1, "wavelength_nm": "500:600:2", "tolerance": 0.1}
    told = []
    first = run(**asked, threads=1)
    second = run(**asked, threads=3, progress=lambda *news: told.append(news))
    np.testing.assert_array_equal(first.map_intensity, second.map_intensity)
    assert told[-1][1] == told[-1][2]


@pytest.mark.parametrize(
    ("swept", "falls"),
    [({"temperature_c": "0:30:3"}, True), ({"spread": "0.05:0.2:3"}, True)],
)
def test_other_sweeps(swept, falls):
    found = run(radius_um=100.0, method="airy", wavelength_nm=550.0, **swept)
    name = next(iter(swept))
    assert found.question.sweep == name
    bow = found.metric(lambda one: one.bow_angle)[0, :, 0]
    # warm water refracts less; of spread drops the large ones, nearer the geometric bow, give most of the light
    assert np.all(np.diff(bow) < 0.0) == falls


def test_sweep_of_rain():
    found = run(rain_mm_h="1:20:2", method="airy", wavelength_nm=550.0)
    rows = list(found.rows())
    assert rows[0]["rain_mm_h"] == 1.0
    assert rows[1]["radius_um"] > rows[0]["radius_um"]
    assert rows[1]["bow_angle_deg"] < rows[0]["bow_angle_deg"]
    assert any("flattened" in note for note in found.warnings)


def test_faults_come_before_work():
    with pytest.raises(DomainError, match='such as radius_um="10:1000:24"'):
        run()
    with pytest.raises(DomainError, match="allowed"):
        run(radius_um=0)


def test_figures_draw_any_sweep(study):
    for figure in plots.figures(replace(study, steps=study.steps)).values():
        assert figure.axes
