"""Frames of a film as physics: what neighbours share is made once, and they share their random numbers.

A still picture of crystals draws random numbers that belong to its own sun, so that two pictures are independent; in a film
that would flicker. Here a film's seed alone decides them, and a guide into a narrow frame is learnt from them too: the same
rays are followed in every frame, and the noise moves with the picture. Every frame gets the same number of rounds.

Tables of drops do not depend on where the sun stands: they are found, and averaged over its disc, once.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass, field, fields, replace
from functools import lru_cache
from math import ceil
from threading import Lock
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skyoptics.colour.develop import develop
from skyoptics.colour.display import automatic_exposure, encode, metered_exposure
from skyoptics.colour.images import dither_threshold
from skyoptics.colour.observer import weights
from skyoptics.crystals import guide
from skyoptics.crystals.prepared import Prepared
from skyoptics.geometry.directions import Directions
from skyoptics.rendering import expose, further
from skyoptics.rendering.build import Job, build
from skyoptics.rendering.colours import ALONE, HeldGrid, colours, plainly_seen
from skyoptics.rendering.expose import Work
from skyoptics.rendering.eye import exposure_asked, through_the_eye
from skyoptics.rendering.film import Film
from skyoptics.rendering.looking import Mirror, tristimulus
from skyoptics.rendering.run import Settings, reflection, scatter_all
from skyoptics.rendering.scatter import Progress, is_table, silent
from skyoptics.rendering.skies import Shelf
from skyoptics.rendering.store import trace_key
from skyoptics.scene.model import Scene
from skyoptics.sky.compose import Background, Scatterer, Sheet
from skyoptics.units import ArrayLike, Float32Array, FloatArray

_HELD_PIXELS = 4_000_000
METERS: dict[str, Callable[[ArrayLike], float]] = {"sky": automatic_exposure, "average": metered_exposure}


@dataclass(frozen=True, eq=False)
class Shot:
    """A frame before it is developed: its physics and XYZ, shape (ny, nx, 3) [cd m⁻²]."""

    job: Job
    xyz: Float32Array


@dataclass(eq=False)
class Studio:
    """Looks at the scenes of a film.

    Parameters
    ----------
    settings : Settings
        Quality, seed, rays.
    rounds : list of int
        Batches of each film of crystals; found by `measure` where it is empty.
    shelf : Shelf, optional
        Clear skies of the film (`skyoptics.rendering.skies.shelf_for`).
    """

    settings: Settings
    rounds: list[int] = field(default_factory=list)
    shelf: Shelf | None = None
    _tables: dict[Any, list[tuple[Scatterer, ...]]] = field(default_factory=dict)
    _films: dict[str, Film] = field(default_factory=dict)
    _grid: HeldGrid | None = None
    _lock: Lock = field(default_factory=Lock)

    def look(self, scene: Scene, where: str, executor: Executor, progress: Progress = silent) -> Shot:
        """Return one frame.

        Parameters
        ----------
        scene : Scene
            What to look at.
        where : str
            Name of its file, for faults.
        executor : Executor
            Traces what has to be traced.
        progress : callable
            Told about batches.
        """
        quick = self._under_the_sky(scene, where, executor, progress)
        if quick is not None:
            return quick
        job = self._prepared(scene, where)
        sheets, works, mirror = self._scattered(scene, job, executor, progress)
        if works and len(self.rounds) < len(works):
            self._measure(scene, where, job, sheets, works, executor, progress)
        self._follow(works, executor, progress)
        return Shot(job, self._seen(scene, job, sheets, mirror, executor if works else None))

    def measure(self, scenes: Sequence[Scene], where: str, executor: Executor, progress: Progress = silent) -> None:
        """Find the rounds that bring every one of some scenes to the quality."""
        most: list[int] = []
        for scene in scenes:
            self.rounds = []
            self.look(scene, where, executor, progress)
            most = [max(pair) for pair in zip(self.rounds, most or self.rounds, strict=True)]
        self.rounds = most

    def _under_the_sky(self, scene: Scene, where: str, executor: Executor, progress: Progress) -> Shot | None:
        """Return a frame under a clear sky of the shelf; None where the sky is not all there is behind simple sheets."""
        if self.shelf is None:
            return None
        bare = scene.model_copy(update={"picture": scene.picture.model_copy(update={"sky": "plain"})})
        job = self._prepared(bare, where)
        if not isinstance(job.background, Background) or not all(is_table(sheet) for sheet in job.sheets):
            return None
        sheets, works, mirror = self._scattered(scene, job, executor, progress)
        if works or mirror is not None or not plainly_seen(job, sheets):
            return None
        matrix = weights(job.bins, scene.picture.observer)
        xyz = colours(job, sheets, matrix, self.shelf.sky(job.sources[0].direction))
        return Shot(job, through_the_eye(job, sheets, xyz, scene.picture))

    def _prepared(self, scene: Scene, where: str) -> Job:
        """Return a scene's physics on a grid that is shared with the frame before where it is the same."""
        job = build(scene, where)
        grid = job.directions
        with self._lock:
            if self._grid is None or not _same_grid(self._grid, grid):
                self._grid = HeldGrid(**{f.name: getattr(grid, f.name) for f in fields(grid)})
            held = self._grid
        return job if held.shape[0] * held.shape[1] > _HELD_PIXELS else replace(job, directions=held)

    def _scattered(
        self, scene: Scene, job: Job, executor: Executor, progress: Progress
    ) -> tuple[list[Sheet], list[Work], Mirror | None]:
        """Return sheets, films to be traced, and what water mirrors; tables of the frame before where they are the same."""
        simple = all(is_table(sheet) for sheet in job.sheets) and not further.slab_of(job) and job.water is None
        if simple:
            disc = job.sources[0].disc
            alike = (scene.air, scene.medium, job.bins.edges.tobytes(), disc.radius, disc.darkening.tobytes())
            with self._lock:
                known = self._tables.get(alike)
                if known is None or len(known[0]) != len(job.sources):
                    sheets, *_ = scatter_all(job, self.settings.sampling, executor, progress)
                    known = [sheet.scatterers for sheet in sheets]
                    self._tables = {alike: known}
            held = [Sheet(sheet.name, mine, sheet.amount) for sheet, mine in zip(job.sheets, known, strict=True)]
            return held, [], None
        sampling = replace(self.settings.sampling, rays=None)
        sheets, _, own, _ = scatter_all(job, sampling, executor, progress)
        mirror = reflection(job, sampling, executor, progress)
        works = [*own, *([] if mirror is None else mirror.works)]
        shared = [self._sharing(work, job, number, len(own)) for number, work in enumerate(works)]
        self._films = {work.film.key: work.film for work in shared}
        sheets = _with_films(sheets, own, shared[: len(own)])
        if mirror is not None:
            mirror = replace(mirror, sheets=_with_films(mirror.sheets, mirror.works, shared[len(own) :]))
        return sheets, shared, mirror

    def _sharing(self, work: Work, job: Job, number: int, own: int) -> Work:
        """Return a film's work with random numbers of the film alone; with the light of the frame before if it is the same."""
        stream = int(trace_key(kind="frames of a film", seed=self.settings.seed, number=number % max(own, 1))[:15], 16)
        key = trace_key(kind="frame", film=work.film.key, stream=stream)
        film = self._films.get(key)
        if film is None:
            film = Film.blank(key, work.film.rays, work.film.reference, work.film.sums.shape[1:])
        bins, sheet, source, arcs = job.bins, work.sheet, work.source, work.sorter

        def make() -> tuple[Prepared, ...]:
            span = np.array([bins.edges.min(), bins.edges.max()])
            middle = len(bins) // 2
            found = guide.learn(sheet.prepared(source, middle, span, middle, None, arcs), work.packed, stream)
            return tuple(sheet.prepared(source, row, edges, row, found, arcs) for row, edges in enumerate(bins.edges))

        return replace(work, film=film, make=make, seed=stream, side=0)

    def _measure(
        self,
        scene: Scene,
        where: str,
        job: Job,
        sheets: list[Sheet],
        works: list[Work],
        executor: Executor,
        progress: Progress,
    ) -> None:
        """Trace until the noise that this frame would show is low enough, or the rays are spent; keep the rounds."""
        costs = [float(work.film.rays.sum()) for work in works]
        if self.settings.rays is not None:
            self.rounds = [max(2, ceil(self.settings.rays / cost)) for cost in costs]
            return
        target = self.settings.sampling.target
        most = [max(1, int(expose.MOST_RAYS[self.settings.quality] / len(works) / cost)) for cost in costs]
        self.rounds = [expose.LEAST_ROUNDS] * len(works)
        fixed = exposure_asked(scene, where)
        while True:
            self._follow(works, executor, progress)
            luminance = self._seen(scene, job, sheets, None, executor)[..., 1]
            exposure = METERS[scene.picture.metering](luminance) if fixed is None else fixed
            parts, _ = expose.lightness_error(works, job, luminance, exposure)
            noise = float(np.sqrt(sum(part**2 for part in parts)))
            more = [
                min(ceil(n * min((noise / target) ** 2 * 1.03, 4.0)), limit)
                for n, limit in zip(self.rounds, most, strict=True)
            ]
            if noise <= target or more <= self.rounds:
                return
            self.rounds = [max(pair) for pair in zip(more, self.rounds, strict=True)]

    def _follow(self, works: list[Work], executor: Executor, progress: Progress) -> None:
        for work, rounds in zip(works, self.rounds, strict=False):
            for _ in work.trace(rounds, executor, progress, lambda: None):
                pass

    def _seen(
        self, scene: Scene, job: Job, sheets: list[Sheet], mirror: Mirror | None, executor: Executor | None
    ) -> Float32Array:
        """Return XYZ as the eye gets it."""
        observer = scene.picture.observer
        if (
            executor is None
            and mirror is None
            and job.polariser is None
            and job.cover == 0.0
            and plainly_seen(job, sheets)
        ):
            xyz = colours(job, sheets, weights(job.bins, observer))
        else:
            xyz = tristimulus(job, sheets, observer, executor, mirror=mirror)
        return through_the_eye(job, sheets, xyz, scene.picture)


