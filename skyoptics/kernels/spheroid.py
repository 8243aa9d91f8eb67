"""Rays through a spheroid: entry, hits, exits by order p, sorted by scattering angle and position angle.

Stretched along its axis a by 1/q (q = height ÷ width), a spheroid is a unit sphere and its chords stay straight:

    P' = P + (1/q − 1)(a·P) a,   d' = d + (1/q − 1)(a·d) a,   chord = −2 P'·d' / d'·d' (or its absolute value),

lengths in horizontal semi-axes, d the unit direction of travel, outward normal ∝ P' + (1/q − 1)(a·P') a. Parallel light
stays parallel too: evenly lit, the spheroid is an evenly lit disc across d'. So no ray misses, and the axis may point
anywhere without a change of frame; all vectors are world vectors.

Polarisation: Stokes vectors with e⊥ of their own, e⊥ × e∥ = direction of travel, field ∝ exp(−iωt), signs of van de
Hulst, *Light Scattering by Small Particles* (1957), §12.21. With index n, cosines ci inside and ct outside, from inside

    r⊥ = (n ci − ct)/(n ci + ct),   r∥ = (ci − n ct)/(ci + n ct)

(Born & Wolf, *Principles of Optics*, 7th ed. 1999, §1.5.2 eq. 21). Beyond the limit ct = i√(n² sin² − 1): both have
modulus 1 and r∥ r⊥* = C + iS keeps the exact phase between them: U' = C U + S V, V' = C V − S U.

Lanes: `WIDTH` rays in one flat float64 array, quantity Q of lane i at `state[Q + i]`; every stage but the draws and the
last one is a loop without branches or calls into libm, which the vectoriser takes.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from skyoptics.kernels.random import hash32, uniform

ORDERS = 8
"""Orders kept apart, p = 0 … 7; what is inside after p = 7 left is summed as cut off."""
RAYS = 1 << 16
"""Rays a batch."""
WIDTH = 64
"""Lanes of a pool."""
STRIDE = WIDTH + 8
"""Length of a row: rows a power of two apart would alias in the cache."""
KNOTS = 721
"""Nodes of a caustic over the position angle, −π … π, equally spaced."""
BOW_ORDERS = (2, 3)
"""Orders sorted by distance from their caustic as well."""

_rows = iter(range(0, 64 * STRIDE, STRIDE))
# Axis, its stretch 1/q − 1, power a ray starts with; two random numbers
_AX, _AY, _AZ, _POWER = next(_rows), next(_rows), next(_rows), next(_rows)
_U, _V = next(_rows), next(_rows)
# Place on the unit sphere, direction of travel, Stokes vector, its e⊥
_PX, _PY, _PZ = next(_rows), next(_rows), next(_rows)
_DX, _DY, _DZ = next(_rows), next(_rows), next(_rows)
_SI, _SQ, _SU, _SV = next(_rows), next(_rows), next(_rows), next(_rows)
_SX, _SY, _SZ = next(_rows), next(_rows), next(_rows)
_LOST = next(_rows)
# What leaves, and where it goes
_EX, _EY, _EZ = next(_rows), next(_rows), next(_rows)
_EI, _EQ, _EU, _EV = next(_rows), next(_rows), next(_rows), next(_rows)
_THETA, _PHI = next(_rows), next(_rows)
ROWS = 32

_TINY = 1e-24
_STEEP = float(np.sqrt(2.0) - 1.0)
# Taylor coefficients, named so that none is a division
_S3, _S5, _S7, _S9 = -1.0 / 6.0, 1.0 / 120.0, -1.0 / 5040.0, 1.0 / 362880.0
_S11, _S13, _S15 = -1.0 / 39916800.0, 1.0 / 6227020800.0, -1.0 / 1307674368000.0
_C4, _C6, _C8, _C10 = 1.0 / 24.0, -1.0 / 720.0, 1.0 / 40320.0, -1.0 / 3628800.0
_C12, _C14, _C16 = 1.0 / 479001600.0, -1.0 / 87178291200.0, 1.0 / 20922789888000.0
_E3, _E4, _E5, _E6 = 1.0 / 6.0, 1.0 / 24.0, 1.0 / 120.0, 1.0 / 720.0
_E7, _E8, _E9, _T21 = 1.0 / 5040.0, 1.0 / 40320.0, 1.0 / 362880.0, 1.0 / 21.0
_AXIS_DIMENSION = 3
"""Hash dimension of the axis (table in `skyoptics.kernels.random`); 0 and 2 are the entry point's."""


