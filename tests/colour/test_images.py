import io
import json
import os
import subprocess
import sys
import zlib

import numpy as np
import OpenEXR
import png
import pytest
import tifffile
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp
from PIL import Image

from skyoptics.colour import display, images
from skyoptics.errors import DomainError, ResourceError

TEXT = {"Title": "Bow over the Åland sea, θ = 42°", "Software": "skyoptics 0.1", "Scene hash": "ab12"}


def read_png(data):
    """Return (ny, nx, 3) integers and the depth, by pypng, which checks every checksum."""
    width, height, rows, info = png.Reader(bytes=data).asDirect()
    return np.array([list(row) for row in rows]).reshape(height, width, 3), info["bitdepth"]


def chunks(data):
    return list(png.Reader(bytes=data).chunks())


def picture(height=70, width=45):
    """More than one block of rows, odd sizes."""
    return np.random.default_rng(1).uniform(0.0, 1.0, (height, width, 3))


def test_sixteen_bits_are_exact():
    linear = picture()
    values, depth = read_png(images.png_bytes(linear, bits=16))
    assert depth == 16
    np.testing.assert_allclose(values, 65535.0 * display.encode(linear), rtol=0, atol=0.51)
    encoded, _ = read_png(images.png_bytes(linear, bits=16, encoded=True))
    np.testing.assert_allclose(encoded, 65535.0 * linear, rtol=0, atol=0.51)


def test_eight_bits_stay_within_one_step():
    linear = picture()
    values, depth = read_png(images.png_bytes(linear))
    assert depth == 8
    assert np.abs(values - 255.0 * display.encode(linear)).max() < 1.0
    np.testing.assert_array_equal(values, np.asarray(Image.open(io.BytesIO(images.png_bytes(linear)))))


@settings(max_examples=25, deadline=None)
@given(hnp.arrays(np.uint8, st.tuples(st.integers(1, 9), st.integers(1, 9), st.just(3))))
def test_exact_values_pass_the_dither(values):
    result, _ = read_png(images.png_bytes(values / 255.0, encoded=True))
    assert np.array_equal(result, values)


def test_black_and_white_stay_and_what_is_outside_is_clipped():
    flat = np.zeros((130, 60, 3))
    assert not read_png(images.png_bytes(flat))[0].any()
    assert (read_png(images.png_bytes(flat + 1.0))[0] == 255).all()
    odd = np.array([[[np.nan, -1.0, 7.0]]])
    for bits in (8, 16):
        assert read_png(images.png_bytes(odd, bits=bits))[0].ravel().tolist() == [0, 0, 2**bits - 1]


def test_dither_keeps_the_mean_of_a_smooth_sky():
    # 3 steps of 8 bits across 1024 pixels: rounding makes bands 340 pixels wide, off by up to half a step.
    ramp = np.repeat(np.repeat(np.linspace(100.0, 103.0, 1024)[None, :, None], 64, axis=0), 3, axis=2) / 255.0
    values, _ = read_png(images.png_bytes(ramp, encoded=True))
    blocks = values.reshape(4, 16, 64, 16, 3).mean(axis=(1, 3))
    wanted = (255.0 * ramp).reshape(4, 16, 64, 16, 3).mean(axis=(1, 3))
    assert np.abs(blocks - wanted).max() < 0.05
    assert np.abs(np.round(wanted) - wanted).max() > 0.45
    # Luminance is quieter than any one channel: the three thresholds are spread.
    noise = values - 255.0 * ramp
    assert noise.mean(axis=2).std() < 0.6 * noise[..., 0].std()


def test_dither_threshold_is_even_and_fixed():
    threshold = images.dither_threshold(np.arange(256), np.arange(256))
    assert 0.0 < threshold.min() < 0.002
    assert 0.998 < threshold.max() < 1.0
    counts, _ = np.histogram(threshold[..., 0], 16, (0.0, 1.0))
    assert np.abs(counts / counts.mean() - 1.0).max() < 0.02
    assert np.array_equal(threshold[64:], images.dither_threshold(np.arange(64, 256), np.arange(256)))
    assert images.png_bytes(picture()) == images.png_bytes(picture())


