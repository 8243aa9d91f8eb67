"""EXIF entries of a photograph: lens, time, place, and the block that a copy keeps.

Tags as in CIPA DC-008, *Exif 2.32* (2019). A block that cannot be read counts as none; an entry that makes no sense (a focal
length of 0, as lenses without contacts leave it) as missing.
"""

from __future__ import annotations

import struct
import warnings
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field
from datetime import UTC, datetime, timedelta, timezone
from math import isfinite
from pathlib import Path
from typing import Any

from skyoptics.errors import DataFileError

EXIF_BLOCK, GPS_BLOCK = 0x8769, 0x8825
ORIENTATION, FOCAL, FOCAL_35, MAKER_NOTE = 0x0112, 0x920A, 0xA405, 0x927C
WIDTH, HEIGHT = 0xA002, 0xA003
PLANE_X, PLANE_UNIT = 0xA20E, 0xA210
TAKEN, SUBSECONDS = 0x9003, 0x9291
OFFSETS = (0x9011, 0x9012, 0x9010)
"""Offset of the time of taking; of digitising and of the last change, which cameras set alike."""

_UNITS_MM = {2: 25.4, 3: 10.0, 4: 1.0, 5: 0.001}  # 4 and 5 are not in the standard, cameras write them
_PLAUSIBLE_MM = (2.0, 100.0)
_BROKEN = (
    OSError,
    SyntaxError,
    ValueError,
    TypeError,
    KeyError,
    IndexError,
    struct.error,
    OverflowError,
    AttributeError,
)


@dataclass(frozen=True, eq=False)
class Exif:
    """What the entries say; None for what they do not.

    Parameters
    ----------
    focal_mm : float or None
        Focal length.
    equivalent_mm : float or None
        Focal length of the same field on 36 × 24 mm film.
    sensor_width_mm : float or None
        Along the longer side of the picture as it was recorded, from the focal-plane resolution.
    recorded : tuple of int or None
        Columns, rows as they were recorded.
    orientation : int
        1 to 8.
    taken : datetime or None
        As the camera's clock showed it; without offset where the entries hold none.
    satellite_time : datetime or None
        UTC, of the last position.
    latitude_deg, longitude_deg, height_m : float or None
        Position.
    raw : bytes
        The block.
    profile : bytes or None
        Colour profile of an RGB picture.
    notes : tuple of str
        What was wrong with it.
    """

    focal_mm: float | None = None
    equivalent_mm: float | None = None
    sensor_width_mm: float | None = None
    recorded: tuple[int, int] | None = None
    orientation: int = 1
    taken: datetime | None = None
    satellite_time: datetime | None = None
    latitude_deg: float | None = None
    longitude_deg: float | None = None
    height_m: float | None = None
    raw: bytes = b""
    profile: bytes | None = None
    notes: tuple[str, ...] = field(default=())

    def block_for(self, shape: tuple[int, int], keep_place: bool) -> tuple[bytes, list[str]]:
        """Return the block of an upright copy of that many rows and columns, and what to know of it."""
        from PIL import Image

        if not self.raw:
            return b"", []
        try:
            with quiet():
                block = Image.Exif()
                block.load(self.raw)
                inner: dict[int, Any] = dict(block.get_ifd(EXIF_BLOCK))
                place: dict[int, Any] = dict(block.get_ifd(GPS_BLOCK))
                # the maker's own block may hold the position, and its inner pointers break when it moves
                inner.pop(MAKER_NOTE, None)
                inner |= {tag: size for tag, size in ((WIDTH, shape[1]), (HEIGHT, shape[0])) if tag in inner}
                kept = Image.Exif()
                for tag, value in block.items():
                    if tag not in (EXIF_BLOCK, GPS_BLOCK):
                        kept[tag] = value
                kept[ORIENTATION] = 1
                if inner:
                    kept[EXIF_BLOCK] = inner
                if place and keep_place:
                    kept[GPS_BLOCK] = place
                written = kept.tobytes()
        except _BROKEN:
            return b"", ["the EXIF entries could not be written anew: the copy has none"]
        if len(written) > 65533 - 6:
            return b"", ["the EXIF entries are too long to be written anew: the copy has none"]
        return written, []


@contextmanager
def quiet() -> Iterator[None]:
    """Keep Pillow from judging sizes, which were looked at before, and from warning of entries that are cut off."""
    from PIL import Image

    largest, Image.MAX_IMAGE_PIXELS = Image.MAX_IMAGE_PIXELS, None
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            yield
    finally:
        Image.MAX_IMAGE_PIXELS = largest


