"""How a field of the scene is declared, and the words for what it may hold.

A field is declared once, in `skyoptics.scene.model`, as ``Annotated[type, number(low, high, unit, text)]``. A `Rule` is
read back from that declaration; faults, help texts, the reference page and the JSON Schema all speak from it.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from types import NoneType, UnionType
from typing import Annotated, Any, Literal, Union, get_args, get_origin

from pydantic import BaseModel, Field
from pydantic.fields import FieldInfo

from skyoptics.errors import nearest

SHOWN_LENGTH = 40
"""Characters of a user's text that a message repeats."""


def number(low: float, high: float, unit: str, text: str, *, above: bool = False, default: Any = None) -> Any:
    """Declare a number, or a list of numbers, in a closed range.

    Parameters
    ----------
    low, high : float
        The range, both ends allowed.
    unit : str
        Unit as people read it; empty for a pure number.
    text : str
        What the field means, a phrase.
    above : bool
        Whether `low` itself is left out.
    default : object
        The value taken where the field is left out, if it depends on other fields and is not the model's own default.

    Returns
    -------
    pydantic.fields.FieldInfo
        Metadata for ``Annotated``.
    """
    extra = {"unit": unit} | ({} if default is None else {"default": default})
    if above:
        return Field(gt=low, le=high, description=text, json_schema_extra=extra)
    return Field(ge=low, le=high, description=text, json_schema_extra=extra)


def text(longest: int, meaning: str) -> Any:
    """Declare a text of 1 to `longest` characters."""
    return Field(min_length=1, max_length=longest, description=meaning)


def listing(meaning: str, unit: str = "", *, fewest: int = 1, most: int = 1000, default: Any = None) -> Any:
    """Declare a list of distinct entries; the range of one entry stands inside the tuple type."""
    extra: dict[str, Any] = {"unit": unit, "uniqueItems": True} | ({} if default is None else {"default": default})
    return Field(min_length=fewest, max_length=most, description=meaning, json_schema_extra=extra)


def note(meaning: str, *, unit: str | None = None, default: Any = None) -> Any:
    """Declare a choice, a switch or a table, or a pair of numbers with its unit."""
    extra = ({} if unit is None else {"unit": unit}) | ({} if default is None else {"default": default})
    return Field(description=meaning, json_schema_extra=extra or None)


@dataclass(frozen=True)
class Rule:
    """What a field may hold.

    Parameters
    ----------
    form : str
        ``number``, ``whole``, ``text``, ``flag``, ``choice``, ``list`` or ``table``.
    low, high : float or None
        Range of a number; fewest and most characters or entries of a text or list.
    above : bool
        Whether `low` is left out.
    unit : str
        Unit as people read it.
    choices : tuple
        The allowed values of a choice.
    item : Rule or None
        The rule for one entry of a list.
    distinct : bool
        Whether no entry may occur twice.
    table : type or None
        The model of a table; beside choices, the table that may stand in their place.
    """

    form: str
    low: float | None = None
    high: float | None = None
    above: bool = False
    unit: str = ""
    choices: tuple[Any, ...] = ()
    item: Rule | None = None
    distinct: bool = False
    table: type[BaseModel] | None = None

    def span(self) -> str:
        """Return the range in words, as in ``between 1 and 10000 µm``."""
        unit = f" {self.unit}" if self.unit else ""
        if self.low is None or self.high is None:
            return unit
        if self.above:
            return f"above {self.low:.12g} and up to {self.high:.12g}{unit}"
        return f"between {self.low:.12g} and {self.high:.12g}{unit}"

    def allowed(self) -> str:
        """Return what may stand here, to follow "must be"."""
        match self.form:
            case "number":
                return f"a number {self.span()}"
            case "whole":
                return f"a whole number {self.span()}"
            case "text":
                return f"text in quotes, {self.low} to {self.high} characters"
            case "flag":
                return "true or false"
            case "choice":
                words = [f'"{choice}"' if isinstance(choice, str) else str(choice) for choice in self.choices]
                if self.table is not None:
                    words.append("a table { " + ", ".join(self.table.model_fields) + " }")
                return words[0] if len(words) == 1 else ", ".join(words[:-1]) + " or " + words[-1]
            case "list" if self.item is not None:
                kind = "tables" if self.item.form == "table" else f"{self.item.form} numbers".removeprefix("number ")
                span = "" if self.item.form == "table" else f" {self.item.span()}"
                distinct = "distinct " if self.distinct else ""
                if self.low == self.high:
                    return f"a list of {self.low} {distinct}{kind}, each{span}"
                return f"a list of {self.low} to {self.high} {distinct}{kind}{span}"
        return "a table"

    def refusal(self, value: Any) -> str:
        """Return the message for a value that does not fit."""
        is_number = isinstance(value, int | float) and not isinstance(value, bool)
        if self.form == "number" and is_number:
            if isinstance(value, float) and not math.isfinite(value):
                return f"must be a finite number {self.span()}, got {shown(value)}"
            return f"must lie {self.span()}, got {shown(value)}"
        if self.form == "whole" and is_number and isinstance(value, int):
            return f"must lie {self.span()}, got {shown(value)}"
        if self.form == "text" and isinstance(value, str):
            return f"must be {self.allowed()}, got {len(value)} characters"
        hint = ""
        if self.form == "choice" and isinstance(value, str):
            hint = nearest(value.lower(), [choice for choice in self.choices if isinstance(choice, str)])
        if self.form == "choice" and is_number and shown(value) in self.choices:
            hint = "; put it in quotes"
        word = "the text " if isinstance(value, str) and self.form != "choice" else ""
        return f"must be {self.allowed()}, got {word}{shown(value)}{hint}"


