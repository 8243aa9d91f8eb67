"""``skyoptics photo``: files, words, JSON, measuring end to end, and what wrong input is told."""

import hashlib
import json
from pathlib import Path

import exifread
import numpy as np
import pytest
from PIL import Image
from PIL.TiffImagePlugin import IFDRational as Ratio

from skyoptics.camera.frame import aim, photograph
from skyoptics.geometry.axes import around, direction
from skyoptics.units import DEG, MM

SUN = ("--sun-azimuth-deg", 255, "--sun-elevation-deg", 15)
AIM = ("--aim", "75,15,0")
OUT = ("--out", "marked")
ANTISOLAR = direction(75.0 * DEG, -15.0 * DEG)


def photo(path="bow.jpg", exif=True, place=True, offset=True):
    """Write a grey photograph of 24 mm on 36 × 24 mm."""
    block = Image.Exif()
    if exif:
        block[0x8769] = {0x920A: Ratio(24), 0xA405: 24, 0x9003: "2027:05:12 19:40:00"} | (
            {0x9011: "+02:00"} if offset else {}
        )
        if place:
            block[0x8825] = {1: "N", 2: (Ratio(47), Ratio(12), Ratio(0)), 3: "E", 4: (Ratio(8), Ratio(54), Ratio(0))}
    Image.new("RGB", (600, 400), (70, 90, 110)).save(path, exif=block.tobytes())


def points(radius_deg, places, order=None, seed=1, noise=0.3):
    """Return lines of a table of points on a circle about the antisolar point, with a noise in pixels."""
    grid = photograph("rectilinear", 24 * MM, (36 * MM, 24 * MM), (400, 600), aim(75.0 * DEG, 15.0 * DEG))
    row, column = grid.project(around(ANTISOLAR, radius_deg * DEG, np.array(places) * DEG))
    shift = np.random.default_rng(seed).normal(0.0, noise, (2, len(places)))
    end = "" if order is None else f",{order}"
    return [f"{x:.2f},{y:.2f}{end}" for x, y in zip(column + shift[0], row + shift[1], strict=True)]


def test_files_are_written_and_the_photograph_stays(command):
    photo()
    before = hashlib.sha256(Path("bow.jpg").read_bytes()).hexdigest()
    done = command("photo", "bow.jpg", *SUN, *AIM, *OUT)
    assert done.code == 0, done.err
    assert hashlib.sha256(Path("bow.jpg").read_bytes()).hexdigest() == before
    files = sorted(path.name for path in Path("marked").iterdir())
    assert files == ["bow-arcs.csv", "bow-arcs.jpg", "bow-arcs.json"]
    assert all(f"marked/{name}" in done.out for name in files)
    assert "Primary rainbow, 42.37°: drawn" in done.out
    assert "Secondary rainbow" in done.out
    assert max(map(len, done.out.splitlines())) <= 80
    assert "\x1b" not in done.out
    with Image.open("marked/bow-arcs.jpg") as image:
        assert np.asarray(image).max() > 230

    again = command("photo", "bow.jpg", *SUN, *AIM, *OUT)
    assert again.code == 1
    assert "--force" in again.err
    assert command("photo", "bow.jpg", *SUN, *AIM, *OUT, "--force").code == 0


@pytest.mark.parametrize("keep", [False, True])
def test_place_and_time_of_the_entries_are_used_and_the_place_is_kept_only_if_asked(command, keep):
    photo()
    done = command("photo", "bow.jpg", "--sun-pixel", "300,200", *OUT, "--json", *(["--keep-place"] if keep else []))
    assert done.code == 0, done.err
    report = json.loads(done.out)
    assert report == json.loads(Path("marked/bow-arcs.json").read_text())
    # 285.9611°, 10.1780° by pvlib (NREL's algorithm, Reda & Andreas 2004); astronomy-engine has 285.9610°, 10.1779°
    assert (report["sun_azimuth_deg"], report["sun_elevation_deg"]) == pytest.approx((285.9611, 10.178), abs=0.002)
    assert [arc["name"] for arc in report["arcs"]] == ["halo_22", "parhelia"]
    assert ("place" in report) is keep
    with open("marked/bow-arcs.jpg", "rb") as file:
        tags = exifread.process_file(file)
    assert any(name.startswith("GPS") for name in tags) is keep
    assert str(tags["EXIF DateTimeOriginal"]) == "2027:05:12 19:40:00"
    texts = Path("marked/bow-arcs.json").read_text() + done.out
    assert ("latitude" in texts) is keep
    assert "level" in " ".join(report["notes"])
    assert any("sun is in the frame" in note for note in report["notes"])


def test_measuring_a_bow_and_its_drops(command):
    """Truth: 41.83° for the primary (n of water at 550 nm: 41.834°), drops of 300 µm by Airy's maxima (A&S, Table 10.13)."""
    photo()
    n, x = 1.3338, 2.0 * np.pi * 300.0 / 0.55
    h = 2.25 * np.sqrt(4.0 - n**2) / (n**2 - 1.0) ** 1.5
    step = h ** (1 / 3) * x ** (-2 / 3) / DEG
    lines = ["x,y,order"]
    for order, zero in enumerate((1.01879, 3.24820, 4.82010)):
        lines += points(41.834 - step * zero, [-35, -20, 0, 15, 30], order, seed=order, noise=0.2)
    Path("p.csv").write_text("\n".join(lines))
    done = command("photo", "bow.jpg", *SUN, *AIM, *OUT, "--measure", "p.csv", "--json")
    assert done.code == 0, done.err
    report = json.loads(done.out)
    bow, first, _ = report["measured"]
    assert bow["centre"] == "antisolar"
    assert bow["low_deg"] <= 41.834 - step * 1.01879 <= bow["high_deg"]
    assert (bow["name"], bow["verdict"], bow["points"]) == ("primary", "one", 5)
    assert bow["stretch_deg"] == pytest.approx(65.0, abs=1.0)
    assert (first["verdict"], first["words"]) == ("supernumerary", "supernumerary 1")
    (drops,) = report["drops"]
    assert drops["low_um"] < 300.0 < drops["high_um"]
    assert drops["radius_um"] == pytest.approx(300.0, rel=0.05)
    assert drops["bow"] == "primary"

    words = command("photo", "bow.jpg", *SUN, *AIM, *OUT, "--measure", "p.csv", "--fit-centre", "--force")
    assert words.code == 0, words.err
    assert "centre fitted" in words.out
    assert "primary bow" in words.out
    assert "95 %" in words.out
    assert max(map(len, words.out.splitlines())) <= 80


