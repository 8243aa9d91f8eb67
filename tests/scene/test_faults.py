"""Every kind of fault and its exact words."""

import pytest

from skyoptics.errors import Fault, SceneError
from skyoptics.scene.fields import printable, shown
from skyoptics.scene.load import check, from_mapping, from_text, load

LIGHT = "[light]\nelevation_deg = 20\n"
AIR = '[[air]]\nkind = "drops"\n'


def faults(text: str, **options) -> list[str]:
    with pytest.raises(SceneError) as caught:
        from_text(text, "s.toml", **options)
    return [str(fault) for fault in caught.value.faults]


VALUES = [
    ("light", "elevation_deg = 95", "light.elevation_deg: must lie between -1 and 90 degrees, got 95"),
    (
        "light",
        'elevation_deg = "high"',
        'light.elevation_deg: must be a number between -1 and 90 degrees, got the text "high"',
    ),
    ("light", "elevation_deg = true", "light.elevation_deg: must be a number between -1 and 90 degrees, got true"),
    ("light", "elevation_deg = nan", "light.elevation_deg: must be a finite number between -1 and 90 degrees, got nan"),
    (
        "light",
        "elevation_deg = -inf",
        "light.elevation_deg: must be a finite number between -1 and 90 degrees, got -inf",
    ),
    (
        "light",
        "elevation_deg = [1]",
        "light.elevation_deg: must be a number between -1 and 90 degrees, got a list of 1",
    ),
    ("light", "elevation_deg = {}", "light.elevation_deg: must be a number between -1 and 90 degrees, got a table"),
    (
        "light",
        "elevation_deg = 2020-01-01",
        "light.elevation_deg: must be a number between -1 and 90 degrees, got the date or time 2020-01-01",
    ),
    (
        "light",
        "elevation_deg = 1" + "0" * 400,
        "light.elevation_deg: must lie between -1 and 90 degrees, got a number of about 401 digits",
    ),
    (
        "light",
        "elevation_deg = 0x" + "f" * 9000,
        "light.elevation_deg: must lie between -1 and 90 degrees, got a number of about 10838 digits",
    ),
    ("light", 'disc = "sum"', 'light.disc: must be "sun" or "point", got "sum"; did you mean sun?'),
    ("light", "disc = 3", 'light.disc: must be "sun" or "point", got 3'),
    ("light", "aerosol_depth = 6", "light.aerosol_depth: must lie between 0 and 5, got 6"),
    ("air", "radius_um = 0.5", "air.1.radius_um: must lie between 1 and 10000 µm, got 0.5"),
    ("air", "temperature_c = 100", "air.1.temperature_c: must lie between -12 and 99 °C, got 100"),
    ("air", "index = 1", "air.1.index: must lie between 1.0001 and 3, got 1"),
    ("air", "below_horizon = 1", "air.1.below_horizon: must be true or false, got 1"),
    ("air", 'name = ""', "air.1.name: must be text in quotes, 1 to 100 characters, got 0 characters"),
    ("air", "name = 5", "air.1.name: must be text in quotes, 1 to 100 characters, got 5"),
    ("air", "orders = [2, 11]", "air.1.orders.2: must lie between 0 and 10, got 11"),
    ("air", "orders = [2.5]", "air.1.orders.1: must be a whole number between 0 and 10, got 2.5"),
    ("air", "orders = [2, 3, 2]", "air.1.orders: must be a list of distinct entries, got 2 twice"),
    (
        "air",
        "orders = []",
        "air.1.orders: must be a list of 1 to 11 distinct whole numbers between 0 and 10, got a list of 0",
    ),
    ("air", "orders = 2", "air.1.orders: must be a list of 1 to 11 distinct whole numbers between 0 and 10, got 2"),
    ("camera", "width_px = 1.5", "camera.width_px: must be a whole number between 1 and 30000 pixels, got 1.5"),
    ("camera", "width_px = 0", "camera.width_px: must lie between 1 and 30000 pixels, got 0"),
    (
        "camera",
        "sensor_mm = [36]",
        "camera.sensor_mm: must be a list of 2 numbers, each between 1 and 1000 mm, got a list of 1",
    ),
    ("camera", "sensor_mm = [36, 0.5]", "camera.sensor_mm.2: must lie between 1 and 1000 mm, got 0.5"),
    (
        "camera",
        'lens = "panorama"\nwidth_deg = 0',
        "camera.width_deg: must lie above 0 and up to 360 degrees, got 0",
    ),
    (
        "camera",
        'aim = "sin"',
        'camera.aim: must be "sun", "antisolar" or a table { azimuth_deg, elevation_deg, roll_deg }, got "sin"; '
        "did you mean sun?",
    ),
    (
        "camera",
        "aim = { azimuth_deg = 400, elevation_deg = 3 }",
        "camera.aim.azimuth_deg: must lie between -360 and 360 degrees, got 400",
    ),
    (
        "camera",
        "aim = { azimuth_deg = 40 }",
        "camera.aim.elevation_deg: is missing; must be a number between -90 and 90 degrees",
    ),
    (
        "picture",
        "observer = 1931",
        'picture.observer: must be "1931", "1964" or "scotopic", got 1931; put it in quotes',
    ),
    ("picture", "depth_bits = 12", "picture.depth_bits: must be 8 or 16, got 12"),
    ("picture", "wavelengths_nm = [500, 200]", "picture.wavelengths_nm.2: must lie between 300 and 1100 nm, got 200"),
    (
        "picture",
        "wavelengths_nm = [500, 500]",
        "picture.wavelengths_nm: must be a list of distinct entries, got 500 twice",
    ),
    ("picture", "background = -1", "picture.background: must lie between 0 and 1000000 W m⁻² sr⁻¹ nm⁻¹, got -1"),
    # keys
    ("light", "elevasion_deg = 3", "light.elevasion_deg: unknown key; did you mean elevation_deg?"),
    ("light", "radius_um = 3", "light.radius_um: unknown key here; it belongs in [[air]]"),
    ("light", "camera = 3", "light.camera: unknown key here; it belongs at the top level of the file"),
    (
        "medium",
        "title = 3",
        "medium.title: unknown key here; it belongs at the top of the file, before the first table",
    ),
    ("medium", "roll_deg = 3", "medium.roll_deg: unknown key here; it belongs in camera.aim"),
    ("picture", "focal_nm = 3", "picture.focal_nm: unknown key; did you mean focal_mm, which belongs in [camera]?"),
    ("medium", '"q\\u202Eq" = 3', 'medium."q�q": unknown key; the keys here are kind, visual_range_km'),
    # keys that do not go together
    ("air", 'index = 1.3\nindex_table = "n.csv"', "air.1.index_table: cannot stand beside index; keep one of the two"),
    (
        "air",
        'place = "layer"\nbelow_horizon = true',
        'air.1.below_horizon: a layer ends at the horizon; leave this out or set place = "curtain"',
    ),
    (
        "camera",
        'lens = "panorama"\nfocal_mm = 20',
        'camera.focal_mm: not for lens = "panorama", whose field is width_deg by height_deg',
    ),
    (
        "camera",
        'lens = "panorama"\nsensor_mm = [1, 1]',
        'camera.sensor_mm: not for lens = "panorama", whose field is width_deg by height_deg',
    ),
    (
        "camera",
        "width_deg = 20",
        'camera.width_deg: only for lens = "panorama"; for "rectilinear" use focal_mm and sensor_mm',
    ),
    (
        "camera",
        'lens = "equisolid"\nheight_deg = 20',
        'camera.height_deg: only for lens = "panorama"; for "equisolid" use focal_mm and sensor_mm',
    ),
    (
        "camera",
        "focal_mm = 2",
        "camera.focal_mm: half the diagonal field is 84.7 degrees; a rectilinear picture must stay below 80: take a "
        'focal length above 3.81 mm, a smaller sensor, or a fisheye such as lens = "equidistant"',
    ),
    (
        "camera",
        "focal_mm = 5000\nsensor_mm = [1, 1000]\nwidth_px = 100",
        "camera.height_px: comes out as 100000 pixels from width_px and sensor_mm; must lie between 1 and 30000 pixels",
    ),
    (
        "camera",
        'lens = "panorama"\nheight_deg = 5e-324\nheight_px = 3',
        "camera.width_px: comes out as 1000000000 pixels from height_px and height_deg; must lie between 1 and 30000 "
        "pixels",
    ),
    (
        "picture",
        "wavelengths_nm = [500]\nbin_nm = 1",
        "picture.bin_nm: cannot stand beside wavelengths_nm; keep one of the two",
    ),
]


