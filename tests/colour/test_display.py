import colour
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from skyoptics.colour import display, observer
from skyoptics.colour.display import adaptation, linear_rgb
from skyoptics.errors import DomainError
from skyoptics.optics.bins import Bins

# Sharma, Wu & Dalal, Color Res. Appl. 30, 21 (2005), doi 10.1002/col.20070, Table 1.
BLUE, RED = (50.0, 0.0, -82.7485), (50.0, 2.5, 0.0)
CIEDE2000 = [
    (BLUE, (50, 2.6772, -79.7751), 2.0425),
    (BLUE, (50, 3.1571, -77.2803), 2.8615),
    (BLUE, (50, 2.8361, -74.0200), 3.4412),
    (BLUE, (50, -1.3802, -84.2814), 1.0000),
    (BLUE, (50, -1.1848, -84.8006), 1.0000),
    (BLUE, (50, -0.9009, -85.5211), 1.0000),
    ((50, 0, 0), (50, -1, 2), 2.3669),
    ((50, -1, 2), (50, 0, 0), 2.3669),
    ((50, 2.49, -0.001), (50, -2.49, 0.0009), 7.1792),
    ((50, 2.49, -0.001), (50, -2.49, 0.0010), 7.1792),
    ((50, 2.49, -0.001), (50, -2.49, 0.0011), 7.2195),
    ((50, 2.49, -0.001), (50, -2.49, 0.0012), 7.2195),
    ((50, -0.001, 2.49), (50, 0.0009, -2.49), 4.8045),
    ((50, -0.001, 2.49), (50, 0.0010, -2.49), 4.8045),
    ((50, -0.001, 2.49), (50, 0.0011, -2.49), 4.7461),
    (RED, (50, 0, -2.5), 4.3065),
    (RED, (73, 25, -18), 27.1492),
    (RED, (61, -5, 29), 22.8977),
    (RED, (56, -27, -3), 31.9030),
    (RED, (58, 24, 15), 19.4535),
    (RED, (50, 3.1736, 0.5854), 1.0000),
    (RED, (50, 3.2972, 0), 1.0000),
    (RED, (50, 1.8634, 0.5757), 1.0000),
    (RED, (50, 3.2592, 0.3350), 1.0000),
    ((60.2574, -34.0099, 36.2677), (60.4626, -34.1751, 39.4387), 1.2644),
    ((63.0109, -31.0961, -5.8663), (62.8187, -29.7946, -4.0864), 1.2630),
    ((61.2901, 3.7196, -5.3901), (61.4292, 2.2480, -4.9620), 1.8731),
    ((35.0831, -44.1164, 3.7933), (35.0232, -40.0716, 1.5901), 1.8645),
    ((22.7233, 20.0904, -46.6940), (23.0331, 14.9730, -42.5619), 2.0373),
    ((36.4612, 47.8580, 18.3852), (36.2715, 50.5065, 21.2231), 1.4146),
    ((90.8027, -2.0831, 1.4410), (91.1528, -1.6435, 0.0447), 1.4441),
    ((90.9257, -0.5406, -0.9208), (88.6381, -0.8985, -0.7239), 1.5381),
    ((6.7747, -0.2908, -2.4247), (5.8714, -0.0985, -2.2286), 0.6377),
    ((2.0776, 0.0795, -1.1350), (0.9033, -0.0636, -0.5514), 0.9082),
]
# Linear sRGB of monochromatic colour matching functions, derived from CIE 15 and the exact inverse of IEC 61966-2-1.
MONOCHROMATIC = {
    450: (0.1475, -0.1809, 1.8841),
    500: (-0.6163, 0.6124, 0.2219),
    550: (-0.1292, 1.4467, -0.1696),
    600: (2.4718, 0.1545, -0.0687),
    650: (0.7542, -0.0740, -0.0060),
}


@pytest.mark.parametrize(("first", "second", "expected"), CIEDE2000)
def test_the_colour_difference_used_as_oracle_is_ciede2000(first, second, expected):
    difference = colour.delta_E(np.array(first, float), np.array(second, float), method="CIE 2000")
    assert difference == pytest.approx(expected, abs=1e-4)


def test_matrices_are_those_of_iec_61966_2_1():
    printed = [[3.2406, -1.5372, -0.4986], [-0.9689, 1.8758, 0.0415], [0.0557, -0.2040, 1.0570]]
    exact = [
        [3.2406255, -1.5372080, -0.4986286],
        [-0.9689307, 1.8757561, 0.0415175],
        [0.0557101, -0.2040211, 1.0569959],
    ]
    np.testing.assert_allclose(display.XYZ_TO_RGB, printed, rtol=0, atol=1e-4)
    np.testing.assert_allclose(display.XYZ_TO_RGB, exact, rtol=0, atol=1e-7)
    np.testing.assert_allclose(display.RGB_TO_XYZ @ printed, np.eye(3), rtol=0, atol=1e-4)


