"""Where the curves of features run, in closed form where there is one.

All azimuths are offsets: from the antisolar azimuth for what lies about the antisolar point, from the sun's for the rest.
Everything takes arrays of sun heights and gives nan where the feature does not exist. `level` is the elevation of a
level horizon. Angles in radians.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Protocol

import numpy as np

from skyoptics.crystals import arcs
from skyoptics.geometry.axes import around, azimuth_elevation, direction
from skyoptics.planning import arc_table
from skyoptics.planning.outlines import wrapped
from skyoptics.units import DEG, ArrayLike, FloatArray

POINTS_APART = 0.09 * DEG
"""Distance of neighbouring points of an outline, at most."""

Interval = tuple[float, float]


class Curve(Protocol):
    """What a feature draws on the sky."""

    def intervals(self) -> tuple[Interval, ...]:
        """Return the sun heights at which it exists."""
        ...

    def crown(self, height: ArrayLike) -> tuple[FloatArray, FloatArray]:
        """Return elevation and azimuth of the highest point; of two equally high ones the left one."""
        ...

    def feet(self, height: ArrayLike, level: float = 0.0) -> tuple[FloatArray, FloatArray]:
        """Return azimuths of the left and the right foot, nan where there are none."""
        ...

    def share(self, height: ArrayLike, level: float = 0.0) -> FloatArray:
        """Return the part of the length that is up."""
        ...

    def outline(self, height: float) -> tuple[FloatArray, FloatArray]:
        """Return azimuths and elevations of points of the whole curve, nan between branches."""
        ...


@dataclass(frozen=True)
class Circle:
    """A circle about the sun or the antisolar point.

    With c the height of its centre, a point in the direction q from the zenith has sin e = sin c cos r + cos c sin r cos q;
    on the horizon cos Δ = cos r / cos c (spherical law of cosines).
    """

    radius: float
    antisolar: bool

    def intervals(self) -> tuple[Interval, ...]:
        """Return all sun heights, or none where light does not pass the wedge."""
        return ((-np.pi / 2.0, np.pi / 2.0),) if np.isfinite(self.radius) else ()

    def crown(self, height: ArrayLike) -> tuple[FloatArray, FloatArray]:
        """Return c + r; past the zenith it falls again, on the other side."""
        top = self._centre(height) + self.radius
        beyond = top > np.pi / 2.0
        return np.where(beyond, np.pi - top, top), np.where(beyond, np.pi, 0.0)

    def feet(self, height: ArrayLike, level: float = 0.0) -> tuple[FloatArray, FloatArray]:
        """Return −Δ and Δ."""
        c = self._centre(height)
        with np.errstate(divide="ignore", invalid="ignore"):
            cosine = (np.cos(self.radius) - np.sin(c) * np.sin(level)) / (np.cos(c) * np.cos(level))
            offset = np.where(np.abs(cosine) <= 1.0, np.arccos(cosine), np.nan)
        return -offset, offset

    def share(self, height: ArrayLike, level: float = 0.0) -> FloatArray:
        """Return the share of q with e above the level."""
        c = self._centre(height)
        with np.errstate(divide="ignore", invalid="ignore"):
            cosine = (np.sin(level) - np.sin(c) * np.cos(self.radius)) / (np.cos(c) * np.sin(self.radius))
        return np.asarray(np.arccos(np.clip(cosine, -1.0, 1.0)) / np.pi)

    def outline(self, height: float) -> tuple[FloatArray, FloatArray]:
        """Return the closed circle, from the crown clockwise."""
        count = int(np.ceil(2.0 * np.pi * np.sin(self.radius) / POINTS_APART)) + 1
        centre = direction(0.0, float(self._centre(height)))
        points = around(centre, self.radius, np.linspace(0.0, 2.0 * np.pi, count))
        azimuth, elevation = azimuth_elevation(points)
        return wrapped(azimuth), elevation

    def _centre(self, height: ArrayLike) -> FloatArray:
        h = np.asarray(height, dtype=np.float64)
        return -h if self.antisolar else h


@dataclass(frozen=True)
class ZenithArc:
    """The circumzenithal or the circumhorizontal arc: part of a circle about the zenith.

    Circumzenithal: sin e = √(n² − cos²h), half as wide in azimuth as cos w = cos e / cos h. Circumhorizontal:
    cos e = √(n² − sin²h), cos w = cos h / cos e: there light leaves, or enters, along a side face. (Horizontal parts of the
    wave vector, Snell's law; Bravais 1847. The heights as in A. Bravais, J. École Roy. Polytechnique 18, 1, from memory.)
    """

    index: float
    zenithal: bool

    def intervals(self) -> tuple[Interval, ...]:
        """Return h ≤ arccos √(n² − 1), or h ≥ its complement."""
        square = self.index**2 - 1.0
        if square >= 1.0:
            return ()
        limit = float(np.arccos(np.sqrt(square)))
        return ((0.0, limit),) if self.zenithal else ((np.pi / 2.0 - limit, np.pi / 2.0),)

    def crown(self, height: ArrayLike) -> tuple[FloatArray, FloatArray]:
        """Return e; the arc is level."""
        h = np.asarray(height, dtype=np.float64)
        ((low, high),) = self.intervals() or ((np.inf, np.inf),)
        inside = (h >= low) & (h <= high)
        level = np.cos(h) if self.zenithal else np.sin(h)
        root = np.sqrt(np.clip(self.index**2 - level**2, 0.0, 1.0))
        elevation = np.arcsin(root) if self.zenithal else np.arccos(root)
        return np.where(inside, elevation, np.nan), np.where(inside, 0.0, np.nan)

    def feet(self, height: ArrayLike, level: float = 0.0) -> tuple[FloatArray, FloatArray]:
        """Return nan: it does not meet the horizon."""
        return _no_feet(height)

    def share(self, height: ArrayLike, level: float = 0.0) -> FloatArray:
        """Return 1 above the level, 0 below."""
        return _all_or_nothing(self.crown(height)[0], level)

    def half_width(self, height: ArrayLike) -> FloatArray:
        """Return how far in azimuth it reaches on either side of the sun."""
        e, low = self.crown(height)[0], np.cos(np.asarray(height, dtype=np.float64))
        with np.errstate(divide="ignore", invalid="ignore"):
            ratio = np.cos(e) / low if self.zenithal else low / np.cos(e)
        return np.arccos(np.clip(ratio, -1.0, 1.0))

    def outline(self, height: float) -> tuple[FloatArray, FloatArray]:
        """Return the arc from left to right."""
        e = float(self.crown(height)[0])
        if not np.isfinite(e):
            return np.empty(0), np.empty(0)
        w = float(self.half_width(height))
        azimuth = np.linspace(-w, w, int(np.ceil(2.0 * w / POINTS_APART)) + 2)
        return azimuth, np.full(azimuth.shape, e)


@dataclass(frozen=True)
class Level:
    """What stands at the sun's own height: parhelia of some kind, or the whole parhelic circle.

    Parhelia of the prism: n' = √(n² − sin²h) / cos h, offset 2 arcsin(n'/2) − 60° (Bravais 1847), while n' ≤ 2.
    """

    kind: str
    index: float

    def intervals(self) -> tuple[Interval, ...]:
        """Return the sun heights with n' ≤ 2, or all above the horizon."""
        if self.kind not in ("parhelia", "parhelia_44"):
            return ((-np.pi / 2.0 if self.kind == "parhelic_circle" else 0.0, np.pi / 2.0),)
        square = (4.0 - self.index**2) / 3.0
        if square <= 0.0:
            return ()
        limit = float(np.arcsin(np.sqrt(square)))
        return ((-limit, limit),)

    def offset(self, height: ArrayLike) -> FloatArray:
        """Return the azimuth of the right parhelion from the sun."""
        h = np.asarray(height, dtype=np.float64)
        if self.kind == "parhelic_circle":
            return np.zeros_like(h)
        if self.kind == "parhelia_120":
            return np.full_like(h, 2.0 * np.pi / 3.0)
        half = 0.5 * np.sqrt(self.index**2 - np.sin(h) ** 2) / np.maximum(np.cos(h), 1e-300)
        # at the limit itself rounding must not decide
        single = 2.0 * np.arcsin(np.minimum(half, 1.0)) - np.pi / 3.0
        return np.where(half <= 1.0 + 1e-12, single * (2.0 if self.kind == "parhelia_44" else 1.0), np.nan)

    def crown(self, height: ArrayLike) -> tuple[FloatArray, FloatArray]:
        """Return the sun's height and the left one's azimuth."""
        h, offset = np.asarray(height, dtype=np.float64), self.offset(height)
        if self.kind == "parhelia_120":
            h = np.where(h >= 0.0, h, np.nan)
        return np.where(np.isfinite(offset), h, np.nan), np.where(np.isfinite(h), -offset, np.nan)

    def feet(self, height: ArrayLike, level: float = 0.0) -> tuple[FloatArray, FloatArray]:
        """Return nan: it does not cross the horizon."""
        return _no_feet(height)

    def share(self, height: ArrayLike, level: float = 0.0) -> FloatArray:
        """Return 1 above the level, 0 below."""
        return _all_or_nothing(self.crown(height)[0], level)

    def outline(self, height: float) -> tuple[FloatArray, FloatArray]:
        """Return both spots, or the whole circle."""
        if not np.isfinite(self.crown(height)[0]):
            return np.empty(0), np.empty(0)
        if self.kind == "parhelic_circle":
            azimuth = np.linspace(-np.pi, np.pi, int(np.ceil(2.0 * np.pi / POINTS_APART)) + 1)
            return azimuth, np.full(azimuth.shape, float(height))
        offset = float(self.offset(height))
        return np.array([-offset, np.nan, offset]), np.array([height, np.nan, height], dtype=np.float64)


