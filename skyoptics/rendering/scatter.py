"""From what a sheet holds to what answers for it: tables found or traced, films for crystals that stand in some way."""

from __future__ import annotations

from concurrent.futures import Executor
from dataclasses import dataclass, fields, is_dataclass
from math import ceil
from typing import Any, Protocol

import numpy as np

from skyoptics.crystals.arcs import names as arc_names
from skyoptics.droplets.sizes import Single
from skyoptics.kernels import KERNEL_HASH
from skyoptics.optics.axisymmetric import Axisymmetric, over_disc
from skyoptics.optics.bins import Bins
from skyoptics.optics.source import Disc
from skyoptics.optics.table import ScatteringTable
from skyoptics.rendering import store
from skyoptics.rendering.build import Job
from skyoptics.rendering.clouds import CrystalSheet
from skyoptics.rendering.rain import DropSheet

QUALITY = {"draft": 0.02, "normal": 0.01, "fine": 0.005}
"""Noise target by the name of the quality: light-weighted relative standard error of a table's bins, and rms error of the
displayed lightness of a picture with films."""
ICE_INDEX = 1.31
"""Index by which light of the same faces is shared out among names."""
CRYSTAL_ANGLES = 3600
"""Angle bins of a table of randomly oriented crystals that a picture reads."""


CRYSTAL_TABLE_ERROR = 6.0
"""Error of a bin of a crystal table that a picture reads, in units of the noise target: its 0.05° bins are averaged over
the sun's disc or a pixel and its wavelengths over the eye before anything is seen of them."""


class Progress(Protocol):
    """What a long job tells: a stage in words, how much of it is done, how much there is."""

    def __call__(self, stage: str, done: int, total: int) -> None:
        """Take the news."""


def silent(stage: str, done: int, total: int) -> None:
    """Tell nobody."""


@dataclass(frozen=True)
class Sampling:
    """How much to trace, and with which random numbers.

    Parameters
    ----------
    quality : str
        A key of `QUALITY`.
    seed : int
        Of the random numbers.
    rays : int or None
        Rays of each sheet; overrides the quality.
    """

    quality: str
    seed: int
    rays: int | None = None

    @property
    def target(self) -> float:
        """Noise target [1]."""
        return QUALITY[self.quality]


@dataclass(frozen=True)
class Traced:
    """How a sheet's light was come by, for the report."""

    name: str
    trace_key: str
    reused: bool
    traced_rays: int
    rays: int
    about: dict[str, Any]

    def summary(self) -> dict[str, Any]:
        """Return it for a report; `traced_rays` counts this run alone, `rays` all that the picture rests on."""
        return {
            "name": self.name,
            "trace_key": self.trace_key,
            "reused": self.reused,
            "traced_rays": self.traced_rays,
            "rays": self.rays,
            **self.about,
        }


def is_table(sheet: DropSheet | CrystalSheet) -> bool:
    """Return whether a sheet's light depends on the scattering angle alone."""
    if isinstance(sheet, DropSheet):
        return sheet.axis_ratios == "round"
    return sheet.orientation.name == "random"


def table_key(sheet: DropSheet | CrystalSheet, job: Job, sampling: Sampling) -> str:
    """Return the trace key of a sheet's table: all that the table depends on."""
    shared: dict[str, Any] = {
        "index": sheet.index.key,
        "bins": job.bins.edges,
        "seed": sampling.seed,
        "target": sampling.rays or sampling.target,
        "kernels": KERNEL_HASH,
    }
    if isinstance(sheet, DropSheet):
        from skyoptics.droplets import angles

        if plain_rays(sheet):
            edges = angles.default_edges(sheet.index, job.bins)
            return store.trace_key(kind="drops by rays", radius=sheet.radius, edges=edges, **shared)
        method = _choice(sheet, job)[0]
        shared["target"] = sampling.target
        return store.trace_key(kind="drops by waves", method=method, sizes=identity(sheet.sizes), **shared)
    return store.trace_key(
        kind="random crystals",
        count=CRYSTAL_ANGLES,
        names=list(arc_names()),
        **crystal_identity(sheet),
        **shared,
    )


def crystal_identity(sheet: CrystalSheet) -> dict[str, Any]:
    """Return what tells kinds of crystals apart, for keys."""
    return {
        "diameter": sheet.diameter,
        "shape": np.concatenate([shape.packed_slabs() for shape in sheet.shapes]),
        "orientation": sheet.orientation.key,
        "imperfections": sheet.imperfections.key,
    }


def plain_rays(sheet: DropSheet) -> bool:
    """Return whether a sheet is drops of one size by ray optics, which need no average over sizes."""
    return sheet.method == "rays" and isinstance(sheet.sizes, Single)


def _choice(sheet: DropSheet, job: Job) -> tuple[str, str]:
    """Return the method in force, "auto" decided, and why."""
    if sheet.method != "auto":
        return sheet.method, "asked for"
    from skyoptics.droplets import waves

    orders = None if sheet.orders == tuple(range(11)) else sheet.orders
    return waves.choose_method(sheet.sizes, sheet.index, job.bins, orders)


