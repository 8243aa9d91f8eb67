"""Named halo arcs as geometry: where they stand, when they exist, what makes them.

::

    arcs.names()
    azimuth, elevation = arcs.locus("circumzenithal", sun_elevation=20 * DEG, index=1.31)
    arcs.feature("wegener").told_apart

Azimuth is counted from the sun, clockwise seen from above. Loci are those of a point sun and crystals without tilt. A curve
or a fold is drawn where its light passes the typical crystal of the table, down to `FAINTEST` of the brightest point.
"""

from __future__ import annotations

from functools import lru_cache
from itertools import pairwise

import numpy as np

from skyoptics.crystals import habits
from skyoptics.crystals.arc_data import TABLE
from skyoptics.crystals.arc_feature import PILLAR_FROM, Crystals, Feature
from skyoptics.crystals.arc_groups import classes
from skyoptics.crystals.arc_loci import STEP, Branch, column_fold, curve, runs
from skyoptics.crystals.arc_regions import circle, in_part, inside, outline, spots, tangent_join
from skyoptics.crystals.faces import PRISM, unfold
from skyoptics.crystals.folds import fold
from skyoptics.crystals.passage import FREE_ANGLES, brightness, rotations
from skyoptics.crystals.shapes import Shape, hexagonal_prism
from skyoptics.errors import DomainError, nearest
from skyoptics.geometry.axes import direction
from skyoptics.units import DEG, ArrayLike, BoolArray, FloatArray

FAINTEST = 1e-4
"""Brightness along a curve or fold, relative to its brightest point, below which it is not drawn."""

SHORTEST = 0.5 * DEG
"""Branches shorter than this are not drawn [rad]."""

_SPINS = 3
_BEADS = 300
_HOLE = 12
_REPEAT = 50


def names() -> tuple[str, ...]:
    """Return the names of all features."""
    return tuple(entry.name for entry in TABLE)


def feature(name: str) -> Feature:
    """Return what is on record about a feature.

    Raises
    ------
    DomainError
        If there is no feature of that name; the text gives the nearest one.
    """
    for entry in TABLE:
        if entry.name == name:
            return entry
    raise DomainError(
        f"no halo feature is called {name!r}{nearest(name, names())} (skyoptics.crystals.arcs.names() lists all)"
    )


def exists(name: str, sun_elevation: float, index: float) -> bool:
    """Return whether a feature exists; arguments as in `locus`."""
    return len(locus(name, sun_elevation, index)[0]) > 0


def locus(name: str, sun_elevation: float, index: float) -> tuple[FloatArray, FloatArray]:
    """Return where a feature stands.

    Parameters
    ----------
    name : str
        One of `names`.
    sun_elevation : float
        −π/2 to π/2 [rad].
    index : float
        Refractive index of ice relative to the air, above 1 and at most 2.

    Returns
    -------
    azimuth, elevation : ndarray, shape (m,)
        Azimuth from the sun in (−π, π], positive clockwise seen from above; elevation [rad]. Neighbouring points are at
        most 0.1° apart, branches are parted by nan; a spot is a branch of one point, a diffuse region its closed outline.
        Empty where the feature does not exist.

    Raises
    ------
    DomainError
        If the name is unknown or a number is out of range.
    """
    entry = feature(name)
    if not -np.pi / 2.0 <= sun_elevation <= np.pi / 2.0:
        raise DomainError(f"the sun's elevation is -90 to 90 degrees; got {sun_elevation / DEG:g}")
    if not 1.0 < index <= 2.0:
        raise DomainError(f"the index of ice relative to the air is above 1 and at most 2; got {index:g}")
    azimuth, elevation = _locus(entry.name, float(sun_elevation), float(index))
    return azimuth.copy(), elevation.copy()


