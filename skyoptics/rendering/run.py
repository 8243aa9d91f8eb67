"""The recipe of a render: build, scatter, look, develop, report."""

from __future__ import annotations

import multiprocessing
import os
import signal
import time
from collections.abc import Callable, Iterator
from concurrent.futures import Executor, ProcessPoolExecutor, ThreadPoolExecutor
from contextlib import contextmanager
from dataclasses import dataclass, field, replace
from functools import partial
from typing import Any

import numpy as np

import skyoptics
from skyoptics.colour.develop import Developed, develop
from skyoptics.crystals.arcs import feature
from skyoptics.errors import DomainError
from skyoptics.optics.source import Source
from skyoptics.rendering import expose, flat, further, memory
from skyoptics.rendering.build import Job, build
from skyoptics.rendering.caption import cautions, what_to_look_for
from skyoptics.rendering.clouds import CrystalSheet
from skyoptics.rendering.eye import camera_settings, exposure_asked, kelvin, neutral, through_the_eye
from skyoptics.rendering.looking import Mirror, mirrored, tristimulus
from skyoptics.rendering.named import FURTHER, OTHER, Parted
from skyoptics.rendering.rain import DropSheet
from skyoptics.rendering.scatter import (
    Progress,
    Sampling,
    Traced,
    axisymmetric,
    crystal_identity,
    find_table,
    is_table,
    silent,
)
from skyoptics.rendering.store import trace_key
from skyoptics.scene.digest import scene_hash
from skyoptics.scene.model import Scene
from skyoptics.sky.compose import Background, Scatterer, Sheet
from skyoptics.units import Float32Array, FloatArray


@dataclass(frozen=True)
class Settings:
    """How to render, apart from what.

    Parameters
    ----------
    quality : str
        "draft", "normal" or "fine".
    seed : int
        Of the random numbers; the same seed gives the same picture on any number of threads and processes.
    threads : int
        Worker threads.
    processes : int
        Worker processes for tracing, in place of threads where more than one.
    rays : int or None
        Rays of each sheet; overrides the quality.
    """

    quality: str = "normal"
    seed: int = 1
    threads: int = field(default_factory=lambda: usable_cores())
    processes: int = 1
    rays: int | None = None

    @property
    def sampling(self) -> Sampling:
        """What tracing depends on."""
        return Sampling(self.quality, self.seed, self.rays)


@dataclass(frozen=True, eq=False)
class Result:
    """A rendered picture before it becomes a file.

    Parameters
    ----------
    job : Job
        The physics that was looked at.
    sheets : list of Sheet
        What scattered.
    xyz : ndarray of float32, shape (ny, nx, 3)
        [cd m⁻²]; nan outside the image.
    developed : Developed
        Display colours.
    report : dict
        What was asked, done and reached; JSON types.
    noise : ndarray or None, shape (ny, nx)
        One standard error of the displayed lightness [1]; None where nothing was traced onto the picture itself.
    parted : list of Parted
        Light of the crystals by named arc.
    mirror : Mirror or None
        What is seen in water.
    """

    job: Job
    sheets: list[Sheet]
    xyz: Float32Array
    developed: Developed
    report: dict[str, Any]
    noise: FloatArray | None = None
    parted: list[Parted] = field(default_factory=list)
    mirror: Mirror | None = None


