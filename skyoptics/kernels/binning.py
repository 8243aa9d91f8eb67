"""Sinks: what is done with the light that leaves.

Three of them, chosen once a block: a plane of pixels (I, or I, Q, U, V), a table over scattering angle, a list of exits.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from skyoptics.kernels.lanes import (
    EI,
    EQ,
    EU,
    EV,
    EX,
    EY,
    EZ,
    F0,
    F1,
    F2,
    GROUP,
    HITS,
    PATH_HIGH,
    PATH_LOW,
    RAY,
    TX,
    TY,
    TZ,
    WX,
    WY,
    WZ,
    Float32Array,
    FloatArray,
    Uint32Array,
)

_TINY = np.float32(1e-24)

EXIT_COLUMNS = 14
"""Columns of the exit list: direction (3), Stokes (4), e⊥ (3), direction before the crystal (3), 0; all world."""
EXIT_CODES = 6
"""Columns of the exit list's whole numbers: ray, faces met, low and high part of the path code, cell of the grid, group."""

ANGLE_SUMS = 6
"""P11, P12, P22, P33, P34, P44 of an angle table."""


@njit(cache=True, nogil=True, error_model="numpy")
def add_power(state: Float32Array, spots: Uint32Array, n: int, plane: Any) -> None:
    """Add I of lanes 0 … n − 1 to plane, flat (ny * nx + SPARE,) of any float type."""
    for lane in range(n):
        plane[spots[lane]] += state[EI + lane]


@njit(cache=True, nogil=True, error_model="numpy")
def add_stokes(state: Float32Array, spots: Uint32Array, n: int, plane: Any) -> None:
    """Add I, Q, U, V to plane, flat ((ny * nx + SPARE) * 4,), in the picture's frame of elevation.

    e⊥ is turned to the level direction across the light, so Q = I(vertical) − I(level), and U > 0 for a field that swings
    from upper right to lower left as the observer sees it.
    """
    for lane in range(n):
        ex, ey, ez = state[EX + lane], state[EY + lane], state[EZ + lane]
        q, u = _turned(state, lane, ex, ey, ez, ey, -ex, F0)
        state[EQ + lane] = q
        state[EU + lane] = u
    for lane in range(n):
        spot = np.uint64(spots[lane]) * np.uint64(4)
        plane[spot] += state[EI + lane]
        plane[spot + np.uint64(1)] += state[EQ + lane]
        plane[spot + np.uint64(2)] += state[EU + lane]
        plane[spot + np.uint64(3)] += state[EV + lane]


