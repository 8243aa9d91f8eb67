"""``skyoptics render`` as a user meets it: files, last line, bad input, interruption."""

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import png
import pytest


def png_read(path):
    return png.Reader(bytes=Path(path).read_bytes()).read()


def test_files_and_last_line(command, tiny, tmp_path):
    done = command("render", tiny, "--out", "pictures", "--seed", 7, "--quality", "draft", "--data", "--threads", 1)
    assert done.code == 0
    assert sorted(p.name for p in (tmp_path / "pictures").iterdir()) == [
        "tiny.caption.txt",
        "tiny.json",
        "tiny.nc",
        "tiny.png",
    ]
    assert done.out.splitlines()[-1].startswith(os.path.join("pictures", "tiny.png") + ": ")
    assert "primary bow 41.8" in done.out
    width, height, _, info = png_read("pictures/tiny.png")
    assert (width, height, info["bitdepth"]) == (60, 40, 8)


def test_default_folder(command, tiny, tmp_path):
    assert command("render", tiny, "--quality", "draft").code == 0
    assert (tmp_path / "outputs" / "tiny" / "tiny.png").exists()


def test_report(command, tiny, tmp_path):
    done = command("render", tiny, "--quality", "draft", "--json", "--seed", 7)
    report = json.loads(done.out)
    kept = json.loads((tmp_path / "outputs/tiny/tiny.json").read_text())
    assert kept["scene_hash"] == report["scene_hash"]
    assert kept["command"] == "skyoptics render tiny.toml --seed 7 --quality draft"
    assert report["sheets"][0]["relative_error_at_most"] < 0.02
    assert report["exposure_automatic"]
    for text in (json.dumps(kept), done.out):
        assert str(tmp_path) not in text


def test_metadata_names_no_folder(command, tiny, tmp_path):
    command("render", tiny, "--quality", "draft", "--seed", 3, "--set", "light.elevation_deg=15")
    reader = png.Reader(bytes=Path("outputs/tiny/tiny.png").read_bytes())
    texts = {}
    for kind, data in reader.chunks():
        if kind in (b"tEXt", b"iTXt"):
            texts[data.split(b"\0")[0].decode()] = data
    assert str(tmp_path).encode() not in b"".join(texts.values())
    assert b"--set light.elevation_deg=15" in texts["Command"]
    assert {"Title", "Software", "Scene hash", "Seed"} <= set(texts)


def test_nothing_is_traced_twice(command, tiny):
    first = json.loads(command("render", tiny, "--quality", "draft", "--json", "--seed", 11).out)
    assert first["traced_rays"] > 0
    for change in ("picture.exposure_ev=12", "air.1.optical_depth=0.3", "light.elevation_deg=5", "air.1.orders=[2]"):
        again = json.loads(command("render", tiny, "--quality", "draft", "--json", "--seed", 11, "--set", change).out)
        assert again["traced_rays"] == 0, change
        assert again["sheets"][0]["reused"]
    other = json.loads(command("render", tiny, "--quality", "draft", "--json", "--seed", 12).out)
    assert other["traced_rays"] > 0


def test_linear_images(command, tiny):
    import OpenEXR
    import tifffile

    assert command("render", tiny, "--quality", "draft", "--image", "exr", "--image", "tiff").code == 0
    tiff = tifffile.imread("outputs/tiny/tiny.tiff")
    assert tiff.shape == (40, 60, 3)
    exr = OpenEXR.File("outputs/tiny/tiny.exr").channels()["RGB"].pixels
    assert exr == pytest.approx(np.nan_to_num(tiff))


def test_sixteen_bits(command, tiny):
    assert command("render", tiny, "--quality", "draft", "--set", "picture.depth_bits=16").code == 0
    assert png_read("outputs/tiny/tiny.png")[3]["bitdepth"] == 16


