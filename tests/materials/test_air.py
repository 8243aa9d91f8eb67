import numpy as np
import pytest
from indicio_pages import gases, page

from skyoptics.errors import DomainError
from skyoptics.materials import air
from skyoptics.units import CELSIUS_ZERO, NM, UM

WAVELENGTH_UM = np.array([0.40, 0.45, 0.50, 0.55, 0.5893, 0.60, 0.633, 0.65, 0.70])


def refractivity(n):
    """10⁸ (n − 1)."""
    return (np.asarray(n) - 1) * 1e8


def test_standard_air():
    """Ciddor, Appl. Opt. 35, 1566 (1996), equation 1, evaluated in double precision."""
    expected = [28276.18, 28053.34, 27897.38, 27783.76, 27714.73, 27698.33, 27653.02, 27632.41, 27580.45]
    np.testing.assert_allclose(refractivity(air.standard(WAVELENGTH_UM * UM)), expected, rtol=0, atol=0.01)


def test_full_algorithm_returns_to_standard_air():
    wavelength = np.linspace(230, 1690, 200) * NM
    np.testing.assert_allclose(air.index(wavelength), air.standard(wavelength), rtol=0, atol=1e-15)


def test_against_older_formulas():
    """Edlén, Metrologia 2, 71 (1966), and Peck & Reeder, J. Opt. Soc. Am. 62, 958 (1972): 1.2 to 1.5 less, by CO₂."""
    s = WAVELENGTH_UM**-2.0
    ours = refractivity(air.standard(WAVELENGTH_UM * UM))
    edlen = 8342.13 + 2406030 / (130 - s) + 15997 / (38.9 - s)
    peck = 5791817 / (238.0185 - s) + 167909 / (57.362 - s)
    for other in (edlen, peck):
        assert np.all(ours - other > 1.1)
        assert np.all(ours - other < 1.5)


def test_against_the_database_copy():
    """The page of Ciddor's formula in the refractiveindex.info database (float32 coefficients)."""
    wavelength = np.linspace(230, 1690, 100) * NM
    expected = refractivity(gases(page("other", "air", "Ciddor").n, wavelength))
    np.testing.assert_allclose(refractivity(air.standard(wavelength)), expected, rtol=3e-7)


# Ciddor 1996, table 1 (dry) and table 3 (moist): 0.633 µm, 450 ppm of CO₂. The row at 80 kPa, 40 °C is printed 19996.5,
# held to be a misprint of 19896.5.
TABLES = [
    (80, 20, 0.0, 21458.0),
    (100, 20, 0.0, 26824.4),
    (120, 20, 0.0, 32191.6),
    (100, 10, 0.0, 27774.7),
    (100, 30, 0.0, 25937.2),
    (80, 20, 0.75, 21394.0),
    (120, 20, 0.75, 32127.8),
    (80, 40, 0.75, 19896.5),
    (120, 40, 0.75, 29941.8),
    (80, 50, 1.0, 19058.4),
    (120, 50, 1.0, 28792.4),
]


@pytest.mark.parametrize(("kilopascal", "celsius", "humidity", "expected"), TABLES)
def test_printed_checks(kilopascal, celsius, humidity, expected):
    n = air.index(0.633 * UM, celsius + CELSIUS_ZERO, kilopascal * 1e3, humidity)
    assert refractivity(n) == pytest.approx(expected, abs=0.06)


def test_shapes_broadcast():
    n = air.index(np.array([[4e-7], [5e-7]]), np.array([280.0, 290.0, 300.0]))
    assert n.shape == (2, 3)
    assert np.all(np.diff(n, axis=1) < 0), "warm air is thinner"
    assert np.all(np.diff(n, axis=0) < 0)


@pytest.mark.parametrize(
    ("arguments", "text"),
    [
        ((2.2e-7,), "between 230 and 1690 nm, got 220 nm"),
        ((5e-7, 230.0), "between -40 and 100 °C"),
        ((5e-7, 290.0, 9e3), "between 100 and 1400 hPa, got 90 hPa"),
        ((5e-7, 290.0, 1e5, 1.2), "between 0 and 100 %, got 120 %"),
    ],
)
def test_outside_the_range(arguments, text):
    with pytest.raises(DomainError, match=text):
        air.index(*arguments)
