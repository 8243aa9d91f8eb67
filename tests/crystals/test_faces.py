"""Numbers of faces and what sequences of them do to light."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.crystals.faces import face_labels, face_normal, signature, unfold
from skyoptics.crystals.passage import brightness, image, rotations
from skyoptics.crystals.shapes import hexagonal_prism
from skyoptics.errors import DomainError
from skyoptics.units import DEG


def test_faces_of_the_prism_have_their_numbers() -> None:
    # slabs 0 … 2 are sides at 0°, 60°, 120°, slab 3 the basal faces; face 2j + 1 lies opposite face 2j
    assert face_labels(hexagonal_prism(1.0).face_normals) == (3, 6, 4, 7, 5, 8, 1, 2)
    assert face_labels([[0.6, 0.0, 0.8]]) == (0,)
    with pytest.raises(DomainError, match="faces are numbered"):
        face_normal(9)


# list of wedges 28.0 … 80.2° in Tape & Moilanen (2006, from memory), 0.02° for the spread of c/a
@pytest.mark.parametrize(
    ("sequence", "wedge"),
    [((3, 26), 27.996), ((13, 25), 52.398), ((13, 16), 55.993), ((3, 5), 60.0), ((1, 23), 62.004)]
    + [((3, 15), 63.801), ((13, 15), 80.243), ((1, 3), 90.0), ((3, 6), 0.0), ((4,), 0.0)],
)
def test_wedges(sequence: tuple[int, ...], wedge: float) -> None:
    assert abs(unfold(sequence).wedge / DEG - wedge) < 1e-3


def test_sequences_of_one_effect_have_one_signature() -> None:
    assert signature((3, 4, 5)) == signature((4,)) == signature((1, 7, 2))  # mirror in a side face
    assert signature((3, 5)) == signature((3, 1, 2, 5))
    assert signature((3, 5)) != signature((3, 1, 5))
    assert signature((3, 6)) == signature((1, 2))


def test_image_obeys_snell_and_reverses() -> None:
    rotation = rotations("column", np.linspace(0.0, 6.0, 500), np.linspace(0.0, 50.0, 500))
    view, possible = image((3, 1, 5), rotation, 0.4, 1.31)
    assert possible.sum() > 10
    np.testing.assert_allclose(np.linalg.norm(view[possible], axis=1), 1.0, atol=1e-12)
    # light sent back the way it came leaves towards the sun: faces in reverse, crystal turned about so that the view is north
    azimuth, elevation = np.arctan2(view[:, 0], view[:, 1]), np.arcsin(view[:, 2])
    checked = 0
    for k in np.flatnonzero(possible)[::7]:
        # sun now where the reversed light comes from: direction −view
        back = azimuth[k] + np.pi
        turn = np.array([[np.cos(back), -np.sin(back), 0.0], [np.sin(back), np.cos(back), 0.0], [0.0, 0.0, 1.0]])
        again, passes = image((5, 1, 3), (turn @ rotation[k])[None], -elevation[k], 1.31)
        assert passes[0]
        np.testing.assert_allclose(turn.T @ again[0], [0.0, -np.cos(0.4), -np.sin(0.4)], atol=1e-12)
        checked += 1
    assert checked > 2


def test_brightness_knows_the_crystal() -> None:
    rotation = rotations("plate", np.linspace(0.0, 6.28, 400))
    thin, thick = (brightness(hexagonal_prism(aspect), (3, 5), rotation, 0.3, 1.31) for aspect in (0.05, 2.0))
    assert thick.max() > 10.0 * thin.max()  # in a thin plate light meets a basal face first
    assert brightness(hexagonal_prism(1.0), (3, 4), rotation, 0.3, 1.31).max() == 0.0  # 120° wedge: total reflection
    with pytest.raises(DomainError, match="has no face 13"):
        brightness(hexagonal_prism(1.0), (3, 13), rotation, 0.3, 1.31)
    with pytest.raises(DomainError, match="law with free angles"):
        rotations("random", 0.0)


def test_straight_through_a_slab_lights_the_whole_face() -> None:
    # face on: area · (1 − R)², R = ((n − 1)/(n + 1))²
    rotation = rotations("parry", np.zeros(1))
    shape = hexagonal_prism(0.5)
    facing = rotations("parry", np.array([np.pi / 2.0]))
    power = brightness(shape, (1, 2), facing, 0.0, 1.31) + brightness(shape, (2, 1), facing, 0.0, 1.31)
    single = 1.0 - (0.31 / 2.31) ** 2
    assert abs(power[0] - shape.face_areas[6] * single**2) < 1e-12
    assert rotation.shape == (1, 3, 3)
