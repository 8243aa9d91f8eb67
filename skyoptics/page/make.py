"""The recipe of a page: check, render one picture after the other, expose together, write one file."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import ceil
from pathlib import Path
from typing import Any

import skyoptics
from skyoptics.colour.images import replacing
from skyoptics.errors import DomainError
from skyoptics.page import document
from skyoptics.page.cells import MOST_BANDS
from skyoptics.page.document import Asked
from skyoptics.page.pictures import APART, exposures_apart, take, together
from skyoptics.rendering.build import spectral_bins
from skyoptics.rendering.expose import group_side
from skyoptics.rendering.output import prepare as prepare_folder
from skyoptics.rendering.run import Settings
from skyoptics.rendering.scatter import Progress, silent
from skyoptics.scene.model import Scene

SPECTRA = 3_000_000
"""Bytes that the spectra of all pictures together may take in the file, about."""
ENDINGS = (".html", ".htm")


@dataclass(frozen=True)
class Made:
    """What was made: a report of JSON types, and what is to be said about it."""

    report: dict[str, Any]
    notes: tuple[str, ...]


def prepare(file: Path, scenes: Sequence[Scene]) -> None:
    """Check all that can be known before anything is rendered.

    Raises
    ------
    DomainError
        If the file's name has another ending, or the pictures cannot fit into a page.
    ResourceError
        If the folder cannot be written to.
    """
    if file.suffix.lower() not in ENDINGS:
        raise DomainError(f"a page is an .html file; got {file.name}")
    document.check_size([(rows, columns) for columns, rows in (scene.camera.pixels for scene in scenes)])
    prepare_folder(file.parent)


def make(where: str, settings: Settings, asked: Asked, file: Path, progress: Progress = silent) -> Made:
    """Render pictures and write them as one page.

    Parameters
    ----------
    where : str
        Name of their file.
    settings : Settings
        Quality, seed, threads.
    asked : Asked
        Quantity, language, exposure.
    file : Path
        The page; replaced whole or not at all.
    progress : callable
        Told what goes on.
    """
    pictures = []
    scenes = asked.varied.scenes
    for number, scene in enumerate(scenes, start=1):

        def tell(stage: str, done: int, total: int, number: int = number) -> None:
            progress(f"picture {number} of {len(scenes)}: {stage}", done, total)

        side = spectra_side(scene, len(scenes))
        pictures.append(take(scene, where, settings, side, asked.lang, tell))
        if number == 1:
            document.check_first(pictures[0], len(scenes))
    apart = exposures_apart(pictures)
    notes = []
    if asked.shared:
        pictures = together(pictures, asked.lang)
        if apart > APART:
            notes.append(
                f"the pictures' own exposures are {apart:.1f} EV apart, so some are dark or bright: --exposure each "
                "exposes each for itself"
            )
    else:
        asked = replace(asked, shared=apart == 0.0)
    text = document.page(pictures, asked)
    with replacing(file) as aside:
        aside.write_text(text, encoding="utf-8", newline="\n")
    first = pictures[0].report
    report = {
        "skyoptics": skyoptics.__version__,
        "file": file.name,
        "bytes": len(text.encode()),
        "title": first["title"],
        "look_for": first["look_for"],
        "vary": asked.varied.key or None,
        "pictures": [
            {
                "value": value or None,
                "scene_hash": picture.report["scene_hash"],
                "exposure_ev": picture.report["exposure_ev"],
                "seen": picture.names,
                "caption": picture.report["caption"],
                "alt_text": picture.report["alt_text"],
            }
            for value, picture in zip(asked.varied.values, pictures, strict=True)
        ],
        "cautions": first["cautions"],
        "command": " ".join(asked.command),
    }
    return Made(report, tuple(notes))


def spectra_side(scene: Scene, count: int) -> int:
    """Return the pixels along the side of a cell of spectra, so that those of all pictures keep within `SPECTRA`."""
    columns, rows = scene.camera.pixels
    bands = min(len(spectral_bins(scene)), MOST_BANDS) + 2
    side = least = group_side((rows, columns))
    while ceil(columns / side) * ceil(rows / side) * bands * count * 4 / 3 > SPECTRA:
        side += max(1, least // 4)
    return side
