"""Renders against closed forms: where the bow stands, how bright, which colours, the same bits."""

from dataclasses import replace

import numpy as np
import pytest

from skyoptics.colour.observer import weights
from skyoptics.geometry.axes import angle_between, around
from skyoptics.geometry.directions import Directions
from skyoptics.optics import bows
from skyoptics.rendering.build import build
from skyoptics.rendering.run import Settings, render
from skyoptics.rendering.scatter import Sampling, axisymmetric, find_table
from skyoptics.scene.load import from_text
from skyoptics.units import DEG

LENSES = {
    "rectilinear": "focal_mm = 12",
    "equidistant": "focal_mm = 10",
    "equisolid": "focal_mm = 10",
    "stereographic": "focal_mm = 9",
    "orthographic": "focal_mm = 16",
    "panorama": "width_deg = 110\nheight_deg = 100",
}
DRAFT = Settings(quality="draft", seed=5, threads=2)
SAMPLING = Sampling("draft", 5)


def scene(camera, light="elevation_deg = 15", air="orders = [2]", picture="wavelengths_nm = [550]\nbackground = 0.0"):
    return from_text(
        f"[light]\n{light}\n[[air]]\nkind = 'drops'\nbelow_horizon = true\n{air}\n"
        f"[camera]\n{camera}\n[picture]\n{picture}\n"
    )


@pytest.mark.parametrize("roll", [0, 30])
@pytest.mark.parametrize("lens", LENSES)
def test_first_lit_pixel_stands_on_the_caustic(lens, roll):
    """Point sun, one wavelength, primary alone: coming from the dark band, light begins within a pixel of the caustic."""
    aim = f"aim = {{ azimuth_deg = 0, elevation_deg = 0, roll_deg = {roll} }}"
    camera = f"lens = '{lens}'\n{LENSES[lens]}\nwidth_px = 900\n{aim}"
    described = scene(camera, light="elevation_deg = 15\ndisc = 'point'")
    job = build(described, "test")
    table, _ = find_table(job.sheets[0], job, SAMPLING, None)
    light = axisymmetric(job.sheets[0], table, job.sources[0].disc).phase(job.sources[0], job.directions, slice(None))[
        ..., 0
    ]
    antisolar = -job.sources[0].direction
    index = float(job.sheets[0].index(job.bins.centre).real[0])
    radius = np.pi - float(bows.scattering_angle(index, 2))
    seen = 0
    for position in (0, -50, 40, 75, -85):
        beside = radius + np.linspace(2.0, -1.0, 12001) * DEG
        row, column = job.directions.project(around(antisolar, beside, position * DEG))
        inside = (
            np.isfinite(row) & (row > 0) & (column > 0) & (row < light.shape[0] - 1) & (column < light.shape[1] - 1)
        )
        if not inside.all():
            continue
        lit = light[np.rint(row).astype(int), np.rint(column).astype(int)] > 0.0
        first = int(lit.argmax())
        caustic = np.array(job.directions.project(around(antisolar, radius, position * DEG)))
        pixel = np.rint([row[first], column[first]])
        assert lit.any()
        assert np.abs(pixel - caustic).max() <= 1.0
        seen += 1
    assert seen >= (4 if lens != "orthographic" else 3)


def test_radiance_is_irradiance_phase_amount():
    described = scene("focal_mm = 20\nwidth_px = 90", picture="background = 0.01\nwavelengths_nm = [500, 600]")
    result = render(described, "test", DRAFT)
    job, sheet = result.job, result.sheets[0]
    view = job.directions.vectors()[4, 45]
    theta = float(angle_between(job.sources[0].direction, view))
    curve = sheet.scatterers[0].table.elements[0, :, :, 0]
    p11 = np.array([np.interp(theta, sheet.scatterers[0].table.angle, curve[:, band]) for band in range(2)])
    share = sheet.scatterers[0].share / (4 * np.pi)
    expected = (0.01 + job.sources[0].irradiance * p11 * share * 0.1) @ weights(job.bins)
    assert result.xyz[4, 45] == pytest.approx(expected, rel=1e-5)


