"""Alt text: the picture in a sentence or two for those who do not see it, what is seen first."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from skyoptics.rendering import phrases
from skyoptics.words.table import check_language, say, sentence

LONGEST = 300
"""Characters; screen readers read an alt text in one breath (common practice, no source)."""
_MOST = 6


def write(report: Mapping[str, Any], lang: str = "en") -> str:
    """Return the alt text of a picture.

    Parameters
    ----------
    report : mapping
        Of a render, with `shows` in it (`skyoptics.rendering.shows`).
    lang : str
        One of `skyoptics.words.table.languages`.

    Returns
    -------
    str
        At most `LONGEST` characters: features seen and what is behind, then the sun or moon, then the particles, as much
        as fits.

    Raises
    ------
    DomainError
        For a language that is not there, or a report without `shows`.
    """
    check_language(lang)
    shown = phrases.facts(report)
    last = sentence(_light(shown["light"], lang))
    of = sentence(say("picture.computed", lang, particles=phrases.particles(shown["particles"], lang, 2, short=True)))
    text = sentence(what(shown, lang, _MOST))
    for most in range(_MOST, 0, -1):
        text = sentence(what(shown, lang, most))
        if len(f"{text} {last}") <= LONGEST:
            break
    for more in (last, of):
        if len(text) + 1 + len(more) <= LONGEST:
            text = f"{text} {more}"
    return text if len(text) <= LONGEST else text[: LONGEST - 1].rstrip() + "…"


def what(shown: Mapping[str, Any], lang: str, most: int, angles: Mapping[str, float] | None = None) -> str:
    """Return what is seen before what, without a full stop."""
    background = say(f"background.{shown['background']}", lang)
    if shown.get("only"):
        return say("picture.only", lang, features=phrases.features([shown["only"]], lang, 1))
    named = say("picture.nothing", lang)
    if shown["seen"]:
        named = phrases.features(shown["seen"], lang, most, angles, shown["light"]["body"])
    return say("picture.seen", lang, features=named, background=background)


def _light(light: Mapping[str, Any], lang: str) -> str:
    body = say(f"body.{light['body']}", lang)
    key = "light.short_up" if light["elevation_deg"] >= 0.0 else "light.short_down"
    return say(key, lang, body=body, height=light["elevation_deg"], where=say(f"light.{light['where']}", lang))
