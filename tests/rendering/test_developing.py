"""Exposure, white balance, sun and glare of whole pictures."""

import json

import numpy as np
import pytest
import tifffile

from skyoptics.colour import white
from skyoptics.colour.display import linear_rgb
from skyoptics.colour.observer import weights
from skyoptics.errors import SceneError
from skyoptics.rendering.output import Wanted, write
from skyoptics.rendering.run import Settings, render
from skyoptics.scene.load import from_text
from skyoptics.units import DEG

DROPS = "kind = 'drops'\norders = [2]\noptical_depth = 0.2"
SUN = "aim = 'sun'\nwidth_px = 90\nheight_px = 60"


def shown(picture="", camera=SUN, light="elevation_deg = 25", air=DROPS, **asked):
    text = (
        f"[light]\n{light}\n[[air]]\n{air}\n[camera]\n{camera}\n[picture]\nbin_nm = 40\nbackground = 0.03\n{picture}\n"
    )
    return render(from_text(text), "test.toml", Settings("draft", 2, rays=asked.pop("rays", None)), **asked)


@pytest.fixture(scope="module")
def plain():
    return shown()


def test_camera_settings_are_an_exposure():
    # ISO 2720: f/8, 1/256 s, ISO 200 is EV 13 at ISO 100.
    by_hand = shown("exposure_ev = 13")
    by_camera = shown(camera=SUN + "\naperture = 8\nexposure_s = 0.00390625\niso = 200")
    assert by_camera.report["exposure_ev"] == pytest.approx(13.0, abs=1e-12)
    assert not by_camera.report["exposure_automatic"]
    np.testing.assert_allclose(by_camera.developed.rgb, by_hand.developed.rgb, rtol=1e-6)
    sensor = by_camera.report["camera"]
    assert sensor["saturation_cd_m2"] == pytest.approx(0.39 * 64 * 256 / 0.65)  # ISO 12232: 78/200 lx s
    assert sensor["saturated_share"] == 0.0
    assert by_hand.report["camera"] is None


@pytest.mark.parametrize(("asked", "key"), [("exposure_ev = 13", "exposure_ev"), ("metering = 'average'", "metering")])
def test_two_exposures_are_told(asked, key):
    with pytest.raises(SceneError, match=rf"picture\.{key}: cannot stand beside camera\.aperture"):
        shown(asked, camera=SUN + "\naperture = 8\nexposure_s = 0.00390625\niso = 200")


def test_meter_shows_the_mean_as_middle_grey():
    metered = shown("metering = 'average'")
    mean = float(metered.xyz[..., 1].mean(dtype=float))
    assert mean * 0.18 / (0.125 * 2.0 ** metered.report["exposure_ev"]) == pytest.approx(0.18, rel=1e-9)


def test_white_balance_reaches_the_picture(plain):
    assert (plain.report["white"], plain.report["white_kelvin"]) == ("display", None)
    ratio = []
    for asked, kelvin in (("white_kelvin = 3500", 3500), ("white = 'daylight'", 5500), ("white_kelvin = 9000", 9000)):
        result = shown(asked)
        assert result.report["white_kelvin"] == kelvin
        np.testing.assert_array_equal(result.xyz, plain.xyz)  # linear outputs know no white balance
        ratio.append(float(result.developed.rgb[10, 10, 2] / result.developed.rgb[10, 10, 0]))
    assert ratio[0] > ratio[1] > ratio[2]  # balanced for a redder light, a picture is bluer
    automatic = shown("white = 'auto'")
    assert automatic.report["white_kelvin"] == round(white.automatic(plain.xyz))


def test_bare_sun_has_its_own_brightness(plain):
    # E / (π r²) is the mean luminance of a disc (definition); the sun's centre is 1.22 times it at 550 nm (Neckel & Labs 1994,
    # from memory). Of the optical depth 0.2 half is diffraction, which stays in the disc's place.
    result = shown("show_sun = true")
    source = result.job.sources[0]
    illuminance = float(source.irradiance @ weights(result.job.bins)[:, 1]) * np.exp(-0.1)
    added = result.xyz[..., 1].astype(float) - plain.xyz[..., 1]
    assert (added * result.job.directions.solid_angle()).sum() == pytest.approx(illuminance, rel=0.01)
    tele = shown("show_sun = true", camera="aim = 'sun'\nfocal_mm = 1500\nwidth_px = 41\nheight_px = 31")
    centre = tele.xyz[15, 20, 1] / (illuminance / (np.pi * source.disc.radius**2))
    assert centre == pytest.approx(1.22, abs=0.03)


