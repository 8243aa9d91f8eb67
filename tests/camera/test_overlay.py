"""Lines and marks over a picture against projection formulas and against the grid read backwards."""

import numpy as np
import pytest

from skyoptics.camera import overlay
from skyoptics.camera.frame import aim, panorama, photograph
from skyoptics.crystals import arcs
from skyoptics.geometry.axes import angle_between, around, azimuth_elevation, direction
from skyoptics.units import DEG, MM


def whole_sky(size=600, azimuth=180.0):
    return photograph("equidistant", 7.6 * MM, (24 * MM, 24 * MM), (size, size), aim(azimuth * DEG, 90 * DEG))


def camera(elevation=10.0, roll=0.0, focal=24.0, shape=(400, 600), lens="rectilinear"):
    return photograph(lens, focal * MM, (36 * MM, 24 * MM), shape, aim(180 * DEG, elevation * DEG, roll * DEG))


def branches(line):
    cuts = np.flatnonzero(np.isnan(line[:, 0]))
    return [part[np.isfinite(part[:, 0])] for part in np.split(line, cuts)]


def test_the_horizon_of_a_fisheye_aimed_at_the_zenith_is_a_circle():
    """Equidistant projection, r = f θ: the horizon has a radius of f π / 2 (Kannala & Brandt 2006, eq. 3)."""
    line = overlay.horizon(whole_sky())
    radius = np.hypot(*(line - 299.5).T)
    assert not np.isnan(line).any()
    assert radius == pytest.approx(7.6 / 24 * 600 * np.pi / 2, abs=1e-3)
    assert np.allclose(line[0], line[-1], atol=1e-6)


@pytest.mark.parametrize("elevation", [-12.0, 0.0, 15.0])
def test_the_horizon_of_a_level_rectilinear_camera_is_a_straight_row_from_edge_to_edge(elevation):
    """Rectilinear projection, r = f tan θ: the horizon lies f tan(elevation of the aim) under the middle."""
    line = overlay.horizon(camera(elevation))
    assert line[:, 1] == pytest.approx(199.5 + 24 / 36 * 600 * np.tan(elevation * DEG), abs=1e-3)
    assert sorted([line[0, 0], line[-1, 0]]) == pytest.approx([-0.5, 599.5])
    assert np.all(np.diff(line[:, 0]) > 0) or np.all(np.diff(line[:, 0]) < 0)


def test_a_rolled_camera_sees_the_horizon_turn_the_other_way():
    line = overlay.horizon(camera(0.0, roll=10.0))
    slope = np.polyfit(line[:, 0], -line[:, 1], 1)[0]
    assert np.arctan(slope) / DEG == pytest.approx(10.0, abs=1e-6)


def test_no_horizon_where_the_camera_looks_above_it():
    assert overlay.horizon(camera(60.0)).shape == (0, 2)
    assert overlay.compass(camera(60.0)) == []


@pytest.mark.parametrize("azimuth", [0.0, 77.0, 180.0])
def test_the_horizon_of_a_full_panorama_runs_once_from_edge_to_edge(azimuth):
    line = overlay.horizon(panorama(360 * DEG, 60 * DEG, (60, 360), azimuth * DEG, 0.0, 0.0))
    parts = branches(line)
    assert all(np.allclose(part[:, 1], 29.5, atol=1e-9) for part in parts)
    assert sum(np.ptp(part[:, 0]) for part in parts) == pytest.approx(360.0, abs=1e-6)
    assert all(np.abs(np.diff(part[:, 0])).max() < 1.0 for part in parts)


def test_a_line_that_leaves_the_picture_ends_at_its_edge_and_goes_on_where_it_comes_back():
    grid = camera(20.0, focal=14.0)
    azimuth, elevation = azimuth_elevation(
        around(direction(180 * DEG, 20 * DEG), 46 * DEG, np.linspace(0, 2 * np.pi, 3601))
    )
    parts = branches(overlay.curve(grid, azimuth, elevation))
    assert len(parts) == 2  # the 46° circle is cut at the top and at the bottom
    for part in parts:
        for column, row in (part[0], part[-1]):
            assert min(abs(column + 0.5), abs(column - 599.5), abs(row + 0.5), abs(row - 399.5)) < 1e-6
    points = np.concatenate(parts)
    assert points.min() > -0.5001
    assert points[:, 0].max() < 599.5001
    assert points[:, 1].max() < 399.5001


