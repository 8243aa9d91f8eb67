"""The clear sky against the CIE's clear sky, SPCTRAL2, and what is known of its brightness and colours."""

import time
from functools import lru_cache

import numpy as np
import pytest

from skyoptics.colour.observer import matching_functions, weights
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import direction
from skyoptics.light import spectrum
from skyoptics.light.air import Air, air_mass
from skyoptics.optics.bins import Bins
from skyoptics.sky.clear import AEROSOL_LOBES, ClearSky, aerosol_albedo
from skyoptics.sky.overcast import relative_luminance
from skyoptics.units import DEG, NM

BINS = Bins.adjoining(np.linspace(380, 780, 17) * NM)
WEIGHTS = weights(BINS)
ZENITH = direction(0.0, 90.0 * DEG)


@lru_cache
def sky(elevation_deg, aerosol=0.1, ozone=300.0, albedo=0.2, exponent=1.3):
    air = Air(ozone=ozone, aerosol_depth_550=aerosol, aerosol_exponent=exponent)
    return ClearSky(BINS, direction(0.0, elevation_deg * DEG), air, albedo)


def luminance(radiance):
    return radiance @ WEIGHTS[:, 1]


def view(azimuth_deg, elevation_deg):
    return direction(np.asarray(azimuth_deg) * DEG, np.asarray(elevation_deg) * DEG)


@pytest.mark.parametrize("elevation", [20.0, 40.0, 60.0])
def test_distribution_of_luminance_against_the_standard_clear_sky(elevation):
    """ISO 15469:2004 type 12, aerosol depth 0.2, zenith angles 0–60°, azimuths 60–180° from the sun: within 25 %."""
    zenith_angle = np.arange(0.0, 61.0, 10.0)[:, None]
    azimuth = np.arange(60.0, 181.0, 20.0)
    vectors = view(azimuth, 90.0 - zenith_angle)
    light = luminance(sky(elevation, aerosol=0.2).radiance(vectors))
    away = np.arccos(vectors @ view(0.0, elevation))
    standard = relative_luminance(12, (90.0 - zenith_angle) * DEG, away, elevation * DEG)
    assert light / light[0, 0] == pytest.approx(standard, rel=0.25)


@pytest.mark.parametrize("elevation", [20.0, 40.0, 60.0])
@pytest.mark.parametrize("aerosol", [0.1, 0.3])
def test_illuminance_against_spctral2(elevation, aerosol):
    """Bird & Riordan (1986) in pvlib, same pressure, ozone, aerosol and ground: diffuse within 25 %, direct within 2 %."""
    import pvlib

    theirs = pvlib.spectrum.spectrl2(
        apparent_zenith=90.0 - elevation,
        aoi=90.0 - elevation,
        surface_tilt=0.0,
        ground_albedo=0.2,
        surface_pressure=101325.0,
        relative_airmass=float(air_mass(elevation * DEG)),
        precipitable_water=1.5,
        ozone=0.3,
        aerosol_turbidity_500nm=aerosol * (500.0 / 550.0) ** -1.14,
        dayofyear=94,  # the earth at its mean distance
        alpha=1.14,
    )
    wavelength, functions = matching_functions()

    def lux(values):
        values = np.interp(wavelength, theirs["wavelength"] * NM, np.ravel(values))
        return 683.0 * np.trapezoid(values * functions[:, 1], wavelength / NM)

    ours = sky(elevation, aerosol=aerosol, exponent=1.14)
    assert luminance(ours.diffuse) == pytest.approx(lux(theirs["dhi"]), rel=0.25)
    assert luminance(ours.direct) == pytest.approx(lux(theirs["dni"]) * np.sin(elevation * DEG), rel=0.02)


@pytest.mark.parametrize("elevation", [20.0, 40.0, 60.0])
def test_colour_of_the_zenith(elevation):
    """10 000 to 40 000 K (Wyszecki & Stiles, Color Science, 2nd ed. (1982), on clear blue sky; from memory)."""
    from colour.temperature import xy_to_CCT

    def temperature(aerosol):
        x, y, z = sky(elevation, aerosol=aerosol).radiance(ZENITH) @ WEIGHTS
        return xy_to_CCT(np.array([x, y]) / (x + y + z), method="Hernandez 1999")

    assert 1e4 < temperature(0.1) < 4e4
    assert temperature(0.2) < temperature(0.1) < temperature(0.05)  # haze whitens


