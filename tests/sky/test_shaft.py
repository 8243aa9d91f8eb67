"""Rain shaft: closed form against quadrature of the integral as it stands; limits of all volumes."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skyoptics.errors import DomainError
from skyoptics.light.air import Air
from skyoptics.optics.bins import Bins
from skyoptics.sky.amount import curtain, layer, path_factor
from skyoptics.sky.haze import Haze, layer_front
from skyoptics.sky.shaft import Shaft
from skyoptics.sky.slab import EVENTS, back, slab, transmission
from skyoptics.units import DEG, NM

LINES = Bins.lines(np.array([450, 550, 650]) * NM)
ELEVATIONS = np.array([-20, -3, -0.02, 0, 1, 10, 42, 60, 90]) * DEG
RAIN = Shaft(near=1e3, far=4e3, top=2e3, extinction=1e-3)


def inside(shaft, elevation, azimuth, sun_elevation, s):
    """Return whether rain is at distance s, and how far sunlight has come through it, by marching to the first face."""
    x, z = s * np.cos(elevation), shaft.eye_height + s * np.sin(elevation)
    rain = (x >= shaft.near) & (x <= shaft.far) & (z >= 0) & (z <= shaft.top)
    towards = -np.cos(azimuth) * np.cos(sun_elevation), np.sin(sun_elevation)  # of the sun: radially outwards, upwards
    ways = []
    for place, rate, low, high in ((x, towards[0], shaft.near, shaft.far), (z, towards[1], 0.0, shaft.top)):
        if abs(rate) > 1e-9:
            ways.append(((high if rate > 0 else low) - place) / rate)
    return rain, np.min(ways, axis=0)


def by_quadrature(shaft, elevation, azimuth, sun_elevation, haze=0.0, points=400_001):
    """Return amount and optical depth through the shaft by the midpoint rule on the bare definition."""
    far = min(shaft.far / max(np.cos(elevation), 1e-9), 3 * shaft.top / max(abs(np.sin(elevation)), 1e-9))
    s = (np.arange(points) + 0.5) * far / points
    step = s[1] - s[0]
    rain, way = inside(shaft, elevation, azimuth, sun_elevation, s)
    along = np.cumsum(rain * (EVENTS * shaft.extinction + haze)) * step
    x = s * np.cos(elevation)
    lit = rain & (x >= shaft.lit[0]) & (x <= shaft.lit[1])
    shading = EVENTS * shaft.extinction * way if shaft.shade else 0.0
    amount = np.sum(lit * shaft.extinction * np.exp(-along - np.where(rain, shading, 0.0))) * step
    return shaft.sunlit * amount, along[-1]


@settings(max_examples=60, deadline=None)
@given(
    st.floats(-30.0, 89.0),
    st.floats(-60.0, 60.0),
    st.sampled_from([0.0, 30.0, 75.0, 120.0, 180.0]),
    st.sampled_from([1e-5, 1e-3, 1e-2]),
    st.sampled_from([2.0, 300.0, 3000.0]),
    st.booleans(),
    st.sampled_from([(0.0, np.inf), (1500.0, 2500.0)]),
)
def test_closed_form_is_the_integral(elevation_deg, sun_deg, azimuth_deg, extinction, eye, shade, lit):
    shaft = Shaft(1e3, 4e3, 2e3, extinction, eye, lit, 0.7, shade)
    angles = elevation_deg * DEG, azimuth_deg * DEG, sun_deg * DEG
    expected, depth = by_quadrature(shaft, *angles)
    result = shaft.factors(LINES, angles[0], angles[2], angles[1])
    assert result.amount[0] == pytest.approx(expected, rel=2e-3, abs=1e-3 * extinction * 100)
    assert -np.log(result.behind[0]) == pytest.approx(depth, rel=2e-3, abs=EVENTS * extinction * 1.0)


def test_rays_through_the_shaft():
    """By hand: 42° up enters the wall at 1000/cos 42° = 1345.6 m and leaves by the top at 1998/sin 42° = 2986.0 m."""
    enter, leave = RAIN.reach(np.array([42.0, 0.0, 70.0, -0.0573, -20.0]) * DEG)
    np.testing.assert_allclose(enter[:2], [1345.63, 1000.0], rtol=0, atol=0.01)
    np.testing.assert_allclose(leave[:2], [2985.96, 4000.0], rtol=0, atol=0.01)
    assert enter[2] == leave[2] == pytest.approx(1000 / np.cos(70 * DEG))  # over its top
    assert leave[3] == pytest.approx(2.0 / np.sin(0.0573 * DEG), rel=1e-9)  # ends on the ground, inside
    assert enter[4] == leave[4] == pytest.approx(2.0 / np.sin(20 * DEG))  # ends on the ground before the rain


def test_inside_the_rain():
    """Near wall at the eye: straight up there is rain from the eye to the top."""
    enter, leave = Shaft(0.0, 3e3, 1500.0, 1e-3).reach(90 * DEG)
    assert enter == pytest.approx(0.0)
    assert leave == pytest.approx(1498.0)


def test_a_tall_wall_is_a_slab_on_its_side():
    """Sun and view level: the closed form of a slab for light that leaves where it came in (Chandrasekhar 1950, §69)."""
    shaft = Shaft(1e3, 5e3, 20e3, 5e-4, eye_height=2.0)
    amount = shaft.factors(LINES, 10 * DEG, 0.0).amount
    expected = back(EVENTS * 5e-4 * 4e3, 1.0, np.cos(10 * DEG), 1.0, 1.0) / EVENTS
    np.testing.assert_allclose(amount, expected, rtol=1e-9)


def shaft_amount(depth):
    shaft = Shaft(1e3, 4e3, 2e3, depth / 3e3)
    return shaft.factors(LINES, 0.0, 20 * DEG).amount[..., 0]


def shaft_behind(depth):
    return Shaft(1e3, 4e3, 2e3, depth / 3e3).factors(LINES, 0.0, 20 * DEG).behind[..., 0]


def shaft_own(depth):
    """What thick rain shines with in an even field of radiance 1."""
    return Shaft(1e3, 4e3, 2e3, depth / 3e3).factors(LINES, 0.0, 20 * DEG, veil=1.0).airlight[..., 0]


def even(cosine):
    return np.ones_like(cosine)


def slab_amount(depth):
    return slab(-50 * DEG, 90 * DEG, depth, even)


def slab_through(depth):
    return slab(50 * DEG, 40 * DEG, depth, even)


def slab_behind(depth):
    return transmission(50 * DEG, depth, even)


def haze_front(depth):
    return Haze(3.912023 * 1e3 / max(depth, 0.02)).transmission(LINES, 0.0, 1e3 * (depth > 0))[..., 1]


def haze_airlight(depth):
    haze = Haze(3.912023 * 1e3 / max(depth, 0.02))
    shaft = Shaft(1e3 * (depth > 0), 1e3 * (depth > 0), 2e3, 0.0)
    return shaft.factors(LINES, 0.0, 0.3, haze=haze, air_radiance=1.0).airlight[..., 1]


def air_front(depth):
    return layer_front(Air(0, 0, depth / 10, 0.0, 0.0), LINES, np.array([30 * DEG]), 50e3)[0, 1]


# volume, path factor of its depth, value when empty, slope when thin (per depth along the line), value when thick
LIMITS = [
    pytest.param(shaft_amount, 1.0, 0.0, 1.0, None, id="rain amount"),
    pytest.param(shaft_behind, 1.0, 1.0, -EVENTS, 0.0, id="rain behind"),
    pytest.param(shaft_own, 1.0, 0.0, EVENTS, 1.0, id="rain in an even field"),
    pytest.param(slab_amount, path_factor(50 * DEG), 0.0, 1.0, None, id="slab from above"),
    pytest.param(slab_through, path_factor(50 * DEG), 0.0, 1.0, 0.0, id="slab from below"),
    pytest.param(slab_behind, path_factor(50 * DEG), 1.0, -EVENTS, 0.0, id="slab behind"),
    pytest.param(haze_front, 1.0, 1.0, -1.0, 0.0, id="haze front"),
    pytest.param(haze_airlight, 1.0, 0.0, 1.0, 1.0, id="haze airlight"),
    pytest.param(air_front, 0.1 / np.sin(30 * DEG), 1.0, -1.0, None, id="air front"),
    pytest.param(lambda d: curtain(0.2, d, False), 1.0, 0.0, 1.0, np.inf, id="curtain"),
    pytest.param(lambda d: layer(0.2, d), path_factor(0.2), 0.0, 1.0, np.inf, id="layer"),
]


@pytest.mark.parametrize(("volume", "factor", "empty", "slope", "thick"), LIMITS)
def test_volumes_tend_to_their_limits(volume, factor, empty, slope, thick):
    assert float(volume(0.0)) == empty
    small = 0.02
    thin = (float(volume(small)) - empty) / (small * factor)
    assert thin == pytest.approx(slope, rel=0.05)
    if thick is not None:
        many = 50.0  # plain sheets have no thick limit: they grow for ever
        assert float(volume(many)) == pytest.approx(thick if np.isfinite(thick) else many * factor, abs=1e-9)
    values = np.array([float(volume(d)) for d in (0.0, 0.02, 0.1, 0.5)])
    assert np.all(np.diff(values) * np.sign(slope) > 0)


def test_thick_limits_by_hand():
    """Amounts of thick volumes: ∫ 2 e^(−t (1 + 1/µ0…)) dt over events t, sun at 20° through the wall, or at the zenith."""
    assert shaft_amount(2e3) == pytest.approx(1 / EVENTS / (1 + 1 / np.cos(20 * DEG)), rel=1e-3)
    cosine = 1 / path_factor(50 * DEG)
    assert slab_amount(1e4) == pytest.approx(1 / EVENTS / cosine / (1 + 1 / cosine), rel=1e-6)
    assert air_front(50.0) == pytest.approx(np.exp(-5 * 2.0), rel=0.02)  # air mass 1.998 on a round earth


def test_haze_fades_a_bow():
    """Koschmieder: bow and contrast fall together with e^(−σ d); the scene tends to the horizon's radiance."""
    haze, horizon = Haze(20e3), np.array([4.0, 3.0, 2.0])
    for near in (1e3, 5e3, 20e3):
        shaft = Shaft(near, near + 100.0, 3e3, 1e-4)
        factors = shaft.factors(LINES, 0.0, 10 * DEG, haze=haze, air_radiance=horizon)
        through = np.exp(-haze.extinction(LINES, 2.0) * near)
        np.testing.assert_allclose(factors.front, through, rtol=1e-6)
        before = horizon * (1.0 - through)
        assert np.all(factors.airlight > before)
        np.testing.assert_allclose(factors.airlight, before, rtol=0.2)
    far = Shaft(300e3, 301e3, 3e3, 1e-4).factors(LINES, 0.0, 0.2, haze=haze, air_radiance=horizon)
    np.testing.assert_allclose(far.front * (far.amount + far.behind) + far.airlight, horizon, rtol=1e-9)


