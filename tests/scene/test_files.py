"""Names for files that every system takes."""

import re
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as some

from skyoptics.scene.files import LONGEST_NAME, safe_name


@pytest.mark.parametrize(
    ("source", "name"),
    [
        ("Bow over the moor", "Bow-over-the-moor"),
        (Path("scenes/double-bow.toml"), "double-bow"),
        (Path("/a/b.c.toml"), "b.c"),
        ("../../etc/passwd", "etc-passwd"),
        ("Régen über Ærø: 40°!", "Regen-uber-r-40"),
        ("", "scene"),
        ("...", "scene"),
        ("虹", "scene"),
        (".hidden", "hidden"),
        ("con", "con_"),
        ("NUL.txt", "NUL_.txt"),
        ("COM¹", "COM1_"),
        ("console", "console"),
        ("a\0b\nc", "a-b-c"),
        ("x" * 500, "x" * LONGEST_NAME),
        ("v1.5_final", "v1.5_final"),
    ],
)
def test_known_names(source, name):
    assert safe_name(source) == name


@given(some.text(max_size=200))
def test_any_text_gives_a_safe_name(text):
    name = safe_name(text)
    assert re.fullmatch(r"[A-Za-z0-9_.-]{1,81}", name)
    assert not name.startswith(".")
    assert not name.endswith(".")
    assert name.partition(".")[0].upper() not in {"CON", "PRN", "AUX", "NUL", "COM1", "LPT9"}
    assert safe_name(name) == name
