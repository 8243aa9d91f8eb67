"""What hides the lower part of the sky: any object with ``elevation(azimuth)``.

It takes and gives arrays [rad]: a profile, or a dip that is the same all round. None is the flat horizon at 0°.
"""

from __future__ import annotations

from typing import Protocol

import numpy as np

from skyoptics.units import DEG, FloatArray

_TURN = 2.0 * np.pi


class Horizon(Protocol):
    """What hides the lower part of the sky."""

    def elevation(self, azimuth: FloatArray) -> FloatArray:
        """Return elevations for azimuths [rad]."""
        ...


def floor_of(horizon: Horizon | None, azimuth: FloatArray) -> FloatArray:
    """Return the horizon's elevation, nan where the azimuth is nan [rad]."""
    azimuth = np.asarray(azimuth, dtype=np.float64)
    if horizon is None:
        return np.where(np.isfinite(azimuth), 0.0, np.nan)
    floor = np.full(azimuth.shape, np.nan)
    there = np.isfinite(azimuth)
    floor[there] = horizon.elevation(np.mod(azimuth[there], _TURN))
    return floor


def all_round(horizon: Horizon | None) -> FloatArray:
    """Return the horizon's elevation every 0.1° of azimuth [rad]."""
    return floor_of(horizon, np.arange(0.0, 360.0, 0.1) * DEG)


def level_of(horizon: Horizon | None) -> float | None:
    """Return the elevation of a horizon that is the same all round, None for a profile [rad]."""
    if horizon is None:
        return 0.0
    found = all_round(horizon)
    return float(found[0]) if np.ptp(found) < 1e-9 else None
