"""Whether features are seen: contrasts put into pictures by construction, thresholds, polarisers, what to say of empty frames."""

import json

import numpy as np
import pytest

from skyoptics.geometry.axes import angle_between, direction
from skyoptics.optics import bows
from skyoptics.rendering.build import build
from skyoptics.rendering.features import lines, missing, warning
from skyoptics.rendering.polarised import ANGLES, best_angle, best_polariser
from skyoptics.rendering.profiles import measure
from skyoptics.rendering.run import Result, Settings, render
from skyoptics.rendering.visibility import DAYLIGHT, adrian, colour_difference, table, threshold, verdict, visibility
from skyoptics.scene.load import from_text
from skyoptics.units import ARCMIN, DEG

GREY = np.array([0.9505, 1.0, 1.089])
LEVEL = 3000.0


def bow_scene(height=20.0, camera="aim = 'antisolar'", drops="orders = [2]\nmethod = 'rays'", light=""):
    return from_text(
        f"[light]\nelevation_deg = {height}\nazimuth_deg = 180\n{light}\n"
        f"[[air]]\nkind = 'drops'\nradius_um = 2000\nbelow_horizon = true\n{drops}\n"
        f"[camera]\nlens = 'equidistant'\nfocal_mm = 15\nsensor_mm = [36, 36]\nwidth_px = 500\n{camera}\n"
        "[picture]\nwavelengths_nm = [450, 550, 650]\n"
    )


def painted(job, luminance):
    """A picture of given luminance, grey, as if it had been rendered."""
    return Result(job, [], (luminance[..., None] * GREY).astype(np.float32), None, {})


def ring(job, contrast, width=2.0 * DEG, part=None):
    """Luminance of a band of even contrast along the bow (or the part of it where `part` holds), black outside the image."""
    line = next(iter(lines(job)))
    radius = float(angle_between(line.views[0], line.centre))
    views = job.directions.vectors()
    on = np.abs(angle_between(views, line.centre) - radius) < 0.5 * width
    if part is not None:
        on &= part(views)
    luminance = LEVEL * np.where(on, 1.0 + contrast, 1.0)
    return np.where(np.isnan(views[..., 0]), np.nan, luminance)


@pytest.fixture(scope="module")
def job():
    return build(bow_scene(), "test")


@pytest.mark.parametrize(
    ("contrast", "word"), [(0.01, "invisible"), (0.03, "just visible"), (0.1, "plain"), (0.5, "striking")]
)
def test_contrast_put_in_is_contrast_read_out(job, contrast, word):
    (row,) = visibility(painted(job, ring(job, contrast)))
    assert row["contrast"] == pytest.approx(contrast, abs=1e-4)
    assert row["contrast_median"] == pytest.approx(contrast, abs=1e-4)
    assert row["noise"] < 1e-4
    assert row["verdict"] == word
    assert row["surroundings_cd_m2"] == pytest.approx(LEVEL, rel=1e-4)
    assert row["width_deg"] == pytest.approx(2.0, abs=0.2)
    assert row["share_visible"] == (0.0 if word == "invisible" else 1.0)


def test_length_is_that_of_the_bow(job):
    # a small circle of 42.4° about the antisolar point, 20° below the horizon, is whole in a round picture of 137°
    (row,) = visibility(painted(job, ring(job, 0.1)))
    index = float(job.sheets[0].index(np.array([560e-9]))[0].real)
    radius = np.pi - float(bows.scattering_angle(index, 2))
    near_horizon = 10.0  # degrees of it that have the horizon between themselves and their surroundings
    assert row["length_deg"] == pytest.approx(360.0 * np.sin(radius), abs=near_horizon)


def test_half_a_bow_has_half_its_length_seen_and_its_best_place_there(job):
    left = ring(job, 0.2, part=lambda views: views[..., 0] < 0.0)
    (row,) = visibility(painted(job, left))
    assert row["share_visible"] == pytest.approx(0.5, abs=0.03)
    assert 180.0 < row["best"]["azimuth_deg"] < 360.0
    views = direction(row["best"]["azimuth_deg"] * DEG, row["best"]["elevation_deg"] * DEG)
    assert angle_between(views, -job.sources[0].direction) / DEG == pytest.approx(42.2, abs=0.5)


def test_a_slope_of_the_sky_is_no_contrast(job):
    views = job.directions.vectors()
    slope = 1.0 + 0.5 * views[..., 2] + 0.3 * views[..., 0]
    (row,) = visibility(painted(job, slope * ring(job, 0.0)))
    assert row["verdict"] == "invisible"
    (row,) = visibility(painted(job, slope * ring(job, 0.2)))
    assert row["contrast_median"] == pytest.approx(0.2, abs=0.01)


