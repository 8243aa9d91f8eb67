"""Entry: rays are put on the crystal itself, so that none misses, and lose at once what the outside reflects.

`patches`, flat float32 (count * PATCH), cover the surface with parallelograms and triangles: N · area, corner, two edges, N,
1 for a triangle else 0, face. Fresnel's amplitudes from outside are those of `skyoptics.kernels.polyhedron` with the
index on the other side; the Stokes vector turns as there.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from skyoptics.kernels.lanes import (
    CHUNK,
    DX,
    DY,
    DZ,
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
    HALF,
    HITS,
    INDEX,
    LENGTH,
    MET,
    NX,
    NY,
    NZ,
    PATH_HIGH,
    PATH_LOW,
    PX,
    R00,
    R01,
    R02,
    R10,
    R11,
    R12,
    R20,
    R21,
    R22,
    RAY,
    SI,
    SQ,
    STRIDE,
    SU,
    SUM_IN,
    SUM_OUT,
    SV,
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
from skyoptics.kernels.orient import ENTRY_FIRST, ENTRY_SECOND

PATCH = 17

_SLOPE = np.float32(1e-12)
_BELOW = np.float32(1.0 - 2.0**-22)  # keeps the chosen patch below the last lit one whatever the rounding
_FOUR = np.float32(4.0)


@njit(cache=True, nogil=True, error_model="numpy")
def enter_chunk(
    state: Float32Array,
    codes: Uint32Array,
    ray: int,
    points: Float32Array,
    patches: Float32Array,
    sums: Float32Array,
    scale: Any,
) -> None:
    """Put CHUNK new rays on the crystal, lanes 0 … CHUNK − 1.

    Rows R, W, INDEX must be there, and the incident Stokes vector in rows EI to EV with its e⊥ [world] in rows T. ray:
    number of the first of them; scale: 1 / reference area, so that a ray's power is its crystal's area across the beam in
    units of the reference, times the incident I; sums: scratch, ((patches + 1) * CHUNK,). The face is chosen by its area
    across the beam, the point evenly on it: no ray misses. Row E takes what the outside reflects.
    """
    for lane in range(CHUNK):
        x, y, z = state[WX + lane], state[WY + lane], state[WZ + lane]
        state[DX + lane] = state[R00 + lane] * x + state[R10 + lane] * y + state[R20 + lane] * z
        state[DY + lane] = state[R01 + lane] * x + state[R11 + lane] * y + state[R21 + lane] * z
        state[DZ + lane] = state[R02 + lane] * x + state[R12 + lane] * y + state[R22 + lane] * z
    count = len(patches) // PATCH
    for lane in range(CHUNK):
        sums[lane] = F0
    for j in range(count):
        ax, ay, az = patches[j * PATCH], patches[j * PATCH + 1], patches[j * PATCH + 2]
        before = j * CHUNK
        for lane in range(CHUNK):
            area = -(ax * state[DX + lane] + ay * state[DY + lane] + az * state[DZ + lane])
            sums[before + CHUNK + lane] = sums[before + lane] + (area if area > F0 else F0)
    for lane in range(CHUNK):
        total = sums[count * CHUNK + lane]
        state[SI + lane] = total * scale
        state[SUM_IN + lane] = state[SUM_IN + lane] + total * scale * state[EI + lane]
        state[LENGTH + lane] = total * (points[ENTRY_FIRST * CHUNK + lane] * _BELOW)
        state[MET + lane] = F0
    for j in range(1, count + 1):
        for lane in range(CHUNK):
            state[MET + lane] = state[MET + lane] + (F1 if sums[j * CHUNK + lane] <= state[LENGTH + lane] else F0)
    for lane in range(CHUNK):
        at = np.uint64(np.uint32(np.int32(state[MET + lane])))
        spot = at * np.uint64(CHUNK) + np.uint64(lane)
        below = sums[spot]
        u = (state[LENGTH + lane] - below) / (sums[spot + np.uint64(CHUNK)] - below)
        u = u if u < F1 else F1
        v = points[ENTRY_SECOND * CHUNK + lane]
        at = at * np.uint64(PATCH)
        fold = (u + v > F1) & (patches[at + np.uint64(15)] > F0)
        u = F1 - u if fold else u
        v = F1 - v if fold else v
        for axis in range(3):
            a = np.uint64(axis)
            state[PX + axis * STRIDE + lane] = (
                patches[at + np.uint64(3) + a] + u * patches[at + np.uint64(6) + a] + v * patches[at + np.uint64(9) + a]
            )
            state[NX + axis * STRIDE + lane] = patches[at + np.uint64(12) + a]
        state[MET + lane] = patches[at + np.uint64(16)]
    for lane in range(CHUNK):
        codes[RAY + lane] = np.uint32(ray + lane)
        codes[HITS + lane] = np.uint32(1)
        codes[PATH_LOW + lane] = np.uint32(np.int32(state[MET + lane]) + 1)
        codes[PATH_HIGH + lane] = np.uint32(0)
    for lane in range(CHUNK):
        hx, hy, hz = state[TX + lane], state[TY + lane], state[TZ + lane]
        dx, dy, dz = state[DX + lane], state[DY + lane], state[DZ + lane]
        nx, ny, nz = state[NX + lane], state[NY + lane], state[NZ + lane]
        n = state[INDEX + lane]
        area = state[SI + lane]
        power = area * state[EI + lane]
        q0, u0, v0 = area * state[EQ + lane], area * state[EU + lane], area * state[EV + lane]
        # e⊥ turns from the incident one to the normal of the plane of incidence
        ox = state[R00 + lane] * hx + state[R10 + lane] * hy + state[R20 + lane] * hz
        oy = state[R01 + lane] * hx + state[R11 + lane] * hy + state[R21 + lane] * hz
        oz = state[R02 + lane] * hx + state[R12 + lane] * hy + state[R22 + lane] * hz
        sx, sy, sz = dy * nz - dz * ny, dz * nx - dx * nz, dx * ny - dy * nx
        slanted = sx * sx + sy * sy + sz * sz > _SLOPE
        sx, sy, sz = sx if slanted else ox, sy if slanted else oy, sz if slanted else oz
        a = sx * ox + sy * oy + sz * oz
        b = sx * (dy * oz - dz * oy) + sy * (dz * ox - dx * oz) + sz * (dx * oy - dy * ox)
        norm = F1 / (a * a + b * b)
        cosine, sine = (a * a - b * b) * norm, F2 * a * b * norm
        q = cosine * q0 - sine * u0
        u = sine * q0 + cosine * u0
        v = v0
        # Fresnel from outside
        ci = -(dx * nx + dy * ny + dz * nz)
        inverse = F1 / n
        square = F1 - (F1 - ci * ci) * inverse * inverse
        ct = np.sqrt(square)
        ds, dp = ci + n * ct, n * ci + ct
        quotient = F1 / (ds * dp)
        rs = (ci - n * ct) * dp * quotient
        rp = (n * ci - ct) * ds * quotient
        mean, half = HALF * (rp * rp + rs * rs), HALF * (rp * rp - rs * rs)
        cross = rp * rs
        through = _FOUR * n * ci * ct * quotient
        state[EI + lane] = mean * power + half * q
        state[EQ + lane] = half * power + mean * q
        state[EU + lane] = cross * u
        state[EV + lane] = cross * v
        two = F2 * ci
        state[EX + lane] = dx + two * nx
        state[EY + lane] = dy + two * ny
        state[EZ + lane] = dz + two * nz
        state[SI + lane] = (F1 - mean) * power - half * q
        state[SQ + lane] = (F1 - mean) * q - half * power
        state[SU + lane] = through * u
        state[SV + lane] = through * v
        state[SX + lane] = sx
        state[SY + lane] = sy
        state[SZ + lane] = sz
        bend = ci * inverse - ct
        state[DX + lane] = dx * inverse + bend * nx
        state[DY + lane] = dy * inverse + bend * ny
        state[DZ + lane] = dz * inverse + bend * nz
        state[SUM_OUT + lane] = state[SUM_OUT + lane] + state[EI + lane]


@njit(cache=True, nogil=True, error_model="numpy")
def weigh_chunk(state: Float32Array, weights: Float32Array) -> None:
    """Multiply the power of CHUNK new rays, and what the outside reflected, by weights (CHUNK,)."""
    for lane in range(CHUNK):
        more = weights[lane] - F1
        state[SUM_IN + lane] = state[SUM_IN + lane] + more * (state[SI + lane] + state[EI + lane])
        state[SUM_OUT + lane] = state[SUM_OUT + lane] + more * state[EI + lane]
    for lane in range(CHUNK):
        weight = weights[lane]
        state[SI + lane] = weight * state[SI + lane]
        state[SQ + lane] = weight * state[SQ + lane]
        state[SU + lane] = weight * state[SU + lane]
        state[SV + lane] = weight * state[SV + lane]
        state[EI + lane] = weight * state[EI + lane]
        state[EQ + lane] = weight * state[EQ + lane]
        state[EU + lane] = weight * state[EU + lane]
        state[EV + lane] = weight * state[EV + lane]
