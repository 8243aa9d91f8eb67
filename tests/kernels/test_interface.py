"""Fresnel kernels against values one can check by hand."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.kernels import interface


def call(function, index, incidence):
    cos_i = np.cos(incidence)
    cos_r = np.sqrt(1.0 - (np.sin(incidence) / index) ** 2)
    return getattr(function, "py_func", function)(index, cos_i, cos_r)


def test_normal_incidence():
    # ((n - 1)/(n + 1))² = 1/49 at n = 4/3; opposite signs: van de Hulst, Light Scattering by Small Particles (1957), §12.21
    r_s, r_p, t_s, t_p = call(interface.amplitudes, 4.0 / 3.0, 0.0)
    assert r_s == pytest.approx(-1.0 / 7.0, abs=1e-15)
    assert r_p == pytest.approx(1.0 / 7.0, abs=1e-15)
    assert t_s == pytest.approx(6.0 / 7.0, abs=1e-15)
    assert t_p == pytest.approx(6.0 / 7.0, abs=1e-15)


@pytest.mark.parametrize("index", [1.0003, 4.0 / 3.0, 1.5, 2.4])
def test_energy_is_kept_and_brewster_reflects_no_p(index):
    for incidence in np.linspace(0.0, np.pi / 2.0, 41)[:-1]:
        r_s, r_p, t_s, t_p = call(interface.amplitudes, index, incidence)
        share_s, share_p = call(interface.transmittances, index, incidence)
        flux = index * np.sqrt(1.0 - (np.sin(incidence) / index) ** 2) / np.cos(incidence)
        assert share_s == pytest.approx(flux * t_s**2, rel=1e-13)
        assert share_p == pytest.approx(flux * t_p**2, rel=1e-13)
        assert r_s**2 + share_s == pytest.approx(1.0, abs=1e-13)
        assert r_p**2 + share_p == pytest.approx(1.0, abs=1e-13)
    assert call(interface.amplitudes, index, np.arctan(index))[1] == pytest.approx(0.0, abs=1e-15)


def test_light_from_the_other_side_has_the_opposite_sign():
    # Stokes's relations r' = −r, t t' = 1 − r² (Born & Wolf, Principles of Optics, §1.6)
    index, incidence = 1.34, 0.9
    refraction = np.arcsin(np.sin(incidence) / index)
    outer = call(interface.amplitudes, index, incidence)
    inner = call(interface.amplitudes, 1.0 / index, refraction)
    for kind in (0, 1):
        assert inner[kind] == pytest.approx(-outer[kind], abs=1e-14)
        assert outer[kind + 2] * inner[kind + 2] == pytest.approx(1.0 - outer[kind] ** 2, abs=1e-14)
