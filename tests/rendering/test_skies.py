"""Clear skies between solved heights of the sun, against skies solved there."""

import numpy as np
import pytest

from skyoptics.colour.observer import weights
from skyoptics.light.air import Air
from skyoptics.optics.bins import Bins
from skyoptics.rendering import skies
from skyoptics.rendering.skies import LOWEST, NODES, Shelf, shelf_for
from skyoptics.scene.load import load
from skyoptics.sky.clear import ClearSky
from skyoptics.units import DEG

BINS = Bins.lines([548e-9, 552e-9])
"""So few knots that a sky is solved quickly."""


def towards(height, azimuth=200.0):
    level = np.cos(height * DEG)
    return np.array([level * np.sin(azimuth * DEG), level * np.cos(azimuth * DEG), np.sin(height * DEG)])


def everywhere():
    azimuth, elevation = np.meshgrid(
        np.arange(3.0, 360.0, 15.0) * DEG, np.array([-5.0, 0.5, 4, 12, 25, 45, 70, 89]) * DEG
    )
    level = np.cos(elevation)
    return np.stack([level * np.sin(azimuth), level * np.cos(azimuth), np.sin(elevation)], axis=-1)


def errors(height):
    """Return relative errors of X, Y, Z over the sky and the ground."""
    sun = towards(height)
    found = Shelf(BINS, Air(), 0.2, "1931", True).sky(sun).radiance(everywhere())
    true = ClearSky(BINS, sun, Air(), 0.2).radiance(everywhere()) @ weights(BINS)
    return np.abs(found / true - 1.0)


def test_between_solved_heights():
    assert 24.7 not in NODES
    found = errors(24.7)
    assert found.max() < 0.0005
    assert np.sqrt(np.mean(found**2)) < 0.0002


@pytest.mark.slow
@pytest.mark.parametrize("height", [4.5, 7.0, 9.0, 11.0, 13.0, 13.9, 14.1, 15.0, 17.0, 22.0, 50.0, 87.0])
def test_between_solved_heights_everywhere(height):
    found = errors(height)
    assert found.max() < (0.02 if height < 16.0 else 0.001)
    assert np.sqrt(np.mean(found**2)) < (0.005 if height < 16.0 else 0.0005)


def test_at_a_solved_height_and_below_the_lowest_it_is_the_sky(monkeypatch):
    solved = []
    monkeypatch.setattr(skies, "ClearSky", lambda *given: solved.append(1) or ClearSky(*given))
    shelf = Shelf(BINS, Air(), 0.2, "1931", True)
    sun = towards(LOWEST - 1.3)
    true = ClearSky(BINS, sun, Air(), 0.2).radiance(everywhere()) @ weights(BINS)
    np.testing.assert_allclose(shelf.sky(sun).radiance(everywhere()), true, rtol=1e-10)
    assert len(solved) == 1
    shelf.sky(towards(LOWEST - 1.3, 10.0))  # another azimuth is another view of the same sky
    assert len(solved) == 1


def test_shares_are_a_cubic():
    for height in (4.0, 9.3, 41.0, 89.9):
        shares = skies._shares(height)
        for power in range(4):
            assert sum(share * node**power for node, share in shares) == pytest.approx(height**power, rel=1e-9)
    assert sorted(share for _, share in skies._shares(8.0)) == pytest.approx([0.0, 0.0, 0.0, 1.0], abs=1e-12)


def test_which_films_have_a_shelf(tiny):
    def film(*overrides, heights=(4.0, 30.0), count=40):
        every = np.linspace(*heights, count)
        return [load(tiny, (f"light.elevation_deg={height!r}", *overrides)) for height in every.tolist()]

    assert shelf_for(film()) is None  # a plain sky
    shelf = shelf_for(film("picture.sky=clear"))
    assert shelf is not None
    assert shelf.between
    few = shelf_for(film("picture.sky=clear", count=5))
    assert few is not None
    assert not few.between
    still = shelf_for(film("picture.sky=clear", heights=(20.0, 20.0)))
    assert still is not None
    assert not still.between
    for other in ("light.body=moon", "light.attenuation=none", "camera.eye_height_m=30"):
        assert shelf_for(film("picture.sky=clear", other)) is None
    hazy = [load(tiny, ("picture.sky=clear", f"light.aerosol_depth={depth}")) for depth in (0.1, 0.2)]
    assert shelf_for(hazy) is None


def test_a_sky_that_cannot_be_solved_is_told_each_time():
    shelf = Shelf(Bins.lines([250e-9]), Air(), 0.2, "1931", True)
    for _ in range(2):
        with pytest.raises(Exception, match=r"nm|spectrum|range"):
            shelf.sky(towards(20.0))
