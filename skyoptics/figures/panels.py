"""A comparison sheet: pictures side by side on white paper, a caption under each, horizons of a row at one level."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import ceil, log
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skyoptics.errors import DomainError
from skyoptics.figures.lettering import LINE, check_glyphs, cut, drawn_width, font_file
from skyoptics.figures.palette import FAINT, INK

PAPER = "#ffffff"
SHAPE = 1.5
"""Width ÷ height that a sheet comes near to."""
LETTERS = 1.0 / 55.0
"""Height of an em as a share of a sheet's longer side: on a wall a metre wide, 18 mm, read from 5 m."""
SMALLEST = 13.0
"""Height of an em [pixel], however small the sheet."""
MOST_SHIFT = 0.4
"""Share of a picture's height by which it is moved up or down at most, to bring its horizon level."""


@dataclass(frozen=True, eq=False)
class Panel:
    """One picture of a sheet.

    Parameters
    ----------
    rgb : ndarray of uint8, shape (ny, nx, 3)
        sRGB; all of a sheet have one size.
    caption : str
        Set under it.
    horizon : float or None
        Row of the horizon in the middle of the picture [pixel]; None where there is none.
    scale : tuple of float and str, or None
        Length of a bar [pixel] and what it stands for, drawn under the right end.
    """

    rgb: NDArray[np.uint8]
    caption: str
    horizon: float | None = None
    scale: tuple[float, str] | None = None


def columns_of(count: int, shape: tuple[int, int], strip: float = 0.0) -> int:
    """Return the columns of a sheet: near the shape of a page, with few empty places.

    Parameters
    ----------
    count : int
        Panels.
    shape : tuple of int
        Rows and columns of one [pixel].
    strip : float
        Height of what stands under each [pixel].
    """

    def fault(columns: int) -> float:
        rows = ceil(count / columns)
        shape_of_sheet = columns * shape[1] / (rows * (shape[0] + strip))
        return abs(log(shape_of_sheet / SHAPE)) + 0.35 * (rows * columns - count)

    return min(range(1, count + 1), key=fault)


def compose(panels: Sequence[Panel], title: str = "", note: str = "") -> NDArray[np.uint8]:
    """Return a sheet.

    Parameters
    ----------
    panels : sequence of Panel
        At least one, in reading order.
    title : str, optional
        Set above, in as many lines as it needs up to two.
    note : str, optional
        Set below in smaller letters.

    Returns
    -------
    ndarray of uint8, shape (rows, columns, 3)
        sRGB; the pictures pixel by pixel as they came.

    Raises
    ------
    DomainError
        Without panels, for panels of several sizes, and for texts that the font has no letters for.
    """
    if not panels:
        raise DomainError("a sheet needs one panel at least")
    ny, nx = panels[0].rgb.shape[:2]
    if any(panel.rgb.shape != (ny, nx, 3) for panel in panels):
        raise DomainError("panels of several sizes cannot stand on one sheet")
    check_glyphs(title, note, *(panel.caption for panel in panels))
    columns = columns_of(len(panels), (ny, nx), 0.12 * ny)
    rows = ceil(len(panels) / columns)
    em = max(SMALLEST, LETTERS * max(columns * nx, rows * ny))
    gap, strip = round(1.1 * em), round(2.1 * em)
    shifts, heights = _levels(panels, columns, ny)
    width = columns * nx + (columns + 1) * gap
    lines = _wrapped(title, drawn_width(1.35 * em, "bold"), width - 2 * gap)
    head = round(gap + len(lines) * LINE * 1.35 * em + (0.5 * em if lines else 0.0))
    foot = round((1.6 * em if note else 0.0) + 0.4 * gap)
    sheet = _Paper(head + sum(heights) + rows * strip + foot, width)
    for number, line in enumerate(lines):
        sheet.text(gap, gap + number * LINE * 1.35 * em, line, 1.35 * em, INK, bold=True)
    top = head
    for row in range(rows):
        for place, panel in enumerate(panels[row * columns : (row + 1) * columns]):
            left = gap + place * (nx + gap)
            sheet.picture(top + shifts[row * columns + place], left, panel.rgb)
            _under(sheet, panel, top + heights[row] + 0.3 * em, left, nx, em)
        top += heights[row] + strip
    if note:
        words = cut(note, drawn_width(0.8 * em), width - 2 * gap)
        sheet.text(gap, top + 0.1 * em, words, 0.8 * em, FAINT)
    return sheet.taken()


def _levels(panels: Sequence[Panel], columns: int, height: int) -> tuple[list[int], list[int]]:
    """Return by how much each panel is moved down, and the height of each row, so that horizons of a row are level."""
    shifts, heights = [], []
    for start in range(0, len(panels), columns):
        row = [panel.horizon for panel in panels[start : start + columns]]
        there = [level for level in row if level is not None]
        own = [0] * len(row)
        if there and max(there) - min(there) <= MOST_SHIFT * height:
            own = [0 if level is None else round(max(there) - level) for level in row]
        shifts += own
        heights.append(height + max(own))
    return shifts, heights


def _under(sheet: _Paper, panel: Panel, top: float, left: float, width: float, em: float) -> None:
    """Set what stands under a panel: its caption, and a bar of scale at the right end."""
    room = width
    if panel.scale is not None:
        length, words = panel.scale
        letters = drawn_width(0.8 * em)(words)
        taken = length + letters + 0.5 * em
        if taken < 0.6 * width:
            right, middle = left + width - max(1, round(0.09 * em)), top + 0.62 * em
            sheet.bar(right - length, right, middle, em)
            sheet.text(right - length - letters - 0.5 * em, top + 0.12 * em, words, 0.8 * em, FAINT)
            room -= taken + em
    sheet.text(left, top, cut(panel.caption, drawn_width(em), room), em, INK)


def _wrapped(text: str, measure: Any, widest: float) -> list[str]:
    """Return a text as one line or two, the second cut where it is too long."""
    words = text.split()
    if not words or measure(" ".join(words)) <= widest:
        return [" ".join(words)] if words else []
    first = len(words)
    while first > 1 and measure(" ".join(words[:first])) > widest:
        first -= 1
    rest = " ".join(words[first:])
    return [cut(" ".join(words[:first]), measure, widest), *([cut(rest, measure, widest)] if rest else [])]


class _Paper:
    """A white sheet to put pictures and words on."""

    def __init__(self, rows: int, columns: int) -> None:
        from PIL import Image, ImageDraw

        self.image: Any = Image.new("RGB", (columns, rows), PAPER)
        self.pen: Any = ImageDraw.Draw(self.image)

    def picture(self, top: int, left: int, rgb: NDArray[np.uint8]) -> None:
        """Lay a picture on the sheet."""
        from PIL import Image

        self.image.paste(Image.fromarray(rgb), (left, top))

    def text(self, left: float, top: float, words: str, size: float, colour: str, bold: bool = False) -> None:
        """Set a line of text, its top left corner given."""
        from PIL import ImageFont

        font = ImageFont.truetype(str(font_file("bold" if bold else "normal")), round(size))
        self.pen.text((left, top + 0.95 * size), words, font=font, fill=colour, anchor="ls")

    def bar(self, left: float, right: float, middle: float, em: float) -> None:
        """Draw a bar of scale."""
        thick = max(1, round(0.09 * em))
        self.pen.line([(left, middle), (right, middle)], fill=INK, width=thick)
        for end in (left, right):
            self.pen.line([(end, middle - 0.3 * em), (end, middle + 0.3 * em)], fill=INK, width=thick)

    def taken(self) -> NDArray[np.uint8]:
        """Return the sheet."""
        return np.asarray(self.image)
