"""What to look for in a picture, worked out from its physics, and the cautions that go with it."""

from __future__ import annotations

import numpy as np

from skyoptics.geometry.axes import angle_between, azimuth_elevation
from skyoptics.optics import bows
from skyoptics.rendering.build import DropSheet, Job
from skyoptics.units import DEG

_NAMES = {2: "primary", 3: "secondary"}
SUN_CAUTION = (
    "The sun stands in or near this frame. Never look at it through an optical viewfinder, binocular or telescope; hide "
    "it behind a fixed object, keep a lens on it only as long as an exposure takes. Filters to ISO 12312-2 are for looking "
    "without optics."
)
SHOWER_CAUTION = (
    "Showers bring lightning: when you hear thunder, go indoors and wait 30 minutes after the last clap, as national "
    "weather services advise. Stop off the road, keep back from edges and water; local rules come first."
)


def what_to_look_for(job: Job) -> str:
    """Return one sentence on what a picture shows and where.

    Parameters
    ----------
    job : Job
        The scene as physics.
    """
    azimuth, elevation = azimuth_elevation(-job.sources[0].direction)
    middle = job.bins.edges[np.argmin(np.abs(job.bins.centre - 600e-9))].mean()
    found = []
    for sheet in (sheet for sheet in job.sheets if isinstance(sheet, DropSheet)):
        for order in (p for p in sheet.orders if p in _NAMES):
            angle = np.pi - float(bows.scattering_angle(sheet.index(middle).real, order))
            if not np.isfinite(angle):  # no bow of this order at this index
                continue
            top = float(elevation) + angle
            if top > 0.0 or job.directions.project(-job.sources[0].direction)[0] > 0.0:
                found.append(f"{_NAMES[order]} bow {angle / DEG:.1f}° from the antisolar point, its top {_height(top)}")
    if not found:
        return "light scattered by the particles over a plain background"
    return f"look towards azimuth {round(float(azimuth / DEG)) % 360}°: " + "; ".join(dict.fromkeys(found))


def cautions(job: Job) -> list[str]:
    """Return the cautions for whoever goes out to see this."""
    result = []
    if not job.by_moon and _sun_near_frame(job):
        result.append(SUN_CAUTION)
    if any(isinstance(sheet, DropSheet) for sheet in job.sheets):
        result.append(SHOWER_CAUTION)
    return result


def _height(elevation: float) -> str:
    if elevation >= 0.0:
        return f"{elevation / DEG:.1f}° high"
    return f"{-elevation / DEG:.1f}° below the horizon"


def _sun_near_frame(job: Job, margin: float = 15.0 * DEG) -> bool:
    """Return whether the sun stands in the frame or within a margin of a coarse grid over it."""
    rows, columns = job.directions.shape
    grid = job.directions.unproject(np.linspace(0, rows - 1, 25)[:, None], np.linspace(0, columns - 1, 25)[None, :])
    return bool(np.nanmin(angle_between(grid, job.sources[0].direction)) < margin)
