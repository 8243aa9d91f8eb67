"""Disc average and look-up of tables."""

import numpy as np
import pytest

from skyoptics.geometry.axes import around, direction
from skyoptics.geometry.directions import Directions
from skyoptics.optics.axisymmetric import Axisymmetric, over_disc
from skyoptics.optics.source import Disc, Source
from skyoptics.optics.table import ScatteringTable
from skyoptics.units import DEG

RADIUS = 0.2666 * DEG
# Neckel & Labs, Solar Phys. 153, 91 (1994), 541.760 nm row
DARKENING = np.array([[0.26073, 1.27428, -1.30352, 1.47085, -0.96618, 0.26384]])


def table_of(function, edges=None, angle=None):
    if edges is not None:
        angle = 0.5 * (edges[1:] + edges[:-1])
    elements = np.zeros((1, len(angle), 1, 6))
    elements[0, :, 0, 0] = function(angle)
    error = np.zeros((1, len(angle), 1))
    one = np.ones(1)
    return ScatteringTable(angle, one * 550e-9, elements, error, one, one * 0, ("all",), edges)


def by_sampling(function, centre, count=400_000):
    """Mean over the darkened disc on the sphere, by plain random points weighted with the brightness."""
    rng = np.random.default_rng(11)
    rho = RADIUS * np.sqrt(rng.random(count))
    mu = np.sqrt(1 - (rho / RADIUS) ** 2)
    weight = sum(a * mu**j for j, a in enumerate(DARKENING[0]))
    axis = direction(0.3, 0.2)
    points = around(around(axis, centre, 0.7), rho, rng.random(count) * 2 * np.pi)
    theta = np.arccos(np.clip(points @ axis, -1, 1))
    values = weight * function(theta)
    return values.mean() / weight.mean(), values.std() / np.sqrt(count) / weight.mean()


@pytest.mark.parametrize("centre_deg", [0.0, 0.05, 0.3, 2.0, 42.0, 90.0, 179.9])
@pytest.mark.parametrize("kind", ["bins", "nodes"])
def test_average_against_sampled_points(centre_deg, kind):
    def function(theta):
        near = np.minimum(theta, np.pi - theta)
        return 1.0 + np.exp(-(((near - centre_deg % 179 * DEG) / (0.1 * DEG)) ** 2)) + np.sin(40 * theta)

    edges = np.linspace(0.0, np.pi, 36001)
    table = table_of(function, edges=edges) if kind == "bins" else table_of(function, angle=edges)
    average = over_disc(table, Disc(RADIUS, DARKENING), np.array([centre_deg * DEG])).elements[0, 0, 0, 0]
    expected, error = by_sampling(function, centre_deg * DEG)
    assert average == pytest.approx(expected, abs=5 * error)


def test_a_constant_stays_and_light_is_kept():
    edges = np.concatenate([np.linspace(0, 2, 500), np.linspace(2.001, np.pi, 77)])
    flat = over_disc(table_of(np.ones_like, edges=edges), Disc(RADIUS, DARKENING))
    assert flat.elements[0, :, 0, 0] == pytest.approx(1.0, abs=1e-12)
    edges = np.linspace(0, np.pi, 3601)
    spike = table_of(lambda t: np.where(np.abs(t - 1.0) < 0.06 * DEG, 5.0, 0.0), edges=edges)
    fine = over_disc(spike, Disc(RADIUS, DARKENING), np.linspace(0.98, 1.02, 4001))
    light = np.trapezoid(fine.elements[0, :, 0, 0] * np.sin(fine.angle), fine.angle)
    assert light == pytest.approx((spike.elements[0, :, 0, 0] * spike.solid_angle()).sum() / (2 * np.pi), rel=1e-4)


def test_a_point_changes_nothing():
    table = table_of(np.cos, edges=np.linspace(0, np.pi, 10))
    assert over_disc(table, Disc.point(1)) is table


def source():
    return Source(direction(1.0, 0.3), Disc.point(1), np.ones(1), np.array([[1.0, 0, 0, 0]]))


def test_bins_keep_their_light_on_any_pixel_size():
    edges = np.linspace(0, np.pi, 1801)
    table = table_of(lambda t: np.where(np.abs(t - 2.0) < 0.02, 3.0, 0.2), edges=edges)
    scatterer = Axisymmetric(table, np.array([0.5]))
    wanted = 0.5 * table.energy().sum()
    for count in (180, 777, 18000):
        axis = Directions.scattering_axis(source().direction, count)
        total = (scatterer.phase(source(), axis)[..., 0] * axis.solid_angle()).sum()
        assert total == pytest.approx(wanted, rel=1e-9)


def test_nodes_are_read_between():
    nodes = np.array([0.0, 1.0, 2.0, np.pi])
    scatterer = Axisymmetric(table_of(lambda t: 4 * np.pi * t, angle=nodes), np.array([1.0]))
    grid = Directions.scattering_axis(source().direction, 300)
    theta = np.arccos(np.clip(grid.vectors()[:, 0] @ source().direction, -1, 1))
    assert scatterer.phase(source(), grid)[:, 0, 0] == pytest.approx(theta, abs=1e-7)
