"""``skyoptics phase``: scattering curve of one kind of particle, a subcommand a kind."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import click

from skyoptics.cli.options import Between, Command, NumberList, Word, json_option, lang_option, sampling_options
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
LOOKS = ("scale", "polar", "colour_band", "by_part", "errors", "marks", "lang")


def plot_options(part: str) -> Callable[[Command], Command]:
    """Return what adds --plot and how it looks; `part` is what light is parted by."""

    def add(function: Command) -> Command:
        for option in (
            lang_option,
            click.option("--marks", is_flag=True, help="In the plot: mark closed-form angles of bows or halos."),
            click.option("--errors", is_flag=True, help="In the plot: shade one standard error either side."),
            click.option(f"--by-{part}", "by_part", is_flag=True, help=f"In the plot: a line for each {part}."),
            click.option(
                "--colour-band", is_flag=True, help="In the plot: the colour of each direction in sunlight, as seen."
            ),
            click.option("--polar", is_flag=True, help="In the plot: around the particle, light from the left."),
            click.option(
                "--scale", type=Word(["log", "linear"]), default="log", show_default=True, help="Of the plot."
            ),
            click.option("--plot", type=click.Path(path_type=Path), help="Draw the curve: .png, .svg or .pdf file."),
        ):
            function = option(function)
        return function

    return add


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
@plot_options("order")
@json_option
@sampling_options
def drop(csv: Path | None, as_json: bool, **options: Any) -> None:
    """Scattering curve of a water drop.

    \b
    Example: skyoptics phase drop --wavelength-nm 450,550,650 --orders 2,3 --step-deg 0.01 --csv bow.csv
             skyoptics phase drop --by-order --marks --colour-band --plot curve.png
    """  # noqa: D301
    from skyoptics.rendering import curve

    plot, look = _look(options)
    _put_out(curve.drop, curve.DropCurve(**options), csv, as_json, plot, look)


@command.command("crystal")
@click.option(
    "--shape",
    type=Word(["prism", "bipyramid", "truncated-bipyramid", "pyramid", "trigonal"]),
    default="prism",
    show_default=True,
    help="Hexagonal prism; two pyramids base to base; the same cut off by basal faces, with a prism between; a prism with "
    "a pyramid on its upper end; a prism of triangular cross-section.",
)
@click.option(
    "--aspect",
    type=Between(0.01, 100),
    help="Length of the prism part along the c-axis ÷ diameter across corners; default 1, or that of a typical crystal of "
    "the shape; none for a bipyramid.",
)
@click.option(
    "--pyramid-upper",
    type=Between(0.001, 1),
    help="Height of the upper pyramid ÷ that of a pointed one (truncated-bipyramid, pyramid).",
)
@click.option(
    "--pyramid-lower",
    type=Between(0.001, 1),
    help="Height of the lower pyramid ÷ that of a pointed one (truncated-bipyramid).",
)
@click.option(
    "--trigonality", type=Between(0, 1), help="Of a trigonal prism: 0 a regular hexagon, 1 (default) a triangle."
)
@click.option(
    "--miller",
    type=NumberList(int, -9, 9, distinct=False),
    default="1,0,-1,1",
    show_default=True,
    help="Miller index of the pyramid faces: h,0,-h,l or h,h,-2h,l.",
)
@click.option(
    "--face-distances",
    type=NumberList(float, 0.05, 20, distinct=False),
    help="Six factors on the distances of the side faces from the c-axis; default a regular hexagon.",
)
@click.option(
    "--aspect-spread", type=Between(0, 1), default=0.0, help="Standard deviation of the logarithm of the aspect."
)
@click.option(
    "--distance-spread",
    type=Between(0, 0.5),
    default=0.0,
    help="Relative standard deviation of the distances of the faces.",
)
@click.option(
    "--diameter-um",
    type=Between(10, 10000),
    default=100.0,
    show_default=True,
    help="Diameter across corners, for --diffraction [µm].",
)
@click.option("--diffraction", is_flag=True, help="Spread the light by diffraction.")
@click.option(
    "--angle-spread-deg",
    type=Between(0, 5),
    default=0.0,
    help="Standard deviation of the angle between two faces [°].",
)
@click.option("--birefringence", is_flag=True, help="Tell the two indices of ice apart by polarisation.")
@click.option(
    "--extraordinary-index", type=Between(1.0001, 2), help="Second index of --index, which is then the ordinary one."
)
@click.option(
    "--draw",
    type=click.Path(path_type=Path),
    help="Draw the crystal into a PNG or SVG file, and do nothing else unless --csv or --json is given too.",
)
@WAVELENGTHS
@click.option("--index", type=Between(1.0001, 2), help="Constant refractive index instead of that of ice.")
@MEDIUM
@STEP
@DISC
@CSV
@plot_options("halo")
@json_option
@sampling_options
def crystal(csv: Path | None, as_json: bool, draw: Path | None, **options: Any) -> None:
    """Scattering curve of ice crystals in random orientation, named halos apart; drawing of a crystal.

    \b
    Example: skyoptics phase crystal --aspect 1.0 --wavelength-nm 550 --step-deg 0.05 --csv halo.csv
             skyoptics phase crystal --shape truncated-bipyramid --draw crystal.png
    """  # noqa: D301
    from skyoptics.rendering import curve

    plot, look = _look(options)
    asked = curve.CrystalCurve(**options)
    if draw is not None:
        curve.draw(asked, draw, click.echo)
        if csv is None and plot is None and not as_json:
            return
    _put_out(curve.crystal, asked, csv, as_json, plot, look)


def _look(options: dict[str, Any]) -> tuple[Path | None, dict[str, Any]]:
    """Take the options of the plot out of all options; without --plot they have no meaning and are refused."""
    plot, look = options.pop("plot"), {name: options.pop(name) for name in LOOKS}
    if plot is None and (any(look[name] for name in LOOKS[1:-1]) or look["scale"] != "log"):
        raise click.UsageError("--scale, --polar, --colour-band, --by-…, --errors and --marks go with --plot FILE")
    return plot, look


def _put_out(work: Any, asked: Any, csv: Path | None, as_json: bool, plot: Path | None, look: dict[str, Any]) -> None:
    """Work out a curve under a progress bar, write and draw it."""
    from skyoptics.cli import progress
    from skyoptics.rendering import curve_plot
    from skyoptics.rendering.curve import put_out

    if plot is not None:
        curve_plot.check(plot, curve_plot.Look(**look), len(asked.wavelength_nm))

    progress.note_first_compilation()
    with progress.shown() as tell:
        found = work(asked, tell)
    if plot is not None:
        curve_plot.draw(found, plot, curve_plot.Look(**look))
    put_out(found, csv, as_json, click.echo)
    if plot is not None and not as_json and str(csv) != "-":
        click.echo(str(plot))
