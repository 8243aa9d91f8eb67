"""Named arcs in renders: shares, single arcs, explanations, mixtures, a disc over the sun."""

import json

import numpy as np
import pytest

from skyoptics.cli.main import run as cli
from skyoptics.errors import DomainError, SceneError
from skyoptics.rendering.build import build
from skyoptics.rendering.explain import explain
from skyoptics.rendering.labels import annotated, arc_labels
from skyoptics.rendering.named import binned, own_light
from skyoptics.rendering.run import Settings, render
from skyoptics.scene.load import load

SCENE = """
[light]
elevation_deg = 22
azimuth_deg = 180
attenuation = "none"
[[air]]
name = "plates"
kind = "crystals"
aspect = 0.4
orientation = "plate"
tilt_deg = 1.2
[[air]]
name = "columns"
kind = "crystals"
aspect = 2.5
orientation = "column"
[[air]]
name = "prisms"
kind = "crystals"
[camera]
lens = "equidistant"
focal_mm = 7.6
sensor_mm = [24, 24]
width_px = 150
aim = { azimuth_deg = 180, elevation_deg = 90 }
[picture]
background = 0
wavelengths_nm = [480, 550, 620]
"""


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    return tmp_path_factory.mktemp("named")


@pytest.fixture(scope="module", autouse=True)
def own_cache(folder):
    patch = pytest.MonkeyPatch()
    patch.setattr("skyoptics.rendering.film.films_folder", lambda: folder / "films")
    yield
    patch.undo()


def scene(folder, text=SCENE, name="display"):
    path = folder / f"{name}.toml"
    path.write_text(text)
    return load(path, ()), str(path)


@pytest.fixture(scope="module")
def whole(folder):
    return render(*scene(folder), Settings(rays=2**18, threads=2))


def test_own_light_adds_up_to_the_picture(whole):
    side = 2
    lights = own_light(whole.job, whole.parted, side)
    solid = whole.job.directions.solid_angle()
    flux = binned(whole.xyz[..., 1] * solid, side)
    cells = np.divide(flux, binned(solid, side), out=np.zeros_like(flux), where=flux > 0)
    middle = (slice(15, 60), slice(15, 60))  # high up, where the path through the layer hardly changes inside a cell
    total = sum(lights.values())
    assert total[middle].sum() == pytest.approx(cells[middle].sum(), rel=1e-2)
    assert {"circumzenithal", "parhelic_circle", "upper_tangent", "halo_22", "other"} <= set(lights)


def test_films_keep_groups_that_add_up_exactly(whole):
    for part in whole.parted:
        if part.work is None:
            continue
        film, side = part.work.film, part.work.side
        for band in range(3):
            plane = binned(film.sums[band].astype(float), side)
            total = film.groups[band].sum(axis=0, dtype=float)
            assert total.sum() == pytest.approx(plane.sum(), rel=1e-6)
            assert np.abs(total - plane).max() < 1e-5 * plane.max()  # pixels are single precision


@pytest.mark.slow
def test_single_arcs_add_up_to_the_picture(folder, whole):
    names = {name for part in whole.parted for name in part.names}
    settings = Settings(rays=2**18, threads=2)
    total = np.zeros_like(whole.xyz, dtype=float)
    for name in sorted(names):
        total += np.nan_to_num(render(*scene(folder), settings, only=name).xyz)
    expected = np.nan_to_num(whole.xyz)
    assert np.abs(total - expected).max() < 1e-5 * expected.max()
    assert total.sum() == pytest.approx(expected.sum(), rel=1e-5)


def test_one_arc_alone_has_the_rays_and_the_exposure_of_the_whole(folder, whole):
    settings = Settings(rays=2**18, threads=2)
    result = render(*scene(folder), settings, only="circumzenithal")
    assert result.report["exposure_ev"] == whole.report["exposure_ev"]
    lit = np.nan_to_num(result.xyz[..., 1])
    full = np.nan_to_num(whole.xyz[..., 1])
    assert 0.0 < lit.sum() < full.sum()
    assert np.all(lit <= full * (1 + 1e-5) + 1e-6 * full.max())
    elevation = np.arcsin(whole.job.directions.vectors()[..., 2])
    assert np.degrees(elevation[lit > 0.2 * lit.max()]).min() > 55
    none = render(*scene(folder), settings, only="circumhorizontal")  # the sun is too low for it
    assert np.nan_to_num(none.xyz).sum() < 1e-3 * np.nan_to_num(whole.xyz).sum()


def test_wrong_names_are_told(folder):
    with pytest.raises(DomainError, match="did you mean circumzenithal"):
        render(*scene(folder), Settings(rays=2**14), only="circumzenital")
    with pytest.raises(DomainError, match="two crystals"):
        render(*scene(folder), Settings(rays=2**14), only="parhelia_44")


def test_shares_say_what_makes_a_spot_bright(folder):
    found = explain(*scene(folder), 180.0, 68.2, Settings("draft", threads=2))
    assert sum(entry["share"] for entry in found["shares"]) == pytest.approx(1.0, abs=1e-9)
    best = found["shares"][0]
    assert (best["arc"], best["particles"]) == ("circumzenithal", "plates")
    assert best["share"] > 0.6
    assert best["paths"][0]["faces"].startswith("1-")  # in by the upper basal face, out by a side face
    assert 0.7 < sum(path["part"] for path in best["paths"]) <= 1.0 + 1e-9
    assert found["from_source_deg"] == pytest.approx(46.2, abs=1e-6)


