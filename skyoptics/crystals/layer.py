"""Light through a level cloud of crystals of finite depth, scattered as often as it comes: one batch at a time.

The first scattering is the source's light on the layer's crystals, with its depth drawn along the source's ray. Exits that
meet another crystal on their way out become the rays of the next order (`skyoptics.kernels.layer`), traced by the same kernel
with crystals oriented afresh. Crystals are far apart and do not shadow one another in any orderly way; diffraction goes
straight on and takes nothing out, so the depth that counts is half the stated optical depth.

A batch's bits depend on (seed, bin, batch) and the layer, and batches scatter independently.

Limits: an endless level layer above dark ground; near the horizon paths are those of a round earth (`Layer.rim`), but the light
that arrives there is still that of the level layer. Clouds with a structure, and light between cloud and ground, are not here.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace
from typing import Any, Protocol

import numpy as np

from skyoptics.crystals.orientations import Orientation, relative_extinction
from skyoptics.crystals.prepared import EVENLY, Prepared
from skyoptics.crystals.shapes import Shape
from skyoptics.crystals.tracing import MAXIMUM_RAYS, ExitList, Incoming, Tally, trace_exits
from skyoptics.errors import DomainError
from skyoptics.kernels.layer import KNOTS, begin, leave, pick
from skyoptics.kernels.projection import SPARE
from skyoptics.kernels.random import batch_key
from skyoptics.units import ArrayLike, Float32Array, FloatArray

MAXIMUM_ORDERS = 64
"""Scatterings followed at most."""
LEFT = 1e-4
"""Power still inside, relative to the incident, at which the third and later orders stop."""
PLANES = 3
"""Light scattered once, twice, more often."""

_EVENTS = 0.5
_FEWEST = 1.0 / 32.0
_TRANSPORT = 1 << 16
_TURNS = 48


class Scatter(Protocol):
    """What crystals do to light; `trace_exits` of the layer's kinds unless told otherwise."""

    def __call__(
        self, kind: int, incoming: Incoming | None, seed: int, batch: int, rays: int
    ) -> tuple[ExitList, Tally]:
        """Return exits of `rays` rays of the source, or those given; mean power of a ray: its I · area shown ÷ mean area."""


@dataclass(frozen=True, eq=False)
class LayerKind:
    """Crystals of one kind in a layer; made by `layer_kind`.

    Parameters
    ----------
    prepared : tuple of Prepared
        One for each spectral bin, all under the same source.
    extinction : ndarray, shape (KNOTS,)
        Area shown ÷ mean at vertical components 1 − (j / (KNOTS − 1))².
    share : float
        Of the layer's optical depth (reference extinction).
    """

    prepared: tuple[Prepared, ...]
    extinction: FloatArray
    share: float


@dataclass(frozen=True, eq=False)
class Layer:
    """A level layer.

    Parameters
    ----------
    kinds : tuple of LayerKind
        Their shares add up to 1.
    optical_depth : float
        Vertical, of the reference extinction, twice the mean projected area.
    rim : float, optional
        Square of the vertical cosine at the horizon, see `skyoptics.sky.slab.rim`; 0 for a flat earth.

    Raises
    ------
    DomainError
        If shares, depth or rim are out of range.
    """

    kinds: tuple[LayerKind, ...]
    optical_depth: float
    rim: float = 0.0

    def __post_init__(self) -> None:
        shares = np.array([kind.share for kind in self.kinds])
        if not (np.all(shares >= 0.0) and abs(float(shares.sum()) - 1.0) < 1e-6):
            raise DomainError(f"shares of the kinds of a layer are at least 0 and add up to 1; got {shares.tolist()}")
        if not (0.0 <= self.optical_depth < np.inf and 0.0 <= self.rim < 1.0):
            raise DomainError("optical depth of a layer is a number of at least 0, its rim is 0 to 1")

    @property
    def depth(self) -> float:
        """Vertical depth in events: half the optical depth."""
        return _EVENTS * self.optical_depth

    def tables(self) -> FloatArray:
        """Return share · extinction of each kind, then their sum, as kernels take them, shape (kinds + 1, KNOTS + 1)."""
        parts = np.array([kind.share * np.asarray(kind.extinction, dtype=np.float64) for kind in self.kinds])
        rows = np.concatenate([parts, parts.sum(axis=0, keepdims=True)])
        return np.concatenate([rows, rows[:, -1:]], axis=1)


