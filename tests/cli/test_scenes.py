"""``skyoptics scenes`` and ``skyoptics check``."""

import json
from pathlib import Path

import pytest

from skyoptics.cli import examples


def test_list(command):
    done = command("scenes")
    assert done.code == 0
    assert set(json.loads(command("scenes", "--json").out)) == set(examples.names())
    assert all(name in done.out for name in examples.names())


def test_copy_and_check(command, tmp_path):
    assert command("scenes", "double-bow").out.strip() == "double-bow.toml"
    assert command("check", "double-bow.toml").code == 0
    (tmp_path / "double-bow.toml").write_text("mine")
    refused = command("scenes", "double-bow")
    assert refused.code == 1
    assert "--force" in refused.err
    assert (tmp_path / "double-bow.toml").read_text() == "mine"


def test_unknown_scene_is_nothing_found(command):
    done = command("scenes", "doubel-bow")
    assert done.code == 3
    assert "did you mean double-bow" in done.err


@pytest.mark.parametrize("name", examples.names())
def test_every_example_is_without_fault(command, name):
    assert command("check", examples.folder() / f"{name}.toml").code == 0


def test_check_lists_all_faults_of_all_files(command, tmp_path):
    Path("one.toml").write_text("[light]\nelevation_deg = 100\nazimut_deg = 3\n[[air]]\nkind = 'drops'\n")
    Path("two.toml").write_text("[light]\nelevation_deg = 10\n[[air]]\nkind = 'drop'\n")
    done = command("check", "one.toml", "two.toml")
    assert done.code == 1
    assert "one.toml:2: light.elevation_deg" in done.out
    assert "one.toml:3: light.azimut_deg" in done.out
    assert "did you mean azimuth_deg" in done.out
    assert "two.toml:4: air.1.kind" in done.out
    assert "did you mean drops" in done.out
