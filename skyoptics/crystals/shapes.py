"""Crystal shapes: convex polyhedra whose faces come in parallel pairs.

A shape is a set of slabs −b ≤ N·x ≤ a, in axes of its own: z along the c-axis, x along the normal of a prism face. Lengths
are in units of the diameter across corners, so that shapes do not carry a size: in ray optics only absorption knows one.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from itertools import combinations

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.units import ArrayLike, Float32Array, FloatArray

ASPECT_RANGE = (0.01, 100.0)
"""Aspects the tracer is meant for."""

_EDGE = 1e-9
_PATCH = 17


@dataclass(frozen=True, eq=False)
class Shape:
    """A convex crystal as slabs.

    Parameters
    ----------
    normals : ndarray, shape (m, 3)
        Unit normal N of each slab.
    offsets : ndarray, shape (m, 2)
        Distances a and b of its two faces from the origin, along N and against it; a > −b.
    label : str
        For people.

    Raises
    ------
    DomainError
        If the slabs enclose no body, or a face does not belong to it.

    Notes
    -----
    Face 2j is the one of slab j that N points to, face 2j + 1 the opposite one.
    """

    normals: FloatArray
    offsets: FloatArray
    label: str = "crystal"
    faces: tuple[FloatArray, ...] = field(init=False, repr=False)
    """Corners of each face, shape (k, 3), counter-clockwise seen from outside."""

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
            not np.all(np.isfinite(offsets))
            or not np.allclose(length, 1.0, atol=1e-9)
            or np.any(offsets.sum(axis=1) <= 0.0)
        ):
            raise DomainError("a shape needs unit normals and slabs of a thickness above 0")
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
        return float(np.sum(self.face_areas * self.offsets.ravel()) / 3.0)

    @property
    def mean_projected_area(self) -> float:
        """Area across a beam, mean over all orientations: a quarter of the surface (Cauchy 1832; any convex body)."""
        return self.area / 4.0

    def packed_slabs(self) -> Float32Array:
        """Return the slabs as kernels take them, flat (m * 5,): N, a, b; filled up with zeros to a multiple of four slabs."""
        rows = np.concatenate([self.normals, self.offsets], axis=1).astype(np.float32)
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
    size = float(np.abs(distance).max())
    corners = []
    for triple in combinations(range(len(planes)), 3):
        matrix = planes[list(triple)]
        if abs(np.linalg.det(matrix)) < 1e-9:
            continue
        corner = np.linalg.solve(matrix, distance[list(triple)])
        if np.all(planes @ corner <= distance + _EDGE * size):
            corners.append(corner)
    found = np.array(corners).reshape(-1, 3)
    result = []
    for face, normal in enumerate(planes):
        on = found[np.abs(found @ normal - distance[face]) < 10.0 * _EDGE * size] if len(found) else found
        distinct: list[FloatArray] = []
        for corner in on:
            if all(float(np.linalg.norm(corner - other)) > 100.0 * _EDGE * size for other in distinct):
                distinct.append(np.asarray(corner, dtype=np.float64))
        if len(distinct) < 3:
            raise DomainError(f"face {face} does not touch the crystal: its distance from the centre is too large")
        polygon = np.array(distinct)
        centre = polygon.mean(axis=0)
        first = polygon[0] - centre
        second = np.cross(normal, first)
        order = np.argsort(np.arctan2((polygon - centre) @ second, (polygon - centre) @ first))
        result.append(polygon[order])
    return tuple(result)


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
