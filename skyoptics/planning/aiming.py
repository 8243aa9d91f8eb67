"""Aims of a camera, the longest focal length that holds points, and the aim that allows the longest.

For an aim, each point bounds the focal length: in own axes x right, y up, with k(θ) = r / (f sin θ), it lands at f k (x, y), so
a point is in a frame of width w and height h while

    f ≤ min(w / (2 k |x|), h / (2 k |y|)).

The least of these over all points is the longest focal length. The best aim is the one with the largest such length. Features
are alike on both sides of the sun's vertical, and so is an unrolled frame; the best aim is looked for in that plane, by a
scan that brackets every hill and golden sections down to rounding.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from skyoptics.camera import frame
from skyoptics.camera.lenses import lens
from skyoptics.errors import DomainError
from skyoptics.planning.held import Held
from skyoptics.planning.sensors import Sensor
from skyoptics.units import DEG, FloatArray

_SCAN = 1.0 * DEG
_HILLS = 4
_GOLDEN = (math.sqrt(5.0) - 1.0) / 2.0
_ROUNDS = 48


@dataclass(frozen=True)
class Aim:
    """Where the axis of a camera points, and its roll as in `skyoptics.camera.frame` [rad]."""

    azimuth: float
    elevation: float
    roll: float = 0.0

    @property
    def rotation(self) -> FloatArray:
        """World → camera, shape (3, 3)."""
        return frame.aim(self.azimuth, self.elevation, self.roll)


def aim_for(lens_name: str, sensor: Sensor, wanted: Held, aim: Aim | str) -> Aim:
    """Return the aim that a word means; the best one depends on the lens and the sensor, not on the focal length."""
    if isinstance(aim, Aim):
        return aim
    if aim == "level":
        return Aim(wanted.middle, 0.0)
    if aim == "best":
        return best_aim(lens_name, sensor, wanted)
    raise DomainError(f"no aim {aim!r}; there are best, level, or a direction AZ,EL,ROLL in degrees")


def longest_focal(lens_name: str, sensor: Sensor, points: FloatArray, aim: Aim) -> float | None:
    """Return the longest focal length that holds points at an aim [m]; None if none does."""
    longest = float(bounds(lens_name, sensor, points @ aim.rotation.T).min())
    return longest if longest >= max(shortest_focal(lens_name, sensor), 1e-9) else None


def shortest_focal(lens_name: str, sensor: Sensor) -> float:
    """Return the shortest focal length that a lens may have: its corners see no further than its widest angle [m].

    0 for fisheyes, whose image may be a circle inside the frame.
    """
    chosen = lens(lens_name)
    if lens_name != "rectilinear":
        return 0.0
    return sensor.diagonal / 2.0 / float(chosen.radius(np.asarray(chosen.angle_max)))


def best_aim(lens_name: str, sensor: Sensor, wanted: Held) -> Aim:
    """Return the unrolled aim that allows the longest focal length; if no lens of the kind holds it, towards the middle."""
    elevation = np.linspace(-np.pi / 2.0, np.pi / 2.0, round(np.pi / _SCAN) + 1)
    best: tuple[float, Aim] | None = None
    for azimuth in (wanted.middle, float(np.mod(wanted.middle + np.pi, 2.0 * np.pi))):
        level = wanted.points @ frame.aim(azimuth, 0.0).T

        def length(height: float, level: FloatArray = level) -> float:
            return float(_raised(lens_name, sensor, level, np.array([height]))[0])

        # every fourth point brackets a hill; its top is found with all of them
        heights = _raised(lens_name, sensor, level[::4], elevation)
        inner = np.pad(heights, 1, constant_values=-1.0)
        hills = np.flatnonzero((heights >= inner[:-2]) & (heights >= inner[2:]) & (heights > 0.0))
        for hill in hills[np.argsort(-heights[hills], kind="stable")][:_HILLS]:
            low, high = elevation[max(hill - 1, 0)], elevation[min(hill + 1, len(elevation) - 1)]
            top, found = _highest(length, float(low), float(high))
            middle = length(float(elevation[hill]))
            if middle >= found * (1.0 - 1e-13):  # a hill that is round to rounding
                top, found = float(elevation[hill]), middle
            if best is None or found > best[0] * (1.0 + 1e-12):
                best = found, Aim(azimuth, top)
    if best is None or best[0] < shortest_focal(lens_name, sensor):
        height = np.arcsin(np.clip(wanted.points[:, 2], -1.0, 1.0))
        return Aim(wanted.middle, 0.5 * float(height.min() + height.max()))
    return best[1]


def image_factor(lens_name: str, forward: FloatArray) -> FloatArray:
    """Return k = r / (f sin θ) for cosines of the angle from the axis; nan beyond the widest angle."""
    chosen = lens(lens_name)
    theta = np.arccos(np.clip(forward, -1.0, 1.0))
    seen = theta <= chosen.angle_max * (1.0 + 1e-12)
    return np.where(seen, chosen.k(np.where(seen, theta, 0.0)), np.nan)


def bounds(lens_name: str, sensor: Sensor, own: FloatArray) -> FloatArray:
    """Return the longest focal length that holds each point, in own axes (..., 3); 0 beyond the widest angle."""
    k = image_factor(lens_name, own[..., 2])
    with np.errstate(divide="ignore"):
        side = np.minimum(
            sensor.width / (2.0 * k * np.abs(own[..., 0])), sensor.height / (2.0 * k * np.abs(own[..., 1]))
        )
    length: FloatArray = np.nan_to_num(side, nan=0.0, posinf=np.inf)
    return length


def _raised(lens_name: str, sensor: Sensor, level: FloatArray, elevation: FloatArray) -> FloatArray:
    """Return the longest focal length at aims of several elevations, shape (e,); points in the axes of a level camera."""
    right, up, forward = level.T
    cosine, sine = np.cos(elevation)[:, None], np.sin(elevation)[:, None]
    own = np.empty((len(elevation), len(level), 3))
    own[..., 0] = right
    own[..., 1] = up * cosine - forward * sine
    own[..., 2] = forward * cosine + up * sine
    longest: FloatArray = bounds(lens_name, sensor, own).min(axis=1)
    return longest


def _highest(function: Callable[[float], float], low: float, high: float) -> tuple[float, float]:
    """Return the place and height of a hill's top, by golden section."""
    left, right = high - _GOLDEN * (high - low), low + _GOLDEN * (high - low)
    at_left, at_right = function(left), function(right)
    for _ in range(_ROUNDS):
        if at_left < at_right:
            low, left, at_left = left, right, at_right
            right = low + _GOLDEN * (high - low)
            at_right = function(right)
        else:
            high, right, at_right = right, left, at_left
            left = high - _GOLDEN * (high - low)
            at_left = function(left)
    return (left, at_left) if at_left >= at_right else (right, at_right)
