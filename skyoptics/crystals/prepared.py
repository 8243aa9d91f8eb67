"""What the batches of one kind of crystal have in common: kernel arguments, made once.

`prepare` turns crystals, their orientation, a spectral bin and a source into what `skyoptics.crystals.tracing` traces.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any, NamedTuple

import numpy as np

from skyoptics.crystals.orientations import Orientation, relative_extinction
from skyoptics.crystals.shapes import Shape
from skyoptics.crystals.sorting import Sorter
from skyoptics.errors import DomainError
from skyoptics.kernels.crystal import SETTINGS
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
from skyoptics.kernels.sorting import passes
from skyoptics.units import ArrayLike, Float32Array, FloatArray

CUTOFF = 0.05
"""Power, relative to a mean ray, below which rays play roulette."""
UNPOLARISED = (1.0, 0.0, 0.0, 0.0)
_INDEX_KNOTS = 33
_DISC_KNOTS = 513
_RINGS = 0.99
_RING_KNOTS = 2049


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


class Arguments(NamedTuple):
    """What `skyoptics.kernels.crystal.trace_crystals` takes beside a body, in its order."""

    settings: Float32Array
    law: int
    pose: Float32Array
    tilts: Float32Array
    frame: Float32Array
    disc: Float32Array
    indices: Float32Array
    stokes: Float32Array
    pattern: Float32Array
    step: Any
    table: Any
    outside: Any
    settled: Any


@dataclass(frozen=True, eq=False)
class Prepared:
    """Kernel arguments of one kind of crystal in one spectral bin under one source; made by `prepare`."""

    bodies: tuple[tuple[Float32Array, Float32Array], ...]
    """Slabs and patches of each shape of the kind."""
    arguments: Arguments
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
    mean_incident = float(relative_extinction(shapes, orientation, towards[2]))
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
    arguments = Arguments(
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


_NO_NAMES = (
    np.zeros(0, dtype=np.uint16),
    np.zeros(0, dtype=np.uint8),
    np.zeros(0, dtype=np.uint8),
    np.zeros(0, dtype=np.uint8),
)
