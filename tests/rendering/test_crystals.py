"""Pictures of crystals: halos where closed forms put them, honest noise, batches that can be stopped and taken up."""

import json
from dataclasses import replace

import numpy as np
import pytest

from skyoptics.geometry.axes import angle_between, around, azimuth_elevation
from skyoptics.rendering import expose, film
from skyoptics.rendering.build import build
from skyoptics.rendering.run import Settings, render
from skyoptics.rendering.scatter import silent
from skyoptics.scene.load import from_text
from skyoptics.units import DEG

INDEX = 1.31


def scene(elevation, air, camera, picture="wavelengths_nm = [550]\nbackground = 0.0", light="disc = 'point'"):
    return from_text(
        f"[light]\nelevation_deg = {elevation}\n{light}\n[[air]]\nkind = 'crystals'\nindex = {INDEX}\n{air}\n"
        f"[camera]\n{camera}\n[picture]\n{picture}\n"
    )


def window(azimuth, elevation, width=6.0, height=6.0, step=0.05):
    """A small panorama around a direction [degrees], so that pixels are no wider than `step`."""
    return (
        f"lens = 'panorama'\nwidth_deg = {width}\nheight_deg = {height}\n"
        f"width_px = {round(width / step)}\nheight_px = {round(height / step)}\n"
        f"aim = {{ azimuth_deg = {azimuth}, elevation_deg = {elevation} }}"
    )


def brightest(described, rays=4_000_000):
    result = render(described, "test", Settings(seed=3, rays=rays))
    light = result.xyz[..., 1]
    row, column = np.unravel_index(np.nanargmax(light), light.shape)
    azimuth, elevation = azimuth_elevation(result.job.directions.vectors()[row, column])
    return azimuth / DEG, elevation / DEG, float(light[row, column])


# Bravais (1847): azimuth offset 2 asin(n'/2) − 60°, n' = √(n² − sin² h)/cos h, at n = 1.31.
@pytest.mark.parametrize(("height", "offset"), [(10, 22.483), (20, 24.576), (40, 36.324), (55, 66.039)])
def test_sundogs_stand_at_bravais_azimuths(height, offset):
    air = "orientation = 'plate'\ntilt_deg = 0\naspect = 0.3"
    azimuth, elevation, light = brightest(scene(height, air, window(180 + offset, height)))
    assert light > 0.0
    assert azimuth - 180.0 == pytest.approx(offset, abs=0.1)
    assert elevation == pytest.approx(height, abs=0.1)


# sin e = √(n² − cos² h) (derived from Snell's law at the two horizontal-vertical faces), n = 1.31.
@pytest.mark.parametrize(("height", "altitude"), [(5, 58.288), (15, 62.242), (25, 71.065)])
def test_circumzenithal_arc_stands_at_its_altitude(height, altitude):
    air = "orientation = 'plate'\ntilt_deg = 0\naspect = 0.3"
    _, elevation, _ = brightest(scene(height, air, window(180, altitude, width=12.0)))
    assert elevation == pytest.approx(altitude, abs=0.1)


def test_no_circumzenithal_arc_at_35_degrees():
    air = "orientation = 'plate'\ntilt_deg = 0\naspect = 0.3"
    _, _, above = brightest(scene(35, air, window(180, 80.0, width=40.0, height=20.0, step=0.2)))
    _, _, there = brightest(scene(25, air, window(180, 71.0, width=40.0, height=20.0, step=0.2)))
    assert above < 1e-3 * there


def test_parhelic_circle_and_120_degree_parhelia():
    air = "orientation = 'plate'\ntilt_deg = 0\naspect = 0.5"
    _, elevation, _ = brightest(scene(30, air, window(260, 30)))
    assert elevation == pytest.approx(30.0, abs=0.05)
    for side in (-120, 120):
        azimuth, elevation, _ = brightest(scene(30, air, window(180 + side, 30)))
        assert azimuth == pytest.approx((180 + side) % 360, abs=0.05)
        assert elevation == pytest.approx(30.0, abs=0.05)


