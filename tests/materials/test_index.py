import pickle

import numpy as np
import pytest

from skyoptics.errors import DataFileError, DomainError
from skyoptics.materials import air, ice, index, water
from skyoptics.units import NM

CSV = "wavelength_nm,n,k\n300,1.40,1e-9\n800,1.38,1e-8\n"


@pytest.fixture
def csv(tmp_path):
    path = tmp_path / "brine.csv"
    path.write_text(CSV)
    return path


def test_water_in_vacuum_and_in_air():
    wavelength = np.array([4e-7, 5.893e-7, 7e-7])
    vacuum, in_air = index.water(293.15, "vacuum")(wavelength), index.water(293.15)(wavelength)
    np.testing.assert_array_equal(vacuum.real, water.index(wavelength, 293.15))
    np.testing.assert_allclose(in_air.real, vacuum.real / air.standard(wavelength), rtol=1e-15)
    np.testing.assert_array_equal(in_air.imag, water.absorption(wavelength))
    np.testing.assert_array_equal(vacuum.imag, in_air.imag)
    # R9-97, Ciddor 1996: n_D = 1.33335 against vacuum, 1.33299 against air of 20 °C; that of 15 °C takes 7e-6 more
    assert vacuum[1].real == pytest.approx(1.33335, abs=5.1e-6)
    assert vacuum[1].real / air.index(wavelength[1], 293.15) == pytest.approx(1.33299, abs=5.1e-6)
    assert in_air[1].real == pytest.approx(1.33298, abs=5.1e-6)


def test_air_moves_the_bows():
    """Rainbow angles by Descartes' formula: +0.052° and −0.095° from the antisolar point, for light of 589.3 nm."""

    def radius(n, k):
        cosine = np.sqrt((n**2 - 1) / (k * (k + 2)))
        incidence = np.arccos(cosine)
        refraction = np.arcsin(np.sin(incidence) / n)
        return np.degrees(2 * (incidence - refraction) + k * (np.pi - 2 * refraction))

    vacuum, in_air = (index.water(293.15, medium)(5.893e-7).real for medium in ("vacuum", "air"))
    assert 180 - radius(in_air, 1) - (180 - radius(vacuum, 1)) == pytest.approx(0.052, abs=0.002)
    assert radius(in_air, 2) - radius(vacuum, 2) == pytest.approx(-0.095, abs=0.002)


def test_ice():
    wavelength = np.linspace(350, 1100, 20) * NM
    np.testing.assert_array_equal(
        index.ice("vacuum")(wavelength), ice.index(wavelength) + 1j * ice.absorption(wavelength)
    )
    np.testing.assert_allclose(
        index.ice()(wavelength).real, ice.index(wavelength) / air.standard(wavelength), rtol=1e-15
    )


def test_absorption_along_a_path():
    """1 m of water takes 30 % of light of 650 nm: 4π · 1.64e-8 / 650 nm = 0.317 m⁻¹ (Hale & Querry 1973)."""
    k = index.water(293.15)(650 * NM).imag
    assert 4 * np.pi * k / (650 * NM) == pytest.approx(0.317, abs=5e-4)


def test_constant_is_not_divided():
    value = index.constant(1.5 + 0.25j)
    np.testing.assert_array_equal(value(np.array([[1e-9, 1.0]])), [[1.5 + 0.25j, 1.5 + 0.25j]])
    assert index.constant(1.333)(5e-7) == 1.333 + 0j
    assert index.constant(0.75).label == "constant index 0.75"


@pytest.mark.parametrize("bad", [0.0, -1.3, np.nan, np.inf, 1.3 - 1e-5j, complex(1.3, np.nan)])
def test_constants_that_make_no_sense(bad):
    with pytest.raises(DomainError, match="n > 0 and k >= 0"):
        index.constant(bad)


