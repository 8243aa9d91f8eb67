"""What a preview looks at: the frame and some of what lies around it, or all frames of a panorama."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from skyoptics.camera.lenses import lens
from skyoptics.geometry.axes import angle_between, azimuth_elevation
from skyoptics.geometry.directions import Directions
from skyoptics.planning.aiming import Aim
from skyoptics.planning.framing import Camera
from skyoptics.planning.sensors import Sensor
from skyoptics.units import DEG, MM, FloatArray

AROUND = 1.4
"""Sides of the view ÷ sides of the frame."""
LONG_PX = 1200
"""Longer side of the picture."""

_WIDEST = 72.0 * DEG
"""From the axis to the corner of a rectilinear view: further out it would only be stretched [rad]."""
_STEREOGRAPHIC = 120.0 * DEG


@dataclass(frozen=True)
class View:
    """A camera of its own that a preview is drawn through, and its picture's size."""

    camera: Camera
    aim: Aim
    shape: tuple[int, int]

    @property
    def directions(self) -> Directions:
        """The grid of its pixels."""
        return self.camera.looking(self.aim, self.shape[1])


def around_frame(camera: Camera, aim: Aim) -> View:
    """Return the view of a frame: the same lens on a sensor `AROUND` times as wide and high, less where it would stretch."""
    factor = AROUND
    if camera.lens == "rectilinear":
        corner = camera.sensor.diagonal / (2.0 * camera.focal)
        factor = max(1.0, min(factor, math.tan(_WIDEST) / corner))
    sensor = Sensor(camera.sensor.width * factor, camera.sensor.height * factor)
    return _view(Camera(camera.lens, camera.focal, sensor), aim)


def around_frames(camera: Camera, aims: tuple[Aim, ...]) -> View:
    """Return a stereographic view of several frames: circles stay circles, whichever way the frames look."""
    outlines = [edge(camera, aim) for aim in aims]
    points = np.concatenate(outlines)
    axis = np.mean([aim.rotation[2] for aim in aims], axis=0)
    if np.linalg.norm(axis) < 0.1:
        axis = np.array([0.0, 0.0, 1.0])
    azimuth, elevation = azimuth_elevation(axis)
    middle = Aim(float(azimuth), float(elevation))
    own = points @ middle.rotation.T
    theta = np.minimum(angle_between(points, middle.rotation[2]), _STEREOGRAPHIC)
    radius = lens("stereographic").radius(theta) / np.maximum(np.hypot(own[:, 0], own[:, 1]), 1e-12)
    half = 1.08 * np.abs(radius[:, None] * own[:, :2]).max(axis=0)
    focal = 10.0 * MM
    return _view(Camera("stereographic", focal, Sensor(*(2.0 * focal * half).tolist())), middle)


def edge(camera: Camera, aim: Aim, each: int = 240) -> FloatArray:
    """Return directions along the edge of a frame, closed, shape (4·each + 1, 3).

    Where a fisheye's image ends inside the frame, they are those of its rim.
    """
    turn = np.linspace(-1.0, 1.0, each + 1)[:-1]
    one = np.ones_like(turn)
    across = np.concatenate([turn, one, -turn, -one, [-1.0]]) * camera.sensor.width / (2.0 * camera.focal)
    upright = np.concatenate([one, -turn, -one, turn, [1.0]]) * camera.sensor.height / (2.0 * camera.focal)
    radius = np.hypot(across, upright)
    chosen = lens(camera.lens)
    theta = np.linspace(0.0, chosen.angle_max, 20001)
    angle = np.interp(radius, chosen.radius(theta), theta)
    sine = np.sin(angle) / np.maximum(radius, 1e-12)
    return np.stack([sine * across, sine * upright, np.cos(angle)], axis=-1) @ aim.rotation


def _view(camera: Camera, aim: Aim) -> View:
    """Return a view with `LONG_PX` on its longer side."""
    sensor = camera.sensor
    columns = round(LONG_PX * min(1.0, sensor.width / sensor.height))
    return View(camera, aim, (_rows(sensor, columns), columns))


def _rows(sensor: Sensor, columns: int) -> int:
    """Return the rows of a picture with square pixels."""
    return max(1, round(columns * sensor.height / sensor.width))