def light_around_the_sun(height, farthest):
    """Columns: brightest 0.7° wide ring between 21.5° and `farthest` from the sun, in 18 sectors of position angle."""
    camera = "lens = 'equidistant'\nfocal_mm = 22\nsensor_mm = [36, 36]\nwidth_px = 400\naim = 'sun'"
    air = "orientation = 'column'\ntilt_deg = 0\naspect = 3\nplace = 'curtain'\nbelow_horizon = true"
    result = render(scene(height, air, camera), "test", Settings(seed=3, rays=8_000_000))
    view, sun = result.job.directions.vectors(), result.job.sources[0].direction
    up, right = around(sun, 90 * DEG, 0.0), around(sun, 90 * DEG, 90 * DEG)
    sector = (np.mod(np.arctan2(view @ right, view @ up) / DEG, 360.0) // 10).astype(int)
    ring = ((angle_between(view, sun) / DEG - 21.5) / 0.7).astype(int)
    rings = int((farthest - 21.5) / 0.7)
    near = (angle_between(view, sun) > 21.5 * DEG) & (ring < rings)
    cell = sector[near] * rings + ring[near]
    mean = np.bincount(cell, result.xyz[..., 1][near], 36 * rings) / np.bincount(cell, minlength=36 * rings)
    light = mean.reshape(36, rings).max(axis=1)
    return light / light.max()


def test_columns_close_to_a_circumscribed_halo_only_above_29_degrees():
    """All position angles have 60° light when the sun is above 29.25° (n = 1.31); at 20° the sides stay empty.

    At 35° the circumscribed halo hangs out to 36° at the sides; at 20° other arcs come near from 33° on.
    """
    assert light_around_the_sun(35, 38.0).min() > 0.015
    low = light_around_the_sun(20, 32.0)
    assert max(low[11:15].max(), low[21:25].max()) < 0.01
    assert low[0] > 0.3


def test_left_and_right_are_alike():
    """z-test over pixels of left minus right, about the solar vertical (the sun itself stands between two pixels)."""
    camera = "lens = 'equidistant'\nfocal_mm = 14\nsensor_mm = [36, 36]\nwidth_px = 120\naim = 'sun'"
    described = scene(25, "orientation = 'column'\ntilt_deg = 2\naspect = 1.5", camera)
    job = build(described, "test")
    work = expose.begin(job.sheets[0], job, 17)
    for _ in work.trace(48, None, silent, lambda: None):
        pass
    light, variance = work.film.statistics()
    error = np.sqrt(variance)
    spread = np.hypot(error, error[:, ::-1])
    off_sun = angle_between(job.directions.vectors(), job.sources[0].direction) > 1.5 * DEG
    chosen = off_sun & (light + light[:, ::-1] > 10 * spread)
    z = (light - light[:, ::-1])[chosen] / spread[chosen]
    assert len(z) > 1000
    assert 0.8 < np.sqrt(np.mean(z**2)) < 1.25
    halves = [np.where(off_sun, light, 0.0)[:, side].sum() for side in (slice(0, 60), slice(60, 120))]
    assert halves[0] == pytest.approx(halves[1], rel=5 * np.sqrt(variance[off_sun].sum()) / halves[0])


def honesty(seeds, rounds):
    """rms scatter over seeds ÷ rms stated error, over pixels with more than 100 hits."""
    camera = "lens = 'equidistant'\nfocal_mm = 14\nsensor_mm = [36, 36]\nwidth_px = 60\naim = 'sun'"
    described = scene(
        20, "orientation = 'plate'\ntilt_deg = 3\naspect = 0.5", camera, picture="wavelengths_nm = [500, 600]"
    )
    job = build(described, "test")
    pictures, variances = [], []
    for seed in range(seeds):
        work = expose.begin(job.sheets[0], job, 1000 + seed)
        for _ in work.trace(rounds, None, silent, lambda: None):
            pass
        light, variance = work.film.statistics()
        pictures.append(light)
        variances.append(variance)
        rays = work.film.traced_rays
    mean = np.mean(pictures, axis=0)
    unit = work.film.reference.mean() / (2 * rays / 2)  # luminance that one average hit of one ray adds to its bin
    chosen = mean > 100 * unit
    assert chosen.sum() > 100
    scatter = np.var(pictures, axis=0, ddof=1)[chosen]
    return float(np.sqrt(scatter.mean() / np.mean(variances, axis=0)[chosen].mean()))


def test_the_error_map_is_honest():
    assert 0.8 < honesty(8, 6) < 1.25


@pytest.mark.slow
def test_the_error_map_is_honest_over_30_seeds():
    assert 0.9 < honesty(30, 16) < 1.1


SMALL = "focal_mm = 14\nwidth_px = 120\naim = 'sun'"
PLATES = "orientation = 'plate'\naspect = 0.4"
THREE = "wavelengths_nm = [450, 550, 650]\nbackground = 0.02"


def forget(store):
    for path in store.with_name("films").glob("*.npz"):
        path.unlink()


def test_same_bits_for_threads_processes_and_resumed_runs(store):
    described = scene(20, PLATES, SMALL, picture=THREE)
    base = Settings(seed=5, threads=1, rays=200_000)
    pictures = []
    for settings in (base, replace(base, threads=2), replace(base, processes=2)):
        forget(store)
        pictures.append(render(described, "test", settings).xyz)
    forget(store)

    class Stop(Exception):
        pass

    def stop(stage, done, total):
        if stage.startswith("tracing") and done == 4:
            raise Stop

    with pytest.raises(Stop):
        render(described, "test", base, progress=stop)
    resumed = render(described, "test", base)
    assert 0 < resumed.report["sheets"][0]["stored_rays"] < resumed.report["sheets"][0]["rays"]
    pictures.append(resumed.xyz)
    for other in pictures[1:]:
        assert np.array_equal(pictures[0], other)


def test_changes_that_need_no_new_trace_add_no_rays(store):
    forget(store)
    settings = Settings(seed=6, threads=2, rays=300_000)
    first = render(scene(20, PLATES, SMALL, picture=THREE), "test", settings)
    assert first.report["traced_rays"] >= 300_000
    changes = [
        scene(20, PLATES + "\noptical_depth = 0.3", SMALL, picture=THREE),
        scene(20, PLATES, SMALL, picture=THREE + "\nexposure_ev = 12\nwhite = 'light'"),
        scene(20, PLATES, SMALL, picture=THREE.replace("0.02", "0.05"), light="disc = 'point'\naerosol_depth = 0.3"),
    ]
    for described in changes:
        again = render(described, "test", settings)
        assert again.report["traced_rays"] == 0
        assert again.report["sheets"][0]["reused"]
    moved = render(scene(21, PLATES, SMALL, picture=THREE), "test", settings)
    assert moved.report["traced_rays"] > 0


def test_quality_reaches_its_target_and_only_adds_what_is_missed(store):
    forget(store)
    described = scene(20, PLATES + "\ntilt_deg = 2", SMALL, picture=THREE)
    draft = render(described, "test", Settings("draft", 7, 2))
    assert draft.report["lightness_error"] <= 0.02
    normal = render(described, "test", Settings("normal", 7, 2))
    assert normal.report["lightness_error"] <= 0.01
    assert normal.report["sheets"][0]["stored_rays"] >= draft.report["sheets"][0]["rays"]
    brighter = render(
        scene(20, PLATES + "\ntilt_deg = 2", SMALL, picture=THREE.replace("0.02", "0.2")),
        "test",
        Settings("normal", 7, 2),
    )
    assert brighter.report["traced_rays"] == 0
    assert draft.noise.shape == (80, 120)


def test_sheets_add_up():
    both = from_text(
        "[light]\nelevation_deg = 20\n[[air]]\nkind = 'crystals'\norientation = 'plate'\naspect = 0.4\n"
        "[[air]]\nkind = 'drops'\noptical_depth = 0.05\n[[air]]\nkind = 'crystals'\noptical_depth = 0.2\n"
        f"[camera]\n{SMALL}\n[picture]\n{THREE.replace('0.02', '0.0')}\n"
    )
    settings = Settings("draft", 5, 2, rays=200_000)
    whole = render(both, "test", settings).xyz
    parts = [render(both.model_copy(update={"air": (sheet,)}), "test", settings).xyz for sheet in both.air]
    assert whole == pytest.approx(sum(parts), rel=1e-5, abs=1e-3)


def test_broken_and_foreign_checkpoints_are_set_aside_in_words(store, capsys):
    forget(store)
    described = scene(20, PLATES, SMALL, picture=THREE)
    settings = Settings(seed=5, threads=1, rays=100_000)
    first = render(described, "test", settings)
    (path,) = store.with_name("films").glob("*.npz")
    path.write_bytes(path.read_bytes()[:5000])
    again = render(described, "test", settings)
    assert "set aside" in capsys.readouterr().err
    assert again.report["traced_rays"] == first.report["traced_rays"]
    assert np.array_equal(first.xyz, again.xyz)


def test_a_longer_film_is_not_replaced_by_a_shorter_one(store):
    forget(store)
    job = build(scene(20, PLATES, SMALL, picture=THREE), "test")
    long, short = (expose.begin(job.sheets[0], job, 5) for _ in range(2))
    for work, rounds in ((long, 3), (short, 1)):
        for _ in work.trace(rounds, None, silent, lambda: None):
            pass
        assert film.keep(work.film)
    assert expose.begin(job.sheets[0], job, 5).film.rounds == 3


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ("air.1.aspect=0", "between 0.01 and 100"),
        ("air.1.tilt_deg=-3", "between 0 and 90"),
        ("air.1.optical_depth=1e9", "between 0 and 50"),
        ("air.1.orientation=plat", "did you mean plate"),
    ],
)
def test_bad_crystals_in_words(command, tiny, change, said):
    tiny.write_text(tiny.read_text().replace('kind = "drops"', 'kind = "crystals"'))
    done = command("render", tiny, "--set", change)
    assert done.code == 1
    assert said in done.err


