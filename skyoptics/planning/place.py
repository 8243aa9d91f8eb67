"""Places: coordinates, or a name in the user's own small file; and the time zone there.

::

    # places.toml
    mill = "47.2N 8.9E"

    [tower]
    coordinates = "+4712+00854+430/"
    height_m = 435              # of the eye above the sea
    zone = "Europe/Zurich"
"""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import NamedTuple
from zoneinfo import ZoneInfo

from skyoptics.errors import DataFileError, DomainError, NothingFoundError, nearest
from skyoptics.light.zones import find_zone
from skyoptics.planning import coordinates
from skyoptics.planning.answers import Place

LOWEST, HIGHEST = -500.0, 10_000.0
"""Heights of an eye above the sea [m]."""

_KEYS = ("coordinates", "latitude_deg", "longitude_deg", "height_m", "zone")
_LARGEST = 1_000_000  # bytes


class Found(NamedTuple):
    """A place, and the name of its zone or None where the file gives none."""

    place: Place
    zone: str | None


class Zone(NamedTuple):
    """A time zone, and how it was come by (empty where it was given)."""

    zone: ZoneInfo
    note: str


def own_file() -> Path:
    """Return where the user's own places are looked for."""
    import platformdirs

    return Path(platformdirs.user_config_path("skyoptics", appauthor=False)) / "places.toml"


def find(text: str, file: Path | None = None, height_m: float | None = None) -> Found:
    """Return the place that a text means.

    Parameters
    ----------
    text : str
        A name in the file, or coordinates (`coordinates.parse`).
    file : Path or None
        The user's places; None for `own_file`, which need not exist.
    height_m : float or None
        Of the eye above the sea; None for that of the text or file, else 0.

    Returns
    -------
    Found

    Raises
    ------
    NothingFoundError
        For a name that the file does not hold, with the nearest one.
    DataFileError
        For a file that cannot be used.
    DomainError
        For coordinates that are none.
    """
    source = own_file() if file is None else file
    known = read(source) if file is not None or source.is_file() else {}
    wanted = _key(text)
    names = {_key(name): name for name in known}
    if wanted in names:
        found = known[names[wanted]]
        return Found(_at(found.place, height_m), found.zone)
    if any(letter.isdigit() for letter in text):
        return Found(at(coordinates.parse(text), height_m), None)
    if not known:
        raise NothingFoundError(
            f"no place “{text}”: it is not coordinates ({coordinates.EXAMPLE}), and names are looked up in {source}, which "
            + (
                f'{"is empty" if source.is_file() else "does not exist"}; write a line such as {text!r} = "47.2N 8.9E" there'
            )
        )
    hint = nearest(wanted, names)
    listed = ", ".join(sorted(known)[:12]) + (" …" if len(known) > 12 else "")
    raise NothingFoundError(f"no place “{text}” in {source}{hint} (it holds {listed})")


def at(where: coordinates.Coordinates, height_m: float | None = None, name: str = "") -> Place:
    """Return a place at coordinates.

    Parameters
    ----------
    where : Coordinates
        With or without a height.
    height_m : float or None
        Of the eye above the sea; None for that of the coordinates, else 0.
    name : str
        Of the place.

    Raises
    ------
    DomainError
        For a height outside −500 to 10 000 m.
    """
    return _at(Place(where.latitude_deg, where.longitude_deg, where.height_m or 0.0, name), height_m)


def read(file: Path) -> dict[str, Found]:
    """Return the places of a file.

    Parameters
    ----------
    file : Path
        TOML: name = "coordinates", or a table with ``coordinates`` or ``latitude_deg`` and ``longitude_deg``, and by
        choice ``height_m`` and ``zone``.

    Returns
    -------
    dict
        By name.

    Raises
    ------
    DataFileError
        For a file that cannot be read, is no TOML, or has a fault, with the name of the place and what is allowed.
    """
    try:
        if file.stat().st_size > _LARGEST:
            raise DataFileError(f"{file}: larger than a megabyte, which is no list of places")
        source = file.read_text(encoding="utf-8-sig")
    except UnicodeDecodeError:
        raise DataFileError(f"{file}: not a text in UTF-8") from None
    except OSError as error:
        raise DataFileError(f"{file}: cannot read places: {error.strerror or error}") from None
    try:
        tables = tomllib.loads(source)
    except tomllib.TOMLDecodeError as error:
        raise DataFileError(f'{file}: no valid TOML: {error}; a line is such as mill = "47.2N 8.9E"') from None
    found = {}
    for name, entry in tables.items():
        try:
            found[name] = _entry(name, entry)
        except DomainError as error:
            raise DataFileError(f"{file}: {name}: {error}") from None
    return found


