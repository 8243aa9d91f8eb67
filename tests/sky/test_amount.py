"""Path factors by hand."""

import numpy as np
import pytest

from skyoptics.sky.amount import EARTH_RADIUS, curtain, layer, path_factor
from skyoptics.units import DEG


def test_high_up_it_is_the_cosecant():
    assert path_factor(90 * DEG) == pytest.approx(1.0)
    assert path_factor(30 * DEG) == pytest.approx(2.0, rel=0.005)


def test_at_the_horizon_it_is_finite():
    """1 / sqrt(1 − (R/(R+h))²), about sqrt(R / 2h) for a thin sheet."""
    assert path_factor(0.0, 9e3) == pytest.approx(np.sqrt(EARTH_RADIUS / 18e3), rel=0.01)
    assert path_factor(-1 * DEG) == 0.0


def test_curtain_and_layer():
    elevation = np.array([-10.0, 0.0, 30.0]) * DEG
    assert curtain(elevation, 0.2, False).tolist() == [0.0, 0.2, 0.2]
    assert curtain(elevation, 0.2, True).tolist() == [0.2, 0.2, 0.2]
    assert layer(elevation, 0.2) == pytest.approx(0.2 * path_factor(elevation))