@dataclass(frozen=True, eq=False)
class LayerTally:
    """What became of a batch's light; powers per irradiance on a level area, summed over rays: a ray brings in µ of the source.

    incident + roulette = unscattered + absorbed + Σ up + Σ down + left, within noise.
    """

    rays: int
    """Of the first order: what planes are divided by."""
    traced: int
    """Of all orders."""
    incident: float
    unscattered: float
    absorbed: float
    roulette: float
    """Power gained less power lost by chance, mean 0."""
    left: float
    """Inside the layer when the last order was done."""
    up: FloatArray = field(default_factory=lambda: np.zeros(MAXIMUM_ORDERS))
    """What left upwards, by order."""
    down: FloatArray = field(default_factory=lambda: np.zeros(MAXIMUM_ORDERS))
    """What left downwards, by order."""

    def __add__(self, other: LayerTally) -> LayerTally:
        return LayerTally(*(getattr(self, name) + getattr(other, name) for name in self.__dataclass_fields__))


def layer_kind(
    prepared: Sequence[Prepared], shape: Shape | Sequence[Shape], orientation: Orientation, share: float = 1.0
) -> LayerKind:
    """Return crystals as a layer takes them.

    Parameters
    ----------
    prepared : sequence of Prepared
        From `skyoptics.crystals.prepared.prepare`, one for each spectral bin; a guide in them is not used, since it
        knows the first order alone.
    shape, orientation :
        As given to `prepare`.
    share : float, optional
        Of the layer's optical depth.
    """
    shapes = (shape,) if isinstance(shape, Shape) else tuple(shape)
    plain = tuple(replace(each, guide=EVENLY) for each in prepared)
    return LayerKind(plain, extinction_table(shapes, orientation), share)


def extinction_table(shapes: Sequence[Shape], orientation: Orientation) -> FloatArray:
    """Return `skyoptics.crystals.orientations.relative_extinction` at the knots of `LayerKind.extinction`, shape (KNOTS,).

    A tilt by θ in a uniform direction α turns the vertical as the crystal sees it: k(cos ζ) is the mean over θ and α of the
    untilted law's k(cos ζ cos θ + sin ζ sin θ cos α), which needs one table of that in place of a sum over all poses.
    """
    place = np.linspace(0.0, 1.0, KNOTS)
    if not orientation.tilted:
        return relative_extinction(shapes, orientation, 1.0 - place**2)
    still = replace(orientation, tilt=0.0, tilt_law="gaussian", tilts=())
    fine = np.linspace(0.0, 1.0, 4 * (KNOTS - 1) + 1)
    upright = relative_extinction(shapes, still, 1.0 - fine**2)
    theta, weight = orientation.tilt_nodes()
    alpha = np.pi * (np.arange(_TURNS) + 0.5) / _TURNS
    cosine = (1.0 - place**2)[:, None, None]
    sine = np.sqrt(1.0 - cosine**2)
    seen = cosine * np.cos(theta)[:, None] + sine * np.sin(theta)[:, None] * np.cos(alpha)
    k = np.interp(np.sqrt(np.maximum(1.0 - np.abs(seen), 0.0)), fine, upright)
    return np.asarray(np.einsum("kta,t->k", k, weight) / _TURNS)


def extinction_at(table: FloatArray, vertical: ArrayLike) -> FloatArray:
    """Return extinction ÷ reference at vertical components from a table of `extinction_table`."""
    place = np.sqrt(np.maximum(1.0 - np.abs(np.asarray(vertical, dtype=np.float64)), 0.0))
    return np.interp(place, np.linspace(0.0, 1.0, KNOTS), table)


