"""From description to physics: the one place where a scene's words become SI numbers and arrays.

Nothing is traced here. Whatever the physics refuses is reported as a fault of the scene, with its key.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, replace
from typing import NamedTuple

import numpy as np

from skyoptics.camera import frame
from skyoptics.errors import DataFileError, DomainError, Fault, SceneError
from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.geometry.directions import Directions
from skyoptics.geometry.horizon import Profile
from skyoptics.light.air import MINIMUM_ELEVATION, Air
from skyoptics.light.disc import SUN_RADIUS
from skyoptics.light.mirror import in_water
from skyoptics.light.moon import RADIUS as MOON_RADIUS
from skyoptics.light.moon import moon, moonlight
from skyoptics.light.sun import sun
from skyoptics.materials import index as material
from skyoptics.optics.bins import Bins
from skyoptics.optics.source import Source
from skyoptics.rendering.clouds import CrystalSheet, crystal_sheet, hang
from skyoptics.rendering.landscape import ground_of, water_of
from skyoptics.rendering.rain import DropSheet, drop_sheet
from skyoptics.rendering.way import Surroundings, haze_of, put_in_place
from skyoptics.scene.model import Light, Scene
from skyoptics.scene.particles import Crystals, Drops
from skyoptics.sky.compose import Background, Behind
from skyoptics.sky.water import Water
from skyoptics.units import CELSIUS_ZERO, DEG, NM

DEFAULT_EDGES_NM = (380.0, 400.0, 415.0, *np.arange(430.0, 681.0, 10.0).tolist(), 695.0, 715.0, 740.0, 780.0)
"""Edges of the default bins [nm]: 10 nm where the eye sees well, wider at the ends."""
VISIBLE_NM = (380.0, 780.0)


@dataclass(frozen=True, eq=False)
class Job:
    """A scene as physics.

    Parameters
    ----------
    bins : Bins
        Wavelength axis.
    sources : tuple of Source
        What shines.
    sheets : tuple of DropSheet or CrystalSheet
        What scatters.
    directions : Directions
        The picture's pixels.
    background : Behind
        What lies behind.
    polariser : float or None
        Axis of a polariser on the lens, from the top of the picture, clockwise from behind the camera [rad].
    stokes : bool
        Whether all four Stokes components are wanted.
    by_moon : bool
        Whether the moon shines, at which one may look.
    cover : float
        Angular radius of a disc held over the source [rad].
    water : Water or None
        Calm water below the horizon, in which the rest is mirrored.
    land : Profile or None
        Outline of the land, where a scene has land of its own.
    """

    bins: Bins
    sources: tuple[Source, ...]
    sheets: tuple[DropSheet | CrystalSheet, ...]
    directions: Directions
    background: Behind
    polariser: float | None = None
    stokes: bool = False
    by_moon: bool = False
    cover: float = 0.0
    water: Water | None = None
    land: Profile | None = None


def build(scene: Scene, where: str, stokes: bool = False) -> Job:
    """Return the physics of a scene.

    Parameters
    ----------
    scene : Scene
        Checked description.
    where : str
        Name of its file, for faults.
    stokes : bool
        Whether all four Stokes components will be asked for; a polariser and water ask for them anyway.

    Returns
    -------
    Job

    Raises
    ------
    SceneError
        If the physics refuses a value, such as a wavelength outside the data of an index.
    """
    bins = spectral_bins(scene)
    with _blame(where, "light"):
        seen = placed(scene.light)
        sources = _sources(scene, seen, bins)
    sheets: list[DropSheet | CrystalSheet] = []
    crystals: list[tuple[int, CrystalSheet]] = []
    for number, particles in enumerate(scene.air, start=1):
        with _blame(where, f"air.{number}"):
            index = _index(particles, scene.medium.kind)
            index(bins.edges)  # asks for the whole range now, not in the middle of a job
            name = particles.name or f"{particles.kind} {number}"
            if isinstance(particles, Drops):
                sheets.append(drop_sheet(particles, name, index, scene.camera.eye_height))
            else:
                crystals.append((len(sheets), crystal_sheet(particles, name, index)))
                sheets.append(crystals[-1][1])
    with _blame(where, "mixture"):
        kinds = [particles for particles in scene.air if isinstance(particles, Crystals)]
        hung = hang([sheet for _, sheet in crystals], kinds, scene.mixture)
    for (place, _), sheet in zip(crystals, hung, strict=True):
        sheets[place] = sheet
    with _blame(where, "picture"):
        background = _behind(scene, seen, bins, sources[0])
    with _blame(where, "camera"):
        directions = _directions(scene, sources[0])
    air, eye_height = air_of(scene.light), scene.camera.eye_height
    haze = haze_of(air, scene.medium.visual_range)
    with _blame(where, "ground"):
        ground = ground_of(scene.ground, scene.picture.ground, eye_height, background, bins, sources, haze)
    with _blame(where, "air"):
        around = Surroundings(bins, sources, background, air, haze, eye_height, ground, _pixel(directions))
        background, sheets = put_in_place(sheets, around)
    with _blame(where, "ground"):
        water = water_of(scene.ground, eye_height, ground or background, bins, sources)
    return Job(
        bins,
        sources,
        tuple(sheets),
        directions,
        background,
        scene.camera.polariser,
        stokes or scene.camera.polariser is not None or water is not None,
        scene.light.body == "moon",
        scene.camera.cover,
        water,
        None if ground is None else ground.profile,
    )


def spectral_bins(scene: Scene) -> Bins:
    """Return the wavelength axis that a scene asks for."""
    picture = scene.picture
    if picture.wavelengths is not None:
        return Bins.lines(picture.wavelengths)
    if picture.bin_nm is not None:
        edges = np.arange(VISIBLE_NM[0], VISIBLE_NM[1] + 1e-6, picture.bin_nm)
        if edges[-1] < VISIBLE_NM[1] - 1e-6:
            edges = np.append(edges, VISIBLE_NM[1])
        return Bins.adjoining(edges * NM)
    return Bins.adjoining(np.array(DEFAULT_EDGES_NM) * NM)


def _sources(scene: Scene, seen: Placed, bins: Bins) -> tuple[Source, ...]:
    light = scene.light
    elevation, azimuth, phase_angle, radius = seen
    air = air_of(light)
    disc = light.disc != "point"
    if light.body == "moon":
        first = moon(elevation, azimuth, phase_angle, bins, air, disc)
    else:
        first = sun(elevation, azimuth, bins, air, disc)
    if radius is not None:  # nearer is larger, and brighter
        mean = MOON_RADIUS if light.body == "moon" else SUN_RADIUS
        first = replace(
            first,
            irradiance=first.irradiance * (radius / mean) ** 2,
            disc=replace(first.disc, radius=radius) if disc else first.disc,
        )
    if not light.mirrored:
        return (first,)
    water = material.water(CELSIUS_ZERO + 10.0, scene.medium.kind)(bins.edges.ravel()).real.reshape(-1, 2).mean(axis=1)
    return first, in_water(first, water)


def air_of(light: Light) -> Air | None:
    """Return the air that dims a light; None where none does."""
    return _air(light) if light.attenuation == "air" else None


def _air(light: Light) -> Air:
    return Air(
        pressure=light.pressure,
        ozone=light.ozone_du,
        aerosol_depth_550=light.aerosol_depth,
        aerosol_exponent=light.aerosol_exponent,
        water_vapour_cm=light.water_vapour_cm,
    )


def _behind(scene: Scene, seen: Placed, bins: Bins, source: Source) -> Behind:
    """Return what lies behind the particles."""
    picture = scene.picture
    if picture.sky == "plain":
        return Background(picture.background, picture.ground, len(bins))
    from skyoptics.sky.clear import ClearSky
    from skyoptics.sky.overcast import StandardSky
    from skyoptics.sky.reflectance import reflectance

    above = moonlight(seen.phase_angle) if scene.light.body == "moon" else None
    albedo = picture.ground
    if scene.ground is not None:
        surface = scene.ground.surface if scene.ground.water == "none" else scene.ground.water
        albedo = float(reflectance(surface, bins).mean())
    clear = ClearSky(bins, source.direction, _air(scene.light), albedo, above)
    if picture.sky == "clear":
        return clear
    falling = clear.diffuse + clear.direct
    return StandardSky.cloud(1, source.direction, falling, picture.cloud_depth, albedo)


class Placed(NamedTuple):
    """Where the sun or the moon is seen [rad]; radius None for the mean one."""

    elevation: float
    azimuth: float
    phase_angle: float
    radius: float | None


def placed(light: Light) -> Placed:
    """Return where the body of a light is seen.

    Raises
    ------
    DomainError
        If place and time are given and the body is below the horizon: the text says when it rises.
    """
    if light.elevation is not None:
        assert light.azimuth is not None
        return Placed(light.elevation, light.azimuth, light.phase_angle, None)
    from skyoptics.light import position, rising

    assert light.latitude_deg is not None
    assert light.longitude_deg is not None
    assert light.when is not None
    where = (
        light.latitude_deg,
        light.longitude_deg,
        light.when,
        light.height_m,
        light.pressure_hpa,
        light.temperature_c,
    )
    seen = position.moon(*where) if light.body == "moon" else position.sun(*where)
    if seen.elevation_deg * DEG < MINIMUM_ELEVATION:
        raise DomainError(rising.describe(light.body, *where))
    phase = getattr(seen, "phase_angle_deg", 0.0)
    return Placed(seen.elevation_deg * DEG, seen.azimuth_deg * DEG, phase * DEG, seen.angular_radius_deg * DEG)


def _index(particles: Drops | Crystals, medium: str) -> material.RefractiveIndex:
    if particles.index is not None:
        return material.constant(particles.index)
    if particles.index_table is not None:
        return material.tabulated(particles.index_table, medium)
    if isinstance(particles, Drops):
        return material.water(particles.temperature, medium)
    return material.ice(medium)


def _pixel(directions: Directions) -> float:
    """Return the size of a usual pixel [rad], from a few rows: the picture may be larger than memory."""
    rows = np.unique(np.linspace(0, directions.shape[0] - 1, 9).astype(int))
    sizes = np.concatenate([directions.pixel_size(slice(row, row + 1)) for row in rows])
    return float(np.nanmedian(sizes)) if np.any(np.isfinite(sizes)) else float(np.nanmax(directions.pixel_size()))


def _directions(scene: Scene, source: Source) -> Directions:
    camera = scene.camera
    if camera.aim == "sun":
        (azimuth, elevation), roll = azimuth_elevation(source.direction), 0.0
    elif camera.aim == "antisolar":
        (azimuth, elevation), roll = azimuth_elevation(-source.direction), 0.0
    else:
        azimuth, elevation, roll = np.asarray(camera.aim.azimuth), np.asarray(camera.aim.elevation), camera.aim.roll
    columns, rows = camera.pixels
    if camera.lens == "panorama":
        return frame.panorama(camera.width, camera.height, (rows, columns), float(azimuth), float(elevation), roll)
    rotation = frame.aim(float(azimuth), float(elevation), roll)
    return frame.photograph(camera.lens, camera.focal, camera.sensor, (rows, columns), rotation)


@contextmanager
def _blame(where: str, key: str) -> Iterator[None]:
    """Turn what the physics refuses into a fault of the scene."""
    try:
        yield
    except (DomainError, DataFileError) as error:
        raise SceneError([Fault(where, None, key, str(error))]) from error
