"""Land below the sky: level ground, and what stands up from it to the horizon's profile.

*Level ground* throws light back evenly to all sides (Lambert): radiance = reflectance · irradiance / π. *Relief*, all that
stands between the level horizon and the profile (hills, trees, roofs), counts as one slope of `TILT` that faces the observer,
evenly rough and as far away as stated: bright with the sun behind the observer, dark against the sun. Haze lies in front of
both as in `skyoptics.sky.haze`: the farther, the nearer to the light of the sky on the horizon.

Left out: texture, shadows of one thing on another, the observer's own shadow.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from skyoptics.geometry.axes import azimuth_elevation, direction
from skyoptics.geometry.directions import Directions
from skyoptics.geometry.horizon import HIGHEST, Profile, dip, flat, ground_distance
from skyoptics.materials.ranges import within
from skyoptics.optics.bins import Bins
from skyoptics.optics.source import Source
from skyoptics.sky.compose import Behind
from skyoptics.sky.haze import Haze
from skyoptics.sky.illumination import Illumination
from skyoptics.sky.reflectance import reflectance
from skyoptics.sky.tables import in_blocks, look_up
from skyoptics.units import DEG, ArrayLike, BoolArray, FloatArray, IntArray

TILT = 60.0 * DEG
"""Slope that stands for hillsides, crowns and walls (our choice) [rad]."""
FARTHEST = 300.0e3
"""Distance of relief [m]."""
_FLAT = 0.1 * DEG  # relief that stands up less is level ground [rad]
_TURNS = 360  # azimuths at which light by azimuth is tabulated
_DEPTHS = 256  # depressions at which haze before level ground is tabulated
_ACROSS = 5  # places across a pixel at which the profile is asked for


@dataclass(frozen=True, eq=False)
class Ground:
    """Sky above a profile, land below it.

    Parameters
    ----------
    sky : Behind
        What is above the horizon: a sky or a plain background; its own ground is not used.
    bins : Bins
        The nλ spectral bins.
    sources : sequence of Source
        What lights the land besides the sky.
    horizon : Profile, optional
        Default the level horizon, with the dip of the eye's height.
    kind : str, float or ndarray
        Level ground, as for `skyoptics.sky.reflectance.reflectance`.
    relief : str, float or ndarray
        What stands up from it.
    eye_height : float
        Of the observer above the ground, 0 to 10 km [m].
    distance : float
        Of the relief, 0 to 300 km [m].
    haze : Haze, optional
        Air in front of the land; none if left out.
    sunlit : float
        Share of the sources' light that reaches the land, 0 to 1 [1].

    Attributes
    ----------
    light : Illumination
        What falls on the land.
    level : ndarray, shape (nλ,)
        Radiance of the level ground without haze [W m⁻² sr⁻¹ nm⁻¹].

    Raises
    ------
    DomainError
        Outside these ranges.
    """

    sky: Behind
    bins: Bins
    sources: Sequence[Source]
    horizon: Profile | None = None
    kind: str | float | FloatArray = "grass"
    relief: str | float | FloatArray = "forest"
    eye_height: float = 2.0
    distance: float = 5.0e3
    haze: Haze | None = None
    sunlit: float = 1.0
    profile: Profile = field(init=False, repr=False)
    light: Illumination = field(init=False, repr=False)
    level: FloatArray = field(init=False, repr=False)
    _foot: float = field(init=False, repr=False)
    _around: tuple[FloatArray, FloatArray] = field(init=False, repr=False)
    _through: FloatArray | None = field(init=False, repr=False)

    def __post_init__(self) -> None:
        within("height of the eye", self.eye_height, 0.0, HIGHEST, "m")
        within("distance of the land", self.distance, 0.0, FARTHEST, "km", 1e3)
        set_ = object.__setattr__
        set_(self, "_foot", -float(dip(self.eye_height)))
        set_(self, "profile", flat(-self._foot) if self.horizon is None else self.horizon)
        light = Illumination(self.sky, self.sources, self.sunlit)
        level = reflectance(self.kind, self.bins) / np.pi * light.level
        azimuth = np.arange(_TURNS + 1) * (2.0 * np.pi / _TURNS)
        facing = np.cos(TILT) * np.array([0.0, 0.0, 1.0]) - np.sin(TILT) * direction(azimuth, 0.0)
        relief = reflectance(self.relief, self.bins) / np.pi * light.on(facing, level)
        air = self.sky.radiance(direction(azimuth, 0.0))
        through: FloatArray | None = None
        if self.haze is not None:
            front = self.haze.transmission(self.bins, 0.0, self.distance, self.eye_height)
            relief = air + front * (relief - air)
            nodes = self._foot - (0.5 * np.pi + self._foot) * np.linspace(0.0, 1.0, _DEPTHS) ** 3
            way = ground_distance(nodes, self.eye_height)
            through = self.haze.transmission(self.bins, nodes, way, self.eye_height)
        set_(self, "light", light)
        set_(self, "level", level)
        set_(self, "_around", (relief, air))
        set_(self, "_through", through)

    def radiance(self, vectors: ArrayLike) -> FloatArray:
        """Return the radiance of sky and land, with a hard edge between them.

        Parameters
        ----------
        vectors : array_like, shape (..., 3)
            Unit vectors of viewing directions (east, north, up).

        Returns
        -------
        ndarray, shape (..., nλ)
            [W m⁻² sr⁻¹ nm⁻¹]; nan for nan.
        """
        vectors = np.asarray(vectors, dtype=np.float64)
        flat_vectors = vectors.reshape(-1, 3)
        azimuth, elevation, land = self._placed(flat_vectors)
        low = np.flatnonzero(~land & (elevation < 0.0))
        result = self.sky.radiance(_lifted(flat_vectors, low))
        self._fill(result, azimuth, elevation, land)
        return result.reshape(*vectors.shape[:-1], len(self.bins))

    def sky_radiance(self, vectors: ArrayLike) -> FloatArray:
        """Return the sky's radiance (..., nλ) in directions (..., 3), carried on below the true horizontal as it is there."""
        vectors = np.asarray(vectors, dtype=np.float64)
        flat_vectors = vectors.reshape(-1, 3)
        lifted = _lifted(flat_vectors, np.flatnonzero(flat_vectors[:, 2] < 0.0))
        return self.sky.radiance(lifted).reshape(*vectors.shape[:-1], len(self.bins))

    def land_radiance(self, vectors: ArrayLike) -> FloatArray:
        """Return the land's radiance (..., nλ) in directions (..., 3) as if no sky were seen in them; nan for nan."""
        vectors = np.asarray(vectors, dtype=np.float64)
        azimuth, elevation, _ = self._placed(vectors.reshape(-1, 3))
        result = np.empty((elevation.size, len(self.bins)))
        self._fill(result, azimuth, elevation, np.ones(elevation.size, dtype=bool))
        return result.reshape(*vectors.shape[:-1], len(self.bins))

    def share_of_land(self, directions: Directions, rows: slice = slice(None)) -> FloatArray:
        """Return the share of each pixel that land covers, shape (ny, nx) in 0 to 1; see `share_below`."""
        return share_below(self.profile, directions, rows)

    def _placed(self, vectors: FloatArray) -> tuple[FloatArray, FloatArray, BoolArray]:
        """Return azimuth, elevation and whether it is land, of directions (n, 3)."""
        azimuth, elevation = np.empty(len(vectors)), np.empty(len(vectors))
        land = np.empty(len(vectors), dtype=bool)

        def work(rows: slice) -> None:
            azimuth[rows], elevation[rows] = azimuth_elevation(vectors[rows])
            land[rows] = elevation[rows] < self.profile.elevation(azimuth[rows])

        in_blocks(work, len(vectors))
        return azimuth, elevation, land

    def _fill(self, out: FloatArray, azimuth: FloatArray, elevation: FloatArray, land: BoolArray) -> None:
        """Write the land's radiance into those rows of out (n, nλ) that are land."""

        def work(rows: slice) -> None:
            mine = land[rows]
            if np.all(mine):
                self._land(azimuth[rows], elevation[rows], out[rows])
            elif np.any(mine):
                part = np.empty((int(np.count_nonzero(mine)), out.shape[1]))
                self._land(azimuth[rows][mine], elevation[rows][mine], part)
                out[rows][mine] = part

        in_blocks(work, len(out))

    def _land(self, azimuth: FloatArray, elevation: FloatArray, out: FloatArray) -> None:
        """Write the land's radiance at azimuths and elevations (n,) into out (n, nλ)."""
        turn = azimuth * (_TURNS / (2.0 * np.pi))
        relief, air = self._around
        upright = (elevation >= self._foot) & (self.profile.elevation(azimuth) > self._foot + _FLAT)
        out[:] = self.level
        if self._through is not None and not np.all(upright):
            depth = np.cbrt(np.maximum(self._foot - elevation, 0.0) / (0.5 * np.pi + self._foot)) * (_DEPTHS - 1)
            behind = look_up(air, turn)
            out -= behind
            out *= look_up(self._through, depth)
            out += behind
        if np.any(upright):
            out[upright] = look_up(relief, turn[upright])
        out[np.isnan(elevation)] = np.nan


