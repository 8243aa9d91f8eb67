"""Lanes: how rays lie in memory while they are traced.

A pool holds up to `WIDTH` rays in one flat float32 array, row-major by quantity: quantity Q of lane i is `state[Q + i]`,
Q one of the row offsets below (already multiplied by `STRIDE`). One base pointer, a row length fixed at compile time and
loops without branches are what the vectoriser needs; so every stage is one simple loop over the live lanes 0 … n − 1.
Whole numbers (path code, ray number) lie the same way in a uint32 array.

Frames: *body* axes are the crystal's own (z along the c-axis, x along the normal of a side face); *world* is east,
north, up. The rotation rows R hold world = R · body, so position and direction stay in body axes, where faces are
constants, and only what leaves is turned.

Polarisation: Stokes vector (I, Q, U, V) of Bohren & Huffman (*Absorption and Scattering of Light by Small Particles*,
1983, §2.11 and §3.2): field ∝ exp(−iωt), Q = I∥ − I⊥, and e⊥ × e∥ = propagation. Row S holds e⊥ (body axes, any length
above 0); e∥ = propagation × e⊥. At a face e⊥ is the normal of the plane of incidence, so ⊥ is s and ∥ is p.

Path code: 5 bits for each face met, face + 1 of the entry face first, the face of exit last; the newest sits lowest.
`PATH_LOW` holds the last six faces, `PATH_HIGH` the six before; a path of more than twelve faces has HITS > 12 and is
reported as `LONGER`. `TRAIL` holds what names need of a path of any length, `GROUP` the name of what leaves
and `CELL` where that goes (`skyoptics.kernels.grouping`).
"""

from __future__ import annotations

from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

Float32Array: TypeAlias = NDArray[np.float32]
Uint32Array: TypeAlias = NDArray[np.uint32]
FloatArray: TypeAlias = NDArray[np.float64]
Int64Array: TypeAlias = NDArray[np.int64]

WIDTH = 128
"""Lanes of a pool; 256 lanes of 45 rows fill 46 kB."""
CHUNK = 64
"""Rays born together, a power of two dividing WIDTH."""

STRIDE = WIDTH + 16
"""Length of a row. Rows a power of two apart fall on the same few sets of the cache and alias each other's stores; one cache
line more a row spreads them."""

_rows = iter(range(0, 64 * STRIDE, STRIDE))

# Position on the last face met, direction of travel [body]
PX, PY, PZ = next(_rows), next(_rows), next(_rows)
DX, DY, DZ = next(_rows), next(_rows), next(_rows)
# Stokes vector (power, not radiance) and its e⊥ [body]
SI, SQ, SU, SV = next(_rows), next(_rows), next(_rows), next(_rows)
SX, SY, SZ = next(_rows), next(_rows), next(_rows)
# Relative index, absorption per unit of body length
INDEX, ABSORPTION = next(_rows), next(_rows)
# Rotation, world = R · body
R00, R01, R02 = next(_rows), next(_rows), next(_rows)
R10, R11, R12 = next(_rows), next(_rows), next(_rows)
R20, R21, R22 = next(_rows), next(_rows), next(_rows)
# Direction of travel before the crystal [world]
WX, WY, WZ = next(_rows), next(_rows), next(_rows)
KEPT = next(_rows) // STRIDE
"""Rows up to here move with a ray when the pool is packed; those below are born and used within one hit."""
# What leaves at this hit: direction [body, then world], Stokes vector, its e⊥ [world]
EX, EY, EZ = next(_rows), next(_rows), next(_rows)
EI, EQ, EU, EV = next(_rows), next(_rows), next(_rows), next(_rows)
TX, TY, TZ = next(_rows), next(_rows), next(_rows)
# Face met: normal of its slab [body], way there, cosine of the ray with that normal
NX, NY, NZ = next(_rows), next(_rows), next(_rows)
LENGTH, COSINE = next(_rows), next(_rows)
MET = next(_rows)
"""Number of the face met, 2 × slab for the side its normal points to, 2 × slab + 1 for the other."""
# Sums over the life of a lane slot, not of a ray: see `polyhedron`
SUM_IN, SUM_OUT, SUM_ABSORBED = next(_rows), next(_rows), next(_rows)
SUM_ROULETTE, SUM_BELOW = next(_rows), next(_rows)
ROWS = next(_rows) // STRIDE

# Rows of the uint32 array
RAY, HITS, PATH_LOW, PATH_HIGH, TRAIL = 0, STRIDE, 2 * STRIDE, 3 * STRIDE, 4 * STRIDE
CODES_KEPT = 5
"""Rows up to here move with a ray when the pool is packed."""
GROUP, CELL = CODES_KEPT * STRIDE, (CODES_KEPT + 1) * STRIDE
CODE_ROWS = CODES_KEPT + 2

PATH_FACES = 12
LONGER = (1 << 60) - 1
"""Path code of every path of more than PATH_FACES faces: all bits set."""

F0, F1, F2, F3 = np.float32(0.0), np.float32(1.0), np.float32(2.0), np.float32(3.0)
HALF = np.float32(0.5)


def new_lanes() -> tuple[Float32Array, Uint32Array]:
    """Return an empty pool: float32 state, uint32 codes."""
    return np.zeros(ROWS * STRIDE, dtype=np.float32), np.zeros(CODE_ROWS * STRIDE, dtype=np.uint32)


def path_code(low: int, high: int, hits: int) -> int:
    """Return the path code of a ray as one whole number, `LONGER` where it met too many faces."""
    return LONGER if hits > PATH_FACES else (int(high) << 30) | int(low)


def path_faces(code: int) -> tuple[int, ...] | None:
    """Return the faces of a path code in the order met, None for `LONGER`."""
    if code == LONGER:
        return None
    faces = []
    while code:
        faces.append((code & 31) - 1)
        code >>= 5
    return tuple(reversed(faces))
