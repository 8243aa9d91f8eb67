"""Rays in a convex crystal: way to the next face, refraction and reflection, Russian roulette, packing.

A crystal is a set of slabs −b ≤ N·x ≤ a, one for each pair of parallel faces, flat float32 (slabs * SLAB): N, a, b.
Face 2j is the side of +N of slab j, face 2j + 1 the other.

At every face the refracted part leaves (rows E) and the reflected part goes on. With the relative index n, cosines ci
inside and ct outside, the triad e⊥ × e∥ = propagation on both sides, and fields ∝ exp(−iωt), Fresnel's amplitudes from
inside are

    r⊥ = (n ci − ct) / (n ci + ct),   r∥ = (ci − n ct) / (ci + n ct)

(Born & Wolf, *Principles of Optics*, 7th ed. 1999, §1.5.2 eq. 21; their sign of r∥ is the triad's). The Stokes vector
of what is reflected is, with R = r², r∥ r⊥* = C + iS,

    I' = (R∥ + R⊥)/2 I + (R∥ − R⊥)/2 Q,   U' = C U + S V,   V' = C V − S U,

Q' likewise with I and Q exchanged, and of what is refracted the same with 1 − R and C = √((1 − R∥)(1 − R⊥)), S = 0.
Under total reflection ct = i√(n² sin² − 1) = i g, R = 1 and C + iS = A / A*, A = n (ci² + g²) − i ci g (n² − 1).
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from skyoptics.kernels.elementary import decay
from skyoptics.kernels.lanes import (
    ABSORPTION,
    CODES_KEPT,
    COSINE,
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
    F3,
    HALF,
    HITS,
    INDEX,
    KEPT,
    LENGTH,
    MET,
    NX,
    NY,
    NZ,
    PATH_HIGH,
    PATH_LOW,
    PX,
    PY,
    PZ,
    RAY,
    SI,
    SQ,
    STRIDE,
    SU,
    SUM_ABSORBED,
    SUM_BELOW,
    SUM_OUT,
    SUM_ROULETTE,
    SV,
    SX,
    SY,
    SZ,
    WIDTH,
    Float32Array,
    Uint32Array,
)
from skyoptics.kernels.random import hash32

SLAB = 5
LONG_PATH = 1024
"""From this hit on every ray plays roulette at evens, so that none is followed for ever. Under total reflection some stay
long: 1e-4 of the power is still inside after 64 hits, 1e-6 after 512, 4e-8 after 1000 (aspects 0.1 to 10)."""
ROULETTE_DIMENSION = 9
"""Hash dimension of the roulette at hit 0 (table in `skyoptics.kernels.random`)."""

_BIG = np.float32(1e30)
_SLOPE = np.float32(1e-12)
_STEP = np.float32(2.0**-24)
_FOUR = np.float32(4.0)
_MASK30 = np.uint32((1 << 30) - 1)


@njit(cache=True, nogil=True, error_model="numpy")
def advance(state: Float32Array, n: int, slabs: Float32Array) -> None:
    """Carry lanes 0 … n − 1 to the face they meet and reflect them: the interior step.

    Rows P, D; LENGTH of the way; COSINE of the ray with the slab's normal (its sign tells which of the two faces), row N that
    normal, MET the slab. Distances are compared crosswise, so that one division a hit is left. A slab is left on the side the
    ray heads for, so the face just left cannot be met again. The four slabs of a prism are read before the loop, so that
    all stays in registers (2.0 ns a hit; 3.0 with slabs outside and lanes inside, as other shapes have it; 5 with a table of
    normals looked up by number).
    """
    if len(slabs) == 4 * SLAB:
        a0, a1, a2, a3, a4 = slabs[0], slabs[1], slabs[2], slabs[3], slabs[4]
        b0, b1, b2, b3, b4 = slabs[5], slabs[6], slabs[7], slabs[8], slabs[9]
        c0, c1, c2, c3, c4 = slabs[10], slabs[11], slabs[12], slabs[13], slabs[14]
        d0, d1, d2, d3, d4 = slabs[15], slabs[16], slabs[17], slabs[18], slabs[19]
        for lane in range(n):
            px, py, pz = state[PX + lane], state[PY + lane], state[PZ + lane]
            dx, dy, dz = state[DX + lane], state[DY + lane], state[DZ + lane]
            best = (_BIG, F1, F0, F0, F0, F0)
            best = _nearer(a0, a1, a2, a3, a4, F0, dx, dy, dz, px, py, pz, best)
            best = _nearer(b0, b1, b2, b3, b4, F1, dx, dy, dz, px, py, pz, best)
            best = _nearer(c0, c1, c2, c3, c4, F2, dx, dy, dz, px, py, pz, best)
            far, cosine, nx, ny, nz, number = _nearer(d0, d1, d2, d3, d4, F3, dx, dy, dz, px, py, pz, best)
            t = far / abs(cosine)
            twice = F2 * cosine
            state[PX + lane], state[PY + lane], state[PZ + lane] = px + t * dx, py + t * dy, pz + t * dz
            state[DX + lane], state[DY + lane], state[DZ + lane] = dx - twice * nx, dy - twice * ny, dz - twice * nz
            state[NX + lane], state[NY + lane], state[NZ + lane] = nx, ny, nz
            state[LENGTH + lane], state[COSINE + lane], state[MET + lane] = t, cosine, number
        return
    for lane in range(n):
        state[LENGTH + lane] = _BIG
        state[COSINE + lane] = F1
    for j in range(len(slabs) // SLAB):
        nx, ny, nz = slabs[j * SLAB], slabs[j * SLAB + 1], slabs[j * SLAB + 2]
        ahead, behind = slabs[j * SLAB + 3], slabs[j * SLAB + 4]
        for lane in range(n):
            px, py, pz = state[PX + lane], state[PY + lane], state[PZ + lane]
            dx, dy, dz = state[DX + lane], state[DY + lane], state[DZ + lane]
            best = (
                state[LENGTH + lane],
                state[COSINE + lane],
                state[NX + lane],
                state[NY + lane],
                state[NZ + lane],
                state[MET + lane],
            )
            best = _nearer(nx, ny, nz, ahead, behind, np.float32(j), dx, dy, dz, px, py, pz, best)
            state[LENGTH + lane], state[COSINE + lane], state[MET + lane] = best[0], best[1], best[5]
            state[NX + lane], state[NY + lane], state[NZ + lane] = best[2], best[3], best[4]
    for lane in range(n):
        px, py, pz = state[PX + lane], state[PY + lane], state[PZ + lane]
        dx, dy, dz = state[DX + lane], state[DY + lane], state[DZ + lane]
        nx, ny, nz = state[NX + lane], state[NY + lane], state[NZ + lane]
        cosine = state[COSINE + lane]
        t = state[LENGTH + lane] / abs(cosine)
        twice = F2 * cosine
        state[LENGTH + lane] = t
        state[PX + lane], state[PY + lane], state[PZ + lane] = px + t * dx, py + t * dy, pz + t * dz
        state[DX + lane], state[DY + lane], state[DZ + lane] = dx - twice * nx, dy - twice * ny, dz - twice * nz


@njit(cache=True, nogil=True, error_model="numpy")
def _nearer(
    nx: Any,
    ny: Any,
    nz: Any,
    ahead: Any,
    behind: Any,
    number: Any,
    dx: Any,
    dy: Any,
    dz: Any,
    px: Any,
    py: Any,
    pz: Any,
    best: Any,
) -> Any:
    """Return the better of the best slab so far (gap, cosine, normal, number) and this one."""
    far, slow, bx, by, bz, met = best
    cosine = nx * dx + ny * dy + nz * dz
    place = nx * px + ny * py + nz * pz
    gap = ahead - place if cosine > F0 else behind + place
    gap = gap if gap > F0 else F0
    nearer = gap * abs(slow) < far * abs(cosine)
    return (
        gap if nearer else far,
        cosine if nearer else slow,
        nx if nearer else bx,
        ny if nearer else by,
        nz if nearer else bz,
        number if nearer else met,
    )


@njit(cache=True, nogil=True, error_model="numpy")
def interface(state: Float32Array, n: int) -> None:
    """Part the light of lanes 0 … n − 1 that `advance` has brought to a face: row E leaves, row S goes on along D."""
    for lane in range(n):
        cosine = state[COSINE + lane]
        ci = abs(cosine)
        sign = F1 if cosine > F0 else -F1
        nx, ny, nz = sign * state[NX + lane], sign * state[NY + lane], sign * state[NZ + lane]
        state[MET + lane] = F2 * state[MET + lane] + (F0 if cosine > F0 else F1)
        two = F2 * ci
        dx, dy, dz = state[DX + lane] + two * nx, state[DY + lane] + two * ny, state[DZ + lane] + two * nz
        m = state[INDEX + lane]
        t = state[LENGTH + lane]
        left = decay(state[ABSORPTION + lane] * t)
        power = state[SI + lane] * left
        state[SUM_ABSORBED + lane] = state[SUM_ABSORBED + lane] + (state[SI + lane] - power)
        # e⊥ turns to the normal of this plane of incidence
        ox, oy, oz = state[SX + lane], state[SY + lane], state[SZ + lane]
        sx, sy, sz = dy * nz - dz * ny, dz * nx - dx * nz, dx * ny - dy * nx
        slanted = sx * sx + sy * sy + sz * sz > _SLOPE
        sx, sy, sz = sx if slanted else ox, sy if slanted else oy, sz if slanted else oz
        a = sx * ox + sy * oy + sz * oz
        b = sx * (dy * oz - dz * oy) + sy * (dz * ox - dx * oz) + sz * (dx * oy - dy * ox)
        norm = left / (a * a + b * b)
        cosine, sine = (a * a - b * b) * norm, F2 * a * b * norm
        q = cosine * state[SQ + lane] - sine * state[SU + lane]
        u = sine * state[SQ + lane] + cosine * state[SU + lane]
        v = left * state[SV + lane]
        # Fresnel from inside
        square = F1 - m * m * (F1 - ci * ci)
        total = square <= F0
        root = np.sqrt(abs(square))
        ct, g = F0 if total else root, root if total else F0
        x = m * ci
        ds, dp = x + ct, ci + m * ct
        along, across = m * (ci * ci + g * g), -ci * g * (m * m - F1)
        quotient = F1 / (along * along + across * across if total else ds * dp)
        rs = (x - ct) * dp * quotient
        rp = (ci - m * ct) * ds * quotient
        mean, half = HALF * (rp * rp + rs * rs), HALF * (rp * rp - rs * rs)
        mean, half = F1 if total else mean, F0 if total else half
        cross = (along * along - across * across) * quotient if total else rp * rs
        twist = F2 * along * across * quotient if total else F0
        through = _FOUR * x * ct * quotient
        state[EI + lane] = (F1 - mean) * power - half * q
        state[EQ + lane] = (F1 - mean) * q - half * power
        state[EU + lane] = through * u
        state[EV + lane] = through * v
        bend = ct - x
        state[EX + lane] = m * dx + bend * nx
        state[EY + lane] = m * dy + bend * ny
        state[EZ + lane] = m * dz + bend * nz
        state[SI + lane] = mean * power + half * q
        state[SQ + lane] = half * power + mean * q
        state[SU + lane] = cross * u + twist * v
        state[SV + lane] = cross * v - twist * u
        state[SX + lane] = sx
        state[SY + lane] = sy
        state[SZ + lane] = sz
        state[SUM_OUT + lane] = state[SUM_OUT + lane] + state[EI + lane]


@njit(cache=True, nogil=True, error_model="numpy")
def note_faces(state: Float32Array, codes: Uint32Array, n: int) -> None:
    """Write the faces just met into the path codes of lanes 0 … n − 1."""
    for lane in range(n):
        low = codes[PATH_LOW + lane]
        high = codes[PATH_HIGH + lane]
        face = np.uint32(np.int32(state[MET + lane]) + 1)
        codes[PATH_HIGH + lane] = np.uint32(
            np.uint32(np.uint32(high << np.uint32(5)) | (low >> np.uint32(25))) & _MASK30
        )
        codes[PATH_LOW + lane] = np.uint32(np.uint32(np.uint32(low << np.uint32(5)) & _MASK30) | face)
        codes[HITS + lane] = np.uint32(codes[HITS + lane] + np.uint32(1))


@njit(cache=True, nogil=True, error_model="numpy")
def roulette(state: Float32Array, codes: Uint32Array, n: int, cutoff: Any, key_low: Any, key_high: Any) -> None:
    """Let weak rays (power below cutoff) live on with probability power / cutoff, at power cutoff: unbiased.

    From `LONG_PATH` hits on any ray plays at evens. SUM_ROULETTE takes power gained less power lost (mean 0), SUM_BELOW the
    power a plain cut-off would have dropped.
    """
    for lane in range(n):
        power = state[SI + lane]
        hits = codes[HITS + lane]
        chance = power / cutoff
        chance = chance if chance < F1 else F1
        chance = chance if hits < np.uint32(LONG_PATH) else HALF * chance
        bits = hash32(key_low, key_high, codes[RAY + lane], np.uint32(hits + np.uint32(ROULETTE_DIMENSION)))
        draw = np.float32(np.int32(bits >> np.uint32(8))) * _STEP
        factor = F1 / chance if draw < chance else F0
        state[SUM_BELOW + lane] = state[SUM_BELOW + lane] + (power if chance < F1 else F0)
        state[SUM_ROULETTE + lane] = state[SUM_ROULETTE + lane] + power * (factor - F1)
        state[SI + lane] = factor * power
        state[SQ + lane] = factor * state[SQ + lane]
        state[SU + lane] = factor * state[SU + lane]
        state[SV + lane] = factor * state[SV + lane]


@njit(cache=True, nogil=True, error_model="numpy")
def pack(state: Float32Array, codes: Uint32Array, n: int, holes: Uint32Array, movers: Uint32Array) -> int:
    """Move the last live lanes into the places of dead ones (power 0); return how many live.

    holes, movers: scratch, (WIDTH + 1,) uint32. The lists are written without branches: who dies is not to be predicted.
    """
    live = 0
    for lane in range(n):
        live += 1 if state[SI + lane] > F0 else 0
    count = 0
    for lane in range(live):
        holes[count] = lane
        count += 0 if state[SI + lane] > F0 else 1
    count = 0
    for lane in range(live, n):
        movers[count] = lane
        count += 1 if state[SI + lane] > F0 else 0
    for move in range(count):
        to, of = np.uint64(holes[move]), np.uint64(movers[move])  # unsigned: no check for counting from the end
        for row in range(KEPT):
            start = np.uint64(row * STRIDE)
            state[start + to] = state[start + of]
        for row in range(CODES_KEPT):
            start = np.uint64(row * STRIDE)
            codes[start + to] = codes[start + of]
    return live


@njit(cache=True, nogil=True, error_model="numpy")
def step_lanes(
    state: Float32Array, start: Float32Array, slabs: Float32Array, hits: int, repeats: int, polarised: bool
) -> None:
    """Follow a full pool from `start` for a fixed number of hits, `repeats` times over: for the benchmark."""
    for _ in range(repeats):
        for i in range(KEPT * STRIDE):
            state[i] = start[i]
        for _hit in range(hits):
            advance(state, WIDTH, slabs)
            if polarised:
                interface(state, WIDTH)
