"""Light that meets two crystals of a slab and more: traced through the layer onto a coarse grid, smooth between its cells.

What has met two crystals is spread wider than the sun's disc, so cells of about half a degree hold all there is to see of
it. The light of the first crystal stays with the films, at full size, weakened by the slab's closed factor.
"""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from typing import Any

import numpy as np

from skyoptics.crystals.layer import Layer, LayerTally, layer_kind, trace_layer
from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.geometry.directions import Directions
from skyoptics.kernels import KERNEL_HASH
from skyoptics.optics.batches import in_order
from skyoptics.optics.source import Source
from skyoptics.rendering import store
from skyoptics.rendering.build import Job
from skyoptics.rendering.clouds import CrystalSheet
from skyoptics.rendering.scatter import Progress, Sampling, Traced, crystal_identity
from skyoptics.sky.slab import rim
from skyoptics.units import DEG, Float32Array, FloatArray

CELL = 0.5 * DEG
"""Side of a cell [rad], or of a pixel where that is larger."""
RAYS_PER_CELL = {"draft": 60.0, "normal": 240.0, "fine": 960.0}
"""Rays of all bins together, by quality: noise of about 20, 10 and 5 % in a cell, less after smoothing."""
SMOOTHING = 0.6
"""Standard deviation of the weights by which neighbouring cells are averaged [cells]: 0.3°, as wide as the sun."""
BATCH = 1 << 14
"""Rays of a batch."""


@dataclass(frozen=True, eq=False)
class FurtherScatterer:
    """Light of two and more scatterings as a scatterer of amount 1.

    Parameters
    ----------
    grid : Directions
        Coarse.
    light : ndarray, shape (nλ, cy, cx) or (nλ, cy, cx, 4)
        Radiance ÷ irradiance [sr⁻¹], 0 where `known` is false.
    known : ndarray of bool, shape (cy, cx)
        Cells that lie whole on the side of the horizon where the layer is seen, and those next to them.
    above : bool
        Whether the layer is looked down on.
    """

    grid: Directions
    light: Float32Array
    known: Any
    above: bool

    def phase(
        self, source: Source, directions: Directions, rows: slice = slice(None), stokes: bool = False
    ) -> FloatArray:
        """Return light by direction, (ny, nx, nλ[, 4]) [sr⁻¹], between cells by straight lines; 0 beyond the horizon."""
        view = directions.vectors(rows)
        _, elevation = azimuth_elevation(view)
        row, column = self.grid.project(view)
        held = np.isfinite(row) & (elevation <= 0.0 if self.above else elevation >= 0.0)
        row, column = np.where(held, row, 0.0), np.where(held, column, 0.0)
        rows_, columns = self.grid.shape
        light = self.light if self.light.ndim == 4 else self.light[..., None]
        light = light if stokes else light[..., :1]
        first, left = np.floor(row).astype(int), np.floor(column).astype(int)
        total: Any = np.zeros((*row.shape, light.shape[0], light.shape[-1]))
        weights = np.zeros(row.shape)
        for down in (0, 1):
            for right in (0, 1):
                i, j = np.clip(first + down, 0, rows_ - 1), np.clip(left + right, 0, columns - 1)
                weight = np.abs(1 - down - (row - first)) * np.abs(1 - right - (column - left)) * self.known[i, j]
                weight = np.where(held, np.maximum(weight, 1e-9 * self.known[i, j]), 0.0)
                total += weight[..., None, None] * np.moveaxis(light[:, i, j], 0, -2)
                weights += weight
        total = np.divide(
            total, weights[..., None, None], out=np.zeros_like(total), where=weights[..., None, None] > 0.0
        )
        return np.asarray(total if stokes else total[..., 0])

    def extinction(self, cos_zenith: FloatArray) -> FloatArray:
        """Return 0: what takes light out is counted with the crystals themselves."""
        return np.zeros((*np.shape(cos_zenith), len(self.light)))


def slab_of(job: Job) -> tuple[CrystalSheet, ...]:
    """Return the crystals of a job's slab whose light is followed beyond the first crystal; none where there are none."""
    return tuple(
        sheet
        for sheet in job.sheets
        if isinstance(sheet, CrystalSheet) and sheet.scatterings not in (0, 1) and sheet.optical_depth > 0.0
    )


def side_of(directions: Directions) -> int:
    """Return the pixels along the side of a cell."""
    pixel = float(np.median(directions.pixel_size()[directions.solid_angle() > 0.0]))
    return max(1, round(CELL / pixel))


