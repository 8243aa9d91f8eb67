"""The Python face: load a scene, render it, look at the picture.

::

    import skyoptics

    scene = skyoptics.load("scenes/double-bow.toml")
    picture = skyoptics.render(scene, quality="draft")
    picture                      # shows itself in a notebook
    picture.radiance             # xarray.DataArray (y, x, wavelength)
    picture.save("outputs")
"""

from __future__ import annotations

import os
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Any

from skyoptics.colour.images import png_bytes
from skyoptics.errors import DomainError, nearest
from skyoptics.rendering import output
from skyoptics.rendering.dataset import dataset
from skyoptics.rendering.run import Result, Settings, usable_cores
from skyoptics.rendering.run import render as run
from skyoptics.rendering.scatter import QUALITY
from skyoptics.scene import load as scene_load
from skyoptics.scene.files import safe_name
from skyoptics.scene.model import Scene
from skyoptics.units import Float32Array, FloatArray

if TYPE_CHECKING:
    import xarray


class Picture:
    """A rendered picture; made by `render`."""

    def __init__(self, scene: Scene, result: Result, name: str) -> None:
        self._scene, self._result, self.name = scene, result, name

    def __repr__(self) -> str:
        """Say what it shows."""
        rows, columns = self._result.job.directions.shape
        return f"<Picture {self.name}: {columns} x {rows} pixels; {self.report['look_for']}>"

    def _repr_png_(self) -> bytes:
        """Show the picture in a notebook."""
        return png_bytes(self._result.developed.rgb)

    @property
    def report(self) -> dict[str, Any]:
        """What was asked, done and reached."""
        return self._result.report

    @property
    def rgb(self) -> Float32Array:
        """Display colours, linear sRGB, shape (ny, nx, 3), 0 to 1."""
        return self._result.developed.rgb

    @property
    def xyz(self) -> Float32Array:
        """CIE XYZ, shape (ny, nx, 3) [cd m⁻²]; nan outside the image."""
        return self._result.xyz

    @cached_property
    def dataset(self) -> xarray.Dataset:
        """Radiance with azimuth, elevation and wavelength; worked out when first asked for."""
        return dataset(self._result, {"title": self.name, "source": "skyoptics"})

    @property
    def radiance(self) -> xarray.DataArray:
        """Spectral radiance (y, x, wavelength) [W m⁻² sr⁻¹ nm⁻¹]; worked out when first asked for."""
        return self.dataset["radiance"]

    def directions(self) -> FloatArray:
        """Return the viewing directions of the pixels, shape (ny, nx, 3), east, north, up."""
        return self._result.job.directions.vectors()

    def labelled(self) -> Any:
        """Return a labelled copy: arcs by name, horizon, compass, scale; uint8, shape (ny, nx, 3)."""
        from skyoptics.rendering.labels import annotated

        return annotated(self._result).rgb

    def save(self, folder: str | os.PathLike[str], data: bool = False) -> Path:
        """Write picture and report into a folder.

        Parameters
        ----------
        folder : path
            Made where it does not exist.
        data : bool
            Whether to write the radiance as NetCDF too.

        Returns
        -------
        Path
            The picture.
        """
        target = Path(folder)
        output.prepare(target)
        words = ("skyoptics", "render", f"{self.name}.toml", "--seed", str(self.report["seed"]))
        wanted = output.Wanted(target, self.name, data)
        return output.write(self._result, self._scene, wanted, (*words, "--quality", self.report["quality"]))[0]


def load(path: str | os.PathLike[str]) -> Scene:
    """Read a scene file.

    Parameters
    ----------
    path : path
        A TOML file; see ``docs/scene-reference.md``.

    Returns
    -------
    Scene
        Frozen; human units under the names of the file, SI under the bare names.

    Raises
    ------
    SceneError
        With all faults of the file.
    """
    return scene_load.load(path)


def render(
    scene: Scene,
    quality: str = "normal",
    seed: int = 1,
    threads: int | None = None,
    rays: int | None = None,
    only: str | None = None,
) -> Picture:
    """Render a scene.

    Parameters
    ----------
    scene : Scene
        From `load`, or built from `skyoptics.scene.model`.
    quality : str
        "draft", "normal" or "fine".
    seed : int
        Of the random numbers.
    threads : int, optional
        Worker threads; default all cores. The picture does not depend on it.
    rays : int, optional
        Rays of each kind of particle; overrides the quality.
    only : str, optional
        Name of a halo arc (`skyoptics.crystals.arcs.names`) whose light alone is shown.

    Returns
    -------
    Picture

    Raises
    ------
    DomainError
        If the quality or the arc is unknown.
    SceneError, ResourceError
        If the physics refuses a value, or memory is short.
    """
    if quality not in QUALITY:
        raise DomainError(f"no quality {quality!r}; there are {', '.join(QUALITY)}{nearest(quality, QUALITY)}")
    name = safe_name(scene.title or "scene")
    settings = Settings(quality, seed, threads or usable_cores(), rays=rays)
    return Picture(scene, run(scene, name, settings, only=only), name)
