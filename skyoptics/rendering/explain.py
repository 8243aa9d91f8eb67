"""Why a spot of the sky is bright: shares of named arcs, kinds of crystals and paths in the light from one direction.

Rays are traced into a small square about the direction, born where they get there, and every one that arrives says by its
path what it is. Tables of randomly oriented crystals know their named halos already.
"""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from typing import Any

import numpy as np

from skyoptics.camera import frame
from skyoptics.colour.observer import weights
from skyoptics.crystals.arcs import feature
from skyoptics.crystals.sorting import Sorter, describe
from skyoptics.crystals.tracing import ExitList, trace_exits
from skyoptics.geometry.axes import angle_between, azimuth_elevation, direction
from skyoptics.geometry.directions import Directions
from skyoptics.optics.batches import in_order
from skyoptics.rendering import expose, further
from skyoptics.rendering.build import Job, build
from skyoptics.rendering.named import FURTHER, OTHER, Parted
from skyoptics.rendering.rain import DropSheet
from skyoptics.rendering.run import Settings, whole_amount
from skyoptics.rendering.scatter import Progress, axisymmetric, find_table, is_table, silent
from skyoptics.scene.model import Scene
from skyoptics.units import DEG, FloatArray

WIDTH = 0.5 * DEG
"""Side of the square that is looked at [rad]: as wide as the sun."""
WANTED = {"draft": 1000, "normal": 5000, "fine": 20000}
"""Rays that are to arrive from each kind of crystal, by quality."""
MOST_RAYS = {"draft": 2e7, "normal": 1e8, "fine": 4e8}
"""Rays of each kind of crystal at most."""
PATHS = 5
"""Paths that are named of each arc."""


def explain(
    scene: Scene, where: str, azimuth_deg: float, elevation_deg: float, settings: Settings, progress: Progress = silent
) -> dict[str, Any]:
    """Return what makes a direction bright.

    Parameters
    ----------
    scene : Scene
        Checked description; its camera's aim and size do not matter.
    where : str
        Name of its file, for faults.
    azimuth_deg, elevation_deg : float
        Viewing direction [°].
    settings : Settings
        Quality, seed, threads.
    progress : callable
        Told about batches.

    Returns
    -------
    dict
        JSON types: the direction, its distance from the source, luminance of all [cd m⁻²], and `shares`, brightest first:
        `arc`, `title`, `particles`, `share` of the luminance (all shares together 1), `error` (one standard error of the
        share) and the `paths` that make most of it, with their part of the arc's light.
    """
    job = build(scene, where)
    view = direction(azimuth_deg * DEG, elevation_deg * DEG)
    tangent = 2.0 * np.tan(WIDTH / 2.0)
    spot = frame.photograph(
        "rectilinear", 1.0, (tangent, tangent), (1, 1), frame.aim(azimuth_deg * DEG, elevation_deg * DEG, 0.0)
    )
    job = replace(job, directions=spot, polariser=None, stokes=False)
    azimuth, elevation = azimuth_elevation(spot.vectors())
    found: list[dict[str, Any]] = []
    with ThreadPoolExecutor(settings.threads) as executor:
        for sheet in job.sheets:
            for source in job.sources:
                amount = sheet.amount(azimuth, elevation, source)[0, 0]
                light = weights(job.bins)[:, 1] * source.irradiance * amount
                if not np.any(amount):
                    continue
                if is_table(sheet):
                    table, _ = find_table(sheet, job, settings.sampling, executor, progress)
                    if isinstance(sheet, DropSheet):
                        drops = axisymmetric(sheet, table, source.disc).phase(source, spot)[0, 0]
                        found.append(_entry(OTHER, sheet.name, float(drops @ light)))
                        continue
                    part = Parted(sheet, source, table=table)
                    for name in part.names:
                        seen = float(part.scatterer([name]).phase(source, spot)[0, 0] @ light)
                        found.append(_entry(name, sheet.name, seen))
                elif isinstance(sheet, DropSheet):
                    from skyoptics.rendering import flat

                    flattened, _ = flat.find(sheet, job, source, settings.sampling, executor, progress)
                    found.append(
                        _entry(OTHER, sheet.name, float(flattened.phase(source, spot, slice(None))[0, 0] @ light))
                    )
                else:
                    work = expose.begin(sheet, job, settings.seed, source)
                    found += _arrived(work, job, light, settings, executor, progress)
        slab = further.slab_of(job)
        for source in job.sources if slab else ():
            scatterer, _ = further.find(slab, whole_sky(job), source, settings.sampling, executor, progress, side=1)
            light = (
                weights(job.bins)[:, 1] * source.irradiance * whole_amount(azimuth, elevation, source, slab[0])[0, 0]
            )
            found.append(_entry(FURTHER, "crystals of the slab", float(scatterer.phase(source, spot)[0, 0] @ light)))
    background = job.background.radiance(spot.vectors())[0, 0] @ weights(job.bins)[:, 1]
    found.append(_entry("background", "", float(background)))
    total = sum(entry["luminance"] for entry in found)
    shares = [_share(entry, total) for entry in found if entry["luminance"] > 0.0]
    return {
        "azimuth_deg": azimuth_deg,
        "elevation_deg": elevation_deg,
        "from_source_deg": float(angle_between(job.sources[0].direction, view) / DEG),
        "luminance_cd_m2": total,
        "width_deg": WIDTH / DEG,
        "shares": sorted(shares, key=lambda entry: -entry["share"]),
    }


