import numpy as np
import pytest
from scipy.spatial import ConvexHull

from skyoptics.crystals.shapes import Shape, hexagonal_prism
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
