"""Curves by method: published places, one scale, the disc."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.droplets import mie
from skyoptics.study.curves import cell_means, curves, external_reflection, window
from skyoptics.study.metrics import measure
from skyoptics.study.question import Question


def bow(method, radius_um, spread, index=4 / 3, wavelength_nm=600.0, **more):
    question = Question(
        radius_um=(radius_um,), spread=(spread,), methods=(method,), index=index, wavelength_nm=(wavelength_nm,), **more
    )
    step = question.steps()[0]
    found = curves(question, step, method)
    asked = window(step, wavelength_nm * 1e-9)
    return found, measure(found.angle, found.perpendicular[0], found.parallel[0], asked)


@pytest.mark.parametrize("spread", [0.05, 0.1])
@pytest.mark.parametrize(("radius_um", "limit"), [(10.0, 0.7), (20.0, 0.25), (50.0, 0.05), (100.0, 0.05)])
def test_mie_peak_against_airy_peak(radius_um, limit, spread):
    peaks = [
        np.rad2deg(bow(method, radius_um, spread, index=1.33468, wavelength_nm=550.0)[1].bow_angle)
        for method in ("mie", "airy")
    ]
    assert abs(peaks[1] - peaks[0]) < limit


def test_polarisation_at_the_peak():
    # Können & de Boer, Appl. Opt. 18, 1961 (1979): less than Fresnel's 0.927, growing with size; values from Lorenz–Mie
    degree = [
        bow("mie", radius, 0.08, index=1.33468, wavelength_nm=550.0)[1].polarization for radius in (10.0, 50.0, 100.0)
    ]
    np.testing.assert_allclose(degree, [0.86, 0.90, 0.91], atol=0.015)
    assert degree[0] < degree[1] < degree[2] < 0.927


def test_methods_have_one_scale():
    """Height of the bow, of extinction, of 0.25 mm drops: Airy within 2 % of Mie."""
    heights = [bow(method, 250.0, 0.1)[1].peak for method in ("mie", "airy")]
    assert heights[1] == pytest.approx(heights[0], rel=0.02)


def test_the_disc_widens():
    narrow, wide = (bow("airy", 500.0, 0.05, disc=disc)[1] for disc in (False, True))
    assert wide.width > narrow.width + np.deg2rad(0.05)
    assert wide.contrast < narrow.contrast
    assert len(wide.supernumeraries) < len(narrow.supernumeraries)


def test_external_reflection():
    # backwards ((n − 1)/(n + 1))²/4 (Fresnel); an opaque mirror would give ¼ everywhere; Brewster's angle
    s, p = external_reflection(4 / 3, np.array([np.pi - 1e-6]))
    np.testing.assert_allclose([s[0], p[0]], 0.25 / 49, rtol=1e-6)
    brewster = np.pi - 2 * np.arctan(4 / 3)
    assert external_reflection(4 / 3, np.array([brewster]))[1][0] == pytest.approx(0.0, abs=1e-12)
    # dark band of large drops: most of its light is this, the rest higher orders
    question = Question(radius_um=(300.0,), spread=(0.1,), methods=("mie",), index=4 / 3, wavelength_nm=(600.0,))
    found = curves(question, question.steps()[0], "mie")
    dark = np.searchsorted(found.angle, np.deg2rad(134.0))
    s, p = external_reflection(4 / 3, found.angle[dark : dark + 1])
    assert 1.0 < found.intensity[0, dark] / ((s[0] + p[0]) / (4 * np.pi)) < 1.4


def test_rays_stand_at_the_caustic():
    metrics = bow("rays", 500.0, 0.0)[1]
    assert np.rad2deg(metrics.bow_angle) == pytest.approx(137.970, abs=0.02)


def test_single_drop_is_mie():
    found, _ = bow("mie", 5.0, 0.0)
    x = 2 * np.pi * 5e-6 / 600e-9
    s1, s2 = mie.amplitudes(4 / 3, x, np.cos(found.angle))
    scale = 0.5 * (600e-9 / 2 / np.pi) ** 2 / (mie.efficiencies(4 / 3, x)[0] * np.pi * 25e-12)
    np.testing.assert_allclose(found.perpendicular[0], np.abs(s1) ** 2 * scale, rtol=1e-8)
    np.testing.assert_allclose(found.parallel[0], np.abs(s2) ** 2 * scale, rtol=1e-8)


def test_cell_means_keep_the_integral():
    angle = np.sort(np.random.default_rng(3).uniform(0.0, 1.0, 40))
    values = np.random.default_rng(4).uniform(0.0, 1.0, (2, 40))
    edges = np.concatenate([angle[:1], np.linspace(angle[0], angle[-1], 9)[1:-1], angle[-1:]])
    found = cell_means(angle, values, edges)
    np.testing.assert_allclose(found @ np.diff(edges), np.trapezoid(values, angle, axis=1), rtol=1e-12)
    straight = cell_means(angle, angle[np.newaxis] * 3.0, edges)
    np.testing.assert_allclose(straight[0], 1.5 * (edges[1:] + edges[:-1]), rtol=1e-9)
