"""Land and water of a scene: the horizon, what lies below it, and the look into calm water."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from skyoptics.geometry import horizon as horizons
from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.geometry.horizon import Profile
from skyoptics.geometry.silhouettes import silhouette
from skyoptics.optics.bins import Bins
from skyoptics.optics.source import Source
from skyoptics.scene.ground import Ground as GroundTable
from skyoptics.sky.compose import Behind
from skyoptics.sky.ground import Ground
from skyoptics.sky.haze import Haze
from skyoptics.sky.water import Water
from skyoptics.units import ArrayLike, FloatArray


@dataclass(frozen=True, eq=False)
class Landscape:
    """Sky above a horizon, land below it, parted by an edge as soft as a pixel.

    Parameters
    ----------
    sky : Behind
        What is seen above the horizon, with all that floats in front of it.
    ground : Ground
        The land.
    pixel : float
        Width of the edge [rad].
    """

    sky: Behind
    ground: Ground
    pixel: float

    def covered(self, azimuth: ArrayLike, elevation: ArrayLike) -> FloatArray:
        """Return how much of what is seen at azimuths and elevations [rad] is land, 0 to 1."""
        above = np.asarray(elevation) - self.ground.profile.elevation(azimuth)
        return np.asarray(np.clip(0.5 - above / self.pixel, 0.0, 1.0))

    def radiance(self, vectors: FloatArray) -> FloatArray:
        """Return the radiance in viewing directions, shape (..., nλ); nan for nan."""
        vectors = np.asarray(vectors, dtype=np.float64)
        flat = vectors.reshape(-1, 3)
        share = self.covered(*azimuth_elevation(flat))
        result = np.full((len(flat), len(self.ground.level)), np.nan)
        sky, land = share < 1.0, share > 0.0
        result[sky] = self.sky.radiance(lifted(flat[sky]))
        both = sky & land
        mixed = (1.0 - share[both])[:, None] * result[both]
        result[land] = self.ground.land_radiance(flat[land])
        result[both] = share[both][:, None] * result[both] + mixed
        return result.reshape(*vectors.shape[:-1], result.shape[-1])


def lifted(vectors: FloatArray) -> FloatArray:
    """Return directions (n, 3), those below the level turned up to it: a sky is known from there up."""
    low = vectors[:, 2] < 0.0
    if not np.any(low):
        return vectors
    result = vectors.copy()
    result[low, :2] /= np.maximum(np.hypot(result[low, 0], result[low, 1]), 1e-12)[:, None]
    result[low, 2] = 0.0
    return result


def ground_of(
    table: GroundTable | None,
    albedo: float,
    eye_height: float,
    sky: Behind,
    bins: Bins,
    sources: Sequence[Source],
    haze: Haze | None,
) -> Ground | None:
    """Return the land of a scene.

    Parameters
    ----------
    table : Ground or None
        The [ground] table.
    albedo : float
        Of the land without one, seen from a hill.
    eye_height : float
        Of the observer above the land [m].
    sky : Behind
        What lights it besides the sources.
    bins, sources :
        Spectral bins; what shines.
    haze : Haze or None
        Air in front of the land.

    Returns
    -------
    Ground or None
        None where the sky brings its own level ground: without a table, seen from the ground.

    Raises
    ------
    DataFileError
        If the horizon's file is faulty.
    """
    if table is None:
        return None if eye_height == 0.0 else Ground(sky, bins, sources, None, albedo, albedo, eye_height, haze=haze)
    return Ground(
        sky,
        bins,
        sources,
        _profile(table, eye_height),
        table.surface,
        table.relief,
        eye_height,
        table.distance,
        haze,
        table.sunlit,
    )


def water_of(
    table: GroundTable | None, eye_height: float, above: Behind, bins: Bins, sources: Sequence[Source]
) -> Water | None:
    """Return the calm water of a scene; None where there is none. `above` is all that it mirrors."""
    if table is None or table.water == "none":
        return None
    return Water(above, bins, sources, table.water, eye_height, table.sunlit)


def _profile(table: GroundTable, eye_height: float) -> Profile:
    dip = float(horizons.dip(eye_height))
    if table.horizon_csv is not None:
        return horizons.read(table.horizon_csv)
    return silhouette(table.horizon, table.horizon_height, table.seed, -dip)
