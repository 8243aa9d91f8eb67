"""A scene on paper: rendered at 300 dots an inch for its size, never scaled up, with margins, words and a bar of scale.

A small picture of the scene comes first. It is the ordinary render, so it settles exposure, white, caption and all tables; then
the large one is looked at part by part (`skyoptics.rendering.tiles`) and put on the sheet as it comes. What the eye spreads,
and the sun's own disc, need the whole picture: only there is it held in XYZ.

The file says how large it is (pHYs) and which colours it has: an ICC profile of sRGB (iCCP). By the PNG specification (W3C,
third edition, 2025, §11.3.2) that stands in place of an sRGB chunk.
"""

from __future__ import annotations

import json
import time
from collections.abc import Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skyoptics.camera import overlay
from skyoptics.colour import images, metadata
from skyoptics.colour.develop import Developed, develop
from skyoptics.colour.display import encode
from skyoptics.errors import ResourceError
from skyoptics.figures import print_sheet
from skyoptics.figures.print_sheet import DPI, Layout, Words, layout
from skyoptics.rendering import alt_text, caption, estimate, expose, features, memory, output, tiles
from skyoptics.rendering.build import Job, build
from skyoptics.rendering.eye import through_the_eye
from skyoptics.rendering.run import Settings, render
from skyoptics.rendering.scatter import Progress, Traced, silent
from skyoptics.scene.model import Picture, Scene
from skyoptics.units import DEG, Float32Array
from skyoptics.words.table import say

SMALL = 1600
"""Longest side of the picture that comes first [pixel]; the scene's own where that is shorter."""
_ROWS = 64
"""Rows developed at once."""
_DATE = slice(24, 36)
"""Where a profile says when it was made (ICC.1:2022, §7.2)."""
_FIRST_OF_2000 = b"\x07\xd0\x00\x01\x00\x01\x00\x00\x00\x00\x00\x00"


@dataclass(frozen=True, eq=False)
class Printed:
    """A sheet ready to be written.

    Parameters
    ----------
    sheet : ndarray of uint8, shape (rows, columns, 3)
        sRGB.
    place : Layout
        Where the picture stands on it.
    report : dict
        Of the small picture, with size, paper and what was traced for the large one; JSON types.
    note : str or None
        What is missing from the picture, in words.
    """

    sheet: NDArray[np.uint8]
    place: Layout
    report: dict[str, Any]
    note: str | None = None


def printed(
    scene: Scene, where: str, settings: Settings, paper: str, lang: str = "en", progress: Progress = silent
) -> Printed:
    """Render a scene for paper.

    Parameters
    ----------
    scene : Scene
        Checked description.
    where : str
        Name of its file, for faults and the report.
    settings : Settings
        Quality, seed, threads.
    paper : str
        Of `skyoptics.figures.print_sheet.PAPERS`.
    lang : str
        Language of caption and scale.
    progress : callable
        Told what goes on.

    Returns
    -------
    Printed

    Raises
    ------
    DomainError
        For an unknown paper, or letters that the font has not.
    SceneError
        If the physics refuses a value.
    ResourceError
        If it would take too much memory.
    """
    start = time.perf_counter()
    place = layout(paper, *scene.camera.pixels)
    print_sheet.check_words(scene.title, scene.author, scene.licence)
    first = small(scene)
    _check(_memory(build(first, where), scene.picture, settings, place))
    result = render(first, where, settings, progress)
    output.describe(result, first, lang)
    job = build(_sized(scene, place.picture[1], place.picture[0]), where)
    sheet = print_sheet.blank(place)
    picture = sheet[place.rows, place.columns]
    traced: list[Traced] = []
    held = np.empty((*place.picture, 3), dtype=np.float32) if _needs_all(scene.picture) else None
    with ThreadPoolExecutor(settings.threads) as threads:
        try:
            for rows, columns, xyz in tiles.lit(
                job, result, scene, settings.sampling, threads, threads, progress, traced
            ):
                if held is None:
                    _put(picture, rows, columns, xyz, result.developed)
                else:
                    held[rows, columns] = xyz
        except BaseException:
            threads.shutdown(wait=True, cancel_futures=True)
            raise
    if held is not None:
        held = through_the_eye(job, result.sheets, held, scene.picture)
        _put(picture, slice(0, place.picture[0]), slice(0, place.picture[1]), held, result.developed)
    report = result.report
    print_sheet.write(sheet, place, words(job, report, lang))
    report |= {"width_px": place.picture[1], "height_px": place.picture[0]}
    report["traced_rays"] += sum(how.traced_rays for how in traced)
    report["print"] = _facts(place) | {
        "tiles": len(tiles.divided(job, place.picture)),
        "sheets": [how.summary() for how in traced],
        "seconds": round(time.perf_counter() - start, 3),
    }
    return Printed(sheet, place, report, features.warning(result.job))


