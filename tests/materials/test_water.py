import numpy as np
import pytest
from indicio_pages import page, sellmeier_2, table

from skyoptics.errors import DomainError
from skyoptics.materials import water
from skyoptics.units import CELSIUS_ZERO, NM, UM

# IAPWS R9-97 (1997), table 3 and the check values of its code examples; density in place of pressure
CHECKS = [
    (273.15, 999.843, 0.2265, 1.394527, 1e-6),
    (273.15, 999.843, 0.589, 1.334344, 1e-6),
    (273.15, 999.843, 1.01398, 1.326135, 1e-6),
    (298.15, 997.047435, 0.2265, 1.39277824, 1e-8),
    (298.15, 997.047435, 0.5893, 1.33285819, 1e-8),
    (773.15, 30.4758534, 0.5893, 1.00949307, 1e-8),
]

# R9-97 evaluated in double precision with IAPWS-95 densities at 1 atm
VISIBLE_NM = [380, 400, 435.83, 450, 486.13, 500, 546.07, 550, 589.29, 600, 632.8, 650, 656.27, 700, 750, 780]
VISIBLE = {
    20: "1.345625 1.343560 1.340586 1.339608 1.337491 1.336795 1.334830 1.334683 "
    "1.333349 1.333024 1.332107 1.331668 1.331514 1.330519 1.329514 1.328961",
    10: "1.346374 1.344303 1.341322 1.340341 1.338218 1.337520 1.335549 1.335401 "
    "1.334063 1.333736 1.332816 1.332375 1.332220 1.331220 1.330209 1.329653",
    0: "1.346660 1.344588 1.341604 1.340623 1.338497 1.337798 1.335824 1.335676 "
    "1.334335 1.334007 1.333084 1.332642 1.332487 1.331484 1.330469 1.329910",
}


@pytest.mark.parametrize(("temperature", "density", "wavelength_um", "expected", "tolerance"), CHECKS)
def test_published_check_values(temperature, density, wavelength_um, expected, tolerance):
    n = water.index_at_density(wavelength_um * UM, temperature, density)
    assert n == pytest.approx(expected, abs=0.51 * tolerance)


@pytest.mark.parametrize("celsius", VISIBLE)
def test_visible_values_at_one_atmosphere(celsius):
    n = water.index(np.array(VISIBLE_NM) * NM, celsius + CELSIUS_ZERO)
    np.testing.assert_allclose(n, np.array(VISIBLE[celsius].split(), float), rtol=0, atol=1e-6)


def test_agrees_with_an_independent_measurement():
    """Daimon & Masumura, Appl. Opt. 46, 3811 (2007), doi 10.1364/AO.46.003811: Sellmeier terms for 20.0 °C."""
    wavelength = np.linspace(400, 700, 61) * NM
    square = (wavelength / UM) ** 2
    a = [0.5684027565, 0.1726177391, 0.02086189578, 0.1130748688]
    b = [0.005101829712, 0.01821153936, 0.02620722293, 10.69792721]
    daimon = np.sqrt(1 + sum(x * square / (square - y) for x, y in zip(a, b, strict=True)))
    np.testing.assert_allclose(water.index(wavelength, 293.15), daimon, rtol=0, atol=5e-6)


@pytest.mark.parametrize("celsius", [19.0, 20.0, 21.5, 24.0])
def test_agrees_with_daimon_at_other_temperatures(celsius):
    """The same paper's four temperatures as kept by the refractiveindex.info database (float32 coefficients)."""
    wavelength = np.linspace(400, 700, 31) * NM
    daimon = sellmeier_2(page("main", "H2O", f"Daimon-{celsius}C").n, wavelength)
    np.testing.assert_allclose(water.index(wavelength, celsius + CELSIUS_ZERO), daimon, rtol=0, atol=1e-5)


def test_index_falls_with_wavelength_and_with_temperature_from_four_degrees_up():
    n = water.index(np.linspace(300, 1000, 50)[:, None] * NM, np.linspace(277.15, 372.15, 20))
    assert np.all(np.diff(n, axis=0) < 0)
    assert np.all(np.diff(n, axis=1) < 0)


