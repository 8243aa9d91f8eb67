"""Frames of films: the same as still pictures, alike where nothing changes, quiet where little does, resumable."""

import json
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace

import numpy as np
import pytest

from skyoptics.colour.display import automatic_exposure
from skyoptics.errors import DomainError, ResourceError, SceneError
from skyoptics.rendering import frames
from skyoptics.rendering.frames import check, frame_count, shoot
from skyoptics.rendering.output import Wanted, write
from skyoptics.rendering.reel import MANIFEST, Film, Reel
from skyoptics.rendering.run import Settings, render
from skyoptics.rendering.shots import Studio, developed
from skyoptics.rendering.skies import shelf_for
from skyoptics.rendering.vary import read, steps
from skyoptics.scene.load import from_text

PLATES = """
title = "Plates"
[light]
elevation_deg = 20
[[air]]
kind = "crystals"
aspect = 0.25
orientation = "plate"
tilt_deg = 1.0
optical_depth = 0.2
[camera]
lens = "stereographic"
focal_mm = 13
sensor_mm = [36, 24]
width_px = 60
height_px = 40
aim = { azimuth_deg = 180, elevation_deg = 30 }
[picture]
wavelengths_nm = [450, 550, 620]
"""
DRAFT = Settings("draft", 1, 2)
NARROW = "picture.wavelengths_nm=[548, 550, 552]"
"""So few knots that a sky is solved quickly."""


def film_of(path, words, count, exposure="shared", settings=DRAFT, overrides=()):
    found = steps(path, overrides, read(words), count)
    return Film(tuple(step.scene for step in found), str(path), settings, exposure)


def shot(folder, film):
    reel = Reel(folder, film, {"Title": "t"})
    reel.open()
    return reel, list(shoot(reel))


@pytest.mark.parametrize(
    "more",
    [
        (),
        ("picture.sky=clear", "light.elevation_deg=16", NARROW),
        ("air.1.place=layer", "light.mirrored=true"),
        ("camera.polariser_deg=20",),
        ("light.disc=point",),
    ],
)
def test_a_frame_is_the_still_picture(tiny, more):
    """Colour in tables, held grids and shared tables change nothing: the same XYZ as of a render, to rounding."""
    (step,) = steps(tiny, more, read("air.1.optical_depth=0.2"))
    still = render(step.scene, "x", DRAFT)
    studio = Studio(DRAFT)
    with ThreadPoolExecutor(1) as pool:
        studio.look(step.scene, "x", pool)
        again = studio.look(step.scene, "x", pool)  # from what the first one left
    np.testing.assert_allclose(again.xyz, still.xyz, rtol=2e-6, atol=1e-9 * np.nanmax(still.xyz))


@pytest.mark.parametrize("more", [(), ("air.1.place=shaft",), ("picture.glare=eye", "camera.aim=sun")])
def test_a_frame_under_a_shelf_of_skies_is_the_still_picture(tiny, more):
    """Where the shelf serves and where it cannot: a frame with its own sky has the XYZ of a render."""
    (step,) = steps(tiny, ("picture.sky=clear", NARROW, *more), read("light.elevation_deg=25"))
    still = render(step.scene, "x", DRAFT)
    studio = Studio(DRAFT, shelf=shelf_for([step.scene]))
    with ThreadPoolExecutor(1) as pool:
        shot_ = studio.look(step.scene, "x", pool)
    np.testing.assert_allclose(shot_.xyz, still.xyz, rtol=2e-6, atol=1e-9 * np.nanmax(still.xyz))
    assert bool(studio.shelf._kept) == (not more or "picture.glare=eye" in more)


def test_a_stored_frame_is_the_stored_picture(tiny, tmp_path):
    """Bit by bit what `render` writes, exposure given: dithering included."""
    film = film_of(tiny, "light.elevation_deg=12,20", None, overrides=("picture.exposure_ev=13",))
    reel, _ = shot(tmp_path / "f.frames", film)
    result = render(film.scenes[1], "tiny", DRAFT)
    picture = write(result, film.scenes[1], Wanted(tmp_path, "still"), ("x",))[0]
    from PIL import Image

    with Image.open(picture) as stored:
        assert np.array_equal(np.asarray(stored), reel.get(1))


def test_frames_of_a_static_scene_are_identical_as_stored(tmp_path):
    scene = from_text(PLATES)
    film = Film((scene,) * 3, "x", Settings("draft", 1, 2, rays=20000))
    reel, pictures = shot(tmp_path / "s.frames", film)
    assert len(pictures) == 3
    for number in (1, 2):
        assert np.array_equal(reel.get(number), reel.get(0))
        assert np.array_equal(pictures[number], reel.get(0))
    assert reel.get(0).std() > 3.0  # and there is something in them


