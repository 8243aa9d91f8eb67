"""Reading tables for many directions at a time, a block that stays in the processor's cache after the other."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from skyoptics.sky.multiple import in_parts
from skyoptics.units import FloatArray

_BLOCK = 2048


def look_up(table: FloatArray, place: FloatArray) -> FloatArray:
    """Return rows of a table, linear between them.

    Parameters
    ----------
    table : ndarray, shape (m, nλ)
        At least two rows.
    place : ndarray, shape (n,)
        Row, 0 to m − 1, fractions too; nan is read as 0.

    Returns
    -------
    ndarray, shape (n, nλ)
    """
    place = np.where(place > 0.0, place, 0.0)
    cell = np.minimum(place.astype(np.int64), len(table) - 2)
    share = place - cell
    first = np.take(table, cell, axis=0)
    second = np.take(table, cell + 1, axis=0)
    second -= first
    second *= share[:, None]
    first += second
    return first


def in_blocks(work: Callable[[slice], object], count: int) -> None:
    """Run `work` on short slices of range(count) on all processors; the slices do not meet."""

    def follow(part: slice) -> None:
        for first in range(part.start, part.stop, _BLOCK):
            work(slice(first, min(first + _BLOCK, part.stop)))

    if count > _BLOCK:
        in_parts(follow, count)
    elif count:
        work(slice(0, count))
