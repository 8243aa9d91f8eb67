"""Where each key of a TOML text stands: the line number, which tomllib does not keep."""

from __future__ import annotations

import re
import tomllib
from bisect import bisect_right
from contextlib import suppress

DEEPEST = 8
"""Parts of a path that are noted; no key of a scene lies deeper than 4."""

_BLANK = re.compile(r"(?:[ \t\r\n]+|#[^\n]*)*")
_SPACE = re.compile(r"[ \t]*")
_BARE = re.compile(r"[A-Za-z0-9_-]+")
_TEXT = re.compile(
    r'"""(?:\\.|[^\\])*?"{3,5}' + r"|'''.*?'{3,5}" + r'|"(?:\\.|[^"\\\n])*"' + r"|'[^'\n]*'",
    re.DOTALL,
)
_PLAIN = re.compile(r"[^,\]}#\n]+")

KeyPath = tuple[str | int, ...]


def key_lines(source: str) -> dict[KeyPath, int]:
    """Return the line of every key and table.

    Parameters
    ----------
    source : str
        A TOML text that tomllib accepts.

    Returns
    -------
    dict
        Line, counted from 1, by path: keys, and places in lists counted from 0. The first mention counts. Of a text
        that is no TOML, what could be understood.
    """
    scanner = _Scanner(source)
    # A text that tomllib takes raises nothing here; for any other, a line number is not worth a second failure.
    with suppress(IndexError, AttributeError, RecursionError, ValueError):
        scanner.run()
    return scanner.lines


def line_of(path: KeyPath, lines: dict[KeyPath, int]) -> int | None:
    """Return the line of a path, else that of the nearest table around it.

    Parameters
    ----------
    path : tuple
        The place.
    lines : dict
        From `key_lines`.
    """
    return next((lines[path[:depth]] for depth in range(len(path), 0, -1) if path[:depth] in lines), None)


class _Scanner:
    """Walks once through a text."""

    def __init__(self, source: str) -> None:
        self.source = source
        self.place = 0
        self.lines: dict[KeyPath, int] = {}
        self.counts: dict[KeyPath, int] = {}
        self.newlines = [match.start() for match in re.finditer("\n", source)]

    def run(self) -> None:
        """Note all statements."""
        table: KeyPath = ()
        while self.blank() < len(self.source):
            start = self.place
            if self.source.startswith("[[", start):
                self.place += 2
                path = self.inside(self.key(), start)
                count = self.counts.get(path, 0)
                self.counts[path] = count + 1
                self.note(path, start)
                table = (*path, count)
                self.note(table, start)
                self.place += 2
            elif self.source[start] == "[":
                self.place += 1
                *around, last = self.key()
                table = (*self.here(self.inside(around, start)), last) if around else (last,)
                self.note(table, start)
                self.place += 1
            else:
                self.pair(table)

    def inside(self, parts: list[str], start: int) -> KeyPath:
        """Note the tables that a header names; return its path, tables of a list being the latest ones."""
        path: KeyPath = ()
        for part in parts:
            path = (*self.here(path), part) if len(path) < DEEPEST else path
            self.note(path, start)
        return path

    def here(self, path: KeyPath) -> KeyPath:
        """Return the latest table of a list, or the path itself."""
        return (*path, self.counts[path] - 1) if path in self.counts else path

    def blank(self) -> int:
        """Step over space, line ends and comments."""
        self.place = _BLANK.match(self.source, self.place).end()  # type: ignore[union-attr]
        return self.place

    def key(self) -> list[str]:
        """Step over a key and return its parts."""
        parts = []
        while True:
            self.place = _SPACE.match(self.source, self.place).end()  # type: ignore[union-attr]
            if self.source[self.place] in "\"'":
                token = _TEXT.match(self.source, self.place).group()  # type: ignore[union-attr]
                parts.append(tomllib.loads(f"key = {token}")["key"])
            else:
                token = _BARE.match(self.source, self.place).group()  # type: ignore[union-attr]
                parts.append(token)
            self.place = _SPACE.match(self.source, self.place + len(token)).end()  # type: ignore[union-attr]
            if self.source[self.place] != ".":
                return parts
            self.place += 1

    def pair(self, table: KeyPath) -> None:
        """Step over ``key = value`` and note the key and every table that it opens."""
        start = self.place
        path = table
        for part in self.key():
            path = (*path, part) if len(path) < DEEPEST else path
            self.note(path, start)
        self.place += 1
        self.value(path)

    def value(self, path: KeyPath) -> None:
        """Step over a value, noting what is in lists and tables."""
        self.place = _SPACE.match(self.source, self.place).end()  # type: ignore[union-attr]
        letter = self.source[self.place]
        if letter in "\"'":
            self.place = _TEXT.match(self.source, self.place).end()  # type: ignore[union-attr]
        elif letter in "[{":
            self.place += 1
            end, count = ("]" if letter == "[" else "}"), 0
            while self.source[self.blank()] != end:
                if letter == "[":
                    inner: KeyPath = (*path, count) if len(path) < DEEPEST else path
                    self.note(inner, self.place)
                    self.value(inner)
                else:
                    self.pair(path)
                count += 1
                if self.source[self.blank()] == ",":
                    self.place += 1
            self.place += 1
        else:
            self.place = _PLAIN.match(self.source, self.place).end()  # type: ignore[union-attr]

    def note(self, path: KeyPath, start: int) -> None:
        """Remember the first line on which a path is named."""
        self.lines.setdefault(path, bisect_right(self.newlines, start - 1) + 1)
