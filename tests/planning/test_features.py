"""Closed forms of spherical geometry, written again here; Bravais' parhelia; heights of the arcs about the zenith."""

import subprocess
import sys

import numpy as np
import pytest

from skyoptics.crystals import arcs
from skyoptics.errors import DomainError
from skyoptics.planning import features
from skyoptics.planning.outlines import measure
from skyoptics.units import DEG

HEIGHTS = (0.0, 1.0, 5.0, 10.0, 15.0, 20.0, 25.0, 30.0, 35.0, 40.0, 42.0, 42.36)


def turned(angle_deg: float) -> float:
    return (angle_deg + 180.0) % 360.0 - 180.0


@pytest.mark.parametrize("height", HEIGHTS)
@pytest.mark.parametrize("name", ["primary", "secondary", "moonbow"])
def test_bow_stands_where_spherical_geometry_puts_it(name: str, height: float) -> None:
    radius = {"primary": 42.37, "secondary": 53.48, "moonbow": 42.37}[name]  # handbook ch. 57, Table 57-1
    seen = features.find(name).standing(200.0 * DEG, height * DEG)
    assert seen.crown_elevation / DEG == pytest.approx(radius - height, abs=1e-9)
    assert seen.crown_azimuth / DEG == pytest.approx(20.0, abs=1e-9)
    # the right-angled triangle antisolar point, point of the horizon under it, foot: cos r = cos h cos Δ
    aside = np.degrees(np.arccos(np.cos(radius * DEG) / np.cos(height * DEG)))
    left, right = (turned(foot / DEG - 20.0) for foot in seen.feet)
    assert (left, right) == pytest.approx((-aside, aside), abs=1e-8)


@pytest.mark.parametrize("height", HEIGHTS)
def test_share_and_feet_agree_with_the_outline(height: float) -> None:
    feature = features.find("primary")
    azimuth, elevation = feature.outline(310.0 * DEG, height * DEG)
    seen = feature.standing(310.0 * DEG, height * DEG)
    assert np.max(elevation) == pytest.approx(seen.crown_elevation, abs=1e-9)
    above = elevation[:-1] > 0.0
    assert above.mean() == pytest.approx(seen.share, abs=2.0 / len(above))
    # points beside the horizon are within one step of a foot
    crossing = np.flatnonzero((elevation[1:] > 0.0) != (elevation[:-1] > 0.0))
    for place in crossing:
        nearest = min(abs(turned((azimuth[place] - foot) / DEG)) for foot in seen.feet)
        assert nearest < 0.1 / np.cos(elevation[place])


def test_bow_at_sunset_is_half_a_circle() -> None:
    assert features.find("primary").standing(1.0, 0.0).share == pytest.approx(0.5, abs=1e-12)


def test_halo_with_the_sun_high_closes_and_passes_the_zenith() -> None:
    halo = features.find("halo_22")
    assert halo.radius_deg == pytest.approx(21.839, abs=1e-3)  # least deviation by a 60° wedge, n = 1.31
    seen = halo.standing(90.0 * DEG, 80.0 * DEG)
    assert seen.crown_elevation / DEG == pytest.approx(180.0 - 80.0 - halo.radius_deg)
    assert seen.crown_azimuth / DEG == pytest.approx(270.0)
    assert seen.feet == ()
    assert seen.share == 1.0
    half = halo.standing(90.0 * DEG, 0.0)
    assert [foot / DEG for foot in half.feet] == pytest.approx([90.0 - halo.radius_deg, 90.0 + halo.radius_deg])


@pytest.mark.parametrize(
    ("height", "aside"),
    [(0, 21.839), (10, 22.483), (20, 24.576), (30, 28.705), (40, 36.324), (50, 51.505), (55, 66.039), (60, 98.780)],
)
def test_parhelia_are_bravais(height: float, aside: float) -> None:
    # A. Bravais 1847, azimuths worked out at n = 1.31
    azimuth, elevation = features.find("parhelia").outline(100.0 * DEG, height * DEG)
    assert azimuth[[0, 2]] / DEG == pytest.approx([(100.0 - aside) % 360.0, 100.0 + aside], abs=1e-3)
    assert elevation[[0, 2]] / DEG == pytest.approx([height, height])


