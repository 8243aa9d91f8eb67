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
  Airy curve of the same volume, shifted, not stretched: fringe spacing is that of the sphere. At the top of the bow a
  spheroid's own, by the curvature of its traced map, is 1 − ρ (level sun) to 1 + 0.6 ρ (sun at 30°) times that in the
  primary, but 1 − 4 ρ to 1 − 7 ρ in the secondary, ρ = (1 − q)/(1 + q): 3 and 16 % at q = 0.95.
  Brightness: for each polarisation the light of the traced rays ÷ that of the sphere's two Airy rays, as a function of the
  distance from the caustic and of position angle, linear in axis ratio, index, and √distance. So the mean of the fringes
  is the ray light at any distance: over the first 1.5° of the bows of round drops of 0.25 mm radius it is within 1 % of
  the exact Debye term's peak, where Airy's own curve errs by 1 % (p = 2) and 7 % (p = 3). Fringes fade into that mean where
  their places fail (`airy.trusted_angle`, a quarter of a period) and where sizes are sampled too coarsely for them. Beyond
  the fold's meeting with the cusped caustic (axis ratio below about 0.77, a low sun's bow away from top and foot) light
  outside the fold is put on it, and diffraction is that of a plain fold. Drops flatter than can be followed keep the place
  of the last that can.
- Law: `thurai2007` is round below 0.7 mm diameter by its definition and flatter by half a per cent at once beyond, so the
  angle's standstill falls on that step (radius 0.35 mm). `beard-chuang1987` is smooth there and has it at 0.25 mm, as
  Fraser: take it where supernumeraries matter.
- Canting moves the caustics and orders other than 2 and 3; brightness by position angle in these two is that of upright
  drops.
- Absorption: along each traced ray, for the mean size at a traced axis ratio, linear in index between the ends of the
  spectrum; for orders 2 and 3 corrected to each size and wavelength by the bow ray's path in a sphere. Visible light loses
  some thousandths.
- Cut off: orders above 7 (3e-4 of the light for spheres, 6e-4 in heavy rain). Diffraction is left out, as by all ray
  tables: the traced half of the extinction is here.
- Airy's theory needs size parameters of some hundreds at least; distributions with more than 1 % of their cross-section in
  drops below 100 are refused.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from math import ceil, pi

import numpy as np

from skyoptics.droplets import airy
from skyoptics.droplets.flattened_caustic import LEAST_RATIO, follow
from skyoptics.droplets.flattened_light import Plan, TracedLight, strength, trace_batch
from skyoptics.droplets.flattened_shape import (
    GOLDEN,
    Samples,
    axes_with_power,
    samples_of,
    shadow,
    surface,
    tilted_axes,
)
from skyoptics.droplets.sizes import SizeDistribution
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import azimuth_elevation, direction
from skyoptics.kernels import KERNEL_HASH, fold, spheroid
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
_SUMS_BYTES = 120_000_000
"""Taken by the sums of traced light."""
SAMPLES = 192
"""Sizes summed (each with its own place in the spectral bin, and its own canted axis)."""
_RATIO_STEP = 0.06
"""Between traced axis ratios, at most; `_CAUSTIC_STEP` between those whose caustics are searched (cubic in between)."""
_CAUSTIC_STEP = 0.02
_CAUSTIC_NODES = 61
_SILVER = 0.4142135623730951


def default_edges() -> FloatArray:
    """Return edges of angle bins: 0.1° from 115° to 152°, where bows of all but the flattest drops stand [rad]."""
    pieces = [np.linspace(0.0, 115.0, 231), np.linspace(115.0, 152.0, 371), np.linspace(152.0, 180.0, 113)]
    return np.unique(np.concatenate(pieces)) * DEG


