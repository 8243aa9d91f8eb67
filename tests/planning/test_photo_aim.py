"""Scale and pose of a camera, against projections written out and against poses that are known."""

import numpy as np
import pytest

from skyoptics.camera.frame import aim
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import azimuth_elevation, direction
from skyoptics.planning import photo_aim
from skyoptics.planning.photo_exif import Exif
from skyoptics.units import DEG

SHAPE = (2000, 3000)


def test_scale_from_what_is_given_and_from_exif():
    """Field across 36 mm at 24 mm: 73.7°, at 50 mm: 39.6° (rectilinear, 2 atan(18/f))."""
    for found in (
        photo_aim.scale(SHAPE, Exif(), focal_mm=24.0, sensor_mm=(36.0, 24.0)),
        photo_aim.scale(SHAPE, Exif(), focal_mm=24.0, sensor_mm=(24.0, 36.0)),
        photo_aim.scale(SHAPE, Exif(), equivalent_mm=24.0),
        photo_aim.scale(SHAPE, Exif(focal_mm=24.0), sensor_mm=(36.0, 24.0)),
        photo_aim.scale(SHAPE, Exif(focal_mm=24.0, sensor_width_mm=36.0)),
        photo_aim.scale(SHAPE, Exif(focal_mm=16.0, sensor_width_mm=24.0, equivalent_mm=25.0)),
        photo_aim.scale(SHAPE, Exif(focal_mm=16.0, equivalent_mm=24.0)),
        photo_aim.scale(SHAPE, Exif(focal_mm=50.0, equivalent_mm=75.0), focal_mm=16.0),
    ):
        assert 2.0 * np.arctan(1500.0 / found.pixels) / DEG == pytest.approx(73.7, abs=0.05)
    # upright: the long side is still the sensor's
    upright = photo_aim.scale((3000, 2000), Exif(), focal_mm=50.0, sensor_mm=(36.0, 24.0))
    assert 2.0 * np.arctan(1500.0 / upright.pixels) / DEG == pytest.approx(39.6, abs=0.05)


def test_a_crop_keeps_one_side_whole():
    wide = photo_aim.scale((1688, 3000), Exif(), focal_mm=24.0, sensor_mm=(36.0, 24.0))
    square = photo_aim.scale((2000, 2000), Exif(), focal_mm=24.0, sensor_mm=(36.0, 24.0))
    assert (wide.pixels, square.pixels) == pytest.approx((2000.0, 2000.0))
    assert "ratio" in wide.notes[0]
    assert "cropped" in photo_aim.scale((1000, 1500), Exif(equivalent_mm=24.0, recorded=(3000, 2000))).notes[1]


def test_too_little_and_too_much_is_said():
    with pytest.raises(DomainError, match=r"no focal length: add --focal-mm 24 --sensor 36x24, or --equivalent-mm"):
        photo_aim.scale(SHAPE, Exif())
    with pytest.raises(DomainError, match=r"EXIF: 24 mm\) but not the sensor's size: add --sensor"):
        photo_aim.scale(SHAPE, Exif(focal_mm=24.0))
    with pytest.raises(DomainError, match="equivalent"):
        photo_aim.scale(SHAPE, Exif(), focal_mm=24.0, equivalent_mm=24.0)


@pytest.mark.parametrize("roll", [0.0, 12.0, -170.0])
@pytest.mark.parametrize(("azimuth", "elevation"), [(10.0, 5.0), (200.0, -35.0), (350.0, 60.0)])
def test_pose_from_one_pixel_with_a_known_roll(azimuth, elevation, roll):
    camera = aim(azimuth * DEG, elevation * DEG, roll * DEG)
    for right, up in ((0.0, 0.0), (0.3, 0.1), (-0.4, -0.2)):
        seen = np.array([right, up, 1.0])
        seen /= np.linalg.norm(seen)
        there = azimuth_elevation(camera.T @ seen)
        found = photo_aim.by_pixel(seen, float(there[0]), float(there[1]), roll * DEG)
        if not found.notes:  # else two aims do it, and the other one may be the camera's
            assert found.rotation == pytest.approx(camera, abs=1e-9)
        assert found.rotation.T @ seen == pytest.approx(camera.T @ seen, abs=1e-9)
    assert found.angles_deg[2] == pytest.approx(roll, abs=1e-6)


def test_an_impossible_pixel_is_said():
    seen = np.array([0.8, 0.0, 0.6])
    with pytest.raises(DomainError, match=r"no aim with a roll of 0° shows the sun, 60\.00° high"):
        photo_aim.by_pixel(seen, 0.0, 60.0 * DEG, 0.0)


def test_marks_give_the_full_rotation():
    camera = aim(140.0 * DEG, 20.0 * DEG, -33.0 * DEG)
    world = [direction(a * DEG, e * DEG) for a, e in ((120.0, 5.0), (155.0, 30.0), (140.0, 1.0))]
    for count in (2, 3):
        found = photo_aim.by_marks([camera @ one for one in world[:count]], world[:count], 5e-4)
        assert found.rotation == pytest.approx(camera, abs=1e-12)
        assert found.angles_deg == pytest.approx((140.0, 20.0, -33.0))
        assert found.residual == pytest.approx(0.0, abs=1e-12)
        assert not found.notes


def test_marks_that_disagree_are_said():
    """Directions 35° apart seen 33° apart: each is missed by half of the 2° between them."""
    seen = [direction(a * DEG, 0.0) for a in (0.0, 33.0)]
    world = [direction(a * DEG, 0.0) for a in (10.0, 45.0)]
    found = photo_aim.by_marks(seen, world, 5e-4)
    assert found.residual / DEG == pytest.approx(1.0, abs=1e-6)
    assert "1.00°" in found.notes[0]
    with pytest.raises(DomainError, match="further apart"):
        photo_aim.by_marks([seen[0], seen[0]], world, 5e-4)
    with pytest.raises(DomainError, match="further apart"):
        photo_aim.by_marks(seen, [world[0], -world[0]], 5e-4)


def test_pixels_outside_picture_and_image_are_said():
    own = photo_aim.grid("orthographic", 400.0, (1000, 1000))
    with pytest.raises(DomainError, match="outside the picture, which is 1000 × 1000 pixels"):
        photo_aim.view(own, (1000.0, 3.0), "--sun-pixel")
    with pytest.raises(DomainError, match="outside the image of this lens"):
        photo_aim.view(own, (3.0, 3.0), "--mark")
    assert photo_aim.view(own, (499.5, 499.5), "--mark") == pytest.approx([0.0, 0.0, 1.0])
