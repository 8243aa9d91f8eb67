"""A sheet of paper to print: where the picture stands on it, and the words and the bar of scale below.

Lengths are those of A4; A3 and A2 are the same sheet √2 and 2 times as large, letters and margins with it, since a larger
sheet is read from farther away. Paper sizes: ISO 216.
"""

from __future__ import annotations

from bisect import bisect_right
from dataclasses import dataclass
from math import sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skyoptics.errors import DomainError, nearest
from skyoptics.figures.lettering import check_glyphs, font_file
from skyoptics.figures.palette import FAINT, INK

PAPERS = {"a4": (297.0, 210.0), "a3": (420.0, 297.0), "a2": (594.0, 420.0)}
"""Longer and shorter side [mm] (ISO 216)."""
DPI = 300
"""Dots an inch."""
MARGIN_MM = 12.0
"""Left, right, top and bottom, on A4; below the picture stands `FOOT_MM` more."""
TITLE_PT, CAPTION_PT, RIGHTS_PT = 14.0, 9.0, 7.5
"""Heights of an em on A4 [point]."""
CAPTION_LINES = 4
LEADING = 1.35
"""Distance of lines [em]."""
GAP_MM = 4.0
"""Between the picture and its words, on A4."""
NARROWEST = 0.6
"""Share of the paper's width between the margins that words take at least, however narrow the picture."""
PAPER = 255
_MM_PT = 25.4 / 72.0
FOOT_MM = GAP_MM + _MM_PT * LEADING * (TITLE_PT + 0.3 * CAPTION_PT + CAPTION_LINES * CAPTION_PT + RIGHTS_PT)
"""Height of gap, title, caption and licence on A4 [mm]."""

Sheet = NDArray[np.uint8]


@dataclass(frozen=True)
class Layout:
    """Where things stand on a sheet; all in pixels at `DPI` dots an inch.

    Parameters
    ----------
    paper : str
        Of `PAPERS`.
    shape : tuple of int
        Rows, columns of the sheet.
    top, left : int
        Corner of the picture.
    picture : tuple of int
        Rows, columns of the picture.
    words : tuple of int
        Left and right end of the lines of text.
    scale : float
        Times as large as on A4.
    """

    paper: str
    shape: tuple[int, int]
    top: int
    left: int
    picture: tuple[int, int]
    words: tuple[int, int]
    scale: float

    def points(self, size: float) -> float:
        """Return the height of letters that have `size` points on A4 [pixel]."""
        return size * self.scale * DPI / 72.0

    @property
    def rows(self) -> slice:
        """Rows of the picture."""
        return slice(self.top, self.top + self.picture[0])

    @property
    def columns(self) -> slice:
        """Columns of the picture."""
        return slice(self.left, self.left + self.picture[1])

    @property
    def picture_mm(self) -> tuple[float, float]:
        """Width and height of the picture on paper [mm]."""
        return self.picture[1] * 25.4 / DPI, self.picture[0] * 25.4 / DPI


@dataclass(frozen=True)
class Words:
    """What stands below a picture.

    Parameters
    ----------
    title : str
        Cut where it is too long.
    captions : tuple of str
        From long to short: the first that fits is set.
    rights : str
        Who made it, licence.
    bar : tuple of float and str, or None
        Length of a bar of scale [pixel] and what it stands for.
    """

    title: str = ""
    captions: tuple[str, ...] = ()
    rights: str = ""
    bar: tuple[float, str] | None = None


def layout(paper: str, columns: int, rows: int) -> Layout:
    """Return where a picture stands on a sheet.

    Parameters
    ----------
    paper : str
        Of `PAPERS`.
    columns, rows : int
        Of the picture as described; their ratio is kept to half a pixel.

    Returns
    -------
    Layout
        Upright or across, whichever makes the picture larger; across where both are alike.

    Raises
    ------
    DomainError
        For a paper that is not there, with the nearest name, and for a picture too narrow to be printed.
    """
    if paper not in PAPERS:
        raise DomainError(f"paper is {paper!r}, allowed are {', '.join(PAPERS)}{nearest(paper, PAPERS)}")
    long, short = PAPERS[paper]
    scale = long / PAPERS["a4"][0]
    fits = []
    for width, height in ((long, short), (short, long)):
        room = width - 2.0 * MARGIN_MM * scale, height - (2.0 * MARGIN_MM + FOOT_MM) * scale
        fits.append((min(_px(room[0]) / columns, _px(room[1]) / rows), width, height))
    zoom, width, height = max(fits, key=lambda fit: fit[0])
    picture = round(zoom * rows), round(zoom * columns)
    if min(picture) < 1:
        raise DomainError(
            f"a picture of {columns} x {rows} pixels is too narrow to be printed; change camera.width_px, camera.height_px"
        )
    shape = round(_px(height)), round(_px(width))
    # picture and words together stand in the middle between the margins
    room_below = shape[0] - 2.0 * _px(MARGIN_MM * scale) - _px(FOOT_MM * scale) - picture[0]
    top = round(_px(MARGIN_MM * scale) + 0.5 * max(room_below, 0.0))
    left = (shape[1] - picture[1]) // 2
    wide = max(picture[1], round(NARROWEST * (shape[1] - 2.0 * _px(MARGIN_MM * scale))))
    first = (shape[1] - wide) // 2
    return Layout(paper, shape, top, left, picture, (first, first + wide), sqrt(2.0) ** round(2.0 * np.log2(scale)))