def words(job: Job, report: Mapping[str, Any], lang: str = "en") -> Words:
    """Return what stands below a picture: title, caption or, where there is no room, alt text; rights; bar of scale.

    Parameters
    ----------
    job : Job
        The scene at the size of the picture.
    report : mapping
        With caption and alt text in it.
    lang : str
        Language of the bar of scale and of "licence".
    """
    bar = overlay.angle_scale(job.directions)
    return Words(
        report.get("title") or "",
        (caption.write(report, lang), alt_text.write(report, lang)),
        "  ·  ".join(caption.rights(report, lang).splitlines()),
        None if bar is None else (bar.length, say("mark.scale", lang, angle=bar.angle / DEG)),
    )


def small(scene: Scene) -> Scene:
    """Return a scene with a picture of at most `SMALL` pixels along its longer side, of the same field."""
    columns, rows = scene.camera.pixels
    shrink = SMALL / max(columns, rows)
    if shrink >= 1.0:
        return scene
    return _sized(scene, max(1, round(shrink * columns)), max(1, round(shrink * rows)))


def files(folder: Path, name: str, paper: str) -> list[Path]:
    """Return the paths of a print's files: sheet, report, caption."""
    return [folder / f"{name}.{paper}.{ending}" for ending in ("png", "json", "caption.txt")]


def write(made: Printed, folder: Path, name: str, command: Sequence[str], lang: str = "en") -> list[Path]:
    """Write a sheet with its metadata, a report and a text beside it; files of the same names are replaced.

    Parameters
    ----------
    made : Printed
        From `printed`.
    folder : Path
        Where; it must exist (`skyoptics.rendering.output.prepare`).
    name : str
        Of the scene, safe already.
    command : sequence of str
        The command's words, kept as metadata.
    lang : str
        Language of the text.

    Returns
    -------
    list of Path
        The sheet first.
    """
    paths = files(folder, name, made.place.paper)
    entries = output.text_entries(made.report, command, lang)
    entries["Paper"] = f"{made.place.paper.upper()}, {DPI} dpi"
    report = made.report | {"command": entries["Command"], "files": [path.name for path in paths]}
    with images.replacing(paths[1]) as aside:
        aside.write_text(json.dumps(report, indent=2, ensure_ascii=False) + "\n", encoding="utf-8")
    with images.replacing(paths[2]) as aside:
        aside.write_text(metadata.strip_private(caption.page(made.report, lang)), encoding="utf-8")
    write_sheet(paths[0], made.sheet, entries)
    return paths


def write_sheet(path: Path, sheet: NDArray[np.uint8], text: Mapping[str, str]) -> None:
    """Write an sRGB sheet as PNG with its size on paper and its colour profile.

    Parameters
    ----------
    path : Path
        Where; an existing file is replaced.
    sheet : ndarray of uint8, shape (rows, columns, 3)
        At `DPI` dots an inch.
    text : mapping of str to str
        Text entries, as for `skyoptics.colour.images.write_png`.

    Raises
    ------
    ResourceError
        If the folder is missing or not writable, or the disk is full.
    """
    from PIL import Image
    from PIL.PngImagePlugin import PngInfo

    info = PngInfo()
    for key, value in text.items():
        if value.isascii() and key != metadata.XMP and key not in metadata.WRITTEN_BY_HAND:
            info.add_text(key, value)
        else:
            info.add_itxt(key, value)
    with images.replacing(path) as aside:
        Image.fromarray(sheet).save(
            aside, "PNG", dpi=(DPI, DPI), icc_profile=srgb_profile(), pnginfo=info, compress_level=6
        )


@cache
def srgb_profile() -> bytes:
    """Return an ICC profile of sRGB, without the time at which it was made: the same picture gives the same file."""
    from PIL import ImageCms

    made = bytearray(ImageCms.ImageCmsProfile(ImageCms.createProfile("sRGB")).tobytes())
    made[_DATE] = _FIRST_OF_2000
    return bytes(made)