@pytest.mark.parametrize(("table", "lines", "expected"), VALUES, ids=[case[2][:50] for case in VALUES])
def test_one_fault_in_its_exact_words(table, lines, expected):
    parts = {"light": LIGHT, "air": AIR}
    if lines.startswith("elevation_deg"):
        parts["light"] = "[light]\n"
    parts[table] = parts.get(table, f"[{table}]\n") + lines + "\n"
    text = "".join(parts.values())
    (found,) = faults(text)
    place, _, message = found.partition(": ")
    assert message == expected
    name, _, line = place.partition(":")
    assert name == "s.toml"
    key = expected.split(":")[0].split(".")
    named = next(part for part in reversed(key) if not part.isdigit())
    row = text.split("\n")[int(line) - 1]
    missing = "is missing" in expected or "comes out as" in expected
    assert ("aim" in row or f"[{table}]" in row) if missing else named.strip('"').replace("�", "\\u202E") in row


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        (
            AIR,
            ["s.toml: light: is missing; a scene needs a [light] table with elevation_deg, the height of the sun"],
        ),
        (
            LIGHT,
            ['s.toml: air: is missing; a scene needs at least one [[air]] table with kind = "drops" or "crystals"'],
        ),
        (
            "air = []\n" + LIGHT,
            ['s.toml:1: air: is empty; a scene needs at least one [[air]] table with kind = "drops" or "crystals"'],
        ),
        (
            LIGHT + AIR.replace("[[air]]", "[air]"),
            ["s.toml:3: air: must be written [[air]], in double brackets: one table for each kind of particle"],
        ),
        ("air = [3]\n" + LIGHT, ["s.toml:1: air.1: must be a table, got 3"]),
        ("light = 3\n" + AIR, ["s.toml:1: light: must be a table, written [light], got 3"]),
        (
            "[light]\n" + AIR,
            [
                "s.toml:1: light.elevation_deg: is missing; give the height of the sun, or latitude_deg, longitude_deg and "
                "time"
            ],
        ),
        (LIGHT + "[[air]]\n", ['s.toml:3: air.1.kind: is missing; must be "drops" or "crystals"']),
        (LIGHT + "[[air]]\nkind = 3\n", ['s.toml:4: air.1.kind: must be "drops" or "crystals", got 3']),
        (
            LIGHT + '[[air]]\nkind = "Drop"\nradius = 3\n',
            [
                's.toml:4: air.1.kind: must be "drops" or "crystals", got "Drop"; did you mean drops?',
                "s.toml:5: air.1.radius: unknown key; did you mean radius_um?",
            ],
        ),
        (
            "elevation_deg = 3\n" + LIGHT + AIR,
            ["s.toml:1: elevation_deg: unknown key here; it belongs in [light] or in camera.aim"],
        ),
        (LIGHT + AIR + "[lights]\n", ["s.toml:5: lights: unknown key; did you mean light?"]),
    ],
)
def test_tables_that_are_missing_or_wrong(text, expected):
    assert faults(text) == expected


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("", "s.toml: is empty; a scene needs a [light] table with elevation_deg and at least one [[air]] table"),
        (
            "# nothing\n",
            "s.toml: is empty; a scene needs a [light] table with elevation_deg and at least one [[air]] table",
        ),
        (
            "\nlens = panorama\n",
            's.toml:2: is not valid TOML: no value stands here; text needs quotes, as in lens = "panorama" (column 8)',
        ),
        ("a = 1\na = 2\n", "s.toml:2: is not valid TOML: this key was given before (column 6)"),
        ("a = 1\n\na = 2", "s.toml:3: is not valid TOML: this key was given before"),
        ("[a]\n[a]\n", "s.toml:2: is not valid TOML: this table was given before (column 3)"),
        (
            "a = 1,5\n",
            "s.toml:1: is not valid TOML: something follows the value; text needs quotes, and a comma is no point "
            "(column 6)",
        ),
        (
            "[light\n",
            's.toml:1: is not valid TOML: a table name must be closed by "]" or, for a list of tables, "]]" (column 7)',
        ),
        ("a\n", 's.toml:1: is not valid TOML: a key must be followed by "=" (column 2)'),
        ("= 3\n", "s.toml:1: is not valid TOML: neither a key nor a [table] starts here (column 1)"),
        ('a = "x\n', "s.toml:1: is not valid TOML: a character that may not stand in a text (column 7)"),
        (
            'a = "c:\\data"\n',
            's.toml:1: is not valid TOML: a backslash in "text" must be doubled, or the text put in single quotes '
            "(column 10)",
        ),
        ("a = [1, 2\n", 's.toml:1: is not valid TOML: a list is not closed by "]", or lacks a comma'),
        ("a = {b = 1\n", 's.toml:1: is not valid TOML: a table is not closed by "}", or lacks a comma (column 11)'),
        ("a = 2020-02-31\n", "s.toml:1: is not valid TOML: a date that does not exist (column 5)"),
        ("a = " + "[" * 5000, "s.toml: lists or tables are nested too deeply"),
        ("a = " + "1" * 5000, "s.toml: is not valid TOML: a number has too many digits"),
        (
            "\n" + ".".join("a" * 50) + " = 1",
            "s.toml:2: a key has more than 20 parts; no key of a scene has more than 3",
        ),
    ],
    ids=lambda value: value[:30],
)
def test_text_that_is_no_scene(text, expected):
    assert faults(text) == [expected]


