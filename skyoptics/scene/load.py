"""Reading scene files: every fault of a file, and of the overrides laid over it, is told at once."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterable, Mapping, Sequence
from os import PathLike, fspath
from pathlib import Path
from typing import Any

from skyoptics.errors import Fault, SceneError
from skyoptics.scene.faults import KeyPath, dotted, examine
from skyoptics.scene.fields import printable
from skyoptics.scene.files import file_trouble, unreadable
from skyoptics.scene.model import Scene
from skyoptics.scene.overrides import apply_override, read_override
from skyoptics.scene.places import key_lines, line_of

LARGEST = 262144
"""Bytes a scene file may have."""

MOST_PARTS = 20
"""Parts a dotted key may have; tomllib takes memory by the square of their number."""

_PART = r"""(?:[A-Za-z0-9_-]+|"[^"\n]*"|'[^'\n]*')"""
_LONG_KEY = re.compile(rf"(?:^[ \t]*\[{{0,2}}|[{{,])[ \t]*(?:{_PART}[ \t]*\.[ \t]*){{{MOST_PARTS}}}", re.MULTILINE)
_PLACE = re.compile(r" \(at (?:line (\d+), column (\d+)|end of document)\)$")

_SYNTAX = (
    (r"Cannot overwrite a value", "this key was given before"),
    (r"Cannot declare \(.*\) twice", "this table was given before"),
    (r"Cannot (?:mutate immutable|expand immutable|redefine|declare)", "this was given before in another form"),
    (r"Duplicate inline table key", "this key was given before"),
    (r"Invalid value", 'no value stands here; text needs quotes, as in lens = "panorama"'),
    (r"Expected newline or end of document", "something follows the value; text needs quotes, and a comma is no point"),
    (r"Invalid statement", "neither a key nor a [table] starts here"),
    (r"Expected '=' after a key", 'a key must be followed by "="'),
    (r"Expected '\]+' at the end of a table", 'a table name must be closed by "]" or, for a list of tables, "]]"'),
    (r"Invalid initial character for a key part", "a key of letters, digits, - and _ was expected"),
    (r"Unclosed array", 'a list is not closed by "]", or lacks a comma'),
    (r"Unclosed inline table", 'a table is not closed by "}", or lacks a comma'),
    (r"Unterminated string|Expected", "a text is not closed by its quote"),
    (r"Unescaped", r'a backslash in "text" must be doubled, or the text put in single quotes'),
    (r"Illegal character|Invalid hex value|Escaped character", "a character that may not stand in a text"),
    (r"Found invalid character", "a control character stands in a comment"),
    (r"Invalid date", "a date that does not exist"),
)
"""How tomllib's messages start, and what we say instead."""


def load(path: str | PathLike[str], overrides: Iterable[str] = ()) -> Scene:
    """Read a scene file.

    Parameters
    ----------
    path : path-like
        The TOML file.
    overrides : iterable of str
        ``TABLE.KEY=VALUE``, laid over the file in order, list entries counted from 1.

    Returns
    -------
    Scene
        The scene, paths in it made absolute.

    Raises
    ------
    SceneError
        With all faults of the file and the overrides.
    """
    scene, faults = _load(path, overrides)
    if scene is None:
        raise SceneError(faults)
    return scene


def check(paths: Iterable[str | PathLike[str]]) -> list[Fault]:
    """Return all faults of all files; an empty list if there is none.

    Parameters
    ----------
    paths : iterable of path-like
        Scene files.
    """
    return [fault for path in paths for fault in _load(path, ())[1]]


def from_text(
    source: str, where: str = "scene", folder: str | PathLike[str] | None = None, overrides: Iterable[str] = ()
) -> Scene:
    """Read a scene from TOML text.

    Parameters
    ----------
    source : str
        The text.
    where : str
        What faults call it.
    folder : path-like, optional
        Folder that paths in the scene are counted from; without it they are left as they are and not looked at.
    overrides : iterable of str
        As for `load`.

    Returns
    -------
    Scene
        The scene.

    Raises
    ------
    SceneError
        With all faults.
    """
    scene, faults = _read(source, where, None if folder is None else Path(folder), overrides)
    if scene is None:
        raise SceneError(faults)
    return scene