def test_chunks_are_those_of_the_png_specification():
    found = chunks(images.png_bytes(picture(), text=TEXT))
    kinds = [kind for kind, _ in found]
    assert kinds[:4] == [b"IHDR", b"sRGB", b"gAMA", b"cHRM"]
    assert kinds[-1] == b"IEND"
    assert kinds.count(b"tEXt") == 2
    assert kinds.count(b"iTXt") == 1
    assert max(i for i, kind in enumerate(kinds) if kind.endswith(b"Xt")) < kinds.index(b"IDAT")
    image = Image.open(io.BytesIO(images.png_bytes(picture(), text=TEXT)))
    image.load()
    assert image.text == TEXT
    assert image.info["gamma"] == pytest.approx(0.45455)


@settings(max_examples=50, deadline=None)
@given(st.text(st.characters(exclude_characters="\0", exclude_categories=["Cs"]), max_size=60))
def test_any_text_comes_back(value):
    image = Image.open(io.BytesIO(images.png_bytes(np.zeros((1, 1, 3)), text={"Comment": value})))
    image.load()
    assert image.text["Comment"] == value


@pytest.mark.parametrize("key", ["", " Title", "Title ", "a  b", "x" * 80, "θ", "a\nb"])
def test_names_that_png_forbids_are_refused(key):
    with pytest.raises(DomainError, match="1 to 79"):
        images.png_bytes(np.zeros((1, 1, 3)), text={key: "x"})


def test_filters_help():
    y, x = np.meshgrid(np.linspace(-1, 1, 200), np.linspace(-1, 1, 300), indexing="ij")
    smooth = 0.2 + 0.5 * np.exp(-np.stack([x**2 + y**2, x**2 + 1.1 * y**2, 1.2 * x**2 + y**2], axis=-1))
    data = images.png_bytes(smooth, bits=16)
    raw = np.round(65535.0 * display.encode(smooth)).astype(">u2").tobytes()
    assert len(data) < 0.7 * len(zlib.compress(raw, 6))  # 0.59 measured


def test_exr_keeps_scene_luminance(tmp_path):
    linear = np.random.default_rng(3).lognormal(8.0, 3.0, (20, 31, 3)).astype(np.float32)
    linear[0, 0] = [-3.0, 2.0, np.nan]
    images.write_exr(tmp_path / "a.exr", linear, text=TEXT)
    with OpenEXR.File(str(tmp_path / "a.exr")) as file:
        header = dict(file.header())  # emptied when the file is closed
        values = file.channels()["RGB"].pixels
    assert values.dtype == np.float32
    expected = linear.copy()
    expected[0, 0, 2] = 0.0
    assert np.array_equal(values, expected)
    assert {key: header[key] for key in TEXT} == TEXT
    assert header["whiteLuminance"] == 1.0
    np.testing.assert_allclose(
        header["chromaticities"], (0.64, 0.33, 0.30, 0.60, 0.15, 0.06, 0.3127, 0.3290), rtol=1e-6
    )
    assert os.listdir(tmp_path) == ["a.exr"]


@pytest.mark.parametrize("shape", [(20, 31, 3), (20, 31)])
def test_tiff_keeps_every_bit(tmp_path, shape):
    values = np.random.default_rng(3).normal(0.0, 1e4, shape).astype(np.float32)
    values[2, 3] = np.nan
    images.write_tiff(tmp_path / "a.tiff", values, text=TEXT)
    with tifffile.TiffFile(tmp_path / "a.tiff") as file:
        assert np.array_equal(file.asarray(), values, equal_nan=True)
        assert json.loads(file.pages[0].description) == TEXT
        assert file.pages[0].software == "skyoptics 0.1"
    assert os.listdir(tmp_path) == ["a.tiff"]


WRITERS = {"a.png": images.write_png, "a.exr": images.write_exr, "a.tiff": images.write_tiff}


