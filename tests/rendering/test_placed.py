"""Scenes lit by place and time."""

from datetime import datetime

import numpy as np
import pytest

from skyoptics.errors import SceneError
from skyoptics.light import position
from skyoptics.rendering.build import build
from skyoptics.scene.load import load
from skyoptics.units import DEG

SCENE = """
[light]
latitude_deg = 47.2
longitude_deg = 8.9
time = "2027-05-12T19:40+02:00"
[[air]]
kind = "drops"
[camera]
width_px = 60
"""


def job(tmp_path, *overrides, text=SCENE):
    path = tmp_path / "placed.toml"
    path.write_text(text)
    return build(load(path, overrides), str(path))


def test_the_sun_stands_where_place_and_time_put_it(tmp_path):
    source = job(tmp_path).sources[0]
    seen = position.sun(47.2, 8.9, datetime.fromisoformat("2027-05-12T19:40+02:00"))
    assert np.degrees(np.arcsin(source.direction[2])) == pytest.approx(seen.elevation_deg, abs=1e-9)
    azimuth = np.degrees(np.arctan2(source.direction[0], source.direction[1])) % 360
    assert azimuth == pytest.approx(seen.azimuth_deg, abs=1e-9)
    assert source.disc.radius == pytest.approx(seen.angular_radius_deg * DEG)


def test_a_nearer_sun_is_larger_and_brighter(tmp_path):
    # perihelion and aphelion, eccentricity 0.0167: 3.4 % in radius, 6.9 % in irradiance, the sun at one height
    near = job(tmp_path, 'light.time="2027-01-03T12:00Z"', "light.latitude_deg=0", "light.attenuation=none").sources[0]
    far = job(tmp_path, 'light.time="2027-07-05T12:00Z"', "light.latitude_deg=0", "light.attenuation=none").sources[0]
    assert near.disc.radius / far.disc.radius == pytest.approx(1.0167 / 0.9833, abs=1e-3)
    assert near.irradiance / far.irradiance == pytest.approx((near.disc.radius / far.disc.radius) ** 2)


def test_the_moon_comes_with_its_phase(tmp_path):
    # full moon of 20 May 2027, 10:59 UT (almanac, from memory); 22:00 UT on the 20th it is half a day past
    full = job(tmp_path, "light.body=moon", 'light.time="2027-05-20T23:00Z"')
    assert full.by_moon
    seen = position.moon(47.2, 8.9, datetime.fromisoformat("2027-05-20T23:00+00:00"))
    assert seen.illuminated_fraction > 0.98
    later = job(tmp_path, "light.body=moon", 'light.time="2027-05-25T03:00Z"')
    assert later.sources[0].irradiance.max() < 0.7 * full.sources[0].irradiance.max()


def test_local_times_take_a_zone(tmp_path):
    text = SCENE.replace('"2027-05-12T19:40+02:00"', '2027-05-12T19:40:00\nzone = "Europe/Zurich"')  # a TOML time
    assert job(tmp_path, text=text).sources[0].direction == pytest.approx(job(tmp_path).sources[0].direction)


@pytest.mark.parametrize(
    ("overrides", "words"),
    [
        (['light.time="2027-05-12T22:40+02:00"'], "below the horizon; it rises at 2027-05-13T05:5"),
        (['light.time="2327-05-12T19:40+02:00"'], "1600 to 2200"),
        (['light.time="2027-05-12T19:40"'], "local time without a zone"),
        (["light.zone=Europe/Zuerich"], "did you mean Europe/Zurich"),
        (["light.elevation_deg=20"], "cannot stand beside elevation_deg"),
        (["light.azimuth_deg=20"], "place and time decide it"),
        (["light.latitude_deg=78.2", 'light.time="2027-12-21T12:00Z"'], "rises|polar night"),
    ],
)
def test_wrong_places_and_times_are_told(tmp_path, overrides, words):
    with pytest.raises(SceneError, match=words):
        job(tmp_path, *overrides)


def test_a_light_without_direction_or_place_is_told(tmp_path):
    with pytest.raises(SceneError, match="give the height of the sun, or latitude_deg"):
        job(tmp_path, text=SCENE.replace(SCENE[SCENE.index("latitude") : SCENE.index("[[air]]")], ""))
    with pytest.raises(SceneError, match="is missing beside latitude_deg"):
        job(tmp_path, text=SCENE.replace("longitude_deg = 8.9\n", ""))
