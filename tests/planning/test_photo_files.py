"""Photographs as files: what is read, what is refused before decoding, what a copy keeps.

EXIF blocks are written with Pillow and read back with exifread, an independent reader.
"""

import io
import struct
from datetime import UTC, datetime, timedelta, timezone

import exifread
import numpy as np
import pytest
from PIL import Image, ImageOps
from PIL.TiffImagePlugin import IFDRational as Ratio

from skyoptics.errors import DataFileError, DomainError
from skyoptics.planning import photo_light, photograph
from skyoptics.planning.photo_exif import Exif

INNER = {
    0x920A: Ratio(24),
    0xA405: 36,
    0x9003: "2027:05:12 19:40:05",
    0x9011: "+02:00",
    0x927C: b"maker's own",
    0xA002: 60,
    0xA003: 40,
}
PLACE = {
    1: "S",
    2: (Ratio(47), Ratio(12), Ratio(30)),
    3: "W",
    4: (Ratio(8), Ratio(54), Ratio(0)),
    5: b"\x01",
    6: Ratio(25, 2),
    7: (Ratio(17), Ratio(40), Ratio(3)),
    29: "2027:05:12",
}


def photo(path, inner=INNER, place=PLACE, orientation=None, size=(60, 40), mode="RGB", **more):
    """Write a JPEG file and return its picture."""
    values = np.random.default_rng(1).integers(0, 255, (5, 7, 3), dtype=np.uint8)
    image = Image.fromarray(values).resize(size, Image.Resampling.BICUBIC).convert(mode)
    block = Image.Exif()
    block[0x0110] = "Invented 1"
    if orientation is not None:
        block[0x0112] = orientation
    if inner:
        block[0x8769] = dict(inner)
    if place:
        block[0x8825] = dict(place)
    image.save(path, "JPEG", quality=95, exif=block.tobytes(), **more)
    return image


def test_entries_are_read(tmp_path):
    photo(tmp_path / "a.jpg", {**INNER, 0xA20E: 4000.0, 0xA210: 3, 0xA002: 9600, 0xA003: 6400})
    found = photograph.look(tmp_path / "a.jpg")
    exif = found.exif
    assert found.shape == (40, 60)
    assert (exif.focal_mm, exif.equivalent_mm, exif.recorded) == (24.0, 36.0, (9600, 6400))
    assert exif.sensor_width_mm == pytest.approx(24.0)  # 9600 pixels at 4000 a centimetre
    assert exif.taken == datetime(2027, 5, 12, 19, 40, 5, tzinfo=timezone(timedelta(hours=2)))
    assert exif.satellite_time == datetime(2027, 5, 12, 17, 40, 3, tzinfo=UTC)
    assert (exif.latitude_deg, exif.longitude_deg, exif.height_m) == pytest.approx((-47.0 - 12.5 / 60.0, -8.9, -12.5))


def test_senseless_entries_count_as_missing(tmp_path):
    photo(
        tmp_path / "a.jpg",
        {0x920A: 0.0, 0xA405: 0, 0x9003: "0000:00:00 00:00:00"},
        {2: (91.0, 0.0, 0.0)},
        orientation=77,
    )
    exif = photograph.look(tmp_path / "a.jpg").exif
    assert (exif.focal_mm, exif.equivalent_mm, exif.taken, exif.latitude_deg) == (None, None, None, None)
    assert exif.orientation == 1


@pytest.mark.parametrize("orientation", range(1, 9))
def test_pixels_are_those_of_the_upright_picture(tmp_path, orientation):
    photo(tmp_path / "a.jpg", orientation=orientation)
    found = photograph.look(tmp_path / "a.jpg")
    with Image.open(tmp_path / "a.jpg") as image:
        upright = np.asarray(ImageOps.exif_transpose(image))
    assert np.array_equal(photograph.pixels(found), upright)
    assert found.shape == upright.shape[:2]


