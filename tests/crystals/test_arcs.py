"""Named arcs: the table, closed forms, limits of existence, spacing, matching of face sequences."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skyoptics.crystals import arcs
from skyoptics.crystals.arc_data import TABLE
from skyoptics.crystals.arc_feature import KINDS, PARTS
from skyoptics.crystals.arc_groups import LAWS, candidates
from skyoptics.crystals.arc_regions import circle_radius, tangent_join
from skyoptics.crystals.faces import face_normal
from skyoptics.crystals.passage import FREE_ANGLES
from skyoptics.errors import DomainError
from skyoptics.units import DEG

N = 1.31

WANTED = {
    "halo_9",
    "halo_18",
    "halo_20",
    "halo_22",
    "halo_23",
    "halo_24",
    "halo_35",
    "halo_46",
    "parhelia",
    "parhelic_circle",
    "parhelia_120",
    "circumzenithal",
    "circumhorizontal",
    "kern",
    "upper_tangent",
    "lower_tangent",
    "circumscribed",
    "supralateral",
    "infralateral",
    "upper_suncave_parry",
    "upper_sunvex_parry",
    "lower_suncave_parry",
    "lower_sunvex_parry",
    "upper_lowitz",
    "middle_lowitz",
    "lower_lowitz",
    "heliac",
    "subhelic",
    "wegener",
    "hastings",
    "tricker",
    "subsun",
    "subparhelia",
}


def locus(name: str, elevation_deg: float, index: float = N) -> tuple[np.ndarray, np.ndarray]:
    azimuth, elevation = arcs.locus(name, elevation_deg * DEG, index)
    return azimuth / DEG, elevation / DEG


def vectors(name: str, elevation_deg: float) -> np.ndarray:
    azimuth, elevation = arcs.locus(name, elevation_deg * DEG, N)
    return np.stack([np.cos(elevation) * np.sin(azimuth), np.cos(elevation) * np.cos(azimuth), np.sin(elevation)], 1)


def test_all_names_are_there_and_the_table_is_complete() -> None:
    assert not WANTED - set(arcs.names())
    assert len(set(arcs.names())) == len(arcs.names())
    for entry in TABLE:
        assert arcs.feature(entry.name) is entry
        assert entry.kind in KINDS
        assert entry.part in PARTS
        texts = (entry.title, entry.where, entry.exists, entry.told_apart, *entry.sources)
        assert all(len(text) >= 5 for text in texts), entry.name
        for crystals in entry.crystals:
            assert crystals.law in LAWS
            assert crystals.sequences
            free = FREE_ANGLES.get(crystals.law, 3)
            assert len(crystals.free_angles) == free
            assert entry.kind != "fold" or free == 2


def test_misspelt_name_gets_the_nearest_one() -> None:
    for call in (
        lambda: arcs.feature("circumzenital"),
        lambda: arcs.locus("circumzenital", 0.1, N),
        lambda: arcs.exists("circumzenital", 0.1, N),
    ):
        with pytest.raises(DomainError, match="did you mean circumzenithal"):
            call()


@pytest.mark.parametrize(
    ("elevation", "index"), [(91.0, N), (-91.0, N), (np.nan, N), (20.0, 1.0), (20.0, 2.1), (20.0, np.nan)]
)
def test_numbers_out_of_range_are_refused(elevation: float, index: float) -> None:
    with pytest.raises(DomainError, match="got"):
        arcs.locus("parhelia", elevation * DEG, index)


def test_a_feature_that_is_not_diffuse_has_no_region() -> None:
    with pytest.raises(DomainError, match="use locus"):
        arcs.within("parhelia", 0.0, 0.0, 0.3, N)


# Bravais (1847); values computed from his formula at n = 1.31
PARHELIA = {0: 21.839, 10: 22.483, 20: 24.576, 30: 28.705, 40: 36.324, 50: 51.505, 55: 66.039, 60: 98.780}


@pytest.mark.parametrize(("elevation", "offset"), PARHELIA.items())
def test_parhelia_stand_where_bravais_puts_them(elevation: float, offset: float) -> None:
    for name, sign in (("parhelia", 1.0), ("subparhelia", -1.0)):
        azimuth, height = locus(name, elevation)
        if name == "subparhelia" and elevation == 0:
            assert azimuth.size == 0
            continue
        np.testing.assert_allclose(azimuth, [-offset, np.nan, offset], atol=1e-3)
        np.testing.assert_allclose(height, [sign * elevation, np.nan, sign * elevation], atol=1e-9)
    bravais = np.sqrt(N**2 - np.sin(elevation * DEG) ** 2) / np.cos(elevation * DEG)
    assert abs(locus("parhelia", elevation)[0][2] - (2.0 * np.arcsin(bravais / 2.0) / DEG - 60.0)) < 1e-6
    twice = locus("parhelia_44", elevation)[0][2] - 2.0 * locus("parhelia", elevation)[0][2]
    assert abs((twice + 180.0) % 360.0 - 180.0) < 1e-9


# Least deviation 2 asin(n sin(A/2)) − A (Descartes); wedges of {10-11} faces at c/a = 1.629, list 28.0 … 80.2° in Tape &
# Moilanen (2006, from memory)
CIRCLES = {9: 8.952, 18: 18.271, 20: 19.902, 22: 21.839, 23: 22.864, 24: 23.818, 35: 34.925, 46: 45.733}


@pytest.mark.parametrize(("degrees", "radius"), CIRCLES.items())
def test_circles_have_least_deviation_as_radius(degrees: int, radius: float) -> None:
    sun = np.array([0.0, np.cos(0.5), np.sin(0.5)])
    azimuth, elevation = arcs.locus(f"halo_{degrees}", 0.5, N)
    view = np.stack([np.cos(elevation) * np.sin(azimuth), np.cos(elevation) * np.cos(azimuth), np.sin(elevation)], 1)
    np.testing.assert_allclose(np.arccos(view @ sun) / DEG, radius, atol=1.5e-3)
    exact = {22: 2.0 * np.arcsin(N / 2.0) - np.pi / 3.0, 46: 2.0 * np.arcsin(N / np.sqrt(2.0)) - np.pi / 2.0}
    if degrees in exact:
        np.testing.assert_allclose(np.arccos(view @ sun), exact[degrees], atol=1e-9)


def test_a_wedge_too_steep_for_the_index_makes_no_circle() -> None:
    assert arcs.exists("halo_46", 0.3, 1.40)
    assert not arcs.exists("halo_46", 0.3, 1.42)  # n > √2


# Circumzenithal sin e = √(n² − cos²h), circumhorizontal cos e = √(n² − sin²h) (Bravais 1847)
ZENITHAL = {5: 58.288, 10: 59.753, 15: 62.242, 20: 65.886, 25: 71.065, 30: 79.390}
HORIZONTAL = {60: 10.610, 65: 18.935, 70: 24.114, 80: 30.247}


@pytest.mark.parametrize(
    ("name", "elevation", "height"),
    [(name, h, e) for name in ("circumzenithal", "kern") for h, e in ZENITHAL.items()]
    + [("subcircumzenithal", h, -e) for h, e in ZENITHAL.items()]
    + [("circumhorizontal", h, e) for h, e in HORIZONTAL.items()]
    + [("subcircumhorizontal", h, -e) for h, e in HORIZONTAL.items()],
)
def test_level_arcs_stand_at_their_closed_form(name: str, elevation: float, height: float) -> None:
    _, level = locus(name, elevation)
    sine = np.sqrt(N**2 - np.cos(elevation * DEG) ** 2) if abs(height) > 50 else None
    wanted = np.arcsin(sine) / DEG if sine else np.arccos(np.sqrt(N**2 - np.sin(elevation * DEG) ** 2)) / DEG
    assert abs(abs(height) - wanted) < 1e-3
    np.testing.assert_allclose(level[np.isfinite(level)], np.sign(height) * wanted, atol=1e-6)


@pytest.mark.parametrize(
    ("name", "inside", "outside"),
    [
        ("circumzenithal", 32.1, 32.3),  # cos h = √(n² − 1): 32.196°
        ("kern", 31.0, 32.3),
        ("supralateral", 32.0, 32.4),
        ("circumhorizontal", 57.9, 57.7),  # 57.804°
        ("parhelia", 60.7, 60.8),  # sin²h = (4 − n²)/3: 60.753°
        ("subparhelia", 60.7, 60.8),
        ("parhelia_44", 60.7, 60.8),
        ("upper_tangent", 29.2, 29.3),  # 90° − 60.753° = 29.247°
        ("lower_tangent", 29.2, 29.3),
        ("circumscribed", 29.3, 29.2),
        ("subsun", 0.1, -0.1),
        ("upper_sunvex_parry", 16.0, 20.0),
    ],
)
def test_features_exist_up_to_their_limits(name: str, inside: float, outside: float) -> None:
    assert arcs.exists(name, inside * DEG, N)
    assert not arcs.exists(name, outside * DEG, N)
    assert locus(name, outside)[0].shape == locus(name, outside)[1].shape == (0,)


@pytest.mark.parametrize("name", [name for name in arcs.names() if "plate_arc" in name])
def test_plate_arcs_touch_their_circle_where_light_passes_symmetrically(name: str) -> None:
    # before and after, light makes half the deviation with the bisector of the faces, towards and away from the base of the
    # wedge (Snell's law with equal angles); 0.09° is the step of a locus
    touched = False
    for sequence in arcs.feature(name).crystals[0].sequences:
        first, last = face_normal(sequence[0]), face_normal(sequence[1])
        half = 0.5 * circle_radius(sequence, N)
        along, across = last - first, last + first
        along, across = along / np.linalg.norm(along), across / np.linalg.norm(across)
        sun_deg = np.arcsin(-np.cos(half) * along[2] - np.sin(half) * across[2]) / DEG
        if sun_deg < 0.0:
            continue
        sun = np.array([0.0, np.cos(sun_deg * DEG), np.sin(sun_deg * DEG)])
        nearest = np.nanmin(np.arccos(vectors(name, sun_deg) @ sun))
        assert abs(nearest - 2.0 * half) < 0.01 * DEG
        assert f"h = {sun_deg:.3g}°" in arcs.feature(name).where
        touched = True
    assert touched == (name not in ("upper_plate_arc_20", "upper_plate_arc_35"))


def test_tangent_arcs_touch_the_22_halo_above_and_below_the_sun() -> None:
    radius = (2.0 * np.arcsin(N / 2.0) - np.pi / 3.0) / DEG
    for name, sign in (("upper_tangent", 1.0), ("lower_tangent", -1.0)):
        azimuth, elevation = locus(name, 20.0)
        at = np.nanargmin(np.abs(azimuth))
        assert abs(elevation[at] - (20.0 + sign * radius)) < 0.01
    azimuth, elevation = locus("circumscribed", 45.0)
    near = np.abs(azimuth) < 0.5
    assert abs(elevation[near].max() - (45.0 + radius)) < 0.01
    assert abs(elevation[near].min() - (45.0 - radius)) < 0.01


def test_tangent_arcs_join_into_one_closed_line() -> None:
    assert abs(tangent_join(N) / DEG - 29.247) < 1e-3
    ends = vectors("circumscribed", 29.4)
    assert not np.isnan(ends).any()
    assert np.linalg.norm(ends[0] - ends[-1]) < 0.1 * DEG


def test_circumscribed_halo_is_nearly_round_at_a_high_sun() -> None:
    view = vectors("circumscribed", 80.0)
    sun = np.array([0.0, np.cos(80 * DEG), np.sin(80 * DEG)])
    radius = np.arccos(view @ sun) / DEG
    assert radius.min() > 21.8
    assert radius.max() < 22.3


def test_supralateral_arc_touches_the_circumzenithal_arc_above_the_sun() -> None:
    for h in (5.0, 15.0, 25.0):
        azimuth, elevation = locus("supralateral", h)
        top = np.nanargmin(np.abs(azimuth) + 100.0 * (elevation < 50.0))
        assert abs(elevation[top] - np.nanmedian(locus("circumzenithal", h)[1])) < 0.01


def test_supralateral_and_infralateral_arcs_stay_outside_the_46_halo_and_touch_it() -> None:
    sun = np.array([0.0, np.cos(15 * DEG), np.sin(15 * DEG)])
    least = (2.0 * np.arcsin(N / np.sqrt(2.0)) - np.pi / 2.0) / DEG
    for name in ("supralateral", "infralateral"):
        radius = np.arccos(vectors(name, 15.0) @ sun) / DEG
        assert np.nanmin(radius) > least - 1e-6
        assert np.nanmin(radius) < least + 0.01


def test_parry_arcs_bend_as_their_names_say() -> None:
    for name, h, above, hollow in (
        ("upper_suncave_parry", 30.0, True, True),
        ("upper_sunvex_parry", 8.0, True, False),
        ("lower_suncave_parry", 60.0, False, True),
        ("lower_sunvex_parry", 10.0, False, False),
    ):
        azimuth, elevation = locus(name, h)
        middle = elevation[np.nanargmin(np.abs(azimuth))]
        side = np.nanmean(elevation[np.abs(np.abs(azimuth) - 3.0) < 0.5])
        assert (middle > h) == above, name
        towards_sun_at_the_sides = (side < middle) == above
        assert towards_sun_at_the_sides == hollow, name


def test_parry_arc_stands_above_the_tangent_arc_and_touches_the_halo_at_49_1() -> None:
    # symmetrical passage of faces 3 and 7: incidence 90° − h = asin(n sin 30°)
    h = 90.0 - np.arcsin(N / 2.0) / DEG
    azimuth, elevation = locus("upper_suncave_parry", h)
    assert abs(np.nanmax(elevation) - h - (2.0 * np.arcsin(N / 2.0) / DEG - 60.0)) < 1e-4
    assert np.nanmax(locus("upper_suncave_parry", 20.0)[1]) > locus("upper_tangent", 20.0)[1].max() + 3.0
    assert azimuth.size > 100


def test_lowitz_arcs_pass_the_parhelia() -> None:
    parhelion = vectors("parhelia", 20.0)[2]
    for name in ("upper_lowitz", "middle_lowitz", "lower_lowitz"):
        nearest = np.nanmin(np.linalg.norm(vectors(name, 20.0) - parhelion, axis=1))
        assert nearest < 0.15 * DEG, name


def test_arcs_near_the_anthelic_point_pass_through_it() -> None:
    anthelic = np.array([0.0, -np.cos(20 * DEG), np.sin(20 * DEG)])
    for name in ("wegener", "tricker"):
        assert np.nanmin(np.linalg.norm(vectors(name, 20.0) - anthelic, axis=1)) < 0.1 * DEG, name


def test_mirror_arcs_are_turned_suns() -> None:
    # heliac: mirror in a plane tilted 60°, lowest point opposite the sun 2 · 30° below its height; subhelic: the sun turned by
    # 120° about a level axis square to it stands at 60° − h on the far side
    azimuth, elevation = locus("heliac", 10.0)
    assert abs(np.nanmin(elevation) - (10.0 - 60.0)) < 0.01
    assert abs(elevation[np.nanargmin(np.abs(azimuth))] - 10.0) < 0.2
    azimuth, elevation = locus("subhelic", 10.0)
    assert abs(np.nanmax(elevation) - 50.0) < 0.01
    assert abs(np.nanmin(elevation) + 70.0) < 0.01
    for name, sign in (("parhelic_circle", 1.0), ("subparhelic_circle", -1.0)):
        azimuth, elevation = locus(name, 25.0)
        np.testing.assert_allclose(elevation[np.isfinite(elevation)], sign * 25.0, atol=1e-9)
        assert np.nanmax(np.abs(azimuth)) > 179.0


@settings(max_examples=12, deadline=None)
@given(st.sampled_from(sorted(set(arcs.names()) - {"tricker"})), st.floats(0.5, 89.0), st.floats(1.305, 1.325))
def test_points_lie_close_and_both_sides_are_alike(name: str, elevation: float, index: float) -> None:
    azimuth, height = arcs.locus(name, elevation * DEG, index)
    assert azimuth.shape == height.shape
    if not azimuth.size:
        return
    assert np.isfinite(azimuth[[0, -1]]).all()
    assert not (np.isnan(azimuth[1:]) & np.isnan(azimuth[:-1])).any()
    assert np.nanmax(np.abs(azimuth)) <= np.pi
    view = np.stack([np.cos(height) * np.sin(azimuth), np.cos(height) * np.cos(azimuth), np.sin(height)], axis=1)
    step = np.linalg.norm(np.diff(view, axis=0), axis=1)
    assert not np.isfinite(step).any() or np.nanmax(step) <= 0.1 * DEG
    here = view[np.isfinite(view[:, 0])]
    mirrored = here[:: max(1, len(here) // 300)] * np.array([-1.0, 1.0, 1.0])
    apart = np.array([np.linalg.norm(here - point, axis=1).min() for point in mirrored])
    assert np.mean(apart < 0.15 * DEG) > 0.97


def test_sequences_find_their_names() -> None:
    assert candidates("plate", (1, 5)) == ("circumzenithal",)
    assert candidates("plate", (6, 2)) == ("circumhorizontal",)
    assert candidates("plate", (4, 8)) == ("parhelia",)
    assert candidates("plate", (4, 1, 2, 8)) == ("parhelia",)  # two basal reflections change nothing
    assert candidates("plate", (4, 2, 8)) == ("subparhelia",)
    assert candidates("plate", (7,)) == ("parhelic_circle",)
    assert candidates("plate", (2,)) == ("subsun", "sun_pillar")
    assert candidates("plate", (1, 4, 5, 2)) == ("parhelia_120",)
    assert candidates("plate", (1, 2)) == ()  # straight on
    assert candidates("column", (6, 8)) == ("upper_tangent", "lower_tangent", "circumscribed")
    assert candidates("column", (2, 7)) == ("infralateral",)
    assert candidates("column", (7, 2)) == ("supralateral",)
    assert candidates("column", (4, 2, 8)) == ("wegener",)
    assert candidates("parry", (3, 5)) == ("upper_suncave_parry",)
    assert candidates("parry", (8, 4)) == ("upper_sunvex_parry",)
    assert candidates("parry", (8, 6)) == ("lower_suncave_parry",)
    assert candidates("parry", (7, 5)) == ("lower_sunvex_parry",)
    assert candidates("parry", (6, 8)) == ()
    assert candidates("lowitz", (8, 4)) == ("middle_lowitz",)
    assert candidates("random", (18, 22 + 4)) == ("halo_18",)
    for faces, radius in (((7, 1), 46), ((1, 7), 46), ((26, 3), 9), ((27, 1), 23), ((2, 15), 23), ((17, 3), 24)):
        assert candidates("random", faces) == (f"halo_{radius}",)  # a wedge is one either way
    assert candidates("plate", (17, 14)) == ("upper_plate_arc_20",)
    assert candidates("plate", (24, 27)) == ("lower_plate_arc_20",)
    assert candidates("column", (24, 27)) == candidates("column", (17, 14)) == ("column_arc_20",)
    assert candidates("column", (2, 15)) == candidates("column", (27, 1)) == ("column_arc_23",)
    assert candidates("random", (7, 4)) == ()
    assert candidates("random", (0, 4)) == ()
    with pytest.raises(DomainError, match="did you mean plate"):
        candidates("plates", (1, 3))


def test_no_light_has_two_names_save_the_tangent_arcs() -> None:
    seen: dict[tuple[str, tuple[int, ...]], str] = {}
    for entry in TABLE:
        for crystals in entry.crystals if entry.scatterings == 1 else ():
            for sequence in crystals.sequences:
                named = set(candidates(crystals.law, sequence))
                assert entry.name in named
                if entry.name not in ("upper_tangent", "lower_tangent", "circumscribed", "sun_pillar", "subsun"):
                    assert named == {entry.name}
                seen[(crystals.law, sequence)] = entry.name
    assert len(seen) > 80


def test_the_tangent_arcs_share_out_their_light() -> None:
    upper, lower = locus("upper_tangent", 20.0), locus("lower_tangent", 20.0)
    for name, (azimuth, elevation), own in (
        ("upper_tangent", upper, True),
        ("upper_tangent", lower, False),
        ("lower_tangent", lower, True),
        ("lower_tangent", upper, False),
    ):
        inside = arcs.belongs(name, azimuth * DEG, elevation * DEG, 20.0 * DEG, N)
        assert inside[np.isfinite(azimuth)].all() == own
    assert not arcs.belongs("circumscribed", 0.0, 0.7, 20.0 * DEG, N)
    assert not arcs.belongs("upper_tangent", 0.0, 1.0, 40.0 * DEG, N)
    assert arcs.belongs("circumscribed", 0.0, 1.0, 40.0 * DEG, N)


def test_the_tilt_decides_between_subsun_and_pillar() -> None:
    for name, tilt, own in (
        ("subsun", 0.1, True),
        ("subsun", 1.0, False),
        ("sun_pillar", 0.1, False),
        ("sun_pillar", 1.0, True),
    ):
        assert arcs.belongs(name, 0.0, -0.1, 0.1, N, tilt=tilt * DEG) == own
