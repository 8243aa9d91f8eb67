import numpy as np
import pytest

from skyoptics.crystals.orientations import LAWS, Orientation, projected_area
from skyoptics.crystals.shapes import hexagonal_prism
from skyoptics.errors import DomainError
from skyoptics.units import DEG

HEXAGON = 3 * np.sqrt(3) / 8


def test_upright_plates_show_base_and_sides():
    # closed form: base * |cos| + sides, the azimuth mean of six sides of width 1/2 being 3/pi * L * sin
    cosine = np.linspace(-1.0, 1.0, 9)
    expected = HEXAGON * np.abs(cosine) + 3 / np.pi * 0.3 * np.sqrt(1 - cosine**2)
    assert projected_area(hexagonal_prism(0.3), Orientation("plate"), cosine) == pytest.approx(expected, abs=1e-12)


def test_parry_crystals_seen_from_above_show_the_width_between_corners():
    assert projected_area(hexagonal_prism(2.0), Orientation("parry"), 1.0) == pytest.approx(2.0, rel=1e-9)


@pytest.mark.parametrize("law", LAWS)
@pytest.mark.parametrize("tilt", [0.0, 1.0, 20.0])
def test_mean_over_all_directions_is_a_quarter_of_the_surface(law, tilt):
    # Cauchy's theorem holds for the mean over directions of the beam just as well
    shape = hexagonal_prism(0.4, (1.0, 0.8, 1.1, 0.9, 1.05, 0.85))
    node, weight = np.polynomial.legendre.leggauss(64)
    mean = np.sum(weight * projected_area(shape, Orientation(law, tilt * DEG), node)) / 2
    assert mean == pytest.approx(shape.area / 4, rel=3e-4)


def test_a_wide_tilt_comes_near_the_random_law():
    shape = hexagonal_prism(0.2)
    cosine = np.array([0.0, 0.5, 1.0])
    narrow = np.ptp(projected_area(shape, Orientation("plate"), cosine))
    assert np.ptp(projected_area(shape, Orientation("plate", 90 * DEG), cosine)) < 0.15 * narrow


@pytest.mark.parametrize(
    ("name", "tilt", "words"), [("plate", -3.0, "tilt spread"), ("plates", 1.0, "did you mean plate")]
)
def test_faults_are_told_in_words(name, tilt, words):
    with pytest.raises(DomainError, match=words):
        Orientation(name, tilt * DEG)
