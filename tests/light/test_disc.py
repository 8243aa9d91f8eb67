import numpy as np
import pytest

from skyoptics.light.disc import SUN_RADIUS, sun_disc
from skyoptics.optics.bins import Bins
from skyoptics.units import ARCMIN, NM, UM

# Neckel & Labs, Solar Phys. 153, 91 (1994), table 1: nm, A0, mean over the disc divided by the centre
MEANS = [
    (401.970, 0.12323, 0.7303),
    (445.125, 0.15248, 0.7596),
    (492.905, 0.20924, 0.7823),
    (541.760, 0.26073, 0.8002),
    (579.880, 0.28392, 0.8125),
    (610.975, 0.30854, 0.8221),
    (640.970, 0.33644, 0.8290),
    (700.875, 0.37885, 0.8434),
]
POWERS = np.arange(6)


def brightness(disc, mu):
    """Brightness by bin and µ, mean over the disc = 1."""
    return np.sum(disc.darkening[:, np.newaxis] * np.asarray(mu)[:, np.newaxis] ** POWERS, axis=-1)


def test_radius():
    """959.63″ at 1 AU: a diameter of 31.988′."""
    diameter = 2 * SUN_RADIUS / ARCMIN
    assert diameter == pytest.approx(31.988, abs=0.001)
    assert sun_disc(Bins.lines(5e-7)).radius == SUN_RADIUS


def test_centre_and_limb_at_the_published_wavelengths():
    """Rows sum to 1 at the centre, so centre = 1 / mean and limb = A0 / mean after scaling."""
    nm, limb, mean = np.array(MEANS).T
    values = brightness(sun_disc(Bins.lines(nm * NM)), [1.0, 0.0])
    np.testing.assert_allclose(1 / values[:, 0], mean, rtol=0, atol=1e-4)
    np.testing.assert_allclose(values[:, 1] * mean, limb, rtol=0, atol=1e-4)


def test_mean_over_the_disc_is_one():
    """Gauss–Legendre over µ: ∫ I 2µ dµ, since 2ρ dρ = 2µ dµ; exact for the polynomial."""
    mu, weight = np.polynomial.legendre.leggauss(8)
    mu, weight = (mu + 1) / 2, weight / 2
    disc = sun_disc(Bins.adjoining(np.linspace(300, 1000, 36) * NM))
    np.testing.assert_allclose(brightness(disc, mu) @ (2 * mu * weight), 1.0, rtol=1e-12)


def test_against_the_analytic_fit():
    """Neckel, Solar Phys. 229, 13 (2005): A0 and A2 to A5 by powers of 1/λ, the centre being 1; within 0.01."""
    um = np.linspace(0.45, 0.70, 26)
    fit = np.empty((26, 6))
    fit[:, 0] = 0.75267 - 0.265577 / um
    for power, (a, b) in {
        2: (-1.89287, 0.012582),
        3: (2.42234, -0.017117),
        4: (-1.71150, 0.011977),
        5: (0.49062, -0.003347),
    }.items():
        fit[:, power] = a + b / um**5
    fit[:, 1] = 1 - fit[:, [0, 2, 3, 4, 5]].sum(axis=1)
    mu = np.linspace(0.1, 1, 19)
    disc = sun_disc(Bins.lines(um * UM))
    ours = brightness(disc, mu) / brightness(disc, [1.0])
    np.testing.assert_allclose(
        ours, np.sum(fit[:, np.newaxis] * mu[:, np.newaxis] ** POWERS, axis=-1), rtol=0, atol=0.011
    )


def test_against_a_simple_law():
    """Hestroffer & Magnan, Astron. Astrophys. 333, 338 (1998): µ^α, α = −0.023 + 0.292/λ (from memory), at µ ≥ 0.5.

    Below 445 nm, where lines crowd, one straight law in 1/λ no longer holds.
    """
    um = np.array(MEANS)[1:, 0] / 1000
    mu = np.linspace(0.5, 1, 11)
    disc = sun_disc(Bins.lines(um * UM))
    ours = brightness(disc, mu) / brightness(disc, [1.0])
    np.testing.assert_allclose(ours, mu ** (-0.023 + 0.292 / um[:, np.newaxis]), rtol=0, atol=0.008)


def test_darkening_is_stronger_in_blue_and_grows_towards_the_limb():
    values = brightness(sun_disc(Bins.adjoining(np.linspace(400, 700, 13) * NM)), np.linspace(1, 0, 40))
    assert np.all(np.diff(values, axis=1) < 0)
    assert np.all(np.diff(values[:, -1]) > 0)


def test_ends_are_clamped_and_bins_are_means():
    ends = sun_disc(Bins.lines(np.array([300.0, 401.97, 700.875, 1100.0]) * NM)).darkening
    np.testing.assert_allclose(ends[[0, 3]], ends[[1, 2]], rtol=1e-12)
    narrow = sun_disc(Bins(np.array([[549.999, 550.001]]) * NM)).darkening
    np.testing.assert_allclose(narrow, sun_disc(Bins.lines(550 * NM)).darkening, rtol=1e-6)
