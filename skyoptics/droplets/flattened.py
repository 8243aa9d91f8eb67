"""Flattened raindrops: bows by position angle, wave fringes on the caustics of spheroids.

Falling drops larger than half a millimetre are flattened by the air. Their bow depends on the place along the arc: at the
sides, where the plane of the rays cuts the drop in a circle, it stands as for spheres; at the top of a low sun's bow it
moves inwards with growing drops, while the wave theory of spheres moves it outwards. In between, for radii near 0.25 mm,
the angle stands still, and drops of many sizes put their fringes to the same place: supernumerary bows in rain (Fraser,
J. Opt. Soc. Am. 73, 1626 (1983)).

What is exact, and what is not:

- Shape: an oblate spheroid of the law's axis ratio. Real drops of more than some 2 mm diameter are flatter below than
  above; oscillations are left out, canting is a Gaussian spread of the axis.
- Order 0: exact for rays (the reflected light of a convex body by its Gaussian curvature).
- Orders 1 and 4 … 7: rays through spheroids, polarisation with exact phases, at a few axis ratios and two indices, linear
  between them; in bins of 0.5° by 10°, pooled over three (over more near the source and the antisolar point). Their bows
  are smeared by that.
- Orders 2 and 3: the caustic of each size by exact search (`skyoptics.droplets.flattened_caustic`); on it the sphere's
  Airy curve of the same volume, shifted, not stretched: fringe spacing is that of the sphere, while a spheroid's differs by
  some times ρ. Brightness: for each polarisation the light of the traced rays ÷ that of the sphere's two Airy rays, as a
  function of the distance from the caustic and of position angle, linear in axis ratio, index, and √distance. So the mean
  of the fringes is the ray light at any distance. Fringes fade into it where their places fail (`airy.trusted_angle`, a
  quarter of a period) and where sizes are sampled too coarsely for them. Beyond the fold's meeting with the cusped
  caustic (axis ratio below about 0.77) diffraction there is that of a plain fold. Drops flatter than can be followed keep
  the place of the last that can.
- Canting moves the caustics and orders other than 2 and 3; brightness by position angle in these two is that of upright
  drops.
- Absorption: of the bow ray's path in a sphere for orders 2 and 3; along each ray for others, linear in wavelength between
  the ends of the spectrum (visible light loses some thousandths).
- Cut off: orders above 7 (1e-4 of the light). Diffraction is left out, as by all ray tables: the traced half of the
  extinction is here.
- Airy's theory needs size parameters of some hundreds at least; distributions with more than 1 % of their cross-section in
  drops below 100 are refused.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import ceil, pi

import numpy as np

from skyoptics.droplets import airy
from skyoptics.droplets.axis_ratio import LIMITS, axis_ratio
from skyoptics.droplets.flattened_caustic import LEAST_RATIO, follow
from skyoptics.droplets.sizes import SizeDistribution, quadrature
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import azimuth_elevation, direction
from skyoptics.kernels import KERNEL_HASH, fold, spheroid
from skyoptics.kernels.random import batch_key
from skyoptics.optics import bows
from skyoptics.optics.batches import Executor, in_order
from skyoptics.optics.bins import Bins
from skyoptics.optics.position_table import PositionTable
from skyoptics.optics.source import Source
from skyoptics.units import DEG, ArrayLike, FloatArray

IndexLaw = Callable[[FloatArray], ArrayLike]

ALL_ORDERS = tuple(range(spheroid.ORDERS))
LEAST_SIZE_PARAMETER = 100.0
MOST_CANTING = 30.0 * DEG
ANGLE_BINS = 360
"""Bins of scattering angle of the traced orders."""
POSITION_BINS = 36
"""Bins of position angle of the traced light, whole circle."""
DISTANCE_BINS = 64
"""Bins of √(distance from the caustic)."""
SAMPLES = 192
"""Sizes summed (each with its own place in the spectral bin, and its own canted axis)."""
TILTS = 32
_RATIO_STEP = 0.06
_CAUSTIC_STEP = 0.02
_CAUSTIC_NODES = 61
_GOLDEN = (0.6180339887498949, 0.4142135623730951)


def default_edges() -> FloatArray:
    """Return edges of angle bins: 0.1° from 115° to 152°, where bows of all but the flattest drops stand [rad]."""
    pieces = [np.linspace(0.0, 115.0, 231), np.linspace(115.0, 152.0, 371), np.linspace(152.0, 180.0, 113)]
    return np.unique(np.concatenate(pieces)) * DEG


def memory(bins: Bins, edges: FloatArray | None = None, position_step: float = 3.0 * DEG) -> int:
    """Return the bytes `flattened_scatterer` needs at its peak: three copies of the table, 16 bytes an entry."""
    rows = len(default_edges() if edges is None else edges) + 1
    return 3 * 16 * (ceil(pi / position_step) + 1) * rows * len(bins)


def flattened_scatterer(
    distribution: SizeDistribution,
    law: str,
    index: IndexLaw,
    bins: Bins,
    source: Source,
    canting: float = 0.0,
    *,
    edges: FloatArray | None = None,
    position_step: float = 3.0 * DEG,
    orders: Sequence[int] = ALL_ORDERS,
    samples: int = SAMPLES,
    batches: int = 6,
    seed: int = 0,
    executor: Executor | None = None,
) -> PositionTable:
    """Return the table of flattened drops for one source, its disc and polarisation included.

    Parameters
    ----------
    distribution : SizeDistribution
        By the radius of the sphere of equal volume, within the law's range (`sizes.Cut`).
    law : str
        Of the axis ratio, one of `axis_ratio.LIMITS`.
    index : callable
        Wavelengths [m] → complex index n + ik relative to the air.
    bins : Bins
        Spectral bins.
    source : Source
        Direction, disc and Stokes vector are used; the latter is taken at the ends of the spectrum and linear in between.
    canting : float
        Standard deviation of each of the two components of the axis' tilt, 0 … 30° [rad].
    edges : ndarray, shape (nθ + 1,), optional
        Edges of angle bins, 0 to π [rad]; `default_edges` if left out.
    position_step : float
        Largest step of position angle, 0.25 … 15° [rad]. Between steps the table is linear: a bow of a single size that
        climbs by more than its width a step looks like stairs.
    orders : sequence of int
        p that the table holds, of 0 … 7.
    samples : int
        Sizes summed, 16 … 4096.
    batches : int
        Of 65 536 rays at each axis ratio and index, at least 2.
    seed : int
        Of the random numbers.
    executor : object with `submit`, optional
        Where batches and spectral bins run; same bits with or without.

    Returns
    -------
    PositionTable
        Nodes under a disc, bins under a point. `report`: sizes, axis ratios, traced rays, energy by order, the relative
        standard error of the traced bows by light, energy lost after the last order.

    Raises
    ------
    DomainError
        If an argument lies outside what is said above, or the sizes outside the law's range or below size parameter 100.

    Notes
    -----
    Limits are listed at the top of this module.
    """
    _check(canting, position_step, orders, samples, batches, edges)
    edges = default_edges() if edges is None else np.asarray(edges, dtype=np.float64)
    wide = bool(np.any(bins.width > 0.0)) or canting > 0.0
    sizes = _sizes(distribution, law, samples, wide)
    if 2.0 * pi * sizes.radius.min() / bins.edges.max() < LEAST_SIZE_PARAMETER:
        small = 2.0 * pi * sizes.radius / bins.edges.max() < LEAST_SIZE_PARAMETER
        if sizes.weight[small].sum() > 0.01 * sizes.weight.sum():
            raise DomainError("more than 1 % of the cross-section lies in drops too small for Airy's theory: use Mie")
    return _Maker(sizes, index, bins, source, canting, edges, position_step, tuple(orders), batches, seed).make(executor)


@dataclass(frozen=True, eq=False)
class _Sizes:
    """Samples: radius [m], share of number times r² [m²], axis ratio, relative step of radius between neighbours."""

    radius: FloatArray
    weight: FloatArray
    ratio: FloatArray
    cell: FloatArray


def _check(
    canting: float, step: float, orders: Sequence[int], samples: int, batches: int, edges: FloatArray | None
) -> None:
    if not 0.0 <= canting <= MOST_CANTING:
        raise DomainError(f"canting spread must lie in 0 ... 30 degrees, got {canting / DEG:g}")
    if not 0.25 * DEG * 0.999 <= step <= 15.0 * DEG * 1.001:
        raise DomainError(f"steps of position angle must lie in 0.25 ... 15 degrees, got {step / DEG:g}")
    if not orders or not set(orders) <= set(ALL_ORDERS):
        raise DomainError(f"orders of flattened drops are 0 ... {ALL_ORDERS[-1]}, got {list(orders)}")
    if not 16 <= samples <= 4096 or batches < 2:
        raise DomainError(f"16 ... 4096 samples and at least 2 batches are needed, got {samples} and {batches}")
    if edges is not None:
        edges = np.asarray(edges, dtype=np.float64)
        if edges.ndim != 1 or len(edges) < 3 or not np.all(np.diff(edges) > 0.0):
            raise DomainError("angle edges must be a list of at least three growing numbers")
        if edges[0] != 0.0 or abs(edges[-1] - pi) > 1e-9:
            raise DomainError("angle edges must reach from 0 to 180 degrees: the table holds all the light")


def _sizes(distribution: SizeDistribution, law: str, count: int, wide: bool) -> _Sizes:
    """Return samples: dense where cross-section lies and where the bow moves with size."""
    if law not in LIMITS:
        axis_ratio(0.0, law)  # says so
    radius, number = quadrature(distribution, 4)
    weight = number * radius**2
    inside = 2.0 * radius <= LIMITS[law] * (1.0 + 1e-12)
    if not weight[inside].sum() > 0.99 * weight.sum():
        raise DomainError(
            f"more than 1 % of the cross-section lies in drops beyond {LIMITS[law] * 1e3:g} mm diameter, the end of "
            f"{law}: cut the distribution"
        )
    radius, weight = radius[inside], weight[inside]
    running = np.cumsum(weight) / weight.sum()
    kept = (running > 1e-4) & (running - weight / weight.sum() < 1.0 - 1e-4)
    radius, weight = radius[kept], weight[kept]
    if len(radius) <= 8:
        copies = ceil(24 / len(radius)) if wide else 1
        radius, weight = np.repeat(radius, copies), np.repeat(weight / copies, copies)
        return _Sizes(radius, weight, axis_ratio(2.0 * radius, law), np.zeros(len(radius)))
    log = np.log(radius)
    middle = np.concatenate([log[:1], 0.5 * (log[1:] + log[:-1]), log[-1:]])
    travel = np.abs(np.diff(axis_ratio(2.0 * np.exp(np.minimum(middle, np.log(0.5 * LIMITS[law]))), law)))
    measure = 0.5 * weight / weight.sum() + 0.25 * np.diff(middle) / (middle[-1] - middle[0])
    measure += 0.25 * travel / max(travel.sum(), 1e-12)
    place = np.interp(np.linspace(0.0, measure.sum(), count + 1), _summed(measure), middle)
    mass = np.diff(np.interp(place, middle, _summed(weight)))
    centre = np.diff(np.interp(place, middle, _summed(weight * log))) / np.maximum(mass, 1e-300)
    good = mass > 1e-12 * mass.sum()
    radius = np.minimum(np.exp(np.clip(centre, place[:-1], place[1:])), 0.5 * LIMITS[law])[good]
    return _Sizes(radius, mass[good], axis_ratio(2.0 * radius, law), np.diff(place)[good])


def _summed(values: FloatArray) -> FloatArray:
    return np.concatenate([[0.0], np.cumsum(values)])


class _Maker:
    """One table in the making."""

    def __init__(
        self,
        sizes: _Sizes,
        index: IndexLaw,
        bins: Bins,
        source: Source,
        canting: float,
        edges: FloatArray,
        step: float,
        orders: tuple[int, ...],
        batches: int,
        seed: int,
    ) -> None:
        self.sizes, self.bins, self.edges, self.orders = sizes, bins, edges, orders
        self.batches, self.seed, self.canting = batches, seed, canting
        self.angle = 0.5 * (edges[1:] + edges[:-1])
        self.light = -np.asarray(source.direction, dtype=np.float64)
        self.elevation = float(np.arcsin(np.clip(source.direction[2], -1.0, 1.0)))
        # frames of `skyoptics.geometry.axes`: right and up at the source and at the antisolar point
        azimuth, elevation = azimuth_elevation(self.light)
        self.up = direction(azimuth, elevation + 0.5 * pi)
        self.right = np.array([np.cos(azimuth), -np.sin(azimuth), 0.0])
        self.beam = np.concatenate([self.light, -self.right])
        self.symmetric = not np.any(source.stokes[:, 2:])
        half = ceil(pi / step - 1e-9)
        first, count = (0.0, half + 1) if self.symmetric else (-pi, 2 * half + 1)
        self.position = np.linspace(first, pi, count)
        # index and Stokes vector at the ends of the spectrum
        wavelength = bins.at(np.linspace(0.0, 1.0, 5))
        values = np.broadcast_to(np.asarray(index(wavelength.ravel()), dtype=np.complex128), wavelength.size)
        if not np.all(np.isfinite(values)) or np.any(values.real <= 1.0) or np.any(values.imag < 0.0):
            raise DomainError("flattened drops need an index n + ik with n > 1 and k >= 0 at every wavelength")
        if np.any(values.real >= 2.0):
            raise DomainError("flattened drops need an index below 2: above it there is no primary bow")
        self.index = index
        ends = [int(np.argmin(values.real)), int(np.argmax(values.real))]
        self.ends = values[ends]
        self.end_absorption = 4.0 * pi * values.imag[ends] / wavelength.ravel()[ends]
        self.end_stokes = source.stokes[np.array(ends) // 5]
        self.stokes = np.asarray(source.stokes, dtype=np.float64)
        self.disc = source.disc
        self.tilts = _tilts(canting, self.light)
        lowest = float(sizes.ratio.min())
        if lowest < LEAST_RATIO:
            raise DomainError(f"drops flatter than {LEAST_RATIO} are not followed")
        spread = float(sizes.ratio.max()) - lowest
        if spread < 1e-9:
            self.nodes = np.array([lowest])
        else:
            self.nodes = np.linspace(float(sizes.ratio.max()), lowest, ceil(spread / _RATIO_STEP) + 1)
        place = (sizes.ratio - self.nodes[0]) / (self.nodes[1] - self.nodes[0]) if len(self.nodes) > 1 else 0.0 * sizes.ratio
        self.node = np.clip(place.astype(np.int64), 0, max(len(self.nodes) - 2, 0))
        self.part = np.clip(place - self.node, 0.0, 1.0)
        self.surface = _surface(sizes.ratio)
        self.reference = 2.0 * pi * float(np.sum(sizes.weight * self.surface))

    def make(self, executor: Executor | None) -> PositionTable:
        """Trace, lay, add up."""
        from scipy.special import airy as airy_functions

        shifts = {p: self._shifts(p) for p in (2, 3) if p in self.orders}
        traced = self._trace(executor)
        bands = len(self.bins)
        values = np.zeros((len(self.position), len(self.angle), bands, 4), dtype=np.float32)
        outside = self._outside() if 0 in self.orders else None
        # as many fringes as the tables of `fold` hold
        zeta = np.linspace(fold.FIRST, fold.LAST, fold.STEPS + 1)
        function, slope, _, _ = airy_functions(-zeta)
        running = np.stack(
            [zeta * function**2 + slope**2, (zeta * slope**2 + zeta**2 * function**2 - 2.0 * function * slope) / 3.0],
            axis=1,
        )
        trusted = {p: self._trusted(p) for p in shifts}
        tasks = ((self, band, shifts, traced, outside, running, trusted) for band in range(bands))
        for band, part in enumerate(in_order(_band, tasks, executor, ahead=4)):
            values[:, :, band] = part
        cosine = np.linspace(0.0, 1.0, 41)
        table = PositionTable(
            angle=self.angle,
            position=self.position,
            values=values,
            elevation=self.elevation,
            cos_zenith=cosine,
            shadow=self._shadow(cosine),
            edges=self.edges,
            report={
                "method": "spheroids: Airy on traced caustics",
                "sizes": len(self.sizes.radius),
                "least_axis_ratio": float(self.sizes.ratio.min()),
                "traced_axis_ratios": self.nodes.tolist(),
                "rays": traced.rays,
                "energy": dict(zip(map(str, ALL_ORDERS), traced.energy.tolist(), strict=True)),
                "absorbed": traced.absorbed,
                "cut_off": traced.cut_off,
                "bow_error": traced.error,
                "canting": self.canting,
                "seed": self.seed,
                "kernel_hash": KERNEL_HASH,
            },
        )
        return table.over_disc(self.disc)

    def _shifts(self, order: int) -> FloatArray:
        """Return how far each sample's caustic lies from the sphere's, shape (2 indices, samples, nφ) [rad]."""
        from scipy.interpolate import CubicSpline

        lowest = float(self.sizes.ratio.min())
        nodes = np.linspace(1.0, lowest, max(ceil((1.0 - lowest) / _CAUSTIC_STEP) + 1, 4))
        if lowest > 1.0 - 1e-9:
            return np.zeros((2, len(self.sizes.radius), len(self.position)))
        coarse = np.linspace(self.position[0], pi, min(len(self.position), _CAUSTIC_NODES))
        # the search sees a sun in the north: turn the tilted axes with it
        tilts = self._tilts_for_search()
        n, tilt, phi = np.meshgrid(self.ends.real, np.arange(len(tilts)), coarse, indexing="ij")
        ratios = np.repeat(nodes[:, None], n.size, axis=1)
        angle = follow(
            ratios, n.ravel(), np.full(n.size, self.elevation), phi.ravel(), order, tilts[tilt.ravel()]
        ).reshape(len(nodes), *n.shape)
        shift = angle - bows.scattering_angle(self.ends.real, order)[None, :, None, None]
        for row in range(1, len(nodes)):  # drops too flat to be followed keep the last place
            lost = np.isnan(shift[row])
            shift[row][lost] = shift[row - 1][lost]
        by_ratio = CubicSpline(nodes[::-1], shift[::-1], axis=0)
        by_position = CubicSpline(coarse, np.moveaxis(by_ratio(self.sizes.ratio), -1, 0), axis=0)
        chosen = self._tilt_of_sample()
        fine = by_position(self.position)  # (nφ, samples, index, tilt)
        picked = fine[:, np.arange(len(chosen)), :, chosen]  # (samples, nφ, index)
        return np.ascontiguousarray(np.moveaxis(picked, 2, 0))

    def _tilts_for_search(self) -> FloatArray:
        """Return the axes for a sun in the north: east component along -right, north component towards the source."""
        flat = np.array([self.right[1], -self.right[0], 0.0])
        out = np.stack([self.tilts @ -self.right, self.tilts @ flat, self.tilts[:, 2]], axis=1)
        return np.asarray(out)

    def _tilt_of_sample(self) -> np.ndarray:
        count = np.arange(len(self.sizes.radius))
        return np.asarray((np.mod((count + 0.5) * _GOLDEN[0], 1.0) * len(self.tilts)).astype(np.int64))

    def _place_of_sample(self) -> FloatArray:
        return np.asarray(np.mod((np.arange(len(self.sizes.radius)) + 0.5) * _GOLDEN[1], 1.0))

    def _trusted(self, order: int) -> tuple[FloatArray, FloatArray]:
        """Return size parameters and distances from the caustic where fringes err by a quarter of a period."""
        index = float(self.ends.real.mean())
        x = np.geomspace(30.0, 2e5, 14)
        bow = airy.bow_angle(index, order)
        away = [abs(airy.trusted_angle(index, float(value), order, 0.25) - bow) for value in x]
        return x, np.maximum(np.array(away), 1e-4)

    def _trace(self, executor: Executor | None) -> _Traced:
        """Trace all nodes at both indices."""
        frame = np.concatenate([self.up, self.right])
        sides = np.array([float(bows.side(self.ends.real[0], p)) for p in spheroid.BOW_ORDERS])
        phi = np.linspace(-pi, pi, spheroid.KNOTS)
        upright = np.array([[0.0, 0.0, 1.0]])
        same = abs(self.ends[0] - self.ends[1]) < 1e-12 and np.allclose(self.end_stokes[0], self.end_stokes[1])
        ends = (0,) if same else (0, 1)
        need_tilted = self.canting > 0.0 and bool(set(self.orders) - {0, 2, 3})
        tasks = []
        for end in ends:
            n = float(self.ends[end].real)
            caustics = [self._bow_of_nodes(n, p, phi) for p in spheroid.BOW_ORDERS]
            for row, ratio in enumerate(self.nodes):
                depth = float(self.end_absorption[end] * self._radius_of(float(ratio)) * ratio ** (-1.0 / 3.0))
                curve = np.ascontiguousarray(np.stack([c[row] for c in caustics]))
                for kind in (0, 1) if need_tilted else (0,):
                    axes = _powers(self.tilts if kind else upright, float(ratio), self.light)
                    for batch in range(self.batches):
                        key = (self.seed, (end * 64 + row) * 2 + kind, batch)
                        tasks.append((key, n, float(ratio), depth, self.beam, frame, self.end_stokes[end], axes, curve, sides))
        result = _Traced(self, len(ends), need_tilted)
        result.rays = len(tasks) * spheroid.RAYS
        for (key, *_), part in zip(tasks, in_order(_batch, tasks, executor), strict=True):
            result.add(key[1], part)
        result.finish(self, same)
        return result

    def _bow_of_nodes(self, n: float, order: int, phi: FloatArray) -> FloatArray:
        """Return caustics of upright drops at the traced axis ratios, shape (nodes, KNOTS) [rad]."""
        coarse = np.linspace(-pi, pi, 121)
        many = np.full(coarse.size, n)
        ratios = np.repeat(self.nodes[:, None], coarse.size, axis=1)
        axis = np.tile([0.0, 0.0, 1.0], (coarse.size, 1))
        angle = follow(ratios, many, np.full(coarse.size, self.elevation), coarse, order, axis)
        for row in range(len(angle)):
            lost = np.isnan(angle[row])
            angle[row][lost] = angle[row - 1][lost] if row else float(bows.scattering_angle(n, order))
        return np.stack([np.interp(phi, coarse, values) for values in angle])

    def _radius_of(self, ratio: float) -> float:
        """Return the mean radius of samples near a traced axis ratio [m]."""
        near = np.exp(-(((self.sizes.ratio - ratio) / _RATIO_STEP) ** 2)) * self.sizes.weight + 1e-300
        return float(np.sum(near * self.sizes.radius) / np.sum(near))

    def _outside(self) -> FloatArray:
        """Return 1/(4 K r²) of the surface seen by each direction, summed over samples, shape (nφ, nθ) [m²]."""
        across = np.cos(self.position)[:, None] * self.up + np.sin(self.position)[:, None] * self.right
        # light leaves against the viewing direction
        theta = self.angle
        leaving = np.cos(theta)[None, :, None] * self.light - np.sin(theta)[None, :, None] * across[:, None, :]
        normal = leaving - self.light
        normal /= np.linalg.norm(normal, axis=-1, keepdims=True)
        out = np.zeros(normal.shape[:2])
        chosen = self._tilt_of_sample()
        ratio = self.sizes.ratio
        for tilt, axis in enumerate(self.tilts):
            rows = chosen == tilt
            if not np.any(rows):
                continue
            square = (normal @ axis) ** 2
            # few distinct ratios would do; squares vary smoothly, so a polynomial in them is exact enough to sum at knots
            knots = np.linspace(0.0, 1.0, 65)
            q = ratio[rows][:, None]
            support = q ** (-2.0 / 3.0) * (1.0 - knots) + q ** (4.0 / 3.0) * knots
            out += np.interp(square, knots, np.sum(self.sizes.weight[rows][:, None] * 0.25 / support**2, axis=0))
        return out

    def _shadow(self, cosine: FloatArray) -> FloatArray:
        """Return extinction towards directions of given cos zenith ÷ reference."""
        view = np.stack([np.sqrt(1.0 - cosine**2), 0.0 * cosine, cosine], axis=1)
        square = (view @ self.tilts.T) ** 2
        total = np.zeros(len(cosine))
        for q, weight in zip(self.sizes.ratio, self.sizes.weight, strict=True):
            total += weight * _area(float(q), square).mean(axis=1)
        return 2.0 * pi * total / self.reference


class _Traced:
    """Sums over batches: bows by distance and other orders by angle, at each index and axis ratio."""

    def __init__(self, maker: _Maker, ends: int, tilted: bool) -> None:
        shape = (ends, len(maker.nodes))
        self.tilted = tilted
        self.rays = 0
        self.sums = np.zeros((*shape, 2, DISTANCE_BINS, POSITION_BINS, 4))
        self.squares = np.zeros((*shape, 2, DISTANCE_BINS, POSITION_BINS))
        self.others = np.zeros((*shape, spheroid.ORDERS, ANGLE_BINS, POSITION_BINS, 4))
        self.energy_sums = np.zeros((*shape, spheroid.ORDERS))
        self.lost = np.zeros((*shape, 2))
        self.brightness = np.empty(0)
        self.smooth = np.empty(0)
        self.energy = np.empty(0)
        self.absorbed = self.cut_off = self.error = 0.0

    def add(self, code: int, part: tuple[FloatArray, FloatArray, FloatArray, float, float]) -> None:
        """Add a batch."""
        kind = code % 2
        end, row = divmod(code // 2, 64)
        light, near, energy, absorbed, cut_off = part
        if kind == 0:
            self.sums[end, row] += near
            self.squares[end, row] += near[..., 0] ** 2
            self.energy_sums[end, row] += energy
            self.lost[end, row] += absorbed, cut_off
        if kind == 1 or not self.tilted:
            self.others[end, row] += light

    def finish(self, maker: _Maker, same: bool) -> None:
        """Turn sums into factors by position angle (2 indices, 2 bows, nodes, nφ, DISTANCE_BINS, 4), and cross-sections."""
        count = float(maker.batches * spheroid.RAYS)
        deviation = np.sqrt(np.maximum(self.squares - self.sums[..., 0] ** 2 / maker.batches, 0.0))
        self.error = float(deviation.sum() / self.sums[..., 0].sum()) * np.sqrt(maker.batches / (maker.batches - 1.0))
        incident = self.energy_sums.sum(axis=-1) + self.lost.sum(axis=-1)
        self.energy = (self.energy_sums / incident[..., None]).mean(axis=(0, 1))
        self.absorbed, self.cut_off = (self.lost / incident[..., None]).mean(axis=(0, 1)).tolist()
        root = np.linspace(0.0, np.sqrt(pi), DISTANCE_BINS + 1)
        sums = np.stack([0.5 * (self.sums[..., 0] - self.sums[..., 1]), 0.5 * (self.sums[..., 0] + self.sums[..., 1])], axis=-1)
        sums = np.concatenate([sums, self.sums[..., 2:]], axis=-1) * (pi / count / (2.0 * pi / POSITION_BINS))
        for end in range(len(sums)):
            n = float(maker.ends[end].real)
            for bow, p in enumerate(spheroid.BOW_ORDERS):
                h = airy.curvature(n, p)
                strength = _strength(n, p)
                scale = 0.5 * float(bows.impact(n, p)) / np.sqrt(h)
                first, third = 2.0 * np.diff(root), (2.0 / 3.0) * np.diff(root**3) / h
                s = scale * (strength[0] * first + strength[1] * third)
                q = scale * (strength[2] * first + strength[3] * third)
                sums[end, :, bow] /= np.stack([s, q, s + q, s + q], axis=-1)[:, None, :]
        sums = _to_positions(sums, maker)
        cosine = np.cos(np.linspace(0.0, pi, ANGLE_BINS + 1))
        solid = -np.diff(cosine) * (2.0 * pi / POSITION_BINS)
        chosen = [p for p in maker.orders if p not in (0, *spheroid.BOW_ORDERS)]
        others = _pooled(self.others[:, :, chosen].sum(axis=2)) * (pi / count) / solid[:, None, None]
        others = _to_positions(others, maker)
        if same:
            sums, others = np.repeat(sums, 2, axis=0), np.repeat(others, 2, axis=0)
        if len(maker.nodes) == 1:
            sums, others = np.repeat(sums, 2, axis=1), np.repeat(others, 2, axis=1)
        # (2, bow, node, nφ, distance, 4)
        self.brightness = np.ascontiguousarray(np.moveaxis(sums, (2, 4), (1, 3)))
        weight = np.zeros(others.shape[1])
        np.add.at(weight, maker.node, maker.sizes.weight * (1.0 - maker.part))
        np.add.at(weight, maker.node + 1, maker.sizes.weight * maker.part)
        mixed = np.einsum("nrapk,r->npak", others, weight)
        middle = (np.arange(ANGLE_BINS) + 0.5) * (pi / ANGLE_BINS)
        place = np.clip(np.searchsorted(middle, maker.angle) - 1, 0, ANGLE_BINS - 2)
        part = np.clip((maker.angle - middle[place]) / (middle[1] - middle[0]), 0.0, 1.0)[:, None]
        self.smooth = mixed[:, :, place] * (1.0 - part) + mixed[:, :, place + 1] * part


def _band(
    maker: _Maker,
    band: int,
    shifts: dict[int, FloatArray],
    traced: _Traced,
    outside: FloatArray | None,
    running: FloatArray,
    trusted: dict[int, tuple[FloatArray, FloatArray]],
) -> FloatArray:
    """Return the table of one spectral bin, shape (nφ, nθ, 4)."""
    sizes = maker.sizes
    low, high = maker.bins.edges[band]
    wavelength = low + maker._place_of_sample() * (high - low)
    index = np.broadcast_to(np.asarray(maker.index(wavelength), dtype=np.complex128), wavelength.shape)
    centre = float(index.real.mean())
    span = float(maker.ends[1].real - maker.ends[0].real)
    at = np.clip((index.real - maker.ends[0].real) / span, 0.0, 1.0) if span > 1e-12 else np.zeros(len(wavelength))
    middle = float(at.mean())
    out = np.zeros((len(maker.position), len(maker.angle), 4))
    for p, shift in shifts.items():
        bow = spheroid.BOW_ORDERS.index(p)
        h = airy.curvature(centre, p)
        x = 2.0 * pi * sizes.radius / wavelength
        caustic = shift[0] + at[:, None] * (shift[1] - shift[0]) + bows.scattering_angle(index.real, p)[:, None]
        path = 2.0 * p * np.cos(float(bows.refraction(centre, p))) * sizes.radius
        weight = sizes.weight * np.exp(-4.0 * pi * index.imag / wavelength * path)
        brightness = traced.brightness[0, bow] * (1.0 - middle) + traced.brightness[1, bow] * middle
        part = np.zeros_like(out)
        fold.lay(
            maker.edges,
            np.ascontiguousarray(caustic),
            float(bows.side(centre, p)),
            weight * (0.5 * float(bows.impact(centre, p)) / np.sqrt(h)),
            x ** (2.0 / 3.0) * h ** (-1.0 / 3.0),
            h,
            _strength(centre, p),
            np.exp(np.interp(np.log(x), np.log(trusted[p][0]), np.log(trusted[p][1]))),
            sizes.cell,
            maker.node,
            maker.part,
            np.ascontiguousarray(brightness),
            running,
            part,
        )
        out += part / np.sin(maker.angle)[:, None]
    out += traced.smooth[0] * (1.0 - middle) + traced.smooth[1] * middle
    if outside is not None:
        out += outside[:, :, None] * _reflected(maker, band, centre)
    return np.asarray(out / maker.reference)


def _reflected(maker: _Maker, band: int, index: float) -> FloatArray:
    """Return the Stokes vector reflected outside at each direction, shape (nφ, nθ, 4), for the source's own [1]."""
    ci = np.sin(0.5 * maker.angle)
    ct = np.sqrt(1.0 - (1.0 - ci**2) / index**2)
    rs, rp = (ci - index * ct) / (ci + index * ct), (index * ci - ct) / (index * ci + ct)
    both, differ, cross = 0.5 * (rp**2 + rs**2), 0.5 * (rp**2 - rs**2), rp * rs
    # e⊥ of the scattering plane is light × leaving; the source's is -right, across the light like it
    across = np.cos(maker.position)[:, None] * maker.up + np.sin(maker.position)[:, None] * maker.right
    plane = np.cross(maker.light, -across)
    a = plane @ -maker.right
    b = plane @ np.cross(maker.light, -maker.right)
    cosine, sine = a * a - b * b, 2.0 * a * b
    i, q0, u0, v0 = maker.stokes[band]
    q, u = cosine * q0 - sine * u0, sine * q0 + cosine * u0
    result = np.empty((len(maker.position), len(maker.angle), 4))
    result[..., 0] = both * i + differ * q[:, None]
    result[..., 1] = differ * i + both * q[:, None]
    result[..., 2] = cross * u[:, None]
    result[..., 3] = cross * v0
    return result


