"""Amount of particles along a line of sight: the path integral of the reference extinction [1].

*Curtain* (rain): the same amount on every line of sight above the horizon, and below it too where it hangs in front of the
ground. *Layer* (cirrus): a thin horizontal sheet of given vertical depth on a round earth; its path factor is 1/sin e
high up and stays finite at the horizon.
"""

from __future__ import annotations

import numpy as np

from skyoptics.light.slant import EARTH_RADIUS
from skyoptics.units import ArrayLike, FloatArray

LAYER_HEIGHT = 9.0e3
"""Height of a layer above the observer [m]: middle of the cirrus range; enters near the horizon only."""


def path_factor(elevation: ArrayLike, height: float = LAYER_HEIGHT) -> FloatArray:
    """Return path through a thin spherical shell ÷ its thickness.

    Parameters
    ----------
    elevation : array_like
        Of the line of sight at the observer [rad].
    height : float
        Of the shell above the observer [m].

    Returns
    -------
    ndarray
        1 / cos(z'), sin z' = R cos e / (R + h); 0 below the horizon.
    """
    elevation = np.asarray(elevation, dtype=np.float64)
    sine = EARTH_RADIUS / (EARTH_RADIUS + height) * np.cos(elevation)
    return np.where(elevation >= 0.0, 1.0 / np.sqrt(1.0 - sine * sine), 0.0)


def curtain(elevation: ArrayLike, optical_depth: float, below_horizon: bool) -> FloatArray:
    """Return the amount of a curtain at elevations [rad]: `optical_depth`, or 0 below the horizon."""
    elevation = np.asarray(elevation, dtype=np.float64)
    return np.where((elevation >= 0.0) | below_horizon, optical_depth, 0.0)


def layer(elevation: ArrayLike, optical_depth: float) -> FloatArray:
    """Return the amount of a thin layer at elevations [rad]: vertical `optical_depth` times the path factor."""
    return optical_depth * path_factor(elevation)
