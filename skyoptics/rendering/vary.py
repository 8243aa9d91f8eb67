"""One key of a scene taken through several values: read from ``KEY=VALUES``, made into scenes, put into words.

=====================================  ========================================================
``air.1.radius_um=10,50,250``          these values; tables of a list counted from 1
``light.elevation_deg=0:40``           from the first to the last; a film takes its frames from it
``light.elevation_deg=0:40:5``         the same in five steps, ends among them
``air.1.radius_um=10:1000:4:log``      by equal ratios instead of equal differences
``light.time=T1/T2`` or ``T1:T2``      a clock, each time as in a scene file
=====================================  ========================================================

Every value is laid over the scene file like ``--set KEY=VALUE`` and checked like it, so that faults are told in the same words.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import UTC
from math import exp, isfinite, log
from pathlib import Path
from typing import Any, Literal, NamedTuple

from skyoptics.errors import DomainError, Fault, SceneError
from skyoptics.light.zones import parse_time
from skyoptics.scene.fields import Rule, printable, rule_of
from skyoptics.scene.files import unreadable
from skyoptics.scene.load import from_text, load
from skyoptics.scene.model import Scene
from skyoptics.scene.table import Table

EXAMPLE = "light.elevation_deg=0:40 (a range) or air.1.radius_um=10,50,250 (a list)"
MOST_VALUES = 20000
"""Values that one key may be taken through."""

_TIME = r"\d{4}-\d\d-\d\d[T ]\d\d:\d\d(?::\d\d(?:\.\d+)?)?(?:Z|[+-]\d\d:?\d\d)?"
_CLOCK = re.compile(rf"({_TIME})(?:[:/]|\.\.)({_TIME})(?::(.*))?")
_TIMES = re.compile(rf"{_TIME}(?:\s*,\s*{_TIME})*")
_KEY = re.compile(r"[A-Za-z0-9_-]+(?:\.[A-Za-z0-9_-]+)*")


@dataclass(frozen=True)
class Vary:
    """What is to be taken through which values.

    Parameters
    ----------
    key : str
        Dotted path such as ``air.1.radius_um``.
    values : tuple of str
        Values as given: all of a list, the two ends of a range.
    spacing : {"list", "even", "log", "clock"}
        How it goes on between them.
    count : int or None
        Number of values of a range; None where it was left open.
    """

    key: str
    values: tuple[str, ...]
    spacing: Literal["list", "even", "log", "clock"] = "list"
    count: int | None = None

    @property
    def words(self) -> str:
        """Return it as it is given on the command line."""
        if self.spacing == "list":
            return f"{self.key}={','.join(self.values)}"
        parts = ["/".join(self.values) if self.spacing == "clock" else ":".join(self.values)]
        parts += [str(self.count)] * (self.count is not None) + ["log"] * (self.spacing == "log")
        return f"{self.key}={':'.join(parts)}"


class Step(NamedTuple):
    """One value, as typed and as it is, and the scene that has it."""

    text: str
    value: Any
    scene: Scene


def read(words: str) -> Vary:
    """Read ``KEY=VALUES``.

    Parameters
    ----------
    words : str
        See the head of this module.

    Returns
    -------
    Vary

    Raises
    ------
    SceneError
        If it is of no such form; whether the key exists is found out by `steps`.
    """
    key, equals, raw = (part.strip() for part in words.partition("="))
    if not equals or not raw or not _KEY.fullmatch(key):
        raise _refused("", f'"{printable(words)}" is not of the form KEY=VALUES; examples are {EXAMPLE}')
    clock = _CLOCK.fullmatch(raw)
    if clock is not None:
        count, _ = _more(key, [] if clock[3] is None else clock[3].split(":"), False)
        return Vary(key, (clock[1], clock[2]), "clock", count)
    if ":" in raw and not _TIMES.fullmatch(raw):
        low, high, *rest = (part.strip() for part in raw.split(":"))
        ends = _number(key, low), _number(key, high)
        count, by_ratio = _more(key, rest, True)
        if by_ratio and min(ends) <= 0.0:
            raise _refused(key, f"equal ratios need ends above 0, got {low} and {high}; leave :log out")
        return Vary(key, (low, high), "log" if by_ratio else "even", count)
    values = tuple(part.strip() for part in raw.split(","))
    if not all(values):
        raise _refused(key, f'a value is missing in "{printable(raw)}"; part values by one comma each')
    if len(set(values)) < len(values):
        raise _refused(key, f'a value stands twice in "{printable(raw)}"')
    return Vary(key, values)


def _more(key: str, rest: Sequence[str], by_ratio: bool) -> tuple[int | None, bool]:
    """Return the number of values and whether they stand in equal ratios, from what follows a range."""
    allowed = 'a number of values (2 and more) and "log"' if by_ratio else "a number of values (2 and more)"
    count, ratio = None, False
    for word in rest:
        if word == "log" and by_ratio and not ratio:
            ratio = True
        elif re.fullmatch(r"\d{1,9}", word) and int(word) >= 2 and count is None:
            count = int(word)
        else:
            raise _refused(key, f'"{printable(word)}" cannot follow a range; {allowed} can')
    if count is not None and count > MOST_VALUES:
        raise _refused(key, f"{count} values are too many: {MOST_VALUES} are allowed")
    return count, ratio


def _number(key: str, text: str) -> float:
    """Return an end of a range."""
    try:
        value = float(text)
    except ValueError:
        value = float("nan")
    if not isfinite(value):
        raise _refused(
            key,
            f'"{printable(text)}" is no number: a range is FIRST:LAST, as in 0:40; values of a list stand after commas',
        )
    return value


def _refused(key: str, message: str) -> SceneError:
    return SceneError([Fault("--vary", None, key, message)])


def steps(path: Path, overrides: Sequence[str], vary: Vary, count: int | None = None) -> list[Step]:
    """Return the scenes of all values.

    Parameters
    ----------
    path : Path
        The scene file.
    overrides : sequence of str
        ``TABLE.KEY=VALUE``, laid over the file first.
    vary : Vary
        From `read`.
    count : int, optional
        Number of values of a range that leaves it open.

    Returns
    -------
    list of Step

    Raises
    ------
    SceneError
        With the faults of the file, of the overrides and of all values: an unknown key with its neighbour, a value out
        of range with what is allowed.
    """
    if len(vary.values) > MOST_VALUES:
        raise _refused(vary.key, f"{len(vary.values)} values are too many: {MOST_VALUES} are allowed")
    if vary.spacing != "list" and vary.count is not None:
        if count is not None and count != vary.count:
            raise _refused(vary.key, f"asks for {vary.count} values, {count} are needed; leave :{vary.count} out")
        count = vary.count
    if vary.spacing != "list" and count is None:
        raise _refused(
            vary.key, f"says not how many values: give their number, as in {vary.words}:5, or list them after commas"
        )
    faults: list[Fault] = []
    source: str | None = None
    for text in vary.values:  # the ends of a range, or all of a list: their faults together
        try:
            load(path, [*overrides, f"{vary.key}={text}"])
        except SceneError as error:
            told = {(fault.key, fault.message) for fault in faults}
            faults += [fault for fault in _blamed(error, vary.key, text) if (fault.key, fault.message) not in told]
    if faults:
        raise SceneError(faults)
    try:
        source = path.read_text(encoding="utf-8-sig")
    except OSError as error:
        raise SceneError([Fault(str(path), None, "", unreadable(error))]) from error
    first = _scene(source, path, overrides, vary.key, vary.values[0])
    texts = list(vary.values) if vary.spacing == "list" else _between(vary, count or 2, first, source)
    found = []
    for text in texts:
        scene = _scene(source, path, overrides, vary.key, text)
        found.append(Step(text, _value_in(scene, vary.key), scene))
    return found


def _scene(source: str, path: Path, overrides: Sequence[str], key: str, text: str) -> Scene:
    try:
        return from_text(source, str(path), path.parent.absolute(), [*overrides, f"{key}={text}"])
    except SceneError as error:
        raise SceneError(list(_blamed(error, key, text))) from error


def _blamed(error: SceneError, key: str, text: str) -> list[Fault]:
    """Return the faults of a scene, those of the value under the name of the option that gave it."""
    named = f"--set {printable(key, 100)}"
    return [
        Fault(f"--vary {key}={printable(text)}", fault.line, fault.key, fault.message)
        if fault.where == named
        else fault
        for fault in error.faults
    ]


def _between(vary: Vary, count: int, scene: Scene, source: str) -> list[str]:
    """Return the values of a range as typed."""
    rule = rule_in(scene, vary.key)
    shares = [k / (count - 1) for k in range(count)] if count > 1 else [0.0]
    if vary.spacing == "clock":
        if rule is None or rule.form != "text":
            raise _refused(vary.key, "takes no times; light.time does")
        zone = scene.light.zone
        try:
            start, end = (parse_time(text, zone) for text in vary.values)
        except DomainError as error:
            raise _refused(vary.key, str(error)) from error
        if end <= start:
            raise _refused(
                vary.key, f"the last time, {vary.values[1]}, has to be later than the first, {vary.values[0]}"
            )
        span = end.astimezone(UTC) - start.astimezone(UTC)  # what passes, also where clocks are changed
        at = (start.astimezone(UTC) + share * span for share in shares)
        return [moment.astimezone(start.tzinfo).isoformat(timespec="milliseconds") for moment in at]
    if rule is None or rule.form not in ("number", "whole"):
        allowed = "" if rule is None else f"; {vary.key} is {rule.allowed()}"
        raise _refused(vary.key, f"a range needs numbers{allowed}: list values after commas")
    low, high = (float(text) for text in vary.values)
    if vary.spacing == "log":
        numbers = [exp(log(low) + share * (log(high) - log(low))) for share in shares]
    else:
        numbers = [low + share * (high - low) for share in shares]
    numbers = [low, *numbers[1:-1], high] if count > 1 else [low]
    if rule.form == "whole":
        return [str(round(value)) for value in numbers]
    return [repr(float(f"{value:.10g}")) for value in numbers]


def _value_in(scene: Scene, key: str) -> Any:
    """Return the value of a key."""
    here: Any = scene
    for part in key.split("."):
        here = here[int(part) - 1] if isinstance(here, tuple) else getattr(here, part)
    return here


def rule_in(scene: Scene, key: str) -> Rule | None:
    """Return the rule of a key of a scene; None for an entry of a list."""
    *tables, last = key.split(".")
    here: Any = scene
    for part in tables:
        here = here[int(part) - 1] if isinstance(here, tuple) else getattr(here, part)
    return rule_of(type(here).model_fields[last]) if isinstance(here, Table) else None
