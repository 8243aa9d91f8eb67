"""JPEG photographs: what a file says of itself, its pixels, and the copy that is written.

Everything is looked at before a pixel is decoded: the signature, the size, the EXIF entries (CIPA DC-008, *Exif 2.32*).
Pixels are those of the picture as it is shown, turned by the orientation entry; pixel centres are whole numbers, (0, 0) in
the middle of the upper left pixel. The file itself is only ever read.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any, BinaryIO

import numpy as np
from numpy.typing import NDArray

from skyoptics.errors import DataFileError
from skyoptics.planning.photo_exif import Exif, quiet, read_exif
from skyoptics.scene.files import file_trouble

LARGEST = 120_000_000
"""Pixels of the largest photograph that is taken: drawing on it needs about 1.5 GB."""
QUALITY = 95
"""Of the JPEG copy."""

_RAW = (
    *(".3fr", ".arw", ".cr2", ".cr3", ".crw", ".dcr", ".dng", ".erf", ".fff", ".iiq", ".kdc", ".mef", ".mos", ".mrw"),
    *(".nef", ".nrw", ".orf", ".pef", ".raf", ".raw", ".rw2", ".rwl", ".sr2", ".srf", ".srw", ".x3f"),
)
_RAW_STARTS = (b"IIRO", b"IIRS", b"MMOR", b"IIU\0", b"FUJIFILMCCD-RAW", b"FOVb", b"\0MRM", b"IIII\x1a\0\0\0HEAPCCDR")
_OTHERS = (
    (b"\x89PNG", "a PNG picture"),
    (b"GIF8", "a GIF picture"),
    (b"RIFF", "a WebP picture or another RIFF file"),
    (b"BM", "a BMP picture"),
    (b"%PDF", "a PDF document"),
    (b"\xff\x0a", "a JPEG XL picture"),
    (b"\0\0\0\x0cjP", "a JPEG 2000 picture"),
)
_FRAMES = frozenset(range(0xC0, 0xD0)) - {0xC4, 0xC8, 0xCC}
"""Markers that begin a frame and hold its size (ITU-T T.81, table B.1)."""
_MOST_MARKERS = 10000


@dataclass(frozen=True, eq=False)
class Photograph:
    """A JPEG file, not yet decoded.

    Parameters
    ----------
    path : Path
        The file.
    shape : tuple of int
        Rows, columns of the picture as it is shown.
    exif : Exif
        What its entries say.
    """

    path: Path
    shape: tuple[int, int]
    exif: Exif


def look(path: Path) -> Photograph:
    """Return a photograph without decoding it.

    Raises
    ------
    DataFileError
        For a file that cannot be read, a raw file, another kind of file, a broken one and one that is too large.
    """
    for trouble in file_trouble(path):
        raise DataFileError(f"{path.name or path}: {trouble}")
    with path.open("rb") as file:
        start = file.read(32)
        if not start.startswith(b"\xff\xd8\xff"):
            raise DataFileError(f"{path.name}: {_what_else(path, start)}")
        rows, columns = _size(file, path.name)
    if rows * columns > LARGEST:
        raise DataFileError(
            f"{path.name}: is {columns} × {rows} pixels, {rows * columns / 1e6:.0f} million; at most {LARGEST // 1000000} "
            "million are taken: make it smaller first"
        )
    exif = read_exif(path)
    return Photograph(path, (columns, rows) if exif.orientation >= 5 else (rows, columns), exif)


def pixels(photo: Photograph) -> NDArray[np.uint8]:
    """Return the picture as it is shown, uint8, shape (rows, columns, 3).

    Raises
    ------
    DataFileError
        If the file ends too early or is broken otherwise.
    """
    from PIL import Image

    try:
        with quiet(), Image.open(photo.path, formats=["JPEG"]) as image:
            image.load()
            found = np.asarray(_upright(image, photo.exif.orientation).convert("RGB"))
    except (OSError, SyntaxError, ValueError, TypeError, EOFError) as error:
        why = "it ends too early" if "truncated" in str(error) else str(error) or "it is broken"
        raise DataFileError(f"{photo.path.name}: cannot be decoded: {why}; copy it from the camera again") from None
    if found.shape != (*photo.shape, 3):
        raise DataFileError(f"{photo.path.name}: its size is not what its header says")
    return found


def write_copy(photo: Photograph, rgb: NDArray[np.uint8], path: Path, keep_place: bool = False) -> list[str]:
    """Write a picture with the EXIF entries and the colour profile of a photograph.

    Parameters
    ----------
    photo : Photograph
        Whose entries are kept: all but the position, what may hold it or the old pixels (the maker's own block, the
        thumbnail), and the orientation, which is 1 now.
    rgb : ndarray of uint8, shape (rows, columns, 3)
        As from `pixels`.
    path : Path
        File to make.
    keep_place : bool
        Whether the position is kept too.

    Returns
    -------
    list of str
        What to know of the copy.
    """
    from PIL import Image

    block, notes = photo.exif.block_for((rgb.shape[0], rgb.shape[1]), keep_place)
    more: dict[str, Any] = {"exif": block} if block else {}
    if photo.exif.profile:
        more["icc_profile"] = photo.exif.profile
    Image.fromarray(rgb).save(path, format="JPEG", quality=QUALITY, subsampling=0, **more)
    return notes


def _upright(image: Any, orientation: int) -> Any:
    """Return an image turned as its orientation asks (Exif 2.32, tag 0x0112)."""
    from PIL import Image

    turn = {
        2: Image.Transpose.FLIP_LEFT_RIGHT,
        3: Image.Transpose.ROTATE_180,
        4: Image.Transpose.FLIP_TOP_BOTTOM,
        5: Image.Transpose.TRANSPOSE,
        6: Image.Transpose.ROTATE_270,
        7: Image.Transpose.TRANSVERSE,
        8: Image.Transpose.ROTATE_90,
    }.get(orientation)
    return image if turn is None else image.transpose(turn)


def _what_else(path: Path, start: bytes) -> str:
    """Return what a file is that is no JPEG, and what to do."""
    brand = start[8:12] if start[4:8] == b"ftyp" else b""
    raw = path.suffix.lower() in _RAW or start.startswith(_RAW_STARTS) or brand == b"crx "
    if raw or start[:4] in (b"II*\0", b"MM\0*"):
        kind = "is a raw file" if raw else "is a TIFF or raw file"
        return f"{kind}; develop it to JPEG first, uncropped and without correction of perspective"
    if brand:
        return "is a HEIC or AVIF picture or a film; save it as JPEG first, with its EXIF entries"
    if not start:
        return "is empty; a JPEG photograph is needed"
    name = next((name for magic, name in _OTHERS if start.startswith(magic)), "no JPEG picture")
    return f"is {name}; a JPEG photograph is needed"


def _size(file: BinaryIO, name: str) -> tuple[int, int]:
    """Return rows and columns from the frame header (ITU-T T.81, B.2.2), reading no pixel."""
    file.seek(2)
    for _ in range(_MOST_MARKERS):
        byte = file.read(1)
        while byte and byte != b"\xff":  # stray bytes between segments
            byte = file.read(1)
        while byte == b"\xff":
            byte = file.read(1)
        if not byte or byte[0] in (0xD9, 0xDA):
            break
        if byte[0] == 0x01 or 0xD0 <= byte[0] <= 0xD7:
            continue
        length = int.from_bytes(file.read(2), "big")
        if length < 2:
            break
        if byte[0] in _FRAMES:
            head = file.read(5)
            rows, columns = int.from_bytes(head[1:3], "big"), int.from_bytes(head[3:5], "big")
            if len(head) == 5 and rows and columns:
                return rows, columns
            break
        file.seek(length - 2, 1)
    raise DataFileError(f"{name}: is a broken JPEG file: no size is found in it; copy it from the camera again")
