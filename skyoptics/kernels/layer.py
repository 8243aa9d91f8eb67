"""Transport between scatterings in a level layer: which exits get out, which meet a crystal again, and where.

Depth t in events (`skyoptics.sky.slab`), 0 on top, `bottom` below. A ray whose direction has the vertical component z meets
K(|z|) / µ events a unit of depth, µ² = z² + rim (1 − z²): rim = 0 is the endless level layer, rim > 0 gives paths near the
horizon the length they have on a round earth. A horizontal direction counts as downward; where rim is 0, µ is at least
`LEAST`.

`tables`, float64 (kinds + 1, KNOTS + 1): share · k of each kind, in the last row their sum K, at equal steps of √(1 − |z|) from
|z| = 1 to 0, the last entry twice. That variable has no root at the zenith, where the area of an upright plate has one in |z|.

Power leaves by expectation: every exit puts power · e^(−x) / µ onto the plane, x the events on its way out, and
power · (1 − e^(−x)) is what scatters again. From that the rays of the next order are drawn by systematic resampling (Kitagawa,
J. Comput. Graph. Stat. 5, 1 (1996)), for each kind of crystal on its own: equal power each, next event within the layer.
Picks are spread over the list with a stride, so that neighbours of one order do not meet neighbouring points of the next.

Hash dimensions (`skyoptics.kernels.random`), under a key of their own for each order: 0 free path of ray number r (counted over
all kinds), 1 offset of the draw and 2 shift of the list of kind r.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from skyoptics.kernels.binning import add_power, add_stokes
from skyoptics.kernels.lanes import (
    EI,
    EQ,
    EU,
    EV,
    EX,
    EY,
    EZ,
    ROWS,
    STRIDE,
    TX,
    TY,
    TZ,
    WIDTH,
    Float32Array,
    FloatArray,
    Int64Array,
    Uint32Array,
)
from skyoptics.kernels.projection import find_pixels
from skyoptics.kernels.random import uniform

KNOTS = 257
"""Knots of an extinction table."""
LEAST = 1e-4
"""Smallest µ."""

FREE_PATH, OFFSET, SHIFT = 0, 1, 2

_STEPS = np.float64(KNOTS - 1)
_GOLDEN = 0.6180339887498949


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def _cell(z: Any) -> Any:
    """Return cell of the tables, place in it, as of a vertical component z."""
    x = np.sqrt(max(1.0 - abs(z), 0.0)) * _STEPS
    i = np.int64(x)
    return i, x - np.float64(i)


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def _cosine(z: Any, rim: Any) -> Any:
    """Return µ."""
    return max(np.sqrt(z * z + rim * max(1.0 - z * z, 0.0)), LEAST)


@njit(cache=True, nogil=True, error_model="numpy")
def begin(
    vertical: FloatArray,
    above: bool,
    scale: float,
    tables: FloatArray,
    bottom: float,
    rim: float,
    key_low: Any,
    key_high: Any,
    first: int,
    depth: FloatArray,
    weight: FloatArray,
) -> None:
    """Put the first event of rays of the source within the layer.

    vertical (m,): vertical component of each ray's direction; above: whether they come in on top; scale: share of the kind
    times all rays ÷ rays of this kind; first: number of the first ray. Fills depth (m,) and weight (m,), by which the power
    of a crystal in the source's light is multiplied: scale · (µ/K) (1 − e^(−K bottom / µ)).
    """
    for r in range(len(vertical)):
        z = vertical[r]
        i, f = _cell(z)
        total = tables[-1, i] + f * (tables[-1, i + 1] - tables[-1, i])
        rate = total / _cosine(z, rim)
        event = -np.expm1(-rate * bottom)
        weight[r] = scale * event / rate
        path = -np.log1p(-uniform(key_low, key_high, np.uint32(first + r), np.uint32(FREE_PATH)) * event) / rate
        path = min(path, bottom)
        depth[r] = path if above else bottom - path


@njit(cache=True, nogil=True, error_model="numpy")
def leave(
    direction: Any,
    stokes: Any,
    reference: Any,
    ray: Any,
    depth: FloatArray,
    weight: FloatArray,
    tables: FloatArray,
    bottom: float,
    rim: float,
    grid: Float32Array,
    plane: Any,
    stokes_count: int,
    again: FloatArray,
    totals: FloatArray,
    power: FloatArray,
) -> None:
    """Let exits out of the layer as far as they get.

    direction (m, 3), stokes (m, 4), reference (m, 3), ray (m,): rows of an exit list, the first three of one layout; depth,
    weight (rays,): of the event, by which power is multiplied. Adds power ÷ µ to plane, flat
    ((ny * nx + SPARE) * stokes_count,), unless it is empty; fills again (m,) with the power that scatters once more; adds that
    to totals (kinds,) by the kind it meets, and what gets out to power (2,), upwards and downwards.
    """
    state = np.zeros(ROWS * STRIDE, dtype=np.float32)
    spots = np.zeros(WIDTH, dtype=np.uint32)
    kinds = len(tables) - 1
    drawn = len(plane) > 0
    lanes = 0
    for m in range(len(ray)):
        r = np.int64(ray[m])
        z = np.float64(direction[m, 2])
        i, f = _cell(z)
        total = tables[kinds, i] + f * (tables[kinds, i + 1] - tables[kinds, i])
        cosine = _cosine(z, rim)
        way = depth[r] if z > 0.0 else bottom - depth[r]
        event = -np.expm1(-total / cosine * way)
        light = weight[r] * np.float64(stokes[m, 0])
        once_more = light * event
        again[m] = once_more
        if kinds == 1:
            totals[0] += once_more
        else:
            part = once_more / total
            for kind in range(kinds):
                totals[kind] += part * (tables[kind, i] + f * (tables[kind, i + 1] - tables[kind, i]))
        power[0 if z > 0.0 else 1] += light - once_more
        if drawn:
            factor = np.float32(weight[r] * (1.0 - event) / cosine)
            state[EX + lanes], state[EY + lanes], state[EZ + lanes] = direction[m, 0], direction[m, 1], direction[m, 2]
            state[EI + lanes] = factor * stokes[m, 0]
            if stokes_count == 4:
                state[EQ + lanes] = factor * stokes[m, 1]
                state[EU + lanes] = factor * stokes[m, 2]
                state[EV + lanes] = factor * stokes[m, 3]
                state[TX + lanes], state[TY + lanes] = reference[m, 0], reference[m, 1]
                state[TZ + lanes] = reference[m, 2]
            lanes += 1
            if lanes == WIDTH:
                _draw(state, spots, lanes, grid, plane, stokes_count)
                lanes = 0
    if lanes > 0:
        _draw(state, spots, lanes, grid, plane, stokes_count)


@njit(cache=True, nogil=True, error_model="numpy")
def _draw(state: Float32Array, spots: Uint32Array, n: int, grid: Float32Array, plane: Any, stokes_count: int) -> None:
    find_pixels(state, spots, n, grid)
    if stokes_count == 4:
        add_stokes(state, spots, n, plane)
    else:
        add_power(state, spots, n, plane)


@njit(cache=True, nogil=True, error_model="numpy")
def pick(
    direction: Any,
    stokes: Any,
    reference: Any,
    ray: Any,
    depth: FloatArray,
    again: FloatArray,
    tables: FloatArray,
    bottom: float,
    rim: float,
    levels: FloatArray,
    totals: FloatArray,
    counts: Int64Array,
    key_low: Any,
    key_high: Any,
    sums: FloatArray,
    picked: Int64Array,
    incoming: Float32Array,
    next_depth: FloatArray,
) -> None:
    """Draw the rays of the next order from exits; call it for list after list of one order, as `leave` was.

    Exits as in `leave`, totals (kinds,) as it left them. counts (kinds,): rays wanted of each kind; sums, picked (kinds,): begin
    at 0, carried from list to list. levels (kinds,): share · mean power wanted. Fills incoming (Σ counts, 10), kind after
    kind: direction, Stokes vector of I = level / (share · k), so that the crystal's own area across the beam restores the
    mean, e⊥; and next_depth (Σ counts,). Each ray stands for totals / counts.
    """
    kinds = len(counts)
    firsts = np.zeros(kinds, dtype=np.int64)
    strides = np.ones(kinds, dtype=np.int64)
    shifts = np.zeros(kinds, dtype=np.int64)
    steps = np.zeros(kinds)
    offsets = np.zeros(kinds)
    thresholds = np.zeros(kinds)
    for kind in range(kinds):
        number = np.uint32(kind)
        if kind > 0:
            firsts[kind] = firsts[kind - 1] + counts[kind - 1]
        if counts[kind] == 0:
            continue
        strides[kind] = _stride(counts[kind])
        shifts[kind] = np.int64(uniform(key_low, key_high, number, np.uint32(SHIFT)) * counts[kind])
        steps[kind] = totals[kind] / counts[kind]
        # short of 1, so that the last pick never falls behind the end by rounding
        offsets[kind] = min(uniform(key_low, key_high, number, np.uint32(OFFSET)), 1.0 - 1e-6)
        thresholds[kind] = (picked[kind] + offsets[kind]) * steps[kind]
    for m in range(len(ray)):
        z = np.float64(direction[m, 2])
        i, f = _cell(z)
        total = tables[kinds, i] + f * (tables[kinds, i + 1] - tables[kinds, i])
        for kind in range(kinds):
            part = tables[kind, i] + f * (tables[kind, i + 1] - tables[kind, i])
            sums[kind] += again[m] if kinds == 1 else again[m] / total * part
            while thresholds[kind] < sums[kind] and picked[kind] < counts[kind]:
                slot = (picked[kind] * strides[kind] + shifts[kind]) % counts[kind] + firsts[kind]
                picked[kind] += 1
                thresholds[kind] = (picked[kind] + offsets[kind]) * steps[kind]
                where = depth[np.int64(ray[m])]
                rate = total / _cosine(z, rim)
                way = where if z > 0.0 else bottom - where
                event = -np.expm1(-rate * way)
                path = -np.log1p(-uniform(key_low, key_high, np.uint32(slot), np.uint32(FREE_PATH)) * event) / rate
                path = min(path, way)
                next_depth[slot] = where - path if z > 0.0 else where + path
                factor = np.float32(levels[kind] / (part * np.float64(stokes[m, 0])))
                for axis in range(3):
                    incoming[slot, axis] = direction[m, axis]
                    incoming[slot, 7 + axis] = reference[m, axis]
                for row in range(4):
                    incoming[slot, 3 + row] = factor * stokes[m, row]


@njit(cache=True, nogil=True, error_model="numpy")
def _stride(count: Any) -> Any:
    """Return a number near the golden section of count that has no divisor in common with it."""
    stride = max(np.int64(count * _GOLDEN), np.int64(1))
    while True:
        a, b = np.int64(count), stride
        while b > 0:
            a, b = b, a % b
        if a == 1:
            return stride
        stride += 1
