"""One batch of rays through crystals of one shape: source → orient → enter → hit → exit → sink.

A pool of lanes is kept full: whenever CHUNK lanes are free, CHUNK new rays enter; after every hit dead lanes are packed
away. So no lane waits for the longest path. A batch is serial and releases the interpreter's lock; its bits depend on its
arguments alone. Everything that chooses (law, sink, map, imperfections) is looked at once a block, outside the loops over
lanes. Numbers that belong to a kind of crystal come in one float32 array, `SETTINGS` long:

====================  ===============================================================
SCALE                 1 / reference area
INVERSE_KAPPA, SPAN   of Fisher's law, see `orient`
RADIUS                of the source's disc [rad]
CUTOFF                power below which rays play roulette
ASKEW                 σ of each component of a face's normal [rad], 0 for none
BIREFRINGENCE         n_e − n_o, 0 for one index
DIFFRACTION           angle for argument 1 of Fraunhofer's pattern [rad], 0 for none
====================  ===============================================================

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
from skyoptics.kernels.grouping import add_groups, begin_trails, keep_group, note_trails, settle_groups
from skyoptics.kernels.imperfect import diffract, split_entered, tilt_entered, tilt_met
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
from skyoptics.kernels.orient import orient_chunk, polarise_chunk, receive_chunk, source_chunk
from skyoptics.kernels.polyhedron import advance, interface, note_faces, pack, roulette
from skyoptics.kernels.projection import find_angles, find_pixels, turn_to_world
from skyoptics.kernels.random import uniform
from skyoptics.kernels.sobol import DIMENSIONS, gather_chunk, scramble_seeds, sobol_chunk

PLANE, STOKES_PLANE, ANGLES, EXITS = 0, 1, 2, 3
SCALE, INVERSE_KAPPA, SPAN, RADIUS, CUTOFF, ASKEW, BIREFRINGENCE, DIFFRACTION = 0, 1, 2, 3, 4, 5, 6, 7
SETTINGS = 8
TALLIES = 10
FLUSH = 64 * CHUNK
"""Rays after which the lanes' float32 sums go to the tally."""
OFFSET_DIMENSION = 8
"""Hash dimension of the offset of gathered points (table in `skyoptics.kernels.random`: none of a crystal's uses it)."""


