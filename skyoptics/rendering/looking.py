"""Looking at what scatters: radiance of the picture block by block, with what calm water mirrors.

Water mirrors light polarised along the horizon best, and a bow is polarised along itself, so what is mirrored is followed as
Stokes vectors even where the picture is not: without, the mirrored crown of a bow would come out a third too dim.
"""

from __future__ import annotations

from collections.abc import Iterator
from concurrent.futures import Executor
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from skyoptics.camera.frame import polariser
from skyoptics.colour.observer import weights
from skyoptics.rendering.build import Job
from skyoptics.rendering.expose import Work
from skyoptics.rendering.memory import blocks
from skyoptics.rendering.scatter import Progress, silent
from skyoptics.sky import compose
from skyoptics.sky.compose import Sheet
from skyoptics.sky.water import mirrored_grid
from skyoptics.units import Float32Array, FloatArray


@dataclass(frozen=True, eq=False)
class Mirror:
    """What the picture's pixels see mirrored in calm water.

    Parameters
    ----------
    job : Job
        The same scene on the grid of the mirrored directions.
    sheets : list of Sheet
        What scatters there.
    works : list of Work
        Films of it, to be traced as far as those of the picture.
    """

    job: Job
    sheets: list[Sheet] = field(default_factory=list)
    works: list[Work] = field(default_factory=list)


def mirrored(job: Job) -> Job:
    """Return a job on the grid whose pixels see what the same pixels of a picture see mirrored."""
    return replace(job, directions=mirrored_grid(job.directions), water=None)


def look(
    job: Job,
    sheets: list[Sheet],
    executor: Executor | None,
    progress: Progress = silent,
    mirror: Mirror | None = None,
) -> Iterator[tuple[slice, FloatArray]]:
    """Yield the radiance of the picture block by block, in order.

    Parameters
    ----------
    job : Job
        What to look at.
    sheets : list of Sheet
        From `skyoptics.rendering.run.scatter_all`.
    executor : Executor or None
        Looks ahead; None works in this thread.
    progress : callable
        Told about rows.
    mirror : Mirror, optional
        What water mirrors; where it is left out there is no water.

    Yields
    ------
    rows : slice
        Which rows.
    block : ndarray, shape (rows, nx, nλ)
        [W m⁻² sr⁻¹ nm⁻¹]
    """
    shape = job.directions.shape

    def work(rows: slice) -> FloatArray:
        axis = None if job.polariser is None else polariser(job.directions, job.polariser, rows)
        light = compose.radiance(job.directions, rows, job.sources, sheets, job.background, axis, job.cover)
        return light if mirror is None else _on_water(job, mirror, rows, light, axis)

    parts = list(blocks(shape))
    if executor is None:
        for rows in parts:
            progress("looking", rows.stop, shape[0])
            yield rows, work(rows)
        return
    ahead = 2 * getattr(executor, "_max_workers", 2)
    waiting = [executor.submit(work, rows) for rows in parts[:ahead]]
    for number, rows in enumerate(parts):
        block = waiting.pop(0).result()
        if number + ahead < len(parts):
            waiting.append(executor.submit(work, parts[number + ahead]))
        progress("looking", rows.stop, shape[0])
        yield rows, block


def tristimulus(
    job: Job,
    sheets: list[Sheet],
    observer: Any,
    executor: Executor | None,
    progress: Progress = silent,
    mirror: Mirror | None = None,
) -> Float32Array:
    """Return the picture's XYZ, shape (ny, nx, 3) [cd m⁻²]."""
    matrix = weights(job.bins, observer)
    xyz = np.empty((*job.directions.shape, 3), dtype=np.float32)
    for rows, block in look(job, sheets, executor, progress, mirror):
        xyz[rows] = block @ matrix
    return xyz


def stokes(job: Job, sheets: list[Sheet], rows: slice, mirror: Mirror | None = None) -> FloatArray:
    """Return the Stokes vector of some rows' radiance, shape (ny, nx, nλ, 4), in each direction's meridian frame."""
    light = compose.stokes(job.directions, rows, job.sources, sheets, job.background, job.cover)
    if mirror is None:
        return light
    return _mixed(job, rows, light, lambda: _polarised_water(job, mirror, rows))


def _on_water(job: Job, mirror: Mirror, rows: slice, light: FloatArray, axis: FloatArray | None) -> FloatArray:
    """Return light with what is seen in water in its place."""

    def seen() -> FloatArray:
        if axis is not None:
            i, q, u, _ = np.moveaxis(_polarised_water(job, mirror, rows), -1, 0)
            turn = 2.0 * axis[..., None]
            return np.asarray(0.5 * (i + q * np.cos(turn) + u * np.sin(turn)))
        return np.asarray(_polarised_water(job, mirror, rows)[..., 0])

    return _mixed(job, rows, light, seen)


def _polarised_water(job: Job, mirror: Mirror, rows: slice) -> FloatArray:
    other = mirror.job
    up = compose.stokes(other.directions, rows, other.sources, mirror.sheets, other.background)
    assert job.water is not None
    return job.water.reflect(job.directions.vectors(rows), up)


def _mixed(job: Job, rows: slice, light: FloatArray, seen: Any) -> FloatArray:
    """Return light with water laid over the pixels that it covers; asked for only where there is some."""
    assert job.water is not None
    share = job.water.share_of_water(job.directions, rows)
    wet = share > 0.0
    if not np.any(wet):
        return light
    share = share[wet].reshape(-1, *(1,) * (light.ndim - 2))
    light[wet] = (1.0 - share) * light[wet] + share * seen()[wet]
    return light
