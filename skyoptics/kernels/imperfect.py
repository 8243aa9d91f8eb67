"""Crystals that are not ideal: faces a little askew, two indices, beams spread by diffraction.

*Faces askew.* At each refraction and reflection the ray meets its face with a normal of its own, N + σ g normalised, g three
standard Gaussians: the angle between two faces spreads with √2 σ. Fresnel's shares stay those of the ideal face. (Tilted
facets for each ray: Macke, Mueller & Raschke, J. Atmos. Sci. 53, 2813 (1996), there for rough faces.)

*Two indices.* Ice is uniaxial with the c-axis as optic axis. A ray is traced as ordinary (index n_o, electric vector across
c) or extraordinary (in the plane of c, 1/n² = cos²ψ/n_o² + sin²ψ/n_e², ψ to the c-axis), in turns of 256, and carries
twice the share of its light that swings so (Born & Wolf, *Principles of Optics*, 7th ed. 1999, §15.3). What the index was
at entry it stays; phases between the two waves, which a crystal of some µm already scrambles over a spectral bin, and the
small angle between ray and wave are left out.

*Diffraction.* What leaves is turned by an angle drawn from Fraunhofer's pattern of a circular aperture,
density ∝ |2 J₁(x)/x|², x = 2π a sin δ / λ: (Born & Wolf §8.5.2), the same for every exit of a crystal.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from skyoptics.kernels.elementary import minus_log, sine_cosine_turn
from skyoptics.kernels.lanes import (
    COSINE,
    DX,
    DY,
    DZ,
    EX,
    EY,
    EZ,
    F0,
    F1,
    F2,
    HITS,
    INDEX,
    NX,
    NY,
    NZ,
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
    SU,
    SUM_ROULETTE,
    SV,
    SX,
    SY,
    SZ,
    WX,
    WY,
    WZ,
    Float32Array,
    Uint32Array,
)
from skyoptics.kernels.random import hash32

TILTED, BLURRED = 1 << 24, 1 << 25
"""First hash dimensions of normals and of diffraction; a hit takes four and two (roulette stays below)."""
TURN = 256
"""Rays in a row that are all ordinary or all extraordinary."""

_STEP, _MIDDLE = np.float32(2.0**-24), np.float32(2.0**-25)
_TINY = np.float32(1e-12)
_WIDEST = np.float32(0.5)


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def _draw(key_low: Any, key_high: Any, ray: Any, dimension: Any) -> Any:
    """Return a float32 in (0, 1)."""
    bits = hash32(key_low, key_high, ray, np.uint32(dimension))
    return np.float32(np.int32(bits >> np.uint32(8))) * _STEP + _MIDDLE


@njit(cache=True, nogil=True, error_model="numpy")
def _askew(key_low: Any, key_high: Any, ray: Any, hit: Any, sigma: Any, x: Any, y: Any, z: Any) -> Any:
    """Return the unit vector x, y, z with σ times a Gaussian vector added, of length 1 again (Box & Muller 1958)."""
    first = np.uint32(np.uint32(TILTED) + np.uint32(hit) * np.uint32(4))
    a = sigma * np.sqrt(F2 * minus_log(_draw(key_low, key_high, ray, first)))
    b = sigma * np.sqrt(F2 * minus_log(_draw(key_low, key_high, ray, np.uint32(first + np.uint32(1)))))
    s, c = sine_cosine_turn(_draw(key_low, key_high, ray, np.uint32(first + np.uint32(2))))
    d, _ = sine_cosine_turn(_draw(key_low, key_high, ray, np.uint32(first + np.uint32(3))))
    x, y, z = x + a * c, y + a * s, z + b * d
    norm = F1 / np.sqrt(x * x + y * y + z * z)
    return x * norm, y * norm, z * norm


@njit(cache=True, nogil=True, error_model="numpy")
def split_entered(state: Float32Array, codes: Uint32Array, n: int, ordinary_to_extraordinary: Any) -> None:
    """Make lanes 0 … n − 1, just entered with the ordinary index, ordinary or extraordinary rays.

    ordinary_to_extraordinary: n_e − n_o. Rows INDEX, D, S; row N outward normal; rows W, R for the way in.
    """
    for lane in range(n):
        extraordinary = (codes[RAY + lane] // np.uint32(TURN)) & np.uint32(1) == np.uint32(1)
        no = state[INDEX + lane]
        ne = no + ordinary_to_extraordinary
        dx, dy, dz = state[DX + lane], state[DY + lane], state[DZ + lane]
        cosine = dz * dz
        m = no * ne / np.sqrt(ne * ne * cosine + no * no * (F1 - cosine)) if extraordinary else no
        # e⊥ turns to the ordinary swing, across c and the ray
        ox, oy, oz = state[SX + lane], state[SY + lane], state[SZ + lane]
        sx, sy, sz = dy, -dx, F0
        slanted = sx * sx + sy * sy > _TINY
        sx, sy, sz = sx if slanted else ox, sy if slanted else oy, sz if slanted else oz
        a = sx * ox + sy * oy + sz * oz
        b = sx * (dy * oz - dz * oy) + sy * (dz * ox - dx * oz) + sz * (dx * oy - dy * ox)
        norm = F1 / (a * a + b * b)
        q = ((a * a - b * b) * state[SQ + lane] - F2 * a * b * state[SU + lane]) * norm
        before = state[SI + lane]
        power = before + q if extraordinary else before - q
        state[SUM_ROULETTE + lane] = state[SUM_ROULETTE + lane] + (power - before)
        state[SI + lane] = power
        state[SQ + lane] = power if extraordinary else -power
        state[SU + lane] = F0
        state[SV + lane] = F0
        state[SX + lane], state[SY + lane], state[SZ + lane] = sx, sy, sz
        # the way in again, with this index
        nx, ny, nz = state[NX + lane], state[NY + lane], state[NZ + lane]
        x, y, z = state[WX + lane], state[WY + lane], state[WZ + lane]
        ix = state[R00 + lane] * x + state[R10 + lane] * y + state[R20 + lane] * z
        iy = state[R01 + lane] * x + state[R11 + lane] * y + state[R21 + lane] * z
        iz = state[R02 + lane] * x + state[R12 + lane] * y + state[R22 + lane] * z
        ci = -(ix * nx + iy * ny + iz * nz)
        inverse = F1 / m
        ct = np.sqrt(F1 - (F1 - ci * ci) * inverse * inverse)
        bend = ci * inverse - ct
        state[DX + lane], state[DY + lane] = ix * inverse + bend * nx, iy * inverse + bend * ny
        state[DZ + lane] = iz * inverse + bend * nz
        state[INDEX + lane] = m


@njit(cache=True, nogil=True, error_model="numpy")
def tilt_entered(state: Float32Array, codes: Uint32Array, n: int, sigma: Any, key_low: Any, key_high: Any) -> None:
    """Let lanes 0 … n − 1, just entered by a face of outward normal N, enter by one that is askew: rows D and E."""
    for lane in range(n):
        nx, ny, nz = state[NX + lane], state[NY + lane], state[NZ + lane]
        ax, ay, az = _askew(key_low, key_high, codes[RAY + lane], np.uint32(0), sigma, nx, ny, nz)
        x, y, z = state[WX + lane], state[WY + lane], state[WZ + lane]
        ix = state[R00 + lane] * x + state[R10 + lane] * y + state[R20 + lane] * z
        iy = state[R01 + lane] * x + state[R11 + lane] * y + state[R21 + lane] * z
        iz = state[R02 + lane] * x + state[R12 + lane] * y + state[R22 + lane] * z
        ci = -(ix * ax + iy * ay + iz * az)
        two = F2 * ci
        ex, ey, ez = ix + two * ax, iy + two * ay, iz + two * az
        out = (ci > F0) & (ex * nx + ey * ny + ez * nz > F0)
        state[EX + lane] = ex if out else state[EX + lane]
        state[EY + lane] = ey if out else state[EY + lane]
        state[EZ + lane] = ez if out else state[EZ + lane]
        inverse = F1 / state[INDEX + lane]
        ct = np.sqrt(F1 - (F1 - ci * ci) * inverse * inverse)
        bend = ci * inverse - ct
        dx, dy, dz = ix * inverse + bend * ax, iy * inverse + bend * ay, iz * inverse + bend * az
        within = (ci > F0) & (dx * nx + dy * ny + dz * nz < F0)
        state[DX + lane] = dx if within else state[DX + lane]
        state[DY + lane] = dy if within else state[DY + lane]
        state[DZ + lane] = dz if within else state[DZ + lane]


@njit(cache=True, nogil=True, error_model="numpy")
def tilt_met(state: Float32Array, codes: Uint32Array, n: int, sigma: Any, key_low: Any, key_high: Any) -> None:
    """Let lanes 0 … n − 1 leave by, and be reflected from, a face askew: rows E and D after `polyhedron.interface`."""
    for lane in range(n):
        sign = F1 if state[COSINE + lane] > F0 else -F1
        ci = abs(state[COSINE + lane])
        nx, ny, nz = sign * state[NX + lane], sign * state[NY + lane], sign * state[NZ + lane]
        ax, ay, az = _askew(key_low, key_high, codes[RAY + lane], codes[HITS + lane], sigma, nx, ny, nz)
        two = F2 * ci
        dx, dy, dz = state[DX + lane] + two * nx, state[DY + lane] + two * ny, state[DZ + lane] + two * nz
        m = state[INDEX + lane]
        cosine = dx * ax + dy * ay + dz * az
        square = F1 - m * m * (F1 - cosine * cosine)
        bend = np.sqrt(square if square > F0 else F0) - m * cosine
        ex, ey, ez = m * dx + bend * ax, m * dy + bend * ay, m * dz + bend * az
        out = (square > F0) & (cosine > F0) & (ex * nx + ey * ny + ez * nz > F0)
        state[EX + lane] = ex if out else state[EX + lane]
        state[EY + lane] = ey if out else state[EY + lane]
        state[EZ + lane] = ez if out else state[EZ + lane]
        two = F2 * cosine
        dx, dy, dz = dx - two * ax, dy - two * ay, dz - two * az
        within = (cosine > F0) & (dx * nx + dy * ny + dz * nz < F0)
        state[DX + lane] = dx if within else state[DX + lane]
        state[DY + lane] = dy if within else state[DY + lane]
        state[DZ + lane] = dz if within else state[DZ + lane]


@njit(cache=True, nogil=True, error_model="numpy")
def diffract(
    state: Float32Array,
    codes: Uint32Array,
    n: int,
    per_argument: Any,
    pattern: Float32Array,
    key_low: Any,
    key_high: Any,
) -> None:
    """Turn rows E of lanes 0 … n − 1 by angles of Fraunhofer's pattern.

    per_argument: λ / 2πa, angle for x = 1; pattern (m + 1,): x at equal steps of enclosed power up to some share below 1,
    that share in place of the last entry; beyond it x = 2 / π(1 − share), the mean of the far rings. Row S is e⊥.
    """
    steps = np.float32(len(pattern) - 2)
    share = pattern[len(pattern) - 1]
    per_share = steps / share
    for lane in range(n):
        ray = codes[RAY + lane]
        first = np.uint32(np.uint32(BLURRED) + codes[HITS + lane] * np.uint32(2))
        u = _draw(key_low, key_high, ray, first)
        s, c = sine_cosine_turn(_draw(key_low, key_high, ray, np.uint32(first + np.uint32(1))))
        place = u * per_share
        place = place if place < steps else steps
        i = np.int32(place)
        i = i if i < np.int32(steps) else np.int32(steps) - np.int32(1)
        x = pattern[i] + (place - np.float32(i)) * (pattern[i + 1] - pattern[i])
        far = np.float32(2.0 / np.pi) / (F1 - u)
        x = x if u < share else far
        sine = x * per_argument
        sine = sine if sine < _WIDEST else _WIDEST
        cosine = np.sqrt(F1 - sine * sine)
        ex, ey, ez = state[EX + lane], state[EY + lane], state[EZ + lane]
        ax, ay, az = state[SX + lane], state[SY + lane], state[SZ + lane]
        bx, by, bz = ey * az - ez * ay, ez * ax - ex * az, ex * ay - ey * ax
        norm = sine / np.sqrt(bx * bx + by * by + bz * bz + _TINY)
        bx, by, bz = bx * norm, by * norm, bz * norm
        ax, ay, az = by * ez - bz * ey, bz * ex - bx * ez, bx * ey - by * ex
        state[EX + lane] = cosine * ex + c * ax + s * bx
        state[EY + lane] = cosine * ey + c * ay + s * by
        state[EZ + lane] = cosine * ez + c * az + s * bz