def test_noise_is_not_seen_and_is_told(job):
    rng = np.random.default_rng(3)
    grain = np.exp(0.1 * rng.standard_normal(job.directions.shape))
    (row,) = visibility(painted(job, grain * ring(job, 0.0)))
    assert row["verdict"] == "invisible"
    assert row["share_visible"] < 0.05
    assert 0.01 < row["noise"] < 0.06  # 10 % a pixel, some eight pixels on it and sixteen beside
    (row,) = visibility(painted(job, grain * ring(job, 0.3)))
    assert row["contrast_median"] == pytest.approx(0.3, abs=0.03)
    assert row["share_visible"] == 1.0


def test_the_same_contrast_is_lost_in_the_dark(job):
    (day,) = visibility(painted(job, ring(job, 0.1)))
    (night,) = visibility(painted(job, 1e-7 * ring(job, 0.1)))
    assert (day["verdict"], night["verdict"]) == ("plain", "invisible")
    assert night["contrast"] == pytest.approx(day["contrast"], abs=1e-4)


def test_spots_are_measured_against_a_ring_around_them():
    scene = from_text(
        "[light]\nelevation_deg = 20\nazimuth_deg = 180\n[[air]]\nkind = 'crystals'\norientation = 'plate'\n"
        "[camera]\nfocal_mm = 24\nwidth_px = 700\naim = { azimuth_deg = 180, elevation_deg = 24 }\n"
        "[picture]\nwavelengths_nm = [550]\n"
    )
    job = build(scene, "test")
    views = job.directions.vectors()
    # Bravais (1847): 24.576° of azimuth at n = 1.31, sun 20° high
    left, right = (direction((180 + side * 24.576) * DEG, 20 * DEG) for side in (-1, 1))
    luminance = np.where(angle_between(views, left) < 0.75 * DEG, 1.4 * LEVEL, LEVEL)
    luminance = np.where(angle_between(views, right) < 0.75 * DEG, 1.2 * LEVEL, luminance)
    (sundogs,) = [row for row in visibility(painted(job, luminance)) if row["feature"] == "parhelia"]
    assert sundogs["contrast"] == pytest.approx(0.4, abs=1e-3)
    assert sundogs["length_deg"] == 2
    assert sundogs["share_visible"] == 1.0
    assert sundogs["best"]["azimuth_deg"] == pytest.approx(155.4, abs=0.1)


def test_a_locus_run_twice_counts_once():
    scene = from_text(
        "[light]\nelevation_deg = 20\nazimuth_deg = 180\n[[air]]\nkind = 'crystals'\norientation = 'plate'\n"
        "[camera]\nlens = 'panorama'\nwidth_deg = 360\nheight_deg = 60\nwidth_px = 720\nheight_px = 120\n"
        "aim = { azimuth_deg = 180, elevation_deg = 20 }\n[picture]\nwavelengths_nm = [550]\n"
    )
    job = build(scene, "test")
    (circle,) = [line for line in lines(job) if line.name == "parhelic_circle"]
    found = measure(circle, job.directions, np.full((*job.directions.shape, 3), LEVEL), job.sources[0])
    whole = 2.0 * np.pi * np.cos(20 * DEG)
    assert found.weight.sum() == pytest.approx(whole - 4.0 * DEG, rel=0.01)  # less 2° on both sides of the sun


# Koschmieder, Beitr. Phys. freien Atm. 12, 33 (1924), from memory: 2 % for large objects by day.
def test_threshold_of_large_objects_by_day_is_koschmieders():
    assert threshold(1000.0, 121.0 * ARCMIN) == pytest.approx(0.02)
    assert threshold([1e3, 1e4, 1e5], 5.0 * DEG) == pytest.approx(DAYLIGHT)


def test_threshold_rises_in_the_dark_and_for_small_things():
    light = np.logspace(-5, 4, 400)
    for width in (0.25, 1.0, 5.0):
        assert np.all(np.diff(threshold(light, width * DEG)) < 1e-3 * threshold(light[:-1], width * DEG))
    width = np.linspace(0.1, 10.0, 100) * DEG
    for level in (1e-4, 0.1, 1e3):
        assert np.all(np.diff(threshold(level, width)) <= 0.0)
    assert threshold(1e-3, 1.0 * DEG) > 0.2  # a tenth of a millilambert and less: only coarse contrasts remain


@pytest.mark.parametrize("joint", [0.00418, 0.6])
def test_pieces_of_adrians_formula_meet(joint):
    assert adrian(joint * 0.9999, DEG) == pytest.approx(adrian(joint * 1.0001, DEG), rel=0.01)


# Blackwell, J. Opt. Soc. Am. 36, 624 (1946), from memory: half of the observers saw 0.27 % at 121′ and 1000 foot-lamberts
# (3426 cd m⁻²), and Adrian's formula rests on him among others.
def test_adrians_formula_has_blackwells_contrast_by_day():
    assert adrian(3426.0, 121.0 * ARCMIN) == pytest.approx(0.0027, rel=0.25)


