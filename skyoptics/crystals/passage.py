"""One ray through one crystal: where a sequence of faces sends the light, and how much of it gets there.

The crystal stands with world = R · body, R made from at most two free angles:

========  ==========  =====================================================================================
law       free        pose
========  ==========  =====================================================================================
plate     azimuth     c-axis up
parry     azimuth     c-axis level, face 3 up
column    both        c-axis level, turned about it by the spin
lowitz    both        the diagonal y, from edge to edge across the crystal, level; turned about it by the spin
========  ==========  =====================================================================================

These are the poses of `skyoptics.crystals.orientations`; tilt is left out, arcs are drawn for none. With azimuth and spin
even over a turn the law is the same whatever the zero of either. The sun stands at azimuth 0 (north), elevation h.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from skyoptics.crystals.faces import face_labels, face_normal, unfold
from skyoptics.crystals.shapes import Shape
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import direction
from skyoptics.units import ArrayLike, BoolArray, FloatArray

FREE_ANGLES = {"plate": 1, "parry": 1, "column": 2, "lowitz": 2}
"""Free angles of each law: azimuth, then spin."""

POINTS = 96
"""Points on the entry face from which `brightness` follows light."""


def rotations(law: str, azimuth: ArrayLike, spin: ArrayLike = 0.0) -> FloatArray:
    """Return R (world = R · body) of crystals standing by a law.

    Parameters
    ----------
    law : str
        A key of `FREE_ANGLES`.
    azimuth, spin : array_like, broadcastable
        Free angles [rad]; spin is not looked at by laws of one.

    Returns
    -------
    ndarray, shape (..., 3, 3)
    """
    azimuth, spin = np.broadcast_arrays(np.asarray(azimuth, float), np.asarray(spin, float))
    s, c = np.sin(azimuth), np.cos(azimuth)
    u, v = (np.sin(spin), np.cos(spin)) if FREE_ANGLES.get(law) == 2 else (np.zeros_like(s), np.ones_like(s))
    zero, one = np.zeros_like(s), np.ones_like(s)
    if law == "plate":
        rows = [c, -s, zero, s, c, zero, zero, zero, one]
    elif law in ("column", "parry"):
        rows = [s * u, s * v, c, -c * u, -c * v, s, v, -u, zero]
    elif law == "lowitz":
        rows = [c * v, -s, c * u, s * v, c, s * u, -u, zero, v]
    else:
        raise DomainError(f"a law with free angles is one of {', '.join(FREE_ANGLES)}; got {law!r}")
    return np.stack(rows, axis=-1).reshape(*s.shape, 3, 3)


def image(
    sequence: Sequence[int], rotation: FloatArray, sun_elevation: float, index: float
) -> tuple[FloatArray, BoolArray]:
    """Return the direction in which light is seen that took a sequence of faces, and whether it can.

    Parameters
    ----------
    sequence : sequence of int
        Faces in the order met (`skyoptics.crystals.faces`).
    rotation : ndarray, shape (..., 3, 3)
        From `rotations`.
    sun_elevation : float
        [rad]
    index : float
        Refractive index relative to the air.

    Returns
    -------
    view : ndarray, shape (..., 3)
        Unit vectors from the observer, sun at azimuth 0; nan where light cannot leave by the last face.
    possible : ndarray of bool, shape (...)
        The first face is lit, every face is headed for, and the last one lets light out. (Whether the crystal is so long
        and wide that the faces are met in this order is asked by `brightness`.)

    Notes
    -----
    Snell's law as a vector: along a face n k keeps the components of d, across it n k·N = −√(n² − 1 + (d·N)²) on the way
    in (N outwards), and e·N' = √(1 − n² + (n k·N')²) on the way out.
    """
    before = -np.einsum("...ji,j->...i", rotation, direction(0.0, sun_elevation))
    path = unfold(sequence)
    across = before @ path.entry
    possible = across < 0.0
    if len(sequence) == 1:
        after = before @ path.mirror.T
        return -np.einsum("...ij,...j->...i", rotation, after), possible
    inside = before - (across + np.sqrt(index**2 - 1.0 + across**2))[..., None] * path.entry
    travel = inside
    for label in sequence[1:-1]:
        normal = face_normal(label)
        towards = travel @ normal
        possible = possible & (towards > 0.0)
        travel = travel - 2.0 * towards[..., None] * normal
    last = face_normal(sequence[-1])
    towards = travel @ last
    square = 1.0 - index**2 + towards**2
    leaves = square > 0.0
    possible = possible & (towards > 0.0) & leaves
    # parallel faces: the way out is known without the root, which would lose digits near grazing
    out = -across if path.wedge < 1e-6 else np.sqrt(np.where(leaves, square, np.nan))
    after = travel + (out - towards)[..., None] * last
    return -np.einsum("...ij,...j->...i", rotation, after), possible


def brightness(
    shape: Shape, sequence: Sequence[int], rotation: FloatArray, sun_elevation: float, index: float
) -> FloatArray:
    """Return the power a crystal sends along a sequence of faces, per unit of irradiance.

    Parameters
    ----------
    shape : Shape
        With all the faces of the sequence.
    sequence, rotation, sun_elevation, index :
        As in `image`; rotation of shape (m, 3, 3).

    Returns
    -------
    ndarray, shape (m,)
        Area across the beam · share of `POINTS` points of the entry face from which light meets just these faces · Fresnel
        factors of unpolarised light. Meant to tell where an arc is lit, and roughly how well: polarisation between
        faces is left out, and the share comes in steps.
    """
    present = shape.face_areas > 0.0
    labels = [label if there else 0 for label, there in zip(face_labels(shape.face_normals), present, strict=True)]
    missing = [label for label in sequence if label not in labels]
    if missing:
        raise DomainError(f"a {shape.label} has no face {missing[0]}")
    _, possible = image(sequence, rotation, sun_elevation, index)
    result = np.zeros(len(rotation))
    if possible.any():
        before = -np.einsum("...ji,j->...i", rotation[possible], direction(0.0, sun_elevation))
        result[possible] = _power(shape, [labels.index(label) for label in sequence], before, index)
    return result


def _power(shape: Shape, faces: list[int], before: FloatArray, index: float) -> FloatArray:
    """Return the power sent along faces of a shape, light travelling along `before` (m, 3), body axes, which is possible."""
    normals, distances = shape.face_normals, shape.offsets.ravel()
    cosine = -(before @ normals[faces[0]])
    power = np.maximum(cosine, 0.0) * shape.face_areas[faces[0]]
    reflected, inner = _fresnel(np.maximum(cosine, 0.0), index)
    if len(faces) == 1:
        return np.asarray(power * reflected)
    power = power * (1.0 - reflected)
    travel = (before + (cosine - index * inner)[:, None] * normals[faces[0]]) / index
    place = np.broadcast_to(_points(shape.faces[faces[0]]), (len(before), POINTS, 3))
    alive = np.broadcast_to(cosine[:, None] > 0.0, place.shape[:2])
    for step, face in enumerate(faces[1:], start=2):
        speed = travel @ normals.T
        gap = np.maximum(distances - place @ normals.T, 0.0)
        with np.errstate(divide="ignore", invalid="ignore"):
            time = np.where(speed[:, None, :] > 1e-12, gap / speed[:, None, :], np.inf)
        alive = alive & (np.argmin(time, axis=-1) == face)
        far = np.where(alive, time[..., face], 0.0)
        place = place + far[..., None] * travel[:, None, :]
        towards = np.clip(speed[:, face], 0.0, 1.0)
        reflected, _ = _fresnel(towards, 1.0 / index)
        if step == len(faces):
            power = power * (1.0 - reflected)
        else:
            power = power * reflected
            travel = travel - 2.0 * speed[:, face, None] * normals[face]
    return np.asarray(power * alive.mean(axis=1))


def _fresnel(cosine: FloatArray, index: float) -> tuple[FloatArray, FloatArray]:
    """Return the reflected share of unpolarised light and the cosine beyond the face."""
    square = 1.0 - (1.0 - cosine**2) / index**2
    total = square <= 0.0
    inner = np.sqrt(np.where(total, 0.0, square))
    with np.errstate(invalid="ignore"):
        across = (cosine - index * inner) / (cosine + index * inner)
        along = (index * cosine - inner) / (index * cosine + inner)
    return np.where(total, 1.0, 0.5 * (across**2 + along**2)), inner


def _points(corners: FloatArray) -> FloatArray:
    """Return POINTS points evenly on a convex polygon, shape (POINTS, 3)."""
    # two-dimensional golden-ratio sequence (Roberts, Unreasonable Effectiveness of Quasirandom Sequences, 2018, from memory)
    number = np.arange(1, POINTS + 1)
    u, v = (0.5 + 0.7548776662466927 * number) % 1.0, (0.5 + 0.5698402909980532 * number) % 1.0
    first, second = corners[1:-1] - corners[0], corners[2:] - corners[0]
    area = np.linalg.norm(np.cross(first, second), axis=1)
    edges = np.concatenate([[0.0], np.cumsum(area / area.sum())])
    edges[-1] = 1.0
    which = np.searchsorted(edges, u, side="right") - 1
    root = np.sqrt((u - edges[which]) / (edges[which + 1] - edges[which]))
    return np.asarray(corners[0] + (root * (1.0 - v))[:, None] * first[which] + (root * v)[:, None] * second[which])