def test_haze_within_the_rain():
    """Level view: rain and haze weaken together, and an even field in thick haze and rain stays what it is."""
    haze, shaft = Haze(5e3, height=1e4), Shaft(0.0, 4e3, 2e3, 1e-3)
    factors = shaft.factors(LINES, 0.0, 90 * DEG, haze=haze, air_radiance=1.0, veil=1.0)
    total = EVENTS * 1e-3 + haze.extinction(LINES, 2.0)
    np.testing.assert_allclose(-np.log(factors.behind), total * 4e3, rtol=1e-6)
    np.testing.assert_allclose(factors.airlight + factors.front * factors.behind, 1.0, rtol=1e-9)
    shading = np.exp(-EVENTS * 1e-3 * 1998.0)
    np.testing.assert_allclose(
        Shaft(0.0, 4e3, 2e3, 1e-3, shade=True).factors(LINES, 0.0, 90 * DEG, haze=haze).amount
        / Shaft(0.0, 4e3, 2e3, 1e-3, shade=False).factors(LINES, 0.0, 90 * DEG, haze=haze).amount,
        shading,
        rtol=1e-8,
    )


def test_shadow_of_a_cloud():
    whole = RAIN.factors(LINES, 0.1, 0.3).amount
    pieces = [
        Shaft(1e3, 4e3, 2e3, 1e-3, lit=lit).factors(LINES, 0.1, 0.3).amount for lit in ((0.0, 2e3), (2e3, np.inf))
    ]
    np.testing.assert_allclose(sum(pieces), whole, rtol=1e-12)
    dark = Shaft(1e3, 4e3, 2e3, 1e-3, lit=(5e3, 9e3)).factors(LINES, 0.1, 0.3)
    np.testing.assert_array_equal(dark.amount, 0.0)
    assert dark.behind[0] < 1.0
    half = Shaft(1e3, 4e3, 2e3, 1e-3, sunlit=0.5).factors(LINES, 0.1, 0.3).amount
    np.testing.assert_allclose(half, 0.5 * whole, rtol=1e-14)


