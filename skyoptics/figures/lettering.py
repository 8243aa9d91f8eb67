"""Letters of figures: their size, their colours, how wide a line of text is."""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Callable
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np

from skyoptics.errors import DomainError

FONT = "DejaVu Sans"
"""It comes with the drawing library, licence and all, so that every machine draws alike."""
INK = "#ffffff"
"""Colour of text and lines."""
CASING = "#0a0d14"
"""Colour of what surrounds them: against it the ink has a contrast above 4.5 (W3C, WCAG 2.2, 1.4.3) on any picture."""
SMALLEST_TEXT = 11.0
"""Height of an em [pixel]."""
TEXT_SHARE = 0.014
"""Height of an em, as a share of the picture's side (of a square of the same area)."""
LINE = 1.25
"""Distance of lines of text [em]."""

Box = tuple[float, float, float, float]
"""Left, top, right, bottom [pixel]."""
Point = tuple[float, float]
Measure = Callable[[str], float]


def text_size(shape: tuple[int, int]) -> float:
    """Return the height of an em for a picture of that many rows and columns [pixel]."""
    return max(SMALLEST_TEXT, TEXT_SHARE * float(np.sqrt(shape[0] * shape[1])))


def font_of(size: float, weight: str = "normal") -> Any:
    """Return the font, `FONT`.

    Raises
    ------
    DomainError
        Where the drawing library has lost it.
    """
    from matplotlib.font_manager import FontProperties

    font_file(weight)
    return FontProperties(family=FONT, size=size, weight=weight)


@cache
def font_file(weight: str = "normal") -> Path:
    """Return the file of the font.

    Raises
    ------
    DomainError
        Where there is none.
    """
    from matplotlib.font_manager import FontProperties, findfont

    try:
        return Path(findfont(FontProperties(family=FONT, weight=weight), fallback_to_default=False))
    except ValueError as error:
        raise DomainError(
            f"the font {FONT} ({weight}) is not there: it comes with matplotlib, in its folder mpl-data/fonts/ttf; "
            "install matplotlib anew"
        ) from error


def missing_glyphs(text: str, weight: str = "normal") -> str:
    """Return the characters of a text that the font has no letter for, each once."""
    there = _characters(weight)
    return "".join(dict.fromkeys(c for c in text if ord(c) not in there and not c.isspace()))


def check_glyphs(*texts: str) -> None:
    """Make sure that the font can write texts.

    Raises
    ------
    DomainError
        Naming the characters it lacks, the text and the font.
    """
    for text in texts:
        if lacking := missing_glyphs(text, "bold") or missing_glyphs(text):
            raise DomainError(
                f"the font {FONT} has no letters for {lacking[:20]!r} in {text[:60]!r}; write it in Latin, Greek or "
                "Cyrillic letters"
            )


@cache
def _characters(weight: str) -> frozenset[int]:
    """Return the code points of the font."""
    from matplotlib.ft2font import FT2Font

    return frozenset(FT2Font(str(font_file(weight))).get_charmap())


def drawn_width(size: float, weight: str = "normal") -> Measure:
    """Return a function that measures a line of text."""
    from matplotlib.textpath import text_to_path

    font = font_of(size, weight)
    return lambda text: float(text_to_path.get_text_width_height_descent(text, font, False)[0]) if text else 0.0


def cut(text: str, measure: Measure, widest: float) -> str:
    """Return a text, or its beginning with an ellipsis; empty where not even that fits."""
    if measure(text) <= widest:
        return text
    kept = bisect_right(range(1, len(text)), widest, key=lambda k: measure(text[:k] + "…"))
    return f"{text[:kept].rstrip()}…" if kept else ""


def meets(one: Box, other: Box) -> bool:
    """Return whether two boxes overlap or touch."""
    return one[0] <= other[2] and other[0] <= one[2] and one[1] <= other[3] and other[1] <= one[3]
