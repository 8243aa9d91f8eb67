"""The counter-based generator: uniform, uncorrelated, the same bits every time."""

from __future__ import annotations

import numpy as np
import pytest
from numba import njit

from skyoptics.kernels import random


@njit(nogil=True, error_model="numpy")
def draw(low, high, count, dimension):
    out = np.empty(count)
    for j in range(count):
        out[j] = random.uniform(low, high, np.uint32(j), np.uint32(dimension))
    return out


def sample(seed=0, row=0, batch=0, dimension=0, count=1 << 17):
    low, high = random.batch_key(seed, row, batch)
    return draw(low, high, count, dimension)


@pytest.mark.parametrize(
    "key", [(0, 0, 0, 0), (0, 0, 1, 0), (1, 0, 0, 0), (0, 1, 0, 1), (7, 39, 4095, 8), (2**63, 3, 5, 1)]
)
def test_uniform_by_chi_square(key):
    from scipy.stats import chi2

    values = sample(*key)
    assert values.min() > 0.0
    assert values.max() < 1.0
    counts = np.bincount((values * 256).astype(int), minlength=256)
    statistic = ((counts - len(values) / 256) ** 2).sum() / (len(values) / 256)
    assert 1e-4 < chi2.sf(statistic, 255) < 1.0 - 1e-4


@pytest.mark.parametrize(
    ("first", "second"),
    [
        ((0, 0, 0, 0), (0, 0, 0, 1)),  # dimensions of one batch
        ((0, 0, 0, 0), (0, 0, 1, 0)),  # neighbouring batches
        ((0, 0, 0, 0), (1, 0, 0, 0)),  # neighbouring seeds
        ((0, 0, 1, 0), (0, 1, 0, 0)),  # bin and batch swapped
    ],
)
def test_pairs_fill_the_square_evenly(first, second):
    from scipy.stats import chi2

    a, b = sample(*first), sample(*second)
    counts = np.bincount((a * 16).astype(int) * 16 + (b * 16).astype(int), minlength=256)
    statistic = ((counts - len(a) / 256) ** 2).sum() / (len(a) / 256)
    assert 1e-4 < chi2.sf(statistic, 255) < 1.0 - 1e-4
    assert abs(np.corrcoef(a, b)[0, 1]) < 4.0 / np.sqrt(len(a))


def test_neighbouring_rays_are_uncorrelated():
    values = sample()
    for lag in (1, 2, 64):
        assert abs(np.corrcoef(values[:-lag], values[lag:])[0, 1]) < 4.0 / np.sqrt(len(values))


def test_batches_share_no_rays():
    # a key of seed + ray would make neighbouring seeds the same rays one place on
    everything = np.concatenate([sample(seed, 0, batch, count=4096) for seed in range(4) for batch in range(4)])
    # 65536 draws out of 2**32: 0.5 pairs are expected to meet by chance
    assert len(everything) - len(np.unique(everything)) < 6


def test_keys_are_the_same_everywhere():
    # splitmix64's first output for state 0 is 0xE220A8397B1DCDAF (Steele, Lea & Flood, OOPSLA 2014; value from memory)
    assert random._splitmix64(0) == 0xE220A8397B1DCDAF
    low, high = random.batch_key(3, 2, 1)
    assert draw(low, high, 100, 1).tolist() == draw(low, high, 1000, 1)[:100].tolist()
