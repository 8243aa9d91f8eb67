import time

import colour
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skyoptics.colour import display, gamut, observer
from skyoptics.optics.bins import Bins

WHITE = np.array([0.9505, 1.0, 1.0890])  # XYZ of the display's white, IEC 61966-2-1


def hue_difference_deg(first, second):
    return np.degrees(np.abs((first - second + np.pi) % (2.0 * np.pi) - np.pi))


def spectral_sweep(count, mix, scale):
    """Linear sRGB of monochromatic light of equal power, 380–720 nm, over `mix` of white."""
    light = observer.weights(Bins.lines(np.linspace(380e-9, 720e-9, count)))
    return display.bend_highlights(display.linear_rgb(scale * (light / light[:, 1].max() + mix * WHITE) / (1.0 + mix)))


def bow(count, background):
    """Linear sRGB across a bow: red to violet over 1.8°, each wavelength smeared over a quarter degree."""
    wavelength_nm = np.linspace(380.0, 720.0, 341)
    angle = np.interp(wavelength_nm, [400.0, 700.0], [40.6, 42.4]) - np.linspace(38.0, 44.0, count)[:, None]
    profile = np.exp(-0.5 * (angle / 0.25) ** 2) + 0.18 / (1.0 + np.exp(-angle / 0.25)) + background
    xyz = observer.xyz(profile, Bins.lines(wavelength_nm * 1e-9))
    return display.bend_highlights(display.linear_rgb(0.7 * xyz / xyz[:, 1].max()))


@pytest.mark.parametrize(
    ("xyz", "expected"),
    [
        ((0.950, 1.0, 1.089), (1.0, 0.0, 0.0)),
        ((1.0, 0.0, 0.0), (0.450, 1.236, -0.019)),
        ((0.0, 1.0, 0.0), (0.922, -0.671, 0.263)),
        ((0.0, 0.0, 1.0), (0.153, -1.415, -0.449)),
    ],
)
def test_oklab_of_ottosson_2020(xyz, expected):
    # Table "XYZ to Oklab" of the article (from memory); its XYZ matrix is rounded, hence 2e-3.
    np.testing.assert_allclose(gamut.oklab(display.linear_rgb(np.array(xyz))), expected, rtol=0, atol=2e-3)


def test_oklab_agrees_with_colour_science():
    linear = np.random.default_rng(5).uniform(-0.2, 1.2, (1000, 3))
    expected = colour.XYZ_to_Oklab(linear @ display.RGB_TO_XYZ.T)
    np.testing.assert_allclose(gamut.oklab(linear), expected, rtol=0, atol=2e-3)
    np.testing.assert_allclose(gamut.from_oklab(gamut.oklab(linear)), linear, rtol=0, atol=1e-12)


@pytest.mark.parametrize("dtype", [np.float32, np.float64])
def test_colours_inside_stay_bit_for_bit(dtype):
    rng = np.random.default_rng(2)
    inside = rng.uniform(0.0, 1.0, (40, 50, 3)).astype(dtype)
    inside[:8, 0] = [[r, g, b] for r in (0, 1) for g in (0, 1) for b in (0, 1)]
    mixed = np.concatenate([inside, rng.uniform(1.1, 2.0, (40, 50, 3)).astype(dtype)])
    before = mixed.copy()
    result = gamut.to_gamut(mixed)
    assert result.dtype == dtype
    assert np.array_equal(result[:40], inside)
    assert np.array_equal(mixed, before)


@settings(max_examples=300)
@given(st.lists(st.floats(-1.5, 2.5), min_size=3, max_size=3))
def test_hue_and_lightness_stay(components):
    linear = np.array(components)
    result = gamut.to_gamut(linear)
    assert result.min() >= 0.0
    assert result.max() <= 1.0
    before, after = gamut.oklch(linear), gamut.oklch(result)
    if before[0] >= 1.0:
        assert np.array_equal(result, [1.0, 1.0, 1.0])
    elif before[0] <= 0.0:
        assert np.array_equal(result, [0.0, 0.0, 0.0])
    else:
        assert after[0] == pytest.approx(before[0], abs=1e-6)
        assert after[1] <= before[1] + 1e-7
        if after[1] > 1e-2:
            assert hue_difference_deg(after[2], before[2]) < 1e-3
    assert np.array_equal(gamut.to_gamut(result), result)


def test_colours_outside_end_on_the_surface_of_the_cube():
    linear = np.random.default_rng(8).uniform(-1.5, 2.5, (20_000, 3))
    outside = gamut.out_of_gamut(linear)
    result = gamut.to_gamut(linear)[outside]
    distance = np.minimum(result, 1.0 - result).min(axis=1)
    assert outside.sum() > 10_000
    assert distance.max() < 1e-4