def test_zenith_arcs_stand_at_the_published_heights() -> None:
    # sin e = √(n² − cos²h) and cos e = √(n² − sin²h) at n = 1.31
    zenithal, horizontal = features.find("circumzenithal"), features.find("circumhorizontal")
    for height, top in ((0, 57.804), (5, 58.288), (10, 59.753), (15, 62.242), (20, 65.886), (25, 71.065), (30, 79.390)):
        assert zenithal.standing(0.0, height * DEG).crown_elevation / DEG == pytest.approx(top, abs=1e-3)
    for height, top in ((60, 10.610), (65, 18.935), (70, 24.114), (80, 30.247), (90, 32.196)):
        assert horizontal.standing(0.0, height * DEG).crown_elevation / DEG == pytest.approx(top, abs=1e-3)


@pytest.mark.parametrize(("name", "height"), [("circumzenithal", 5), ("circumzenithal", 22), ("circumhorizontal", 66)])
def test_zenith_arcs_are_as_wide_as_their_light_followed(name: str, height: float) -> None:
    azimuth, elevation = features.find(name).outline(0.0, height * DEG)
    followed, at = arcs.locus(name, height * DEG, 1.31)
    assert elevation[0] == pytest.approx(np.nanmax(at), abs=1e-9)
    width = np.max(np.abs(turned(azimuth / DEG)))
    # the locus leaves out what is fainter than a ten-thousandth
    assert np.nanmax(np.abs(followed)) / DEG == pytest.approx(width, abs=1.0)
    assert np.nanmax(np.abs(followed)) / DEG <= width + 0.1


def test_limits_of_zenith_arcs_and_weak_within_a_degree() -> None:
    zenithal, horizontal = features.find("circumzenithal"), features.find("circumhorizontal")
    limit = np.degrees(np.arccos(np.sqrt(1.31**2 - 1.0)))
    assert limit == pytest.approx(32.20, abs=0.005)
    assert zenithal.limits_deg == pytest.approx((0.0, limit), abs=1e-6)
    assert horizontal.limits_deg == pytest.approx((90.0 - limit, 90.0), abs=1e-6)
    assert [zenithal.weak(h * DEG) for h in (10.0, 31.1, 31.3, 32.19)] == [False, False, True, True]
    assert [horizontal.weak(h * DEG) for h in (57.81, 58.7, 58.9, 70.0)] == [True, True, False, False]
    assert not zenithal.exists(32.3 * DEG)
    assert not horizontal.exists(57.7 * DEG)
    assert features.find("primary").limits_deg == pytest.approx((0.0, 42.37))
    assert features.find("parhelia").limits_deg == pytest.approx((0.0, 60.753), abs=1e-3)  # sin²h = (4 − n²) / 3
    assert features.find("primary", radius_deg=30.0).limits_deg == pytest.approx((0.0, 30.0))


def test_level_of_a_hill_shows_more_of_a_bow() -> None:
    feature, dip = features.find("primary"), -1.0 * DEG
    seen = feature.standing(180.0 * DEG, 10.0 * DEG, level=dip)
    for foot in seen.feet:  # cosine law: the foot lies a radius from the antisolar point, on the horizon
        cosine = np.sin(dip) * np.sin(-10.0 * DEG) + np.cos(dip) * np.cos(10.0 * DEG) * np.cos(foot)
        assert np.degrees(np.arccos(cosine)) == pytest.approx(42.37, abs=1e-9)
    assert seen.share > feature.standing(180.0 * DEG, 10.0 * DEG).share
    assert feature.heights(level=dip)[0] == pytest.approx((dip, 43.37 * DEG), abs=1e-8)


