"""Chromaticity, purity, differences."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.colour import observer
from skyoptics.light import spectrum
from skyoptics.optics.bins import Bins
from skyoptics.study import colours

GRID = np.linspace(400e-9, 700e-9, 31)


def test_flat_scattering_shows_the_light():
    white = colours.light(GRID)
    xyz = np.ones(31) @ colours.sunlight(GRID)
    np.testing.assert_allclose(xyz, white, rtol=1e-12)
    # the visible part that 31 wavelengths leave out is small: within 2 % of fine sunlight
    bins = Bins.adjoining(np.linspace(380e-9, 780e-9, 401))
    fine = observer.xyz(spectrum.irradiance(bins), bins)
    np.testing.assert_allclose(xyz, fine, rtol=0.02)


def test_one_wavelength_is_pure():
    xy = colours.chromaticity(colours.sunlight(np.array([600e-9]))[0])
    # CIE 1931: x̄ 1.0622, ȳ 0.6310, z̄ 0.0008 at 600 nm (CIE 15)
    np.testing.assert_allclose(xy, np.array([1.0622, 0.6310]) / 1.6940, atol=2e-4)
    assert colours.purity(xy, colours.chromaticity(colours.light(np.array([600e-9])))) == pytest.approx(1.0, abs=1e-3)


def test_purity():
    white = np.array([1 / 3, 1 / 3])
    locus = colours.chromaticity(observer.matching_functions()[1][170])
    for part in (0.0, 0.25, 1.0):
        found = colours.purity(white + part * (locus - white), white)
        assert found == pytest.approx(part, abs=1e-3)
    # the middle of the purple line
    ends = colours.chromaticity(observer.matching_functions()[1][[0, -1]])
    assert colours.purity(ends.mean(axis=0), white) == pytest.approx(1.0, abs=1e-6)
    assert np.isnan(colours.purity([np.nan, np.nan], white))
    assert colours.purity(np.full((2, 3, 2), 0.3), white).shape == (2, 3)


def test_difference_is_ciede2000():
    # Sharma, Wu & Dalal, Color Res. Appl. 30, 21 (2005), Table 1, pairs 25 and 28
    white = np.array([95.047, 100.0, 108.883])

    def xyz(lab):
        y = (lab[0] + 16) / 116
        f = np.array([y + lab[1] / 500, y, y - lab[2] / 200])
        return white * np.where(f > 6 / 29, f**3, 3 * (6 / 29) ** 2 * (f - 4 / 29))

    for first, second, expected in (
        ((60.2574, -34.0099, 36.2677), (60.4626, -34.1751, 39.4387), 1.2644),
        ((35.0831, -44.1164, 3.7933), (35.0232, -40.0716, 1.5901), 1.8645),
    ):
        rows = [np.stack([xyz(np.array(lab)), white]) for lab in (first, second)]
        found = colours.difference(*rows, white * 3.0)
        assert found[0] == pytest.approx(expected, abs=1e-4)
        assert found[1] == pytest.approx(0.0, abs=1e-9)


def test_a_map_is_shown_inside_the_display():
    xyz = np.abs(np.random.default_rng(2).standard_normal((3, 20, 31))) @ colours.sunlight(GRID)
    rgb = colours.shown(xyz, colours.light(GRID))
    assert rgb.shape == (3, 20, 3)
    assert rgb.min() >= 0.0
    assert rgb.max() <= 1.0
    grey = colours.shown(np.ones((1, 5, 31)) @ colours.sunlight(GRID), colours.light(GRID))
    np.testing.assert_allclose(grey, grey[..., :1] * np.ones(3), atol=2e-3)