def whole_sky(job: Job) -> Job:
    """Return a job that looks at the whole sky in cells of 2°, onto which further scatterings are traced."""
    grid = Directions.cylindrical((90, 180), np.eye(3), (-np.pi, np.pi), (np.pi / 2.0, -np.pi / 2.0))
    return replace(job, directions=grid)


def _entry(arc: str, particles: str, luminance: float, error: float = 0.0, paths: Any = ()) -> dict[str, Any]:
    return {"arc": arc, "particles": particles, "luminance": luminance, "error": error, "paths": list(paths)}


def _share(entry: dict[str, Any], total: float) -> dict[str, Any]:
    arc = entry["arc"]
    plain = {
        OTHER: "light of no named arc",
        "background": "background",
        FURTHER: "light that met two crystals or more",
    }
    return {
        "arc": arc,
        "title": plain.get(arc) or feature(arc).title,
        "particles": entry["particles"],
        "share": entry["luminance"] / total,
        "error": entry["error"] / total,
        "paths": entry["paths"],
    }


def _arrived(
    work: expose.Work,
    job: Job,
    light: FloatArray,
    settings: Settings,
    executor: ThreadPoolExecutor,
    progress: Progress,
) -> list[dict[str, Any]]:
    """Trace until enough rays have arrived; return an entry for each name."""
    most = MOST_RAYS[settings.quality] if settings.rays is None else float(settings.rays)
    wanted = WANTED[settings.quality] if settings.rays is None else float("inf")
    solid = float(job.directions.solid_angle()[0, 0])
    names = work.sorter.names
    sums = np.zeros((len(names), 2))
    paths: dict[tuple[int, int], float] = {}
    batches = 0
    rays = int(work.film.rays.sum())
    while batches == 0 or (sums[:, 1].sum() < wanted and (batches + 1) * rays <= most):
        ahead = max(1, min(8, int(most // rays) - batches))
        tasks = [
            (prepared, settings.seed, k, int(work.film.rays[band]), work.packed)
            for k in range(batches, batches + ahead)
            for band, prepared in enumerate(work.prepared)
        ]
        for number, exits in enumerate(in_order(_exits, tasks, executor)):
            band = number % len(work.prepared)
            power = exits.stokes[:, 0].astype(np.float64) * light[band] / (2.0 * work.film.rays[band] * solid)
            sums[:, 0] += np.bincount(exits.group, power, len(names))
            sums[:, 1] += np.bincount(exits.group, minlength=len(names))
            for group, code, value in zip(exits.group.tolist(), exits.path.tolist(), power.tolist(), strict=True):
                paths[group, code] = paths.get((group, code), 0.0) + value
        batches += ahead
        progress(f"tracing {work.sheet.name}", int(min(sums[:, 1].sum(), 1e9)), int(min(wanted, 1e9)))
    result = []
    for group, name in enumerate(names):
        seen, arrived = sums[group]
        if arrived == 0.0:
            continue
        own = {code: value for (other, code), value in paths.items() if other == group}
        best = sorted(_by_faces(own, work.sorter).items(), key=lambda item: -item[1])[:PATHS]
        listed = [{"faces": faces, "part": value / seen} for faces, value in best]
        result.append(_entry(name, work.sheet.name, seen / batches, seen / batches / np.sqrt(arrived), listed))
    return result


def _by_faces(paths: dict[int, float], arcs: Sorter) -> dict[str, float]:
    """Return power by the numbers of the faces met, as in ``3-5``."""
    result: dict[str, float] = {}
    for code, value in paths.items():
        words = describe(arcs, code)
        result[words] = result.get(words, 0.0) + value
    return result


def _exits(prepared: Any, seed: int, k: int, rays: int, packed: Any) -> ExitList:
    exits, _ = trace_exits(prepared, seed, k, rays, directions=packed)
    return exits