@pytest.mark.parametrize("keep", [False, True])
def test_a_copy_keeps_entries_and_the_place_only_if_asked(tmp_path, keep):
    photo(tmp_path / "a.jpg", orientation=6, icc_profile=b"profile" * 9)
    before = (tmp_path / "a.jpg").read_bytes()
    found = photograph.look(tmp_path / "a.jpg")
    photograph.write_copy(found, photograph.pixels(found), tmp_path / "b.jpg", keep)
    assert (tmp_path / "a.jpg").read_bytes() == before
    with (tmp_path / "b.jpg").open("rb") as file:
        tags = exifread.process_file(file, details=True)
    assert str(tags["Image Model"]) == "Invented 1"
    assert str(tags["EXIF DateTimeOriginal"]) == "2027:05:12 19:40:05"
    assert str(tags["EXIF FocalLength"]) == "24"
    assert ("GPS GPSLatitude" in tags) is keep
    assert tags["Image Orientation"].values == [1]
    assert (tags["EXIF ExifImageWidth"].values, tags["EXIF ExifImageLength"].values) == ([40], [60])
    assert any(name.startswith("GPS") for name in tags) is keep
    assert b"maker's own" not in (tmp_path / "b.jpg").read_bytes()
    with Image.open(tmp_path / "b.jpg") as image:
        assert image.size == (40, 60)
        assert image.info["icc_profile"] == b"profile" * 9


@pytest.mark.parametrize("mode", ["L", "CMYK"])
def test_other_kinds_of_jpeg_are_taken(tmp_path, mode):
    photo(tmp_path / "a.jpg", mode=mode)
    assert photograph.pixels(photograph.look(tmp_path / "a.jpg")).shape == (40, 60, 3)


def test_a_photograph_without_or_with_broken_entries(tmp_path):
    Image.new("RGB", (30, 20)).save(tmp_path / "bare.jpg")
    assert photograph.look(tmp_path / "bare.jpg").exif.raw == b""
    Image.new("RGB", (30, 20)).save(tmp_path / "odd.jpg", exif=b"Exif\0\0not a block at all")
    found = photograph.look(tmp_path / "odd.jpg")
    assert found.exif.focal_mm is None
    assert found.exif.notes
    photograph.write_copy(found, photograph.pixels(found), tmp_path / "copy.jpg")
    assert photograph.look(tmp_path / "copy.jpg").shape == (20, 30)


def header(columns, rows):
    """Return a JPEG file that ends after its frame header (ITU-T T.81, B.2.2)."""
    frame = struct.pack(">BHHB", 8, rows, columns, 3) + bytes([1, 0x22, 0, 2, 0x11, 1, 3, 0x11, 1])
    return (
        b"\xff\xd8\xff\xe0\0\x10JFIF\0\1\1\0\0\1\0\1\0\0\xff\xc0"
        + struct.pack(">H", len(frame) + 2)
        + frame
        + b"\xff\xd9"
    )


def test_a_huge_picture_is_refused_before_it_is_decoded(tmp_path):
    (tmp_path / "huge.jpg").write_bytes(header(60000, 60000))
    with pytest.raises(DataFileError, match="is 60000 × 60000 pixels, 3600 million; at most 120 million"):
        photograph.look(tmp_path / "huge.jpg")


@pytest.mark.parametrize(
    ("name", "start", "words"),
    [
        ("a.nef", b"MM\0*", "raw file; develop it to JPEG first"),
        ("a.dng", b"II*\0", "raw file; develop it to JPEG first"),
        ("a.cr3", b"\0\0\0\x18ftypcrx ", "raw file; develop"),
        ("a.ARW", b"II*\0", "raw file; develop"),
        ("a.jpg", b"FUJIFILMCCD-RAW 0201", "raw file; develop"),
        ("a.tif", b"II*\0", "TIFF or raw file; develop"),
        ("a.heic", b"\0\0\0\x18ftypheic", "HEIC or AVIF"),
        ("a.jpg", b"\x89PNG\r\n\x1a\n", "a PNG picture; a JPEG"),
        ("a.jpg", b"", "is empty"),
        ("a.jpg", b"hello", "no JPEG picture"),
        ("a.jpg", b"\xff\xd8\xff\xe0\0\x10JFIF", "no size is found"),
        ("a.jpg", b"\xff\xd8\xff\xff\xff\xff", "no size is found"),
    ],
)
def test_what_is_no_photograph_is_named(tmp_path, name, start, words):
    (tmp_path / name).write_bytes(start)
    with pytest.raises(DataFileError, match=words):
        photograph.look(tmp_path / name)