@pytest.mark.parametrize("name", ["primary", "halo_46", "parhelic_circle", "upper_tangent", "circumzenithal"])
def test_outlines_have_no_gaps(name: str) -> None:
    azimuth, elevation = features.find(name).outline(0.3, 20.0 * DEG)
    view = np.stack([np.cos(elevation) * np.sin(azimuth), np.cos(elevation) * np.cos(azimuth), np.sin(elevation)])
    steps = np.linalg.norm(np.diff(view, axis=1), axis=0)
    assert np.nanmax(steps) <= 0.1 * DEG
    assert np.isfinite(steps).sum() > 100


def agreement_with_loci(name: str, count: int) -> float:
    """Return the share of sun heights, drawn at random, at which table and locus agree."""
    feature, good = features.find(name), []
    low, high = feature.limits_deg
    for height in np.random.default_rng(5).uniform(low, high, count) * DEG:
        expected = measure(*arcs.locus(name, float(height), 1.31))
        seen = feature.standing(0.0, float(height))
        feet = zip(seen.feet, expected.feet, strict=False)
        good.append(
            abs(seen.crown_elevation - expected.crown_elevation) < 0.2 * DEG
            and abs(turned((seen.crown_azimuth - expected.crown_azimuth) / DEG)) < 4.0  # crowns are flat
            and abs(seen.share - expected.share) < 0.04
            and len(seen.feet) == len(expected.feet)
            and all(abs(turned((one - other) / DEG)) < 2.5 for one, other in feet)
        )
    return float(np.mean(good))


@pytest.mark.parametrize("name", ["upper_suncave_parry", "upper_sunvex_parry"])
def test_tables_agree_with_loci(name: str) -> None:
    assert agreement_with_loci(name, 3) == 1.0


@pytest.mark.slow
@pytest.mark.parametrize("name", features.tabulated())
def test_all_tables_agree_with_loci(name: str) -> None:
    assert agreement_with_loci(name, 8) >= 0.6  # all but where branches come or go


def test_every_name_is_found_and_stands_somewhere() -> None:
    for name in features.names():
        feature = features.find(name)
        assert feature.title
        assert feature.body == ("moon" if name == "moonbow" else "sun")
    assert "subsun" not in features.names()
    assert features.find("halo_22", body="moon").body == "moon"


def test_fogbow_at_the_bow_angle_is_at_half_light() -> None:
    from scipy.special import airy

    # G. B. Airy 1838: Ai²(0) / Ai²(−1.01879), whatever the size of the drops; first maximum from Abramowitz & Stegun 10.13
    assert (airy(0.0)[0] / airy(-1.01879297)[0]) ** 2 == pytest.approx(0.44, abs=0.005)
    assert features.find("fogbow").radius_deg == 42.37


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"name": "primry"}, "did you mean primary"),
        ({"name": "subsun"}, "below the horizon whenever the sun is up"),
        ({"name": "halo_22", "radius_deg": 20.0}, "for a bow only"),
        ({"name": "primary", "radius_deg": 120.0}, "between 1 and 89"),
        ({"name": "parhelia", "index": 1.6}, "between 1.29 and 1.33"),
        ({"name": "primary", "body": "mars"}, '"sun" or "moon"'),
        ({"name": "moonbow", "body": "sun"}, "it is called primary"),
    ],
)
def test_what_cannot_be_is_refused_in_words(arguments: dict, message: str) -> None:
    with pytest.raises(DomainError, match=message):
        features.find(**arguments)


def test_planning_loads_nothing_heavy() -> None:
    code = (
        "import sys; import skyoptics.planning.windows, skyoptics.planning.alignment; "
        "from skyoptics.planning import features; features.find('upper_tangent').standing(0.0, 0.3); "
        "print([name for name in ('numba', 'matplotlib', 'scipy', 'colour') if name in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