@pytest.mark.parametrize("name", ["halo_22", "parhelic_circle", "upper_tangent", "supralateral"])
@pytest.mark.parametrize(
    "grid", [whole_sky(), camera(30.0, focal=12.0), camera(40.0, focal=12.0, lens="stereographic")]
)
def test_points_of_an_arc_lie_on_the_arc(name, grid):
    """Every point read backwards through the grid is within 0.1° of the locus it was made from."""
    azimuth, elevation = arcs.locus(name, 20 * DEG, 1.31)
    line = overlay.curve(grid, azimuth + 180 * DEG, elevation)
    points = line[np.isfinite(line[:, 0])]
    assert len(points) > 50
    points = points[:: 1 + len(points) // 300]
    seen = grid.unproject(points[:, 1], points[:, 0])
    known = direction(azimuth + 180 * DEG, elevation)
    known = known[np.isfinite(known[:, 0])]
    keep = np.isfinite(seen[:, 0])
    assert keep.mean() > 0.99
    apart = [angle_between(view, known).min() for view in seen[keep]]
    assert max(apart) < 0.1 * DEG


def test_branches_stay_parted_and_a_spot_stays_a_point():
    azimuth, elevation = arcs.locus("parhelia", 20 * DEG, 1.31)
    line = overlay.curve(whole_sky(), azimuth + 180 * DEG, elevation)
    assert [len(part) for part in branches(line)] == [1, 1]
    assert line.shape == (3, 2)


def test_compass_of_the_whole_sky_has_east_on_the_left():
    """Seen from below, with north on top, east is on the left."""
    grid = whole_sky()
    ticks = overlay.compass(grid)
    assert len(ticks) == 24
    named = {tick.text: tick for tick in ticks if tick.text}
    assert list(named) == list(overlay.POINTS)
    assert named["N"].row < 20
    assert named["S"].row > 580
    assert named["E"].column < 20
    assert named["W"].column > 580
    for tick in ticks:
        towards_zenith = np.array([299.5 - tick.column, 299.5 - tick.row])
        assert tick.up == pytest.approx(tuple(towards_zenith / np.hypot(*towards_zenith)), abs=1e-3)
        azimuth, elevation = azimuth_elevation(grid.unproject(np.array(tick.row), np.array(tick.column)))
        assert elevation == pytest.approx(0.0, abs=1e-4)
        assert (azimuth / DEG + 1e-3) % 15.0 == pytest.approx(0.0, abs=1e-2)


def test_compass_of_a_view_to_the_south():
    ticks = overlay.compass(camera(0.0, focal=12.0))
    named = {tick.text: tick.column for tick in ticks if tick.text}
    assert named["SE"] < named["S"] < named["SW"]
    assert named["S"] == pytest.approx(299.5, abs=1e-3)
    assert named["SW"] - 299.5 == pytest.approx(12 / 36 * 600 * np.tan(45 * DEG), abs=1e-2)
    assert all(tick.up == pytest.approx((0.0, -1.0), abs=0.05) for tick in ticks if tick.text == "S")


def test_a_mark_stands_where_the_camera_aims_and_nowhere_behind_it():
    grid = camera(20.0)
    ahead = direction(180 * DEG, 20 * DEG)
    assert overlay.mark(grid, ahead) == pytest.approx((299.5, 199.5), abs=1e-6)
    assert overlay.mark(grid, -ahead) is None
    assert overlay.mark(grid, direction(180 * DEG, 60 * DEG)) is None


@pytest.mark.parametrize("focal", [8, 14, 24, 50, 100, 200, 600])
def test_the_scale_is_true_at_the_middle(focal):
    """Rectilinear at the axis: f pixels a radian."""
    scale = overlay.angle_scale(camera(10.0, focal=focal))
    assert round(scale.angle / DEG, 9) in overlay.BARS_DEG
    assert scale.length == pytest.approx(focal / 36 * 600 * scale.angle, rel=1e-5)
    assert 0.07 * 600 < scale.length < 0.4 * 600


def test_the_scale_of_a_panorama_counts_the_angle_along_the_row():
    """On a parallel at elevation h a degree of azimuth is cos h degrees of sky."""
    scale = overlay.angle_scale(panorama(90 * DEG, 30 * DEG, (300, 900), 0.0, 60 * DEG, 0.0))
    assert scale.angle / scale.length == pytest.approx(90 * DEG / 900 * 0.5, rel=1e-5)