def _strength(index: float, order: int) -> FloatArray:
    """Return F² and G² of `skyoptics.droplets.airy` for ⊥, then ∥, read off its amplitudes at the bow ray (ζ = 0)."""
    from scipy.special import airy as airy_functions

    x = 1000.0
    h, theta = airy.curvature(index, order), airy.bow_angle(index, order)
    function, slope, _, _ = airy_functions(0.0)
    scale = 2.0 * pi * float(bows.impact(index, order)) / np.sin(theta) * x ** (7.0 / 3.0) * h ** (-2.0 / 3.0)
    result = []
    for s in airy.amplitudes(complex(index), x, theta, order):
        result += [float(s.real) ** 2 / (scale * function**2), float(s.imag) ** 2 / (scale * slope**2) * (x * h) ** (2.0 / 3.0)]
    return np.array(result)


def _to_positions(values: FloatArray, maker: _Maker) -> FloatArray:
    """Interpolate from bins of position angle (axis -2, Stokes-like axis -1) to the table's; mirror halves made one."""
    if maker.symmetric:
        mirrored = values[..., ::-1, :] * np.array([1.0, 1.0, -1.0, -1.0])
        values = 0.5 * (values + mirrored)
    place = (maker.position + pi) / (2.0 * pi) * POSITION_BINS - 0.5
    before = np.floor(place).astype(np.int64)
    part = (place - before)[:, None]
    first, second = values[..., before % POSITION_BINS, :], values[..., (before + 1) % POSITION_BINS, :]
    return np.asarray(first * (1.0 - part) + second * part)


