import getpass
import json
import shlex
import socket
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from skyoptics.colour import metadata
from skyoptics.errors import DomainError


@pytest.fixture
def somebody(monkeypatch):
    """A computer with a telling login and host name."""
    monkeypatch.setattr(getpass, "getuser", lambda: "wilhelmina")
    monkeypatch.setattr(socket, "gethostname", lambda: "nordlicht.example.org")
    monkeypatch.setattr(Path, "home", lambda: Path("/home/Wil Helmina"))
    for key in ("USER", "LOGNAME", "USERNAME"):
        monkeypatch.delenv(key, raising=False)


def test_entries_and_their_order(somebody):
    entries = metadata.picture_metadata(
        software="skyoptics",
        version="0.1.0",
        title="Primary bow",
        scene_hash="ab12",
        seed=7,
        command=["skyoptics", "render", "my bow.toml", "--set", "camera.aim=up"],
        more={"Exposure": "EV 12.3", "Bins": 34, "Share": {"clipped": 0.25}},
    )
    assert list(entries) == ["Title", "Software", "Scene hash", "Seed", "Command", "Exposure", "Bins", "Share"]
    assert entries["Software"] == "skyoptics 0.1.0"
    assert shlex.split(entries["Command"])[2] == "my bow.toml"
    assert entries["Seed"] == "7"
    assert json.loads(entries["Share"]) == {"clipped": 0.25}
    metadata.refuse_private(entries)


def test_nothing_private_is_left(somebody):
    entries = metadata.picture_metadata(
        software="skyoptics",
        version="0.1.0",
        title="From /home/wilhelmina/bow.toml",
        description="see file:///srv/data/bow.toml, or C:\\Users\\wilhelmina\\bow.toml",
        command=[
            "/usr/local/bin/skyoptics",
            "render",
            "/home/Wil Helmina/with space/bow.toml",
            "--output=/mnt/big disk/out.png",
            "~/x.toml",
        ],
        more={
            "Machine": "nordlicht, nordlicht.example.org",
            "Run by": "wilhelmina@nordlicht",
            "Cached": "cache /home/Wil Helmina/.cache/skyoptics: used",
            "Files": ["/data/drops.csv", "relative/drops.csv"],
            "Login": "Wilhelmina",
        },
    )
    everything = "\n".join(entries.values())
    for private in (
        "wilhelmina",
        "helmina",
        "nordlicht",
        "/home",
        "/mnt",
        "/srv",
        "/usr",
        "/data",
        "C:\\",
        "Users",
        "~",
    ):
        assert private.lower() not in everything.lower(), (private, everything)
    assert entries["Title"] == "From bow.toml"
    assert entries["Description"] == "see bow.toml, or bow.toml"
    assert shlex.split(entries["Command"]) == ["skyoptics", "render", "bow.toml", "--output=out.png", "x.toml"]
    assert json.loads(entries["Files"]) == ["drops.csv", "relative/drops.csv"]
    metadata.refuse_private(entries)


@pytest.mark.parametrize(
    "text",
    [
        "radiance [W m⁻²/sr], 1/2, and/or",
        "https://doi.org/10.1002/col.20070",
        "scenes/bow.toml and ../bow.toml",
        "sun at 12:30, ratio 3 / 4",
        "C: cloud, D:E",
        "~42° from the antisolar point",
        "",
    ],
)
def test_what_is_no_folder_stays(text):
    assert metadata.strip_private(text, ("wilhelmina",)) == text


def test_names_in_words_written_by_hand_stay(somebody):
    entries = metadata.picture_metadata(
        software="s", version="1", title="Wilhelmina's bow", more={"Author": "Wilhelmina", "Note": "wilhelminas bow"}
    )
    assert entries["Title"] == "Wilhelmina's bow"
    assert entries["Author"] == "Wilhelmina"
    assert entries["Note"] == "wilhelminas bow"  # another word


def test_names_that_are_everybodys_are_no_secret(monkeypatch):
    monkeypatch.setattr(getpass, "getuser", lambda: "root")
    monkeypatch.setattr(socket, "gethostname", lambda: "localhost")
    monkeypatch.setattr(Path, "home", lambda: Path("/root"))
    for key in ("USER", "LOGNAME", "USERNAME"):
        monkeypatch.setenv(key, "user")
    assert metadata.private_names() == ()


def test_a_login_name_that_cannot_be_found_is_no_fault(monkeypatch):
    def nobody():
        raise OSError("no login")

    monkeypatch.setattr(getpass, "getuser", nobody)
    assert isinstance(metadata.private_names(), tuple)


def test_private_entries_are_refused_by_name(somebody):
    with pytest.raises(DomainError, match=r"^A, C: holds an absolute path"):
        metadata.refuse_private({"A": "/data/x.csv", "B": "x.csv", "C": "made on nordlicht"})


@given(st.lists(st.text(st.characters(exclude_characters="\0", exclude_categories=["Cs"]), max_size=20), max_size=5))
def test_stripping_twice_changes_nothing_more(words):
    once = metadata.strip_private(" ".join(words), ("wilhelmina",))
    assert metadata.strip_private(once, ("wilhelmina",)) == once


def test_json_text_comes_back():
    entries = {"Title": "Bogen über Åland", "Seed": "7"}
    text = metadata.to_json(entries)
    assert "über" in text
    assert text.endswith("}\n")
    assert list(json.loads(text).items()) == list(entries.items())
