"""One batch of rays through crystals of one kind: source → orient → enter → hit → exit → sink.

A pool of lanes is kept full: whenever CHUNK lanes are free, CHUNK new rays enter; after every hit dead lanes are packed
away. So no lane waits for the longest path. A batch is serial and releases the interpreter's lock; its bits depend on its
arguments alone. Everything that chooses (law, sink, map) is looked at once a block, outside the loops over lanes.

`tally` (float64, `TALLIES`), powers in units of the reference area:

=  ==========================================================================
0  rays that entered (all of them: entry is on the crystal)
1  incident power
2  power that left
3  power absorbed
4  roulette: power gained less power lost (mean 0)
5  power that a plain cut-off would have dropped
6  hits of live rays, entry not counted
7  Σ I cos θ (angle table only)
8  power that left within 2e-5 rad of straight on (angle table only)
9  exits met (exit list only)
=  ==========================================================================
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from skyoptics.kernels.binning import add_angles, add_power, add_stokes, list_exits, polarisation_share
from skyoptics.kernels.entry import PATCH, enter_chunk, weigh_chunk
from skyoptics.kernels.lanes import (
    CHUNK,
    CODE_ROWS,
    F0,
    F1,
    ROWS,
    STRIDE,
    SUM_ABSORBED,
    SUM_BELOW,
    SUM_IN,
    SUM_OUT,
    SUM_ROULETTE,
    WIDTH,
    Float32Array,
    FloatArray,
    Int64Array,
    Uint32Array,
)
from skyoptics.kernels.orient import orient_chunk, source_chunk
from skyoptics.kernels.polyhedron import advance, interface, note_faces, pack, roulette
from skyoptics.kernels.projection import find_angles, find_pixels, turn_to_world
from skyoptics.kernels.random import uniform
from skyoptics.kernels.sobol import DIMENSIONS, gather_chunk, scramble_seeds, sobol_chunk

PLANE, STOKES_PLANE, ANGLES, EXITS = 0, 1, 2, 3
TALLIES = 10
FLUSH = 64 * CHUNK
"""Rays after which the lanes' float32 sums go to the tally."""
OFFSET_DIMENSION = 8
"""Hash dimension of the offset of gathered points (table in `skyoptics.kernels.random`: none of a crystal's uses it)."""


