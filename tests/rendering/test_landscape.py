"""Rain shafts, cloud layers with air, land and water in whole scenes: against the physics they are made of."""

import numpy as np
import pytest

from skyoptics.errors import SceneError
from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.geometry.horizon import dip
from skyoptics.light.air import Air
from skyoptics.rendering.build import build
from skyoptics.rendering.looking import look, stokes
from skyoptics.rendering.run import Settings, render
from skyoptics.scene.load import load
from skyoptics.sky.haze import layer_front
from skyoptics.units import DEG

RAIN = """
[[air]]
kind = "drops"
radius_um = 400
place = "shaft"
near_km = 2
far_km = 5
top_km = 3
optical_depth = 1.5
"""
PLATES = """
[[air]]
kind = "crystals"
orientation = "plate"
aspect = 0.2
optical_depth = 0.1
"""
PICTURE = """
[picture]
wavelengths_nm = [450, 550, 650]
"""
LIGHT = """
[light]
elevation_deg = 15
azimuth_deg = 270
"""
CAMERA = """
[camera]
focal_mm = 14
width_px = 61
height_px = 40
aim = { azimuth_deg = %s, elevation_deg = %s }
"""


def scene(tmp_path, *parts):
    path = tmp_path / "scene.toml"
    path.write_text("\n".join(parts), encoding="utf-8")
    return load(path)


def seen(tmp_path, *parts, rays=2**16):
    made = scene(tmp_path, *parts)
    result = render(made, "scene.toml", Settings("draft", rays=rays, threads=2))
    whole = np.concatenate([block for _, block in look(result.job, result.sheets, None, mirror=result.mirror)])
    return result, whole


def camera(azimuth=90, elevation=0):
    return CAMERA % (azimuth, elevation)


@pytest.mark.parametrize("sky", ["plain", "overcast"])
def test_water_mirrors_sky_and_bow_by_fresnel(tmp_path, sky):
    """A level camera sees the same line of sight as far below the horizon as above; reflectances from the water itself."""
    # I and Q of what is mirrored, R_p and R_s of the water: I' = (R_p + R_s) I / 2 + (R_p − R_s) Q / 2
    picture = PICTURE + f'sky = "{sky}"\n'
    result, light = seen(tmp_path, LIGHT, RAIN, camera(), picture, '[ground]\nwater = "lake"\n')
    grid = result.job.directions
    up, down = light[:20], light[:19:-1]
    _, r_s, r_p = result.job.water.mirrored(grid.vectors()[:19:-1])
    leaving = result.job.water.leaving(grid.vectors()[:19:-1])
    i, q = np.moveaxis(stokes(result.job, result.sheets, slice(0, 20))[..., :2], -1, 0)
    np.testing.assert_allclose(i, up, rtol=1e-6)
    expected = 0.5 * (r_s + r_p) * i + 0.5 * (r_p - r_s) * q + leaving
    steep = azimuth_elevation(grid.vectors())[1][:20] > 4 * DEG  # the eye is close to the water, not in it
    np.testing.assert_allclose(down[steep], expected[steep], rtol=0.02)
    assert up[steep].max() > 1.5 * np.median(up[steep])  # there is a bow to be mirrored


def test_water_mirrors_crystals_too(tmp_path):
    """Films of the mirrored half are traced for themselves: their light is Fresnel's share of that above."""
    picture = PICTURE + "background = 0\n"
    light = "[light]\nelevation_deg = 15\nazimuth_deg = 270\n"
    parts = (light, PLATES, camera(270), picture, '[ground]\nwater = "lake"\nsunlit = 0\n')
    result, whole = seen(tmp_path, *parts, rays=2**21)
    vectors = result.job.directions.vectors()
    _, r_s, r_p = result.job.water.mirrored(vectors[:19:-1])
    up, down = whole[:20].sum(axis=(0, 1)), whole[:19:-1]
    i, q = np.moveaxis(stokes(result.job, result.sheets, slice(0, 20))[..., :2], -1, 0)
    expected = (0.5 * (r_s + r_p) * i + 0.5 * (r_p - r_s) * q).sum(axis=(0, 1))
    assert np.all(up > 0.0)
    np.testing.assert_allclose(down.sum(axis=(0, 1)), expected, rtol=0.05)


