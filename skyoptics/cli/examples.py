"""The example scenes: shipped in the wheel, or beside the package in a checkout."""

from __future__ import annotations

from pathlib import Path

import skyoptics

_HOME = Path(skyoptics.__file__).parent


def folder() -> Path:
    """Return the folder of the example scenes."""
    shipped = _HOME / "example_scenes"
    return shipped if shipped.is_dir() else _HOME.parent / "scenes"


def names() -> list[str]:
    """Return the names of the example scenes."""
    return sorted(path.stem for path in folder().glob("*.toml"))


def scene_path(given: str) -> Path:
    """Return the scene file that a user means: a path, or the bare name of an example scene."""
    path = Path(given)
    if not path.exists() and path.name == given and not path.suffix and given in names():
        return folder() / f"{given}.toml"
    return path
