import numpy as np
import pytest
from scipy.stats import chisquare, qmc

from skyoptics.kernels import sobol
from skyoptics.kernels.lanes import CHUNK
from skyoptics.kernels.random import batch_key

ALL = (1 << sobol.DIMENSIONS) - 1


def points(count, key=None):
    seeds = np.zeros(sobol.DIMENSIONS, np.uint32)
    if key is not None:
        sobol.scramble_seeds(*key, seeds)
    out = np.zeros(sobol.DIMENSIONS * CHUNK, np.float32)
    parts = []
    for first in range(0, count, CHUNK):
        sobol.sobol_chunk(first, key is not None, seeds, ALL, sobol.REVERSED_NUMBERS, sobol.CHUNK_TABLE, out)
        parts.append(out.reshape(sobol.DIMENSIONS, CHUNK).T.astype(float))
    return np.concatenate(parts)


def test_unscrambled_points_are_those_of_scipy():
    # scipy.stats.qmc.Sobol, direction numbers of Joe & Kuo 2008; ours lie in the middle of steps of 2^-23
    expected = qmc.Sobol(sobol.DIMENSIONS, scramble=False, bits=30).random(4096)
    assert np.array_equal(points(4096) - 2.0**-24, np.floor(expected * 2.0**23) / 2.0**23)


def test_baked_numbers_are_scipys():
    from pathlib import Path

    import scipy

    table = np.load(Path(scipy.__file__).parent / "stats" / "_sobol_direction_numbers.npz")
    assert [int(p) for p in table["poly"][1 : sobol.DIMENSIONS]] == list(sobol._POLYNOMIALS)


def test_scrambled_points_stay_in_their_strata():
    # every dyadic interval of length 2^-12 holds as many of the first 2^14 points as its share: an Owen scramble keeps that
    found = points(2**14, batch_key(3, 1, 4))
    assert found.min() > 0.0
    assert found.max() < 1.0
    for dimension in range(sobol.DIMENSIONS):
        counts = np.bincount((found[:, dimension] * 4096).astype(int), minlength=4096)
        assert np.all(counts == 4)


def test_every_point_is_uniform_over_scrambles():
    # one point of 1500 scrambles, in each dimension: chi-square over 16 classes; and pairs of dimensions over 4 x 4
    first = np.array([points(CHUNK, batch_key(seed, 0, 0))[5] for seed in range(1500)])
    classes = (first * 16).astype(int)
    for dimension in range(sobol.DIMENSIONS):
        assert chisquare(np.bincount(classes[:, dimension], minlength=16)).pvalue > 1e-4
    quarter = (first * 4).astype(int)
    for a in range(sobol.DIMENSIONS - 1):
        assert chisquare(np.bincount(quarter[:, a] * 4 + quarter[:, a + 1], minlength=16)).pvalue > 1e-4


@pytest.mark.parametrize("count", [256, 4096])
def test_scrambled_integration_beats_independent_draws(count):
    # product of (1 + (u - 1/2)): independent draws have a known variance; scrambled nets must lie far below it
    errors = [np.prod(1.0 + (points(count, batch_key(s, 0, 1))[:, :6] - 0.5), axis=1).mean() - 1.0 for s in range(40)]
    independent = np.sqrt(((1.0 + 1.0 / 12.0) ** 6 - 1.0) / count)
    assert np.std(errors) < 0.2 * independent
    assert abs(np.mean(errors)) < 4.0 * np.std(errors) / np.sqrt(40)