def test_a_polariser_takes_the_light_off_water_near_brewsters_angle(tmp_path):
    """37° down, where water of 1.333 mirrors no light that is polarised upright (Brewster: arctan n = 53.1°)."""
    ground = '[ground]\nwater = "lake"\n'
    frames = {}
    for axis in (0, 90):
        polariser = camera(90, -37) + f"polariser_deg = {axis}\n"
        result, light = seen(tmp_path, LIGHT, RAIN, polariser, PICTURE, ground)
        vectors = result.job.directions.vectors()[20, 30]
        _, r_s, r_p = result.job.water.mirrored(vectors)
        within = result.job.water.leaving(vectors) / (1.0 - 0.5 * (r_s + r_p))
        out = 0.5 * within * (1.0 - (r_p if axis == 0 else r_s))  # comes out polarised, too
        frames[axis] = light[20, 30] - out
    assert np.all(np.abs(frames[0]) < 0.02 * frames[90])


def test_stokes_and_radiance_of_water_agree(tmp_path):
    result, light = seen(tmp_path, LIGHT, RAIN, camera(), PICTURE, '[ground]\nwater = "sea"\n')
    whole = stokes(result.job, result.sheets, slice(None), result.mirror)
    np.testing.assert_allclose(whole[..., 0], light, rtol=1e-6)
    assert np.all(np.hypot(whole[..., 1], whole[..., 2]) <= whole[..., 0] * (1 + 1e-9))


def test_hills_hide_what_is_behind_them_and_not_rain_before_them(tmp_path):
    ground = '[ground]\nhorizon = "hills"\nhorizon_height_deg = 20\ndistance_km = 10\n'
    result, _light = seen(tmp_path, LIGHT, RAIN, camera(90, 10), PICTURE, ground)
    grid = result.job.directions
    azimuth, elevation = azimuth_elevation(grid.vectors())
    hill = elevation < result.job.land.elevation(azimuth) - 1 * DEG
    rain = result.job.sheets[0]
    in_rain = hill & (elevation > 1 * DEG) & (elevation < 20 * DEG)
    assert np.all(rain.amount(azimuth, elevation, result.job.sources[0])[in_rain] > 0.1)
    behind = ground.replace("distance_km = 10", "distance_km = 1")
    result, _ = seen(tmp_path, LIGHT, RAIN, camera(90, 10), PICTURE, behind)
    amount = result.job.sheets[0].amount(azimuth, elevation, result.job.sources[0])
    assert np.all(amount[hill] == 0.0)
    assert np.all(
        amount[~hill & (elevation > result.job.land.elevation(azimuth) + 1 * DEG) & (elevation < 25 * DEG)] > 0
    )


def test_from_a_hill_the_horizon_lies_lower(tmp_path):
    made = camera(90, 0).replace("focal_mm = 14", "focal_mm = 400") + "eye_height_m = 1000\n"
    result, light = seen(tmp_path, LIGHT + 'attenuation = "none"\n', RAIN, made, PICTURE)
    assert float(result.job.land.elevation(0.0)) == pytest.approx(-float(dip(1000.0)), rel=1e-9)
    column = light[:, 30, 1]
    edge = int(np.argmax(np.abs(np.diff(column))))
    _, elevation = azimuth_elevation(result.job.directions.vectors())
    pixel = float(np.diff(elevation[:2, 30]).item().__abs__())
    assert elevation[edge, 30] == pytest.approx(-float(dip(1000.0)), abs=1.5 * pixel)


def test_crystals_aloft_are_lit_and_seen_through_their_own_air(tmp_path):
    low = "[light]\nelevation_deg = 5\nazimuth_deg = 180\n"
    aloft, plain = PLATES + "height_km = 9\n", PLATES
    jobs = [build(scene(tmp_path, low, air, camera(180, 20), PICTURE), "scene.toml") for air in (aloft, plain)]
    azimuth, elevation = np.full(3, np.pi), np.array([3.0, 10.0, 60.0]) * DEG
    source = jobs[0].sources[0]
    ours, bare = (job.sheets[0].amount(azimuth, elevation, source) for job in jobs)
    air = Air()
    wavelength = jobs[0].bins.edges[:, 0]
    gain = air.transmission(wavelength, 5 * DEG, 9e3) / air.transmission(wavelength, 5 * DEG)
    expected = bare * gain * layer_front(air, jobs[0].bins, elevation, 9e3)
    np.testing.assert_allclose(ours, expected, rtol=2e-3)
    assert gain[0] > 2.0 * gain[2]


