"""Finished tables, kept under their trace key and found again.

The trace key is a hash of everything a table depends on: particles, spectral bins, angles, seed, target, kernels. What
changes a picture without tracing again (exposure, amount, air, background, colour, the sun's disc on a table) is not in it.
A file that cannot be read or is not what it says is set aside under another name, in words, and made anew.
"""

from __future__ import annotations

import json
import os
import sys
from contextlib import suppress
from hashlib import sha256
from pathlib import Path
from typing import Any
from uuid import uuid4

import numpy as np

from skyoptics.optics.table import ScatteringTable

FORMAT = 1
MOST_STORED = 2e9
"""Tables are kept up to this size together [byte]; the ones not used for longest go first."""
_ARRAYS = ("angle", "wavelength", "elements", "error", "albedo", "asymmetry")


def folder() -> Path:
    """Return where tables are kept: ``SKYOPTICS_CACHE``, or the user's cache folder."""
    from platformdirs import user_cache_path

    base = os.environ.get("SKYOPTICS_CACHE")
    return (Path(base) if base else user_cache_path("skyoptics", appauthor=False)) / "tables"


def trace_key(**parts: Any) -> str:
    """Return a hash, 32 hex digits, of what a table depends on; arrays by content, the rest as JSON."""
    digest = sha256()
    for name in sorted(parts):
        value = parts[name]
        digest.update(name.encode())
        if isinstance(value, np.ndarray):
            digest.update(np.ascontiguousarray(value).tobytes())
        else:
            digest.update(json.dumps(value, sort_keys=True).encode())
    return digest.hexdigest()[:32]


def find(key: str) -> ScatteringTable | None:
    """Return a stored table, or None where there is none that can be used."""
    found = find_arrays(key)
    if found is None:
        return None
    arrays, about = found
    return ScatteringTable(**arrays, parts=tuple(about["parts"]), report=about["report"])


def keep(key: str, table: ScatteringTable) -> bool:
    """Store a table; a full disk or a read-only folder is no reason to fail, so return whether it was kept."""
    arrays = {name: getattr(table, name) for name in _ARRAYS}
    if table.edges is not None:
        arrays["edges"] = table.edges
    return keep_arrays(key, arrays, {"parts": table.parts, "report": table.report})


def find_arrays(
    key: str, place: Path | None = None, form: int = FORMAT, what: str = "a stored table"
) -> tuple[dict[str, Any], dict[str, Any]] | None:
    """Return stored arrays and what is said about them, or None where there is nothing that can be used.

    Parameters
    ----------
    key : str
        Trace key.
    place : Path, optional
        Folder; default that of tables.
    form : int, optional
        Number of the layout that is understood.
    what : str, optional
        What a broken file is called.
    """
    path = (place or folder()) / f"{key}.npz"
    try:
        with path.open("rb") as file, np.load(file, allow_pickle=False) as stored:
            about = json.loads(str(stored["about"]))
            if about["key"] != key or about["format"] != form:
                raise ValueError("it belongs to another job")
            arrays = {name: stored[name] for name in stored.files if name != "about"}
    except (FileNotFoundError, NotADirectoryError):
        return None
    except MemoryError:
        raise
    except Exception as error:  # whatever is in the file: it is only a copy
        sys.stderr.write(f"set aside {what} that cannot be used ({error}); tracing starts anew\n")
        with suppress(OSError):
            path.replace(path.with_suffix(".broken"))
        return None
    with suppress(OSError):
        path.touch()  # used just now
    return arrays, about


def keep_arrays(key: str, arrays: dict[str, Any], about: dict[str, Any]) -> bool:
    """Store arrays and what is said about them (JSON types); return whether they were kept."""
    path = folder() / f"{key}.npz"
    aside = path.with_name(f"{path.name}.{uuid4().hex}.part")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        with aside.open("wb") as file:
            np.savez(file, about=np.array(json.dumps({"key": key, "format": FORMAT, **about})), **arrays)
        aside.replace(path)
        make_room(path, MOST_STORED)
    except OSError:
        return False
    finally:
        with suppress(OSError):
            aside.unlink()
    return True


def make_room(newest: Path, limit: float) -> None:
    """Remove the files beside `newest` that were not used for longest while all together exceed `limit` bytes."""
    files = sorted(newest.parent.glob("*.npz"), key=lambda path: path.stat().st_mtime, reverse=True)
    total = 0
    for path in files:
        total += path.stat().st_size
        if total > limit and path != newest:
            path.unlink(missing_ok=True)
