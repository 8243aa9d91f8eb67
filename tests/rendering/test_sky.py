"""The sky behind bows and halos."""

import numpy as np
import pytest

from skyoptics.light.air import Air
from skyoptics.rendering.build import build
from skyoptics.rendering.explain import explain
from skyoptics.rendering.run import Settings, render
from skyoptics.scene.load import load
from skyoptics.sky.clear import ClearSky

SCENE = """
[light]
elevation_deg = 30
azimuth_deg = 180
[[air]]
kind = "drops"
radius_um = 400
optical_depth = 0.05
below_horizon = true
[camera]
lens = "panorama"
width_px = 36
aim = { azimuth_deg = 180, elevation_deg = 0 }
[picture]
sky = "clear"
ground = 0.3
wavelengths_nm = [450, 550, 650]
"""
SETTINGS = Settings("draft", rays=2**16, threads=2)


@pytest.fixture(autouse=True)
def own_cache(tmp_path, monkeypatch):
    monkeypatch.setattr("skyoptics.rendering.store.folder", lambda: tmp_path / "tables")


def scene(tmp_path, *overrides):
    path = tmp_path / "sky.toml"
    path.write_text(SCENE)
    return load(path, overrides), str(path)


def luminance(tmp_path, *overrides):
    return render(*scene(tmp_path, *overrides), SETTINGS).xyz[..., 1].astype(float)


def test_drops_shine_in_front_of_the_clear_sky(tmp_path):
    job = build(*scene(tmp_path))
    sky = ClearSky(job.bins, job.sources[0].direction, Air(aerosol_depth_550=0.1), 0.3)
    behind = sky.radiance(job.directions.vectors())
    assert job.background.radiance(job.directions.vectors()) == pytest.approx(behind, rel=1e-6)
    with_sky = luminance(tmp_path)
    dark = luminance(tmp_path, "picture.sky=plain", "picture.background=0")
    empty = luminance(tmp_path, "air.1.optical_depth=0")
    assert with_sky == pytest.approx(dark + empty, rel=1e-5)
    assert empty.min() > 0.0


def test_the_sky_is_brighter_near_the_sun_and_dark_under_a_thick_cloud(tmp_path):
    clear = luminance(tmp_path, "air.1.optical_depth=0")
    assert clear[6, 18] > 2 * clear[3, 0]  # 25 degrees up under the sun, against 55 degrees up away from it
    thick, thicker = (
        luminance(tmp_path, "air.1.optical_depth=0", "picture.sky=overcast", f"picture.cloud_depth={depth}")
        for depth in (30, 300)
    )
    assert thicker.max() < 0.3 * thick.max()
    # CIE traditional overcast shape, ISO 15469 type 1: the zenith about three times as bright as the horizon
    assert thick[0].mean() / thick[8].mean() == pytest.approx(2.8, abs=0.6)


def test_moonlight_makes_a_faint_blue_sky(tmp_path):
    night = luminance(tmp_path, "air.1.optical_depth=0", "light.body=moon")
    day = luminance(tmp_path, "air.1.optical_depth=0")
    # sun -26.74, full moon -12.73 magnitudes (Allen; from memory): 4.0e5 times fainter, and a little redder
    assert np.median(day / night) == pytest.approx(4.0e5, rel=0.1)


def test_a_polariser_halves_an_unpolarised_sky(tmp_path):
    whole = luminance(tmp_path, "air.1.optical_depth=0")
    half = luminance(tmp_path, "air.1.optical_depth=0", "camera.polariser_deg=30")
    assert half == pytest.approx(0.5 * whole, rel=1e-6)


def test_explanations_count_the_sky(tmp_path):
    found = explain(*scene(tmp_path), 180.0, 60.0, SETTINGS)
    share = {entry["arc"]: entry["share"] for entry in found["shares"]}
    assert 0.1 < share["background"] < 1.0
