"""Counter-based random numbers: a function of (seed, bin, batch, ray, dimension), never of a thread.

A batch has a 64-bit key made by `batch_key` from (seed, bin, batch) with the splitmix64 finaliser (Steele, Lea & Flood,
OOPSLA 2014); each ray and dimension inside it is hashed with the low and the high half of that key by a 32-bit mixer
(two rounds of xor-shift-multiply, "lowbias32" constants). All arithmetic is 32 bit inside a batch, so the loop over rays
vectorises. The offset of a dimension is hashed from the high half, not added to it: with a plain sum all batches would
draw from one pool of 2**32 rays.

Dimension numbers (one table for all tracers):

====  =======================================================
 0    impact parameter squared (spheres) / entry point, first
 1    wavelength inside its bin
 2    entry point, second
 3-5  orientation
 6-7  point on the source's disc
 8    shape (aspect, face distance)
 9+   Russian roulette at hit number (dimension - 9)
2²⁴+  normals of faces askew, four a hit
2²⁵+  angle of diffraction, two a hit
====  =======================================================
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

_MASK = (1 << 64) - 1


def _splitmix64(value: int) -> int:
    """Mix 64 bits, every input bit reaching every output bit."""
    value = (value + 0x9E3779B97F4A7C15) & _MASK
    value = ((value ^ (value >> 30)) * 0xBF58476D1CE4E5B9) & _MASK
    value = ((value ^ (value >> 27)) * 0x94D049BB133111EB) & _MASK
    return value ^ (value >> 31)


def batch_key(seed: int, spectral_bin: int, batch: int) -> tuple[np.uint32, np.uint32]:
    """Return the two 32-bit halves of a batch's key."""
    key = _splitmix64(seed & _MASK)
    key = _splitmix64(key ^ _splitmix64(spectral_bin + 0x51ED270B))
    key = _splitmix64(key ^ _splitmix64(batch + 0x2545F491))
    return np.uint32(key & 0xFFFFFFFF), np.uint32(key >> 32)


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def mix32(x: Any) -> Any:
    """Mix one uint32 (bias of single output bits below 0.2 %)."""
    x = np.uint32(x ^ (x >> np.uint32(16)))
    x = np.uint32(x * np.uint32(0x7FEB352D))
    x = np.uint32(x ^ (x >> np.uint32(15)))
    x = np.uint32(x * np.uint32(0x846CA68B))
    return np.uint32(x ^ (x >> np.uint32(16)))


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def hash32(key_low: Any, key_high: Any, ray: Any, dimension: Any) -> Any:
    """Return 32 random bits for one ray (uint32) and one dimension (uint32) of a batch."""
    offset = mix32(np.uint32(key_high + np.uint32(dimension) * np.uint32(0x9E3779B9)))  # constant in a batch: hoisted
    return mix32(np.uint32(mix32(np.uint32(key_low ^ np.uint32(ray))) + offset))


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def uniform(key_low: Any, key_high: Any, ray: Any, dimension: Any) -> Any:
    """Return a float64 in the open interval (0, 1)."""
    return (np.float64(hash32(key_low, key_high, ray, dimension)) + 0.5) * 2.0**-32
