"""Size distributions: closed-form moments, published parameters, nested refinement."""

from __future__ import annotations

from math import gamma, log, pi

import numpy as np
import pytest

from skyoptics.droplets import sizes
from skyoptics.errors import DomainError

ALL = [
    sizes.Single(1e-5),
    sizes.Gaussian(1e-5, 0.1),
    sizes.Gaussian(2.5e-4, 0.4),
    sizes.LogNormal(8e-6, 1.4),
    sizes.UlbrichGamma(1.2e-3, 3.0),
    sizes.UlbrichGamma(1.2e-3, -0.5),
    sizes.MarshallPalmer(5.0),
    sizes.HansenTravis(1e-5, 0.1),
    sizes.HansenTravis(1e-5, 0.02),
    sizes.Deirmendjian("C1"),
    sizes.Deirmendjian("C2"),
    sizes.Deirmendjian("C3"),
]


@pytest.mark.parametrize("drops", ALL, ids=repr)
def test_moments_from_the_rule(drops):
    for level in (1, 2, 4):
        radius, weight = sizes.quadrature(drops, level)
        assert np.all(np.diff(radius) > 0)
        for order in (0, 1, 2, 3, 4, 6):
            assert np.sum(weight * radius**order) == pytest.approx(drops.moment(order), rel=1e-3)


@pytest.mark.parametrize("drops", ALL[1:], ids=repr)
def test_density_integrates_to_the_moments(drops):
    radius = np.geomspace(1e-13, 2e-2, 400_001)
    for order in (0, 2, 3):
        integral = np.trapezoid(drops.density(radius) * radius**order, radius)
        assert integral == pytest.approx(drops.moment(order), rel=1e-3)


@pytest.mark.parametrize("drops", ALL, ids=repr)
def test_refinement_keeps_earlier_nodes(drops):
    coarse, _ = sizes.quadrature(drops, 1)
    fine, _ = sizes.quadrature(drops, 2)
    assert np.all(np.isin(coarse, fine))


def test_marshall_palmer():
    # Marshall & Palmer, J. Meteor. 5, 165 (1948); D0 = 3.67/Λ; water content πρN0/Λ⁴
    rates = [1, 5, 25, 50]
    slope = [4.100, 2.9242, 2.0855, 1.8030]
    water = [0.089, 0.344, 1.329, 2.378]
    for rate, per_mm, grams in zip(rates, slope, water, strict=True):
        rain = sizes.MarshallPalmer(rate)
        assert rain.slope * 1e-3 == pytest.approx(per_mm, rel=1e-4)
        content = sizes.liquid_water_content(rain, rain.concentration)
        assert content * 1e3 == pytest.approx(grams, abs=6e-4)
        assert content == pytest.approx(pi * 1000 * 8e6 / rain.slope**4, rel=1e-9)
        assert sizes.number_concentration(rain, content) == pytest.approx(rain.concentration)
        # median volume diameter: half the water below 3.67/Λ
        radius, weight = sizes.quadrature(rain, 6)
        mass = np.cumsum(weight * radius**3)
        half = np.interp(0.5 * mass[-1], mass, radius)
        assert 2 * half == pytest.approx(3.67 / rain.slope, rel=5e-3)


def test_ulbrich_gamma():
    # Ulbrich, J. Climate Appl. Meteorol. 22, 1764 (1983), from memory: Λ D_m = 4 + µ, D_m the volume-weighted mean
    drops = sizes.UlbrichGamma(1.5e-3, 2.0)
    slope = (3.67 + 2.0) / 1.5e-3
    assert 2 * drops.moment(4) / drops.moment(3) == pytest.approx(6.0 / slope)
    rain = sizes.MarshallPalmer(10.0)
    same = sizes.UlbrichGamma(3.67 / rain.slope, 0.0)
    np.testing.assert_allclose(same.density([1e-4, 1e-3]), rain.density([1e-4, 1e-3]))