def test_all_faults_are_told_at_once_in_file_order():
    text = """\
titel = "x"
[light]
elevation_deg = 95
disc = "moon"
[[air]]
kind = "drops"
radius_um = 0
index = 1.3
index_table = "n.csv"
[camera]
lens = "panorama"
focal_mm = 20
width_px = "wide"
aim = { azimuth_deg = 999 }
[picture]
wavelengths_nm = [500,
  20]
bin_nm = 0
"""
    found = [fault.split(": ")[:2] for fault in faults(text)]
    assert found == [
        ["s.toml:1", "titel"],
        ["s.toml:3", "light.elevation_deg"],
        ["s.toml:4", "light.disc"],
        ["s.toml:7", "air.1.radius_um"],
        ["s.toml:9", "air.1.index_table"],
        ["s.toml:12", "camera.focal_mm"],
        ["s.toml:13", "camera.width_px"],
        ["s.toml:14", "camera.aim.azimuth_deg"],
        ["s.toml:14", "camera.aim.elevation_deg"],
        ["s.toml:17", "picture.wavelengths_nm.2"],
        ["s.toml:18", "picture.bin_nm"],
    ]


def test_thousands_of_faults_are_counted(shortest):
    found = faults(shortest + "".join(f"k{number} = 1\n" for number in range(3000)))
    assert len(found) == 101
    assert found[-1] == "s.toml: and 2900 more faults"


