"""Horizons by name."""

import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.geometry.silhouettes import HEIGHTS, silhouette
from skyoptics.units import DEG

DRAWN = [name for name in HEIGHTS if name != "flat"]
AZIMUTH = np.linspace(-20.0, 400.0, 20001) * DEG


@pytest.mark.parametrize("name", DRAWN)
@pytest.mark.parametrize("seed", [0, 1, -5])
def test_a_silhouette_reaches_its_height_and_depends_on_its_seed_alone(name, seed):
    shape = silhouette(name, seed=seed)
    assert shape.highest == pytest.approx(HEIGHTS[name])
    assert 0.0 < shape.lowest < 0.5 * shape.highest
    again, other = silhouette(name, seed=seed), silhouette(name, seed=seed + 1)
    assert np.array_equal(shape.elevation(AZIMUTH), again.elevation(AZIMUTH))
    assert np.max(np.abs(shape.elevation(AZIMUTH) - other.elevation(AZIMUTH))) > 0.2 * HEIGHTS[name]
    # no seam in the north: nowhere steeper there than elsewhere
    if name in ("hills", "ridge"):
        seam = abs(float(np.diff(shape.elevation(np.array([-0.01, 0.01]) * DEG))[0]))
        assert seam <= np.max(np.abs(np.diff(shape.elevation(np.arange(0, 360, 0.02) * DEG))))


def test_the_same_horizon_on_every_machine():
    """Pinned: pictures must not change with a library's random numbers."""
    assert silhouette("hills").elevation(1.0) / DEG == pytest.approx(1.3534094701, abs=1e-9)
    assert silhouette("town", seed=3).elevation(1.0) / DEG == pytest.approx(1.3128466656, abs=1e-9)


def test_height_and_foot_can_be_chosen():
    low, high = silhouette("hills", 1 * DEG), silhouette("hills", 10 * DEG, base=-2 * DEG)
    assert high.elevations + 2 * DEG == pytest.approx(10 * low.elevations)
    assert silhouette("trees", 0.0).elevation([0.0, 1.0]).tolist() == [0.0, 0.0]
    assert silhouette("flat", base=-0.01).elevation(1.0) == -0.01


def test_silhouettes_that_are_none():
    with pytest.raises(DomainError, match=r"no silhouette 'tree'; did you mean trees\? \(there are flat, hills"):
        silhouette("tree")
    with pytest.raises(DomainError, match="0 to 45 degrees high, got 60"):
        silhouette("trees", 60 * DEG)
    with pytest.raises(DomainError, match="within 45 degrees of level"):
        silhouette("trees", base=-1.0)