def test_preview_and_noise_map(command, tiny, tmp_path, monkeypatch, store):
    forget(store)
    from skyoptics.rendering.output import Wanted

    seen = []
    before = Wanted.preview

    def preview(self, developed):
        before(self, developed)
        seen.append(self.preview_path.exists())

    monkeypatch.setattr(Wanted, "preview", preview)
    tiny.write_text(
        tiny.read_text()
        .replace('kind = "drops"', 'kind = "crystals"\norientation = "plate"')
        .replace("focal_mm = 20", "aim = 'sun'")
    )
    done = command("render", tiny, "--quality", "draft", "--noise-map", "--json")
    assert done.code == 0
    assert seen == [True]
    assert sorted(p.name for p in (tmp_path / "outputs/tiny").iterdir()) == [
        "tiny.caption.txt",
        "tiny.json",
        "tiny.noise.png",
        "tiny.png",
    ]
    assert json.loads(done.out)["lightness_error"] > 0


def test_two_sheets_of_the_same_crystals_are_one_twice_as_thick():
    """Each sheet has rays of its own: the light adds up, and the noise is that of twice the rays."""
    sheet = "[[air]]\nkind = 'crystals'\norientation = 'plate'\naspect = 0.4\ntilt_deg = 2\noptical_depth = {}\n"
    rest = f"[camera]\n{SMALL}\n[picture]\n{THREE.replace('0.02', '0.0')}\n"
    light = "[light]\nelevation_deg = 20\n"
    settings = Settings("draft", 5, 2, rays=400_000)
    two = render(from_text(light + 2 * sheet.format(0.1) + rest), "test", settings)
    one = render(from_text(light + sheet.format(0.2) + rest), "test", settings)
    assert not np.array_equal(two.xyz, one.xyz)
    assert np.nansum(two.xyz) == pytest.approx(np.nansum(one.xyz), rel=0.02)
    assert two.report["lightness_error"] == pytest.approx(one.report["lightness_error"] / np.sqrt(2), rel=0.2)


@pytest.mark.parametrize("wavelengths", ["[1000]", "[350, 850]"])
def test_wavelengths_that_no_eye_sees(wavelengths):
    described = scene(20, PLATES, SMALL, picture=f"wavelengths_nm = {wavelengths}\nbackground = 0.0")
    result = render(described, "test", Settings("draft", 5, 2, rays=50_000))
    assert result.report["traced_rays"] >= 50_000
    assert np.isfinite(result.xyz).all()
