import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.light.air import Air, aerosol_depth, air_mass, ozone_air_mass, ozone_depth, rayleigh_depth
from skyoptics.units import DEG, NM, UM

WAVELENGTH_UM = np.array([0.40, 0.45, 0.50, 0.55, 0.60, 0.65, 0.70])


def test_air_mass():
    """Kasten & Young, Appl. Opt. 28, 4735 (1989), evaluated by zenith distance."""
    zenith = np.array([0, 60, 75, 80, 85, 88, 89, 90])
    expected = [0.9997, 1.9943, 3.8129, 5.5860, 10.3058, 19.433, 26.311, 37.920]
    mass = air_mass((90 - zenith) * DEG)
    np.testing.assert_allclose(mass[:5], expected[:5], rtol=0, atol=1e-4)
    np.testing.assert_allclose(mass[5:], expected[5:], rtol=0, atol=6e-4)


def test_ozone_air_mass():
    """Bird & Riordan, SERI/TR-215-2436 (1984), equation 2-10: (1 + h/6370) / sqrt(cos² z + 2h/6370), h = 22 km."""
    assert ozone_air_mass(90 * DEG) == pytest.approx(1.0, abs=1e-5)
    assert ozone_air_mass(0.0) == pytest.approx((1 + 22 / 6370) / np.sqrt(44 / 6370), rel=1e-12)
    assert ozone_air_mass(30 * DEG) == pytest.approx(air_mass(30 * DEG), rel=0.01)


@pytest.mark.parametrize("law", [air_mass, ozone_air_mass])
def test_the_horizon_and_below(law):
    assert law(-0.5 * DEG) == law(-1 * DEG) == law(0.0)
    assert np.all(np.diff(law(np.linspace(0, 90, 200) * DEG)) < 0)
    for bad in (-1.1, 90.1, np.nan):
        with pytest.raises(DomainError, match="elevation must lie between -1 and 90 °"):
            law(bad * DEG)


def test_rayleigh_depth():
    """Bodhaine et al., J. Atmos. Oceanic Technol. 16, 1854 (1999), equation 30."""
    expected = [0.360213, 0.221106, 0.143353, 0.097065, 0.068087, 0.049184, 0.036421]
    np.testing.assert_allclose(rayleigh_depth(WAVELENGTH_UM * UM), expected, rtol=0, atol=1e-6)
    half = rayleigh_depth(WAVELENGTH_UM * UM, 101325 / 2)
    np.testing.assert_allclose(half, rayleigh_depth(WAVELENGTH_UM * UM) / 2, rtol=1e-14)


def test_rayleigh_depth_against_other_laws():
    """Hansen & Travis, Space Sci. Rev. 16, 527 (1974); Bucholtz, Appl. Opt. 34, 2765 (1995): 0.3 % apart."""
    ours = rayleigh_depth(WAVELENGTH_UM * UM)
    hansen = 0.008569 * WAVELENGTH_UM**-4.0 * (1 + 0.0113 * WAVELENGTH_UM**-2.0 + 0.00013 * WAVELENGTH_UM**-4.0)
    bucholtz = [0.36102, 0.22165, 0.14326, 0.09716, 0.06818, 0.04926, 0.03648]
    np.testing.assert_allclose(ours, hansen, rtol=4e-3)
    np.testing.assert_allclose(ours, bucholtz, rtol=4e-3)


def test_rayleigh_depth_against_colour_science():
    from colour.phenomena import rayleigh_optical_depth

    expected = rayleigh_optical_depth(WAVELENGTH_UM * 1e-4)  # takes centimetres
    np.testing.assert_allclose(rayleigh_depth(WAVELENGTH_UM * UM), expected, rtol=1.5e-3)


def test_ozone_depth():
    """SPCTRAL2 absorption coefficients: Bird & Riordan, SERI/TR-215-2436 (1984), table 2-1."""
    nm = np.array([450, 470, 500, 530, 550, 570, 593, 610, 630, 656, 690, 710, 780])
    k = [0.003, 0.009, 0.030, 0.063, 0.085, 0.120, 0.119, 0.120, 0.090, 0.065, 0.028, 0.018, 0]
    np.testing.assert_allclose(ozone_depth(nm * NM, 1000), k, rtol=0, atol=1e-15)
    assert ozone_depth(600 * NM, 300) == pytest.approx(0.036, rel=0.01)
    np.testing.assert_array_equal(ozone_depth(np.array([400, 800, 1100]) * NM, 300), 0.0)
    assert ozone_depth(310 * NM, 300) == pytest.approx(0.81)


