"""``TABLE.KEY=VALUE`` laid over a file."""

import pytest

from skyoptics.errors import SceneError
from skyoptics.scene.load import from_text, load
from skyoptics.scene.model import Aim


def faults(text: str, *overrides: str) -> list[str]:
    with pytest.raises(SceneError) as caught:
        from_text(text, "s.toml", overrides=overrides)
    return [str(fault) for fault in caught.value.faults]


def test_values_are_toml_and_bare_words_are_text(shortest):
    scene = from_text(
        shortest,
        overrides=[
            "air.1.radius_um=250",
            'camera.aim="sun"',
            "picture.wavelengths_nm=[550,600]",
            "camera.lens=equisolid",
            " air.1.below_horizon = true ",
            "title=Bow over the moor",
            "camera.sensor_mm=[10, 20]",
            "camera.sensor_mm.2=30",
        ],
    )
    assert scene.air[0].radius_um == 250.0
    assert scene.air[0].below_horizon is True
    assert (scene.camera.lens, scene.camera.aim, scene.camera.sensor_mm) == ("equisolid", "sun", (10.0, 30.0))
    assert scene.picture.wavelengths_nm == (550.0, 600.0)
    assert scene.title == "Bow over the moor"


def test_text_fields_take_numbers_as_typed(shortest):
    scene = from_text(shortest, overrides=["picture.observer=1964", "title=2024-06-01", "air.1.name=007"])
    assert (scene.picture.observer, scene.title, scene.air[0].name) == ("1964", "2024-06-01", "007")


def test_tables_are_made_and_words_give_way_to_them(shortest, full):
    overrides = ["camera.aim.azimuth_deg=90", "camera.aim.elevation_deg=3"]
    assert from_text(shortest, overrides=overrides).camera.aim == Aim(azimuth_deg=90.0, elevation_deg=3.0)
    assert from_text(full, overrides=overrides).camera.aim == Aim(azimuth_deg=90.0, elevation_deg=3.0, roll_deg=5.0)
    text = shortest + '[camera]\naim = "sun"\n'
    assert from_text(text, overrides=overrides).camera.aim == Aim(azimuth_deg=90.0, elevation_deg=3.0)


def test_an_override_can_mend_the_file(shortest):
    assert from_text(shortest.replace("20", "200"), overrides=["light.elevation_deg=2"]).light.elevation_deg == 2.0
    assert from_text('[[air]]\nkind="drops"', overrides=["light.elevation_deg=2"]).light.elevation_deg == 2.0


@pytest.mark.parametrize(
    ("override", "expected"),
    [
        ("air.1.radius_um=0", "--set air.1.radius_um: must lie between 1 and 10000 µm, got 0"),
        ("air.1.radius_um=big", '--set air.1.radius_um: must be a number between 1 and 10000 µm, got the text "big"'),
        ("air.1.radius=3", "--set air.1.radius: unknown key; did you mean radius_um?"),
        ("light.radius_um=3", "--set light.radius_um: unknown key here; it belongs in [[air]]"),
        ("pictures.x=3", "--set pictures.x: pictures: unknown key; did you mean picture?"),
        (
            "light.elevation_deg=nan",
            "--set light.elevation_deg: must be a finite number between -1 and 90 degrees, got nan",
        ),
        ("air.1.kind=drop", '--set air.1.kind: must be "drops" or "crystals", got "drop"; did you mean drops?'),
        ("air.2.radius_um=3", "--set air.2.radius_um: air is a list without entry 2; it has 1 entry, counted from 1"),
        ("air.0.radius_um=3", "--set air.0.radius_um: air is a list without entry 0; it has 1 entry, counted from 1"),
        (
            "air." + "9" * 5000 + ".x=3",
            "--set air."
            + "9" * 95
            + "…: air is a list without entry "
            + "9" * 39
            + "…; it has 1 entry, counted from 1",
        ),
        (
            "air.radius_um=3",
            "--set air.radius_um: air is a list: say which entry, as in air.1.radius_um; it has 1 entry, counted from 1",
        ),
        ("air=3", "--set air: must be a list of 1 to 100 tables, got 3"),
        ("air.1=3", "--set air.1: must be a table, got 3"),
        (
            "camera.aim={azimuth_deg=400, elevation_deg=0}",
            "--set camera.aim: camera.aim.azimuth_deg: must lie between -360 and 360 degrees, got 400",
        ),
        (
            "camera.sensor_mm.1=3",
            "--set camera.sensor_mm.1: camera.sensor_mm: must be a list of 2 numbers, each between 1 and 1000 mm, "
            "got a table",
        ),
        ("foo", '--set: "foo" is not of the form TABLE.KEY=VALUE; an example is light.elevation_deg=20'),
        ("=3", '--set: "=3" is not of the form TABLE.KEY=VALUE; an example is light.elevation_deg=20'),
        ("title=", '--set: "title=" is not of the form TABLE.KEY=VALUE; an example is light.elevation_deg=20'),
        ("a..b=3", '--set: "a..b=3" is not of the form TABLE.KEY=VALUE; an example is light.elevation_deg=20'),
        (
            "a.a.a.a.a.a.a.a.a=3",
            '--set: "a.a.a.a.a.a.a.a.a=3" is not of the form TABLE.KEY=VALUE; an example is light.elevation_deg=20',
        ),
        ("air.²=3", '--set: "air.²=3" is not of the form TABLE.KEY=VALUE; an example is light.elevation_deg=20'),
        (
            "title=[",
            '--set: "title=[" holds no valid TOML value after "="; an example is camera.sensor_mm=[36, 24]',
        ),
        (
            "title=" + "[" * 5000,
            '--set: "title='
            + "[" * 33
            + '…" holds no valid TOML value after "="; an example is camera.sensor_mm=[36, 24]',
        ),
        (
            'title="a"\nlook_for="b"',
            '--set: "title="a"�look_for="b"" holds more than one value; give each key an override of its own',
        ),
    ],
    ids=lambda value: value[:30],
)
def test_faults_name_the_override(shortest, override, expected):
    assert faults(shortest, override) == [expected]


def test_faults_of_file_and_overrides_come_together(shortest):
    found = faults(shortest.replace("20", "200"), "foo", "camera.focal_mm=0", "air.3.index=1.3")
    assert [fault.split(": ")[0] for fault in found] == [
        "s.toml:2",
        "--set camera.focal_mm",
        "--set",
        "--set air.3.index",
    ]
    assert [fault.split(": ")[0] for fault in faults("a =", "foo", "title=x")] == ["s.toml:1", "--set"]


def test_no_particles_to_change():
    found = faults("[light]\nelevation_deg = 2\n", "air.1.radius_um=3")
    assert found == [
        's.toml: air: is missing; a scene needs at least one [[air]] table with kind = "drops" or "crystals"',
        "--set air.1.radius_um: there is no [[air]] table to change; write one in the scene file",
    ]


def test_the_last_override_of_a_key_counts(shortest):
    assert from_text(shortest, overrides=["air.1.radius_um=5", "air.1.radius_um=6"]).air[0].radius_um == 6.0
    assert from_text(shortest, overrides=["air.1.radius_um=0", "air.1.radius_um=6"]).air[0].radius_um == 6.0


def test_load_takes_overrides(tmp_path, shortest):
    (tmp_path / "s.toml").write_text(shortest)
    assert load(tmp_path / "s.toml", ["light.azimuth_deg=10"]).light.azimuth_deg == 10.0
