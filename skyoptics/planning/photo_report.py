"""Arcs on a photograph and measured circles, from question to files.

The report is of plain JSON types. A position goes into nothing that is written or printed unless it is asked for.
"""

from __future__ import annotations

import json
from collections.abc import Sequence
from contextlib import ExitStack
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any, Literal

import numpy as np

import skyoptics
from skyoptics.colour.images import replacing
from skyoptics.errors import DomainError, ResourceError
from skyoptics.geometry.axes import angle_between
from skyoptics.geometry.directions import Directions
from skyoptics.planning import cautions, photo_aim, photo_light, photo_marks, photograph
from skyoptics.planning.answers import Body
from skyoptics.planning.photo_circles import Measuring, measure
from skyoptics.planning.photo_points import Points, read_points
from skyoptics.units import DEG, FloatArray

PixelMark = tuple[float, float, float, float]


@dataclass(frozen=True)
class Asked:
    """What is known of a photograph and what is wanted.

    Parameters
    ----------
    photo : Path
        JPEG file.
    out : Path
        Folder for what is written.
    body : {"sun", "moon"}
        What lights the arcs.
    latitude, longitude, height_m, time, zone, sun_azimuth_deg, sun_elevation_deg :
        As for `photo_light.find`.
    aim : tuple of float or None
        Azimuth, elevation, roll [°].
    sun_pixel, antisolar_pixel : tuple of float or None
        x, y.
    marks : sequence of tuple of float
        x, y, azimuth, elevation [pixel, °].
    roll_deg : float or None
        Beside a single pixel; None for level.
    lens, focal_mm, sensor_mm, equivalent_mm :
        As for `photo_aim.grid` and `photo_aim.scale`.
    features : sequence of str
        To draw; empty for a choice by the aim.
    radius_deg : float or None
        As for `photo_marks.arcs`.
    points : Path or None
        CSV file of points to measure.
    measuring : Measuring
        How.
    keep_place, force : bool
        Whether the position may be written; whether files may be overwritten.
    """

    photo: Path
    out: Path
    body: Body = "sun"
    latitude: str | None = None
    longitude: str | None = None
    height_m: float | None = None
    time: str | None = None
    zone: str | None = None
    sun_azimuth_deg: float | None = None
    sun_elevation_deg: float | None = None
    aim: tuple[float, float, float] | None = None
    sun_pixel: tuple[float, float] | None = None
    antisolar_pixel: tuple[float, float] | None = None
    marks: Sequence[PixelMark] = ()
    roll_deg: float | None = None
    lens: str = "rectilinear"
    focal_mm: float | None = None
    sensor_mm: tuple[float, float] | None = None
    equivalent_mm: float | None = None
    features: Sequence[str] = ()
    radius_deg: float | None = None
    points: Path | None = None
    measuring: Measuring = field(default_factory=Measuring)
    keep_place: bool = False
    force: bool = False


def answer(asked: Asked) -> dict[str, Any]:
    """Do what is asked, write the files, and return the report.

    Raises
    ------
    SkyopticsError
        For a photograph or table that cannot be used, too little or contradicting knowledge, files that are there already.
    """
    photo = photograph.look(asked.photo)
    light = photo_light.find(
        photo.exif,
        asked.body,
        asked.latitude,
        asked.longitude,
        asked.height_m,
        asked.time,
        asked.zone,
        asked.sun_azimuth_deg,
        asked.sun_elevation_deg,
    )
    scale = photo_aim.scale(photo.shape, photo.exif, asked.focal_mm, asked.sensor_mm, asked.equivalent_mm)
    own = photo_aim.grid(asked.lens, scale.pixels, photo.shape)
    sun = photo_aim.unit(light.azimuth_deg, light.elevation_deg)
    pose = _pose(asked, own, light, 1.0 / scale.pixels)
    grid = photo_aim.turned(own, pose)
    names = tuple(asked.features) or photo_marks.default_names(grid, sun)
    arcs = photo_marks.arcs(grid, sun, names, asked.radius_deg, asked.body)
    groups = read_points(asked.points, photo.shape) if asked.points is not None else []
    measured = measure(groups, grid, sun, asked.measuring)
    files = _files(asked)
    notes = [*photo.exif.notes, *light.notes, *scale.notes, *pose.notes]
    if asked.body == "sun":
        corner = grid.unproject(np.array([-0.5]), np.array([-0.5]))[0]
        half = float(angle_between(corner, grid.rotation[2])) / DEG
        away = float(angle_between(sun, grid.rotation[2])) / DEG
        notes += [*cautions.for_aim(away, half)] if np.isfinite(half) else []
    if not asked.keep_place and light.place is not None:
        notes.append(
            "the position is in none of the files (--keep-place keeps it); time and the sun's height together still tell "
            "roughly where a picture was taken"
        )
    azimuth, elevation, roll = pose.angles_deg
    report: dict[str, Any] = {
        "photo": asked.photo.name,
        "size_px": [photo.shape[1], photo.shape[0]],
        "body": asked.body,
        "sun_azimuth_deg": light.azimuth_deg,
        "sun_elevation_deg": light.elevation_deg,
        "sun_from": light.source,
        "time": None if light.time is None else light.time.isoformat(timespec="seconds"),
        "camera": {
            "lens": asked.lens,
            "focal_px": scale.pixels,
            "focal_from": scale.source,
            "azimuth_deg": azimuth,
            "elevation_deg": elevation,
            "roll_deg": roll,
            "aim_from": pose.source,
            "residual_deg": None if pose.residual is None else pose.residual / DEG,
            "residual_px": None if pose.residual is None else pose.residual * scale.pixels,
        },
        "arcs": [
            {
                "name": arc.name,
                "title": arc.title,
                "radius_deg": arc.radius_deg,
                "exists": arc.exists,
                "in_picture": bool(len(arc.points)),
            }
            for arc in arcs
        ],
        "measured": measured.circles,
        "drops": measured.drops,
        "files": [path.name for path in files.values()],
        "notes": [*notes, *measured.notes],
        "software": f"skyoptics {skyoptics.__version__}",
    }
    if asked.keep_place and light.place is not None:
        report["place"] = {
            "latitude_deg": light.place.latitude_deg,
            "longitude_deg": light.place.longitude_deg,
            "height_m": light.place.height_m,
        }
    _write(asked, photo, grid, arcs, sun, groups, files, report)
    return report