@pytest.mark.parametrize(
    ("model", "factor", "alpha", "power", "b", "mode"),
    [("C1", 2.373, 6, 1, 1.5, 4e-6), ("C2", 1.0851e-2, 8, 3, 1 / 24, 4e-6), ("C3", 5.5556, 8, 3, 1 / 3, 2e-6)],
)
def test_deirmendjian(model, factor, alpha, power, b, mode):
    # Deirmendjian, Electromagnetic Scattering on Spherical Polydispersions (1969), from memory; r in µm, n in cm⁻³ µm⁻¹
    drops = sizes.Deirmendjian(model)
    r = np.array([1.0, 2.0, 4.0, 7.0])
    book = factor * r**alpha * np.exp(-b * r**power)
    np.testing.assert_allclose(drops.density(r * 1e-6) * drops.concentration * 1e-12, book, rtol=1e-3)
    fine = np.linspace(0.5e-6, 10e-6, 9501)
    assert fine[np.argmax(drops.density(fine))] == pytest.approx(mode, abs=2e-9)
    assert drops.moment(3) == pytest.approx(
        1e-18 * b ** (-3 / power) * gamma((alpha + 4) / power) / gamma((alpha + 1) / power)
    )
    if model == "C1":
        assert sizes.effective_radius(drops) == pytest.approx(6.0e-6)


def test_hansen_travis():
    # Hansen & Travis, Space Sci. Rev. 16, 527 (1974), eq. 2.53–2.56: the parameters are the effective radius and variance
    for variance in (0.02, 0.1, 0.3):
        drops = sizes.HansenTravis(7e-6, variance)
        assert sizes.effective_radius(drops) == pytest.approx(7e-6)
        assert sizes.effective_variance(drops) == pytest.approx(variance)


def test_gaussian_and_log_normal():
    drops = sizes.Gaussian(1e-5, 0.1)
    assert drops.moment(2) == pytest.approx(1e-10 * 1.01, rel=1e-5)
    assert drops.moment(3) == pytest.approx(1e-15 * 1.03, rel=1e-5)
    wide = sizes.LogNormal(1e-5, 1.5)
    # effective variance of a log-normal: exp(s²) − 1 (Hansen & Travis 1974)
    assert sizes.effective_variance(wide) == pytest.approx(np.exp(log(1.5) ** 2) - 1)


def test_cut():
    rain = sizes.MarshallPalmer(25.0)
    drops = sizes.Cut(rain, 0.1e-3, 4e-3)
    radius, weight = sizes.quadrature(drops, 5)
    assert radius[0] >= 0.1e-3
    assert radius[-1] <= 4e-3
    assert np.sum(weight) == pytest.approx(1.0, rel=0.02)
    # exponential law in radius with scale 1/(2Λ)
    share = np.exp(-2 * rain.slope * 0.1e-3) - np.exp(-2 * rain.slope * 4e-3)
    assert drops.share == pytest.approx(share, rel=0.01)
    assert drops.density(5e-3) == 0.0
    with pytest.raises(DomainError, match="smallest < largest"):
        sizes.Cut(rain, 1e-3, 1e-3)


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (lambda: sizes.Single(0.0), "radius"),
        (lambda: sizes.Single(1.0), "break up"),
        (lambda: sizes.Gaussian(1e-5, 0.0), "single size"),
        (lambda: sizes.Gaussian(1e-5, 0.9), "spread"),
        (lambda: sizes.LogNormal(1e-5, 1.0), "geometric_deviation"),
        (lambda: sizes.UlbrichGamma(1e-3, -1.0), "shape_parameter"),
        (lambda: sizes.MarshallPalmer(0.0), "rain rate"),
        (lambda: sizes.HansenTravis(1e-5, 0.5), "variance"),
        (lambda: sizes.Deirmendjian("C4"), "C1, C2 and C3"),
        (lambda: sizes.number_concentration(sizes.Single(1e-5), -1.0), "liquid water"),
        (lambda: sizes.liquid_water_content(sizes.Single(1e-5), -1.0), "number concentration"),
    ],
)
def test_faults(make, words):
    with pytest.raises(DomainError, match=words):
        make()
