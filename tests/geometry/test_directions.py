"""Grids of directions: project(vectors()) is the grid, solid angles add up, lens formulas hold."""

import numpy as np
import pytest

from skyoptics.camera.frame import aim, panorama, photograph
from skyoptics.camera.lenses import LENSES
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import around, direction
from skyoptics.geometry.directions import Directions, frame_about
from skyoptics.units import DEG

ROTATION = aim(200 * DEG, 25 * DEG, 30 * DEG)
FOCAL = {"rectilinear": 14, "equidistant": 8, "equisolid": 8, "stereographic": 8, "orthographic": 12}


def grid(name, shape=(240, 360)):
    return photograph(name, FOCAL[name] * 1e-3, (36e-3, 24e-3), shape, ROTATION)


@pytest.mark.parametrize("name", LENSES)
def test_there_and_back(name):
    directions = grid(name)
    vectors = directions.vectors()
    row, column = directions.project(vectors)
    inside = np.isfinite(vectors[..., 0])
    expected_row, expected_column = np.mgrid[0:240, 0:360]
    assert inside.mean() > 0.5
    assert np.abs(row - expected_row)[inside].max() < 0.01
    assert np.abs(column - expected_column)[inside].max() < 0.01
    assert np.linalg.norm(vectors, axis=-1)[inside] == pytest.approx(1.0, abs=1e-8)


@pytest.mark.parametrize("name", LENSES)
def test_the_polynomial_is_the_lens(name):
    """Image radius against the projection formula (Kannala & Brandt 2006, eqs. 1-5), on a 6000 pixel wide picture."""
    directions = photograph(name, FOCAL[name] * 1e-3, (36e-3, 24e-3), (4000, 6000), ROTATION)
    theta = np.linspace(0.0, 2.0 * np.arcsin(np.sqrt(directions.map[3])), 300)
    row, column = directions.project(around(ROTATION[2], theta, 1.1))
    radius = np.hypot(row - 1999.5, column - 2999.5)
    assert np.abs(radius - directions.map[0] * LENSES[name].radius(theta)).max() < 0.006


def test_panorama_there_and_back():
    directions = panorama(2 * np.pi, np.pi, (90, 180), 30 * DEG, 0.0, 15 * DEG)
    row, column = directions.project(directions.vectors())
    expected_row, expected_column = np.mgrid[0:90, 0:180]
    assert np.abs(row - expected_row).max() < 1e-9
    assert np.abs(column - expected_column).max() < 1e-9
    assert directions.solid_angle().sum() == pytest.approx(4 * np.pi, rel=1e-12)


def test_panorama_azimuth_grows_to_the_right():
    directions = panorama(np.pi, np.pi / 2, (90, 180), 100 * DEG, 10 * DEG, 0.0)
    assert np.ravel(directions.project(direction(100 * DEG, 10 * DEG))) == pytest.approx([44.5, 89.5], abs=1e-9)
    assert np.ravel(directions.project(direction(101 * DEG, 10 * DEG))) == pytest.approx([44.5, 90.5], abs=1e-9)
    assert np.ravel(directions.project(direction(100 * DEG, 11 * DEG))) == pytest.approx([43.5, 89.5], abs=1e-9)


@pytest.mark.parametrize("name", LENSES)
def test_solid_angles_add_up_to_the_cap(name):
    """A circular image of half-width θ on a square grid: 2π (1 − cos θ) within the rim's pixels."""
    theta = 60 * DEG
    scale = 400 / LENSES[name].radius(np.array(theta))
    directions = Directions.radial((801, 801), np.eye(3), float(scale), LENSES[name].k, theta)
    assert directions.solid_angle().sum() == pytest.approx(2 * np.pi * (1 - np.cos(theta)), rel=2e-2)
    middle = directions.solid_angle()[400, 400]
    assert middle == pytest.approx(1.0 / float(scale) ** 2, rel=1e-4)


def test_scattering_axis_starts_at_the_source():
    source = direction(10 * DEG, 20 * DEG)
    axis = Directions.scattering_axis(source, 180)
    row, _ = axis.project(around(source, 42.25 * DEG, np.linspace(-3, 3, 7)))
    assert row == pytest.approx(41.75, abs=1e-9)
    assert axis.solid_angle().sum() == pytest.approx(4 * np.pi, rel=1e-12)


def test_packed_layout():
    directions = grid("equisolid")
    packed = directions.packed()
    assert packed.dtype == np.float32
    assert packed[:3].tolist() == [0, 240, 360]
    assert packed[3:12].reshape(3, 3) == pytest.approx(ROTATION, abs=1e-7)
    assert packed[16] == pytest.approx(1.0, abs=1e-6)


def test_frame_about_is_a_rotation():
    for pole in ([0, 0, 1.0], direction(1.0, 0.5), [0, 0, -1.0]):
        rotation = frame_about(np.asarray(pole))
        assert rotation @ rotation.T == pytest.approx(np.eye(3), abs=1e-15)
        assert np.linalg.det(rotation) == pytest.approx(1.0)


def test_too_wide_is_refused_in_words():
    with pytest.raises(DomainError, match="160°"):
        photograph("rectilinear", 2e-3, (36e-3, 24e-3), (200, 300), ROTATION)


@pytest.mark.parametrize("name", [*LENSES, "panorama"])
def test_a_part_sees_what_the_same_pixels_of_the_whole_see(name):
    """A definition, no source: cutting a picture and cutting its grid are the same; bits apart on a panorama alone."""
    if name == "panorama":
        whole = panorama(2 * np.pi, np.pi, (90, 180), 30 * DEG, 10 * DEG, 15 * DEG)
    else:
        whole = grid(name)
    part = whole.crop(slice(40, 81), slice(100, -50))
    assert part.shape == (41, whole.shape[1] - 150)
    expected = whole.vectors()[40:81, 100:-50]
    assert np.allclose(part.vectors(), expected, rtol=0.0, atol=1e-15, equal_nan=True)
    assert np.allclose(part.solid_angle(), whole.solid_angle()[40:81, 100:-50], rtol=1e-9, atol=0.0)
    assert np.ravel(part.project(whole.vectors()[65, 120])) == pytest.approx([25.0, 20.0], abs=0.01)


@pytest.mark.parametrize("rows", [slice(5, 5), slice(300, 400), slice(0, 50, 2)])
def test_a_part_without_pixels_is_refused(rows):
    with pytest.raises(DomainError, match="part of a grid"):
        grid("rectilinear").crop(rows, slice(None))
