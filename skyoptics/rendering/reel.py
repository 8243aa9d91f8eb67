"""What a film is made of, and the folder in which its frames lie until it is done.

Frames lie as PNG beside a manifest that names what they were made from: scenes, seed, quality, exposure, program. Frames of
another film that lie there are removed.
"""

from __future__ import annotations

import json
from contextlib import suppress
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

import skyoptics
from skyoptics.colour.images import replacing
from skyoptics.errors import ResourceError
from skyoptics.kernels import KERNEL_HASH
from skyoptics.rendering.run import Settings
from skyoptics.rendering.store import trace_key
from skyoptics.scene.digest import scene_hash
from skyoptics.scene.model import Scene

Exposure = Literal["shared", "smooth", "each"]
EXPOSURES: dict[str, str] = {
    "shared": "one for the whole film",
    "smooth": "follows the light without jumps",
    "each": "every frame by itself",
}
MANIFEST = "manifest.json"

_FORMAT = 1


@dataclass(frozen=True)
class Film:
    """What is to be filmed.

    Parameters
    ----------
    scenes : tuple of Scene
        One a frame.
    where : str
        Name of their file, for faults.
    settings : Settings
        Quality, seed, threads.
    exposure : {"shared", "smooth", "each"}
        `EXPOSURES`; a scene that fixes its exposure keeps it.
    """

    scenes: tuple[Scene, ...]
    where: str
    settings: Settings
    exposure: Exposure = "shared"

    @property
    def key(self) -> str:
        """Return what the frames depend on, as a hash."""
        return trace_key(
            kind="film",
            scenes=[scene_hash(scene) for scene in self.scenes],
            seed=self.settings.seed,
            quality=self.settings.quality,
            rays=self.settings.rays,
            exposure=self.exposure,
            skyoptics=skyoptics.__version__,
            kernels=KERNEL_HASH,
        )


@dataclass(eq=False)
class Reel:
    """The folder of a film's frames.

    Parameters
    ----------
    folder : Path
        Where they lie.
    film : Film
        What they show.
    measured : dict
        What was found out before the first frame: exposures, whites, rounds; JSON types.
    text : dict
        Metadata of every frame.
    dropped : int
        Frames of another film that lay there and were removed.
    """

    folder: Path
    film: Film
    text: dict[str, str] = field(default_factory=dict)
    measured: dict[str, Any] | None = None
    dropped: int = 0

    def open(self) -> None:
        """Make or take up the folder.

        Raises
        ------
        ResourceError
            If it cannot be made, or holds something else.
        """
        key = self.film.key
        try:
            if self.folder.exists():
                about = self._manifest()
                if about is None and (not self.folder.is_dir() or any(self.folder.iterdir())):
                    raise ResourceError(
                        f"{self.folder} is there and holds no frames of a film; move it away or choose another --out"
                    )
                if about is not None and about.get("key") == key:
                    self.measured = about.get("measured")
                    return
                old = sorted(self.folder.glob("frame-*.png"))
                self.dropped = len(old)
                for path in old:
                    path.unlink()
            self.folder.mkdir(parents=True, exist_ok=True)
        except OSError as error:
            raise ResourceError(
                f"cannot keep frames in {self.folder} ({(error.strerror or str(error)).lower()}): choose another --out"
            ) from error
        self.note(None)

    def note(self, measured: dict[str, Any] | None) -> None:
        """Write the manifest."""
        self.measured = measured
        about = {
            "format": _FORMAT,
            "made_by": f"skyoptics {skyoptics.__version__}",
            "key": self.film.key,
            "frames": len(self.film.scenes),
            "measured": measured,
        }
        with replacing(self.folder / MANIFEST) as aside:
            aside.write_text(json.dumps(about, indent=1) + "\n", encoding="utf-8")

    def _manifest(self) -> dict[str, Any] | None:
        try:
            about = json.loads((self.folder / MANIFEST).read_text(encoding="utf-8"))
        except (OSError, ValueError):
            return None
        ours = isinstance(about, dict) and str(about.get("made_by", "")).startswith("skyoptics")
        return about if ours and about.get("format") == _FORMAT else None

    def path(self, number: int) -> Path:
        """Return the file of a frame, counted from 0."""
        return self.folder / f"frame-{number + 1:05d}.png"

    def put(self, number: int, picture: NDArray[np.uint8]) -> None:
        """Keep a frame."""
        from PIL import Image, PngImagePlugin

        words = PngImagePlugin.PngInfo()
        for name, text in {**self.text, "Scene hash": scene_hash(self.film.scenes[number])}.items():
            words.add_itxt(name, text)
        with replacing(self.path(number)) as aside:
            Image.fromarray(picture).save(aside, format="PNG", compress_level=1, pnginfo=words)

    def get(self, number: int) -> NDArray[np.uint8] | None:
        """Return a frame that was kept; None where there is none, or a broken one."""
        from PIL import Image

        columns, rows = self.film.scenes[0].camera.pixels
        try:
            with Image.open(self.path(number)) as picture:
                found = np.asarray(picture.convert("RGB"))
        except (OSError, ValueError, SyntaxError):
            return None
        return found if found.shape == (rows, columns, 3) else None

    def remove(self) -> None:
        """Remove frames and manifest, and the folder if nothing else is in it."""
        for number in range(len(self.film.scenes)):
            self.path(number).unlink(missing_ok=True)
        (self.folder / MANIFEST).unlink(missing_ok=True)
        with suppress(OSError):
            self.folder.rmdir()