@njit(cache=True, nogil=True, error_model="numpy")
def _sine_cosine_turn(u: Any) -> Any:
    """Return sin and cos of 2πu, u in [0, 1], from series of the half angle; error below 5e-11."""
    x = np.pi * (u - 0.5)
    z = x * x
    s = 1.0 + z * (_S3 + z * (_S5 + z * (_S7 + z * (_S9 + z * (_S11 + z * (_S13 + z * _S15))))))
    c = _C8 + z * (_C10 + z * (_C12 + z * (_C14 + z * _C16)))
    c = 1.0 + z * (-0.5 + z * (_C4 + z * (_C6 + z * c)))
    s = s * x
    return -2.0 * s * c, 2.0 * s * s - 1.0


@njit(cache=True, nogil=True, error_model="numpy")
def _arc_tangent(y: Any, x: Any) -> Any:
    """Return atan2(y, x) in [−π, π]; error below 2e-9; 0 for (0, 0)."""
    ax = abs(x)
    ay = abs(y)
    low = ax if ax < ay else ay
    high = (ay if ax < ay else ax) + 1e-300
    steep = low > _STEEP * high
    z = ((low - high) if steep else low) / ((low + high) if steep else high)
    w = z * z
    series = 1.0 / 15.0 - w * (1.0 / 17.0 - w * (1.0 / 19.0 - w * _T21))
    series = 1.0 / 7.0 - w * (1.0 / 9.0 - w * (1.0 / 11.0 - w * (1.0 / 13.0 - w * series)))
    angle = z * (1.0 - w * (1.0 / 3.0 - w * (1.0 / 5.0 - w * series)))
    angle = angle + (0.25 * np.pi if steep else 0.0)
    angle = 0.5 * np.pi - angle if ax < ay else angle
    angle = np.pi - angle if x < 0.0 else angle
    return -angle if y < 0.0 else angle


@njit(cache=True, nogil=True, error_model="numpy")
def _decay(x: Any) -> Any:
    """Return exp(−x), x ≥ 0: (series at x/64) to the 64th power; error below 1e-8, 0 taken as exp(−32) beyond 32."""
    z = (x if x < 32.0 else 32.0) * -0.015625
    y = _E5 + z * (_E6 + z * (_E7 + z * (_E8 + z * _E9)))
    y = 1.0 + z * (1.0 + z * (0.5 + z * (_E3 + z * (_E4 + z * y))))
    y = y * y
    y = y * y
    y = y * y
    y = y * y
    y = y * y
    return y * y


@njit(cache=True, nogil=True, error_model="numpy")
def _across(dx: Any, dy: Any, dz: Any, nx: Any, ny: Any, nz: Any, sx: Any, sy: Any, sz: Any) -> Any:
    """Return the unit vector along d × N, or s where d and N are parallel."""
    x, y, z = dy * nz - dz * ny, dz * nx - dx * nz, dx * ny - dy * nx
    square = x * x + y * y + z * z
    there = square > _TINY
    scale = 1.0 / np.sqrt(square if there else 1.0)
    return (x * scale if there else sx), (y * scale if there else sy), (z * scale if there else sz)


