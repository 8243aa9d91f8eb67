"""Legendre moments: against g, against the curve they came from, and the rule against numpy's."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.droplets import legendre, mie


@pytest.mark.parametrize(("m", "x"), [(1.333, 3.0), (1.5 + 0.2j, 60.0)])
def test_legendre_moments(m, x):
    count = legendre.nodes_needed(x)
    nodes, weights = legendre.gauss_legendre(count)
    _, q_sca, g = mie.efficiencies(m, x)
    p11 = mie.mueller_elements(mie.products(*mie.amplitudes(m, x, nodes)), 4.0 / (x**2 * q_sca))[:, 0]
    moments = legendre.moments(p11, nodes, weights, count)
    assert moments[0] == pytest.approx(1.0, abs=1e-9)
    assert moments[1] == pytest.approx(g, abs=1e-9)
    cosine = np.cos(np.linspace(0.0, np.pi, 91))
    direct = mie.mueller_elements(mie.products(*mie.amplitudes(m, x, cosine)), 4.0 / (x**2 * q_sca))[:, 0]
    np.testing.assert_allclose(legendre.series(moments, cosine), direct, rtol=1e-6, atol=1e-6)


@pytest.mark.parametrize("count", [1, 2, 3, 8, 101])
def test_gauss_legendre_rule(count):
    nodes, weights = legendre.gauss_legendre(count)
    expected, expected_weights = np.polynomial.legendre.leggauss(count)
    np.testing.assert_allclose(nodes[::-1], expected, atol=1e-14)
    np.testing.assert_allclose(weights[::-1], expected_weights, rtol=1e-10)