def noise_ratio(change, seeds, settings, width=60):
    """Return noise of the difference of two neighbouring frames: shared random numbers ÷ independent seeds.

    The noise is the scatter over seeds of the difference of lightness (cube root of luminance), the true change taken out.
    """
    more = (f"camera.width_px={width}", f"camera.height_px={width * 2 // 3}")
    scenes = [from_text(PLATES, overrides=more), from_text(PLATES, overrides=(*more, change))]
    studio = Studio(settings)
    with ThreadPoolExecutor(2) as pool:
        studio.look(scenes[0], "x", pool)
        assert studio.rounds
        light = [
            [
                np.cbrt(Studio(replace(settings, seed=seed), list(studio.rounds)).look(one, "x", pool).xyz[..., 1])
                for one in scenes
            ]
            for seed in range(seeds)
        ]
    before, after = np.array([pair[0] for pair in light]), np.array([pair[1] for pair in light])
    shared, independent = before - after, before - np.roll(after, 1, axis=0)
    scatter = [float(np.sqrt(np.mean(found.var(axis=0, ddof=1)))) for found in (shared, independent)]
    assert scatter[1] > 0.0
    return scatter[0] / scatter[1]


@pytest.mark.parametrize("change", ["light.elevation_deg=20.1", "air.1.tilt_deg=1.04"])
def test_neighbours_share_their_noise(change):
    assert noise_ratio(change, 4, Settings("draft", 1, 2, rays=60000)) < 0.5


@pytest.mark.slow
@pytest.mark.parametrize(
    "change", ["light.elevation_deg=20.08", "air.1.tilt_deg=1.04", "air.1.aspect=0.26", "air.1.optical_depth=0.21"]
)
def test_neighbours_share_their_noise_at_draft(change):
    assert noise_ratio(change, 6, Settings("draft", 1, 2), 120) < 0.5


def test_what_changes_no_ray_is_not_traced_again(tmp_path, monkeypatch):
    from skyoptics.rendering import expose

    traced = []
    batch = expose._batch
    monkeypatch.setattr(expose, "_batch", lambda *given: traced.append(1) or batch(*given))
    one = from_text(PLATES)
    other = from_text(PLATES, overrides=("air.1.optical_depth=0.3",))
    settings = Settings("draft", 1, 1, rays=20000)
    studio = Studio(settings)
    with ThreadPoolExecutor(1) as pool:
        first = studio.look(one, "x", pool)
        count = len(traced)
        second = studio.look(other, "x", pool)
    assert count > 0
    assert len(traced) == count
    assert second.xyz[..., 1].max() > 1.2 * first.xyz[..., 1].max()


def test_frames_do_not_depend_on_threads_or_on_a_stop(tiny, tmp_path):
    words = "light.elevation_deg=5:30"
    _, one = shot(tmp_path / "a.frames", film_of(tiny, words, 7, settings=replace(DRAFT, threads=1)))
    _, four = shot(tmp_path / "b.frames", film_of(tiny, words, 7, settings=replace(DRAFT, threads=4)))
    assert len(one) == 7
    assert all(np.array_equal(a, b) for a, b in zip(one, four, strict=True))
    reel = Reel(tmp_path / "c.frames", film_of(tiny, words, 7))
    reel.open()
    stopped = shoot(reel)
    next(stopped), next(stopped)
    stopped.close()
    times = {number: reel.path(number).stat().st_mtime_ns for number in (0, 1)}
    reel.path(1).write_bytes(reel.path(1).read_bytes()[:200])  # broken: made anew
    reel.path(6).unlink(missing_ok=True)
    again, rest = shot(tmp_path / "c.frames", film_of(tiny, words, 7))
    assert all(np.array_equal(a, b) for a, b in zip(one, rest, strict=True))
    assert again.path(0).stat().st_mtime_ns == times[0]
    assert again.dropped == 0


def test_another_film_in_the_folder_is_dropped(tiny, tmp_path):
    shot(tmp_path / "a.frames", film_of(tiny, "light.elevation_deg=5:30", 4))
    reel = Reel(tmp_path / "a.frames", film_of(tiny, "light.elevation_deg=5:31", 3))
    reel.open()
    assert reel.dropped == 4
    assert not list((tmp_path / "a.frames").glob("frame-*"))
    assert reel.film.key != film_of(tiny, "light.elevation_deg=5:30", 4).key
    for change in ({"quality": "normal"}, {"seed": 2}, {"rays": 9}):
        assert film_of(tiny, "light.elevation_deg=5:31", 3, settings=replace(DRAFT, **change)).key != reel.film.key
    assert film_of(tiny, "light.elevation_deg=5:31", 3, settings=replace(DRAFT, threads=7)).key == reel.film.key


