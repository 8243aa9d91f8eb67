"""Which named arc a sequence of faces belongs to.

Two sequences belong together when some symmetry of crystal and law makes their effects on light the same
(`skyoptics.crystals.faces.signature`). A law keeps those of the hexagonal crystal's 24 symmetries that map its set of poses
onto itself, turns as they are, mirrors together with a mirror in the sun's vertical.
"""

from __future__ import annotations

from collections.abc import Sequence
from functools import cache

import numpy as np

from skyoptics.crystals.arc_data import TABLE
from skyoptics.crystals.faces import relabelled, signature, symmetries, unfold
from skyoptics.errors import DomainError, nearest

LAWS = ("random", "plate", "column", "parry", "lowitz")


@cache
def law_symmetries(law: str) -> tuple[tuple[int, ...], tuple[int, ...]]:
    """Return the turns and the mirrors, as places in `symmetries`, that map a law's poses onto themselves.

    Plates keep the c-axis up, Parry crystals face 3; a column may be turned end for end; a Lowitz crystal keeps its spin
    axis, the diagonal y.
    """
    if law not in LAWS:
        raise DomainError(f"an orientation law is one of {', '.join(LAWS)}; got {law!r}{nearest(law, LAWS)}")
    turns: list[int] = []
    mirrors: list[int] = []
    for number, operation in enumerate(symmetries()):
        kept = {
            "plate": operation[2, 2] > 0.5,
            "parry": operation[0, 0] > 0.99,
            "lowitz": abs(operation[1, 1]) > 0.99,
        }.get(law, True)
        if kept:
            (turns if np.linalg.det(operation) > 0.0 else mirrors).append(number)
    return tuple(turns), tuple(mirrors)


@cache
def group_key(law: str, sequence: tuple[int, ...]) -> tuple[float, ...]:
    """Return what all sequences that belong together under a law have in common: the least of their signatures."""
    turns, mirrors = law_symmetries(law)
    operations = symmetries()[list(turns + mirrors)]
    path = unfold(sequence)
    parts = [(operations @ path.mirror @ operations.transpose(0, 2, 1)).reshape(len(operations), 9)]
    if path.wedge > 1e-6:
        parts += [operations @ path.entry, operations @ path.exit]
    rounded = np.round(np.concatenate(parts, axis=1), 5) + 0.0
    return min(map(tuple, rounded.tolist()))


@cache
def moved(sequence: tuple[int, ...], operation: int) -> tuple[int, ...]:
    """Return the faces onto which an operation maps a sequence."""
    return tuple(relabelled(label, operation) for label in sequence)


def candidates(law: str, sequence: Sequence[int]) -> tuple[str, ...]:
    """Return the names of the features whose light takes a sequence of faces.

    Parameters
    ----------
    law : str
        One of `LAWS`.
    sequence : sequence of int
        Faces in the order met, numbered as in `skyoptics.crystals.faces`; of a path code with
        ``labels = face_labels(shape.face_normals)``: ``[labels[face] for face in path_faces(code)]``.

    Returns
    -------
    tuple of str
        Empty for light of no name. Several where the sun's elevation or the place in the sky decides (tangent arcs and
        circumscribed halo): see `skyoptics.crystals.arcs.belongs`.
    """
    faces = tuple(int(label) for label in sequence)
    if 0 in faces:
        return ()
    return _index().get((law, group_key(law, faces)), ())


@cache
def _index() -> dict[tuple[str, tuple[float, ...]], tuple[str, ...]]:
    result: dict[tuple[str, tuple[float, ...]], tuple[str, ...]] = {}
    for entry in TABLE:
        for crystals in entry.crystals if entry.scatterings == 1 else ():
            for sequence in crystals.sequences:
                key = (crystals.law, group_key(crystals.law, sequence))
                if entry.name not in result.get(key, ()):
                    result[key] = (*result.get(key, ()), entry.name)
    return result


def classes(law: str, sequences: Sequence[tuple[int, ...]]) -> list[list[tuple[int, ...]]]:
    """Return sequences and their mirror images sorted by effect on light.

    The sequences of a list act alike at the same free angles, so their light adds up there. Turned faces take the place of
    those given where that makes an effect the same, and every turn that does is kept.
    """
    turns, mirrors = law_symmetries(law)
    given = dict.fromkeys((*sequences, *(moved(faces, number) for number in mirrors for faces in sequences)))
    result: list[list[tuple[int, ...]]] = []
    for sequence in given:
        alternatives = list(dict.fromkeys((sequence, *(moved(sequence, number) for number in turns))))
        for members in result:
            alike = [faces for faces in alternatives if signature(faces) == signature(members[0])]
            if alike:
                members.extend(faces for faces in alike if faces not in members)
                break
        else:
            result.append([faces for faces in alternatives if signature(faces) == signature(sequence)])
    return result
