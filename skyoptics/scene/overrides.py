"""Overrides on the command line: ``TABLE.KEY=VALUE`` laid over a parsed scene file."""

from __future__ import annotations

import re
import tomllib
from dataclasses import dataclass
from typing import Any

from skyoptics.scene.faults import KeyPath, rule_at, value_at
from skyoptics.scene.fields import printable

EXAMPLE = "light.elevation_deg=20"

MOST_PARTS = 8
"""Parts that the path of an override may have; no key of a scene has more than 4."""

_PART = re.compile(r"[A-Za-z0-9_-]+")


@dataclass(frozen=True)
class Override:
    """One override, read but not yet applied.

    Parameters
    ----------
    parts : tuple of str
        The path as given, list places counted from 1.
    value : object
        The value.
    raw : str
        The value as given.
    """

    parts: tuple[str, ...]
    value: Any
    raw: str

    @property
    def name(self) -> str:
        """Return the path as given."""
        return printable(".".join(self.parts), 100)


def read_override(words: str) -> Override | str:
    """Read ``TABLE.KEY=VALUE``.

    Parameters
    ----------
    words : str
        The override; the value is a TOML value, and a bare word a text.

    Returns
    -------
    Override or str
        The override, or what is wrong with it.
    """
    name, equals, raw = words.partition("=")
    parts = tuple(part.strip() for part in name.split("."))
    raw = raw.strip()
    if not equals or not raw or len(parts) > MOST_PARTS or not all(_PART.fullmatch(part) for part in parts):
        return f'"{printable(words)}" is not of the form TABLE.KEY=VALUE; an example is {EXAMPLE}'
    try:
        parsed = tomllib.loads(f"value = {raw}")
    except (ValueError, RecursionError):
        if raw[0] in "\"'[{":
            return f'"{printable(words)}" holds no valid TOML value after "="; an example is camera.sensor_mm=[36, 24]'
        return Override(parts, raw, raw)
    if parsed.keys() != {"value"}:
        return f'"{printable(words)}" holds more than one value; give each key an override of its own'
    return Override(parts, parsed["value"], raw)


def apply_override(data: dict[str, Any], override: Override) -> tuple[KeyPath, str | None]:
    """Lay one override over parsed data, in place.

    Parameters
    ----------
    data : dict
        The file as tomllib reads it; tables that are missing are made.
    override : Override
        What to change.

    Returns
    -------
    path : tuple
        The place in the data, list places counted from 0.
    fault : str or None
        Why it could not be done.
    """
    path: KeyPath = ()
    here: Any = data
    for depth, part in enumerate(override.parts):
        last = depth == len(override.parts) - 1
        spot: Any = part
        if isinstance(here, list):
            name = ".".join(override.parts[:depth])
            count = f"it has {len(here)} {'entry' if len(here) == 1 else 'entries'}, counted from 1"
            if not part.isdecimal():
                return (
                    path,
                    f"{name} is a list: say which entry, as in {name}.1.{part}; {count}",
                )
            # A number of more than 9 digits is no place in any list, and Python limits the length of what it converts.
            spot = int(part[:10]) - 1
            if not 0 <= spot < len(here):
                return path, f"{name} is a list without entry {printable(part)}; {count}"
        elif depth == 0 and part == "air" and not last and not data.get("air"):
            return path, "there is no [[air]] table to change; write one in the scene file"
        path = (*path, spot)
        if last:
            here[spot] = _value(override, path, data)
        else:
            below = value_at((spot,), here)
            here[spot] = below if isinstance(below, dict | list) else {}
            here = here[spot]
    return path, None


def _value(override: Override, path: KeyPath, data: dict[str, Any]) -> Any:
    """Return the value; where only text can stand, a number is taken as typed, for shells take quotes away."""
    rule = rule_at(path, data)
    wants_text = rule is not None and (
        rule.form == "text" or (rule.form == "choice" and isinstance(rule.choices[0], str))
    )
    return override.raw if wants_text and not isinstance(override.value, str | dict | list) else override.value