@pytest.mark.parametrize("aerosol", [0.05, 0.1, 0.2])
def test_luminance_of_the_zenith(aerosol):
    """2–8 kcd m⁻² at sun height 60° (lighting handbooks give 8 kcd m⁻² for an average clear sky; from memory)."""
    assert 2e3 < luminance(sky(60.0, aerosol=aerosol).radiance(ZENITH)) < 8e3


@pytest.mark.parametrize(("elevation", "lux"), [(5.0, 4760.0), (0.0, 732.0), (-6.0, 3.41)])
def test_illuminance_from_low_sun_to_the_end_of_civil_twilight(elevation, lux):
    """Brown, Natural Illumination Charts, US Navy (1952), as reprinted in handbooks (from memory); within a factor of 1.5."""
    light = sky(elevation)
    assert lux / 1.5 < luminance(light.diffuse + light.direct) < lux * 1.5


def test_twilight_is_blue_because_of_ozone():
    """Hulburt, J. Opt. Soc. Am. 43, 113 (1953): without ozone the zenith of twilight would be a greyish yellow-green."""
    above = spectrum.irradiance(BINS)

    def blueness(ozone):
        """Radiance at 450 nm over that at 600 nm, relative to sunlight's."""
        share = sky(-6.0, ozone=ozone).radiance(ZENITH) / above
        return share[2] / share[8]

    assert blueness(300.0) > 2.0
    assert blueness(0.0) < 0.6 * blueness(300.0)
    assert blueness(0.0) < 1.7


def test_the_shadow_of_the_earth_rises_opposite_the_sun():
    """Sun at −3°: a blue-grey segment on the horizon, a brighter and redder arch above it.

    M. Minnaert, Light and Colour in the Open Air (1954), on twilight (from memory).
    """
    light = sky(-3.0).radiance(view(180.0, np.array([5.0, 14.0])))
    segment, arch = light @ WEIGHTS
    assert arch[1] > 1.4 * segment[1]
    assert arch[0] / arch[2] > 1.1 * segment[0] / segment[2]
    towards, against = luminance(sky(-3.0).radiance(view([0.0, 180.0], 5.0)))
    assert towards > 5.0 * against


@pytest.mark.parametrize("elevation", [60.0, 20.0, 2.0, -6.0])
def test_irradiance_is_the_sum_of_radiance(elevation):
    """Two ways: the solver's own directions, and the table that pictures are read from."""
    sine = (np.arange(120) + 0.5) / 120
    azimuth = (np.arange(180) + 0.5) * 2.0
    light = sky(elevation).radiance(direction(azimuth * DEG, np.arcsin(sine)[:, None]))
    total = (light * sine[:, None, None]).sum(axis=(0, 1)) * (2.0 * np.pi / light[..., 0].size)
    assert sky(elevation).diffuse == pytest.approx(total, rel=0.025 if elevation > 0.0 else 0.05)
    ground = sky(elevation).radiance(view(70.0, -5.0))
    assert ground == pytest.approx(0.2 / np.pi * (sky(elevation).diffuse + sky(elevation).direct))


@pytest.mark.parametrize("elevation", [40.0, 1.0, -5.0])
def test_the_sky_is_even_and_smooth(elevation):
    """No steps and no folds along a circle through zenith, and the same on both sides of the sun's plane."""
    height = np.linspace(2.0, 178.0, 1761)
    light = luminance(sky(elevation).radiance(view(130.0, height)))
    assert np.all(light > 0.0)
    slope = np.diff(np.log(light))
    assert np.max(np.abs(slope)) < 0.04  # per tenth of a degree
    assert np.max(np.abs(np.diff(slope))) < 0.008
    left, right = sky(elevation).radiance(view([-50.0, 50.0], 15.0))
    assert left == pytest.approx(right, rel=1e-9)


def test_only_the_angle_from_the_sun_counts_not_the_compass():
    turned = ClearSky(BINS, view(217.0, 20.0))
    vectors = np.array([[0.0, 25.0], [100.0, 3.0], [-60.0, 70.0]])
    expected = sky(20.0).radiance(view(*vectors.T))
    assert turned.radiance(view(217.0 + vectors[:, 0], vectors[:, 1])) == pytest.approx(expected, rel=1e-6)


def test_a_bright_ground_and_more_aerosol_brighten_the_sky():
    dark, snow = (luminance(sky(40.0, albedo=albedo).radiance(ZENITH)) for albedo in (0.0, 0.8))
    assert 1.05 < snow / dark < 1.6
    clean, hazy = (luminance(sky(40.0, aerosol=aerosol).radiance(view(90.0, 20.0))) for aerosol in (0.0, 0.4))
    assert hazy > 1.5 * clean