def memory(bins: Bins, edges: FloatArray | None = None, position_step: float = 3.0 * DEG) -> int:
    """Return the bytes `flattened_scatterer` needs at its peak: copies of the table, 16 bytes an entry, and the rays' sums."""
    rows = len(default_edges() if edges is None else edges) + 1
    return 3 * 16 * (ceil(pi / position_step) + 1) * rows * len(bins) + _SUMS_BYTES


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
    Limits are listed at the top of this module. A rain spectrum in 33 spectral bins takes 6 s of processor time upright and
    10 s canted (AVX2 or better), spread over the executor's threads; for memory see `memory`.
    """
    _check(canting, position_step, orders, samples, batches, edges)
    edges = default_edges() if edges is None else np.asarray(edges, dtype=np.float64)
    wide = bool(np.any(bins.width > 0.0)) or canting > 0.0
    sizes = samples_of(distribution, law, samples, wide)
    if 2.0 * pi * sizes.radius.min() / bins.edges.max() < LEAST_SIZE_PARAMETER:
        small = 2.0 * pi * sizes.radius / bins.edges.max() < LEAST_SIZE_PARAMETER
        if sizes.weight[small].sum() > 0.01 * sizes.weight.sum():
            raise DomainError("more than 1 % of the cross-section lies in drops too small for Airy's theory: use Mie")
    return _Maker(sizes, index, bins, source, canting, edges, position_step, tuple(orders), batches, seed).make(
        executor
    )


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


class _Maker:
    """One table in the making."""

    def __init__(
        self,
        sizes: Samples,
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
        if np.any(values.imag > 0.01):
            raise DomainError(f"the imaginary index {values.imag.max():g} is too large for rays (0.01 at most)")
        if np.any(values.real >= 2.0):
            raise DomainError("flattened drops need an index below 2: above it there is no primary bow")
        self.index = index
        ends = [int(np.argmin(values.real)), int(np.argmax(values.real))]
        self.ends = values[ends]
        self.end_absorption = 4.0 * pi * values.imag[ends] / wavelength.ravel()[ends]
        self.end_stokes = source.stokes[np.array(ends) // 5]
        self.stokes = np.asarray(source.stokes, dtype=np.float64)
        self.disc = source.disc
        self.tilts = tilted_axes(canting, self.light)
        lowest = float(sizes.ratio.min())
        if lowest < LEAST_RATIO:
            raise DomainError(f"drops flatter than {LEAST_RATIO} are not followed")
        spread = float(sizes.ratio.max()) - lowest
        if spread < 1e-9:
            self.nodes = np.array([lowest])
        else:
            self.nodes = np.linspace(float(sizes.ratio.max()), lowest, ceil(spread / _RATIO_STEP) + 1)
        place = (
            (sizes.ratio - self.nodes[0]) / (self.nodes[1] - self.nodes[0])
            if len(self.nodes) > 1
            else 0.0 * sizes.ratio
        )
        self.node = np.clip(place.astype(np.int64), 0, max(len(self.nodes) - 2, 0))
        self.part = np.clip(place - self.node, 0.0, 1.0)
        radii = np.array([self._radius_of(float(q)) for q in self.nodes])
        self.node_radius = np.interp(-sizes.ratio, -self.nodes, radii)
        self.surface = surface(sizes.ratio)
        self.reference = 2.0 * pi * float(np.sum(sizes.weight * self.surface))

        self.plan = Plan(
            batches,
            self.ends,
            self.nodes,
            self.node,
            self.part,
            sizes.weight,
            orders,
            self.angle,
            self.position,
            self.symmetric,
        )

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
        return np.asarray((np.mod((count + 0.5) * GOLDEN, 1.0) * len(self.tilts)).astype(np.int64))

    def _place_of_sample(self) -> FloatArray:
        return np.asarray(np.mod((np.arange(len(self.sizes.radius)) + 0.5) * _SILVER, 1.0))

    def _trusted(self, order: int) -> tuple[FloatArray, FloatArray]:
        """Return size parameters and distances from the caustic where fringes err by a quarter of a period."""
        index = float(self.ends.real.mean())
        x = np.geomspace(30.0, 2e5, 14)
        bow = airy.bow_angle(index, order)
        away = [abs(airy.trusted_angle(index, float(value), order, 0.25) - bow) for value in x]
        return x, np.maximum(np.array(away), 1e-4)

    def _trace(self, executor: Executor | None) -> TracedLight:
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
                    axes = axes_with_power(self.tilts if kind else upright, float(ratio), self.light)
                    for batch in range(self.batches):
                        key = (self.seed, (end * 64 + row) * 2 + kind, batch)
                        tasks.append(
                            (key, n, float(ratio), depth, self.beam, frame, self.end_stokes[end], axes, curve, sides)
                        )
        result = TracedLight(self.plan, len(ends), need_tilted)
        result.rays = len(tasks) * spheroid.RAYS
        for (key, *_), part in zip(tasks, in_order(trace_batch, tasks, executor), strict=True):
            result.add(key[1], part)
        result.finish(same)
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
            total += weight * shadow(float(q), square).mean(axis=1)
        return 2.0 * pi * total / self.reference


def _band(
    maker: _Maker,
    band: int,
    shifts: dict[int, FloatArray],
    traced: TracedLight,
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
        # the traced light is dimmed already, as for the drops its nodes stand for
        dimmed = (1.0 - at) * maker.end_absorption[0] + at * maker.end_absorption[1]
        excess = 4.0 * pi * index.imag / wavelength * sizes.radius - dimmed * maker.node_radius
        weight = sizes.weight * np.exp(-2.0 * p * np.cos(float(bows.refraction(centre, p))) * excess)
        brightness = traced.brightness[0, bow] * (1.0 - middle) + traced.brightness[1, bow] * middle
        part = np.zeros_like(out)
        fold.lay(
            maker.edges,
            np.ascontiguousarray(caustic),
            float(bows.side(centre, p)),
            weight * (0.5 * float(bows.impact(centre, p)) / np.sqrt(h)),
            x ** (2.0 / 3.0) * h ** (-1.0 / 3.0),
            h,
            strength(centre, p),
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
