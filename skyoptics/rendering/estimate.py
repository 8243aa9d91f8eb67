"""What a render would take, without doing it."""

from __future__ import annotations

from typing import Any

from skyoptics.rendering import further, memory
from skyoptics.rendering.build import build
from skyoptics.rendering.clouds import CrystalSheet
from skyoptics.rendering.expose import LEAST_ROUNDS, begin
from skyoptics.rendering.run import Settings
from skyoptics.rendering.scatter import is_table, least_rays, table_key
from skyoptics.rendering.store import find
from skyoptics.scene.model import Scene

TABLE_RAYS_PER_SECOND = 5e6
"""Rays through a sphere, eleven orders each, one thread (measured on a 2-core machine of 2026)."""
FILM_RAYS_PER_SECOND = 5e6
"""Rays through crystals onto a picture, one thread (same machine)."""
LAYER_RAYS_PER_SECOND = 1.3e6
"""Rays of all orders through a slab, one thread (same machine); about three for each of the first order."""
VALUES_PER_SECOND = 1.2e7
"""Pixels times wavelengths looked up, one thread (same machine)."""
PIXELS_PER_SECOND = 1.0e6
"""Pixels developed and written (same machine)."""


def estimate(scene: Scene, where: str, settings: Settings, data: bool, stokes: bool = False) -> dict[str, Any]:
    """Return rays, memory and time of a render, JSON types.

    Parameters
    ----------
    scene : Scene
        Checked description.
    where : str
        Name of its file, for faults.
    settings : Settings
        Quality, seed, threads.
    data : bool
        Whether the radiance will be kept.
    stokes : bool
        Whether polarisation will be asked for.

    Returns
    -------
    dict
        `rays` still to trace at least (the noise target may ask for more; flattened drops are not counted), `tables`,
        `stored_tables`, `memory_bytes`,
        `seconds`.
    """
    job = build(scene, where, stokes)
    tables = [sheet for sheet in job.sheets if is_table(sheet)]
    stored = [find(table_key(sheet, job, settings.sampling)) is not None for sheet in tables]
    rays = sum(least_rays(sheet, job.bins) for sheet, found in zip(tables, stored, strict=True) if not found)
    pixels = job.directions.shape[0] * job.directions.shape[1]
    films = 0
    for sheet in job.sheets:
        if isinstance(sheet, CrystalSheet) and not is_table(sheet):
            for source in job.sources:
                film = begin(sheet, job, settings.seed, source).film
                wanted = settings.rays or LEAST_ROUNDS * int(film.rays.sum())
                films += max(0, wanted - film.traced_rays)
    slab = further.slab_of(job)
    layer = 0
    if slab and settings.rays is not None:
        layer = 3 * settings.rays * len(job.sources)
    elif slab:
        side = further.side_of(job.directions)
        cells = -(-job.directions.shape[0] // side) * -(-job.directions.shape[1] // side)
        layer = 3 * round(further.RAYS_PER_CELL[settings.quality] * cells * len(job.sources))
    values = pixels * len(job.bins) * max(len(job.sheets), 1) * (2 if data else 1)
    seconds = rays / TABLE_RAYS_PER_SECOND + films / FILM_RAYS_PER_SECOND + values / VALUES_PER_SECOND
    seconds += layer / LAYER_RAYS_PER_SECOND
    return {
        "rays": rays + films + layer,
        "tables": len(tables),
        "stored_tables": sum(stored),
        "memory_bytes": memory.predict(job, settings.threads, data),
        "seconds": round(seconds / settings.threads + pixels / PIXELS_PER_SECOND + 1.0, 1),
    }