def test_primaries_and_white_are_those_of_iec_61966_2_1():
    corners = np.array([[1.0, 0, 0], [0, 1, 0], [0, 0, 1], [1, 1, 1]]) @ display.RGB_TO_XYZ.T
    chromaticity = corners[:, :2] / corners.sum(axis=1, keepdims=True)
    expected = [[0.64, 0.33], [0.30, 0.60], [0.15, 0.06], [0.3127, 0.3290]]
    np.testing.assert_allclose(chromaticity, expected, rtol=0, atol=1e-4)  # the matrix is printed to four digits


@pytest.mark.parametrize(("wavelength_nm", "expected"), MONOCHROMATIC.items())
def test_monochromatic_colours(wavelength_nm, expected):
    xyz = observer.weights(Bins.lines([wavelength_nm * 1e-9]))[0] / observer.LUMINOUS_EFFICACY
    np.testing.assert_allclose(display.linear_rgb(xyz), expected, rtol=0, atol=1e-4)


@pytest.mark.parametrize(
    ("linear", "encoded"), [(0.0, 0.0), (0.0031308, 0.040450), (0.18, 0.461356), (0.5, 0.735357), (1.0, 1.0)]
)
def test_transfer_curve_of_iec_61966_2_1(linear, encoded):
    assert display.encode(linear) == pytest.approx(encoded, abs=1e-6)
    assert display.decode(0.5) == pytest.approx(0.2140411, abs=1e-6)


@given(st.floats(-0.5, 4.0))
def test_decode_undoes_encode(value):
    # The two printed thresholds differ by 6e-8.
    assert display.decode(display.encode(value)) == pytest.approx(value, abs=1e-7)


def test_random_spectra_in_gamut_agree_with_colour_science():
    rng = np.random.default_rng(11)
    wavelength_nm = np.arange(360.0, 831.0)
    place = wavelength_nm[None] - rng.uniform(400, 700, (300, 1))
    spectra = rng.uniform(0, 1, (300, 1)) + rng.uniform(0, 1, (300, 1)) * np.exp(
        -0.5 * (place / rng.uniform(20, 120, (300, 1))) ** 2
    )
    bins = Bins.lines(wavelength_nm * 1e-9)
    xyz = observer.xyz(spectra, bins)
    xyz *= rng.uniform(0.05, 0.95, (300, 1)) / xyz[:, 1:2]
    expected_xyz = np.stack(
        [
            colour.sd_to_XYZ(
                colour.SpectralDistribution(row, wavelength_nm),
                colour.MSDS_CMFS["CIE 1931 2 Degree Standard Observer"],
                method="Integration",
            )
            for row in spectra
        ]
    )
    expected_xyz *= xyz[:, 1:2] / expected_xyz[:, 1:2]
    linear = display.linear_rgb(xyz)
    inside = ((linear >= 0.0) & (linear <= 1.0)).all(axis=1)
    assert inside.sum() > 100
    ours = colour.XYZ_to_Lab(colour.sRGB_to_XYZ(display.encode(linear[inside])))
    theirs = colour.XYZ_to_Lab(colour.sRGB_to_XYZ(colour.XYZ_to_sRGB(expected_xyz[inside])))
    assert colour.delta_E(ours, theirs, method="CIE 2000").max() < 0.1


def test_exposure_follows_iso_2720():
    # "Sunny 16" is EV 15 at ISO 100 (common practice, no source); ISO 2720 with K = 12.5 puts 4096 cd m⁻² there.
    assert 4096.0 * display.exposure_scale(15.0) == pytest.approx(0.18)


@given(st.floats(-10.0, 20.0))
def test_one_exposure_value_more_halves_the_light(exposure_ev):
    ratio = display.exposure_scale(exposure_ev + 1.0) / display.exposure_scale(exposure_ev)
    assert ratio == pytest.approx(0.5, rel=1e-12)


def sky(rng, size=(120, 160), luminance=5000.0):
    return luminance * (1.0 + 0.3 * rng.uniform(-1, 1, size))


def test_automatic_exposure_puts_an_even_sky_half_a_stop_above_middle_grey():
    exposure = display.automatic_exposure(np.full((50, 60), 5000.0))
    assert 5000.0 * display.exposure_scale(exposure) == pytest.approx(0.26, rel=0.04)  # 0.05 EV of rounding
    assert exposure == round(exposure, 1)


def test_automatic_exposure_leaves_out_what_does_not_belong_to_the_scene():
    picture = sky(np.random.default_rng(1))
    plain = display.automatic_exposure(picture)
    with_sun = picture.copy()
    with_sun[20:24, 30:34] = 1.6e9  # 16 of 19200 pixels
    assert display.automatic_exposure(with_sun) == pytest.approx(plain, abs=0.11)
    fisheye = np.full((200, 200), np.nan)
    fisheye[:120, :160] = picture
    assert display.automatic_exposure(fisheye) == plain
    with_ground = np.concatenate([picture, np.zeros_like(picture), np.full((50, 160), 0.01)])
    assert display.automatic_exposure(with_ground) == pytest.approx(plain, abs=0.11)
    broken = np.concatenate([picture.ravel(), [np.inf, -np.inf, -4.0, np.nan]])
    assert display.automatic_exposure(broken) == plain
    few = np.full(100, 3000.0)
    few[7] = 1e8
    assert display.automatic_exposure(few) == display.automatic_exposure(np.full(100, 3000.0))


