"""The comparison loop: one ray at a time, float64, branches, library sines; the same physics as the lanes.

It is the yardstick of `benchmarks/tracing.py` and the second opinion of the tests: written apart from the lane stages, from
the same formulae (`skyoptics.kernels.polyhedron`, `skyoptics.kernels.orient`), it shares with them nothing but the hash. Rays
start on the disc of the crystal's bounding sphere, so some miss. Nothing is computed that is not needed: a ray that misses
or ends stops at once, nothing is turned or projected that carries no power, and Q, U, V are not turned for a plane of I.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from skyoptics.kernels.lanes import FloatArray
from skyoptics.kernels.random import uniform

SLAB = 5
LONG_PATH = 1024
ROULETTE_DIMENSION = 9
PLAIN_TALLIES = 6
"""Rays shot, rays entered, incident power, power that left, power absorbed, hits of live rays."""


@njit(cache=True, nogil=True, error_model="numpy")
def plain_hit(
    slabs: FloatArray,
    n: float,
    alpha: float,
    px: float,
    py: float,
    pz: float,
    dx: float,
    dy: float,
    dz: float,
    i: float,
    q: float,
    u: float,
    v: float,
    sx: float,
    sy: float,
    sz: float,
) -> tuple[float, ...]:
    """Return one hit from inside: new position, direction, Stokes, e⊥; absorbed; leaving direction and I."""
    far = 1e300
    face = 0
    sign = 1.0
    count = len(slabs) // SLAB
    for j in range(count):
        k = j * SLAB
        cosine = slabs[k] * dx + slabs[k + 1] * dy + slabs[k + 2] * dz
        if cosine == 0.0:
            continue
        place = slabs[k] * px + slabs[k + 1] * py + slabs[k + 2] * pz
        t = (slabs[k + 3] - place) / cosine if cosine > 0.0 else -(slabs[k + 4] + place) / cosine
        if t < far:
            far = t
            face = k
            sign = 1.0 if cosine > 0.0 else -1.0
    far = max(far, 0.0)
    nx, ny, nz = sign * slabs[face], sign * slabs[face + 1], sign * slabs[face + 2]
    px += far * dx
    py += far * dy
    pz += far * dz
    absorbed = 0.0
    if alpha > 0.0:
        left = np.exp(-alpha * far)
        absorbed = i * (1.0 - left)
        i *= left
        q *= left
        u *= left
        v *= left
    ci = dx * nx + dy * ny + dz * nz
    mx, my, mz = dy * nz - dz * ny, dz * nx - dx * nz, dx * ny - dy * nx
    if mx * mx + my * my + mz * mz > 1e-24:
        a = mx * sx + my * sy + mz * sz
        b = mx * (dy * sz - dz * sy) + my * (dz * sx - dx * sz) + mz * (dx * sy - dy * sx)
        norm = 1.0 / (a * a + b * b)
        c2, s2 = (a * a - b * b) * norm, 2.0 * a * b * norm
        q, u = c2 * q - s2 * u, s2 * q + c2 * u
        sx, sy, sz = mx, my, mz
    square = 1.0 - n * n * (1.0 - ci * ci)
    leaving = 0.0
    ex, ey, ez = 0.0, 0.0, 0.0
    if square > 0.0:
        ct = np.sqrt(square)
        rs = (n * ci - ct) / (n * ci + ct)
        rp = (ci - n * ct) / (ci + n * ct)
        mean, half = 0.5 * (rp * rp + rs * rs), 0.5 * (rp * rp - rs * rs)
        leaving = (1.0 - mean) * i - half * q
        bend = ct - n * ci
        ex, ey, ez = n * dx + bend * nx, n * dy + bend * ny, n * dz + bend * nz
        i, q = mean * i + half * q, half * i + mean * q
        u *= rs * rp
        v *= rs * rp
    else:
        g = np.sqrt(-square)
        along, across = n * (ci * ci + g * g), -ci * g * (n * n - 1.0)
        norm = 1.0 / (along * along + across * across)
        cross, twist = (along * along - across * across) * norm, 2.0 * along * across * norm
        u, v = cross * u + twist * v, cross * v - twist * u
    two = 2.0 * ci
    dx -= two * nx
    dy -= two * ny
    dz -= two * nz
    return px, py, pz, dx, dy, dz, i, q, u, v, sx, sy, sz, absorbed, ex, ey, ez, leaving


@njit(cache=True, nogil=True, error_model="numpy")
def plain_pixel(grid: FloatArray, ex: float, ey: float, ez: float) -> int:
    """Return row * columns + column of the light that travels along e, −1 outside; grid float64, packed."""
    x = -(grid[3] * ex + grid[4] * ey + grid[5] * ez)
    y = -(grid[6] * ex + grid[7] * ey + grid[8] * ez)
    z = -(grid[9] * ex + grid[10] * ey + grid[11] * ez)
    rows, columns = int(grid[1]), int(grid[2])
    if grid[0] == 0.0:
        u = 0.5 * (1.0 - z) / grid[15]
        if u > 1.0:
            return -1
        k = grid[32]
        for j in range(31, 15, -1):
            k = k * u + grid[j]
        column = grid[13] + grid[12] * k * x + 0.5
        row = grid[14] - grid[12] * k * y + 0.5
    else:
        column = (np.arctan2(y, x) - grid[12]) / grid[13] + 0.5
        turn = 2.0 * np.pi / abs(grid[13])
        column -= turn * np.floor(column / turn)
        row = (grid[14] - np.arcsin(min(max(z, -1.0), 1.0))) / grid[15] + 0.5
    if column < 0.0 or column >= columns or row < 0.0 or row >= rows:
        return -1
    return int(row) * columns + int(column)


@njit(cache=True, nogil=True, error_model="numpy")
def trace_plain(
    slabs: FloatArray,
    reach: float,
    scale: float,
    law: int,
    inverse_kappa: float,
    span: float,
    pose: FloatArray,
    frame: FloatArray,
    radius: float,
    disc: FloatArray,
    index: FloatArray,
    cutoff: float,
    key_low: Any,
    key_high: Any,
    rays: int,
    grid: FloatArray,
    plane: FloatArray,
    tally: FloatArray,
) -> None:
    """Shoot `rays` rays at crystals and add I to plane, flat (ny * nx,) float64.

    All arrays float64. reach: radius of the bounding sphere about the origin; disc: (ρ / radius)² at equal steps of
    probability; index: flat n and absorption at equal steps through the bin; others as in `crystal.trace_crystals`; tally
    (PLAIN_TALLIES,).
    """
    count = len(slabs) // SLAB
    power = np.pi * reach * reach * scale
    for ray in range(rays):
        number = np.uint32(ray)
        # Wavelength and source
        if len(index) > 2:
            x = uniform(key_low, key_high, number, 1) * (len(index) // 2 - 1)
            j = min(int(x), len(index) // 2 - 2)
            n = index[2 * j] + (x - j) * (index[2 * j + 2] - index[2 * j])
            alpha = index[2 * j + 1] + (x - j) * (index[2 * j + 3] - index[2 * j + 1])
        else:
            n, alpha = index[0], index[1]
        wx, wy, wz = -frame[6], -frame[7], -frame[8]
        if radius > 0.0:
            x = uniform(key_low, key_high, number, 6) * (len(disc) - 1)
            j = min(int(x), len(disc) - 2)
            away = radius * np.sqrt(disc[j] + (x - j) * (disc[j + 1] - disc[j]))
            angle = 2.0 * np.pi * uniform(key_low, key_high, number, 7)
            a, b, c = np.sin(away) * np.cos(angle), np.sin(away) * np.sin(angle), np.cos(away)
            wx = -(a * frame[0] + b * frame[3] + c * frame[6])
            wy = -(a * frame[1] + b * frame[4] + c * frame[7])
            wz = -(a * frame[2] + b * frame[5] + c * frame[8])
        # Orientation
        phi = 2.0 * np.pi * uniform(key_low, key_high, number, 3)
        s, c = np.sin(phi), np.cos(phi)
        if law <= 1:
            r00, r10, r20 = c, s, 0.0
            r01, r11, r21 = -s, c, 0.0
            r02, r12, r22 = 0.0, 0.0, 1.0
        elif law == 4:  # Z(φ) Y(β) Z(ψ) A, column by column
            psi = 2.0 * np.pi * uniform(key_low, key_high, number, 8)
            u, v = np.sin(psi), np.cos(psi)
            x, y, z = v * pose[0] - u * pose[3], u * pose[0] + v * pose[3], pose[6]
            x, r20 = pose[9] * x + pose[10] * z, pose[9] * z - pose[10] * x
            r00, r10 = c * x - s * y, s * x + c * y
            x, y, z = v * pose[1] - u * pose[4], u * pose[1] + v * pose[4], pose[7]
            x, r21 = pose[9] * x + pose[10] * z, pose[9] * z - pose[10] * x
            r01, r11 = c * x - s * y, s * x + c * y
            x, y, z = v * pose[2] - u * pose[5], u * pose[2] + v * pose[5], pose[8]
            x, r22 = pose[9] * x + pose[10] * z, pose[9] * z - pose[10] * x
            r02, r12 = c * x - s * y, s * x + c * y
        else:
            a, b = 0.0, 1.0
            if law == 2:
                psi = 2.0 * np.pi * uniform(key_low, key_high, number, 8)
                a, b = np.sin(psi), np.cos(psi)
            r00, r10, r20 = s * a, -c * a, b
            r01, r11, r21 = s * b, -c * b, -a
            r02, r12, r22 = c, s, 0.0
        if law == 0 or inverse_kappa > 0.0:
            draw = uniform(key_low, key_high, number, 4)
            w = 2.0 * draw if law == 0 else -inverse_kappa * np.log(1.0 - draw * span)
            w = min(w, 2.0)
            alpha_tilt = 2.0 * np.pi * uniform(key_low, key_high, number, 5)
            a, b, sine = np.cos(alpha_tilt), np.sin(alpha_tilt), np.sqrt(w * (2.0 - w))
            m, o, p, e = 1.0 - w * a * a, 1.0 - w * b * b, -w * a * b, 1.0 - w
            sa, sb = sine * a, sine * b
            r00, r10, r20 = m * r00 + p * r10 + sa * r20, p * r00 + o * r10 + sb * r20, e * r20 - sa * r00 - sb * r10
            r01, r11, r21 = m * r01 + p * r11 + sa * r21, p * r01 + o * r11 + sb * r21, e * r21 - sa * r01 - sb * r11
            r02, r12, r22 = m * r02 + p * r12 + sa * r22, p * r02 + o * r12 + sb * r22, e * r22 - sa * r02 - sb * r12
        dx = r00 * wx + r10 * wy + r20 * wz
        dy = r01 * wx + r11 * wy + r21 * wz
        dz = r02 * wx + r12 * wy + r22 * wz
        # A point on the disc of the bounding sphere, and the face it looks at
        away = reach * np.sqrt(uniform(key_low, key_high, number, 0))
        angle = 2.0 * np.pi * uniform(key_low, key_high, number, 2)
        a, b = away * np.cos(angle), away * np.sin(angle)
        if abs(dz) < 0.9:
            f = 1.0 / np.sqrt(dx * dx + dy * dy)
            ax, ay, az = dy * f, -dx * f, 0.0
        else:
            f = 1.0 / np.sqrt(dy * dy + dz * dz)
            ax, ay, az = 0.0, dz * f, -dy * f
        px = a * ax + b * (dy * az - dz * ay)
        py = a * ay + b * (dz * ax - dx * az)
        pz = a * az + b * (dx * ay - dy * ax)
        entry, leave = -1e300, 1e300
        face, sign = 0, 1.0
        for j in range(count):
            k = j * SLAB
            cosine = slabs[k] * dx + slabs[k + 1] * dy + slabs[k + 2] * dz
            place = slabs[k] * px + slabs[k + 1] * py + slabs[k + 2] * pz
            if cosine > 0.0:
                near, off = -(slabs[k + 4] + place) / cosine, (slabs[k + 3] - place) / cosine
            else:
                near, off = (slabs[k + 3] - place) / cosine, -(slabs[k + 4] + place) / cosine
            if near > entry:
                entry, face, sign = near, k, -1.0 if cosine > 0.0 else 1.0
            leave = min(leave, off)
            if entry >= leave:
                break
        if entry >= leave:
            continue
        tally[1] += 1.0
        tally[2] += power
        px += entry * dx
        py += entry * dy
        pz += entry * dz
        nx, ny, nz = sign * slabs[face], sign * slabs[face + 1], sign * slabs[face + 2]
        # Entry
        ci = -(dx * nx + dy * ny + dz * nz)
        ct = np.sqrt(1.0 - (1.0 - ci * ci) / (n * n))
        rs, rp = (ci - n * ct) / (ci + n * ct), (n * ci - ct) / (n * ci + ct)
        mean, half = 0.5 * (rp * rp + rs * rs), 0.5 * (rp * rp - rs * rs)
        ex, ey, ez = dx + 2.0 * ci * nx, dy + 2.0 * ci * ny, dz + 2.0 * ci * nz
        leaving = mean * power
        i, q, u, v = power - leaving, -half * power, 0.0, 0.0
        sx, sy, sz = dy * nz - dz * ny, dz * nx - dx * nz, dx * ny - dy * nx
        if sx * sx + sy * sy + sz * sz < 1e-24:
            sx, sy, sz = (1.0, 0.0, 0.0) if abs(dx) < 0.9 else (0.0, 1.0, 0.0)
            f = sx * dx + sy * dy + sz * dz
            sx, sy, sz = sx - f * dx, sy - f * dy, sz - f * dz
        bend = ci / n - ct
        dx, dy, dz = dx / n + bend * nx, dy / n + bend * ny, dz / n + bend * nz
        hits = 1
        while True:
            if leaving > 0.0:
                tally[3] += leaving
                spot = plain_pixel(
                    grid,
                    r00 * ex + r01 * ey + r02 * ez,
                    r10 * ex + r11 * ey + r12 * ez,
                    r20 * ex + r21 * ey + r22 * ez,
                )
                if spot >= 0:
                    plane[spot] += leaving
            if hits > 1:
                chance = min(i / cutoff, 1.0)
                if hits >= LONG_PATH:
                    chance *= 0.5
                if chance < 1.0:
                    if uniform(key_low, key_high, number, ROULETTE_DIMENSION + hits) >= chance:
                        break
                    i, q, u, v = i / chance, q / chance, u / chance, v / chance
            (px, py, pz, dx, dy, dz, i, q, u, v, sx, sy, sz, absorbed, ex, ey, ez, leaving) = plain_hit(
                slabs, n, alpha, px, py, pz, dx, dy, dz, i, q, u, v, sx, sy, sz
            )
            tally[4] += absorbed
            tally[5] += 1.0
            hits += 1
    tally[0] += rays


@njit(cache=True, nogil=True, error_model="numpy")
def step_plain(slabs: FloatArray, n: float, rays: FloatArray, hits: int) -> float:
    """Follow each row of rays (m, 13: position, direction, Stokes, e⊥) for a fixed number of hits; return Σ I that left."""
    total = 0.0
    for r in range(len(rays)):
        px, py, pz, dx, dy, dz = rays[r, 0], rays[r, 1], rays[r, 2], rays[r, 3], rays[r, 4], rays[r, 5]
        i, q, u, v = rays[r, 6], rays[r, 7], rays[r, 8], rays[r, 9]
        sx, sy, sz = rays[r, 10], rays[r, 11], rays[r, 12]
        for _ in range(hits):
            (px, py, pz, dx, dy, dz, i, q, u, v, sx, sy, sz, _absorbed, _ex, _ey, _ez, leaving) = plain_hit(
                slabs, n, 0.0, px, py, pz, dx, dy, dz, i, q, u, v, sx, sy, sz
            )
            total += leaving
        rays[r, 0], rays[r, 1], rays[r, 2], rays[r, 3], rays[r, 4], rays[r, 5] = px, py, pz, dx, dy, dz
        rays[r, 6], rays[r, 7], rays[r, 8], rays[r, 9] = i, q, u, v
        rays[r, 10], rays[r, 11], rays[r, 12] = sx, sy, sz
    return total


@njit(cache=True, nogil=True, error_model="numpy")
def step_faces(normals: FloatArray, distances: FloatArray, rays: FloatArray, hits: int) -> float:
    """Follow each row of rays (m, 6: position, direction) for a fixed number of hits, geometry only; return the way gone.

    normals (k, 3), distances (k,): the faces of any convex body, tested one after the other; those the ray does not head for
    are passed over.
    """
    total = 0.0
    for r in range(len(rays)):
        px, py, pz, dx, dy, dz = rays[r, 0], rays[r, 1], rays[r, 2], rays[r, 3], rays[r, 4], rays[r, 5]
        for _ in range(hits):
            far = 1e300
            face = 0
            twice = 0.0
            for j in range(len(distances)):
                cosine = normals[j, 0] * dx + normals[j, 1] * dy + normals[j, 2] * dz
                if cosine > 0.0:
                    t = (distances[j] - (normals[j, 0] * px + normals[j, 1] * py + normals[j, 2] * pz)) / cosine
                    if t < far:
                        far, face, twice = t, j, 2.0 * cosine
            far = max(far, 0.0)
            total += far
            px += far * dx
            py += far * dy
            pz += far * dz
            dx -= twice * normals[face, 0]
            dy -= twice * normals[face, 1]
            dz -= twice * normals[face, 2]
        rays[r, 0], rays[r, 1], rays[r, 2], rays[r, 3], rays[r, 4], rays[r, 5] = px, py, pz, dx, dy, dz
    return total


@njit(cache=True, nogil=True, error_model="numpy")
def step_slabs(slabs: FloatArray, rays: FloatArray, hits: int) -> float:
    """Do the same with opposite faces paired into slabs, flat (k * SLAB,): half the tests."""
    total = 0.0
    for r in range(len(rays)):
        px, py, pz, dx, dy, dz = rays[r, 0], rays[r, 1], rays[r, 2], rays[r, 3], rays[r, 4], rays[r, 5]
        for _ in range(hits):
            far = 1e300
            face = 0
            twice = 0.0
            for k in range(0, len(slabs), SLAB):
                cosine = slabs[k] * dx + slabs[k + 1] * dy + slabs[k + 2] * dz
                if cosine == 0.0:
                    continue
                place = slabs[k] * px + slabs[k + 1] * py + slabs[k + 2] * pz
                t = (slabs[k + 3] - place) / cosine if cosine > 0.0 else -(slabs[k + 4] + place) / cosine
                if t < far:
                    far, face, twice = t, k, 2.0 * cosine
            far = max(far, 0.0)
            total += far
            px += far * dx
            py += far * dy
            pz += far * dz
            dx -= twice * slabs[face]
            dy -= twice * slabs[face + 1]
            dz -= twice * slabs[face + 2]
        rays[r, 0], rays[r, 1], rays[r, 2], rays[r, 3], rays[r, 4], rays[r, 5] = px, py, pz, dx, dy, dz
    return total
