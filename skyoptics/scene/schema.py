"""Help rows, the reference page and the JSON Schema of scene files, all from the fields of the model.

``python -m skyoptics.scene.schema [FOLDER]`` writes ``scene-reference.md`` and ``scene.schema.json`` into FOLDER, by
default ``docs``.
"""

from __future__ import annotations

import json
import sys
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pydantic import BaseModel
from pydantic.json_schema import GenerateJsonSchema, JsonSchemaValue
from pydantic_core import core_schema

from skyoptics.errors import DomainError, nearest
from skyoptics.scene.fields import rule_of
from skyoptics.scene.model import KINDS, Aim, Camera, Light, Medium, Picture, Scene, Table

TABLES: Mapping[str, type[Table]] = {
    "scene": Scene,
    "light": Light,
    "medium": Medium,
    **{f"air.{name}": kind for name, kind in KINDS.items()},
    "camera": Camera,
    "camera.aim": Aim,
    "picture": Picture,
}
"""Model by name of a table; ``scene`` is the top of the file."""

PAGE_NAME = "scene-reference.md"
SCHEMA_NAME = "scene.schema.json"

_SHORTEST = """\
```toml
[light]
elevation_deg = 20

[[air]]
kind = "drops"
```
"""


@dataclass(frozen=True)
class Row:
    """One key of a table, in words.

    Parameters
    ----------
    key : str
        Its name.
    allowed : str
        What it may hold, with the unit.
    default : str
        What it is where it is left out, as written in TOML; ``required`` or ``–`` (none).
    unit : str
        Its unit; empty for a pure number and for what is no number.
    text : str
        What it means.
    """

    key: str
    allowed: str
    default: str
    unit: str
    text: str


def describe(table: str) -> list[Row]:
    """Return what is to be known of each key of a table.

    Parameters
    ----------
    table : str
        A name of `TABLES`: ``scene`` (the top of the file), ``light``, ``medium``, ``air.drops``, ``camera``,
        ``camera.aim``, ``picture``.

    Returns
    -------
    list of Row
        In the order of the reference page; for ``scene`` the keys that are no tables.

    Raises
    ------
    DomainError
        If there is no such table.
    """
    if table not in TABLES:
        raise DomainError(f"there is no table {table!r}{nearest(table, TABLES)}; there are {', '.join(TABLES)}")
    rows = []
    for key, field in TABLES[table].model_fields.items():
        rule = rule_of(field)
        if table == "scene" and (rule.form == "table" or (rule.item is not None and rule.item.form == "table")):
            continue
        extra = field.json_schema_extra if isinstance(field.json_schema_extra, dict) else {}
        default = field.default if field.default is not None else extra.get("default")
        shown = "required" if field.is_required() else "–" if default is None else _toml(default)
        unit = rule.item.unit if rule.item is not None else str(extra.get("unit", ""))
        rows.append(Row(key, rule.allowed(), shown, unit, field.description or ""))
    return rows


def reference_page() -> str:
    """Return the reference page of scene files, in Markdown."""
    parts = [
        "# Scene files",
        "A scene is a TOML file, read as UTF-8. Each number stands in the unit that its key ends with. Unknown keys "
        "and values outside the stated range are faults, and all faults of a file are told at once. Paths are counted "
        "from the folder of the scene file. The shortest scene is:",
        _SHORTEST.strip(),
        "This page and `scene.schema.json` are written by `python -m skyoptics.scene.schema`, not by hand.",
    ]
    for name, model in TABLES.items():
        parts += [f"## {_heading(name)}", (model.__doc__ or "").strip(), _markdown_table(describe(name))]
    return "\n\n".join(parts) + "\n"


def json_schema() -> dict[str, Any]:
    """Return the JSON Schema (draft 2020-12) of a scene file.

    Returns
    -------
    dict
        Each key has its description, range and default; ``unit`` names the unit of a number. What several keys decide
        together (such as a panorama having no focal length) is not in it.
    """
    schema = Scene.model_json_schema(schema_generator=_Generator)
    head = {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        "title": "skyoptics scene",
        "description": "A scene file of skyoptics: what lights it, what floats in the air, who looks, what comes out.",
    }
    return head | {key: value for key, value in schema.items() if key not in head}


def write(folder: Path) -> list[Path]:
    """Write the reference page and the schema.

    Parameters
    ----------
    folder : Path
        Where to; it has to exist.

    Returns
    -------
    list of Path
        The files written.
    """
    texts = {PAGE_NAME: reference_page(), SCHEMA_NAME: json.dumps(json_schema(), indent=2, ensure_ascii=False) + "\n"}
    for name, words in texts.items():
        (folder / name).write_text(words, encoding="utf-8", newline="\n")
    return [folder / name for name in texts]


class _Generator(GenerateJsonSchema):
    """JSON Schema without null, which TOML does not have, and without names made up for fields."""

    def nullable_schema(self, schema: core_schema.NullableSchema) -> JsonSchemaValue:
        return self.generate_inner(schema["schema"])

    def default_schema(self, schema: core_schema.WithDefaultSchema) -> JsonSchemaValue:
        result = super().default_schema(schema)
        if result.get("default", ...) is None:
            del result["default"]
        if isinstance(schema.get("default"), BaseModel):
            result.pop("default", None)
        return result

    def field_title_should_be_set(self, schema: Any) -> bool:
        return False


def _heading(name: str) -> str:
    """Return the heading of a table as it is written in a scene file."""
    if name == "scene":
        return "Top of the file"
    if name == "camera.aim":
        return "`[camera]` `aim = { … }`"
    table, _, kind = name.partition(".")
    return f'`[[{table}]]` with `kind = "{kind}"`' if kind else f"`[{table}]`"


def _markdown_table(rows: Sequence[Row]) -> str:
    """Return rows as a Markdown table."""
    lines = ["| key | allowed | default | meaning |", "|---|---|---|---|"]
    for row in rows:
        default = row.default if row.default in ("required", "–") else f"`{row.default}`"
        lines.append(f"| `{row.key}` | {row.allowed} | {default} | {row.text} |")
    return "\n".join(lines)


def _toml(value: Any) -> str:
    """Return a default as written in TOML."""
    if isinstance(value, list | tuple):
        return "[" + ", ".join(_toml(entry) for entry in value) + "]"
    if isinstance(value, bool):
        return "true" if value else "false"
    return f'"{value}"' if isinstance(value, str) else f"{value:.12g}"


if __name__ == "__main__":
    write(Path(sys.argv[1] if len(sys.argv) > 1 else "docs"))
