"""Light kept apart by where it came through the crystal: groups (named arcs) of exits.

What a path does to light is fixed by its entry face, the product of the reflections inside, and its exit face. The product
moves through a finite table as the ray goes on, so one small number a lane, row TRAIL = entry face · 2¹⁶ + state, tells the
group of every exit, however long the path:

    leaving by face x:  group = table[entry, state, x];  going on:  state = step[state, x];  from outside: outside[x].

Where the faces alone do not tell, the place in the sky does (`skyoptics.kernels.sorting`). The tables are those of
`skyoptics.crystals.sorting`.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from skyoptics.kernels.lanes import (
    CELL,
    EI,
    EQ,
    EU,
    EV,
    EX,
    EY,
    EZ,
    F0,
    GROUP,
    MET,
    TRAIL,
    Float32Array,
    Int64Array,
    Uint32Array,
)
from skyoptics.kernels.sorting import place_in_sky

_LOW = np.uint32(0xFFFF)
_SHIFT = np.uint32(16)


@njit(cache=True, nogil=True, error_model="numpy")
def begin_trails(state: Float32Array, codes: Uint32Array, n: int, outside: Any) -> None:
    """Start the trails of lanes 0 … n − 1, just entered by face MET; GROUP is that of what the outside reflects."""
    for lane in range(n):
        face = np.uint32(np.int32(state[MET + lane]))
        codes[TRAIL + lane] = np.uint32(face << _SHIFT)
        codes[GROUP + lane] = outside[face]


@njit(cache=True, nogil=True, error_model="numpy")
def note_trails(state: Float32Array, codes: Uint32Array, n: int, step: Any, table: Any, faces: int) -> None:
    """Fill GROUP of what leaves by the face just met and take the reflection into TRAIL, lanes 0 … n − 1.

    step flat (states * faces,), table flat (faces * states * faces,).
    """
    states = np.uint32(len(step) // faces)
    across = np.uint32(faces)
    for lane in range(n):
        trail = codes[TRAIL + lane]
        entry, now = np.uint32(trail >> _SHIFT), np.uint32(trail & _LOW)
        face = np.uint32(np.int32(state[MET + lane]))
        codes[GROUP + lane] = table[np.uint32(np.uint32(entry * states + now) * across + face)]
        codes[TRAIL + lane] = np.uint32(np.uint32(entry << _SHIFT) | np.uint32(step[np.uint32(now * across + face)]))


@njit(cache=True, nogil=True, error_model="numpy")
def settle_groups(state: Float32Array, codes: Uint32Array, n: int, settled: Any, towards: Float32Array) -> None:
    """Move light to the group that its place in the sky makes it belong to; rows E in world axes.

    settled, flat (groups * 4,): group by group so far and `sorting.place_in_sky`; towards (3,): to the source.
    """
    x, y, z = towards[0], towards[1], towards[2]
    for lane in range(n):
        place = place_in_sky(-state[EX + lane], -state[EY + lane], -state[EZ + lane], x, y, z)
        codes[CELL + lane] = np.uint32(np.int32(codes[GROUP + lane]) * np.int32(4) + np.int32(place))
    for lane in range(n):
        codes[GROUP + lane] = settled[codes[CELL + lane]]


@njit(cache=True, nogil=True, error_model="numpy")
def keep_group(state: Float32Array, codes: Uint32Array, n: int, only: int) -> None:
    """Take the power from rows E of lanes 0 … n − 1 that are not of group `only`."""
    wanted = np.uint32(only)
    for lane in range(n):
        factor = np.float32(1.0) if codes[GROUP + lane] == wanted else F0
        state[EI + lane] = factor * state[EI + lane]
        state[EQ + lane] = factor * state[EQ + lane]
        state[EU + lane] = factor * state[EU + lane]
        state[EV + lane] = factor * state[EV + lane]


@njit(cache=True, nogil=True, error_model="numpy")
def add_groups(
    state: Float32Array, codes: Uint32Array, spots: Uint32Array, n: int, cells: Int64Array, plane: Any
) -> None:
    """Add I of lanes 0 … n − 1 to their groups' planes on the coarse grid.

    spots: pixels of the fine grid; cells (4,): rows and columns of that, pixels of a cell's side, columns of cells; plane
    flat (groups * rows of cells * columns of cells,).
    """
    columns, across = np.int32(cells[1]), np.int32(cells[3])
    pixels = np.int32(cells[0] * cells[1])
    size = np.int32(across * ((cells[0] + cells[2] - 1) // cells[2]))
    per_column, per_side = 1.0 / cells[1], np.float32(1.0) / np.float32(cells[2])
    half = np.float32(0.5)
    # whole-number division by multiplication: half a unit keeps clear of rounding
    for lane in range(n):
        spot = np.int32(spots[lane])
        row = np.int32((np.float64(spot) + 0.5) * per_column)
        column = spot - row * columns
        down = np.int32((np.float32(row) + half) * per_side)
        right = np.int32((np.float32(column) + half) * per_side)
        here = np.int32(codes[GROUP + lane]) * size + down * across + right
        codes[CELL + lane] = np.uint32(here if spot < pixels else np.int32(0))
    for lane in range(n):
        power = state[EI + lane]
        if power > F0 and spots[lane] < np.uint32(pixels):
            plane[np.uint64(codes[CELL + lane])] += power
