"""Rays through crystals, one batch at a time: check → kernel → wrap.

`prepare` turns a crystal, its orientation, a spectral bin and a source into kernel arguments once; `trace_plane`,
`trace_angles` and `trace_exits` run one batch of it. A batch's bits depend on (seed, bin, batch) and what was prepared,
nothing else; batches may run in any thread. Every batch is an independent scramble of the same Sobol points, so the scatter
between batches is an honest error.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from skyoptics.crystals.orientations import Orientation, projected_area
from skyoptics.crystals.shapes import Shape
from skyoptics.crystals.sorting import Sorter
from skyoptics.errors import DomainError
from skyoptics.kernels.binning import ANGLE_SUMS, EXIT_CODES, EXIT_COLUMNS
from skyoptics.kernels.crystal import ANGLES, EXITS, PLANE, SETTINGS, STOKES_PLANE, TALLIES, trace_crystals
from skyoptics.kernels.imperfect import TURN
from skyoptics.kernels.lanes import CHUNK
from skyoptics.kernels.orient import (
    AZIMUTH,
    DISC_ANGLE,
    DISC_RADIUS,
    ENTRY_FIRST,
    ENTRY_SECOND,
    SPIN,
    TILT,
    TILT_DIRECTION,
    WAVELENGTH,
)
from skyoptics.kernels.plain import PLAIN_TALLIES, trace_plain
from skyoptics.kernels.projection import SPARE
from skyoptics.kernels.random import batch_key
from skyoptics.kernels.sobol import CHUNK_TABLE, REVERSED_NUMBERS
from skyoptics.kernels.sorting import passes
from skyoptics.units import ArrayLike, Float32Array, FloatArray

MAXIMUM_RAYS = 2**20
"""Largest batch."""

CUTOFF = 0.05
"""Power, relative to a mean ray, below which rays play roulette."""

UNPOLARISED = (1.0, 0.0, 0.0, 0.0)

_INDEX_KNOTS = 33
_DISC_KNOTS = 513
_RINGS = 0.99
_RING_KNOTS = 2049


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
class Guide:
    """Where rays are born: shares of cells of the unit cube of Sobol points; made by `skyoptics.crystals.guide.learn`.

    Parameters
    ----------
    sums : ndarray, shape (cells + 1,)
        Running sum of the cells' shares of the rays, from 0 to 1, each share above 0.
    boxes : ndarray, shape (cells * (1 + 2 k),)
        Of each cell: volume ÷ share, by which its rays' power is multiplied so that every expectation stays; lower corner;
        width.
    dimensions : ndarray, shape (k,)
        Dimensions of the Sobol points that the cells divide.
    """

    sums: FloatArray = field(default_factory=lambda: np.array([0.0, 1.0]))
    boxes: Float32Array = field(default_factory=lambda: np.ones(1, dtype=np.float32))
    dimensions: Any = field(default_factory=lambda: np.zeros(0, dtype=np.int64))


EVENLY = Guide()
"""Plain sampling."""


@dataclass(frozen=True)
class Imperfections:
    """What sets real crystals apart from ideal ones.

    Parameters
    ----------
    angle_spread : float
        Standard deviation of the angle between two faces [rad]. Measured 0.49° ± 0.05° for a natural halo (Können, Muller
        & Tinbergen, Appl. Opt. 33, 4569 (1994)).
    birefringence : float
        n_e − n_o; the index given is then the ordinary one. Light is traced as two rays by polarisation
        (`skyoptics.kernels.imperfect`).
    diffraction : bool
        Whether what leaves is spread by Fraunhofer diffraction of a circular aperture as large as the crystal's mean
        projected area; asks for a size. The beams of a halo are narrower than the crystal, so true spread is larger,
        by up to about two (the rays' pattern convolved with that of the projected area: Mishchenko & Macke, J. Geophys. Res.
        103, 1799 (1998), from memory).
    """

    angle_spread: float = 0.0
    birefringence: float = 0.0
    diffraction: bool = False

    def __post_init__(self) -> None:
        if not 0.0 <= self.angle_spread <= 0.1:
            raise DomainError(f"spread of interfacial angles is 0 to 0.1 rad; got {self.angle_spread:g}")
        if not -0.1 <= self.birefringence <= 0.1:
            raise DomainError(f"birefringence is -0.1 to 0.1; got {self.birefringence:g}")

    @property
    def key(self) -> list[Any]:
        """What tells imperfections apart, in JSON types."""
        return [self.angle_spread, self.birefringence, self.diffraction]


IDEAL = Imperfections()


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
class Prepared:
    """Kernel arguments of one kind of crystal in one spectral bin under one source; made by `prepare`."""

    bodies: tuple[tuple[Float32Array, Float32Array], ...]
    """Slabs and patches of each shape of the kind."""
    arguments: tuple[Any, ...]
    used: int
    spectral_bin: int
    mean_incident: float
    """Expected incident power of a ray: the extinction towards the source ÷ the reference."""
    guide: Guide = EVENLY
    sorter: Sorter | None = None
    birefringent: bool = False

    @property
    def multiple(self) -> int:
        """The rays of a batch are a multiple of this number."""
        return len(self.bodies) * (2 * TURN if self.birefringent else CHUNK)


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


def prepare(
    shape: Shape | Sequence[Shape],
    orientation: Orientation,
    index: Callable[[FloatArray], Any],
    edges: ArrayLike,
    direction: ArrayLike,
    radius: float = 0.0,
    darkening: ArrayLike | None = None,
    stokes: ArrayLike = UNPOLARISED,
    size: float = 0.0,
    spectral_bin: int = 0,
    cutoff: float = CUTOFF,
    guide: Guide | None = None,
    imperfections: Imperfections = IDEAL,
    sorter: Sorter | None = None,
) -> Prepared:
    """Return what the batches of one spectral bin have in common.

    Parameters
    ----------
    shape, orientation : Shape (or several), Orientation
        The crystals; of several shapes each gets the same number of rays of every batch: equal numbers of crystals.
    index : callable
        Wavelengths, shape (m,) [m] → refractive index relative to the air, real or n + ik.
    edges : array_like, shape (2,)
        Of the bin [m]; wavelengths are spread evenly over it.
    direction : array_like, shape (3,)
        Unit vector towards the source (viewing direction).
    radius : float, optional
        Of the source's disc [rad]; default a point.
    darkening : array_like, shape (6,), optional
        Row of `skyoptics.optics.source.Disc.darkening` of this bin; default an even disc.
    stokes : array_like, shape (4,), optional
        Of the source, I = 1, in its own frame of elevation (at the zenith: e⊥ = east); default unpolarised.
    size : float, optional
        Diameter across corners [m]; 0 for no absorption.
    spectral_bin : int, optional
        Number of the bin, part of the random key.
    cutoff : float, optional
        Power below which rays play roulette, relative to a mean ray of this batch.
    guide : Guide, optional
        Where rays are born, for all bins; default evenly.
    imperfections : Imperfections, optional
        Default none.
    sorter : Sorter, optional
        Tells named arcs apart.

    Raises
    ------
    DomainError
        If the index is not above 1 (or above 2), or an argument is out of range.
    """
    low, high = (float(edge) for edge in np.asarray(edges, dtype=np.float64))
    wavelength = np.linspace(low, high, _INDEX_KNOTS)
    values = np.asarray(index(wavelength), dtype=np.complex128) * np.ones(_INDEX_KNOTS)
    if not (np.all(values.real > 1.0) and np.all(values.real <= 2.0) and np.all(values.imag >= 0.0)):
        raise DomainError("a crystal's index relative to the air is 1 < n <= 2 with k >= 0")
    if not (0.0 <= radius < 0.2 and size >= 0.0 and 0.0 < cutoff <= 1.0):
        raise DomainError("disc radius is 0 to 0.2 rad, size at least 0, cut-off above 0 and at most 1")
    index_table = np.stack([values.real, 4.0 * np.pi * values.imag / wavelength * size], axis=1).astype(np.float32)
    towards = np.asarray(direction, dtype=np.float64)
    if towards.shape != (3,) or abs(np.linalg.norm(towards) - 1.0) > 1e-6:
        raise DomainError("a source's direction is a unit vector")
    level = np.array([towards[1], -towards[0], 0.0])
    length = float(np.linalg.norm(level))
    level = level / length if length > 1e-9 else np.array([1.0, 0.0, 0.0])
    frame = np.concatenate([level, np.cross(towards, level), towards])
    shapes = (shape,) if isinstance(shape, Shape) else tuple(shape)
    reference = float(np.mean([each.mean_projected_area for each in shapes]))
    areas = [float(projected_area(each, orientation, towards[2])) for each in shapes]
    mean_incident = float(np.mean(areas)) / reference
    if imperfections.diffraction and size == 0.0:
        raise DomainError("diffraction needs the size of the crystals")
    aperture = size * np.sqrt(reference / np.pi)
    per_argument = 0.5 * (low + high) / (2.0 * np.pi * aperture) if imperfections.diffraction else 0.0
    used = 1 << ENTRY_FIRST | 1 << WAVELENGTH | 1 << ENTRY_SECOND | 1 << AZIMUTH
    if orientation.name == "random" or orientation.tilted:
        used |= 1 << TILT | 1 << TILT_DIRECTION
    if orientation.name in ("column", "lowitz", "axis"):
        used |= 1 << SPIN
    if radius > 0.0:
        used |= 1 << DISC_RADIUS | 1 << DISC_ANGLE
    settings = [1.0 / reference, orientation.inverse_kappa, orientation.span, radius, cutoff * mean_incident]
    settings += [imperfections.angle_spread / np.sqrt(2.0), imperfections.birefringence, per_argument]
    assert len(settings) == SETTINGS
    if sorter is not None and any(len(sorter.outside) != 2 * len(each.normals) for each in shapes):
        raise DomainError("the sorter belongs to a crystal with other faces")
    arguments = (
        np.array(settings, dtype=np.float32),
        orientation.law,
        orientation.pose(),
        orientation.tilt_table(),
        frame.astype(np.float32),
        disc_table(darkening),
        index_table[:1].ravel() if low == high else np.concatenate([index_table, index_table[-1:]]).ravel(),
        np.asarray(stokes, dtype=np.float32),
        ring_table() if imperfections.diffraction else np.zeros(2, dtype=np.float32),
        *(_NO_NAMES if sorter is None else _names(sorter)),
    )
    bodies = tuple((each.packed_slabs(), each.packed_patches()) for each in shapes)
    birefringent = imperfections.birefringence != 0.0
    return Prepared(bodies, arguments, used, spectral_bin, mean_incident, guide or EVENLY, sorter, birefringent)


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


def disc_table(darkening: ArrayLike | None = None) -> Float32Array:
    """Return (ρ / radius)² at equal steps of probability, its last entry twice, for brightness Σ A_j µ^j, µ² = 1 − (ρ / radius)².

    From the rim inwards the probability is G(µ) = Σ 2 A_j µ^(j+2) / (j + 2), which is inverted by interpolation.
    """
    a = np.array([1.0]) if darkening is None else np.asarray(darkening, dtype=np.float64)
    square = np.linspace(0.0, 1.0, 20001) ** 2
    mu = np.sqrt(square)
    power = np.arange(len(a))
    inner = (2.0 * a / (power + 2.0) * mu[:, None] ** (power + 2)).sum(axis=1)
    if not np.all(np.diff(inner) >= 0.0) or inner[-1] <= 0.0:
        raise DomainError("limb darkening leaves the disc negative somewhere")
    table = np.interp(np.linspace(0.0, 1.0, _DISC_KNOTS), inner / inner[-1], 1.0 - square)
    return np.append(table, table[-1]).astype(np.float32)


def ring_table() -> Float32Array:
    """Return x of Fraunhofer's circular aperture at equal steps of the power within it, up to `_RINGS`, then that share.

    1 − J₀² − J₁² (Rayleigh 1881; Born & Wolf, 7th ed. 1999, §8.5.2 eq. 18).
    """
    from scipy.special import j0, j1

    x = np.linspace(0.0, 80.0, 400_001)
    within = np.maximum.accumulate(1.0 - j0(x) ** 2 - j1(x) ** 2)
    rising = np.append(True, np.diff(within) > 0.0)
    table = np.interp(np.linspace(0.0, _RINGS, _RING_KNOTS), within[rising], x[rising])
    return np.append(table, _RINGS).astype(np.float32)


def _settled(sorter: Sorter) -> Any:
    """Return the group that light of a group belongs to by its place in the sky, flat (names * 4,); empty for no tests."""
    if not np.any(sorter.part):
        return np.zeros(0, dtype=np.uint8)
    result = np.zeros((len(sorter.names), 4), dtype=np.uint8)
    for group in range(len(sorter.names)):
        for place in range(4):
            last = group
            while not passes(int(sorter.part[last]), place):
                last = int(sorter.otherwise[last])
            result[group, place] = last
    return result.ravel()


def _names(sorter: Sorter) -> tuple[Any, ...]:
    return (
        np.ascontiguousarray(sorter.step, dtype=np.uint16).ravel(),
        np.ascontiguousarray(sorter.table, dtype=np.uint8).ravel(),
        np.ascontiguousarray(sorter.outside, dtype=np.uint8),
        _settled(sorter),
    )


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
_NO_NAMES = (
    np.zeros(0, dtype=np.uint16),
    np.zeros(0, dtype=np.uint8),
    np.zeros(0, dtype=np.uint8),
    np.zeros(0, dtype=np.uint8),
)
