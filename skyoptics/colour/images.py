"""Image files: PNG (8 and 16 bit), OpenEXR, TIFF.

Every file is written beside its place and then renamed, so that a reader, or a run that was stopped, never finds half a
file. The PNG writer is our own since the usual ones cannot write 16-bit colour; it follows the PNG specification (W3C,
third edition, 2025).

Eight-bit pictures are dithered: instead of being rounded, a value v · 255 goes to one of its two neighbours, the upper
with the probability that keeps the mean. The threshold is fixed by row, column and channel (the R2 sequence, M. Roberts,
"The unreasonable effectiveness of quasirandom sequences", 2018), so the same picture gives the same file, a smooth sky
shows no bands, and black, white and every exact 8-bit value stay as they are.
"""

from __future__ import annotations

import errno
import json
import os
import secrets
import struct
import zlib
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from skyoptics.colour.display import encode
from skyoptics.colour.metadata import WRITTEN_BY_HAND, XMP
from skyoptics.errors import DomainError, ResourceError
from skyoptics.units import ArrayLike, FloatArray

Bits = Literal[8, 16]

_PLASTIC = 1.32471795724474602596
"""Real root of x³ = x + 1; the R2 sequence steps by 1/x and 1/x²."""
_CHANNEL_SHIFT = (0.0, 1.0 / 3.0, 2.0 / 3.0)
"""Shift of the threshold between channels: what one gains the next one loses, so luminance is quietest."""
_GUARD = 1e-3
"""Distance of the thresholds from 0 and 1 [LSB], more than float32 rounding: exact 8-bit values stay."""
_ROWS = 64
"""Rows encoded and compressed at once."""
_FULL = {
    errno.ENOSPC: "the disk is full",
    errno.EDQUOT: "the disk quota is used up",
    errno.EFBIG: "the file is larger than allowed here",
}


def write_png(
    path: str | os.PathLike[str],
    rgb: ArrayLike,
    *,
    bits: Bits = 8,
    encoded: bool = False,
    text: Mapping[str, str] | None = None,
) -> None:
    """Write an sRGB picture as PNG.

    Parameters
    ----------
    path : path
        Where; an existing file is replaced.
    rgb : array_like, shape (ny, nx, 3)
        Linear sRGB, 0 to 1; values outside are clipped, nan is black [1].
    bits : {8, 16}
        Depth of a channel; 8 is dithered.
    encoded : bool
        Whether `rgb` holds sRGB-encoded values instead of linear ones.
    text : mapping of str to str, optional
        Text entries; a name has 1 to 79 Latin-1 characters.

    Raises
    ------
    DomainError
        For a wrong shape, depth or text entry.
    ResourceError
        If the folder is missing or not writable, or the disk is full.
    """
    pieces = _png(rgb, bits, encoded, text or {})
    with replacing(path) as temporary, open(temporary, "xb") as file:
        for piece in pieces:
            file.write(piece)


def png_bytes(rgb: ArrayLike, *, bits: Bits = 8, encoded: bool = False, text: Mapping[str, str] | None = None) -> bytes:
    """Return the bytes of the file that `write_png` would write."""
    return b"".join(_png(rgb, bits, encoded, text or {}))


def write_exr(path: str | os.PathLike[str], rgb: ArrayLike, *, text: Mapping[str, str] | None = None) -> None:
    """Write scene luminance as OpenEXR, float32, ZIP compressed.

    Parameters
    ----------
    path : path
        Where; an existing file is replaced.
    rgb : array_like, shape (ny, nx, 3)
        Linear values for sRGB primaries, white (1, 1, 1) having 1 cd m⁻² (`display.linear_rgb` of absolute XYZ)
        [cd m⁻²]; components may be negative; nan is written as 0.
    text : mapping of str to str, optional
        Header entries.

    Raises
    ------
    DomainError, ResourceError
        As for `write_png`.
    """
    import OpenEXR

    values = np.nan_to_num(_picture(rgb).astype(np.float32), nan=0.0)
    header: dict[str, Any] = {"compression": OpenEXR.ZIP_COMPRESSION, "type": OpenEXR.scanlineimage}
    for key, value in (text or {}).items():
        # A blank or a capital is no fault in an OpenEXR name, an empty or a long one is.
        if not 1 <= len(key.encode()) <= 255 or "\0" in key + value:
            raise DomainError(f"header entry {key!r}: a name has 1 to 255 bytes, and no text holds a zero byte")
        header[key] = value
    # Chromaticities of red, green, blue and white (IEC 61966-2-1), and what a value of 1 means [cd m⁻²].
    header["chromaticities"] = (0.64, 0.33, 0.30, 0.60, 0.15, 0.06, 0.3127, 0.3290)
    header["whiteLuminance"] = 1.0
    with replacing(path) as temporary:
        try:
            OpenEXR.File(header, {"RGB": np.ascontiguousarray(values)}).write(str(temporary))
        except RuntimeError as error:  # OpenEXR words every failure of the file system so
            raise ResourceError(
                f"{Path(path).name}: cannot be written ({error}); free space or choose another folder"
            ) from error


