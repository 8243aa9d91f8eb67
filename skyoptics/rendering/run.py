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
from typing import Any, Literal

import numpy as np

import skyoptics
from skyoptics.camera import exposure, glare
from skyoptics.camera.frame import polariser
from skyoptics.colour import white as whites
from skyoptics.colour.develop import Developed, develop
from skyoptics.colour.observer import weights
from skyoptics.crystals.arcs import feature
from skyoptics.errors import DomainError, Fault, SceneError
from skyoptics.optics.source import Source
from skyoptics.rendering import expose, flat, further, memory
from skyoptics.rendering.build import DropSheet, Job, build
from skyoptics.rendering.caption import cautions, what_to_look_for
from skyoptics.rendering.clouds import CrystalSheet
from skyoptics.rendering.named import FURTHER, OTHER, Parted
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
from skyoptics.scene.model import Picture, Scene
from skyoptics.sky.compose import Background, Scatterer, Sheet, radiance
from skyoptics.sky.slab import vertical_cosine
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
    """

    job: Job
    sheets: list[Sheet]
    xyz: Float32Array
    developed: Developed
    report: dict[str, Any]
    noise: FloatArray | None = None
    parted: list[Parted] = field(default_factory=list)


def usable_cores() -> int:
    """Return the number of cores that this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def blocks(shape: tuple[int, int]) -> Iterator[slice]:
    """Yield slices of rows that hold about `memory.BLOCK` pixels each, the same for any number of threads."""
    step = max(1, memory.BLOCK // shape[1])
    for start in range(0, shape[0], step):
        yield slice(start, min(start + step, shape[0]))


def look(
    job: Job, sheets: list[Sheet], executor: Executor | None, progress: Progress = silent
) -> Iterator[tuple[slice, FloatArray]]:
    """Yield the radiance of the picture block by block, in order.

    Parameters
    ----------
    job : Job
        What to look at.
    sheets : list of Sheet
        From `skyoptics.rendering.scatter.scatter`.
    executor : Executor or None
        Looks ahead; None works in this thread.
    progress : callable
        Told about rows.

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
        return radiance(job.directions, rows, job.sources, sheets, job.background, axis, job.cover)

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
            if xyz is None or developed is None:
                xyz = tristimulus(job, sheets, picture.observer, threads, progress)
                xyz = through_the_eye(job, sheets, xyz, picture)
                developed = develop(xyz, exposure_ev, white, picture.metering)
            if only is not None:
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
    return Result(job, sheets, xyz, developed, about, noise, parted)


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
        sheets.append(Sheet(FURTHER, tuple(light for light, _ in lights), whole_amount))
    return sheets, traced, works, parted


def whole_amount(elevation: FloatArray, source: Source) -> FloatArray:
    """Return 1: the amount of light that comes with its amount in it."""
    return np.ones(np.shape(elevation))


def tristimulus(
    job: Job, sheets: list[Sheet], observer: Any, executor: Executor | None, progress: Progress = silent
) -> Float32Array:
    """Return the picture's XYZ, shape (ny, nx, 3) [cd m⁻²]."""
    matrix = weights(job.bins, observer)
    xyz = np.empty((*job.directions.shape, 3), dtype=np.float32)
    for rows, block in look(job, sheets, executor, progress):
        xyz[rows] = block @ matrix
    return xyz


def exposure_asked(scene: Scene, where: str) -> float | None:
    """Return the exposure value that a scene fixes, by itself or by the camera's settings; None if it is metered.

    Raises
    ------
    SceneError
        If two keys would fix it.
    """
    camera, picture = scene.camera, scene.picture
    try:
        return exposure.chosen(
            picture.exposure_ev, camera.aperture, camera.exposure_s, camera.iso, picture.metering != "sky"
        )
    except DomainError as error:
        key = "metering" if picture.exposure_ev is None else "exposure_ev"
        raise SceneError([Fault(where, None, f"picture.{key}", str(error))]) from error


def neutral(job: Job, picture: Picture) -> FloatArray | Literal["auto"] | None:
    """Return XYZ of what is to look neutral, "auto" to find it in the picture, None for the display's white."""
    if picture.white_kelvin is not None:
        return whites.white(picture.white_kelvin)
    match picture.white:
        case "light":
            return np.asarray(job.sources[0].irradiance @ weights(job.bins, picture.observer))
        case "daylight":
            return whites.white(whites.DAYLIGHT_KELVIN)
        case "auto":
            return "auto"
        case _:
            return None


def through_the_eye(job: Job, sheets: list[Sheet], xyz: Float32Array, picture: Picture) -> Float32Array:
    """Return the picture with sun or moon drawn and bright things spread, where the scene asks for it.

    What stands outside the picture gives no glare, as behind a lens hood; nor does what a disc is held over. A body across the
    horizon is cut there, and then spread by pixels with all the rest.
    """
    spreads = picture.glare == "eye"
    drawn = spreads if picture.show_sun is None else picture.show_sun
    if not (spreads or drawn):
        return xyz
    size = job.directions.pixel_size()
    if spreads:
        xyz = glare.spread(xyz, float(np.median(size)))
    if not drawn:
        return xyz
    rows, columns = job.directions.shape
    for number, source in enumerate(job.sources):
        row, column = job.directions.project(source.direction)
        if not (np.isfinite(row) and np.isfinite(column)) or (number == 0 and job.cover > 0.0):
            continue
        place = int(np.clip(np.rint(row), 0, rows - 1)), int(np.clip(np.rint(column), 0, columns - 1))
        # A point is drawn as wide as a pixel.
        radius = source.disc.radius or 0.5 * float(size[place])
        reach = 0.5 + radius / float(size[place])
        if not (-reach < row < rows - 1 + reach and -reach < column < columns - 1 + reach):
            continue
        irradiance = source.irradiance * _straight_through(job, sheets, number)
        if job.polariser is not None:
            axis = 2.0 * polariser(job.directions, job.polariser, slice(place[0], place[0] + 1))[0, place[1]]
            _, q, u, _ = source.stokes.T
            irradiance = irradiance * 0.5 * (1.0 + q * np.cos(axis) + u * np.sin(axis))
        mean = weights(job.bins, picture.observer) * (irradiance / (np.pi * radius**2))[:, None]
        brightness = mean.T @ source.disc.darkening
        cut = abs(float(source.direction[2])) < np.sin(radius)
        upper = (number == 0) if cut else None
        layer = np.zeros_like(xyz) if spreads and cut else xyz
        for part in blocks(job.directions.shape):
            glare.add_disc(
                layer[part],
                job.directions,
                part,
                size[part],
                source.direction,
                radius,
                brightness,
                spreads and not cut,
                upper,
            )
        if layer is not xyz:
            layer[~np.isfinite(xyz)] = np.nan
            xyz = xyz + glare.spread(layer, float(np.median(size)))
    return xyz


def _straight_through(job: Job, sheets: list[Sheet], number: int) -> FloatArray:
    """Return the share of a source's light, shape (nλ,), that comes straight through everything in the air.

    Diffraction turns light by no more than a fraction of a degree; where the phase function leaves it out, half the
    extinction, it counts as not turned at all.
    """
    source = job.sources[number]
    elevation = np.arcsin(np.clip(source.direction[2:], -1.0, 1.0))
    depth = np.zeros(len(job.bins))
    for described, sheet in zip(
        job.sheets, sheets, strict=False
    ):  # further scatterings come last, without a description
        scatterer = sheet.scatterers[number]
        if isinstance(described, CrystalSheet):
            diffracted = described.imperfections.diffraction
        else:
            share = getattr(scatterer, "share", np.zeros(1))
            diffracted = float(np.mean(share)) > 0.75 * float(np.mean(scatterer.extinction(np.ones(1))))
        if isinstance(described, CrystalSheet) and described.scatterings:
            amount = described.optical_depth / vertical_cosine(elevation)
        else:
            amount = sheet.amount(elevation, source)
        extinction = scatterer.extinction(np.abs(source.direction[2:])) * amount[:, None]
        depth += (1.0 if diffracted else 0.5) * extinction[0]
    return np.asarray(np.exp(-depth))


def _kelvin(picture: Picture, developed: Developed) -> float | None:
    """Return the colour temperature made neutral; None where a spectrum, or nothing, was."""
    if developed.white is None or picture.white == "light":
        return None
    return picture.white_kelvin or round(whites.temperature(developed.white))


def _camera(scene: Scene, luminance: Float32Array) -> dict[str, Any] | None:
    """Return what the camera's settings do to a picture's luminance; None without settings."""
    aperture, seconds, iso = scene.camera.aperture, scene.camera.exposure_s, scene.camera.iso
    if aperture is None or seconds is None or iso is None:
        return None
    full = exposure.saturation_luminance(aperture, seconds, iso)
    median = float(np.median(luminance)) if luminance.size else 0.0
    return {
        "aperture": aperture,
        "exposure_s": seconds,
        "iso": iso,
        "median_exposure_lx_s": float(exposure.focal_plane_exposure(median, aperture, seconds)),
        "saturation_cd_m2": full,
        "saturated_share": float(np.mean(luminance > full)) if luminance.size else 0.0,
    }


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
        "scene_hash": scene_hash(scene),
        "seed": settings.seed,
        "quality": settings.quality,
        "width_px": job.directions.shape[1],
        "height_px": job.directions.shape[0],
        "wavelength_bins": len(job.bins),
        "exposure_ev": developed.exposure_ev,
        "exposure_automatic": developed.automatic,
        "camera": _camera(scene, luminance),
        "white": scene.picture.white,
        "white_kelvin": _kelvin(scene.picture, developed),
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