def test_aerosol_depth():
    """Ångström's law."""
    assert aerosol_depth(550 * NM, 0.1, 1.3) == 0.1
    assert aerosol_depth(1100 * NM, 0.1, 1.0) == pytest.approx(0.05, rel=1e-12)
    np.testing.assert_allclose(aerosol_depth(WAVELENGTH_UM * UM, 0.2, 0.0), 0.2)


@pytest.mark.parametrize("elevation_deg", [30, 42, 60, 90])
def test_direct_light_against_spctral2(elevation_deg):
    """Bird & Riordan 1984: molecules by equation 2-4 (their C program's constant), haze 2-7, ozone 2-9 and 2-10."""
    um = np.array([0.40, 0.45, 0.50, 0.55, 0.61, 0.656, 0.71, 0.78])
    k = np.array([0, 0.003, 0.030, 0.085, 0.120, 0.065, 0.018, 0])
    mass = air_mass(elevation_deg * DEG)
    molecules = np.exp(-mass * (101325 / 101300) / (um**4 * (115.6406 - 1.3366 / um**2)))
    haze = np.exp(-mass * 0.1 * (um / 0.5) ** -1.14)
    layer = (1 + 22 / 6370) / np.sqrt(np.sin(elevation_deg * DEG) ** 2 + 44 / 6370)
    expected = molecules * haze * np.exp(-k * 0.3 * layer)
    air = Air(ozone=300, aerosol_depth_550=0.1 * 1.1**-1.14, aerosol_exponent=1.14)
    np.testing.assert_allclose(air.transmission(um * UM, elevation_deg * DEG), expected, rtol=0.01)


def test_transmission_is_the_product_of_its_parts():
    um, elevation = WAVELENGTH_UM, 5 * DEG
    parts = [
        Air(ozone=0, aerosol_depth_550=0),
        Air(pressure=0, aerosol_depth_550=0),
        Air(pressure=0, ozone=0),
    ]
    product = np.prod([part.transmission(um * UM, elevation) for part in parts], axis=0)
    np.testing.assert_allclose(Air().transmission(um * UM, elevation), product, rtol=1e-12)
    np.testing.assert_array_equal(Air(0, 0, 0).transmission(um * UM, elevation), 1.0)


def test_transmission_broadcasts_and_falls_towards_the_horizon():
    result = Air().transmission(WAVELENGTH_UM * UM, np.array([[60], [20], [5], [0], [-1]]) * DEG)
    assert result.shape == (5, 7)
    assert np.all(np.diff(result[:4], axis=0) < 0)
    np.testing.assert_array_equal(result[3], result[4])
    assert np.all((result > 0) & (result < 1))


@pytest.mark.parametrize(
    ("fields", "text"),
    [
        ({"pressure": -1.0}, "air pressure must lie between 0 and 1100 hPa"),
        ({"pressure": 1.2e5}, "air pressure must lie between 0 and 1100 hPa, got 1200 hPa"),
        ({"ozone": 2000.0}, "ozone column must lie between 0 and 1000 DU"),
        ({"aerosol_depth_550": -0.1}, "aerosol optical depth at 550 nm must lie between 0 and 5"),
        ({"aerosol_exponent": np.nan}, "aerosol exponent must lie between -1 and 4, got nan"),
    ],
)
def test_air_that_makes_no_sense(fields, text):
    with pytest.raises(DomainError, match=text):
        Air(**fields)


@pytest.mark.parametrize("law", [rayleigh_depth, lambda w: ozone_depth(w, 300), lambda w: aerosol_depth(w, 0.1, 1.3)])
def test_wavelengths_outside(law):
    with pytest.raises(DomainError, match="between 250 and 1700 nm"):
        law(np.array([500, 200]) * NM)
