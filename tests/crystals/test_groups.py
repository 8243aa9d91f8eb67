"""Light kept apart by named arc while it is traced."""

import numpy as np
import pytest

from skyoptics.crystals.habits import Habit, shape
from skyoptics.crystals.orientations import Orientation
from skyoptics.crystals.prepared import prepare
from skyoptics.crystals.shapes import hexagonal_prism
from skyoptics.crystals.sorting import sorter
from skyoptics.crystals.tracing import coarse_shape, trace_angles, trace_exits, trace_groups, trace_plane
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import direction
from skyoptics.geometry.directions import Directions
from skyoptics.units import DEG

SUN = direction(30 * DEG, 20 * DEG)


def sky(rows=90, columns=180):
    return Directions.cylindrical((rows, columns), np.eye(3), (-np.pi, np.pi), (np.pi / 2, -np.pi / 2))


def prepared(law, body=None, tilt=1.0):
    body = body or hexagonal_prism(0.5)
    sort = sorter(body.face_normals, law, 20 * DEG, 1.31, tilt * DEG)
    return prepare(
        body, Orientation(law, tilt * DEG), lambda w: 1.31 + 0 * w, (5.5e-7, 5.5e-7), SUN, radius=0.0047, sorter=sort
    )


@pytest.mark.parametrize("law", ["plate", "column", "parry", "lowitz"])
@pytest.mark.parametrize("side", [1, 7])
def test_groups_add_up_to_the_picture(law, side):
    item, grid = prepared(law), sky()
    plane, groups, _ = trace_groups(item, grid.packed(), 1, 0, 2**15, side, dtype=np.float64)
    rows = np.add.reduceat(plane.astype(float), np.arange(0, 90, side), axis=0)
    binned = np.add.reduceat(rows, np.arange(0, 180, side), axis=1)
    assert groups.shape == (len(item.sorter.names), *coarse_shape((90, 180), side))
    total = groups.sum(axis=0)
    assert total == pytest.approx(binned, rel=1e-9, abs=1e-9)
    named = groups[1:].sum() / groups.sum()
    assert named > 0.1
    plain, _ = trace_plane(item, grid.packed(), 1, 0, 2**15, dtype=np.float64)
    assert np.array_equal(plain, plane)
    single, same, _ = trace_groups(item, grid.packed(), 1, 0, 2**15, side)  # rounding of the brightest pixel alone
    assert np.array_equal(same, groups)
    assert np.abs(single - plane).max() < 1e-5 * plane.max()


def test_polarised_planes_have_the_same_groups():
    item, grid = prepared("column"), sky()
    _, groups, _ = trace_groups(item, grid.packed(), 1, 0, 2**14, 5)
    _, again, _ = trace_groups(item, grid.packed(), 1, 0, 2**14, 5, 4)
    assert np.array_equal(groups, again)


@pytest.mark.parametrize("law", ["plate", "column"])
def test_single_groups_add_up_to_the_picture(law):
    item, grid = prepared(law), sky()
    whole, _ = trace_plane(item, grid.packed(), 1, 0, 2**15, dtype=np.float64)
    parts = [
        trace_plane(item, grid.packed(), 1, 0, 2**15, dtype=np.float64, only=number)[0]
        for number in range(len(item.sorter.names))
    ]
    assert np.sum(parts, axis=0) == pytest.approx(whole, rel=1e-9, abs=1e-12)
    assert sum(part.any() for part in parts) > 4


def test_exits_know_their_group():
    item, grid = prepared("plate"), sky()
    _, groups, _ = trace_groups(item, grid.packed(), 1, 0, 2**14, 10)
    exits, _ = trace_exits(item, 1, 0, 2**14)
    power = np.bincount(exits.group, exits.stokes[:, 0], len(item.sorter.names))
    assert power == pytest.approx(groups.sum(axis=(1, 2)), rel=2e-3, abs=1e-3)  # a pole falls off the map now and then


def test_the_circumzenithal_arc_stands_where_it_should():
    # sin e = sqrt(n^2 - cos^2 h): 65.886 degrees at h = 20, n = 1.31 (Bravais 1847)
    item, grid = prepared("plate", tilt=0.2), sky(1800, 36)
    plane, _ = trace_plane(item, grid.packed(), 1, 0, 2**17, only=item.sorter.names.index("circumzenithal"))
    elevation = 90.0 - (np.arange(1800) + 0.5) * 0.1
    assert np.sum(elevation * plane.sum(axis=1)) / plane.sum() == pytest.approx(65.886, abs=0.4)  # the sun is a disc


def test_circles_are_parts_of_an_angle_table():
    body = shape(Habit("truncated-bipyramid"))
    item = prepared("random", body)
    sums, _ = trace_angles(item, 1800, 1, 0, 2**17, False)
    plain = prepare(body, Orientation("random"), lambda w: 1.31 + 0 * w, (5.5e-7, 5.5e-7), SUN, radius=0.0047)
    whole, _ = trace_angles(plain, 1800, 1, 0, 2**17, False)
    assert sums.sum(axis=0) == pytest.approx(whole, rel=1e-9, abs=1e-9)
    assert set(item.sorter.names) == {"other", *(f"halo_{d}" for d in (9, 18, 20, 22, 23, 24, 35, 46))}


def test_what_cannot_be_sorted_is_refused():
    item = prepare(hexagonal_prism(0.5), Orientation("plate"), lambda w: 1.31 + 0 * w, (5.5e-7, 5.5e-7), SUN)
    with pytest.raises(DomainError, match="sorter"):
        trace_groups(item, sky().packed(), 1, 0, 64, 4)
    with pytest.raises(DomainError, match="no group"):
        trace_plane(item, sky().packed(), 1, 0, 64, only=1)
    sort = sorter(shape(Habit("bipyramid")).face_normals, "plate", 0.3, 1.31)
    with pytest.raises(DomainError, match="other faces"):
        prepare(hexagonal_prism(0.5), Orientation("plate"), lambda w: 1.31 + 0 * w, (5.5e-7, 5.5e-7), SUN, sorter=sort)
