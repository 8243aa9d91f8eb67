"""Parts of a feature's light: the test for lanes against the geometry of the arcs."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.crystals import arc_regions
from skyoptics.crystals.arc_feature import PARTS
from skyoptics.geometry.axes import direction
from skyoptics.kernels import sorting
from skyoptics.kernels.sorting import in_part


def test_numbers_are_those_of_the_table() -> None:
    assert PARTS == ("all", "rising", "sinking", "anthelic")
    assert (sorting.ALL, sorting.RISING, sorting.SINKING, sorting.ANTHELIC) == (0, 1, 2, 3)
    assert abs(float(sorting._COSINE) - np.cos(arc_regions.ANTHELIC_RADIUS)) < 1e-15


@pytest.mark.parametrize("kind", [np.float64, np.float32])
@pytest.mark.parametrize("sun_deg", [-20.0, 0.0, 5.0, 25.0, 60.0, 89.0])
@pytest.mark.parametrize("azimuth", [0.0, 2.5])
def test_parts_are_those_of_the_arcs(kind: type, sun_deg: float, azimuth: float) -> None:
    generator = np.random.default_rng(5)
    view = generator.normal(size=(4000, 3))
    view /= np.linalg.norm(view, axis=1, keepdims=True)
    turn = np.array([[np.cos(azimuth), np.sin(azimuth), 0.0], [-np.sin(azimuth), np.cos(azimuth), 0.0], [0, 0, 1.0]])
    elevation = np.deg2rad(sun_deg)
    sun = direction(azimuth, elevation)
    np.testing.assert_allclose(turn @ direction(0.0, elevation), sun, atol=1e-15)
    for number, part in enumerate(PARTS):
        wanted = arc_regions.in_part(part, view, elevation)
        got = np.array([in_part(number, *(turn @ v).astype(kind), *sun.astype(kind)) for v in view])
        assert np.sum(got != wanted) <= (0 if kind is np.float64 else 4), part
        if part != "all":
            assert 0.02 < wanted.mean() < 0.98


@pytest.mark.parametrize("sun_deg", [5.0, 40.0])
def test_straight_above_and_below_the_sun(sun_deg: float) -> None:
    # light turned in the sun's vertical: rising above it, sinking below
    elevation = np.deg2rad(sun_deg)
    sun = direction(0.7, elevation)
    for shift, rising in ((0.4, True), (0.05, True), (-0.05, False), (-0.4, False)):
        view = direction(0.7, elevation + shift)
        assert in_part(sorting.RISING, *view, *sun) == rising
        assert in_part(sorting.SINKING, *view, *sun) != rising
