"""A picture too large to be held at once, looked at part by part.

Tables and light scattered more than once know any direction, so they are made once, for a small picture of the same scene,
and looked up row by row. A film knows the pixels it was traced for: where films of the whole picture would be too large, each
tile gets films of its own, of the same seed and the same noise; they are stored like any film, so a run that was stopped goes
on. How a picture is divided depends on the scene and its size alone, never on the machine.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator
from concurrent.futures import Executor
from dataclasses import dataclass, replace
from functools import partial
from math import ceil

from skyoptics.rendering import expose, further
from skyoptics.rendering.build import Job
from skyoptics.rendering.clouds import CrystalSheet
from skyoptics.rendering.expose import Work
from skyoptics.rendering.looking import Mirror, look, mirrored, tristimulus
from skyoptics.rendering.rain import DropSheet
from skyoptics.rendering.run import Result, whole_amount
from skyoptics.rendering.scatter import Progress, Sampling, Traced, crystal_identity, is_table
from skyoptics.rendering.store import trace_key
from skyoptics.scene.model import Scene
from skyoptics.sky.compose import Sheet
from skyoptics.units import Float32Array

FILM_BYTES = 1.0e9
"""Films of a tile, all together, stay below this [byte]."""


@dataclass(frozen=True)
class Tile:
    """A part of a picture."""

    rows: slice
    columns: slice

    @property
    def pixels(self) -> int:
        """Pixels in it."""
        return int((self.rows.stop - self.rows.start) * (self.columns.stop - self.columns.start))


def film_sheets(job: Job) -> int:
    """Return the number of sheets that need films."""
    return len([sheet for sheet in job.sheets if _on_film(sheet)])


def divided(job: Job, shape: tuple[int, int]) -> list[Tile]:
    """Return the tiles of a picture, row by row.

    Parameters
    ----------
    job : Job
        The scene, at any size.
    shape : tuple of int
        Rows, columns of the picture.

    Returns
    -------
    list of Tile
        One where no films are needed, or all of them fit into `FILM_BYTES`; else as few as do, as square as can be: a guide
        sends rays into a compact tile best.
    """
    films = film_sheets(job) * len(job.sources) * (1 if job.water is None else 2)
    pixel = films * (4 * len(job.bins) * (4 if job.stokes else 1) + 8)
    count = ceil(shape[0] * shape[1] * pixel / FILM_BYTES)
    if count <= 1:
        return [Tile(slice(0, shape[0]), slice(0, shape[1]))]
    grids = [(down, ceil(count / down)) for down in range(1, min(count, shape[0]) + 1)]

    def cost(grid: tuple[int, int]) -> float:
        sides = shape[0] / grid[0], shape[1] / grid[1]
        return grid[0] * grid[1] * max(sides) / min(sides)

    down, across = min(grids, key=cost)
    return [
        Tile(rows, columns) for rows in _parts(shape[0], down) for columns in _parts(shape[1], min(across, shape[1]))
    ]


def lit(
    job: Job,
    small: Result,
    scene: Scene,
    sampling: Sampling,
    executor: Executor,
    tracers: Executor,
    progress: Progress,
    traced: list[Traced] | None = None,
) -> Iterator[tuple[slice, slice, Float32Array]]:
    """Yield a picture's XYZ part by part.

    Parameters
    ----------
    job : Job
        The scene at its full size.
    small : Result
        A small picture of the same scene from `skyoptics.rendering.run.render`: its tables and its exposure are used.
    scene : Scene
        For the observer.
    sampling : Sampling
        Noise of films, or rays of the whole picture.
    executor, tracers : Executor
        Look, and trace.
    progress : callable
        Told about tiles, batches, rows.
    traced : list of Traced, optional
        Told how each film was come by.

    Yields
    ------
    rows, columns : slice
        Where.
    xyz : ndarray of float32
        [cd m⁻²], without glare and without the sun's own disc; nan outside the image.
    """
    observer = scene.picture.observer
    if not film_sheets(job):
        from skyoptics.colour.observer import weights

        matrix = weights(job.bins, observer)
        mirror = None
        if job.water is not None and small.mirror is not None:
            other = mirrored(job)
            mirror = Mirror(other, _sheets(other, small.mirror.sheets, {}))
        everywhere = slice(0, job.directions.shape[1])
        for rows, block in look(job, _sheets(job, small.sheets, {}), executor, progress, mirror):
            yield rows, everywhere, (block @ matrix).astype("float32")
        return
    tiles = divided(job, job.directions.shape)
    whole = job.directions.shape[0] * job.directions.shape[1]
    for number, tile in enumerate(tiles):
        if len(tiles) > 1:
            progress("tiles", number, len(tiles))
        part = replace(job, directions=job.directions.crop(tile.rows, tile.columns))
        share = sampling
        if sampling.rays is not None:
            share = replace(sampling, rays=max(1, ceil(sampling.rays * tile.pixels / whole)))
        yield tile.rows, tile.columns, _tile(part, small, observer, share, executor, tracers, progress, traced)
    if len(tiles) > 1:
        progress("tiles", len(tiles), len(tiles))


def _tile(
    job: Job,
    small: Result,
    observer: str,
    sampling: Sampling,
    executor: Executor,
    tracers: Executor,
    progress: Progress,
    traced: list[Traced] | None,
) -> Float32Array:
    """Return XYZ of a tile, its films traced until their noise is low enough at the picture's exposure."""
    films = _films(job, sampling.seed)
    sheets = _sheets(job, small.sheets, films)
    works = [work for sheet in films.values() for work in sheet]
    before = [work.film.traced_rays for work in works]
    mirror, other_films = None, {}
    if job.water is not None and small.mirror is not None:
        other = mirrored(job)
        other_films = _films(other, sampling.seed)
        others = [work for sheet in other_films.values() for work in sheet]
        mirror = Mirror(other, _sheets(other, small.mirror.sheets, other_films), others)
    xyz: list[Float32Array] = []

    def measure() -> list[float]:
        xyz[:] = [tristimulus(job, sheets, observer, executor)]
        return expose.lightness_error(works, job, xyz[0][..., 1], small.developed.exposure_ev)[0]

    expose.trace(works, sampling, tracers, measure, progress, lambda: None)
    if mirror is not None:
        for work, other_work in zip(works, mirror.works, strict=True):
            expose.follow(other_work, work.film.rounds, tracers, progress)
        xyz[:] = [tristimulus(job, sheets, observer, executor, progress, mirror)]
    if traced is not None:
        traced += [work.summary(rays) for work, rays in zip(works, before, strict=True)]
    return xyz[0]


