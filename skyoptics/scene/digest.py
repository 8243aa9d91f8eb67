"""A scene's name by content: equal scenes have equal hashes, on every machine and in every run."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import Any

from skyoptics.errors import DataFileError
from skyoptics.scene.files import file_trouble, unreadable
from skyoptics.scene.model import Scene
from skyoptics.units import DEG, MM


def canonical(scene: Scene) -> dict[str, Any]:
    """Return a scene as plain data, in one form for all ways to write it.

    Parameters
    ----------
    scene : Scene
        The scene.

    Returns
    -------
    dict
        Text, numbers, lists and tables that JSON can hold; defaults and what follows from other fields are filled in,
        and a table of refractive index is there by the SHA-256 of its content, whatever its path.

    Raises
    ------
    DataFileError
        If a table that the scene names cannot be read.
    """
    data: dict[str, Any] = scene.model_dump(mode="json")
    camera = data["camera"]
    camera["width_px"], camera["height_px"] = scene.camera.pixels
    if scene.camera.lens == "panorama":
        camera["width_deg"] = scene.camera.width / DEG if camera["width_deg"] is None else camera["width_deg"]
        camera["height_deg"] = scene.camera.height / DEG if camera["height_deg"] is None else camera["height_deg"]
    else:
        camera["focal_mm"] = scene.camera.focal / MM if camera["focal_mm"] is None else camera["focal_mm"]
        camera["sensor_mm"] = camera["sensor_mm"] or [side / MM for side in scene.camera.sensor]
    for particles in data["air"]:
        if particles.get("index_table") is not None:
            particles["index_table"] = {"sha256": hashlib.sha256(_content(particles["index_table"])).hexdigest()}
    plain: dict[str, Any] = _plain(data)
    return plain


def scene_hash(scene: Scene) -> str:
    """Return the SHA-256 of the canonical form.

    Parameters
    ----------
    scene : Scene
        The scene.

    Returns
    -------
    str
        64 hexadecimal digits.

    Raises
    ------
    DataFileError
        If a table that the scene names cannot be read.
    """
    words = json.dumps(canonical(scene), sort_keys=True, separators=(",", ":"), ensure_ascii=True, allow_nan=False)
    return hashlib.sha256(words.encode("ascii")).hexdigest()


def _content(name: str) -> bytes:
    """Return the bytes of a file, line ends made one."""
    path = Path(name)
    for trouble in file_trouble(path):
        raise DataFileError(f"{path}: {trouble}")
    try:
        return path.read_bytes().replace(b"\r\n", b"\n")
    except OSError as error:
        raise DataFileError(f"{path}: {unreadable(error)}") from error


def _plain(value: Any) -> Any:
    """Return data without negative zeros, which are written differently and mean the same."""
    if isinstance(value, dict):
        return {key: _plain(entry) for key, entry in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(entry) for entry in value]
    return value + 0.0 if isinstance(value, float) else value