@pytest.mark.parametrize("name", WRITERS)
def test_files_are_replaced_and_readable_by_others(tmp_path, name):
    path = tmp_path / name
    path.write_bytes(b"old")
    WRITERS[name](path, picture(4, 4))
    assert path.stat().st_size > 50
    (tmp_path / "plain").write_bytes(b"")
    assert path.stat().st_mode == (tmp_path / "plain").stat().st_mode
    assert sorted(os.listdir(tmp_path)) == [name, "plain"]


@pytest.mark.parametrize("name", WRITERS)
def test_missing_folder_and_folder_in_the_way(tmp_path, name):
    with pytest.raises(ResourceError, match="nowhere does not exist; make it"):
        WRITERS[name](tmp_path / "nowhere" / name, picture(4, 4))
    (tmp_path / name).mkdir()
    with pytest.raises(ResourceError, match="is a folder"):
        WRITERS[name](tmp_path / name, picture(4, 4))
    assert os.listdir(tmp_path) == [name]


@pytest.mark.parametrize("name", WRITERS)
def test_a_full_disk_leaves_the_old_file_and_nothing_else(tmp_path, name):
    # A limit on file size stands in for the full disk: the same failing write, seen from the program.
    pytest.importorskip("resource")
    (tmp_path / name).write_bytes(b"old")
    code = (
        "import resource, signal, sys\n"
        "import numpy as np\n"
        "from skyoptics.colour import images\n"
        "from skyoptics.errors import ResourceError\n"
        "signal.signal(signal.SIGXFSZ, signal.SIG_IGN)\n"
        "resource.setrlimit(resource.RLIMIT_FSIZE, (20_000, 20_000))\n"
        "write = {'png': images.write_png, 'exr': images.write_exr, 'iff': images.write_tiff}[sys.argv[1][-3:]]\n"
        "try:\n"
        "    write(sys.argv[1], np.random.default_rng(1).uniform(0, 1, (200, 200, 3)))\n"
        "except ResourceError as error:\n"
        "    print(error)\n"
    )
    done = subprocess.run([sys.executable, "-c", code, str(tmp_path / name)], capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    assert done.stdout.startswith(f"{name}: ")
    assert "choose another folder" in done.stdout
    assert os.listdir(tmp_path) == [name]
    assert (tmp_path / name).read_bytes() == b"old"


@pytest.mark.parametrize(
    ("failure", "wording"),
    [
        (OSError(28, "No space left on device"), "the disk is full"),
        (PermissionError(13, "Permission denied"), "is not writable"),
        (OSError(30, "Read-only file system"), "is not writable"),
        (OSError(5, "Input/output error"), "Input/output error"),
    ],
)
def test_failures_of_the_file_system_are_worded(tmp_path, failure, wording):
    def write():
        with images.replacing(tmp_path / "a.png") as temporary:
            temporary.write_bytes(b"half")
            raise failure

    with pytest.raises(ResourceError, match=wording):
        write()
    assert os.listdir(tmp_path) == []


def test_an_interrupted_write_leaves_nothing(tmp_path):
    path = tmp_path / "a.png"
    path.write_bytes(b"old")

    def write():
        with images.replacing(path) as temporary:
            assert temporary.parent == tmp_path
            assert temporary.suffix == ".png"
            temporary.write_bytes(b"half")
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        write()
    assert os.listdir(tmp_path) == ["a.png"]
    assert path.read_bytes() == b"old"


def test_wrong_shapes_are_refused_before_anything_is_written(tmp_path):
    for shape in ((4, 4), (4, 4, 4), (0, 4, 3)):
        with pytest.raises(DomainError, match=r"shape \(ny, nx, 3\)"):
            images.write_png(tmp_path / "a.png", np.zeros(shape))
    with pytest.raises(DomainError, match="8 or 16 bits"):
        images.write_png(tmp_path / "a.png", np.zeros((2, 2, 3)), bits=12)
    with pytest.raises(DomainError, match="zero byte"):
        images.write_exr(tmp_path / "a.exr", np.zeros((2, 2, 3)), text={"Title": "a\0b"})
    with pytest.raises(DomainError, match=r"\(ny, nx\) or"):
        images.write_tiff(tmp_path / "a.tiff", np.zeros(4))
    assert os.listdir(tmp_path) == []
