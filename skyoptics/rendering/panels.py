"""A scene at several values of one key: each a picture of its own, or all on one comparison sheet.

On a sheet all pictures share exposure and white, metered over all of them together, so that what looks brighter is brighter.
"""

from __future__ import annotations

import json
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

import skyoptics
from skyoptics.camera import overlay
from skyoptics.colour import images, metadata
from skyoptics.colour import white as whites
from skyoptics.errors import DomainError, Fault, SceneError
from skyoptics.figures.panels import Panel, columns_of, compose
from skyoptics.rendering import output
from skyoptics.rendering.eye import exposure_asked, neutral
from skyoptics.rendering.run import Result, Settings, render
from skyoptics.rendering.scatter import Progress, silent
from skyoptics.rendering.shots import METERS, developed
from skyoptics.rendering.vary import Step, Vary
from skyoptics.rendering.vary_words import caption, quantity
from skyoptics.scene.files import safe_name
from skyoptics.scene.model import Scene
from skyoptics.units import DEG, FloatArray
from skyoptics.words.table import say

MOST_PANELS = 24
WIDEST = 2400
"""Width that the pictures of a row share [pixel]; larger ones are rendered smaller, never scaled."""


@dataclass(eq=False)
class Sheet:
    """A comparison sheet.

    Parameters
    ----------
    rgb : ndarray of uint8, shape (rows, columns, 3)
        The sheet.
    exposures_ev : tuple of float
        Of each panel [EV].
    captions : tuple of str
        Of each panel: quantity and value.
    reports : list of dict
        Of each panel's render, alt text and caption in it.
    """

    rgb: NDArray[np.uint8]
    exposures_ev: tuple[float, ...]
    captions: tuple[str, ...]
    reports: list[dict[str, Any]] = field(default_factory=list)


def count_allowed(steps: Sequence[Step], key: str) -> None:
    """Refuse more panels than a sheet holds.

    Raises
    ------
    DomainError
        With the number that is allowed.
    """
    if len(steps) > MOST_PANELS:
        raise DomainError(f"{key} has {len(steps)} values; {MOST_PANELS} pictures at most are made at once")


def small(steps: Sequence[Step]) -> tuple[tuple[str, ...], tuple[int, int]]:
    """Return the overrides that bring the pictures of a sheet to their size, and that size in columns and rows.

    Raises
    ------
    SceneError
        If the pictures are of several sizes.
    """
    sizes = {step.scene.camera.pixels for step in steps}
    if len(sizes) > 1:
        told = " and ".join(f"{width} x {height}" for width, height in sorted(sizes))
        raise SceneError(
            [Fault("--vary", None, "", f"pictures of {told} pixels cannot stand on one sheet; leave out --sheet")]
        )
    columns, rows = sizes.pop()
    widest = WIDEST // columns_of(len(steps), (rows, columns), 0.12 * rows)
    if columns <= widest:
        return (), (columns, rows)
    height = max(1, round(rows * widest / columns))
    return (f"camera.width_px={widest}", f"camera.height_px={height}"), (widest, height)


def sheet(
    steps: Sequence[Step],
    vary: Vary,
    where: str,
    settings: Settings,
    progress: Progress = silent,
    lang: str = "en",
) -> Sheet:
    """Render the panels of a comparison sheet and lay them out.

    Parameters
    ----------
    steps : sequence of Step
        From `skyoptics.rendering.vary.steps`, at a size for the sheet (`small`).
    vary : Vary
        What they differ in.
    where : str
        Name of the scene file, for faults.
    settings : Settings
        Quality, seed, threads.
    progress : callable
        Told what goes on.
    lang : str
        Language of captions.

    Returns
    -------
    Sheet
    """
    results: list[Result] = []
    for number, step in enumerate(steps):
        progress("panels", number, len(steps))
        results.append(render(step.scene, where, settings, progress))
        output.describe(results[-1], step.scene, lang)
    progress("panels", len(steps), len(steps))
    exposures = _exposures([step.scene for step in steps], where, results)
    white = _white(results) if steps[0].scene.picture.white == "auto" else None
    named = [f"{quantity(step, vary, lang)} {caption(step, vary, lang)}" for step in steps]
    bars = [_scale(result, lang) for result in results]
    alike = len({bar for bar in bars if bar is not None}) <= 1
    panels = []
    for number, (step, result, exposure) in enumerate(zip(steps, results, exposures, strict=True)):
        own = neutral(result.job, step.scene.picture)
        rgb = developed(result.xyz, exposure, white if isinstance(own, str) else own)
        bar = bars[number] if number == len(steps) - 1 or not alike else None
        panels.append(Panel(rgb, _capital(named[number]), _horizon(result), bar))
        result.report["exposure_ev"] = exposure
    title = steps[0].scene.title or ""
    return Sheet(compose(panels, title), tuple(exposures), tuple(named), [result.report for result in results])


