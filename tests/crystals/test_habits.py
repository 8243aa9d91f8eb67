from dataclasses import replace

import numpy as np
import pytest
from scipy.spatial import ConvexHull

from skyoptics.crystals import tracing
from skyoptics.crystals.faces import LATTICE_RATIO, LOWER_PYRAMID, UPPER_PYRAMID, face_labels, face_normal
from skyoptics.crystals.habits import NAMES, Habit, describe, ensemble, pyramid_rise, shape
from skyoptics.crystals.orientations import Orientation
from skyoptics.crystals.prepared import prepare
from skyoptics.crystals.shapes import hexagonal_prism
from skyoptics.errors import DomainError
from skyoptics.geometry.directions import Directions
from skyoptics.kernels.lanes import path_faces
from skyoptics.units import DEG

INDEX = 1.31
UNEVEN = (1.0, 0.85, 1.1, 0.9, 1.05, 0.9)
SECOND = (1, 1, -2, 2)
HABITS = [
    *(Habit(name) for name in NAMES),
    *(Habit(name, face_distances=UNEVEN) for name in NAMES),
    *(Habit(name, miller=SECOND) for name in NAMES if "pyramid" in name),
    *(Habit(name, miller=SECOND, face_distances=UNEVEN) for name in NAMES if "pyramid" in name),
    Habit("truncated-bipyramid", aspect=2.0, pyramid_upper=1.0, pyramid_lower=0.3),
    Habit("truncated-bipyramid", pyramid_upper=1.0, pyramid_lower=1.0),
    Habit("pyramid", aspect=0.2, pyramid_upper=0.4),
    Habit("pyramid", miller=(2, 0, -2, 1), face_distances=UNEVEN),
    Habit("trigonal", trigonality=0.4),
    Habit("trigonal", trigonality=0.0),
]

# Wedges of pyramidal crystals: Tape, Atmospheric Halos (AGU 1994), Tape & Moilanen, Atmospheric Halos and the Search for Angle x
# (AGU 2006), from memory; 60° and 90° are those of the prism. Sequences are faces of entry and exit.
WEDGES = {
    9: (28.0, (3, 26)),
    18: (52.4, (13, 25)),
    20: (56.0, (13, 16)),
    22: (60.0, (3, 5)),
    23: (62.0, (1, 23)),
    24: (63.8, (3, 15)),
    35: (80.2, (13, 15)),
    46: (90.0, (1, 3)),
}


def least_deviation(wedge):
    """Return 2 asin(n sin(A/2)) − A."""
    return 2.0 * np.arcsin(INDEX * np.sin(0.5 * wedge)) - wedge


def interior_angle(first, second):
    return np.pi - np.arccos(face_normal(first) @ face_normal(second))


# ---------------------------------------------------------------- bodies


@pytest.mark.parametrize("habit", HABITS, ids=lambda habit: f"{habit.name}-{habit.miller}")
def test_bodies_are_closed_hulls_of_their_corners(habit):
    body = shape(habit)
    hull = ConvexHull(np.concatenate([face for face in body.faces if len(face)]))
    assert body.volume == pytest.approx(hull.volume, rel=1e-9)
    assert body.area == pytest.approx(hull.area, rel=1e-9)
    about = describe(body)
    assert about["closed"]
    assert about["corners"] - about["edges"] + about["faces"] == 2  # Euler
    assert about["corners"] == len(np.unique(np.round(hull.points[hull.vertices], 7), axis=0))
    assert about["volume"] == pytest.approx(hull.volume, rel=1e-9)
    assert about["mean_projected_area"] == pytest.approx(hull.area / 4.0, rel=1e-9)
    assert np.abs(body.face_areas @ body.face_normals).max() < 1e-12
    assert about["faces"] == np.isfinite(body.offsets).sum()


@pytest.mark.parametrize(
    ("name", "faces", "edges", "corners"),
    [("prism", 8, 18, 12), ("bipyramid", 12, 18, 8), ("truncated-bipyramid", 20, 42, 24), ("pyramid", 13, 24, 13)],
)
def test_counts_of_the_textbook_bodies(name, faces, edges, corners):
    about = describe(shape(Habit(name)))
    assert (about["faces"], about["edges"], about["corners"]) == (faces, edges, corners)


def test_an_open_body_is_not_called_closed():
    body = hexagonal_prism(1.0)
    object.__setattr__(body, "faces", (*body.faces[:-1], np.zeros((0, 3))))
    assert not describe(body)["closed"]


