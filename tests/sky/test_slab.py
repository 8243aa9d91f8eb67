"""Single scattering in a slab: closed form against quadrature, limits by hand."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad

from skyoptics.errors import DomainError
from skyoptics.sky.amount import layer, path_factor
from skyoptics.sky.slab import back, rim, slab, through, transmission, vertical_cosine
from skyoptics.units import DEG

CASES = [(0.05, 1.0, 0.3, 1.0, 1.0), (1.0, 0.34, 0.9, 1.3, 0.7), (3.0, 0.1, 0.1, 0.6, 1.4), (0.7, 0.5, 0.02, 1.0, 1.0)]


def plates(cosine):
    """Extinction of an imaginary plate: large from above, small from the side."""
    return 0.4 + 1.2 * cosine


@pytest.mark.parametrize("case", CASES)
def test_factors_are_their_integrals(case):
    """The integrals of Chandrasekhar (1950) §69 as they stand, by scipy's quadrature."""
    depth, sun_cosine, cosine, sun_k, k = case
    a, b = sun_k / sun_cosine, k / cosine
    down, _ = quad(lambda t: np.exp(-a * t - b * (depth - t)) / cosine, 0.0, depth, epsabs=0.0, epsrel=1e-11)
    up, _ = quad(lambda t: np.exp(-a * t - b * t) / cosine, 0.0, depth, epsabs=0.0, epsrel=1e-11)
    assert through(*case) == pytest.approx(down, rel=1e-10)
    assert back(*case) == pytest.approx(up, rel=1e-10)


@given(st.floats(1e-9, 1e-2), st.floats(-1.0, 1.0))
def test_equal_exponents_are_no_singularity(gap, sign):
    """(e^(−a) − e^(−b)) / (b − a) → e^(−a) (1 − (b − a)/2): the series where the difference cancels."""
    depth, k = 1.3, 1.0
    x = depth * gap * sign
    value = through(depth, 1.0, 1.0, k, k + gap * sign)
    assert value == pytest.approx(depth * np.exp(-depth) * (1.0 - x / 2.0 + x * x / 6.0), rel=1e-7)
    assert through(depth, 1.0, 1.0, k, k) == pytest.approx(depth * np.exp(-depth), rel=1e-15)


def test_at_the_horizon_and_under_a_grazing_sun():
    assert through(0.5, 0.6, 0.0, 1.2, 0.8) == pytest.approx(np.exp(-1.2 * 0.5 / 0.6) / 0.8, rel=1e-9)
    assert back(0.5, 0.6, 0.0, 1.2, 0.8) == pytest.approx(1.0 / 0.8, rel=1e-9)
    assert through(0.5, 0.0, 0.6, 1.2, 0.8) == pytest.approx(0.0, abs=1e-9)
    assert through(0.0, 0.6, 0.6, 1.0, 1.0) == 0.0


def test_light_goes_both_ways_alike():
    """µ · factor is the same when sun and observer change places (Helmholtz reciprocity of a slab, Chandrasekhar §52)."""
    for factor in (through, back):
        there, again = factor(0.8, 0.3, 0.9, 0.7, 1.1), factor(0.8, 0.9, 0.3, 1.1, 0.7)
        assert there * 0.9 == pytest.approx(again * 0.3, rel=1e-14)


def test_a_thin_slab_is_the_thin_layer():
    elevation = np.linspace(0.0, 90.0, 91) * DEG
    assert slab(elevation, 20 * DEG, 1e-8, plates) == pytest.approx(layer(elevation, 1e-8), rel=1e-6)
    assert slab(-elevation[1:], 20 * DEG, 1e-8, plates) == pytest.approx(layer(elevation[1:], 1e-8), rel=1e-6)


def test_amount_by_quadrature_along_the_line_of_sight():
    """Reference extinction is twice the events: amount = ∫ dτ (path) · transmissions, τ the optical depth."""
    optical_depth, sun, view = 2.0, 25 * DEG, 40 * DEG
    mu0, mu = 1.0 / path_factor(sun), 1.0 / path_factor(view)
    a, b = 0.5 * plates(np.sin(sun)) / mu0, 0.5 * plates(np.sin(view)) / mu
    down, _ = quad(lambda x: np.exp(-a * x - b * (optical_depth - x)) / mu, 0.0, optical_depth)
    up, _ = quad(lambda x: np.exp(-(a + b) * x) / mu, 0.0, optical_depth)
    assert slab(view, sun, optical_depth, plates) == pytest.approx(down, rel=1e-10)
    assert slab(-view, sun, optical_depth, plates) == pytest.approx(up, rel=1e-10)
    assert slab(-view, -sun, optical_depth, plates) == pytest.approx(down, rel=1e-10)
    assert slab(view, -sun, optical_depth, plates) == pytest.approx(up, rel=1e-10)


def test_single_and_no_scattering_add_up_in_a_thin_slab():
    """Isotropic light, k = 1: what is scattered once and leaves, and what is not, is all but O(depth² ln depth)."""
    depth, mu0 = 1e-3, 0.7
    flux = [
        quad(lambda mu, f=f: mu * float(f(depth, mu0, mu, 1.0, 1.0)), 0.0, 1.0, limit=400)[0] / 2.0
        for f in (through, back)
    ]
    left = 1.0 - np.exp(-depth / mu0) - sum(flux) / mu0
    assert 0.0 < left < 2.0 * depth**2 * np.log(1.0 / depth) / mu0


def test_transmission_and_cosine():
    elevation = np.array([-30.0, 0.0, 30.0, 90.0, np.nan]) * DEG
    cosine = vertical_cosine(elevation)
    assert cosine[:4] == pytest.approx([0.5, np.sqrt(rim()), 0.5, 1.0], rel=0.005)
    assert cosine[1:4] == pytest.approx(1.0 / path_factor(elevation[1:4]), rel=1e-10)
    assert np.sqrt(rim()) == pytest.approx(1.0 / path_factor(0.0), rel=1e-12)
    got = transmission(elevation, 0.6, plates)
    assert got[:4] == pytest.approx(np.exp(-0.3 * plates(np.abs(np.sin(elevation[:4]))) / cosine[:4]), rel=1e-12)
    assert np.isnan(got[4])
    assert np.isnan(slab(elevation, 0.3, 0.6, plates)[4])
    assert np.all(np.isfinite(slab(elevation[:4], 0.0, 0.6, plates)))


@pytest.mark.parametrize("depth", [-0.1, np.nan, np.inf])
def test_depth_is_a_number(depth):
    with pytest.raises(DomainError, match="at least 0"):
        slab(0.3, 0.3, depth, plates)
