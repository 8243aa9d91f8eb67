"""``skyoptics page``: pictures along a quantity as one HTML file."""

from __future__ import annotations

import json
from pathlib import Path

import click

from skyoptics.cli.options import SceneFile, Word, json_option, lang_option, sampling_options


@click.command("page", short_help="Pictures under a slider, with readings: one HTML file.")
@click.argument("scene", type=SceneFile())
@click.option(
    "--vary",
    metavar="TABLE.KEY=VALUES",
    help="A picture for each value, e.g. light.elevation_deg=5,15,25; default one.",
)
@click.option("--out", type=click.Path(path_type=Path), help="The file, .html; default NAME.html.")
@click.option(
    "--set", "overrides", multiple=True, metavar="TABLE.KEY=VALUE", help="Change a value, e.g. camera.width_px=900."
)
@click.option(
    "--exposure",
    type=Word(["shared", "each"]),
    default="shared",
    show_default=True,
    help="One exposure for all pictures, the median of the metered ones, or each its own.",
)
@lang_option
@json_option
@sampling_options
def command(
    scene: Path,
    vary: str | None,
    out: Path | None,
    overrides: tuple[str, ...],
    exposure: str,
    lang: str,
    as_json: bool,
    quality: str,
    seed: int,
    threads: int | None,
) -> None:
    """Make one HTML page of SCENE, a TOML file or the name of an example scene.

    Pictures stand under a slider; azimuth, elevation, scattering angle, spectrum and arc are read under the pointer or by
    arrow keys; the scattering curve stands beside. The file needs no server and no network, and has less than 10 MB.

    \b
    Example: skyoptics page double-bow --vary light.elevation_deg=5,15,25 --out bow.html
             skyoptics page fogbow-glory --vary air.1.radius_um=5,10,20,40 --exposure each --lang de
    """  # noqa: D301
    from skyoptics.page.make import make, prepare
    from skyoptics.page.varied import varied
    from skyoptics.scene.files import safe_name

    file = out or Path(f"{safe_name(scene)}.html")
    along = varied(scene, overrides, vary, lang)
    prepare(file, along.scenes)
    from skyoptics.cli import progress
    from skyoptics.page.document import Asked
    from skyoptics.rendering.run import Settings, usable_cores

    words = ["skyoptics", "page", scene.name, *(["--vary", vary] if vary else [])]
    for override in overrides:
        words += ["--set", override]
    words += ["--exposure", exposure] * (exposure != "shared") + ["--lang", lang] * (lang != "en")
    words += ["--seed", str(seed), "--quality", quality]
    asked = Asked(along, lang, exposure == "shared", words)
    progress.note_first_compilation()
    with progress.shown() as tell:
        made = make(scene.name, Settings(quality, seed, threads or usable_cores()), asked, file, tell)
    for note in made.notes:
        click.echo(f"note: {note}", err=True)
    if as_json:
        click.echo(json.dumps(made.report, ensure_ascii=False))
    else:
        click.echo(
            f"{file}: {made.report['look_for']} ({len(along.scenes)} pictures, {made.report['bytes'] / 1e6:.1f} MB)"
        )
