"""Small renders: what is named in them, and what independent readers find in their files."""

import json
import xml.etree.ElementTree as ElementTree

import numpy as np
import png
import pytest

from skyoptics.droplets import airy
from skyoptics.errors import DomainError
from skyoptics.figures import lettering
from skyoptics.optics import bows
from skyoptics.rendering import alt_text, bow_labels, caption
from skyoptics.rendering.labels import annotated, labels_by_name
from skyoptics.rendering.run import Settings, render
from skyoptics.rendering.shows import shows
from skyoptics.scene.load import load
from skyoptics.units import DEG

SCENE = """
title = "Zwei Bögen"

[light]
elevation_deg = 15

[[air]]
kind = "drops"
optical_depth = 0.5
radius_um = {radius}
method = "{method}"

[camera]
focal_mm = 14
width_px = 300
aim = {{ azimuth_deg = 0, elevation_deg = 20 }}

[picture]
background = 0.001
wavelengths_nm = [450, 500, 550, 600, 650]
"""


@pytest.fixture(scope="module")
def pictures(tmp_path_factory):
    """The same view of drops of 0.2 mm by waves and by rays."""
    found = {}
    for method in ("airy", "rays"):
        path = tmp_path_factory.mktemp("scenes") / f"{method}.toml"
        path.write_text(SCENE.format(radius=200, method=method), encoding="utf-8")
        scene = load(path)
        found[method] = scene, render(scene, str(path), Settings("draft", 1, 1))
    return found


@pytest.fixture(scope="module")
def labels(pictures):
    """What is named in the picture by waves."""
    return labels_by_name(pictures["airy"][1], "de")


def test_bows_are_named_where_they_are(pictures, labels):
    _, result = pictures["airy"]
    assert set(labels) == {"primary_bow", "secondary_bow", "alexander_band", "supernumerary_bows"}
    assert labels["primary_bow"].text == "Hauptregenbogen"
    opposite = -result.job.sources[0].direction
    ranges = {  # Descartes' angles at n = 1.33 are 42° and 51° (Walker, Am. J. Phys. 44, 421 (1976)); waves shift them
        "primary_bow": (40.0, 43.0),
        "secondary_bow": (50.5, 54.0),
        "alexander_band": (43.0, 50.0),
        "supernumerary_bows": (36.0, 40.5),
    }
    for name, (low, high) in ranges.items():
        column, row, strength = labels[name].anchors.T
        away = np.arccos(result.job.directions.unproject(row, column) @ opposite) / DEG
        assert np.all((low < away) & (away < high)), name
        assert np.all(strength > 0.0)


def test_rays_have_no_supernumeraries(pictures):
    names = set(labels_by_name(pictures["rays"][1]))
    assert "supernumerary_bows" not in names
    assert {"primary_bow", "secondary_bow", "alexander_band"} <= names


def test_the_first_supernumerary_stands_where_airy_puts_it(pictures, labels):
    # Ai' has its second zero at -3.24820 (DLMF, table 9.9.1): there Airy's integral has its second maximum
    _, result = pictures["airy"]
    index = float(np.real(result.job.sheets[0].index(np.array([550e-9]))[0]))
    expected = (np.pi - float(airy.angle_at(complex(index), 2.0 * np.pi * 200e-6 / 550e-9, 3.24820, 2))) / DEG
    column, row, _ = labels["supernumerary_bows"].anchors.T
    away = np.arccos(result.job.directions.unproject(row, column) @ -result.job.sources[0].direction) / DEG
    assert abs(float(np.median(away)) - expected) < 0.35  # five wavelengths are seen at once


def test_circles_have_the_closed_form_radius(pictures):
    _, result = pictures["airy"]
    circles = bow_labels.bow_circles(result.job, "fr")
    index = float(np.real(result.job.sheets[0].index(np.array([560e-9]))[0]))
    assert len(circles) == 2
    for arc, order in zip(circles, (2, 3), strict=True):
        radius = (np.pi - float(bows.scattering_angle(index, order))) / DEG
        assert arc.text.startswith(f"{radius:.1f}°".replace(".", ","))
        points = arc.points[np.isfinite(arc.points).all(axis=1)]
        views = result.job.directions.unproject(points[:, 1], points[:, 0])
        away = np.arccos(views @ -result.job.sources[0].direction) / DEG
        assert np.allclose(away, radius, atol=0.02)


