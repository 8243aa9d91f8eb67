"""Loci of arcs: images of one free angle, and the caustics of two that can be written down.

*Curve*: with one free angle every sequence of faces draws a line, which is sampled until its points lie close enough.

*Fold*: with two free angles (azimuth φ, spin ψ) a sequence covers an area of sky, v(φ, ψ). Its light piles up, as an
inverse square root, where the map folds over, i.e. where the Jacobian v · (∂v/∂φ × ∂v/∂ψ) is zero. For crystals with a
level c-axis c the zeros are known; d and e are the directions of travel before and after:

- both refracting faces along c: e·c = d·c (or its negative, where a basal face reflects), so the spin moves the light along
  a circle about c, and it turns back at least deviation, where the light runs symmetrically between the faces. Across c
  this is refraction with Bravais' index √((n² − (d·c)²) / (1 − (d·c)²)).
- one refracting face basal: e·c = E does not depend on the spin, E² = (d·c)² ± (n² − 1), + for light that enters by the
  basal face. The circles of radius arccos E about c have an envelope: e·c = E, e·c' = E', a dash for d/dφ.

Lowitz crystals have no such form: `skyoptics.crystals.folds` finds zeros of any law.

Branches are arrays of unit vectors (m, 3), viewing, with the angles that made them.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import partial
from typing import NamedTuple

import numpy as np

from skyoptics.crystals.faces import BASAL, face_normal, unfold
from skyoptics.crystals.passage import FREE_ANGLES, image, rotations
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import direction
from skyoptics.units import DEG, BoolArray, FloatArray

STEP = 0.09 * DEG
"""Largest distance of neighbouring points of a branch [rad]."""

_END = 1e-7
_TURN = 2.0 * np.pi

Sampled = tuple[FloatArray, BoolArray, FloatArray]
"""View (m, 3), possible (m,), azimuth and spin (m, 2)."""


class Branch(NamedTuple):
    """A connected piece of a locus."""

    view: FloatArray
    """Unit vectors, shape (m, 3)."""
    angles: FloatArray
    """Azimuth and spin of the crystal, shape (m, 2) [rad]."""


def curve(law: str, alike: Sequence[tuple[int, ...]], sun_elevation: float, index: float) -> list[Branch]:
    """Return the image of the free azimuth; of a second free angle the map must not depend.

    Parameters
    ----------
    law : str
        A law of `skyoptics.crystals.passage`.
    alike : sequence of tuple of int
        Sequences of faces of the same effect on light; one that lets light pass is enough.
    sun_elevation : float
        [rad]
    index : float
        Refractive index relative to the air.

    Returns
    -------
    list of Branch
        Neighbouring points at most `STEP` apart.
    """
    if FREE_ANGLES[law] == 2 and unfold(alike[0]).wedge > 1e-6:
        faces = "-".join(map(str, alike[0]))
        raise DomainError(f"with {law} crystals the faces {faces} draw no curve: the spin moves the light")

    def at(azimuth: FloatArray) -> Sampled:
        view, possible = _either(alike, rotations(law, azimuth), sun_elevation, index)
        # what is impossible at one spin may be possible at another
        kept = possible if FREE_ANGLES[law] == 1 else np.isfinite(view[..., 0])
        return view, kept, np.stack([azimuth, np.zeros_like(azimuth)], axis=1)

    return sample(at)


def column_fold(alike: Sequence[tuple[int, ...]], sun_elevation: float, index: float) -> list[Branch]:
    """Return the caustics of column crystals.

    Parameters
    ----------
    alike : sequence of tuple of int
        Sequences of faces of the same effect on light, of which entry and exit enclose 60° along the c-axis, or of which one
        is basal and nothing reflects.
    sun_elevation : float
        [rad]
    index : float
        Refractive index relative to the air.

    Returns
    -------
    list of Branch
        Neighbouring points at most `STEP` apart.
    """
    if alike[0][0] in BASAL or alike[0][-1] in BASAL:
        return [
            branch
            for faces in alike
            for sign in (1.0, -1.0)
            for branch in sample(partial(_envelope, faces, sign, sun_elevation, index))
        ]
    return sample(partial(_least, alike, sun_elevation, index))


def _either(
    alike: Sequence[tuple[int, ...]], rotation: FloatArray, sun_elevation: float, index: float
) -> tuple[FloatArray, BoolArray]:
    """Return the image of the first sequence, and whether any of them is possible."""
    view, possible = image(alike[0], rotation, sun_elevation, index)
    for faces in alike[1:]:
        possible = possible | image(faces, rotation, sun_elevation, index)[1]
    return view, possible


def _least(alike: Sequence[tuple[int, ...]], sun_elevation: float, index: float, azimuth: FloatArray) -> Sampled:
    """Return the symmetrical passage between two prism faces for each azimuth of the c-axis."""
    path = unfold(alike[0])
    upright = rotations("column", azimuth)
    before = -np.einsum("...ji,j->...i", upright, direction(0.0, sun_elevation))
    # inside, the light across c runs along the bisector of -N and N'; outside half the deviation before and after it
    bisector = path.exit - path.entry
    sense = np.sign(np.cross(-path.entry, path.exit)[2])
    square = (index**2 - before[:, 2] ** 2) / np.maximum(1.0 - before[:, 2] ** 2, 1e-300)
    sine = np.sqrt(square) * np.sin(path.wedge / 2.0)
    half = np.arcsin(np.minimum(sine, 1.0)) - path.wedge / 2.0
    wanted = np.arctan2(bisector[1], bisector[0]) + sense * half
    spin = np.arctan2(before[:, 1], before[:, 0]) - wanted
    view, possible = _either(alike, rotations("column", azimuth, spin), sun_elevation, index)
    return view, possible & (sine < 1.0), np.stack([azimuth, spin], axis=1)


def _envelope(sequence: Sequence[int], sign: float, sun_elevation: float, index: float, azimuth: FloatArray) -> Sampled:
    """Return the envelope of the circles about the c-axis, sign giving that of the vertical component of e."""
    before = -direction(0.0, sun_elevation)
    basal_first = sequence[0] in BASAL
    basal = face_normal(sequence[0] if basal_first else sequence[-1])
    frame = rotations("column", azimuth)
    axis = frame @ (-basal if basal_first else basal)  # the way the light runs along c
    turned = np.stack([-axis[:, 1], axis[:, 0], np.zeros_like(azimuth)], axis=1)  # its derivative with azimuth
    along = axis @ before
    square = along**2 + (index**2 - 1.0) * (1.0 if basal_first else -1.0)
    leaving = np.sqrt(np.maximum(square, 1e-300))
    slope = along * (turned @ before) / leaving
    rest = 1.0 - leaving**2 - slope**2
    exists = (square > 0.0) & (rest > 0.0) & (along > 0.0)
    after = leaving[:, None] * axis + slope[:, None] * turned
    after[:, 2] = sign * np.sqrt(np.maximum(rest, 0.0))
    # what refraction at the prism face adds is along its normal, inwards
    shift = after - before
    normal = -(shift - np.sum(shift * axis, axis=1, keepdims=True) * axis)
    body = np.einsum("...ji,...j->...i", frame, normal)
    prism = face_normal(sequence[-1] if basal_first else sequence[0])
    spin = np.arctan2(body[:, 1], body[:, 0]) - np.arctan2(prism[1], prism[0])
    view, possible = image(sequence, rotations("column", azimuth, spin), sun_elevation, index)
    # of the two points of a circle with the same shift across c, one is reached by light through the face from inside out
    reached = np.linalg.norm(view + after, axis=1) < 1e-6
    return view, possible & exists & reached, np.stack([azimuth, spin], axis=1)


def sample(at: Callable[[FloatArray], Sampled]) -> list[Branch]:
    """Return the image of a turn of the azimuth, `at` giving views for azimuths, split until neighbours are near.

    Ends, where the light stops passing, are bracketed to 1e-7 rad of azimuth.
    """
    azimuth = np.linspace(0.0, _TURN, 721)
    view, possible, angles = at(azimuth)
    for _ in range(60):
        width = np.diff(azimuth)
        apart = np.linalg.norm(np.diff(view, axis=0), axis=1)
        both = possible[1:] & possible[:-1]
        split = np.where(both, apart > STEP, (possible[1:] != possible[:-1]) & (width > _END)) & (width > 1e-12)
        if not split.any():
            break
        new = 0.5 * (azimuth[1:] + azimuth[:-1])[split]
        more = at(new)
        azimuth = np.concatenate([azimuth, new])
        order = np.argsort(azimuth)
        azimuth = azimuth[order]
        view = np.concatenate([view, more[0]])[order]
        possible = np.concatenate([possible, more[1]])[order]
        angles = np.concatenate([angles, more[2]])[order]
    return runs(view, angles, possible)


def runs(view: FloatArray, angles: FloatArray, kept: BoolArray) -> list[Branch]:
    """Return the connected runs of kept points, parted where they jump; the first and last are joined where they meet."""
    jump = np.concatenate([[True], np.linalg.norm(np.diff(view, axis=0), axis=1) > 1.1 * STEP])
    label = np.cumsum(jump | ~kept)
    branches = []
    for number in np.unique(label[kept]):
        piece = (label == number) & kept
        branches.append(Branch(view[piece], angles[piece]))
    if len(branches) > 1 and np.linalg.norm(branches[0].view[0] - branches[-1].view[-1]) <= STEP:
        last, first = branches.pop(), branches[0]
        branches[0] = Branch(np.concatenate([last.view, first.view]), np.concatenate([last.angles, first.angles]))
    return [branch for branch in branches if len(branch.view) > 1]
