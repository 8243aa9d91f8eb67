"""Coordinates as people write them: decimal, degrees with minutes and seconds, ISO 6709; and back to text.

Latitude comes first unless letters say otherwise; north and east are positive. All forms take the Unicode primes (′ ″), typographic
quotes, the masculine ordinal (º) for a degree sign and the Unicode minus.

References
----------
ISO 6709:2008/2022, annex H: ±DD.D±DDD.D/, ±DDMM.M±DDDMM.M/, ±DDMMSS.S±DDDMMSS.S/, a height after them (from memory).
"""

from __future__ import annotations

import re
from typing import NamedTuple

from skyoptics.errors import DomainError

EXAMPLE = "47.2N 8.9E, 47.2 8.9, 47°12'00\"N 8°54'00\"E or +47.2+008.9/"
"""Spellings to show to whoever wrote another."""

_ALIKE = str.maketrans(
    {
        **dict.fromkeys("−‐‑–", "-"),
        **dict.fromkeys("º˚", "°"),
        **dict.fromkeys("′’‘´ʹ`", "'"),
        **dict.fromkeys("″”“„ʺ", '"'),
        **dict.fromkeys("\u00a0\u2009\u202f\t", " "),
    }
)
_TOKEN = re.compile(r"\s*([+-]?\s*\d+(?:\.\d*)?|[+-]?\s*\.\d+|[NSEW]|[°'\"]|[,;/])", re.IGNORECASE)
_ISO = re.compile(
    r"([+-])(\d{2}|\d{4}|\d{6})(\.\d+)?([+-])(\d{3}|\d{5}|\d{7})(\.\d+)?(?:([+-]\d+(?:\.\d+)?)(?:CRS[\w:.-]*)?|(?:CRS[\w:.-]*))?/?"
)
_LONGEST = 60
_MARKS = "°'\""


class Coordinates(NamedTuple):
    """Latitude and longitude [degrees], north and east positive; height [m] or None where it is not given."""

    latitude_deg: float
    longitude_deg: float
    height_m: float | None = None


class _Half(NamedTuple):
    """One of two numbers, with its letter or an empty string."""

    value: float
    letter: str


def parse(text: str) -> Coordinates:
    """Return the coordinates that a text means.

    Parameters
    ----------
    text : str
        Such as ``47.2 8.9``, ``47.2N 8.9E``, ``E8.9 N47.2``, ``47°12'0″N, 8°54'0″E``, ``47 12 0 N, 8 54 0 E``,
        ``+47.2+008.9/``, ``+471200+0085400+500/``.

    Returns
    -------
    Coordinates

    Raises
    ------
    DomainError
        For a text that is none of these, a latitude beyond ±90°, a longitude beyond ±180°, minutes or seconds of 60
        and more; with a hint where the two numbers look swapped.
    """
    plain = _plain(text)
    iso = _ISO.fullmatch(plain)
    if iso is not None:
        found = _from_iso(iso, text)
    elif plain.endswith("/"):
        raise DomainError(
            f"{_shown(text)} is no ISO 6709 text: latitude takes 2, 4 or 6 digits before the point, longitude 3, 5 or 7, "
            "as in +47.2+008.9/"
        )
    else:
        first, second = (_half(part, text) for part in _parts(_tokens(plain, text), text))
        found = _assigned(first, second, text)
    return checked(found)


def parse_pair(latitude: str, longitude: str) -> Coordinates:
    """Return coordinates from two texts.

    Parameters
    ----------
    latitude, longitude : str
        Each decimal or in degrees, minutes and seconds, with or without its letter; letters decide which is which.

    Returns
    -------
    Coordinates

    Raises
    ------
    DomainError
        As in `parse`.
    """
    halves = [_half(_tokens(_plain(text), text), text) for text in (latitude, longitude)]
    return checked(_assigned(halves[0], halves[1], f"{latitude}, {longitude}"))


