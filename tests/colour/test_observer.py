import subprocess
import sys

import colour
import numpy as np
import pytest

from skyoptics.colour import observer
from skyoptics.errors import DomainError
from skyoptics.optics.bins import Bins

# CIE 15 / ISO/CIE 11664-1, CIE 1931 2° observer.
CIE_1931 = {
    530: (0.1655, 0.8620, 0.04216),
    540: (0.2904, 0.9540, 0.0203),
    550: (0.43345, 0.99495, 0.00875),
    555: (0.51205, 1.0000, 0.00575),
    560: (0.5945, 0.9950, 0.0039),
    570: (0.7621, 0.9520, 0.0021),
    580: (0.9163, 0.8700, 0.00165),
    590: (1.0263, 0.7570, 0.0011),
    600: (1.0622, 0.6310, 0.0008),
    610: (1.0026, 0.5030, 0.00034),
    620: (0.85445, 0.3810, 0.00019),
    630: (0.6424, 0.2650, 0.00005),
    640: (0.4479, 0.1750, 0.00002),
}
# The same table, from memory.
CIE_1931_FROM_MEMORY = {
    380: (0.001368, 0.000039, 0.00645),
    400: (0.01431, 0.000396, 0.06785),
    450: (0.3362, 0.0380, 1.77211),
    500: (0.0049, 0.3230, 0.2720),
    650: (0.2835, 0.1070, 0.0),
    700: (0.011359, 0.004102, 0.0),
    780: (0.000042, 0.000015, 0.0),
}
NAMES = {"1931": "CIE 1931 2 Degree Standard Observer", "1964": "CIE 1964 10 Degree Standard Observer"}


@pytest.mark.parametrize(("wavelength_nm", "expected"), (CIE_1931 | CIE_1931_FROM_MEMORY).items())
def test_tables_of_cie_15(wavelength_nm, expected):
    wavelength, values = observer.matching_functions("1931")
    assert wavelength[wavelength_nm - 360] == pytest.approx(wavelength_nm * 1e-9)
    # One unit of the fifth decimal: sources print some entries rounded.
    np.testing.assert_allclose(values[wavelength_nm - 360], expected, rtol=0.0, atol=1.01e-5)


@pytest.mark.parametrize("name", NAMES)
def test_baked_tables_equal_colour_science(name):
    wavelength, values = observer.matching_functions(name)
    functions = colour.MSDS_CMFS[NAMES[name]]
    assert np.array_equal(values, functions.values)
    np.testing.assert_allclose(wavelength, functions.wavelengths * 1e-9, rtol=1e-15)


def test_scotopic_observer_is_cie_1951():
    """V'(λ) of CIE 1951 as colour-science carries it, 1700.06 lm W⁻¹ at its peak near 507 nm, in one chromaticity."""
    wavelength, values = observer.matching_functions("scotopic")
    curve = colour.SDS_LEFS["CIE 1951 Scotopic Standard Observer"]
    expected = np.interp(wavelength * 1e9, curve.wavelengths, curve.values, 0.0, 0.0)
    assert observer.LUMINOUS_EFFICACY * values[:, 1] == pytest.approx(1700.06 * expected, rel=1e-12)
    assert wavelength[values[:, 1].argmax()] == pytest.approx(507e-9, abs=1e-9)
    lit = values[:, 1] > 0
    assert np.ptp(values[lit, 0] / values[lit, 1]) < 1e-12


def test_line_of_555_nm_has_the_luminous_efficacy_of_the_si():
    # BIPM SI brochure, 9th edition: 683 lm/W at 540 THz = 555.016 nm (in air of index 1.00028 the table's 555 nm).
    assert observer.weights(Bins.lines([555e-9]))[0, 1] == pytest.approx(683.0, abs=0.01)


def test_bins_hold_the_exact_integral():
    edges = np.array(
        [[350e-9, 372.3e-9], [400.25e-9, 400.75e-9], [512.1e-9, 533.7e-9], [820e-9, 900e-9], [300e-9, 340e-9]]
    )
    weights = observer.weights(Bins(edges))
    wavelength, values = observer.matching_functions()
    for row, (low, high) in enumerate(edges):
        # A fine midpoint sum of the broken line: an independent quadrature.
        fine = low + (np.arange(400_000) + 0.5) / 400_000 * (high - low)
        curve = np.stack([np.interp(fine, wavelength, column, 0.0, 0.0) for column in values.T], axis=1)
        expected = 683.002 * curve.mean(axis=0) * (high - low) * 1e9
        np.testing.assert_allclose(weights[row], expected, rtol=1e-5, atol=1e-9)