def test_pointed_bipyramid_is_c_over_a_high_and_one_across():
    body = shape(Habit("bipyramid"))
    corners = np.concatenate(body.faces)
    assert np.ptp(corners[:, 2]) == pytest.approx(LATTICE_RATIO, rel=1e-12)
    assert 2.0 * np.hypot(corners[:, 0], corners[:, 1]).max() == pytest.approx(1.0, rel=1e-12)
    # two pyramids on a hexagon of side 1/2
    assert body.volume == pytest.approx(1.5 * np.sqrt(3.0) * 0.25 * LATTICE_RATIO / 3.0, rel=1e-12)


@pytest.mark.parametrize(("upper", "lower"), [(0.5, 0.5), (0.2, 0.9), (1.0, 0.4)])
def test_ends_are_shares_of_a_pointed_one(upper, lower):
    corners = np.concatenate(shape(Habit("truncated-bipyramid", 0.7, upper, lower)).faces)
    assert corners[:, 2].max() == pytest.approx(0.35 + upper * LATTICE_RATIO / 2.0, rel=1e-12)
    assert corners[:, 2].min() == pytest.approx(-0.35 - lower * LATTICE_RATIO / 2.0, rel=1e-12)


@pytest.mark.parametrize("name", ["truncated-bipyramid", "pyramid"])
@pytest.mark.parametrize("miller", [(1, 0, -1, 1), SECOND])
def test_prism_part_of_uneven_crystals_keeps_its_length(name, miller):
    body = shape(Habit(name, 0.8, miller=miller, face_distances=UNEVEN))
    upright = [edge.corners for edge in body.edges if max(edge.faces) < 6]
    assert len(upright) == 6
    for ends in upright:
        assert sorted(ends[:, 2]) == pytest.approx([-0.4, 0.4], abs=1e-9)
        assert ends[0, :2] == pytest.approx(ends[1, :2], abs=1e-9)


def test_uneven_bipyramid_has_the_cross_section_asked_for():
    body = shape(Habit("bipyramid", face_distances=UNEVEN))
    corners = np.unique(np.concatenate(body.faces), axis=0)
    waist = corners[np.abs(corners[:, 2]) < 1e-9]
    prism = np.concatenate(hexagonal_prism(1.0, UNEVEN).faces)
    expected = prism[prism[:, 2] > 0.0][:, :2]
    assert len(waist) == 6
    for corner in waist[:, :2]:
        assert np.linalg.norm(expected - corner, axis=1).min() < 1e-9


def test_side_and_basal_faces_come_first_as_in_a_prism():
    prism = hexagonal_prism(0.3)
    body = shape(Habit("truncated-bipyramid", 0.3))
    assert np.array_equal(body.normals[:4], prism.normals)
    assert np.array_equal(body.offsets[:3], prism.offsets[:3])
    labels = face_labels(body.face_normals)
    assert labels[:8] == face_labels(prism.face_normals)
    assert sorted(labels) == [1, 2, *range(3, 9), *range(13, 19), *range(23, 29)]


def test_prism_is_the_prism_to_the_bit():
    for factors in (None, UNEVEN):
        made, plain = shape(Habit("prism", 0.4, face_distances=factors)), hexagonal_prism(0.4, factors)
        assert made.packed_slabs().tobytes() == plain.packed_slabs().tobytes()
        assert made.packed_patches().tobytes() == plain.packed_patches().tobytes()


@pytest.mark.parametrize("trigonality", [0.0, 0.3, 0.9, 1.0])
def test_trigonal_corners_stay_on_the_circle(trigonality):
    body = shape(Habit("trigonal", 0.5, trigonality=trigonality))
    corners = np.concatenate(body.faces)
    assert 2.0 * np.hypot(corners[:, 0], corners[:, 1]) == pytest.approx(np.ones(len(corners)), rel=1e-9)
    wide = [body.face_areas[face_labels(body.face_normals).index(label)] for label in (3, 5, 7)]
    assert wide == pytest.approx([wide[0]] * 3, rel=1e-9)
    if trigonality == 0.0:
        assert body.volume == pytest.approx(hexagonal_prism(0.5).volume, rel=1e-12)
    if trigonality == 1.0:  # equilateral triangle in a circle of radius 1/2
        assert body.volume == pytest.approx(3.0 * np.sqrt(3.0) / 16.0 * 0.5, rel=1e-12)


