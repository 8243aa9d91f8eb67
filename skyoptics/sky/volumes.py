"""What lies on a line of sight, one behind the other: air, rain shafts, cloud layers, and the sky behind them all.

Each volume lets a part of the light behind it through and adds light of its own, so with the volumes in order

    radiance = front · (Σ irradiance · phase · amount + behind · light from behind) + airlight,

applied from the farthest to the nearest. Everything but the sky itself depends on the elevation alone, so it is worked out
once on a table by elevation; a picture reads the rows it needs.

The sky is a whole: a clear sky's radiance holds the air in front of the volumes already. It is divided as if its air were
evenly lit all along the line (Koschmieder's law, `skyoptics.sky.haze.split`): of the sky's radiance L the air up to where
the share T still comes through has given L (1 − T) / (1 − T∞), T∞ the share from outside the atmosphere. Below the horizon a
line ends on the ground, and the air before it has the radiance of the horizon above.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from itertools import pairwise
from typing import Protocol

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.geometry.axes import azimuth_elevation, direction
from skyoptics.light.air import Air
from skyoptics.optics.bins import Bins
from skyoptics.optics.source import Source
from skyoptics.sky.haze import Haze, layer_front
from skyoptics.sky.shaft import Shaft
from skyoptics.sky.slab import transmission
from skyoptics.units import DEG, ArrayLike, FloatArray

_HORIZON = 0.2 * DEG  # where the light of the air before the ground is looked up
_SOLID = 1e-9


class Behind(Protocol):
    """What lies behind the volumes."""

    def radiance(self, vectors: FloatArray) -> FloatArray:
        """Return the spectral radiance in viewing directions (..., 3), shape (..., nλ); nan for nan."""


@dataclass(frozen=True)
class Layer:
    """A level cloud layer.

    Parameters
    ----------
    height : float or None
        Above the observer [m]; None where no air is to stand in front of it.
    optical_depth : float
        Vertical, of the reference extinction; 0 for a layer that takes no light from what is behind.
    extinction : callable
        Cosine of the zenith angle → extinction ÷ reference.
    above : bool
        Whether the observer looks down on it.
    """

    height: float | None
    optical_depth: float
    extinction: Callable[[FloatArray], FloatArray]
    above: bool = False


@dataclass(frozen=True, eq=False)
class Way:
    """Air and volumes on all lines of sight, solved when it is made.

    Parameters
    ----------
    bins : Bins
        The nλ spectral bins.
    stops : sequence of Shaft or Layer
        The volumes; rain comes before layers, nearer rain before farther.
    haze : Haze or None
        Air near the ground, in front of and in the rain; None for none.
    air : Air or None
        The whole atmosphere, in front of layers and behind everything; None for none.
    ambient : ndarray, shape (nλ,)
        Mean radiance that falls on the volumes from all sides, direct light left out [W m⁻² sr⁻¹ nm⁻¹]. Volumes that take no
        light away shine with it where they are thick.
    sun_elevation : float
        Of the source [rad].
    eye_height : float
        Of the observer above the ground [m].

    Raises
    ------
    DomainError
        If two shafts overlap.
    """

    bins: Bins
    stops: Sequence[Shaft | Layer]
    haze: Haze | None
    air: Air | None
    ambient: FloatArray
    sun_elevation: float
    eye_height: float = 0.0
    _nodes: FloatArray = field(init=False, repr=False)
    _sky: FloatArray = field(init=False, repr=False)
    _own: FloatArray = field(init=False, repr=False)
    _horizon: FloatArray = field(init=False, repr=False)
    _fades: dict[int, FloatArray] = field(init=False, repr=False)
    _clear: FloatArray = field(init=False, repr=False)

    def __post_init__(self) -> None:
        order = sorted(range(len(self.stops)), key=lambda k: _distance(self.stops[k]))
        _apart([stop for stop in self.stops if isinstance(stop, Shaft)])
        shafts = [stop.nodes() for stop in self.stops if isinstance(stop, Shaft)]
        even = np.linspace(-1.0, 1.0, 1921)
        nodes = np.unique(np.concatenate([0.5 * np.pi * even * np.abs(even), *shafts, [-_SOLID, 0.0]]))
        up = nodes >= 0.0
        shape = (len(nodes), len(self.bins))
        front, clear = np.ones(shape), np.ones(shape)  # what comes through air alone, through the volumes alone
        sky, air_share, own = np.zeros(shape), np.zeros(shape), np.zeros(shape)
        fades: dict[int, FloatArray] = {}
        for number in order:
            stop = self.stops[number]
            if isinstance(stop, Shaft):
                rain = stop.inside(self.bins, nodes, self.sun_elevation, self.haze)
                before = np.minimum(rain.front, front)
                air_share += clear * (front - before)
                fades[number] = clear * before * rain.weakened
                air_share += clear * before * rain.air
                own += clear * before * rain.rain * self.ambient
                clear = clear * rain.clear
                front = before * rain.air_through
            else:
                before = front
                if stop.height is not None and self.air is not None and not stop.above:
                    before = np.minimum(layer_front(self.air, self.bins, nodes, stop.height), front)
                air_share += clear * (front - before)
                fades[number] = clear * before
                if stop.optical_depth > 0.0:
                    through = transmission(nodes, stop.optical_depth, stop.extinction)[:, None]
                    through = np.where((~up if stop.above else up)[:, None], through, 1.0)
                    own += clear * before * (1.0 - through) * self.ambient
                    clear = clear * through
                front = before
        ground = front
        if self.haze is not None and shafts:
            sine = np.minimum(np.sin(nodes), -_SOLID)
            to_ground = self.haze.transmission(self.bins, nodes, self.eye_height / -sine, self.eye_height)
            ground = np.minimum(to_ground, front)
        whole = front
        if self.air is not None and any(_airy(stop) for stop in self.stops):
            whole = np.minimum(layer_front(self.air, self.bins, nodes, np.inf), front)
        end = np.where(up[:, None], whole, ground)
        air_share += clear * (front - end)
        lost = 1.0 - whole
        hazy = lost > _SOLID
        sky = np.where(hazy, air_share / np.where(hazy, lost, 1.0), clear)
        sky = np.where(up[:, None], sky, clear * ground)
        set_ = object.__setattr__
        set_(self, "_nodes", nodes)
        set_(self, "_sky", sky)
        set_(self, "_own", own)
        set_(self, "_horizon", np.where(up[:, None], 0.0, air_share))
        set_(self, "_fades", fades)
        set_(self, "_clear", clear)

    def fade(self, stop: int, elevation: ArrayLike) -> FloatArray:
        """Return what is left of a volume's own light when it gets to the observer.

        Parameters
        ----------
        stop : int
            Number of the volume among `stops`.
        elevation : array_like, shape (…)
            [rad]

        Returns
        -------
        ndarray, shape (…, nλ)
            Air and nearer volumes; for rain also the air in it, by which its amount is weakened [1].
        """
        return self._read(self._fades[stop], elevation)

    def clear(self, elevation: ArrayLike) -> FloatArray:
        """Return what rain and clouds let through, the air left out, shape (…, nλ) [1]."""
        return self._read(self._clear, elevation)

    def seen(self, vectors: ArrayLike, background: Behind) -> FloatArray:
        """Return a background seen through everything, with the light of air and volumes.

        Parameters
        ----------
        vectors : array_like, shape (..., 3)
            Viewing directions.
        background : Behind
            What would be seen without them.

        Returns
        -------
        ndarray, shape (..., nλ)
            [W m⁻² sr⁻¹ nm⁻¹]; nan for nan.
        """
        vectors = np.asarray(vectors, dtype=np.float64)
        azimuth, elevation = azimuth_elevation(vectors)
        light = background.radiance(vectors)
        light *= self._read(self._sky, elevation)
        light += self._read(self._own, elevation)
        below = elevation < 0.0
        if np.any(below) and np.any(self._horizon > 0.0):
            horizon = background.radiance(direction(azimuth[below], np.full(int(below.sum()), _HORIZON)))
            light[below] += self._read(self._horizon, elevation[below]) * horizon
        return light

    def _read(self, table: FloatArray, elevation: ArrayLike) -> FloatArray:
        from skyoptics.kernels.rows import read

        elevation = np.asarray(elevation, dtype=np.float64)
        place = np.interp(elevation, self._nodes, np.arange(len(self._nodes), dtype=np.float64)).ravel()
        result = np.empty((place.size, table.shape[1]))
        read(place, np.ascontiguousarray(table), result)
        return result.reshape(*elevation.shape, table.shape[1])


@dataclass(frozen=True, eq=False)
class SeenThrough:
    """A background seen through air and volumes; it answers as the background itself does."""

    background: Behind
    way: Way

    def radiance(self, vectors: FloatArray) -> FloatArray:
        """Return the radiance in viewing directions, shape (…, nλ); nan for nan."""
        return self.way.seen(vectors, self.background)


def ambient(background: Behind) -> FloatArray:
    """Return the mean radiance of a background over all directions, shape (nλ,), good to about a percent."""
    sine, weight = np.polynomial.legendre.leggauss(12)
    azimuth = (np.arange(36) + 0.5) * (2.0 * np.pi / 36)
    total = 0.0
    for half in (-1.0, 1.0):
        elevation = np.arcsin(half * 0.5 * (1.0 + sine))[:, None]
        light = background.radiance(direction(azimuth, elevation)).mean(axis=1)
        total = total + 0.25 * (weight @ light)
    return np.asarray(total)


def aloft(air: Air, bins: Bins, source: Source, height: float) -> FloatArray:
    """Return a source's irradiance at a height ÷ that at the observer, shape (nλ,).

    Parameters
    ----------
    air : Air
        The atmosphere.
    bins : Bins
        The nλ spectral bins.
    source : Source
        As seen from the observer; one below the horizon is the mirror image of one above, its light goes up.
    height : float
        Above the observer [m].

    Returns
    -------
    ndarray
        Means over eight wavelengths a bin, weighted evenly [1].
    """
    wavelength = bins.at((np.arange(8) + 0.5) / 8.0)
    elevation = float(azimuth_elevation(source.direction)[1])
    if elevation < 0.0 and np.any(source.stokes[:, 1:]):
        return np.asarray(air.between(wavelength, -elevation, 0.0, height).mean(axis=-1))
    below = air.transmission(wavelength, elevation).mean(axis=-1)
    above = air.transmission(wavelength, elevation, height).mean(axis=-1)
    return np.asarray(above / np.maximum(below, 1e-300))


def _distance(stop: Shaft | Layer) -> tuple[int, float]:
    """Return where a volume comes in the order."""
    if isinstance(stop, Shaft):
        return 0, stop.near
    return 1, 0.0 if stop.height is None else stop.height


def _airy(stop: Shaft | Layer) -> bool:
    """Return whether air stands in front of a volume."""
    return isinstance(stop, Shaft) or stop.height is not None


def _apart(shafts: list[Shaft]) -> None:
    """Make sure that shafts stand one behind the other."""
    shafts = sorted(shafts, key=lambda shaft: shaft.near)
    for first, second in pairwise(shafts):
        if second.near < first.far:
            raise DomainError(
                f"two rain shafts overlap: one from {first.near / 1e3:g} to {first.far / 1e3:g} km, another from "
                f"{second.near / 1e3:g} to {second.far / 1e3:g} km; let the second begin where the first ends"
            )
