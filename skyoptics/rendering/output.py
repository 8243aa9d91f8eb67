"""Files of a finished render: picture, report, data, linear images. Each appears whole or not at all."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import skyoptics
from skyoptics.colour import images, metadata
from skyoptics.colour.display import linear_rgb
from skyoptics.errors import ResourceError
from skyoptics.rendering import dataset
from skyoptics.rendering.run import Result
from skyoptics.scene.model import Scene

EXTRA = ("exr", "tiff")
"""Linear float images that can be asked for."""


def text_entries(report: Mapping[str, Any], command: Sequence[str]) -> dict[str, str]:
    """Return a picture's metadata: what it is and how to make it again; nothing private in it."""
    entries: dict[str, str] = metadata.picture_metadata(
        software="skyoptics",
        version=skyoptics.__version__,
        title=report["title"],
        description=report["look_for"],
        scene_hash=report["scene_hash"],
        seed=report["seed"],
        command=command,
        more={"Quality": report["quality"], "Exposure EV": f"{report['exposure_ev']:g}"},
    )
    return entries


def planned(folder: Path, name: str, data: bool, extra: Sequence[str]) -> list[Path]:
    """Return the files that `write` will make, the picture first."""
    endings = ["png", "json", *(["nc"] if data else []), *extra]
    return [folder / f"{name}.{ending}" for ending in endings]


def prepare(folder: Path) -> None:
    """Make a folder and make sure that files can be written there, before any work is done.

    Raises
    ------
    ResourceError
        In words.
    """
    probe = folder / ".skyoptics-probe"
    try:
        folder.mkdir(parents=True, exist_ok=True)
        probe.touch()
        probe.unlink()
    except OSError as error:
        reason = error.strerror or str(error)
        raise ResourceError(
            f"cannot write into {folder} ({reason.lower()}): choose another folder with --out, or change its permissions"
        ) from error


def write(
    result: Result, scene: Scene, folder: Path, name: str, command: Sequence[str], data: bool, extra: Sequence[str]
) -> list[Path]:
    """Write a render's files.

    Parameters
    ----------
    result : Result
        From `skyoptics.rendering.run.render`.
    scene : Scene
        For the depth of the PNG.
    folder : Path
        Must exist (`prepare`).
    name : str
        File name without its ending, safe already.
    command : sequence of str
        The command's words, kept as metadata.
    data : bool
        Whether to write the radiance as NetCDF.
    extra : sequence of str
        Of `EXTRA`.

    Returns
    -------
    list of Path
        What was written, the picture first.
    """
    entries = text_entries(result.report, command)
    files = planned(folder, name, data, extra)
    if data:
        provenance = {"title": entries.get("Title", name), "source": entries["Software"], "history": entries["Command"]}
        more = {key.lower().replace(" ", "_"): entries[key] for key in ("Scene hash", "Seed", "Quality")}
        dataset.write(dataset.dataset(result, provenance | more), folder / f"{name}.nc")
    if "exr" in extra:
        images.write_exr(folder / f"{name}.exr", linear_rgb(result.xyz), text=entries)
    if "tiff" in extra:
        images.write_tiff(folder / f"{name}.tiff", linear_rgb(result.xyz), text=entries)
    report = result.report | {"command": entries["Command"], "files": [path.name for path in files]}
    with images.replacing(folder / f"{name}.json") as aside:
        aside.write_text(json.dumps(report, indent=2, ensure_ascii=False) + "\n", encoding="utf-8")
    images.write_png(files[0], result.developed.rgb, bits=scene.picture.depth_bits, text=entries)
    return files