def from_mapping(data: Mapping[str, Any], where: str = "scene", folder: str | PathLike[str] | None = None) -> Scene:
    """Make a scene from nested dictionaries in the shape of a scene file.

    Parameters
    ----------
    data : mapping
        Tables and keys as in a file.
    where : str
        What faults call it.
    folder : path-like, optional
        As for `from_text`.

    Returns
    -------
    Scene
        The scene.

    Raises
    ------
    SceneError
        With all faults.
    """
    scene, findings = examine(data, None if folder is None else Path(folder).absolute())
    if scene is None:
        raise SceneError([Fault(where, None, dotted(path), message) for path, message in findings])
    return scene


def _load(path: str | PathLike[str], overrides: Iterable[str]) -> tuple[Scene | None, list[Fault]]:
    """Return the scene of a file, or its faults."""
    file = Path(fspath(path))
    where = printable(str(file), 300)
    trouble = list(file_trouble(file))
    if trouble:
        return None, [Fault(where, None, "", trouble[0])]
    try:
        with file.open("rb") as stream:
            content = stream.read(LARGEST + 1)
    except OSError as error:
        return None, [Fault(where, None, "", unreadable(error))]
    if len(content) > LARGEST:
        return None, [Fault(where, None, "", f"is larger than {LARGEST // 1024} kB, which no scene file is")]
    try:
        source = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        return None, [Fault(where, line, "", "is not UTF-8 text; save it in the encoding UTF-8")]
    return _read(source, where, file.parent.absolute(), overrides)


def _read(source: str, where: str, folder: Path | None, overrides: Iterable[str]) -> tuple[Scene | None, list[Fault]]:
    """Return the scene of a text, or its faults."""
    source = source.replace("\r\n", "\n")
    parsed = _parse(source, where)
    faults = [parsed] if isinstance(parsed, Fault) else []
    places: list[tuple[KeyPath, str]] = []
    for words in overrides:
        override = read_override(words)
        if isinstance(override, str):
            faults.append(Fault("--set", None, "", override))
        elif not isinstance(parsed, Fault):
            path, message = apply_override(parsed, override)
            if message is None:
                places.append((path, f"--set {override.name}"))
            else:
                faults.append(Fault(f"--set {override.name}", None, "", message))
    if isinstance(parsed, Fault):
        return None, faults
    scene, findings = examine(parsed, folder)
    if not findings:
        return (None, faults) if faults else (scene, [])
    lines = key_lines(source)
    found = [_fault(path, message, where, lines, places) for path, message in findings]
    found.sort(key=lambda fault: (fault.where != where, len(source) if fault.line is None else fault.line))
    return None, found + faults


def _parse(source: str, where: str) -> dict[str, Any] | Fault:
    """Return what tomllib reads, or why it cannot."""
    long_key = _LONG_KEY.search(source)
    if long_key is not None:
        line = source.count("\n", 0, long_key.end()) + 1
        return Fault(where, line, "", f"a key has more than {MOST_PARTS} parts; no key of a scene has more than 3")
    try:
        data = tomllib.loads(source)
    except RecursionError:
        return Fault(where, None, "", "lists or tables are nested too deeply")
    except ValueError as error:
        return _syntax_fault(where, str(error), source)
    words = "is empty; a scene needs a [light] table with elevation_deg and at least one [[air]] table"
    return data or Fault(where, None, "", words)


def _fault(
    path: KeyPath, message: str, where: str, lines: dict[KeyPath, int], places: Sequence[tuple[KeyPath, str]]
) -> Fault:
    """Return a fault with its place: in the file, or in the last override that touched it."""
    for changed, name in reversed(places):
        if path and (path[: len(changed)] == changed or changed[: len(path)] == path):
            return Fault(name, None, "" if path == changed else dotted(path), message)
    return Fault(where, line_of(path, lines), dotted(path), message)


def _syntax_fault(where: str, words: str, source: str) -> Fault:
    """Return the fault for a text that is no TOML."""
    place = _PLACE.search(words)
    if place is None:
        # The one ValueError of tomllib without a place: Python refuses to read integers of more than 4300 digits.
        return Fault(where, None, "", "is not valid TOML: a number has too many digits")
    said = next((ours for theirs, ours in _SYNTAX if re.match(theirs, words)), "this cannot be understood")
    if place[1] is None:
        return Fault(where, source.rstrip().count("\n") + 1, "", f"is not valid TOML: {said}")
    return Fault(where, int(place[1]), "", f"is not valid TOML: {said} (column {place[2]})")
