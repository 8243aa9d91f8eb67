"""Longest focal lengths and the best aim."""

import numpy as np
import pytest
from sky_circles import circle

from skyoptics.camera.lenses import LENSES, lens
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import direction
from skyoptics.planning import sensors
from skyoptics.planning.aiming import Aim, aim_for, best_aim, bounds, longest_focal
from skyoptics.planning.held import held
from skyoptics.units import DEG, MM

FULL = sensors.find("36x24")
RED, VIOLET = 42.37, 53.48  # outer edges (handbook of optics ch. 57, Table 57-1)


def wanted(radius_deg, elevation_deg, hold="whole", centre=-1.0):
    return held(*circle(radius_deg, 270.0, elevation_deg, centre), 270.0 * DEG, hold)


@pytest.mark.parametrize(
    ("radius", "hold", "orientation", "focal_mm", "raised_deg"),
    [
        # rectilinear projection x = f tan θ, worked by hand; the sun's centre on the horizon
        (RED, "feet", "landscape", 19.73, 0.0),  # 18 / tan r
        (RED, "whole", "landscape", 19.39, 10.62),  # 18 cos e / tan r = 12 / tan(r − e)
        (RED, "whole", "portrait", 13.16, 0.0),  # 12 / tan r
        (VIOLET, "whole", "landscape", 13.08, 10.96),
    ],
)
def test_published_bows(radius, hold, orientation, focal_mm, raised_deg):
    one, sensor = wanted(radius, 0.0, hold), FULL.held(orientation)
    aim = best_aim("rectilinear", sensor, one)
    assert longest_focal("rectilinear", sensor, one.points, aim) / MM == pytest.approx(focal_mm, abs=0.01)
    assert aim.elevation / DEG == pytest.approx(raised_deg, abs=0.01)
    assert aim.azimuth / DEG == pytest.approx(90.0)
    assert aim.roll == 0.0


def test_optimum_is_exact():
    # both bounds are met at once: 18 cos e / tan r = 12 / tan(r − e), solved here by halving
    low, high, r = 0.0, 20.0 * DEG, RED * DEG
    while high - low > 1e-15:
        e = 0.5 * (low + high)
        low, high = (e, high) if 18.0 * np.cos(e) / np.tan(r) > 12.0 / np.tan(r - e) else (low, e)
    one = wanted(RED, 0.0)
    aim = best_aim("rectilinear", FULL, one)
    assert longest_focal("rectilinear", FULL, one.points, aim) / MM == pytest.approx(
        18.0 * np.cos(e) / np.tan(r), abs=1e-5
    )
    assert aim.elevation == pytest.approx(e, abs=1e-6)


@pytest.mark.parametrize(
    ("radius", "focal_mm"), [(21.84, 12.0 / np.tan(21.84 * DEG)), (45.73, 12.0 / np.tan(45.73 * DEG))]
)
def test_whole_halo_in_the_short_side(radius, focal_mm):
    # a full circle about the axis: half the short side ÷ tan r, 29.9 mm and 11.7 mm
    one = wanted(radius, 50.0, centre=1.0)
    for orientation in sensors.ORIENTATIONS:
        sensor = FULL.held(orientation)
        aim = best_aim("rectilinear", sensor, one)
        assert longest_focal("rectilinear", sensor, one.points, aim) / MM == pytest.approx(focal_mm, abs=0.01)


@pytest.mark.parametrize("name", list(LENSES))
def test_circle_about_the_axis(name):
    # r(θ) of the lens itself: the circle just touches the short side
    one = wanted(30.0, 60.0, centre=1.0)
    found = longest_focal(name, FULL, one.points, Aim(270.0 * DEG, 60.0 * DEG))
    assert found == pytest.approx(12.0 * MM / float(lens(name).radius(np.array(30.0 * DEG))), rel=1e-6)


@pytest.mark.parametrize("name", ["rectilinear", "equisolid"])
@pytest.mark.parametrize(
    ("radius", "h", "centre"), [(RED, 0.0, -1.0), (RED, 25.0, -1.0), (VIOLET, 8.0, -1.0), (46.0, 30.0, 1.0)]
)
def test_no_other_aim_is_better(name, radius, h, centre):
    one = wanted(radius, h, centre=centre)
    best = best_aim(name, FULL, one)
    longest = longest_focal(name, FULL, one.points, best)
    rng = np.random.default_rng(5)
    for k in range(140):
        if k < 50:
            aim = Aim(rng.uniform(0.0, 2.0 * np.pi), np.arcsin(rng.uniform(-0.3, 1.0)))
        else:
            spread = 10.0 ** rng.uniform(-4.0, -1.0)
            aim = Aim(best.azimuth + spread * rng.normal(), best.elevation + spread * rng.normal())
        other = longest_focal(name, FULL, one.points, aim)
        assert other is None or other <= longest * (1.0 + 1e-9)


def test_portrait_is_landscape_rolled():
    one = wanted(RED, 12.0)
    upright = longest_focal("rectilinear", FULL.held("portrait"), one.points, Aim(1.5, 0.2))
    rolled = longest_focal("rectilinear", FULL, one.points, Aim(1.5, 0.2, np.pi / 2.0))
    assert upright == pytest.approx(rolled)


def test_none_holds_it():
    # behind the camera, and wider than a rectilinear lens can be
    assert longest_focal("rectilinear", FULL, direction(np.array([np.pi]), 0.0), Aim(0.0, 0.0)) is None
    assert longest_focal("rectilinear", FULL, direction(np.array([79.0 * DEG]), 0.0), Aim(0.0, 0.0)) is None
    assert longest_focal("equidistant", FULL, direction(np.array([79.0 * DEG]), 0.0), Aim(0.0, 0.0)) == pytest.approx(
        18.0 * MM / (79.0 * DEG)
    )
    assert bounds("rectilinear", FULL, np.array([[0.0, 0.0, 1.0]])) == np.inf


def test_words():
    one = wanted(RED, 5.0)
    assert aim_for("rectilinear", FULL, one, "level") == Aim(one.middle, 0.0)
    assert aim_for("rectilinear", FULL, one, Aim(1.0, 0.5, 0.1)) == Aim(1.0, 0.5, 0.1)
    with pytest.raises(DomainError, match="best, level"):
        aim_for("rectilinear", FULL, one, "west")


def test_towards_the_middle_where_no_lens_does():
    # a ring around the zenith is more than a rectilinear lens sees
    ring = held(np.linspace(0.0, 2.0 * np.pi, 3601), np.full(3601, 8.0 * DEG), 1.0)
    aim = best_aim("rectilinear", FULL, ring)
    assert longest_focal("rectilinear", FULL, ring.points, aim) is None
    assert (aim.azimuth, aim.elevation) == pytest.approx((1.0, 8.0 * DEG))
    assert longest_focal("equisolid", FULL, ring.points, best_aim("equisolid", FULL, ring)) == pytest.approx(
        12.0 * MM / (2.0 * np.sin(41.0 * DEG)), rel=1e-6
    )
