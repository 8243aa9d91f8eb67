"""Text files that users bring along, read in whole or refused in words."""

from __future__ import annotations

from pathlib import Path

from skyoptics.errors import DataFileError


def read(path: str | Path, largest: int, what: str) -> str:
    """Return a file's text with plain line ends and without a byte-order mark.

    Parameters
    ----------
    path : str or Path
        Where it is.
    largest : int
        Size above which it is refused [byte].
    what : str
        What it should hold, with its article, for messages: "an index table".

    Raises
    ------
    DataFileError
        If it cannot be read, is too large, or is not UTF-8; with the line where there is one.
    """
    try:
        with open(path, "rb") as file:
            raw = file.read(largest + 1)
    except FileNotFoundError:
        raise DataFileError(f"{path}: no such file") from None
    except IsADirectoryError:
        raise DataFileError(f"{path}: is a folder; give a CSV file") from None
    except PermissionError:
        raise DataFileError(f"{path}: may not be read; check its permissions") from None
    except (OSError, ValueError) as error:
        raise DataFileError(f"{path}: cannot be read ({getattr(error, 'strerror', None) or error})") from None
    if len(raw) > largest:
        raise DataFileError(f"{path}: larger than {largest // 1_000_000} MB; {what} needs far less")
    try:
        return raw.decode("utf-8-sig").replace("\r\n", "\n").replace("\r", "\n")
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        raise DataFileError(f"{path}:{line}: not UTF-8 text; save it as CSV in UTF-8") from None
