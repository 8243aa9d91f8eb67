"""Wave tables: absolute scale, joints with rays, bin means, choice of method."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest

from skyoptics.droplets import airy, mie, wave_angles, waves
from skyoptics.droplets.bin_averages import average_bins
from skyoptics.droplets.sizes import Gaussian, MarshallPalmer, Single
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import angle_between
from skyoptics.geometry.directions import Directions
from skyoptics.materials import index as material
from skyoptics.optics.axisymmetric import Axisymmetric
from skyoptics.optics.bins import Bins
from skyoptics.optics.source import Disc, Source

WATER = material.water(293.15)
GREEN = Bins.lines([550e-9])


def test_one_drop_at_one_wavelength_is_that_drop():
    angle = np.deg2rad(np.linspace(0.0, 180.0, 361))
    table = waves.scattering_table(Single(4e-6), WATER, GREEN, method="mie", angles=angle)
    m, x = complex(WATER(550e-9)), 2 * np.pi * 4e-6 / 550e-9
    q_ext, q_sca, g = mie.efficiencies(m, x)
    products = mie.products(*mie.amplitudes(m, x, np.cos(angle)))
    np.testing.assert_allclose(
        table.elements[0, :, 0], mie.mueller_elements(products, 4 / (x**2 * q_sca)), rtol=1e-10, atol=1e-9
    )
    assert table.parts == ("mie",)
    assert table.edges is None
    assert table.albedo[0] == pytest.approx(q_sca / q_ext, rel=1e-12)
    assert table.asymmetry[0] == pytest.approx(g, rel=1e-9)
    assert table.report["extinction_m2"][0] == pytest.approx(q_ext * np.pi * 16e-12, rel=1e-12)
    share, extinction = waves.shares(table)
    assert extinction[0] == pytest.approx(1.0, rel=1e-9)
    assert share[0] == pytest.approx(q_sca / q_ext, rel=1e-9)


@pytest.mark.parametrize("radius", [8e-6, 60e-6])
def test_nodes_hold_the_energy(radius):
    """∫ P11 dΩ = 4π by straight lines between nodes, forward peak and glory included."""
    table = waves.scattering_table(Gaussian(radius, 0.1), WATER, GREEN, method="mie")
    assert table.energy()[0, 0] == pytest.approx(1.0, abs=0.004)
    assert np.all(np.diff(table.angle) > 0)
    assert (table.angle[0], table.angle[-1]) == (0.0, np.pi)


def test_nodes_are_fine_where_drops_ask_for_it():
    steps = {}
    for radius in (50e-6, 500e-6):
        angle = wave_angles.nodes(Gaussian(radius, 0.05), WATER, GREEN)
        x = 2 * np.pi * radius / 550e-9
        bow = airy.angle_at(complex(WATER(550e-9)), x, 1.0, 2)
        steps[radius] = np.interp(bow, angle[1:], np.diff(angle))
        assert steps[radius] == pytest.approx(
            0.12 * airy.curvature(WATER(550e-9).item(), 2) ** (1 / 3) * x ** (-2 / 3), rel=0.1
        )
        assert angle[1] * x < 0.15
        assert np.interp(np.deg2rad(90), angle[1:], np.diff(angle)) <= wave_angles.COARSE * 1.001
    assert steps[50e-6] / steps[500e-6] == pytest.approx(10 ** (2 / 3), rel=0.15)


def test_a_bin_is_the_mean_of_its_wavelengths():
    angle = np.deg2rad(np.linspace(2.0, 178.0, 89))
    wide = average_bins(
        Gaussian(3e-6, 0.1), WATER, Bins.adjoining([500e-9, 560e-9]), angle, tolerance=0.002, largest_level=8
    )
    lines = Bins.lines(np.linspace(501e-9, 559e-9, 30))
    fine = average_bins(Gaussian(3e-6, 0.1), WATER, lines, angle, tolerance=0.01)
    expected, found = (mean.products[0] * mean.wavelength[:, np.newaxis] ** 2 for mean in (fine, wide))
    assert np.sqrt(np.mean((found[0] / expected.mean(axis=0) - 1) ** 2)) < 0.005
    assert wide.extinction[0] == pytest.approx(fine.extinction.mean(), rel=1e-3)
    assert wide.asymmetry[0] == pytest.approx(np.average(fine.asymmetry, weights=fine.scattering), rel=1e-3)


def test_error_that_is_stated_is_the_error():
    angle = np.deg2rad(np.linspace(100.0, 170.0, 71))
    bins = Bins.adjoining([540e-9, 560e-9])
    drops = Gaussian(30e-6, 0.1)
    rough = average_bins(drops, WATER, bins, angle, tolerance=0.05)
    fine = average_bins(drops, WATER, bins, angle, tolerance=0.0, largest_level=7)
    stated = np.sqrt(np.mean(rough.change**2))
    true = np.sqrt(np.mean((rough.products[:2].sum(axis=0) / fine.products[:2].sum(axis=0) - 1) ** 2))
    assert stated <= 0.05
    assert 0.4 < true / stated < 2.5


def test_threads_do_not_matter():
    bins = Bins.adjoining([500e-9, 550e-9, 600e-9])
    angles = np.deg2rad(np.linspace(0, 180, 91))
    alone = waves.scattering_table(Gaussian(5e-6, 0.1), WATER, bins, method="mie", angles=angles)
    calls = []
    with ThreadPoolExecutor(3) as pool:
        together = waves.scattering_table(
            Gaussian(5e-6, 0.1),
            WATER,
            bins,
            method="mie",
            angles=angles,
            executor=pool,
            progress=lambda *a: calls.append(a),
        )
    np.testing.assert_array_equal(alone.elements, together.elements)
    assert calls[-1][0] == calls[-1][1] == len(calls)


def radiance_60_to_120(table):
    """Mean radiance over scattering angles 60–120° of a thin curtain under a point sun of 1 W m⁻² nm⁻¹."""
    sun = Source(np.array([0.0, 1.0, 0.0]), Disc.point(1), np.ones(1), np.array([[1.0, 0.0, 0.0, 0.0]]))
    directions = Directions.scattering_axis(sun.direction, 720)
    share, _ = waves.shares(table)
    amount = 0.1
    radiance = sun.irradiance * Axisymmetric(table.total(), share).phase(sun, directions)[..., 0].ravel() * amount
    angle = angle_between(sun.direction, directions.vectors()).ravel()
    inside = (angle > np.deg2rad(60)) & (angle < np.deg2rad(120))
    return np.average(radiance[inside], weights=np.sin(angle[inside]))


def test_rays_airy_and_mie_are_equally_bright():
    """0.5 mm drops, 10 % spread: absolute radiance by scattering angles 60–120° within 3 %."""
    drops = Gaussian(500e-6, 0.1)
    side = np.deg2rad(np.linspace(59.5, 120.5, 123))
    wave = waves.scattering_table(drops, WATER, GREEN, method="mie", angles=np.concatenate([[0.0], side, [np.pi]]))
    rays = waves.scattering_table(drops, WATER, GREEN, method="rays", tolerance=0.02)
    bows = waves.scattering_table(drops, WATER, GREEN, method="airy", tolerance=0.02)
    expected = radiance_60_to_120(rays)
    assert radiance_60_to_120(wave) == pytest.approx(expected, rel=0.03)
    assert radiance_60_to_120(bows) == pytest.approx(expected, rel=0.03)


def test_airy_joins_rays_and_meets_mie_at_the_bow():
    drops = Gaussian(200e-6, 0.1)
    bows = waves.scattering_table(drops, WATER, GREEN, method="airy", tolerance=0.02)
    rays = waves.scattering_table(drops, WATER, GREEN, method="rays", tolerance=0.02)
    assert bows.energy().sum() == pytest.approx(1.0, abs=1e-9)
    assert abs(bows.report["airy_energy_excess"][0]) < 0.02
    far = bows.angle > np.deg2rad(bows.report["airy_trusted_to_deg"]["2"][0])
    scale = (bows.albedo / rays.albedo)[0]
    np.testing.assert_allclose(bows.elements[2, far, 0] * scale, rays.elements[2, far, 0], rtol=1e-12, atol=1e-12)
    np.testing.assert_allclose(bows.elements[1] * scale, rays.elements[1], rtol=1e-12, atol=1e-12)
    window = np.deg2rad(np.linspace(138.2, 139.6, 57))
    wave = waves.scattering_table(
        drops, WATER, GREEN, method="mie", angles=np.concatenate([[0.0], window, [np.pi]]), tolerance=0.01
    )
    exact = wave.elements[0, 1:-1, 0] * waves.shares(wave)[0] / waves.shares(bows)[0]
    total = bows.total().elements[0, :, 0]
    for element in (0, 1, 3):
        found = np.interp(window, bows.angle, total[:, element])
        assert np.sqrt(np.mean((found - exact[:, element]) ** 2)) < 0.04 * np.max(exact[:, 0])


def test_choice_of_method():
    day = Bins.adjoining(np.linspace(400e-9, 700e-9, 31))
    method, reason = waves.choose_method(Gaussian(10e-6, 0.1), WATER, day)
    assert method == "mie"
    assert "small drops" in reason
    assert "\n" not in reason
    assert waves.choose_method(Gaussian(1e-3, 0.1), WATER, day).method == "airy"
    assert waves.choose_method(Gaussian(300e-6, 0.1), WATER, GREEN).method == "mie"
    assert waves.choose_method(Gaussian(300e-6, 0.1), WATER, GREEN, (2, 3)).method == "airy"
    assert waves.choose_method(Gaussian(10e-6, 0.1), WATER, GREEN, (2,)).method == "mie"
    rain = waves.choose_method(MarshallPalmer(50.0), WATER, day)
    assert rain.method == "airy"
    assert "limit" in rain.reason
    assert waves.choose_method(MarshallPalmer(50.0), material.constant(2.2), day).method == "rays"
    table = waves.scattering_table(Gaussian(5e-6, 0.1), WATER, GREEN, angles=np.linspace(0, np.pi, 50))
    assert table.report["method"] == "mie"
    assert table.report["reason"] == waves.choose_method(Gaussian(5e-6, 0.1), WATER, GREEN).reason


@pytest.mark.parametrize(
    ("method", "drops", "said"),
    [
        ("airy", Gaussian(5e-6, 0.1), "does not hold"),
        ("airy", Gaussian(50e-6, 0.1), "broad bow alone"),
        ("rays", Gaussian(100e-6, 0.1), "leaves out supernumerary"),
        ("mie", Gaussian(900e-6, 0.1), "flattened"),
        ("mie", Single(20e-6), "ripple"),
    ],
)
def test_leaving_a_range_is_said(method, drops, said):
    assert any(said in text for text in waves.warnings(method, drops, WATER, GREEN))


def test_inside_the_range_nothing_is_said():
    assert waves.warnings("airy", Gaussian(300e-6, 0.1), WATER, GREEN) == ()
    assert waves.warnings("mie", Gaussian(20e-6, 0.1), WATER, GREEN) == ()


def test_faults():
    with pytest.raises(DomainError, match="did you mean mie"):
        waves.scattering_table(Single(1e-5), WATER, GREEN, method="mei")
    with pytest.raises(DomainError, match="size parameter"):
        waves.scattering_table(Single(4.9e-3), WATER, GREEN, method="mie", angles=[0.0, 1.0])
    with pytest.raises(DomainError, match="growing"):
        average_bins(Single(1e-6), WATER, GREEN, np.array([1.0, 0.5]))