def test_shapes_and_nan():
    elevation = np.array([[0.1, np.nan, 0.3], [-1.5, 1.5, 0.0]])
    factors = RAIN.factors(LINES, elevation, 0.3, np.zeros((2, 1)), Haze(20e3), np.ones(3))
    for values in (factors.amount, factors.front, factors.behind, factors.airlight):
        assert np.broadcast_shapes(values.shape, (2, 3, 3)) == (2, 3, 3)
        lost = np.broadcast_to(np.isnan(values), (2, 3, 3))
        assert np.all(lost[0, 1])
        assert lost.sum() == 3
    assert np.all(factors.amount[1, :2] == 0.0)
    assert np.all(factors.behind[1, :2] == 1.0)


def test_the_upper_edge_is_no_step_in_front():
    """Lines just over and just under the top differ by nothing but the rain itself."""
    edge = np.arctan2(1998.0, 1000.0)
    below, above = (RAIN.factors(LINES, edge + d, 0.3, haze=Haze(10e3), air_radiance=1.0) for d in (-1e-7, 1e-7))
    np.testing.assert_allclose(below.front, above.front, rtol=1e-6)
    np.testing.assert_allclose(below.airlight, above.airlight, rtol=1e-5)
    np.testing.assert_allclose(below.amount, above.amount, atol=1e-5)


@pytest.mark.parametrize(
    ("fields", "text"),
    [
        ({"near": -1.0}, "near distance of rain must lie between 0 and 500 km"),
        ({"far": 500.0}, "far distance of rain must lie between 1 and 500 km, got 0.5 km"),
        ({"top": 3e4}, "top of rain must lie between 0 and 20 km"),
        ({"extinction": np.nan}, "extinction of rain"),
        ({"lit": (2e3, 1e3)}, "sunlit rain lies from a near to a far distance of at least 0, got 2 to 1 km"),
        ({"sunlit": 1.5}, "sunlit share must lie between 0 and 1"),
    ],
)
def test_shafts_that_make_no_sense(fields, text):
    with pytest.raises(DomainError, match=text):
        Shaft(**{"near": 1e3, "far": 4e3, "top": 2e3, "extinction": 1e-3} | fields)