# ---------------------------------------------------------------- pyramid faces


def test_pyramid_normals_are_the_numbered_ones():
    body = shape(Habit("bipyramid"))
    labels = face_labels(body.face_normals)
    assert labels[0::2] == UPPER_PYRAMID
    assert sorted(labels[1::2]) == sorted(LOWER_PYRAMID)
    for label, normal in zip(labels, body.face_normals, strict=True):
        assert normal == pytest.approx(face_normal(label), abs=1e-14)


def test_wedges_between_faces_are_the_published_ones():
    body = shape(Habit("truncated-bipyramid"))
    labels = face_labels(body.face_normals)
    for wedge, sequence in WEDGES.values():
        one, other = (body.face_normals[labels.index(label)] for label in sequence)
        assert (np.pi - np.arccos(one @ other)) / DEG == pytest.approx(wedge, abs=0.05)  # the list is rounded to 0.1°
        assert (np.pi - np.arccos(one @ other)) == pytest.approx(interior_angle(*sequence), abs=1e-12)
    # tilt of the faces to the c-axis, atan((√3/2) / (c/a)); c/a from 1.628 (Röttger et al. 1994) to 1.629
    rise = np.arcsin(body.face_normals[labels.index(13)][2]) / DEG
    assert rise == pytest.approx(28.0, abs=0.02)


@pytest.mark.parametrize(
    ("miller", "tangent", "second_order"),
    [
        ((1, 0, -1, 1), np.sqrt(3.0) / 2.0 / LATTICE_RATIO, False),
        ((0, -1, 1, 1), np.sqrt(3.0) / 2.0 / LATTICE_RATIO, False),
        ((2, 0, -2, 1), np.sqrt(3.0) / 4.0 / LATTICE_RATIO, False),
        ((1, 0, -1, 2), np.sqrt(3.0) / LATTICE_RATIO, False),
        ((1, 1, -2, 2), 1.0 / LATTICE_RATIO, True),
        ((1, -2, 1, 1), 0.5 / LATTICE_RATIO, True),
    ],
)
def test_rise_follows_from_the_reciprocal_lattice(miller, tangent, second_order):
    # normal = h a* + k b* + l c* of a hexagonal cell with a = 1, built from the cell vectors
    cell = np.array([[1.0, 0.0, 0.0], [-0.5, np.sqrt(0.75), 0.0], [0.0, 0.0, LATTICE_RATIO]])
    normal = np.linalg.inv(cell) @ np.array([miller[0], miller[1], miller[3]])
    rise, turned = pyramid_rise(miller)
    assert np.tan(rise) == pytest.approx(abs(normal[2]) / np.hypot(normal[0], normal[1]), rel=1e-12)
    assert np.tan(rise) == pytest.approx(tangent, rel=1e-12)
    assert turned is second_order


def test_faces_of_the_second_order_stand_above_the_edges():
    body = shape(Habit("bipyramid", miller=SECOND))
    azimuth = np.arctan2(body.normals[:, 1], body.normals[:, 0]) / DEG
    assert azimuth % 60.0 == pytest.approx(np.full(6, 30.0))
    assert set(face_labels(body.face_normals)) == {0}


# ---------------------------------------------------------------- light


def exits(body, rays=2**17):
    law = Orientation("random")
    item = prepare(body, law, lambda w: INDEX + 0 * w, (5.5e-7, 5.5e-7), np.array([0.0, 0.0, 1.0]))
    return tracing.trace_exits(item, 1, 0, rays)


@pytest.fixture(scope="module")
def truncated():
    """Return path codes, deviations and power of light straight through a typical truncated bipyramid."""
    body = shape(Habit("truncated-bipyramid"))
    found, tally = exits(body, 2**19)
    straight = found.hits == 2
    deviation = np.arccos(np.clip(-found.direction[straight, 2].astype(float), -1.0, 1.0))
    labels = face_labels(body.face_normals)
    codes, place = np.unique(found.path[straight], return_inverse=True)
    wedges = []
    for code in codes:
        entry, leave = (labels[face] for face in path_faces(int(code)))
        wedges.append(interior_angle(entry, leave))
    return np.array(wedges)[place], deviation, found.stokes[straight, 0].astype(float) / tally.incident


