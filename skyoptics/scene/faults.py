"""What is wrong with a scene, in our own words: every fault of the whole scene in one pass."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from difflib import get_close_matches
from functools import cache
from pathlib import Path
from typing import Any

from pydantic import BaseModel, ValidationError

from skyoptics.scene.fields import Rule, printable, rule_of, shown
from skyoptics.scene.files import file_trouble
from skyoptics.scene.model import KINDS, Aim, Camera, Light, Medium, Particles, Picture, Scene, Table

KeyPath = tuple[str | int, ...]
"""Keys and list places, counted from 0, from the top of the file down."""

Finding = tuple[KeyPath, str]
"""Where and what."""

MOST_FINDINGS = 100
"""Faults told of one file; past that their number is enough."""

_BARE = re.compile(r"[A-Za-z0-9_-]+")
_ABSENT = object()


def examine(data: Mapping[str, Any], folder: Path | None) -> tuple[Scene | None, list[Finding]]:
    """Check a parsed scene file.

    Parameters
    ----------
    data : mapping
        The file as tomllib reads it.
    folder : Path or None
        Folder that paths in the scene are counted from; ``None`` leaves them as they are.

    Returns
    -------
    scene : Scene or None
        The scene, if there is no fault.
    findings : list of (path, message)
        Every fault, in the order of the model, at most `MOST_FINDINGS` and one that counts the rest.
    """
    scene, findings = _examine(Scene, data, (), folder)
    for place, entry in enumerate(data["air"] if isinstance(data.get("air"), list | tuple) else ()):
        path = entry.get("index_table") if isinstance(entry, dict) else None
        if isinstance(path, str) and path and folder is not None:
            for trouble in file_trouble(Path(folder, path)):
                message = f'must be the path of a CSV file, got "{printable(path)}": {trouble}'
                findings.append((("air", place, "index_table"), message))
    if len(findings) > MOST_FINDINGS:
        findings = [*findings[:MOST_FINDINGS], ((), f"and {len(findings) - MOST_FINDINGS} more faults")]
    return (None if findings else scene), findings


def dotted(path: KeyPath) -> str:
    """Return a path as people write it: tables of a list counted from 1, odd keys in quotes."""
    parts = []
    for part in path:
        if isinstance(part, int):
            parts.append(str(part + 1))
        elif _BARE.fullmatch(part):
            parts.append(printable(part))
        else:
            parts.append(f'"{printable(part)}"')
    return ".".join(parts)


def rule_at(path: KeyPath, data: Any, model: type[Table] = Scene) -> Rule | None:
    """Return the rule for a place in a scene, or ``None`` where nothing is known.

    Parameters
    ----------
    path : tuple
        The place.
    data : dict
        The parsed file, which says of what kind each [[air]] table is.
    model : type
        The model of the table that `path` and `data` start from.
    """
    rule: Rule | None = Rule("table", table=model)
    for depth, part in enumerate(path):
        if rule is None:
            return None
        if isinstance(part, int):
            rule = rule.item
            if rule is not None and rule.form == "table":
                rule = Rule("table", table=_kind_of(value_at(path[: depth + 1], data)))
        else:
            field = rule.table.model_fields.get(part) if rule.table is not None else None
            rule = None if field is None else rule_of(field)
    return rule


def value_at(path: KeyPath, data: Any) -> Any:
    """Return the value at a place of parsed data, or a mark of absence that is no TOML value."""
    for part in path:
        inside = isinstance(data, dict) and part in data
        if isinstance(data, list | tuple) and isinstance(part, int):
            inside = 0 <= part < len(data)
        if not inside:
            return _ABSENT
        data = data[part]
    return data


def _examine(model: type[Table], data: Any, prefix: KeyPath, folder: Path | None) -> tuple[Any, list[Finding]]:
    """Check a table and what is in it; return the model, or ``None``, and what was found."""
    try:
        return model.model_validate(data, context={"folder": folder}), []
    except ValidationError as error:
        # The inputs are looked up in `data` instead: those in the errors may be integers too long to be written out.
        details = error.errors(include_url=False, include_input=False)
    findings: list[Finding] = []
    faulty: set[KeyPath] = set()
    for detail in details:
        path = _without_tags(prefix + tuple(detail["loc"]), prefix)
        inner = path[len(prefix) :]
        value = value_at(inner, data)
        if (
            detail["type"] == "too_short"
            and isinstance(value, list | tuple)
            and len(value) >= detail["ctx"]["min_length"]
        ):
            continue  # Only sound entries were counted; the others are told of one by one.
        if detail["type"] == "missing" and isinstance(path[-1], int):
            path, inner = path[:-1], inner[:-1]
            value = value_at(inner, data)
            if path in faulty:
                continue  # A list that is too short is told of once, not for every entry that it lacks.
        faulty.add(path)
        if len(findings) >= MOST_FINDINGS:
            findings.append((path, ""))  # Only counted: finding words and near names for thousands takes time.
            continue
        match detail["type"]:
            case "words":
                findings.append((path, detail["msg"]))
            case "conflicts":
                findings += [((*path, *key.split(".")), message) for key, message in detail["ctx"]["conflicts"]]
            case "extra_forbidden":
                findings.append((path, _unknown(path, model, inner, data)))
            case "missing" if value is _ABSENT:
                findings.append((path, _missing(path, rule_at(inner, data, model))))
            case "union_tag_invalid" | "union_tag_not_found" if isinstance(value, dict):
                findings += _wrong_kind(path, value, folder)
            case _:
                rule = rule_at(inner, data, model) or Rule("table")
                findings.append((path, _refusal(path, rule, value)))
    return None, findings + _conflicts_beside(model, data, prefix, faulty)


def _refusal(path: KeyPath, rule: Rule, value: Any) -> str:
    """Return the message for a value of the wrong type or outside its range."""
    if path == ("air",) and isinstance(value, dict):
        return "must be written [[air]], in double brackets: one table for each kind of particle"
    if path == ("air",) and value == []:
        return f"is empty; a scene needs at least one [[air]] table with kind = {_choices(KINDS)}"
    if rule.form == "table" and len(path) == 1:
        return f"must be a table, written [{path[0]}], got {shown(value)}"
    return rule.refusal(value)


def _missing(path: KeyPath, rule: Rule | None) -> str:
    """Return the message for a key that has to be there."""
    if path == ("light",):
        return "is missing; a scene needs a [light] table with elevation_deg, the height of the sun"
    if path == ("air",):
        return f"is missing; a scene needs at least one [[air]] table with kind = {_choices(KINDS)}"
    return f"is missing; must be {rule.allowed() if rule else 'given'}"


def _unknown(path: KeyPath, model: type[Table], inner: KeyPath, data: Any) -> str:
    """Return the message for an unknown key: the table it belongs in, else the nearest name, else all names."""
    key = str(path[-1])
    rule = rule_at(inner[:-1], data, model)
    known = [] if rule is None or rule.table is None else list(rule.table.model_fields)
    homes = _homes()
    if key in homes:
        return f"unknown key here; it belongs {' or '.join(homes[key])}"
    close = _closest(key, known)
    if close is not None:
        return f"unknown key; did you mean {close}?"
    elsewhere = _closest(key, homes)
    if elsewhere is not None:
        return f"unknown key; did you mean {elsewhere}, which belongs {' or '.join(homes[elsewhere])}?"
    return f"unknown key; the keys here are {', '.join(known)}"


@cache
def _homes() -> dict[str, list[str]]:
    """Return, for every key there is, where it belongs."""
    homes: dict[str, list[str]] = {}
    places: list[tuple[str, type[BaseModel]]] = [
        ("at the top of the file, before the first table", Scene),
        ("in [light]", Light),
        ("in [medium]", Medium),
        *(("in [[air]]", kind) for kind in KINDS.values()),
        ("in [camera]", Camera),
        ("in camera.aim", Aim),
        ("in [picture]", Picture),
    ]
    for place, model in places:
        for key in model.model_fields:
            tables = ("light", "medium", "air", "camera", "picture")
            where = "at the top level of the file" if model is Scene and key in tables else place
            if where not in homes.setdefault(key, []):
                homes[key].append(where)
    return homes


def _wrong_kind(path: KeyPath, value: Any, folder: Path | None) -> list[Finding]:
    """Return the fault of an [[air]] table without a known kind, and its other faults as the nearest kind."""
    if "kind" not in value:
        message = f"is missing; must be {_choices(KINDS)}"
    else:
        message = Rule("choice", choices=tuple(KINDS)).refusal(value["kind"])
    kind = _kind_of(value)
    return [((*path, "kind"), message), *_examine(kind, {**value, "kind": kind.NAME}, path, folder)[1]]


def _kind_of(table: Any) -> type[Particles]:
    """Return the model of an [[air]] table: of its kind, of the nearest one, or of the first."""
    given = table.get("kind") if isinstance(table, dict) else None
    name = _closest(given, KINDS) if isinstance(given, str) else None
    return KINDS[name] if name is not None else next(iter(KINDS.values()))


def _conflicts_beside(model: type[Table], data: Any, prefix: KeyPath, faulty: set[KeyPath]) -> list[Finding]:
    """Return conflicts between the sound keys of tables that have a fault, which the models never came to look at."""
    findings: list[Finding] = []
    for table_path in {path[:depth]: None for path in faulty for depth in range(len(prefix), len(path))}:
        inner = table_path[len(prefix) :]
        table, rule = value_at(inner, data), rule_at(inner, data, model)
        if not isinstance(table, dict) or rule is None or rule.table is None or not issubclass(rule.table, Table):
            continue
        wrong = {path[len(table_path)] for path in faulty if path[: len(table_path)] == table_path != path}
        fields = rule.table.model_fields
        sound = {name: table.get(name, field.default) for name, field in fields.items() if name not in wrong}
        findings += [((*table_path, *key.split(".")), message) for key, message in rule.table.conflicts(sound)]
    return findings


def _closest(name: str, names: Iterable[str]) -> str | None:
    """Return the name nearest to a misspelt one."""
    match = get_close_matches(name[:60].lower(), list(names), n=1, cutoff=0.6)
    return match[0] if match else None


def _without_tags(path: KeyPath, prefix: KeyPath) -> KeyPath:
    """Drop the member names that pydantic puts into the place of a fault inside a union."""
    if path[:1] == ("air",) and len(path) > 2 and not prefix:
        path = path[:2] + path[3:]
    if path[:2] == ("camera", "aim") and len(path) > 2:
        path = path[:2] + path[3:]
    return path


def _choices(names: Mapping[str, Any]) -> str:
    """Return names in quotes, joined by "or"."""
    return Rule("choice", choices=tuple(names)).allowed()
