"""One table of words in four languages, and how to speak from it.

::

    say("feature.circumzenithal", "de")                 # Zirkumzenitalbogen
    say("mark.angle", "fr", angle=42.05)                # 42,0°

Keys are ``group.name`` of the TOML files beside this module. Values fill the braces of a sentence; numbers take the decimal
mark, minus and digit groups of the language, whatever their format.
"""

from __future__ import annotations

import tomllib
from collections.abc import Sequence
from functools import cache
from importlib.resources import files
from string import Formatter
from typing import Any

from skyoptics.errors import DomainError, nearest

LANGUAGES = {"en": "English", "de": "Deutsch", "es": "español", "fr": "français"}
"""Languages by their ISO 639-1 code, as they call themselves."""
FILES = ("features.toml", "figures.toml", "pictures.toml", "paths.toml", "page.toml")
GROUPS = {"en": ",", "de": ".", "es": "\u202f", "fr": "\u202f"}
"""What parts groups of three digits."""
DECIMAL = {"en": ".", "de": ",", "es": ",", "fr": ","}


def languages() -> tuple[str, ...]:
    """Return the codes of the languages there are."""
    return tuple(LANGUAGES)


def check_language(lang: str) -> str:
    """Return a language that there is.

    Raises
    ------
    DomainError
        For another one; the text lists all.
    """
    if lang not in LANGUAGES:
        known = ", ".join(f"{code} ({name})" for code, name in LANGUAGES.items())
        raise DomainError(f"no words in language {lang!r}; there are {known}{nearest(lang, LANGUAGES)}")
    return lang


def keys() -> tuple[str, ...]:
    """Return all keys, in the order of the files."""
    return tuple(_table())


def say(key: str, lang: str = "en", **values: object) -> str:
    """Return words of the table, filled in.

    Parameters
    ----------
    key : str
        ``group.name``.
    lang : str
        One of `languages`.
    **values
        What the braces hold; numbers may have a format there and are written as the language does.

    Returns
    -------
    str

    Raises
    ------
    DomainError
        For a language that is not there.
    KeyError
        For an unknown key or a value that is missing.
    """
    check_language(lang)
    return _Spoken(lang).vformat(_table()[key][lang], (), values)


def raw(key: str, lang: str) -> str:
    """Return words of the table with their braces."""
    return _table()[key][check_language(lang)]


def number(value: float, lang: str = "en", form: str = "g") -> str:
    """Return a number as a language writes it.

    Parameters
    ----------
    value : float
        Any.
    lang : str
        One of `languages`.
    form : str
        As for `format`.

    Returns
    -------
    str
        With the language's decimal mark and digit groups and a true minus; zero has no sign.
    """
    check_language(lang)
    text = format(value, form)
    if text.startswith("-"):
        text = text[1:] if not any(digit in text for digit in "123456789") and "n" not in text else "−" + text[1:]
    return text.translate({ord(","): GROUPS[lang], ord("."): DECIMAL[lang]})


def listed(items: Sequence[str], lang: str = "en") -> str:
    """Return things one after the other, "and" before the last."""
    if len(items) < 2:
        return "".join(items)
    last = items[-1]
    # Spanish: y becomes e before the sound of i
    if check_language(lang) == "es" and last.lower().startswith(("i", "hi")) and not last.lower().startswith("hie"):
        return f"{', '.join(items[:-1])} e {last}"
    return say("listed.pair", lang, first=", ".join(items[:-1]), last=last)


def sentence(text: str) -> str:
    """Return a text with a capital letter and a full stop."""
    text = text.strip()
    return f"{text[:1].upper()}{text[1:]}" + ("" if text.endswith((".", "!", "?")) else ".") if text else ""


class _Spoken(Formatter):
    """A formatter that writes numbers as a language does."""

    def __init__(self, lang: str) -> None:
        self.lang = lang

    def format_field(self, value: Any, format_spec: str) -> str:
        """Return one value, a number in the form of the language."""
        if isinstance(value, int | float) and not isinstance(value, bool):
            return number(value, self.lang, format_spec or "g")
        return str(super().format_field(value, format_spec))


@cache
def _table() -> dict[str, dict[str, str]]:
    """Return key → language → text, read once."""
    found: dict[str, dict[str, str]] = {}
    for name in FILES:
        text = files("skyoptics.words").joinpath(name).read_text(encoding="utf-8")
        for group, entries in tomllib.loads(text).items():
            for entry, texts in entries.items():
                found[f"{group}.{entry}"] = texts
    return found