def test_a_truncated_file_is_named(tmp_path):
    buffer = io.BytesIO()
    photo(buffer, size=(600, 400))
    (tmp_path / "cut.jpg").write_bytes(buffer.getvalue()[:4000])
    with pytest.raises(DataFileError, match="it ends too early; copy it from the camera again"):
        photograph.pixels(photograph.look(tmp_path / "cut.jpg"))
    with pytest.raises(DataFileError, match=r"did you mean cut\.jpg"):
        photograph.look(tmp_path / "cut.jpeg")


TAKEN = datetime(2027, 5, 12, 19, 40)
HERE = {"latitude_deg": 47.2, "longitude_deg": 8.9, "height_m": 400.0}


def test_the_sun_from_the_entries_and_from_options():
    """The same instant and place, however given, give the same sun."""
    given = photo_light.find(Exif(), "sun", "47.2N", "8.9 E", 400.0, "2027-05-12T19:40+02:00")
    offset = timezone(timedelta(hours=2))
    for exif, more in (
        (Exif(taken=TAKEN.replace(tzinfo=offset), **HERE), {}),
        (Exif(taken=TAKEN, **HERE), {"zone": "Europe/Zurich"}),
        (Exif(taken=TAKEN, satellite_time=datetime(2027, 5, 12, 17, 40, tzinfo=UTC), **HERE), {}),
    ):
        found = photo_light.find(exif, **more)
        assert (found.azimuth_deg, found.elevation_deg) == (given.azimuth_deg, given.elevation_deg)
        assert "EXIF" in found.source
        assert len(found.notes) == 2
    assert not given.notes
    assert photo_light.find(Exif(**HERE), azimuth_deg=-90.0, elevation_deg=3.0).azimuth_deg == 270.0
    night = photo_light.find(Exif(), "sun", "47.2", "8.9", None, "2027-05-12T23:40+02:00")
    assert "below the horizon" in night.notes[0]
    moon = photo_light.find(Exif(), "moon", "47.2", "8.9", None, "2027-05-12T23:40+02:00")
    assert moon.azimuth_deg != night.azimuth_deg


@pytest.mark.parametrize(
    ("exif", "more", "words"),
    [
        (Exif(), {}, "no place"),
        (Exif(**HERE), {}, "no time"),
        (Exif(taken=TAKEN, **HERE), {}, r"without its offset from UTC: .*--tz Europe/Zurich"),
        (Exif(), {"latitude": "47"}, "--lon is missing"),
        (Exif(), {"azimuth_deg": 3.0}, "--sun-elevation-deg is missing"),
        (Exif(), {"azimuth_deg": 3.0, "elevation_deg": 4.0, "time": "2027-05-12T19:40Z"}, "given twice"),
        (Exif(), {"latitude": "95", "longitude": "8", "time": "2027-05-12T19:40Z"}, "95"),
        (Exif(**HERE), {"time": "2027-05-12T19:40"}, "without a zone"),
    ],
)
def test_missing_knowledge_is_asked_for(exif, more, words):
    with pytest.raises(DomainError, match=words):
        photo_light.find(exif, **more)


def test_damaged_files_are_read_or_refused_in_words_and_leak_no_place(tmp_path):
    photo(tmp_path / "a.jpg", orientation=6)
    whole = (tmp_path / "a.jpg").read_bytes()
    random = np.random.default_rng(2)
    read, told = 0, []
    for _ in range(80):
        damaged = bytearray(whole)
        for place in random.integers(2, 700, random.choice([1, 3, 20])):
            damaged[place] = random.integers(256)
        (tmp_path / "b.jpg").write_bytes(damaged)
        try:
            found = photograph.look(tmp_path / "b.jpg")
            photograph.write_copy(found, photograph.pixels(found), tmp_path / "c.jpg")
        except DataFileError as error:
            told.append(str(error))
            continue
        read += 1
        assert photograph.look(tmp_path / "c.jpg").exif.latitude_deg is None
    assert read > 10
    assert all(text.startswith("b.jpg: ") for text in told)
    assert told
