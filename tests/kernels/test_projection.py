import numpy as np
import pytest

from skyoptics.geometry.axes import direction
from skyoptics.geometry.directions import Directions, frame_about
from skyoptics.kernels import lanes as L
from skyoptics.kernels.plain import plain_pixel
from skyoptics.kernels.projection import SPARE, find_angles, find_pixels

RNG = np.random.default_rng(4)


def sphere(count):
    v = RNG.normal(size=(count, 3))
    return v / np.linalg.norm(v, axis=1, keepdims=True)


def pixels(grid, views):
    state, _ = L.new_lanes()
    spots = np.zeros(L.WIDTH, np.uint32)
    found = []
    for start in range(0, len(views), L.WIDTH):
        part = -views[start : start + L.WIDTH]
        for axis, row in enumerate((L.EX, L.EY, L.EZ)):
            state[row : row + len(part)] = part[:, axis]
        find_pixels(state, spots, len(part), grid.packed())
        found.append(spots[: len(part)].copy())
    return np.concatenate(found).astype(int)


GRIDS = {
    "tele": Directions.radial((400, 600), frame_about(direction(1.0, 0.5)), 3000.0, lambda q: 1.0 / np.cos(q), 0.13),
    "wide": Directions.radial((400, 600), frame_about(direction(2.0, -0.2)), 200.0, lambda q: 1.0 / np.cos(q), 1.1),
    "fisheye": Directions.radial(
        (500, 500), np.eye(3), 150.0, lambda q: np.where(q > 0, q / np.sin(q + 1e-300), 1.0), 1.6
    ),
    "whole sky": Directions.cylindrical((180, 360), np.eye(3), (np.pi, -np.pi), (np.pi / 2, -np.pi / 2)),
    "strip": Directions.cylindrical((90, 100), frame_about(direction(0.3, 0.2)), (3.0, 4.5), (0.4, -0.3)),
}


@pytest.mark.parametrize("name", GRIDS)
def test_pixels_are_those_of_directions(name):
    grid = GRIDS[name]
    inside = grid.vectors().reshape(-1, 3)
    inside = inside[np.all(np.isfinite(inside), axis=1)]
    views = np.concatenate([sphere(2000), inside[RNG.integers(0, len(inside), 2000)]])
    row, column = grid.project(views)
    ny, nx = grid.shape
    near_edge = np.abs(np.mod(row, 1.0) - 0.5) + 0.0 < 0.02
    near_edge |= np.abs(np.mod(column, 1.0) - 0.5) < 0.02
    with np.errstate(invalid="ignore"):
        r, c = np.floor(row + 0.5), np.floor(column + 0.5)
        held = np.isfinite(row) & (r >= 0) & (r < ny) & (c >= 0) & (c < nx)
    found = pixels(grid, views)
    assert np.all(found < ny * nx + SPARE)
    agree = np.where(held, found == np.where(held, r * nx + c, 0), found >= ny * nx)
    assert np.all(agree | near_edge)
    assert held.sum() > 1000
    plain = np.array([plain_pixel(grid.packed().astype(float), *-v) for v in views])
    assert np.all((plain == np.where(held, r * nx + c, -1)) | near_edge)


def test_scattering_angles_hold_at_both_ends():
    state, _ = L.new_lanes()
    spots = np.zeros(L.WIDTH, np.uint32)
    angle = np.linspace(0.0, np.pi, L.WIDTH)
    before = direction(0.4, 0.7)
    across = np.cross(before, [0.0, 0.0, 1.0]) / np.linalg.norm(np.cross(before, [0.0, 0.0, 1.0]))
    after = np.cos(angle)[:, None] * before + np.sin(angle)[:, None] * across
    for axis in range(3):
        state[(L.WX, L.WY, L.WZ)[axis] : (L.WX, L.WY, L.WZ)[axis] + L.WIDTH] = before[axis]
        state[(L.EX, L.EY, L.EZ)[axis] : (L.EX, L.EY, L.EZ)[axis] + L.WIDTH] = after[:, axis]
    find_angles(state, spots, L.WIDTH, np.int32(10001))
    assert spots.astype(int) == pytest.approx(np.minimum(angle / np.pi * 10001, 10000), abs=1.01)