def test_dry_run_writes_nothing(command, tiny, tmp_path):
    done = command("render", tiny, "--dry-run", "--seed", 99)
    assert done.code == 0
    assert "rays to trace" in done.out
    assert not (tmp_path / "outputs").exists()


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (["render", "missing.toml"], "no such file"),
        (["render", "tiny.toml", "--set", "camera.focal_mn=24"], "did you mean focal_mm"),
        (["render", "tiny.toml", "--set", "light.elevation_deg=95"], "between -1 and 90"),
        (["render", "tiny.toml", "--set", "air.1.radius_um=nan"], "nan"),
        (
            ["render", "tiny.toml", "--set", "air.1.index_table=data.csv", "--set", "picture.wavelengths_nm=[900]"],
            "900",
        ),
        (["render", "tiny.toml", "--out", "tiny.toml/sub"], "cannot write"),
        (["render", "tiny.toml", "--set", "camera.width_px=30000", "--set", "camera.height_px=30000", "--data"], "GB"),
        (["render", "broken.toml"], "broken.toml:2"),
    ],
)
def test_bad_input_is_one_clear_message(command, tiny, tmp_path, words, said):
    (tmp_path / "broken.toml").write_text("[light]\nelevation_deg = = 3\n")
    (tmp_path / "data.csv").write_text("wavelength_nm,n\n400,1.34\n700,1.33\n")
    before = sorted(p.name for p in tmp_path.iterdir())
    done = command(*words)
    assert done.code == 1
    assert said in done.err
    assert "Traceback" not in done.err
    assert done.out == ""
    assert sorted(p.name for p in tmp_path.iterdir() if p.name != "outputs") == before
    assert not list(tmp_path.rglob("*.png"))


def test_interruption_leaves_nothing_half_written(tiny, tmp_path):
    tiny.write_text(tiny.read_text().replace("wavelengths_nm = [450, 550, 650]", "bin_nm = 0.5"))
    words = [sys.executable, "-m", "skyoptics", "render", str(tiny), "--quality", "fine", "--out", str(tmp_path / "o")]
    work = subprocess.Popen(words, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    deadline = time.monotonic() + 60
    while not (tmp_path / "o").exists() and time.monotonic() < deadline:
        time.sleep(0.05)
    time.sleep(1.0)
    work.send_signal(signal.SIGINT)
    out, err = work.communicate(timeout=60)
    assert work.returncode == 130
    assert "interrupted" in err
    assert "Traceback" not in err
    assert out == ""
    assert list((tmp_path / "o").iterdir()) == []


def test_an_index_without_a_bow_has_no_sentence_about_one(command, tiny):
    done = command("render", tiny, "--quality", "draft", "--set", "air.1.index=2.5")
    assert done.code == 0
    assert "nan" not in done.out


def test_polarisation_needs_data(command, tiny):
    done = command("render", tiny, "--stokes")
    assert done.code == 2
    assert "--data" in done.err


def test_a_change_of_quality_is_no_change_of_scene(command, tiny):
    command("render", tiny, "--quality", "draft", "--seed", 21)
    assert "have changed" not in command("render", tiny, "--quality", "normal", "--seed", 21).err
    moved = command("render", tiny, "--quality", "normal", "--seed", 21, "--set", "air.1.temperature_c=20")
    assert "have changed" in moved.err


def test_when_to_see_it_today(command, tiny, tmp_path):
    """The caption ends with a window of today at the place, in the language asked for."""
    done = command("render", tiny, "--quality", "draft", "--today", "0N 0E", "--tz", "UTC", "--lang", "de", "--json")
    assert done.code == 0
    report = json.loads(done.out)
    assert report["today"].startswith("Heute zu sehen: ")
    assert "Azimut" in report["today"]  # on the equator the sun is low twice on every day of the year
    assert report["caption"].endswith(report["today"])
    assert report["today"] in (tmp_path / "outputs/tiny/tiny.caption.txt").read_text(encoding="utf-8")
    lost = command("render", tiny, "--today", "95N 0E")
    assert lost.code == 1
    assert "latitude" in lost.err
    assert command("render", tiny, "--tz", "UTC").code == 2