@dataclass(frozen=True)
class Tabulated:
    """A halo arc without a closed form: its outline from `skyoptics.crystals.arcs`, the rest from a table of it."""

    name: str
    index: float

    def intervals(self) -> tuple[Interval, ...]:
        """Return the sun heights of the table at which it exists."""
        return self._table().intervals()

    def crown(self, height: ArrayLike) -> tuple[FloatArray, FloatArray]:
        """Return the crown from the table."""
        table = self._table()
        return table.crown_at(height), table.crown_azimuth_at(height)

    def feet(self, height: ArrayLike, level: float = 0.0) -> tuple[FloatArray, FloatArray]:
        """Return the feet from the table of that level, left one first as seen when facing the arc."""
        foot = self._table(level).foot_at(height)
        behind = np.abs(self.crown(height)[1]) > np.pi / 2.0
        return np.where(behind, foot, -foot), np.where(behind, -foot, foot)

    def share(self, height: ArrayLike, level: float = 0.0) -> FloatArray:
        """Return the share from the table of that level."""
        return self._table(level).share_at(height)

    def outline(self, height: float) -> tuple[FloatArray, FloatArray]:
        """Return the locus."""
        return _locus(self.name, float(height), self.index)

    def _table(self, level: float = 0.0) -> arc_table.Table:
        return arc_table.table(self.name, self.index, level)


@lru_cache(maxsize=512)
def _locus(name: str, height: float, index: float) -> tuple[FloatArray, FloatArray]:
    return arcs.locus(name, height, index)


def _no_feet(height: ArrayLike) -> tuple[FloatArray, FloatArray]:
    nothing = np.full(np.shape(height), np.nan)
    return nothing, nothing.copy()


def _all_or_nothing(elevation: FloatArray, level: float) -> FloatArray:
    return np.where(np.isfinite(elevation), np.where(elevation >= level, 1.0, 0.0), np.nan)
