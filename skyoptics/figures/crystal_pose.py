"""How a crystal stands that shows a named arc.

The pose sends light to the arc's own place: on a caustic (least deviation) where the arc is one, on a spot where it is a
spot. Of these the one seen nearest to the sun's vertical is taken, among those that shine at least a quarter as bright as
the best.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np

from skyoptics.crystals.arc_feature import Crystals, Feature
from skyoptics.crystals.arc_groups import classes
from skyoptics.crystals.arc_loci import column_fold
from skyoptics.crystals.arc_regions import circle_radius, in_part, inside, spots
from skyoptics.crystals.faces import PRISM, unfold
from skyoptics.crystals.folds import fold
from skyoptics.crystals.passage import FREE_ANGLES, brightness, image, rotations
from skyoptics.crystals.shapes import Shape
from skyoptics.geometry.axes import angle_between, direction
from skyoptics.units import DEG, FloatArray

BRIGHT = 0.25
"""Share of the brightest pose's light that a pose to be drawn must have."""

_SEQUENCES = 12
_SPOT = 1e-6


def best(
    entry: Feature, crystals: Crystals, shape: Shape, sun_elevation: float, index: float
) -> list[tuple[tuple[int, ...], FloatArray]]:
    """Return sequences of faces and poses, shape (3, 3), that send light to a feature's place, the best first.

    Parameters
    ----------
    entry, crystals :
        The feature, and which of its crystals.
    shape : Shape
        Their shape.
    sun_elevation : float
        [rad]
    index : float
        Refractive index of ice relative to the air.
    """
    for candidates in _poses(entry, crystals, sun_elevation, index):
        found: list[tuple[float, float, tuple[int, ...], FloatArray]] = []
        for faces, rotation in candidates:
            view, _ = image(faces, rotation, sun_elevation, index)
            power = brightness(shape, faces, rotation, sun_elevation, index)
            kept = (power > 0.0) & _own(entry, view, sun_elevation, index)
            aside = np.abs(np.arctan2(view[:, 0], view[:, 1]))
            found += [
                (float(power[k]), round(float(aside[k]) / DEG, 1), faces, rotation[k]) for k in np.flatnonzero(kept)
            ]
        if found:
            top = max(power for power, *_ in found)
            bright = [one for one in found if one[0] >= BRIGHT * top]
            bright.sort(key=lambda one: (one[1], -one[0]))
            return [(faces, rotation) for _, _, faces, rotation in bright[:20]]
    return []


def _own(entry: Feature, view: FloatArray, sun_elevation: float, index: float) -> Any:
    """Return which light belongs to the feature."""
    own = in_part(entry.part, view, sun_elevation)
    if entry.kind == "diffuse":
        own = own & inside(entry, view, sun_elevation, index)
    if entry.kind == "spot":
        places = np.concatenate(spots(entry, sun_elevation, index))
        own = own & (np.min(angle_between(view[:, None], places[None]), axis=1) < _SPOT)
    return own


def _poses(
    entry: Feature, crystals: Crystals, sun_elevation: float, index: float
) -> Iterator[list[tuple[tuple[int, ...], FloatArray]]]:
    """Yield, for each effect on light, sequences of faces with poses (m, 3, 3) that may send light to the feature."""
    law = crystals.law
    if entry.kind == "circle":
        yield [(faces, _least(faces, sun_elevation, index)[None]) for faces in crystals.sequences]
        return
    both = FREE_ANGLES[law] == 2
    grid = np.linspace(0.0, 2.0 * np.pi, 180 if both else 720, endpoint=False) + 1e-9
    spins = (np.arange(8) + 0.5) * (np.pi / 4.0) if both else np.zeros(1)
    for alike in classes(law, crystals.sequences):
        if entry.kind == "fold":
            level = law == "column" and max(alike[0]) <= PRISM[-1]
            branches = column_fold(alike, sun_elevation, index) if level else fold(law, alike[0], sun_elevation, index)
            angles = np.concatenate([np.empty((0, 2)), *(branch.angles for branch in branches)])
            angles = angles[:: max(1, len(angles) // 2000)]
        else:
            angles = np.stack(np.meshgrid(grid, spins, indexing="ij"), axis=-1).reshape(-1, 2)
        result = []
        for faces in sorted(alike, key=len)[:_SEQUENCES]:
            if entry.kind == "spot":
                angles = _refined(entry, faces, law, grid, sun_elevation, index)
            rotation = rotations(law, angles[:, 0], angles[:, 1])
            if entry.tilt > 0.0:  # level mirrors would show the subsun
                c, s = np.cos(entry.tilt), np.sin(entry.tilt)
                rotation = np.array([[1.0, 0.0, 0.0], [0.0, c, -s], [0.0, s, c]]) @ rotation
            if len(rotation):
                result.append((faces, rotation))
        yield result


def _refined(
    entry: Feature, faces: tuple[int, ...], law: str, grid: FloatArray, sun_elevation: float, index: float
) -> FloatArray:
    """Return the azimuths, as rows with a spin of 0, whose light is seen at a spot: least deviation, or any."""
    places = np.concatenate(spots(entry, sun_elevation, index))

    def away(azimuth: FloatArray) -> FloatArray:
        view, possible = image(faces, rotations(law, azimuth), sun_elevation, index)
        distance = np.min(angle_between(np.nan_to_num(view)[:, None], places[None]), axis=1)
        return np.where(possible, distance, np.inf)

    azimuth, step = grid, float(grid[1] - grid[0])
    distance = away(azimuth)
    azimuth = azimuth[distance < 0.5 * DEG]
    while len(azimuth) and step > 1e-9 and away(azimuth).max() > _SPOT:
        near = azimuth[:, None] + step * np.linspace(-1.0, 1.0, 21)
        found = away(near.ravel()).reshape(near.shape)
        azimuth = near[np.arange(len(near)), found.argmin(axis=1)]
        step *= 0.2
    return np.stack([azimuth, np.zeros_like(azimuth)], axis=1)


def _least(faces: tuple[int, ...], sun_elevation: float, index: float) -> FloatArray:
    """Return the pose that shows least deviation of a wedge straight above the sun, shape (3, 3)."""
    path = unfold(faces)
    middle = (path.exit - path.entry) / np.linalg.norm(path.exit - path.entry)

    def outside(normal: FloatArray, sign: float) -> FloatArray:
        along = index * (middle - (middle @ normal) * normal)
        return np.asarray(along + sign * np.sqrt(1.0 - along @ along) * normal)

    before, after = outside(path.entry, -1.0), outside(path.exit, 1.0)
    radius = circle_radius(faces, index)
    world = [-direction(0.0, sun_elevation), -direction(0.0, sun_elevation + radius)]
    return np.asarray(_frame(*world) @ _frame(before, after).T)


def _frame(first: FloatArray, second: FloatArray) -> FloatArray:
    """Return right-handed axes: the first direction, the normal of the plane of both, and the third, as columns."""
    normal = np.cross(first, second)
    normal = normal / np.linalg.norm(normal)
    return np.stack([first, normal, np.cross(first, normal)], axis=1)
