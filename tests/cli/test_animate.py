"""``skyoptics animate`` and ``render --vary`` as a user meets them."""

import json

import av
import numpy as np
import pytest
from PIL import Image

SHORT = ("--seconds", "0.4", "--fps", "10", "--quality", "draft", "--threads", "2")


def frames_of(path):
    with av.open(str(path)) as container:
        about = dict(container.metadata)
        return [frame.to_ndarray(format="rgb24") for frame in container.decode(video=0)], about


def test_a_film(command, tiny, tmp_path):
    done = command("animate", tiny, "--vary", "light.elevation_deg=5:30", "--out", "bow.mp4", *SHORT)
    assert done.code == 0
    assert done.out == "bow.mp4: 4 frames, height of the sun 5° to 30°\n"
    found, about = frames_of("bow.mp4")
    assert len(found) == 4
    assert found[0].shape == (40, 60, 3)
    assert about["title"] == "Tiny"
    assert about["description"] == "height of the sun 5° to 30°"
    assert "--vary light.elevation_deg=5:30 --seconds 0.4 --fps 10" in about["comment"]
    assert str(tmp_path) not in about["comment"]
    assert not (tmp_path / "bow.mp4.frames").exists()


def test_frames_are_kept_by_choice_and_taken_up(command, tiny, tmp_path):
    words = ("animate", tiny, "--vary", "light.elevation_deg=5:30", "--out", "bow.mp4", "--keep-frames", *SHORT)
    first = command(*words, "--json")
    report = json.loads(first.out)
    assert (report["frames"], report["frames_taken_up"], report["frames_kept_in"]) == (4, 0, "bow.mp4.frames")
    folder = tmp_path / "bow.mp4.frames"
    assert sorted(path.name for path in folder.iterdir()) == [
        *(f"frame-0000{k}.png" for k in (1, 2, 3, 4)),
        "manifest.json",
    ]
    with Image.open(folder / "frame-00002.png") as picture:
        assert picture.text["Title"] == "Tiny"
    film = (tmp_path / "bow.mp4").read_bytes()
    (folder / "frame-00003.png").unlink()  # as after a stop
    assert command(*words).code == 1  # the film is there
    again = command(*words, "--force")
    assert again.err.startswith("3 of 4 frames are there already")
    assert (tmp_path / "bow.mp4").read_bytes() == film
    tiny.write_text(tiny.read_text().replace("optical_depth = 0.1", "optical_depth = 0.5"))
    changed = command(*words, "--force")
    assert "held 4 frames of another film" in changed.err
    assert (tmp_path / "bow.mp4").read_bytes() != film


def test_a_gif_of_a_list_rests_on_its_values(command, tiny):
    done = command(
        "animate", tiny, "--vary", "air.1.optical_depth=0.05,0.5", "--out", "two.gif", *SHORT, "--exposure", "shared"
    )
    assert done.code == 0
    with Image.open("two.gif") as film:
        shown = []
        for number in range(film.n_frames):
            film.seek(number)
            shown += [np.asarray(film.convert("RGB"))] * round(film.info["duration"] / 100)
    assert len(shown) == 4
    assert np.array_equal(shown[0], shown[1])
    assert np.array_equal(shown[2], shown[3])
    assert shown[3].mean() > shown[0].mean()


@pytest.mark.parametrize(
    ("words", "code", "told"),
    [
        (("--vary", "light.elevation_deg=0:40", "--out", "x.avi"), 1, ".mp4 or .gif"),
        (("--vary", "light.elevation_deg=0:40", "--out", "x.mp4", "--seconds", "0"), 1, "0 frames"),
        (("--vary", "light.elevation_deg=0:40", "--out", "x.mp4", "--seconds", "-1"), 2, "--seconds"),
        (("--vary", "light.elevation_deg=0:40", "--out", "x.mp4", "--fps", "1000"), 2, "--fps"),
        (("--vary", "light.elevation_deg=0:40", "--out", "x.mp4", "--exposure", "shred"), 2, "did you mean shared?"),
        (("--vary", "light.elevatin_deg=0:40", "--out", "x.mp4"), 1, "did you mean elevation_deg?"),
        (("--vary", "light.elevation_deg=0:95", "--out", "x.mp4"), 1, "between -1 and 90 degrees"),
        (("--vary", "light.elevation_deg=0:40", "--out", "no/x.mp4"), 1, "there is no folder no"),
        (("--vary", "light.elevation_deg=1,2,3", "--out", "x.mp4", "--seconds", "0.05"), 2, "do not fit into 1 frames"),
        (("--out", "x.mp4"), 2, "--vary"),
        (("--vary", "light.elevation_deg=0:40"), 2, "--out"),
    ],
)
def test_wrong_input(command, tiny, tmp_path, words, code, told):
    done = command("animate", tiny, *words)
    assert done.code == code
    assert told in done.err
    assert done.out == ""
    assert [path.name for path in tmp_path.iterdir()] == ["tiny.toml"]


def test_a_sheet(command, tiny, tmp_path):
    done = command("render", tiny, "--vary", "air.1.radius_um=50,1000", "--sheet", "--quality", "draft", "--lang", "de")
    assert done.code == 0
    assert done.out.startswith("outputs/tiny/tiny.sheet.png: 2 panels of 60 x 40 pixels: Tropfenradius 50 µm; ")
    with Image.open("outputs/tiny/tiny.sheet.png") as picture:
        assert "--vary air.1.radius_um=50,1000 --sheet --lang de" in picture.text["Command"]
    names = sorted(path.name for path in (tmp_path / "outputs/tiny").iterdir())
    assert names == ["tiny.sheet.caption.txt", "tiny.sheet.json", "tiny.sheet.png"]


def test_pictures_one_by_one(command, tiny):
    done = command("render", tiny, "--vary", "light.elevation_deg=10,20", "--quality", "draft", "--out", "p", "--json")
    assert done.code == 0
    reports = json.loads(done.out)
    assert len(reports) == 2
    with Image.open("p/tiny-10.png") as one, Image.open("p/tiny-20.png") as other:
        assert "--set light.elevation_deg=10" in one.text["Command"]
        assert not np.array_equal(np.asarray(one), np.asarray(other))
    assert command("render", tiny, "--set", "light.elevation_deg=10", "--quality", "draft", "--out", "q").code == 0
    with Image.open("p/tiny-10.png") as one, Image.open("q/tiny.png") as other:
        assert np.array_equal(np.asarray(one), np.asarray(other))


@pytest.mark.parametrize(
    ("words", "code", "told"),
    [
        (("--sheet",), 2, "--sheet needs --vary"),
        (("--vary", "light.elevation_deg=5", "--sheet"), 2, "two values at least"),
        (("--vary", "light.elevation_deg=5:9", "--sheet"), 1, "as in light.elevation_deg=5:9:5"),
        (("--vary", "light.elevation_deg=5,9", "--sheet", "--data"), 2, "--data does not go with --vary --sheet"),
        (("--vary", "light.elevation_deg=5,9", "--only", "other"), 2, "--only does not go with --vary"),
        (("--vary", "light.elevation_deg=5,9", "--print", "a4"), 2, "--print does not go with --vary"),
        (("--vary", "air.1.radius_um=0,9", "--sheet"), 1, "between 1 and 10000"),
    ],
)
def test_wrong_input_of_sheets(command, tiny, words, code, told):
    done = command("render", tiny, *words)
    assert (done.code, done.out) == (code, "")
    assert told in done.err
