"""Tracing films round by round, until the noise that is displayed is low enough.

Noise of a picture: rms of one standard error of the displayed lightness (CIE 1976 L*, white = 100 %), exposure, roll-off and
background as shown, over the pixels that films light: those where their light is at least `LIT` of what is displayed (were
empty sky counted too, a small bright display would be called clean while it is not). `--quality` sets it; `MOST_RAYS` caps
the rays.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from functools import cached_property, partial
from math import ceil, sqrt
from typing import Any

import numpy as np

from skyoptics.colour.display import exposure_scale, roll_off
from skyoptics.colour.observer import weights
from skyoptics.crystals import guide
from skyoptics.crystals.orientations import relative_extinction
from skyoptics.crystals.prepared import Guide, Prepared
from skyoptics.crystals.sorting import Sorter, sorter
from skyoptics.crystals.tracing import coarse_shape, trace_groups, trace_plane
from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.kernels import KERNEL_HASH
from skyoptics.kernels.imperfect import TURN
from skyoptics.kernels.lanes import CHUNK
from skyoptics.light import spectrum
from skyoptics.optics.batches import in_order
from skyoptics.optics.bins import Bins
from skyoptics.optics.source import Source
from skyoptics.rendering import film as films
from skyoptics.rendering.build import Job
from skyoptics.rendering.clouds import CrystalSheet
from skyoptics.rendering.film import Film, FilmScatterer
from skyoptics.rendering.interrupts import deferred
from skyoptics.rendering.scatter import ICE_INDEX, Progress, Sampling, Traced, crystal_identity
from skyoptics.rendering.store import trace_key
from skyoptics.units import Float32Array, FloatArray

MOST_RAYS = {"draft": 1e9, "normal": 6e9, "fine": 3e10}
"""Most rays of all films of a picture together, by quality."""
LEAST_ROUNDS = 4
"""Rounds of every film at least, so that the scatter of batches tells the error."""
LIT = 0.02
"""Share of films in a pixel's luminance from which it counts."""
GROUP_CELLS = 128
"""Cells of the coarse grid of named arcs along the longer side of a picture."""
NO_NAME = -2
KEEP_EVERY = 8
"""Batches of all bins, in rounds, after which a film is stored while tracing goes on."""


@dataclass(frozen=True, eq=False)
class Work:
    """A film with all that its batches need."""

    sheet: CrystalSheet
    source: Source
    film: Film
    make: Callable[[], tuple[Prepared, ...]]
    packed: Float32Array
    seed: int
    sorter: Sorter
    side: int
    """Pixels along the side of a cell of named arcs; 0 where one name's light alone is traced."""
    only: int = -1
    """Number of the name whose light alone is kept; -1 for all, `NO_NAME` for none."""

    @cached_property
    def prepared(self) -> tuple[Prepared, ...]:
        """What the batches of each bin have in common, the guide into a narrow frame learnt; made when first asked for."""
        return self.make()

    def trace(
        self, rounds: int, executor: Executor | None, progress: Progress, pause: Callable[[], None]
    ) -> Iterator[int]:
        """Add what is missing up to a number of rounds; yield the round after each whole one.

        `pause` is called after each batch, where stopping is safe.
        """
        missing = list(self.film.missing(rounds))
        stokes = 4 if self.film.sums.ndim == 4 else 1
        more = (stokes, self.side, self.only)
        tasks = (
            (self.prepared[band], self.packed, self.seed, k, int(self.film.rays[band]), *more) for band, k in missing
        )
        ahead = 2 * getattr(executor, "_max_workers", 2)
        for (band, k), (plane, groups, tally) in zip(missing, in_order(_batch, tasks, executor, ahead), strict=True):
            self.film.add(band, plane, tally, groups)
            progress(f"tracing {self.sheet.name}", int(self.film.counts.sum()), rounds * len(self.film.rays))
            pause()
            if band == len(self.film.rays) - 1:
                yield k + 1

    def scatterer(self) -> FilmScatterer:
        """Return the film as a scatterer."""
        return FilmScatterer(self.film, partial(relative_extinction, self.sheet.shapes, self.sheet.orientation))

    def summary(self, rays_before: int) -> Traced:
        """Return how the film's light was come by."""
        tally = self.film.tally
        incident = max(tally.get("incident", 0.0), 1e-300)
        about: dict[str, Any] = {
            name: tally[name] / incident for name in ("scattered", "absorbed", "roulette") if name in tally
        }
        about |= {"rounds": self.film.rounds, "stored_rays": rays_before, "live_segments": tally.get("segments", 0.0)}
        total = self.film.traced_rays
        return Traced(self.sheet.name, self.film.key, rays_before > 0, total - rays_before, total, about)


def rays_by_bin(bins: Bins, pixels: int, multiple: int = 256) -> Any:
    """Return the rays of one batch of each bin, shape (nλ,): a figure of the scene, never of a clock.

    A batch grows with the picture, from 2¹⁴ to 2²⁰ rays, so that filling planes stays a small part of the work; bins that
    the eye hardly sees under the sun get fewer, down to an eighth; numbers are multiples of `multiple`.
    """
    seen = weights(bins).sum(axis=1) * spectrum.irradiance(bins)
    share = np.clip(seen / seen.max(), 0.125, 1.0) if seen.max() > 0.0 else np.ones(len(bins))
    batch = 1 << int(np.clip(ceil(np.log2(max(pixels, 1) / 6.0)), 14, 20))
    return (np.maximum(np.round(batch * share / multiple), 1) * multiple).astype(np.int64)


