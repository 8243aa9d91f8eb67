"""What a picture shows, as plain facts for captions and alt texts: light, features seen, particles, liberties taken.

The facts are JSON types and go into the report under ``shows``; words are made of them elsewhere, in any language.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.optics import bows
from skyoptics.rendering.build import Job
from skyoptics.rendering.features import WAVELENGTH, framed
from skyoptics.rendering.labels import labels_by_name
from skyoptics.rendering.rain import DropSheet
from skyoptics.rendering.run import Result
from skyoptics.scene.model import Drops, Scene
from skyoptics.scene.particles import ORDERS, Crystals
from skyoptics.units import DEG

DIM = 1.0
"""Median luminance below which the eye itself sees little colour [cd m⁻²] (mesopic vision: CIE 191:2010, from memory)."""
TONED_DOWN = 0.005
"""Share of rolled-off pixels from which it is said."""
BEYOND = 0.02
"""Share of colours outside the display's gamut from which it is said."""
FEW = 6
"""Wavelengths of their own, up to which they are listed."""
PLATE, COLUMN = 0.8, 1.25
"""Length ÷ diameter up to which a prism is a plate, and from which it is a column."""


def shows(result: Result, scene: Scene) -> dict[str, Any]:
    """Return the facts of a picture.

    Parameters
    ----------
    result : Result
        From `skyoptics.rendering.run.render`.
    scene : Scene
        What was asked.

    Returns
    -------
    dict
        `light` (body, elevation_deg, azimuth_deg, where: "behind", "inside" or "outside" the picture, and place), `seen`
        (names of features, the strongest first), `angles_deg` (of bows, from the antisolar point), `only`, `particles`,
        `background` and `unlike` (what differs from nature: key of the words and values).
    """
    job = result.job
    only = result.report.get("only")
    seen = [only] if only else list(labels_by_name(result))
    return {
        "light": _light(job, scene),
        "seen": seen,
        "angles_deg": _angles(job, seen),
        "only": only,
        "particles": [_drops(one, job) if isinstance(one, Drops) else _crystals(one) for one in scene.air],
        "background": scene.picture.sky,
        "unlike": _unlike(result, scene),
    }


def _light(job: Job, scene: Scene) -> dict[str, Any]:
    source = job.sources[0].direction
    azimuth, elevation = (float(angle) / DEG for angle in azimuth_elevation(source))
    rows, columns = job.directions.shape
    middle = job.directions.unproject(np.array((rows - 1) / 2.0), np.array((columns - 1) / 2.0))
    where = "inside" if framed(job.directions, source) else "behind" if float(middle @ source) < 0.0 else "outside"
    place = None
    if scene.light.latitude_deg is not None and scene.light.when is not None:
        place = {
            "latitude_deg": scene.light.latitude_deg,
            "longitude_deg": scene.light.longitude_deg,
            "time": scene.light.when.isoformat(timespec="minutes"),
        }
    return {
        "body": "moon" if job.by_moon else "sun",
        "elevation_deg": round(elevation, 2),
        "azimuth_deg": round(azimuth % 360.0, 2) % 360.0,
        "where": where,
        "place": place,
    }


def _angles(job: Job, seen: list[str]) -> dict[str, float]:
    """Return the closed-form angles of the bows seen from the antisolar point, where waves do not move them far."""
    orders = {"primary_bow": 2, "moonbow": 2, "secondary_bow": 3}
    found = {}
    for name in seen:
        for sheet in job.sheets:
            if name in orders and isinstance(sheet, DropSheet) and orders[name] in sheet.orders and name not in found:
                index = float(np.atleast_1d(sheet.index(np.array([WAVELENGTH])))[0].real)
                angle = np.pi - float(bows.scattering_angle(index, orders[name]))
                if np.isfinite(angle):
                    found[name] = round(angle / DEG, 2)
    return found


def _drops(drops: Drops, job: Job) -> dict[str, Any]:
    name = drops.name or drops.kind
    radii = [s.radius for s in job.sheets if isinstance(s, DropSheet) and s.name == name]
    about_radius = drops.sizes in ("gaussian", "lognormal")
    return {
        "kind": "drops",
        "radius_um": drops.radius_um if about_radius or not radii else round(radii[0] * 1e6, 3),
        "spread": drops.spread if about_radius else None,
        "flattened": drops.axis_ratios != "round",
    }


def _crystals(crystals: Crystals) -> dict[str, Any]:
    aspect = None if crystals.shape == "bipyramid" else crystals.aspect
    habit: str = crystals.shape
    if habit == "prism":
        ratio = 1.0 if aspect is None else aspect
        habit = "plates" if ratio <= PLATE else "columns" if ratio >= COLUMN else "prisms"
    tilted = crystals.orientation != "random"
    return {
        "kind": "crystals",
        "habit": habit,
        "aspect": aspect,
        "diameter_um": crystals.diameter_um,
        "orientation": crystals.orientation,
        "tilt_law": crystals.tilt_law if tilted else None,
        "tilt_deg": crystals.tilt_deg if tilted and crystals.tilt_law != "table" else None,
    }


def _unlike(result: Result, scene: Scene) -> list[dict[str, Any]]:
    """Return in what a picture differs from nature, what changes it most first."""
    job, picture = result.job, scene.picture
    found: list[dict[str, Any]] = []

    def say(key: str, **values: Any) -> None:
        found.append({"key": key, **values})

    inside = bool(framed(job.directions, job.sources[0].direction))
    drawn = picture.glare == "eye" if picture.show_sun is None else picture.show_sun
    if inside and job.cover > 0.0:
        say("covered", radius=job.cover / DEG)
    elif inside and (not drawn or result.report.get("only")):
        say("left_out")
    if picture.wavelengths_nm is not None and len(picture.wavelengths_nm) <= FEW:
        say("wavelengths", wavelengths_nm=list(picture.wavelengths_nm))
    if scene.light.disc == "point":
        say("point")
    if scene.light.attenuation == "none":
        say("air")
    median = result.report["luminance_cd_m2"]["median"]
    if median < DIM and picture.observer != "scotopic" and not result.report.get("only"):
        say("dim")
    if job.polariser is not None:
        say("polariser", angle=job.polariser / DEG)
    drops = [one for one in scene.air if isinstance(one, Drops)]
    for one in drops:
        if tuple(one.orders) != ORDERS:
            say("orders", orders=list(one.orders))
            break
    by_waves = [sheet for sheet in result.report["sheets"] if str(sheet.get("method", "rays")) != "rays"]
    if drops and not by_waves:
        say("rays")
    elif any(one.sizes == "gaussian" and one.spread == 0.0 for one in drops):
        say("one_size")
    if result.report["rolled_off_share"] >= TONED_DOWN:
        say("toned_down", share=100.0 * result.report["rolled_off_share"])
    if result.report["out_of_gamut_share"] >= BEYOND:
        say("gamut", share=100.0 * result.report["out_of_gamut_share"])
    return found