def test_tabulated(csv):
    vacuum, in_air = index.tabulated(csv, "vacuum"), index.tabulated(str(csv))
    assert vacuum(550 * NM) == pytest.approx(1.39 + 1j * np.sqrt(1e-17), rel=1e-12)
    assert in_air(550 * NM).real == pytest.approx(1.39 / air.standard(550 * NM), rel=1e-14)
    assert in_air(550 * NM).imag == vacuum(550 * NM).imag
    assert (vacuum.minimum_wavelength, vacuum.maximum_wavelength) == pytest.approx((3e-7, 8e-7))
    assert vacuum.label == "brine.csv, in vacuum"


def test_tabulated_beyond_the_air_formula(tmp_path):
    path = tmp_path / "infrared.csv"
    path.write_text("wavelength_um,n\n2,1.3\n3,1.2\n")
    assert index.tabulated(path, "vacuum")(2.5e-6) == pytest.approx(1.25)
    with pytest.raises(DomainError, match=r'infrared\.csv covers 2000 to 3000 nm.*use the medium "vacuum"'):
        index.tabulated(path)


def test_faults_in_a_table_come_through(tmp_path):
    with pytest.raises(DataFileError, match="no such file"):
        index.tabulated(tmp_path / "missing.csv")


@pytest.mark.parametrize(
    ("value", "low", "high", "text"),
    [
        (index.water(293.15, "vacuum"), 200, 1100, "water at 20 °C, in vacuum must lie between 200 and 1100 nm"),
        (index.water(293.15), 230, 1100, "water at 20 °C, in air must lie between 230 and 1100 nm"),
        (index.water(263.15), 230, 1100, "water at −10 °C, in air must lie between 230 and 1100 nm"),
        (index.ice(), 350, 1100, "ice at −7 °C, in air must lie between 350 and 1100 nm"),
    ],
)
def test_ranges_in_words(value, low, high, text):
    assert np.all(np.isfinite(value(np.array([low, high]) * NM)))
    for nm in (low - 1, high + 1):
        with pytest.raises(DomainError, match=f"{text}, got {nm} nm"):
            value(nm * NM)


def test_keys_name_all_that_changes_the_values(csv, tmp_path):
    other = tmp_path / "other.csv"
    other.write_text(CSV.replace("1.40", "1.41"))
    makers = [
        lambda: index.water(293.15),
        lambda: index.water(293.15, "vacuum"),
        lambda: index.water(293.150001),
        lambda: index.ice(),
        lambda: index.ice("vacuum"),
        lambda: index.constant(1.333),
        lambda: index.constant(1.333 + 1e-9j),
        lambda: index.tabulated(csv),
        lambda: index.tabulated(csv, "vacuum"),
        lambda: index.tabulated(other),
    ]
    keys = [maker().key for maker in makers]
    assert len(set(keys)) == len(keys)
    assert keys == [maker().key for maker in makers]
    assert index.constant(1.333 + 0j).key == index.constant(complex(1.333, -0.0)).key == index.constant(1.333).key


def test_key_of_a_table_does_not_depend_on_its_place(csv, tmp_path):
    copy = tmp_path / "copy.csv"
    copy.write_text("# the same\n" + CSV)
    assert index.tabulated(csv).key == index.tabulated(copy).key


@pytest.mark.parametrize("maker", [lambda medium: index.water(293.15, medium), index.ice])
def test_unknown_medium(maker):
    with pytest.raises(DomainError, match=r"medium must be air or vacuum, got 'vacum'; did you mean vacuum\?"):
        maker("vacum")


def test_water_out_of_its_range():
    with pytest.raises(DomainError, match="water temperature must lie between -12 and 100 °C, got -20 °C"):
        index.water(253.15)


def test_travels_to_another_process(csv):
    for value in (index.water(283.15), index.ice(), index.constant(1.3), index.tabulated(csv)):
        copy = pickle.loads(pickle.dumps(value))
        assert copy.key == value.key
        assert copy(5e-7) == value(5e-7)
