"""``skyoptics render``: scene file to picture and report."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import click

from skyoptics.cli.options import AzimuthElevation, SceneFile, Word, json_option, lang_option, sampling_options
from skyoptics.cli.printed import Paper


@click.command("render", short_help="Scene file to picture and report.")
@click.argument("scene", type=SceneFile())
@click.option("--out", type=click.Path(path_type=Path), help="Folder for the files; default outputs/NAME.")
@click.option(
    "--set", "overrides", multiple=True, metavar="TABLE.KEY=VALUE", help="Change a value, e.g. air.1.radius_um=250."
)
@click.option("--data", is_flag=True, help="Write the spectral radiance too, as NetCDF.")
@click.option(
    "--stokes", is_flag=True, help="Put degree and direction of polarisation into the data too (with --data)."
)
@click.option("--image", "extra", multiple=True, type=Word(["exr", "tiff"]), help="Write a linear float image too.")
@click.option("--dry-run", is_flag=True, help="Say what it would take: rays, memory, time, files.")
@click.option("--rays", type=click.IntRange(1), help="Rays of each kind of particle; overrides --quality.")
@click.option(
    "--processes", type=click.IntRange(1, 1024), default=1, show_default=True, help="Worker processes that trace."
)
@click.option("--noise-map", is_flag=True, help="Write a map of the error of displayed lightness too.")
@click.option("--labels", is_flag=True, help="Write an annotated copy too: arcs by name, horizon, compass, scale.")
@lang_option
@click.option(
    "--visibility", is_flag=True, help="Say whether each bow and halo will be seen, and the best angle of a polariser."
)
@click.option(
    "--only",
    metavar="ARC",
    help="Show the light of one named arc alone (skyoptics scenes --arcs lists them), or other: light of no name.",
)
@click.option(
    "--explain",
    type=AzimuthElevation(),
    metavar="AZ,EL",
    help="Say what makes a direction bright, azimuth and elevation in degrees; renders nothing.",
)
@click.option("--vary", metavar="KEY=VALUES", help="One picture for each value, e.g. air.1.radius_um=10,50,250,1000.")
@click.option(
    "--sheet", "on_sheet", is_flag=True, help="All values of --vary on one comparison sheet, exposure and scale shared."
)
@click.option(
    "--today",
    metavar="PLACE",
    help="Add to the caption when this can be seen today: coordinates, or one of your places.",
)
@click.option("--tz", help="Its time zone, such as Europe/Zurich, where it cannot be looked up.")
@click.option(
    "--print", "print_size", type=Paper(), help="Instead, a sheet of paper at 300 dpi: margins, caption, scale."
)
@json_option
@sampling_options
def command(
    scene: Path,
    out: Path | None,
    overrides: tuple[str, ...],
    data: bool,
    extra: tuple[str, ...],
    dry_run: bool,
    rays: int | None,
    processes: int,
    noise_map: bool,
    stokes: bool,
    labels: bool,
    lang: str,
    visibility: bool,
    only: str | None,
    explain: tuple[float, float] | None,
    vary: str | None,
    on_sheet: bool,
    print_size: str | None,
    today: str | None,
    tz: str | None,
    as_json: bool,
    quality: str,
    seed: int,
    threads: int | None,
) -> None:
    """Render SCENE: a TOML file, or the name of an example scene (see: skyoptics scenes).

    \b
    Example: skyoptics render double-bow --set light.elevation_deg=10 --quality draft
             skyoptics render mixed-whole-sky --only circumzenithal
             skyoptics render mixed-whole-sky --explain 180,42.5
             skyoptics render double-bow --vary air.1.radius_um=10,50,250,1000 --sheet
             skyoptics render double-bow --print a3
    """  # noqa: D301
    if vary is not None or on_sheet:
        from skyoptics.cli import varied

        varied.run(click.get_current_context().params)
        return
    if print_size is not None:
        from skyoptics.cli import printed

        printed.run(click.get_current_context().params)
        return
    if tz is not None and today is None:
        raise click.UsageError("--tz is the zone of a place; give --today PLACE too")
    if visibility and only is not None:
        raise click.UsageError("--visibility asks about the whole picture; leave --only out")
    from skyoptics.scene.files import safe_name
    from skyoptics.scene.load import load

    if stokes and not data:
        raise click.UsageError("--stokes puts polarisation into the data; give --data too")
    described = load(scene, overrides)
    name = safe_name(scene)
    folder = out or Path("outputs", name)
    from skyoptics.cli import progress
    from skyoptics.rendering import output
    from skyoptics.rendering.run import Settings, render, told_apart, usable_cores

    settings = Settings(quality, seed, threads or usable_cores(), processes, rays)
    if explain is not None:
        _explain(described, scene, explain, settings, as_json)
        return
    teller = None
    if today is not None:
        from skyoptics.cli.today import teller as tell_today

        teller = tell_today(today, tz, lang, described.light.body)
    named = name if only is None else f"{name}.{only}"
    wanted = output.Wanted(folder, named, data, extra, noise_map, labels, lang, teller)
    if dry_run:
        _estimate(described, scene, settings, wanted, stokes, as_json)
        return
    if only is not None:
        told_apart(only)
    if labels and described.title:
        from skyoptics.figures.lettering import check_glyphs

        check_glyphs(described.title)
    output.prepare(folder)
    progress.note_first_compilation()
    words = _command(scene, overrides, wanted, settings, stokes, only)
    words += ["--visibility"] * visibility
    with progress.shown() as tell:
        result = render(described, str(scene), settings, tell, data, wanted.preview, stokes, only)
        if visibility:
            _visibility(result, described, str(scene), settings, tell)
    from skyoptics.rendering import features

    if only is None and (empty := features.warning(result.job)):
        click.echo(f"note: {empty}", err=True)
    if changed := output.traced_otherwise(wanted, result.report):
        click.echo(f"note: {changed}", err=True)
    files = output.write(result, described, wanted, words)
    for sheet in result.report["sheets"]:
        if sheet.get("reason", "asked for") != "asked for":
            click.echo(f"{sheet['name']}: method {sheet['method']}, {sheet['reason']}", err=True)
        for warning in sheet.get("warnings", ()):
            click.echo(f"note: {sheet['name']}: {warning}", err=True)
    for caution in result.report["cautions"]:
        click.echo(f"caution: {caution}", err=True)
    last = f"{files[0]}: {result.report['look_for']}"
    if as_json:
        click.echo(json.dumps(result.report, ensure_ascii=False))
        click.echo(last, err=True)
    else:
        if visibility:
            from skyoptics.rendering.visibility import table

            click.echo(table(result.report["visibility"]))
        click.echo(last)


def _visibility(result: Any, scene: Any, where: str, settings: Any, tell: Any) -> None:
    """Put what will be seen, and through which polariser, into the report."""
    from skyoptics.rendering.polarised import best_polariser
    from skyoptics.rendering.visibility import visibility

    rows = visibility(result)
    seen = [row["feature"] for row in rows if row.get("share_visible", 0.0) > 0.0]
    best = {row.pop("feature"): row for row in best_polariser(scene, where, settings, tell, seen)} if seen else {}
    for row in rows:
        if row["feature"] in best:
            row["polariser"] = {key: value for key, value in best[row["feature"]].items() if key != "title"}
    result.report["visibility"] = rows


def _command(
    scene: Path, overrides: tuple[str, ...], wanted: Any, settings: Any, stokes: bool, only: str | None
) -> list[str]:
    """Return the words that make the picture again, run beside the scene file."""
    words = ["skyoptics", "render", scene.name, "--seed", str(settings.seed), "--quality", settings.quality]
    if settings.rays is not None:
        words += ["--rays", str(settings.rays)]
    for override in overrides:
        words += ["--set", override]
    if only is not None:
        words += ["--only", only]
    flags = {"--data": wanted.data, "--stokes": stokes, "--noise-map": wanted.noise_map, "--labels": wanted.labels}
    words += [flag for flag, given in flags.items() if given]
    words += ["--lang", wanted.lang] * (wanted.lang != "en")
    return words + [word for name in wanted.extra for word in ("--image", name)]


def _estimate(scene: Any, path: Path, settings: Any, files: Any, stokes: bool, as_json: bool) -> None:
    """Print what a render would take."""
    from skyoptics.rendering.estimate import estimate

    wanted = estimate(scene, str(path), settings, files.data, stokes) | {"files": [str(file) for file in files.paths()]}
    if as_json:
        click.echo(json.dumps(wanted))
        return
    click.echo(
        f"rays to trace   {wanted['rays']:,} at least ({wanted['stored_tables']} of {wanted['tables']} tables are stored)"
    )
    click.echo(f"memory          {wanted['memory_bytes'] / 1e9:.2f} GB")
    click.echo(f"time            about {wanted['seconds']:.0f} s, kernels compiled")
    click.echo("files           " + "\n                ".join(wanted["files"]))


def _explain(scene: Any, path: Path, where: tuple[float, float], settings: Any, as_json: bool) -> None:
    """Print what makes a direction bright."""
    from skyoptics.cli import progress
    from skyoptics.rendering.explain import explain

    progress.note_first_compilation()
    with progress.shown() as tell:
        found = explain(scene, str(path), *where, settings, tell)
    if as_json:
        click.echo(json.dumps(found, ensure_ascii=False))
        return
    click.echo(
        f"azimuth {found['azimuth_deg']:g}°, elevation {found['elevation_deg']:g}°, {found['from_source_deg']:.2f}° from the "
        f"source: {found['luminance_cd_m2']:.4g} cd/m², mean over {found['width_deg']:g}°"
    )
    for entry in found["shares"]:
        what = entry["title"] + (f" ({entry['arc']})" if entry["particles"] and entry["arc"] != "other" else "")
        by = f", {entry['particles']}" if entry["particles"] else ""
        error = f" ± {100.0 * entry['error']:.1f}" if entry["error"] else ""
        click.echo(f"{100.0 * entry['share']:6.1f}{error} %  {what}{by}")
        if entry["paths"]:
            paths = ", ".join(f"{path['faces']} {100.0 * path['part']:.0f} %" for path in entry["paths"])
            click.echo(f"            faces met: {paths}")
