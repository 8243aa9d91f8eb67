"""The page in a real browser: slider, readings, keyboard, screen readers, phone, print, and no request to anywhere."""

import re
from itertools import pairwise

import numpy as np
import pytest

from skyoptics.camera.frame import aim, panorama, photograph
from skyoptics.camera.lenses import LENSES
from skyoptics.geometry.axes import angle_between, azimuth_elevation
from skyoptics.page import document, packing
from skyoptics.page.cells import banded
from skyoptics.page.curve import STEPS
from skyoptics.units import DEG
from tests.page.conftest import MARKUP

pytestmark = pytest.mark.browser


def point(found, column, row, picture):
    """Move the pointer to a place of the picture, and return the place that it really has."""
    box = found.page.locator("figure:not([hidden]) img").bounding_box()
    rows, columns = picture.directions.shape
    x, y = box["x"] + (column + 0.5) * box["width"] / columns, box["y"] + (row + 0.5) * box["height"] / rows
    found.page.mouse.move(x, y)
    return column, row


def visible(found):
    return found.page.locator("figure").evaluate_all("all => all.map(one => one.checkVisibility())")


def choose(found, stop):
    found.page.locator("#value").fill(str(stop))


def test_the_slider_moves_the_picture(opened, pictures):
    found = opened()
    seen = []
    for stop, label in enumerate(("5°", "15°", "25°")):
        choose(found, stop)
        shown = found.page.locator("figure:not([hidden]) img")
        assert shown.count() == 1
        seen.append(shown.get_attribute("src"))
        assert shown.get_attribute("alt") == pictures[stop].report["alt_text"]
        assert found.text("chosen") == label
        assert found.page.locator("#value").get_attribute("aria-valuetext") == label
        assert (
            found.page.locator("figure:not([hidden]) figcaption")
            .inner_text()
            .endswith(pictures[stop].report["caption"])
        )
    assert len(set(seen)) == 3


