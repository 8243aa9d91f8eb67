"""``skyoptics study``: what drop size does to a bow, in metrics, colours, tables and plots."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import click
from click.core import ParameterSource

from skyoptics.errors import DomainError


class Sweep(click.ParamType[str]):
    """A number, numbers parted by commas, or start:stop:steps."""

    name = "value or start:stop:steps"

    def __init__(self, quantity: str) -> None:
        self.quantity = quantity

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> str:
        """Return the text, once it is known to make sense."""
        from skyoptics.study.question import values

        try:
            values(self.quantity, str(value))
        except DomainError as error:
            self.fail(str(error), param, ctx)
        return str(value)


class Span(click.ParamType[tuple[float, float]]):
    """Two angles parted by a colon."""

    name = "from:to"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> tuple[float, float]:
        """Return them."""
        if isinstance(value, tuple):
            return value
        try:
            low, high = (float(word) for word in str(value).split(":"))
        except ValueError:
            self.fail(f"{value!r} is not two angles such as 130:150", param, ctx)
        return low, high


@click.command("study", short_help="Sweep drop size: bow metrics, colours, tables, plots.")
@click.option("--radius-um", type=Sweep("radius_um"), help="Radius [µm], 1 to 5000; steps in even ratios.")
@click.option(
    "--rain-mm-h", type=Sweep("rain_mm_h"), help="Rain rate [mm/h] instead: Marshall-Palmer spectra; even ratios."
)
@click.option(
    "--spread",
    type=Sweep("spread"),
    default="0.05",
    show_default=True,
    help="Standard deviation ÷ radius (Gaussian), 0 to 0.5; 0 is one size.",
)
@click.option(
    "--temperature-c", type=Sweep("temperature_c"), default="20", show_default=True, help="Of the water [°C]."
)
@click.option(
    "--wavelength-nm", type=Sweep("wavelength_nm"), help="Wavelengths in vacuum [nm]; default 400:700:31, even steps."
)
@click.option(
    "--method",
    default="mie,airy",
    show_default=True,
    help="Of mie, airy, rays, parted by commas; the first is the measure.",
)
@click.option("--index", type=float, help="Constant refractive index instead of that of water, 1 to 2.")
@click.option(
    "--medium",
    type=click.Choice(["air", "vacuum"]),
    default="air",
    show_default=True,
    help="What water's index is relative to.",
)
@click.option("--disc", is_flag=True, help="Average over the sun's disc.")
@click.option(
    "--map-deg", type=Span(), default="130:150", show_default=True, help="Scattering angles of colour maps [°]."
)
@click.option("--tolerance", type=float, default=0.02, show_default=True, help="Relative error of averages over sizes.")
@click.option("--transfer", is_flag=True, help="Also write Mueller elements and Legendre moments, a file a step (Mie).")
@click.option("--threads", type=click.IntRange(1, 1024), help="Worker threads; default all cores.")
@click.option("--out", type=click.Path(path_type=Path, file_okay=False), required=True, help="Folder for the files.")
@click.option("--json", "as_json", is_flag=True, help="Print the report as JSON on stdout.")
@click.pass_context
def command(
    context: click.Context, /, out: Path, transfer: bool, as_json: bool, map_deg: tuple[float, float], **options: Any
) -> None:
    """What drop size does to a bow: metrics, colours, tables and plots over a sweep.

    One of radius, rain rate, spread and temperature may be swept, as start:stop:steps. Written are study.csv, study.nc,
    study.md and plots, all of them or none.

    Example: skyoptics study --radius-um 10:1000:24 --method mie,airy --spread 0.05 --out outputs/drop-size
    """
    from skyoptics.cli import progress
    from skyoptics.study import output
    from skyoptics.study.run import answer, question

    asked = question(map_deg=map_deg, **{name: value for name, value in options.items() if name != "threads"})
    output.check_folder(out)
    tables = output.tables(asked) if transfer else None
    progress.note_first_compilation()
    with progress.shown() as tell:
        found = answer(asked, options["threads"], tell)
        files = output.write(found, out, _words(context), tables, options["threads"], tell)
    for note in found.warnings:
        click.echo(f"note: {note}", err=True)
    if as_json:
        click.echo(json.dumps({**found.report, "files": [path.name for path in files]}))
    else:
        for path in files:
            click.echo(str(path))


def _words(context: click.Context) -> list[str]:
    """Return the command's words, as given."""
    words = ["skyoptics", "study"]
    for option in context.command.params:
        name = str(option.name)
        if context.get_parameter_source(name) is not ParameterSource.COMMANDLINE:
            continue
        value = context.params[name]
        words.append(option.opts[0])
        if isinstance(value, tuple):
            words.append(":".join(f"{part:g}" for part in value))
        elif not isinstance(value, bool):
            words.append(str(value))
    return words
