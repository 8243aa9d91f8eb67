import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.light.refraction import FADED, airless, apparent, horizon, refraction
from skyoptics.units import ARCMIN, CELSIUS_ZERO, DEG, HPA

PLAIN = (1010 * HPA, 10 + CELSIUS_ZERO)  # the air of the formulas
AIRS = [
    PLAIN,
    (1013.25 * HPA, 10 + CELSIUS_ZERO),
    (1100 * HPA, CELSIUS_ZERO - 90),
    (500 * HPA, 40 + CELSIUS_ZERO),
    (0.0, 283.15),
]


def bennett(apparent_deg):
    """G. G. Bennett, J. Inst. Navigation 35, 255 (1982), from apparent elevation [arcmin]; from memory."""
    return 1 / np.tan(np.deg2rad(apparent_deg + 7.31 / (apparent_deg + 4.4)))


def saemundsson(airless_deg):
    """Þ. Sæmundsson, Sky & Telescope 72, 70 (1986), from airless elevation [arcmin]; from memory."""
    return 1.02 / np.tan(np.deg2rad(airless_deg + 10.3 / (airless_deg + 5.11)))


def lift(apparent_elevation, air=PLAIN):
    """Refraction of what is seen at an elevation [arcmin]."""
    return (apparent_elevation - airless(apparent_elevation, *air)) / ARCMIN


def test_against_bennett():
    height_deg = np.linspace(5, 90, 500)
    assert np.abs(lift(height_deg * DEG) - bennett(height_deg)).max() < 0.1
    low_deg = np.linspace(0, 5, 100)
    assert np.abs(lift(low_deg * DEG) - bennett(low_deg)).max() < 0.2
    assert abs(lift(0.0) - bennett(0.0)) < 0.2


def test_against_saemundsson():
    """Down to the horizon it is his formula, moved by the 0.0019′ that make it nil at the zenith."""
    height_deg = np.linspace(-0.57, 90, 1000)
    ours = refraction(height_deg * DEG, *PLAIN) / ARCMIN
    np.testing.assert_allclose(ours, saemundsson(height_deg), rtol=0, atol=0.002)
    assert abs(refraction(90 * DEG, *PLAIN)) < 1e-6 * ARCMIN


def test_against_the_almanac():
    """Mean refraction of the Nautical Almanac at 1010 hPa and 10 °C (from memory); the formula is up to 0.16′ above it."""
    height_deg = np.array([10.0, 20.0, 30.0, 45.0, 60.0])
    np.testing.assert_allclose(lift(height_deg * DEG), [5.3, 2.6, 1.7, 1.0, 0.6], rtol=0, atol=0.2)


def test_spa_worked_example():
    """Reda & Andreas, Solar Energy 76, 577 (2004), table A5.1: e0 39.872046°, 820 mbar, 11 °C, Δe 0.016332°."""
    found = refraction(39.872046 * DEG, 820 * HPA, 11 + CELSIUS_ZERO) / DEG
    assert found == pytest.approx(0.016332, abs=4e-5)


@pytest.mark.parametrize(("height_deg", "within"), [(0.0, 1.0), (2.0, 0.3), (5.0, 0.1), (10.0, 0.2), (45.0, 0.05)])
def test_against_a_ray_through_the_air(height_deg, within):
    """Snell's law in shells, dR = −tan ψ dn/n, through air that cools by 6.5 K/km to 11 km (ISO 2533).

    Refractivity 79e-6 p/T (hPa, K) at visible wavelengths (from memory). At 10° the formula is 0.15′ too strong.
    """
    pressure, ground = 1010.0, 283.15
    height = np.linspace(0, np.sqrt(100e3), 200001) ** 2  # dense at the ground, where tan ψ may be infinite
    temperature = ground - 6.5e-3 * np.minimum(height, 11e3)
    exponent = 9.80665 * 0.0289644 / 8.31446 / 6.5e-3
    low = (temperature / ground) ** exponent
    pressures = pressure * low * np.exp(-(np.maximum(height, 11e3) - 11e3) * 0.0341632 / temperature)
    index = 1 + 79e-6 * pressures / temperature
    middle = (height[1:] + height[:-1]) / 2
    n = (index[1:] + index[:-1]) / 2
    sine = index[0] * 6371e3 * np.cos(height_deg * DEG) / (n * (6371e3 + middle))
    bent = np.sum(sine / np.sqrt(1 - sine**2) * -np.diff(index) / n)
    assert lift(height_deg * DEG) == pytest.approx(bent / ARCMIN, abs=within)


