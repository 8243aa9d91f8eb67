"""Habits: kinds of ice crystals by name, with their spreads, as shapes.

The diameter across corners of the widest cross-section is 1 where all face distances are 1; a *pointed* pyramid on it is as
high as its faces reach when nothing cuts them off. With pyramid faces {10-11} that is half of c/a, so that two such
pyramids base to base are c/a high. Faces come in the order side faces, basal faces, pyramid faces of the upper end paired
with those opposite of the lower end (`skyoptics.crystals.shapes`); a habit without some of them leaves them out.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import combinations
from statistics import NormalDist
from typing import Any, NamedTuple

import numpy as np

from skyoptics.crystals.faces import LATTICE_RATIO
from skyoptics.crystals.shapes import ASPECT_RANGE, Shape, hexagonal_prism
from skyoptics.errors import DomainError, nearest
from skyoptics.units import FloatArray

NAMES = ("prism", "bipyramid", "truncated-bipyramid", "pyramid", "trigonal")
LOWEST_PYRAMID = 1e-3
"""Lowest end that is no plain basal face, as a share of the height of a pointed one."""
SHORTEST_SIDE = 0.01
"""Sides of the cross-section that a spread of face distances leaves at least, in diameters across corners."""
SMALLEST_FACTOR = 0.05
"""Smallest factor that a spread of face distances gives."""

_POINTED = 1.0 - 1e-6
_DRAWS = 1000


class Typical(NamedTuple):
    """What a habit has where nothing else is asked for; None where it has no such thing."""

    aspect: float | None
    pyramid_upper: float | None = None
    pyramid_lower: float | None = None
    trigonality: float | None = None


TYPICAL = {
    "prism": Typical(1.0),
    "bipyramid": Typical(None),
    "truncated-bipyramid": Typical(0.3, 0.5, 0.5),
    "pyramid": Typical(1.0, 1.0),
    "trigonal": Typical(0.5, trigonality=1.0),
}
"""Truncated bipyramid: so that rays of least deviation get through all eight wedges between its faces."""
_SAID_ANYWAY = {
    ("bipyramid", "aspect"): 0.0,
    ("bipyramid", "pyramid_upper"): 1.0,
    ("bipyramid", "pyramid_lower"): 1.0,
    ("pyramid", "pyramid_lower"): 0.0,
    **{(name, "trigonality"): 0.0 for name in NAMES},
}
"""What a habit without such a thing has all the same, so that it may be given."""
_MEANING = {
    "aspect": "aspect (length of the prism part / diameter across corners)",
    "pyramid_upper": "height of the upper pyramid / that of a pointed one",
    "pyramid_lower": "height of the lower pyramid / that of a pointed one",
    "trigonality": "trigonality (0 a hexagon, 1 a triangle)",
}


@dataclass(frozen=True)
class Habit:
    """A kind of ice crystal.

    Parameters
    ----------
    name : str
        One of `NAMES`: hexagonal prism; two pointed pyramids base to base; prism with a pyramid on either end, cut off by
        basal faces unless pointed; prism with a pyramid on its upper end; prism of triangular cross-section.
    aspect : float, optional
        Length of the prism part ÷ diameter across corners, that of its edges where pyramid faces of the second order notch
        its sides; none for a bipyramid. Default: that of `TYPICAL`.
    pyramid_upper, pyramid_lower : float, optional
        Height of that end ÷ height of a pointed one, up to 1. Default: that of `TYPICAL`.
    miller : tuple of int
        Index (h, k, i, l) of the pyramid faces: {h 0 -h l}, above the side faces, or {h h -2h l}, above the edges between
        them. Signs and order of the first three do not matter.
    face_distances : tuple of float, optional
        Six factors on the distances of the side faces from the c-axis, around the crystal; pyramid faces move along with
        the side faces or edges below them. In a bipyramid they are factors on its own faces.
    trigonality : float, optional
        For "trigonal": 0 a regular hexagon to 1 a triangle, three faces being farther out by a factor of 1 + this; all
        corners stay on a circle of diameter 1. Default: that of `TYPICAL`.
    aspect_spread : float
        Standard deviation of the logarithm of the aspect, whose median is `aspect`.
    distance_spread : float
        Standard deviation of factors on the distances of the side faces, each of its own, before those are dropped that
        would leave out a face.

    Raises
    ------
    DomainError
        If a value is out of range or has no meaning for this habit.
    """

    name: str = "prism"
    aspect: float | None = None
    pyramid_upper: float | None = None
    pyramid_lower: float | None = None
    miller: tuple[int, int, int, int] = (1, 0, -1, 1)
    face_distances: tuple[float, ...] | None = None
    trigonality: float | None = None
    aspect_spread: float = 0.0
    distance_spread: float = 0.0

    def __post_init__(self) -> None:
        if self.name not in NAMES:
            raise DomainError(
                f"a habit is one of {', '.join(NAMES)}; got {self.name!r}{nearest(str(self.name), NAMES)}"
            )
        self._check("aspect", *ASPECT_RANGE)
        self._check("pyramid_upper", LOWEST_PYRAMID, 1.0)
        self._check("pyramid_lower", LOWEST_PYRAMID, 1.0)
        self._check("trigonality", 0.0, 1.0)
        object.__setattr__(self, "miller", tuple(self.miller))
        if pyramid_rise(self.miller) != pyramid_rise((1, 0, -1, 1)) and self.name in ("prism", "trigonal"):
            raise DomainError(
                f"a Miller index is for habits with pyramid faces, not for {self.name}; got {self.miller!r}"
            )
        if self.face_distances is not None:
            factors = tuple(float(factor) for factor in self.face_distances)
            if len(factors) != 6 or not all(0.0 < factor < np.inf for factor in factors):
                raise DomainError(f"face distances are six factors above 0; got {factors!r}")
            object.__setattr__(self, "face_distances", factors)
        for name, most in (("aspect_spread", 1.0), ("distance_spread", 0.5)):
            if not 0.0 <= getattr(self, name) <= most:
                raise DomainError(f"{name.replace('_', ' ')} is 0 to {most:g}; got {getattr(self, name)!r}")
        if self.name == "bipyramid" and self.aspect_spread > 0.0:
            raise DomainError("a bipyramid has no aspect that could spread; leave the aspect spread out")

    def _check(self, key: str, low: float, high: float) -> None:
        """Raise a DomainError unless a value is in range, or left out where the habit has no such thing."""
        given = getattr(self, key)
        if given is None:
            return
        if getattr(TYPICAL[self.name], key) is None:
            if given == _SAID_ANYWAY.get((self.name, key)):
                return
            having = [name for name in NAMES if getattr(TYPICAL[name], key) is not None]
            raise DomainError(f"{_MEANING[key]} is for {' or '.join(having)}, not for {self.name}; got {given!r}")
        if not low <= given <= high:
            raise DomainError(f"{_MEANING[key]} is {low:g} to {high:g}; got {given!r}")

    def value(self, key: str) -> float:
        """Return a value given or else that of `TYPICAL`; nan where the habit has no such thing."""
        typical = getattr(TYPICAL[self.name], key)
        given = getattr(self, key)
        return float("nan") if typical is None else float(typical if given is None else given)


def shape(habit: Habit) -> Shape:
    """Return the crystal of a habit, spreads left aside.

    Parameters
    ----------
    habit : Habit
        The kind of crystal.

    Returns
    -------
    Shape
        Slabs in the order side faces (normals at 0°, 60°, 120° from x), basal faces, pyramid faces (upper ones at 0°, 60°, …;
        for the second order at 30°, 90°, …), as far as the habit has them. The prism part has its middle at the origin.

    Raises
    ------
    DomainError
        If a face is cut off altogether.
    """
    aspect = habit.value("aspect")
    factors = np.ones(6) if habit.face_distances is None else np.array(habit.face_distances)
    if habit.name == "prism":
        return hexagonal_prism(aspect, habit.face_distances)
    side = _side_distances(habit, factors)
    if habit.name == "trigonal":
        label = f"trigonal prism, aspect {aspect:g}, trigonality {habit.value('trigonality'):g}"
        return Shape(*_stacked(_sides(side), _basal(aspect / 2.0, aspect / 2.0)), label)
    rise, second_order = pyramid_rise(habit.miller)
    index = "".join(map(str, habit.miller))
    azimuth = np.asarray(np.arange(6) + (0.5 if second_order else 0.0), dtype=np.float64) * (np.pi / 3.0)
    if habit.name == "bipyramid":
        distance = np.cos(rise) * side
        return Shape(*_pyramids(azimuth, rise, distance, distance), f"bipyramid {{{index}}}")
    half = aspect / 2.0
    # second-order faces pass through the edges between side faces: v = (u + u') / √3 for normals 60° apart
    foot = (side + np.roll(side, -1)) / np.sqrt(3.0) if second_order else side
    pointed = _inner_radius(azimuth, foot) / np.tan(rise)
    distance = np.cos(rise) * foot + np.sin(rise) * half
    upper, lower = habit.value("pyramid_upper"), habit.value("pyramid_lower")
    above = half + upper * pointed if upper < _POINTED else np.inf
    if habit.name == "pyramid":
        slabs = [_sides(side), _basal(above, half), _pyramids(azimuth, rise, distance, np.full(6, np.inf))]
        return Shape(*_stacked(*slabs), f"pyramid {{{index}}} on a prism, aspect {aspect:g}, height {upper:g}")
    below = half + lower * pointed if lower < _POINTED else np.inf
    slabs = [_sides(side)]
    if np.isfinite(above) or np.isfinite(below):
        slabs.append(_basal(above, below))
    slabs.append(_pyramids(azimuth, rise, distance, distance))
    label = f"truncated bipyramid {{{index}}}, aspect {aspect:g}, heights {upper:g} and {lower:g}"
    return Shape(*_stacked(*slabs), label)


def ensemble(habit: Habit, count: int = 16, seed: int = 0) -> tuple[Shape, ...]:
    """Return crystals that stand for the spreads of a habit, equally many of each; one where nothing spreads.

    Parameters
    ----------
    habit : Habit
        The kind of crystal.
    count : int
        Number of shapes.
    seed : int
        The same seed gives the same shapes, and the first of more.

    Returns
    -------
    tuple of Shape
        Aspects are lognormal, at the middles of `count` equal steps of probability, stretched so that their spread is the
        one asked for; so rising along the tuple. Factors on face distances are 1 + normal numbers; a set that would take
        more than 95 % off a distance or make a side shorter than `SHORTEST_SIDE` is drawn again.

    Raises
    ------
    DomainError
        If the spreads lead to aspects out of range, or leave no whole crystals.
    """
    if count < 1 or seed < 0:
        raise DomainError(f"an ensemble needs a count above 0 and a seed not below 0; got {count}, {seed}")
    if habit.aspect_spread == habit.distance_spread == 0.0:
        return (shape(habit),)
    plain = replace(habit, aspect_spread=0.0, distance_spread=0.0)
    shapes = []
    for number, deviate in enumerate(_stratified(count)):
        one = plain
        if habit.aspect_spread > 0.0:
            one = replace(one, aspect=_spread_aspect(habit, deviate))
        if habit.distance_spread > 0.0:
            one = replace(one, face_distances=_draw_factors(habit, seed, number))
        shapes.append(shape(one))
    return tuple(shapes)


def describe(shape: Shape) -> dict[str, Any]:
    """Return figures of a crystal for reports.

    Parameters
    ----------
    shape : Shape
        Any crystal.

    Returns
    -------
    dict
        `volume`, `area`, `mean_projected_area`, `length` (along the c-axis), in units of the diameter across corners; counts of
        `faces`, `edges` and `corners`; `closed`: every edge parts two faces, and corners − edges + faces = 2 (Euler).
    """
    corners = np.unique(np.concatenate(shape.faces), axis=0)
    edges = shape.edges
    faces = sum(len(face) > 0 for face in shape.faces)
    return {
        "volume": shape.volume,
        "area": shape.area,
        "mean_projected_area": shape.mean_projected_area,
        "length": float(np.ptp(corners[:, 2])),
        "faces": faces,
        "edges": len(edges),
        "corners": len(corners),
        "closed": all(len(edge.faces) == 2 for edge in edges) and len(corners) - len(edges) + faces == 2,
    }


def pyramid_rise(miller: Sequence[int], ratio: float = LATTICE_RATIO) -> tuple[float, bool]:
    """Return how far the normals of pyramid faces rise above the basal plane, and whether they stand above prism edges.

    Parameters
    ----------
    miller : sequence of int
        Index (h, k, i, l), i = −(h + k), of a family of twelve faces: {h 0 -h l} or {h h -2h l}.
    ratio : float
        c/a.

    Returns
    -------
    rise : float
        [rad]
    second_order : bool
        Faces of {h h -2h l} are turned by 30° about the c-axis.

    Raises
    ------
    DomainError
        If it is no index of pyramid faces, or one of 24 faces.

    Notes
    -----
    The spacing 1/d² = 4 (h² + h k + k²) / (3 a²) + l² / c² of hexagonal lattices (International Tables for
    Crystallography, from memory) gives tan(rise) = (√3/2) l / (h c/a) in the first order and l / (2 h c/a) in the second.
    """
    asked = f"got {tuple(miller)!r}"
    if len(miller) != 4 or not all(isinstance(part, int | np.integer) for part in miller):
        raise DomainError(f"a Miller index of pyramid faces is four whole numbers h, k, i, l; {asked}")
    h, k, i, order = (int(part) for part in miller)
    if h + k + i != 0:
        raise DomainError(f"the third number of a Miller index is minus the sum of the first two; {asked}")
    least, middle, _ = sorted((abs(h), abs(k), abs(i)))
    if middle == 0 or order == 0:
        raise DomainError(f"faces {'{0 0 0 l}' if middle == 0 else '{h k i 0}'} make no pyramid; {asked}")
    if least == 0:
        return float(np.arctan(np.sqrt(3.0) / 2.0 / ratio * abs(order) / middle)), False
    if least == middle:
        return float(np.arctan(0.5 / ratio * abs(order) / middle)), True
    raise DomainError(
        f"pyramids have faces {{h 0 -h l}} or {{h h -2h l}}, such as 1, 0, -1, 1 or 1, 1, -2, 2; a crystal with the 24 faces of "
        f"another index has more than a path code holds; {asked}"
    )


def _side_distances(habit: Habit, factors: FloatArray) -> FloatArray:
    """Return the distances of the side faces from the c-axis, shape (6,); infinite for the absent ones of a triangle.

    Sides at a and ρ a, in turn, have their corners (a/sin 60°) √(1 + ρ² − ρ) from the axis.
    """
    if habit.name != "trigonal":
        return np.asarray(np.sqrt(3.0) / 4.0 * factors)
    trigonality = habit.value("trigonality")
    far = 1.0 + trigonality
    near = np.sqrt(3.0) / 4.0 / np.sqrt(1.0 + far**2 - far)
    absent = trigonality > _POINTED
    return np.asarray(factors * np.where(np.arange(6) % 2 == 0, near, np.inf if absent else near * far))


def _sides(side: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return normals and offsets of the side faces as slabs."""
    angle = np.arange(3) * np.pi / 3.0
    return np.stack([np.cos(angle), np.sin(angle), np.zeros(3)], axis=1), np.stack([side[:3], side[3:]], axis=1)