def blank(place: Layout) -> Sheet:
    """Return white paper, shape (rows, columns, 3) of uint8, for the picture to be put at `place.rows`, `place.columns`."""
    return np.full((*place.shape, 3), PAPER, dtype=np.uint8)


def check_words(*texts: str | None) -> None:
    """Make sure that the font can write what will stand on the sheet.

    Raises
    ------
    DomainError
        Naming the characters that it lacks.
    """
    check_glyphs(*(text for text in texts if text))


def write(sheet: Sheet, place: Layout, words: Words) -> None:
    """Set title, caption, licence and bar of scale below the picture.

    Parameters
    ----------
    sheet : ndarray of uint8
        Changed in place, below the picture alone.
    place : Layout
        From `layout`.
    words : Words
        What to write.

    Raises
    ------
    DomainError
        For letters that the font has not.
    """
    from PIL import Image, ImageDraw

    check_words(words.title, words.rights, *words.captions[:1])
    first_row = place.top + place.picture[0]
    image: Any = Image.fromarray(sheet[first_row:])
    pen: Any = ImageDraw.Draw(image)
    left, right = place.words
    title, caption, small = (place.points(size) for size in (TITLE_PT, CAPTION_PT, RIGHTS_PT))
    bar_left = float(right)
    top = _px(GAP_MM * place.scale)
    if words.bar is not None:
        bar_left = _bar(pen, words.bar, right, top, place)
    line = " ".join(words.title.split())
    _line(pen, left, top, _cut(line, _font(title, "bold"), bar_left - left - title), _font(title, "bold"), title, INK)
    top += LEADING * title + 0.3 * LEADING * caption
    font = _font(caption)
    for line in _fitting(words.captions, font, right - left):
        _line(pen, left, top, line, font, caption, INK)
        top += LEADING * caption
    if words.rights:
        top += 0.15 * LEADING * caption
        _line(pen, left, top, _cut(words.rights, _font(small), right - left), _font(small), small, FAINT)
    sheet[first_row:] = np.asarray(image)


def _px(mm: float) -> float:
    return mm * DPI / 25.4


def _font(size: float, weight: str = "normal") -> Any:
    from PIL import ImageFont

    return ImageFont.truetype(str(font_file(weight)), size)


def _line(pen: Any, left: float, top: float, text: str, font: Any, size: float, colour: str) -> None:
    """Set one line, the top of its em given."""
    if text:
        pen.text((left, top + 0.93 * size), text, font=font, fill=colour, anchor="ls")


def _bar(pen: Any, bar: tuple[float, str], right: int, top: float, place: Layout) -> float:
    """Draw a bar of scale under the right end of the picture, its words to the left; return where they begin."""
    length, text = bar
    size = place.points(CAPTION_PT)
    thick = max(2, round(0.13 * size))
    middle, ends = round(top + 0.5 * place.points(TITLE_PT)), round(0.32 * size)
    begin = right - round(length)
    pen.rectangle((begin, middle - thick // 2, right - 1, middle - thick // 2 + thick - 1), fill=INK)
    for start in (begin, right - thick):
        pen.rectangle((start, middle - ends, start + thick - 1, middle + ends), fill=INK)
    font = _font(size)
    words = begin - 0.6 * size - font.getlength(text)
    pen.text((words, middle + 0.36 * size), text, font=font, fill=FAINT, anchor="ls")
    return float(words)


def _cut(text: str, font: Any, widest: float) -> str:
    """Return a text, or its beginning with an ellipsis."""
    if not text or font.getlength(text) <= widest:
        return text
    kept = bisect_right(range(1, len(text)), widest, key=lambda k: font.getlength(f"{text[:k].rstrip()}…"))
    return f"{text[:kept].rstrip()}…" if kept else ""


def _fitting(texts: tuple[str, ...], font: Any, widest: float) -> list[str]:
    """Return the lines of the first text that needs at most `CAPTION_LINES`; else of the last, cut."""
    lines: list[str] = []
    for text in texts:
        lines = _wrapped(text, font, widest)
        if len(lines) <= CAPTION_LINES:
            return lines
    rest = " ".join(lines[CAPTION_LINES - 1 : CAPTION_LINES + 1])
    return [*lines[: CAPTION_LINES - 1], _cut(rest, font, widest)] if lines else []


def _wrapped(text: str, font: Any, widest: float) -> list[str]:
    """Return a text broken into lines at its blanks."""
    lines: list[str] = []
    for word in text.split():
        longer = f"{lines[-1]} {word}" if lines else word
        if lines and font.getlength(longer) <= widest:
            lines[-1] = longer
        else:
            lines.append(_cut(word, font, widest))
    return lines