@pytest.mark.parametrize("air", AIRS)
def test_full_down_to_the_apparent_horizon_and_nil_from_civil_twilight(air):
    scale = air[0] / PLAIN[0] * PLAIN[1] / air[1]
    edge = horizon(*air)
    assert apparent(edge, *air) == pytest.approx(0.0, abs=1e-12)
    height_deg = np.linspace(edge / DEG, 90, 300)
    expected = scale * (saemundsson(height_deg) + 0.0019279)
    np.testing.assert_allclose(refraction(height_deg * DEG, *air) / ARCMIN, expected, rtol=1e-9, atol=1e-9)
    np.testing.assert_array_equal(refraction(np.array([-6.0001, -20, -90]) * DEG, *air), 0.0)
    assert pytest.approx(-6 * DEG) == FADED


def test_the_horizon():
    """34.5′ (Bennett)."""
    assert horizon(*PLAIN) / DEG == pytest.approx(-0.57, abs=0.01)
    assert horizon(0.0) == 0.0
    assert str(horizon(0.0)) == "0.0"


@pytest.mark.parametrize("air", AIRS)
def test_apparent_elevation_is_smooth_and_rising(air):
    height = np.linspace(-90, 90, 720001) * DEG
    seen = apparent(height, *air)
    slope = np.diff(seen) / np.diff(height)
    assert slope.min() > 0.65
    assert slope.max() < 1.5
    # A jump would give a slope of its own, a kink a jump of slope: here 0.9″ make a change of at most 1e-3.
    assert np.abs(np.diff(slope)).max() < 1e-3


def test_a_setting_sun_is_lifted_as_much_as_on_the_horizon():
    """Seen from a hill it still is; the fading may not start with a step (common practice, no source)."""
    lower = refraction(horizon() - 0.5 * DEG) / refraction(horizon())
    assert 1.0 < lower < 1.2


@pytest.mark.parametrize("air", AIRS)
def test_there_and_back(air):
    height = np.linspace(-90, 90, 3001) * DEG
    np.testing.assert_allclose(airless(apparent(height, *air), *air), height, rtol=0, atol=1e-12)


def test_denser_air_refracts_more():
    base = refraction(10 * DEG, *PLAIN)
    assert refraction(10 * DEG, 505 * HPA, PLAIN[1]) == pytest.approx(base / 2, rel=1e-12)
    assert refraction(10 * DEG, PLAIN[0], 2 * PLAIN[1] / 1.8) == pytest.approx(base * 0.9, rel=1e-12)
    assert refraction(10 * DEG, 0.0) == 0.0


@pytest.mark.parametrize(
    ("arguments", "text"),
    [
        ((91 * DEG,), "airless elevation must lie between -90 and 90 °, got 91 °"),
        ((np.nan,), "got nan"),
        ((0.1, 1.2e5), "air pressure must lie between 0 and 1100 hPa, got 1200 hPa"),
        ((0.1, -1.0), "air pressure must lie between 0 and 1100 hPa"),
        ((0.1, 1e5, 400.0), "air temperature must lie between -90 and 60 °C"),
    ],
)
@pytest.mark.parametrize("call", [refraction, apparent])
def test_faults(call, arguments, text):
    with pytest.raises(DomainError, match=text):
        call(*arguments)


def test_faults_of_the_inverse():
    with pytest.raises(DomainError, match="apparent elevation must lie between -90 and 90 °"):
        airless(-91 * DEG)
