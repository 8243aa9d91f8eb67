"""Help rows, reference page and JSON Schema."""

import json
from pathlib import Path

import pytest

from skyoptics.errors import DomainError
from skyoptics.scene.load import from_text
from skyoptics.scene.schema import PAGE_NAME, SCHEMA_NAME, TABLES, describe, json_schema, reference_page, write

DOCS = Path(__file__).parents[2] / "docs"


@pytest.mark.parametrize("name", [PAGE_NAME, SCHEMA_NAME])
def test_generated_files_are_up_to_date(tmp_path, name):
    write(tmp_path)
    fresh, kept = (tmp_path / name).read_text("utf-8"), (DOCS / name).read_text("utf-8")
    assert fresh == kept, f"docs/{name} is out of date; run: python -m skyoptics.scene.schema"


def test_rows_say_what_is_allowed():
    rows = {row.key: row for row in describe("air.drops")}
    radius = rows["radius_um"]
    assert (radius.allowed, radius.default, radius.unit) == ("a number between 1 and 10000 µm", "500", "µm")
    assert rows["kind"].default == "required"
    assert rows["index"].default == "–"
    assert {row.key: row.default for row in describe("camera")}["sensor_mm"] == "[36, 24]"
    assert [row.key for row in describe("scene")] == ["title", "author", "licence", "look_for"]
    with pytest.raises(DomainError, match="did you mean camera"):
        describe("camra")


def test_every_field_is_explained():
    page = reference_page()
    for name, model in TABLES.items():
        rows = describe(name)
        assert all(row.text and row.allowed for row in rows)
        for row in rows:
            assert f"| `{row.key}` | {row.allowed} |" in page
            unit = {"um": "µm", "c": "°C", "deg": "degrees", "mm": "mm", "nm": "nm", "px": "pixels", "hpa": "hPa"}
            ending = row.key.rpartition("_")[2]
            if "_" in row.key and ending in unit:
                assert row.unit == unit[ending]
        assert {row.key for row in rows} <= model.model_fields.keys()


def test_the_shortest_scene_of_the_page_is_a_scene():
    text = reference_page().split("```toml\n")[1].split("```")[0]
    assert from_text(text).light.elevation_deg == 20.0


def test_schema_is_complete():
    schema = json_schema()
    assert schema["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    assert schema["required"] == ["light", "air"]
    assert "null" not in json.dumps(schema)
    for name, model in TABLES.items():
        table = schema if name == "scene" else schema["$defs"][model.__name__]
        assert table["additionalProperties"] is False
        assert table["properties"].keys() == model.model_fields.keys()
        for key, entry in table["properties"].items():
            assert entry["description"]
            if entry.get("type") in ("number", "integer") and "enum" not in entry:
                assert "unit" in entry, key
                assert "maximum" in entry
                assert "minimum" in entry or "exclusiveMinimum" in entry
    radius = schema["$defs"]["Drops"]["properties"]["radius_um"]
    assert (radius["minimum"], radius["maximum"], radius["default"], radius["unit"]) == (1, 10000, 500.0, "µm")
