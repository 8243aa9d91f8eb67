"""Progress on stderr: a bar on a terminal, nothing in a pipe; a note when kernels are compiled for the first time."""

from __future__ import annotations

import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager

import click

from skyoptics.rendering.scatter import Progress, silent


@contextmanager
def shown() -> Iterator[Progress]:
    """Give a function that takes the news of a long job."""
    if not sys.stderr.isatty() or os.environ.get("TERM") == "dumb":
        yield silent
        return
    from rich.console import Console
    from rich.progress import BarColumn, TextColumn, TimeRemainingColumn
    from rich.progress import Progress as Bars

    columns = (
        TextColumn("{task.description}"),
        BarColumn(),
        TextColumn("{task.percentage:3.0f} %"),
        TimeRemainingColumn(),
    )
    with Bars(*columns, console=Console(stderr=True), transient=True) as bars:
        tasks: dict[str, int] = {}

        def tell(stage: str, done: int, total: int) -> None:
            if stage not in tasks:
                tasks[stage] = int(bars.add_task(stage, total=total))
            bars.update(tasks[stage], completed=done, total=total)  # type: ignore[arg-type]

        yield tell


def note_first_compilation() -> None:
    """Say that kernels are compiled, where this version's are not there yet."""
    from skyoptics.kernels import cache_folder

    folder = os.environ.get("NUMBA_CACHE_DIR") or str(cache_folder())
    if not any(name for _, _, files in os.walk(folder) for name in files if name.endswith(".nbi")):
        click.echo("compiling kernels, once for this version: some 20 seconds", err=True)