def test_readings_match_the_data(opened, pictures):
    found = opened()
    rng = np.random.default_rng(5)
    for stop, picture in enumerate(pictures):
        choose(found, stop)
        rows, columns = picture.directions.shape
        names = ["none", *(name.replace("_", " ").capitalize() for name in picture.names)]
        values, _ = banded(picture.spectra, picture.bins)
        for column, row in rng.uniform((2, 2), (columns - 3, rows - 3), (12, 2)):
            point(found, column, row, picture)
            view = picture.directions.unproject(np.array(row), np.array(column))
            azimuth, elevation = (float(angle) / DEG for angle in azimuth_elevation(view))
            angle = float(angle_between(picture.source, view)) / DEG
            # shown to 0.1°; the browser places the pointer within 1/64 of a pixel of the screen
            for name, value in (
                ("azimuth", azimuth),
                ("elevation", elevation),
                ("angle", angle),
                ("opposite", 180 - angle),
            ):
                assert found.number(name) == pytest.approx(value, abs=0.0501 + 0.02), name
            at = [int((place + 0.5) // picture.arcs_side) for place in (row, column)]
            arc = names[picture.arcs[at[0], at[1]]]
            assert found.text("arc").replace("Alexander's dark band", "Alexander band") == arc
            place = [int((place + 0.5) // picture.spectra_side) for place in (row, column)]
            light = values[place[0], place[1]]
            told = re.search(r"Peak: ([\d.]+)(?: · 10([⁻⁰¹²³⁴⁵⁶⁷⁸⁹]+))?", found.text("peak"))
            power = (told[2] or "⁰").translate(str.maketrans("⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "-0123456789"))
            assert float(told[1]) * 10 ** int(power) == pytest.approx(light.max(), rel=0.051)
            line = found.page.locator("#spectrum .plain").get_attribute("d")
            y = np.array([float(pair.split(" ")[1]) for pair in re.findall(r"[\d.]+ [\d.]+", line)])
            assert (108 - y) / 100 == pytest.approx(light / light.max(), abs=0.5 / 255 + 0.0006)
            mark = float(re.match(r"M([\d.]+)", found.page.locator("#curve .mark").get_attribute("d"))[1])
            assert (mark - 38) / (343 - 38) * 180 == pytest.approx(angle, abs=0.04)


def test_the_curve_is_that_of_the_data(opened, pictures):
    found = opened()
    for stop, picture in enumerate(pictures):
        choose(found, stop)
        lines = found.page.locator("#curve .light").evaluate_all(
            "all => all.slice(-3).map(one => one.getAttribute('d'))"
        )
        every = np.concatenate([one.curve.values.ravel() for one in pictures])
        low, high = np.log10(every.min()) - 0.08, np.log10(every.max()) + 0.05
        for line, values in zip(lines, picture.curve.values.T, strict=True):
            pairs = np.array([[float(part) for part in pair.split(" ")] for pair in re.findall(r"[\d.]+ [\d.]+", line)])
            assert len(pairs) == STEPS
            assert pairs[:, 1] == pytest.approx(194 - (194 - 38) * (np.log10(values) - low) / (high - low), abs=0.06)


def test_by_keyboard_alone(opened, pictures):
    found = opened()
    keys = found.page.keyboard

    def focus():
        return found.page.evaluate("[document.activeElement.id, document.activeElement.className]")

    def ring():
        return found.page.evaluate("getComputedStyle(document.activeElement).outlineStyle")

    keys.press("Tab")
    assert focus()[0] == "value"
    assert ring() != "none"
    for key, label in (("ArrowRight", "15°"), ("End", "25°"), ("ArrowLeft", "15°"), ("Home", "5°")):
        keys.press(key)
        assert found.text("chosen") == label
    keys.press("Tab")
    assert focus()[1] == "frame"
    assert ring() != "none"
    picture = pictures[0]
    rows, columns = picture.directions.shape
    row, column = picture.start
    for key, step in (
        ("ArrowUp", (-2, 0)),
        ("ArrowRight", (0, 2)),
        ("Shift+ArrowDown", (1, 0)),
        ("Shift+ArrowLeft", (0, -1)),
    ):
        keys.press(key)
        row, column = row + step[0], column + step[1]
        azimuth, elevation = azimuth_elevation(picture.directions.unproject(np.array(row), np.array(column)))
        assert found.number("elevation") == pytest.approx(float(elevation) / DEG, abs=0.0501)
        assert found.number("azimuth") == pytest.approx(float(azimuth) / DEG, abs=0.0501)
    for key, place in (
        ("Home", (row, 0)),
        ("PageDown", (rows - 1, 0)),
        ("End", (rows - 1, columns - 1)),
        ("PageUp", (0, columns - 1)),
    ):
        keys.press(key)
        view = picture.directions.unproject(np.array(float(place[0])), np.array(float(place[1])))
        assert found.number("angle") == pytest.approx(float(angle_between(picture.source, view)) / DEG, abs=0.0501)
    found.page.wait_for_timeout(400)  # said when the keys have been still for a moment
    said = found.page.locator("#said").text_content()
    assert f"Elevation {found.text('elevation')}" in said
    assert said in found.page.locator("figure:not([hidden]) .frame").get_attribute("aria-label")
    keys.press("Shift+Tab")
    assert focus()[0] == "value"  # no trap


def test_one_picture_has_no_slider_and_its_corners_no_sky(opened, fisheye_file):
    """A fisheye: what lies outside its image circle is no direction, and three wavelengths are three dots."""
    found = opened(file=fisheye_file)
    assert not found.page.locator("#slider").is_visible()
    assert found.page.locator("#spectrum .dot").count() == 3
    found.page.keyboard.press("Tab")
    found.page.keyboard.press("Home")
    found.page.keyboard.press("PageUp")
    assert found.text("azimuth") == "outside the picture"
    assert [found.text(name) for name in ("elevation", "angle", "opposite", "arc", "peak")] == ["–", "–", "–", "–", ""]
    assert found.page.locator("#spectrum .dot").count() == 0
    assert found.page.locator("#curve .mark").get_attribute("d") == ""


@pytest.mark.parametrize("lens", [*LENSES, "panorama"])
def test_the_map_of_every_lens_runs_backwards(opened, lens):
    if lens == "panorama":
        grid = panorama(4.0, 1.5, (60, 160), 1.0, 0.4, 0.3)
    else:
        grid = photograph(lens, 15e-3, (36e-3, 24e-3), (80, 120), aim(2.0, 0.5, 0.2))
    rng = np.random.default_rng(3)
    places = rng.uniform(-0.5, np.array(grid.shape) - 0.5, (200, 2))
    words = f"([grid, places]) => {{ {document._file('sky.js')} return places.map(([row, column]) => view(grid, column, row)); }}"
    found = opened().page.evaluate(words, [packing.grid(grid), places.tolist()])
    expected = grid.unproject(places[:, 0], places[:, 1])
    outside = np.isnan(expected).any(axis=1)
    assert [one is None for one in found] == outside.tolist()
    inside = np.array([one for one in found if one is not None])
    assert inside == pytest.approx(expected[~outside], abs=1e-7)


def test_a_title_with_markup_stays_text(opened):
    found = opened()
    assert found.page.locator("h1").inner_text() == MARKUP
    assert found.page.title() == MARKUP
    assert found.page.locator("b, i").count() == 0
    assert found.page.locator("img").count() == 3


@pytest.mark.parametrize(("width", "height", "scheme"), [(1280, 800, "light"), (390, 844, "dark"), (320, 640, "light")])
def test_an_accessibility_checker_finds_nothing_serious(opened, axe, width, height, scheme):
    """axe-core from the npm registry; its impact "serious" and "critical"."""
    found = opened(width, height, color_scheme=scheme)
    found.page.evaluate(axe)
    result = found.page.evaluate("axe.run(document, {resultTypes: ['violations', 'incomplete']})")
    assert len(result["passes"]) > 10
    grave = [
        (one["id"], one["help"], [node["html"][:120] for node in one["nodes"]])
        for one in result["violations"]
        if one["impact"] in ("serious", "critical")
    ]
    assert grave == []


@pytest.mark.parametrize("width", [320, 390, 768])
def test_narrow_screens_need_no_sideways_scrolling(opened, width):
    """Reflow at 320 CSS pixels and targets of 24 (W3C, WCAG 2.2, 1.4.10 and 2.5.8)."""
    found = opened(width, 844, has_touch=True, is_mobile=True)
    assert found.page.evaluate("document.documentElement.scrollWidth") <= width
    assert found.page.locator("#value").bounding_box()["height"] >= 24
    ticks = found.page.locator("#ticks span").evaluate_all(
        "all => all.map(one => one.getBoundingClientRect().toJSON())"
    )
    assert all(one["right"] <= two["left"] for one, two in pairwise(ticks))
    frame = found.page.locator("figure:not([hidden]) img").bounding_box()
    found.page.touchscreen.tap(frame["x"] + 0.2 * frame["width"], frame["y"] + 0.3 * frame["height"])
    assert found.page.locator(".cross").evaluate("one => parseFloat(one.style.left)") == pytest.approx(20, abs=0.5)


def test_print_shows_all_pictures_with_captions(opened, pictures):
    found = opened(794, 1123)
    found.page.emulate_media(media="print")
    assert visible(found) == [True] * 3
    for place, picture in enumerate(pictures):
        words = found.page.locator(f"#picture-{place + 1} figcaption").inner_text()
        assert words.startswith(f"Height of the sun: {picture.report['shows']['light']['elevation_deg']:g}°")
        assert picture.report["caption"] in words
    assert not found.page.locator("#slider").is_visible()
    assert not found.page.locator(".cross").is_visible()
    assert found.page.locator("#curve").is_visible()


def test_without_scripts_all_pictures_are_there(opened):
    found = opened(java_script_enabled=False)
    assert found.page.locator("figure").count() == 3
    assert all(found.page.locator(f"#picture-{k}").is_visible() for k in (1, 2, 3))
    assert not found.page.locator("#slider").is_visible()
