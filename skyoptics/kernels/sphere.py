"""Rays through a sphere: one batch of a Monte Carlo estimate over impact parameter and wavelength, by order p.

Both amplitudes ride along (van de Hulst's ε_1, ε_2, *Light Scattering by Small Particles*, 1957, §12.22):
ε = r for p = 0 and T (−r)^(p−1) for p ≥ 1, T the product of the two transmission coefficients. They are real: inside a
sphere each reflection has the angle of incidence r with sin r = b/n < 1/n, so total reflection cannot occur; absorption
dims both alike. The path's own phase is common to both. So S1 S2* is real and P34 = −Im(S1 S2*) = 0 for every ray.
Folding the deviation into [0, π] turns both pairs of axes round and leaves S1 S2* alone: in the forward direction
(p = 1, b = 0) P33/P11 = +1, straight back −1.
"""

from __future__ import annotations

from math import asin, expm1, pi, sqrt

import numpy as np
from numba import njit
from numpy.typing import NDArray

from skyoptics.kernels.interface import amplitudes, transmittances
from skyoptics.kernels.random import hash32, uniform

ORDERS = 11
"""Orders kept apart, p = 0 … 10; what is inside after p = 10 left is summed as cut off."""
RAYS = 1 << 16
"""Rays a batch."""
CELLS = 1 << 14
"""Cells of the look-up table over scattering angle."""

_HALF_TURN = pi
_FULL_TURN = 2.0 * pi


def first_bins(edges: NDArray[np.float64]) -> NDArray[np.int32]:
    """Return for each of `CELLS` equal cells of 0 … π the bin that holds the cell's lower end."""
    cells = np.arange(CELLS) * (np.pi / CELLS)
    return np.clip(np.searchsorted(edges, cells, side="right") - 1, 0, len(edges) - 2).astype(np.int32)


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def _reverse32(x):  # type: ignore[no-untyped-def]
    """Reverse the bits of a uint32 (van der Corput's sequence in base 2, as an integer)."""
    x = np.uint32((x >> np.uint32(16)) | (x << np.uint32(16)))
    x = np.uint32(((x & np.uint32(0xFF00FF00)) >> np.uint32(8)) | ((x & np.uint32(0x00FF00FF)) << np.uint32(8)))
    x = np.uint32(((x & np.uint32(0xF0F0F0F0)) >> np.uint32(4)) | ((x & np.uint32(0x0F0F0F0F)) << np.uint32(4)))
    x = np.uint32(((x & np.uint32(0xCCCCCCCC)) >> np.uint32(2)) | ((x & np.uint32(0x33333333)) << np.uint32(2)))
    return np.uint32(((x & np.uint32(0xAAAAAAAA)) >> np.uint32(1)) | ((x & np.uint32(0x55555555)) << np.uint32(1)))


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def _enter(index, impact2):  # type: ignore[no-untyped-def]
    """Return cos i, cos r, r_s, r_p, T_s, T_p of a ray with squared impact parameter b²."""
    cos_i = sqrt(1.0 - impact2)
    cos_r = sqrt(1.0 - impact2 / (index * index))
    r_s, r_p, _, _ = amplitudes(index, cos_i, cos_r)
    t_s, t_p = transmittances(index, cos_i, cos_r)
    return cos_i, cos_r, r_s, r_p, t_s, t_p


