"""Definitions of metrics, on curves made by formula."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import airy

from skyoptics.errors import DomainError
from skyoptics.study.metrics import BowMetrics, Window, measure, width

ANGLE = np.linspace(118.0, 152.0, 681)
WINDOW = Window(primary=(136.0, 143.0), secondary=(120.0, 132.0))
DARK = 0.02


def bell(place, height, deviation):
    return height * np.exp(-0.5 * ((ANGLE - place) / deviation) ** 2)


def made(degree=0.9):
    """A bow of height 1 at 140.013°, supernumeraries at 144.02, 146.5 and 148.2°, a secondary of 0.3 at 126°, dark 0.02."""
    light = DARK + bell(140.013, 1.0, 0.8) + bell(144.02, 0.5, 0.5) + bell(146.5, 0.3, 0.4) + bell(148.2, 0.1, 0.3)
    light += bell(126.0, 0.3, 1.2)
    return 0.5 * (1 + degree) * light, 0.5 * (1 - degree) * light


def test_every_metric_of_a_made_curve():
    found = measure(ANGLE, *made(), WINDOW)
    assert found.bow_angle == pytest.approx(140.013, abs=1e-3)
    assert found.peak == pytest.approx(1.0 + DARK, rel=1e-3)
    # half of the height above the dark band: 2 √(2 ln 2) deviations
    assert found.width == pytest.approx(2.354820 * 0.8, abs=2e-3)
    np.testing.assert_allclose(found.supernumeraries, [144.02, 146.5, 148.2], atol=2e-3)
    assert found.supernumerary(2) == pytest.approx(146.5, abs=2e-3)
    assert found.dark == pytest.approx(DARK, rel=1e-3)
    assert 130.0 < found.dark_angle < 136.5
    assert found.contrast == pytest.approx(1.0 / (1.0 + 2 * DARK), rel=1e-3)
    assert found.secondary_angle == pytest.approx(126.0, abs=2e-3)
    assert found.secondary_over_primary == pytest.approx((0.3 + DARK) / (1.0 + DARK), rel=2e-3)
    assert found.polarization == pytest.approx(0.9, abs=1e-9)


def test_maxima_of_the_squared_airy_function():
    # Abramowitz & Stegun, Table 10.13; an asymmetric maximum, twelve points a unit
    reduced = np.arange(-3.0, 5.5, 0.12)
    curve = airy(-reduced)[0] ** 2
    found = measure(reduced, curve, 0 * curve, Window((0.0, 2.0), (-10.0, -9.0)))
    assert found.bow_angle == pytest.approx(1.01879297, abs=0.004)
    np.testing.assert_allclose(found.supernumeraries, [3.24819758, 4.82009921], atol=0.004)
    assert np.isnan(found.secondary_angle)
    assert np.isnan(found.secondary_over_primary)
    assert found.polarization == 1.0


def test_noise_moves_little_and_makes_no_fringes():
    rng = np.random.default_rng(1)
    noise = 1.0 + 0.005 * rng.standard_normal(len(ANGLE))
    across, along = made()
    found = measure(ANGLE, across * noise, along * noise, WINDOW)
    assert found.bow_angle == pytest.approx(140.013, abs=0.02)
    np.testing.assert_allclose(found.supernumeraries, [144.02, 146.5, 148.2], atol=0.05)


def test_small_maxima_do_not_count():
    across, along = made()
    bump = bell(150.5, 0.019, 0.2)
    assert len(measure(ANGLE, across + bump, along, WINDOW).supernumeraries) == 3
    assert len(measure(ANGLE, across + 1.2 * bump, along, WINDOW).supernumeraries) == 4


def test_what_is_not_there_is_nan():
    rising = np.linspace(1.0, 2.0, len(ANGLE))
    found = measure(ANGLE, rising, rising, WINDOW)
    assert found == BowMetrics()
    assert np.isnan(found.bow_angle)
    assert np.isnan(found.supernumerary(1))
    flat_inside = np.where(ANGLE < 140.0, bell(140.0, 1.0, 1.0), np.maximum(bell(140.0, 1.0, 1.0), 0.8))
    assert np.isnan(width(ANGLE, flat_inside, 440, 0.5))


def test_one_deviation_of_scale_and_unit():
    across, along = made()
    once = measure(ANGLE, across, along, WINDOW)
    twice = measure(2 * ANGLE, 7 * across, 7 * along, Window((272.0, 286.0), (240.0, 264.0)))
    assert twice.bow_angle == pytest.approx(2 * once.bow_angle, rel=1e-9)
    assert twice.width == pytest.approx(2 * once.width, rel=1e-9)
    assert twice.contrast == pytest.approx(once.contrast, rel=1e-9)


def test_faults():
    across, along = made()
    with pytest.raises(DomainError, match="one shape"):
        measure(ANGLE, across[1:], along, WINDOW)
    with pytest.raises(DomainError, match="growing"):
        measure(ANGLE[::-1], across, along, WINDOW)
    with pytest.raises(DomainError, match="not finite"):
        measure(ANGLE, across * np.nan, along, WINDOW)
