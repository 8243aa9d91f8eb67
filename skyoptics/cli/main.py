"""The command table, and how a run ends.

Exit codes: 0 done, 1 faulty input, 2 wrong usage, 3 nothing found, 130 interrupted. Results go to stdout, all else to
stderr. A command's module is imported when the command is named; the help of the group reads this table alone.
"""

from __future__ import annotations

import contextlib
import sys
from importlib import import_module

import click

from skyoptics import __version__
from skyoptics.errors import NothingFoundError, SkyopticsError, nearest

COMMANDS = {
    "render": ("skyoptics.cli.render", "Scene file to picture and report."),
    "check": ("skyoptics.cli.check", "List every fault of scene files; render nothing."),
    "phase": ("skyoptics.cli.phase", "Scattering curve of one kind of particle."),
    "study": ("skyoptics.cli.study", "Sweep drop size: bow metrics, colours, tables, plots."),
    "when": ("skyoptics.cli.when", "When a bow or halo can stand at a place, or meets a subject."),
    "paths": ("skyoptics.cli.paths", "Draw the ways light takes through drops and crystals."),
    "frame": ("skyoptics.cli.frame", "Where arcs fall in a lens's frame, and which lens holds them."),
    "photo": ("skyoptics.cli.photo", "Arcs on a photograph; circles measured on it."),
    "page": ("skyoptics.cli.page", "Pictures under a slider, with readings: one HTML file."),
    "animate": ("skyoptics.cli.animate", "Film along a quantity: sun height, drop size, clock."),
    "scenes": ("skyoptics.cli.scenes", "List the example scenes, or write a copy of one."),
}


class Table(click.Group):
    """A group whose commands are loaded when they are named."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Return the names, in the order of the table."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """Import a command's module and return its `command`."""
        if cmd_name not in COMMANDS:
            return None
        command: click.Command = import_module(COMMANDS[cmd_name][0]).command
        return command

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """Find a command, or name the nearest one."""
        if args and args[0] not in COMMANDS and not args[0].startswith("-"):
            known = ", ".join(COMMANDS)
            ctx.fail(f"no command {args[0]!r}{nearest(args[0], COMMANDS)} (there are {known})")
        return super().resolve_command(ctx, args)

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """List the commands from the table, importing none."""
        with formatter.section("Commands"):
            formatter.write_dl([(name, text) for name, (_, text) in COMMANDS.items()])


@click.group(cls=Table, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, prog_name="skyoptics")
def cli() -> None:
    """Rainbows and ice-crystal halos: where they stand, how wide, how bright, in which colours.

    Begin with: skyoptics render double-bow
    """


def main() -> None:
    """Run the command line and leave with the right exit code."""
    for stream in (sys.stdout, sys.stderr):
        with contextlib.suppress(AttributeError):
            stream.reconfigure(errors="replace")  # type: ignore[union-attr]
    sys.exit(run(sys.argv[1:]))


def run(arguments: list[str]) -> int:
    """Run one command and return its exit code."""
    try:
        result = cli.main(arguments, prog_name="skyoptics", standalone_mode=False)
    except click.Abort:
        click.echo(
            "interrupted: nothing was left half-written, finished batches are kept; the same command goes on", err=True
        )
        return 130
    except click.ClickException as error:
        error.show()
        return error.exit_code
    except SkyopticsError as error:
        click.echo(str(error), err=True)
        return 3 if isinstance(error, NothingFoundError) else 1
    except MemoryError:
        click.echo("out of memory: make the picture smaller or take fewer wavelengths", err=True)
        return 1
    except SystemExit:  # outside its standalone mode, click leaves so for a closed pipe alone
        return 0
    return result if isinstance(result, int) else 0


if __name__ == "__main__":
    main()
