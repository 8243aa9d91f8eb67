"""Comparison sheets: shared exposure and scale, captions, level horizons, legible letters; pictures as they came."""

import json

import numpy as np
import pytest
from PIL import Image

from skyoptics.colour.display import automatic_exposure
from skyoptics.errors import DomainError, SceneError
from skyoptics.figures import panels as layout
from skyoptics.figures.palette import FAINT, INK, contrast
from skyoptics.figures.panels import Panel, columns_of, compose
from skyoptics.rendering import panels
from skyoptics.rendering.run import Settings, render
from skyoptics.rendering.shots import developed
from skyoptics.rendering.vary import read, steps

DRAFT = Settings("draft", 1, 1)


def plain(level, rows=40, columns=60):
    return np.full((rows, columns, 3), level, dtype=np.uint8)


def places(sheet, level):
    """Return rows and columns of a sheet that hold a grey level."""
    found = np.argwhere((sheet == level).all(axis=-1))
    (top, left), (bottom, right) = found.min(axis=0), found.max(axis=0)
    return top, left, bottom, right, len(found)


@pytest.fixture(scope="module")
def bows(tmp_path_factory):
    path = tmp_path_factory.mktemp("scene") / "bow.toml"
    path.write_text(
        'title = "Bows"\nlook_for = "it"\n[light]\nelevation_deg = 20\n[[air]]\nkind = "drops"\n[camera]\nfocal_mm = 20\n'
        "width_px = 120\nheight_px = 80\n[picture]\nwavelengths_nm = [450, 550, 650]\n",
        encoding="utf-8",
    )
    return path


@pytest.fixture(scope="module")
def made(bows):
    vary = read("air.1.optical_depth=0.05,0.4,2")
    found = steps(bows, (), vary)
    return vary, found, panels.sheet(found, vary, str(bows), DRAFT)


def test_exposure_is_metered_over_all_panels(made):
    _, found, sheet = made
    results = [render(step.scene, "x", DRAFT) for step in found]
    together = automatic_exposure(np.concatenate([result.xyz[..., 1].ravel() for result in results]))
    assert sheet.exposures_ev == (together,) * 3
    assert len({result.developed.exposure_ev for result in results}) > 1  # each for itself would differ
    for result, report in zip(results, sheet.reports, strict=True):
        assert report["exposure_ev"] == together
        picture = developed(result.xyz, together, None)
        assert contains(sheet.rgb, picture)


def contains(sheet, picture):
    """Return whether a picture stands on a sheet pixel by pixel."""
    rows, columns = picture.shape[:2]
    for top in range(sheet.shape[0] - rows + 1):
        line = sheet[top]
        for left in range(sheet.shape[1] - columns + 1):
            if np.array_equal(line[left : left + columns], picture[0]):
                return np.array_equal(sheet[top : top + rows, left : left + columns], picture)
    return False


def test_a_scene_that_fixes_its_exposure_keeps_it(bows):
    vary = read("picture.exposure_ev=10,12")
    assert panels.sheet(steps(bows, (), vary), vary, "x", DRAFT).exposures_ev == (10.0, 12.0)


def test_captions_and_alt_texts(made):
    _, found, sheet = made
    assert sheet.captions == ("optical depth 0.05", "optical depth 0.4", "optical depth 2")
    assert len(sheet.reports) == len(found)
    assert all(report["alt_text"] for report in sheet.reports)


def test_files_tell_what_they_are(made, tmp_path):
    vary, found, sheet = made
    words = ["skyoptics", "render", "bow.toml", "--vary", vary.words, "--sheet"]
    paths = panels.write_sheet(sheet, found, vary, tmp_path, "bow", words)
    assert [path.name for path in paths] == ["bow.sheet.png", "bow.sheet.json", "bow.sheet.caption.txt"]
    with Image.open(paths[0]) as picture:
        assert np.array_equal(np.asarray(picture), sheet.rgb)
        assert picture.text["Title"] == "Bows"
        assert picture.text["Description"].startswith("Optical depth: 0.05, 0.4, 2. ")
        assert picture.text["Command"].endswith("--sheet")
    report = json.loads(paths[1].read_text(encoding="utf-8"))
    assert [panel["caption"] for panel in report["panels"]] == list(sheet.captions)
    assert str(tmp_path) not in paths[1].read_text(encoding="utf-8")
    assert "Optical depth 0.4." in paths[2].read_text(encoding="utf-8")