def _basal(above: float, below: float) -> tuple[FloatArray, FloatArray]:
    return np.array([[0.0, 0.0, 1.0]]), np.array([[above, below]])


def _pyramids(azimuth: FloatArray, rise: float, upper: FloatArray, lower: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return pyramid faces at six azimuths as slabs: each upper one with the lower one opposite."""
    level = np.cos(rise)
    normals = np.stack([level * np.cos(azimuth), level * np.sin(azimuth), np.full(6, np.sin(rise))], axis=1)
    return normals, np.stack([upper, np.roll(lower, -3)], axis=1)


def _stacked(*slabs: tuple[FloatArray, FloatArray]) -> tuple[FloatArray, FloatArray]:
    return np.concatenate([normals for normals, _ in slabs]), np.concatenate([offsets for _, offsets in slabs])


def _inner_radius(azimuth: FloatArray, distance: FloatArray) -> float:
    """Return the radius of the largest circle inside six lines: the best corner of a linear programme."""
    rows = np.stack([np.cos(azimuth), np.sin(azimuth), np.ones(6)], axis=1)
    triples = np.array(list(combinations(range(6), 3)))
    found = np.linalg.solve(rows[triples], distance[triples][..., None])[..., 0]
    inside = np.all(found @ rows.T <= distance * (1.0 + 1e-9), axis=1)
    return float(found[inside, 2].max())


def _stratified(count: int) -> FloatArray:
    """Return standard normal numbers at the middles of equal steps of probability, variance 1."""
    deviates = np.array([NormalDist().inv_cdf((number + 0.5) / count) for number in range(count)])
    return deviates / np.std(deviates) if count > 1 else deviates


def _spread_aspect(habit: Habit, deviate: float) -> float:
    median, (low, high) = habit.value("aspect"), ASPECT_RANGE
    aspect = median * float(np.exp(habit.aspect_spread * deviate))
    if not low <= aspect <= high:
        raise DomainError(
            f"aspect {median:g} with a spread of {habit.aspect_spread:g} reaches {aspect:.3g}; aspects are {low:g} to "
            f"{high:g}: take a smaller spread"
        )
    return aspect


def _draw_factors(habit: Habit, seed: int, number: int) -> tuple[float, ...]:
    """Return face distances of one crystal of an ensemble."""
    random = np.random.Generator(np.random.Philox(key=np.array([seed, number], dtype=np.uint64)))
    given = np.ones(6) if habit.face_distances is None else np.array(habit.face_distances)
    for _ in range(_DRAWS):
        drawn = 1.0 + habit.distance_spread * random.standard_normal(6)
        side = _side_distances(habit, given * drawn)
        if drawn.min() >= SMALLEST_FACTOR and _side_lengths(side).min() >= SHORTEST_SIDE:
            return tuple(float(factor) for factor in given * drawn)
    raise DomainError(
        f"face distances with a spread of {habit.distance_spread:g} leave no whole crystals: take a smaller spread, or face "
        "distances nearer to one another"
    )


def _side_lengths(side: FloatArray) -> FloatArray:
    """Return the lengths of the sides of a cross-section, below 0 for those cut off."""
    if np.any(np.isinf(side)):
        return np.full(3, 2.0 / np.sqrt(3.0) * side[np.isfinite(side)].sum())
    return np.asarray((np.roll(side, 1) + np.roll(side, -1) - side) * 2.0 / np.sqrt(3.0))
