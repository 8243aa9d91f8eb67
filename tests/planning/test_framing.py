"""How a camera holds a feature."""

import subprocess
import sys
from datetime import UTC, datetime

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from sky_circles import circle

from skyoptics.camera.lenses import LENSES
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import direction
from skyoptics.planning import sensors
from skyoptics.planning.aiming import Aim, longest_focal
from skyoptics.planning.answers import Standing
from skyoptics.planning.framing import Camera, fits_standing, frame_of, image
from skyoptics.planning.held import held
from skyoptics.units import DEG, MM

FULL = sensors.find("36x24")
RED = 42.37  # outer edge of the primary (handbook of optics ch. 57, Table 57-1)


def camera(focal_mm=20.0, lens="rectilinear", sensor=FULL):
    return Camera(lens, focal_mm * MM, sensor)


def wanted(radius_deg, elevation_deg, hold="whole", centre=-1.0):
    return held(*circle(radius_deg, 270.0, elevation_deg, centre), 270.0 * DEG, hold)


class Bow:
    """A feature as far as framing knows one."""

    def outline(self, sun_azimuth, sun_elevation):
        return circle(RED, sun_azimuth / DEG, sun_elevation / DEG)


def test_twenty_millimetres_miss_both_feet():
    # 84.74° of horizon between the feet, 2 atan(18/20) = 83.97° of it in the frame
    found = frame_of(camera(20.0), wanted(RED, 0.0, "feet"), "level")
    assert not found.fits
    assert found.span / DEG == pytest.approx(84.74, abs=1e-4)
    assert found.missing / DEG == pytest.approx(84.74 - 2.0 * np.degrees(np.arctan(18.0 / 20.0)), abs=1e-3)
    assert found.longest_focal / MM == pytest.approx(19.73, abs=0.01)


def test_room_counts_below_nothing():
    found = frame_of(camera(16.0), wanted(RED, 0.0, "feet"), "level")
    assert found.fits
    assert found.missing / DEG == pytest.approx(84.74 - 2.0 * np.degrees(np.arctan(18.0 / 16.0)), abs=1e-3)


def test_pair_of_spots():
    spots = np.array([176.0, np.nan, 224.0]) * DEG, np.array([20.0, np.nan, 20.0]) * DEG
    found = frame_of(camera(60.0), held(*spots, 200.0 * DEG, "pair"), "best")
    assert found.fits == (found.longest_focal >= 60.0 * MM)
    # the best aim has both on its middle row, half their distance from the axis
    half = np.arcsin(np.cos(20.0 * DEG) * np.sin(24.0 * DEG))
    assert found.longest_focal == pytest.approx(18.0 * MM / np.tan(half), rel=1e-9)
    assert found.missing == pytest.approx(2.0 * half - 2.0 * np.arctan(18.0 / 60.0), abs=2e-5)


def test_a_single_spot_outside():
    spot = np.array([20.0]) * DEG, np.array([0.0])
    found = frame_of(camera(50.0), held(*spot, 20.0 * DEG), Aim(50.0 * DEG, 0.0))
    assert not found.fits
    assert found.missing == pytest.approx(30.0 * DEG - np.arctan(18.0 / 50.0), abs=1e-5)


@settings(max_examples=8, deadline=None)
@given(
    st.sampled_from(sorted(LENSES)),
    st.floats(8.0, 80.0),
    st.floats(0.0, 40.0),
    st.sampled_from(["best", "level"]),
    st.sampled_from(["whole", "feet"]),
)
def test_fits_means_nothing_is_missing(lens, focal_mm, h, aim, hold):
    one = wanted(RED, h, hold)
    found = frame_of(camera(focal_mm, lens), one, aim)
    x, y = image(found.camera, found.aim, one.points)
    inside = (np.abs(x - 0.5) <= 0.5 + 1e-8) & (np.abs(y - 0.5) <= 0.5 + 1e-8)
    assert found.fits == inside.all()
    assert found.fits == (found.missing <= 0.0)
    assert found.missing <= found.span * (1.0 + 1e-9)


@pytest.mark.parametrize("lens", list(LENSES))
def test_image_agrees_with_the_camera(lens):
    # `skyoptics.camera.frame.photograph` fits a polynomial of its own; a pixel is 1/300 of the width
    seen = camera(14.0, lens)
    aim = Aim(1.0, 0.4, 0.3)
    grid = seen.looking(aim, 300)
    row, column = np.mgrid[0 : grid.shape[0] : 23, 0:300:29].astype(float)
    vectors = grid.vectors()[::23, ::29]
    x, y = image(seen, aim, vectors)
    known = np.isfinite(vectors[..., 0])
    assert known.sum() >= 50
    assert x[known] * 300.0 - 0.5 == pytest.approx(column[known], abs=0.02)
    assert y[known] * grid.shape[0] - 0.5 == pytest.approx(row[known], abs=0.02)


def test_missing_agrees_with_counting():
    # every 0.01° of the circle looked at one by one through the camera's own grid
    one = wanted(RED, 10.0)
    found = frame_of(camera(28.0), one, Aim(80.0 * DEG, 15.0 * DEG, 4.0 * DEG))
    from skyoptics.geometry.axes import around

    points = around(-direction(270.0 * DEG, 10.0 * DEG), RED * DEG, np.linspace(0.0, 2.0 * np.pi, 36001)[:-1])
    points = points[points[:, 2] >= 0.0]
    row, column = found.camera.looking(found.aim, 3600).project(points)
    inside = (column >= -0.5) & (column <= 3599.5) & (row >= -0.5) & (row <= 2399.5)
    expected = (~inside).sum() * 2.0 * np.pi / 36000 * np.sin(RED * DEG)
    assert found.missing == pytest.approx(expected, abs=0.02 * DEG)


def test_edges_of_what_fits():
    one = wanted(RED, 7.0)
    longest = longest_focal("rectilinear", FULL, one.points, frame_of(camera(), one).aim)
    assert frame_of(Camera("rectilinear", longest * 0.999999, FULL), one).fits
    assert not frame_of(Camera("rectilinear", longest * 1.000001, FULL), one).fits


@pytest.mark.parametrize("aim", ["best", Aim(90.0 * DEG, 5.0 * DEG)])
def test_standings(aim):
    fits = fits_standing(Bow(), camera(20.0), "whole", aim)
    answers = []
    for h in (0.0, 5.0, 12.0, 30.0, 41.0, 43.0):
        standing = Standing(datetime(2027, 5, 1, tzinfo=UTC), 265.0, h, np.nan, np.nan, (), 0.0)
        if h < RED:
            one = held(*circle(RED, 265.0, h), 265.0 * DEG)
            assert fits(standing) == frame_of(camera(20.0), one, aim).fits
        answers.append(fits(standing))
    assert answers[-1] is False
    assert True in answers


def test_refused():
    with pytest.raises(DomainError, match=r"3\.9 mm or longer"):
        camera(3.0)
    with pytest.raises(DomainError, match=r"0\.5 to 5000"):
        camera(0.1, "equisolid")
    with pytest.raises(DomainError, match="did you mean rectilinear"):
        camera(20.0, "rectilinea")


def test_light_to_load():
    code = (
        "import sys; import skyoptics.planning.framing, skyoptics.planning.panorama, skyoptics.planning.sensors; "
        "print(sorted({'numba', 'scipy', 'matplotlib', 'colour'} & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