@njit(cache=True, nogil=True, error_model="numpy")
def trace_crystals(
    slabs: Float32Array,
    patches: Float32Array,
    settings: Float32Array,
    law: int,
    pose: Float32Array,
    tilts: Float32Array,
    frame: Float32Array,
    disc_table: Float32Array,
    index_table: Float32Array,
    stokes: Float32Array,
    pattern: Float32Array,
    step: Any,
    table_of_groups: Any,
    outside: Any,
    settled: Any,
    key_low: Any,
    key_high: Any,
    rays: int,
    used: int,
    numbers: Uint32Array,
    table: Uint32Array,
    cell_sums: FloatArray,
    cell_boxes: Float32Array,
    cell_dimensions: Int64Array,
    incoming: Float32Array,
    sink: int,
    grid: Float32Array,
    plane: Any,
    only: int,
    cells: Int64Array,
    group_plane: Any,
    exit_values: Float32Array,
    exit_numbers: Uint32Array,
    tally: FloatArray,
) -> None:
    """Trace `rays` rays (a multiple of CHUNK) into one sink; arguments as in the stages, tally (TALLIES,) is added to.

    sink PLANE: plane flat (ny * nx + SPARE,); STOKES_PLANE: the same times 4; ANGLES: flat (nθ * 6,), grid[0] = 1 for
    unpolarised light only, 4 for all elements, grid[1] = nθ; EXITS: exit_values, exit_numbers, those alone that fall on grid,
    if that is one of directions (length 2: all). cell_*: where rays are born, as in `gather_chunk`; without dimensions evenly.

    incoming (m, 10): rays in place of the source's, as in `orient.receive_chunk`; m = 0 for none. Without names (step empty)
    there is one group, 0. only: group whose light alone is kept, -1 for all. cells (4,) as in `grouping.add_groups`,
    group_plane what it fills, for plane sinks; empty for none. ANGLES: group g begins at g * nθ * 6.
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
    inverse_kappa, span, radius, cutoff = settings[INVERSE_KAPPA], settings[SPAN], settings[RADIUS], settings[CUTOFF]
    faces = len(outside)
    listed = len(incoming) > 0
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
            orient_chunk(born, points, law, inverse_kappa, span, pose, tilts)
            if sink == ANGLES and grid[0] > F1:
                share = polarisation_share(np.uint32(ray))
                born_stokes[1] = F1 if share == 2 else F0
                born_stokes[3] = F1 if share == 3 else F0
            if listed:
                receive_chunk(born, incoming, ray)
            else:
                polarise_chunk(born, born_stokes, level)
            enter_chunk(born, born_codes, ray, points, patches, sums, settings[SCALE])
            if guided:
                weigh_chunk(born, weights)
            if settings[BIREFRINGENCE] != F0:
                split_entered(born, born_codes, CHUNK, settings[BIREFRINGENCE])
            if settings[ASKEW] > F0:
                tilt_entered(born, born_codes, CHUNK, settings[ASKEW], key_low, key_high)
            if faces > 0:
                begin_trails(born, born_codes, CHUNK, outside)
            n += CHUNK
            ray += CHUNK
        if n > start:
            born, born_codes = state[start:], codes[start:]
            if settings[DIFFRACTION] > F0:
                diffract(born, born_codes, n - start, settings[DIFFRACTION], pattern, key_low, key_high)
            exits = _leave(
                born,
                born_codes,
                spots,
                n - start,
                sink,
                grid,
                plane,
                frame,
                settled,
                only,
                cells,
                group_plane,
                exit_values,
                exit_numbers,
                moments,
                exits,
            )
            if ray % FLUSH == 0:
                _flush(state, tally)
        advance(state, n, slabs)
        interface(state, n)
        if settings[ASKEW] > F0:
            tilt_met(state, codes, n, settings[ASKEW], key_low, key_high)
        note_faces(state, codes, n)
        if faces > 0:
            note_trails(state, codes, n, step, table_of_groups, faces)
        if settings[DIFFRACTION] > F0:
            diffract(state, codes, n, settings[DIFFRACTION], pattern, key_low, key_high)
        exits = _leave(
            state,
            codes,
            spots,
            n,
            sink,
            grid,
            plane,
            frame,
            settled,
            only,
            cells,
            group_plane,
            exit_values,
            exit_numbers,
            moments,
            exits,
        )
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
    frame: Float32Array,
    settled: Any,
    only: int,
    cells: Int64Array,
    group_plane: Any,
    exit_values: Float32Array,
    exit_numbers: Uint32Array,
    moments: FloatArray,
    exits: int,
) -> int:
    """Send rows E of lanes 0 … n − 1 to the sink; return the number of exits met."""
    turn_to_world(state, n, sink != PLANE)
    if len(settled) > 0:
        settle_groups(state, codes, n, settled, frame[6:9])
    if only >= 0:
        keep_group(state, codes, n, only)
    if sink == PLANE:
        find_pixels(state, spots, n, grid)
        add_power(state, spots, n, plane)
        if len(group_plane) > 0:
            add_groups(state, codes, spots, n, cells, group_plane)
    elif sink == STOKES_PLANE:
        find_pixels(state, spots, n, grid)
        add_stokes(state, spots, n, plane)
        if len(group_plane) > 0:
            add_groups(state, codes, spots, n, cells, group_plane)
    elif sink == ANGLES:
        find_angles(state, spots, n, np.int32(grid[1]))
        add_angles(state, codes, spots, n, np.int32(grid[0]), int(grid[1]), frame[0:3], plane, moments)
    else:
        listed = np.int64(1)
        if len(grid) > 2:
            listed = np.int64(grid[1]) * np.int64(grid[2])
            find_pixels(state, spots, n, grid)
        exits = list_exits(state, codes, spots, n, listed, exit_values, exit_numbers, exits)
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
