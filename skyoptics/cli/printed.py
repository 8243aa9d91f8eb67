"""``skyoptics render --print``: a scene on a sheet of paper at 300 dots an inch."""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import click

from skyoptics.cli.options import Word

SIZES = ("a4", "a3", "a2")
_NOT = {
    "data": "--data",
    "stokes": "--stokes",
    "extra": "--image",
    "noise_map": "--noise-map",
    "labels": "--labels",
    "visibility": "--visibility",
    "only": "--only",
    "explain": "--explain",
}
"""Options that a sheet of paper has no place for."""


class Paper(Word):
    """A size of paper, in small or large letters."""

    def __init__(self) -> None:
        super().__init__(SIZES)

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> str:
        """Return it in small letters."""
        return super().convert(str(value).lower(), param, ctx)


def run(given: Mapping[str, Any]) -> None:
    """Print a scene.

    Parameters
    ----------
    given : mapping
        The options of ``render`` by name.
    """
    for name, option in _NOT.items():
        if given.get(name):
            raise click.UsageError(f"{option} does not go with --print; leave it out, or render without --print")
    from skyoptics.cli import progress
    from skyoptics.rendering import output, printing
    from skyoptics.rendering.run import Settings, usable_cores
    from skyoptics.scene.files import safe_name
    from skyoptics.scene.load import load

    path, paper, lang = given["scene"], given["print_size"], given["lang"]
    scene = load(path, given["overrides"])
    name = safe_name(path)
    folder = given["out"] or Path("outputs", name)
    threads = given["threads"] or usable_cores()
    settings = Settings(given["quality"], given["seed"], threads, given["processes"], given["rays"])
    if given["dry_run"]:
        found = printing.foresee(scene, str(path), settings, paper)
        _tell(found | {"files": [str(file) for file in printing.files(folder, name, paper)]}, given["as_json"])
        return
    output.prepare(folder)
    progress.note_first_compilation()
    with progress.shown() as tell:
        made = printing.printed(scene, str(path), settings, paper, lang, tell)
    words = ["skyoptics", "render", path.name, "--seed", str(settings.seed), "--quality", settings.quality]
    words += ["--rays", str(settings.rays)] * (settings.rays is not None)
    words += [word for override in given["overrides"] for word in ("--set", override)]
    words += ["--print", paper, *(["--lang", lang] if lang != "en" else [])]
    written = printing.write(made, folder, name, words, lang)
    if made.note:
        click.echo(f"note: {made.note}", err=True)
    for sheet in made.report["sheets"]:
        for warning in sheet.get("warnings", ()):
            click.echo(f"note: {sheet['name']}: {warning}", err=True)
    for caution in made.report["cautions"]:
        click.echo(f"caution: {caution}", err=True)
    width, height = made.place.picture_mm
    if given["as_json"]:
        click.echo(json.dumps(made.report, ensure_ascii=False))
    rows, columns = made.place.picture
    size = f"picture {columns} x {rows} pixels, {width:.0f} x {height:.0f} mm"
    click.echo(f"{written[0]}: {paper.upper()} at {made.report['print']['dpi']} dpi, {size}", err=given["as_json"])


def _tell(found: Mapping[str, Any], as_json: bool) -> None:
    """Print what a sheet would take."""
    if as_json:
        click.echo(json.dumps(found))
        return
    (columns, rows), (width, height) = found["picture_px"], found["picture_mm"]
    click.echo(f"sheet           {found['paper'].upper()}, {found['sheet_px'][0]} x {found['sheet_px'][1]} pixels")
    click.echo(f"picture         {columns} x {rows} pixels, {width:.0f} x {height:.0f} mm at {found['dpi']} dpi")
    click.echo(f"margins         {found['margin_mm']:g} mm, title, caption and scale below")
    click.echo(f"rays to trace   {found['rays']:,} at least, in {found['tiles']} tile{'s' * (found['tiles'] > 1)}")
    click.echo(f"memory          {found['memory_bytes'] / 1e9:.2f} GB")
    click.echo(f"time            about {found['seconds']:.0f} s, kernels compiled")
    click.echo("files           " + "\n                ".join(found["files"]))
