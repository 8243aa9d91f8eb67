"""How a camera holds a feature: whether it fits, how much is missing, which focal length would do.

A camera is a lens of `skyoptics.camera.lenses`, a focal length and a sensor as it is held. Aims and longest focal lengths:
`skyoptics.planning.aiming`.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from typing import Protocol

import numpy as np

from skyoptics.camera import frame
from skyoptics.camera.lenses import field_of_view
from skyoptics.errors import DomainError, SkyopticsError
from skyoptics.geometry.axes import angle_between
from skyoptics.geometry.directions import Directions
from skyoptics.planning.aiming import Aim, bounds, image_factor, shortest_focal
from skyoptics.planning.aiming import aim_for as aim_for
from skyoptics.planning.aiming import longest_focal as longest_focal
from skyoptics.planning.answers import Standing
from skyoptics.planning.held import Held, held
from skyoptics.planning.sensors import Sensor
from skyoptics.units import DEG, MM, ArrayLike, FloatArray


@dataclass(frozen=True)
class Camera:
    """A lens on a sensor.

    Parameters
    ----------
    lens : str
        See `skyoptics.camera.lenses`.
    focal : float
        Focal length [m].
    sensor : Sensor
        As it is held and cropped.

    Raises
    ------
    DomainError
        For an unknown lens, a focal length outside 0.5 to 5000 mm, and a rectilinear one that would have to see more than
        160° across its corners.
    """

    lens: str
    focal: float
    sensor: Sensor

    def __post_init__(self) -> None:
        if not 0.5 * MM <= self.focal <= 5000.0 * MM:
            raise DomainError(f"a focal length of {self.focal / MM:g} mm is outside 0.5 to 5000 mm")
        shortest = shortest_focal(self.lens, self.sensor)
        if self.focal < shortest * (1.0 - 1e-9):
            raise DomainError(
                f"a rectilinear lens of {self.focal / MM:g} mm would have to see more than 160° across the corners of this "
                f"sensor; take {math.ceil(shortest / MM * 10.0) / 10.0:g} mm or longer, or a fisheye such as --lens equisolid"
            )

    @property
    def field(self) -> tuple[float, float, float]:
        """Angles of view across width, height and diagonal, through the axis [rad]."""
        sides = self.sensor.width, self.sensor.height, self.sensor.diagonal
        across, upright, corner = (field_of_view(self.lens, self.focal, side) for side in sides)
        return across, upright, corner

    def looking(self, aim: Aim, width_px: int) -> Directions:
        """Return the grid of the camera's picture, pixels square."""
        height_px = max(1, round(width_px * self.sensor.height / self.sensor.width))
        sides = self.sensor.width, self.sensor.height
        return frame.photograph(self.lens, self.focal, sides, (height_px, width_px), aim.rotation)


@dataclass(frozen=True)
class Framing:
    """How a camera holds a feature.

    Parameters
    ----------
    camera : Camera
    aim : Aim
    hold : str
        What was to be held.
    fits : bool
        Whether all of it is in the frame.
    missing : float
        Length of the line it is measured along minus what of it the frame holds [rad]. Above 0 it is the missing part; below
        0, where all fits, so much more of the same line is in the frame.
    span : float
        Length of the line that has to be held [rad].
    longest_focal : float or None
        That holds it, at this aim [m]; None if no lens of this kind does.
    """

    camera: Camera
    aim: Aim
    hold: str
    fits: bool
    missing: float
    span: float
    longest_focal: float | None


class Standable(Protocol):
    """What knows its outline, such as a feature of `skyoptics.planning.features`."""

    def outline(self, sun_azimuth: float, sun_elevation: float, /) -> tuple[FloatArray, FloatArray]:
        """Return azimuth and elevation of its points [rad]."""


def frame_of(camera: Camera, wanted: Held, aim: Aim | str = "best") -> Framing:
    """Return how a camera holds a feature.

    Parameters
    ----------
    camera : Camera
    wanted : Held
        From `skyoptics.planning.held.held`.
    aim : Aim or {"best", "level"}
        "best" allows the longest focal length; "level" looks at the horizon under the feature's middle.

    Returns
    -------
    Framing
    """
    chosen = aim_for(camera.lens, camera.sensor, wanted, aim)
    longest = longest_focal(camera.lens, camera.sensor, wanted.points, chosen)
    fits = _fits(camera, longest)
    return Framing(camera, chosen, wanted.hold, fits, _missing(camera, wanted, chosen, fits), wanted.span, longest)


