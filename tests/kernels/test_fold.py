"""Airy's curve laid on a caustic: against the functions themselves, light kept, both sides."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import airy

from skyoptics.kernels import fold

KAPPA, CURVATURE = 150.0, 4.9
STRENGTH = np.array([0.088, 0.02, 0.0034, 0.05])


def integrals():
    z = np.linspace(fold.FIRST, fold.LAST, fold.STEPS + 1)
    a, d, _, _ = airy(-z)
    return np.stack([z * a**2 + d**2, (z * d**2 + z**2 * a**2 - 2 * a * d) / 3.0], axis=1)


def lay(edges, side=1.0, caustic=1.0, cell=0.0, trusted=1e9, factor=(1.0, 1.0, 0.0, 0.0)):
    nu = 16
    brightness = np.ones((2, 1, nu, 4)) * np.array(factor)
    out = np.zeros((1, len(edges) - 1, 4))
    fold.lay(
        np.asarray(edges), np.array([[caustic]]), side, np.array([1.0]), np.array([KAPPA]), CURVATURE, STRENGTH,
        np.array([trusted]), np.array([cell]), np.array([0]), np.array([0.5]), brightness, integrals(), out,
    )  # fmt: skip
    return out[0]


def wave(u, f, g):
    a, d, _, _ = airy(-KAPPA * u)
    return np.sqrt(KAPPA) * 2 * np.pi * (f * a**2 + g * d**2 / (KAPPA * CURVATURE))


def test_running_integrals_are_those_of_the_squares():
    # closed forms: DLMF §9.11(iv); here by quadrature
    table = integrals()
    step = (fold.LAST - fold.FIRST) / fold.STEPS
    low, high = 1000, 2600
    for column, part in ((0, 0), (1, 1)):
        by_sum, _ = quad(lambda t, part=part: airy(-t)[part] ** 2, fold.FIRST + low * step, fold.FIRST + high * step)
        assert table[high, column] - table[low, column] == pytest.approx(by_sum, rel=1e-9)


@pytest.mark.parametrize("side", [1.0, -1.0])
def test_bins_hold_the_mean_of_the_curve(side):
    distance = np.linspace(-0.03, 0.2, 231)
    edges = 1.0 + distance if side > 0 else (1.0 - distance)[::-1]
    out = lay(edges, side)
    out = out if side > 0 else out[::-1]
    for row in (5, 30, 37, 60, 120, 200):
        s, _ = quad(lambda u: wave(u, *STRENGTH[:2]), distance[row], distance[row + 1])
        p, _ = quad(lambda u: wave(u, *STRENGTH[2:]), distance[row], distance[row + 1])
        s, p = s / 1e-3, p / 1e-3
        assert out[row, 0] == pytest.approx(s + p, rel=2e-3, abs=1e-6)
        assert out[row, 1] == pytest.approx(p - s, rel=2e-3, abs=1e-6)


@pytest.mark.parametrize(("cell", "trusted"), [(0.0, 1e9), (0.05, 1e9), (0.0, 0.05)])
def test_fringes_fade_into_the_rays_and_keep_the_light(cell, trusted):
    distance = np.linspace(-0.05, 0.3, 701)
    out = lay(1.0 + distance, cell=cell, trusted=trusted)
    f, g = STRENGTH[0] + STRENGTH[2], STRENGTH[1] + STRENGTH[3]
    rays = 2.0 * f * np.sqrt(0.3) + g / CURVATURE * 2.0 / 3.0 * 0.3**1.5
    assert out[:, 0].sum() * 0.35 / 700 == pytest.approx(rays, rel=0.01)
    u = distance[-50:-1] + 0.00025
    mean = f / np.sqrt(u) + g / CURVATURE * np.sqrt(u)
    ripple = np.abs(out[-50:-1, 0] / mean - 1.0).max()
    assert ripple > 0.3 if cell == 0.0 and trusted > 1.0 else ripple < 0.02


def test_factors_work_on_their_own_polarisation():
    edges = 1.0 + np.linspace(-0.03, 0.2, 101)
    plain, s_only = lay(edges), lay(edges, factor=(3.0, 0.0, 0.5, -0.25))
    assert s_only[:, 0] == pytest.approx(1.5 * (plain[:, 0] - plain[:, 1]))
    assert s_only[:, 1] == pytest.approx(-s_only[:, 0])
    assert s_only[:, 2] == pytest.approx(0.5 * plain[:, 0])
    assert s_only[:, 3] == pytest.approx(-0.25 * plain[:, 0])


def test_many_bins_are_the_same_in_blocks():
    edges = 1.0 + np.linspace(-0.03, 0.2, 3 * fold.BLOCK + 8)
    whole = lay(edges)
    assert lay(edges[100:201])[:, 0] == pytest.approx(whole[100:200, 0], rel=1e-12)
