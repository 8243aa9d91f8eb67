"""Files of a study: all of them or none."""

from __future__ import annotations

import csv
import os
from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from contextlib import ExitStack, suppress
from math import isnan
from pathlib import Path

import skyoptics
from skyoptics.colour.images import replacing
from skyoptics.colour.metadata import picture_metadata
from skyoptics.errors import ResourceError
from skyoptics.rendering.run import usable_cores
from skyoptics.study import plots, transfer
from skyoptics.study.dataset import dataset, put
from skyoptics.study.question import Question, Step
from skyoptics.study.result import COLUMNS, Progress, Study
from skyoptics.study.summary import markdown


def check_folder(folder: Path) -> None:
    """Make sure that a folder can be made and written to, before any work is done; leave nothing behind.

    Raises
    ------
    ResourceError
        In words.
    """
    there = folder
    while not there.exists() and there != there.parent:
        there = there.parent
    if not there.is_dir():
        raise ResourceError(f"cannot write into {folder}: {there} is a file; choose another folder with --out")
    if not os.access(there, os.W_OK | os.X_OK):
        raise ResourceError(f"cannot write into {folder}: {there} is not writable; choose another folder with --out")


def tables(question: Question) -> tuple[Step, ...]:
    """Return the steps whose tables for radiative transfer can be made: all, or a DomainError."""
    transfer.check(question)
    return question.steps()


def write(
    study: Study,
    folder: Path,
    command: Sequence[str] = (),
    tables: Sequence[Step] | None = None,
    threads: int | None = None,
    progress: Progress | None = None,
) -> list[Path]:
    """Write study.md, study.csv, study.nc and the plots, and tables for radiative transfer if steps are given.

    Parameters
    ----------
    study : Study
        Finished.
    folder : Path
        Made where it does not exist.
    command : sequence of str
        The command's words, kept as provenance.
    tables : sequence of Step, optional
        Steps whose scattering tables are wanted, from `tables`.
    threads : int, optional
        For the tables.
    progress : callable, optional
        Told about the tables.

    Returns
    -------
    list of Path
        What was written, the summary first.

    Raises
    ------
    ResourceError
        If the folder cannot be made or written to; then no file is left or replaced.
    """
    entries = picture_metadata(
        software="skyoptics",
        version=skyoptics.__version__,
        title=f"Droplet-size study by {study.question.sweep}",
        command=list(command) or None,
    )
    words = entries.get("Command", "")
    check_folder(folder)
    made = not folder.exists()
    written: list[Path] = []
    try:
        folder.mkdir(parents=True, exist_ok=True)
        with ExitStack() as stack:

            def aside(name: str) -> Path:
                written.append(folder / name)
                return stack.enter_context(replacing(folder / name))

            aside("study.md").write_text(markdown(study, words), encoding="utf-8")
            with aside("study.csv").open("w", encoding="utf-8", newline="") as file:
                table = csv.writer(file, lineterminator="\n")
                table.writerow(COLUMNS)
                for row in study.rows():
                    table.writerow([_cell(row[name]) for name in COLUMNS])
            put(dataset(study, words), aside("study.nc"))
            for name, figure in plots.figures(study).items():
                figure.savefig(aside(f"{name}.png"), metadata=entries)
            with ThreadPoolExecutor(threads or usable_cores()) as executor:
                for number, step in enumerate(tables or ()):
                    data = transfer.dataset(study.question, step, executor, words)
                    put(data, aside(transfer.name(study.question, step)))
                    if progress is not None:
                        progress("tables", number + 1, len(tables or ()))
    except BaseException:
        if made:
            with suppress(OSError):
                folder.rmdir()
        raise
    return written


def _cell(value: object) -> str:
    """Return a value as CSV text: numbers with nine digits, nothing where there is none."""
    if isinstance(value, float):
        return "" if isnan(value) else f"{value:.9g}"
    return str(value)