def test_a_folder_of_someone_else_is_left_alone(tiny, tmp_path):
    folder = tmp_path / "a.frames"
    folder.mkdir()
    (folder / "holiday.txt").write_text("mine")
    with pytest.raises(ResourceError, match="holds no frames of a film"):
        Reel(folder, film_of(tiny, "light.elevation_deg=5:30", 4)).open()
    assert (folder / "holiday.txt").read_text() == "mine"


def test_removing_takes_only_what_is_ours(tiny, tmp_path):
    reel, _ = shot(tmp_path / "a.frames", film_of(tiny, "light.elevation_deg=5:30", 2))
    assert json.loads((reel.folder / MANIFEST).read_text())["frames"] == 2
    (reel.folder / "note.txt").write_text("mine")
    reel.remove()
    assert [path.name for path in reel.folder.iterdir()] == ["note.txt"]


def exposures(reel):
    return reel.measured["exposures"]


def test_exposures(tiny, tmp_path):
    words = "light.elevation_deg=1:30"
    shared, _ = shot(tmp_path / "a.frames", film_of(tiny, words, 4, "shared"))
    assert len(set(exposures(shared))) == 1
    each, _ = shot(tmp_path / "b.frames", film_of(tiny, words, 4, "each"))
    assert exposures(each) == [None] * 4
    own = [automatic_exposure(render(scene, "x", DRAFT).xyz[..., 1]) for scene in each.film.scenes]
    assert min(own) < exposures(shared)[0] <= max(own)
    smooth, _ = shot(tmp_path / "c.frames", film_of(tiny, words, 4, "smooth"))
    assert exposures(smooth) == pytest.approx(own, abs=1e-9)  # four frames are all among the nine that are metered
    fixed, _ = shot(tmp_path / "d.frames", film_of(tiny, "picture.exposure_ev=10:14", 3, "shared"))
    assert exposures(fixed) == [10.0, 12.0, 14.0]


def test_a_static_film_is_exposed_like_its_still(tiny, tmp_path):
    film = film_of(tiny, "light.elevation_deg=20:20.0", 3)
    reel, pictures = shot(tmp_path / "a.frames", film)
    still = render(film.scenes[0], "x", DRAFT).developed
    assert exposures(reel) == [still.exposure_ev] * 3
    assert np.array_equal(pictures[2], pictures[0])


@pytest.mark.parametrize("white", ["auto", "light"])
def test_white_is_one_where_it_is_found_in_the_picture(tiny, tmp_path, white):
    film = film_of(tiny, "light.elevation_deg=4:20", 3, overrides=(f"picture.white={white}",))
    reel, _ = shot(tmp_path / "a.frames", film)
    assert (reel.measured["white"] is not None) == (white == "auto")


def test_developed_is_dithered_like_every_picture():
    xyz = np.full((40, 50, 3), 1000.0, dtype=np.float32)
    shown = developed(xyz, 13.0, None)
    assert shown.dtype == np.uint8
    assert len(np.unique(shown[..., 1])) <= 2


@pytest.mark.parametrize(("seconds", "fps", "count"), [(5, 25, 125), (0.04, 25, 1), (1, 0.6, 1), (2, 29.97, 60)])
def test_count_of_frames(seconds, fps, count):
    assert frame_count(seconds, fps) == count


def test_no_and_too_many_frames():
    with pytest.raises(DomainError, match="0 frames"):
        frame_count(0.0, 25)
    with pytest.raises(DomainError, match=str(frames.MOST_FRAMES)):
        frame_count(3600, 120)


def test_faults_come_before_the_work(tiny, tmp_path):
    with pytest.raises(SceneError, match="60 x 40 and 61 x 40"):
        check(film_of(tiny, "camera.width_px=60:62", 3))
    clock = tmp_path / "clock.toml"
    place = 'latitude_deg = 47\nlongitude_deg = 8\ntime = "2027-05-12T18:00+02:00"'
    clock.write_text(tiny.read_text().replace("elevation_deg = 20", place))
    with pytest.raises(SceneError, match=r"frame \d: .*it rises at 2027-05-13"):
        check(film_of(clock, "light.time=2027-05-12T18:00+02:00/2027-05-12T23:00+02:00", 6))
    check(film_of(clock, "light.time=2027-05-12T18:00+02:00/2027-05-12T20:00+02:00", 6))
