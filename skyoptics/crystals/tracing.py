"""Rays through crystals, one batch at a time: check → kernel → wrap.

`prepare` turns a crystal, its orientation, a spectral bin and a source into kernel arguments once; `trace_plane`,
`trace_angles` and `trace_exits` run one batch of it. A batch's bits depend on (seed, bin, batch) and what was prepared,
nothing else; batches may run in any thread. Every batch is an independent scramble of the same Sobol points, so the scatter
between batches is an honest error.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from skyoptics.crystals.prepared import Prepared
from skyoptics.crystals.shapes import Shape
from skyoptics.errors import DomainError
from skyoptics.kernels.binning import ANGLE_SUMS, EXIT_CODES, EXIT_COLUMNS
from skyoptics.kernels.crystal import ANGLES, EXITS, PLANE, STOKES_PLANE, TALLIES, trace_crystals
from skyoptics.kernels.lanes import CHUNK
from skyoptics.kernels.plain import PLAIN_TALLIES, trace_plain
from skyoptics.kernels.projection import SPARE
from skyoptics.kernels.random import batch_key
from skyoptics.kernels.sobol import CHUNK_TABLE, REVERSED_NUMBERS
from skyoptics.units import Float32Array, FloatArray

MAXIMUM_RAYS = 2**20
"""Largest batch."""


@dataclass(frozen=True)
class Tally:
    """What became of a batch; powers are sums over its rays, in units of the crystal's mean projected area.

    scattered + absorbed = incident + roulette; roulette (power gained less power lost by chance) has mean 0.
    """

    rays: int
    incident: float
    scattered: float
    absorbed: float
    roulette: float
    below_cutoff: float
    """What a plain cut-off at the same power would have dropped."""
    segments: int
    """Hits from inside by live rays."""
    cosine: float
    """Σ power · cos(scattering angle); angle tables only."""
    forward: float
    """Power within 2e-5 rad of straight on (through parallel faces, at tilt of the index only); angle tables only."""

    def __add__(self, other: Tally) -> Tally:
        return Tally(*(getattr(self, name) + getattr(other, name) for name in self.__dataclass_fields__))


@dataclass(frozen=True, eq=False)
class Incoming:
    """Rays that fall on crystals in place of the source's.

    Parameters
    ----------
    direction, reference : ndarray, shape (m, 3)
        Direction of travel and e⊥, world.
    stokes : ndarray, shape (m, 4)
        Power, e⊥ = `reference`.
    """

    direction: Float32Array
    stokes: Float32Array
    reference: Float32Array

    def packed(self) -> Float32Array:
        """Return rows as kernels take them, shape (m, 10)."""
        return np.concatenate([self.direction, self.stokes, self.reference], axis=1).astype(np.float32)


@dataclass(frozen=True, eq=False)
class ExitList:
    """Rays that left, one row each, in the order they left.

    Parameters
    ----------
    direction, before : ndarray, shape (m, 3)
        Directions of travel after and before the crystal, world.
    stokes : ndarray, shape (m, 4)
        Power (I, Q, U, V) with e⊥ = `reference`.
    reference : ndarray, shape (m, 3)
        e⊥, world, any length.
    ray, hits : ndarray, shape (m,)
        Number of the ray in its batch; number of faces met.
    path : ndarray, shape (m,)
        Path code, see `skyoptics.kernels.lanes.path_faces`.
    cell : ndarray, shape (m,)
        Row · columns + column of the grid given, else 0.
    group : ndarray, shape (m,)
        Number of the name in `Sorter.names`; 0 without a sorter.
    """

    direction: Float32Array
    before: Float32Array
    stokes: Float32Array
    reference: Float32Array
    ray: Any
    hits: Any
    path: Any
    cell: Any
    group: Any


def trace_plane(
    prepared: Prepared,
    directions: Float32Array,
    seed: int,
    batch: int,
    rays: int,
    stokes_count: int = 1,
    dtype: Any = np.float32,
    only: int = -1,
) -> tuple[Any, Tally]:
    """Trace one batch onto a grid of directions.

    Parameters
    ----------
    prepared : Prepared
        From `prepare`.
    directions : ndarray
        `Directions.packed()`.
    seed, batch : int
        Together with the bin they make the random key.
    rays : int
        A multiple of 64, at most `MAXIMUM_RAYS`.
    stokes_count : int, optional
        1 for I, 4 for I, Q, U, V in the picture's frame of elevation: Q = I(vertical) − I(level), U > 0 for a field that
        swings between upper right and lower left as the observer sees it, V as in Bohren & Huffman (1983) §2.11.
    dtype : dtype, optional
        float32 or float64.
    only : int, optional
        Number of the group in `Sorter.names` whose light alone is kept; default all.

    Returns
    -------
    plane : ndarray, shape (ny, nx) or (ny, nx, 4)
        Power sums. Divided by (2 · rays · solid angle) they are the `phase` of a scatterer [sr⁻¹]: differential scattering
        cross-section ÷ reference extinction, twice the mean projected area.
    tally : Tally
        What became of the rays.
    """
    plane, _, tally = _plane(prepared, directions, seed, batch, rays, stokes_count, dtype, only, 0)
    return plane, tally


def trace_groups(
    prepared: Prepared,
    directions: Float32Array,
    seed: int,
    batch: int,
    rays: int,
    side: int,
    stokes_count: int = 1,
    dtype: Any = np.float32,
) -> tuple[Any, Any, Tally]:
    """Trace one batch onto a grid of directions, and keep the light of each named arc apart on a coarser one.

    Parameters
    ----------
    prepared : Prepared
        With a sorter.
    directions, seed, batch, rays, stokes_count, dtype :
        As in `trace_plane`, and with the same result.
    side : int
        Pixels along the side of a cell of the coarse grid, whose first cell has its corner in that of the first pixel.

    Returns
    -------
    plane : ndarray
        As from `trace_plane`.
    groups : ndarray of float64, shape (names, rows, columns)
        Power sums of each name in the cells; over names they add up to those of the plane's pixels, to the plane's rounding.
    tally : Tally
    """
    if prepared.sorter is None or side < 1:
        raise DomainError("groups need a sorter, and cells of one pixel at least")
    return _plane(prepared, directions, seed, batch, rays, stokes_count, dtype, -1, side)


def coarse_shape(shape: tuple[int, int], side: int) -> tuple[int, int]:
    """Return rows and columns of cells of a grid with cells of side · side pixels."""
    return -(-shape[0] // side), -(-shape[1] // side)


def _plane(
    prepared: Prepared,
    directions: Float32Array,
    seed: int,
    batch: int,
    rays: int,
    stokes_count: int,
    dtype: Any,
    only: int,
    side: int,
) -> tuple[Any, Any, Tally]:
    if stokes_count not in (1, 4):
        raise DomainError(f"a plane holds 1 or 4 Stokes components; got {stokes_count}")
    if only >= 0 and (prepared.sorter is None or only >= len(prepared.sorter.names)):
        raise DomainError(f"there is no group {only} to keep")
    ny, nx = int(directions[1]), int(directions[2])
    plane = np.zeros((ny * nx + SPARE) * stokes_count, dtype=dtype)
    sink = PLANE if stokes_count == 1 else STOKES_PLANE
    cells, groups = np.zeros(4, dtype=np.int64), np.zeros(0)
    if side:
        assert prepared.sorter is not None
        down, across = coarse_shape((ny, nx), side)
        cells = np.array([ny, nx, side, across])
        groups = np.zeros((len(prepared.sorter.names), down, across))
    grid = np.asarray(directions, dtype=np.float32)
    tally, _ = _call(prepared, seed, batch, rays, sink, grid, plane, *_NO_EXITS, only, cells, groups.ravel())
    kept = plane[: ny * nx * stokes_count]
    return kept.reshape((ny, nx) if stokes_count == 1 else (ny, nx, 4)), groups, tally


def trace_angles(
    prepared: Prepared, count: int, seed: int, batch: int, rays: int, polarised: bool = True
) -> tuple[FloatArray, Tally]:
    """Trace one batch of randomly oriented crystals into a table over scattering angle.

    Parameters
    ----------
    prepared : Prepared
        Random orientation; the source's Stokes vector is not looked at.
    count : int
        Number of equal bins between 0 and π.
    seed, batch, rays : int
        As in `trace_plane`; rays a multiple of 256.
    polarised : bool, optional
        False: unpolarised rays only, P11 and P12 with all rays' statistics, the rest 0.

    Returns
    -------
    sums : ndarray, shape (count, 6), with a sorter (names, count, 6)
        Sums for P11 P12 P22 P33 P34 P44; P = sums · 4π / (scattered power · solid angle of the bin), so that ∫ P11 dΩ = 4π
        over what was traced.
    tally : Tally
    """
    if rays % (4 * CHUNK * len(prepared.bodies)):
        raise DomainError(f"rays of an angle table are a multiple of {4 * CHUNK * len(prepared.bodies)}; got {rays}")
    if len(prepared.guide.dimensions):
        raise DomainError("an angle table has no frame to guide rays into")  # and its shares of rays go by number
    names = 1 if prepared.sorter is None else len(prepared.sorter.names)
    table = np.zeros(names * count * ANGLE_SUMS)
    grid = np.array([4.0 if polarised else 1.0, float(count)], dtype=np.float32)
    tally, _ = _call(prepared, seed, batch, rays, ANGLES, grid, table, *_NO_EXITS)
    shape = (count, ANGLE_SUMS) if prepared.sorter is None else (names, count, ANGLE_SUMS)
    return table.reshape(shape), tally


def trace_exits(
    prepared: Prepared,
    seed: int,
    batch: int,
    rays: int,
    capacity: int | None = None,
    directions: Float32Array | None = None,
    incoming: Incoming | None = None,
) -> tuple[ExitList, Tally]:
    """Trace one batch and return every exit with power, at most `capacity` (default 16 a ray) of them.

    With `directions` (packed) only exits that fall on that grid are listed. With `incoming` (as many rays) ray r of the batch
    is the list's, not the source's; its power is multiplied by the area its crystal happens to show ÷ the reference.
    """
    capacity = 16 * rays if capacity is None else capacity
    values = np.zeros((capacity, EXIT_COLUMNS), dtype=np.float32)
    numbers = np.zeros((capacity, EXIT_CODES), dtype=np.uint32)
    grid = np.zeros(2, np.float32) if directions is None else np.asarray(directions, dtype=np.float32)
    packed = None if incoming is None else incoming.packed()
    if packed is not None and len(packed) != rays:
        raise DomainError(f"a batch of {rays} rays needs as many that come in; got {len(packed)}")
    tally, exits = _call(
        prepared, seed, batch, rays, EXITS, grid, np.zeros(1, np.float32), values, numbers, incoming=packed
    )
    if exits > capacity:
        raise DomainError(f"{exits:.0f} exits do not fit a list of {capacity}; ask for fewer rays or more room")
    values, numbers = values[: int(exits)], numbers[: int(exits)]
    long = numbers[:, 1] > 12
    path = np.where(
        long, np.int64((1 << 60) - 1), numbers[:, 3].astype(np.int64) << 30 | numbers[:, 2].astype(np.int64)
    )
    parts = (values[:, 0:3], values[:, 10:13], values[:, 3:7], values[:, 7:10], numbers[:, 0], numbers[:, 1])
    return ExitList(*parts, path, numbers[:, 4], numbers[:, 5]), tally


def plain_plane(
    prepared: Prepared, shape: Shape, directions: Float32Array, seed: int, batch: int, rays: int
) -> tuple[FloatArray, Tally]:
    """Trace one batch with the plain comparison loop, for tests and benchmarks.

    Returns
    -------
    plane : ndarray, shape (ny, nx)
        Power sums; divided by (2 · `rays` · solid angle), `rays` those shot, they are the phase as in `trace_plane`.
    tally : Tally
        `rays` counts those that entered: the others missed.
    """
    slabs, _ = prepared.bodies[0]
    settings, law, pose, _, frame, disc, index = prepared.arguments[:7]
    scale, inverse_kappa, span, radius, cutoff = settings[:5]
    reach = max(float(np.linalg.norm(corners, axis=1).max()) for corners in shape.faces if len(corners))
    per_ray = np.pi * reach**2 * float(scale)
    plane = np.zeros(int(directions[1]) * int(directions[2]))
    tally = np.zeros(PLAIN_TALLIES)
    trace_plain(
        slabs.astype(np.float64),
        reach,
        float(scale),
        law,
        float(inverse_kappa),
        float(span),
        pose.astype(np.float64),
        frame.astype(np.float64),
        float(radius),
        disc[:-1].astype(np.float64),
        index[: max(2, len(index) - 2)].astype(np.float64),
        float(cutoff) / prepared.mean_incident * per_ray,
        *batch_key(seed, prepared.spectral_bin, batch),
        rays,
        np.asarray(directions, dtype=np.float64),
        plane,
        tally,
    )
    _, entered, incident, scattered, absorbed, segments = (float(x) for x in tally)
    result = Tally(int(entered), incident, scattered, absorbed, 0.0, 0.0, int(segments), 0.0, 0.0)
    return plane.reshape(int(directions[1]), int(directions[2])), result


def _call(
    prepared: Prepared,
    seed: int,
    batch: int,
    rays: int,
    sink: int,
    grid: Any,
    plane: Any,
    values: Any,
    numbers: Any,
    only: int = -1,
    cells: Any = None,
    groups: Any = None,
    incoming: Any = None,
) -> tuple[Tally, float]:
    """Run the kernel, once for each shape; return the tally and the number of exits met."""
    multiple = prepared.multiple
    if not 0 < rays <= MAXIMUM_RAYS or rays % multiple:
        raise DomainError(f"rays of a batch are a multiple of {multiple}, at most {MAXIMUM_RAYS}; got {rays}")
    tally = np.zeros(TALLIES)
    each = rays // len(prepared.bodies)
    guide = prepared.guide
    for number, body in enumerate(prepared.bodies):
        key = batch_key(seed, prepared.spectral_bin + (number << 32), batch)
        listed = _NOTHING if incoming is None else incoming[number * each : (number + 1) * each]
        arguments: tuple[Any, ...] = (
            *body,
            *prepared.arguments,
            *key,
            each,
            prepared.used,
            REVERSED_NUMBERS,
            CHUNK_TABLE,
        )
        arguments += (guide.sums, guide.boxes, guide.dimensions, listed, sink, grid, plane, only)
        arguments += (_NO_CELLS if cells is None else cells, _NO_GROUPS if groups is None else groups)
        first = int(tally[9])
        arguments += (values[first:], numbers[first:], tally)
        trace_crystals(*arguments)
        numbers[first : int(tally[9]), 0] += np.uint32(number * each)
    entered, incident, scattered, absorbed, gain, below, segments, cosine, forward, exits = (float(x) for x in tally)
    return (
        Tally(int(entered), incident, scattered, absorbed, gain, below, int(segments), cosine, forward),
        exits,
    )


_NO_EXITS = (np.zeros((0, EXIT_COLUMNS), dtype=np.float32), np.zeros((0, EXIT_CODES), dtype=np.uint32))
_NO_CELLS = np.zeros(4, dtype=np.int64)
_NO_GROUPS = np.zeros(0)
_NOTHING = np.zeros((0, 10), dtype=np.float32)