@njit(cache=True, nogil=True, error_model="numpy")
def ray(index: float, impact: float, orders: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the energies ε_s, ε_p, each of shape (orders + 1,), one ray carries out as p = 0 … orders, not absorbed."""
    eps_s = np.empty(orders + 1)
    eps_p = np.empty(orders + 1)
    _, _, r_s, r_p, t_s, t_p = _enter(index, impact * impact)
    eps_s[0] = r_s * r_s
    eps_p[0] = r_p * r_p
    s = t_s
    q = t_p
    for p in range(1, orders + 1):
        eps_s[p] = s * s
        eps_p[p] = q * q
        s *= -r_s
        q *= -r_p
    return eps_s, eps_p


@njit(cache=True, nogil=True, error_model="numpy")
def trace(
    key_low: np.uint32,
    key_high: np.uint32,
    count: int,
    index: NDArray[np.float64],
    depth: NDArray[np.float64],
    edges: NDArray[np.float64],
    first: NDArray[np.int32],
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64], float, float]:
    """Trace one batch.

    `count` rays, a power of two. `index`, `depth` (m,): real index and absorption optical depth of a diameter, 4πk·2a/λ,
    at m equidistant wavelengths of the spectral bin, ends included. `edges` (nθ + 1,) from 0 to π; `first` from
    `first_bins`. Returns sums over rays of unit energy: P11, P12, P33 (ORDERS, nθ, 3), P11 (ORDERS,), P11 cos θ
    (ORDERS,), absorbed, cut off.

    Draws: b² lies in stratum j of `count`, all strata slid along together (round the end) by one random number a batch:
    else an angle bin that spans just a whole number of them gets the same rays in every batch, and its error looks nil.
    The wavelength lies in the stratum given by the reversed bits of j (Hammersley's set, which fills the square evenly),
    shifted bit by bit by one random number a batch. Both are jittered in their strata.
    """
    sums = np.zeros((ORDERS, len(edges) - 1, 3))
    energy = np.zeros(ORDERS)
    cosine = np.zeros(ORDERS)
    absorbed = 0.0
    cut_off = 0.0

    last = len(edges) - 2
    per_cell = CELLS / _HALF_TURN
    step = 1.0 / count
    nodes = len(index) - 1
    # one number a batch, drawn as that of a ray behind the last
    slide = uniform(key_low, key_high, np.uint32(count), np.uint32(0))
    shift = hash32(key_low, key_high, np.uint32(count), np.uint32(1))

    for j in range(count):
        number = np.uint32(j)
        impact2 = (j + (slide + uniform(key_low, key_high, number, np.uint32(0)))) * step
        if impact2 >= 1.0:
            impact2 -= 1.0
        stratum = np.floor(np.float64(np.uint32(_reverse32(number) ^ shift)) * 2.0**-32 * count)
        place = (stratum + uniform(key_low, key_high, number, np.uint32(1))) * step * nodes
        node = min(int(place), nodes - 1)
        part = place - node
        n = index[node] + part * (index[node + 1] - index[node])
        through = depth[node] + part * (depth[node + 1] - depth[node])

        cos_i, cos_r, r_s, r_p, t_s, t_p = _enter(n, impact2)
        sin_i = sqrt(impact2)
        sin_r = sin_i / n
        i = asin(sin_i)
        r = asin(sin_r)

        # p = 0
        s = r_s
        q = r_p
        theta = _HALF_TURN - 2.0 * i
        b = first[min(int(theta * per_cell), CELLS - 1)]
        while b < last and theta >= edges[b + 1]:
            b += 1
        light = 0.5 * (s * s + q * q)
        sums[0, b, 0] += light
        sums[0, b, 1] += 0.5 * (q * q - s * s)
        sums[0, b, 2] += s * q
        energy[0] += light
        cosine[0] += light * (2.0 * impact2 - 1.0)

        # p = 1 … 10: angle and its cosine and sine turn by π − 2r at each reflection
        lost = -expm1(-through * cos_r)
        dimmed = sqrt(1.0 - lost)
        inside_s = t_s
        inside_p = t_p
        s = t_s * dimmed
        q = t_p * dimmed
        gain_s = -r_s * dimmed
        gain_p = -r_p * dimmed
        turn = _HALF_TURN - 2.0 * r
        cos_turn = 2.0 * sin_r * sin_r - 1.0
        sin_turn = 2.0 * sin_r * cos_r
        angle = 2.0 * (i - r)
        cos_half = cos_i * cos_r + sin_i * sin_r
        sin_half = sin_i * cos_r - cos_i * sin_r
        cos_angle = 2.0 * cos_half * cos_half - 1.0
        sin_angle = 2.0 * sin_half * cos_half
        for p in range(1, ORDERS):
            theta = min(angle, _FULL_TURN - angle)
            b = first[min(int(theta * per_cell), CELLS - 1)]
            while b < last and theta >= edges[b + 1]:
                b += 1
            light = 0.5 * (s * s + q * q)
            sums[p, b, 0] += light
            sums[p, b, 1] += 0.5 * (q * q - s * s)
            sums[p, b, 2] += s * q
            energy[p] += light
            cosine[p] += light * cos_angle
            # the energy's own account: lost on the chord, then what the surface throws back
            absorbed += 0.5 * (inside_s + inside_p) * lost
            inside_s *= (1.0 - lost) * r_s * r_s
            inside_p *= (1.0 - lost) * r_p * r_p
            s *= gain_s
            q *= gain_p
            angle += turn
            if angle >= _FULL_TURN:
                angle -= _FULL_TURN
            old = cos_angle
            cos_angle = old * cos_turn - sin_angle * sin_turn
            sin_angle = sin_angle * cos_turn + old * sin_turn
        cut_off += 0.5 * (inside_s + inside_p)
    return sums, energy, cosine, absorbed, cut_off
