"""What a render would take, without doing it."""

from __future__ import annotations

from typing import Any

from skyoptics.rendering import memory
from skyoptics.rendering.build import build
from skyoptics.rendering.run import Settings
from skyoptics.rendering.scatter import drop_key, least_rays
from skyoptics.rendering.store import find
from skyoptics.scene.model import Scene

RAYS_PER_SECOND = 2.5e6
"""Rays through a sphere, eleven orders each, one thread (measured, 2-core machine of 2026)."""
VALUES_PER_SECOND = 1.2e7
"""Pixels times wavelengths looked up, one thread (same machine)."""
PIXELS_PER_SECOND = 1.0e6
"""Pixels developed and written (same machine)."""


def estimate(scene: Scene, where: str, settings: Settings, data: bool) -> dict[str, Any]:
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

    Returns
    -------
    dict
        `rays` still to trace at least (the noise target may ask for more), `tables`, `stored_tables`, `memory_bytes`,
        `seconds`.
    """
    job = build(scene, where)
    stored = sum(find(drop_key(sheet, job, settings.quality, settings.seed)) is not None for sheet in job.sheets)
    rays = (len(job.sheets) - stored) * least_rays(job.bins)
    pixels = job.directions.shape[0] * job.directions.shape[1]
    values = pixels * len(job.bins) * max(len(job.sheets), 1) * (2 if data else 1)
    seconds = rays / RAYS_PER_SECOND + values / VALUES_PER_SECOND
    return {
        "rays": rays,
        "tables": len(job.sheets),
        "stored_tables": stored,
        "memory_bytes": memory.predict(job.directions.shape, job.bins, len(job.sheets), settings.threads, data),
        "seconds": round(seconds / settings.threads + pixels / PIXELS_PER_SECOND + 1.0, 1),
    }
