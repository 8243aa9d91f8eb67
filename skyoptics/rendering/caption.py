"""What to look for in a picture, worked out from its physics, and the cautions that go with it."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from skyoptics.crystals.arc_regions import circle_radius, parhelion_azimuth, tangent_join
from skyoptics.crystals.arcs import feature
from skyoptics.crystals.sorting import sorter
from skyoptics.geometry.axes import angle_between, azimuth_elevation
from skyoptics.optics import bows
from skyoptics.rendering.build import DropSheet, Job
from skyoptics.rendering.clouds import CrystalSheet
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
    halos = list(dict.fromkeys(_halos(job)))
    if not found and halos:
        sun = float(azimuth_elevation(job.sources[0].direction)[0] / DEG)
        body = "moon" if job.by_moon else "sun"
        return f"look around the {body}, azimuth {round(sun) % 360}°: " + "; ".join(halos)
    if not found:
        return "light scattered by the particles over a plain background"
    return f"look towards azimuth {round(float(azimuth / DEG)) % 360}°: " + "; ".join(dict.fromkeys(found))


def _halos(job: Job) -> Iterator[str]:
    """Yield the main halos of a job's crystals, from closed forms."""
    height = float(azimuth_elevation(job.sources[0].direction)[1])
    middle = job.bins.edges[np.argmin(np.abs(job.bins.centre - 600e-9))].mean()
    for sheet in (sheet for sheet in job.sheets if isinstance(sheet, CrystalSheet)):
        index = float(np.atleast_1d(sheet.index(middle).real)[0])
        law = sheet.orientation.name
        if law == "random":
            names = sorter(sheet.shapes[0].face_normals, law, height, index).names
            radii = [circle_radius(feature(name).crystals[0].sequences[0], index) / DEG for name in names[1:]]
            if radii:
                yield "circles of " + ", ".join(f"{radius:.1f}°" for radius in sorted(radii)) + " radius"
        elif law == "plate":
            away = parhelion_azimuth(height, index)
            if np.isfinite(away):
                yield f"sundogs at {away / DEG:.1f}° of azimuth on both sides, {_height(height)}"
            square = index**2 - np.cos(height) ** 2
            if height > 0.0 and square <= 1.0:
                yield f"circumzenithal arc {np.arcsin(np.sqrt(square)) / DEG:.1f}° high"
        elif law in ("column", "parry"):
            joined = height >= tangent_join(index)
            arc = "circumscribed halo" if joined else "tangent arcs above and below"
            yield f"{arc}, {circle_radius((3, 5), index) / DEG:.1f}° from it"


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