def rule_of(field: FieldInfo) -> Rule:
    """Return the rule declared by a field of a model."""
    return _rule(field.annotation, [field])


def shown(value: Any) -> str:
    """Return a value from a scene as a message may repeat it: short and printable.

    Parameters
    ----------
    value : object
        Anything a TOML file can hold.

    Returns
    -------
    str
        Numbers and switches as written in TOML, texts in quotes, lists and tables by name.
    """
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int):
        # Python refuses to write out an integer of more than 4300 digits, which TOML can hold in hexadecimal.
        return (
            str(value)
            if value.bit_length() < 64
            else f"a number of about {int(value.bit_length() * 0.30103) + 1} digits"
        )
    if isinstance(value, float):
        return repr(value)
    if isinstance(value, str):
        return f'"{printable(value)}"'
    if isinstance(value, list | tuple):
        return f"a list of {len(value)}"
    if isinstance(value, dict):
        return "a table"
    return f"the date or time {printable(str(value))}"


def printable(words: str, longest: int = SHOWN_LENGTH) -> str:
    """Return text from outside made safe to print: control characters replaced, the rest cut to `longest`."""
    clean = "".join(letter if letter.isprintable() else "\N{REPLACEMENT CHARACTER}" for letter in words[: longest + 1])
    return clean if len(clean) <= longest else clean[: longest - 1] + "…"


def _rule(annotation: Any, metadata: list[Any]) -> Rule:
    """Return the rule of an annotation with the metadata found around it."""
    if get_origin(annotation) is Annotated:
        inner, *more = get_args(annotation)
        return _rule(inner, [*metadata, *more])
    if get_origin(annotation) in (Union, UnionType):
        members = [member for member in get_args(annotation) if member is not NoneType]
        rules = [_rule(member, metadata if len(members) == 1 else []) for member in members]
        choice = next((rule for rule in rules if rule.form == "choice"), rules[0])
        table = next((rule.table for rule in rules if rule.table is not None), None)
        return replace(choice, table=table)
    if get_origin(annotation) is Literal:
        return Rule("choice", choices=get_args(annotation))
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return Rule("table", table=annotation)
    facts = _facts(metadata)
    if get_origin(annotation) is tuple:
        first, *rest = get_args(annotation)
        item = _rule(first, [])
        if Ellipsis not in rest:
            facts |= {"low": 1 + len(rest), "high": 1 + len(rest)}
        return Rule("list", item=replace(item, unit=facts.pop("unit", "")), **facts)
    forms = {float: "number", int: "whole", bool: "flag", str: "text"}
    return Rule(forms[annotation], **facts)


def _facts(metadata: list[Any]) -> dict[str, Any]:
    """Return range, unit and distinctness found in metadata, field declarations opened."""
    facts: dict[str, Any] = {}
    for entry in metadata:
        if isinstance(entry, FieldInfo):
            extra = entry.json_schema_extra if isinstance(entry.json_schema_extra, dict) else {}
            facts |= {"unit": extra["unit"]} if extra.get("unit") else {}
            facts |= {"distinct": True} if extra.get("uniqueItems") else {}
            facts |= _facts(entry.metadata)
        for name, fact in (("ge", "low"), ("gt", "low"), ("min_length", "low"), ("le", "high"), ("max_length", "high")):
            value = getattr(entry, name, None)
            if value is not None and not isinstance(entry, FieldInfo):
                facts[fact] = value
                if name == "gt":
                    facts["above"] = True
    return facts
