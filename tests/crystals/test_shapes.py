import time
from itertools import combinations

import numpy as np
import pytest
from scipy.spatial import ConvexHull

from skyoptics.crystals.shapes import ABSENT, Shape, hexagonal_prism
from skyoptics.errors import DomainError

UNEVEN = (1.0, 0.8, 1.1, 0.9, 1.05, 0.85)


@pytest.mark.parametrize("aspect", [0.1, 0.5, 1.0, 10.0])
def test_regular_prism_has_the_textbook_volume_and_area(aspect):
    # side a = 1/2: volume 3/2 sqrt(3) a^2 L, surface 3 sqrt(3) a^2 + 6 a L
    shape = hexagonal_prism(aspect)
    assert shape.volume == pytest.approx(1.5 * np.sqrt(3) * 0.25 * aspect, rel=1e-12)
    assert shape.area == pytest.approx(3 * np.sqrt(3) * 0.25 + 3 * aspect, rel=1e-12)
    assert shape.mean_projected_area == pytest.approx(shape.area / 4)
    corners = np.concatenate(shape.faces)
    assert np.ptp(corners[:, 2]) == pytest.approx(aspect)
    assert 2 * np.hypot(corners[:, 0], corners[:, 1]).max() == pytest.approx(1.0)


def test_uneven_prism_is_the_hull_of_its_corners():
    shape = hexagonal_prism(0.7, UNEVEN)
    hull = ConvexHull(np.concatenate(shape.faces))
    assert shape.volume == pytest.approx(hull.volume, rel=1e-9)
    assert shape.area == pytest.approx(hull.area, rel=1e-9)


@pytest.mark.parametrize("distances", [None, UNEVEN])
def test_patches_cover_each_face(distances):
    shape = hexagonal_prism(0.7, distances)
    rows = shape.packed_patches().reshape(-1, 17)
    for face, (area, normal) in enumerate(zip(shape.face_areas, shape.face_normals, strict=True)):
        own = rows[rows[:, 16] == face]
        assert own[:, :3].sum(axis=0) == pytest.approx(area * normal, abs=1e-6)
        for corner in (own[:, 3:6], own[:, 3:6] + own[:, 6:9], own[:, 3:6] + own[:, 9:12]):
            assert corner @ normal == pytest.approx(shape.offsets.ravel()[face], abs=1e-6)
            assert np.all(corner @ shape.face_normals.T <= shape.offsets.ravel() + 1e-6)


def test_slabs_are_filled_up_to_fours():
    assert hexagonal_prism(1.0).packed_slabs().shape == (20,)
    cube = Shape(np.eye(3), np.full((3, 2), 0.5))
    assert cube.packed_slabs().shape == (20,)
    assert cube.volume == pytest.approx(1.0)


@pytest.mark.parametrize("aspect", [0.0, -1.0, np.nan, 1e4])
def test_senseless_aspects_are_refused_in_words(aspect):
    with pytest.raises(DomainError, match=r"aspect .* got"):
        hexagonal_prism(aspect)


def test_a_face_cut_off_is_refused():
    with pytest.raises(DomainError, match="does not touch"):
        hexagonal_prism(1.0, (3.0, 1.0, 1.0, 1.0, 1.0, 1.0))


# ---------------------------------------------------------------- absent faces


def triangle(distance=0.25, half=0.5):
    """Return a triangular prism: side faces at 0°, 120°, 240°."""
    angle = np.arange(3) * np.pi / 3.0
    normals = np.array([[np.cos(a), np.sin(a), 0.0] for a in angle] + [[0.0, 0.0, 1.0]])
    offsets = [[distance, np.inf], [np.inf, distance], [distance, np.inf], [half, half]]
    return Shape(normals, offsets, "triangular prism")


def test_triangular_prism_has_the_textbook_volume_and_area():
    # equilateral triangle with an inscribed circle of radius r: side 2 sqrt(3) r, area 3 sqrt(3) r^2
    body = triangle(0.25, 0.5)
    section = 3.0 * np.sqrt(3.0) * 0.25**2
    assert body.volume == pytest.approx(section, rel=1e-12)
    assert body.area == pytest.approx(2.0 * section + 3.0 * 2.0 * np.sqrt(3.0) * 0.25, rel=1e-12)
    hull = ConvexHull(np.concatenate(body.faces))
    assert body.volume == pytest.approx(hull.volume, rel=1e-9)
    assert body.area == pytest.approx(hull.area, rel=1e-9)


