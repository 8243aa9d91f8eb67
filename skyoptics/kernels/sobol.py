"""Sobol points in up to 12 dimensions, unscrambled or with a hash-based Owen scramble.

Points come in Gray-code order (Antonov & Saleev, USSR Comput. Math. Math. Phys. 19, 252 (1979)) from the direction numbers
of Joe & Kuo (SIAM J. Sci. Comput. 30, 2635 (2008)), so the unscrambled sequence is that of `scipy.stats.qmc.Sobol`, from
whose table (BSD licence) `docs/tools/bake_sobol.py` copied them.

Because i XOR (i >> 1) is linear over bits, the points of a chunk of 2**m consecutive numbers starting at a multiple of
2**m are the chunk's first point XOR a fixed table: one operation a coordinate, and no loop over bits.

Owen's scramble is nested: each bit is flipped by a hash of the bits above it. On bit-reversed numbers that is any mixing
in which bits only reach upwards: x + seed, x XOR x · even, x · odd (Laine & Karras, Comput. Graph. Forum 30, 1161 (2011);
Burley, J. Comput. Graph. Tech. 9(4), 1 (2020)). Direction numbers are kept reversed, so only one reversal is left.

Points may be gathered in cells of the unit cube (`gather_chunk`): importance sampling by a density that is constant in each
cell.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from skyoptics.kernels.lanes import CHUNK, Float32Array, FloatArray, Int64Array, Uint32Array
from skyoptics.kernels.random import mix32

DIMENSIONS = 12
BITS = 30

# Joe & Kuo's direction numbers as scipy keeps them: primitive polynomial and first odd numbers, dimensions 2 to 12
_POLYNOMIALS = (3, 7, 11, 13, 19, 25, 37, 41, 47, 55, 59)
_INITIAL = (
    (1,),
    (1, 3),
    (1, 3, 1),
    (1, 1, 1),
    (1, 1, 3, 3),
    (1, 3, 5, 13),
    (1, 1, 5, 5, 17),
    (1, 1, 5, 5, 5),
    (1, 1, 7, 11, 19),
    (1, 1, 5, 1, 1),
    (1, 1, 1, 3, 11),
)


def direction_numbers() -> Uint32Array:
    """Return direction numbers, shape (DIMENSIONS, BITS) uint32, bit j of the Gray code selecting column j (top bit 31)."""
    numbers = np.zeros((DIMENSIONS, BITS), dtype=np.uint64)
    numbers[0] = [1 << (31 - j) for j in range(BITS)]
    for row, (polynomial, initial) in enumerate(zip(_POLYNOMIALS, _INITIAL, strict=True), start=1):
        degree = polynomial.bit_length() - 1
        m = list(initial)
        for j in range(degree, BITS):  # Bratley & Fox, ACM Trans. Math. Softw. 14, 88 (1988), eq. 3
            value = m[j - degree] ^ (m[j - degree] << degree)
            for k in range(1, degree):
                if polynomial >> (degree - k) & 1:
                    value ^= m[j - k] << k
            m.append(value)
        numbers[row] = [m[j] << (31 - j) for j in range(BITS)]
    return numbers.astype(np.uint32)


def reverse_bits(values: Uint32Array) -> Uint32Array:
    """Return uint32 numbers with their bits in reverse order."""
    values = np.asarray(values, dtype=np.uint32)
    for shift, mask in ((1, 0x55555555), (2, 0x33333333), (4, 0x0F0F0F0F), (8, 0x00FF00FF)):
        mask32 = np.uint32(mask)
        values = ((values >> np.uint32(shift)) & mask32) | ((values & mask32) << np.uint32(shift))
    return (values >> np.uint32(16)) | (values << np.uint32(16))


def chunk_table() -> Uint32Array:
    """Return the reversed coordinates of the first CHUNK points, flat (DIMENSIONS * CHUNK,) uint32."""
    numbers = reverse_bits(direction_numbers())
    table = np.zeros((DIMENSIONS, CHUNK), dtype=np.uint32)
    for point in range(CHUNK):
        gray = point ^ (point >> 1)
        for bit in range(BITS):
            if gray >> bit & 1:
                table[:, point] ^= numbers[:, bit]
    return table.ravel()


REVERSED_NUMBERS = reverse_bits(direction_numbers()).ravel()
"""Reversed direction numbers, flat (DIMENSIONS * BITS,) uint32."""
CHUNK_TABLE = chunk_table()
"""Reversed coordinates of the first CHUNK points, flat (DIMENSIONS * CHUNK,) uint32."""

_STEP = np.float32(2.0**-23)
_MIDDLE = np.float32(2.0**-24)
_LAST = np.float32(1.0 - 2.0**-24)


@njit(cache=True, nogil=True, error_model="numpy")
def scramble_seeds(key_low: Any, key_high: Any, seeds: Uint32Array) -> None:
    """Fill seeds (DIMENSIONS,) uint32 from the two halves of a batch's key."""
    for dimension in range(len(seeds)):
        a = mix32(np.uint32(key_low ^ np.uint32(np.uint32(dimension + 1) * np.uint32(0x85EBCA6B))))
        seeds[dimension] = mix32(np.uint32(a + key_high))


