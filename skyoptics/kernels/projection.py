"""From the crystal to the grid: turn what leaves into world axes and find its pixel.

The grid comes as the packed array of `skyoptics.geometry.directions.Directions`: [0] kind (0 radial, 1 cylindrical), [1]
rows, [2] columns, [3:12] rotation world → own axes by rows, [12:16] map, [16:33] coefficients. Light that travels along E is
seen in the viewing direction −E.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from skyoptics.kernels.elementary import arc_tangent
from skyoptics.kernels.lanes import (
    EX,
    EY,
    EZ,
    F0,
    F1,
    F2,
    HALF,
    R00,
    R01,
    R02,
    R10,
    R11,
    R12,
    R20,
    R21,
    R22,
    SX,
    SY,
    SZ,
    TX,
    TY,
    TZ,
    WX,
    WY,
    WZ,
    Float32Array,
    Uint32Array,
)

RADIAL = 0
SPARE = 64
"""Cells behind a plane that take what falls outside it: a store without a branch."""

_ONE = np.int32(1)
_QUARTER = np.float32(0.25)
_PI = np.float32(np.pi)


@njit(cache=True, nogil=True, error_model="numpy")
def turn_to_world(state: Float32Array, n: int, with_reference: bool) -> None:
    """Turn rows E, and the e⊥ that belongs to them into rows T, to world axes, lanes 0 … n − 1."""
    for lane in range(n):
        x, y, z = state[EX + lane], state[EY + lane], state[EZ + lane]
        state[EX + lane] = state[R00 + lane] * x + state[R01 + lane] * y + state[R02 + lane] * z
        state[EY + lane] = state[R10 + lane] * x + state[R11 + lane] * y + state[R12 + lane] * z
        state[EZ + lane] = state[R20 + lane] * x + state[R21 + lane] * y + state[R22 + lane] * z
    if not with_reference:
        return
    for lane in range(n):
        x, y, z = state[SX + lane], state[SY + lane], state[SZ + lane]
        state[TX + lane] = state[R00 + lane] * x + state[R01 + lane] * y + state[R02 + lane] * z
        state[TY + lane] = state[R10 + lane] * x + state[R11 + lane] * y + state[R12 + lane] * z
        state[TZ + lane] = state[R20 + lane] * x + state[R21 + lane] * y + state[R22 + lane] * z


@njit(cache=True, nogil=True, error_model="numpy")
def find_pixels(state: Float32Array, spots: Uint32Array, n: int, grid: Float32Array) -> None:
    """Fill spots (WIDTH,) uint32 with row * columns + column, or a spare cell, for lanes 0 … n − 1."""
    a00, a01, a02 = -grid[3], -grid[4], -grid[5]  # the minus turns propagation into viewing
    a10, a11, a12 = -grid[6], -grid[7], -grid[8]
    a20, a21, a22 = -grid[9], -grid[10], -grid[11]
    rows, columns = np.int32(grid[1]), np.int32(grid[2])
    outside = rows * columns
    if np.int32(grid[0]) == RADIAL:
        scale, column_centre, row_centre, q_max = grid[12], grid[13] + HALF, grid[14] + HALF, grid[15]
        unit = F1 / q_max
        c0, c1, c2, c3, c4, c5 = grid[16], grid[17], grid[18], grid[19], grid[20], grid[21]
        c6, c7, c8, c9, c10, c11 = grid[22], grid[23], grid[24], grid[25], grid[26], grid[27]
        c12, c13, c14, c15, c16 = grid[28], grid[29], grid[30], grid[31], grid[32]
        width, height = np.float32(columns), np.float32(rows)
        for lane in range(n):
            ex, ey, ez = state[EX + lane], state[EY + lane], state[EZ + lane]
            x = a00 * ex + a01 * ey + a02 * ez
            y = a10 * ex + a11 * ey + a12 * ez
            z = a20 * ex + a21 * ey + a22 * ez
            divisor = HALF * (F1 + z)
            near = _QUARTER * (x * x + y * y) / (divisor if divisor > _QUARTER else _QUARTER)
            q = near if z > F0 else HALF * (F1 - z)
            u = q * unit
            held = u <= F1
            u = u if held else F1
            k = c13 + u * (c14 + u * (c15 + u * c16))
            k = c9 + u * (c10 + u * (c11 + u * (c12 + u * k)))
            k = c5 + u * (c6 + u * (c7 + u * (c8 + u * k)))
            k = scale * (c0 + u * (c1 + u * (c2 + u * (c3 + u * (c4 + u * k)))))
            column = column_centre + k * x
            row = row_centre - k * y
            inside = held & (column >= F0) & (column < width) & (row >= F0) & (row < height)
            spot = np.int32(row if inside else F0) * columns + np.int32(column if inside else F0)
            spots[lane] = np.uint32(spot if inside else outside + np.int32(lane & (SPARE - 1)))
        return
    longitude_first, longitude_step, latitude_first, latitude_step = grid[12], grid[13], grid[14], grid[15]
    per_longitude, per_latitude = F1 / longitude_step, F1 / latitude_step
    turn = F2 * _PI / abs(longitude_step)
    per_turn = F1 / turn
    width, height = np.float32(columns), np.float32(rows)
    for lane in range(n):
        ex, ey, ez = state[EX + lane], state[EY + lane], state[EZ + lane]
        x = a00 * ex + a01 * ey + a02 * ez
        y = a10 * ex + a11 * ey + a12 * ez
        z = a20 * ex + a21 * ey + a22 * ez
        column = (arc_tangent(y, x) - longitude_first) * per_longitude + HALF
        column = column - turn * np.floor(column * per_turn)
        row = (latitude_first - arc_tangent(z, np.sqrt(x * x + y * y))) * per_latitude + HALF
        inside = (column >= F0) & (column < width) & (row >= F0) & (row < height)
        spot = np.int32(row if inside else F0) * columns + np.int32(column if inside else F0)
        spots[lane] = np.uint32(spot if inside else outside + np.int32(lane & (SPARE - 1)))


@njit(cache=True, nogil=True, error_model="numpy")
def find_angles(state: Float32Array, spots: Uint32Array, n: int, count: Any) -> None:
    """Fill spots (WIDTH,) uint32 with the bin of the scattering angle among `count` equal ones, lanes 0 … n − 1."""
    per_angle = F2 * np.float32(count) / _PI
    last = np.int32(count - 1)
    for lane in range(n):
        ex, ey, ez = state[EX + lane], state[EY + lane], state[EZ + lane]
        wx, wy, wz = state[WX + lane], state[WY + lane], state[WZ + lane]
        ax, ay, az = ex - wx, ey - wy, ez - wz
        bx, by, bz = ex + wx, ey + wy, ez + wz
        # 2 atan2(|a|, |b|): exact to rounding forwards and backwards
        half = arc_tangent(np.sqrt(ax * ax + ay * ay + az * az), np.sqrt(bx * bx + by * by + bz * bz))
        spot = np.int32(half * per_angle)
        spots[lane] = np.uint32(spot if spot < last else last)
