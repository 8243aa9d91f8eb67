"""Shared fixtures: a store of its own, a tiny scene, the command line in this process."""

import os
from dataclasses import dataclass

import pytest

import skyoptics.kernels  # fixes the folder of compiled kernels before the store is moved

TINY = """
title = "Tiny"

[light]
elevation_deg = 20

[[air]]
kind = "drops"
optical_depth = 0.1

[camera]
focal_mm = 20
width_px = 60
height_px = 40

[picture]
wavelengths_nm = [450, 550, 650]
"""

assert skyoptics.kernels.KERNEL_HASH
assert os.environ["NUMBA_CACHE_DIR"]


@pytest.fixture(scope="session", autouse=True)
def store(tmp_path_factory):
    """Keep traced tables of a test run away from the user's."""
    folder = tmp_path_factory.mktemp("store")
    os.environ["SKYOPTICS_CACHE"] = str(folder)
    return folder / "tables"


@pytest.fixture
def tiny(tmp_path):
    """Return the path of a small scene file."""
    path = tmp_path / "tiny.toml"
    path.write_text(TINY, encoding="utf-8")
    return path


@dataclass(frozen=True)
class Outcome:
    """How a command ended."""

    code: int
    out: str
    err: str


@pytest.fixture
def command(capsys, monkeypatch, tmp_path):
    """Return a function that runs a command in an empty folder."""
    from skyoptics.cli.main import run

    monkeypatch.chdir(tmp_path)

    def call(*words):
        capsys.readouterr()
        code = run([str(word) for word in words])
        taken = capsys.readouterr()
        return Outcome(code, taken.out, taken.err)

    return call
