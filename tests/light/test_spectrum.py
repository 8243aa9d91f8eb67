import subprocess
import sys
from time import perf_counter

import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.light import spectrum
from skyoptics.optics.bins import Bins
from skyoptics.units import NM


def test_published_values():
    """ASTM G173-03, extraterrestrial column."""
    nm = np.array([400, 450, 500, 550, 600, 650, 700, 750, 760, 780, 830])
    expected = [1.6885, 2.069, 1.916, 1.863, 1.770, 1.526, 1.422, 1.274, 1.259, 1.193, 1.0563]
    np.testing.assert_allclose(spectrum.irradiance(Bins.lines(nm * NM)), expected, rtol=1e-12)


def test_baked_file_equals_colour_science():
    from colour.plotting.datasets import SD_ASTMG173_ETR as etr

    wavelength, irradiance = spectrum.samples()
    keep = (etr.wavelengths >= 280) & (etr.wavelengths <= 1100)
    np.testing.assert_array_equal(wavelength, etr.wavelengths[keep] * NM)
    np.testing.assert_array_equal(irradiance, etr.values[keep])


def test_bin_means_conserve_the_integral():
    wavelength, irradiance = spectrum.samples()
    whole = np.trapezoid(irradiance, wavelength) / NM
    for bins in (Bins.adjoining(np.linspace(280, 1100, 17) * NM), Bins.adjoining(np.linspace(280, 1100, 1234) * NM)):
        assert np.sum(spectrum.irradiance(bins) * bins.width / NM) == pytest.approx(whole, rel=1e-12)


def test_bin_mean_by_hand():
    """Two steps of 1 nm: mean of a broken line by the trapezoid."""
    wavelength, irradiance = spectrum.samples()
    first = int(np.argmin(np.abs(wavelength - 550 * NM)))
    low, middle, high = irradiance[first : first + 3]
    bins = Bins(wavelength[[first, first + 2]][np.newaxis])
    assert spectrum.irradiance(bins)[0] == pytest.approx((low + 2 * middle + high) / 4, rel=1e-12)


def test_whole_range_and_beyond():
    assert spectrum.irradiance(Bins(np.array([[280e-9, 1.1e-6]]))).shape == (1,)
    assert np.all(spectrum.irradiance(Bins.lines(np.array([280 * NM, 2.8e-7, 1100 * NM, 1.1e-6]))) > 0)
    for bad in ([279e-9, 300e-9], [1.0e-6, 1.101e-6]):
        with pytest.raises(DomainError, match="known from 280 to 1100 nm, got bins from"):
            spectrum.irradiance(Bins(np.array([bad])))


def test_samples_cannot_be_spoilt():
    for array in spectrum.samples():
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 0.0


def test_a_hundred_bins_take_milliseconds():
    """Limit of 20 ms by common practice, no source; best of five runs."""
    bins = Bins.adjoining(np.linspace(380, 780, 101) * NM)
    spectrum.irradiance(bins)

    def seconds():
        start = perf_counter()
        spectrum.irradiance(bins)
        return perf_counter() - start

    assert min(seconds() for _ in range(5)) < 0.02


def test_light_and_materials_load_neither_numba_nor_colour():
    code = (
        "import sys, skyoptics.light.sun, skyoptics.materials.index\n"
        "heavy = {'numba', 'colour', 'scipy', 'matplotlib', 'pandas'} & set(sys.modules)\n"
        "assert not heavy, heavy"
    )
    subprocess.run([sys.executable, "-c", code], check=True)