# CIEDE2000 between greys (Sharma, Wu & Dalal, Color Res. Appl. 30, 21 (2005)): ΔL / S_L, S_L = 1 + 0.015 d² / √(20 + d²), d
# the mean lightness less 50.
@pytest.mark.parametrize("contrast", [0.02, 0.3, 2.0])
def test_colour_difference_of_greys_in_closed_form(contrast):
    lightness = 66.0 * np.cbrt(1.0 + contrast) - 16.0
    d = 0.5 * (lightness - 50.0)
    expected = (lightness - 50.0) / (1.0 + 0.015 * d**2 / np.sqrt(20.0 + d**2))
    found = colour_difference((1.0 + contrast) * 7.0 * GREY, 7.0 * GREY, 123.0 * GREY)
    assert found == pytest.approx(expected, rel=1e-4)


def test_colour_is_told_where_luminance_is_alike(job):
    picture = painted(job, ring(job, 0.03))
    line = next(iter(lines(job)))
    radius = float(angle_between(line.views[0], line.centre))
    on = np.abs(angle_between(job.directions.vectors(), line.centre) - radius) < DEG
    reddish = picture.xyz.copy()
    reddish[on] *= np.array([1.1, 1.0, 0.8], dtype=np.float32)
    (grey,), (red,) = visibility(picture), visibility(Result(job, [], reddish, None, {}))
    assert red["contrast"] == pytest.approx(grey["contrast"], abs=1e-5)
    assert grey["delta_e_2000"] < 1.5
    assert red["delta_e_2000"] > 8.0


def test_words():
    assert [verdict(level) for level in (0.0, 0.99, 1.0, 2.5, 10.0, np.inf)] == [
        "invisible",
        "invisible",
        "just visible",
        "plain",
        "striking",
        "striking",
    ]


# The bow's top stands 42° from the antisolar point (AMS Glossary: 40–42°), so a sun above that sets it.
def test_frame_without_a_feature_says_why():
    above = "focal_mm = 24\nsensor_mm = [36, 24]\nheight_px = 300\naim = { azimuth_deg = 0, elevation_deg = 20 }"
    text = bow_text(47, above)
    assert warning(build(from_text(text), "test")) == (
        "no feature stands in this frame: the bow is below the horizon: the sun stands at 47°"
    )
    assert warning(build(from_text(bow_text(30, above)), "test")) is None
    away = above.replace("azimuth_deg = 0", "azimuth_deg = 90")
    said = warning(build(from_text(bow_text(30, away)), "test"))
    assert "the bow is outside the frame, nearest at azimuth" in said
    (row,) = visibility(painted(build(from_text(text), "test"), np.full((300, 450), LEVEL)))
    assert row["verdict"] == "below the horizon"
    assert row["why"] == "the bow is below the horizon: the sun stands at 47°"


def bow_text(height, camera):
    return (
        f"[light]\nelevation_deg = {height}\nazimuth_deg = 180\n[[air]]\nkind = 'drops'\norders = [2]\nmethod = 'rays'\n"
        f"[camera]\nwidth_px = 450\n{camera}\n"
    )


def test_arcs_that_do_not_form_are_told():
    scene = from_text(
        "[light]\nelevation_deg = 47\n[[air]]\nkind = 'crystals'\norientation = 'plate'\n"
        "[camera]\nfocal_mm = 100\naim = { azimuth_deg = 0, elevation_deg = 20 }\n"
    )
    job = build(scene, "test")
    why = {line.name: missing(line, job) for line in lines(job)}
    # Greenler, Rainbows, Halos, and Glories (1980): no circumzenithal arc above 32° of the sun's elevation
    assert why["circumzenithal"] == ("does not form", "the circumzenithal arc does not form: the sun stands at 47°")
    assert why["parhelia"][0] == "outside the frame"
    assert why["parhelia"][1].startswith("the parhelia (sundogs) are outside the frame")
    assert why["subparhelia"][0] == "below the horizon"
    assert warning(job).count(";") == 3


def test_corona_and_glory_are_features_without_a_line():
    camera = "focal_mm = 200\naim = 'antisolar'\n"
    small = bow_text(10, camera).replace("method = 'rays'", "radius_um = 10")
    assert warning(build(from_text(small), "test")) is None
    assert warning(build(from_text(bow_text(10, camera)), "test")) is not None


