"""Bow angles against published tables."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.optics import bows

DEG = np.pi / 180.0


@pytest.mark.parametrize(
    ("p", "red", "violet", "width"),
    # "The first 20 orders of rainbows of water", Table 57-1 of a handbook of optics; its angles come out at n = 1.331 (red)
    # and 1.343 (violet)
    [
        (2, 137.63, 139.35, 1.72),
        (3, 129.63, 126.52, 3.11),
        (4, 42.47, 38.11, 4.37),
        (5, 42.76, 48.34, 5.58),
        (6, 127.08, 133.86, 6.78),
    ],
)
def test_table_of_orders(p, red, violet, width):
    angle = bows.scattering_angle(np.array([1.331, 1.343]), p) / DEG
    # printed to 0.01°; the widths are differences before rounding
    np.testing.assert_allclose(angle, [red, violet], atol=0.0055)
    assert abs(angle[1] - angle[0]) == pytest.approx(width, abs=0.0055)


def test_total_deviation_of_the_tertiary_and_secondary():
    # Halliday & Resnick, Fundamentals of Physics, worked rainbow problem: 317.5° (red, i = 76.88°), 321.9° (blue, 76.62°);
    # secondary in blue 233.48°, i = 71.52°
    assert bows.deviation(1.331, 4) / DEG == pytest.approx(317.5, abs=0.05)
    assert bows.deviation(1.343, 4) / DEG == pytest.approx(321.9, abs=0.05)
    assert bows.incidence(1.331, 4) / DEG == pytest.approx(76.88, abs=0.02)
    assert bows.incidence(1.343, 4) / DEG == pytest.approx(76.62, abs=0.01)
    assert bows.deviation(1.343, 3) / DEG == pytest.approx(233.48, abs=0.01)
    assert bows.incidence(1.343, 3) / DEG == pytest.approx(71.52, abs=0.01)


def test_water_in_round_numbers():
    # n = 4/3, from Descartes' formulas (van de Hulst, Light Scattering by Small Particles, 1957, ch. 13)
    n = 4.0 / 3.0
    assert bows.incidence(n, 2) / DEG == pytest.approx(59.391, abs=5e-4)
    assert bows.refraction(n, 2) / DEG == pytest.approx(40.203, abs=5e-4)
    expected = {2: 137.970, 3: 360.0 - 230.978, 4: 41.615, 5: 43.860, 6: 180.0 - 51.581}
    for p, angle in expected.items():
        assert bows.scattering_angle(n, p) / DEG == pytest.approx(angle, abs=6e-4)


@pytest.mark.parametrize("p", range(2, 11))
@pytest.mark.parametrize("index", [1.31, 4.0 / 3.0, 1.343, 1.9])
def test_deviation_is_the_least_and_light_lies_on_the_stated_side(index, p):
    impact = np.linspace(1e-4, 1.0, 200001)
    i = np.arcsin(impact)
    r = np.arcsin(impact / index)
    total = 2.0 * (i - r) + (p - 1) * (np.pi - 2.0 * r)
    assert bows.deviation(index, p) == pytest.approx(total.min(), abs=1e-8)
    assert bows.impact(index, p) == pytest.approx(impact[np.argmin(total)], abs=1e-4)
    assert np.sin(bows.incidence(index, p)) == pytest.approx(index * np.sin(bows.refraction(index, p)), abs=1e-14)
    edge = np.pi * np.ceil(total.min() / np.pi)  # where folding turns the axis round
    near = bows.fold(total[total < total.min() + min(0.02, 0.5 * (edge - total.min()))])
    assert len(near) > 10
    assert np.all((near - bows.scattering_angle(index, p)) * bows.side(index, p) > -1e-9)


def test_sides_of_the_bows():
    # Alexander's dark band lies between primary and secondary; the tertiary's light lies towards the sun, the next's away
    np.testing.assert_array_equal(bows.side(4.0 / 3.0, [2, 3, 4, 5, 6]), [1, -1, -1, 1, 1])


def test_fresnel_at_the_bow_ray():
    # exact: R_s = ((p−1)/(p+1))² at any n; n = 4/3: R_p = 1/289 for the primary
    n = 4.0 / 3.0
    reflected_s, reflected_p = bows.reflectances(n, [2, 3, 4, 5])
    np.testing.assert_allclose(reflected_s, [1 / 9, 1 / 4, 9 / 25, 4 / 9], atol=1e-15)
    np.testing.assert_allclose(reflected_p, [1 / 289, 0.065441, 0.147929, 0.226015], atol=5e-7)
    eps_s, eps_p = bows.energies(n, [2, 3, 4, 5])
    np.testing.assert_allclose(eps_s, [64 / 729, 9 / 256, 0.019110, 0.012043], atol=5e-7)
    np.testing.assert_allclose(eps_p, [0.003436, 0.003740, 0.002350, 0.001563], atol=5e-7)
    # degree of polarisation, not the often-quoted share of s-light (96 %, 90 %)
    np.testing.assert_allclose(bows.polarisation(n, [2, 3, 4, 5]), [0.9247, 0.8077, 0.7810, 0.7702], atol=5e-5)


def test_sensitivities():
    # dD/dn at n = 1.333 in degrees per unit n, from Descartes' formulas
    np.testing.assert_allclose(bows.sensitivity(1.333, [2, 3, 4, 5]) / DEG, [145.4, 262.1, 367.8, 470.0], atol=0.05)
    step = 1e-6
    for p in range(2, 7):
        slope = (bows.scattering_angle(1.333 + step, p) - bows.scattering_angle(1.333 - step, p)) / (2.0 * step)
        assert bows.angle_sensitivity(1.333, p) == pytest.approx(slope, rel=1e-6)


def test_no_bow_is_nan():
    assert np.isnan(bows.impact([1.0, 0.9, 2.0, 2.5], 2)).all()
    assert np.isnan(bows.side(1.333, [0, 1])).all()
    assert np.isnan(bows.energies(2.5, 2)).all()
    assert np.isfinite(bows.scattering_angle(2.5, 3))
