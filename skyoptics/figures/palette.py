"""Colours of figures on white: eight for categories, a few for text and lines, and those of single wavelengths.

Any two of `CATEGORICAL` differ by CIEDE2000 13 or more, unsimulated and as seen with severity-1.0 protanopia,
deuteranopia or tritanopia (Machado, Oliveira & Fernandes, IEEE Trans. Vis. Comput. Graph. 15, 1291 (2009)); all have a
contrast of 3:1 to white at least, those of text 4.5:1 (W3C, WCAG 2.2, 1.4.11 and 1.4.3). Found by
``docs/tools/find_palette.py``.
"""

from __future__ import annotations

from functools import cache

import numpy as np

from skyoptics.units import NM, FloatArray

CATEGORICAL = ("#004499", "#aa3300", "#007744", "#8833ee", "#1199bb", "#aa8811", "#cc4488", "#111155")
"""Categories, in this order: blue, red, green, violet, cyan, ochre, pink, navy."""
INK = "#16324c"
"""Text and lines."""
FAINT = "#4c6174"
"""Text and lines of less weight; still a text colour."""
WARNING = "#a3230f"
"""Text that must not be missed."""
TEXT = (INK, FAINT, WARNING)
"""All colours that text is written in, beside those of `text_colour`."""
PALE_WATER = "#eef6fc"
"""Fill of a drop."""
STUB = "#a9b5c0"
"""Light that goes another way than the one followed; never text."""
PALE_ICE = "#dcebf7"
"""Fill of a crystal."""
GRID = "#cfd8e0"
"""Grid lines; never text."""

_AA, _LINES = 4.5, 3.0


def contrast(one: str, other: str = "#ffffff") -> float:
    """Return the contrast of two colours, 1 to 21 (W3C, WCAG 2.2, relative luminance and contrast ratio)."""
    from skyoptics.colour import display

    luminance = [float(display.decode(_rgb(word)) @ np.array([0.2126, 0.7152, 0.0722])) for word in (one, other)]
    return (max(luminance) + 0.05) / (min(luminance) + 0.05)


def text_colour(colour: str) -> str:
    """Return a colour, darkened as far as text on white needs (contrast 4.5:1)."""
    share = 1.0
    while contrast(word := _hex(_rgb(colour) * share)) < _AA:
        share -= 0.02
    return word


@cache
def wavelength_colour(wavelength_nm: float) -> str:
    """Return the colour of a line on white that stands for one wavelength: its own hue, dark enough to be seen.

    Colours of wavelengths are no categories: lines of several are told apart by labels too. Beyond the visible the ink.
    """
    from skyoptics.colour import display, gamut, observer
    from skyoptics.optics.bins import Bins

    xyz = observer.weights(Bins.lines([wavelength_nm * NM]))[0]
    if not xyz.max() > 0.0:
        return INK
    linear = gamut.to_gamut((0.25 * xyz / xyz.max())[np.newaxis] @ display.XYZ_TO_RGB.T)[0]
    rgb = np.clip(display.encode(linear / linear.max()), 0.0, 1.0)
    while contrast(_hex(rgb)) < _LINES:
        rgb = 0.98 * rgb
    return _hex(rgb)


def _rgb(word: str) -> FloatArray:
    return np.array([int(word[k : k + 2], 16) / 255.0 for k in (1, 3, 5)])


def _hex(rgb: FloatArray) -> str:
    return "#" + "".join(f"{round(255.0 * float(value)):02x}" for value in rgb)