def test_phase_integrates_to_half_the_scattered_share():
    """Ray drops: ∫ phase dΩ = ½ (1 − absorbed − cut off), the other half of the extinction being diffraction."""
    job = build(scene("focal_mm = 20", picture="wavelengths_nm = [450, 700]"), "test")
    table, _ = find_table(job.sheets[0], job, SAMPLING, None)
    report = table.report
    wanted = 0.5 * (1 - np.array(report["absorbed"]) - np.array(report["cut_off"]))
    grids = [
        Directions.scattering_axis(job.sources[0].direction, 1800),
        Directions.cylindrical((500, 1000), np.eye(3), (-np.pi, np.pi), (np.pi / 2, -np.pi / 2)),
    ]
    from skyoptics.optics.source import Disc

    for disc, grid, tolerance in (
        (Disc.point(2), grids[0], 1e-6),
        (job.sources[0].disc, grids[0], 1e-4),
        (job.sources[0].disc, grids[1], 1e-4),
    ):
        scatterer = axisymmetric(replace(job.sheets[0], orders=tuple(range(11))), table, disc)
        phase = scatterer.phase(job.sources[0], grid)
        assert np.einsum("yxw,yx->w", phase, grid.solid_angle()) == pytest.approx(wanted, abs=tolerance)


def test_same_seed_same_bits_on_any_number_of_threads(store):
    described = scene("focal_mm = 20\nwidth_px = 300", picture="wavelengths_nm = [480, 620]")
    pictures = []
    for threads in (1, 2):
        for file in store.glob("*.npz"):
            file.unlink()
        result = render(described, "test", Settings("draft", 8, threads))
        assert result.report["traced_rays"] > 0
        pictures.append(result)
    assert np.array_equal(pictures[0].xyz, pictures[1].xyz)
    assert np.array_equal(pictures[0].developed.rgb, pictures[1].developed.rgb)
    other = render(described, "test", Settings("draft", 9, 2))
    assert not np.array_equal(other.xyz, pictures[0].xyz)


def test_outside_the_image_circle_is_black():
    described = scene(
        "lens = 'equidistant'\nfocal_mm = 12\nsensor_mm = [30, 30]\nwidth_px = 100\n"
        "aim = { azimuth_deg = 0, elevation_deg = 90 }",
        picture="wavelengths_nm = [550]",
    )
    result = render(described, "test", DRAFT)
    assert np.isfinite(result.xyz).all()
    wide = scene(
        "lens = 'orthographic'\nfocal_mm = 10\nsensor_mm = [30, 30]\nwidth_px = 100\n"
        "aim = { azimuth_deg = 0, elevation_deg = 90 }",
        picture="wavelengths_nm = [550]",
    )
    result = render(wide, "test", DRAFT)
    assert np.isnan(result.xyz[0, 0]).all()
    assert (result.developed.rgb[0, 0] == 0.0).all()


def test_the_ground_is_darker_and_the_curtain_ends_there():
    described = from_text(
        "[light]\nelevation_deg = 15\n[[air]]\nkind = 'drops'\n[camera]\nwidth_px = 90\n"
        "aim = { azimuth_deg = 0, elevation_deg = 0 }\n"
        "[picture]\nwavelengths_nm = [550]\nbackground = 0.02\nground = 0.5\n"
    )
    xyz = render(described, "test", DRAFT).xyz
    below = xyz[-1] / weights(build(described, "test").bins)[0]
    assert below == pytest.approx(0.01, rel=1e-5)
    assert (xyz[0, :, 1] > 2.0 * xyz[-1, :, 1]).all()


def colour_difference(first, second):
    """CIEDE2000 between pictures on one exposure, before tone mapping (colour-science is the reference)."""
    import colour

    scale = 0.5 / np.nanpercentile(first[..., 1], 99)
    white = np.array([0.3127, 0.3290])
    lab = [colour.XYZ_to_Lab(xyz.astype(float) * scale, white) for xyz in (first, second)]
    return colour.delta_E(*lab, method="CIE 2000")


def bow(picture):
    return scene(
        "focal_mm = 35\nwidth_px = 150\naim = { azimuth_deg = 0, elevation_deg = 26 }", air="", picture=picture
    )


@pytest.mark.parametrize(
    ("fine_nm", "settings"),
    [(4.0, Settings("draft", 3, 2)), pytest.param(1.0, Settings("fine", 3, 2), marks=pytest.mark.slow)],
)
def test_default_bins_show_the_colours_of_narrow_ones(fine_nm, settings):
    """ΔE2000 of the default bins against narrow ones: 95 % within 0.5, all within 1.0, background 0."""
    default = render(bow("background = 0.0"), "test", settings)
    narrow = render(bow(f"background = 0.0\nbin_nm = {fine_nm}"), "test", settings)
    difference = colour_difference(narrow.xyz, default.xyz)
    assert np.percentile(difference, 95) < 0.5
    assert difference.max() < 1.0