@njit(cache=True, nogil=True, error_model="numpy")
def trace_crystals(
    slabs: Float32Array,
    patches: Float32Array,
    scale: Any,
    law: int,
    inverse_kappa: Any,
    span: Any,
    frame: Float32Array,
    radius: Any,
    disc_table: Float32Array,
    index_table: Float32Array,
    stokes: Float32Array,
    cutoff: Any,
    key_low: Any,
    key_high: Any,
    rays: int,
    used: int,
    numbers: Uint32Array,
    table: Uint32Array,
    cell_sums: FloatArray,
    cell_boxes: Float32Array,
    cell_dimensions: Int64Array,
    sink: int,
    grid: Float32Array,
    plane: Any,
    exit_values: Float32Array,
    exit_numbers: Uint32Array,
    tally: FloatArray,
) -> None:
    """Trace `rays` rays (a multiple of CHUNK) into one sink; arguments as in the stages, tally (TALLIES,) is added to.

    sink PLANE: plane flat (ny * nx + SPARE,); STOKES_PLANE: the same times 4; ANGLES: flat (nθ * 6,), grid[0] = 1 for
    unpolarised light only, 4 for all elements, grid[1] = nθ; EXITS: exit_values, exit_numbers, those alone that fall on grid,
    if that is one of directions (length 2: all). cell_*: where rays are born, as in `gather_chunk`; without dimensions evenly.
    """
    state = np.zeros(ROWS * STRIDE, dtype=np.float32)
    codes = np.zeros(CODE_ROWS * STRIDE, dtype=np.uint32)
    points = np.zeros(DIMENSIONS * CHUNK, dtype=np.float32)
    seeds = np.zeros(DIMENSIONS, dtype=np.uint32)
    spots = np.zeros(WIDTH, dtype=np.uint32)
    holes = np.zeros(WIDTH + 1, dtype=np.uint32)
    movers = np.zeros(WIDTH + 1, dtype=np.uint32)
    sums = np.zeros((len(patches) // PATCH + 1) * CHUNK, dtype=np.float32)
    born_stokes = stokes.copy()
    moments = np.zeros(2)
    weights = np.ones(CHUNK, dtype=np.float32)
    guided = len(cell_dimensions) > 0
    offset = uniform(key_low, key_high, np.uint32(0), np.uint32(OFFSET_DIMENSION))
    cell = 0
    scramble_seeds(key_low, key_high, seeds)
    level = frame[0:3]
    exits = 0
    ray = 0
    n = 0
    while ray < rays or n > 0:
        start = n
        while ray < rays and n <= WIDTH - CHUNK:
            sobol_chunk(ray, True, seeds, used, numbers, table, points)
            if guided:
                cell = gather_chunk(ray, rays, offset, cell, cell_sums, cell_boxes, cell_dimensions, points, weights)
            born, born_codes = state[n:], codes[n:]
            source_chunk(born, points, frame, radius, disc_table, index_table)
            orient_chunk(born, points, law, inverse_kappa, span)
            if sink == ANGLES and grid[0] > F1:
                share = polarisation_share(np.uint32(ray))
                born_stokes[1] = F1 if share == 2 else F0
                born_stokes[3] = F1 if share == 3 else F0
            enter_chunk(born, born_codes, ray, points, patches, sums, scale, born_stokes, level)
            if guided:
                weigh_chunk(born, weights)
            n += CHUNK
            ray += CHUNK
        if n > start:
            born, born_codes = state[start:], codes[start:]
            exits = _leave(
                born, born_codes, spots, n - start, sink, grid, plane, level, exit_values, exit_numbers, moments, exits
            )
            if ray % FLUSH == 0:
                _flush(state, tally)
        advance(state, n, slabs)
        interface(state, n)
        note_faces(state, codes, n)
        exits = _leave(state, codes, spots, n, sink, grid, plane, level, exit_values, exit_numbers, moments, exits)
        tally[6] += n
        roulette(state, codes, n, cutoff, key_low, key_high)
        n = pack(state, codes, n, holes, movers)
    _flush(state, tally)
    tally[0] += rays
    tally[7] += moments[0]
    tally[8] += moments[1]
    tally[9] += exits


@njit(cache=True, nogil=True, error_model="numpy")
def _leave(
    state: Float32Array,
    codes: Uint32Array,
    spots: Uint32Array,
    n: int,
    sink: int,
    grid: Float32Array,
    plane: Any,
    level: Float32Array,
    exit_values: Float32Array,
    exit_numbers: Uint32Array,
    moments: FloatArray,
    exits: int,
) -> int:
    """Send rows E of lanes 0 … n − 1 to the sink; return the number of exits met."""
    turn_to_world(state, n, sink != PLANE)
    if sink == PLANE:
        find_pixels(state, spots, n, grid)
        add_power(state, spots, n, plane)
    elif sink == STOKES_PLANE:
        find_pixels(state, spots, n, grid)
        add_stokes(state, spots, n, plane)
    elif sink == ANGLES:
        find_angles(state, spots, n, np.int32(grid[1]))
        add_angles(state, codes, spots, n, np.int32(grid[0]), level, plane, moments)
    else:
        cells = np.int64(1)
        if len(grid) > 2:
            cells = np.int64(grid[1]) * np.int64(grid[2])
            find_pixels(state, spots, n, grid)
        exits = list_exits(state, codes, spots, n, cells, exit_values, exit_numbers, exits)
    return exits


@njit(cache=True, nogil=True, error_model="numpy")
def _flush(state: Float32Array, tally: FloatArray) -> None:
    """Move the lanes' sums to the tally: often enough for float32."""
    for lane in range(WIDTH):
        tally[1] += state[SUM_IN + lane]
        tally[2] += state[SUM_OUT + lane]
        tally[3] += state[SUM_ABSORBED + lane]
        tally[4] += state[SUM_ROULETTE + lane]
        tally[5] += state[SUM_BELOW + lane]
        state[SUM_IN + lane] = F0
        state[SUM_OUT + lane] = F0
        state[SUM_ABSORBED + lane] = F0
        state[SUM_ROULETTE + lane] = F0
        state[SUM_BELOW + lane] = F0
