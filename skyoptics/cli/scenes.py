"""``skyoptics scenes``: the example scenes."""

from __future__ import annotations

import json
from pathlib import Path

import click

from skyoptics.cli import examples
from skyoptics.cli.options import json_option
from skyoptics.errors import NothingFoundError, ResourceError, nearest


@click.command("scenes", short_help="List the example scenes, or write a copy of one.")
@click.argument("name", required=False)
@click.option("--out", type=click.Path(path_type=Path), help="File to write the copy to; default NAME.toml here.")
@click.option("--force", is_flag=True, help="Replace a file that is there.")
@json_option
def command(name: str | None, out: Path | None, force: bool, as_json: bool) -> None:
    """List the example scenes; with NAME, write a copy of that scene to start from.

    Example: skyoptics scenes double-bow
    """
    from skyoptics.scene.load import load

    known = examples.names()
    if name is None:
        titles = {known_name: load(examples.folder() / f"{known_name}.toml").title or "" for known_name in known}
        if as_json:
            click.echo(json.dumps(titles, ensure_ascii=False))
        else:
            width = max(map(len, known), default=0)
            for known_name, title in titles.items():
                click.echo(f"{known_name:{width}}  {title}")
        return
    if name not in known:
        raise NothingFoundError(
            f"there is no example scene {name!r}{nearest(name, known)}; there are {', '.join(known)}"
        )
    target = out or Path(f"{name}.toml")
    if target.exists() and not force:
        raise ResourceError(f"{target} is there already: take another name with --out, or --force to replace it")
    from skyoptics.colour.images import replacing

    with replacing(target) as aside:
        aside.write_bytes((examples.folder() / f"{name}.toml").read_bytes())
    click.echo(json.dumps({"file": str(target)}) if as_json else str(target))
