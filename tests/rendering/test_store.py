"""Stored tables: found again, set aside in words when they cannot be used."""

import os

import numpy as np

from skyoptics.optics.table import ScatteringTable
from skyoptics.rendering import store as tables


def table():
    one = np.ones(3)
    return ScatteringTable(
        angle=np.linspace(0.1, 3.0, 5),
        wavelength=one * 5e-7,
        elements=np.random.default_rng(1).random((2, 5, 3, 6)),
        error=np.zeros((2, 5, 3)),
        albedo=one,
        asymmetry=one,
        parts=("0", "1"),
        edges=np.linspace(0, np.pi, 6),
        report={"rays": 12},
    )


def test_there_and_back(store):
    key = tables.trace_key(a=1, b=np.arange(3.0))
    assert tables.find(key) is None
    assert tables.keep(key, table())
    found = tables.find(key)
    assert np.array_equal(found.elements, table().elements)
    assert np.array_equal(found.edges, table().edges)
    assert found.report == {"rays": 12}
    assert found.parts == ("0", "1")


def test_keys_depend_on_every_part():
    base = {"index": "water", "bins": np.arange(4.0), "seed": 1}
    keys = {tables.trace_key(**base)}
    keys.add(tables.trace_key(**{**base, "seed": 2}))
    keys.add(tables.trace_key(**{**base, "bins": np.arange(4.0) + 1e-12}))
    keys.add(tables.trace_key(**{**base, "index": "ice"}))
    assert len(keys) == 4


def test_broken_and_foreign_files_are_set_aside(store, capsys):
    key = tables.trace_key(broken=True)
    path = store / f"{key}.npz"
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_bytes(b"no table at all")
    assert tables.find(key) is None
    assert "set aside" in capsys.readouterr().err
    assert not path.exists()
    other = tables.trace_key(broken=False)
    tables.keep(other, table())
    (store / f"{other}.npz").rename(path)
    assert tables.find(key) is None
    assert "another job" in capsys.readouterr().err


def test_a_folder_that_cannot_be_written_is_no_reason_to_fail(monkeypatch, tmp_path):
    (tmp_path / "file").write_text("")
    monkeypatch.setenv("SKYOPTICS_CACHE", str(tmp_path / "file"))
    assert not tables.keep("0" * 32, table())
    assert tables.find("0" * 32) is None


def test_the_store_stays_small(tmp_path, monkeypatch):
    monkeypatch.setenv("SKYOPTICS_CACHE", str(tmp_path))
    monkeypatch.setattr(tables, "MOST_STORED", 20e3)
    keys = [tables.trace_key(number=number) for number in range(6)]
    for age, key in enumerate(keys):
        assert tables.keep(key, table())
        path = tmp_path / "tables" / f"{key}.npz"
        os.utime(path, (1e9 + age, 1e9 + age))
    assert tables.keep(tables.trace_key(number=6), table())
    kept = list((tmp_path / "tables").glob("*.npz"))
    assert sum(path.stat().st_size for path in kept) <= 20e3
    assert tables.find(tables.trace_key(number=6)) is not None
    assert tables.find(keys[0]) is None
