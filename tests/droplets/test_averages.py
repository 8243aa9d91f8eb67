"""Size averages: one size, threads, corona rings, polarisation of the bow."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.droplets import averages, mie
from skyoptics.droplets.sizes import Gaussian, Single


def test_average_of_one_size_is_that_size():
    cosine = np.cos(np.deg2rad([0.0, 30.0, 140.0, 180.0]))
    wavelength = np.array([450e-9, 650e-9])
    found = averages.average(Single(3e-6), [1.3396, 1.3317], wavelength, cosine)
    for row, m in enumerate((1.3396, 1.3317)):
        x = 2 * np.pi * 3e-6 / wavelength[row]
        np.testing.assert_allclose(
            found.products[:, row], mie.products(*mie.amplitudes(m, x, cosine)), rtol=1e-12, atol=1e-9
        )
        q_ext, q_sca, g = mie.efficiencies(m, x)
        area = np.pi * 9e-12
        np.testing.assert_allclose(
            [found.extinction[row], found.scattering[row], found.asymmetry[row]], [q_ext * area, q_sca * area, g]
        )
        p11 = found.elements[:, row, 0]
        np.testing.assert_allclose(p11, 2 / (x**2 * q_sca) * found.products[:2, row].sum(axis=0))
    np.testing.assert_allclose(found.albedo, 1.0)


def test_average_does_not_depend_on_threads_and_reaches_its_tolerance():
    from concurrent.futures import ThreadPoolExecutor

    cosine = np.cos(np.deg2rad(np.linspace(137.0, 150.0, 14)))
    drops = Gaussian(5e-6, 0.1)
    alone = averages.average(drops, 1.33468, [550e-9], cosine, tolerance=0.01)
    with ThreadPoolExecutor(2) as pool:
        together = averages.average(drops, 1.33468, [550e-9], cosine, tolerance=0.01, executor=pool)
    np.testing.assert_array_equal(alone.products, together.products)
    assert np.max(alone.change) <= 0.01
    fine = averages.average(drops, 1.33468, [550e-9], cosine, tolerance=0.0, largest_level=6)
    assert fine.sizes > alone.sizes
    np.testing.assert_allclose(alone.products[0], fine.products[0], rtol=0.02)


def test_corona_rings_of_cloud_drops():
    """Dark rings at 0.60983 and 1.11657 λ/a (Fraunhofer disc, zeros of J1), 5 % spread, within 2.5 %."""
    wavelength = 550e-9
    for radius in (10e-6, 20e-6, 40e-6):
        first = np.arcsin(0.60983 * wavelength / radius)
        second = np.arcsin(1.11657 * wavelength / radius)
        angle = np.linspace(0.7 * first, 1.3 * second, 301)
        found = averages.average(Gaussian(radius, 0.05), 1.33468, wavelength, np.cos(angle), tolerance=0.005)
        curve = found.products[:2, 0].sum(axis=0)
        for ring in (first, second):
            near = np.abs(angle / ring - 1.0) < 0.15
            dark = angle[near][np.argmin(curve[near])]
            assert abs(dark / ring - 1.0) < 0.025, (radius, ring)


def test_polarisation_at_the_primary_peak_grows_with_size():
    # Können & de Boer, Appl. Opt. 18, 1961 (1979); values computed from Lorenz–Mie at 550 nm: 0.82 … 0.91, limit 0.927
    angle = np.deg2rad(np.arange(136.0, 148.0, 0.1))
    degree = []
    for radius, expected in ((5e-6, 0.82), (10e-6, 0.86), (20e-6, 0.88), (50e-6, 0.90)):
        found = averages.average(Gaussian(radius, 0.08), 1.33468, 550e-9, np.cos(angle), tolerance=0.01)
        i1, i2 = found.products[:2, 0]
        peak = np.argmax(i1 + i2)
        degree.append((i1[peak] - i2[peak]) / (i1[peak] + i2[peak]))
        assert degree[-1] == pytest.approx(expected, abs=0.02)  # depends on the spread by as much
    assert np.all(np.diff(degree) > 0.0)
    assert degree[-1] < 0.927
