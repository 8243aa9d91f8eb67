"""The wave curve of a fold laid on a table: Airy's fringes on a caustic that moves with position angle and drop size.

With u the distance from the caustic on its lit side, ζ = κu and w² = 1/(κh), Airy's light of one polarisation and the mean
of its fringes, which is what both rays carry, are

    √κ 2π [F² Ai²(−ζ) + G² w² Ai'²(−ζ)],   (F² + G² u/h)/√u.

Means over a bin come from the running integrals of Ai² and Ai'², which are closed forms. Fringes that are not to be
trusted, or that neighbouring samples would put out of step, are faded into their mean.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

FIRST = -8.0
"""ζ where the running integrals begin: the light further out is below 1e-14 of the peak."""
LAST = 60.0
"""ζ beyond which fringes (the hundredth and later ones) are taken as their mean."""
STEPS = 13600
"""Steps of the tables between the two."""


BLOCK = 128
"""Bins taken together: long loops over one flat array, each either all arithmetic (vector units) or all look-up."""

_ROW = BLOCK + 16
_rows = iter(range(0, 64 * _ROW, _ROW))
_AWAY, _PLACE, _FIRST_SUM, _SECOND_SUM, _ROOT, _WAVE_A, _WAVE_B = (next(_rows) for _ in range(7))
_RAY_A, _RAY_B, _SPOT, _KEPT = (next(_rows) for _ in range(4))
_FACTOR_S, _FACTOR_P, _FACTOR_U, _FACTOR_V = (next(_rows) for _ in range(4))
_SUM_I, _SUM_Q, _SUM_U, _SUM_V = (next(_rows) for _ in range(4))
_EDGE = next(_rows)
_SIZE = next(_rows)


@njit(cache=True, nogil=True, error_model="numpy")
def _distances(work: Any, count: Any, edge: Any, side: Any, scale: Any) -> None:
    """Fill distance, its place in the table, and its root, at count edges."""
    steps = STEPS / (LAST - FIRST)
    for i in range(count):
        away = (work[_EDGE + i] - edge) * side
        place = (away * scale - FIRST) * steps
        place = place if place > 0.0 else 0.0
        work[_AWAY + i] = away
        work[_PLACE + i] = place if place < STEPS - 1e-6 else STEPS - 1e-6
        work[_ROOT + i] = np.sqrt(away if away > 0.0 else 0.0)


@njit(cache=True, nogil=True, error_model="numpy")
def _integrals(work: Any, count: Any, table: Any) -> None:
    """Look up the running integrals."""
    for i in range(count):
        place = work[_PLACE + i]
        step = np.uint64(np.uint32(np.int32(place)))
        part = place - np.float64(np.int32(place))
        a, b = table[step, 0], table[step, 1]
        work[_FIRST_SUM + i] = a + part * (table[step + np.uint64(1), 0] - a)
        work[_SECOND_SUM + i] = b + part * (table[step + np.uint64(1), 1] - b)


@njit(cache=True, nogil=True, error_model="numpy")
def _curves(
    work: Any, count: Any, side: Any, scale: Any, curvature: Any, trusted: Any, cell: Any, per_distance: Any
) -> None:
    """Fill the mean of both rays, of the waves, and how much of the fringes is kept."""
    amplitude = 2.0 * np.pi / np.sqrt(scale) * side
    second = amplitude / (scale * curvature)
    inverse = 1.0 / trusted
    grain = (4.0 / 3.0 * cell) ** 2 * scale**3 / 24.0
    for i in range(count):
        x, y = work[_AWAY + i], work[_AWAY + i + 1]
        down = 1.0 / ((y - x) * side)
        p, q = work[_ROOT + i], work[_ROOT + i + 1]
        ray_a = 2.0 * (q - p) * side * down
        ray_b = (2.0 / 3.0) * (q * q * q - p * p * p) * side * down / curvature
        middle = 0.5 * (x + y)
        middle = middle if middle > 0.0 else 0.0
        ratio = middle * inverse
        ratio = ratio * ratio * ratio
        grains = grain * middle * middle * middle
        kept = 1.0 / ((1.0 + ratio * ratio) * (1.0 + grains + 0.5 * grains * grains))
        far = x if x > y else y
        work[_KEPT + i] = kept if far * scale < LAST else 0.0
        work[_RAY_A + i] = ray_a
        work[_RAY_B + i] = ray_b
        work[_WAVE_A + i] = (work[_FIRST_SUM + i + 1] - work[_FIRST_SUM + i]) * amplitude * down
        work[_WAVE_B + i] = (work[_SECOND_SUM + i + 1] - work[_SECOND_SUM + i]) * second * down
        spot = np.sqrt(middle) * per_distance - 0.5
        work[_SPOT + i] = spot if spot > 0.0 else 0.0


@njit(cache=True, nogil=True, error_model="numpy")
def _factors(work: Any, count: Any, local: Any) -> None:
    """Look up the factors, linear in √u between the middles of their bins; local (nu + 1, 4)."""
    last = np.int32(len(local) - 2)
    for i in range(count):
        spot = work[_SPOT + i]
        j = np.int32(spot)
        j = j if j < last else last
        f = spot - j
        f = f if f < 1.0 else 1.0
        k = np.uint64(np.uint32(j))
        m = k + np.uint64(1)
        work[_FACTOR_S + i] = local[k, 0] + f * (local[m, 0] - local[k, 0])
        work[_FACTOR_P + i] = local[k, 1] + f * (local[m, 1] - local[k, 1])
        work[_FACTOR_U + i] = local[k, 2] + f * (local[m, 2] - local[k, 2])
        work[_FACTOR_V + i] = local[k, 3] + f * (local[m, 3] - local[k, 3])


@njit(cache=True, nogil=True, error_model="numpy")
def _add(work: Any, count: Any, fs: Any, gs: Any, fp: Any, gp: Any) -> None:
    """Add a sample's light to the block's sums."""
    for i in range(count):
        kept = work[_KEPT + i]
        a = work[_RAY_A + i] + kept * (work[_WAVE_A + i] - work[_RAY_A + i])
        b = work[_RAY_B + i] + kept * (work[_WAVE_B + i] - work[_RAY_B + i])
        s, p = fs * a + gs * b, fp * a + gp * b
        work[_SUM_U + i] = work[_SUM_U + i] + (s + p) * work[_FACTOR_U + i]
        work[_SUM_V + i] = work[_SUM_V + i] + (s + p) * work[_FACTOR_V + i]
        s, p = s * work[_FACTOR_S + i], p * work[_FACTOR_P + i]
        work[_SUM_I + i] = work[_SUM_I + i] + s + p
        work[_SUM_Q + i] = work[_SUM_Q + i] + p - s


@njit(cache=True, nogil=True, error_model="numpy")
def lay(
    edges: Any,
    caustic: Any,
    side: Any,
    weight: Any,
    kappa: Any,
    half_curvature: Any,
    strength: Any,
    trusted: Any,
    cell: Any,
    node: Any,
    part: Any,
    brightness: Any,
    table: Any,
    out: Any,
) -> None:
    """Add the curves of many samples to out (nφ, nθ, 4), Stokes vectors in the scattering frame.

    edges (nθ + 1,) [rad]; caustic (samples, nφ); side ±1.0; weight, kappa (samples,); half_curvature h; strength (4,): F²
    and G² of ⊥, then of ∥; trusted (samples,): distance where the fringes' places begin to fail; cell (samples,): share of
    the phase by which neighbouring samples differ; node, part (samples,): place between the nodes of brightness
    (nodes, nφ, nu, 4), factors for ⊥, ∥, U, V over equal steps of √u, 0 … √π; table (STEPS + 1, 2): running integrals of
    Ai²(−ζ) and Ai'²(−ζ). Fringes are kept by 1/(1 + (u/trusted)⁶) and, phase² cell²/24 = g, by 1/(1 + g + g²/2).
    """
    samples, columns = caustic.shape
    bins = len(edges) - 1
    nu = brightness.shape[2]
    per_distance = nu / np.sqrt(np.pi)
    fs, gs, fp, gp = strength[0], strength[1], strength[2], strength[3]
    work = np.zeros(_SIZE)
    local = np.empty((samples, nu, 4))
    for column in range(columns):
        for k in range(samples):
            low, fraction, power = node[k], part[k], weight[k]
            for j in range(nu):
                for e in range(4):
                    before, after = brightness[low, column, j, e], brightness[low + 1, column, j, e]
                    local[k, j, e] = power * (before + fraction * (after - before))
        for start in range(0, bins, BLOCK):
            count = min(BLOCK, bins - start)
            for i in range(count + 1):
                work[_EDGE + i] = edges[start + i]
            for i in range(count):
                work[_SUM_I + i] = 0.0
                work[_SUM_Q + i] = 0.0
                work[_SUM_U + i] = 0.0
                work[_SUM_V + i] = 0.0
            first, last = edges[start], edges[start + count]
            for k in range(samples):
                edge, scale = caustic[k, column], kappa[k]
                reach = (last - edge) if side > 0.0 else (edge - first)
                if reach * scale <= FIRST:  # all in the dark
                    continue
                _distances(work, count + 1, edge, side, scale)
                _integrals(work, count + 1, table)
                _curves(work, count, side, scale, half_curvature, trusted[k], cell[k], per_distance)
                _factors(work, count, local[k])
                _add(work, count, fs, gs, fp, gp)
            for i in range(count):
                out[column, start + i, 0] += work[_SUM_I + i]
                out[column, start + i, 1] += work[_SUM_Q + i]
                out[column, start + i, 2] += work[_SUM_U + i]
                out[column, start + i, 3] += work[_SUM_V + i]
