"""The bow of a flattened drop: closed forms, Möbius, a brute search, Fraser's standstill."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.droplets import airy
from skyoptics.droplets.axis_ratio import axis_ratio
from skyoptics.droplets.flattened_caustic import caustic_angle, moebius_shift
from skyoptics.errors import DomainError
from skyoptics.kernels.spheroid import directions
from skyoptics.optics import bows

DEG = np.pi / 180.0
WATER = 4.0 / 3.0


@pytest.mark.parametrize("order", [2, 3, 5])
@pytest.mark.parametrize("index", [1.331, 1.343, 1.5])
def test_a_round_drop_has_descartes_bow_all_around(order, index):
    found = caustic_angle(1.0, index, 0.4, np.linspace(-3.0, 3.0, 7), order)
    assert found == pytest.approx(float(bows.scattering_angle(index, order)), abs=1e-8)


@pytest.mark.parametrize(("ratio", "tolerance"), [(0.999, 0.003), (0.99, 0.02), (0.95, 0.10)])
@pytest.mark.parametrize("elevation", [0.0, 10.0, 20.0, 30.0, 40.0])
def test_top_of_the_primary_against_moebius(ratio, tolerance, elevation):
    # Möbius' formula as in Können, J. Opt. Soc. Am. A 4, 810 (1987), from memory; written out here once more
    r = np.arcsin(np.sqrt((4.0 - WATER**2) / 3.0) / WATER)
    rho = (1.0 - ratio) / (1.0 + ratio)
    formula = 16.0 * rho * np.sin(r) * np.cos(r) ** 3 * np.cos(2.0 * elevation * DEG - 42.030 * DEG)
    shift = caustic_angle(ratio, WATER, elevation * DEG, 0.0, 2) - bows.scattering_angle(WATER, 2)
    assert shift == pytest.approx(formula, rel=tolerance)
    assert float(moebius_shift(ratio, WATER, elevation * DEG)) == pytest.approx(formula, rel=1e-5)


def test_the_shift_follows_the_sun_and_changes_sign():
    # cos(2e − 42.03°) is largest at e = 21° and falls through 0 at 66°; the bow's top there is below the horizon, but a
    # drop seen from a mountain or in a spray has it
    heights = np.array([0.0, 21.0, 42.0, 60.0, 66.0, 72.0, 85.0])
    shift = caustic_angle(0.995, WATER, heights * DEG, 0.0, 2) - bows.scattering_angle(WATER, 2)
    assert np.argmax(shift) == 1
    assert np.all(shift[:4] > 0.0)
    assert abs(shift[4]) < 0.03 * shift[1]
    assert np.all(shift[5:] < 0.0)


def test_level_light_leaves_the_sides_alone():
    # the level section of an upright spheroid is a circle
    side = caustic_angle(np.array([0.95, 0.85, 0.7]), WATER, 0.0, 90.0 * DEG, 2)
    assert side == pytest.approx(float(bows.scattering_angle(WATER, 2)), abs=1e-8)


def test_a_sun_in_the_zenith_sees_a_circle():
    found = caustic_angle(0.9, WATER, 90.0 * DEG, np.linspace(0.0, 3.0, 5), 2)
    assert np.ptp(found) < 1e-7
    assert abs(found[0] - bows.scattering_angle(WATER, 2)) > 1.0 * DEG


def test_mirror_images_agree_and_canting_breaks_them():
    angle = np.array([20.0, 70.0, 130.0]) * DEG
    right, left = (caustic_angle(0.9, WATER, 0.3, s * angle, 2) for s in (1, -1))
    assert right == pytest.approx(left, abs=1e-8)
    tilt = np.array([np.sin(0.1), 0.0, np.cos(0.1)])
    right, left = (caustic_angle(0.9, WATER, 0.3, s * angle, 2, tilt) for s in (1, -1))
    assert np.abs(right - left).min() > 0.5 * DEG
    mirrored = caustic_angle(0.9, WATER, 0.3, -angle, 2, tilt * [-1, 1, 1])
    assert right == pytest.approx(mirrored, abs=1e-8)


def test_a_tilt_in_the_suns_vertical_is_another_height_of_the_sun():
    # at the top all happens in one plane: what counts is the angle between light and axis
    tilt = np.array([0.0, np.sin(0.1), np.cos(0.1)])  # towards the sun in the north: the sun stands higher by 0.1
    assert caustic_angle(0.9, WATER, 0.2, 0.0, 2, tilt) == pytest.approx(
        caustic_angle(0.9, WATER, 0.3, 0.0, 2), abs=1e-7
    )


@pytest.mark.parametrize(("ratio", "order"), [(0.95, 2), (0.85, 2), (0.8, 2), (0.9, 3)])
@pytest.mark.parametrize("elevation", [0.0, 20.0])
def test_no_ray_passes_the_caustic_and_some_touch_it(ratio, order, elevation):
    """A search over a million rays at random, by position angle: independent of how the fold is followed."""
    count = 1_000_000
    rng = np.random.default_rng(1)
    low = bows.incidence(WATER, order) - 0.3
    slant, turn = rng.uniform(low, np.pi / 2, count), rng.uniform(0.0, 2 * np.pi, count)
    light = -np.array([0.0, np.cos(elevation * DEG), np.sin(elevation * DEG)])
    out = directions(
        np.full(count, WATER), np.full(count, ratio), np.tile([0.0, 0.0, 1.0], (count, 1)), np.tile(light, (count, 1)),
        slant, turn, order,
    )  # fmt: skip
    theta = np.arccos(out @ light)
    up = np.array([0.0, light[2], -light[1]])
    position = np.arctan2(out[:, 0], -out @ up)
    side = float(bows.side(WATER, order))
    for angle in (0.0, 40.0, 90.0, 140.0, 180.0):
        near = np.abs(np.abs(position) - angle * DEG) < 0.1 * DEG
        edge = caustic_angle(ratio, WATER, elevation * DEG, np.abs(position[near]), order)
        away = side * (theta[near] - edge)
        assert np.nanmin(away) > -1e-6
        assert np.nanmin(away) < 0.03 * DEG


@pytest.mark.parametrize("elevation", [0.0, 10.0, 20.0])
def test_supernumeraries_stand_still_at_a_quarter_of_a_millimetre(elevation):
    """Fraser, J. Opt. Soc. Am. 73, 1626 (1983): drops near 0.25 mm radius have the least rainbow angle at the bow's top."""
    radius = np.linspace(0.1e-3, 0.8e-3, 141)
    ratio = axis_ratio(2.0 * radius, "beard-chuang1987")
    caustic = caustic_angle(ratio, 1.333, elevation * DEG, 0.0, 2)
    x = 2.0 * np.pi * radius / 550e-9
    for reduced in (1.01879, 3.24820, 4.82010):  # maxima of Ai²(−ζ): main bow, first and second supernumerary
        fringe = caustic + [float(airy.angle_at(1.333, v, reduced, 2)) for v in x] - bows.scattering_angle(1.333, 2)
        least = radius[np.argmin(fringe)]
        assert 0.21e-3 < least < 0.29e-3
        assert fringe[0] > fringe.min() + 0.3 * DEG
        assert fringe[-1] > fringe.min() + 2.0 * DEG
    # at the sides of a low sun's bow nothing holds it: ever outwards
    side = caustic_angle(ratio, 1.333, 0.0, 90.0 * DEG, 2) + [float(airy.angle_at(1.333, v, 3.2482, 2)) for v in x]
    assert np.all(np.diff(side) < 0.0)


def test_what_cannot_be_followed_is_nan_and_what_is_wrong_is_refused():
    # a low sun's bow of very flat drops shrinks to the antisolar point
    assert np.isnan(caustic_angle(0.55, WATER, 0.0, 0.0, 2))
    for bad in ({"axis_ratio": 1.1}, {"axis_ratio": 0.3}, {"order": 1}, {"index": 2.1}, {"sun_elevation": 2.0}):
        arguments = {"axis_ratio": 0.9, "index": WATER, "sun_elevation": 0.1, "position_angle": 0.0, "order": 2} | bad
        with pytest.raises(DomainError):
            caustic_angle(**arguments)