def read_exif(path: Path) -> Exif:
    """Return what the entries of a JPEG file say.

    Raises
    ------
    DataFileError
        If the file itself cannot be opened as JPEG.
    """
    from PIL import Image, UnidentifiedImageError

    try:
        with quiet(), Image.open(path, formats=["JPEG"]) as image:
            raw = image.info.get("exif") or b""
            profile = image.info.get("icc_profile") if image.mode == "RGB" else None
    except (UnidentifiedImageError, OSError, SyntaxError, struct.error):
        raise DataFileError(f"{path.name}: is a broken JPEG file; copy it from the camera again") from None
    if not raw:
        return Exif(profile=profile)
    try:
        with quiet():
            block = Image.Exif()
            block.load(raw)
            inner, place = block.get_ifd(EXIF_BLOCK), block.get_ifd(GPS_BLOCK)
            turned = block.get(ORIENTATION, 1)
    except _BROKEN:
        return Exif(profile=profile, notes=("the EXIF entries are broken and were left out",))
    recorded = tuple(int(_number(inner.get(tag)) or 0) for tag in (WIDTH, HEIGHT))
    latitude, longitude = _angle(place, 1, 2, "S", 90.0), _angle(place, 3, 4, "W", 180.0)
    known = latitude is not None and longitude is not None
    return Exif(
        focal_mm=_positive(inner.get(FOCAL)),
        equivalent_mm=_positive(inner.get(FOCAL_35)),
        sensor_width_mm=_sensor_width(inner, recorded),
        recorded=(recorded[0], recorded[1]) if all(recorded) else None,
        orientation=turned if isinstance(turned, int) and 1 <= turned <= 8 else 1,
        taken=_taken(inner),
        satellite_time=_satellite_time(place),
        latitude_deg=latitude if known else None,
        longitude_deg=longitude if known else None,
        height_m=_height(place) if known else None,
        raw=raw,
        profile=profile,
    )


def _number(value: Any) -> float | None:
    """Return a finite number, or None."""
    try:
        number = float(value)
    except (TypeError, ValueError, ZeroDivisionError, OverflowError):
        return None
    return number if isfinite(number) else None


def _positive(value: Any) -> float | None:
    number = _number(value)
    return number if number is not None and number > 0.0 else None


def _sensor_width(inner: Mapping[int, Any], recorded: tuple[int, ...]) -> float | None:
    """Return the longer side of the recorded picture on the sensor [mm]."""
    resolution, unit = _positive(inner.get(PLANE_X)), _UNITS_MM.get(int(_number(inner.get(PLANE_UNIT, 2)) or 0))
    if resolution is None or unit is None or not all(recorded):
        return None
    width = max(recorded) / resolution * unit
    return width if _PLAUSIBLE_MM[0] <= width <= _PLAUSIBLE_MM[1] else None


def _taken(inner: Mapping[int, Any]) -> datetime | None:
    """Return the time of taking, with its offset where there is one."""
    try:
        moment = datetime.strptime(_text(inner.get(TAKEN))[:19], "%Y:%m:%d %H:%M:%S")
    except ValueError:
        return None
    fraction = _text(inner.get(SUBSECONDS))
    if fraction.isdigit():
        moment += timedelta(seconds=float(f"0.{fraction[:6]}"))
    for tag in OFFSETS:
        offset = _text(inner.get(tag))
        if len(offset) == 6 and offset[0] in "+-" and offset[3] == ":" and (offset[1:3] + offset[4:]).isdigit():
            minutes = 60 * int(offset[1:3]) + int(offset[4:])
            if minutes <= 14 * 60:
                return moment.replace(tzinfo=timezone(timedelta(minutes=-minutes if offset[0] == "-" else minutes)))
    return moment


def _text(value: Any) -> str:
    text = value.decode("ascii", "replace") if isinstance(value, bytes) else str(value or "")
    return text.replace("\0", "").strip()


def _satellite_time(place: Mapping[int, Any]) -> datetime | None:
    """Return the time of the position, UTC."""
    try:
        day = datetime.strptime(_text(place.get(29)), "%Y:%m:%d").replace(tzinfo=UTC)
        hours, minutes, seconds = (float(part) for part in place[7])
        return day + timedelta(hours=hours, minutes=minutes, seconds=seconds)
    except (ValueError, TypeError, KeyError, OverflowError, ZeroDivisionError):
        return None


def _angle(place: Mapping[int, Any], side: int, tag: int, negative: str, largest: float) -> float | None:
    """Return degrees from degrees, minutes and seconds."""
    try:
        degrees, minutes, seconds = (float(part) for part in place[tag])
    except (KeyError, TypeError, ValueError, ZeroDivisionError):
        return None
    angle = degrees + minutes / 60.0 + seconds / 3600.0
    if not 0.0 <= angle <= largest:
        return None
    return -angle if _text(place.get(side)).upper().startswith(negative) else angle


def _height(place: Mapping[int, Any]) -> float | None:
    height, below = _number(place.get(6)), place.get(5) in (1, b"\x01")
    return None if height is None or not -500.0 <= height <= 20000.0 else (-height if below else height)
