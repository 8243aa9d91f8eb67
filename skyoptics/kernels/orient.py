"""Birth of rays, first half: wavelength, point on the source's disc, orientation of the crystal.

A crystal stands in the pose of its law and is then tilted:

    R = T(θ, α) · Z(φ) · pose,

Z a turn about the vertical by the uniform azimuth φ, T a tilt by θ about a horizontal axis of uniform direction α. The
pose puts the c-axis upright (random, plate) or level (column: turned about its c-axis by a free spin ψ; parry: two side
faces level), or any axis of the crystal at an inclination β to the vertical, turned about it by ψ:

    pose = Y(β) · Z(ψ) · A,   A turning that axis to z.

θ follows Fisher's law on the sphere, density ∝ exp(κ cos θ) sin θ, κ = 1/σ² (Fisher, Proc. R. Soc. A 217,
295 (1953)): for small σ a Gaussian of standard deviation σ in each of the two components of tilt. It is sampled exactly,

    1 − cos θ = −ln(1 − u (1 − e^(−2κ))) / κ;

κ → 0, a uniform rotation, is the random law. Any other law of tilt is a table of 1 − cos θ at equal steps of probability.

`law` (int64): 0 random, 1 upright c-axis (plate), 2 level c-axis, free spin (column), 3 level c-axis, fixed (parry), 4 an
axis of the crystal, free spin about it.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from skyoptics.kernels.elementary import minus_log, sine_cosine_turn
from skyoptics.kernels.lanes import (
    ABSORPTION,
    CHUNK,
    EI,
    EQ,
    EU,
    EV,
    EX,
    F0,
    F1,
    F2,
    HALF,
    INDEX,
    R00,
    R01,
    R02,
    R10,
    R11,
    R12,
    R20,
    R21,
    R22,
    TX,
    TY,
    TZ,
    WX,
    WY,
    WZ,
    Float32Array,
)

RANDOM, UPRIGHT, LEVEL_SPINNING, LEVEL_FIXED, AXIS = 0, 1, 2, 3, 4

# Dimensions of the Sobol points: the table of `skyoptics.kernels.random`, and a fourth one for orientation
ENTRY_FIRST, WAVELENGTH, ENTRY_SECOND = 0, 1, 2
AZIMUTH, TILT, TILT_DIRECTION = 3, 4, 5
DISC_RADIUS, DISC_ANGLE = 6, 7
SPIN = 9

_S3, _S5 = np.float32(1.0 / 6.0), np.float32(1.0 / 120.0)
_C4, _C6 = np.float32(1.0 / 24.0), np.float32(1.0 / 720.0)


@njit(cache=True, nogil=True, error_model="numpy")
def source_chunk(
    state: Float32Array,
    points: Float32Array,
    frame: Float32Array,
    radius: Any,
    disc_table: Float32Array,
    index_table: Float32Array,
) -> None:
    """Fill world direction, index and absorption of lanes 0 … CHUNK − 1.

    points: flat (dimensions * CHUNK,); frame (9,): right, up and forward (towards the source) unit vectors, world;
    radius: of the disc [rad]; disc_table (m + 1,): (ρ / radius)² at m equal steps of probability; index_table, flat
    (2 k + 2,): n and absorption per body length at k equal steps through the bin, or (2,) for one wavelength. Tables end
    with their last entry twice, so that a coordinate rounded up to 1 needs no check.
    """
    if len(index_table) == 2:
        for lane in range(CHUNK):
            state[INDEX + lane] = index_table[0]
            state[ABSORPTION + lane] = index_table[1]
    else:
        steps = np.float32(len(index_table) // 2 - 2)
        for lane in range(CHUNK):
            x = points[WAVELENGTH * CHUNK + lane] * steps
            i = np.int32(x)
            f = x - np.float32(i)
            i *= 2
            state[INDEX + lane] = index_table[i] + f * (index_table[i + 2] - index_table[i])
            state[ABSORPTION + lane] = index_table[i + 1] + f * (index_table[i + 3] - index_table[i + 1])
    if radius == F0:
        for lane in range(CHUNK):
            state[WX + lane] = -frame[6]
            state[WY + lane] = -frame[7]
            state[WZ + lane] = -frame[8]
        return
    knots = np.float32(len(disc_table) - 2)
    for lane in range(CHUNK):
        x = points[DISC_RADIUS * CHUNK + lane] * knots
        i = np.int32(x)
        state[EX + lane] = disc_table[i] + (x - np.float32(i)) * (disc_table[i + 1] - disc_table[i])
    rx, ry, rz = frame[0], frame[1], frame[2]
    ux, uy, uz = frame[3], frame[4], frame[5]
    fx, fy, fz = frame[6], frame[7], frame[8]
    for lane in range(CHUNK):
        away = radius * np.sqrt(state[EX + lane])
        w = away * away
        sine = away * (F1 - w * (_S3 - w * _S5))
        cosine = F1 - w * (HALF - w * (_C4 - w * _C6))
        s, c = sine_cosine_turn(points[DISC_ANGLE * CHUNK + lane])
        a = sine * c
        b = sine * s
        state[WX + lane] = -(a * rx + b * ux + cosine * fx)
        state[WY + lane] = -(a * ry + b * uy + cosine * fy)
        state[WZ + lane] = -(a * rz + b * uz + cosine * fz)


@njit(cache=True, nogil=True, error_model="numpy")
def polarise_chunk(state: Float32Array, stokes: Float32Array, level: Float32Array) -> None:
    """Give lanes 0 … CHUNK − 1 one incident Stokes vector (4,), rows EI to EV, with e⊥ = level (3,), world, rows T."""
    i, q, u, v = stokes[0], stokes[1], stokes[2], stokes[3]
    x, y, z = level[0], level[1], level[2]
    for lane in range(CHUNK):
        state[EI + lane], state[EQ + lane], state[EU + lane], state[EV + lane] = i, q, u, v
        state[TX + lane], state[TY + lane], state[TZ + lane] = x, y, z


@njit(cache=True, nogil=True, error_model="numpy")
def receive_chunk(state: Float32Array, incoming: Float32Array, first: int) -> None:
    """Give lanes 0 … CHUNK − 1 rays of a list from number `first` on, in place of the source's.

    incoming (m, 10): direction of travel, Stokes vector, its e⊥; world. Rows W, EI to EV, T.
    """
    for lane in range(CHUNK):
        ray = first + lane
        for column, row in enumerate((WX, WY, WZ, EI, EQ, EU, EV, TX, TY, TZ)):
            state[row + lane] = incoming[ray, column]


@njit(cache=True, nogil=True, error_model="numpy")
def orient_chunk(
    state: Float32Array,
    points: Float32Array,
    law: int,
    inverse_kappa: Any,
    span: Any,
    pose: Float32Array,
    tilts: Float32Array,
) -> None:
    """Fill the rotation rows of lanes 0 … CHUNK − 1.

    inverse_kappa: 1/κ = σ² (0: no tilt; not looked at by the random law); span: 1 − e^(−2κ); pose (11,): A by rows, cos β,
    sin β, looked at by law AXIS alone; tilts (m + 1,): 1 − cos θ at equal steps of probability, its last entry twice, in
    place of Fisher's law; empty for that.
    """
    # Pose and azimuth
    if law <= UPRIGHT:
        for lane in range(CHUNK):
            s, c = sine_cosine_turn(points[AZIMUTH * CHUNK + lane])
            state[R00 + lane] = c
            state[R10 + lane] = s
            state[R20 + lane] = F0
            state[R01 + lane] = -s
            state[R11 + lane] = c
            state[R21 + lane] = F0
            state[R02 + lane] = F0
            state[R12 + lane] = F0
            state[R22 + lane] = F1
    elif law == AXIS:
        a00, a01, a02, a10, a11, a12 = pose[0], pose[1], pose[2], pose[3], pose[4], pose[5]
        a20, a21, a22, cosine, sine = pose[6], pose[7], pose[8], pose[9], pose[10]
        for lane in range(CHUNK):
            s, c = sine_cosine_turn(points[AZIMUTH * CHUNK + lane])
            u, v = sine_cosine_turn(points[SPIN * CHUNK + lane])
            # Z(φ) Y(β) Z(ψ)
            x, y, z = c * cosine, s * cosine, -sine
            b00, b01, b02 = x * v - s * u, -x * u - s * v, c * sine
            b10, b11, b12 = y * v + c * u, -y * u + c * v, s * sine
            b20, b21, b22 = z * v, -z * u, cosine
            state[R00 + lane] = b00 * a00 + b01 * a10 + b02 * a20
            state[R01 + lane] = b00 * a01 + b01 * a11 + b02 * a21
            state[R02 + lane] = b00 * a02 + b01 * a12 + b02 * a22
            state[R10 + lane] = b10 * a00 + b11 * a10 + b12 * a20
            state[R11 + lane] = b10 * a01 + b11 * a11 + b12 * a21
            state[R12 + lane] = b10 * a02 + b11 * a12 + b12 * a22
            state[R20 + lane] = b20 * a00 + b21 * a10 + b22 * a20
            state[R21 + lane] = b20 * a01 + b21 * a11 + b22 * a21
            state[R22 + lane] = b20 * a02 + b21 * a12 + b22 * a22
    else:
        turning = F1 if law == LEVEL_SPINNING else F0
        for lane in range(CHUNK):
            s, c = sine_cosine_turn(points[AZIMUTH * CHUNK + lane])
            u, v = sine_cosine_turn(points[SPIN * CHUNK + lane] * turning)
            state[R00 + lane] = s * u
            state[R10 + lane] = -c * u
            state[R20 + lane] = v
            state[R01 + lane] = s * v
            state[R11 + lane] = -c * v
            state[R21 + lane] = -u
            state[R02 + lane] = c
            state[R12 + lane] = s
            state[R22 + lane] = F0
    if law != RANDOM and inverse_kappa == F0 and len(tilts) == 0:
        return
    # 1 − cos of the tilt
    if law == RANDOM:
        for lane in range(CHUNK):
            state[EX + lane] = F2 * points[TILT * CHUNK + lane]
    elif len(tilts) > 0:
        steps = np.float32(len(tilts) - 2)
        for lane in range(CHUNK):
            x = points[TILT * CHUNK + lane] * steps
            i = np.int32(x)
            state[EX + lane] = tilts[i] + (x - np.float32(i)) * (tilts[i + 1] - tilts[i])
    else:
        for lane in range(CHUNK):
            w = inverse_kappa * minus_log(F1 - points[TILT * CHUNK + lane] * span)
            state[EX + lane] = w if w < F2 else F2
    # Rodrigues' formula for a level axis
    for lane in range(CHUNK):
        w = state[EX + lane]
        sine = np.sqrt(w * (F2 - w))
        b, a = sine_cosine_turn(points[TILT_DIRECTION * CHUNK + lane])
        sa = sine * a
        sb = sine * b
        m = F1 - w * a * a
        n = -w * a * b
        o = F1 - w * b * b
        p = F1 - w
        x, y, z = state[R00 + lane], state[R10 + lane], state[R20 + lane]
        state[R00 + lane] = m * x + n * y + sa * z
        state[R10 + lane] = n * x + o * y + sb * z
        state[R20 + lane] = p * z - sa * x - sb * y
        x, y, z = state[R01 + lane], state[R11 + lane], state[R21 + lane]
        state[R01 + lane] = m * x + n * y + sa * z
        state[R11 + lane] = n * x + o * y + sb * z
        state[R21 + lane] = p * z - sa * x - sb * y
        x, y, z = state[R02 + lane], state[R12 + lane], state[R22 + lane]
        state[R02 + lane] = m * x + n * y + sa * z
        state[R12 + lane] = n * x + o * y + sb * z
        state[R22 + lane] = p * z - sa * x - sb * y
