"""From the path of light to the name of an arc: tables by which a tracer sorts what leaves a crystal.

Entry face, product of the reflections inside and exit face fix what a path does to light (`skyoptics.crystals.faces`), so
a path is sorted by a finite automaton: its state is the product so far. Reflections in prism and basal faces make 12
products. Those in pyramid faces make ever new ones; products of more than `PYRAMID_REFLECTIONS` of them fall into one last
state, whose light has no name. In pyramids with plane tops that is below 0.1 % of all light.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np

from skyoptics.crystals.arc_data import TABLE
from skyoptics.crystals.arc_feature import PARTS, Feature
from skyoptics.crystals.arc_groups import LAWS, law_symmetries, moved
from skyoptics.crystals.arc_regions import in_part
from skyoptics.crystals.arcs import goes_by_name
from skyoptics.crystals.faces import face_labels, face_normal, unfold
from skyoptics.kernels.lanes import PATH_FACES, path_faces
from skyoptics.units import DEG, ArrayLike, FloatArray

OTHER = "other"
"""Name of light that belongs to no named arc."""
PYRAMID_REFLECTIONS = 2
"""Reflections in pyramid faces that are followed, those that undo one another not counted. With 1 there are 84 products, and
up to 0.8 % of the light of truncated bipyramids loses a name (subsun of plates at a high sun); with 2 there are 444, and it is
0.08 % at most; with 3 there are five times as many."""


@dataclass(frozen=True, eq=False)
class Sorter:
    """Tables for `skyoptics.kernels.grouping`.

    Parameters
    ----------
    names : tuple of str
        Name of each group; the first is `OTHER`.
    step : ndarray of uint16, shape (states, faces)
        State after a reflection; 0 before the first.
    table : ndarray of uint8, shape (faces, states, faces)
        Group of light that entered by the first face and leaves by the last.
    outside : ndarray of uint8, shape (faces,)
        Group of what a face reflects from outside.
    part : ndarray of int32, shape (names,)
        Which test of `skyoptics.kernels.sorting.in_part` a group's light must pass.
    otherwise : ndarray of int32, shape (names,)
        Group of the light that does not.
    labels : tuple of int
        Number of each face (`skyoptics.crystals.faces`), 0 for one that has none.
    """

    names: tuple[str, ...]
    step: Any
    table: Any
    outside: Any
    part: Any
    otherwise: Any
    labels: tuple[int, ...]


def sorter(normals: ArrayLike, law: str, sun_elevation: float, index: float, tilt: float = 0.0) -> Sorter:
    """Return what sorts the light of a kind of crystal.

    Parameters
    ----------
    normals : array_like, shape (faces, 3)
        Outward normals, `Shape.face_normals`.
    law : str
        Name of the orientation law; one without named arcs sorts all light under `OTHER`.
    sun_elevation : float
        Where light of the same faces has several names, it may decide [rad].
    index : float
        Refractive index, for the same.
    tilt : float, optional
        Spread of tilts, for the same [rad].

    Returns
    -------
    Sorter
        Kept: the same call returns the same object.
    """
    labels = face_labels(normals)
    return _sorter(labels, law, round(sun_elevation / (1e-6 * DEG)) * 1e-6 * DEG, index, tilt)


@lru_cache(maxsize=64)
def _sorter(labels: tuple[int, ...], law: str, sun_elevation: float, index: float, tilt: float) -> Sorter:
    matrices, step = _automaton(labels)
    states, faces = step.shape
    found = np.zeros((faces, states, faces), dtype=np.int64)
    outside = np.zeros(faces, dtype=np.int64)
    named = [
        entry
        for entry in TABLE
        if entry.scatterings == 1 and goes_by_name(entry, sun_elevation, index, tilt) and law in LAWS
    ]
    used: list[Feature] = []
    for entry in named:
        for crystals in entry.crystals:
            if crystals.law != law:
                continue
            hit, mirrored = _paths(labels, matrices, law, crystals.sequences)
            if entry not in used:
                used.append(entry)
            bits = 1 << used.index(entry)
            found[hit] |= bits
            outside[mirrored] |= bits
    names, part, otherwise = [OTHER], [0], [0]
    masks = np.union1d(found, outside)
    numbers = np.zeros(len(masks), dtype=np.uint8)
    for place, mask in enumerate(masks.tolist()):
        numbers[place] = _chain([used[k] for k in range(len(used)) if mask >> k & 1], names, part, otherwise)
    return Sorter(
        tuple(names),
        step,
        numbers[np.searchsorted(masks, found)],
        numbers[np.searchsorted(masks, outside)],
        np.array(part, dtype=np.int32),
        np.array(otherwise, dtype=np.int32),
        labels,
    )


def sort_codes(arcs: Sorter, codes: ArrayLike, views: ArrayLike, sun: ArrayLike) -> Any:
    """Return the groups of light by path codes, as a tracer finds them while it follows the light.

    Parameters
    ----------
    arcs : Sorter
        Of the crystals' faces.
    codes : array_like of int, shape (m,)
        Path codes (`skyoptics.kernels.lanes.path_code`).
    views : array_like, shape (m, 3)
        Viewing directions, world: opposite to travel.
    sun : array_like, shape (3,)
        Towards the source, world.

    Returns
    -------
    ndarray of int64, shape (m,)
        Places in `Sorter.names`; 0 where the code does not hold the whole path (`LONGER`), which a tracer may know by name.
    """
    found, which = np.unique(np.asarray(codes, dtype=np.int64), return_inverse=True)
    groups = np.array([_group(arcs, int(code)) for code in found], dtype=np.int64)[which]
    east, north, up = np.asarray(sun, dtype=np.float64)
    elevation = float(np.arcsin(np.clip(up, -1.0, 1.0)))
    turned = np.array(views, dtype=np.float64)
    if np.hypot(east, north) > 0.0:  # turn the sun to azimuth 0
        turned[:, :2] = turned[:, :2] @ np.array([[north, east], [-east, north]]) / np.hypot(east, north)
    for _ in range(len(arcs.names)):
        leaves = np.zeros(len(groups), dtype=bool)
        for number, part in enumerate(PARTS[1:], start=1):
            tested = np.flatnonzero(arcs.part[groups] == number)
            leaves[tested] = ~in_part(part, turned[tested], elevation)
        if not leaves.any():
            break
        groups[leaves] = arcs.otherwise[groups[leaves]]
    return groups


def describe(arcs: Sorter, code: int) -> str:
    """Return the faces of a path code by their numbers, as in ``3-5``; "?" stands for a face that has none."""
    faces = path_faces(code)
    if faces is None:
        return f"more than {PATH_FACES} faces"
    return "-".join(str(arcs.labels[face] or "?") for face in faces)


def _group(arcs: Sorter, code: int) -> int:
    faces = path_faces(code)
    if not faces:
        return 0
    if len(faces) == 1:
        return int(arcs.outside[faces[0]])
    state = 0
    for face in faces[1:-1]:
        state = int(arcs.step[state, face])
    return int(arcs.table[faces[0], state, faces[-1]])


def _chain(features: list[Feature], names: list[str], part: list[int], otherwise: list[int]) -> int:
    """Return the group of light that several features may claim: those with a test first, then the first without one."""
    tested = [entry for entry in features if entry.part != "all"]
    plain = [entry for entry in features if entry.part == "all"]
    last = 0
    for entry in [*plain[:1], *reversed(tested)]:
        number = PARTS.index(entry.part)
        rest = 0 if number == 0 else last
        known = [k for k, name in enumerate(names) if name == entry.name and otherwise[k] == rest]
        if not known:
            names.append(entry.name)
            part.append(number)
            otherwise.append(rest)
        last = known[0] if known else len(names) - 1
    return last


@lru_cache(maxsize=16)
def _automaton(labels: tuple[int, ...]) -> tuple[FloatArray, Any]:
    """Return products of reflections, shape (states, 3, 3), the last all nan, and the table of steps (states, faces)."""
    mirrors: list[FloatArray | None] = []
    for label in labels:
        normal = face_normal(label) if label else None
        mirrors.append(None if normal is None else np.eye(3) - 2.0 * np.outer(normal, normal))
    matrices, depth = [np.eye(3)], [0]
    places = {_rounded(matrices[0]): 0}
    rows: list[list[int]] = []
    while len(rows) < len(matrices):
        here = len(rows)
        row = []
        for label, mirror in zip(labels, mirrors, strict=True):
            pyramids = depth[here] + (label >= 13)
            if mirror is None or (pyramids > PYRAMID_REFLECTIONS and _rounded(mirror @ matrices[here]) not in places):
                row.append(-1)
                continue
            product = mirror @ matrices[here]
            key = _rounded(product)
            if key not in places:
                places[key] = len(matrices)
                matrices.append(product)
                depth.append(pyramids)
            row.append(places[key])
        rows.append(row)
    lost = len(matrices)
    step = np.array([*rows, [lost] * len(labels)])
    step[step < 0] = lost
    return np.array([*matrices, np.full((3, 3), np.nan)]), step.astype(np.uint16)


def _paths(
    labels: tuple[int, ...], matrices: FloatArray, law: str, sequences: tuple[tuple[int, ...], ...]
) -> tuple[Any, Any]:
    """Return which (entry face, state, exit face) and which outside reflections act as sequences do, as bool arrays."""
    count = len(labels)
    normals = np.array([face_normal(label) if label else np.full(3, np.nan) for label in labels])
    hit = np.zeros((count, len(matrices), count), dtype=bool)
    outside = np.zeros(count, dtype=bool)
    known = {_rounded(matrix): state for state, matrix in enumerate(matrices[:-1])}
    turns, mirrors = law_symmetries(law)
    seen: set[tuple[Any, ...]] = set()
    for sequence in sequences:
        for operation in turns + mirrors:
            path = unfold(moved(sequence, operation))
            plate = path.wedge < 1e-6
            key = (_rounded(path.mirror), *(() if plate else (_rounded(path.entry), _rounded(path.exit))))
            if key in seen:
                continue
            seen.add(key)
            state = known.get(_rounded(path.mirror))
            if state is not None:
                back = normals @ matrices[state]  # exit faces reflected back, Mᵀ N
                if plate:
                    hit[:, state] |= np.linalg.norm(normals[:, None] + back[None], axis=2) < 1e-6
                else:
                    enters = np.linalg.norm(normals - path.entry, axis=1) < 1e-6
                    leaves = np.linalg.norm(back - path.exit, axis=1) < 1e-6
                    hit[:, state] |= enters[:, None] & leaves[None]
            if plate:
                single = np.eye(3) - 2.0 * normals[:, :, None] * normals[:, None, :]
                outside |= np.linalg.norm(single - path.mirror, axis=(1, 2)) < 1e-6
    return hit, outside


def _rounded(values: ArrayLike) -> tuple[float, ...]:
    return tuple(float(value) + 0.0 for value in np.round(np.asarray(values).ravel(), 6))