def foresee(scene: Scene, where: str, settings: Settings, paper: str) -> dict[str, Any]:
    """Return what a print would take, JSON types.

    Parameters
    ----------
    scene, where, settings, paper :
        As for `printed`.

    Returns
    -------
    dict
        Size on paper and in pixels, `tiles`, `rays` at least, `memory_bytes`, `seconds`.
    """
    place = layout(paper, *scene.camera.pixels)
    print_sheet.check_words(scene.title, scene.author, scene.licence)
    first = small(scene)
    job = build(first, where)
    before = estimate.estimate(first, where, settings, False)
    parts = tiles.divided(job, place.picture)
    films = tiles.film_sheets(job) * len(job.sources) * (1 if job.water is None else 2)
    least = sum(expose.LEAST_ROUNDS * int(expose.rays_by_bin(job.bins, part.pixels).sum()) for part in parts)
    rays = films * (least if settings.rays is None else settings.rays)
    pixels = place.picture[0] * place.picture[1]
    looked = pixels * len(job.bins) * max(len(job.sheets), 1) * (1 if job.water is None else 2)
    seconds = rays / estimate.FILM_RAYS_PER_SECOND + looked / estimate.VALUES_PER_SECOND
    seconds = seconds / settings.threads + (pixels + place.shape[0] * place.shape[1]) / estimate.PIXELS_PER_SECOND
    return _facts(place) | {
        "tiles": len(parts),
        "rays": before["rays"] + rays,
        "memory_bytes": _memory(job, scene.picture, settings, place),
        "seconds": round(before["seconds"] + seconds, 1),
    }


def _facts(place: Layout) -> dict[str, Any]:
    width, height = place.picture_mm
    return {
        "paper": place.paper,
        "dpi": DPI,
        "sheet_px": [place.shape[1], place.shape[0]],
        "picture_px": [place.picture[1], place.picture[0]],
        "picture_mm": [round(width, 1), round(height, 1)],
        "margin_mm": round(print_sheet.MARGIN_MM * place.scale, 1),
    }


def _memory(job: Job, picture: Picture, settings: Settings, place: Layout) -> int:
    """Return the largest memory that a print will hold [byte]: the small picture, then sheet, tile and whole picture."""
    pixels = place.picture[0] * place.picture[1]
    need = memory.predict(job, settings.threads, False)
    need += 8 * place.shape[0] * place.shape[1]  # the sheet, and once more while it is written
    if films := tiles.film_sheets(job):
        tile = max(part.pixels for part in tiles.divided(job, place.picture))
        components = 4 if job.stokes else 1
        planes = films * len(job.sources) * (1 if job.water is None else 2)
        need += tile * planes * (4 * components * len(job.bins) + 8)
        need += tile * (12 + 24 + 17 * 8 + 3 * settings.threads * 4 * components)
    if _needs_all(picture):
        need += pixels * (12 + 12 + (7 * 8 if picture.glare == "eye" else 8))
    return int(need)


def _check(need: int) -> None:
    """Refuse a print that needs too much memory, with what helps."""
    try:
        memory.check(need)
    except ResourceError as error:
        needed = str(error).partition(": ")[0]
        raise ResourceError(f"{needed}: take smaller paper, or fewer wavelengths (picture.bin_nm)") from error


def _needs_all(picture: Picture) -> bool:
    """Return whether something reaches from each part of a picture into others."""
    return picture.glare == "eye" or bool(picture.show_sun)


def _sized(scene: Scene, columns: int, rows: int) -> Scene:
    camera = scene.camera.model_copy(update={"width_px": columns, "height_px": rows})
    return scene.model_copy(update={"camera": camera})


def _put(picture: NDArray[np.uint8], rows: slice, columns: slice, xyz: Float32Array, alike: Developed) -> None:
    """Develop a part of a picture like another one, dithered by its place in the whole."""
    across = np.arange(columns.start, columns.stop)
    for start in range(rows.start, rows.stop, _ROWS):
        stop = min(start + _ROWS, rows.stop)
        part = xyz[start - rows.start : stop - rows.start]
        values = np.clip(encode(develop(part, alike.exposure_ev, alike.white).rgb), 0.0, 1.0)
        threshold = images.dither_threshold(np.arange(start, stop), across)
        picture[start:stop, columns] = np.floor(values * 255.0 + threshold).astype(np.uint8)
