"""Tables of points."""

import pytest

from skyoptics.errors import DataFileError
from skyoptics.planning.photo_points import read_points

SHAPE = (100, 200)


def read(tmp_path, text):
    path = tmp_path / "points.csv"
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return read_points(path, SHAPE)


def test_groups_by_arc_and_order(tmp_path):
    found = read(tmp_path, "\ufeffX, y ,arc,order\n1,2,low,0\n3,4,low,0\n\n5,6.5,high,\n7,8,low,1\n")
    assert [(group.arc, group.order, group.xy.tolist()) for group in found] == [
        ("low", 0, [[1, 2], [3, 4]]),
        ("high", None, [[5, 6.5]]),
        ("low", 1, [[7, 8]]),
    ]
    assert read(tmp_path, "x;y\r\n1;2\r\n")[0].xy.tolist() == [[1, 2]]


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "is empty"),
        ("x,y\n", "holds no point"),
        ("x,yy\n1,2\n", "no column y; did you mean yy"),
        ("a,b\n1,2\n", "no column x; its header is a, b"),
        ("x,y,ordr\n1,2,0\n", "unknown column ordr; did you mean order"),
        ("x,x,y\n1,1,2\n", "twice"),
        ("x,y\n1,two\n", "line 2: y is 'two'; a number of pixels is needed"),
        ("x,y\n1\n", "line 2: y is ''"),
        ("x,y\n1,nan\n", "line 2: y is nan, outside"),
        ("x,y\n1,2\n200,3\n", "line 3: x is 200, outside the picture of 200 × 100 pixels: 0 to 199"),
        ("x,y,order\n1,2,first\n", "order is 'first'; 0 for the bow"),
        ("x,y,order\n1,2,21\n", "up to 20"),
        ('x,y\n"1,2\n', "no CSV table"),
        (b"\xff\xfe\x00x", "no text in UTF-8"),
        ("x,y\n" + "-5,3\n" * 9, "and 4 more"),
    ],
)
def test_faults_are_named(tmp_path, text, words):
    with pytest.raises(DataFileError) as caught:
        read(tmp_path, text)
    assert words in str(caught.value)


def test_a_missing_file_gets_its_neighbour(tmp_path):
    (tmp_path / "points.csv").write_text("x,y\n1,2\n")
    with pytest.raises(DataFileError, match=r"did you mean points\.csv"):
        read_points(tmp_path / "point.csv", SHAPE)