@pytest.mark.parametrize("radius", WEDGES)
def test_typical_truncated_bipyramid_lights_every_wedge(truncated, radius):
    wedges, deviation, power = truncated
    own = np.abs(wedges - interior_angle(*WEDGES[radius][1])) < 1e-6
    edge = least_deviation(interior_angle(*WEDGES[radius][1]))
    assert deviation[own].min() == pytest.approx(edge, abs=0.05 * DEG)
    assert deviation[own].min() > edge - 1e-3 * DEG
    assert power[own & (deviation < edge + 1.0 * DEG)].sum() > 1e-3


@pytest.mark.parametrize(
    "habit", [Habit("pyramid"), Habit("pyramid", pyramid_upper=0.4), Habit("trigonal"), Habit("trigonal", 20.0)]
)
def test_absent_faces_are_never_met_and_energy_is_kept(habit):
    body = shape(habit)
    absent = set(np.flatnonzero(np.isinf(body.offsets.ravel())))
    assert absent
    found, tally = exits(body, 2**14)
    met = set()
    for code in np.unique(found.path):
        met |= set(path_faces(int(code)) or ())
    assert not met & absent
    assert met == set(range(2 * len(body.normals))) - absent
    assert tally.scattered + tally.absorbed == pytest.approx(tally.incident + tally.roulette, rel=1e-6)
    assert tally.incident / tally.rays == pytest.approx(1.0, rel=5e-3)
    assert abs(tally.roulette) < 1e-2 * tally.incident


@pytest.mark.parametrize("habit", [Habit("pyramid"), Habit("trigonal")])
def test_both_tracers_agree_on_crystals_with_absent_faces(habit):
    body, law = shape(habit), Orientation("column", 5.0 * DEG)
    grid = Directions.cylindrical((4, 6), np.eye(3), (np.pi / 2, -1.5 * np.pi), (np.pi / 2, -np.pi / 2)).packed()
    item = prepare(body, law, lambda w: INDEX + 0 * w, (5.5e-7, 5.5e-7), np.array([0.6, 0.0, 0.8]))
    around = hexagonal_prism(2.5)  # the plain loop shoots at the sphere around it and takes the faces from `item`
    lanes, plain = [], []
    for batch in range(8):
        plane, tally = tracing.trace_plane(item, grid, 1, batch, 2**14)
        lanes.append(plane / tally.incident)
        plane, tally = tracing.plain_plane(item, around, grid, 2, batch, 2**16)
        plain.append(plane / tally.incident)
        assert tally.scattered == pytest.approx(tally.incident, rel=1e-2)
    error = np.sqrt(np.var(lanes, axis=0, ddof=1) + np.var(plain, axis=0, ddof=1)) / np.sqrt(8)
    # 24 cells, 14 degrees of freedom each
    assert np.all(np.abs(np.mean(lanes, axis=0) - np.mean(plain, axis=0)) < 5.0 * error + 1e-4)


# ---------------------------------------------------------------- ensembles


def test_nothing_spread_is_one_crystal():
    assert len(ensemble(Habit("pyramid"), 16)) == 1


@pytest.mark.parametrize("count", [4, 16, 33])
def test_aspects_have_the_median_and_the_spread_asked_for(count):
    shapes = ensemble(Habit("prism", 0.5, aspect_spread=0.4), count)
    logarithm = np.log([np.ptp(np.concatenate(body.faces)[:, 2]) for body in shapes])
    assert len(shapes) == count
    assert np.all(np.diff(logarithm) > 0.0)
    assert logarithm.mean() == pytest.approx(np.log(0.5), abs=1e-9)
    assert logarithm.std() == pytest.approx(0.4, rel=1e-9)


@pytest.mark.parametrize(
    "habit",
    [Habit(name, distance_spread=0.3) for name in NAMES] + [Habit("trigonal", trigonality=0.5, distance_spread=0.2)],
)
def test_uneven_crystals_close_and_keep_all_faces(habit):
    whole = describe(shape(replace(habit, distance_spread=0.0)))
    shapes = ensemble(habit, 24, seed=5)
    assert len({body.volume for body in shapes}) == 24
    for body in shapes:
        about = describe(body)
        assert about["closed"]
        assert about["faces"] == whole["faces"]


def test_distances_scatter_as_asked():
    shapes = ensemble(Habit("prism", distance_spread=0.05), 400)
    factors = np.array([body.offsets[:3].ravel() for body in shapes]) / (np.sqrt(3.0) / 4.0)
    # 2400 independent numbers, hardly any set drawn again at this spread
    assert factors.mean() == pytest.approx(1.0, abs=4 * 0.05 / np.sqrt(2400))
    assert factors.std() == pytest.approx(0.05, rel=4 / np.sqrt(4800))
    assert abs(np.corrcoef(factors.T) - np.eye(6)).max() < 4.5 / np.sqrt(400)


