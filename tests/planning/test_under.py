"""A scene behind a preview."""

import pytest

from skyoptics.errors import DomainError
from skyoptics.planning import sensors, under, view
from skyoptics.planning.aiming import Aim
from skyoptics.planning.framing import Camera
from skyoptics.scene.load import from_text
from skyoptics.units import DEG, MM

SCENE = """
[light]
latitude_deg = 47.0
longitude_deg = 8.0
time = "2027-05-12T18:00+02:00"
aerosol_depth = 0.3

[[air]]
kind = "drops"

[camera]
focal_mm = 100
width_px = 30
height_px = 20
iso = 100
aperture = 8
exposure_s = 0.01

[picture]
glare = "eye"
"""


@pytest.mark.parametrize("lens", ["rectilinear", "equisolid"])
def test_camera_and_light_are_the_plans(lens):
    scene = from_text(SCENE)
    seen = view.around_frame(Camera(lens, 24.0 * MM, sensors.find("36x24")), Aim(1.2, 0.3, 0.1))
    found = under.refitted(scene, seen, 200.0 * DEG, 9.0 * DEG, "sun")
    assert found.camera.lens == lens
    # angles are the same whatever the size of the sensor
    focal_share = found.camera.focal / found.camera.sensor[0]
    assert focal_share == pytest.approx(seen.camera.focal / seen.camera.sensor.width)
    assert found.camera.pixels == seen.shape[::-1]
    aim = found.camera.aim
    assert (aim.azimuth, aim.elevation, aim.roll) == pytest.approx((1.2, 0.3, 0.1))
    assert (found.light.azimuth, found.light.elevation) == pytest.approx((200.0 * DEG, 9.0 * DEG))
    # the rest is the scene's
    assert (found.camera.iso, found.light.aerosol_depth, found.picture.glare) == (100.0, 0.3, "eye")
    assert found.air == scene.air


def test_grid_of_the_scene_is_the_views():
    # what will be rendered and what is drawn upon it look at the same directions
    from skyoptics.camera.frame import aim, photograph

    seen = view.around_frames(
        Camera("rectilinear", 50.0 * MM, sensors.find("36x24")), (Aim(0.9, 0.2), Aim(1.5, 0.2), Aim(2.1, 0.5))
    )
    camera = under.refitted(from_text(SCENE), seen, 4.0, 0.1, "sun").camera
    shape = camera.pixels[::-1]
    rotation = aim(camera.aim.azimuth, camera.aim.elevation, camera.aim.roll)
    grid = photograph(camera.lens, camera.focal, camera.sensor, shape, rotation)
    assert grid.vectors()[::97, ::97] == pytest.approx(seen.directions.vectors()[::97, ::97], abs=1e-7, nan_ok=True)


def test_moon():
    scene = from_text(SCENE.replace("[light]", "[light]\nbody = 'moon'"))
    seen = view.around_frame(Camera("rectilinear", 24.0 * MM, sensors.find("36x24")), Aim(1.2, 0.3))
    found = under.refitted(scene, seen, 1.0, 0.4, "moon").light
    assert (found.body, found.phase_angle_deg) == ("moon", 0.0)


def test_lens_too_short():
    seen = view.around_frame(Camera("equisolid", 0.5 * MM, sensors.find("1000x800")), Aim(1.2, 0.3))
    with pytest.raises(DomainError, match="too large for a lens"):
        under.refitted(from_text(SCENE), seen, 1.0, 0.4, "sun")
