"""The file: policy, escaping, size."""

import json
import re
from base64 import b64decode, b64encode
from dataclasses import replace
from hashlib import sha256
from html.parser import HTMLParser
from io import BytesIO

import numpy as np
import pytest
from PIL import Image

from skyoptics.errors import DomainError
from skyoptics.figures.palette import contrast
from skyoptics.page import document
from skyoptics.words.table import languages, say
from tests.page.conftest import MARKUP


class Read(HTMLParser):
    """Elements, and the text of those that are asked for."""

    def __init__(self, text):
        super().__init__(convert_charrefs=True)
        self.found, self.open, self.words = [], [], {}
        self.feed(text)

    def handle_starttag(self, tag, attributes):
        self.found.append((tag, dict(attributes)))
        self.open.append(tag)

    def handle_endtag(self, tag):
        while self.open and self.open.pop() != tag:
            pass

    def handle_data(self, data):
        if self.open:
            self.words[self.open[-1]] = self.words.get(self.open[-1], "") + data


def data_of(text):
    block = re.search(r'<script type="application/json" id="data">(.*?)</script>', text, re.DOTALL)[1]
    return json.loads(block)


def test_texts_of_a_scene_stay_texts(text):
    read = Read(text)
    assert read.words["h1"] == MARKUP
    assert MARKUP in read.words["title"]
    assert not [tag for tag, _ in read.found if tag in ("b", "i")]
    images = [attributes for tag, attributes in read.found if tag == "img"]
    assert len(images) == 3
    assert all(image["src"].startswith("data:image/jpeg;base64,") for image in images)
    assert sum(tag == "script" for tag, _ in read.found) == 2


def test_policy_lets_in_what_is_in_the_file_alone(text):
    """Hashes as in W3C, Content Security Policy Level 3, § 2.3.1, worked out here from the file."""
    policy = next(a["content"] for _, a in Read(text).found if a.get("http-equiv") == "Content-Security-Policy")
    rules = dict(rule.strip().split(" ", 1) for rule in policy.split(";"))
    assert rules["default-src"] == "'none'"
    assert rules["img-src"] == "data:"
    for rule, pattern in (("style-src", r"<style>(.*?)</style>"), ("script-src", r"<script>(.*?)</script>")):
        inside = re.search(pattern, text, re.DOTALL)[1]
        assert rules[rule] == "'sha256-" + b64encode(sha256(inside.encode()).digest()).decode() + "'"
    assert "style=" not in re.sub(r"<script>.*?</script>", "", text, flags=re.DOTALL)
    assert not re.search(r"(?:src|href)=\"(?!data:)", text)
    assert "http" not in re.sub(r"http://www.w3.org/2000/svg|http-equiv|data:[^\"]*", "", text)


def test_data_hold_the_pictures(text, pictures):
    data = data_of(text)
    assert [picture["label"] for picture in data["pictures"]] == ["5°", "15°", "25°"]
    first = data["pictures"][0]
    assert first["grid"]["rotation"] == pictures[0].directions.rotation.ravel().tolist()
    cells = first["cells"]
    size = cells["rows"] * cells["columns"]
    assert len(b64decode(cells["peaks"])) == 2 * size
    assert len(b64decode(cells["shapes"])) == size * len(data["bands"]["edges"])
    code = np.frombuffer(b64decode(first["arcs"]["codes"]), np.uint8)
    assert {data["names"][k] for k in np.unique(code)} >= {"", "Primary bow", "Secondary bow"}


def test_pictures_are_those_that_were_rendered(text, pictures):
    from skyoptics.colour.display import encode

    for found, picture in zip(re.findall(r"data:image/jpeg;base64,([^\"]+)", text), pictures, strict=True):
        image = np.asarray(Image.open(BytesIO(b64decode(found)))).astype(float)
        assert image.shape == picture.xyz.shape
        assert np.abs(image - 255.0 * encode(picture.developed.rgb)).mean() < 2.0


def test_json_block_cannot_be_left():
    text = document.json_block({"a": "</script><!--<script>&\u2028"})
    assert not set("<>&\u2028") & set(text)
    assert json.loads(text) == {"a": "</script><!--<script>&\u2028"}


@pytest.mark.parametrize("lang", languages())
def test_every_language(pictures, asked, lang):
    text = document.page(pictures, replace(asked, lang=lang))
    assert f'<html lang="{lang}">' in text
    assert say("page.readings", lang) in text
    assert data_of(text)["mark"] == ("." if lang == "en" else ",")


def test_too_large_before_rendering():
    with pytest.raises(
        DomainError, match=r"at least \d+\.\d MB, and 10 MB are allowed: lower camera.width_px from 6000 to"
    ):
        document.check_size([(4000, 6000)] * 40)
    document.check_size([(1000, 1500)] * 10)


def test_too_large_after_rendering(pictures, asked, monkeypatch):
    monkeypatch.setattr(document, "LIMIT", len(document._document(pictures, asked, [""] * 3)) + 1000)
    with pytest.raises(
        DomainError, match=r"lower camera.width_px from 240 to about \d+ .* or take \d values instead of 3"
    ):
        document.page(pictures, asked)


def test_quality_gives_way_before_the_page_is_refused(pictures, asked, monkeypatch, text):
    monkeypatch.setattr(document, "LIMIT", len(text.encode()) - 2000)
    assert len(document.page(pictures, asked).encode()) <= document.LIMIT


def test_contrast_of_texts():
    """At least 4.5:1 for text and 3:1 for lines that mean something (W3C, WCAG 2.2, 1.4.3 and 1.4.11), in both schemes."""
    style = document._file("page.css")
    style = style.split("@media print")[0]
    schemes = [
        dict(re.findall(r"--(\w+): (#[0-9a-f]{6})\b", part))
        for part in style.split("@media (prefers-color-scheme: dark)")
    ]
    for scheme in schemes:
        for name in ("ink", "faint", "accent"):
            for ground in ("paper", "shade"):
                assert contrast(scheme[name], scheme[ground]) >= 4.5, name
        for name in ("short", "middle", "long", "mark"):
            assert contrast(scheme[name], scheme["shade"]) >= 3.0, name


def test_too_large_by_the_first_picture(pictures):
    """Hundreds of pictures like the first cannot fit: told before the second is rendered."""
    document.check_first(pictures[0], 3)
    with pytest.raises(DomainError, match=r"about \d+\.\d MB, and 10 MB are allowed: lower camera.width_px"):
        document.check_first(pictures[0], 100_000)
