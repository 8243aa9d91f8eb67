"""Bands of water vapour and oxygen against the table and equations they are taken from, and against ASTM G173."""

import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.light.air import Air, ozone_depth
from skyoptics.light.gases import oxygen_transmission, vapour_transmission
from skyoptics.units import NM


def table():
    """Bird & Riordan, SERI/TR-215-2436 (1984), table 2-1, as pvlib holds it; rows up to 1.7 µm."""
    from pvlib.spectrum.spectrl2 import _SPECTRL2_COEFFS

    return _SPECTRL2_COEFFS[_SPECTRL2_COEFFS["wavelength"] <= 1700]


@pytest.mark.parametrize("column", [0.0, 0.5, 1.42, 5.0, 100.0])
def test_water_vapour_is_that_of_spctral2(column):
    """Equation 2-8, exp(−0.2385 a W M / (1 + 20.07 a W M)^0.45), at every row."""
    rows = table()
    x = rows["water_vapor_absorption"] * column
    expected = np.exp(-0.2385 * x / (1 + 20.07 * x) ** 0.45)
    np.testing.assert_allclose(vapour_transmission(rows["wavelength"] * NM, column), expected, rtol=1e-12, atol=1e-15)


@pytest.mark.parametrize("mass", [0.0, 1.0, 5.0, 38.0])
def test_oxygen_is_that_of_spctral2(mass):
    """Equation 2-11 with the constant of the C program, exp(−1.41 a M′ / (1 + 118.3 a M′)^0.45), at every row."""
    rows = table()
    x = rows["mixed_absorption"] * mass
    expected = np.exp(-1.41 * x / (1 + 118.3 * x) ** 0.45)
    np.testing.assert_allclose(oxygen_transmission(rows["wavelength"] * NM, mass), expected, rtol=1e-12)


def test_ozone_is_that_of_spctral2():
    rows = table()
    np.testing.assert_allclose(ozone_depth(rows["wavelength"] * NM, 1000), rows["ozone_absorption"], atol=1e-14)


@pytest.mark.parametrize(
    ("low", "high", "tolerance"),
    [
        (400, 450, 0.01),
        (450, 500, 0.01),
        (500, 580, 0.02),
        (586, 600, 0.03),  # water
        (605, 684, 0.02),
        (686, 698, 0.10),  # oxygen, band B
        (700, 716, 0.03),
        (716, 736, 0.04),  # water
        (740, 757, 0.01),
        (759, 771, 0.25),  # oxygen, band A: SPCTRAL2's one strong row lets too much through
        (774, 785, 0.01),
    ],
)
def test_bands_lie_where_the_standard_spectrum_has_them(low, high, tolerance):
    """ASTM G173-03, direct and circumsolar ÷ extraterrestrial, air mass 1.5 (344 DU, 1.416 cm, haze 0.084 at 500 nm)."""
    from colour.plotting.datasets import SD_ASTMG173_DIRECT_CIRCUMSOLAR, SD_ASTMG173_ETR

    nm = np.arange(low, high + 1.0)
    expected = np.mean(SD_ASTMG173_DIRECT_CIRCUMSOLAR[nm] / SD_ASTMG173_ETR[nm])
    air = Air(ozone=343.8, aerosol_depth_550=0.084 * 1.1**-1.2, aerosol_exponent=1.2, water_vapour_cm=1.416)
    ours = air.transmission(nm * NM, np.arcsin(1 / 1.4987)).mean()
    assert ours == pytest.approx(expected, rel=tolerance)


def test_bands_saturate():
    """Two columns one after the other take less than twice what one takes: the lines' centres are gone already."""
    once, twice = vapour_transmission(720 * NM, 1.0), vapour_transmission(720 * NM, 2.0)
    assert once**2 < twice < once
    assert oxygen_transmission(760 * NM, 1.0) ** 2 < oxygen_transmission(760 * NM, 2.0)


@pytest.mark.parametrize("law", [vapour_transmission, oxygen_transmission])
def test_wavelengths_outside(law):
    assert law(500 * NM, 10.0) == 1.0
    with pytest.raises(DomainError, match="between 250 and 1700 nm, got 1800 nm"):
        law(1800 * NM, 1.0)