def test_a_rain_rate_sets_the_extinction_of_a_shaft(tmp_path):
    """Marshall & Palmer, 10 mm/h: N0 exp(−ΛD), cross-section twice over ½ π N0 ∫ D² exp(−ΛD) dD = π N0 / Λ³."""
    rain = '[[air]]\nkind = "drops"\nsizes = "rain"\nrain_mm_h = 10\nplace = "shaft"\n'
    job = build(scene(tmp_path, LIGHT, rain, camera(), PICTURE), "scene.toml")
    slope = 4.1e3 * 10**-0.21
    expected = np.pi * 8e6 / slope**3
    assert job.sheets[0].shaft.extinction == pytest.approx(expected, rel=1e-6)
    wet = '[[air]]\nkind = "drops"\nradius_um = 500\nliquid_water_g_m3 = 0.5\nplace = "shaft"\n'
    job = build(scene(tmp_path, LIGHT, wet, camera(), PICTURE), "scene.toml")
    assert job.sheets[0].shaft.extinction == pytest.approx(3 * 0.5e-3 / (2 * 1000 * 500e-6), rel=1e-6)


@pytest.mark.parametrize(
    ("parts", "words"),
    [
        ((RAIN + "path_m = 5\n",), "a shaft's path is from near_km to far_km"),
        ((RAIN.replace("far_km = 5", "far_km = 1"),), "the far side of a shaft lies beyond the near one"),
        ((RAIN.replace('place = "shaft"', 'place = "curtain"'),), 'is for place = "shaft"'),
        ((RAIN + "lit_km = [3, 2]\n",), "the first distance is the smaller one"),
        ((RAIN, RAIN), "two rain shafts overlap"),
        ((PLATES + 'place = "curtain"\nheight_km = 3\n',), "a curtain hangs all around"),
        ((RAIN, "[ground]\nhorizon_height_deg = 3\n"), "a flat horizon has no height"),
        ((RAIN, '[ground]\nhorizon = "hill"\n'), "hills"),
        ((RAIN, '[ground]\nhorizon_csv = "no.csv"\n'), "no.csv"),
        ((RAIN, '[ground]\nhorizon_csv = "gaps.csv"\n'), "gaps.csv:3"),
    ],
)
def test_faults(tmp_path, parts, words):
    (tmp_path / "gaps.csv").write_text("azimuth_deg,elevation_deg\n0,1\n200,2\n", encoding="utf-8")
    with pytest.raises(SceneError) as fault:
        build(scene(tmp_path, LIGHT, *parts, camera(), PICTURE), "scene.toml")
    assert words in str(fault.value)


def test_a_horizon_from_a_file(tmp_path):
    rows = "\n".join(f"{azimuth},{2 if azimuth == 90 else 0}" for azimuth in range(0, 360, 15))
    (tmp_path / "view.csv").write_text(f"azimuth_deg,elevation_deg\n{rows}\n", encoding="utf-8")
    ground = '[ground]\nhorizon_csv = "view.csv"\n'
    job = build(scene(tmp_path, LIGHT, RAIN, camera(), PICTURE, ground), "scene.toml")
    assert float(job.land.elevation(90 * DEG)) == pytest.approx(2 * DEG)
    assert float(job.land.elevation(82.5 * DEG)) == pytest.approx(1 * DEG)


def test_an_exposure_is_fixed_once(tmp_path):
    """The camera's settings and an exposure value cannot both stand: told when the file is read, with its line."""
    picture = PICTURE + "exposure_ev = 12\n"
    with pytest.raises(
        SceneError, match=r"(?s)scene.toml:\d+: picture.exposure_ev: cannot stand beside camera.aperture"
    ):
        scene(tmp_path, LIGHT, RAIN, camera() + "aperture = 8\nexposure_s = 0.01\niso = 100\n", picture)
