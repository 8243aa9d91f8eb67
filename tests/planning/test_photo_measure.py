"""Measured circles and drop sizes: whether intervals hold the truth, and drops against Airy's maxima."""

import numpy as np
import pytest

from skyoptics.droplets import airy
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import around, direction
from skyoptics.planning import photo_measure
from skyoptics.planning.photo_aim import by_aim, grid, turned
from skyoptics.units import DEG, NM, UM

PIXEL = 0.05 * DEG
"""Of the pictures that are measured [rad]."""
TRIALS = 1000
ANTISOLAR = direction(70.0 * DEG, -12.0 * DEG)
RADIUS = 41.9 * DEG


def trials(seed, stretch, count=5, noise=1.0):
    """Return viewing directions (trial, point, 3) that were read off a picture with a noise of so many pixels rms."""
    rng = np.random.default_rng(seed)
    camera = turned(grid("equidistant", 1.0 / PIXEL, (1600, 2400)), by_aim(70.0, 12.0, 5.0))
    places = np.linspace(-stretch / 2.0, stretch / 2.0, count)
    row, column = camera.project(around(ANTISOLAR, RADIUS, places))
    shifts = rng.normal(0.0, noise, (2, TRIALS, count))
    return camera.unproject(row + shifts[0], column + shifts[1])


def coverage(circles):
    return np.mean([abs(circle.radius - RADIUS) <= circle.half_width for circle in circles])


def test_interval_about_a_known_centre_holds_the_truth_and_is_narrow():
    """5 points, t(4) = 2.776 (Student 1908, from memory): 2.776 · 0.05°/√5 = 0.062° if the noise were known."""
    found = [photo_measure.known_centre(seen, ANTISOLAR) for seen in trials(11, 90.0 * DEG)]
    assert 0.92 <= coverage(found) <= 0.985
    half = np.median([circle.half_width for circle in found]) / DEG
    assert half < 0.1
    # the median of the standard deviation of 5 normal numbers is √(3.3567/4) of the true one (χ² tables, from memory)
    assert half == pytest.approx(2.776 * 0.05 / np.sqrt(5.0) * np.sqrt(3.3567 / 4.0), rel=0.06)
    assert found[0].span == pytest.approx(90.0 * DEG, abs=0.01)
    assert found[0].freedom == 4


@pytest.mark.parametrize(("stretch", "count"), [(90.0, 5), pytest.param(40.0, 12, marks=pytest.mark.slow)])
def test_interval_with_the_centre_fitted_holds_the_truth(stretch, count):
    views = trials(12, stretch * DEG, count)
    found = [photo_measure.fitted_centre(seen) for seen in views]
    assert 0.92 <= coverage(found) <= 0.985
    known = [photo_measure.known_centre(seen, ANTISOLAR) for seen in views]
    assert np.median([c.half_width for c in found]) > np.median([c.half_width for c in known])


@pytest.mark.parametrize("radius", [8.0, 22.0, 42.0, 80.0])
def test_exact_points_give_centre_and_radius(radius):
    views = around(ANTISOLAR, radius * DEG, np.array([-1.0, -0.3, 0.1, 0.8]))
    found = photo_measure.fitted_centre(views)
    assert found.centre == pytest.approx(ANTISOLAR, abs=1e-9)
    assert found.radius == pytest.approx(radius * DEG, abs=1e-9)


def test_too_few_points_have_no_interval():
    views = around(ANTISOLAR, RADIUS, np.array([-0.5, 0.0, 0.7]))
    assert photo_measure.known_centre(views[:1], ANTISOLAR).half_width is None
    assert photo_measure.fitted_centre(views).half_width is None
    with pytest.raises(DomainError, match="needs 3 points"):
        photo_measure.fitted_centre(views[:2])
    with pytest.raises(DomainError, match="close to one great circle"):
        photo_measure.fitted_centre(around(ANTISOLAR, RADIUS, np.array([0.0, 1e-5, 2e-5])))