@njit(cache=True, nogil=True, error_model="numpy")
def _turned(
    q: Any, u: Any, dx: Any, dy: Any, dz: Any, sx: Any, sy: Any, sz: Any, mx: Any, my: Any, mz: Any
) -> tuple[Any, Any]:
    """Return Q and U of light along d with e⊥ turned from s to m."""
    a = mx * sx + my * sy + mz * sz
    b = mx * (dy * sz - dz * sy) + my * (dz * sx - dx * sz) + mz * (dx * sy - dy * sx)
    square = a * a + b * b
    norm = 1.0 / (square if square > _TINY else 1.0)
    cosine, sine = (a * a - b * b) * norm, 2.0 * a * b * norm
    return cosine * q - sine * u, sine * q + cosine * u


@njit(cache=True, nogil=True, error_model="numpy")
def _enter(state: Any, beam: Any, index: Any, ratio: Any, stokes: Any) -> None:
    """Put WIDTH rays on the spheroid; rows A, POWER, U, V must be there; rows E take what the outside reflects.

    beam (6,): direction of travel, and e⊥ of the Stokes vector (4,), unit vectors.
    """
    dx, dy, dz = beam[0], beam[1], beam[2]
    tx, ty, tz = beam[3], beam[4], beam[5]
    stretch = 1.0 / ratio - 1.0
    inverse = 1.0 / index
    # loads from other arrays stay out of the loop, or it needs checks against aliases
    stokes_i, stokes_q, stokes_u, stokes_v = stokes[0], stokes[1], stokes[2], stokes[3]
    for i in range(WIDTH):
        ax, ay, az = state[_AX + i], state[_AY + i], state[_AZ + i]
        along = stretch * (ax * dx + ay * dy + az * dz)
        hx, hy, hz = dx + along * ax, dy + along * ay, dz + along * az
        norm = 1.0 / np.sqrt(hx * hx + hy * hy + hz * hz)
        hx, hy, hz = hx * norm, hy * norm, hz * norm
        # two axes across d', of which e⊥ is never parallel to d' while 1/q stays below a few
        part = tx * hx + ty * hy + tz * hz
        ux, uy, uz = tx - part * hx, ty - part * hy, tz - part * hz
        norm = 1.0 / np.sqrt(ux * ux + uy * uy + uz * uz)
        ux, uy, uz = ux * norm, uy * norm, uz * norm
        vx, vy, vz = hy * uz - hz * uy, hz * ux - hx * uz, hx * uy - hy * ux
        s, c = _sine_cosine_turn(state[_V + i])
        away = np.sqrt(state[_U + i])
        deep = np.sqrt(1.0 - state[_U + i])
        c, s = c * away, s * away
        px, py, pz = c * ux + s * vx - deep * hx, c * uy + s * vy - deep * hy, c * uz + s * vz - deep * hz
        along = stretch * (ax * px + ay * py + az * pz)
        nx, ny, nz = px + along * ax, py + along * ay, pz + along * az
        norm = 1.0 / np.sqrt(nx * nx + ny * ny + nz * nz)
        nx, ny, nz = nx * norm, ny * norm, nz * norm
        ci = -(dx * nx + dy * ny + dz * nz)
        ci = ci if ci > 0.0 else 0.0
        ci = ci if ci < 1.0 else 1.0
        ct = np.sqrt(1.0 - inverse * inverse * (1.0 - ci * ci))
        mx, my, mz = _across(dx, dy, dz, nx, ny, nz, tx, ty, tz)
        q, u = _turned(stokes_q, stokes_u, dx, dy, dz, tx, ty, tz, mx, my, mz)
        power = state[_POWER + i]
        light, q, u, v = stokes_i * power, q * power, u * power, stokes_v * power
        down_s, down_p = 1.0 / (ci + index * ct), 1.0 / (index * ci + ct)
        rs, rp = (ci - index * ct) * down_s, (index * ci - ct) * down_p
        product = 4.0 * index * ci * ct
        ts, tp = product * down_s * down_s, product * down_p * down_p
        both, differ, cross = 0.5 * (rp * rp + rs * rs), 0.5 * (rp * rp - rs * rs), rp * rs
        state[_EI + i] = both * light + differ * q
        state[_EQ + i] = differ * light + both * q
        state[_EU + i] = cross * u
        state[_EV + i] = cross * v
        both, differ, cross = 0.5 * (tp + ts), 0.5 * (tp - ts), np.sqrt(tp * ts)
        state[_SI + i] = both * light + differ * q
        state[_SQ + i] = differ * light + both * q
        state[_SU + i] = cross * u
        state[_SV + i] = cross * v
        state[_SX + i], state[_SY + i], state[_SZ + i] = mx, my, mz
        state[_PX + i], state[_PY + i], state[_PZ + i] = px, py, pz
        turn = 2.0 * ci
        state[_EX + i], state[_EY + i], state[_EZ + i] = dx + turn * nx, dy + turn * ny, dz + turn * nz
        turn = inverse * ci - ct
        state[_DX + i] = inverse * dx + turn * nx
        state[_DY + i] = inverse * dy + turn * ny
        state[_DZ + i] = inverse * dz + turn * nz