def _films(job: Job, seed: int) -> dict[int, tuple[Work, ...]]:
    """Return the films of a job by the place of their sheet; sheets of the same crystals get rays of their own."""
    found: dict[int, tuple[Work, ...]] = {}
    seen: list[str] = []
    for place, sheet in enumerate(job.sheets):
        if isinstance(sheet, CrystalSheet) and _on_film(sheet):
            alike = trace_key(index=sheet.index.key, **crystal_identity(sheet))
            copy = seen.count(alike)
            seen.append(alike)
            found[place] = tuple(expose.begin(sheet, job, seed, source, copy) for source in job.sources)
    return found


def _sheets(job: Job, found: list[Sheet], films: dict[int, tuple[Work, ...]]) -> list[Sheet]:
    """Return the sheets of a job: its own films and amounts, all else as it was found for the small picture."""
    result = []
    for place, sheet in enumerate(found):
        if place >= len(job.sheets):  # further scatterings come last, without a description
            result.append(replace(sheet, amount=partial(whole_amount, sheet=further.slab_of(job)[0])))
            continue
        scatterers = tuple(work.scatterer() for work in films[place]) if place in films else sheet.scatterers
        result.append(Sheet(sheet.name, scatterers, job.sheets[place].amount))
    return result


def _on_film(sheet: DropSheet | CrystalSheet) -> bool:
    return isinstance(sheet, CrystalSheet) and not is_table(sheet)


def _parts(size: int, count: int) -> list[slice]:
    """Return `count` slices of nearly equal length."""
    ends = [round(number * size / count) for number in range(count + 1)]
    return [slice(start, stop) for start, stop in itertools.pairwise(ends)]