def trace_layer(
    layer: Layer,
    spectral_bin: int,
    directions: Float32Array,
    seed: int,
    batch: int,
    rays: int,
    orders: int = MAXIMUM_ORDERS,
    stokes_count: int = 1,
    dtype: Any = np.float32,
    scatter: Scatter | None = None,
) -> tuple[Any, LayerTally]:
    """Trace one batch through a layer.

    Parameters
    ----------
    layer : Layer
    spectral_bin : int
        Which of each kind's `prepared`.
    directions : ndarray
        `Directions.packed()`. Above the horizon the observer stands under the layer, below it he looks down on it.
    seed, batch : int
        Together with the bin they make the random key.
    rays : int
        Of the first order, and about as many of the second; of later ones in proportion to their power.
    orders : int, optional
        Scatterings to follow; fewer where less than `LEFT` of the incident power is still inside after the second.
    stokes_count, dtype : optional
        As in `skyoptics.crystals.tracing.trace_plane`.
    scatter : Scatter, optional
        In place of the crystals' own.

    Returns
    -------
    planes : ndarray, shape (PLANES, ny, nx) or (PLANES, ny, nx, 4)
        Light scattered once, twice, more often: divided by (tally.rays · solid angle) it is radiance ÷ irradiance of the
        source on a surface facing it [sr⁻¹]. The first equals Σ phase · amount of `skyoptics.sky.slab.slab` within noise.
    tally : LayerTally

    Raises
    ------
    DomainError
        If a number is out of range, or the source stands exactly on the horizon of a flat earth.
    """
    prepared = [kind.prepared[spectral_bin] for kind in layer.kinds]
    frame = prepared[0].arguments.frame
    sun = float(frame[8])
    if any(not np.array_equal(each.arguments.frame, frame) for each in prepared[1:]):
        raise DomainError("all kinds of a layer are prepared under the same source")
    if not (1 <= orders <= MAXIMUM_ORDERS and 0 < rays <= MAXIMUM_RAYS and stokes_count in (1, 4)):
        raise DomainError(f"orders are 1 to {MAXIMUM_ORDERS}, rays 1 to {MAXIMUM_RAYS}, Stokes components 1 or 4")
    mu = float(np.sqrt(sun**2 + layer.rim * (1.0 - sun**2)))
    if mu < 1e-3:
        raise DomainError("a source on the horizon of a flat layer lights nothing; give the layer a rim")
    ny, nx = int(directions[1]), int(directions[2])
    planes = np.zeros((PLANES, (ny * nx + SPARE) * stokes_count), dtype=dtype)
    grid = np.asarray(directions, dtype=np.float32)
    cloud = _Cloud(
        tuple(prepared),
        layer.tables(),
        layer.depth,
        layer.rim,
        np.array([kind.share for kind in layer.kinds]),
        np.array([each.mean_incident for each in prepared]),
        np.array([each.multiple for each in prepared]),
        scatter or _tracer(prepared),
    )
    towards_sun = cloud.towards(abs(sun))
    up, down = np.zeros(MAXIMUM_ORDERS), np.zeros(MAXIMUM_ORDERS)
    absorbed = roulette = second = 0.0
    traced = 0
    born = _Rays(cloud.rounded(rays * towards_sun[:-1] / towards_sun[-1]), None, np.zeros(0), cloud.shares)
    for order in range(1, orders + 1):
        totals, gained, lists = np.zeros(len(prepared)), np.zeros(2), []
        for kind, first, count in born.blocks():
            exits, tally = cloud.scatter(kind, born.listed(first, count), _seed(seed, order, kind), batch, count)
            if born.incoming is None:
                key = batch_key(_seed(seed, 0, _TRANSPORT), prepared[0].spectral_bin, batch)
                depth, weight = np.zeros(count), np.zeros(count)
                vertical = np.full(count, -sun)
                vertical[exits.ray] = exits.before[:, 2]
                scale = float(born.power[kind]) * rays / count
                begin(vertical, sun > 0.0, scale, cloud.tables, cloud.bottom, cloud.rim, *key, first, depth, weight)
            else:
                depth, weight = born.depth[first : first + count], np.full(count, born.power[kind])
            again, what = np.zeros(len(exits.ray)), _columns(exits)
            plane = planes[min(order, PLANES) - 1]
            leave(*what, depth, weight, *cloud.slab, grid, plane, stokes_count, again, totals, gained)
            absorbed += tally.absorbed * float(weight.mean())
            roulette += tally.roulette * float(weight.mean())
            lists.append((*what, depth, again))
        up[order - 1], down[order - 1] = gained
        traced += int(born.counts.sum())
        inside = float(totals.sum())
        if order == orders or inside <= 0.0 or (order > 1 and inside < LEFT * mu * rays):
            break
        second = second or inside
        counts = cloud.rounded(rays * max(min(inside / second, 1.0), _FEWEST) * totals / inside)
        key = batch_key(_seed(seed, order, _TRANSPORT), prepared[0].spectral_bin, batch)
        born = _picked(cloud, lists, totals, counts, key)
    unscattered = mu * rays * float(np.exp(-towards_sun[-1] * cloud.bottom / mu))
    result = LayerTally(rays, traced, mu * rays, unscattered, absorbed, roulette, inside, up, down)
    kept = planes[:, : ny * nx * stokes_count]
    return kept.reshape((PLANES, ny, nx) if stokes_count == 1 else (PLANES, ny, nx, 4)), result


