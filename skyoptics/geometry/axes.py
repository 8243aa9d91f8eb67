"""Axes and angles: the conventions, once.

- World axes: x east, y north, z up; right-handed; the observer stands at the origin.
- Azimuth: clockwise from north (east = π/2), [0, 2π). Elevation: above the horizon, [−π/2, π/2].
- A *viewing* direction points from the observer to what is seen; light travels along its negative. Names say which one
  they hold: `view`, `propagation`.
- Scattering angle: between the directions of travel before and after, [0, π]. Seen from the observer, with the source at
  viewing direction s, a viewing direction v belongs to the scattering angle between s and v: a halo's radius is its
  scattering angle, and the angle from the antisolar point −s is π minus it.
- Position angle about a direction c: 0 towards the zenith, growing clockwise as seen by the observer.
"""

from __future__ import annotations

import numpy as np

from skyoptics.units import ArrayLike, FloatArray


def direction(azimuth: ArrayLike, elevation: ArrayLike) -> FloatArray:
    """Return unit vectors for azimuths and elevations.

    Parameters
    ----------
    azimuth, elevation : array_like, broadcastable
        [rad]

    Returns
    -------
    ndarray, shape (..., 3)
        East, north, up.
    """
    azimuth, elevation = np.broadcast_arrays(np.asarray(azimuth, float), np.asarray(elevation, float))
    flat = np.cos(elevation)
    return np.stack([flat * np.sin(azimuth), flat * np.cos(azimuth), np.sin(elevation)], axis=-1)


def azimuth_elevation(vector: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Return azimuth in [0, 2π) and elevation of vectors of any length.

    Parameters
    ----------
    vector : array_like, shape (..., 3)
        East, north, up. At the zenith and the nadir the azimuth is 0; a vector of nan gives nan.

    Returns
    -------
    azimuth, elevation : ndarray, shape (...)
        [rad]
    """
    vector = np.asarray(vector, dtype=np.float64)
    azimuth = np.mod(np.arctan2(vector[..., 0], vector[..., 1]), 2.0 * np.pi)
    elevation = np.arctan2(vector[..., 2], np.hypot(vector[..., 0], vector[..., 1]))
    return azimuth, elevation


def angle_between(first: ArrayLike, second: ArrayLike) -> FloatArray:
    """Return the angle between unit vectors, exact to rounding for nearly parallel ones too.

    Parameters
    ----------
    first, second : array_like, shape (..., 3), broadcastable
        Unit vectors.

    Returns
    -------
    ndarray, shape (...)
        [rad], 2 atan2(|a − b|, |a + b|) (Kahan, *How futile are mindless assessments of roundoff*, 2006, §12).
    """
    first, second = np.asarray(first, dtype=np.float64), np.asarray(second, dtype=np.float64)
    return 2.0 * np.arctan2(np.linalg.norm(first - second, axis=-1), np.linalg.norm(first + second, axis=-1))


def around(centre: ArrayLike, angle: ArrayLike, position_angle: ArrayLike) -> FloatArray:
    """Return the direction at a given angle from a centre, in a given sense around it.

    Parameters
    ----------
    centre : array_like, shape (3,)
        Unit vector, viewing.
    angle : array_like
        Angle from the centre [rad].
    position_angle : array_like
        0 towards the zenith, clockwise as seen by the observer [rad]; a centre at the zenith counts from north's far
        side, as the limit of a centre that climbs in the north.

    Returns
    -------
    ndarray, shape (..., 3)
    """
    centre = np.asarray(centre, dtype=np.float64)
    azimuth, elevation = azimuth_elevation(centre)
    up = direction(azimuth, elevation + np.pi / 2.0)
    right = np.stack([np.cos(azimuth), -np.sin(azimuth), np.zeros_like(azimuth)], axis=-1)
    angle, position_angle = np.broadcast_arrays(np.asarray(angle, float), np.asarray(position_angle, float))
    across = np.cos(position_angle)[..., None] * up + np.sin(position_angle)[..., None] * right
    return np.cos(angle)[..., None] * centre + np.sin(angle)[..., None] * across
