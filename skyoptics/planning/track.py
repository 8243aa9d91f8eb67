"""The sun's or the moon's way across the sky of a place, quick to ask at many instants.

Topocentric airless positions of `skyoptics.light.position` are taken every hour, turned back by the earth's rotation, so that what
is left moves slowly (the sun 1° a day; the moon 13°, with a daily parallax of 1°), and interpolated by polynomials
of degree 5. Against positions asked for directly that is within 0.0002° in direction; the theory behind keeps 32-bit azimuths,
which are good to 0.00003°. Instants are days from `skyoptics.light.position.EPOCH` in universal time.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from datetime import datetime, tzinfo

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.geometry.axes import azimuth_elevation, direction
from skyoptics.light import position, refraction
from skyoptics.light.position import Body, Observer, days_of
from skyoptics.light.zones import find_zone
from skyoptics.planning.answers import Place
from skyoptics.units import ArrayLike, FloatArray

LONGEST = 20.0 * 366.0
"""Days that one track may span."""
SECOND = 1.0 / 86400.0
"""In days."""

_SPACING = 1.0 / 24.0  # [day]
_NODES = 6
_ROTATION = 2.0 * math.pi * 1.00273781191135448  # of the earth [rad/day of UT1]; IERS Conventions 2010, equation 5.15
_SAMPLE = 20.0 / 1440.0  # [day], in which height does not turn twice


class Track:
    """Where a body stands at a place between two instants.

    Parameters
    ----------
    body : {"sun", "moon"}
    place : Observer
        Checked, as by `skyoptics.light.position.observer`.
    begin, end : float
        Days from `EPOCH`.
    """

    def __init__(self, body: Body, place: Observer, begin: float, end: float) -> None:
        if not begin < end:
            raise DomainError("the end of what is looked through must lie after its beginning")
        if end - begin > LONGEST:
            raise DomainError(f"{end - begin:.0f} days are too many to look through at once; at most {LONGEST:.0f}")
        self.body, self.place, self.begin, self.end = body, place, begin, end
        self._first = math.floor(begin / _SPACING) * _SPACING - (_NODES // 2) * _SPACING
        count = math.ceil((end - self._first) / _SPACING) + _NODES
        days = self._first + _SPACING * np.arange(count)
        seen = [position.airless(body, place, float(day)) for day in days]
        level = direction([one.azimuth for one in seen], [one.elevation for one in seen])
        self._fixed = _turned(self._to_pole(level), np.asarray(_ROTATION * (days - self._first)))

    def airless(self, days: ArrayLike) -> tuple[FloatArray, FloatArray]:
        """Return azimuth in [0, 2π) and airless elevation [rad]."""
        days = np.asarray(days, dtype=np.float64)
        place = (days - self._first) / _SPACING
        left = np.clip(np.floor(place).astype(np.int64) - (_NODES // 2 - 1), 0, len(self._fixed) - _NODES)
        x = place - left
        mixed = np.zeros((*x.shape, 3))
        for j in range(_NODES):  # Lagrange
            weight = np.ones_like(x)
            for k in range(_NODES):
                if k != j:
                    weight *= (x - k) / (j - k)
            mixed += weight[..., None] * self._fixed[left + j]
        turned = _turned(mixed, -_ROTATION * (days - self._first))
        return azimuth_elevation(self._from_pole(turned))

    def apparent(self, days: ArrayLike) -> tuple[FloatArray, FloatArray]:
        """Return azimuth in [0, 2π) and apparent elevation [rad]."""
        azimuth, elevation = self.airless(days)
        return azimuth, refraction.apparent(elevation, self.place.pressure, self.place.temperature)

    def turning(self) -> FloatArray:
        """Return instants between which the height only rises or only falls, the ends among them: those of culmination."""
        days = np.linspace(self.begin, self.end, max(3, math.ceil((self.end - self.begin) / _SAMPLE) + 1))
        height = self.airless(days)[1]
        rising = np.diff(height) >= 0.0
        turn = np.flatnonzero(rising[1:] != rising[:-1]) + 1
        sign = np.where(rising[turn - 1], 1.0, -1.0)
        low, high = days[turn - 1], days[turn + 1]
        extremes = highest(lambda when: sign * self.airless(when)[1], low, high)
        return np.unique(np.concatenate([days[[0, -1]], extremes]))

    def crossings(self, height: float, turning: FloatArray) -> FloatArray:
        """Return the instants at which the apparent elevation passes a height, to 0.01 s.

        Parameters
        ----------
        height : float
            [rad]
        turning : ndarray
            As from `turning`.
        """
        above = self.apparent(turning)[1] >= height
        gap = np.flatnonzero(above[1:] != above[:-1])
        below, over = (
            np.where(above[gap], turning[gap + 1], turning[gap]),
            np.where(above[gap], turning[gap], turning[gap + 1]),
        )
        for _ in range(40):
            middle = 0.5 * (below + over)
            up = self.apparent(middle)[1] >= height
            below, over = np.where(up, below, middle), np.where(up, middle, over)
        return np.sort(over)

    def _to_pole(self, level: FloatArray) -> FloatArray:
        """Turn from east, north, up to east, towards the equator's highest point, along the earth's axis."""
        s, c = math.sin(self.place.latitude), math.cos(self.place.latitude)
        east, north, up = level[..., 0], level[..., 1], level[..., 2]
        return np.stack([east, c * up - s * north, c * north + s * up], axis=-1)

    def _from_pole(self, axis: FloatArray) -> FloatArray:
        s, c = math.sin(self.place.latitude), math.cos(self.place.latitude)
        east, out, pole = axis[..., 0], axis[..., 1], axis[..., 2]
        return np.stack([east, c * pole - s * out, c * out + s * pole], axis=-1)


def days_between(begin: datetime, end: datetime) -> tuple[float, float]:
    """Return both instants in days from `EPOCH`, checked.

    Raises
    ------
    DomainError
        Without a zone, outside 1600 to 2200, or in the wrong order.
    """
    first, last = days_of(begin), days_of(end)
    if last <= first:
        raise DomainError(f"the end {end.isoformat()} does not lie after the beginning {begin.isoformat()}")
    return first, last


def zone_of(zone: str | tzinfo) -> tzinfo:
    """Return a zone by name, or the one given."""
    return find_zone(zone) if isinstance(zone, str) else zone


def observer_of(place: Place, pressure_hpa: float, temperature_c: float) -> Observer:
    """Return a place with its air, checked."""
    return position.observer(place.latitude_deg, place.longitude_deg, place.height_m, pressure_hpa, temperature_c)


def highest(
    function: Callable[[FloatArray], FloatArray], low: FloatArray, high: FloatArray, rounds: int = 24
) -> FloatArray:
    """Return where a function of many instants is largest between two bounds each, by golden section."""
    ratio = (math.sqrt(5.0) - 1.0) / 2.0
    for _ in range(rounds):
        left, right = high - ratio * (high - low), low + ratio * (high - low)
        keep = function(left) < function(right)
        low, high = np.where(keep, left, low), np.where(keep, high, right)
    return 0.5 * (low + high)


def _turned(vectors: FloatArray, angle: FloatArray) -> FloatArray:
    """Turn vectors about their third axis: a body that goes west with the sky stays where it is."""
    c, s = np.cos(angle), np.sin(angle)
    return np.stack(
        [c * vectors[..., 0] + s * vectors[..., 1], c * vectors[..., 1] - s * vectors[..., 0], vectors[..., 2]], axis=-1
    )
