"""``skyoptics page``: one file, and what is said of input that does not do."""

import json
import re

import pytest


def test_a_page(command, tiny):
    done = command(
        "page", tiny, "--vary", "light.elevation_deg=5,25", "--out", "bow.html", "--quality", "draft", "--json"
    )
    assert done.code == 0, done.err
    report = json.loads(done.out)
    assert [one["value"] for one in report["pictures"]] == ["5", "25"]
    assert len({one["exposure_ev"] for one in report["pictures"]}) == 1
    with open("bow.html", encoding="utf-8") as file:
        text = file.read()
    assert report["bytes"] == len(text.encode())
    assert text.count("<figure ") == 2
    assert "Height of the sun: 25°" in text
    assert str(tiny.parent) not in text


def test_each_exposure_another_language_and_the_name_of_the_scene(command, tiny):
    words = ("--vary", "air.1.optical_depth=0.1,0.3", "--exposure", "each", "--lang", "de", "--quality", "draft")
    done = command("page", tiny, *words)
    assert done.code == 0, done.err
    assert done.out.startswith("tiny.html: ")
    with open("tiny.html", encoding="utf-8") as file:
        text = file.read()
    assert re.search(r"Optische Dicke: 0,1.*Optische Dicke: 0,3", text, re.DOTALL)
    assert "Jedes Bild ist für sich belichtet" in text
    assert "--exposure each --lang de" in text


@pytest.mark.parametrize(
    ("words", "code", "said"),
    [
        (["--lang", "it"], 2, "en, de, es, fr"),
        (["--exposure", "shard"], 2, "did you mean shared"),
        (["--vary", "light.elevation_deg"], 1, "KEY=VALUES"),
        (["--vary", "light.elevation_degs=5,10"], 1, "did you mean elevation_deg"),
        (["--vary", "light.elevation_deg=5,95"], 1, "between -1 and 90"),
        (["--vary", "light.elevation_deg=5,5"], 1, "twice"),
        (["--vary", "light.elevation_deg=0:40"], 1, "how many values"),
        (["--vary", "light.elevation_deg=0:40:61"], 1, "at most 60"),
        (["--out", "bow.pdf"], 1, ".html file; got bow.pdf"),
        (
            [
                "--vary",
                "light.elevation_deg=0:40:50",
                "--set",
                "camera.width_px=6000",
                "--set",
                "camera.height_px=4000",
            ],
            1,
            "lower camera.width_px from 6000 to about",
        ),
    ],
)
def test_bad_input(command, tiny, words, code, said):
    done = command("page", tiny, *words)
    assert done.code == code
    assert said in done.err
    assert done.out == ""
    assert not list(tiny.parent.glob("*.html"))


def test_a_folder_that_is_none(command, tiny):
    tiny.with_name("file").write_text("x")
    done = command("page", tiny, "--out", tiny.parent / "file" / "bow.html")
    assert done.code == 1
    assert "choose another folder" in done.err
