"""An answer as a table on the terminal; piped, plain text of 80 columns."""

from __future__ import annotations

import textwrap
from collections.abc import Iterator
from typing import TextIO

from skyoptics.planning.answers import Plan
from skyoptics.planning.rows import Rows, headings, rows, summary


def show(plan: Plan, body: str = "sun", stream: TextIO | None = None) -> None:
    """Print a plan.

    Parameters
    ----------
    plan : Plan
        The answer.
    body : {"sun", "moon"}
        What lights the feature.
    stream : text stream or None
        Where to; None for standard output. Escape codes go to a terminal only.
    """
    from rich.console import Console
    from rich.text import Text

    console = Console(file=stream, highlight=False, emoji=False, markup=False)
    width = max(console.width, 20)

    def say(line: str, style: str = "", first: str = "", rest: str = "") -> None:
        wrapped = textwrap.fill(line, width, initial_indent=first, subsequent_indent=rest)
        console.print(Text(wrapped, style=style), soft_wrap=True)

    for line, style in zip(headings(plan, body), ("bold", "", ""), strict=True):
        say(line, style)
    say(summary(plan, body))
    found = rows(plan, body)
    if found.cells:
        console.print()
        for k, line in enumerate(_lines(found, width)):
            console.print(Text(line, style="" if k else "bold"), soft_wrap=True)
        for line in found.legend:
            say(line, "dim")
    if plan.notes:
        console.print()
    for note in plan.notes:
        say(note, first="- ", rest="  ")


def _lines(table: Rows, room: int) -> Iterator[str]:
    """Yield the head, a rule and the rows, columns one or two spaces apart; wider than the room rather than cut."""
    full = [table.columns, *(cells for cells in table.cells if len(cells) > 1)]
    widths = [max(len(cells[k]) for cells in full) for k in range(len(table.columns))]
    gap = 2 if sum(widths) + 2 * (len(widths) - 1) <= room else 1

    def set_(cells: tuple[str, ...]) -> str:
        if len(cells) == 1:
            return cells[0]
        padded = [cells[0].ljust(widths[0]), *map(str.rjust, cells[1:], widths[1:])]
        return (" " * gap).join(padded).rstrip()

    yield set_(table.columns)
    yield "─" * (sum(widths) + gap * (len(widths) - 1))
    yield from map(set_, table.cells)
