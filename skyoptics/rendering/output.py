"""Files of a finished render: picture, report, data, linear images. Each appears whole or not at all."""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any
from uuid import uuid4

import numpy as np

import skyoptics
from skyoptics.colour import images, metadata
from skyoptics.colour.develop import Developed
from skyoptics.colour.display import decode, linear_rgb
from skyoptics.errors import ResourceError
from skyoptics.rendering import alt_text, caption, dataset
from skyoptics.rendering.run import Result
from skyoptics.rendering.shows import shows
from skyoptics.scene.model import Scene
from skyoptics.units import Float32Array

EXTRA = ("exr", "tiff")
"""Linear float images that can be asked for."""
ABSOLUTE = {
    "Unit": "cd m-2",
    "Values": "absolute, linear, sRGB primaries: luminance = 0.2126 R + 0.7152 G + 0.0722 B; no exposure, no white balance",
}
"""What a linear image says about its numbers (IEC 61966-2-1 primaries)."""
NOISE_WHITE = 0.05
"""Error of displayed lightness that a noise map shows as white [1]."""


def text_entries(report: Mapping[str, Any], command: Sequence[str], lang: str = "en") -> dict[str, str]:
    """Return a picture's metadata: what it is and how to make it again; nothing private in it.

    Description is the alt text, in the report's `alt_text`, or what to look for where there is none yet.
    """
    author, licence = report.get("author"), report.get("licence")
    entries: dict[str, str] = metadata.picture_metadata(
        software="skyoptics",
        version=skyoptics.__version__,
        title=report["title"],
        description=report.get("alt_text", report["look_for"]),
        author=author,
        rights=licence,
        scene_hash=report["scene_hash"],
        seed=report["seed"],
        command=command,
        more={
            "Look for": report["look_for"],
            "Quality": report["quality"],
            "Exposure EV": f"{report['exposure_ev']:g}",
        },
    )
    if "caption" in report:
        entries["Caption"] = metadata.strip_private(report["caption"])
        entries[metadata.XMP] = metadata.xmp(
            title=report["title"],
            caption=report["caption"],
            alt_text=report["alt_text"],
            author=author,
            rights=licence,
            software=entries["Software"],
            lang=lang,
        )
    return entries


@dataclass(frozen=True)
class Wanted:
    """Which files a render is to leave.

    Parameters
    ----------
    folder : Path
        Where.
    name : str
        File name without its ending, safe already.
    data : bool
        Whether to write the radiance as NetCDF.
    extra : sequence of str
        Of `EXTRA`.
    noise_map : bool
        Whether to write a picture of the error of displayed lightness.
    labels : bool
        Whether to write an annotated copy.
    lang : str
        Language of labels, caption and alt text.
    today : callable or None
        Says of a feature when it can be seen today, None of one it does not know; its sentence ends the caption.
    """

    folder: Path
    name: str
    data: bool = False
    extra: Sequence[str] = ()
    noise_map: bool = False
    labels: bool = False
    lang: str = "en"
    today: Callable[[str], str | None] | None = None

    def path(self, ending: str) -> Path:
        """Return the path of one file."""
        return self.folder / f"{self.name}.{ending}"

    def paths(self) -> list[Path]:
        """Return the files that `write` will make, the picture first."""
        endings = ["png", "json", "caption.txt", *(["nc"] if self.data else []), *self.extra]
        if self.noise_map:
            endings.append("noise.png")
        if self.labels:
            endings.append("labels.png")
        return [self.path(ending) for ending in endings]

    @property
    def preview_path(self) -> Path:
        """Where the preview is written."""
        return self.path("preview.png")

    def preview(self, developed: Developed) -> None:
        """Write a first, noisy picture under a name of its own; `write` removes it."""
        images.write_png(self.preview_path, developed.rgb, text={"Description": "preview: first round of tracing"})


def prepare(folder: Path) -> None:
    """Make a folder and make sure that files can be written there, before any work is done.

    Raises
    ------
    ResourceError
        In words.
    """
    probe = folder / f".skyoptics-{uuid4().hex}"
    try:
        folder.mkdir(parents=True, exist_ok=True)
        probe.touch()
        probe.unlink(missing_ok=True)
    except OSError as error:
        reason = error.strerror or str(error)
        raise ResourceError(
            f"cannot write into {folder} ({reason.lower()}): choose another folder with --out, or change its permissions"
        ) from error