def test_without_air_the_sky_is_black_and_the_ground_is_lit():
    empty = ClearSky(BINS, view(0.0, 30.0), Air(pressure=0.0, ozone=0.0, aerosol_depth_550=0.0), 0.3)
    assert np.all(empty.radiance(view([0.0, 90.0], [40.0, 0.0])) == 0.0)
    assert empty.direct == pytest.approx(0.5 * spectrum.irradiance(BINS), rel=1e-9)
    assert empty.ground == pytest.approx(0.3 / np.pi * empty.direct)


def test_light_from_above_counts_in_proportion():
    """The moon's spectrum, or any other, in place of the sun's."""
    wavelength, irradiance = spectrum.samples()
    faint = ClearSky(BINS, view(0.0, 40.0), above=irradiance * 2.5e-6 * (wavelength / (550 * NM)))
    ratio = faint.radiance(ZENITH) / sky(40.0).radiance(ZENITH)
    assert ratio == pytest.approx(2.5e-6 * BINS.centre / (550 * NM), rel=0.005)


def test_bins_hold_means():
    """One wide bin is the mean of the narrow ones in it; a single wavelength lies between its neighbours."""
    fine = Bins.adjoining(np.linspace(400, 700, 61) * NM)
    wide = Bins.adjoining(np.array([400.0, 550.0, 700.0]) * NM)
    vector = view(90.0, 40.0)
    narrow = ClearSky(fine, view(0.0, 30.0)).radiance(vector)
    mean = ClearSky(wide, view(0.0, 30.0)).radiance(vector)
    assert mean == pytest.approx(narrow.reshape(2, 30).mean(axis=1), rel=1e-3)
    line = ClearSky(Bins.lines(550.0 * NM), view(0.0, 30.0))
    share = line.radiance(vector) / spectrum.irradiance(line.bins)
    around = (narrow / spectrum.irradiance(fine))[29:31]
    assert share[0] == pytest.approx(around.mean(), rel=0.01)


def test_aerosol():
    """SPCTRAL2 (Bird & Riordan 1986): 0.945 at 0.4 µm, mean cosine 0.65."""
    assert aerosol_albedo(0.4e-6) == pytest.approx(0.945)
    assert AEROSOL_LOBES[:, 0].sum() == pytest.approx(1.0)
    assert AEROSOL_LOBES.prod(axis=1).sum() == pytest.approx(0.65, abs=0.01)


@pytest.mark.parametrize("elevation", [89.9, 90.0, -11.9])
def test_extreme_suns(elevation):
    light = ClearSky(BINS, view(30.0, elevation)).radiance(view([0.0, 90.0, 210.0], [89.0, 1.0, 45.0]))
    assert np.all(np.isfinite(light))
    assert np.all(light > 0.0)


@pytest.mark.parametrize(
    "make",
    [
        lambda: ClearSky(BINS, view(0.0, -13.0)),
        lambda: ClearSky(BINS, np.array([0.0, 0.0, 2.0])),
        lambda: ClearSky(BINS, np.array([np.nan, 0.0, 1.0])),
        lambda: ClearSky(BINS, view(0.0, 30.0), albedo=1.2),
        lambda: ClearSky(Bins.lines(250 * NM), view(0.0, 30.0)),
        lambda: ClearSky(BINS, view(0.0, 30.0), above=np.ones(3)),
    ],
)
def test_nonsense_is_refused(make):
    with pytest.raises(DomainError):
        make()


@pytest.mark.slow
@pytest.mark.parametrize("elevation", [40.0, -6.0])
def test_a_picture_costs_about_two_seconds_of_processor_time(elevation):
    """1920 × 1080, 32 bins: under 1 s on two processors that have nothing else to do."""
    bins = Bins.adjoining(np.linspace(380, 780, 33) * NM)
    vectors = view(np.linspace(-40.0, 40.0, 1920), np.linspace(45.0, -1.0, 1080)[:, None])
    ClearSky(bins, view(0.0, elevation)).radiance(vectors[:1])
    start = time.process_time()
    made = ClearSky(bins, view(0.0, elevation))
    for first in range(0, 1080, 120):
        made.radiance(vectors[first : first + 120])
    assert time.process_time() - start < 2.5
