"""Line numbers of keys, however they are written."""

import tomllib

from hypothesis import given, settings
from hypothesis import strategies as some

from skyoptics.scene.places import DEEPEST, key_lines, line_of

TEXT = '''\
top = "a # b [c] = d" # [no]
"quo.ted" = 1
'x y'."z" = 2

[light] # comment
elevation_deg = 20
long = """
[not.a.table]
key = 1 \\""" ""\"""
raw = \'\'\'
[[nor]]
\'\'\'
after = 1

[[air]]
kind = "drops"
[air.deep]
x = 1
[[air]]
kind = "drops"
orders = [
  1, # one ]
  2,
  [ 3, "]" ],
]
inline = { a = 1, b = { c = "}" }, d.e = 3 }
[[air.part]]
q = 1
[[air.part]]
q = 2
[ camera . "aim" ]
azimuth_deg = 1979-05-27T07:32:00Z
list = [ { a = 1 },
  { a = 2 } ]
empty = []
none = {}
last = 0x1F'''


def test_every_key_has_its_line():
    rows = TEXT.split("\n")
    lines = key_lines(TEXT)

    def row(*path):
        return rows[lines[path] - 1]

    assert lines["top",] == 1
    assert lines["quo.ted",] == 2
    assert lines["x y", "z"] == lines["x y",] == 3
    assert row("light") == "[light] # comment"
    assert row("light", "elevation_deg") == "elevation_deg = 20"
    assert row("light", "raw").startswith("raw")
    assert row("light", "after") == "after = 1"
    assert ("light", "key") not in lines
    assert ("nor",) not in lines
    assert lines["air",] == lines["air", 0] == rows.index("[[air]]") + 1
    assert row("air", 0, "deep", "x") == "x = 1"
    assert lines["air", 1] == rows.index("[[air]]", rows.index("[[air]]") + 1) + 1
    assert row("air", 1, "orders", 0) == "  1, # one ]"
    assert row("air", 1, "orders", 2, 1) == '  [ 3, "]" ],'
    assert row("air", 1, "inline", "b", "c") == row("air", 1, "inline", "d", "e") == row("air", 1, "inline")
    assert row("air", 1, "part", 1, "q") == "q = 2"
    assert row("camera", "aim") == '[ camera . "aim" ]'
    assert row("camera", "aim", "list", 1, "a") == "  { a = 2 } ]"
    assert row("camera", "aim", "last") == "last = 0x1F"


def test_nearest_line_for_what_is_not_there():
    lines = key_lines(TEXT)
    assert line_of(("light", "missing"), lines) == lines["light",]
    assert line_of(("air", 1, "orders", 7), lines) == lines["air", 1, "orders"]
    assert line_of(("nowhere",), lines) is None
    assert line_of((), lines) is None


def test_broken_text_gives_what_could_be_read():
    assert key_lines("a = 1\nb = [") == {("a",): 1, ("b",): 2}
    assert key_lines("a = 1\n[") == {("a",): 1}
    assert key_lines("") == {}
    assert ("a",) in key_lines("a = " + "[" * 100000)


def paths_of(data, path=()):
    """Yield every path of parsed data down to the depth that is noted."""
    if len(path) >= DEEPEST:
        return
    entries = data.items() if isinstance(data, dict) else enumerate(data) if isinstance(data, list) else ()
    for key, value in entries:
        yield (*path, key)
        yield from paths_of(value, (*path, key))


def test_no_key_that_tomllib_reads_is_without_a_line(texts):
    for text in (TEXT, *texts):
        lines = key_lines(text)
        assert lines.keys() == set(paths_of(tomllib.loads(text)))


SCALARS = some.sampled_from(
    ["1", "-2.5", "true", '"a # ]"', "'b } , '", '"""\nc"\n"""', "'''d\n'''", "1979-05-27 07:32:00", '""']
)
BLANKS = some.sampled_from(["", " ", "\n  ", " # ] }\n"])


@some.composite
def values(draw, depth=3):
    """Draw a TOML value as text."""
    form = draw(some.integers(0, 3)) if depth else 0
    if form == 2:
        entries = [draw(BLANKS) + draw(values(depth - 1)) + draw(BLANKS) for _ in range(draw(some.integers(0, 3)))]
        return "[" + ",".join(entries) + draw(BLANKS) + "]"
    if form == 3:
        keys = draw(some.lists(some.sampled_from(["a", '"b.c"', "d.e", "'f' . g", "h"]), unique=True, max_size=3))
        return "{ " + ", ".join(f"{key} = {draw(values(depth - 1)).replace(chr(10), '')}" for key in keys) + " }"
    return draw(SCALARS)


@settings(max_examples=100, deadline=None)
@given(some.lists(values(), max_size=6), some.sampled_from(["", "[t]", "[[t]]\n[[t]]", "[ t . 'u v' ]"]))
def test_random_documents_keep_all_their_lines(drawn, header):
    text = header + "\n" + "".join(f"k{number}.x = {value} # {number}\n" for number, value in enumerate(drawn))
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError:
        return  # Taking line ends out of a comment inside a table can break it; nothing is promised then.
    lines = key_lines(text)
    assert lines.keys() == set(paths_of(data))
    rows = text.split("\n")
    for path, line in lines.items():
        if isinstance(path[-1], str) and path[-1].startswith("k"):
            assert rows[line - 1].startswith(path[-1])
