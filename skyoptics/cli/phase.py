"""``skyoptics phase``: scattering curve of one kind of particle, a subcommand a kind."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from skyoptics.cli.options import Between, NumberList, Word, json_option, sampling_options
from skyoptics.errors import nearest

KINDS = ("drop", "crystal")


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


WAVELENGTHS = click.option(
    "--wavelength-nm",
    type=NumberList(float, 200, 1100),
    default="450,550,650",
    show_default=True,
    help="Wavelengths in vacuum [nm].",
)
STEP = click.option(
    "--step-deg", type=Between(0.001, 10), default=0.1, show_default=True, help="Width of angle bins [°]."
)
MEDIUM = click.option(
    "--medium",
    type=Word(["air", "vacuum"]),
    default="air",
    show_default=True,
    help="What the index of water or ice is relative to.",
)
DISC = click.option("--disc", is_flag=True, help="Average over the sun's disc.")
CSV = click.option("--csv", type=click.Path(path_type=Path, allow_dash=True), help="File for the curve; - for stdout.")


@command.command("drop")
@click.option("--radius-um", type=Between(1, 10000), default=500.0, show_default=True, help="Radius [µm].")
@click.option(
    "--method",
    type=Word(["rays", "mie", "airy", "auto"]),
    default="rays",
    show_default=True,
    help="Ray optics, Lorenz-Mie, Airy's theory, or whichever fits.",
)
@click.option(
    "--spread", type=Between(0, 0.5), default=0.0, show_default=True, help="Gaussian, relative to the radius."
)
@WAVELENGTHS
@click.option("--temperature-c", type=Between(-12, 99), default=20.0, show_default=True, help="Of the water [°C].")
@click.option("--index", type=Between(1.0001, 3), help="Constant refractive index instead of that of water.")
@MEDIUM
@click.option(
    "--orders",
    type=NumberList(int, 0, 10),
    help="Orders p to keep: 0 external reflection, 2 primary bow, …; default all.",
)
@STEP
@DISC
@CSV
@json_option
@sampling_options
def drop(csv: Path | None, as_json: bool, **options: Any) -> None:
    """Scattering curve of a water drop.

    Example: skyoptics phase drop --wavelength-nm 450,550,650 --orders 2,3 --step-deg 0.01 --csv bow.csv
    """
    from skyoptics.rendering import curve

    _put_out(curve.drop, curve.DropCurve(**options), csv, as_json)


@command.command("crystal")
@click.option(
    "--aspect",
    type=Between(0.01, 100),
    default=1.0,
    show_default=True,
    help="Length along the c-axis ÷ diameter across corners.",
)
@WAVELENGTHS
@click.option("--index", type=Between(1.0001, 2), help="Constant refractive index instead of that of ice.")
@MEDIUM
@STEP
@DISC
@CSV
@json_option
@sampling_options
def crystal(csv: Path | None, as_json: bool, **options: Any) -> None:
    """Scattering curve of hexagonal ice prisms in random orientation.

    Example: skyoptics phase crystal --aspect 1.0 --wavelength-nm 550 --step-deg 0.05 --csv halo.csv
    """
    from skyoptics.rendering import curve

    _put_out(curve.crystal, curve.CrystalCurve(**options), csv, as_json)


def _put_out(work: Any, asked: Any, csv: Path | None, as_json: bool) -> None:
    """Work out a curve under a progress bar and write it."""
    from skyoptics.cli import progress
    from skyoptics.rendering.curve import put_out

    progress.note_first_compilation()
    with progress.shown() as tell:
        found = work(asked, tell)
    put_out(found, csv, as_json, click.echo)