def belongs(
    name: str, azimuth: ArrayLike, elevation: ArrayLike, sun_elevation: float, index: float, tilt: float = 0.0
) -> BoolArray:
    """Return which light that takes a feature's faces counts as the feature's own.

    Parameters
    ----------
    name : str
        One of `names`.
    azimuth, elevation : array_like
        Where the light is seen, azimuth from the sun [rad].
    sun_elevation, index :
        As in `locus`.
    tilt : float, optional
        Tilt spread of the crystals [rad].

    Returns
    -------
    ndarray of bool
        All true for most features. The tangent arcs and the circumscribed halo share their faces: the sun's elevation
        decides between them, then whether light was turned upwards or downwards. Subsun and sun pillar are told apart by
        the tilt. Of the diffuse arcs only light near the anthelic point counts.
    """
    entry = feature(name)
    view = direction(azimuth, elevation)
    if not goes_by_name(entry, sun_elevation, index, tilt):
        return np.zeros(view.shape[:-1], dtype=bool)
    return in_part(entry.part, view, sun_elevation)


def goes_by_name(entry: Feature, sun_elevation: float, index: float, tilt: float = 0.0) -> bool:
    """Return whether light of a feature's faces goes by its name at all: the sun's elevation and the tilt decide.

    Parameters
    ----------
    entry : Feature
    sun_elevation, index, tilt :
        As in `belongs`.
    """
    pillar = tilt >= PILLAR_FROM
    by_tilt = {"subsun": not pillar, "sun_pillar": pillar}.get(entry.name, True)
    return by_tilt and _named_so(entry, sun_elevation, index)


def within(name: str, azimuth: ArrayLike, elevation: ArrayLike, sun_elevation: float, index: float) -> BoolArray:
    """Return which directions lie in the region of a diffuse feature; arguments as in `belongs`.

    Raises
    ------
    DomainError
        If the feature is not diffuse.
    """
    entry = feature(name)
    if entry.kind != "diffuse":
        raise DomainError(f"{name} is a {entry.kind} and has no region; use locus")
    return inside(entry, direction(azimuth, elevation), sun_elevation, index)


@lru_cache(maxsize=512)
def _locus(name: str, sun_elevation: float, index: float) -> tuple[FloatArray, FloatArray]:
    entry = feature(name)
    if entry.kind == "circle":
        views = circle(entry.crystals[0].sequences[0], sun_elevation, index)
    elif entry.kind == "spot":
        views = spots(entry, sun_elevation, index)
    elif entry.kind == "diffuse":
        views = outline(entry, sun_elevation, index)
    elif _named_so(entry, sun_elevation, index):
        views = _lit_views(entry, sun_elevation, index)
    else:
        views = []
    if not views:
        return np.empty(0), np.empty(0)
    gap = np.full((1, 3), np.nan)
    joined = np.concatenate([part for view in views for part in (gap, view)][1:])
    return np.arctan2(joined[:, 0], joined[:, 1]), np.arcsin(np.clip(joined[:, 2], -1.0, 1.0))


def _named_so(entry: Feature, sun_elevation: float, index: float) -> bool:
    """Return whether the light of a feature's faces goes by its name at this sun elevation."""
    joined = sun_elevation >= tangent_join(index)
    return {"upper_tangent": not joined, "lower_tangent": not joined, "circumscribed": joined}.get(entry.name, True)


def _lit_views(entry: Feature, sun_elevation: float, index: float) -> list[FloatArray]:
    """Return the lit branches of a curve or fold."""
    crystals = entry.crystals[0]
    shape = _shape(crystals)
    found: list[tuple[Branch, FloatArray]] = []
    for alike in classes(crystals.law, crystals.sequences):
        for branch in _branches(entry, crystals.law, alike, sun_elevation, index):
            light = _light(crystals.law, alike, branch, shape, sun_elevation, index)
            found.append((branch, np.where(in_part(entry.part, branch.view, sun_elevation), light, 0.0)))
    brightest = max((float(light.max()) for _, light in found), default=0.0)
    views: list[FloatArray] = []
    for branch, light in found:
        lit = _closed_holes(light > FAINTEST * brightest) & in_part(entry.part, branch.view, sun_elevation)
        fresh = _closed_holes(_is_new(branch.view, views)) & _closed_holes(_first_time(branch.view, lit))
        for piece in runs(branch.view, branch.angles, lit & fresh):
            if np.linalg.norm(np.diff(piece.view, axis=0), axis=1).sum() >= SHORTEST:
                views.append(piece.view)
    # sun and crystals are alike on both sides of the sun's vertical; rounding in `brightness` is not
    for view in list(views):
        mirrored = view * np.array([-1.0, 1.0, 1.0])
        missing = _closed_holes(_is_new(mirrored, views))
        views += [piece.view for piece in runs(mirrored, np.zeros((len(view), 2)), missing) if len(piece.view) > _HOLE]
    return views


