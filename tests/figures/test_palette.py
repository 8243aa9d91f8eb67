"""Colours of figures: told apart by all eyes, text legible."""

import itertools
import warnings

import numpy as np
import pytest

from skyoptics.figures import palette

KINDS = (None, "Protanomaly", "Deuteranomaly", "Tritanomaly")


def rgb(word):
    return np.array([int(word[k : k + 2], 16) / 255.0 for k in (1, 3, 5)])


def linear(word):
    # sRGB, IEC 61966-2-1:1999
    value = rgb(word)
    return np.where(value <= 0.04045, value / 12.92, ((value + 0.055) / 1.055) ** 2.4)


def ratio(one, other="#ffffff"):
    """Contrast ratio of WCAG 2.2 (W3C Recommendation 2023, definitions of relative luminance and contrast ratio)."""
    low, high = sorted(float(linear(word) @ [0.2126, 0.7152, 0.0722]) for word in (one, other))
    return (high + 0.05) / (low + 0.05)


@pytest.mark.parametrize("kind", KINDS)
def test_any_two_categories_differ_for_all_eyes(kind):
    """CIEDE2000 (CIE 142-2001) at least 10 under severity-1.0 Machado, Oliveira & Fernandes, IEEE TVCG 15, 1291 (2009)."""
    import colour

    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # the library says that its tritanomaly is an approximation
        matrix = np.eye(3) if kind is None else colour.matrix_cvd_Machado2009(kind, 1.0)
        lab = [
            colour.XYZ_to_Lab(colour.RGB_to_XYZ(np.clip(matrix @ linear(word), 0.0, 1.0), "sRGB"))
            for word in palette.CATEGORICAL
        ]
        least = min(colour.delta_E(a, b, method="CIE 2000") for a, b in itertools.combinations(lab, 2))
    assert least >= 10.0


def test_there_are_eight_at_most():
    assert len(set(palette.CATEGORICAL)) == len(palette.CATEGORICAL) <= 8


def test_lines_and_texts_stand_out_from_the_paper():
    """WCAG 2.2: 1.4.11 asks 3:1 of graphics, 1.4.3 asks 4.5:1 of text."""
    assert all(ratio(colour) >= 3.0 for colour in palette.CATEGORICAL)
    assert all(ratio(colour) >= 4.5 for colour in palette.TEXT)
    fills = (palette.PALE_WATER, palette.PALE_ICE)
    assert all(ratio(colour, fill) >= 4.5 for colour in palette.TEXT for fill in fills)
    assert all(ratio(palette.text_colour(colour)) >= 4.5 for colour in (*palette.CATEGORICAL, "#ffee00"))


def test_contrast_is_that_of_the_guidelines():
    assert palette.contrast("#000000") == pytest.approx(21.0)  # WCAG 2.2: "contrast ratios can range from 1 to 21"
    for word in ("#777777", "#0055bb"):
        assert palette.contrast(word) == pytest.approx(ratio(word), rel=1e-6)


def test_wavelengths_have_their_hue():
    for wavelength, channel in ((640.0, 0), (530.0, 1), (460.0, 2)):
        word = palette.wavelength_colour(wavelength)
        assert rgb(word).argmax() == channel
        assert ratio(word) >= 3.0
    assert palette.wavelength_colour(1000.0) == palette.INK
