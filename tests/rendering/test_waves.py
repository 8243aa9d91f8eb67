"""Waves, sizes, flattened drops, polarisers and mirrored light in pictures."""

import numpy as np
import pytest

from skyoptics.droplets import mie
from skyoptics.geometry.axes import angle_between, around, direction
from skyoptics.optics.axisymmetric import Axisymmetric
from skyoptics.optics.polarisation import plane_angle
from skyoptics.optics.source import Disc, Source
from skyoptics.optics.table import ScatteringTable
from skyoptics.rendering.build import build
from skyoptics.rendering.run import Settings, render
from skyoptics.rendering.scatter import Sampling, find_table
from skyoptics.scene.load import from_text
from skyoptics.units import DEG

DRAFT = Settings("draft", 5, 2)
ONE = "wavelengths_nm = [550]\nbackground = 0.0"


def scene(air, camera="focal_mm = 20\nwidth_px = 90", picture=ONE, light="elevation_deg = 15"):
    return from_text(f"[light]\n{light}\n[[air]]\nkind = 'drops'\n{air}\n[camera]\n{camera}\n[picture]\n{picture}\n")


def test_rays_and_mie_agree_on_absolute_radiance():
    """0.5 mm drops, 10 % spread: radiance averaged over scattering angles 60-120° within 3 %."""
    camera = (
        "lens = 'panorama'\nwidth_deg = 60\nheight_deg = 1\nwidth_px = 600\nheight_px = 10\n"
        "aim = { azimuth_deg = 270, elevation_deg = 5 }"
    )
    seen = {}
    for method in ("rays", "mie"):
        result = render(scene(f"radius_um = 500\nspread = 0.1\nmethod = '{method}'", camera), "test", DRAFT)
        theta = angle_between(result.job.directions.vectors(), result.job.sources[0].direction)
        chosen = (theta > 60 * DEG) & (theta < 120 * DEG)
        seen[method] = result.xyz[..., 1][chosen].mean()
        assert result.report["sheets"][0]["method"] == method
    assert seen["rays"] == pytest.approx(seen["mie"], rel=0.03)


@pytest.mark.parametrize("air", ["orders = [2, 3]", "radius_um = 20\nspread = 0.1\nmethod = 'mie'"])
def test_crossed_polarisers_add_up_to_none(air):
    plain = render(scene(air), "test", DRAFT).xyz
    crossed = [
        render(scene(air, f"focal_mm = 20\nwidth_px = 90\npolariser_deg = {a}"), "test", DRAFT).xyz for a in (0, 90)
    ]
    assert crossed[0] + crossed[1] == pytest.approx(plain, rel=1e-5)


def test_crossed_polarisers_on_crystals():
    def picture(polariser):
        return from_text(
            "[light]\nelevation_deg = 20\n[[air]]\nkind = 'crystals'\norientation = 'plate'\n"
            f"[camera]\nfocal_mm = 20\nwidth_px = 60\naim = 'sun'\n{polariser}\n[picture]\n{ONE}\n"
        )

    settings = Settings("draft", 5, 2, rays=200_000)
    plain = render(picture(""), "test", settings).xyz
    crossed = [render(picture(f"polariser_deg = {a}"), "test", settings).xyz for a in (0, 90)]
    assert crossed[0] + crossed[1] == pytest.approx(plain, rel=1e-4, abs=1e-6 * float(plain.max()))


def test_the_top_of_the_bow_is_stopped_by_an_upright_polariser():
    """The light swings along the bow: degree of polarisation 0.92 at the primary's ray (van de Hulst 1957, ch. 13)."""
    camera = "focal_mm = 85\nwidth_px = 60\naim = {{ azimuth_deg = 0, elevation_deg = 26.9 }}\npolariser_deg = {}"
    light = [render(scene("orders = [2]", camera.format(a)), "test", DRAFT).xyz[..., 1] for a in (0, 90)]
    row = light[1][:, 30].argmax()
    degree = (light[1][row, 30] - light[0][row, 30]) / (light[1][row, 30] + light[0][row, 30])
    assert degree == pytest.approx(0.92, abs=0.02)


def test_a_fully_polarised_source_against_amplitudes():
    """I(θ, χ) ∝ |S2|² cos²χ + |S1|² sin²χ for light polarised at χ from the scattering plane (Bohren & Huffman §4.4.4)."""
    index, x = 1.33, 60.0
    angle = np.linspace(0.0, np.pi, 721)
    s1, s2 = mie.amplitudes(index, x, np.cos(angle))
    elements = mie.mueller_elements(mie.products(s1, s2), 1.0)
    one = np.ones(1)
    table = ScatteringTable(angle, one * 5e-7, elements[None, :, None, :], np.zeros((1, 721, 1)), one, one, ("mie",))
    upright = np.array([[1.0, 1.0, 0.0, 0.0]])
    source = Source(direction(0.5, 0.3), Disc.point(1), one, upright)
    scatterer = Axisymmetric(table, one * 4 * np.pi)
    from skyoptics.geometry.directions import Directions, frame_about

    grid = Directions.radial((40, 60), frame_about(direction(2.0, 0.2)), 40.0, lambda t: 1 / np.cos(t / 2), 1.2)
    view = grid.vectors()
    seen = scatterer.phase(source, grid)[..., 0]
    theta, chi = angle_between(source.direction, view), plane_angle(source.direction, view)
    first, second = (np.interp(theta, angle, np.abs(s) ** 2) for s in (s1, s2))
    scale = elements[:, 0] / (0.5 * (np.abs(s1) ** 2 + np.abs(s2) ** 2))
    assert np.ptp(scale) < 1e-9 * scale.mean()
    expected = scale.mean() * (second * np.cos(chi) ** 2 + first * np.sin(chi) ** 2)
    inside = np.isfinite(seen)
    assert seen[inside] == pytest.approx(expected[inside], rel=1e-9)


