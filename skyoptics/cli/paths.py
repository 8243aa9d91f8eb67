"""``skyoptics paths``: drawings of the ways light takes through a drop or a crystal, a subcommand each."""

from __future__ import annotations

import json
from collections.abc import Iterable
from pathlib import Path
from typing import Any

import click

from skyoptics.cli.options import Between, NumberList, Word, json_option, lang_option
from skyoptics.errors import DomainError, nearest

KINDS = ("drop", "crystal")
WHITE_NM = (650.0, 610.0, 585.0, 560.0, 530.0, 490.0, 440.0)
"""Wavelengths of white light, red first [nm]."""


class Kinds(click.Group):
    """The kinds of particle."""

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """Find a kind, or name the nearest one."""
        if args and args[0] not in KINDS and not args[0].startswith("-"):
            ctx.fail(f"no kind of particle {args[0]!r}{nearest(args[0], KINDS)} (there are {', '.join(KINDS)})")
        return super().resolve_command(ctx, args)


class Arc(click.ParamType[str]):
    """The name of a halo feature; hyphens do for underscores."""

    name = "arc"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> str:
        """Return the name as the table has it."""
        from skyoptics.crystals import arcs

        name = str(value).replace("-", "_")
        if name not in arcs.names():
            hint = nearest(name, arcs.names())
            self.fail(f"no halo feature is called {value!r}{hint} (skyoptics scenes --arcs lists them)", param, ctx)
        return name


@click.group("paths", cls=Kinds, short_help="Draw the ways light takes through drops and crystals.")
def command() -> None:
    """Draw rays through a drop or a crystal: true angles, shares of the light, SVG and PNG."""


SVG = click.option("--svg", type=click.Path(path_type=Path), help="SVG file to write.")
PNG = click.option("--png", type=click.Path(path_type=Path), help="PNG file to write.")
MEDIUM = click.option(
    "--medium",
    type=Word(["air", "vacuum"]),
    default="air",
    show_default=True,
    help="What the index of water or ice is relative to.",
)
LABELS = click.option(
    "--labels/--no-labels", default=True, show_default=True, help="Write angles and shares beside rays."
)


@command.command("drop")
@click.option(
    "--orders",
    type=NumberList(int, 0, 5),
    default="2",
    show_default=True,
    help="Orders p to draw to the end: 0 reflected outside, 1 straight through, 2 primary bow, 3 secondary, … 5.",
)
@click.option(
    "--impact",
    type=Between(0, 1),
    help="Impact parameter b: 0 through the centre, 1 grazing; default that of the rainbow ray.",
)
@click.option("--fan", type=click.IntRange(3, 41), help="This many rays around the rainbow ray instead of one.")
@click.option("--white", is_flag=True, help="White light, split into wavelengths from red to violet.")
@click.option(
    "--wavelength-nm", type=Between(200, 1100), default=589.0, show_default=True, help="Wavelength in vacuum [nm]."
)
@click.option("--temperature-c", type=Between(-12, 99), default=20.0, show_default=True, help="Of the water [°C].")
@click.option("--index", type=Between(1.0001, 3), help="Constant refractive index instead of that of water.")
@MEDIUM
@click.option("--normals", is_flag=True, help="Draw the normals where the surface is met.")
@click.option("--angles", is_flag=True, help="Mark angles of incidence, refraction and deviation; normals come along.")
@LABELS
@lang_option
@SVG
@PNG
@json_option
def drop(
    svg: Path | None, png: Path | None, as_json: bool, white: bool, fan: int | None, index: float | None, **options: Any
) -> None:
    """Draw rays through a spherical drop of water, and print their angles and shares.

    \b
    Example: skyoptics paths drop --orders 2 --impact 0.86 --svg drop.svg
             skyoptics paths drop --orders 2 --fan 11 --png fan.png
             skyoptics paths drop --orders 2,3 --white --svg colours.svg
    """  # noqa: D301
    if white and fan:
        raise click.UsageError("--fan and --white do not go together: a fan of white light would hide itself")
    if white and index is not None:
        raise click.UsageError("--white needs an index for each colour, that of water; leave --index out")
    if fan and options["impact"] is not None:
        raise click.UsageError("--fan goes around the rainbow ray, whose impact parameter is known; leave --impact out")
    if fan and len(options["orders"]) > 1:
        raise click.UsageError("--fan is drawn for one order; give one to --orders")
    _check(svg, png)
    from skyoptics.figures import drop_passage, ray_drop

    wavelengths = WHITE_NM if white else (() if index is not None else (options["wavelength_nm"],))
    indices = (index,) if index is not None else _water(wavelengths, options["temperature_c"], options["medium"])
    asked = drop_passage.DropRays(
        indices,
        wavelengths,
        options["orders"],
        options["impact"],
        fan or 0,
        options["normals"],
        options["angles"],
        options["labels"],
        options["lang"],
    )
    files = _write(lambda: ray_drop.draw(asked), svg, png)
    numbers = asked.numbers()
    if as_json:
        click.echo(json.dumps(numbers | {"files": files}, ensure_ascii=False))
        return
    for line in _drop_table(numbers):
        click.echo(line)
    for file in files:
        click.echo(file)


