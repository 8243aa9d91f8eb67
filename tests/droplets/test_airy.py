"""Airy's theory: printed places and heights, ray optics as its mean, and where it parts from Lorenz–Mie."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.droplets import airy, averages, debye, sizes
from skyoptics.errors import DomainError

INDEX = 4 / 3


@pytest.mark.parametrize(
    ("n", "p", "h"),
    [
        (4 / 3, 2, 4.8898),
        (4 / 3, 3, 27.8605),
        (1.331, 2, 4.9560),
        (1.331, 3, 28.210),
        (1.343, 2, 4.6284),
        (1.343, 3, 26.479),
    ],
)
def test_curvature(n, p, h):
    # van de Hulst, Light Scattering by Small Particles (1957), §13.2, prints 4.89 and 27.86 for 4/3
    assert airy.curvature(n, p) == pytest.approx(h, rel=3e-5)


def test_bow_angles():
    # Descartes; angles for n = 4/3 by hand
    assert np.rad2deg(airy.bow_angle(INDEX, 2)) == pytest.approx(137.970, abs=1e-3)
    assert 360 - np.rad2deg(airy.bow_angle(INDEX, 3)) == pytest.approx(230.978, abs=1e-3)


def refined_maximum(values, angle, place):
    """Vertex of the parabola through three samples."""
    y0, y1, y2 = values[place - 1 : place + 2]
    return angle[place] + (angle[1] - angle[0]) * 0.5 * (y0 - y2) / (y0 - 2 * y1 + y2)


def test_maxima_and_zeros_of_the_main_term(monkeypatch):
    """Abramowitz & Stegun, Table 10.13: zeros of Ai' and Ai, heights relative to the first maximum."""
    monkeypatch.setattr(airy._BowRay, "strength", lambda self, parallel: (self.fresnel(parallel)[0], 0.0))
    x = 1e4
    reduced = np.linspace(-1.0, 8.2, 92_001)
    angle = airy.angle_at(INDEX, x, reduced, 2)
    s1, _ = airy.amplitudes(INDEX, x, angle, 2)
    curve = np.abs(s1) ** 2
    inner = np.flatnonzero((curve[1:-1] > curve[:-2]) & (curve[1:-1] > curve[2:])) + 1
    maxima = [refined_maximum(curve, reduced, place) for place in inner]
    np.testing.assert_allclose(maxima, [1.01879297, 3.24819758, 4.82009921, 6.16330736, 7.37217726], rtol=1e-6)
    np.testing.assert_allclose(curve[inner] / curve[inner[0]], [1, 0.61191, 0.50434, 0.44645, 0.40836], rtol=2e-5)
    root = np.sqrt(curve)
    dark = np.flatnonzero((curve[1:-1] < curve[:-2]) & (curve[1:-1] < curve[2:])) + 1
    # |Ai| is a straight line on either side of a zero
    zeros = [reduced[k - 1] + (reduced[1] - reduced[0]) * 2 * root[k - 1] / (root[k - 1] + root[k + 1]) for k in dark]
    np.testing.assert_allclose(zeros, [2.33810741, 4.08794944, 5.52055983, 6.78670809, 7.94413359], rtol=1e-6)
    assert np.interp(0.0, reduced, curve) / curve[inner[0]] == pytest.approx(0.43929, rel=1e-4)


@pytest.mark.parametrize(
    ("radius_mm", "shift", "spacing"),
    [(0.1, 0.961, 2.102), (0.25, 0.522, 1.141), (0.5, 0.329, 0.719), (1, 0.207, 0.453)],
)
def test_primary_peak_and_first_supernumerary(radius_mm, shift, spacing):
    # the same zeros in degrees, n = 4/3, 600 nm; unpolarised light with both terms
    x = 2 * np.pi * radius_mm * 1e-3 / 600e-9
    angle = airy.angle_at(INDEX, x, np.linspace(0.0, 4.0, 4001), 2)
    curve = sum(np.abs(s) ** 2 for s in airy.amplitudes(INDEX, x, angle, 2))
    inner = np.flatnonzero((curve[1:-1] > curve[:-2]) & (curve[1:-1] > curve[2:])) + 1
    peak, supernumerary = np.rad2deg(angle[inner[:2]])
    assert peak - 137.970 == pytest.approx(shift, abs=0.03)
    assert supernumerary - peak == pytest.approx(spacing, abs=0.03)


