"""Flattened drops in pictures: their position tables found or traced, and read as scatterers."""

from __future__ import annotations

import json
from concurrent.futures import Executor
from dataclasses import dataclass
from typing import Any

import numpy as np

from skyoptics.droplets import flattened
from skyoptics.droplets.axis_ratio import LIMITS
from skyoptics.droplets.sizes import Cut, MarshallPalmer, SizeDistribution, UlbrichGamma
from skyoptics.geometry.directions import Directions
from skyoptics.kernels import KERNEL_HASH
from skyoptics.optics.position_table import PositionTable
from skyoptics.optics.source import Source
from skyoptics.rendering import store
from skyoptics.rendering.build import Job
from skyoptics.rendering.rain import DropSheet
from skyoptics.rendering.scatter import Progress, Sampling, Traced, identity
from skyoptics.units import FloatArray

SMALLEST = 50e-6
"""Smallest radius of a rain spectrum of flattened drops [m]; smaller drops hold no light worth counting."""
SAMPLES = {"draft": 96, "normal": 192, "fine": 384}
"""Sizes summed, by quality."""


@dataclass(frozen=True, eq=False)
class FlatScatterer:
    """A position table, read as a scatterer."""

    table: PositionTable

    def phase(
        self, source: Source, directions: Directions, rows: slice = slice(None), stokes: bool = False
    ) -> FloatArray:
        """Return differential scattering ÷ reference extinction cross-section, (ny, nx, nλ[, 4]) [sr⁻¹]."""
        return self.table.stokes(source, directions, rows) if stokes else self.table.phase(source, directions, rows)

    def extinction(self, cos_zenith: FloatArray) -> FloatArray:
        """Return extinction towards directions ÷ reference, shape (…, nλ)."""
        return self.table.extinction(cos_zenith)


def find(
    sheet: DropSheet, job: Job, source: Source, sampling: Sampling, executor: Executor | None, progress: Progress
) -> tuple[FlatScatterer, Traced]:
    """Return the scatterer of a sheet of flattened drops under a source, from the store where it is there."""
    sizes = _within(sheet.sizes, sheet.axis_ratios)
    orders = tuple(order for order in sheet.orders if order in flattened.ALL_ORDERS)
    key = store.trace_key(
        kind="flattened drops",
        sizes=identity(sizes),
        law=sheet.axis_ratios,
        canting=sheet.canting,
        index=sheet.index.key,
        bins=job.bins.edges,
        source=np.concatenate([source.direction[2:], source.disc.darkening.ravel(), [source.disc.radius]]),
        stokes=source.stokes,
        orders=list(orders),
        samples=SAMPLES[sampling.quality],
        seed=sampling.seed,
        kernels=KERNEL_HASH,
    )
    table = _stored(key)
    reused = table is not None
    if table is None:
        progress(f"tracing {sheet.name}", 0, 1)
        table = flattened.flattened_scatterer(
            sizes,
            sheet.axis_ratios,
            sheet.index,
            job.bins,
            source,
            sheet.canting,
            orders=orders,
            samples=SAMPLES[sampling.quality],
            seed=sampling.seed,
            executor=executor,
        )
        _keep(key, table)
        progress(f"tracing {sheet.name}", 1, 1)
    rays = int(table.report.get("rays", 0))
    about = {"method": "rays with Airy fringes on flattened drops", "axis_ratios": sheet.axis_ratios}
    return FlatScatterer(table), Traced(sheet.name, key, reused, 0 if reused else rays, rays, about)


def _within(sizes: SizeDistribution, law: str) -> SizeDistribution:
    """Cut a rain spectrum to the range of a law of axis ratios."""
    if isinstance(sizes, MarshallPalmer | UlbrichGamma):
        return Cut(sizes, SMALLEST, 0.499 * LIMITS[law])
    return sizes


_ARRAYS = ("angle", "position", "values", "cos_zenith", "shadow")


def _stored(key: str) -> PositionTable | None:
    found = store.find_arrays(key)
    if found is None:
        return None
    arrays, about = found
    return PositionTable(elevation=about["elevation"], report=about["report"], **arrays)


def _keep(key: str, table: PositionTable) -> bool:
    arrays: dict[str, Any] = {name: getattr(table, name) for name in _ARRAYS}
    if table.edges is not None:
        arrays["edges"] = table.edges
    report = json.loads(json.dumps(table.report, default=lambda value: np.asarray(value).tolist()))
    return store.keep_arrays(key, arrays, {"elevation": table.elevation, "report": report})
