import os

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skyoptics.errors import DataFileError
from skyoptics.materials import table

GOOD = "wavelength_nm,n,k\n400,1.34,1e-9\n700,1.33,4e-9\n"


def write(folder, text, name="liquid.csv"):
    path = folder / name
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return path


@pytest.mark.parametrize(
    "text",
    [
        GOOD,
        GOOD.replace("\n", "\r\n"),
        GOOD.replace("\n", "\r"),
        "\ufeff" + GOOD,
        GOOD.replace(",", ";"),
        "# made by hand\n\n" + GOOD.replace(",", " , ") + "\n# end\n   \n",
        GOOD.rstrip("\n"),
        "K;N;Wavelength_um\n1e-9;1.34;0.4\n4e-9;1.33;0.7",
    ],
)
def test_forms_that_mean_the_same(tmp_path, text):
    read, plain = table.read(write(tmp_path, text)), table.read(write(tmp_path, GOOD, "plain.csv"))
    np.testing.assert_allclose(read.wavelength, [4e-7, 7e-7], rtol=1e-15)
    np.testing.assert_array_equal(read.index, [1.34, 1.33])
    np.testing.assert_array_equal(read.absorption, [1e-9, 4e-9])
    if "um" not in text:
        assert read.digest == plain.digest


def test_digest_follows_the_values(tmp_path):
    first = table.read(write(tmp_path, GOOD)).digest
    assert len(first) == 16
    assert table.read(write(tmp_path, GOOD.replace("1.34", "1.3400001"))).digest != first
    assert table.read(write(tmp_path, GOOD.replace("400", "401"))).digest != first


def test_absorption_is_zero_where_no_column_gives_it(tmp_path):
    data = table.read(write(tmp_path, "wavelength_nm,n\n400,1.34\n700,1.33\n"))
    n, k = data.interpolate(np.array([4e-7, 5.5e-7, 7e-7]))
    np.testing.assert_allclose(n, [1.34, 1.335, 1.33], rtol=1e-14)
    np.testing.assert_array_equal(k, 0.0)


def test_interpolation_of_absorption(tmp_path):
    data = table.read(write(tmp_path, "wavelength_nm,n,k\n400,1.3,1e-9\n500,1.3,4e-9\n600,1.3,0\n700,1.3,2e-9\n"))
    _, k = data.interpolate(np.array([4e-7, 4.5e-7, 5e-7, 5.5e-7, 6e-7, 6.5e-7, 7e-7]))
    np.testing.assert_allclose(k, [1e-9, 2e-9, 4e-9, 2e-9, 0.0, 1e-9, 2e-9], rtol=1e-9, atol=1e-20)


FAULTS = [
    ("", r"liquid\.csv: no data; expected a header line such as wavelength_nm,n,k"),
    ("# only a comment\n\n", "no data"),
    ("wavelength_nm,n,k\n", r"0 row\(s\) of data; an index table needs at least 2"),
    ("wavelength_nm,n,k\n400,1.3,0\n", r"1 row\(s\) of data"),
    (
        "wavelenght_nm,n\n400,1.3\n500,1.3\n",
        r"liquid\.csv:1: unknown column 'wavelenght_nm'; did you mean wavelength_nm\?",
    ),
    (
        "#x\nwavelength_nm,refractive\n400,1.3\n",
        r"liquid\.csv:2: unknown column 'refractive' \(allowed: wavelength_nm or",
    ),
    ("wavelength_nm,n,\n400,1.3,\n", "column without a name"),
    ("wavelength_nm,n,n\n400,1.3,1.3\n", "column n given twice"),
    ("wavelength_nm,wavelength_um,n\n400,0.4,1.3\n", "two wavelength columns"),
    ("n,k\n1.3,0\n", "no wavelength column"),
    ("wavelength_nm,k\n400,0\n", "no column n"),
    (GOOD.replace("1.34", "abc"), r"liquid\.csv:2: n is 'abc'; a finite number is needed"),
    (GOOD.replace("1.34", ""), r"liquid\.csv:2: n is ''"),
    (GOOD.replace("1.34", "nan"), r"liquid\.csv:2: n is 'nan'"),
    (GOOD.replace("1.34", "inf"), r"liquid\.csv:2: n is 'inf'"),
    (GOOD.replace("1.34", "1_3"), r"liquid\.csv:2: n is '1_3'"),
    (GOOD.replace("1.34", "0"), r"liquid\.csv:2: n is 0; allowed are 0.1 to 10"),
    (GOOD.replace("1.34", "-1.3"), r"n is -1.3; allowed"),
    (GOOD.replace("1.34", "1340"), r"n is 1340; allowed"),
    (GOOD.replace("4e-9", "-4e-9"), r"liquid\.csv:3: k is -4e-9; allowed are 0 to 10; absorption is positive here"),
    (GOOD.replace("_nm", "_um"), r"liquid\.csv:2: wavelength_um is 400; allowed are 0.05 to 100; is the unit"),
    (GOOD.replace("400", "0.4"), r"wavelength_nm is 0.4; allowed are 50 to 100000; is the unit"),
    (GOOD.replace("700", "400"), r"liquid\.csv:3: wavelength given twice"),
    (GOOD.replace("700", "300"), r"liquid\.csv:3: wavelength out of order; rows must stand in ascending order"),
    (
        GOOD.replace("400,", "400,5,"),
        r"liquid\.csv:2: 4 value\(s\) where the header names 3 columns; write a decimal point",
    ),
    (GOOD.replace(",1.34", ""), r"liquid\.csv:2: 2 value\(s\) where the header names 3 columns$"),
    (GOOD.replace(",", ";").replace("1.34", "1,34"), r"n is '1,34'; a finite number is needed; write a decimal point"),
    (GOOD.encode("utf-16"), r"liquid\.csv:1: not UTF-8 text"),
    (GOOD.encode() + b"# 20 \xb0C\n", r"liquid\.csv:4: not UTF-8 text; save it as CSV in UTF-8"),
    (b"\x89PNG\r\n\x1a\n\x00\x00", "not UTF-8"),
]