def zone_of(place: Place, asked: str | None) -> Zone:
    """Return the time zone of a place.

    Parameters
    ----------
    place : Place
        Where.
    asked : str or None
        Name in the IANA database; None to look it up by the coordinates, for which the package tzfpy must be installed.

    Returns
    -------
    Zone
        Where the zone was given and a look-up says that latitude and longitude may have been swapped, the note says so.

    Raises
    ------
    DomainError
        For an unknown zone, and where none is given and none can be looked up.
    """
    if asked is not None:
        zone = find_zone(asked)
        return Zone(zone, _swapped(place, zone))
    name = _looked_up(place.longitude_deg, place.latitude_deg)
    if name is None:
        raise DomainError(
            "no time zone: give --tz with a name such as Europe/Zurich or UTC (with the package tzfpy installed it is "
            "looked up by the coordinates)"
        )
    return Zone(find_zone(name), f"Times are in the zone {name}, looked up by the coordinates.")


def _looked_up(longitude_deg: float, latitude_deg: float) -> str | None:
    """Return the zone at coordinates; None without tzfpy or for no zone."""
    try:
        from tzfpy import get_tz
    except ImportError:
        return None
    return get_tz(longitude_deg, latitude_deg) or None


def _swapped(place: Place, zone: ZoneInfo) -> str:
    """Return a warning where the zone belongs to the swapped coordinates and not to these."""
    here = _looked_up(place.longitude_deg, place.latitude_deg)
    if here is None or here == zone.key or abs(place.longitude_deg) > 90.0:
        return ""
    if _looked_up(place.latitude_deg, place.longitude_deg) != zone.key:
        return ""
    return (
        f"Latitude {place.latitude_deg:g}, longitude {place.longitude_deg:g} lies in the zone {here}, the other way round in "
        f"{zone.key}: were the two swapped?"
    )


def _entry(name: str, entry: object) -> Found:
    """Return one place of a file."""
    if isinstance(entry, str):
        return Found(at(coordinates.parse(entry), name=name), None)
    if not isinstance(entry, Mapping):
        raise DomainError(f'must be coordinates in quotes or a table, such as {name} = "47.2N 8.9E", got {entry!r}')
    for key in entry:
        if key not in _KEYS:
            raise DomainError(f"unknown key {key!r}{nearest(key, _KEYS)} (known: {', '.join(_KEYS)})")
    for key in ("latitude_deg", "longitude_deg", "height_m"):
        if key in entry and (isinstance(entry[key], bool) or not isinstance(entry[key], int | float)):
            raise DomainError(f"{key} must be a number, got {entry[key]!r}")
    for key in ("coordinates", "zone"):
        if key in entry and not isinstance(entry[key], str):
            raise DomainError(f"{key} must be a text in quotes, got {entry[key]!r}")
    numbers = "latitude_deg" in entry and "longitude_deg" in entry
    if numbers == ("coordinates" in entry):
        raise DomainError("needs either coordinates, or both latitude_deg and longitude_deg")
    if numbers:
        where = coordinates.checked(
            coordinates.Coordinates(float(entry["latitude_deg"]), float(entry["longitude_deg"]))
        )
    else:
        where = coordinates.parse(entry["coordinates"])
    zone = entry.get("zone")
    if zone is not None:
        find_zone(zone)
    return Found(at(where, entry.get("height_m"), name), zone)


def _at(place: Place, height_m: float | None) -> Place:
    """Return a place at another height, checked."""
    height = place.height_m if height_m is None else float(height_m)
    if not LOWEST <= height <= HIGHEST:
        raise DomainError(f"the height above the sea must be {LOWEST:g} to {HIGHEST:g} m, got {height:g}")
    return Place(place.latitude_deg, place.longitude_deg, height, place.name)


def _key(name: str) -> str:
    """Return a name without what people vary in writing."""
    return " ".join(name.casefold().replace("_", " ").replace("-", " ").split())
