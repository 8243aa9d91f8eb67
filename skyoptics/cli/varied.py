"""``skyoptics render --vary``: a picture for each value, or all on one comparison sheet (``--sheet``)."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import click

_ALONE = {
    "only": "--only",
    "explain": "--explain",
    "visibility": "--visibility",
    "stokes": "--stokes",
    "dry_run": "--dry-run",
    "print_size": "--print",
}
"""Options that ask about one picture."""
_OFF_SHEETS = {"data": "--data", "extra": "--image", "noise_map": "--noise-map", "labels": "--labels"}
"""Options that no sheet has."""


def run(given: Mapping[str, Any]) -> None:
    """Render a scene at several values of one key.

    Parameters
    ----------
    given : mapping
        The options of ``render`` by name.
    """
    if given["vary"] is None:
        raise click.UsageError("--sheet needs --vary, as in --vary air.1.radius_um=10,50,250,1000")
    refused = _ALONE | (_OFF_SHEETS if given["on_sheet"] else {})
    for name, option in refused.items():
        if given.get(name):
            raise click.UsageError(
                f"{option} does not go with --vary{' --sheet' if given['on_sheet'] else ''}; leave it out"
            )
    from skyoptics.rendering import output, panels, vary
    from skyoptics.rendering.run import Settings, usable_cores
    from skyoptics.scene.files import safe_name

    what = vary.read(given["vary"])
    path, overrides = given["scene"], given["overrides"]
    steps = vary.steps(path, overrides, what)
    panels.count_allowed(steps, what.key)
    threads = given["threads"] or usable_cores()
    settings = Settings(given["quality"], given["seed"], threads, given["processes"], given["rays"])
    name = safe_name(path)
    folder = given["out"] or Path("outputs", name)
    words = ["skyoptics", "render", path.name, "--seed", str(settings.seed), "--quality", settings.quality]
    words += ["--rays", str(settings.rays)] * (settings.rays is not None)
    words += [word for override in overrides for word in ("--set", override)]
    language = ["--lang", given["lang"]] * (given["lang"] != "en")
    if given["on_sheet"]:
        _sheet(given, steps, what, settings, folder, name, [*words, "--vary", what.words, "--sheet", *language])
        return

    def wanted(step: vary.Step) -> output.Wanted:
        own = panels.file_name(name, what, step)
        flags = (given["data"], given["extra"], given["noise_map"], given["labels"], given["lang"])
        return output.Wanted(folder, own, *flags)

    def command(step: vary.Step) -> list[str]:
        flags = {"--data": given["data"], "--noise-map": given["noise_map"], "--labels": given["labels"]}
        more = [flag for flag, on in flags.items() if on] + [
            word for one in given["extra"] for word in ("--image", one)
        ]
        return [*words, "--set", f"{what.key}={step.text}", *more, *language]

    from skyoptics.cli import progress

    output.prepare(folder)
    progress.note_first_compilation()
    with progress.shown() as tell:
        made = panels.singles(steps, what, str(path), settings, wanted, command, tell)
    if given["as_json"]:
        click.echo(json.dumps([report for _, report in made], ensure_ascii=False))
    for file, report in made:
        click.echo(f"{file}: {report['look_for']}", err=given["as_json"])


def _sheet(given: Mapping[str, Any], steps: Any, what: Any, settings: Any, folder: Path, name: str, words: Any) -> None:
    """Render a comparison sheet."""
    from skyoptics.cli import progress
    from skyoptics.figures.lettering import check_glyphs
    from skyoptics.rendering import output, panels, vary

    if len(steps) < 2:
        raise click.UsageError("a sheet compares two values at least; give more of them after --vary")
    check_glyphs(steps[0].scene.title or "")
    smaller, size = panels.small(steps)
    if smaller:
        again = replace(what) if what.spacing == "list" else replace(what, count=len(steps))
        steps = vary.steps(given["scene"], [*given["overrides"], *smaller], again)
    output.prepare(folder)
    progress.note_first_compilation()
    with progress.shown() as tell:
        made = panels.sheet(steps, what, str(given["scene"]), settings, tell, given["lang"])
    files = panels.write_sheet(made, steps, what, folder, name, words, given["lang"])
    line = f"{files[0]}: {len(steps)} panels of {size[0]} x {size[1]} pixels: {'; '.join(made.captions)}"
    if given["as_json"]:
        click.echo(files[1].read_text(encoding="utf-8").strip())
    click.echo(line, err=given["as_json"])