def test_explanations_agree_with_the_picture(folder, whole):
    # the same light from two ways of tracing, at the top of the 22 degree halo
    found = explain(*scene(folder), 180.0, 44.3, Settings("draft", threads=2))
    view = np.array([0.0, -np.cos(np.radians(44.3)), np.sin(np.radians(44.3))])
    row, column = whole.job.directions.project(view)
    near = whole.xyz[
        round(float(row)) - 1 : round(float(row)) + 2, round(float(column)) - 1 : round(float(column)) + 2, 1
    ]
    assert near.min() < found["luminance_cd_m2"] < near.max() * 1.6


def test_labels_name_what_is_seen(whole):
    texts = [label.text for label in arc_labels(whole)]
    assert {"Circumzenithal arc", "Upper tangent arc", "Parhelic circle"} <= set(texts)
    assert "Circumhorizontal arc" not in texts
    made = annotated(whole)
    assert made.rgb.shape == (150, 150, 3)
    assert made.rgb.dtype == np.uint8
    for label in arc_labels(whole):
        assert np.all(label.anchors[:, 2] <= 1.0)


def test_mixtures_equal_separate_renders_added(folder, whole):
    single = []
    tables = SCENE.split("[[air]]")
    for number in (1, 2, 3):
        last = tables[number] if number == 3 else tables[number] + "[camera]" + SCENE.split("[camera]")[1]
        text = tables[0] + "[[air]]" + last
        single.append(np.nan_to_num(render(*scene(folder, text, f"one{number}"), Settings(rays=2**18, threads=2)).xyz))
    expected = np.nan_to_num(whole.xyz)
    assert np.abs(np.sum(single, axis=0) - expected).max() < 1e-5 * expected.max()


MIXED = (
    SCENE.replace("[camera]", '[mixture]\noptical_depth = 0.3\nby = "BY"\n[camera]')
    .replace('name = "plates"', 'name = "plates"\nshare = 3\ndiameter_um = 200')
    .replace('name = "columns"', 'name = "columns"\nshare = 1\ndiameter_um = 50')
)


@pytest.mark.parametrize("by", ["number", "cross-section", "optical-depth"])
def test_shares_are_what_they_are_said_to_be(folder, by):
    sheets = build(*scene(folder, MIXED.replace("BY", by), "mixed")).sheets
    plates, columns, prisms = sheets
    depth = np.array([plates.optical_depth, columns.optical_depth])
    up = [float(sheet.extinction(np.ones(1))[0]) for sheet in (plates, columns)]
    assert prisms.optical_depth == 0.1  # its own
    if by == "optical-depth":
        assert depth * up == pytest.approx([0.225, 0.075])
        return
    assert depth.sum() == pytest.approx(0.3)
    area = [plates.cross_section, columns.cross_section] if by == "number" else [1.0, 1.0]
    assert depth[0] / depth[1] == pytest.approx(3 * area[0] / area[1])


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (("share = 3", "share = 0", "share = 1", "share = 0"), "add up to 0"),
        (('[mixture]\noptical_depth = 0.3\nby = "number"\n', ""), "need a .mixture."),
        (("share = 3", "share = 3\noptical_depth = 0.2"), "keep one of the two"),
        (("share = 3", "", "share = 1", ""), "no \\[\\[air\\]\\] table has a share"),
    ],
)
def test_wrong_mixtures_are_told(folder, change, words):
    text = MIXED.replace("BY", "number")
    for old, new in zip(change[::2], change[1::2], strict=True):
        assert old in text
        text = text.replace(old, new, 1)
    with pytest.raises(SceneError, match=words):
        build(*scene(folder, text, "wrong"))


def test_a_disc_hides_the_sun(folder, whole):
    covered = render(
        *scene(folder, SCENE.replace("[camera]", "[camera]\ncover_deg = 6"), "cover"), Settings(rays=2**18)
    )
    ratio = covered.xyz[..., 1] / np.where(whole.xyz[..., 1] > 0.0, whole.xyz[..., 1], np.nan)
    away = np.degrees(np.arccos(np.clip(whole.job.directions.vectors() @ whole.job.sources[0].direction, -1, 1)))
    assert np.nanmax(ratio[away < 4.0]) == 0.0  # the background is black here
    assert np.nanmin(ratio[away > 8.0]) == pytest.approx(1.0, rel=1e-5)
    assert covered.report["traced_rays"] == 0  # nothing is traced again


def test_commands(folder, capsys, monkeypatch):
    monkeypatch.chdir(folder)
    scene(folder)
    assert cli(["render", "display.toml", "--explain", "180,68.2", "--json", "--quality", "draft"]) == 0
    found = json.loads(capsys.readouterr().out)
    assert found["shares"][0]["arc"] == "circumzenithal"
    assert cli(["render", "display.toml", "--rays", "16384", "--labels", "--only", "parhelia"]) == 0
    assert (folder / "outputs/display/display.parhelia.labels.png").exists()
    assert json.loads((folder / "outputs/display/display.parhelia.json").read_text())["only"] == "parhelia"
    capsys.readouterr()
    assert cli(["render", "display.toml", "--only", "parhelja"]) != 0
    assert "did you mean parhelia" in capsys.readouterr().err
    assert cli(["render", "display.toml", "--explain", "180"]) != 0
    assert "such as 120.5,22" in capsys.readouterr().err
    assert cli(["render", "display.toml", "--explain", "180,91"]) != 0
    assert "-90 to 90" in capsys.readouterr().err