def write_tiff(path: str | os.PathLike[str], values: ArrayLike, *, text: Mapping[str, str] | None = None) -> None:
    """Write an array as float32 TIFF, losslessly compressed, nan kept.

    Parameters
    ----------
    path : path
        Where; an existing file is replaced.
    values : array_like, shape (ny, nx) or (ny, nx, 3)
        Luminance, XYZ or linear RGB [any].
    text : mapping of str to str, optional
        Written as JSON into the image description; ``Copyright`` into its own tag too, XMP (`metadata.XMP`) into its own
        alone.

    Raises
    ------
    DomainError, ResourceError
        As for `write_png`.
    """
    import tifffile

    array = np.asarray(values, dtype=np.float32)
    if array.ndim == 3:
        array = _picture(array)
    elif array.ndim != 2 or 0 in array.shape:
        raise DomainError(f"a TIFF needs shape (ny, nx) or (ny, nx, 3), got {array.shape}")
    entries = dict(text or {})
    packet = entries.pop(XMP, None)
    tags: list[tuple[int, str, int, bytes, bool]] = []
    if packet is not None:
        tags.append((700, "B", len(packet.encode()), packet.encode(), True))
    if "Copyright" in entries:
        rights = entries["Copyright"].encode() + b"\0"
        tags.append((33432, "s", len(rights), rights, True))
    with replacing(path) as temporary:
        tifffile.imwrite(
            temporary,
            array,
            photometric="rgb" if array.ndim == 3 else "minisblack",
            compression="zlib",
            description=json.dumps(entries),
            extratags=tags,
            software=(text or {}).get("Software", "skyoptics").encode("ascii", "replace").decode(),
            metadata=None,
        )


@contextmanager
def replacing(path: str | os.PathLike[str]) -> Iterator[Path]:
    """Give a temporary name in the same folder; on success it takes the place of `path`, on any failure it is removed.

    Parameters
    ----------
    path : path
        The file to make or replace.

    Yields
    ------
    Path
        A name that does not exist yet, with the same ending.

    Raises
    ------
    ResourceError
        For any failure of the file system, in words.
    """
    path = Path(path)
    temporary = path.with_name(f".{path.stem}.{secrets.token_hex(4)}.part{path.suffix}")
    try:
        if not path.parent.is_dir():
            raise ResourceError(f"{path.name}: the folder {path.parent} does not exist; make it or choose another one")
        if path.is_dir():
            raise ResourceError(f"{path.name}: is a folder; choose another name")
        yield temporary
        os.replace(temporary, path)
    except BaseException as error:
        temporary.unlink(missing_ok=True)
        if isinstance(error, OSError):
            raise ResourceError(_in_words(path, error)) from error
        raise


def dither_threshold(rows: NDArray[np.int64], columns: NDArray[np.int64]) -> FloatArray:
    """Return what is added before rounding down, shape (rows, columns, 3), between 0 and 1 [LSB]."""
    plane = (rows[:, None] / _PLASTIC + columns[None, :] / _PLASTIC**2)[..., None]
    result: FloatArray = _GUARD + (1.0 - 2.0 * _GUARD) * ((plane + np.array(_CHANNEL_SHIFT)) % 1.0)
    return result


