"""``skyoptics phase``: scattering curve of one kind of particle, a subcommand a kind."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from skyoptics.cli.options import NumberList, Word, json_option, sampling_options
from skyoptics.errors import nearest

KINDS = ("drop",)


class Kinds(click.Group):
    """The kinds of particle."""

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """Find a kind, or name the nearest one."""
        if args and args[0] not in KINDS and not args[0].startswith("-"):
            ctx.fail(f"no kind of particle {args[0]!r}{nearest(args[0], KINDS)} (there are {', '.join(KINDS)})")
        return super().resolve_command(ctx, args)


@click.group("phase", cls=Kinds, short_help="Scattering curve of one kind of particle.")
def command() -> None:
    """Scattering curve of one kind of particle: intensity and polarisation by scattering angle."""


@command.command("drop")
@click.option("--radius-um", type=click.FloatRange(1, 10000), default=500.0, show_default=True, help="Radius [µm].")
@click.option("--method", type=Word(["rays"]), default="rays", show_default=True, help="Ray optics.")
@click.option(
    "--wavelength-nm",
    type=NumberList(float, 200, 1100),
    default="450,550,650",
    show_default=True,
    help="Wavelengths in vacuum [nm].",
)
@click.option(
    "--temperature-c", type=click.FloatRange(-12, 99), default=20.0, show_default=True, help="Of the water [°C]."
)
@click.option("--index", type=click.FloatRange(1.0001, 3), help="Constant refractive index instead of that of water.")
@click.option(
    "--medium",
    type=Word(["air", "vacuum"]),
    default="air",
    show_default=True,
    help="What water's index is relative to.",
)
@click.option(
    "--orders",
    type=NumberList(int, 0, 10),
    help="Orders p to keep: 0 external reflection, 2 primary bow, …; default all.",
)
@click.option(
    "--step-deg", type=click.FloatRange(0.001, 10), default=0.1, show_default=True, help="Width of angle bins [°]."
)
@click.option("--disc", is_flag=True, help="Average over the sun's disc.")
@click.option("--csv", type=click.Path(path_type=Path, allow_dash=True), help="File for the curve; - for stdout.")
@json_option
@sampling_options
def drop(**options: Any) -> None:
    """Scattering curve of a water drop.

    Example: skyoptics phase drop --wavelength-nm 450,550,650 --orders 2,3 --step-deg 0.01 --csv bow.csv
    """
    from skyoptics.cli import progress
    from skyoptics.rendering import curve

    progress.note_first_compilation()
    with progress.shown() as tell:
        found = curve.drop(curve.DropCurve(**{name: options[name] for name in curve.DropCurve.__annotations__}), tell)
    curve.put_out(found, options["csv"], options["as_json"], click.echo)
