"""Sorting of paths: the automaton against the face sequences themselves, in traced light."""

from __future__ import annotations

import time

import numpy as np
import pytest

from skyoptics.crystals import arcs, sorting
from skyoptics.crystals.arc_groups import candidates
from skyoptics.crystals.faces import face_normal
from skyoptics.crystals.habits import Habit, shape
from skyoptics.crystals.orientations import Orientation
from skyoptics.crystals.prepared import prepare
from skyoptics.crystals.shapes import hexagonal_prism
from skyoptics.crystals.sorting import OTHER, Sorter, describe, sort_codes, sorter
from skyoptics.crystals.tracing import trace_exits
from skyoptics.geometry.axes import direction
from skyoptics.kernels.lanes import LONGER, path_faces
from skyoptics.units import DEG

N = 1.31
AZIMUTH = 2.0
SHAPES = {"prism": hexagonal_prism(0.8), "pyramid": shape(Habit("truncated-bipyramid"))}


def code_of(arcs_sorter: Sorter, *labels: int) -> int:
    code = 0
    for label in labels:
        code = code << 5 | arcs_sorter.labels.index(label) + 1
    return code


def is_lost(found: Sorter, code: int) -> bool:
    state = 0
    for face in path_faces(code)[1:-1]:
        state = found.step[state, face]
    return state == len(found.step) - 1


@pytest.mark.parametrize(
    ("crystal", "law", "sun_deg", "tilt_deg", "rays"),
    [
        ("prism", "random", 20.0, 0.0, 2**12),
        ("prism", "plate", 20.0, 0.1, 2**13),
        ("prism", "plate", -15.0, 1.0, 2**13),
        ("prism", "column", 20.0, 0.1, 2**12),
        ("prism", "column", 50.0, 0.1, 2**12),
        ("prism", "parry", 10.0, 0.1, 2**13),
        ("prism", "lowitz", 20.0, 0.1, 2**12),
        ("prism", "axis", 20.0, 0.1, 2**12),
        ("pyramid", "random", 20.0, 0.0, 2**11),
        ("pyramid", "plate", 20.0, 0.1, 2**12),
        ("pyramid", "plate", 65.0, 0.1, 2**12),
        ("pyramid", "column", 20.0, 0.1, 2**11),
        ("pyramid", "parry", 20.0, 0.1, 2**12),
        ("pyramid", "lowitz", 20.0, 0.1, 2**11),
    ],
)
def test_every_traced_path_gets_the_name_of_its_faces(
    crystal: str, law: str, sun_deg: float, tilt_deg: float, rays: int
) -> None:
    body = SHAPES[crystal]
    sun = direction(AZIMUTH, sun_deg * DEG)
    found = sorter(body.face_normals, law, sun_deg * DEG, N, tilt_deg * DEG)
    prepared = prepare(body, Orientation(law, tilt_deg * DEG), lambda x: N + 0.0 * x, (5e-7, 5e-7), sun, sorter=found)
    exits, _ = trace_exits(prepared, 3, 0, rays)
    view, power = -exits.direction.astype(np.float64), exits.stokes[:, 0].astype(np.float64)
    azimuth = np.arctan2(view[:, 0], view[:, 1]) - AZIMUTH
    elevation = np.arcsin(np.clip(view[:, 2], -1.0, 1.0))
    whole = exits.path != LONGER
    wanted = np.zeros(len(view), dtype=int)
    for code in np.unique(exits.path[whole]):
        faces = [found.labels[face] for face in path_faces(int(code))]
        for name in candidates(law, faces) if law != "axis" else ():
            rows = np.flatnonzero(exits.path == code)
            own = arcs.belongs(name, azimuth[rows], elevation[rows], sun_deg * DEG, N, tilt_deg * DEG)
            assert np.all(wanted[rows[own]] == 0)  # no light has two names
            if own.any():
                wanted[rows[own]] = found.names.index(name)
    groups = sort_codes(found, exits.path, view, sun)
    # a lane works in float32: light on the border between upper and lower tangent arc may fall on either side of it
    assert np.mean(groups[whole] != exits.group[whole]) < 1e-4
    assert np.all(groups[~whole] == 0)
    wrong = np.flatnonzero(whole & (wanted != groups))
    assert all(is_lost(found, int(exits.path[row])) for row in wrong)
    assert power[wrong].sum() < (1e-3 if crystal == "pyramid" else 1e-12) * power.sum()
    named = power[groups > 0].sum() / power.sum()
    assert named == 0.0 if law == "axis" else named > 0.01