def usable_cores() -> int:
    """Return the number of cores that this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def render(
    scene: Scene,
    where: str,
    settings: Settings,
    progress: Progress = silent,
    data: bool = False,
    preview: Callable[[Developed], None] | None = None,
    stokes: bool = False,
    only: str | None = None,
) -> Result:
    """Render a scene.

    Parameters
    ----------
    scene : Scene
        Checked description.
    where : str
        Name of its file, for faults and the report.
    settings : Settings
        Quality, seed, threads.
    progress : callable
        Told what goes on.
    data : bool
        Whether the whole radiance will be asked for; counts towards memory.
    preview : callable, optional
        Given a developed picture after the first round of a long job.
    stokes : bool
        Whether polarisation will be asked for; a film then holds four times as much.
    only : str, optional
        Name of the arc whose light alone is shown, without background, at the exposure of the whole picture and from the
        same rays; "other" for all light that has no name. The whole picture is traced first, or taken from the store.

    Returns
    -------
    Result

    Raises
    ------
    SceneError
        If the physics refuses a value.
    ResourceError
        If it would take too much memory.
    """
    start = time.perf_counter()
    if only is not None:
        told_apart(only)
    job = build(scene, where, stokes)
    memory.check(memory.predict(job, settings.threads, data, only is not None))
    picture = scene.picture
    exposure_ev = exposure_asked(scene, where)
    white = neutral(job, picture)
    with ThreadPoolExecutor(settings.threads) as threads, _tracers(settings, threads) as tracers:
        try:
            sheets, traced, works, parted = scatter_all(job, settings.sampling, tracers, progress)
            mirror = reflection(job, settings.sampling, tracers, progress)
            before = [work.film.traced_rays for work in works]

            def now() -> tuple[Float32Array, Developed]:
                seen = through_the_eye(job, sheets, tristimulus(job, sheets, picture.observer, threads), picture)
                return seen, develop(seen, exposure_ev, white, picture.metering)

            xyz, developed, noise, parts = None, None, None, []
            if works:

                def measure() -> list[float]:
                    nonlocal xyz, developed, noise
                    xyz, developed = now()
                    parts, noise = expose.lightness_error(works, job, xyz[..., 1], developed.exposure_ev)
                    return parts

                def show() -> None:
                    if preview is not None:
                        preview(now()[1])

                parts = expose.trace(works, settings.sampling, tracers, measure, progress, show)
            traced_at = time.perf_counter()
            if mirror is not None:
                for work, other in zip(works, mirror.works, strict=True):
                    expose.follow(other, work.film.rounds, tracers, progress)
            if xyz is None or developed is None or mirror is not None:
                xyz = tristimulus(job, sheets, picture.observer, threads, progress, mirror)
                xyz = through_the_eye(job, sheets, xyz, picture)
                developed = develop(xyz, exposure_ev, white, picture.metering)
            if only is not None:
                mirror = None
                sheets = _only(only, job, settings.sampling, sheets, parted, tracers, progress)
                job = replace(job, background=Background(0.0, 0.0, len(job.bins)))
                xyz = tristimulus(job, sheets, picture.observer, threads, progress)
                alike = developed.exposure_ev, developed.white
                developed = replace(develop(xyz, *alike), automatic=developed.automatic)
                noise = None
        except BaseException:
            threads.shutdown(wait=True, cancel_futures=True)
            raise
    traced += [work.summary(rays) for work, rays in zip(works, before, strict=True)]
    about = report(scene, where, settings, job, traced, developed, xyz)
    if only is not None:
        about["only"] = only
        what = {OTHER: "light of no named arc", FURTHER: "light that met two crystals or more"}
        about["look_for"] = f"one part of the light alone: {what.get(only) or feature(only).title}"
    if works:
        about["lightness_error"] = float(np.sqrt(sum(part**2 for part in parts)))
        about["lightness_error_target"] = settings.sampling.target if settings.rays is None else None
    about["seconds"] = {"trace": round(traced_at - start, 3), "look": round(time.perf_counter() - traced_at, 3)}
    return Result(job, sheets, xyz, developed, about, noise, parted, mirror)


@contextmanager
def _tracers(settings: Settings, threads: Executor) -> Iterator[Executor]:
    """Give what traces: the threads, or processes of their own."""
    if settings.processes <= 1:
        yield threads
        return
    context = multiprocessing.get_context("spawn")
    # Ctrl-C goes to the whole group: the parent alone answers it, workers end when it shuts them down
    ignore = (signal.SIGINT, signal.SIG_IGN)
    with ProcessPoolExecutor(settings.processes, context, signal.signal, ignore) as processes:
        try:
            yield processes
        except BaseException:
            processes.shutdown(wait=True, cancel_futures=True)
            raise


def told_apart(name: str) -> None:
    """Make sure that a name is one whose light is kept apart.

    Raises
    ------
    DomainError
        With the nearest name, or why it is not.
    """
    if name in (OTHER, FURTHER):
        return
    if feature(name).scatterings > 1:
        raise DomainError(f"{name} is made by light that met two crystals: ask for {FURTHER}, all such light together")


def _only(
    only: str,
    job: Job,
    sampling: Sampling,
    sheets: list[Sheet],
    parted: list[Parted],
    executor: Executor,
    progress: Progress,
) -> list[Sheet]:
    """Return sheets with the light of one name alone, traced as far as the whole was."""
    result = [sheet for sheet in sheets if sheet.name == FURTHER and only == FURTHER]
    for sheet, described in zip(
        sheets, job.sheets, strict=False
    ):  # further scatterings come last, without a description
        own = [part for part in parted if part.sheet is described]
        if not own:
            if only == OTHER:
                result.append(sheet)
            continue
        scatterers: list[Scatterer] = []
        for part in own:
            if only not in part.names:
                scatterers = []
                break
            if part.work is None:
                scatterers.append(part.scatterer([only]))
                continue
            work = expose.begin(part.sheet, job, sampling.seed, part.source, part.copy, only)
            expose.follow(work, part.work.film.rounds, executor, progress)
            scatterers.append(work.scatterer())
        if scatterers:
            result.append(Sheet(sheet.name, tuple(scatterers), sheet.amount))
    return result


def scatter_all(
    job: Job, sampling: Sampling, executor: Executor, progress: Progress
) -> tuple[list[Sheet], list[Traced], list[expose.Work], list[Parted]]:
    """Return the sheets, how their tables were come by, the films that are still to be traced, and light by name."""
    sheets, traced, works = [], [], []
    parted: list[Parted] = []
    seen: list[str] = []
    scatterers: tuple[Scatterer, ...]
    for sheet in job.sheets:
        if is_table(sheet):
            table, how = find_table(sheet, job, sampling, executor, progress)
            first = axisymmetric(sheet, table, job.sources[0].disc)
            scatterers = tuple(first for _ in job.sources)  # a mirror image has the same disc
            traced.append(how)
            if isinstance(sheet, CrystalSheet):
                parted += [Parted(sheet, source, table=table) for source in job.sources]
        elif isinstance(sheet, DropSheet):
            found = [flat.find(sheet, job, source, sampling, executor, progress) for source in job.sources]
            scatterers = tuple(scatterer for scatterer, _ in found)
            traced += [how for _, how in found]
        else:
            alike = trace_key(index=sheet.index.key, **crystal_identity(sheet))
            copy = seen.count(alike)
            seen.append(alike)
            films = [expose.begin(sheet, job, sampling.seed, source, copy) for source in job.sources]
            scatterers = tuple(work.scatterer() for work in films)
            works += films
            parted += [
                Parted(sheet, source, work=work, copy=copy) for source, work in zip(job.sources, films, strict=True)
            ]
        sheets.append(Sheet(sheet.name, scatterers, sheet.amount))
    slab = further.slab_of(job)
    if slab:
        lights = [further.find(slab, job, source, sampling, executor, progress) for source in job.sources]
        traced += [how for _, how in lights]
        sheets.append(Sheet(FURTHER, tuple(light for light, _ in lights), partial(whole_amount, sheet=slab[0])))
    return sheets, traced, works, parted


def reflection(job: Job, sampling: Sampling, executor: Executor, progress: Progress) -> Mirror | None:
    """Return what calm water mirrors, its films still to be traced; None without water."""
    if job.water is None:
        return None
    other = mirrored(job)
    sheets, _, works, _ = scatter_all(other, sampling, executor, progress)
    return Mirror(other, sheets, works)


def whole_amount(
    azimuth: FloatArray, elevation: FloatArray, source: Source, sheet: CrystalSheet | None = None
) -> FloatArray:
    """Return the amount of light that comes with its amount in it: what is left of it on the way down."""
    fade = None if sheet is None else sheet.fade
    return np.ones((*np.shape(elevation), 1)) if fade is None else fade(azimuth, elevation, source)


def report(
    scene: Scene,
    where: str,
    settings: Settings,
    job: Job,
    traced: list[Traced],
    developed: Developed,
    xyz: Float32Array,
) -> dict[str, Any]:
    """Return what was asked, done and reached, in JSON types; no absolute path in it."""
    luminance = xyz[..., 1][np.isfinite(xyz[..., 1])]
    return {
        "skyoptics": skyoptics.__version__,
        "scene": os.path.basename(where),
        "title": scene.title,
        "author": scene.author,
        "licence": scene.licence,
        "scene_hash": scene_hash(scene),
        "seed": settings.seed,
        "quality": settings.quality,
        "width_px": job.directions.shape[1],
        "height_px": job.directions.shape[0],
        "wavelength_bins": len(job.bins),
        "exposure_ev": developed.exposure_ev,
        "exposure_automatic": developed.automatic,
        "camera": camera_settings(scene, luminance),
        "white": scene.picture.white,
        "white_kelvin": kelvin(scene.picture, developed),
        "glare": scene.picture.glare,
        "luminance_cd_m2": {
            "median": float(np.median(luminance)) if luminance.size else 0.0,
            "highest": float(luminance.max(initial=0.0)),
        },
        "rolled_off_share": developed.clipped,
        "out_of_gamut_share": developed.out_of_gamut,
        "traced_rays": sum(how.traced_rays for how in traced),
        "sheets": [how.summary() for how in traced],
        "look_for": scene.look_for or what_to_look_for(job),
        "cautions": cautions(job),
    }