@njit(cache=True, nogil=True, error_model="numpy")
def _hit(state: Any, index: Any, ratio: Any, depth: Any) -> None:
    """Send WIDTH rays on to the surface: rows E take what leaves, the rest is reflected; depth per horizontal semi-axis."""
    stretch = 1.0 / ratio - 1.0
    for i in range(WIDTH):
        ax, ay, az = state[_AX + i], state[_AY + i], state[_AZ + i]
        dx, dy, dz = state[_DX + i], state[_DY + i], state[_DZ + i]
        px, py, pz = state[_PX + i], state[_PY + i], state[_PZ + i]
        along = stretch * (ax * dx + ay * dy + az * dz)
        hx, hy, hz = dx + along * ax, dy + along * ay, dz + along * az
        # P' lies on the sphere and d' points inwards there
        chord = -2.0 * (px * hx + py * hy + pz * hz) / (hx * hx + hy * hy + hz * hz)
        px, py, pz = px + chord * hx, py + chord * hy, pz + chord * hz
        kept = _decay(depth * (chord if chord > 0.0 else 0.0))
        light, v = state[_SI + i], state[_SV + i] * kept
        state[_LOST + i] = light * (1.0 - kept)
        light = light * kept
        along = stretch * (ax * px + ay * py + az * pz)
        nx, ny, nz = px + along * ax, py + along * ay, pz + along * az
        norm = 1.0 / np.sqrt(nx * nx + ny * ny + nz * nz)
        nx, ny, nz = nx * norm, ny * norm, nz * norm
        sx, sy, sz = state[_SX + i], state[_SY + i], state[_SZ + i]
        mx, my, mz = _across(dx, dy, dz, nx, ny, nz, sx, sy, sz)
        q, u = _turned(state[_SQ + i] * kept, state[_SU + i] * kept, dx, dy, dz, sx, sy, sz, mx, my, mz)
        ci = dx * nx + dy * ny + dz * nz
        ci = ci if ci > 0.0 else 0.0
        ci = ci if ci < 1.0 else 1.0
        beyond = index * index * (1.0 - ci * ci) - 1.0
        ct = np.sqrt(-beyond if beyond < 0.0 else 0.0)
        gt = np.sqrt(beyond if beyond > 0.0 else 0.0)
        # r = (a − b − ic)/(a + b + ic), one of b and c being 0
        a, b, c = index * ci, ct, gt
        down = 1.0 / ((a + b) * (a + b) + c * c)
        s_real, s_imaginary, ts = (a * a - b * b - c * c) * down, -2.0 * a * c * down, 4.0 * a * b * down
        a, b, c = ci, index * ct, index * gt
        down = 1.0 / ((a + b) * (a + b) + c * c)
        p_real, p_imaginary, tp = (a * a - b * b - c * c) * down, -2.0 * a * c * down, 4.0 * a * b * down
        both, differ, cross = 0.5 * (tp + ts), 0.5 * (tp - ts), np.sqrt(tp * ts)
        state[_EI + i] = both * light + differ * q
        state[_EQ + i] = differ * light + both * q
        state[_EU + i] = cross * u
        state[_EV + i] = cross * v
        rs, rp = s_real * s_real + s_imaginary * s_imaginary, p_real * p_real + p_imaginary * p_imaginary
        both, differ = 0.5 * (rp + rs), 0.5 * (rp - rs)
        real, imaginary = p_real * s_real + p_imaginary * s_imaginary, p_imaginary * s_real - p_real * s_imaginary
        state[_SI + i] = both * light + differ * q
        state[_SQ + i] = differ * light + both * q
        state[_SU + i] = real * u + imaginary * v
        state[_SV + i] = real * v - imaginary * u
        state[_SX + i], state[_SY + i], state[_SZ + i] = mx, my, mz
        state[_PX + i], state[_PY + i], state[_PZ + i] = px, py, pz
        turn = ct - index * ci
        state[_EX + i], state[_EY + i], state[_EZ + i] = (
            index * dx + turn * nx,
            index * dy + turn * ny,
            index * dz + turn * nz,
        )
        turn = 2.0 * ci
        state[_DX + i], state[_DY + i], state[_DZ + i] = dx - turn * nx, dy - turn * ny, dz - turn * nz


