"""A rain shaft: a volume with a near and a far wall, a top and the ground below.

The factors of

    radiance = front · (Σ irradiance · phase · amount + background · behind) + airlight

in closed form. Walls stand at fixed horizontal distances, across the line of sight; light reaches a drop through the wall
or through the top (or from the ground, mirrored), whichever way through the rain is shorter. Along the line of sight either
way is linear in the distance, so all integrals are those of exponentials, at most two pieces.

As in `skyoptics.sky.slab`, diffraction goes straight on and counts as not taken out: beams weaken by half the reference
extinction. What rain scatters more than once is not followed; *veil* stands for it: water takes no visible light away, so
rain in an even field of radiance J shines with J where it is thick.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.materials.ranges import within
from skyoptics.optics.bins import Bins
from skyoptics.sky.haze import Haze, mean_exponential
from skyoptics.sky.slab import EVENTS
from skyoptics.units import ArrayLike, FloatArray

FARTHEST = 500.0e3
"""Of the far wall [m]; the earth is flat here."""
_LEAST = 1e-9


@dataclass(frozen=True, eq=False)
class Factors:
    """What a volume does to a line of sight, all shapes broadcast to (…, nλ).

    Parameters
    ----------
    amount : ndarray
        Path integral of the reference extinction, weighted by what gets to the drops and from them to the near wall [1].
    front : ndarray
        What comes through between the observer and the volume [1].
    behind : ndarray
        What comes through the volume [1].
    airlight : ndarray
        What air and rain add themselves [W m⁻² sr⁻¹ nm⁻¹].
    """

    amount: FloatArray
    front: FloatArray
    behind: FloatArray
    airlight: FloatArray


class Inside(NamedTuple):
    """What happens in a shaft and in front of it, by elevation, shapes broadcast to (…, nλ).

    Parameters
    ----------
    front : ndarray
        What comes through the air between observer and rain [1].
    clear, air_through : ndarray
        What comes through the rain's drops, and through the air between them [1].
    rain, air : ndarray
        Share of the radiance of thick rain, and of thick air, that drops and air in the rain add, seen from the near wall [1].
    weakened : ndarray
        Amount with the air in the rain ÷ without it [1].
    """

    front: FloatArray
    clear: FloatArray
    air_through: FloatArray
    rain: FloatArray
    air: FloatArray
    weakened: FloatArray


@dataclass(frozen=True)
class Shaft:
    """Rain of even density between two walls.

    Parameters
    ----------
    near, far : float
        Horizontal distance of its walls, 0 to 500 km, ascending [m].
    top : float
        Height above the ground, 0 to 20 km [m].
    extinction : float
        Reference extinction, twice the drops' cross-section in a volume: 2π ⟨r²⟩ · number, 0 to 1 [m⁻¹]. Marshall &
        Palmer's rain of 10 mm h⁻¹ has 1.6e-3.
    eye_height : float
        Of the observer above the ground, 0 to 10 km [m].
    lit : tuple of float
        Horizontal distances between which the sun shines on the rain [m]; elsewhere it stands in a cloud's shadow.
    sunlit : float
        Share of the sun's light that passes the cloud above, 0 to 1 [1].
    shade : bool
        Whether drops weaken the sunlight of those behind them.

    Raises
    ------
    DomainError
        Outside these ranges.
    """

    near: float
    far: float
    top: float
    extinction: float
    eye_height: float = 2.0
    lit: tuple[float, float] = (0.0, np.inf)
    sunlit: float = 1.0
    shade: bool = True

    def __post_init__(self) -> None:
        within("near distance of rain", self.near, 0.0, FARTHEST, "km", 1e3)
        within("far distance of rain", self.far, self.near, FARTHEST, "km", 1e3)
        within("top of rain", self.top, 0.0, 20e3, "km", 1e3)
        within("extinction of rain", self.extinction, 0.0, 1.0, "per km", 1e-3)
        within("height of the eye", self.eye_height, 0.0, 10e3, "m")
        if not 0.0 <= self.lit[0] <= self.lit[1]:
            ends = " to ".join(f"{end / 1e3:.6g}" for end in self.lit)
            raise DomainError(f"sunlit rain lies from a near to a far distance of at least 0, got {ends} km")
        within("sunlit share", self.sunlit, 0.0, 1.0)

    def reach(self, elevation: ArrayLike) -> tuple[FloatArray, FloatArray]:
        """Return the distances along lines of sight at which they enter and leave the rain [m].

        Parameters
        ----------
        elevation : array_like, shape (…)
            [rad]

        Returns
        -------
        enter, leave : ndarray, shape (…)
            Equal where a line misses the rain; then the distance of the near wall, or of the ground before it.
        """
        elevation = np.asarray(elevation, dtype=np.float64)
        sine = np.sin(elevation)
        cosine = np.maximum(np.cos(elevation), _LEAST)
        steep = np.where(np.abs(sine) < _LEAST, np.nan, sine)
        to_top, to_ground = (self.top - self.eye_height) / steep, -self.eye_height / steep
        first, last = np.minimum(to_top, to_ground), np.maximum(to_top, to_ground)
        level = np.where(self.eye_height <= self.top, np.inf, -np.inf)
        first = np.where(np.isnan(first), 0.0, first)
        last = np.where(np.isnan(last), level, last)
        ground = np.where(sine <= -_LEAST, to_ground, np.inf)
        enter = np.maximum(self.near / cosine, first)
        leave = np.minimum(self.far / cosine, last)
        missed = np.minimum(self.near / cosine, ground)
        hit = leave > enter
        enter, leave = np.where(hit, enter, missed), np.where(hit, leave, missed)
        lost = np.isnan(elevation)
        return np.where(lost, np.nan, enter), np.where(lost, np.nan, leave)

    def factors(
        self,
        bins: Bins,
        elevation: ArrayLike,
        sun_elevation: float,
        azimuth: ArrayLike = 0.0,
        haze: Haze | None = None,
        air_radiance: ArrayLike = 0.0,
        veil: ArrayLike = 0.0,
    ) -> Factors:
        """Return what the shaft, and haze before and in it, do.

        Parameters
        ----------
        bins : Bins
            The nλ spectral bins.
        elevation : array_like, shape (…)
            Of lines of sight [rad].
        sun_elevation : float
            Of the source, −90° to 90° [rad]; below the horizon for light mirrored in water.
        azimuth : array_like, broadcastable
            Of lines of sight, from that of the antisolar point [rad]; light comes through the near wall up to 90°, through
            the far wall beyond.
        haze : Haze, optional
            Air of the observer's surroundings; none if left out. It does not weaken the light on its way to the drops:
            that belongs to the irradiance.
        air_radiance : array_like, shape (nλ,) or (…, nλ)
            Radiance of thick haze, that of the horizon [W m⁻² sr⁻¹ nm⁻¹].
        veil : array_like, shape (nλ,) or (…, nλ)
            Mean radiance that falls on the rain from all sides, the sun's own light left out [W m⁻² sr⁻¹ nm⁻¹].

        Returns
        -------
        Factors
            The background is what lies behind rain and haze; a clear sky holds the haze already: see
            `skyoptics.sky.haze.split`. Lines that miss the rain have the haze before its near wall in front of them. nan
            where the elevation is.
        """
        part = self.inside(bins, elevation, sun_elevation, haze, azimuth)
        airlight = part.front * part.rain * veil + (1.0 - part.front + part.front * part.air) * air_radiance
        amount = self.amount(elevation, azimuth, sun_elevation)[..., None] * part.weakened
        return Factors(amount, part.front, part.clear * part.air_through, airlight)

    def amount(self, elevation: ArrayLike, azimuth: ArrayLike, sun_elevation: float) -> FloatArray:
        """Return the amount where there is no haze, shape (…); arguments as in `factors`."""
        elevation, azimuth = np.broadcast_arrays(
            np.asarray(elevation, dtype=np.float64), np.asarray(azimuth, dtype=np.float64)
        )
        reach = self.reach(elevation)
        return self._amount(elevation, azimuth, sun_elevation, *reach, np.full(1, self._weakening))[..., 0]

    def inside(
        self, bins: Bins, elevation: ArrayLike, sun_elevation: float, haze: Haze | None = None, azimuth: ArrayLike = 0.0
    ) -> Inside:
        """Return what happens in the shaft and in front of it; arguments as in `factors`."""
        elevation, azimuth = np.broadcast_arrays(
            np.asarray(elevation, dtype=np.float64), np.asarray(azimuth, dtype=np.float64)
        )
        enter, leave = self.reach(elevation)
        weakening = np.full((*elevation.shape, 1), self._weakening)
        scattering = np.zeros((*elevation.shape, 1))
        front = np.ones((*elevation.shape, 1))
        weakened = np.ones((*elevation.shape, 1))
        if haze is not None:
            middle = self.eye_height + 0.5 * (enter + leave) * np.sin(elevation)
            scattering = haze.extinction(bins, np.clip(middle, 0.0, None))
            front = haze.transmission(bins, elevation, enter, self.eye_height)
            amounts = [
                self._amount(elevation, azimuth, sun_elevation, enter, leave, along)
                for along in (weakening + scattering, weakening)
            ]
            some = amounts[1] > 0.0
            weakened = np.where(some, amounts[0] / np.where(some, amounts[1], 1.0), 1.0)
        front = np.where(np.isnan(elevation)[..., None], np.nan, front)
        length = (leave - enter)[..., None]
        held = length * mean_exponential((weakening + scattering) * length)
        return Inside(
            front,
            np.exp(-weakening * length),
            np.exp(-scattering * length),
            weakening * held,
            scattering * held,
            weakened,
        )

    def nodes(self) -> FloatArray:
        """Return elevations for a table [rad]: close at the horizon, and one on each corner of the rain."""
        even = np.linspace(-1.0, 1.0, 1921)
        ends = np.array([self.near, self.far, *(end for end in self.lit if np.isfinite(end))])
        corners = [np.arctan2(height - self.eye_height, ends) for height in (0.0, self.top)]
        return np.unique(np.concatenate([0.5 * np.pi * even * np.abs(even), *corners]))

    @property
    def _weakening(self) -> float:
        """Extinction that beams feel [m⁻¹]."""
        return EVENTS * self.extinction

    def _amount(
        self,
        elevation: FloatArray,
        azimuth: FloatArray,
        sun_elevation: float,
        enter: FloatArray,
        leave: FloatArray,
        along: FloatArray,
    ) -> FloatArray:
        """Return the amount, shape (…, 1 or nλ): lines of sight weaken by `along`, sunlight by the rain alone."""
        cosine = np.maximum(np.cos(elevation), _LEAST)
        start = np.clip(self.lit[0] / cosine, enter, leave)
        stop = np.clip(self.lit[1] / cosine, start, leave)
        kink = self._kink(elevation, azimuth, sun_elevation, start, stop)
        total = np.zeros((*elevation.shape, 1))
        for a, b in ((start, kink), (kink, stop)):
            exponents = [
                along * (s - enter)[..., None] + self._shading(elevation, azimuth, sun_elevation, s)[..., None]
                for s in (a, b)
            ]
            least, step = np.minimum(*exponents), np.abs(exponents[1] - exponents[0])
            total = total + (b - a)[..., None] * np.exp(-least) * mean_exponential(step)
        return self.sunlit * self.extinction * total

    def _ways(
        self, elevation: FloatArray, azimuth: FloatArray, sun_elevation: float, distance: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        """Return how far light has come through the rain to a point: from a wall, from the top or the ground [m]."""
        towards = np.cos(azimuth)
        across = distance * np.cos(elevation)
        wall = np.where(towards >= 0.0, across - self.near, self.far - across)
        height = self.eye_height + distance * np.sin(elevation)
        end = self.top - height if sun_elevation >= 0.0 else height
        sideways = np.maximum(np.abs(towards) * np.cos(sun_elevation), _LEAST)
        return wall / sideways, end / max(abs(np.sin(sun_elevation)), _LEAST)

    def _shading(
        self, elevation: FloatArray, azimuth: FloatArray, sun_elevation: float, distance: FloatArray
    ) -> FloatArray:
        """Return the exponent by which drops before it weaken the light that falls on a point [1]."""
        if not self.shade:
            return np.zeros_like(distance)
        way = np.minimum(*self._ways(elevation, azimuth, sun_elevation, distance))
        return self._weakening * np.maximum(way, 0.0)

    def _kink(
        self, elevation: FloatArray, azimuth: FloatArray, sun_elevation: float, start: FloatArray, stop: FloatArray
    ) -> FloatArray:
        """Return where between two distances both ways are equally long; `stop` if nowhere."""
        gap = [np.subtract(*self._ways(elevation, azimuth, sun_elevation, s)) for s in (start, stop)]
        change = gap[0] - gap[1]
        turns = gap[0] * gap[1] < 0.0
        share = np.where(turns, gap[0] / np.where(turns, change, 1.0), 1.0)
        return start + share * (stop - start)
