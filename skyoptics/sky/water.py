"""Calm water below the horizon: it mirrors what stands above, and some light comes out of it.

Level water turns a line of sight upwards again and takes Fresnel's share of the light. On the round earth the water's surface
leans away from the observer, so seen from a height the mirrored line rises less than the line of sight falls: with the angle δ
below the horizontal and δ′ at the water, cos δ′ = (1 + h/R′) cos δ, it leaves at 2δ′ − δ; on the water's horizon δ′ = 0 and the
mirror image joins what is mirrored without a step. What is mirrored counts as far away.

Light from below the surface fades towards grazing sight as the surface lets less of it out. Waves are left out: this is a pond
without wind.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from skyoptics.geometry.directions import Directions
from skyoptics.geometry.horizon import EARTH_RADIUS, HIGHEST, REFRACTION, dip, flat
from skyoptics.materials import index as material
from skyoptics.materials.ranges import within
from skyoptics.optics.bins import Bins
from skyoptics.optics.interface import amplitudes
from skyoptics.optics.source import Source
from skyoptics.sky.compose import Behind
from skyoptics.sky.ground import Ground, share_below
from skyoptics.sky.illumination import Illumination
from skyoptics.sky.reflectance import reflectance
from skyoptics.sky.tables import in_blocks, look_up
from skyoptics.units import CELSIUS_ZERO, ArrayLike, BoolArray, FloatArray

TEMPERATURE = 10.0 + CELSIUS_ZERO
"""Of the water [K]; its index hardly knows it."""
_NODES = 1024  # angles at which the surface is tabulated
_LEAST = 1e-9  # keeps the mirrored waterline above the waterline [rad]


@dataclass(frozen=True, eq=False)
class Water:
    """What stands above the water, and the water.

    Parameters
    ----------
    above : Behind
        Sky, or `skyoptics.sky.ground.Ground` for a far shore, whose profile then is mirrored too; made for the same height of
        the eye.
    bins : Bins
        The nλ spectral bins.
    sources : sequence of Source
        What lights the water besides the sky.
    kind : str, float or ndarray
        Light that comes out of it ÷ light that falls on it, straight down, as for `skyoptics.sky.reflectance.reflectance`.
    eye_height : float
        Of the observer above the water, 0 to 10 km [m].
    sunlit : float
        Share of the sources' light that reaches the water, 0 to 1 [1].

    Attributes
    ----------
    waterline : float
        Elevation of its horizon, below which there is water [rad].

    Raises
    ------
    DomainError
        Outside these ranges.
    """

    above: Behind
    bins: Bins
    sources: Sequence[Source]
    kind: str | float | FloatArray = "lake"
    eye_height: float = 2.0
    sunlit: float = 1.0
    waterline: float = field(init=False)
    _scene: Ground = field(init=False, repr=False)
    _surface: FloatArray = field(init=False, repr=False)
    _within: FloatArray = field(init=False, repr=False)

    def __post_init__(self) -> None:
        within("height of the eye", self.eye_height, 0.0, HIGHEST, "m")
        scene = self.above
        if not isinstance(scene, Ground):  # which carries the sky down to the waterline
            scene = Ground(scene, self.bins, self.sources, eye_height=self.eye_height)
        light = Illumination(scene, self.sources, self.sunlit)
        down = 0.5 * np.pi * np.linspace(0.0, 1.0, _NODES) ** 2  # close together where the surface is grazed
        index = material.water(TEMPERATURE)(self.bins.at([0.2, 0.8])).real.mean(axis=1)
        r_s, r_p, _, _ = (part.real for part in amplitudes(index, 0.5 * np.pi - down[:, None]))
        mean, difference = 0.5 * (r_s**2 + r_p**2), 0.5 * (r_p**2 - r_s**2)
        straight = 1.0 - mean[-1]
        leaving = reflectance(self.kind, self.bins) / np.pi * light.level / straight
        set_ = object.__setattr__
        set_(self, "_scene", scene)
        set_(self, "waterline", -float(dip(self.eye_height)))
        set_(self, "_surface", np.stack([mean, difference, r_s * r_p]))
        set_(self, "_within", leaving)

    def radiance(self, vectors: ArrayLike) -> FloatArray:
        """Return the radiance of what stands above and of the water, with a hard edge on the waterline.

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
        turned, steep, wet = self._turned(vectors.reshape(-1, 3))
        result = self._scene.radiance(turned)

        def work(rows: slice) -> None:
            mine = wet[rows]
            if np.any(mine):
                share = self._read(0, steep[rows])
                share[~mine] = 1.0
                out = result[rows]
                out -= self._within
                out *= share
                out += self._within

        in_blocks(work, len(result))
        return result.reshape(*vectors.shape[:-1], len(self.bins))

    def stokes(self, vectors: ArrayLike) -> FloatArray:
        """Return the same light as Stokes vectors in each direction's meridian frame, shape (..., nλ, 4).

        What is mirrored counts as unpolarised; so does the light within the water before it comes out.
        """
        vectors = np.asarray(vectors, dtype=np.float64)
        turned, steep, wet = self._turned(vectors)
        result = np.zeros((*vectors.shape[:-1], len(self.bins), 4))
        seen = self._scene.radiance(turned)
        result[..., 0] = seen
        mean, difference = (self._read(row, steep[wet]) for row in (0, 1))
        result[wet, :, 0] = mean * seen[wet] + (1.0 - mean) * self._within
        result[wet, :, 1] = difference * (seen[wet] - self._within)
        return result

    def mirrored(self, vectors: ArrayLike) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return where the light comes from that is seen in the water, and how much of it is mirrored.

        Parameters
        ----------
        vectors : array_like, shape (..., 3)
            Viewing directions.

        Returns
        -------
        vectors : ndarray, shape (..., 3)
            Viewing directions of what is mirrored; those above the waterline stay as they are.
        r_s, r_p : ndarray, shape (..., nλ)
            Reflectance for light polarised along the horizon and upright [1]; 1 above the waterline.
        """
        turned, steep, wet = self._turned(np.asarray(vectors, dtype=np.float64))
        mean = np.ones((*steep.shape, len(self.bins)))
        difference = np.zeros_like(mean)
        mean[wet], difference[wet] = self._read(0, steep[wet]), self._read(1, steep[wet])
        return turned, mean - difference, mean + difference

    def reflect(self, vectors: ArrayLike, stokes: FloatArray) -> FloatArray:
        """Return what water makes of light that it mirrors.

        Parameters
        ----------
        vectors : array_like, shape (..., 3)
            Viewing directions; those above the waterline are left alone.
        stokes : ndarray, shape (..., nλ, 4)
            Light from the mirrored directions, in their own meridian frames.

        Returns
        -------
        ndarray, shape (..., nλ, 4)
            In the meridian frames of `vectors`, with the light from within the water added. I and Q mix by (R_p ± R_s)/2; U
            and V take the factor r_p r_s of the amplitudes (Born & Wolf's signs, as in `skyoptics.optics.interface`): it is
            negative for steep sight, where a mirror image leans the other way, and positive beyond Brewster's angle.
        """
        _, steep, wet = self._turned(np.asarray(vectors, dtype=np.float64))
        mean, difference, cross = (self._read(row, steep[wet]) for row in range(3))
        result = np.array(stokes, dtype=np.float64)
        i, q, u, v = np.moveaxis(result[wet], -1, 0)
        first = mean * i + difference * q + (1.0 - mean) * self._within
        second = difference * i + mean * q - difference * self._within
        result[wet] = np.stack([first, second, cross * u, cross * v], axis=-1)
        return result

    def leaving(self, vectors: ArrayLike) -> FloatArray:
        """Return the radiance that comes from within the water, shape (..., nλ); 0 above the waterline."""
        _, steep, wet = self._turned(np.asarray(vectors, dtype=np.float64))
        result = np.zeros((*steep.shape, len(self.bins)))
        result[wet] = (1.0 - self._read(0, steep[wet])) * self._within
        return result

    def share_of_water(self, directions: Directions, rows: slice = slice(None)) -> FloatArray:
        """Return the share of each pixel that water covers, shape (ny, nx) in 0 to 1; nan outside the image."""
        return share_below(flat(-self.waterline), directions, rows)

    def _turned(self, vectors: FloatArray) -> tuple[FloatArray, FloatArray, BoolArray]:
        """Return directions with those of water turned up, the angle at the water [rad], and which are of water."""
        flat_vectors = np.ascontiguousarray(vectors.reshape(-1, 3))
        turned, steep = np.empty_like(flat_vectors), np.zeros(len(flat_vectors))
        wet = np.zeros(len(flat_vectors), dtype=bool)
        line, outward = np.sin(self.waterline), 1.0 + self.eye_height * (1.0 - REFRACTION) / EARTH_RADIUS

        def work(rows: slice) -> None:
            mine, out = flat_vectors[rows], turned[rows]
            out[:] = mine
            low = wet[rows] = mine[:, 2] < line
            if np.any(low):
                level = np.hypot(mine[low, 0], mine[low, 1])
                at_water = np.arccos(np.minimum(outward * level, 1.0))
                rising = np.maximum(2.0 * at_water - np.arctan2(-mine[low, 2], level), self.waterline + _LEAST)
                out[low, :2] *= (np.cos(rising) / np.maximum(level, 1e-12))[:, None]
                out[low, 2] = np.sin(rising)
                steep[rows][low] = at_water

        in_blocks(work, len(flat_vectors))
        shape = vectors.shape[:-1]
        return turned.reshape(vectors.shape), steep.reshape(shape), wet.reshape(shape)

    def _read(self, row: int, steep: FloatArray) -> FloatArray:
        """Return a row of the surface's table at angles of sight (n,), shape (n, nλ)."""
        return look_up(self._surface[row], np.sqrt(steep * (2.0 / np.pi)) * (_NODES - 1))


def mirrored_grid(directions: Directions) -> Directions:
    """Return the grid whose pixels see what the same pixels of a grid see mirrored in level water close below the eye.

    Parameters
    ----------
    directions : Directions
        Of the picture.

    Returns
    -------
    Directions
        Each viewing direction's up turned to down; its rotation is a reflection, of determinant −1.
    """
    return replace(directions, rotation=directions.rotation @ np.diag([1.0, 1.0, -1.0]))