def _pooled(values: FloatArray) -> FloatArray:
    """Average over neighbouring bins: three angles, and as many positions as make up the arc of three at the equator."""
    sine = np.sin((np.arange(ANGLE_BINS) + 0.5) * (pi / ANGLE_BINS))
    light = np.pad(values, [(0, 0)] * (values.ndim - 3) + [(1, 1), (0, 0), (0, 0)])
    solid = np.pad(sine, 1)
    light = sum(light[..., k : k + ANGLE_BINS, :, :] for k in range(3))
    values = light * (sine / sum(solid[k : k + ANGLE_BINS] for k in range(3)))[:, None, None]
    out = np.empty_like(values)
    for row, s in enumerate(sine):
        half = min(round(1.0 / s), POSITION_BINS // 2)
        rolled = [np.roll(values[..., row, :, :], k, axis=-2) for k in range(-half, half + 1)]
        out[..., row, :, :] = sum(rolled) / len(rolled)
    return out


def _batch(
    key: tuple[int, int, int],
    index: float,
    ratio: float,
    depth: float,
    beam: FloatArray,
    frame: FloatArray,
    stokes: FloatArray,
    axes: FloatArray,
    caustics: FloatArray,
    sides: FloatArray,
) -> tuple[FloatArray, FloatArray, FloatArray, float, float]:
    """Trace one batch (a function of its own, so that it can be sent to another process)."""
    low, high = batch_key(*key)
    result: tuple[FloatArray, FloatArray, FloatArray, float, float] = spheroid.trace(
        low, high, spheroid.RAYS, index, ratio, depth, beam, frame, np.ascontiguousarray(stokes), axes, caustics, sides,
        ANGLE_BINS, POSITION_BINS, DISTANCE_BINS,
    )  # fmt: skip
    return result


def _tilts(canting: float, light: FloatArray) -> FloatArray:
    """Return axes of equal weight, shape (1 or TILTS, 3): half of them mirror images in the vertical through the light."""
    if canting == 0.0:
        return np.array([[0.0, 0.0, 1.0]])
    count = np.arange(TILTS // 2) + 0.5
    tilt = canting * np.sqrt(-2.0 * np.log(1.0 - count / (TILTS // 2)))
    turn = 2.0 * pi * np.mod(count * _GOLDEN[0], 1.0)
    azimuth = float(azimuth_elevation(light)[0])
    turn = np.concatenate([turn, -turn])
    tilt = np.minimum(np.concatenate([tilt, tilt]), 0.5 * pi)
    return direction(azimuth + turn, 0.5 * pi - tilt)


def _powers(axes: FloatArray, ratio: float, light: FloatArray) -> FloatArray:
    """Return axes with the area a drop of unit volume radius shows along the light, ÷ π, shape (k, 4)."""
    return np.ascontiguousarray(np.column_stack([axes, _area(ratio, (axes @ light) ** 2)]))


def _area(ratio: float, square: FloatArray) -> FloatArray:
    """Return the projected area ÷ π r², r of equal volume, given the squared cosine between axis and direction."""
    return np.asarray(ratio ** (-2.0 / 3.0) * np.sqrt(ratio**2 * (1.0 - square) + square))


def _surface(ratio: FloatArray) -> FloatArray:
    """Return the surface ÷ 4π r², the mean of `_area` over all orientations (Cauchy's theorem)."""
    q = np.minimum(ratio, 1.0 - 1e-9)
    e = np.sqrt(1.0 - q**2)
    return np.asarray(0.5 * q ** (-2.0 / 3.0) * (1.0 + q**2 / e * np.arctanh(e)))


