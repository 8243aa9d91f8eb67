"""Measured spectra from CSV: both layouts, units, logarithms, decimal commas, and every fault with its line."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.droplets import sizes
from skyoptics.droplets.spectra import MeasuredSpectrum, read_spectrum
from skyoptics.errors import DataFileError, DomainError

LONG = "diameter_lower_mm,diameter_upper_mm,concentration_per_m3_mm\n0.5,1.0,400\n1.0,1.5,100\n2.0,3.0,10\n"


def write(tmp_path, text):
    path = tmp_path / "rain.csv"
    path.write_text(text, encoding="utf-8")
    return path


def test_long_layout(tmp_path):
    spectrum = read_spectrum(write(tmp_path, LONG))
    np.testing.assert_allclose(spectrum.lower, [0.25e-3, 0.5e-3, 1e-3])
    np.testing.assert_allclose(spectrum.upper, [0.5e-3, 0.75e-3, 1.5e-3])
    np.testing.assert_allclose(spectrum.count, [200, 50, 10])
    assert spectrum.concentration == pytest.approx(260)


@pytest.mark.parametrize(
    "text",
    [
        "diameter_lower_um,diameter_upper_um,concentration_per_m3\n500,1000,200\n1000,1500,50\n2000,3000,10\n",
        "radius_lower_mm;radius_upper_mm;concentration_per_m3_mm\n0,25;0,5;800\n0,5;0,75;200\n1;1,5;20\n",
        "radius_lower_um\tradius_upper_um\tconcentration_per_cm3\n250\t500\t2e-4\n500\t750\t5e-5\n1000\t1500\t1e-5\n",
        "diameter_lower_mm,diameter_upper_mm,log10_concentration_per_m3\n.5,1,2.301029995664\n1,1.5,1.698970004336\n2,3,1\n",
        "# quantity: concentration_per_m3\ndiameter_0.5-1_mm,diameter_1-1.5_mm,diameter_2-3_mm\n200,50,10\n",
        "# quantity: log10_concentration_per_m3\n# a remark\n\ntime;diameter_0,5-1_mm;diameter_1-1,5_mm;diameter_2-3_mm\n"
        "12:00;2,301029995664;1,698970004336;1\n",
        "\ufeff" + LONG,
    ],
)
def test_every_spelling_reads_the_same(tmp_path, text):
    expected = read_spectrum(write(tmp_path, LONG))
    found = read_spectrum(write(tmp_path, text))
    for name in ("lower", "upper", "count"):
        np.testing.assert_allclose(getattr(found, name), getattr(expected, name), rtol=1e-9)


def test_concentration_per_width(tmp_path):
    text = "radius_lower_um,radius_upper_um,concentration_per_cm3_um\n4,6,20\n"
    assert read_spectrum(write(tmp_path, text)).concentration == pytest.approx(40e6)


def test_times_are_averaged_or_picked(tmp_path):
    wide = "# quantity: concentration_per_m3\ntime,diameter_0.5-1_mm,diameter_1-2_mm\n12:00,100,0\n12:01,300,40\n12:02,200,20\n"
    long = "time,diameter_lower_mm,diameter_upper_mm,concentration_per_m3\n" + "".join(
        f"{t},0.5,1,{a}\n{t},1,2,{b}\n" for t, a, b in (("12:00", 100, 0), ("12:01", 300, 40), ("12:02", 200, 20))
    )
    for text in (wide, long):
        path = write(tmp_path, text)
        np.testing.assert_allclose(read_spectrum(path).count, [200, 20])
        np.testing.assert_allclose(read_spectrum(path, time="12:01").count, [300, 40])
        with pytest.raises(DataFileError, match=r"no time '12:09'.*did you mean"):
            read_spectrum(path, time="12:09")


def test_logarithms_are_never_guessed_and_their_filler_is_no_drops(tmp_path):
    text = "diameter_lower_mm,diameter_upper_mm,{}concentration_per_m3_mm\n0.5,1,2.0\n1,2,-9.999\n"
    spectrum = read_spectrum(write(tmp_path, text.format("log10_")))
    np.testing.assert_allclose(spectrum.count, [50, 0])
    with pytest.raises(
        DataFileError, match=r"rain.csv:3: .*-9.999 must be 0 or more.*declare log10_concentration_per_m3_mm"
    ):
        read_spectrum(write(tmp_path, text.format("")))


def test_moments_and_rule(tmp_path):
    spectrum = read_spectrum(write(tmp_path, LONG))
    # by hand: Σ count (u⁴ − l⁴)/(4 (u − l))/N
    low, high, count = np.array([0.25, 0.5, 1.0]), np.array([0.5, 0.75, 1.5]), np.array([200, 50, 10])
    third = np.sum(count * (high**4 - low**4) / (4 * (high - low))) / 260 * 1e-9
    assert spectrum.moment(3) == pytest.approx(third)
    for level, tolerance in ((0, 0.02), (2, 1e-3), (4, 1e-5)):
        radius, weight = sizes.quadrature(spectrum, level)
        assert np.sum(weight) == pytest.approx(1.0)
        assert np.sum(weight * radius**3) == pytest.approx(third, rel=tolerance)
    coarse, _ = sizes.quadrature(spectrum, 1)
    fine, _ = sizes.quadrature(spectrum, 2)
    assert all(np.min(np.abs(fine - value)) < 1e-12 for value in coarse)
    grid = np.linspace(0.2e-3, 1.6e-3, 140_001)
    assert np.trapezoid(spectrum.density(grid), grid) == pytest.approx(1.0, rel=1e-4)
    assert spectrum.density(0.9e-3) == 0.0
    assert spectrum.density(1e-5) == 0.0
    assert sizes.effective_radius(spectrum) == pytest.approx(third / spectrum.moment(2))


HEAD = "diameter_lower_mm,diameter_upper_mm,concentration_per_m3\n"
WIDE = "# quantity: concentration_per_m3\n"


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "no spectrum in it"),
        ("# only a remark\n", "no spectrum in it"),
        (HEAD, "at least one line of numbers"),
        (HEAD + "1,2,0\n", "no drops in any bin"),
        (HEAD + "1,2,5\n0.5,1,5\n", r"rain.csv:3: bins must ascend.*0.25 mm.*1 mm"),
        (HEAD + "1,2,5\n1.5,3,5\n", r"rain.csv:3: bins must ascend without overlap"),
        (HEAD + "1,2,-5\n", r"rain.csv:2: concentration_per_m3 = -5 must be 0 or more"),
        (HEAD + "2,1,5\n", r"rain.csv:2: bin 2 ... 1 mm: limits must be"),
        (HEAD + "-1,1,5\n", r"rain.csv:2: bin -1 ... 1 mm"),
        (HEAD + "100,200,5\n", r"rain.csv:2: bin ends at diameter 200 mm; drops end at 10 mm"),
        (HEAD + "1,2,many\n", r"rain.csv:2: concentration_per_m3: 'many' is not a number"),
        (HEAD + "1,2,nan\n", r"rain.csv:2: .*not a finite number"),
        (HEAD + "1,2\n", r"rain.csv:2: 2 fields, the header has 3"),
        (HEAD + "0,5,1,0,400\n", r"rain.csv:2: 5 fields.*decimal comma need fields parted by ';'"),
        (
            "diameter_lower_mm,diameter_upper_um,concentration_per_m3\n1,2,3\n",
            "mixed units: diameter in mm, diameter in um",
        ),
        (
            "diameter_lower_mm,radius_upper_mm,concentration_per_m3\n1,2,3\n",
            "mixed units: diameter in mm, radius in mm",
        ),
        (WIDE + "diameter_1-2_mm,diameter_2000-3000_um\n1,2\n", r"rain.csv:2: mixed units"),
        ("# quantity: concentration_per_m3_mm\n" + HEAD + "1,2,3\n", "mixed units: the column is concentration_per_m3"),
        ("diameter_lower_cm,diameter_upper_cm,concentration_per_m3\n1,2,3\n", "unit 'cm' of diameter.*mm and um"),
        ("diameter_lower_mm,concentration_per_m3\n1,3\n", "diameter_upper_mm are needed"),
        ("diameter_lower_mm,diameter_upper_mm,number\n1,2,3\n", "one column of"),
        ("diameter_lower_mm,diameter_upper_mm,concentration_per_l\n1,2,3\n", "'concentration_per_l' is not known"),
        ("size,number\n1,2\n", "header 'size' is not known"),
        ("time,diameter_1-2_mm\n1,2\n", "say what the numbers are"),
        (WIDE + "time,diameter_1-2_mm\n1,2\n1,2\n", r"rain.csv:4: time '1' is there twice"),
        ("time," + HEAD + "a,1,2,3\nb,1,3,3\n", r"rain.csv:3: time 'b' has other bins"),
    ],
)
def test_faults(tmp_path, text, words):
    with pytest.raises(DataFileError, match=words):
        read_spectrum(write(tmp_path, text))


def test_missing_file(tmp_path):
    with pytest.raises(DataFileError, match="cannot be read"):
        read_spectrum(tmp_path / "none.csv")


@pytest.mark.parametrize(
    ("lower", "upper", "count", "words"),
    [
        ([], [], [], "at least one"),
        ([1.0], [2.0], [-1.0], "at least one"),
        ([2.0], [1.0], [1.0], "0 <= lower"),
        ([1.0, 1.5], [2.0, 3.0], [1.0, 1.0], "overlap"),
    ],
)
def test_spectrum_by_hand(lower, upper, count, words):
    with pytest.raises(DomainError, match=words):
        MeasuredSpectrum(np.array(lower), np.array(upper), np.array(count))
