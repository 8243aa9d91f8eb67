"""Files that a scene names or is read from, and names for the files that come out."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Iterator
from itertools import islice
from pathlib import Path

from skyoptics.errors import nearest
from skyoptics.scene.fields import printable

LONGEST_NAME = 80
"""Characters of a safe name: short enough for any file system, with room for an ending."""

_RESERVED = re.compile(r"(con|prn|aux|nul|com[0-9]|lpt[0-9])(?=\.|$)", re.IGNORECASE)


def file_trouble(path: Path) -> Iterator[str]:
    """Yield why a file cannot be read, in words; nothing if it can.

    Parameters
    ----------
    path : Path
        The file.

    Yields
    ------
    str
        At most one message.
    """
    try:
        if path.is_dir():
            yield "is a folder, not a file"
        elif path.is_file():
            with path.open("rb"):
                pass
        elif path.exists():
            yield "is not an ordinary file"
        elif not path.parent.is_dir():
            yield f"there is no folder {printable(str(path.parent), 200)}"
        else:
            names = (entry.name for entry in islice(path.parent.iterdir(), 1000) if entry.is_file())
            yield f"there is no such file{printable(nearest(path.name[:100], names), 200)}"
    except OSError as error:
        yield unreadable(error)
    except ValueError:
        yield "there is no such file: its name holds a character that no name may hold"


def unreadable(error: OSError) -> str:
    """Return the system's reason in words."""
    return f"cannot be read: {(error.strerror or 'unknown reason').lower()}"


def safe_name(source: str | Path) -> str:
    """Return a name for files and folders that every system takes.

    Parameters
    ----------
    source : str or Path
        A title, or the path of a scene file, of which the name without its ending counts.

    Returns
    -------
    str
        Letters a–z and A–Z, digits, ``-``, ``_`` and ``.``, at most `LONGEST_NAME` characters; never empty, with no
        dot at either end, and no name that Windows keeps for itself. Accents are dropped, all else becomes ``-``.
    """
    words = source.stem if isinstance(source, Path) else source
    plain = unicodedata.normalize("NFKD", words[: 4 * LONGEST_NAME])
    plain = "".join(letter for letter in plain if not unicodedata.combining(letter))
    plain = re.sub(r"[^A-Za-z0-9_.]+", "-", plain)[:LONGEST_NAME].strip("-.")
    return _RESERVED.sub(r"\1_", plain, count=1) if _RESERVED.match(plain) else plain or "scene"