def _exposures(scenes: Sequence[Scene], where: str, results: Sequence[Result]) -> list[float]:
    """Return the exposure of each panel: its scene's own, or one metered over all panels together."""
    fixed = [exposure_asked(scene, where) for scene in scenes]
    shared = METERS[scenes[0].picture.metering](np.concatenate([result.xyz[..., 1].ravel() for result in results]))
    return [shared if own is None else own for own in fixed]


def _white(results: Sequence[Result]) -> FloatArray:
    """Return a white that is found in all panels together."""
    return whites.white(whites.automatic(np.concatenate([result.xyz.reshape(-1, 1, 3) for result in results])))


def _scale(result: Result, lang: str) -> tuple[float, str] | None:
    bar = overlay.angle_scale(result.job.directions)
    return None if bar is None else (round(bar.length, 1), say("mark.scale", lang, angle=bar.angle / DEG))


def _horizon(result: Result) -> float | None:
    """Return the row of the horizon in the middle of a picture; None where it is not in it."""
    line = overlay.horizon(result.job.directions)
    line = line[np.isfinite(line).all(axis=1)] if len(line) else line
    if not len(line):
        return None
    return float(line[np.argmin(np.abs(line[:, 0] - 0.5 * (result.job.directions.shape[1] - 1))), 1])


def write_sheet(
    made: Sheet, steps: Sequence[Step], vary: Vary, folder: Path, name: str, command: Sequence[str], lang: str = "en"
) -> list[Path]:
    """Write a sheet with its metadata, a report and a text beside it.

    Parameters
    ----------
    made : Sheet
        From `sheet`.
    steps, vary :
        What it shows.
    folder : Path
        Where; it must exist.
    name : str
        Of the scene, safe already.
    command : sequence of str
        The command's words, kept as metadata.
    lang : str
        Language.

    Returns
    -------
    list of Path
        The sheet first.
    """
    paths = [folder / f"{name}.sheet.{ending}" for ending in ("png", "json", "caption.txt")]
    first = made.reports[0]
    values = ", ".join(caption(step, vary, lang) for step in steps)
    alt = f"{_capital(quantity(steps[0], vary, lang))}: {values}. {first['alt_text']}"
    text = metadata.picture_metadata(
        software="skyoptics",
        version=skyoptics.__version__,
        title=first["title"],
        description=alt,
        author=first.get("author"),
        rights=first.get("licence"),
        scene_hash=first["scene_hash"],
        seed=first["seed"],
        command=command,
        more={"Quality": first["quality"], "Varied": vary.words},
    )
    images.write_png(paths[0], made.rgb.astype(np.float32) / 255.0, encoded=True, text=text)
    report = {
        "sheet": paths[0].name,
        "vary": vary.words,
        "command": text["Command"],
        "panels": [
            {"caption": words, "exposure_ev": exposure, "report": about}
            for words, exposure, about in zip(made.captions, made.exposures_ev, made.reports, strict=True)
        ],
    }
    with images.replacing(paths[1]) as aside:
        aside.write_text(json.dumps(report, indent=2, ensure_ascii=False) + "\n", encoding="utf-8")
    parts = [
        first["title"] or "",
        *(f"{_capital(w)}. {r['caption']}" for w, r in zip(made.captions, made.reports, strict=True)),
    ]
    with images.replacing(paths[2]) as aside:
        aside.write_text(metadata.strip_private("\n\n".join(part for part in parts if part)) + "\n", encoding="utf-8")
    return paths


def singles(
    steps: Sequence[Step],
    vary: Vary,
    where: str,
    settings: Settings,
    wanted: Callable[[Step], output.Wanted],
    command: Callable[[Step], Sequence[str]],
    progress: Progress = silent,
) -> list[tuple[Path, dict[str, Any]]]:
    """Render each value into files of its own, each exposed by itself.

    Parameters
    ----------
    steps, vary, where, settings, progress :
        As for `sheet`.
    wanted : callable
        Which files a step leaves.
    command : callable
        The words of the command that makes a step alone.

    Returns
    -------
    list of (Path, dict)
        Picture and report of each.
    """
    made = []
    for number, step in enumerate(steps):
        progress("pictures", number, len(steps))
        files = wanted(step)
        result = render(step.scene, where, settings, progress, files.data, files.preview)
        made.append((output.write(result, step.scene, files, command(step))[0], result.report))
    progress("pictures", len(steps), len(steps))
    return made


def file_name(name: str, vary: Vary, step: Step) -> str:
    """Return the name of the files of one value: that of the scene and the value."""
    key = vary.key.rpartition(".")[2]
    value = step.text if not isinstance(step.value, float) else f"{step.value:g}"
    return f"{name}-{safe_name(f'{key}-{value}')}" if key == "time" else f"{name}-{safe_name(value)}"


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]
