"""Crystal shapes: convex polyhedra whose faces come in parallel pairs.

A shape is a set of slabs −b ≤ N·x ≤ a, in axes of its own: z along the c-axis, x along the normal of a prism face. Lengths
are in units of the diameter across corners, so that shapes do not carry a size: in ray optics only absorption knows one.
Where one face of a pair is absent (a pyramid on one end, a triangular prism) its distance is infinite.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cache
from itertools import combinations
from typing import NamedTuple

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.units import ArrayLike, Float32Array, FloatArray, IntArray

ASPECT_RANGE = (0.01, 100.0)
"""Aspects the tracer is meant for."""

ABSENT = 1e6
"""Distance that stands for an absent face where a finite number is needed: rays never get so far."""

_EDGE = 1e-9
_PARALLEL = 1e-9


class Edge(NamedTuple):
    """An edge of a crystal."""

    corners: FloatArray
    """Its two ends, shape (2, 3)."""
    faces: tuple[int, ...]
    """The faces that meet in it: two, unless the shape does not close."""


@dataclass(frozen=True, eq=False)
class Shape:
    """A convex crystal as slabs.

    Parameters
    ----------
    normals : ndarray, shape (m, 3)
        Unit normal N of each slab.
    offsets : ndarray, shape (m, 2)
        Distances a and b of its two faces from the origin, along N and against it; a > −b. Infinite for a face that is
        absent; at most one of the two may be.
    label : str
        For people.

    Raises
    ------
    DomainError
        If the slabs enclose no body or leave it open, or a face does not belong to it.

    Notes
    -----
    Face 2j is the one of slab j that N points to, face 2j + 1 the opposite one.
    """

    normals: FloatArray
    offsets: FloatArray
    label: str = "crystal"
    faces: tuple[FloatArray, ...] = field(init=False, repr=False)
    """Corners of each face, shape (k, 3), counter-clockwise seen from outside; k = 0 for an absent face."""

    def __post_init__(self) -> None:
        normals = np.array(self.normals, dtype=np.float64)
        offsets = np.array(self.offsets, dtype=np.float64)
        if normals.ndim != 2 or normals.shape[1] != 3 or offsets.shape != (len(normals), 2) or len(normals) < 3:
            raise DomainError(
                f"a shape needs normals (m, 3) and offsets (m, 2), m >= 3; got {normals.shape}, {offsets.shape}"
            )
        if len(normals) > 15:
            raise DomainError(
                f"a shape has at most 15 slabs (30 faces, 5 bits each in a path code); got {len(normals)}"
            )
        length = np.linalg.norm(normals, axis=1)
        if (
            np.any(np.isnan(offsets) | np.isneginf(offsets))
            or not np.allclose(length, 1.0, atol=1e-9)
            or np.any(offsets.sum(axis=1) <= 0.0)
        ):
            raise DomainError("a shape needs unit normals and slabs of a thickness above 0")
        if np.any(np.all(np.isinf(offsets), axis=1)):
            raise DomainError("both faces of a slab are absent; leave the slab out")
        for array in (normals, offsets):
            array.setflags(write=False)
        object.__setattr__(self, "normals", normals)
        object.__setattr__(self, "offsets", offsets)
        object.__setattr__(self, "faces", _faces(normals, offsets))

    @property
    def face_normals(self) -> FloatArray:
        """Outward normals, shape (2m, 3)."""
        return np.stack([self.normals, -self.normals], axis=1).reshape(-1, 3)

    @property
    def face_areas(self) -> FloatArray:
        """Areas, shape (2m,)."""
        return np.array(
            [np.sum(_area_vector(corners) * n) for corners, n in zip(self.faces, self.face_normals, strict=True)]
        )

    @property
    def area(self) -> float:
        """Surface area."""
        return float(self.face_areas.sum())

    @property
    def volume(self) -> float:
        """Volume: a third of the sum of face area times distance from the origin."""
        distance = self.offsets.ravel()
        return float(np.sum(self.face_areas * np.where(np.isinf(distance), 0.0, distance)) / 3.0)

    @property
    def mean_projected_area(self) -> float:
        """Area across a beam, mean over all orientations: a quarter of the surface (Cauchy 1832; any convex body)."""
        return self.area / 4.0

    @property
    def edges(self) -> tuple[Edge, ...]:
        """Edges, each once, with the faces that meet in them."""
        found: dict[tuple[bytes, bytes], tuple[FloatArray, list[int]]] = {}
        for face, corners in enumerate(self.faces):
            for first, second in zip(corners, np.roll(corners, -1, axis=0), strict=True):
                one, other = sorted((first.tobytes(), second.tobytes()))  # faces share their corners to the bit
                found.setdefault((one, other), (np.array([first, second]), []))[1].append(face)
        return tuple(Edge(ends, tuple(faces)) for ends, faces in found.values())

    def packed_slabs(self) -> Float32Array:
        """Return the slabs as kernels take them, flat (m * 5,): N, a, b; filled up with zeros to a multiple of four slabs.

        An absent face gets the distance `ABSENT`.
        """
        offsets = np.where(np.isinf(self.offsets), ABSENT, self.offsets)
        rows = np.concatenate([self.normals, offsets], axis=1).astype(np.float32)
        return np.concatenate([rows, np.zeros((-len(rows) % 4, 5), dtype=np.float32)]).ravel()

    def packed_patches(self) -> Float32Array:
        """Return the surface cut into parallelograms and triangles, flat (count * 17,).

        N · area (3), corner (3), two edges (6), N (3), 1 for a triangle else 0, face.
        """
        rows = []
        for face, (corners, normal) in enumerate(zip(self.faces, self.face_normals, strict=True)):
            for corner, first, second, triangle in _patches(corners):
                area = np.linalg.norm(np.cross(first, second)) * (0.5 if triangle else 1.0)
                rows.append([*(normal * area), *corner, *first, *second, *normal, float(triangle), float(face)])
        return np.array(rows, dtype=np.float32).ravel()


def hexagonal_prism(aspect: float, face_distances: ArrayLike | None = None) -> Shape:
    """Return a hexagonal prism of length `aspect` and diameter across corners 1.

    Parameters
    ----------
    aspect : float
        Length / diameter across corners: below 1 a plate, above 1 a column.
    face_distances : array_like, shape (6,), optional
        Factors on the distances of the side faces from the c-axis, around the crystal; default all 1, a regular hexagon.

    Returns
    -------
    Shape
        Slabs 0 to 2: side faces, normals at 0°, 60°, 120° from x; slab 3: basal faces.

    Raises
    ------
    DomainError
        If the aspect is outside `ASPECT_RANGE`, or a side face is cut off altogether.
    """
    low, high = ASPECT_RANGE
    if not low <= aspect <= high:
        raise DomainError(
            f"aspect (length / diameter across corners) of a crystal is {low:g} to {high:g}; got {aspect:g}"
        )
    angle = np.arange(3) * np.pi / 3.0
    normals = np.array([[np.cos(a), np.sin(a), 0.0] for a in angle] + [[0.0, 0.0, 1.0]])
    factors = np.ones(6) if face_distances is None else np.asarray(face_distances, dtype=np.float64)
    if factors.shape != (6,):
        raise DomainError(f"face distances of a hexagonal prism are six factors; got an array of shape {factors.shape}")
    side = np.sqrt(3.0) / 4.0 * factors
    offsets = np.array([[side[j], side[j + 3]] for j in range(3)] + [[aspect / 2.0, aspect / 2.0]])
    return Shape(normals, offsets, f"hexagonal prism, aspect {aspect:g}")


def _faces(normals: FloatArray, offsets: FloatArray) -> tuple[FloatArray, ...]:
    """Return the corners of each face, by trying all triples of planes."""
    planes = np.stack([normals, -normals], axis=1).reshape(-1, 3)
    distance = offsets.ravel()
    present = np.flatnonzero(np.isfinite(distance))
    _check_closed(planes[present])
    size = float(np.abs(distance[present]).max())
    triples = present[_triples(len(present))]
    triples = triples[np.abs(np.linalg.det(planes[triples])) >= _PARALLEL]
    found = np.linalg.solve(planes[triples], distance[triples][..., None])[..., 0]
    found = found[np.all(found @ planes[present].T <= distance[present] + _EDGE * size, axis=1)]
    # where more than three planes meet a corner is found several times: the first one stays
    apart = np.linalg.norm(found[:, None, :] - found[None, :, :], axis=-1)
    found = found[~np.any(np.tril(apart <= 100.0 * _EDGE * size, -1), axis=1)]
    polygons = [found[np.abs(found @ planes[face] - distance[face]) < 10.0 * _EDGE * size] for face in present]
    for face, polygon in zip(present, polygons, strict=True):
        if len(polygon) < 3:
            raise DomainError(f"face {face} does not touch the crystal: its distance from the centre is too large")
    firsts = np.array([polygon[0] - polygon.mean(axis=0) for polygon in polygons])
    seconds = np.cross(planes[present], firsts)
    result = [np.zeros((0, 3))] * len(planes)
    for face, polygon, first, second in zip(present, polygons, firsts, seconds, strict=True):
        spokes = polygon - polygon.mean(axis=0)
        result[face] = polygon[np.argsort(np.arctan2(spokes @ second, spokes @ first))]
    return tuple(result)


@cache
def _triples(count: int) -> IntArray:
    """Return all triples of numbers below `count`, shape (m, 3)."""
    return np.array(list(combinations(range(count), 3)))


def _check_closed(normals: FloatArray) -> None:
    """Raise a DomainError if planes with these outward normals (k, 3) leave a way out to infinity.

    Directions that no face stops form a cone. If it holds a whole line the normals lie in a plane; else it has an edge,
    along which two faces run.
    """
    first, second = np.triu_indices(len(normals), 1)
    along = np.cross(normals[first], normals[second])
    length = np.linalg.norm(along, axis=1)
    along = along[length > _PARALLEL] / length[length > _PARALLEL, None]
    along = np.concatenate([along, -along])
    free = along[np.all(along @ normals.T <= _PARALLEL, axis=1)]
    if len(free) or not len(along):
        x, y, z = (free[0] if len(free) else np.array([0.0, 0.0, 1.0])) + 0.0
        raise DomainError(
            f"the faces do not close: the crystal is open towards ({x:.3g}, {y:.3g}, {z:.3g}); give a face on that side a "
            "finite distance, or add one"
        )


def _area_vector(corners: FloatArray) -> FloatArray:
    """Return normal · area of a plane polygon."""
    return np.asarray(0.5 * np.sum(np.cross(corners, np.roll(corners, -1, axis=0)), axis=0))


def _patches(corners: FloatArray) -> list[tuple[FloatArray, FloatArray, FloatArray, bool]]:
    """Cut a convex polygon: a centrally symmetric quadrilateral or hexagon into parallelograms, others into triangles."""
    edges = np.roll(corners, -1, axis=0) - corners
    count = len(corners)
    half = count // 2
    if count in (4, 6) and np.allclose(edges[:half], -edges[half:], atol=1e-12):
        a, b = edges[0], edges[1]
        if count == 4:
            return [(corners[0], a, b, False)]
        c = edges[2]
        return [(corners[0], a, b, False), (corners[0] + b, a, c, False), (corners[0], b, c, False)]
    return [(corners[0], corners[k] - corners[0], corners[k + 1] - corners[0], True) for k in range(1, count - 1)]