def test_long_paths_keep_their_name() -> None:
    # what the code of twelve faces cannot tell: plates keep what basal and side faces send round between them
    found = sorter(SHAPES["prism"].face_normals, "plate", 0.3, N)
    prepared = prepare(
        SHAPES["prism"], Orientation("plate"), lambda x: N + 0.0 * x, (5e-7, 5e-7), direction(0.0, 0.3), sorter=found
    )
    exits, _ = trace_exits(prepared, 1, 0, 2**17)
    long = exits.path == LONGER
    view, power = -exits.direction[long].astype(np.float64), exits.stokes[long, 0].astype(np.float64)
    names = np.array(found.names)[exits.group[long]]
    assert long.sum() > 500
    assert power[names == OTHER].sum() < 0.05 * power.sum()
    for name, height in (("parhelic_circle", 0.3), ("subparhelic_circle", -0.3)):
        assert (names == name).sum() > 50
        np.testing.assert_allclose(np.arcsin(view[names == name, 2]), height, atol=1e-4)


def test_names_change_with_sun_and_tilt() -> None:
    normals = SHAPES["prism"].face_normals
    low, high = (sorter(normals, "column", height * DEG, N) for height in (20.0, 40.0))
    assert {"upper_tangent", "lower_tangent"} <= set(low.names)
    assert "circumscribed" not in low.names
    assert "circumscribed" in high.names
    assert not {"upper_tangent", "lower_tangent"} & set(high.names)
    above, below = direction([0.0, 0.0], [0.8, -0.1])
    code = code_of(low, 3, 5)
    groups = sort_codes(low, [code, code], [above, below], direction(0.0, 20.0 * DEG))
    assert [low.names[group] for group in groups] == ["upper_tangent", "lower_tangent"]
    for tilt, name in ((0.1, "subsun"), (1.0, "sun_pillar")):
        plates = sorter(normals, "plate", 0.2, N, tilt * DEG)
        group = sort_codes(plates, [code_of(plates, 1)], [direction(0.0, -0.2)], direction(0.0, 0.2))[0]
        assert plates.names[group] == name


def test_light_of_no_test_goes_on_to_other() -> None:
    found = sorter(SHAPES["prism"].face_normals, "column", 0.3, N)
    code = code_of(found, 3, 1, 6, 3)  # a diffuse arc counts near the anthelic point alone
    for azimuth, name in ((np.pi, "greenler_diffuse"), (0.0, OTHER)):
        group = sort_codes(found, [code], [direction(azimuth + 1.0, 0.3)], direction(1.0, 0.3))[0]
        assert found.names[group] == name


def test_faces_without_number_make_no_arc() -> None:
    normals = np.array([face_normal(label) for label in (3, 5, 1)] + [[0.6, 0.0, 0.8]])
    found = sorter(normals, "random", 0.3, N)
    assert found.labels == (3, 5, 1, 0)
    assert found.names[found.table[0, 0, 1]] == "halo_22"
    assert found.names[found.table[0, 0, 2]] == "halo_46"
    assert not found.table[3].any()
    assert not found.table[:, :, 3].any()
    assert np.all(found.step[:, 3] == len(found.step) - 1)
    assert not found.table[:, -1].any()


def test_codes_are_told_in_faces() -> None:
    found = sorter(SHAPES["pyramid"].face_normals, "random", 0.3, N)
    assert describe(found, code_of(found, 13, 25)) == "13-25"
    assert describe(found, code_of(found, 1, 3, 5, 2)) == "1-3-5-2"
    assert describe(found, LONGER) == "more than 12 faces"
    assert describe(sorter([[0.6, 0.0, 0.8], [0.0, 0.0, 1.0]], "random", 0.3, N), 1 << 5 | 2) == "?-1"


def test_tables_fit_the_kernels_and_are_made_in_no_time() -> None:
    normals = SHAPES["pyramid"].face_normals
    for law in ("random", "plate", "column", "parry", "lowitz", "axis"):
        sorting._sorter.cache_clear()
        sorting._automaton.cache_clear()
        start = time.perf_counter()
        found = sorter(normals, law, 0.3, N, 0.01)
        assert time.perf_counter() - start < 0.5
        assert sorter(normals, law, 0.3, N, 0.01) is found
        states, faces = found.step.shape
        assert (found.step.dtype, found.table.dtype, found.outside.dtype) == (np.uint16, np.uint8, np.uint8)
        assert found.table.shape == (faces, states, faces) == (20, states, 20)
        assert found.outside.shape == (20,)
        assert found.step.max() < states <= 500  # a lane keeps 16 bits, a table is to stay in the cache
        assert max(found.table.max(), found.outside.max()) < len(found.names) == len(found.part) == len(found.otherwise)
        assert found.names[0] == OTHER
        assert len(sorting._automaton(found.labels)[0]) == states
    # products of side and basal faces: the twelve of the hexagonal prism, and the last state
    assert len(sorter(SHAPES["prism"].face_normals, "plate", 0.3, N).step) == 13