@njit(cache=True, nogil=True, error_model="numpy")
def _leave(state: Any, beam: Any, frame: Any) -> None:
    """Fill the angles of what leaves, and turn its Stokes vector into the scattering frame.

    frame (6,): unit vectors towards which the position angle of the *viewing* direction −e is 0 and π/2.
    """
    dx, dy, dz = beam[0], beam[1], beam[2]
    fx, fy, fz, gx, gy, gz = frame[0], frame[1], frame[2], frame[3], frame[4], frame[5]
    for i in range(WIDTH):
        ex, ey, ez = state[_EX + i], state[_EY + i], state[_EZ + i]
        sx, sy, sz = state[_SX + i], state[_SY + i], state[_SZ + i]
        x, y, z = dy * ez - dz * ey, dz * ex - dx * ez, dx * ey - dy * ex
        state[_THETA + i] = _arc_tangent(np.sqrt(x * x + y * y + z * z), dx * ex + dy * ey + dz * ez)
        state[_PHI + i] = _arc_tangent(-(ex * gx + ey * gy + ez * gz), -(ex * fx + ey * fy + ez * fz))
        mx, my, mz = _across(dx, dy, dz, ex, ey, ez, sx, sy, sz)
        q, u = _turned(state[_EQ + i], state[_EU + i], ex, ey, ez, sx, sy, sz, mx, my, mz)
        state[_EQ + i] = q
        state[_EU + i] = u


