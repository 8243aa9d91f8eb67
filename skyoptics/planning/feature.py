"""A bow or halo as a planner needs it: when it is up, where its crown and feet stand, what it draws."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from skyoptics.planning.answers import Body
from skyoptics.planning.curves import Curve, Interval, Tabulated
from skyoptics.planning.horizons import Horizon, floor_of
from skyoptics.planning.outlines import Stance, measure
from skyoptics.units import DEG, ArrayLike, BoolArray, FloatArray

WEAK_WITHIN = 1.0 * DEG
"""From a limit of the sun's height [rad]."""

_TURN = 2.0 * np.pi
_SCAN = 0.02 * DEG
_HORIZON = 0.1 * DEG  # a limit nearer to a sun on the horizon is the horizon


@dataclass(frozen=True)
class Feature:
    """A bow or halo.

    Parameters
    ----------
    name, title : str
        For machines and for people.
    body : {"sun", "moon"}
        What lights it.
    about : {"antisolar", "sun", "zenith"}
        What it is a circle about; for curves of another kind the sun.
    radius_deg : float or None
        Angular radius of the upper edge of a bow, of the inner edge of a halo; None for what is no circle.
    index : float or None
        Refractive index of ice; None for bows.
    curve : Curve
        What it draws.
    """

    name: str
    title: str
    body: Body
    about: str
    radius_deg: float | None
    index: float | None
    curve: Curve

    def exists(self, sun_elevation: ArrayLike) -> BoolArray:
        """Return whether it exists at all, above or below the horizon; elevation of the body [rad]."""
        h = np.asarray(sun_elevation, dtype=np.float64)
        found = np.zeros(h.shape, dtype=bool)
        for low, high in self.curve.intervals():
            found |= (h >= low) & (h <= high)
        return found

    def up(self, sun_elevation: ArrayLike, level: float = 0.0, least_share: float = 0.0) -> BoolArray:
        """Return whether it exists and its crown is above a level horizon.

        Parameters
        ----------
        sun_elevation : array_like
            Of the body [rad].
        level : float
            Elevation of the horizon [rad].
        least_share : float
            Part of the length that must be up, 0 to 1.
        """
        there = self.exists(sun_elevation) & (self.curve.crown(sun_elevation)[0] >= level)
        if least_share > 0.0:
            # a whole circle is a whole circle to rounding too
            there &= np.nan_to_num(self.curve.share(sun_elevation, level)) >= least_share - 1e-9
        return there

    def heights(
        self,
        level: float = 0.0,
        least_share: float = 0.0,
        sun_height: Interval = (-np.pi / 2.0, np.pi / 2.0),
    ) -> tuple[Interval, ...]:
        """Return the heights of the body at which the feature is up and the body too.

        Parameters
        ----------
        level, least_share
            As in `up`.
        sun_height : tuple of float
            Least and greatest height asked for [rad].

        Returns
        -------
        tuple of (float, float)
            Rising, ends to 1e-9 rad; stretches shorter than 0.02° may be missed.
        """
        low, high = max(level, sun_height[0]), min(np.pi / 2.0, sun_height[1])
        if low > high:
            return ()
        edges = [edge for pair in self.curve.intervals() for edge in pair if low <= edge <= high]
        grid = np.unique(np.concatenate([np.linspace(low, high, int((high - low) / _SCAN) + 2), edges]))
        ok = self.up(grid, level, least_share)
        change = np.flatnonzero(ok[1:] != ok[:-1])
        inside = np.where(ok[change], grid[change], grid[change + 1])
        outside = np.where(ok[change], grid[change + 1], grid[change])
        while change.size and np.max(np.abs(inside - outside)) > 1e-9:
            middle = 0.5 * (inside + outside)
            good = self.up(middle, level, least_share)
            inside, outside = np.where(good, middle, inside), np.where(good, outside, middle)
        bounds = [*([low] if ok[0] else []), *inside.tolist(), *([high] if ok[-1] else [])]
        return tuple(zip(bounds[::2], bounds[1::2], strict=True))

    @property
    def limits_deg(self) -> tuple[float, float] | None:
        """Least and greatest height of the body, 0 to 90, at which it exists and its crown is above a flat horizon.

        None where there is no such height. There may be gaps between: see `heights`.
        """
        found = self.heights()
        return (found[0][0] / DEG, found[-1][1] / DEG) if found else None

    def weak(self, sun_elevation: float) -> bool:
        """Return whether the body is within 1° of a limit of `heights`, save the horizon and the zenith themselves.

        Parameters
        ----------
        sun_elevation : float
            Of the body [rad].
        """
        edges = [edge for pair in _flat_heights(self) for edge in pair if _HORIZON < edge < np.pi / 2.0 - _HORIZON]
        return any(abs(sun_elevation - edge) <= WEAK_WITHIN for edge in edges)

    @property
    def is_tabulated(self) -> bool:
        """Whether it has no closed form."""
        return isinstance(self.curve, Tabulated)

    @property
    def has_feet(self) -> bool:
        """Whether it crosses a flat horizon at any height of the body."""
        return bool(np.isfinite(self.curve.feet(np.linspace(0.0, 90.0, 361) * DEG)[0]).any())

    def origin(self, sun_azimuth: ArrayLike) -> FloatArray:
        """Return the azimuth from which `curve` counts: that of the antisolar point or of the body [rad]."""
        azimuth = np.asarray(sun_azimuth, dtype=np.float64)
        return np.mod(azimuth + np.pi, _TURN) if self.about == "antisolar" else np.mod(azimuth, _TURN)

    def crown(self, sun_azimuth: ArrayLike, sun_elevation: ArrayLike) -> tuple[FloatArray, FloatArray]:
        """Return elevation and azimuth of the highest point, nan where the feature does not exist [rad]."""
        elevation, offset = self.curve.crown(sun_elevation)
        return elevation, np.mod(self.origin(sun_azimuth) + offset, _TURN)

    def feet(
        self, sun_azimuth: ArrayLike, sun_elevation: ArrayLike, level: float = 0.0
    ) -> tuple[FloatArray, FloatArray]:
        """Return azimuths of the left and the right foot on a level horizon, nan where there are none [rad]."""
        left, right = self.curve.feet(sun_elevation, level)
        origin = self.origin(sun_azimuth)
        return np.mod(origin + left, _TURN), np.mod(origin + right, _TURN)

    def standing(
        self,
        sun_azimuth: float,
        sun_elevation: float,
        horizon: Horizon | None = None,
        level: float | None = 0.0,
    ) -> Stance:
        """Return how it stands.

        Parameters
        ----------
        sun_azimuth, sun_elevation : float
            Apparent, of the body [rad].
        horizon : object or None
            See `skyoptics.planning.horizons`; looked at only where `level` is None. Feet and share are those over it.
        level : float or None
            Elevation of a level horizon, as from `skyoptics.planning.horizons.level_of`; None for a profile [rad].

        Returns
        -------
        Stance
            Azimuths in [0, 2π) [rad]. Without crown and feet, share 0, where the feature does not exist. Over a profile the
            outline is measured, points 0.1° apart.
        """
        if not self.exists(sun_elevation):
            return Stance(np.nan, np.nan, (), 0.0)
        top, azimuth = self.crown(sun_azimuth, sun_elevation)
        if level is not None:
            feet = np.array(self.feet(sun_azimuth, sun_elevation, level))
            share = float(self.curve.share(sun_elevation, level))
            return Stance(float(top), float(azimuth), tuple(feet[np.isfinite(feet)].tolist()), share)
        origin = float(self.origin(sun_azimuth))
        offset, elevation = self.curve.outline(sun_elevation)
        seen = measure(offset, elevation, floor_of(horizon, offset + origin))
        feet = np.mod(np.array(seen.feet) + origin, _TURN)
        return Stance(float(top), float(azimuth), tuple(feet.tolist()), seen.share)

    def outline(self, sun_azimuth: float, sun_elevation: float) -> tuple[FloatArray, FloatArray]:
        """Return azimuths in [0, 2π) and elevations of the whole curve, also below the horizon.

        Parameters
        ----------
        sun_azimuth, sun_elevation : float
            Apparent, of the body [rad].

        Returns
        -------
        azimuth, elevation : ndarray, shape (m,)
            Neighbouring points at most 0.1° apart, nan between branches; empty where the feature does not exist [rad].
        """
        if not self.exists(sun_elevation):
            return np.empty(0), np.empty(0)
        azimuth, elevation = self.curve.outline(float(sun_elevation))
        return np.mod(azimuth + float(self.origin(sun_azimuth)), _TURN), elevation.copy()


@lru_cache(maxsize=128)
def _flat_heights(feature: Feature) -> tuple[Interval, ...]:
    """Return `Feature.heights` over a flat horizon, worked out once."""
    return feature.heights()