def _png(rgb: ArrayLike, bits: int, encoded: bool, text: Mapping[str, str]) -> Iterator[bytes]:
    """Check everything, then return the file piece by piece."""
    picture = _picture(rgb)
    if bits not in (8, 16):
        raise DomainError(f"a PNG has 8 or 16 bits, got {bits}")
    height, width, _ = picture.shape
    head = [
        b"\x89PNG\r\n\x1a\n",
        _chunk(b"IHDR", struct.pack(">IIBBBBB", width, height, bits, 2, 0, 0, 0)),
        _chunk(b"sRGB", b"\x01"),  # rendering intent: relative colorimetric
        _chunk(b"gAMA", struct.pack(">I", 45455)),
        _chunk(b"cHRM", struct.pack(">8I", 31270, 32900, 64000, 33000, 30000, 60000, 15000, 6000)),
        *(_text_chunk(key, value) for key, value in text.items()),
    ]

    def pieces() -> Iterator[bytes]:
        yield from head
        squeeze = zlib.compressobj(6)
        above = np.zeros((1, width * 3 * bits // 8), dtype=np.uint8)
        for start in range(0, height, _ROWS):
            lines = _lines(picture[start : start + _ROWS], start, bits, encoded)
            packed = squeeze.compress(_filtered(lines, above, 3 * bits // 8).tobytes())
            above = lines[-1:]
            if packed:
                yield _chunk(b"IDAT", packed)
        yield _chunk(b"IDAT", squeeze.flush())
        yield _chunk(b"IEND", b"")

    return pieces()


def _picture(rgb: ArrayLike) -> NDArray[Any]:
    """Return an array of shape (ny, nx, 3), or refuse it."""
    picture = np.asarray(rgb)
    if picture.ndim != 3 or picture.shape[-1] != 3 or 0 in picture.shape:
        raise DomainError(f"a picture needs shape (ny, nx, 3), got {picture.shape}")
    return picture


def _lines(rgb: NDArray[Any], start: int, bits: int, encoded: bool) -> NDArray[np.uint8]:
    """Return the bytes (ny, nx · 3 · bits / 8) of rows that begin at row `start` of the picture."""
    values = np.clip(np.nan_to_num(rgb.astype(np.float32), nan=0.0), 0.0, 1.0)
    if not encoded:
        values = np.clip(encode(values), 0.0, 1.0)
    height, width, _ = rgb.shape
    if bits == 16:
        return np.round(values.astype(np.float64) * 65535.0).astype(">u2").reshape(height, -1).view(np.uint8)
    threshold = dither_threshold(np.arange(start, start + height), np.arange(width))
    return np.floor(values * 255.0 + threshold).astype(np.uint8).reshape(height, -1)


def _filtered(lines: NDArray[np.uint8], above: NDArray[np.uint8], pixel: int) -> NDArray[np.uint8]:
    """Return lines led by their PNG filter byte: None, Sub or Up, whichever has the smallest sum of magnitudes."""
    left = np.zeros_like(lines)
    left[:, pixel:] = lines[:, :-pixel]
    # uint8 subtraction wraps, as the filters ask for.
    options = np.stack([lines, lines - left, lines - np.concatenate([above, lines[:-1]])])
    cost = np.abs(options.view(np.int8).astype(np.int16)).sum(axis=-1, dtype=np.int64)
    choice = cost.argmin(axis=0)
    chosen = options[choice, np.arange(len(lines))]
    return np.concatenate([choice[:, None].astype(np.uint8), chosen], axis=1)


def _chunk(kind: bytes, data: bytes) -> bytes:
    """Return one PNG chunk: length, kind, data, checksum."""
    return struct.pack(">I", len(data)) + kind + data + struct.pack(">I", zlib.crc32(kind + data))


def _text_chunk(key: str, value: str) -> bytes:
    """Return an iTXt chunk (UTF-8, uncompressed, no language) for words of people and XMP, else tEXt where ASCII will do."""
    try:
        name = key.encode("latin-1")
    except UnicodeEncodeError:
        name = b""
    if not 1 <= len(name) <= 79 or not key.isprintable() or key != " ".join(key.split()):
        raise DomainError(f"text entry {key!r}: a name has 1 to 79 printable Latin-1 characters, no blank at an end")
    if "\0" in value:
        raise DomainError(f"text entry {key!r}: holds a zero byte")
    if value.isascii() and key != XMP and key not in WRITTEN_BY_HAND:
        return _chunk(b"tEXt", name + b"\0" + value.encode("ascii"))
    return _chunk(b"iTXt", name + b"\0\0\0\0\0" + value.encode("utf-8"))


def _in_words(path: Path, error: OSError) -> str:
    """Return what to tell a person about a failure of the file system."""
    if isinstance(error, PermissionError) or error.errno == errno.EROFS:
        return f"{path.name}: the folder {path.parent} is not writable; choose another one"
    reason = _FULL.get(error.errno or 0)
    if reason:
        return f"{path.name}: {reason} ({path.parent}); free some space or choose another folder"
    return f"{path.name}: cannot be written ({error.strerror or error}); choose another folder or name"
