"""Axis ratios of falling raindrops, against the values of the published polynomials."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.droplets.axis_ratio import DEFAULT_LAW, LIMITS, axis_ratio
from skyoptics.errors import DomainError

DIAMETER_MM = np.array([0.5, 1, 1.5, 2, 3, 4, 5, 6, 7, 8])
PUBLISHED = {
    # Beard & Chuang, J. Atmos. Sci. 44, 1509 (1987); Brandes et al., J. Appl. Meteorol. 41, 674 (2002);
    # Thurai et al., J. Atmos. Oceanic Technol. 24, 1019 (2007)
    "beard-chuang1987": [0.9990, 0.9826, 0.9581, 0.9276, 0.8558, 0.7793, 0.7061, 0.6401, 0.5813],
    "brandes2002": [0.9992, 0.9888, 0.9674, 0.9380, 0.8654, 0.7881, 0.7167, 0.6563, 0.6058, 0.5582],
    "thurai2007": [1.0000, 0.9861, 0.9647, 0.9295, 0.8590, 0.7897, 0.7229, 0.6587, 0.5964, 0.5341],
}


@pytest.mark.parametrize("law", PUBLISHED)
def test_published_values(law):
    expected = PUBLISHED[law]
    np.testing.assert_allclose(axis_ratio(DIAMETER_MM[: len(expected)] * 1e-3, law), expected, atol=1e-4)


@pytest.mark.parametrize("law", LIMITS)
def test_small_drops_are_round_and_larger_ones_flatter(law):
    diameter = np.linspace(0.0, LIMITS[law], 2001)
    ratio = axis_ratio(diameter, law)
    assert np.all(ratio <= 1.0)
    np.testing.assert_array_equal(ratio[diameter < 0.3e-3], 1.0)
    assert np.all(np.diff(ratio[diameter > 0.71e-3]) < 0.0)
    assert ratio[-1] < 0.6


def test_default():
    assert DEFAULT_LAW == "thurai2007"
    assert axis_ratio(2e-3) == axis_ratio(2e-3, "thurai2007")


def test_faults():
    with pytest.raises(DomainError, match="did you mean brandes2002"):
        axis_ratio(1e-3, "brandes")
    with pytest.raises(DomainError, match="7 mm"):
        axis_ratio(7.5e-3, "beard-chuang1987")
    with pytest.raises(DomainError, match=r"0 \.\.\. 8 mm"):
        axis_ratio(-1e-3)
    with pytest.raises(DomainError, match="8 mm"):
        axis_ratio(np.nan)