@njit(cache=True, nogil=True, error_model="numpy")
def trace(
    key_low: Any,
    key_high: Any,
    count: Any,
    index: Any,
    ratio: Any,
    depth: Any,
    beam: Any,
    frame: Any,
    stokes: Any,
    axes: Any,
    caustics: Any,
    sides: Any,
    angle_bins: Any,
    position_bins: Any,
    distance_bins: Any,
) -> Any:
    """Trace one batch.

    Parameters: `count` rays, a power of two and a multiple of WIDTH; index n > 1; ratio q; depth: absorption optical depth
    of a horizontal semi-axis; beam (6,), frame (6,) as `_enter`, `_leave`; stokes (4,) incident, I = 1; axes (k, 4), k a
    power of two: unit axis and the power its rays start with, all equally likely; caustics (2, KNOTS): scattering angle of
    the bows p = 2, 3 by position angle; sides (2,): +1 where their light lies at larger angles, else −1.

    Returns: light (ORDERS, angle_bins, position_bins, 4) over equal steps of the scattering angle 0 … π and the position
    angle −π … π; bows (2, distance_bins, position_bins, 4) over equal steps of √(distance from the caustic), 0 … √π, on
    the lit side (what lies beyond the caustic by rounding goes into the first); energy (ORDERS,), absorbed, cut off, all
    sums over rays; Stokes vectors in the scattering frame.

    Draws: squared distance of the entry from the beam's middle in stratum j of `count`, its direction by the reversed bits
    of j, both slid along by one random number a batch (Hammersley's set); the axis by a hash.
    """
    light = np.zeros((ORDERS, angle_bins, position_bins, 4))
    bows = np.zeros((2, distance_bins, position_bins, 4))
    energy = np.zeros(ORDERS)
    absorbed = 0.0
    cut_off = 0.0
    state = np.zeros(ROWS * STRIDE)
    step = 1.0 / count
    slide = uniform(key_low, key_high, np.uint32(count), np.uint32(0))
    shift = hash32(key_low, key_high, np.uint32(count), np.uint32(2))
    mask = np.uint32(len(axes) - 1)
    per_angle = angle_bins / np.pi
    per_position = position_bins / (2.0 * np.pi)
    per_distance = distance_bins / np.sqrt(np.pi)
    per_knot = (KNOTS - 1) / (2.0 * np.pi)
    for first in range(0, count, WIDTH):
        for i in range(WIDTH):
            number = np.uint32(first + i)
            u = (first + i + (slide + uniform(key_low, key_high, number, np.uint32(0)))) * step
            state[_U + i] = u - 1.0 if u >= 1.0 else u
            x = number
            x = np.uint32((x >> np.uint32(16)) | (x << np.uint32(16)))
            x = np.uint32(((x & np.uint32(0xFF00FF00)) >> np.uint32(8)) | ((x & np.uint32(0x00FF00FF)) << np.uint32(8)))
            x = np.uint32(((x & np.uint32(0xF0F0F0F0)) >> np.uint32(4)) | ((x & np.uint32(0x0F0F0F0F)) << np.uint32(4)))
            x = np.uint32(((x & np.uint32(0xCCCCCCCC)) >> np.uint32(2)) | ((x & np.uint32(0x33333333)) << np.uint32(2)))
            x = np.uint32(((x & np.uint32(0xAAAAAAAA)) >> np.uint32(1)) | ((x & np.uint32(0x55555555)) << np.uint32(1)))
            state[_V + i] = (np.float64(np.uint32(x ^ shift)) + 0.5) * 2.0**-32
        for i in range(WIDTH):
            number = np.uint32(first + i)
            chosen = np.int64(hash32(key_low, key_high, number, np.uint32(_AXIS_DIMENSION)) & mask)
            state[_AX + i] = axes[chosen, 0]
            state[_AY + i] = axes[chosen, 1]
            state[_AZ + i] = axes[chosen, 2]
            state[_POWER + i] = axes[chosen, 3]
        _enter(state, beam, index, ratio, stokes)
        for p in range(ORDERS):
            if p > 0:
                _hit(state, index, ratio, depth)
                for i in range(WIDTH):
                    absorbed += state[_LOST + i]
            _leave(state, beam, frame)
            bow = p - 2
            for i in range(WIDTH):
                theta = state[_THETA + i]
                turn = state[_PHI + i] + np.pi
                row = min(int(theta * per_angle), angle_bins - 1)
                column = min(int(max(turn, 0.0) * per_position), position_bins - 1)
                power = state[_EI + i]
                energy[p] += power
                light[p, row, column, 0] += power
                light[p, row, column, 1] += state[_EQ + i]
                light[p, row, column, 2] += state[_EU + i]
                light[p, row, column, 3] += state[_EV + i]
                if bow == 0 or bow == 1:
                    place = turn * per_knot
                    knot = min(int(max(place, 0.0)), KNOTS - 2)
                    part = place - knot
                    edge = caustics[bow, knot] + part * (caustics[bow, knot + 1] - caustics[bow, knot])
                    away = max(sides[bow] * (theta - edge), 0.0)
                    row = min(int(np.sqrt(away) * per_distance), distance_bins - 1)
                    bows[bow, row, column, 0] += power
                    bows[bow, row, column, 1] += state[_EQ + i]
                    bows[bow, row, column, 2] += state[_EU + i]
                    bows[bow, row, column, 3] += state[_EV + i]
        for i in range(WIDTH):
            cut_off += state[_SI + i]
    return light, bows, energy, absorbed, cut_off