def test_automatic_exposure_keeps_a_bow_on_a_dark_sky_below_white():
    angle = np.linspace(35.0, 50.0, 600)
    picture = np.broadcast_to(20.0 + 4000.0 * np.exp(-((angle - 42.0) ** 2)), (100, 600))
    shown = picture * display.exposure_scale(display.automatic_exposure(picture))
    assert 0.6 < shown.max() < 0.8


def test_a_picture_without_light_has_an_exposure():
    for empty in (np.zeros((4, 4)), np.full((4, 4), np.nan), np.empty(0), np.full(3, -1.0)):
        assert display.automatic_exposure(empty) == 15.0


@given(st.floats(0.0, 5.0), st.floats(0.1, 1e6))
def test_automatic_exposure_follows_the_light(contrast, factor):
    angle = np.linspace(-3.0, 3.0, 501)
    picture = 1.0 + contrast * np.exp(-(angle**2))
    shift = display.automatic_exposure(factor * picture) - display.automatic_exposure(picture)
    assert shift == pytest.approx(np.log2(factor), abs=0.11)


@given(st.floats(-1.0, display.SHOULDER_START))
def test_roll_off_leaves_the_straight_part_alone(value):
    assert display.roll_off(value) == value


@given(st.floats(0.0, 1e12), st.floats(0.0, 1e12))
def test_roll_off_rises_and_stays_under_white(first, second):
    low, high = sorted((first, second))
    bent_low, bent_high = float(display.roll_off(low)), float(display.roll_off(high))
    assert bent_low <= bent_high + 2e-16
    assert bent_high <= min(1.0, high)


def test_roll_off_has_no_edge_and_reaches_white():
    start, h = display.SHOULDER_START, 1e-4
    value = start + h * np.arange(-5, 6)
    slope = np.diff(display.roll_off(value)) / h
    curvature = np.diff(slope) / h
    np.testing.assert_allclose(slope, 1.0, atol=1e-5)
    assert np.abs(curvature).max() < 0.02  # a shoulder of first order only (1 − e⁻ᵘ) has −2.5 here
    assert display.roll_off(1e9) == pytest.approx(1.0, abs=1e-12)
    assert display.roll_off(np.inf) == 1.0
    assert np.diff(display.roll_off(np.linspace(0.0, 50.0, 5001))).min() > 0.0


@given(st.lists(st.floats(-2.0, 50.0), min_size=3, max_size=3))
def test_highlights_keep_their_chromaticity(components):
    linear = np.array([components])
    bent = display.bend_highlights(linear)
    assert bent.max() <= 1.0 + 1e-12
    level = max(linear.max(), (linear @ display.RGB_TO_XYZ[1])[0])
    if level <= display.SHOULDER_START:
        assert np.array_equal(bent, linear)
    else:
        factor = display.roll_off(level) / level
        np.testing.assert_allclose(bent, linear * factor, rtol=1e-12, atol=1e-300)


def test_what_is_far_over_exposed_is_white():
    orange = np.array([1.0, 0.6, 0.2])
    levels = np.geomspace(1.0, 1e6, 200)
    bent = display.bend_highlights(levels[:, None] * orange)
    assert np.all(np.diff(bent[:, 2]) > -1e-12)  # grows paler, never darker
    assert np.all(np.diff(bent, axis=0) < 0.05)  # without a step
    np.testing.assert_allclose(bent[levels >= display.BLEACH_TO], 1.0, atol=1e-6)


def test_grey_highlights_follow_the_shoulder():
    grey = np.linspace(0.0, 5.0, 101)
    bent = display.bend_highlights(np.repeat(grey[:, None], 3, axis=1))
    np.testing.assert_allclose(bent[:, 1], display.roll_off(grey), rtol=1e-12)


def test_bradford_between_d65_and_d50():
    """D65 to D50 as commonly printed (Lam 1985; ICC.1 profiles hold the matrix to four digits)."""
    d65, d50 = (0.95047, 1.0, 1.08883), (0.96422, 1.0, 0.82521)
    printed = [
        [1.0478112, 0.0228866, -0.0501270],
        [0.0295424, 0.9904844, -0.0170491],
        [-0.0092345, 0.0150436, 0.7521316],
    ]
    assert adaptation(d65, d50) == pytest.approx(np.array(printed), abs=1e-6)


def test_a_white_becomes_the_displays():
    warm = np.array([1.1, 1.0, 0.6]) * 300.0
    assert linear_rgb(adaptation(warm) @ warm) == pytest.approx(300.0, rel=1e-9)
    with pytest.raises(DomainError, match="white"):
        adaptation([0.0, 0.0, 0.0])
