"""Files of a plan: refused or written, all or none."""

import json

import pytest
from sample_plans import plan

from skyoptics.errors import ResourceError
from skyoptics.planning.files import Wanted, check, write


def test_all_kinds(tmp_path):
    wanted = Wanted(*(tmp_path / f"plan.{kind}" for kind in Wanted._fields))
    check(wanted, force=False)
    assert write(plan(2), wanted, "sun") == list(wanted.paths)
    assert wanted.pdf.read_bytes().startswith(b"%PDF")
    assert wanted.ics.read_bytes().startswith(b"BEGIN:VCALENDAR")
    assert json.loads(wanted.geojson.read_text(encoding="utf-8"))["type"] == "FeatureCollection"
    assert wanted.csv.read_text(encoding="utf-8").count("\n") == 3
    assert sorted(path.name for path in tmp_path.iterdir()) == ["plan.csv", "plan.geojson", "plan.ics", "plan.pdf"]
    with pytest.raises(ResourceError, match="--force"):
        check(wanted, force=False)
    check(wanted, force=True)


def test_refusals(tmp_path):
    for wanted, words in (
        (Wanted(csv=tmp_path), "is a folder"),
        (Wanted(csv=tmp_path / "none" / "plan.csv"), "no folder"),
        (Wanted(csv=tmp_path / "plan", ics=tmp_path / "." / "plan"), "same file name"),
    ):
        with pytest.raises(ResourceError, match=words):
            check(wanted, force=True)