def checked(place: Coordinates) -> Coordinates:
    """Return coordinates inside their ranges.

    Parameters
    ----------
    place : Coordinates
        To be looked at.

    Returns
    -------
    Coordinates
        The same.

    Raises
    ------
    DomainError
        Outside −90…90° and −180…180°, with a hint where swapping would put it right.
    """
    latitude, longitude, _ = place
    if not abs(latitude) <= 90.0:
        hint = ""
        if abs(latitude) <= 180.0 and abs(longitude) <= 90.0:
            hint = f"; did you swap the two? Latitude comes first: {longitude:g} {latitude:g}"
        raise DomainError(f"latitude {latitude:g} is out of range: -90 to 90 degrees are allowed{hint}")
    if not abs(longitude) <= 180.0:
        raise DomainError(
            f"longitude {longitude:g} is out of range: -180 to 180 degrees are allowed, east positive, west negative"
        )
    return place


def decimal(place: Coordinates, digits: int = 5) -> str:
    """Return coordinates as decimal degrees with letters, such as ``47.2N 8.9E``.

    Parameters
    ----------
    place : Coordinates
        Height is left out.
    digits : int
        Most digits after the point; 5 are about a metre.
    """
    return " ".join(
        f"{f'{abs(value):.{digits}f}'.rstrip('0').rstrip('.')}{letters[value < 0.0]}"
        for value, letters in ((place.latitude_deg, "NS"), (place.longitude_deg, "EW"))
    )


def sexagesimal(place: Coordinates, digits: int = 0) -> str:
    """Return coordinates in degrees, minutes and seconds, such as ``47°12′00″N 8°54′00″E``.

    Parameters
    ----------
    place : Coordinates
        Height is left out.
    digits : int
        Of the seconds after the point; one second is about 30 m.
    """
    texts = []
    for value, letters in ((place.latitude_deg, "NS"), (place.longitude_deg, "EW")):
        unit = 10**digits
        whole, parts = divmod(round(abs(value) * 3600 * unit), unit)  # rounded once, so that no 60″ comes out
        minutes, seconds = divmod(whole, 60)
        degrees, minutes = divmod(minutes, 60)
        tail = f".{parts:0{digits}d}" if digits else ""
        texts.append(f"{degrees}°{minutes:02d}′{seconds:02d}{tail}″{letters[value < 0.0]}")
    return " ".join(texts)


def iso6709(place: Coordinates, digits: int = 5) -> str:
    """Return coordinates as ISO 6709 text in decimal degrees, such as ``+47.20000+008.90000+500/``.

    Parameters
    ----------
    place : Coordinates
        Height is written to 0.1 m, where it is given.
    digits : int
        After the point; at least 1.
    """
    height = "" if place.height_m is None else f"{place.height_m:+.1f}".removesuffix(".0")
    return f"{place.latitude_deg:+0{digits + 4}.{digits}f}{place.longitude_deg:+0{digits + 5}.{digits}f}{height}/"


def _plain(text: str) -> str:
    """Return a text with one spelling of each sign."""
    plain = text.translate(_ALIKE).replace("''", '"').strip()
    if "." not in plain and len(re.findall(r"\d,\d", plain)) == 2:  # decimal commas, one in each number
        plain = re.sub(r"(\d),(\d)", r"\1.\2", plain)
    return plain


def _tokens(plain: str, text: str) -> list[str]:
    """Return numbers, letters, marks and separators."""
    found, place = [], 0
    while place < len(plain.rstrip()):
        match = _TOKEN.match(plain, place)
        if match is None:
            rest = plain[place:].strip()
            why = "; O is east in some languages and west in others, write E or W" if rest[:1] in "oO" else ""
            raise DomainError(f"cannot read {_shown(rest)} in the coordinates {_shown(text)}{why}; write {EXAMPLE}")
        found.append(match.group(1).replace(" ", "").upper())
        place = match.end()
    return found