def test_students_t_as_tabulated():
    """Abramowitz & Stegun, *Handbook of Mathematical Functions* (1964), Table 26.10, A = 0.95 (from memory)."""
    for freedom, value in ((1, 12.706), (2, 4.303), (4, 2.776), (10, 2.228), (30, 2.042)):
        assert photo_measure.student(freedom) == pytest.approx(value, abs=6e-4)


MAXIMA = np.array([1.01879, 3.24820, 4.82010, 6.16331])
"""|a'ₖ| (Abramowitz & Stegun, Table 10.13)."""


def radii(radius_um, n, p, orders, wavelength=550.0 * NM):
    """Return distances from the antisolar point by van de Hulst (1957), §13.2, written out."""
    h = (p**2 - 1.0) ** 2 / p**2 * np.sqrt(p**2 - n**2) / (n**2 - 1.0) ** 1.5
    x = 2.0 * np.pi * radius_um * UM / wavelength
    edge = {2: 42.0, 3: 51.0}[p] * DEG
    return edge + (-1.0 if p == 2 else 1.0) * h ** (1.0 / 3.0) * x ** (-2.0 / 3.0) * MAXIMA[orders]


@pytest.mark.parametrize("p", [2, 3])
@pytest.mark.parametrize("radius_um", [50.0, 200.0, 500.0])
def test_drop_radius_from_the_spacing_of_supernumeraries(p, radius_um):
    orders = np.array([0, 1, 2, 2, 3])
    found = photo_measure.drops(radii(radius_um, 1.333, p, orders), orders, 550.0 * NM, 1.333)
    assert found.order == p
    assert found.radius / UM == pytest.approx(radius_um, rel=1e-4)
    assert found.low <= found.radius <= found.high
    assert found.edge == pytest.approx({2: 42.0, 3: 51.0}[p] * DEG, abs=1e-6)


def test_drop_radius_from_the_maxima_of_airys_light():
    """Places of the maxima of both polarisations together, Airy's theory worked out by angle."""
    index, radius_um = 1.3335, 250.0
    x = 2.0 * np.pi * radius_um * UM / (550.0 * NM)
    angle = np.linspace(137.5, 141.5, 8001) * DEG
    light = sum(np.abs(part) ** 2 for part in airy.amplitudes(index, x, angle, 2))
    peaks = np.flatnonzero((light[1:-1] > light[:-2]) & (light[1:-1] > light[2:]))[:4] + 1
    found = photo_measure.drops(np.pi - angle[peaks], np.arange(4), 550.0 * NM, index)
    assert found.radius / UM == pytest.approx(radius_um, rel=0.01)
    assert found.edge == pytest.approx(found.edge_theory, abs=0.05 * DEG)
    assert found.trusted


def test_interval_of_the_drop_radius_holds_the_truth():
    rng = np.random.default_rng(3)
    orders = np.repeat([0, 1, 2], 3)
    exact = radii(200.0, 1.333, 2, orders)
    held = []
    for _ in range(400):
        found = photo_measure.drops(exact + rng.normal(0.0, 0.05 * DEG, 9), orders, 550.0 * NM, 1.333)
        held.append(found.low <= 200.0 * UM and (found.high is None or found.high >= 200.0 * UM))
    assert 0.92 <= np.mean(held) <= 0.985


def test_drop_sizes_need_two_orders_and_may_have_no_upper_end():
    with pytest.raises(DomainError, match="two orders"):
        photo_measure.drops(np.array([0.70, 0.71]), np.array([1, 1]), 550.0 * NM, 1.333)
    wild = np.array([42.0, 41.0, 41.9, 41.2]) * DEG
    assert photo_measure.drops(wild, np.array([0, 0, 1, 1]), 550.0 * NM, 1.333).high is None
    assert photo_measure.drops(wild[:2], np.array([0, 1]), 550.0 * NM, 1.333).low is None
