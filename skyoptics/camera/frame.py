"""Aim and frame: from a lens, a sensor and an aim to a grid of directions.

Roll turns the camera clockwise about its axis as the photographer behind it sees it, so the horizon in the picture turns
counter-clockwise.
"""

from __future__ import annotations

import numpy as np

from skyoptics.camera.lenses import lens
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import azimuth_elevation, direction
from skyoptics.geometry.directions import CYLINDRICAL, Directions
from skyoptics.units import FloatArray


def aim(azimuth: float, elevation: float, roll: float = 0.0) -> FloatArray:
    """Return the rotation of a camera.

    Parameters
    ----------
    azimuth, elevation : float
        Of the optical axis [rad].
    roll : float
        Clockwise as seen from behind the camera [rad].

    Returns
    -------
    ndarray, shape (3, 3)
        World → camera; rows right, up (both as in the picture), forward. Aimed at the zenith, the top of the picture
        points away from `azimuth`.
    """
    forward = direction(azimuth, elevation)
    right = np.array([np.cos(azimuth), -np.sin(azimuth), 0.0])
    up = direction(azimuth, elevation + np.pi / 2.0)
    cosine, sine = np.cos(roll), np.sin(roll)
    return np.stack([cosine * right - sine * up, sine * right + cosine * up, forward])


def photograph(
    lens_name: str, focal: float, sensor: tuple[float, float], shape: tuple[int, int], rotation: FloatArray
) -> Directions:
    """Return the grid of a camera with a lens.

    Parameters
    ----------
    lens_name : str
        See `skyoptics.camera.lenses`.
    focal : float
        Focal length [m].
    sensor : tuple of float
        Width, height [m]; the picture is fitted to the width, pixels are square.
    shape : tuple of int
        Rows, columns.
    rotation : ndarray, shape (3, 3)
        From `aim`.

    Raises
    ------
    DomainError
        If a rectilinear lens would have to see beyond its widest angle.
    """
    chosen = lens(lens_name)
    scale = focal * shape[1] / sensor[0]
    corner = float(np.hypot(*shape)) / (2.0 * scale)
    theta = np.linspace(0.0, chosen.angle_max, 20001)
    radius = chosen.radius(theta)
    if lens_name == "rectilinear" and corner > radius[-1]:
        raise DomainError(
            f"a rectilinear lens of {focal * 1e3:g} mm would have to see more than 160° across its corners; "
            "take a longer focal length or a fisheye lens (equidistant, equisolid, stereographic, orthographic)"
        )
    widest = float(np.interp(corner * (1.0 + 2.0 / float(np.hypot(*shape))), radius, theta))
    return Directions.radial(shape, rotation, scale, chosen.k, widest)


def panorama(
    width: float, height: float, shape: tuple[int, int], azimuth: float, elevation: float, roll: float
) -> Directions:
    """Return an equirectangular grid: azimuth to the right, elevation upwards.

    Parameters
    ----------
    width, height : float
        Angles covered [rad], at most 2π and π.
    shape : tuple of int
        Rows, columns.
    azimuth, elevation : float
        At the middle of the picture [rad]; rows above the zenith or below the nadir are outside the image.
    roll : float
        About the middle, as for `aim` [rad]; verticals then stand aslant.
    """
    level = np.stack([direction(azimuth, 0.0), direction(azimuth - np.pi / 2.0, 0.0), np.array([0.0, 0.0, 1.0])])
    upright, rolled = aim(azimuth, elevation), aim(azimuth, elevation, roll)
    rotation = level @ upright.T @ rolled
    return Directions.cylindrical(
        shape, rotation, (width / 2.0, -width / 2.0), (elevation + height / 2.0, elevation - height / 2.0)
    )


def polariser(directions: Directions, angle: float, rows: slice = slice(None)) -> FloatArray:
    """Return the position angle of a polariser's axis in front of each pixel's light.

    Parameters
    ----------
    directions : Directions
        From `photograph` or `panorama`.
    angle : float
        Of the axis on the lens, from the top of the picture, clockwise as seen from behind the camera [rad]; for a
        panorama from the vertical.
    rows : slice, optional
        Only these rows.

    Returns
    -------
    ndarray, shape (ny, nx)
        From the direction of growing elevation, clockwise as the observer sees it [rad]. The axis is carried from the
        middle of the picture to each pixel along the great circle between them, so axes at right angles stay so.
    """
    view = directions.vectors(rows)
    if directions.kind == CYLINDRICAL:
        return np.where(np.isnan(view[..., 0]), np.nan, angle)
    right, up, forward = directions.rotation
    axis = np.cos(angle) * up + np.sin(angle) * right
    carried = axis - ((view @ axis) / (1.0 + view @ forward))[..., None] * (view + forward)
    azimuth, elevation = azimuth_elevation(view)
    upwards = direction(azimuth, elevation + np.pi / 2.0)
    sideways = np.stack([np.cos(azimuth), -np.sin(azimuth), np.zeros_like(azimuth)], axis=-1)
    return np.arctan2(np.sum(carried * sideways, axis=-1), np.sum(carried * upwards, axis=-1))