def ray_intensity(m, x, angle, p, parallel):
    """Return x² F² b/(sin θ |dθ/db|) summed over both rays of one order, by a fine table in b."""
    b = np.linspace(1e-4, 1 - 1e-7, 400_001)
    i, r = np.arcsin(b), np.arcsin(b / m)
    theta = 2 * i - 2 * p * r + (p - 1) * np.pi
    theta = np.minimum(theta, 2 * np.pi - theta)
    reflection = np.tan(i - r) / np.tan(i + r) if parallel else np.sin(i - r) / np.sin(i + r)
    strength = ((1 - reflection**2) * reflection ** (p - 1)) ** 2 * b / np.abs(np.gradient(theta, b))
    turn = np.argmin(theta) if p == 2 else np.argmax(theta)
    total = 0.0
    for branch in (slice(0, turn), slice(turn + 1, None)):
        order = np.argsort(theta[branch])
        total = total + np.interp(angle, theta[branch][order], strength[branch][order], 0.0, 0.0)
    return x**2 * total / np.sin(angle)


@pytest.mark.parametrize(("p", "parallel"), [(2, 0), (2, 1), (3, 0), (3, 1)])
def test_mean_over_oscillations_is_ray_optics(p, parallel):
    """Absolute: integrals from deep shadow over ten fringes approach those of the two rays as the drop grows."""
    error = []
    for x in (3e3, 1e4, 5e4):
        angle = airy.angle_at(INDEX, x, np.linspace(-6.0, 12.0, 20_001), p)
        found = airy.amplitudes(INDEX, x, angle, p)[parallel]
        rays = np.trapezoid(ray_intensity(INDEX, x, angle, p, parallel) * np.sin(angle), angle)
        # sin θ stands still at the bow in Airy's theory, so what compares is the light by angle, not by solid angle
        waves = np.trapezoid(np.abs(found) ** 2, angle) * np.sin(airy.bow_angle(INDEX, p))
        error.append(abs(waves / rays - 1.0))
    assert error[2] < error[1] < error[0]
    # the weak polarisation changes several times as fast with the angle of incidence
    assert error[2] < (0.08 if parallel else 0.04)


@pytest.mark.parametrize(("p", "degree"), [(2, 0.9247), (3, 0.8077)])
def test_polarisation_tends_to_fresnels(p, degree):
    # exact at the bow ray: R_s = ((p−1)/(p+1))², R_p = ((n²−p)/(n²+p))²
    x = 5e4
    s1, s2 = airy.amplitudes(INDEX, x, airy.angle_at(INDEX, x, 1.0188, p), p)
    i1, i2 = np.abs(s1) ** 2, np.abs(s2) ** 2
    assert (i1 - i2) / (i1 + i2) == pytest.approx(degree, abs=0.005)


@pytest.mark.parametrize(("p", "strong", "weak"), [(2, 0.02, 0.03), (3, 0.095, 0.16)])
def test_against_debye_terms(p, strong, weak):
    """Root mean square difference over the main bow and two supernumeraries, x = 1000, in units of the peak."""
    reduced = np.linspace(-1.5, 3.0, 181)
    angle = airy.angle_at(INDEX, 1000.0, reduced, p)
    waves = airy.amplitudes(INDEX, 1000.0, angle, p)
    exact = debye.amplitudes(INDEX, 1000.0, np.cos(angle), p)
    for found, term, limit in zip(waves, exact, (strong, weak), strict=True):
        i, e = np.abs(found) ** 2, np.abs(term[p]) ** 2
        assert np.sqrt(np.mean((i - e) ** 2)) < limit * np.max(e)
    # relative phase of the two polarisations at the peak: P33 and P34 come out right
    place = np.argmax(np.abs(exact[0][p]))
    turn = np.angle(waves[0] * waves[1].conj() * (exact[0][p] * exact[1][p].conj()).conj())[place]
    assert abs(turn) < 0.25


def test_weak_supernumeraries_lie_between_the_strong_ones():
    """Können & de Boer, Appl. Opt. 18, 1961 (1979): below 1 mm, dark rings of S2 on bright ones of S1."""
    x = 2000.0
    reduced = np.linspace(1.5, 4.6, 3101)
    s1, s2 = airy.amplitudes(INDEX, x, airy.angle_at(INDEX, x, reduced, 2), 2)
    bright = reduced[np.argmax(np.abs(s1) ** 2 * ((reduced > 2.6) & (reduced < 4.0)))]
    dark = reduced[(reduced > 2.6) & (reduced < 4.0)][np.argmin(np.abs(s2[(reduced > 2.6) & (reduced < 4.0)]))]
    assert abs(bright - dark) < 0.35