def test_files_that_cannot_be_read(tmp_path, shortest, monkeypatch):
    (tmp_path / "rainbow.toml").write_text(shortest)
    (tmp_path / "latin.toml").write_bytes(b'\ntitle = "caf\xe9"\n')
    (tmp_path / "large.toml").write_bytes(b"#" * 300000)
    paths = [tmp_path / name for name in ("rainbov.toml", "latin.toml", "large.toml", "none/x.toml", "a\0b")]
    found = [(fault.line, fault.message) for fault in check([tmp_path, *paths])]
    assert found == [
        (None, "is a folder, not a file"),
        (None, "there is no such file; did you mean rainbow.toml?"),
        (2, "is not UTF-8 text; save it in the encoding UTF-8"),
        (None, "is larger than 256 kB, which no scene file is"),
        (None, f"there is no folder {tmp_path / 'none'}"),
        (None, "there is no such file"),
    ]
    (long_name,) = check([tmp_path / ("x" * 400)])
    assert long_name.message == "cannot be read: file name too long"
    with pytest.raises(SceneError, match=r"did you mean rainbow\.toml"):
        load(tmp_path / "rainbov.toml")

    def refuse(*arguments, **options):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("pathlib.Path.open", refuse)
    (fault,) = check([tmp_path / "rainbow.toml"])
    assert fault == Fault(str(tmp_path / "rainbow.toml"), None, "", "cannot be read: permission denied")


