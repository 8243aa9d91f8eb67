"""Tables with a position angle: look-up, disc, frames, against the axisymmetric table of the same light."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.geometry.axes import around, direction
from skyoptics.geometry.directions import Directions
from skyoptics.optics.axisymmetric import Axisymmetric, over_disc
from skyoptics.optics.polarisation import between_meridians
from skyoptics.optics.position_table import PositionTable, position_angle
from skyoptics.optics.source import Disc, Source
from skyoptics.optics.table import ScatteringTable

DEG = np.pi / 180.0
EDGES = np.linspace(0.0, np.pi, 181)
ANGLE = 0.5 * (EDGES[1:] + EDGES[:-1])


def source(elevation=20.0, azimuth=200.0, stokes=(1.0, 0.0, 0.0, 0.0)):
    return Source(
        direction(azimuth * DEG, elevation * DEG), Disc.point(2), np.ones(2), np.tile(np.array(stokes, float), (2, 1))
    )


def axisymmetric():
    p11 = np.exp(np.cos(3 * ANGLE))[:, None] * np.array([1.0, 2.0])
    p12 = -0.4 * p11 * np.sin(ANGLE)[:, None] ** 2
    elements = np.stack([p11, p12, p11, 0.7 * p11, 0.0 * p11, 0.7 * p11], axis=-1)[None]
    wavelength = np.array([5e-7, 6e-7])
    return ScatteringTable(ANGLE, wavelength, elements, 0 * elements[..., 0], np.ones(2), np.zeros(2), ("all",), EDGES)


def table(symmetric=True):
    light = axisymmetric().elements[0, :, :, :2] / (4 * np.pi)
    values = np.zeros((13, 180, 2, 4), dtype=np.float32)
    values[..., :2] = light
    position = np.linspace(0.0 if symmetric else -np.pi, np.pi, 13)
    cosine = np.array([0.0, 1.0])
    return PositionTable(ANGLE, position, values, 20.0 * DEG, cosine, np.array([0.9, 1.2]), EDGES)


@pytest.mark.parametrize("symmetric", [True, False])
@pytest.mark.parametrize("disc", [0.0, 0.27])
def test_without_dependence_it_is_the_axisymmetric_scatterer(symmetric, disc):
    grid = Directions.cylindrical((30, 40), np.eye(3), (0.0, 6.0), (0.9, -0.9))
    whole = Disc(disc * DEG, Disc.point(2).darkening)
    other = Axisymmetric(over_disc(axisymmetric(), whole), np.ones(2)).phase(source(), grid)
    ours = table(symmetric).over_disc(whole).phase(source(), grid)
    assert ours == pytest.approx(other, rel=1e-5)
    assert table(symmetric).phase(source(), grid, slice(3, 7)) == pytest.approx(other[3:7], rel=2e-2)
    assert table(symmetric).energy() == pytest.approx(axisymmetric().energy()[0], rel=1e-5)


def test_stokes_vectors_stand_in_the_picture_frame():
    grid = Directions.cylindrical((11, 12), np.eye(3), (0.3, 6.0), (0.8, -0.8))
    plain = source()
    views = grid.vectors()
    found = table().over_disc(Disc(0.01 * DEG, Disc.point(2).darkening)).stokes(plain, grid)
    theta = np.arccos(np.clip(views @ plain.direction, -1, 1))
    elements = np.stack(
        [np.interp(theta, ANGLE, axisymmetric().elements[0, :, 1, e]) for e in range(6)], axis=-1
    ) / (4 * np.pi)  # fmt: skip
    wanted = between_meridians(plain.direction, views, elements)[..., 0]
    assert found[:, :, 1] == pytest.approx(wanted, abs=2e-3 * wanted[..., 0].max())


def test_position_angles_are_those_of_the_axes():
    sun = source().direction
    for angle in (-170.0, -40.0, 0.0, 25.0, 120.0):
        assert position_angle(sun, around(-sun, 42 * DEG, angle * DEG)) == pytest.approx(angle * DEG)
    # right of the antisolar point is +90 degrees for whoever looks there
    east = position_angle(direction(np.pi, 0.0), direction(np.array(10.0 * DEG), np.array(0.0)))
    assert east == pytest.approx(90.0 * DEG)


def test_a_bump_appears_at_its_position_angle():
    base = table(symmetric=False)
    base.values[:] = 0.0
    base.values[9, 139, :, 0] = 1.0  # position angle 90 degrees, scattering angle 139.5
    base.values[9, 139, :, 2] = 0.5
    sun = source().direction
    half = table()
    half.values[:] = 0.0
    half.values[6, 139] = base.values[9, 139]
    for turn, full, both in ((90.0, 1.0, 1.0), (-90.0, 0.0, 1.0), (75.0, 0.5, 0.0)):
        view = around(-sun, (180.0 - 139.5) * DEG, turn * DEG)
        frame = np.stack([np.cross(view, [0, 0, 1.0]), np.cross(np.cross(view, [0, 0, 1.0]), view), view])
        frame[:2] /= np.linalg.norm(frame[:2], axis=1, keepdims=True)
        grid = Directions.radial((1, 1), frame, 6000.0, lambda q: 1.0 / np.cos(q), 0.5)
        assert base.phase(source(), grid)[0, 0, 0] == pytest.approx(full, abs=2e-3)
        assert half.phase(source(), grid)[0, 0, 0] == pytest.approx(both, abs=2e-3)
        scattering = half._look_up(source(), grid, slice(None), 4)[0, 0, 0]
        assert scattering[2] == pytest.approx(0.5 * both * np.sign(turn), abs=2e-3)


def test_extinction_and_outside():
    assert table().extinction(np.array([[-1.0, 0.5]])) == pytest.approx(np.array([[[1.2, 1.2], [1.05, 1.05]]]))
    grid = Directions.cylindrical((4, 4), np.eye(3), (0.0, 1.0), (3.0, -1.0))
    seen = table().phase(source(), grid)
    assert np.array_equal(np.isnan(seen[..., 0]), np.isnan(grid.vectors()[..., 0]))
    assert np.isnan(seen).any()


def test_another_height_of_the_source_is_refused():
    grid = Directions.scattering_axis(source().direction, 10)
    with pytest.raises(DomainError, match=r"20\.00 degrees, not 21\.00"):
        table().phase(source(21.0), grid)