def find(
    slab: Sequence[CrystalSheet],
    job: Job,
    source: Source,
    sampling: Sampling,
    executor: Executor | None,
    progress: Progress,
    side: int | None = None,
) -> tuple[FurtherScatterer, Traced]:
    """Return the further light of a slab under a source, from the store where it is there.

    Parameters
    ----------
    slab : sequence of CrystalSheet
        From `slab_of`, one at least.
    job : Job
        Grid and bins.
    source : Source
        What lights it.
    sampling : Sampling
        Quality or rays, seed.
    executor, progress :
        Run the batches; told about them.
    side : int, optional
        Pixels along the side of a cell; default `side_of`.
    """
    grid = job.directions.coarse(side or side_of(job.directions))
    stokes = 4 if job.stokes else 1
    wanted = sampling.rays or RAYS_PER_CELL[sampling.quality] * grid.shape[0] * grid.shape[1]
    batches = max(4, round(wanted / (len(job.bins) * BATCH)))
    key = store.trace_key(
        kind="further scatterings",
        kinds=[_identity(sheet) for sheet in slab],
        scatterings=slab[0].scatterings,
        source=source.direction,
        disc=np.append(source.disc.darkening.ravel(), source.disc.radius),
        stokes=np.append(source.stokes.ravel(), float(stokes)),
        directions=grid.packed(),
        bins=job.bins.edges,
        batches=batches,
        seed=sampling.seed,
        kernels=KERNEL_HASH,
    )
    found = store.find_arrays(key)
    reused = found is not None
    if found is None:
        light, tally = _trace(slab, job, source, sampling.seed, grid, batches, stokes, executor, progress)
        mu = tally.incident / tally.rays
        about: dict[str, Any] = {
            "left_inside": tally.left / tally.incident,
            "unscattered": tally.unscattered / tally.incident,
            "by_order": ((tally.up + tally.down) / tally.incident)[:10].tolist(),
            "rays": tally.traced,
            "sun_cosine": mu,
        }
        store.keep_arrays(key, {"light": light}, about)
    else:
        arrays, about = found
        light = arrays["light"]
        about = {name: about[name] for name in ("left_inside", "unscattered", "by_order", "rays", "sun_cosine")}
    from scipy.ndimage import binary_dilation

    lit = binary_dilation(known(grid, slab[0].above), iterations=2)  # as far as smoothing reaches: cells on the horizon
    scatterer = FurtherScatterer(grid, light, lit, slab[0].above)
    rays = int(about.pop("rays"))
    return scatterer, Traced("further scatterings", key, reused, 0 if reused else rays, rays, about)


def _identity(sheet: CrystalSheet) -> dict[str, Any]:
    """Return what tells kinds of a slab apart, in JSON types."""
    parts = crystal_identity(sheet) | {"index": sheet.index.key, "depth": sheet.optical_depth}
    return {name: value.tolist() if isinstance(value, np.ndarray) else value for name, value in parts.items()}


def _smoothed(light: FloatArray, held: Any) -> FloatArray:
    """Return light, shape (nλ, cy, cx, n), as means over neighbouring cells with Gaussian weights, known cells alone."""
    from scipy.ndimage import gaussian_filter

    weight = gaussian_filter(held.astype(np.float64), SMOOTHING, mode="constant")[None, :, :, None]
    spread = gaussian_filter(light * held[None, :, :, None], (0.0, SMOOTHING, SMOOTHING, 0.0), mode="constant")
    return np.asarray(np.divide(spread, weight, out=np.zeros_like(spread), where=weight > 1e-6))


def known(grid: Directions, above: bool) -> Any:
    """Return which cells lie whole in the image and on the side of the horizon where the layer is seen, shape (cy, cx)."""
    rows, columns = np.arange(grid.shape[0] + 1.0) - 0.5, np.arange(grid.shape[1] + 1.0) - 0.5
    _, corner = azimuth_elevation(grid.unproject(rows[:, None], columns[None, :]))
    seen = corner <= 1e-9 if above else corner >= -1e-9
    return seen[:-1, :-1] & seen[1:, :-1] & seen[:-1, 1:] & seen[1:, 1:]


def _trace(
    slab: Sequence[CrystalSheet],
    job: Job,
    source: Source,
    seed: int,
    grid: Directions,
    batches: int,
    stokes: int,
    executor: Executor | None,
    progress: Progress,
) -> tuple[Float32Array, LayerTally]:
    depth = sum(sheet.optical_depth for sheet in slab)
    kinds = []
    for sheet in slab:
        # the same random numbers in all bins: noise without colour
        prepared = [sheet.prepared(source, row, edges, 0) for row, edges in enumerate(job.bins.edges)]
        kinds.append(layer_kind(prepared, sheet.shapes, sheet.orientation, sheet.optical_depth / depth))
    layer = Layer(tuple(kinds), depth, rim())
    orders = 2 if slab[0].scatterings == 2 else 64
    packed = grid.packed()
    planes = np.zeros((len(job.bins), *grid.shape, stokes))
    rays = np.zeros(len(job.bins))
    tasks = [
        (layer, row, packed, seed, k, BATCH, orders, stokes) for k in range(batches) for row in range(len(job.bins))
    ]
    total: LayerTally | None = None
    for number, (task, (plane, tally)) in enumerate(
        zip(tasks, in_order(trace_layer, tasks, executor), strict=True), start=1
    ):
        planes[task[1]] += plane[1:].sum(axis=0).reshape(*grid.shape, stokes)
        rays[task[1]] += tally.rays
        total = tally if total is None else total + tally
        progress("tracing further scatterings", number, len(tasks))
    assert total is not None
    solid = grid.solid_angle()
    factor = np.divide(1.0, solid, out=np.zeros_like(solid), where=solid > 0.0)
    light = planes * factor[None, :, :, None] / rays[:, None, None, None]
    light = _smoothed(light, known(grid, slab[0].above))
    return (light if stokes == 4 else light[..., 0]).astype(np.float32), total
