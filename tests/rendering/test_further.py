"""Slabs of finite depth in renders: weakened single scattering and what comes after it."""

import json

import numpy as np
import pytest

from skyoptics.cli.main import run as cli
from skyoptics.errors import SceneError
from skyoptics.rendering import further
from skyoptics.rendering.build import build
from skyoptics.rendering.explain import explain
from skyoptics.rendering.run import Settings, render
from skyoptics.scene.load import load

SCENE = """
[light]
elevation_deg = 25
azimuth_deg = 180
attenuation = "none"
[[air]]
name = "plates"
kind = "crystals"
aspect = 0.3
orientation = "plate"
tilt_deg = 2
optical_depth = DEPTH
place = "slab"
scatterings = MANY
[[air]]
name = "prisms"
kind = "crystals"
optical_depth = DEPTH
place = "slab"
scatterings = MANY
[camera]
lens = "equidistant"
focal_mm = 7.6
sensor_mm = [24, 24]
width_px = 60
aim = { azimuth_deg = 180, elevation_deg = 90 }
[picture]
background = 0
wavelengths_nm = [550]
"""
SETTINGS = Settings("draft", rays=2**17, threads=2)


def scene(folder, depth, many, change=("", "")):
    path = folder / "slab.toml"
    path.write_text(SCENE.replace("DEPTH", str(depth)).replace("MANY", str(many)).replace(*change))
    return load(path, ()), str(path)


@pytest.fixture(autouse=True)
def own_cache(tmp_path, monkeypatch):
    monkeypatch.setattr("skyoptics.rendering.store.folder", lambda: tmp_path / "tables")
    monkeypatch.setattr("skyoptics.rendering.film.films_folder", lambda: tmp_path / "films")


def luminance(result):
    return np.nan_to_num(result.xyz[..., 1].astype(float))


def test_a_thin_slab_is_a_layer(tmp_path):
    slab = luminance(render(*scene(tmp_path, 1e-4, 1), SETTINGS))
    layer = luminance(
        render(*scene(tmp_path, 1e-4, 1, ('place = "slab"\nscatterings = 1', 'place = "layer"')), SETTINGS)
    )
    assert slab == pytest.approx(layer, rel=5e-3, abs=1e-9)


def test_orders_add_up_and_grow_with_depth(tmp_path):
    shares = []
    for depth in (0.05, 0.5):
        once, twice, often = (luminance(render(*scene(tmp_path, depth, many), SETTINGS)) for many in (1, 2, '"all"'))
        assert np.all(twice >= once * (1 - 1e-6))
        assert often.sum() >= twice.sum() * (1 - 5e-3)  # draws of their own
        shares.append((twice.sum() / once.sum() - 1, often.sum() / once.sum() - 1))
    assert shares[0][0] < 0.2 < shares[1][0]
    assert shares[1][1] > 1.2 * shares[1][0]


def test_further_light_alone_and_in_explanations(tmp_path):
    described = scene(tmp_path, 0.5, '"all"')
    whole, once = luminance(render(*described, SETTINGS)), luminance(render(*scene(tmp_path, 0.5, 1), SETTINGS))
    alone = luminance(render(*scene(tmp_path, 0.5, '"all"'), SETTINGS, only="further_scatterings"))
    assert alone + once == pytest.approx(whole, rel=1e-4, abs=1e-6 * whole.max())
    found = explain(*scene(tmp_path, 0.5, '"all"'), 90.0, 50.0, Settings("draft", rays=2**18, threads=2))
    share = {entry["arc"]: entry["share"] for entry in found["shares"]}
    assert sum(share.values()) <= 1.0 + 1e-9
    assert share["further_scatterings"] > 0.2


def test_nothing_shines_from_below_the_horizon_unless_looked_down_on(tmp_path):
    change = (
        'lens = "equidistant"\nfocal_mm = 7.6\nsensor_mm = [24, 24]\nwidth_px = 60\n',
        'lens = "panorama"\nwidth_px = 60\naim = { azimuth_deg = 180, elevation_deg = 0 }',
    )
    change = (change[0] + "aim = { azimuth_deg = 180, elevation_deg = 90 }", change[1])
    text = scene(tmp_path, 0.3, 2, change)
    below = render(*text, SETTINGS)
    up = luminance(below)[:14]
    assert up.min() > 0.0
    assert np.all(luminance(below)[16:] == 0.0)
    path = tmp_path / "slab.toml"
    path.write_text(path.read_text().replace("scatterings = 2", 'scatterings = 2\nseen_from = "above"'))
    above = luminance(render(load(path, ()), str(path), SETTINGS))
    assert np.all(above[:14] == 0.0)
    assert above[16:].min() > 0.0


def test_the_report_tells_what_became_of_the_light(tmp_path):
    report = render(*scene(tmp_path, 0.5, '"all"'), SETTINGS).report
    layer = next(sheet for sheet in report["sheets"] if sheet["name"] == "further scatterings")
    total = sum(layer["by_order"]) + layer["unscattered"] + layer["left_inside"]
    assert total == pytest.approx(1.0, abs=0.01)  # ten orders are listed
    again = render(*scene(tmp_path, 0.5, '"all"'), SETTINGS).report
    assert again["traced_rays"] == 0


def test_tables_of_one_slab_must_agree(tmp_path):
    path = tmp_path / "slab.toml"
    path.write_text(SCENE.replace("DEPTH", "0.1").replace("MANY", "1", 1).replace("MANY", "2"))
    with pytest.raises(SceneError, match="share one layer"):
        build(load(path, ()), str(path))


def test_cells_on_the_horizon_are_left_out():
    from skyoptics.geometry.directions import Directions

    grid = Directions.cylindrical((9, 8), np.eye(3), (-np.pi, np.pi), (np.pi / 2, -np.pi / 2))
    held = further.known(grid, above=False)
    assert held[:4].all()
    assert not held[4:].any()


def test_dry_run_counts_the_slab(tmp_path, capsys):
    scene(tmp_path, 0.3, '"all"')
    assert cli(["render", str(tmp_path / "slab.toml"), "--dry-run", "--json"]) == 0
    many = json.loads(capsys.readouterr().out)
    scene(tmp_path, 0.3, 1)
    assert cli(["render", str(tmp_path / "slab.toml"), "--dry-run", "--json"]) == 0
    once = json.loads(capsys.readouterr().out)
    assert many["rays"] > once["rays"]
    assert many["memory_bytes"] > once["memory_bytes"]
