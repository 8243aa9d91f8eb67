"""Clear skies of a film, in colour: solved at a few heights of the sun, and between them by cubic interpolation.

A clear sky takes half a second of work, a second under a low sun, and changes smoothly with the sun's height once the phase
functions are taken out of it, as they are in its table. The table of a height is a cubic (Lagrange) through those of the four
nearest `NODES`; against the sky solved at that height it errs by at most 2 % and 0.5 % rms between 4° and 16°, where the
solver itself goes over to a finer grid, and by 0.1 % above (tested). Below `LOWEST` every sky is solved. A look-up is
linear in the table, so the spectrum is brought to X, Y, Z there and not in every pixel.
"""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import Future
from dataclasses import dataclass, field
from threading import Lock
from typing import Any

import numpy as np

from skyoptics.colour.observer import weights
from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.kernels import sky as kernels
from skyoptics.light.air import Air
from skyoptics.optics.bins import Bins
from skyoptics.rendering.build import air_of, placed, spectral_bins
from skyoptics.scene.model import Scene
from skyoptics.sky.clear import AEROSOL_LOBES, DEPOLARISATION, ClearSky
from skyoptics.units import DEG, FloatArray

LOWEST = 4.0
"""Height of the sun below which every sky is solved [°]: twilight does not go like a polynomial."""
NODES = (3.0, 4.0, 5.0, 6.0, 8.0, 10.0, 12.0, 14.0, 16.0, 18.0, *np.arange(20.0, 90.1, 4.0).tolist(), 90.0)
"""Heights of the sun at which skies are solved [°]."""


@dataclass(frozen=True, eq=False)
class ColourSky:
    """A clear sky whose bands are X, Y, Z.

    Parameters
    ----------
    table : ndarray, shape (rows, turns, 3, 3)
        As `skyoptics.kernels.sky.look_up` takes it.
    ground : ndarray, shape (3,)
        Below the horizon [cd m⁻²].
    sun : ndarray, shape (3,)
        Unit vector towards the sun.
    """

    table: FloatArray
    ground: FloatArray
    sun: FloatArray

    def radiance(self, vectors: FloatArray) -> FloatArray:
        """Return X, Y, Z in viewing directions (..., 3), shape (..., 3) [cd m⁻²]; nan for nan."""
        flat = np.ascontiguousarray(vectors.reshape(-1, 3))
        result = np.empty((len(flat), 3))
        gamma = DEPOLARISATION / (2.0 - DEPOLARISATION)
        kernels.look_up(flat, self.sun, self.table, gamma, AEROSOL_LOBES, self.ground, result)
        return result.reshape(*vectors.shape[:-1], 3)


_Solved = tuple[FloatArray, FloatArray]


@dataclass(eq=False)
class Shelf:
    """The clear skies of a film under one air.

    Parameters
    ----------
    bins : Bins
        Spectral bins.
    air : Air
        What is in the air.
    albedo : float
        Of the ground.
    observer : str
        CIE observer of `skyoptics.colour.observer.weights`.
    between : bool
        Whether skies are interpolated; else each is solved, once.
    """

    bins: Bins
    air: Air
    albedo: float
    observer: Any
    between: bool
    _kept: dict[float, Future[_Solved]] = field(default_factory=dict)
    _lock: Lock = field(default_factory=Lock)

    def sky(self, sun: FloatArray) -> ColourSky:
        """Return the sky under a sun, unit vector (3,)."""
        height = float(azimuth_elevation(sun)[1]) / DEG
        shares = _shares(height) if self.between and height >= LOWEST else [(round(height, 9), 1.0)]
        solved = [(share, self._solved(node)) for node, share in shares]
        table = sum(share * one[0] for share, one in solved)
        ground = sum(share * one[1] for share, one in solved)
        return ColourSky(np.maximum(table, 0.0), np.asarray(ground), np.asarray(sun, dtype=np.float64))

    def _solved(self, height: float) -> _Solved:
        """Return table and ground of a height [°], from the shelf where they are there."""
        with self._lock:
            mine = height not in self._kept
            if mine:
                self._kept[height] = Future()
            future = self._kept[height]
        if mine:
            try:
                future.set_result(self._solve(height))
            except BaseException as error:
                future.set_exception(error)
                raise
        return future.result()

    def _solve(self, height: float) -> _Solved:
        sun = np.array([0.0, np.cos(height * DEG), np.sin(height * DEG)])
        sky = ClearSky(self.bins, sun, self.air, self.albedo)
        matrix = weights(self.bins, self.observer)
        return np.ascontiguousarray(sky.table @ matrix), sky.ground @ matrix


def shelf_for(scenes: Sequence[Scene]) -> Shelf | None:
    """Return the shelf for the frames of a film; None where their clear skies have more in them than the sun's height.

    Parameters
    ----------
    scenes : sequence of Scene
        All frames.
    """
    alike = {
        (air_of(scene.light), scene.picture.ground, scene.picture.observer, spectral_bins(scene).edges.tobytes())
        for scene in scenes
    }
    first = scenes[0]
    plain = all(
        scene.picture.sky == "clear"
        and scene.light.body == "sun"
        and scene.light.attenuation == "air"
        and scene.ground is None
        and scene.camera.eye_height_m == 0.0
        for scene in scenes
    )
    air = air_of(first.light)
    if len(alike) > 1 or not plain or air is None:
        return None
    heights = {round(placed(scene.light).elevation / DEG, 9) for scene in scenes}
    high = {height for height in heights if height >= LOWEST}
    needed = {node for height in high for node, _ in _shares(height)}
    between = len(high) > len(needed)
    return Shelf(spectral_bins(first), air, first.picture.ground, first.picture.observer, between)


def _shares(height: float) -> list[tuple[float, float]]:
    """Return the four nodes about a height of the sun [°] and their shares, a Lagrange polynomial of degree three."""
    place = int(np.searchsorted(NODES, height, side="right")) - 1
    start = min(max(place - 1, 0), len(NODES) - 4)
    four = NODES[start : start + 4]
    return [(one, float(np.prod([(height - other) / (one - other) for other in four if other != one]))) for one in four]