def test_the_fold_at_blue_is_where_the_module_says():
    chroma = np.linspace(0.0, 0.34, 1701)
    folded = []
    for hue_deg in np.concatenate([np.arange(0.0, 360.0, 2.0), np.arange(263.5, 265.0, 0.02)]):
        a, b = chroma * np.cos(np.radians(hue_deg)), chroma * np.sin(np.radians(hue_deg))
        for lightness in np.linspace(0.05, 0.95, 19):
            rgb = gamut.from_oklab(np.stack([np.full_like(a, lightness), a, b], axis=-1))
            beyond = np.maximum(-rgb.min(axis=-1), rgb.max(axis=-1) - 1.0)
            inside = beyond <= 1e-12
            first, last = int(inside.argmin()), int(len(inside) - 1 - inside[::-1].argmax())
            if first < last:
                folded.append((hue_deg, lightness, beyond[first:last].max()))
    hue, lightness, depth = np.array(folded).T
    assert hue.min() > 264.0
    assert hue.max() < 264.25
    assert lightness.max() < 0.47
    assert depth.max() < 7e-4


@pytest.mark.parametrize("mix", [0.0, 0.05, 0.2, 0.5, 1.0, 3.0])
@pytest.mark.parametrize("scale", [0.1, 0.4, 1.0])
def test_hues_of_a_spectrum_keep_their_order(mix, scale):
    linear = spectral_sweep(681, mix, scale)
    result = gamut.to_gamut(linear)
    before, after = gamut.oklch(linear), gamut.oklch(result)
    np.testing.assert_allclose(after[:, 0], before[:, 0], rtol=0, atol=1e-6)  # so no band in lightness
    coloured = after[:, 1] > 1e-2
    assert hue_difference_deg(after[:, 2], before[:, 2])[coloured].max() < 1e-3
    # From deep blue to red, where hue runs one way before the step, it does after it.
    middle = coloured & (np.linspace(380, 720, 681) > 470) & (np.linspace(380, 720, 681) < 620)
    turn = np.diff(np.unwrap(after[middle, 2]))
    if mix <= 0.2:
        assert turn.max() < 1e-5


@pytest.mark.parametrize("mix", [0.2, 0.5, 1.0, 3.0])
@pytest.mark.parametrize("scale", [0.1, 0.4, 1.0])
def test_a_spectrum_over_white_shows_no_steps(mix, scale):
    # A step would keep its height when the sweep is sampled twice as finely; a slope halves. Measured in Oklab, whose
    # distances are nearly those of the eye.
    coarse, fine = (
        np.linalg.norm(np.diff(gamut.oklab(gamut.to_gamut(spectral_sweep(count, mix, scale))), axis=0), axis=1).max()
        for count in (1701, 3401)
    )
    assert fine < 0.6 * coarse
    assert coarse < 0.01


@pytest.mark.parametrize("background", [0.0, 0.02, 0.1, 0.5])
def test_a_bow_shows_no_bands(background):
    # Band = bend of the encoded values from pixel to pixel. The gamut step may bend no more than the transfer curve
    # itself does where a channel leaves 0, which it does on the same picture merely clipped.
    linear = bow(900, background)
    fitted = display.encode(gamut.to_gamut(linear))
    clipped = display.encode(np.clip(linear, 0.0, 1.0))
    bend = np.abs(np.diff(fitted, 2, axis=0)).max()
    assert bend <= 1.05 * np.abs(np.diff(clipped, 2, axis=0)).max()
    if background >= 0.1:
        assert bend < 0.005
    elif background == 0.0:
        assert gamut.out_of_gamut(linear).mean() > 0.3  # the test reaches what it is about


def test_what_is_no_colour_has_an_answer():
    odd = np.array(
        [
            [np.nan, 0.5, 0.5],
            [-1.0, -1.0, -1.0],
            [-0.5, -0.1, 0.2],
            [np.inf, np.inf, np.inf],
            [9.0, 3.0, 2.0],
            [np.inf, 0, -np.inf],
        ]
    )
    result = gamut.to_gamut(odd)
    assert np.array_equal(result[0], [0, 0, 0])
    assert np.array_equal(result[1], [0, 0, 0])
    assert np.array_equal(result[4], [1, 1, 1])
    assert np.isfinite(result).all()
    assert result.min() >= 0.0
    assert result.max() <= 1.0
    assert gamut.to_gamut(np.empty((0, 3))).shape == (0, 3)


def test_three_hundred_thousand_saturated_pixels_take_little_time():
    linear = np.random.default_rng(4).uniform(-0.5, 1.5, (300_000, 3))
    start = time.process_time()
    gamut.to_gamut(linear)
    assert time.process_time() - start < 1.5  # 0.2 s measured