def _shape(crystals: Crystals) -> Shape:
    if crystals.shape == "prism":
        return hexagonal_prism(crystals.aspect)
    return habits.shape(habits.Habit("truncated-bipyramid", crystals.aspect))


def _branches(
    entry: Feature, law: str, alike: list[tuple[int, ...]], sun_elevation: float, index: float
) -> list[Branch]:
    if entry.kind == "curve":
        return curve(law, alike, sun_elevation, index)
    if law == "column" and max(alike[0]) <= PRISM[-1]:
        return column_fold(alike, sun_elevation, index)
    return fold(law, alike[0], sun_elevation, index)


def _is_new(view: FloatArray, drawn: list[FloatArray]) -> BoolArray:
    """Return which points do not lie on a branch drawn already: several sequences may draw the same line."""
    if not drawn:
        return np.ones(len(view), dtype=bool)
    near = np.cos(0.6 * STEP)
    known = np.concatenate(drawn).T
    return np.concatenate([(part @ known).max(axis=1) < near for part in np.array_split(view, 1 + len(view) // 1000)])


def _first_time(view: FloatArray, lit: BoolArray) -> BoolArray:
    """Return which points of a branch do not repeat lit ones before them: a mirror that turns once draws a circle twice."""
    near = np.cos(0.6 * STEP)
    result = np.ones(len(view), dtype=bool)
    for start in range(_REPEAT, len(view), 512):
        part = view[start : start + 512]
        place = np.arange(start, start + len(part))[:, None]
        earlier = (np.arange(start + len(part) - _REPEAT)[None] <= place - _REPEAT) & lit[: start + len(part) - _REPEAT]
        close = part @ view[: start + len(part) - _REPEAT].T > near
        result[start : start + len(part)] = ~np.any(close & earlier, axis=1)
    return result


def _light(
    law: str, alike: list[tuple[int, ...]], branch: Branch, shape: Shape, sun_elevation: float, index: float
) -> FloatArray:
    """Return the brightness along a branch of all sequences that act alike there, shape (m,)."""
    azimuth, spin = branch.angles.T
    if unfold(alike[0]).wedge > 1e-6:
        every = [brightness(shape, faces, rotations(law, azimuth, spin), sun_elevation, index) for faces in alike]
        return np.asarray(np.sum(every, axis=0))
    # mirrors only: light without sharp ends, looked at in some places; a spin does not move it, but makes and unmakes it
    beads = np.unique(np.linspace(0, len(azimuth) - 1, min(_BEADS, len(azimuth))).astype(int))
    spins = (np.arange(_SPINS) + 0.5) * (np.pi / 3.0 / _SPINS) if FREE_ANGLES[law] == 2 else np.zeros(1)
    total = np.zeros(len(beads))
    for faces in alike:
        for angle in spins:
            total += brightness(shape, faces, rotations(law, azimuth[beads], angle), sun_elevation, index)
    return np.asarray(np.interp(np.arange(len(azimuth)), beads, total / len(spins)))


def _closed_holes(lit: BoolArray) -> BoolArray:
    """Return lit points with dark runs of a few points between lit ones filled: the beam is known in steps."""
    index = np.flatnonzero(lit)
    result = lit.copy()
    for first, second in pairwise(index):
        if 1 < second - first <= _HOLE:
            result[first:second] = True
    return result
