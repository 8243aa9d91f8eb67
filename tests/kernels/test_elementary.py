import math

import numpy as np
import pytest

from skyoptics.kernels import elementary

UNIT = np.linspace(0.0, 1.0, 4001).astype(np.float32)


def error(approximate, exact):
    return float(np.max(np.abs(np.asarray(approximate, float) - exact)))


def test_sine_and_cosine_of_a_turn():
    found = np.array([elementary.sine_cosine_turn(u) for u in UNIT])
    turn = 2.0 * np.pi * UNIT.astype(float)
    assert error(found[:, 0], np.sin(turn)) < 6e-7
    assert error(found[:, 1], np.cos(turn)) < 6e-7


def test_minus_log():
    u = np.geomspace(6e-8, 1.0, 4001).astype(np.float32)
    u = np.minimum(u, np.float32(1.0))
    assert error([elementary.minus_log(x) for x in u], -np.log(u.astype(float))) < 2e-5


@pytest.mark.parametrize(("top", "tolerance"), [(4.0, 2e-6), (60.0, 2e-5)])
def test_decay(top, tolerance):
    x = np.linspace(0.0, top, 2001).astype(np.float32)
    assert error([elementary.decay(v) for v in x], np.exp(-x.astype(float))) < tolerance


def test_arc_tangent_all_round():
    angle = np.linspace(-math.pi, math.pi, 4001)[1:-1]
    for length in (1e-3, 1.0):
        y, x = (length * np.sin(angle)).astype(np.float32), (length * np.cos(angle)).astype(np.float32)
        found = [elementary.arc_tangent(a, b) for a, b in zip(y, x, strict=True)]
        assert error(found, np.arctan2(y.astype(float), x.astype(float))) < 4e-7
    assert elementary.arc_tangent(np.float32(0.0), np.float32(0.0)) == 0.0
