"""Coloured bands: which colour stands where, how wide."""

import numpy as np
import pytest

from skyoptics.geometry.axes import angle_between, direction
from skyoptics.planning import features
from skyoptics.planning.bands import WHITE, bands
from skyoptics.units import DEG

SUN = 200.0 * DEG, 20.0 * DEG


def warm(colour):
    """Red less blue of a colour, −255 to 255."""
    return int(colour[1:3], 16) - int(colour[5:7], 16)


@pytest.mark.parametrize(("name", "red", "violet"), [("primary", 42.37, 40.65), ("secondary", 50.37, 53.48)])
def test_bows(name, red, violet):
    # radii of red and violet: handbook of optics ch. 57, Table 57-1
    (band,) = bands(features.find(name), *SUN)
    radii = angle_between(-direction(*SUN), band.edges) / DEG
    assert radii[0] == pytest.approx(red, abs=0.005)
    assert radii[-1] == pytest.approx(violet, abs=0.005)
    assert warm(band.colours[0]) > 100
    assert warm(band.colours[-1]) < -50
    assert len(band.colours) == len(band.edges) - 1


def test_a_bow_of_another_radius_keeps_its_width():
    (band,) = bands(features.find("primary", 41.0), *SUN)
    radii = angle_between(-direction(*SUN), band.edges[:, 0]) / DEG
    assert (radii[0], radii[-1]) == pytest.approx((41.0, 41.0 - 1.72))


def test_halos_are_red_towards_the_sun():
    (band,) = bands(features.find("halo_22"), *SUN)
    radii = angle_between(direction(*SUN), band.edges) / DEG
    # 2 asin(n/2) − 60° at the ice indices of 700 and 400 nm (minimum deviation of a 60° prism)
    assert radii[0] == pytest.approx(2.0 * np.degrees(np.arcsin(1.3065 / 2.0)) - 60.0, abs=0.1)
    assert radii[-1] == pytest.approx(2.0 * np.degrees(np.arcsin(1.3190 / 2.0)) - 60.0, abs=0.15)
    assert warm(band.colours[0]) > 100


def test_circumzenithal_is_red_below():
    (band,) = bands(features.find("circumzenithal"), *SUN)
    elevation = np.arcsin(band.edges[..., 2]) / DEG
    # sin e = √(n² − cos² h) (Bravais): between the indices of red and violet
    low, high = (np.degrees(np.arcsin(np.sqrt(n**2 - np.cos(SUN[1]) ** 2))) for n in (1.3065, 1.3190))
    assert elevation[0] == pytest.approx(low, abs=0.1)
    assert elevation[-1] == pytest.approx(high, abs=0.2)
    assert warm(band.colours[0]) > 100


def test_parhelia_are_spots_red_inside():
    found = bands(features.find("parhelia"), *SUN)
    assert len(found) == 2
    for band in found:
        assert band.edges.shape[1] == 1
        away = angle_between(direction(*SUN), band.edges[:, 0])
        assert (np.diff(away) > 0.0).all()
        assert warm(band.colours[0]) > 100


def test_mirrored_light_has_no_colours():
    found = bands(features.find("parhelic_circle"), *SUN)
    assert all(band.colours == (WHITE,) for band in found)
    (fog,) = bands(features.find("fogbow"), *SUN)
    assert set(fog.colours) == {WHITE}


def test_nothing_where_there_is_nothing():
    assert bands(features.find("circumzenithal"), 0.0, 50.0 * DEG) == []
