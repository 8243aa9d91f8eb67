"""Sheets of paper: sizes by ISO 216, letters in points, a bar as long as it says, nothing over the picture."""

import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.figures import print_sheet
from skyoptics.figures.print_sheet import DPI, PAPERS, Words, blank, layout, write

SIZES = {"a4": (297, 210), "a3": (420, 297), "a2": (594, 420)}
"""Millimetres (ISO 216:2007, from memory)."""


def mm(pixels):
    return pixels * 25.4 / DPI


@pytest.mark.parametrize("paper", PAPERS)
@pytest.mark.parametrize(("columns", "rows"), [(1500, 1000), (1000, 1500), (1200, 1200), (3600, 600), (300, 1200)])
def test_the_picture_fills_the_paper_between_its_margins(paper, columns, rows):
    place = layout(paper, columns, rows)
    assert sorted(mm(side) for side in place.shape) == pytest.approx(sorted(SIZES[paper]), abs=0.05)
    height, width = place.picture
    assert width / height == pytest.approx(columns / rows, abs=width / height / min(place.picture))
    margin = print_sheet.MARGIN_MM * place.scale
    foot = print_sheet.FOOT_MM * place.scale
    beside = mm(min(place.left, place.shape[1] - place.left - width))
    assert beside >= margin - 0.1
    assert mm(place.top) >= margin - 0.1
    assert mm(place.shape[0] - place.top - height) >= margin + foot - 0.1
    free = place.shape[1] - width - 2 * margin * DPI / 25.4, place.shape[0] - height - (2 * margin + foot) * DPI / 25.4
    assert min(abs(side) for side in free) <= 2.0  # it touches the margins on one pair of sides


def test_the_paper_is_turned_with_the_picture():
    for columns, rows, upright in ((1500, 1000, False), (1000, 1500, True)):
        shape = layout("a4", columns, rows).shape
        assert (shape[0] > shape[1]) is upright
    square = layout("a3", 800, 800)
    assert min(square.picture) >= 800
    assert square.scale == pytest.approx(np.sqrt(2.0))


def test_letters_have_their_size_in_points():
    """A point is 1/72 inch; a capital of DejaVu Sans is 0.729 em high (its OS/2 table)."""
    place = layout("a4", 1500, 1000)
    sheet = blank(place)
    write(sheet, place, Words(title="HHH"))
    rows = np.flatnonzero((sheet < 128).all(axis=(2)).any(axis=1))
    height = rows[-1] - rows[0] + 1
    assert height / DPI * 72 == pytest.approx(0.729 * print_sheet.TITLE_PT, abs=0.3)


@pytest.mark.parametrize("paper", ["a4", "a2"])
def test_the_bar_is_as_long_as_it_says(paper):
    place = layout(paper, 1500, 1000)
    sheet = blank(place)
    write(sheet, place, Words(bar=(417.0, "5° at the centre")))
    dark = (sheet[:, place.columns.stop - 417 : place.columns.stop] < 120).all(axis=(1, 2))
    assert dark.any()
    row = int(np.flatnonzero(dark).mean())
    assert not (sheet[row, place.columns.stop - 419] < 250).any()
    assert (sheet[row, place.columns.stop :] == 255).all()


def test_words_stay_below_the_picture_and_between_the_margins():
    place = layout("a4", 1000, 1500)
    sheet = blank(place)
    sheet[place.rows, place.columns] = 77
    long = "A sentence that is said over and over again until no sheet can hold it. " * 40
    write(sheet, place, Words("A title " * 60, (long, long), "Licence: CC0 " * 90, (300.0, "10° at the centre")))
    assert (sheet[place.rows, place.columns] == 77).all()
    margin = int(print_sheet.MARGIN_MM * DPI / 25.4)
    assert (sheet[-margin:] == 255).all()
    assert (sheet[place.rows.stop :, : margin - 1] == 255).all()
    assert (sheet[place.rows.stop :, -margin + 1 :] == 255).all()


def test_the_shorter_caption_is_taken_where_the_long_one_has_no_room():
    place = layout("a4", 1500, 1000)
    sheets = []
    for captions in (("word " * 500, "short"), ("short",)):
        sheet = blank(place)
        write(sheet, place, Words(captions=captions))
        sheets.append(sheet)
    assert (sheets[0] < 128).any()
    assert np.array_equal(*sheets)


def test_what_cannot_be_printed_is_refused():
    with pytest.raises(DomainError, match=r"a4, a3, a2.*\ba4\b"):
        layout("a44", 300, 200)
    with pytest.raises(DomainError, match="too narrow"):
        layout("a4", 30000, 1)
    with pytest.raises(DomainError, match="no letters"):
        print_sheet.check_words("虹", None)