def image(camera: Camera, aim: Aim, vectors: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Return where directions land, as shares of the frame.

    Parameters
    ----------
    camera : Camera
    aim : Aim
    vectors : array_like, shape (..., 3)
        Unit vectors.

    Returns
    -------
    x, y : ndarray, shape (...)
        From the left and from the top edge; 0 to 1 inside the frame; nan beyond the lens's widest angle.
    """
    own = np.asarray(vectors, dtype=np.float64) @ aim.rotation.T
    k = image_factor(camera.lens, own[..., 2])
    x = 0.5 + camera.focal * k * own[..., 0] / camera.sensor.width
    y = 0.5 - camera.focal * k * own[..., 1] / camera.sensor.height
    return x, y


def fits_standing(
    feature: Standable, camera: Camera, hold: str = "whole", aim: Aim | str = "best"
) -> Callable[[Standing], bool]:
    """Return a test of standings: whether a camera holds the feature then.

    Parameters
    ----------
    feature : Feature
        Of `skyoptics.planning.features`.
    camera, hold, aim :
        As for `frame_of` and `held`.

    Returns
    -------
    callable
        Standing → bool; False too where there is nothing to hold. Answers are remembered.
    """
    turned = isinstance(aim, Aim)

    @cache
    def holds(azimuth: float, elevation: float) -> bool:
        try:
            wanted = held(*feature.outline(azimuth, elevation), azimuth, hold)
        except SkyopticsError:
            return False
        chosen = aim_for(camera.lens, camera.sensor, wanted, aim)
        return _fits(camera, longest_focal(camera.lens, camera.sensor, wanted.points, chosen))

    def fits(standing: Standing) -> bool:
        # unless the camera stands still, the sun's azimuth does not matter
        return holds(standing.sun_azimuth_deg * DEG if turned else 0.0, standing.sun_elevation_deg * DEG)

    return fits


def _fits(camera: Camera, longest: float | None) -> bool:
    """Return whether a camera's focal length is not too long, rounding aside."""
    return longest is not None and camera.focal <= longest * (1.0 + 1e-9)


def _missing(camera: Camera, wanted: Held, aim: Aim, fits: bool) -> float:
    """Return what is missing of a line, or below 0 what more of it there is [rad]."""
    line, needed = wanted.line, wanted.needed
    if wanted.span == 0.0 and not fits:  # a spot: from the edge of the frame to it, straight from the middle
        spot = wanted.points[np.argmin(bounds(camera.lens, camera.sensor, wanted.points @ aim.rotation.T))]
        line = _straight(aim.rotation[2], spot)
        needed = np.ones(len(line), dtype=bool)
    x, y = image(camera, aim, line)
    inside = np.nan_to_num(0.5 - np.maximum(np.abs(x - 0.5), np.abs(y - 0.5)), nan=-0.5)
    first, second = inside[:-1], inside[1:]
    with np.errstate(divide="ignore", invalid="ignore"):
        share = np.where(first >= 0.0, first, second) / np.abs(first - second)
    share = np.where((first >= 0.0) == (second >= 0.0), (first >= 0.0).astype(float), share)
    length = angle_between(line[:-1], line[1:])
    both = needed[:-1] & needed[1:]
    outside = float(np.nansum(np.where(both, (1.0 - share) * length, 0.0)))
    if not fits:
        return outside
    return -float(np.nansum(np.where(both, 0.0, share * length)))


def _straight(start: FloatArray, end: FloatArray) -> FloatArray:
    """Return a great circle's points from one direction to another, shape (m, 3)."""
    apart = float(angle_between(start, end))
    across = end - (end @ start) * start
    norm = float(np.linalg.norm(across))
    if norm < 1e-12:
        across, norm = np.roll(start, 1) - (np.roll(start, 1) @ start) * start, 1.0
    turn = np.linspace(0.0, apart, 2 + round(apart / (0.05 * DEG)))
    return np.cos(turn)[:, None] * start + np.sin(turn)[:, None] * (across / norm)