def test_byte_order_mark_and_windows_line_ends(tmp_path, full):
    for name, content in (("bom", b"\xef\xbb\xbf" + full.encode()), ("crlf", full.replace("\n", "\r\n").encode())):
        (tmp_path / name).write_bytes(content)
        assert load(tmp_path / name) == from_text(full)
    (tmp_path / "crlf").write_bytes(full.replace("ground = 0.1", "ground = 2").replace("\n", "\r\n").encode())
    (fault,) = check([tmp_path / "crlf"])
    assert fault.line == full.split("\n").index("ground = 0.1") + 1


def test_all_faults_of_all_files(tmp_path, shortest):
    (tmp_path / "a.toml").write_text(shortest.replace("20", "200"))
    (tmp_path / "b.toml").write_text(shortest)
    (tmp_path / "c.toml").write_text("x")
    found = check([tmp_path / name for name in ("a.toml", "b.toml", "c.toml")])
    assert [(fault.where, fault.key) for fault in found] == [
        (str(tmp_path / "a.toml"), "light.elevation_deg"),
        (str(tmp_path / "c.toml"), ""),
    ]
    assert check([]) == []


def test_index_table_is_counted_from_the_scene(tmp_path, shortest, monkeypatch):
    (tmp_path / "glass.csv").write_text("wavelength_nm,index\n400,1.5\n")
    (tmp_path / "s.toml").write_text(shortest + 'index_table = "glass.csv"\n')
    monkeypatch.chdir(tmp_path.parent)
    scene = load(f"{tmp_path.name}/s.toml")
    assert scene.air[0].index_table == str(tmp_path / "glass.csv")
    (tmp_path / "s.toml").write_text(shortest + 'index_table = "glas.csv"\nradius_um = 0\n')
    assert [fault.message for fault in check([tmp_path / "s.toml"])] == [
        'must be the path of a CSV file, got "glas.csv": there is no such file; did you mean glass.csv?',
        "must lie between 1 and 10000 µm, got 0",
    ]
    (tmp_path / "s.toml").write_text(shortest + 'index_table = "."\n')
    assert [str(fault.line) + fault.message for fault in check([tmp_path / "s.toml"])] == [
        '6must be the path of a CSV file, got ".": is a folder, not a file',
    ]


def test_mapping_gives_the_same_scene_and_the_same_faults(shortest):
    data = {"light": {"elevation_deg": 20}, "air": [{"kind": "drops"}]}
    assert from_mapping(data) == from_text(shortest)
    with pytest.raises(SceneError) as caught:
        from_mapping({**data, "camera": {"focal_mm": 0}}, "page")
    assert str(caught.value) == "page: camera.focal_mm: must lie between 0.5 and 5000 mm, got 0"


def test_text_from_outside_is_shortened_and_printable():
    assert printable("a\x1b[31m\nb\u202e") == "a�[31m�b�"
    assert printable("x" * 50) == "x" * 39 + "…"
    assert len(shown("y" * 1000)) == 42
    assert shown(1 << 100000) == "a number of about 30104 digits"
    assert shown(-5) == "-5"