def begin(
    sheet: CrystalSheet,
    job: Job,
    seed: int,
    source: Source | None = None,
    copy: int = 0,
    only: str | None = None,
) -> Work:
    """Return the film of a sheet of crystals, from the store where it is there, and what its batches need.

    Parameters
    ----------
    sheet : CrystalSheet
        Crystals that stand in some way.
    job : Job
        Grid and bins; with `job.stokes` the film holds all four Stokes components.
    seed : int
        Of the random numbers.
    source : Source, optional
        What lights them; default the first of the job.
    copy : int, optional
        Number of the sheet among sheets of the same crystals, which need rays of their own.
    only : str, optional
        Name of the arc whose light alone is wanted, with the random numbers of the whole; "other" for what has no name.
    """
    source, bins, grid = source or job.sources[0], job.bins, job.directions
    packed = grid.packed()
    multiple = max(256, len(sheet.shapes) * (2 * TURN if sheet.imperfections.birefringence else CHUNK))
    rays = rays_by_bin(bins, grid.shape[0] * grid.shape[1], multiple)
    arcs = sorter_of(sheet, source)
    side = group_side(grid.shape)
    particles: dict[str, Any] = {
        **crystal_identity(sheet),
        "index": sheet.index.key,
        "source": source.direction,
        "seed": seed,
        "copy": copy,
    }
    key = trace_key(
        kind="crystals onto a picture",
        disc=np.append(source.disc.darkening.ravel(), source.disc.radius),
        directions=packed,
        stokes=np.append(source.stokes.ravel(), float(job.stokes)),
        guide=guide.parameters(),
        bins=bins.edges,
        rays=rays,
        kernels=KERNEL_HASH,
        names=[*arcs.names, side, only],
        **particles,
    )
    # films of different crystals draw different random numbers; a polariser or another frame does not change them
    stream = int(trace_key(kind="random numbers", **particles)[:15], 16)
    reference = weights(bins)[:, 1] * spectrum.irradiance(bins)
    if not reference.any():  # nothing that the eye sees: keep the error of all bins alike
        reference = np.ones(len(bins))

    def ready(row: int, edges: FloatArray, found: Guide | None = None) -> Prepared:
        return sheet.prepared(source, row, edges, row, found, arcs)

    def all_bins() -> tuple[Prepared, ...]:
        span = np.array([bins.edges.min(), bins.edges.max()])
        found = guide.learn(ready(len(bins) // 2, span), packed, stream)
        return tuple(ready(row, edges, found) for row, edges in enumerate(bins.edges))

    shape = (*grid.shape, 4) if job.stokes else grid.shape
    if only is None:
        blank = Film.blank(key, rays, reference, shape, arcs.names, coarse_shape(grid.shape, side))
        return Work(sheet, source, films.find(blank), all_bins, packed, stream, arcs, side)
    number = arcs.names.index(only) if only in arcs.names else NO_NAME
    found = films.find(Film.blank(key, rays, reference, shape))
    return Work(sheet, source, found, all_bins, packed, stream, arcs, 0, number)


def group_side(shape: tuple[int, int]) -> int:
    """Return the pixels along the side of a cell of named arcs, for a picture of rows and columns."""
    return -(-max(shape) // GROUP_CELLS)


def sorter_of(sheet: CrystalSheet, source: Source) -> Sorter:
    """Return what tells the named arcs of a sheet under a source apart."""
    elevation = float(np.arcsin(np.clip(source.direction[2], -1.0, 1.0)))
    orientation = sheet.orientation
    return sorter(sheet.shapes[0].face_normals, orientation.name, elevation, ICE_INDEX, orientation.spread)


def trace(
    works: Sequence[Work],
    sampling: Sampling,
    executor: Executor | None,
    noise: Callable[[], list[float]],
    progress: Progress,
    preview: Callable[[], None],
) -> list[float]:
    """Trace films until the displayed noise is low enough, and keep them.

    Parameters
    ----------
    works : sequence of Work
        The films; at least one.
    sampling : Sampling
        Target, or a number of rays a film.
    executor : Executor or None
        Runs the batches.
    noise : callable
        Returns the contribution of each film to the noise as now displayed: rms of lightness [1].
    progress, preview : callable
        Told about batches; called once when every film has its first round.

    Returns
    -------
    list of float
        The contributions at the end.
    """
    costs = [float(work.film.rays.sum()) for work in works]
    most = MOST_RAYS[sampling.quality] / len(works)
    if sampling.rays is not None:
        wanted = [max(2, ceil(sampling.rays / cost)) for cost in costs]
    else:
        wanted = [LEAST_ROUNDS] * len(works)
    try:
        if any(work.film.rounds < target for work, target in zip(works, wanted, strict=True)):
            _run(works, [1] * len(works), executor, progress)
            preview()
        while True:
            _run(works, wanted, executor, progress)
            parts = noise()
            if sampling.rays is not None or sqrt(sum(part**2 for part in parts)) <= sampling.target:
                return parts
            more = _share_out(parts, [work.film.rounds for work in works], costs, sampling.target, most)
            if more == [work.film.rounds for work in works]:
                return parts
            wanted = more
    finally:
        for work in works:
            if work.film.counts.sum() > work.film.reused:
                films.keep(work.film)


def follow(work: Work, rounds: int, executor: Executor | None, progress: Progress) -> None:
    """Bring one film to a number of rounds and keep it; nothing is traced for a name the sheet has no light of."""
    if work.only == NO_NAME:
        return
    try:
        _run([work], [rounds], executor, progress)
    finally:
        if work.film.counts.sum() > work.film.reused:
            films.keep(work.film)


def _run(works: Sequence[Work], wanted: Sequence[int], executor: Executor | None, progress: Progress) -> None:
    """Bring every film to its number of rounds, storing long ones on the way."""
    with deferred() as pause:
        for work, rounds in zip(works, wanted, strict=True):
            for done in work.trace(rounds, executor, progress, pause):
                if done % KEEP_EVERY == 0 and done < rounds:
                    films.keep(work.film)


def _share_out(parts: list[float], rounds: list[int], costs: list[float], target: float, most: float) -> list[int]:
    """Return rounds for each film that reach a target at the least cost, at most fourfold at once and capped.

    Film i contributes variance v_i / K_i, v_i = part² · rounds, at cost c_i K_i: the best K_i ∝ √(v_i / c_i).
    """
    weight = [part * sqrt(done) for part, done in zip(parts, rounds, strict=True)]
    total = sum(w * sqrt(cost) for w, cost in zip(weight, costs, strict=True))
    result = []
    for w, done, cost in zip(weight, rounds, costs, strict=True):
        best = ceil(1.03 * w / sqrt(cost) * total / target**2)
        result.append(max(done, min(max(best, done), 4 * done, int(most / cost))))
    return result


def lightness_error(
    works: Sequence[Work], job: Job, luminance: Float32Array, exposure_ev: float
) -> tuple[list[float], FloatArray]:
    """Return the noise of a picture.

    Parameters
    ----------
    works : sequence of Work
        Films.
    job : Job
        Light, amounts, grid.
    luminance : ndarray, shape (ny, nx)
        Displayed picture's luminance [cd m⁻²].
    exposure_ev : float
        As displayed.

    Returns
    -------
    parts : list of float
        Of each film: rms over the lit pixels of one standard error of displayed lightness [1].
    map : ndarray, shape (ny, nx)
        One standard error of displayed lightness, all films together [1]; nan outside the image.
    """
    scale = exposure_scale(exposure_ev)
    azimuth, elevation = (np.nan_to_num(angle) for angle in azimuth_elevation(job.directions.vectors()))
    solid = job.directions.solid_angle()
    eye = weights(job.bins)[:, 1] * (1.0 if job.polariser is None else 0.5)
    inside = np.isfinite(luminance)
    here = scale * np.nan_to_num(luminance.astype(np.float64))
    errors = []
    films_light = np.zeros(luminance.shape)
    for work in works:
        seen = eye * work.source.irradiance
        whole = work.sheet.amount(azimuth, elevation, work.source)
        grey = whole[..., 0] if whole.shape[-1] == 1 else whole @ (seen / seen.sum())
        amount = np.divide(
            grey * (scale * float(seen.sum() / work.film.reference.sum())),
            solid,
            out=np.zeros_like(solid),
            where=solid > 0.0,
        )
        light, variance = work.film.statistics()
        films_light += amount * light
        sigma = amount * np.sqrt(variance)
        errors.append(0.5 * (_lightness(here + sigma) - _lightness(np.maximum(here - sigma, 0.0))))
    lit = inside & (films_light > LIT * here)
    parts = [float(np.sqrt(np.mean(error[lit] ** 2))) if lit.any() else 0.0 for error in errors]
    return parts, np.where(inside, np.sqrt(sum(error**2 for error in errors)), np.nan)


def _lightness(level: FloatArray) -> FloatArray:
    """Return CIE 1976 lightness of exposed luminance (CIE 15), white = 1."""
    y = roll_off(level)
    return np.where(y > (6.0 / 29.0) ** 3, 1.16 * np.cbrt(y) - 0.16, y * (29.0 / 3.0) ** 3 / 100.0)


def _batch(
    prepared: Prepared, packed: Float32Array, seed: int, k: int, rays: int, stokes: int, side: int, only: int
) -> tuple[Float32Array, Any, dict[str, float]]:
    groups = None
    if side:
        plane, groups, tally = trace_groups(prepared, packed, seed, k, rays, side, stokes)
    else:
        plane, tally = trace_plane(prepared, packed, seed, k, rays, stokes, only=only)
    names = ("incident", "scattered", "absorbed", "roulette", "below_cutoff", "segments")
    return plane, groups, {name: float(getattr(tally, name)) for name in names}
