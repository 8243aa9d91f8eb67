"""Models: defaults, SI values, keys that decide each other."""

import subprocess
import sys
from math import atan, hypot, pi, radians

import pytest
from pydantic import ValidationError

from skyoptics.errors import DomainError
from skyoptics.scene.load import from_mapping, from_text
from skyoptics.scene.model import KINDS, Aim, Camera, Drops, Light, Medium, Particles, Picture, Scene


def test_shortest_scene_takes_the_defaults(shortest):
    scene = from_text(shortest)
    assert scene == Scene(light=Light(elevation_deg=20.0), air=(Drops(kind="drops"),))
    assert scene.light.azimuth_deg == 180.0
    assert (scene.light.disc, scene.light.attenuation) == ("sun", "air")
    assert (scene.light.ozone_du, scene.light.aerosol_depth, scene.light.aerosol_exponent) == (300.0, 0.1, 1.3)
    assert scene.light.pressure_hpa == 1013.25
    assert scene.medium == Medium(kind="air")
    drops = scene.air[0]
    assert (drops.radius_um, drops.temperature_c, drops.optical_depth) == (500.0, 10.0, 0.1)
    assert (drops.index, drops.index_table, drops.name) == (None, None, None)
    assert drops.orders == tuple(range(11))
    assert (drops.place, drops.below_horizon) == ("curtain", False)
    assert (scene.camera.lens, scene.camera.aim) == ("rectilinear", "antisolar")
    assert scene.camera.focal == pytest.approx(0.024)
    assert scene.camera.sensor == pytest.approx((0.036, 0.024))
    assert scene.camera.pixels == (1200, 800)
    assert scene.picture == Picture()
    assert (scene.picture.background, scene.picture.ground) == (0.01, 0.25)
    assert (scene.picture.observer, scene.picture.depth_bits) == ("1931", 8)
    assert (scene.picture.wavelengths, scene.picture.bin, scene.picture.exposure_ev) == (None, None, None)


def test_bare_names_are_in_si_units(full):
    scene = from_text(full)
    assert scene.light.elevation == pytest.approx(radians(20.5))
    assert scene.light.azimuth_deg == 270.0
    assert scene.light.azimuth == pytest.approx(1.5 * pi)
    assert scene.light.pressure == pytest.approx(90000.0)
    assert scene.air[0].radius == pytest.approx(250e-6)
    assert scene.air[0].temperature == pytest.approx(277.15)
    assert scene.air[0].orders == (2, 3)
    assert isinstance(scene.camera.aim, Aim)
    assert scene.camera.aim.azimuth == pytest.approx(pi / 2)
    assert scene.camera.aim.elevation == pytest.approx(pi / 18)
    assert scene.camera.aim.roll == pytest.approx(pi / 36)
    assert scene.camera.focal == pytest.approx(0.012)
    assert scene.camera.pixels == (600, 400)
    assert scene.picture.wavelengths == pytest.approx((450e-9, 550e-9, 650e-9))
    assert Picture(bin_nm=5.0).bin == pytest.approx(5e-9)


@pytest.mark.parametrize(
    ("given", "stored"), [(0, 0.0), (360, 0.0), (-360, 0.0), (-90, 270.0), (359.5, 359.5), (-1e-300, 0.0), (-0.0, 0.0)]
)
def test_azimuth_comes_into_one_turn(given, stored):
    azimuth_deg = Light(elevation_deg=1.0, azimuth_deg=given).azimuth_deg
    assert azimuth_deg == stored
    assert 0.0 <= azimuth_deg < 360.0


@pytest.mark.parametrize(
    ("fields", "pixels"),
    [
        ({}, (1200, 800)),
        ({"width_px": 300}, (300, 200)),
        ({"height_px": 300}, (450, 300)),
        ({"width_px": 7, "height_px": 5}, (7, 5)),
        ({"sensor_mm": [10, 10]}, (1200, 1200)),
        ({"sensor_mm": [1000, 1], "focal_mm": 5000, "width_px": 1}, (1, 1)),
        ({"lens": "panorama"}, (1200, 600)),
        ({"lens": "panorama", "width_deg": 90, "height_deg": 90}, (1200, 1200)),
        ({"lens": "panorama", "height_px": 10}, (20, 10)),
    ],
)
def test_missing_side_follows_from_the_aspect(fields, pixels):
    assert Camera(**fields).pixels == pixels


def test_panorama_has_angles_and_no_focal_length():
    camera = Camera(lens="panorama")
    assert (camera.width, camera.height) == pytest.approx((2 * pi, pi))
    assert Camera(lens="panorama", width_deg=90.0).width == pytest.approx(pi / 2)
    for name in ("focal", "sensor"):
        with pytest.raises(DomainError, match="width_deg by height_deg"):
            getattr(camera, name)


def test_rectilinear_limit_is_where_it_is_said():
    shortest = hypot(36, 24) / 2 / 5.6712818196177
    """tan 80° from a table of tangents."""
    assert Camera(focal_mm=shortest * 1.0001).focal > 0.0
    assert atan(hypot(36, 24) / 2 / shortest) == pytest.approx(radians(80))
    with pytest.raises(ValidationError):
        Camera(focal_mm=shortest * 0.9999)
    assert Camera(lens="stereographic", focal_mm=shortest * 0.9999).focal > 0.0


def test_models_are_frozen_and_compare_by_content(full):
    scene = from_text(full)
    assert scene == from_text(full)
    assert hash(scene) == hash(from_text(full))
    with pytest.raises(ValidationError):
        scene.title = "other"


def test_defaults_make_the_same_scene_when_written_out(texts):
    for text in texts:
        scene = from_text(text)
        everything = scene.model_dump()
        assert Scene.model_validate(everything) == scene
        assert from_mapping(everything) == scene


def test_every_kind_of_particle_is_found_by_its_name():
    assert KINDS["drops"] is Drops
    for name, kind in KINDS.items():
        assert issubclass(kind, Particles)
        assert name == kind.NAME
        assert kind(kind=name).optical_depth == 0.1


def test_reading_scenes_loads_nothing_heavy():
    code = "import sys, skyoptics.scene.load, skyoptics.scene.digest, skyoptics.scene.schema; print(*sys.modules)"
    loaded = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout.split()
    assert "skyoptics.scene.load" in loaded
    assert not {"numba", "scipy", "colour", "matplotlib", "xarray", "imageio", "rich"} & set(loaded)
