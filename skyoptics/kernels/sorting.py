"""Which light a feature keeps of all that takes its faces: `skyoptics.crystals.arc_regions.in_part`, for lanes."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

ALL, RISING, SINKING, ANTHELIC = 0, 1, 2, 3
"""Numbers of `skyoptics.crystals.arc_feature.PARTS`."""

_COSINE = np.float32(0.5)  # of arc_regions.ANTHELIC_RADIUS
_SHORT = np.float32(1e-12)
_ZERO, _ONE = np.float32(0.0), np.float32(1.0)


@njit(cache=True, nogil=True, error_model="numpy")
def place_in_sky(vx: Any, vy: Any, vz: Any, sx: Any, sy: Any, sz: Any) -> Any:
    """Return 1 for light that has risen, plus 2 for light near the anthelic point.

    Seen in the viewing direction v, the sun standing at s; both world, whatever the sun's azimuth.
    """
    lx, ly = vx - sx, vy - sy
    towards = lx * sx + ly * sy
    sign = -_ONE if towards < _ZERO else _ONE
    turned = sign * (towards * vz - (lx * vx + ly * vy) * sz)
    turned = vz - sz if lx * lx + ly * ly < _SHORT else turned
    risen = 1 if turned > _ZERO else 0
    near = 2 if vz * sz - vx * sx - vy * sy >= _COSINE else 0
    return risen + near


@njit(cache=True, nogil=True, error_model="numpy")
def in_part(part: int, vx: Any, vy: Any, vz: Any, sx: Any, sy: Any, sz: Any) -> bool:
    """Return whether light seen in the viewing direction v, the sun standing at s, belongs to a part."""
    return passes(part, place_in_sky(vx, vy, vz, sx, sy, sz))


@njit(cache=True, nogil=True, error_model="numpy")
def passes(part: int, place: int) -> bool:
    """Return whether light of a place in the sky belongs to a part."""
    if part == ANTHELIC:
        return place >= 2
    if part == ALL:
        return True
    return (place & 1 == 1) == (part == RISING)