@njit(cache=True, nogil=True, error_model="numpy")
def sobol_chunk(
    first: int,
    scrambled: bool,
    seeds: Uint32Array,
    used: int,
    numbers: Uint32Array,
    table: Uint32Array,
    out: Float32Array,
) -> None:
    """Fill out, flat (DIMENSIONS * CHUNK,) float32 in (0, 1), with points first … first + CHUNK − 1.

    first: a multiple of CHUNK; seeds (DIMENSIONS,) uint32; used: bit mask of the dimensions wanted; numbers, table:
    `REVERSED_NUMBERS`, `CHUNK_TABLE`. Coordinates are the middles of 2**23 steps: never 0, never 1.
    """
    gray = np.uint32(first) ^ (np.uint32(first) >> np.uint32(1))
    for dimension in range(len(seeds)):
        if used >> dimension & 1 == 0:
            continue
        base = np.uint32(0)
        for bit in range(BITS):
            if (gray >> np.uint32(bit)) & np.uint32(1):
                base = np.uint32(base ^ numbers[dimension * BITS + bit])
        seed = seeds[dimension]
        odd = np.uint32((seed >> np.uint32(16)) | np.uint32(1))
        start = dimension * CHUNK
        for lane in range(CHUNK):
            x = np.uint32(base ^ table[start + lane])
            if scrambled:
                x = np.uint32(x ^ np.uint32(x * np.uint32(0x3D20ADEA)))
                x = np.uint32(x + seed)
                x = np.uint32(x * odd)
                x = np.uint32(x ^ np.uint32(x * np.uint32(0x05526C56)))
                x = np.uint32(x ^ np.uint32(x * np.uint32(0x53A22864)))
            x = np.uint32(((x >> np.uint32(1)) & np.uint32(0x55555555)) | ((x & np.uint32(0x55555555)) << np.uint32(1)))
            x = np.uint32(((x >> np.uint32(2)) & np.uint32(0x33333333)) | ((x & np.uint32(0x33333333)) << np.uint32(2)))
            x = np.uint32(((x >> np.uint32(4)) & np.uint32(0x0F0F0F0F)) | ((x & np.uint32(0x0F0F0F0F)) << np.uint32(4)))
            x = np.uint32(((x >> np.uint32(8)) & np.uint32(0x00FF00FF)) | ((x & np.uint32(0x00FF00FF)) << np.uint32(8)))
            x = np.uint32((x >> np.uint32(16)) | (x << np.uint32(16)))
            out[start + lane] = np.float32(np.int32(x >> np.uint32(9))) * _STEP + _MIDDLE


@njit(cache=True, nogil=True, error_model="numpy")
def gather_chunk(
    first: int,
    rays: int,
    offset: float,
    cell: int,
    sums: FloatArray,
    boxes: Float32Array,
    dimensions: Int64Array,
    points: Float32Array,
    weights: Float32Array,
) -> int:
    """Move points first … first + CHUNK − 1 of a batch of `rays` into cells; return the cell of the last one.

    Point i goes to the cell whose interval of the running sum holds (i + offset) / rays: with offset even in 0 … 1 every
    cell gets the points due to it, to within one (systematic sampling, Madow & Madow, Ann. Math. Stat. 15, 1 (1944)), and
    neighbours in number share a cell, so that nothing is searched. sums (cells + 1,): running sum of the cells' shares, 0
    first; boxes, flat (cells * (1 + 2 k),): weight (volume ÷ share), then lower corner and width in each of `dimensions`
    (k,); cell: of the point before; points as from `sobol_chunk`, moved in place; weights (CHUNK,).
    """
    k = len(dimensions)
    size = 1 + 2 * k
    last = len(sums) - 2
    per_ray = 1.0 / rays
    for lane in range(CHUNK):
        place = (first + lane + offset) * per_ray
        while cell < last and sums[cell + 1] <= place:
            cell += 1
        box = cell * size
        weights[lane] = boxes[box]
        for d in range(k):
            spot = dimensions[d] * CHUNK + lane
            x = boxes[box + 1 + d] + points[spot] * boxes[box + 1 + k + d]
            points[spot] = x if x < _LAST else _LAST
    return cell