def test_seed_fixes_the_ensemble():
    habit = Habit("truncated-bipyramid", distance_spread=0.2)
    first = [body.packed_slabs().tobytes() for body in ensemble(habit, 6, seed=3)]
    assert first == [body.packed_slabs().tobytes() for body in ensemble(habit, 6, seed=3)]
    assert first == [body.packed_slabs().tobytes() for body in ensemble(habit, 12, seed=3)][:6]
    assert not set(first) & {body.packed_slabs().tobytes() for body in ensemble(habit, 6, seed=4)}


# ---------------------------------------------------------------- bad input


@pytest.mark.parametrize(
    ("values", "words"),
    [
        ({"name": "bipyramyd"}, "did you mean bipyramid"),
        ({"name": "xyz"}, "a habit is one of prism"),
        ({"aspect": 0.0}, "aspect .* 0.01 to 100; got 0"),
        ({"aspect": np.nan}, "aspect .* got nan"),
        ({"name": "bipyramid", "aspect": 2.0}, "aspect .* is for prism or .* not for bipyramid"),
        ({"pyramid_upper": 0.5}, "upper pyramid .* is for truncated-bipyramid or pyramid"),
        ({"name": "pyramid", "pyramid_upper": 1.5}, "upper pyramid .* 0.001 to 1"),
        ({"name": "pyramid", "pyramid_lower": 0.5}, "lower pyramid .* is for truncated-bipyramid"),
        ({"name": "trigonal", "trigonality": 2.0}, "trigonality .* 0 to 1"),
        ({"name": "prism", "trigonality": 0.5}, "trigonality .* is for trigonal"),
        ({"name": "bipyramid", "miller": (2, 1, -3, 1)}, "24 faces"),
        ({"name": "bipyramid", "miller": (1, 0, 1, 1)}, "minus the sum"),
        ({"name": "bipyramid", "miller": (1, 0, -1, 0)}, "no pyramid"),
        ({"name": "bipyramid", "miller": (0, 0, 0, 1)}, "no pyramid"),
        ({"name": "bipyramid", "miller": (1, 0, -1)}, "four whole numbers"),
        ({"name": "bipyramid", "miller": (0.5, 0, -0.5, 1)}, "four whole numbers"),
        ({"name": "prism", "miller": (2, 0, -2, 1)}, "for habits with pyramid faces"),
        ({"face_distances": (1.0, 1.0)}, "six factors"),
        ({"face_distances": (1.0, 1.0, 1.0, 1.0, 1.0, -1.0)}, "six factors"),
        ({"face_distances": (1.0, 1.0, 1.0, 1.0, 1.0, np.inf)}, "six factors"),
        ({"aspect_spread": 2.0}, "aspect spread is 0 to 1"),
        ({"distance_spread": np.nan}, "distance spread is 0 to 0.5"),
        ({"name": "bipyramid", "aspect_spread": 0.1}, "no aspect"),
    ],
)
def test_senseless_habits_are_refused_in_words(values, words):
    with pytest.raises(DomainError, match=words):
        Habit(**values)


@pytest.mark.parametrize("name", NAMES)
def test_a_side_cut_off_is_refused(name):
    # a triangle keeps its three sides whatever their distances
    options = {"trigonality": 0.5} if name == "trigonal" else {}
    with pytest.raises(DomainError, match="does not touch"):
        shape(Habit(name, face_distances=(3.0, 1.0, 1.0, 1.0, 1.0, 1.0), **options))


def test_spreads_that_lead_nowhere_are_refused():
    with pytest.raises(DomainError, match=r"aspect 0\.01 with a spread"):
        ensemble(Habit("prism", 0.01, aspect_spread=0.5))
    with pytest.raises(DomainError, match="no whole crystals"):
        ensemble(Habit("prism", face_distances=(3.0, 1.0, 1.0, 1.0, 1.0, 1.0), distance_spread=0.01))
    with pytest.raises(DomainError, match="count above 0"):
        ensemble(Habit("prism"), 0)


def test_what_a_habit_has_anyway_may_be_said():
    assert shape(Habit("bipyramid", 0.0, 1.0, 1.0)).volume == shape(Habit("bipyramid")).volume