def test_large_pictures_are_rendered_smaller_for_a_sheet(bows):
    many = steps(bows, ("camera.width_px=3000", "camera.height_px=2000"), read("light.elevation_deg=5,10,15,20"))
    overrides, size = panels.small(many)
    assert size == (1200, 800)
    assert overrides == ("camera.width_px=1200", "camera.height_px=800")
    assert panels.small(steps(bows, (), read("light.elevation_deg=5,10"))) == ((), (120, 80))
    with pytest.raises(SceneError, match="100 x 80 and 120 x 80"):
        panels.small(steps(bows, (), read("camera.width_px=100,120")))


def test_too_many_panels(bows):
    with pytest.raises(DomainError, match=f"30 values; {panels.MOST_PANELS} pictures"):
        panels.count_allowed(steps(bows, (), read("light.elevation_deg=1:30:30")), "light.elevation_deg")


def test_names_of_files(bows):
    vary = read("air.1.radius_um=12.5,1000")
    assert [panels.file_name("bow", vary, step) for step in steps(bows, (), vary)] == ["bow-12.5", "bow-1000"]


@pytest.mark.parametrize(("count", "columns"), [(1, 1), (2, 1), (4, 2), (6, 2), (9, 3), (12, 3)])
def test_columns_follow_the_count(count, columns):
    """Panels of 3 : 2 on a sheet near 3 : 2; two stand one above the other or side by side."""
    found = columns_of(count, (800, 1200), 96.0)
    assert found in ({1, 2} if count == 2 else {columns, columns + 1})
    assert (count % found == 0) or count > 9
    assert columns_of(6, (400, 2400)) < columns_of(6, (2400, 400))  # panoramas stand above each other


def test_horizons_of_a_row_are_level():
    panels_ = [
        Panel(plain(10), "a", 30.0),
        Panel(plain(90), "b", 22.0),
        Panel(plain(160), "c", None),
        Panel(plain(210), "d", 20),
    ]
    sheet = compose(panels_)
    (a, *_), (b, *_) = places(sheet, 10), places(sheet, 90)
    assert a + 30 == b + 22
    assert [places(sheet, level)[4] for level in (10, 90, 160, 210)] == [2400] * 4


def test_horizons_far_apart_stay_where_they_are():
    sheet = compose(
        [Panel(plain(10), "a", 38.0), Panel(plain(90), "b", 2.0), Panel(plain(160), "c"), Panel(plain(210), "d")]
    )
    assert places(sheet, 10)[0] == places(sheet, 90)[0]


def test_letters_are_large_enough_and_dark_enough():
    """WCAG 2.2, 1.4.3: 4.5:1. Letters of 1/55 of the sheet's side are 18 mm on a wall a metre wide."""
    assert contrast(INK) > 4.5
    assert contrast(FAINT) > 4.5
    big = compose([Panel(plain(200, 400, 600), "Height")] * 4)
    small = compose([Panel(plain(200, 400, 600), "")] * 4)
    ink = (np.abs(big.astype(int) - small).sum(axis=-1) > 100).any(axis=1)
    runs = np.diff(np.flatnonzero(np.diff(np.concatenate([[0], ink.astype(int), [0]]))))[::2]
    assert runs.max() >= 0.9 * layout.LETTERS * 1200  # from the top of H to the tail of g


def test_long_words_stay_on_the_sheet():
    sheet = compose(
        [Panel(plain(30), "word " * 60, None, (1e4, "too long"))], "A title that goes on and on " * 20, "note " * 90
    )
    assert (sheet[:, -4:] == 255).all()
    assert (sheet[:, :4] == 255).all()


def test_what_cannot_stand_on_a_sheet():
    with pytest.raises(DomainError, match="one panel"):
        compose([])
    with pytest.raises(DomainError, match="several sizes"):
        compose([Panel(plain(1), "a"), Panel(plain(1, 41), "b")])
    with pytest.raises(DomainError, match="no letters"):
        compose([Panel(plain(1), "虹")])
