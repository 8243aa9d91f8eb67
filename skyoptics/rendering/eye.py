"""Between radiance and colour: exposure, white, glare and the sun's own disc, as the scene asks for them."""

from __future__ import annotations

from typing import Any, Literal

import numpy as np

from skyoptics.camera import exposure, glare
from skyoptics.camera.frame import polariser
from skyoptics.colour import white as whites
from skyoptics.colour.develop import Developed
from skyoptics.colour.observer import weights
from skyoptics.errors import DomainError, Fault, SceneError
from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.light.mirror import in_water
from skyoptics.materials import index as material
from skyoptics.optics.source import Source
from skyoptics.rendering.build import Job
from skyoptics.rendering.clouds import CrystalSheet
from skyoptics.rendering.memory import blocks
from skyoptics.scene.model import Picture, Scene
from skyoptics.sky.compose import Sheet
from skyoptics.sky.slab import vertical_cosine
from skyoptics.units import CELSIUS_ZERO, Float32Array, FloatArray


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
    for number, source in enumerate(_drawn(job)):
        if not _above_land(job, source):
            continue
        row, column = job.directions.project(source.direction)
        if not (np.isfinite(row) and np.isfinite(column)) or (number == 0 and job.cover > 0.0):
            continue
        place = int(np.clip(np.rint(row), 0, rows - 1)), int(np.clip(np.rint(column), 0, columns - 1))
        # A point is drawn as wide as a pixel.
        radius = source.disc.radius or 0.5 * float(size[place])
        reach = 0.5 + radius / float(size[place])
        if not (-reach < row < rows - 1 + reach and -reach < column < columns - 1 + reach):
            continue
        irradiance = source.irradiance * _straight_through(job, sheets, min(number, len(job.sources) - 1))
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


def _drawn(job: Job) -> tuple[Source, ...]:
    """Return the bodies to draw: what shines, and its image where water mirrors it."""
    first = job.sources[0]
    if job.water is None or len(job.sources) > 1 or first.direction[2] <= 0.0 or np.any(first.stokes[:, 1:]):
        return job.sources
    return first, in_water(first, material.water(CELSIUS_ZERO + 10.0)(job.bins.centre).real)


def _above_land(job: Job, source: Source) -> bool:
    """Return whether a body, or what water mirrors of it, stands clear of the land."""
    if job.land is None:
        return True
    azimuth, elevation = (float(angle) for angle in azimuth_elevation(source.direction))
    if elevation < 0.0 and job.water is None:
        return False
    return abs(elevation) > float(job.land.elevation(azimuth))


def _straight_through(job: Job, sheets: list[Sheet], number: int) -> FloatArray:
    """Return the share of a source's light, shape (nλ,), that comes straight through everything in the air.

    Diffraction turns light by no more than a fraction of a degree; where the phase function leaves it out, half the
    extinction, it counts as not turned at all.
    """
    source = job.sources[number]
    azimuth, elevation = (angle[None] for angle in azimuth_elevation(source.direction))
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
            amount = described.optical_depth / vertical_cosine(elevation)[:, None]
        else:
            amount = described.bare(azimuth, elevation, source)
        extinction = scatterer.extinction(np.abs(source.direction[2:])) * amount
        depth += (1.0 if diffracted else 0.5) * extinction[0]
    return np.asarray(np.exp(-depth))


def kelvin(picture: Picture, developed: Developed) -> float | None:
    """Return the colour temperature made neutral; None where a spectrum, or nothing, was."""
    if developed.white is None or picture.white == "light":
        return None
    return picture.white_kelvin or round(whites.temperature(developed.white))


def camera_settings(scene: Scene, luminance: Float32Array) -> dict[str, Any] | None:
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
