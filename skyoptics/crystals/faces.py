"""Faces of an ice crystal by number, and what a sequence of faces does to light.

Numbers follow Tape, *Atmospheric Halos* (AGU 1994; from memory), in the axes of `skyoptics.crystals.shapes` (z along the
c-axis, x along the normal of a prism face, azimuth in the crystal from x towards y):

===========  =======================================================================
1, 2         basal faces, normals +z and −z
3 … 8        prism faces, normals at azimuth 0°, 60°, …, 300°
13 … 18      pyramid faces of the +z end, above 3 … 8
23 … 28      pyramid faces of the −z end, below 3 … 8
===========  =======================================================================

A sequence of faces is written in the order met: entry, internal reflections, exit; one number alone is reflection from
outside. Because faces are plane, the sequence alone fixes the way out: reflect the crystal in each face met and the light
runs straight through the wedge between the entry face N and the reflected exit face N', after which all the reflections M
act at once. Where N' = −N the wedge is a plate and M alone is left, whatever the entry face was.
"""

from __future__ import annotations

from collections.abc import Sequence
from functools import cache, lru_cache
from typing import NamedTuple

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.units import DEG, ArrayLike, FloatArray

LATTICE_RATIO = 1.629
"""Ratio c/a of the lattice of ice, for the pyramid faces {10-11}: 1.628 (Röttger et al., Acta Cryst. B50, 644 (1994)) to
1.6285 (Goto, Hondoh & Mae, J. Chem. Phys. 93, 1412 (1990)); at 1.629 the wedges are those of the usual list, 28.0° …"""

BASAL = (1, 2)
PRISM = (3, 4, 5, 6, 7, 8)
UPPER_PYRAMID = (13, 14, 15, 16, 17, 18)
LOWER_PYRAMID = (23, 24, 25, 26, 27, 28)

_SAME = 0.5 * DEG


class Unfolded(NamedTuple):
    """What a sequence of faces does: straight through the wedge (entry, exit), then `mirror`."""

    entry: FloatArray
    """Outward normal of the entry face, shape (3,)."""
    exit: FloatArray
    """Outward normal of the exit face, reflected back, shape (3,)."""
    mirror: FloatArray
    """Product of the reflections, shape (3, 3)."""

    @property
    def wedge(self) -> float:
        """Angle between entry and exit face, 0 for parallel ones [rad]."""
        return float(np.pi - np.arccos(np.clip(self.entry @ self.exit, -1.0, 1.0)))


@lru_cache(maxsize=8)
def _normals(ratio: float) -> dict[int, FloatArray]:
    slope = np.arctan(np.sqrt(3.0) / 2.0 / ratio)
    result = {1: np.array([0.0, 0.0, 1.0]), 2: np.array([0.0, 0.0, -1.0])}
    for ring, rise in ((PRISM, 0.0), (UPPER_PYRAMID, slope), (LOWER_PYRAMID, -slope)):
        for j, label in enumerate(ring):
            azimuth = j * np.pi / 3.0
            result[label] = np.array([np.cos(rise) * np.cos(azimuth), np.cos(rise) * np.sin(azimuth), np.sin(rise)])
    for normal in result.values():
        normal.setflags(write=False)
    return result


def face_normal(label: int, ratio: float = LATTICE_RATIO) -> FloatArray:
    """Return the outward normal of a face, shape (3,), in crystal axes.

    Parameters
    ----------
    label : int
        Number of the face.
    ratio : float, optional
        c/a, for pyramid faces.

    Raises
    ------
    DomainError
        If there is no such face.
    """
    known = _normals(ratio)
    if label not in known:
        raise DomainError(f"faces are numbered {', '.join(map(str, known))}; got {label!r}")
    return known[label]


def face_labels(normals: ArrayLike, ratio: float = LATTICE_RATIO) -> tuple[int, ...]:
    """Return the number of each face of a crystal, 0 for a face that has none.

    Parameters
    ----------
    normals : array_like, shape (faces, 3)
        Outward normals, such as `Shape.face_normals`; so a path code's face f becomes `face_labels(...)[f]`.
    ratio : float, optional
        c/a, for pyramid faces; normals may be half a degree off.
    """
    known = _normals(ratio)
    table = np.array(list(known.values()))
    cosines = np.asarray(normals, dtype=np.float64) @ table.T
    best = np.argmax(cosines, axis=1)
    labels = list(known)
    return tuple(
        labels[j] if np.linalg.norm(table[j] - normal) < _SAME else 0
        for j, normal in zip(best, np.asarray(normals, dtype=np.float64), strict=True)
    )


def unfold(sequence: Sequence[int], ratio: float = LATTICE_RATIO) -> Unfolded:
    """Return the wedge and the reflections of a sequence of faces.

    Parameters
    ----------
    sequence : sequence of int
        Faces in the order met; a single one is reflection from outside, the same as a plate with one mirror.
    ratio : float, optional
        c/a, for pyramid faces.
    """
    if not sequence:
        raise DomainError("a sequence of faces names one face at least")
    entry = face_normal(sequence[0], ratio)
    mirror = np.eye(3)
    for label in sequence if len(sequence) == 1 else sequence[1:-1]:
        normal = face_normal(label, ratio)
        mirror = mirror - 2.0 * np.outer(normal, normal @ mirror)
    if len(sequence) == 1:
        return Unfolded(entry, -entry, mirror)
    return Unfolded(entry, mirror.T @ face_normal(sequence[-1], ratio), mirror)


@cache
def signature(sequence: tuple[int, ...]) -> tuple[float, ...]:
    """Return numbers that are equal for sequences of the same effect on light in any one crystal."""
    path = unfold(sequence)
    parts = [path.mirror.ravel()]
    if path.wedge > 1e-6:
        parts += [path.entry, path.exit]
    return tuple(float(x) + 0.0 for x in np.round(np.concatenate(parts), 5))


@cache
def symmetries() -> FloatArray:
    """Return the 24 turns and mirrors that map the hexagonal crystal onto itself, shape (24, 3, 3)."""
    result = []
    for k in range(6):
        cosine, sine = np.cos(k * np.pi / 3.0), np.sin(k * np.pi / 3.0)
        turn = np.array([[cosine, -sine, 0.0], [sine, cosine, 0.0], [0.0, 0.0, 1.0]])
        result += [turn @ np.diag([1.0, a, b]) for a in (1.0, -1.0) for b in (1.0, -1.0)]
    return np.array(result)


@cache
def relabelled(label: int, operation: int) -> int:
    """Return the face onto which an operation of `symmetries` maps a face."""
    return face_labels((symmetries()[operation] @ face_normal(label))[None, :])[0]
