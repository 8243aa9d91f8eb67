"""Options and parameter types shared by commands.

====================  ==============
option                used by
====================  ==============
--seed, --threads     render, phase
--quality             render, phase
--json                render, phase
--lang                what writes words into pictures
====================  ==============
"""

from __future__ import annotations

from collections.abc import Callable
from math import isfinite
from pathlib import Path
from typing import Any, TypeVar

import click
from click.shell_completion import CompletionItem

from skyoptics.cli import examples
from skyoptics.errors import nearest
from skyoptics.words.table import LANGUAGES

Command = TypeVar("Command", bound=Callable[..., Any])
QUALITIES = ("draft", "normal", "fine")


class SceneFile(click.ParamType[Path]):
    """A scene file, or the name of an example scene; completed quickly."""

    name = "scene"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> Path:
        """Return the path; whether it can be read is the loader's business."""
        return value if isinstance(value, Path) else examples.scene_path(value)

    def shell_complete(self, ctx: click.Context, param: click.Parameter, incomplete: str) -> list[CompletionItem]:
        """Offer TOML files and folders below here, and example names."""
        head = Path(incomplete)
        base = head if incomplete.endswith("/") else head.parent
        try:
            found = [p for p in base.iterdir() if p.suffix == ".toml" or (p.is_dir() and not p.name.startswith("."))]
        except OSError:
            found = []
        files = sorted(f"{path}/" if path.is_dir() else str(path) for path in found)
        names = [] if "/" in incomplete else examples.names()
        return [CompletionItem(value) for value in files + names if value.startswith(incomplete)]


class NumberList(click.ParamType[tuple[Any, ...]]):
    """Numbers parted by commas."""

    name = "numbers"

    def __init__(self, kind: type[int] | type[float], low: float, high: float, distinct: bool = True) -> None:
        self.kind, self.low, self.high, self.distinct = kind, low, high, distinct

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> tuple[Any, ...]:
        """Return numbers inside the range, distinct where that is asked for."""
        if isinstance(value, tuple):
            return value
        numbers = []
        for word in str(value).split(","):
            try:
                number = self.kind(word)
            except ValueError:
                self.fail(f"{word!r} is not a number; give numbers parted by commas, such as 450,550", param, ctx)
            if not self.low <= number <= self.high:
                self.fail(f"{word} is out of range: {self.low:g} to {self.high:g} is allowed", param, ctx)
            numbers.append(number)
        if self.distinct and len(set(numbers)) < len(numbers):
            self.fail("a number stands in the list twice", param, ctx)
        return tuple(numbers)


class AzimuthElevation(click.ParamType[tuple[float, float]]):
    """A viewing direction: azimuth and elevation in degrees, parted by a comma."""

    name = "az,el"

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> tuple[float, float]:
        """Return azimuth (any turn) and elevation, -90 to 90 degrees."""
        if isinstance(value, tuple):
            return value
        try:
            azimuth, elevation = (float(word) for word in str(value).split(","))
        except ValueError:
            self.fail(f"{value!r} is no direction; give azimuth and elevation in degrees, such as 120.5,22", param, ctx)
        if not (isfinite(azimuth) and -360.0 <= azimuth <= 360.0):
            self.fail(f"azimuth {azimuth:g} is out of range: -360 to 360 degrees are allowed", param, ctx)
        if not -90.0 <= elevation <= 90.0:
            self.fail(f"elevation {elevation:g} is out of range: -90 to 90 degrees are allowed", param, ctx)
        return azimuth, elevation


class Between(click.FloatRange):
    """A number inside a range; nan is outside every range."""

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> float:
        """Return the number."""
        number = float(super().convert(value, param, ctx))
        if not isfinite(number):
            self.fail(f"{value} is not a number", param, ctx)
        return number


class Word(click.Choice[str]):
    """One of some words; a misspelt one gets its neighbour."""

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> str:
        """Return the word."""
        if value not in self.choices:
            self.fail(
                f"{value!r} is not one of {', '.join(self.choices)}{nearest(str(value), self.choices)}", param, ctx
            )
        return str(value)


def sampling_options(function: Command) -> Command:
    """Add --quality, --seed, --threads."""
    for option in (
        click.option("--threads", type=click.IntRange(1, 1024), help="Worker threads; default all cores."),
        click.option("--seed", type=click.IntRange(0, 2**63 - 1), default=1, show_default=True, help="Random numbers."),
        click.option(
            "--quality",
            type=Word(QUALITIES),
            default="normal",
            show_default=True,
            help="Noise: light-weighted relative standard error of the traced bins, 2 / 1 / 0.5 %.",
        ),
    ):
        function = option(function)
    return function


lang_option = click.option(
    "--lang",
    type=Word(list(LANGUAGES)),
    default="en",
    show_default=True,
    help="Language of labels, caption and alt text: " + ", ".join(f"{c} {name}" for c, name in LANGUAGES.items()) + ".",
)
json_option = click.option("--json", "as_json", is_flag=True, help="Print the report as JSON on stdout.")
