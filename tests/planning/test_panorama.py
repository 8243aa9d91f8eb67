"""Rows and columns of frames."""

import numpy as np
import pytest
from sky_circles import circle

from skyoptics.errors import DomainError
from skyoptics.planning import sensors
from skyoptics.planning.aiming import Aim
from skyoptics.planning.framing import Camera
from skyoptics.planning.held import held
from skyoptics.planning.panorama import panorama
from skyoptics.units import DEG, MM

FULL = sensors.find("36x24")
CASES = [
    # lens, focal length, orientation, radius, sun's height, centre (−1 bow, +1 halo), overlap
    ("rectilinear", 20.0, "landscape", 42.37, 0.0, -1.0, 0.3),
    ("rectilinear", 35.0, "portrait", 42.37, 5.0, -1.0, 0.1),
    ("rectilinear", 85.0, "landscape", 53.48, 10.0, -1.0, 0.3),
    ("rectilinear", 35.0, "landscape", 46.0, 60.0, 1.0, 0.2),
    ("equisolid", 28.0, "portrait", 53.48, 2.0, -1.0, 0.4),
]


def inside(camera, aim, vectors):
    """Whether directions are in a frame, by the camera's own grid."""
    grid = camera.looking(aim, 900)
    row, column = grid.project(vectors)
    return (column >= -0.5) & (column <= 899.5) & (row >= -0.5) & (row <= grid.shape[0] - 0.5)


def reach(camera, aim, angles, sideways):
    """How far the frame reaches from its axis along the axis' parallel or vertical, both ways."""
    from skyoptics.geometry.axes import direction

    kept = []
    for sign in (1.0, -1.0):
        step = sign * angles
        line = (
            direction(aim.azimuth + step, aim.elevation) if sideways else direction(aim.azimuth, aim.elevation + step)
        )
        held_ = inside(camera, aim, line)
        kept.append(angles[-1] if held_.all() else angles[np.argmin(held_)])
    return kept


@pytest.mark.parametrize(("lens", "focal", "orientation", "radius", "h", "centre", "overlap"), CASES)
def test_every_point_is_in_a_frame_and_neighbours_overlap(lens, focal, orientation, radius, h, centre, overlap):
    camera = Camera(lens, focal * MM, FULL.held(orientation))
    one = held(*circle(radius, 130.0, h, centre), 130.0 * DEG)
    found = panorama(camera, one, overlap)
    covered = np.any([inside(camera, aim, one.points) for aim in found.aims], axis=0)
    assert covered.all()
    angles = np.linspace(0.0, 180.0 * DEG, 3601)
    for row in found.rows:
        if len(row.aims) > 1:
            # on the parallel through the axes
            right, left = reach(camera, row.aims[0], angles, True)
            assert right + left - row.step >= overlap * (right + left) - 1e-3
            turns = np.unwrap([aim.azimuth for aim in row.aims])
            assert np.diff(turns) == pytest.approx(row.step)
        if row.closed:
            assert len(row.aims) * row.step == pytest.approx(2.0 * np.pi)
    for lower, upper in zip(found.rows, found.rows[1:], strict=False):
        # on a vertical through an axis
        up, down = reach(camera, lower.aims[0], angles, False)
        _, below = reach(camera, upper.aims[0], angles, False)
        shared = lower.aims[0].elevation + up - (upper.aims[0].elevation - below)
        assert shared >= overlap * (up + down) - 1e-3


def test_gaps_between_rows_are_closed():
    # any direction between the lowest and highest axis in the middle third of the row is in a frame, not the arc alone
    camera = Camera("rectilinear", 50.0 * MM, FULL)
    one = held(*circle(42.37, 130.0, 0.0), 130.0 * DEG)
    found = panorama(camera, one, 0.2)
    assert len(found.rows) > 1
    from skyoptics.geometry.axes import direction

    low, high = found.rows[0].aims[0].elevation, found.rows[-1].aims[0].elevation
    azimuth, elevation = np.meshgrid(one.middle + np.linspace(-8.0, 8.0, 33) * DEG, np.linspace(low, high, 60))
    grid = direction(azimuth, elevation)
    assert np.any([inside(camera, aim, grid) for aim in found.aims], axis=0).all()


def test_one_frame_where_one_is_enough():
    camera = Camera("rectilinear", 19.0 * MM, FULL)
    one = held(*circle(42.37, 130.0, 0.0), 130.0 * DEG)
    found = panorama(camera, one)
    assert (len(found.rows), found.columns, len(found.aims)) == (1, 1, 1)
    assert found.aims[0] == Aim(found.aims[0].azimuth, found.aims[0].elevation)
    assert found.aims[0].elevation / DEG == pytest.approx(10.62, abs=0.01)
    assert len(panorama(Camera("rectilinear", 20.0 * MM, FULL), one).aims) == 2


def test_more_overlap_takes_no_fewer_frames():
    camera = Camera("rectilinear", 50.0 * MM, FULL)
    one = held(*circle(42.37, 130.0, 5.0), 130.0 * DEG)
    counts = [len(panorama(camera, one, overlap).aims) for overlap in (0.0, 0.2, 0.4, 0.6)]
    assert counts == sorted(counts)
    assert counts[-1] > counts[0]


def test_refused():
    one = held(*circle(42.37, 130.0, 0.0), 130.0 * DEG)
    with pytest.raises(DomainError, match=r"0 to 0\.8"):
        panorama(Camera("rectilinear", 20.0 * MM, FULL), one, 0.9)
    with pytest.raises(DomainError, match="more than 200 frames"):
        panorama(Camera("rectilinear", 600.0 * MM, FULL), one)