def peak_difference(radius, spread):
    """Airy's peak minus Lorenz–Mie's [degrees], 550 nm, parabola through the top tenth."""
    m, wavelength = 1.33468, 550e-9
    drops = sizes.Gaussian(radius, spread)
    x = 2 * np.pi * radius / wavelength
    angle = airy.angle_at(m, x, np.linspace(0.2, 1.8, 61), 2)
    mie = averages.average(drops, m, wavelength, np.cos(angle), tolerance=0.0, largest_level=5)
    radii, weights = sizes.quadrature(drops, 2)
    curve = sum(
        w * sum(np.abs(s) ** 2 for s in airy.amplitudes(m, 2 * np.pi * r / wavelength, angle, 2))
        for r, w in zip(radii, weights, strict=True)
    )
    peaks = []
    for values in (curve, mie.products[:2, 0].sum(axis=0)):
        top = values > 0.9 * np.max(values)
        slope = np.polyfit(np.rad2deg(angle[top]), values[top], 2)
        peaks.append(-slope[1] / (2 * slope[0]))
    return peaks[0] - peaks[1]


@pytest.mark.parametrize("spread", [0.05, 0.1])
@pytest.mark.parametrize(("radius", "limit"), [(10e-6, 0.7), (20e-6, 0.25), (50e-6, 0.05), (100e-6, 0.05)])
def test_peak_against_lorenz_mie(radius, limit, spread):
    # both averaged over the same drops; found 0.37, 0.14, 0.03 and 0.01°
    assert abs(peak_difference(radius, spread)) < limit


def test_where_airy_breaks_down():
    """Error of the peak grows as the drop shrinks, about as x^(−4/3), and below 5 µm exceeds a degree; fringes go wrong before."""
    large, small = peak_difference(40e-6, 0.08), peak_difference(10e-6, 0.08)
    assert 4.0 < small / large < 9.0
    assert peak_difference(5e-6, 0.08) > 1.0
    assert airy.TRUSTED_SIZE_PARAMETER == 1000.0
    for p, fringes in ((2, 3.0), (3, 2.0)):
        # at the trusted size the first supernumeraries are inside what the phase allows, at a tenth of it hardly the first
        reach = airy.reduced_angle(INDEX, 1000.0, airy.trusted_angle(INDEX, 1000.0, p), p)
        assert reach > fringes + 1.0
        assert airy.reduced_angle(INDEX, 100.0, airy.trusted_angle(INDEX, 100.0, p), p) < 4.2
    # and beyond that angle they are indeed wrong: the exact term has a maximum where Airy has none
    x = 1000.0
    limit = airy.trusted_angle(INDEX, x, 2)
    angle = np.linspace(airy.bow_angle(INDEX, 2), limit + 0.15, 4000)
    exact = np.abs(debye.amplitudes(INDEX, x, np.cos(angle), 2)[0][2])
    found = np.abs(airy.amplitudes(INDEX, x, angle, 2)[0])
    inside = angle < airy.angle_at(INDEX, x, 4.0, 2)
    assert np.corrcoef(exact[inside], found[inside])[0, 1] > 0.97
    beyond = angle > limit
    assert np.corrcoef(exact[beyond], found[beyond])[0, 1] < 0.8


def test_absorption_dims_by_the_path():
    x, k = 1000.0, 1e-4
    angle = airy.angle_at(INDEX, x, 1.0, 2)
    clear = airy.amplitudes(INDEX, x, angle, 2)[0]
    dim = airy.amplitudes(INDEX + 1j * k, x, angle, 2)[0]
    cos_r = np.sqrt(1 - (4 - INDEX**2) / 3 / INDEX**2)
    assert abs(dim / clear) ** 2 == pytest.approx(np.exp(-4 * k * x * 2 * cos_r), rel=1e-9)
    exact = [np.abs(debye.amplitudes(INDEX + 1j * absorption, x, np.cos(angle), 2)[0][2]) for absorption in (0.0, k)]
    assert abs(dim / clear) == pytest.approx(exact[1] / exact[0], rel=0.01)


def test_faults():
    with pytest.raises(DomainError, match="p = 2"):
        airy.amplitudes(INDEX, 1000.0, 2.4, 4)
    with pytest.raises(DomainError, match="refractive index"):
        airy.amplitudes(2.1, 1000.0, 2.4, 2)
    with pytest.raises(DomainError, match="between 0 and pi"):
        airy.amplitudes(INDEX, 1000.0, [0.0, 1.0], 2)
    with pytest.raises(DomainError, match="size parameter"):
        airy.amplitudes(INDEX, 1e6, 2.4, 2)