def _same_grid(one: Directions, other: Directions) -> bool:
    return all(np.array_equal(getattr(one, f.name), getattr(other, f.name)) for f in fields(one))


def _with_films(sheets: list[Sheet], before: list[Work], after: list[Work]) -> list[Sheet]:
    """Return sheets that are read from other films."""
    films = {id(work.film): new for work, new in zip(before, after, strict=True)}

    def other(scatterer: Scatterer) -> Scatterer:
        found = films.get(id(getattr(scatterer, "film", None)))
        return scatterer if found is None else found.scatterer()

    return [replace(sheet, scatterers=tuple(other(one) for one in sheet.scatterers)) for sheet in sheets]


def developed(xyz: Float32Array, exposure_ev: float, white: FloatArray | None) -> NDArray[np.uint8]:
    """Return a frame as it is stored: display-encoded, 8 bits, dithered like every picture (`skyoptics.colour.images`)."""
    rows, columns = xyz.shape[:2]
    result = np.empty(xyz.shape, dtype=np.uint8)
    for start in range(0, rows, step := max(1, 8 * ALONE // columns)):
        part = slice(start, min(start + step, rows))
        values = encode(develop(xyz[part], exposure_ev, white).rgb)
        result[part] = np.floor(np.clip(values, 0.0, 1.0) * 255.0 + _threshold(part.start, part.stop, columns))
    return result


@lru_cache(maxsize=512)
def _threshold(first: int, end: int, columns: int) -> FloatArray:
    return dither_threshold(np.arange(first, end), np.arange(columns))
