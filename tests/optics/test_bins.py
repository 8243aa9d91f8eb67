"""Spectral bins: exact means of broken lines."""

import numpy as np
import pytest
from scipy.integrate import quad

from skyoptics.errors import DomainError
from skyoptics.optics.bins import Bins
from skyoptics.units import NM


def test_means_against_quadrature():
    rng = np.random.default_rng(4)
    knots = np.sort(rng.uniform(300, 900, 40)) * NM
    values = rng.random((40, 2))
    bins = Bins(np.array([[350, 351], [400, 700], [500, 500.01], [640, 640]]) * NM)
    means = bins.mean(knots, values)
    for row, (low, high) in enumerate(bins.edges):
        for column in range(2):
            if high > low:
                inside = knots[(knots > low) & (knots < high)]
                expected = quad(
                    lambda x, c=column: np.interp(x, knots, values[:, c]), low, high, points=inside, limit=200
                )[0]
                assert means[row, column] == pytest.approx(expected / (high - low), rel=1e-9)
            else:
                assert means[row, column] == pytest.approx(np.interp(low, knots, values[:, column]))


def test_outside_the_curve_is_zero():
    bins = Bins(np.array([[1.0, 2.0], [2.5, 3.5], [5.0, 6.0]]))
    assert bins.mean([3.0, 4.0], [1.0, 1.0]) == pytest.approx([0.0, 0.5, 0.0])


def test_lines_and_adjoining():
    assert Bins.lines([5e-7, 6e-7]).weight_nm.tolist() == [1.0, 1.0]
    assert Bins.adjoining(np.array([400, 410, 430]) * NM).weight_nm == pytest.approx([10.0, 20.0])


@pytest.mark.parametrize("edges", [[[2.0, 1.0]], [[0.0, 1.0]], [[1.0, np.nan]], [1.0, 2.0], np.empty((0, 2))])
def test_bad_edges(edges):
    with pytest.raises(DomainError):
        Bins(np.array(edges))
