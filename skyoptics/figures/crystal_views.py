"""Views of a crystal and a ray: perspective, along the c-axis, across the plane of the ray.

A view turns world places (east, north, up; sun at north) into the plane of the sheet. All but the first are parallel
projections: what lies across the line of sight keeps its angles and lengths.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from skyoptics.crystals.shapes import Shape
from skyoptics.figures.crystal_passage import Passage
from skyoptics.units import DEG, BoolArray, FloatArray

DISTANCE = 6.0
"""Of the eye from the crystal in the perspective view [largest extent of the crystal]."""
OUTSIDE = 0.8
"""Length of the ray before and after the crystal [edge of a cube of the crystal's box, or diameter if longer]."""
_PLANE = 1e-6


@dataclass(frozen=True, eq=False)
class View:
    """A view.

    Parameters
    ----------
    name : str
        ``perspective``, ``axis`` or ``plane``.
    turn : ndarray, shape (3, 3)
        World → right, up, towards the eye.
    distance : float
        Of the eye from the origin; infinite for a parallel projection.
    upright : bool
        Whether what is up in the world is up on the sheet, or foreshortened so.
    true : bool
        Whether the angles of the ray are true.
    """

    name: str
    turn: FloatArray
    distance: float
    upright: bool
    true: bool

    def flat(self, points: FloatArray) -> FloatArray:
        """Return where world places, shape (m, 3), lie in the picture, shape (m, 2)."""
        seen = np.atleast_2d(points) @ self.turn.T
        return np.asarray(seen[:, :2] / (1.0 - seen[:, 2:] / self.distance))

    def faces_eye(self, normals: FloatArray, corners: list[FloatArray]) -> BoolArray:
        """Return which faces (world normals and corners) are turned to the eye; one seen edge-on is not."""
        towards = self.turn[2]
        if np.isinf(self.distance):
            return np.asarray(normals @ towards > 1e-9)
        return np.array(
            [
                bool(len(own)) and (self.distance * towards - own[0]) @ normal > 1e-9
                for normal, own in zip(normals, corners, strict=True)
            ]
        )


def extent(shape: Shape) -> float:
    """Return the largest extent of a crystal along an axis of its own."""
    return float(np.ptp(np.concatenate(shape.faces), axis=0).max())


def track(passage: Passage) -> FloatArray:
    """Return the corners of the ray's way, outside parts included, shape (m, 3)."""
    places = [one.place for one in passage.meetings]
    box = np.ptp(np.concatenate(passage.shape.faces), axis=0)
    length = OUTSIDE * max(float(np.cbrt(np.prod(box))), 0.8)
    first, last = passage.meetings[0], passage.meetings[-1]
    return np.array([places[0] - length * first.before, *places, places[-1] + length * last.after])


def views(passage: Passage) -> list[View]:
    """Return the views worth drawing: the last two where they differ and the ray stays in a plane."""
    result = [_perspective(passage), _along_axis(passage)]
    plane = _across_plane(passage)
    if plane is None:
        return result
    if abs(plane.turn[2] @ result[1].turn[2]) > 1.0 - 1e-6:
        axis = result[1]
        return [result[0], View("axis", axis.turn, np.inf, axis.upright, True)]
    return [*result, plane]


def _perspective(passage: Passage) -> View:
    """Return a view from the side, a little from above or below, that shows the ray's bends best."""
    way = track(passage)
    best, top = None, -np.inf
    for azimuth in np.arange(180.0, 361.0, 10.0):
        for height in (16.0, 26.0, -14.0):
            view = _looking(_towards(azimuth, height), "perspective", DISTANCE * extent(passage.shape))
            score = _clarity(view, passage, way) - 0.004 * abs(height) - 0.0006 * abs(azimuth - 250.0)
            score -= 0.05 if height < 0.0 else 0.0
            if score > top:
                best, top = view, score
    assert best is not None
    return best


def _towards(azimuth_deg: float, height_deg: float) -> FloatArray:
    azimuth, height = azimuth_deg * DEG, height_deg * DEG
    return np.array([np.cos(height) * np.sin(azimuth), np.cos(height) * np.cos(azimuth), np.sin(height)])


def _looking(towards: FloatArray, name: str, distance: float = np.inf) -> View:
    """Return the view whose eye lies that way, the zenith up on the sheet."""
    up = np.array([0.0, 0.0, 1.0]) - towards[2] * towards
    up = up / np.linalg.norm(up)
    return View(name, np.stack([np.cross(up, towards), up, towards]), distance, True, False)


def _clarity(view: View, passage: Passage, way: FloatArray) -> float:
    """Return how well a view shows a ray: long pieces, open bends, light from left to right, faces met in sight."""
    flat = view.flat(way)
    steps = np.diff(flat, axis=0)
    length = np.linalg.norm(steps, axis=1)
    full = np.linalg.norm(np.diff(way, axis=0), axis=1)
    if steps[0, 0] < 0.2 * length[0]:
        return -np.inf
    along = steps / np.maximum(length, 1e-12)[:, None]
    bend = np.abs(along[1:, 0] * along[:-1, 1] - along[1:, 1] * along[:-1, 0])
    seen = [abs(view.turn[2] @ one.normal) for one in passage.meetings]
    return float(np.min(length / full) + 0.5 * bend.min() + 0.35 * min(seen) + 0.4 * np.mean(bend))


def _along_axis(passage: Passage) -> View:
    """Return the view along the c-axis, light from left to right where that can be."""
    axis = passage.rotation[:, 2]
    before = passage.meetings[0].before
    if abs(axis[2]) > 0.99:
        towards = axis * np.sign(axis[2])
        right = before - (before @ towards) * towards
        if np.linalg.norm(right) < 1e-6:
            right = np.array([0.0, -1.0, 0.0])
        right = right / np.linalg.norm(right)
        return View("axis", np.stack([right, np.cross(towards, right), towards]), np.inf, False, False)
    sides = [_looking(sign * axis, "axis") for sign in (1.0, -1.0)]
    return max(sides, key=lambda view: float(view.turn[0] @ before))


def _across_plane(passage: Passage) -> View | None:
    """Return the view across the plane the ray stays in; None where it stays in none."""
    ways = np.array([passage.meetings[0].before, *(one.after for one in passage.meetings)])
    normal = np.linalg.svd(ways)[2][2]
    if np.abs(ways @ normal).max() > _PLANE or np.linalg.svd(ways)[1][1] < 1e-6:
        return None
    sides = [_oriented(sign * normal) for sign in (1.0, -1.0)]
    return max(sides, key=lambda view: float(view.turn[0] @ ways[0]))


def _oriented(towards: FloatArray) -> View:
    """Return a view with true angles, the zenith up on the sheet unless it is looked at."""
    if abs(towards[2]) > 0.999:
        right = np.array([0.0, -1.0, 0.0])
        right = right - (right @ towards) * towards
        right = right / np.linalg.norm(right)
        return View("plane", np.stack([right, np.cross(towards, right), towards]), np.inf, False, True)
    view = _looking(towards, "plane")
    return View("plane", view.turn, np.inf, True, True)