def _pose(asked: Asked, own: Directions, light: photo_light.Light, pixel: float) -> photo_aim.Pose:
    """Return where the camera looked."""
    sun = photo_aim.unit(light.azimuth_deg, light.elevation_deg)
    known: list[tuple[str, tuple[float, float], FloatArray]] = []
    if asked.sun_pixel is not None:
        known.append(("--sun-pixel", asked.sun_pixel, sun))
    if asked.antisolar_pixel is not None:
        known.append(("--antisolar-pixel", asked.antisolar_pixel, -sun))
    single = len(known) == 1 and not asked.marks
    known += [("--mark", (x, y), photo_aim.unit(*there)) for x, y, *there in asked.marks]
    if asked.aim is not None:
        if known:
            raise DomainError(f"the aim is given twice: by --aim and by {known[0][0]}; leave out one of them")
        if asked.roll_deg is not None:
            raise DomainError("the roll is the third number of --aim; leave out --roll-deg")
        return photo_aim.by_aim(*asked.aim)
    if not known:
        raise DomainError(
            "where did the camera look? Give --aim AZ,EL,ROLL, or the pixel of the sun with --sun-pixel X,Y (of the shadow of "
            "your head: --antisolar-pixel), or two known directions with --mark X,Y,AZ,EL twice"
        )
    seen = [photo_aim.view(own, point, what) for what, point, _ in known]
    if single:
        opposite = asked.antisolar_pixel is not None
        azimuth, elevation = light.azimuth_deg * DEG, light.elevation_deg * DEG
        pose = photo_aim.by_pixel(
            seen[0],
            azimuth + np.pi if opposite else azimuth,
            -elevation if opposite else elevation,
            (asked.roll_deg or 0.0) * DEG,
            f"the point opposite the {asked.body}" if opposite else f"the {asked.body}",
        )
        level = "the camera is taken as level (roll 0°): give --roll-deg, or a --mark beside the pixel"
        return pose if asked.roll_deg is not None else replace(pose, notes=(level, *pose.notes))
    if asked.roll_deg is not None:
        raise DomainError("two known directions give the roll: leave out --roll-deg")
    if len(known) == 1:
        raise DomainError(
            "--mark is given once; it takes two known directions, or one beside --sun-pixel, to aim a camera"
        )
    return photo_aim.by_marks(seen, [vector for _, _, vector in known], pixel)


def _files(asked: Asked) -> dict[Literal["picture", "table", "report"], Path]:
    """Return what will be written, once nothing is in the way."""
    stem = asked.photo.stem
    files: dict[Literal["picture", "table", "report"], Path] = {
        "picture": asked.out / f"{stem}-arcs.jpg",
        "table": asked.out / f"{stem}-arcs.csv",
        "report": asked.out / f"{stem}-arcs.json",
    }
    there = asked.out
    while not there.exists() and there != there.parent:
        there = there.parent
    if not there.is_dir():
        raise ResourceError(f"cannot write into {asked.out}: {there} is a file; choose another folder with --out")
    taken = [path.name for path in files.values() if path.exists()]
    if taken and not asked.force:
        raise ResourceError(f"{', '.join(taken)}: there already in {asked.out}; choose another --out, or add --force")
    return files


def _write(
    asked: Asked,
    photo: photograph.Photograph,
    grid: Directions,
    arcs: Sequence[photo_marks.Arc],
    sun: FloatArray,
    groups: Sequence[Points],
    files: dict[Literal["picture", "table", "report"], Path],
    report: dict[str, Any],
) -> None:
    """Write all files or none."""
    picture = photograph.pixels(photo)
    points = np.concatenate([group.xy for group in groups]) if groups else None
    drawn = photo_marks.draw(picture, grid, arcs, sun, asked.body, points)
    try:
        asked.out.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise ResourceError(f"{asked.out}: cannot be made: {(error.strerror or 'unknown reason').lower()}") from None
    with ExitStack() as stack:
        part = {kind: stack.enter_context(replacing(path)) for kind, path in files.items()}
        report["notes"] += photograph.write_copy(photo, drawn, part["picture"], asked.keep_place)
        photo_marks.write_table(part["table"], arcs)
        part["report"].write_text(json.dumps(report, ensure_ascii=False, indent=2) + "\n", encoding="utf-8")
