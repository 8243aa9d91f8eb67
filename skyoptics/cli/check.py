"""``skyoptics check``: every fault of scene files."""

from __future__ import annotations

from pathlib import Path

import click

from skyoptics.cli.options import SceneFile


@click.command("check", short_help="List every fault of scene files; render nothing.")
@click.argument("scenes", nargs=-1, required=True, type=SceneFile(), metavar="SCENE...")
def command(scenes: tuple[Path, ...]) -> int:
    """Read each SCENE, list every fault with its line, and render nothing.

    Example: skyoptics check scenes/*.toml
    """
    from skyoptics.errors import SceneError
    from skyoptics.scene.load import load

    faults = 0
    for path in scenes:
        try:
            scene = load(path)
            from skyoptics.rendering.build import build

            build(scene, str(path))
        except SceneError as error:
            faults += len(error.faults)
            click.echo(str(error))
        else:
            click.echo(f"{path}: ok")
    if faults:
        click.echo(f"{faults} fault{'s' if faults > 1 else ''}", err=True)
    return 1 if faults else 0