# Malus: light polarised all along the bow on unpolarised sky of contrast 0.2 passes whole at one angle, not at all across it,
# and half the sky passes at any, so the contrast is 0.4 and 0.
@pytest.mark.parametrize("along", [0, 37, 90, 143])
def test_best_angle_of_fully_polarised_light(along):
    excess = 0.2 * np.array([1.0, np.cos(2 * along * DEG), np.sin(2 * along * DEG)])
    beside = np.array([[1.0, 0.0, 0.0]] * 3)
    best = best_angle(beside + excess, beside, np.ones(3))
    assert best["angle_deg"] == pytest.approx(along)
    assert best["worst_angle_deg"] == pytest.approx((along + 90) % 180)
    assert best["contrast_without"] == pytest.approx(0.2)
    assert best["contrast"] == pytest.approx(0.4)
    assert best["contrast_worst"] == pytest.approx(0.0, abs=1e-12)
    assert best["gain"] == pytest.approx(2.0)
    assert best["light_share"] == pytest.approx(0.7 / 1.2)


def test_polariser_that_darkens_the_sky_helps_unpolarised_light():
    beside = np.array([[1.0, 0.6, 0.0]])  # sky polarised along angle 0
    best = best_angle(beside + [[0.1, 0.0, 0.0]], beside, [1.0])
    assert best["angle_deg"] == 90.0
    assert best["contrast"] == pytest.approx(0.05 / 0.2)  # ½ · 0.1 on ½ (1 − 0.6)
    assert best_angle(beside, beside, [1.0]) is None
    assert len(ANGLES) == 180


TOP = "focal_mm = 60\nsensor_mm = [36, 24]\nwidth_px = 240\nheight_px = 160\naim = { azimuth_deg = 0, elevation_deg = 24 }"


def top_of_the_bow(polariser=""):
    return from_text(
        bow_text(18, f"{TOP}\n{polariser}").replace("width_px = 450\n", "")
        + "[picture]\nbackground = 0.01\nwavelengths_nm = [450, 550, 650]\n"
    )


def test_best_polariser_agrees_with_pictures_taken_through_one():
    settings = Settings("draft", threads=2)
    (best,) = best_polariser(top_of_the_bow(), "test", settings)
    assert best["angle_deg"] == pytest.approx(90.0, abs=2.0)  # along the bow at its top, left and right being alike
    assert best["worst_angle_deg"] == pytest.approx(0.0, abs=2.0) or best["worst_angle_deg"] > 178.0
    for angle, expected in ((90, best["contrast"]), (0, best["contrast_worst"])):
        through = render(top_of_the_bow(f"polariser_deg = {angle}"), "test", settings)
        (row,) = visibility(through)
        assert row["contrast_median"] == pytest.approx(expected, rel=0.06, abs=0.01)
    plain = render(top_of_the_bow(), "test", settings)
    (row,) = visibility(plain)
    assert row["contrast_median"] == pytest.approx(best["contrast_without"], rel=0.06)
    assert row["verdict"] == "striking"
    assert best_polariser(top_of_the_bow(), "test", settings, only=()) == []


CRYSTALS = """
[light]
elevation_deg = 22
azimuth_deg = 180
attenuation = "none"
[[air]]
kind = "crystals"
aspect = 0.4
orientation = "plate"
tilt_deg = 0.8
[camera]
focal_mm = 24
width_px = 180
aim = { azimuth_deg = 180, elevation_deg = 60 }
[picture]
background = 0.01
wavelengths_nm = [480, 550, 620]
"""


def test_an_arc_is_not_credited_with_the_light_of_another(tmp_path, monkeypatch):
    # the Kern arc lies on the circle of the circumzenithal arc, and is far weaker
    monkeypatch.setattr("skyoptics.rendering.film.films_folder", lambda: tmp_path / "films")
    result = render(from_text(CRYSTALS), "test", Settings(rays=2**18, threads=2))
    rows = {row["feature"]: row for row in visibility(result)}
    json.dumps(list(rows.values()), allow_nan=False)
    assert rows["circumzenithal"]["verdict"] == "striking"
    assert rows["circumzenithal"]["best"]["elevation_deg"] == pytest.approx(67.8, abs=1.0)  # sin e = √(n² − cos² h)
    assert rows["kern"]["contrast"] < 0.1 * rows["circumzenithal"]["contrast"]
    assert rows["subparhelia"]["verdict"] == "below the horizon"
    text = table(list(rows.values()))
    assert text.splitlines()[0].startswith("circumzenithal arc")
    assert "the subparhelia are below the horizon" in text


def test_command_tells_what_will_be_seen(tiny, command):
    said = command("render", tiny, "--quality", "draft", "--visibility")
    assert said.code == 0, said.err
    first = said.out.splitlines()[0]
    assert first.startswith("bow ")
    assert "contrast" in first
    assert "polariser at" in first
    report = json.loads(command("render", tiny, "--quality", "draft", "--visibility", "--json").out)
    by_name = {row["feature"]: row for row in report["visibility"]}
    assert by_name["primary_bow"]["polariser"]["gain"] > 1.0
    refused = command("render", tiny, "--visibility", "--only", "halo_22")
    assert refused.code == 2