def _lifted(vectors: FloatArray, low: IntArray) -> FloatArray:
    """Return directions (n, 3) with the chosen ones turned up to the true horizontal."""
    if len(low):
        vectors = vectors.copy()
        flat_part = vectors[low, :2]
        vectors[low, :2] = flat_part / np.maximum(np.hypot(flat_part[:, 0], flat_part[:, 1]), 1e-12)[:, None]
        vectors[low, 2] = 0.0
    return vectors


def share_below(profile: Profile, directions: Directions, rows: slice = slice(None)) -> FloatArray:
    """Return the share of each pixel that lies below a horizon.

    Parameters
    ----------
    profile : Profile
        The horizon.
    directions : Directions
        Grid of viewing directions.
    rows : slice, optional
        Which rows.

    Returns
    -------
    ndarray, shape (ny, nx)
        0 to 1; nan outside the image. A pixel counts as a square that stands upright, in which the profile is followed at five
        places from side to side.
    """
    azimuth, elevation = azimuth_elevation(directions.vectors(rows))
    size = np.maximum(directions.pixel_size(rows), 1e-9)
    result = np.where(elevation < profile.lowest, 1.0, 0.0)
    near = (elevation > profile.lowest - size) & (elevation < profile.highest + size)
    middle, up, side = azimuth[near], elevation[near], size[near]
    wide = np.minimum(side / np.maximum(np.cos(up), 1e-6), np.pi)
    total = np.zeros_like(middle)
    for place in (np.arange(_ACROSS) + 0.5) / _ACROSS - 0.5:
        total += np.clip((profile.elevation(middle + place * wide) - up) / side + 0.5, 0.0, 1.0)
    result[near] = total / _ACROSS
    result[np.isnan(elevation)] = np.nan
    return result