def test_glare_spreads_the_sun_and_keeps_its_light(plain):
    result = shown("glare = 'eye'")
    bare = shown("show_sun = true")
    solid = result.job.directions.solid_angle()
    gained = (result.xyz[..., 1].astype(float) - plain.xyz[..., 1]) * solid
    whole = ((bare.xyz[..., 1].astype(float) - plain.xyz[..., 1]) * solid).sum()
    assert 0.96 * whole < gained.sum() < whole  # 2 % fall outside a frame of 74 by 53 degrees
    assert result.xyz[..., 1].max() < bare.xyz[..., 1].max()
    assert gained.min() > 0.0
    away = 5.0 * DEG
    row = 30 - round(np.tan(away) * 24.0 / (24.0 / 60.0))
    # Stiles & Holladay with the CIE's factor for age, 10 (1 + (A/70)^4) / θ² (from memory), within the 45 % it differs by.
    veil = float(result.xyz[row, 45, 1]) - plain.xyz[row, 45, 1]
    assert veil == pytest.approx(whole * 10.0 * (1.0 + 0.5**4) / 25.0, rel=0.45)


def test_no_glare_from_a_sun_outside_or_under_a_cover(plain):
    covered = shown("glare = 'eye'", camera=SUN + "\ncover_deg = 1")
    assert covered.xyz[..., 1].max() < 1.5 * plain.xyz[..., 1].max()
    away = "aim = { azimuth_deg = 0, elevation_deg = 20 }\nwidth_px = 60"
    seen, without = shown("glare = 'eye'", camera=away), shown(camera=away)
    assert seen.xyz[..., 1].sum(dtype=float) == pytest.approx(without.xyz[..., 1].sum(dtype=float), rel=1e-5)
    hidden = shown("glare = 'eye'\nshow_sun = false")
    assert hidden.xyz[..., 1].sum(dtype=float) == pytest.approx(plain.xyz[..., 1].sum(dtype=float), rel=1e-5)


def test_a_setting_sun_is_cut_by_the_horizon():
    camera, bare = "aim = 'sun'\nfocal_mm = 400\nwidth_px = 90\nheight_px = 60", "attenuation = 'none'"
    up, down = (
        shown("show_sun = true", camera, f"elevation_deg = 1\n{bare}"),
        shown("show_sun = true", camera, f"elevation_deg = 0\n{bare}"),
    )
    assert np.count_nonzero(up.xyz[..., 1] > 1e7) == pytest.approx(
        2 * np.count_nonzero(down.xyz[..., 1] > 1e7), rel=0.1
    )
    assert down.xyz[32:, :, 1].max() < 1e4
    spread = shown("glare = 'eye'", camera, f"elevation_deg = 0\n{bare}")
    assert spread.xyz[:30, :, 1].max() > 10.0 * spread.xyz[34:, :, 1].max()


def test_polariser_halves_the_sun():
    camera = "aim = 'sun'\nfocal_mm = 400\nwidth_px = 30\nheight_px = 20"
    free, crossed = shown("show_sun = true", camera), shown("show_sun = true", camera + "\npolariser_deg = 30")
    assert crossed.xyz[..., 1].max() == pytest.approx(0.5 * free.xyz[..., 1].max(), rel=1e-4)


def test_a_point_is_drawn_as_wide_as_a_pixel():
    result, plain = (shown(asked, light="elevation_deg = 25\ndisc = 'point'") for asked in ("show_sun = true", ""))
    illuminance = float(result.job.sources[0].irradiance @ weights(result.job.bins)[:, 1]) * np.exp(-0.1)
    added = (result.xyz[..., 1].astype(float) - plain.xyz[..., 1]) * result.job.directions.solid_angle()
    assert added.sum() == pytest.approx(illuminance, rel=0.01)
    assert np.count_nonzero(added > 1e-3 * illuminance) <= 4


def test_linear_files_are_absolute(tmp_path):
    import OpenEXR

    result = shown("white_kelvin = 3000\nexposure_ev = 5\nglare = 'eye'")
    scene = from_text("[light]\nelevation_deg = 25\n[[air]]\nkind = 'drops'\n")
    write(result, scene, Wanted(tmp_path, "x", extra=("exr", "tiff")), ["skyoptics", "render", "x.toml"])
    with OpenEXR.File(str(tmp_path / "x.exr")) as file:
        header, values = dict(file.header()), file.channels()["RGB"].pixels  # closing empties the header
    assert header["Unit"] == "cd m-2"
    assert header["whiteLuminance"] == 1.0
    assert "absolute" in header["Values"]
    np.testing.assert_allclose(values, linear_rgb(result.xyz), rtol=1e-6)
    luminance = values @ np.array([0.2126, 0.7152, 0.0722])
    np.testing.assert_allclose(luminance, result.xyz[..., 1], rtol=1e-3)
    with tifffile.TiffFile(tmp_path / "x.tiff") as file:
        assert json.loads(file.pages[0].description)["Unit"] == "cd m-2"
    assert "Unit" not in json.loads((tmp_path / "x.json").read_text())


def test_one_part_of_the_light_is_balanced_as_the_whole():
    crystals = "kind = 'crystals'\norientation = 'plate'\noptical_depth = 0.5"
    whole = shown("white = 'auto'\nglare = 'eye'", air=crystals, rays=60000)
    part = shown("white = 'auto'\nglare = 'eye'", air=crystals, only="parhelia", rays=60000)
    assert part.report["exposure_ev"] == whole.report["exposure_ev"]
    np.testing.assert_array_equal(part.developed.white, whole.developed.white)
    assert part.xyz[..., 1].max() < 1e8  # no sun in it, of some 1e9