def test_reflected_light_bow_stands_about_its_own_antisolar_point():
    """Light from 15° below: its antisolar point is 15° above the horizon, so its bow tops at 15° + the bow's radius."""
    camera = (
        "lens = 'panorama'\nwidth_deg = 4\nheight_deg = 80\nwidth_px = 4\nheight_px = 1600\n"
        "aim = { azimuth_deg = 0, elevation_deg = 42 }"
    )
    tops = {}
    for mirrored in ("false", "true"):
        described = scene("orders = [2]", camera, light=f"elevation_deg = 15\ndisc = 'point'\nmirrored = {mirrored}")
        result = render(described, "test", DRAFT)
        light = result.xyz[:, 2, 1]
        elevation = 82.0 - (np.arange(1600) + 0.5) * 0.05
        tops[mirrored] = elevation[(light > 0).argmax()]
    assert tops["true"] - tops["false"] == pytest.approx(30.0, abs=0.1)


def test_auto_says_why_and_keeps_it():
    result = render(scene("radius_um = 15\nspread = 0.1\nmethod = 'auto'"), "test", DRAFT)
    how = result.report["sheets"][0]
    assert how["method"] == "mie"
    assert "small drops need waves" in how["reason"]
    again = render(scene("radius_um = 15\nspread = 0.1\nmethod = 'auto'"), "test", DRAFT).report["sheets"][0]
    assert again["reused"]
    assert again["reason"] == how["reason"]


def test_a_measured_spectrum_and_liquid_water(tmp_path):
    (tmp_path / "rain.csv").write_text(
        "diameter_lower_mm,diameter_upper_mm,concentration_per_m3_mm\n0.4,0.6,900\n0.6,0.8,500\n0.8,1.2,100\n",
        encoding="utf-8",
    )
    text = (
        "[light]\nelevation_deg = 15\n[[air]]\nkind = 'drops'\nsizes = 'measured'\nspectrum = 'rain.csv'\nmethod = 'airy'\n"
        "liquid_water_g_m3 = 0.5\npath_m = 500\n[camera]\nfocal_mm = 20\n[picture]\nwavelengths_nm = [550]\n"
    )
    job = build(from_text(text, folder=tmp_path), "test")
    depth = float(job.sheets[0].amount(np.array(0.0), np.array(0.1), job.sources[0])[0])
    # τ = 2π⟨r²⟩ N L = 3 LWC L / (2 ρ r_eff), the large-drop limit of extinction (van de Hulst 1957, §8.22)
    assert depth == pytest.approx(1.5 * 0.5e-3 * 500 / (1000.0 * job.sheets[0].radius), rel=1e-3)


def test_flattened_rain_dims_the_top_of_the_bow():
    air = "sizes = 'rain'\nrain_mm_h = 10\naxis_ratios = '{}'\norders = [2]"
    camera = "lens = 'equidistant'\nfocal_mm = 20\nsensor_mm = [36, 36]\nwidth_px = 250\naim = 'antisolar'"
    ratios = {}
    for law in ("round", "beard-chuang1987"):
        method = "\nmethod = 'airy'" if law == "round" else ""
        described = scene(air.format(law) + method + "\nbelow_horizon = true", camera, light="elevation_deg = 10")
        result = render(described, "test", DRAFT)
        antisolar = -result.job.sources[0].direction
        peaks = []
        for position in (0.0, 70.0):
            row, column = result.job.directions.project(
                around(antisolar, np.linspace(36, 44, 200) * DEG, position * DEG)
            )
            peaks.append(result.xyz[np.rint(row).astype(int), np.rint(column).astype(int), 1].max())
        ratios[law] = peaks[0] / peaks[1]
    assert ratios["round"] == pytest.approx(1.0, abs=0.05)
    assert ratios["beard-chuang1987"] < 0.8


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ("air.1.sizes=measured", "spectrum: is missing"),
        ("air.1.spread=0.9", "between 0 and 0.5"),
        ("air.1.radius_um=0", "between 1 and 10000"),
        ("air.1.radius_um=1e6", "between 1 and 10000"),
        ("air.1.method=mei", "did you mean mie"),
        ("air.1.liquid_water_g_m3=1", "path_m: is missing"),
        ("air.1.axis_ratios=thurai", "thurai2007"),
    ],
)
def test_bad_drops_in_words(command, tiny, change, said):
    done = command("render", tiny, "--set", change)
    assert done.code == 1
    assert said in done.err


def test_stored_wave_tables_are_found_again():
    described = scene("radius_um = 30\nspread = 0.1\nmethod = 'mie'")
    job = build(described, "test")
    first, how = find_table(job.sheets[0], job, Sampling("draft", 1), None)
    second, again = find_table(job.sheets[0], job, Sampling("draft", 1), None)
    assert again.reused
    assert not how.reused or how.trace_key == again.trace_key
    assert np.array_equal(first.elements, second.elements)
