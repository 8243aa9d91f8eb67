"""Lenses and aim against printed fields of view and formulas."""

import numpy as np
import pytest

from skyoptics.camera.frame import aim, photograph
from skyoptics.camera.lenses import field_of_view, lens
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import direction
from skyoptics.units import DEG, MM

# FOV = 2 atan(d / 2f) on 36 x 24 mm, as makers print it (H, V, diagonal; degrees), to 0.05.
PRINTED = {
    12: (112.6, 90.0, 122.0),
    14: (104.3, 81.2, 114.2),
    18: (90.0, 67.4, 100.5),
    20: (84.0, 61.9, 94.5),
    24: (73.7, 53.1, 84.1),
    28: (65.5, 46.4, 75.4),
    35: (54.4, 37.8, 63.4),
    50: (39.6, 27.0, 46.8),
}


@pytest.mark.parametrize("focal", PRINTED)
def test_rectilinear_fields_of_view(focal):
    sides = (36 * MM, 24 * MM, np.hypot(36, 24) * MM)
    angles = [field_of_view("rectilinear", focal * MM, side) / DEG for side in sides]
    assert angles == pytest.approx(PRINTED[focal], abs=0.05)


@pytest.mark.parametrize(
    ("name", "radius"),
    [("equidistant", np.pi / 2), ("equisolid", np.sqrt(2)), ("stereographic", 2.0), ("orthographic", 1.0)],
)
def test_fisheye_radius_of_the_horizon(name, radius):
    """Image radius at 90° from the axis in focal lengths: 1.5708, 1.4142, 2, 1 (projection formulas)."""
    assert lens(name).radius(np.array(90 * DEG)) == pytest.approx(radius, rel=1e-12)
    grid = photograph(name, 10 * MM, (45 * MM, 45 * MM), (900, 900), aim(0.0, 90 * DEG))
    row, column = grid.project(direction(70 * DEG, 1e-9))
    assert np.hypot(row - 449.5, column - 449.5) / grid.map[0] == pytest.approx(radius, abs=1e-5)


def test_roll_turns_the_horizon_counter_clockwise():
    grid = photograph("rectilinear", 24 * MM, (36 * MM, 24 * MM), (200, 300), aim(0.0, 0.0, 10 * DEG))
    left, right = (grid.project(direction(a * DEG, 0.0))[0] for a in (-5, 5))
    assert left > right  # the horizon's right end stands higher: row counts downward


def test_up_is_up_and_right_is_right():
    grid = photograph("rectilinear", 24 * MM, (36 * MM, 24 * MM), (201, 301), aim(90 * DEG, 10 * DEG))
    row, column = grid.project(direction(91 * DEG, 12 * DEG))
    assert row < 100
    assert column > 150


def test_unknown_lens_names_its_neighbour():
    with pytest.raises(DomainError, match="did you mean equisolid"):
        lens("equsolid")