@dataclass(frozen=True, eq=False)
class _Cloud:
    """A layer in one spectral bin, as arrays by kind."""

    prepared: tuple[Prepared, ...]
    tables: FloatArray
    bottom: float
    rim: float
    shares: FloatArray
    levels: FloatArray
    """Mean power of a ray that the tracer's roulette is set for."""
    multiples: Any
    scatter: Scatter

    @property
    def slab(self) -> tuple[FloatArray, float, float]:
        """Tables, depth, rim: how kernels take them."""
        return self.tables, self.bottom, self.rim

    def towards(self, vertical: float) -> FloatArray:
        """Return the tables' columns at a vertical component, shape (kinds + 1,)."""
        x = np.sqrt(1.0 - min(vertical, 1.0)) * (KNOTS - 1)
        i = int(x)
        return np.asarray(self.tables[:, i] + (x - i) * (self.tables[:, i + 1] - self.tables[:, i]))

    def rounded(self, wanted: FloatArray) -> Any:
        """Return numbers of rays, rounded up to each kind's multiple; none where there is no power."""
        return (np.ceil(wanted / self.multiples) * self.multiples).astype(np.int64)


@dataclass(frozen=True, eq=False)
class _Rays:
    """Rays of one order on their crystals, kind after kind."""

    counts: Any
    incoming: Float32Array | None
    """Rows of `Incoming.packed`; None for the source's rays."""
    depth: FloatArray
    power: FloatArray
    """Of each kind: by what power is multiplied; of the source's rays the share."""

    def blocks(self) -> Iterator[tuple[int, int, int]]:
        """Yield kind, first ray and number of rays."""
        first = 0
        for kind, count in enumerate(self.counts.tolist()):
            if count:
                yield kind, first, count
            first += count

    def listed(self, first: int, count: int) -> Incoming | None:
        """Return some rays as the tracer takes them."""
        if self.incoming is None:
            return None
        rows = self.incoming[first : first + count]
        return Incoming(rows[:, 0:3], rows[:, 3:7], rows[:, 7:10])


def _picked(
    cloud: _Cloud, lists: Sequence[tuple[Any, ...]], totals: FloatArray, counts: Any, key: tuple[Any, Any]
) -> _Rays:
    """Return the rays of the next order, drawn from lists of exits."""
    incoming, depth = np.zeros((int(counts.sum()), 10), dtype=np.float32), np.zeros(int(counts.sum()))
    sums, picked = np.zeros(len(counts)), np.zeros(len(counts), dtype=np.int64)
    levels = cloud.shares * cloud.levels
    for exits in lists:
        arguments: tuple[Any, ...] = (*exits, *cloud.slab, levels, totals, counts, *key, sums, picked, incoming, depth)
        pick(*arguments)
    power = np.divide(totals, counts * cloud.levels, out=np.zeros(len(counts)), where=counts > 0)
    return _Rays(counts, incoming, depth, power)


def _columns(exits: ExitList) -> tuple[Any, Any, Any, Any]:
    return exits.direction, exits.stokes, exits.reference, exits.ray


def _tracer(prepared: Sequence[Prepared]) -> Scatter:
    def scatter(kind: int, incoming: Incoming | None, seed: int, batch: int, rays: int) -> tuple[ExitList, Tally]:
        return trace_exits(prepared[kind], seed, batch, rays, incoming=incoming)

    return scatter


def _seed(seed: int, order: int, kind: int) -> int:
    """Return a seed of its own for an order and a kind: no two draws of a batch share their points."""
    low, high = batch_key(seed, order, kind)
    return int(high) << 32 | int(low)