def test_two_marks_with_a_residual(command):
    photo()
    grid = photograph("rectilinear", 24 * MM, (36 * MM, 24 * MM), (400, 600), aim(75.0 * DEG, 15.0 * DEG, 4.0 * DEG))
    marks = []
    for azimuth, elevation in ((60.0, 5.0), (95.0, 10.0)):
        row, column = grid.project(direction(azimuth * DEG, elevation * DEG))
        marks += ["--mark", f"{float(column):.2f},{float(row):.2f},{azimuth},{elevation}"]
    done = command("photo", "bow.jpg", *SUN, *marks, *OUT, "--json")
    assert done.code == 0, done.err
    camera = json.loads(done.out)["camera"]
    assert (camera["azimuth_deg"], camera["elevation_deg"], camera["roll_deg"]) == pytest.approx((75, 15, 4), abs=0.02)
    assert camera["residual_deg"] < 0.01
    wrong = command("photo", "bow.jpg", *SUN, *marks, *OUT, "--force", "--equivalent-mm", 35)
    assert wrong.code == 0
    assert "the lens (focal length" in " ".join(wrong.out.split())


@pytest.mark.parametrize(
    ("words", "code", "told"),
    [
        ((*AIM, *SUN), 2, "Missing option '--out'"),
        ((*SUN, *OUT), 1, "--sun-pixel X,Y"),
        ((*SUN, *OUT, "--mark", "3,4,5,6"), 2, "--mark is given once"),
        ((*SUN, *OUT, "--mark", "3,4,5"), 2, "is not x,y,az,el"),
        ((*SUN, *OUT, "--aim", "north"), 2, "such as 90,15,0"),
        ((*SUN, *OUT, "--aim", "10,95"), 2, "-90 to 90 degrees"),
        ((*SUN, *OUT, *AIM, "--sun-pixel", "3,4"), 1, "given twice"),
        ((*SUN, *OUT, "--sun-pixel", "600,4"), 1, "outside the picture, which is 600 × 400 pixels"),
        ((*SUN, *OUT, *AIM, "--lens", "fisheye"), 2, "rectilinear, equidistant"),
        ((*SUN, *OUT, *AIM, "--sensor", "full-fram"), 2, "did you mean full-frame"),
        ((*SUN, *OUT, *AIM, "--feature", "primery"), 1, "did you mean primary"),
        ((*SUN, *OUT, *AIM, "--measure", "none.csv"), 1, "none.csv: there is no such file"),
        ((*OUT, *AIM, "--lat", "95", "--lon", "8", "--time", "2027-05-12T19:40Z"), 1, "95"),
        ((*OUT, *AIM, "--sun-azimuth-deg", 3), 1, "--sun-elevation-deg is missing"),
        ((*SUN, *AIM, "--out", "bow.jpg"), 1, "bow.jpg is a file"),
        ((*SUN, *OUT, *AIM, "--equivalent-mm", 24, "--focal-mm", 24), 1, "equivalent focal length says all"),
    ],
)
def test_faults_are_told(command, words, code, told):
    photo()
    done = command("photo", "bow.jpg", *words)
    assert done.code == code
    assert told in done.err
    assert "Traceback" not in done.err
    assert not Path("marked").exists()


def test_photographs_that_do_not_suffice_are_told(command):
    photo("bare.jpg", exif=False)
    photo("here.jpg", offset=False, place=False)
    Path("raw.cr2").write_bytes(b"II*\0\x10\0\0\0CR\2\0")
    for name, words, told in (
        ("bare.jpg", (*SUN, *AIM), "the EXIF entries give no focal length: add --focal-mm 24 --sensor 36x24"),
        ("bare.jpg", AIM, "no place: the EXIF entries hold none; give --lat and --lon"),
        ("here.jpg", (*AIM, "--lat", 47, "--lon", 9), "add the zone of the camera's clock, as in --tz Europe/Zurich"),
        ("raw.cr2", (*SUN, *AIM), "raw.cr2: is a raw file; develop it to JPEG first"),
        ("baer.jpg", (*SUN, *AIM), "did you mean bare.jpg"),
    ):
        done = command("photo", name, *words, *OUT)
        assert done.code == 1
        assert told in done.err
    enough = command("photo", "bare.jpg", *SUN, *AIM, *OUT, "--focal-mm", 24, "--sensor", "36x24")
    assert enough.code == 0
    moon = command(
        "photo",
        "here.jpg",
        "--body",
        "moon",
        "--lat",
        47,
        "--lon",
        9,
        "--tz",
        "Europe/Zurich",
        *AIM,
        *OUT,
        "--feature",
        "moonbow",
    )
    assert moon.code == 0, moon.err
    assert "Moonbow" in moon.out
