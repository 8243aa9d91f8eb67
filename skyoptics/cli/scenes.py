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
@click.option("--arcs", is_flag=True, help="List the named halo arcs instead, or say all about the one of that NAME.")
@json_option
def command(name: str | None, out: Path | None, force: bool, arcs: bool, as_json: bool) -> None:
    """List the example scenes; with NAME, write a copy of that scene to start from.

    Example: skyoptics scenes double-bow
    """
    if arcs:
        _arcs(name, as_json)
        return
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


def _arcs(name: str | None, as_json: bool) -> None:
    """List the named halo arcs, or say what is on record about one."""
    from dataclasses import asdict

    from skyoptics.crystals import arcs

    if name is None:
        titles = {known: arcs.feature(known).title for known in arcs.names()}
        width = max(map(len, titles))
        lines = [f"{known:{width}}  {title}" for known, title in titles.items()]
        click.echo(json.dumps(titles, ensure_ascii=False) if as_json else "\n".join(lines))
        return
    entry = arcs.feature(name)
    if as_json:
        click.echo(json.dumps(asdict(entry), ensure_ascii=False))
        return
    click.echo(f"{entry.title}: {entry.where}")
    click.echo(f"kind: {entry.kind}; exists {entry.exists}")
    click.echo(f"told apart: {entry.told_apart}")
    for crystals in entry.crystals:
        paths = ", ".join("-".join(map(str, faces)) for faces in crystals.sequences)
        click.echo(f"crystals: {crystals.shape}, {crystals.law}; faces met: {paths}")
    click.echo("sources: " + "; ".join(entry.sources))
