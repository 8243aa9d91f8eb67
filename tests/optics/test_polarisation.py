"""Polarisation: signs and turns."""

from __future__ import annotations

import subprocess
import sys

import numpy as np
import pytest

from skyoptics.geometry.axes import around, direction
from skyoptics.optics import polarisation


def test_stokes_of_simple_states():
    # Bohren & Huffman, Absorption and Scattering of Light by Small Particles (1983), Table 2.2
    half = np.sqrt(0.5)
    states = {
        (1.0, 0.0): (1, 1, 0, 0),
        (0.0, 1.0): (1, -1, 0, 0),
        (half, half): (1, 0, 1, 0),
        (half, half * 1j): (1, 0, 0, 1),  # exp(−iωt): ∥ leads, ⊥ follows: clockwise towards the source, right-handed
    }
    for (parallel, perpendicular), expected in states.items():
        np.testing.assert_allclose(polarisation.stokes(parallel, perpendicular), expected, atol=1e-15)


def test_right_handed_turns_clockwise():
    # real field of the state with V > 0 in time: from ∥ towards ⊥, a quarter turn clockwise by convention
    phase = np.exp(-1j * np.array([0.0, 0.1]))
    assert polarisation.stokes(1.0, 1j)[3] > 0.0
    parallel, perpendicular = (1.0 * phase).real, (1j * phase).real
    assert np.diff(np.arctan2(perpendicular, parallel))[0] == pytest.approx(0.1)


def test_rotation():
    light = polarisation.stokes(np.cos(0.4), np.sin(0.4))  # polarised at χ = 0.4
    np.testing.assert_allclose(polarisation.rotation(0.4) @ light, [1, 1, 0, 0], atol=1e-15)
    turns = polarisation.rotation(np.array([0.3, 0.8])) @ polarisation.rotation(np.array([-0.3, -0.8]))
    np.testing.assert_allclose(turns, np.broadcast_to(np.eye(4), (2, 4, 4)), atol=1e-15)
    np.testing.assert_allclose(polarisation.rotation(np.pi), np.eye(4), atol=1e-15)


def test_mueller_matrix_agrees_with_amplitudes():
    rng = np.random.default_rng(3)
    s1, s2, e1, e2 = rng.normal(size=4) + 1j * rng.normal(size=4)
    matrix = polarisation.mueller_matrix(polarisation.elements_from_amplitudes(s1, s2))
    # Bohren & Huffman eq. (4.75): E∥ is multiplied by S2, E⊥ by S1
    expected = polarisation.stokes(s2 * e2, s1 * e1)
    np.testing.assert_allclose(matrix @ polarisation.stokes(e2, e1), expected, rtol=1e-12)


def test_mie_of_bohren_and_huffman():
    # amplitudes of a sphere with m = 1.5 − 1i (here n + ik), x = 1 at 90° (Wiscombe, NCAR/TN-140+STR): S1, S2
    s1, s2 = 0.456340 - 0.167167j, 0.0362285 + 0.0618265j  # conjugates: time factor exp(−iωt)
    elements = polarisation.elements_from_amplitudes(s1, s2)
    degree = (abs(s1) ** 2 - abs(s2) ** 2) / (abs(s1) ** 2 + abs(s2) ** 2)
    assert polarisation.signed_polarisation(elements) == pytest.approx(degree)
    length = elements[1] ** 2 + elements[3] ** 2 + elements[4] ** 2
    assert length == pytest.approx(elements[0] ** 2)  # a single sphere does not depolarise: B&H §4.4.4


@pytest.mark.parametrize("position", np.linspace(0.0, 2.0 * np.pi, 9)[:-1])
def test_a_bow_is_polarised_along_itself(position):
    source = direction(0.7, 0.4)
    view = around(-source, np.radians(42.0), position)
    elements = np.array([1.0, -0.9, 1.0, -0.4, 0.0, -0.4])
    seen = polarisation.between_meridians(source, view, elements) @ np.array([1.0, 0.0, 0.0, 0.0])
    assert polarisation.degree_of_linear_polarisation(seen) == pytest.approx(0.9)
    # electric vector's position angle; the bow runs at right angles to the great circle towards the antisolar point
    chi = 0.5 * np.arctan2(seen[2], seen[1])
    along = polarisation.plane_angle(view, -source) + np.pi / 2.0
    assert np.cos(2.0 * (chi - along)) == pytest.approx(1.0)


def test_top_of_the_bow_has_negative_q():
    source = direction(0.0, np.radians(10.0))
    top = around(-source, np.radians(42.0), 0.0)
    matrix = polarisation.between_meridians(source, top, [1.0, -0.9, 1.0, 0.1, 0.0, 0.1])
    np.testing.assert_allclose(matrix[:, 0], [1.0, -0.9, 0.0, 0.0], atol=1e-12)


def test_u_is_positive_to_the_right_of_upright():
    # an observer facing north, source behind him: the bow's upper right quarter runs down to the right, so its light,
    # polarised along the bow, is tilted from upright to the left (U < 0); the upper left quarter to the right
    source = direction(np.pi, 0.0)
    elements = [1.0, -0.9, 1.0, 0.0, 0.0, 0.0]
    right = polarisation.between_meridians(source, around(-source, 0.7, np.pi / 4.0), elements)[2, 0]
    left = polarisation.between_meridians(source, around(-source, 0.7, -np.pi / 4.0), elements)[2, 0]
    assert right < -0.5
    assert left == pytest.approx(-right)


def test_identity_scatterer_keeps_polarisation_forward():
    source = direction(1.0, 0.3)
    near = around(source, 1e-6, 0.9)
    matrix = polarisation.between_meridians(source, near, [1.0, 0.0, 1.0, 1.0, 0.0, 1.0])
    np.testing.assert_allclose(matrix, np.eye(4), atol=1e-5)


def test_degrees():
    assert polarisation.degree_of_polarisation([2.0, 0.6, 0.0, 0.8]) == pytest.approx(0.5)
    assert polarisation.degree_of_linear_polarisation([2.0, 0.6, 0.8, 1.0]) == pytest.approx(0.5)
    assert np.isnan(polarisation.degree_of_polarisation([0.0, 0.0, 0.0, 0.0]))


def test_optics_without_numba():
    code = (
        "import sys, skyoptics.optics.polarisation, skyoptics.optics.interface, skyoptics.optics.bows;"
        "sys.exit('numba' in sys.modules)"
    )
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
