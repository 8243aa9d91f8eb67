"""Canonical form and hash of a scene."""

import json
import subprocess
import sys

import pytest

from skyoptics.errors import DataFileError
from skyoptics.scene.digest import canonical, scene_hash
from skyoptics.scene.load import from_text, load


def test_hash_is_the_same_in_another_process(full):
    code = (
        "import sys; from skyoptics.scene.load import from_text; from skyoptics.scene.digest import scene_hash;"
        "sys.stdout.write(scene_hash(from_text(sys.stdin.read())))"
    )
    other = subprocess.run(
        [sys.executable, "-c", code], input=full, capture_output=True, text=True, check=True, encoding="utf-8"
    )
    assert other.stdout == scene_hash(from_text(full))
    assert len(other.stdout) == 64


@pytest.mark.parametrize(
    "change",
    [
        "light.azimuth_deg=180",
        "light.azimuth_deg=-180",
        "camera.focal_mm=24",
        "camera.sensor_mm=[36, 24]",
        "camera.width_px=1200",
        "camera.height_px=800",
        "air.1.orders=[10,9,8,7,6,5,4,3,2,1,0]",
        "air.1.radius_um=500.0",
        "picture.ground=0.25",
    ],
)
def test_other_ways_to_write_a_scene_have_the_same_hash(shortest, change):
    assert scene_hash(from_text(shortest, overrides=[change])) == scene_hash(from_text(shortest))


@pytest.mark.parametrize(
    "change",
    [
        "light.azimuth_deg=180.0000001",
        "camera.focal_mm=25",
        "camera.height_px=801",
        "air.1.orders=[2]",
        "air.1.index=1.33",
        "picture.wavelengths_nm=[500]",
        "picture.exposure_ev=0",
        "medium.kind=vacuum",
        "title=x",
        "camera.aim=sun",
    ],
)
def test_another_scene_has_another_hash(shortest, change):
    assert scene_hash(from_text(shortest, overrides=[change])) != scene_hash(from_text(shortest))


def test_zero_has_no_sign(shortest):
    hashes = {
        scene_hash(from_text(shortest, overrides=[f"light.elevation_deg={zero}"])) for zero in ("0", "0.0", "-0.0")
    }
    assert len(hashes) == 1


def test_panorama_is_complete(texts):
    camera = canonical(from_text(texts[2], overrides=["camera.width_deg=180.0"]))["camera"]
    assert (camera["width_deg"], camera["height_deg"], camera["width_px"], camera["height_px"]) == (
        180.0,
        45.0,
        1200,
        300,
    )
    assert camera["focal_mm"] is None
    short = 'light.elevation_deg=1\nair=[{kind="drops"}]\ncamera.lens="panorama"\n'
    assert scene_hash(from_text(short)) == scene_hash(from_text(short, overrides=["camera.height_deg=180"]))


def test_canonical_is_plain_data(texts):
    for text in texts:
        data = canonical(from_text(text))
        assert json.loads(json.dumps(data)) == data


def test_index_tables_count_by_content(tmp_path, shortest):
    hashes = []
    for folder, content in (("a", b"400,1.5\n"), ("b", b"400,1.5\r\n"), ("c", b"400,1.6\n")):
        (tmp_path / folder).mkdir()
        (tmp_path / folder / "n.csv").write_bytes(content)
        (tmp_path / folder / "s.toml").write_text(shortest + 'index_table = "n.csv"\n')
        hashes.append(scene_hash(load(tmp_path / folder / "s.toml")))
    assert hashes[0] == hashes[1] != hashes[2]
    scene = load(tmp_path / "a" / "s.toml")
    assert str(tmp_path) not in json.dumps(canonical(scene))
    (tmp_path / "a" / "n.csv").unlink()
    with pytest.raises(DataFileError, match="there is no such file"):
        scene_hash(scene)