@njit(cache=True, nogil=True, error_model="numpy")
def add_angles(
    state: Float32Array,
    codes: Uint32Array,
    spots: Uint32Array,
    n: int,
    per_state: Any,
    count: int,
    level: Float32Array,
    table: FloatArray,
    moments: FloatArray,
) -> None:
    """Add to angle tables, flat (groups * count * ANGLE_SUMS,) float64; moments (2,) float64: Σ I cos θ, Σ I within 2e-5 rad.

    Rays come in four shares by ray number (`polarisation_share`): two unpolarised, one linear (1, 1, 0, 0), one circular
    (1, 0, 0, 1), e⊥ = level (3,) world. In the frame of the scattering plane an isotropic cloud has I = P11 + P12 q,
    Q = P12 + P22 q, U = P33 u + P34 v, V = −P34 u + P44 v, and the incident (q, u) of a linear ray turns evenly, so
    P11 = ⟨I⟩, P12 = ⟨Q⟩ of the unpolarised, P22 = 2 ⟨Q q⟩, P33 = 2 ⟨U u⟩ and P34 = −2 ⟨V u⟩ of the linear, P44 = ⟨V v⟩ of the
    circular rays; per_state: 1 if all rays are unpolarised (P11 and P12 only), else 4.
    """
    for lane in range(n):
        power = state[EI + lane]
        if power <= F0:
            continue
        ex, ey, ez = state[EX + lane], state[EY + lane], state[EZ + lane]
        wx, wy, wz = state[WX + lane], state[WY + lane], state[WZ + lane]
        spot = (np.int64(codes[GROUP + lane]) * count + np.int64(spots[lane])) * ANGLE_SUMS
        table[spot] += power
        cosine = np.float64(ex * wx + ey * wy + ez * wz)
        moments[0] += power * cosine
        gx, gy, gz = ex - wx, ey - wy, ez - wz
        if gx * gx + gy * gy + gz * gz < np.float32(4e-10):
            moments[1] += power
        mx, my, mz = wy * ez - wz * ey, wz * ex - wx * ez, wx * ey - wy * ex
        if mx * mx + my * my + mz * mz < _TINY:
            mx, my, mz = state[TX + lane], state[TY + lane], state[TZ + lane]
        q, u = _turned(state, lane, ex, ey, ez, mx, my, mz)
        if per_state == 1:
            table[spot + 1] += q
            continue
        share = polarisation_share(codes[RAY + lane])
        if share < 2:
            table[spot + 1] += F2 * q
            continue
        if share == 3:
            table[spot + 5] += np.float32(4.0) * state[EV + lane]
            continue
        a = mx * level[0] + my * level[1] + mz * level[2]
        b = (
            mx * (wy * level[2] - wz * level[1])
            + my * (wz * level[0] - wx * level[2])
            + mz * (wx * level[1] - wy * level[0])
        )
        norm = F1 / (a * a + b * b)
        q0, u0 = (a * a - b * b) * norm, F2 * a * b * norm
        table[spot + 2] += np.float32(8.0) * q * q0
        table[spot + 3] += np.float32(8.0) * u * u0
        table[spot + 4] -= np.float32(8.0) * state[EV + lane] * u0


@njit(cache=True, nogil=True, error_model="numpy")
def polarisation_share(ray: Any) -> Any:
    """Return which share a ray of an angle table belongs to: 0 and 1 unpolarised, 2 linear, 3 circular."""
    return np.int64(ray >> np.uint32(6)) & 3


@njit(cache=True, nogil=True, error_model="numpy")
def list_exits(
    state: Float32Array,
    codes: Uint32Array,
    spots: Uint32Array,
    n: int,
    cells: Any,
    values: Float32Array,
    numbers: Uint32Array,
    count: int,
) -> int:
    """Append lanes that leave with power to values (capacity, EXIT_COLUMNS), numbers (capacity, EXIT_CODES) uint32.

    Of these only the ones whose spot lies below `cells`. Return the number of exits met so far, which may pass the capacity.
    """
    for lane in range(n):
        if state[EI + lane] <= F0 or spots[lane] >= cells:
            continue
        if count < len(values):
            for column, row in enumerate((EX, EY, EZ, EI, EQ, EU, EV, TX, TY, TZ, WX, WY, WZ)):
                values[count, column] = state[row + lane]
            for column, row in enumerate((RAY, HITS, PATH_LOW, PATH_HIGH)):
                numbers[count, column] = codes[row + lane]
            numbers[count, 4] = spots[lane]
            numbers[count, 5] = codes[GROUP + lane]
        count += 1
    return count


@njit(cache=True, nogil=True, error_model="numpy")
def _turned(state: Float32Array, lane: int, ex: Any, ey: Any, ez: Any, mx: Any, my: Any, mz: Any) -> Any:
    """Return Q and U of a lane with e⊥ turned from row T to m (any length above 0, across e)."""
    tx, ty, tz = state[TX + lane], state[TY + lane], state[TZ + lane]
    a = mx * tx + my * ty + mz * tz
    b = mx * (ey * tz - ez * ty) + my * (ez * tx - ex * tz) + mz * (ex * ty - ey * tx)
    square = a * a + b * b
    norm = F1 / (square if square > _TINY else F1)
    cosine, sine = (a * a - b * b) * norm, F2 * a * b * norm
    return cosine * state[EQ + lane] - sine * state[EU + lane], sine * state[EQ + lane] + cosine * state[EU + lane]