def test_supercooled_water_is_smooth_across_freezing():
    temperature = np.linspace(261.15, 285.15, 49)
    n = water.index(589 * NM, temperature)
    assert np.all(np.abs(np.diff(n, 2)) < 3e-6)
    assert n.max() > n[0], "the maximum of the index lies below 0 °C, not at the end of the range"


def test_density_against_the_standard_for_air_free_water():
    """Tanaka et al., Metrologia 38, 301 (2001), equation 1, 0 to 40 °C, 101 325 Pa."""
    t = np.linspace(0, 40, 81)
    tanaka = 999.974950 * (1 - (t - 3.983035) ** 2 * (t + 301.797) / (522528.9 * (t + 69.34881)))
    np.testing.assert_allclose(water.density(t + CELSIUS_ZERO), tanaka, rtol=2e-6)


def test_density_against_kell_up_to_boiling():
    """G. S. Kell, J. Chem. Eng. Data 20, 97 (1975), equation 16, on the temperature scale of 1968 (so 2e-5 apart)."""
    t = np.linspace(0, 99.9, 100)
    top = 999.83952 + t * (
        16.945176 + t * (-7.9870401e-3 + t * (-46.170461e-6 + t * (105.56302e-9 - t * 280.54253e-12)))
    )
    np.testing.assert_allclose(water.density(t + CELSIUS_ZERO), top / (1 + 16.879850e-3 * t), rtol=2e-5)


@pytest.mark.parametrize(("celsius", "expected"), [(-10, 998.117), (-20, 993.547)])
def test_density_of_supercooled_water(celsius, expected):
    """Hare & Sorensen, J. Chem. Phys. 87, 4840 (1987), and handbook tables after Kell (values from memory)."""
    assert water.density(celsius + CELSIUS_ZERO) == pytest.approx(expected, rel=3e-5)


def test_densities_of_the_visible_table():
    """IAPWS-95 at 1 atm."""
    np.testing.assert_allclose(
        water.density([293.15, 283.15, 273.15]), [998.2071, 999.7027, 999.8426], rtol=0, atol=6e-4
    )


def test_absorption_at_the_rows_of_hale_and_querry():
    """Hale & Querry, Appl. Opt. 12, 555 (1973), table I, 25 °C."""
    nm = np.array([400, 500, 550, 600, 650, 700, 750])
    k = [1.86e-9, 1.00e-9, 1.96e-9, 1.09e-8, 1.64e-8, 3.35e-8, 1.56e-7]
    np.testing.assert_allclose(water.absorption(nm * NM), k, rtol=1e-12)


def test_absorption_against_the_database_copy():
    """All rows from 200 to 1200 nm as kept by refractiveindex.info (float32)."""
    wavelength, k = table(page("main", "H2O", "Hale").k)
    inside = wavelength <= 1.2001 * UM
    assert inside.sum() == 34
    np.testing.assert_allclose(water.absorption(np.minimum(wavelength[inside], 1.2 * UM)), k[inside], rtol=2e-6)


def test_absorption_is_logarithmic_between_rows():
    assert water.absorption(512.5 * NM) == pytest.approx(np.sqrt(1.00e-9 * 1.32e-9), rel=1e-12)


@pytest.mark.parametrize(
    ("call", "text"),
    [
        (lambda: water.index(199e-9, 293.15), "between 200 and 1100 nm, got 199 nm"),
        (lambda: water.index(1.2e-6, 293.15), "between 200 and 1100 nm, got 1200 nm"),
        (lambda: water.index(5e-7, 260.15), "between -12 and 100 °C, got -13 °C"),
        (lambda: water.index(5e-7, 374.15), "got 101 °C"),
        (lambda: water.index_at_density(5e-7, 293.15, 1061.0), "between 0 and 1060 kg"),
        (lambda: water.index_at_density(5e-7, 774.15, 10.0), "between -12 and 500 °C"),
        (lambda: water.density(250.0), "between -20 and 110 °C"),
        (lambda: water.absorption(1.3e-6), "between 200 and 1200 nm"),
        (lambda: water.absorption(np.nan), "got nan"),
    ],
)
def test_outside_the_data(call, text):
    with pytest.raises(DomainError, match=text):
        call()
