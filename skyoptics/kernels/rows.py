"""Rows of a table read between its entries: a straight line for each column."""

from __future__ import annotations

from typing import Any

from numba import njit


@njit(cache=True, nogil=True, error_model="numpy")
def read(place: Any, table: Any, result: Any) -> None:
    """Fill result (n, m) with the rows of a table (k, m) at fractional places (n,) from 0 to k − 1; nan for nan."""
    last = table.shape[0] - 2
    for i in range(place.shape[0]):
        here = place[i]
        if not here >= 0.0:
            for j in range(table.shape[1]):
                result[i, j] = here
            continue
        cell = min(int(here), last)
        part = here - cell
        for j in range(table.shape[1]):
            result[i, j] = table[cell, j] + part * (table[cell + 1, j] - table[cell, j])