@njit(cache=True, nogil=True, error_model="numpy")
def directions(index: Any, ratio: Any, axis: Any, beam: Any, slant: Any, turn: Any, order: Any) -> Any:
    """Return where single rays leave, shape (m, 3): directions of travel.

    index, ratio (m,); axis, beam (m, 3); slant, turn (m,): the ray enters the stretched sphere at the angle `slant` from
    the point that faces the light, towards the position angle `turn` about the direction of travel (0 towards the zenith,
    clockwise as seen along it, as in `skyoptics.geometry.axes`); order p ≥ 1. Directions alone, no light.
    """
    out = np.empty((len(index), 3))
    for m in range(len(index)):
        n, stretch = index[m], 1.0 / ratio[m] - 1.0
        ax, ay, az = axis[m, 0], axis[m, 1], axis[m, 2]
        dx, dy, dz = beam[m, 0], beam[m, 1], beam[m, 2]
        flat = np.sqrt(dx * dx + dy * dy)
        rx, ry = 1.0, 0.0
        if flat > 1e-12:
            rx, ry = dy / flat, -dx / flat
        c, s = np.cos(turn[m]), np.sin(turn[m])
        wx, wy, wz = c * ry * dz + s * rx, -c * rx * dz + s * ry, c * (rx * dy - ry * dx)
        along = stretch * (ax * dx + ay * dy + az * dz)
        hx, hy, hz = dx + along * ax, dy + along * ay, dz + along * az
        norm = 1.0 / np.sqrt(hx * hx + hy * hy + hz * hz)
        hx, hy, hz = hx * norm, hy * norm, hz * norm
        part = wx * hx + wy * hy + wz * hz
        wx, wy, wz = wx - part * hx, wy - part * hy, wz - part * hz
        norm = np.sin(slant[m]) / np.sqrt(wx * wx + wy * wy + wz * wz)
        deep = np.cos(slant[m])
        px, py, pz = wx * norm - deep * hx, wy * norm - deep * hy, wz * norm - deep * hz
        for hit in range(order + 1):
            if hit > 0:
                along = stretch * (ax * dx + ay * dy + az * dz)
                hx, hy, hz = dx + along * ax, dy + along * ay, dz + along * az
                chord = -2.0 * (px * hx + py * hy + pz * hz) / (hx * hx + hy * hy + hz * hz)
                px, py, pz = px + chord * hx, py + chord * hy, pz + chord * hz
            along = stretch * (ax * px + ay * py + az * pz)
            nx, ny, nz = px + along * ax, py + along * ay, pz + along * az
            norm = 1.0 / np.sqrt(nx * nx + ny * ny + nz * nz)
            nx, ny, nz = nx * norm, ny * norm, nz * norm
            ci = dx * nx + dy * ny + dz * nz
            scale, bend = 1.0, -2.0 * ci
            if hit == 0:
                scale = 1.0 / n
                bend = -scale * ci - np.sqrt(1.0 - scale * scale * (1.0 - ci * ci))
            elif hit == order:  # nan where the ray is totally reflected
                scale = n
                bend = np.sqrt(1.0 - n * n * (1.0 - ci * ci)) - n * ci
            dx, dy, dz = scale * dx + bend * nx, scale * dy + bend * ny, scale * dz + bend * nz
        out[m, 0], out[m, 1], out[m, 2] = dx, dy, dz
    return out