@pytest.mark.parametrize("name", observer.OBSERVERS)
def test_adjoining_bins_add_up_to_the_whole(name):
    whole = observer.weights(Bins.adjoining([360e-9, 830e-9]), name)
    parts = observer.weights(Bins.adjoining(np.linspace(360e-9, 830e-9, 38)), name)
    np.testing.assert_allclose(parts.sum(axis=0), whole[0], rtol=1e-12)


def test_xyz_agrees_with_colour_science():
    wavelength_nm = np.arange(360.0, 831.0)
    rng = np.random.default_rng(3)
    radiance = rng.uniform(0.0, 2.0, (5, wavelength_nm.size))
    result = observer.xyz(radiance, Bins.lines(wavelength_nm * 1e-9))
    expected = colour.msds_to_XYZ(
        radiance,
        colour.MSDS_CMFS[NAMES["1931"]],
        colour.sd_ones(colour.SpectralShape(360, 830, 1)),
        k=683.002,
        method="Integration",
        shape=colour.SpectralShape(360, 830, 1),
    )
    # colour-science takes spectra as per cent.
    np.testing.assert_allclose(result, 100.0 * expected, rtol=1e-12)


def test_weights_under_structured_light_keep_coarse_bins_exact():
    fine = Bins.lines(np.arange(380.5, 720.0) * 1e-9)
    light = 1.0 + 0.6 * np.sin(fine.centre * 1e9 / 7.0)
    grid = (fine.centre, light)
    dense = Bins.adjoining(np.linspace(380.5e-9, 719.5e-9, 34 * 200 + 1))
    expected = observer.xyz(dense.mean(*grid), dense)
    coarse = Bins.adjoining(np.linspace(380.5e-9, 719.5e-9, 18))
    exact = observer.xyz(coarse.mean(*grid), coarse, light=grid)
    flat = observer.xyz(coarse.mean(*grid), coarse)
    np.testing.assert_allclose(exact, expected, rtol=1e-6)
    assert np.abs(flat / expected - 1.0).max() > 1e-3  # what the weighting is for


def test_light_of_one_colour_changes_nothing_and_darkness_is_allowed():
    bins = Bins(np.array([[400e-9, 410e-9], [550e-9, 550e-9], [700e-9, 760e-9]]))
    np.testing.assert_allclose(
        observer.weights(bins, light=([300e-9, 900e-9], [2.5, 2.5])), observer.weights(bins), rtol=1e-12
    )
    dark = observer.weights(bins, light=([405e-9, 406e-9], [0.0, 0.0]))
    assert np.array_equal(dark, observer.weights(bins))


def test_float32_and_nan_pass_through():
    bins = Bins.adjoining(np.linspace(380e-9, 720e-9, 35))
    radiance = np.full((2, 3, 34), 0.01)
    radiance[0, 1, 4] = np.nan
    single = observer.xyz(radiance.astype(np.float32), bins)
    double = observer.xyz(radiance, bins)
    assert single.dtype == np.float32
    assert double.dtype == np.float64
    assert np.isnan(double[0, 1]).all()
    assert np.isnan(double).sum() == 3
    np.testing.assert_allclose(single, double, rtol=1e-6)


def test_faults_are_worded():
    bins = Bins.lines([500e-9])
    with pytest.raises(DomainError, match="'1932', allowed are 1931, 1964, scotopic; did you mean 1931"):
        observer.weights(bins, "1932")
    with pytest.raises(DomainError, match="has to hold 1 spectral bins"):
        observer.xyz(np.ones((4, 2)), bins)
    with pytest.raises(DomainError, match="ascending wavelengths"):
        observer.weights(bins, light=([5e-7, 4e-7], [1.0, 1.0]))


def test_room_loads_neither_colour_science_nor_numba():
    code = (
        "import sys\n"
        "from skyoptics.colour import develop, images, metadata, observer\n"
        "from skyoptics.optics.bins import Bins\n"
        "observer.weights(Bins.lines([5e-7]))\n"
        "print(sorted({'colour', 'numba', 'scipy', 'matplotlib', 'OpenEXR', 'tifffile'} & set(sys.modules)))\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
