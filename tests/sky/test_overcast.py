"""Standard skies against the standard's numbers; a cloud's transmission against its limits and the diffusion limit."""

import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.geometry.axes import direction
from skyoptics.sky.overcast import TYPES, StandardSky, cloud_transmission, horizontal_ratio, relative_luminance
from skyoptics.units import DEG

SUN = direction(0.0, 30.0 * DEG)


def looked_up(kind, zenith_angle, azimuth, sun_zenith_angle):
    sun = direction(0.0, (90.0 - sun_zenith_angle) * DEG)
    sky = StandardSky(kind, sun, np.ones(1))
    return sky.radiance(direction(azimuth * DEG, (90.0 - zenith_angle) * DEG))[0]


@pytest.mark.parametrize(("zenith_angle", "expected"), [(0.0, 1.0), (30.0, 0.9317), (60.0, 0.6652), (80.0, 0.3586)])
def test_overcast_sky(zenith_angle, expected):
    """Worked from the formulas and parameters of ISO 15469:2004 type 1."""
    assert looked_up(1, zenith_angle, 0.0, 60.0) == pytest.approx(expected, abs=1e-4)


@pytest.mark.parametrize(
    ("zenith_angle", "azimuth", "expected"),
    [(0.0, 0.0, 1.0), (60.0, 30.0, 4.5683), (60.0, 90.0, 1.3408), (60.0, 180.0, 1.2356), (30.0, 0.0, 2.5794)],
)
def test_clear_sky_of_low_turbidity(zenith_angle, azimuth, expected):
    """Worked from the formulas and parameters of ISO 15469:2004 type 12, sun 60° from the zenith."""
    assert looked_up(12, zenith_angle, azimuth, 60.0) == pytest.approx(expected, abs=1e-4)


def test_types_run_from_bright_zenith_to_bright_horizon():
    """CIE S 011/E:2003: types 1–4 darken towards the horizon, 5–8 do not change, 9–15 brighten; odd ones have no sun in them."""
    for kind, (a, _, c, _, _) in TYPES.items():
        away = np.full(2, 90.0 * DEG)
        low, high = relative_luminance(kind, np.array([10.0, 80.0]) * DEG, away, 45.0 * DEG)
        assert np.sign(low - high) == -np.sign(a)
        towards, against = relative_luminance(kind, 30.0 * DEG, np.array([15.0, 120.0]) * DEG, 45.0 * DEG)
        assert (towards > against) == (c > 0.0)


def test_irradiance_of_known_skies():
    """π for a uniform sky; 7π/9 for the traditional overcast sky (Moon & Spencer 1942)."""
    assert horizontal_ratio(5, 0.5) == pytest.approx(np.pi, rel=1e-6)
    assert horizontal_ratio(16, 0.5) == pytest.approx(7.0 * np.pi / 9.0, rel=1e-6)


@pytest.mark.parametrize("kind", [1, 4, 8, 12, 15, 16])
def test_a_sky_gives_the_irradiance_it_was_asked_for(kind):
    """Summed over an even grid of directions."""
    asked = np.array([0.3, 1.0])
    sky = StandardSky.lit(kind, SUN, asked)
    sine = (np.arange(400) + 0.5) / 400
    azimuth = (np.arange(360) + 0.5) * DEG
    light = sky.radiance(direction(azimuth, np.arcsin(sine)[:, None]))
    total = (light * sine[:, None, None]).sum(axis=(0, 1)) * (2 * np.pi / light[..., 0].size)
    assert total == pytest.approx(asked, rel=0.003)
    assert sky.diffuse == pytest.approx(asked)
    assert sky.radiance(direction(1.0, -0.2)) == pytest.approx(0.2 / np.pi * asked)


def test_cloud_transmission_has_its_limits():
    assert cloud_transmission(0.0, 1.0, 0.2) == pytest.approx(1.0)
    assert cloud_transmission(1e4, 1.0, 0.0) < 0.002
    depths = [0.0, 1.0, 10.0, 100.0]
    through = [cloud_transmission(depth, 0.7, 0.0) for depth in depths]
    assert through == sorted(through, reverse=True)
    # Over a white ground nothing is lost anywhere, so what the ground sends up must come down again or leave by the top.
    t = 0.15 * 20.0
    assert cloud_transmission(20.0, 0.7, 1.0) == pytest.approx(
        cloud_transmission(20.0, 0.7, 0.0) * (4.0 / 3.0 + t) / (4.0 / 3.0), rel=1e-9
    )


@pytest.mark.parametrize("elevation", [20.0, 45.0, 90.0])
@pytest.mark.parametrize("depth", [40.0, 100.0])
def test_a_thick_cloud_is_in_the_diffusion_limit(elevation, depth):
    """T = (4/3) K(µ) / ((1 − g) τ + 1.42), K(µ) ≈ 3/7 (1 + 2 µ) (King, J. Atmos. Sci. 44, 1734 (1987); from memory)."""
    mu = np.sin(elevation * DEG)
    expected = 4.0 / 7.0 * (1.0 + 2.0 * mu) / (0.15 * depth + 1.42)
    assert cloud_transmission(depth, elevation * DEG, 0.0) == pytest.approx(expected, rel=0.1)


def test_a_rain_cloud_is_dark():
    """10⁵ lx above an optical depth of 100 leave about 10⁴ lx: a dull sky (handbooks: 1000 to 20 000 lx; common practice)."""
    sky = StandardSky.cloud(1, direction(0.0, 60.0 * DEG), np.array([1e5]), 100.0)
    assert 5e3 < sky.diffuse[0] < 2e4
    assert sky.zenith[0] < 0.5 * 1e5 / np.pi


def test_directions_outside_the_picture_stay_nan():
    sky = StandardSky(5, SUN, np.ones(2))
    assert np.all(np.isnan(sky.radiance([np.nan] * 3)))


@pytest.mark.parametrize(
    "make",
    [
        lambda: StandardSky(0, SUN, np.ones(2)),
        lambda: StandardSky(17, SUN, np.ones(2)),
        lambda: StandardSky(1, SUN, np.array([-1.0])),
        lambda: StandardSky(1, SUN, np.array([np.nan])),
        lambda: StandardSky(1, SUN, np.ones(2), albedo=1.5),
        lambda: cloud_transmission(-1.0, 0.5),
        lambda: cloud_transmission(1.0, 2.0),
        lambda: cloud_transmission(1.0, 0.5, asymmetry=1.0),
    ],
)
def test_nonsense_is_refused(make):
    with pytest.raises(DomainError):
        make()