def test_labelled_copy_speaks_the_language(pictures, labels):
    drawn = annotated(pictures["airy"][1], "de")
    assert {one.text for one in drawn.placed} | set(drawn.dropped) == {label.text for label in labels.values()}
    assert len(drawn.placed) >= 3


def test_a_title_without_glyphs_and_a_lost_font_are_told(pictures, monkeypatch):
    _, result = pictures["airy"]
    monkeypatch.setitem(result.report, "title", "虹 rainbow")
    with pytest.raises(DomainError, match=r"DejaVu Sans has no letters for '虹'"):
        annotated(result)
    monkeypatch.setattr(lettering, "FONT", "No Such Face")
    lettering.font_file.cache_clear()
    with pytest.raises(DomainError, match="the font No Such Face"):
        lettering.font_of(12.0)
    lettering.font_file.cache_clear()


def test_facts_are_true(pictures):
    scene, result = pictures["rays"]
    facts = shows(result, scene)
    assert json.loads(json.dumps(facts)) == facts
    assert facts["light"]["elevation_deg"] == 15.0
    assert facts["light"]["where"] == "behind"
    assert facts["angles_deg"]["primary_bow"] == pytest.approx(41.9, abs=0.3)  # Walker (1976)
    assert {point["key"] for point in facts["unlike"]} >= {"wavelengths", "rays"}
    assert facts["particles"] == [{"kind": "drops", "radius_um": 200.0, "spread": 0.0, "flattened": False}]


def texts_of(path):
    """Return the text chunks of a PNG as pypng reads them."""
    found = {}
    with open(path, "rb") as file:
        for kind, content in png.Reader(file=file).chunks():
            key, _, rest = content.partition(b"\0")
            if kind == b"iTXt":
                found[key.decode("latin-1")] = rest[4:].decode("utf-8")
            elif kind == b"tEXt":
                found[key.decode("latin-1")] = rest.decode("latin-1")
    return found


def test_words_are_in_the_files(command, tiny):
    done = command("render", tiny, "--out", "out", "--labels", "--lang", "de", "--quality", "draft", "--json")
    assert done.code == 0, done.err
    report = json.loads(done.out)
    assert report["language"] == "de"
    assert report["caption"] == caption.write(report, "de")
    assert report["alt_text"] == alt_text.write(report, "de")
    with open("out/tiny.json", encoding="utf-8") as file:
        assert "tiny.caption.txt" in json.load(file)["files"]
    with open("out/tiny.caption.txt", encoding="utf-8") as file:
        beside = file.read()
    assert report["caption"] in beside
    assert report["alt_text"] in beside
    for name in ("out/tiny.png", "out/tiny.labels.png"):
        texts = texts_of(name)
        assert texts["Description"] == report["alt_text"]
        assert texts["Caption"] == report["caption"]
        assert "--lang de" in texts["Command"]
        packet = texts["XML:com.adobe.xmp"]
        tree = ElementTree.fromstring(packet[packet.index("<x:") : packet.index("<?xpacket end")])
        rdf = "{http://www.w3.org/1999/02/22-rdf-syntax-ns#}"
        items = {
            prop: [item.text for item in tree.iterfind(f".//{prop}//{rdf}li")]
            for prop in (
                "{http://purl.org/dc/elements/1.1/}description",
                "{http://iptc.org/std/Iptc4xmpCore/1.0/xmlns/}AltTextAccessibility",
            )
        }
        assert list(items.values()) == [[report["caption"]] * 2, [report["alt_text"]] * 2]


def test_unknown_language_lists_them(command, tiny):
    done = command("render", tiny, "--lang", "it")
    assert done.code == 2
    assert "'it' is not one of en, de, es, fr" in done.err


def test_a_title_the_font_cannot_write_is_refused_before_the_work(command, tiny):
    done = command("render", tiny, "--labels", "--set", 'title="虹"')
    assert done.code == 1
    assert "DejaVu Sans has no letters for '虹'" in done.err
    assert not done.out