def identity(sizes: Any) -> Any:
    """Return what tells size distributions apart, in JSON types: names and values of fields, all the way down."""
    if is_dataclass(sizes):
        return [type(sizes).__name__, *(identity(getattr(sizes, field.name)) for field in fields(sizes))]
    if isinstance(sizes, np.ndarray):
        return sizes.tolist()
    return sizes if isinstance(sizes, str | int | float | bool | None) else repr(sizes)


def least_rays(sheet: DropSheet | CrystalSheet, bins: Bins) -> int:
    """Return the rays that a new table takes at least."""
    if isinstance(sheet, DropSheet):
        if sheet.method == "mie":
            return 0
        from skyoptics.droplets import geometric
        from skyoptics.kernels import sphere

        return int(geometric.LEAST_BATCHES * sphere.RAYS * len(bins))
    from skyoptics.crystals import table

    return table.LEAST_BATCHES * table.BATCH * len(bins)


def find_table(
    sheet: DropSheet | CrystalSheet,
    job: Job,
    sampling: Sampling,
    executor: Executor | None,
    progress: Progress = silent,
) -> tuple[ScatteringTable, Traced]:
    """Return the ray table of a sheet, from the store where it is there.

    Parameters
    ----------
    sheet : DropSheet or CrystalSheet
        Drops, or crystals that stand in any way.
    job : Job
        For the spectral bins.
    sampling : Sampling
        How much to trace.
    executor : Executor or None
        Runs the batches.
    progress : callable
        Told about batches.
    """
    key = table_key(sheet, job, sampling)
    table = store.find(key)
    reused = table is not None
    if table is None:
        table = _trace_table(sheet, job, sampling, executor, progress)
        store.keep(key, table)
    report = table.report
    names = ("relative_error", "absorbed", "cut_off")
    about: dict[str, Any] = {f"{name}_at_most": max(report[name]) for name in names if name in report}
    about["target_reached"] = sampling.rays is not None or report.get("target_reached", True)
    about |= {name: report[name] for name in ("method", "warnings", "error") if name in report}
    if isinstance(sheet, DropSheet) and not plain_rays(sheet):
        about["reason"] = _choice(sheet, job)[1]
    rays = int(report.get("rays", 0))
    return table, Traced(sheet.name, key, reused, 0 if reused else rays, rays, about)


def _trace_table(
    sheet: DropSheet | CrystalSheet, job: Job, sampling: Sampling, executor: Executor | None, progress: Progress
) -> ScatteringTable:
    def tell(done: int, total: int) -> None:
        progress(f"tracing {sheet.name}", done, total)

    if isinstance(sheet, DropSheet):
        from skyoptics.droplets import geometric
        from skyoptics.kernels import sphere

        least, batch = geometric.LEAST_BATCHES, sphere.RAYS
    else:
        from skyoptics.crystals import table

        least, batch = table.LEAST_BATCHES, table.BATCH
    shared: dict[str, Any] = {"seed": sampling.seed, "executor": executor, "progress": tell}
    if isinstance(sheet, DropSheet) and not plain_rays(sheet):
        from skyoptics.droplets import waves

        method, _ = _choice(sheet, job)
        return waves.scattering_table(
            sheet.sizes, sheet.index, job.bins, method=method, tolerance=2.0 * sampling.target, **shared
        )
    if sampling.rays is None:
        shared["relative_error"] = sampling.target * (1.0 if isinstance(sheet, DropSheet) else CRYSTAL_TABLE_ERROR)
    else:  # a target that no number of batches reaches, so that the number given rules
        shared |= {"relative_error": 1e-5, "max_batches": max(least, ceil(sampling.rays / (batch * len(job.bins))))}
    if isinstance(sheet, DropSheet):
        return geometric.scattering_table(sheet.index, sheet.radius, job.bins, **shared)
    from skyoptics.crystals.sorting import sorter

    shared["sorter"] = sorter(sheet.shapes[0].face_normals, "random", 0.0, ICE_INDEX)  # circles: whatever the sun
    shared["imperfections"] = sheet.imperfections
    return table.scattering_table(
        sheet.shapes, sheet.index, job.bins, size=sheet.diameter, count=CRYSTAL_ANGLES, **shared
    )


def axisymmetric(sheet: DropSheet | CrystalSheet, table: ScatteringTable, disc: Disc) -> Axisymmetric:
    """Return a sheet's scatterer from its table, under a disc.

    The traced half of the extinction carries a ray table's light; the other half is diffraction, which rays leave out. A
    wave table says itself which share of the extinction at 550 nm it scatters.
    """
    by_order = isinstance(sheet, DropSheet) and "2" in table.parts
    shown = table.select([str(order) for order in sheet.orders]) if by_order else table  # type: ignore[union-attr]
    if "reference_extinction_m2" in table.report:
        from skyoptics.droplets import waves

        share, extinction = waves.shares(table)
        return Axisymmetric(over_disc(shown.total(), disc), share, extinction)
    return Axisymmetric(over_disc(shown.total(), disc), 0.5 * np.asarray(table.albedo))
