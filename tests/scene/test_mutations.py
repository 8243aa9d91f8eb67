"""Whatever is done to a scene file, the answer is a scene or a SceneError."""

import random
import re
import string
import time
from collections.abc import Callable

from hypothesis import given, settings
from hypothesis import strategies as some

from skyoptics.errors import SceneError
from skyoptics.scene.digest import scene_hash
from skyoptics.scene.load import LARGEST, from_mapping, from_text, load
from skyoptics.scene.model import Scene

VALUES = [
    "0", "-1", "1e308", "-1e400", "nan", "+inf", "true", '""', '"sun"', "[]", "{}", "[[]]", "[1, 2]", "[nan, 1]",
    "1979-05-27", "07:32:00", "1" * 400, "0x" + "f" * 5000, "1" * 5000, "'" + "x" * 3000 + "'", '"\\u0000\\u202e"',
    "{ azimuth_deg = 1 }", "{ kind = \"drops\" }", '[{ kind = "drops" }, 3]', "[" * 300 + "]" * 300,
    "{a=" * 40 + "1" + "}" * 40,
    "0.5", "30000", "1e-320", '"../../x.csv"', '"panorama"', '"layer"', "a.b.c", '"""\nx\n"""',
]  # fmt: skip
KEYS = [
    "light",
    "air",
    "camera",
    "aim",
    "kind",
    "index",
    "lens",
    "sensor_mm",
    '"x y"',
    "title",
    "orders",
    "focal_mm",
    "é",
]


def answer(call: Callable[[], Scene]) -> Scene | SceneError:
    """Return a scene or the SceneError that stood in its way; let every other exception through."""
    try:
        return call()
    except SceneError as error:
        return error


def mutated(text: str, draw: random.Random) -> bytes:
    """Return a scene text after one to four accidents."""
    content = text.encode()
    for _ in range(draw.randint(1, 4)):
        lines = content.split(b"\n")
        row = draw.randrange(len(lines))
        match draw.randrange(11):
            case 0 if content:
                place = draw.randrange(len(content))
                content = content[:place] + bytes([content[place] ^ 1 << draw.randrange(8)]) + content[place + 1 :]
            case 1:
                content = b"\n".join(lines[:row] + lines[row + 1 :])
            case 2:
                content = b"\n".join(lines[: row + 1] + lines[row:])
            case 3:
                content = b"\n".join(draw.sample(lines, len(lines)))
            case 4 | 5 | 6:
                value = draw.choice(VALUES).encode()
                lines[row] = re.sub(rb"=.*", lambda found, value=value: b"= " + value, lines[row])
                content = b"\n".join(lines)
            case 7:
                new = f"{draw.choice(KEYS)}{draw.choice(['', '.x', '.kind'])} = {draw.choice(VALUES)}".encode()
                content = b"\n".join([*lines[:row], new, *lines[row:]])
            case 8:
                name = draw.choice(KEYS) + draw.choice(["", ".x", ".aim"])
                new = draw.choice([f"[{name}]", f"[[{name}]]", f"[{name}"]).encode()
                content = b"\n".join([*lines[:row], new, *lines[row:]])
            case 9:
                content = content[: draw.randrange(len(content) + 1)]
            case _:
                place = draw.randrange(len(content) + 1)
                noise = "".join(chr(draw.choice([draw.randrange(128), draw.randrange(0xD800)])) for _ in range(5))
                content = content[:place] + noise.encode() + content[place:]
    return content


def test_two_thousand_mutated_files(tmp_path, texts):
    """Seeded, so that a failure repeats."""
    draw = random.Random(20)
    path = tmp_path / "mutated.toml"
    scenes = faulty = 0
    slowest = 0.0
    for number in range(2000):
        path.write_bytes(mutated(texts[number % len(texts)], draw))
        overrides = draw.choices(
            [f"{draw.choice(KEYS)}.{draw.choice(KEYS)}={draw.choice(VALUES)}"], k=draw.randrange(2)
        )
        start = time.process_time()
        found = answer(lambda overrides=overrides: load(path, overrides))
        slowest = max(slowest, time.process_time() - start)
        if isinstance(found, Scene):
            scenes += 1
            assert from_mapping(found.model_dump()) == found
            assert len(scene_hash(found)) == 64
            continue
        assert found.faults
        faulty += 1
        last_line = path.read_bytes().count(b"\n") + 1
        for fault in found.faults:
            words = str(fault)
            assert words.isprintable(), words
            assert len(words) < 1000
            assert not re.search(r"Input should|pydantic|validat|Traceback|ValueError|Extra inputs", words), words
            assert fault.line is None or 1 <= fault.line <= last_line
    assert scenes > 20
    assert faulty > 1000
    assert slowest < 2.0


PLAIN = some.one_of(
    some.none(),
    some.booleans(),
    some.integers(),
    some.floats(),
    some.text(max_size=20),
    some.sampled_from(["sun", "drops", "panorama", "rectilinear", "layer", "1931"]),
    some.dates(),
)
NAMES = some.one_of(
    some.text(string.printable, max_size=8),
    some.sampled_from(
        ["elevation_deg", "azimuth_deg", "kind", "index", "index_table", "lens", "aim", "focal_mm", "orders"]
    ),
)
TREES = some.recursive(PLAIN, lambda inner: some.lists(inner, max_size=4) | some.dictionaries(NAMES, inner, max_size=5))
TABLES = some.dictionaries(some.sampled_from(["light", "air", "camera", "picture", "medium", "title", "x"]), TREES)


@settings(max_examples=100, deadline=None)
@given(TABLES)
def test_any_nested_data(data):
    assert str(answer(lambda: from_mapping(data)))


@settings(max_examples=100, deadline=None)
@given(some.text(max_size=200), some.lists(some.text(max_size=30), max_size=2))
def test_any_text_and_overrides(text, overrides):
    assert str(answer(lambda: from_text(text, overrides=overrides)))


def test_large_files_are_answered_quickly(shortest):
    """Texts whose cost could grow by the square of their size."""
    count = LARGEST // 16
    hostile = [
        ".".join("a" * count) + " = 1",
        "x = {" + ".".join("a" * count) + " = 1}",
        "x = [" + "1," * count + "]",
        "[[air]]\n" * count,
        shortest + "".join(f"k{number} = 1\n" for number in range(count)),
        shortest + "[picture]\nwavelengths_nm = [" + ", ".join(str(number * 1e-3) for number in range(count)) + "]",
        "x = " + "[" * count,
        "x = " + "{a = " * count,
        '"' + "a" * count + '" = 1',
        "x = '''" + "'\n" * count,
        'x = "' + "\\" * count,
    ]
    for text in hostile:
        start = time.process_time()
        found = answer(lambda text=text: from_text(text))
        assert isinstance(found, SceneError), text[:50]
        assert len(str(found)) < 50000
        assert time.process_time() - start < 3.0