def _parts(tokens: list[str], text: str) -> tuple[list[str], list[str]]:
    """Return the tokens of the two numbers."""
    commas = [k for k, token in enumerate(tokens) if token in ",;/"]
    letters = [k for k, token in enumerate(tokens) if token in "NSEW"]
    numbers = [k for k, token in enumerate(tokens) if _is_number(token)]
    degrees = [k for k, token in enumerate(tokens) if token == "°"]
    signs = [k for k in numbers[1:] if tokens[k][0] in "+-"]
    if len(commas) == 1:
        return tokens[: commas[0]], tokens[commas[0] + 1 :]
    cut = None
    if not commas and len(letters) == 2:
        cut = letters[1] if letters[0] == 0 else letters[0] + 1
    elif not commas and len(degrees) == 2:
        cut = degrees[1] - 1
    elif not commas and len(letters) == 1 and 0 < letters[0] < len(tokens) - 1:
        cut = letters[0] + 1
    elif not commas and len(signs) == 1:
        cut = signs[0]
    elif not commas and numbers and len(numbers) in (2, 4, 6):
        cut = numbers[len(numbers) // 2]
    if cut is None:
        raise DomainError(f"{_shown(text)} is no pair of coordinates; write {EXAMPLE}")
    return tokens[:cut], tokens[cut:]


def _half(tokens: list[str], text: str) -> _Half:
    """Return one number from its tokens."""
    letters = [token for token in tokens if token in "NSEW"]
    if len(letters) > 1 or (letters and tokens[0] not in "NSEW" and tokens[-1] not in "NSEW"):
        raise DomainError(f"{_shown(text)} has letters where none belong; write {EXAMPLE}")
    rest = [token for token in tokens if token not in "NSEW"]
    numbers = [token for token in rest if _is_number(token)]
    if not 1 <= len(numbers) <= 3 or any(token in ",;/" for token in rest) or not _is_number(rest[0]):
        raise DomainError(f"{_shown(text)} is no coordinate; write {EXAMPLE}")
    marks = [
        rest[k + 1] if k + 1 < len(rest) and rest[k + 1] in _MARKS else ""
        for k in range(len(rest))
        if rest[k] in numbers
    ]
    if len(numbers) + len([mark for mark in rest if mark in _MARKS]) != len(rest) or any(
        mark and mark != _MARKS[k] for k, mark in enumerate(marks)
    ):
        raise DomainError(f"{_shown(text)}: degrees, minutes and seconds come in this order, as in 47°12'00\"N")
    if any(token[0] in "+-" for token in numbers[1:]) or any("." in token for token in numbers[:-1]):
        raise DomainError(f"{_shown(text)}: only degrees take a sign, and only the last number a fraction")
    negative = numbers[0][0] == "-"
    if letters and numbers[0][0] in "+-":
        raise DomainError(f"{_shown(text)} has both a sign and the letter {letters[0]}; leave one of them out")
    value = _sexagesimal_value([float(token.lstrip("+-")) for token in numbers], text)
    return _Half(-value if negative or (letters and letters[0] in "SW") else value, letters[0] if letters else "")


def _sexagesimal_value(numbers: list[float], text: str) -> float:
    """Return degrees from degrees, minutes and seconds."""
    for value, unit in zip(numbers[1:], ("minutes", "seconds"), strict=False):
        if value >= 60.0:
            raise DomainError(f"{_shown(text)}: {value:g} {unit} are too many, 60 make the next unit")
    return sum(value / 60.0**k for k, value in enumerate(numbers))


def _assigned(first: _Half, second: _Half, text: str) -> Coordinates:
    """Return two numbers in their order, by their letters where they have some."""
    axes = ["" if not half.letter else "latitude" if half.letter in "NS" else "longitude" for half in (first, second)]
    if axes[0] and axes[0] == axes[1]:
        raise DomainError(f"{_shown(text)} has two {axes[0]}s; one number needs N or S, the other E or W")
    if axes[0] == "longitude" or axes[1] == "latitude":
        first, second = second, first
    return Coordinates(first.value, second.value)


def _from_iso(match: re.Match[str], text: str) -> Coordinates:
    """Return what an ISO 6709 text means."""
    values = []
    for first, width in ((1, 2), (4, 3)):
        sign, digits, fraction = (str(part or "") for part in match.group(first, first + 1, first + 2))
        pieces = [digits[:width], *(digits[k : k + 2] for k in range(width, len(digits), 2))]
        pieces[-1] += fraction
        value = _sexagesimal_value([float(piece) for piece in pieces], text)
        values.append(-value if sign == "-" else value)
    height = match.group(7)
    return Coordinates(values[0], values[1], None if height is None else float(height))


def _is_number(token: str) -> bool:
    """Say whether a token is a number."""
    return token[-1].isdigit() or token[-1] == "."


def _shown(text: str) -> str:
    """Return a text in quotes, printable and not too long."""
    clean = "".join(letter if letter.isprintable() else "\N{REPLACEMENT CHARACTER}" for letter in text)
    return f"“{clean if len(clean) <= _LONGEST else clean[:_LONGEST] + '…'}”"
