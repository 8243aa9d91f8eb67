"""Interfaces: textbook values."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.kernels import interface as kernels
from skyoptics.optics import interface

DEG = np.pi / 180.0


@pytest.mark.parametrize("index", [1.31, 4.0 / 3.0, 1.0 / 1.31, 0.75])
def test_energy_is_kept(index):
    incidence = np.linspace(0.0, np.pi / 2.0, 181)
    for reflected, transmitted in zip(
        interface.reflectances(index, incidence), interface.transmittances(index, incidence), strict=True
    ):
        np.testing.assert_allclose(reflected + transmitted, 1.0, atol=1e-12)


def test_brewster_angle():
    # arctan n: 53.12° for 1.333, 52.64° for ice 1.31 (Born & Wolf, Principles of Optics, §1.5.3)
    assert interface.brewster_angle(1.333) / DEG == pytest.approx(53.12, abs=0.01)
    assert interface.brewster_angle(1.31) / DEG == pytest.approx(52.64, abs=0.01)
    assert interface.reflectances(1.333, interface.brewster_angle(1.333))[1] == pytest.approx(0.0, abs=1e-30)


def test_critical_angle():
    # arcsin(1/1.31) = 49.76°; none on the way into the denser medium
    critical = interface.critical_angle(1.0 / 1.31)
    assert critical / DEG == pytest.approx(49.76, abs=0.01)
    assert np.isnan(interface.critical_angle(1.31))
    beyond = interface.reflectances(1.0 / 1.31, critical + np.array([0.01, 0.3]))
    np.testing.assert_allclose(beyond, 1.0, atol=1e-14)
    assert np.isnan(interface.refraction(1.0 / 1.31, 1.0))


def test_phases_of_total_reflection():
    # Fresnel's rhomb: n = 1.51, phase difference 45° at 48°37' and 54°37' (Born & Wolf, Principles of Optics, §1.5.4)
    incidence = np.array([48 + 37 / 60, 54 + 37 / 60]) * DEG
    phase_s, phase_p = interface.total_reflection_phases(1.0 / 1.51, incidence)
    np.testing.assert_allclose(np.abs(phase_p - phase_s) / DEG, 45.0, atol=0.05)
    r_s, r_p, _, _ = interface.amplitudes(1.0 / 1.51, incidence)
    np.testing.assert_allclose(np.angle(r_s), phase_s, atol=1e-12)
    np.testing.assert_allclose(np.angle(r_p), phase_p, atol=1e-12)
    assert np.isnan(interface.total_reflection_phases(1.0 / 1.51, 0.3)[0])


def test_kernel_and_arrays_are_the_same_physics():
    incidence = np.linspace(0.0, 1.55, 32)
    arrays = interface.amplitudes(1.334, incidence)
    shares = interface.transmittances(1.334, incidence)
    for row, angle in enumerate(incidence):
        cosines = np.cos(angle), np.cos(interface.refraction(1.334, angle))
        one = getattr(kernels.amplitudes, "py_func", kernels.amplitudes)(1.334, *cosines)
        two = getattr(kernels.transmittances, "py_func", kernels.transmittances)(1.334, *cosines)
        np.testing.assert_allclose(one, [array[row] for array in arrays], rtol=1e-12, atol=1e-14)
        np.testing.assert_allclose(two, [share[row] for share in shares], rtol=1e-12)


@pytest.mark.parametrize(("index", "incidence"), [(0.0, 0.1), (-1.3, 0.1), (np.nan, 0.1), (1.3, -0.1), (1.3, 1.6)])
def test_nonsense_is_refused(index, incidence):
    with pytest.raises(DomainError, match=r"index|incidence"):
        interface.amplitudes(index, incidence)