def test_an_absent_face_has_no_corners_no_area_and_no_patch():
    body = triangle()
    for face in (1, 2, 5):
        assert body.faces[face].shape == (0, 3)
        assert body.face_areas[face] == 0.0
    assert [len(face) for face in body.faces] == [4, 0, 0, 4, 4, 0, 3, 3]
    assert set(body.packed_patches().reshape(-1, 17)[:, 16]) == {0.0, 3.0, 4.0, 6.0, 7.0}
    slabs = body.packed_slabs().reshape(-1, 5)
    assert np.all(np.isfinite(slabs))
    assert slabs[0, 4] == slabs[1, 3] == slabs[2, 4] == ABSENT


def test_edges_part_two_faces_each():
    for body, count in ((hexagonal_prism(0.4), 18), (triangle(), 9), (Shape(np.eye(3), np.full((3, 2), 0.5)), 12)):
        edges = body.edges
        assert len(edges) == count
        for edge in edges:
            assert len(edge.faces) == 2
            normals, distance = body.face_normals[list(edge.faces)], body.offsets.ravel()[list(edge.faces)]
            assert edge.corners @ normals.T == pytest.approx(np.array([distance, distance]), abs=1e-12)


@pytest.mark.parametrize(
    ("offsets", "where"),
    [
        ([[1, 1], [1, 1], [1, np.inf]], r"towards \(0, 0, -1\)"),
        ([[1, 1], [np.inf, 1], [1, 1]], r"towards \(0, 1, 0\)"),
        ([[1, np.inf], [1, np.inf], [1, np.inf]], "open towards"),
    ],
)
def test_an_open_body_is_refused_in_words(offsets, where):
    with pytest.raises(DomainError, match=f"do not close.*{where}.*finite distance"):
        Shape(np.eye(3), np.array(offsets))


def test_faces_around_an_axis_alone_are_open():
    angle = np.arange(3) * np.pi / 3.0
    with pytest.raises(DomainError, match="do not close"):
        Shape(np.stack([np.cos(angle), np.sin(angle), np.zeros(3)], axis=1), np.ones((3, 2)))


@pytest.mark.parametrize("offsets", [[1, np.nan], [1, -np.inf], [1, -1]])
def test_senseless_distances_are_refused(offsets):
    with pytest.raises(DomainError, match="thickness above 0"):
        Shape(np.eye(3), np.array([offsets, [1, 1], [1, 1]]))


def test_a_slab_without_faces_is_refused():
    with pytest.raises(DomainError, match="both faces"):
        Shape(np.eye(3), np.array([[np.inf, np.inf], [1, 1], [1, 1]]))


def plain_corners(body):
    """Return the corners of each face from one triple of planes after the other, in the order of their angles."""
    planes, distance = body.face_normals, body.offsets.ravel()
    found = []
    for triple in combinations(range(len(planes)), 3):
        matrix = planes[list(triple)]
        if abs(np.linalg.det(matrix)) > 1e-9:
            corner = np.linalg.solve(matrix, distance[list(triple)])
            if np.all(planes @ corner <= distance + 1e-9):
                found.append(corner)
    found = np.array(found)
    for normal, reach in zip(planes, distance, strict=True):
        polygon = found[np.abs(found @ normal - reach) < 1e-8]
        centre = polygon.mean(axis=0)
        first = polygon[0] - centre
        second = np.cross(normal, first)
        yield polygon[np.argsort(np.arctan2((polygon - centre) @ second, (polygon - centre) @ first))]


@pytest.mark.parametrize("aspect", [0.03, 0.1, 0.5, 1.0, 2.0])
@pytest.mark.parametrize("distances", [None, UNEVEN])
def test_prisms_keep_their_bits(aspect, distances):
    # films and tables are stored under keys made of these bytes, so the way corners are found must not change them
    body = hexagonal_prism(aspect, distances)
    for corners, expected in zip(body.faces, plain_corners(body), strict=True):
        assert corners.tobytes() == expected.tobytes()


def test_shapes_of_twenty_faces_are_made_quickly():
    from skyoptics.crystals.habits import Habit, shape

    spent = []
    for _ in range(5):
        start = time.perf_counter()
        shape(Habit("truncated-bipyramid"))
        spent.append(time.perf_counter() - start)
    assert min(spent) < 5e-3