def write(result: Result, scene: Scene, wanted: Wanted, command: Sequence[str]) -> list[Path]:
    """Write a render's files.

    Parameters
    ----------
    result : Result
        From `skyoptics.rendering.run.render`.
    scene : Scene
        For the depth of the PNG.
    wanted : Wanted
        Which files; the folder must exist (`prepare`).
    command : sequence of str
        The command's words, kept as metadata.

    Returns
    -------
    list of Path
        What was written, the picture first.
    """
    describe(result, scene, wanted.lang, wanted.today)
    entries = text_entries(result.report, command, wanted.lang)
    files = wanted.paths()
    if wanted.data:
        provenance = {
            "title": entries.get("Title", wanted.name),
            "source": entries["Software"],
            "history": entries["Command"],
        }
        more = {key.lower().replace(" ", "_"): entries[key] for key in ("Scene hash", "Seed", "Quality")}
        dataset.write(dataset.dataset(result, provenance | more), wanted.path("nc"))
    if "exr" in wanted.extra:
        plain = {key: text for key, text in entries.items() if key != metadata.XMP}  # OpenEXR knows no XMP
        images.write_exr(wanted.path("exr"), linear_rgb(result.xyz), text=plain | ABSOLUTE)
    if "tiff" in wanted.extra:
        images.write_tiff(wanted.path("tiff"), linear_rgb(result.xyz), text=entries | ABSOLUTE)
    if wanted.noise_map:
        images.write_png(wanted.path("noise.png"), noise_picture(result), text=entries)
    if wanted.labels:
        from skyoptics.rendering.labels import labelled

        images.write_png(wanted.path("labels.png"), labelled(result, wanted.lang), encoded=True, text=entries)
    report = result.report | {"command": entries["Command"], "files": [path.name for path in files]}
    with images.replacing(wanted.path("json")) as aside:
        aside.write_text(json.dumps(report, indent=2, ensure_ascii=False) + "\n", encoding="utf-8")
    with images.replacing(wanted.path("caption.txt")) as aside:
        aside.write_text(metadata.strip_private(caption.page(result.report, wanted.lang)), encoding="utf-8")
    images.write_png(files[0], result.developed.rgb, bits=scene.picture.depth_bits, text=entries)
    wanted.preview_path.unlink(missing_ok=True)
    return files


def describe(result: Result, scene: Scene, lang: str, today: Callable[[str], str | None] | None = None) -> None:
    """Put into a report what its picture shows, its caption and its alt text, and when that can be seen today."""
    result.report["shows"] = shows(result, scene)
    if today is not None:
        told = (today(name) for name in result.report["shows"]["seen"])
        result.report["today"] = next((sentence for sentence in told if sentence is not None), None)
    result.report["language"] = lang
    result.report["caption"] = caption.write(result.report, lang)
    result.report["alt_text"] = alt_text.write(result.report, lang)


def traced_otherwise(wanted: Wanted, report: Mapping[str, Any]) -> str | None:
    """Return words where an earlier picture of the same name rests on other traces, None where it does not.

    What was traced before stays stored under its own trace key; nothing of it goes into the new picture.
    """
    try:
        earlier = json.loads(wanted.path("json").read_text(encoding="utf-8"))
        before = {sheet["trace_key"] for sheet in earlier["sheets"]}
    except (OSError, ValueError, KeyError, TypeError):
        return None
    now = {sheet["trace_key"] for sheet in report["sheets"]}
    same_effort = all(earlier.get(name) == report[name] for name in ("quality", "skyoptics"))
    if now <= before or not before or not same_effort:
        return None
    return (
        f"particles, light, camera or seed have changed since {wanted.name}.json was written: what was traced then is not "
        "used (it stays stored, should you go back)"
    )


def noise_picture(result: Result) -> Float32Array:
    """Return a grey picture of the error of displayed lightness, white = 5 % and more, linear, shape (ny, nx, 3).

    Where nothing was traced onto the picture itself it is black: the noise of tables is in the report.
    """
    noise = np.zeros(result.xyz.shape[:2]) if result.noise is None else np.nan_to_num(result.noise)
    level = decode(np.clip(noise / NOISE_WHITE, 0.0, 1.0))
    return np.repeat(level[..., None], 3, axis=-1).astype(np.float32)
