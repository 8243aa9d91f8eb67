"""Points that were read off a photograph, from a CSV file with the columns x, y and, by choice, arc and order."""

from __future__ import annotations

import csv
from dataclasses import dataclass
from math import isfinite
from pathlib import Path

import numpy as np

from skyoptics.errors import DataFileError, nearest
from skyoptics.scene.fields import printable
from skyoptics.scene.files import file_trouble
from skyoptics.units import FloatArray

COLUMNS = ("x", "y", "arc", "order")
MOST_POINTS = 10000
MOST_ORDER = 20
"""Highest supernumerary."""
_LARGEST_FILE = 4_000_000
_TOLD = 5


@dataclass(frozen=True, eq=False)
class Points:
    """Points of one arc.

    Parameters
    ----------
    arc : str
        As labelled; empty without labels.
    order : int or None
        0 for the bow, 1 for its first supernumerary, …; None without labels.
    xy : ndarray, shape (n, 2)
        Column, row [pixel].
    """

    arc: str
    order: int | None
    xy: FloatArray


def read_points(path: Path, shape: tuple[int, int]) -> list[Points]:
    """Return the points of a file, a group for each arc and order, in the order of their first mention.

    Parameters
    ----------
    path : Path
        Comma-separated (or by semicolons or tabs), with a header; UTF-8.
    shape : tuple of int
        Rows, columns of the picture.

    Raises
    ------
    DataFileError
        Naming the lines and what is wrong with them.
    """
    groups: dict[tuple[str, int | None], list[tuple[float, float]]] = {}
    faults: list[str] = []
    rows = _rows(path)
    header = [word.strip().casefold() for word in rows[0][1]]
    for wanted in ("x", "y"):
        if wanted not in header:
            near = nearest(wanted, header) or f"; its header is {printable(', '.join(header), 100)}"
            raise DataFileError(
                f"{path.name}: line {rows[0][0]}: no column {wanted}{near}; it needs x,y [pixel], then arc, order"
            )
    for word in header:
        if word and word not in COLUMNS:
            hint = nearest(word, COLUMNS)
            raise DataFileError(
                f"{path.name}: line {rows[0][0]}: unknown column {printable(word, 40)}{hint} (there are {', '.join(COLUMNS)})"
            )
    if len(set(filter(None, header))) < len(list(filter(None, header))):
        raise DataFileError(f"{path.name}: line {rows[0][0]}: a column stands there twice")
    for number, cells in rows[1:]:
        values = dict(zip(header, (cell.strip() for cell in cells), strict=False))
        try:
            place = _point(values, shape)
            order = _order(values.get("order", ""))
        except ValueError as error:
            faults.append(f"{path.name}: line {number}: {error}")
            continue
        groups.setdefault((printable(values.get("arc", ""), 60), order), []).append(place)
    if faults:
        more = f"\nand {len(faults) - _TOLD} more" if len(faults) > _TOLD else ""
        raise DataFileError("\n".join(faults[:_TOLD]) + more)
    if not groups:
        raise DataFileError(f"{path.name}: holds no point; give a line x,y [pixel] for each")
    return [Points(arc, order, np.array(found)) for (arc, order), found in groups.items()]


def _rows(path: Path) -> list[tuple[int, list[str]]]:
    """Return line numbers and cells of the lines that hold anything."""
    for trouble in file_trouble(path):
        raise DataFileError(f"{path.name}: {trouble}")
    if path.stat().st_size > _LARGEST_FILE:
        raise DataFileError(
            f"{path.name}: is larger than {_LARGEST_FILE // 1000000} MB; at most {MOST_POINTS} points are taken"
        )
    try:
        text = path.read_text(encoding="utf-8-sig")
    except UnicodeDecodeError:
        raise DataFileError(f"{path.name}: is no text in UTF-8; save the table as CSV") from None
    lines = [line for line in text.splitlines() if line.strip()]
    if not lines:
        raise DataFileError(f"{path.name}: is empty; it needs a header x,y and a line for each point")
    delimiter = max((",", ";", "\t"), key=lines[0].count)
    try:
        reader = csv.reader(text.splitlines(), delimiter=delimiter, strict=True)
        rows = [(reader.line_num, cells) for cells in reader if any(cell.strip() for cell in cells)]
    except csv.Error as error:
        raise DataFileError(f"{path.name}: is no CSV table: {error}") from None
    if len(rows) - 1 > MOST_POINTS:
        raise DataFileError(f"{path.name}: holds {len(rows) - 1} points; at most {MOST_POINTS} are taken")
    return rows


def _point(values: dict[str, str], shape: tuple[int, int]) -> tuple[float, float]:
    """Return x, y."""
    place = []
    for name, size in (("x", shape[1]), ("y", shape[0])):
        text = values.get(name, "")
        try:
            number = float(text)
        except ValueError:
            raise ValueError(f"{name} is {printable(text, 40)!r}; a number of pixels is needed") from None
        if not isfinite(number) or not -0.5 <= number <= size - 0.5:
            raise ValueError(
                f"{name} is {text}, outside the picture of {shape[1]} × {shape[0]} pixels: 0 to {size - 1}"
            )
        place.append(number)
    return place[0], place[1]


def _order(text: str) -> int | None:
    """Return the order of a supernumerary."""
    if not text:
        return None
    if not text.isascii() or not text.isdigit() or int(text[:9]) > MOST_ORDER:
        raise ValueError(
            f"order is {printable(text, 40)!r}; 0 for the bow, 1 for its first supernumerary, … up to {MOST_ORDER}, or nothing"
        )
    return int(text)
