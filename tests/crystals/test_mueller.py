"""The phase matrix of populations: laws that hold for any cloud of crystals."""

import numpy as np
import pytest

from skyoptics.crystals.mueller import phase_matrix
from skyoptics.crystals.orientations import Orientation
from skyoptics.crystals.prepared import prepare
from skyoptics.crystals.shapes import hexagonal_prism
from skyoptics.crystals.tracing import trace_plane
from skyoptics.geometry.axes import azimuth_elevation, direction
from skyoptics.geometry.directions import Directions
from skyoptics.units import DEG

INDEX = 1.31


def prepared(orientation, towards):
    return prepare(hexagonal_prism(0.5), orientation, lambda w: INDEX + 0 * w, (5.5e-7, 5.5e-7), towards)


def patch(view, width_deg):
    """One cell about a viewing direction, square in azimuth and elevation."""
    azimuth, elevation = azimuth_elevation(view)
    half = 0.5 * width_deg * DEG
    longitude = np.pi / 2 - azimuth
    return Directions.cylindrical(
        (1, 1), np.eye(3), (longitude + half, longitude - half), (elevation + half, elevation - half)
    )


def both_ways(orientation, source, view, rays, batches):
    there = phase_matrix(prepared(orientation, source), patch(view, 6.0), 1, batches, rays)
    back = phase_matrix(prepared(orientation, -view), patch(-source, 6.0), 2, batches, rays)
    return (*(m[0, 0] for m in there), *(m[0, 0] for m in back))


@pytest.mark.parametrize("law", ["plate", "column", pytest.param("lowitz", marks=pytest.mark.slow)])
def test_light_goes_the_way_back(law):
    # Reciprocity (van de Hulst, Light Scattering by Small Particles, 1957, section 5.22, from memory): with light sent back
    # M(back) = D M(there)^T D, D = diag(1, 1, -1, 1); crystals alike upside down. Tilts make the light smooth over a cell.
    source, view = direction(0.0, 25 * DEG), direction(50 * DEG, 12 * DEG)
    flip = np.diag([1.0, 1.0, -1.0, 1.0])
    m, dm, n, dn = both_ways(Orientation(law, 20 * DEG), source, view, 2**17, 6)
    error = np.sqrt((flip @ dm.T @ flip) ** 2 + dn**2)
    assert np.all(np.abs(n - flip @ m.T @ flip) < 6.0 * np.abs(error) + 0.01 * m[0, 0])
    assert m[0, 0] > 10 * dm[0, 0]


@pytest.mark.parametrize("law", ["random", "plate", "parry"])
def test_no_light_is_more_than_fully_polarised(law):
    grid = Directions.cylindrical((12, 24), np.eye(3), (-np.pi, np.pi), (np.pi / 2, -np.pi / 2))
    matrix, error = phase_matrix(prepared(Orientation(law, 5 * DEG), direction(0.0, 20 * DEG)), grid, 1, 2, 2**17)
    lit = matrix[..., 0, 0] > 1e-9
    assert np.all(np.abs(matrix[lit][:, 0, 1]) <= matrix[lit][:, 0, 0] * (1 + 1e-6) + 6 * error[lit][:, 0, 1])
    out = np.sqrt((matrix[lit][:, 1:, 0] ** 2).sum(axis=1))
    assert np.all(out <= matrix[lit][:, 0, 0] * (1 + 1e-5))


def test_first_element_is_the_unpolarised_run():
    grid = Directions.cylindrical((6, 12), np.eye(3), (-np.pi, np.pi), (np.pi / 2, -np.pi / 2))
    item = prepared(Orientation("plate", 3 * DEG), direction(0.0, 20 * DEG))
    matrix, _ = phase_matrix(item, grid, 3, 2, 2**14)
    plain = np.mean([trace_plane(item, grid.packed(), 3, k, 2**14, dtype=np.float64)[0] for k in range(2)], axis=0)
    assert matrix[..., 0, 0] * 2 * 2**14 * grid.solid_angle() == pytest.approx(plain, rel=1e-6, abs=1e-6)
