import numpy as np
import pytest
from scipy.optimize import brentq

from skyoptics.colour.observer import xyz
from skyoptics.errors import DomainError
from skyoptics.light.air import Air, aerosol_depth, air_mass, ozone_air_mass, ozone_depth, rayleigh_depth
from skyoptics.light.spectrum import bin_means, samples
from skyoptics.optics.bins import Bins
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


@pytest.mark.parametrize("turbidity", [0.05, 0.1, 0.27])
@pytest.mark.parametrize("mass", [1.0, 1.5, 2.0, 3.0, 4.0, 5.0])
def test_direct_light_against_spctral2(mass, turbidity):
    """Bird & Riordan, SERI/TR-215-2436 (1984), by pvlib; each over its own extraterrestrial spectrum; α = 1.14.

    400–680 nm within 3 % outside the water band at 593 nm, 6 % inside; measured: 1.7 % at air mass 5.
    """
    from pvlib.spectrum import spectrl2

    elevation = 90 * DEG if mass == 1.0 else brentq(lambda e: float(air_mass(e)) - mass, 5 * DEG, 90 * DEG)
    result = spectrl2(
        apparent_zenith=np.array([90 - elevation / DEG]),
        aoi=np.zeros(1),
        surface_tilt=0,
        ground_albedo=0.2,
        surface_pressure=101325.0,
        relative_airmass=np.array([mass]),
        precipitable_water=1.42,
        ozone=0.3,
        aerosol_turbidity_500nm=turbidity,
        dayofyear=np.array([94]),
    )
    nm = result["wavelength"]
    shown = (nm >= 400) & (nm <= 680)
    expected = (result["dni"] / result["dni_extra"])[shown, 0]
    air = Air(ozone=300, aerosol_depth_550=turbidity * 1.1**-1.14, aerosol_exponent=1.14, water_vapour_cm=1.42)
    off = np.abs(air.transmission(nm[shown] * NM, elevation) / expected - 1.0)
    band = nm[shown] == 593
    assert off[~band].max() < 0.03
    assert off[band].max() < 0.06
    assert off.max() < 0.02  # what is reached


def test_light_at_a_height_has_met_less_air():
    um = WAVELENGTH_UM * UM
    for elevation in (60 * DEG, 10 * DEG, 0.0, -0.8 * DEG):
        by_height = np.stack([Air().transmission(um, elevation, h) for h in (0.0, 2e3, 9e3, 50e3)])
        assert np.all(np.diff(by_height, axis=0) > 0)
        reddening = by_height[:, -1] / by_height[:, 0]
        assert np.all(np.diff(reddening) < 0)
    np.testing.assert_allclose(Air().transmission(um, 0.0, 100e3), 1.0, rtol=1e-5)


def test_a_source_below_the_horizon_lights_what_is_high():
    """At 9 km the sea's horizon lies 2.9° low; light comes down to there, and past it that of the grazing ray stays."""
    grazing, lower = Air().transmission(700 * NM, np.array([-3.4, -3.8]) * DEG, 9e3)
    assert grazing == lower > 0.0
    assert Air().transmission(700 * NM, -2.0 * DEG, 9e3) > grazing
    with pytest.raises(DomainError, match=r"elevation must lie between -3\.85"):
        Air().transmission(700 * NM, -4.0 * DEG, 9e3)


@pytest.mark.parametrize("height", [0.0, 2e3, 9e3])
def test_light_changes_without_a_step_at_the_horizon(height):
    elevation = np.linspace(-0.5, 0.5, 401) * DEG
    logs = np.log(Air().transmission(np.array([[450], [550], [650]]) * NM, elevation, height))
    steps = np.diff(logs, axis=1)
    assert np.all(steps >= 0)
    assert np.all(np.abs(steps) < 0.06)  # 1/400 of a degree


def test_between_heights():
    um = np.array([0.45, 0.55, 0.65]) * UM  # no bands: legs multiply
    air, elevation = Air(), 3 * DEG
    np.testing.assert_allclose(air.between(um, elevation, 0.0, 100e3), air.transmission(um, elevation), rtol=1e-12)
    np.testing.assert_array_equal(air.between(um, elevation, 2e3, 2e3), 1.0)
    parts = air.between(um, 90 * DEG, 0.0, 3e3) * air.between(um, 90 * DEG, 3e3, 100e3)
    np.testing.assert_allclose(parts, air.transmission(um, 90 * DEG), rtol=1e-4)
    thin = Air(0, 0, 0.2, 1.3, 0, 1000.0).between(550 * NM, 90 * DEG, 0.0, 1e3)
    assert thin == pytest.approx(np.exp(-0.2 * (1 - np.exp(-1))), rel=1e-6)  # haze alone, scale height 1 km


def test_sunset_is_red():
    """CIE 1931: a sun on the horizon is redder than 1500 K on the Planckian locus (x = 0.586, from memory)."""
    bins = Bins.adjoining(np.arange(380, 781, 5) * NM)

    def chromaticity(elevation_deg):
        light = xyz(bin_means(bins, Air().transmission(samples()[0], elevation_deg * DEG)), bins)
        return light[:2] / light.sum()

    x, y = chromaticity(0.0)
    assert x > 0.60
    assert y < 0.38
    high, _ = chromaticity(60.0)
    assert 0.32 < high < 0.35  # daylight, D50 to D65
    reds = [chromaticity(e)[0] for e in (60, 20, 10, 5, 2, 0)]
    assert np.all(np.diff(reds) > 0)


def test_transmission_is_the_product_of_its_parts():
    um, elevation = WAVELENGTH_UM, 90 * DEG  # lower down the molecules' refraction shortens all paths
    parts = [
        Air(ozone=0, aerosol_depth_550=0, water_vapour_cm=0),
        Air(pressure=0, aerosol_depth_550=0, water_vapour_cm=0),
        Air(pressure=0, ozone=0, water_vapour_cm=0),
        Air(pressure=0, ozone=0, aerosol_depth_550=0),
    ]
    product = np.prod([part.transmission(um * UM, elevation) for part in parts], axis=0)
    np.testing.assert_allclose(Air().transmission(um * UM, elevation), product, rtol=2e-5)
    np.testing.assert_array_equal(Air(0, 0, 0, water_vapour_cm=0).transmission(um * UM, elevation), 1.0)


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
        ({"water_vapour_cm": 11.0}, "water vapour column must lie between 0 and 10 cm"),
        ({"aerosol_height": 50.0}, "scale height of haze must lie between 100 and 10000 m"),
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
