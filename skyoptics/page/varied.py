"""The quantity along which the pictures of a page are made, in words."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from skyoptics.errors import DomainError
from skyoptics.rendering import vary, vary_words
from skyoptics.scene.load import load
from skyoptics.scene.model import Scene
from skyoptics.words.table import keys, say

MOST = 60
"""Stops that a slider may have."""


@dataclass(frozen=True)
class Varied:
    """Scenes along a quantity, one a picture.

    Parameters
    ----------
    scenes : tuple of Scene
        At least one.
    key : str
        Dotted path such as ``light.elevation_deg``; empty where nothing is varied.
    title : str
        The quantity in words.
    values : tuple of str
        As typed; one empty text where nothing is varied.
    labels : tuple of str
        With their units, as the language writes them.
    """

    scenes: tuple[Scene, ...]
    key: str = ""
    title: str = ""
    values: tuple[str, ...] = ("",)
    labels: tuple[str, ...] = ("",)


def varied(path: Path, overrides: Sequence[str], words: str | None, lang: str) -> Varied:
    """Return the scenes of a page.

    Parameters
    ----------
    path : Path
        Scene file.
    overrides : sequence of str
        ``TABLE.KEY=VALUE``, laid over it.
    words : str or None
        ``TABLE.KEY=VALUES`` (`skyoptics.rendering.vary`); None for one picture.
    lang : str
        Language.

    Raises
    ------
    SceneError
        With all faults.
    DomainError
        If there are too many values.
    """
    if words is None:
        return Varied((load(path, overrides),))
    asked = vary.read(words)
    count = len(asked.values) if asked.spacing == "list" else asked.count or 2
    if count > MOST:
        raise DomainError(f"--vary {asked.key}: {count} values are too many for a slider; at most {MOST} are allowed")
    steps = vary.steps(path, overrides, asked)
    last = asked.key.rpartition(".")[2]
    own = f"varied.{last}" in keys() and not asked.key.startswith("camera.aim.")
    title = say(f"varied.{last}", lang) if own else vary_words.quantity(steps[0], asked, lang)
    return Varied(
        tuple(step.scene for step in steps),
        asked.key,
        title[:1].upper() + title[1:],
        tuple(step.text for step in steps),
        tuple(vary_words.caption(step, asked, lang) for step in steps),
    )