@command.command("crystal")
@click.option(
    "--arc", type=Arc(), required=True, help="Name of a halo feature, such as circumzenithal (see scenes --arcs)."
)
@click.option(
    "--sun-elevation-deg", type=Between(-90, 90), default=20.0, show_default=True, help="Height of the sun [°]."
)
@click.option(
    "--wavelength-nm", type=Between(200, 1100), default=589.0, show_default=True, help="Wavelength in vacuum [nm]."
)
@click.option("--index", type=Between(1.0001, 2), help="Constant refractive index instead of that of ice.")
@MEDIUM
@click.option("--normals", is_flag=True, help="Draw the normals of the faces met.")
@click.option("--angles", is_flag=True, help="Mark angles to the normals in the views that show them truly.")
@LABELS
@lang_option
@SVG
@PNG
@json_option
def crystal(
    svg: Path | None,
    png: Path | None,
    as_json: bool,
    arc: str,
    sun_elevation_deg: float,
    wavelength_nm: float,
    index: float | None,
    medium: str,
    **options: Any,
) -> None:
    """Draw the way a named arc's light takes through its crystal, and print angles and shares face by face.

    \b
    Example: skyoptics paths crystal --arc circumzenithal --sun-elevation-deg 20 --svg arc.svg
             skyoptics paths crystal --arc parhelia-120 --sun-elevation-deg 20 --angles --png arc.png
    """  # noqa: D301
    _check(svg, png)
    from skyoptics.figures import crystal_passage, ray_crystal
    from skyoptics.materials import index as material
    from skyoptics.units import DEG, NM

    n = float(material.ice(medium)(wavelength_nm * NM).real) if index is None else index
    found = crystal_passage.passage(arc, sun_elevation_deg * DEG, n)
    asked = ray_crystal.CrystalRay(found, wavelength_nm if index is None else None, **options)
    files = _write(lambda: ray_crystal.draw(asked), svg, png)
    numbers = found.numbers()
    if as_json:
        click.echo(json.dumps(numbers | {"files": files}, ensure_ascii=False))
        return
    for line in _crystal_table(numbers):
        click.echo(line)
    for file in files:
        click.echo(file)


def _crystal_table(numbers: dict[str, Any]) -> Iterable[str]:
    """Yield the figures of a ray through a crystal as lines."""
    yield (
        f"{numbers['arc']}: {numbers['shape']}, {numbers['law']}, faces {'-'.join(map(str, numbers['sequence']))}, "
        f"n = {numbers['index']:.5f}"
    )
    yield (
        f"seen at azimuth {numbers['seen_azimuth_deg']:.2f}° from the sun, elevation {numbers['seen_elevation_deg']:.2f}°, "
        f"deviation {numbers['deviation_deg']:.2f}°"
    )
    yield "face   light              met at   goes on at   share after"
    for one in numbers["faces"]:
        on = "         –" if one["refraction_deg"] is None else f"{one['refraction_deg']:9.2f}°"
        if one["does"] in ("reflects", "mirrors"):
            on = f"{one['incidence_deg']:9.2f}°"
        yield f"{one['face']:4d}   {one['does']:16}  {one['incidence_deg']:6.2f}°   {on}   {100 * one['share_after']:.4g} %"
    yield f"{100 * numbers['share']:.4g} % of the light takes this way; the rest, {100 * numbers['share_rest']:.4g} %, other ways"


def _water(wavelengths: Iterable[float], temperature_c: float, medium: str) -> tuple[float, ...]:
    from skyoptics.materials import index as material
    from skyoptics.units import CELSIUS_ZERO, NM

    law = material.water(temperature_c + CELSIUS_ZERO, medium)
    return tuple(float(law(wavelength * NM).real) for wavelength in wavelengths)


def _check(svg: Path | None, png: Path | None) -> None:
    """Refuse files of another kind before anything is worked out."""
    for option, path, suffix in (("--svg", svg, ".svg"), ("--png", png, ".png")):
        if path is not None and path.suffix.lower() != suffix:
            raise DomainError(f"{option} writes a {suffix} file; got {path.name}")


def _write(make: Any, svg: Path | None, png: Path | None) -> list[str]:
    """Draw once and write what is asked for."""
    wanted = [path for path in (svg, png) if path is not None]
    if wanted:
        drawing = make()
        for path in wanted:
            drawing.write(path)
    return [str(path) for path in wanted]


def _drop_table(numbers: dict[str, Any]) -> Iterable[str]:
    """Yield the figures of drops as lines."""
    yield "wavelength   index     b        i        r       p   deviation   share"
    for ray in numbers["rays"]:
        label = f"{ray['wavelength_nm']:7.1f} nm" if "wavelength_nm" in ray else "   given  "
        head = f"{label}   {ray['index']:.5f}   {ray['impact']:.4f}  {ray['incidence_deg']:6.2f}°  {ray['refraction_deg']:6.2f}°"
        for one in ray["exits"]:
            yield f"{head}   {one['order']}   {one['deviation_deg']:8.3f}°   {100 * one['share']:.4g} %"
    last = numbers["rays"][0]
    if len(numbers["rays"]) == 1:
        rest = f"{100 * last['share_rest']:.4g} %"
        yield f"drawn {100 * last['share_drawn']:.4g} % of the light; the rest, {rest}, leaves in other ways"