@pytest.mark.parametrize(("text", "message"), FAULTS)
def test_faults_name_file_line_and_what_is_allowed(tmp_path, text, message):
    with pytest.raises(DataFileError, match=message):
        table.read(write(tmp_path, text))


def test_all_faults_at_once_up_to_twenty(tmp_path):
    text = "wavelength_nm,n,k\n400,x,y\n390,1.3,0\n380,1.3,0\n"
    with pytest.raises(DataFileError) as caught:
        table.read(write(tmp_path, text))
    assert [line.split(":")[1] for line in str(caught.value).splitlines()] == ["2", "2", "4"]
    with pytest.raises(DataFileError) as caught:
        table.read(write(tmp_path, "wavelength_nm,n\n" + "x,1.3\n" * 30))
    lines = str(caught.value).splitlines()
    assert len(lines) == 21
    assert lines[-1].endswith("and 10 more")


def test_files_that_cannot_be_opened(tmp_path):
    with pytest.raises(DataFileError, match="no such file"):
        table.read(tmp_path / "missing.csv")
    with pytest.raises(DataFileError, match="is a folder"):
        table.read(tmp_path)
    with pytest.raises(DataFileError, match="cannot be read"):
        table.read("a\0b.csv")


@pytest.mark.skipif(not hasattr(os, "geteuid") or os.geteuid() == 0, reason="root may read everything")
def test_file_without_permission(tmp_path):
    path = write(tmp_path, GOOD)
    path.chmod(0)
    with pytest.raises(DataFileError, match="may not be read; check its permissions"):
        table.read(path)


def test_permission_error_in_words(tmp_path, monkeypatch):
    def refuse(*_args, **_kwargs):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("builtins.open", refuse)
    with pytest.raises(DataFileError, match="may not be read; check its permissions"):
        table.read(tmp_path / "any.csv")


def test_oversized_file(tmp_path):
    path = write(tmp_path, b"#" * 10_000_001)
    with pytest.raises(DataFileError, match="larger than 10 MB"):
        table.read(path)


@settings(deadline=None)
@given(st.binary(max_size=200))
def test_any_bytes_give_a_table_or_a_text(tmp_path_factory, raw):
    path = tmp_path_factory.getbasetemp() / "noise.csv"
    path.write_bytes(raw)
    text = str(path)
    try:
        table.read(path)
    except DataFileError as error:
        text = str(error)
    assert str(path) in text


CELL = st.sampled_from(["400", "500", "0.5", "-1", "nan", "", "x", "1.3", "1e400", "9" * 400, "é", "1;2"])


@settings(deadline=None)
@given(st.lists(st.lists(CELL, max_size=4).map(",".join), max_size=4))
def test_any_rows_give_a_table_or_a_text(tmp_path_factory, rows):
    path = tmp_path_factory.getbasetemp() / "rows.csv"
    path.write_text("\n".join(["wavelength_nm,n,k", *rows]), encoding="utf-8")
    try:
        data = table.read(path)
    except DataFileError:
        return
    assert len(data.wavelength) >= 2
    assert np.all(np.diff(data.wavelength) > 0)
