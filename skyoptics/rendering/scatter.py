"""From what a sheet holds to what answers for it: tables found or traced, then seen under the source's disc."""

from __future__ import annotations

from concurrent.futures import Executor
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np

from skyoptics.kernels import KERNEL_HASH
from skyoptics.optics.axisymmetric import Axisymmetric, over_disc
from skyoptics.optics.bins import Bins
from skyoptics.optics.source import Disc
from skyoptics.optics.table import ScatteringTable
from skyoptics.rendering import store
from skyoptics.rendering.build import DropSheet, Job
from skyoptics.sky.compose import Sheet

QUALITY = {"draft": 0.02, "normal": 0.01, "fine": 0.005}
"""Light-weighted relative standard error of a sphere table's bins, by the name of the quality."""


class Progress(Protocol):
    """What a long job tells: a stage in words, how much of it is done, how much there is."""

    def __call__(self, stage: str, done: int, total: int) -> None:
        """Take the news."""


def silent(stage: str, done: int, total: int) -> None:
    """Tell nobody."""


@dataclass(frozen=True)
class Traced:
    """How a sheet's light was come by, for the report."""

    name: str
    trace_key: str
    reused: bool
    rays: int
    about: dict[str, Any]

    def summary(self) -> dict[str, Any]:
        """Return it for a report; `traced_rays` counts this run alone."""
        return {
            "name": self.name,
            "trace_key": self.trace_key,
            "reused": self.reused,
            "traced_rays": 0 if self.reused else self.rays,
            "table_rays": self.rays,
            **self.about,
        }


def drop_key(sheet: DropSheet, job: Job, quality: str, seed: int) -> str:
    """Return the trace key of a sheet's ray table: all that the table depends on."""
    from skyoptics.droplets import angles

    return store.trace_key(
        kind="drops by rays",
        index=sheet.index.key,
        radius=sheet.radius,
        bins=job.bins.edges,
        edges=angles.default_edges(sheet.index, job.bins),
        seed=seed,
        target=QUALITY[quality],
        kernels=KERNEL_HASH,
    )


def least_rays(bins: Bins) -> int:
    """Return the rays that a new table takes at least."""
    from skyoptics.droplets import geometric
    from skyoptics.kernels import sphere

    return int(geometric.LEAST_BATCHES * sphere.RAYS * len(bins))


def drop_table(
    sheet: DropSheet, job: Job, quality: str, seed: int, executor: Executor | None, progress: Progress
) -> tuple[ScatteringTable, Traced]:
    """Return the ray table of a sheet of drops, from the store where it is there.

    Parameters
    ----------
    sheet : DropSheet
        Which drops.
    job : Job
        For the spectral bins.
    quality : str
        A key of `QUALITY`.
    seed : int
        Of the random numbers.
    executor : Executor or None
        Runs the batches.
    progress : callable
        Told about batches.
    """
    from skyoptics.droplets import geometric

    key = drop_key(sheet, job, quality, seed)
    table = store.find(key)
    reused = table is not None
    if table is None:
        table = geometric.scattering_table(
            sheet.index,
            sheet.radius,
            job.bins,
            seed=seed,
            relative_error=QUALITY[quality],
            executor=executor,
            progress=lambda done, total: progress(f"tracing {sheet.name}", done, total),
        )
        store.keep(key, table)
    report = table.report
    about = {f"{name}_at_most": max(report[name]) for name in ("relative_error", "absorbed", "cut_off")}
    about["target_reached"] = report["target_reached"]
    return table, Traced(sheet.name, key, reused, int(report["rays"]), about)


def drop_scatterer(table: ScatteringTable, orders: tuple[int, ...], disc: Disc) -> Axisymmetric:
    """Return a scatterer of some orders of a ray table, under a disc.

    The traced half of the extinction carries the table's light; the other half is diffraction, which rays leave out.
    """
    shown = table.select([str(order) for order in orders]).total()
    return Axisymmetric(over_disc(shown, disc), 0.5 * np.asarray(table.albedo))


def scatter(
    job: Job, quality: str, seed: int, executor: Executor | None, progress: Progress = silent
) -> tuple[list[Sheet], list[Traced]]:
    """Return the job's sheets, ready to be looked at, and how they were come by."""
    sheets, traced = [], []
    for sheet in job.sheets:
        table, how = drop_table(sheet, job, quality, seed, executor, progress)
        sheets.append(Sheet(sheet.name, drop_scatterer(table, sheet.orders, job.sources[0].disc), sheet.amount))
        traced.append(how)
    return sheets, traced
