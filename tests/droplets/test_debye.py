"""Debye series: the terms add up to Lorenz–Mie, and each is where ray optics puts it."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.droplets import airy, debye, mie
from skyoptics.errors import DomainError

COSINE = np.cos(np.linspace(0.0, np.pi, 91))


@pytest.mark.parametrize(
    ("m", "x"),
    [
        (1.333, 1.0), (1.333, 10.0), (1.333, 100.0), (1.3347 + 2e-9j, 1500.0), (1.33 + 0.02j, 100.0), (1.5 + 1j, 300.0),
        (10 + 10j, 50.0), (0.75, 400.0), (1.333, 750 * np.pi / 1.333),
    ],
)  # fmt: skip
@pytest.mark.parametrize("last", [0, 1, 3, 12])
def test_terms_and_remainder_add_up_to_mie(m, x, last):
    whole = np.array(mie.amplitudes(m, x, COSINE))
    parts = np.array(debye.amplitudes(m, x, COSINE, last))
    assert parts.shape == (2, last + 2, len(COSINE))
    assert np.max(np.abs(parts.sum(axis=1) - whole)) < 1e-9 * np.max(np.abs(whole))


def test_bubble_in_total_reflection_does_not_overflow():
    parts = np.array(debye.amplitudes(0.75, 20_000.0, COSINE[::30], 2))
    whole = np.array(mie.amplitudes(0.75, 20_000.0, COSINE[::30]))
    assert np.max(np.abs(parts.sum(axis=1) - whole)) < 1e-9 * np.max(np.abs(whole))


def test_plain_sum_of_an_absorbing_sphere_converges():
    m, x = 1.33 + 0.02j, 100.0
    whole = np.array(mie.amplitudes(m, x, COSINE))
    parts = np.array(debye.amplitudes(m, x, COSINE, 12))[:, :-1]
    error = [np.max(np.abs(parts[:, : p + 1].sum(axis=1) - whole)) / np.max(np.abs(whole)) for p in range(13)]
    assert error[12] < 1e-6
    assert error[0] > 1e-4  # it needed the others


def test_terms_do_not_depend_on_how_many_are_asked_for():
    few = np.array(debye.amplitudes(1.333, 200.0, COSINE, 2))
    many = np.array(debye.amplitudes(1.333, 200.0, COSINE, 6))
    np.testing.assert_allclose(few[:, :3], many[:, :3], rtol=1e-12)
    np.testing.assert_allclose(few[:, 3], many[:, 3:].sum(axis=1), rtol=0, atol=1e-9)


def test_external_reflection_has_fresnels_strength():
    """Away from the forward peak |S|² of p = 0 is x² r²/4 at incidence (180° − θ)/2 (van de Hulst 1957, §12.21)."""
    m, x = 1.333, 2000.0
    angle = np.deg2rad([60.0, 90.0, 120.0, 150.0])
    s1, s2 = debye.amplitudes(m, x, np.cos(angle), 0)
    i = (np.pi - angle) / 2
    r = np.arcsin(np.sin(i) / m)
    np.testing.assert_allclose(np.abs(s1[0]), x / 2 * np.abs(np.sin(i - r) / np.sin(i + r)), rtol=0.01)
    expected = x / 2 * np.abs(np.tan(i - r) / np.tan(i + r))
    np.testing.assert_allclose(np.abs(s2[0]), expected, atol=0.002 * x)


def test_forward_diffraction_is_in_the_first_term():
    """p = 0 forward: half the extinction paradox, S(0) → x²/2 (van de Hulst §8.1)."""
    s1, _ = debye.amplitudes(1.333, 3000.0, 1.0, 0)
    assert s1[0] == pytest.approx(3000.0**2 / 2, rel=0.01)


@pytest.mark.parametrize(("p", "low", "high"), [(2, 130.0, 150.0), (3, 115.0, 135.0)])
def test_bows_lie_in_their_terms(p, low, high):
    m, x = 4 / 3, 3000.0
    angle = np.deg2rad(np.arange(low, high, 0.02))
    s1, _ = debye.amplitudes(m, x, np.cos(angle), p)
    peak = angle[np.argmax(np.abs(s1[p]) ** 2 * (np.abs(airy.reduced_angle(m, x, angle, p)) < 2))]
    assert peak == pytest.approx(float(airy.angle_at(m, x, 1.0188, p)), abs=np.deg2rad(0.05))


def test_faults():
    with pytest.raises(DomainError, match="0 or more"):
        debye.amplitudes(1.33, 10.0, COSINE, -1)
    with pytest.raises(DomainError, match="size parameter"):
        debye.amplitudes(1.33, 0.5, COSINE, 1)
    with pytest.raises(DomainError, match="imaginary"):
        debye.amplitudes(1.33 - 0.1j, 10.0, COSINE, 1)
    with pytest.raises(DomainError, match="one index"):
        debye.amplitudes(1.33, [10.0, 11.0], COSINE, 1)
