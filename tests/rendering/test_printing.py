"""Prints: parts put together are the whole, and the file tells its size and colours."""

import json
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from io import BytesIO

import numpy as np
import pytest
from PIL import Image, ImageCms

from skyoptics.colour.display import decode
from skyoptics.errors import ResourceError
from skyoptics.rendering import printing, tiles
from skyoptics.rendering.build import build
from skyoptics.rendering.run import Settings, render
from skyoptics.rendering.scatter import silent
from skyoptics.scene.load import from_text

DRAFT = Settings("draft", 3, 2)
DROPS = "[[air]]\nkind = 'drops'\noptical_depth = 0.1\n"
PLATES = "[[air]]\nkind = 'crystals'\naspect = 0.3\norientation = 'plate'\noptical_depth = 0.1\ntilt_deg = 2\n"
AROUND_THE_SUN = "aim = 'sun'\nfocal_mm = 20\n"
LAND = "[ground]\nhorizon = 'hills'\nwater = 'lake'\n"


def scene(air, camera="focal_mm = 20\n", more="", picture=""):
    return from_text(
        f"title = 'Tried'\nlicence = 'CC0 1.0'\n[light]\nelevation_deg = 18\n{air}{more}"
        f"[camera]\nwidth_px = 120\nheight_px = 80\n{camera}[picture]\nwavelengths_nm = [450, 550, 650]\n{picture}"
    )


def looked_at(described, job, small, settings=DRAFT):
    """Return the parts of a picture put together, and their number."""
    xyz = np.full((*job.directions.shape, 3), -1.0, dtype=np.float32)
    count = 0
    with ThreadPoolExecutor(2) as threads:
        for rows, columns, part in tiles.lit(job, small, described, settings.sampling, threads, threads, silent):
            xyz[rows, columns] = part
            count += 1
    return xyz, count


@pytest.mark.parametrize(
    ("camera", "more"),
    [
        ("focal_mm = 20\n", ""),
        ("lens = 'equisolid'\nfocal_mm = 8\n", ""),
        ("lens = 'panorama'\nwidth_deg = 180\nheight_deg = 90\npolariser_deg = 20\n", ""),
        ("focal_mm = 20\n", "[ground]\nhorizon = 'hills'\n"),
    ],
)
def test_tables_of_a_small_picture_make_the_large_one(camera, more):
    """The same bits as a render of the whole: a definition, no source."""
    described = scene(DROPS, camera, more)
    whole = render(described, "test", DRAFT)
    small = render(printing._sized(described, 30, 20), "test", DRAFT)
    xyz, _ = looked_at(described, build(described, "test"), small)
    assert np.array_equal(xyz, whole.xyz, equal_nan=True)


def test_one_film_makes_the_whole_picture():
    described = scene(PLATES, AROUND_THE_SUN)
    few = Settings("draft", 3, 2, rays=100_000)
    whole = render(described, "test", few)
    small = render(printing._sized(described, 30, 20), "test", few)
    xyz, count = looked_at(described, build(described, "test"), small, few)
    assert count == 1
    assert np.array_equal(xyz, whole.xyz, equal_nan=True)


def test_films_of_tiles_join_without_a_seam(monkeypatch):
    """Rows and columns on both sides of a seam differ no more than elsewhere; the light is that of the whole."""
    described = scene(PLATES, AROUND_THE_SUN)
    settings = Settings("draft", 3, 2, rays=800_000)
    whole = render(described, "test", settings)
    small = render(printing._sized(described, 30, 20), "test", replace(settings, rays=1))
    job = build(described, "test")
    monkeypatch.setattr(tiles, "FILM_BYTES", 60_000.0)
    parts = tiles.divided(job, job.directions.shape)
    covered = np.zeros(job.directions.shape, dtype=int)
    for part in parts:
        covered[part.rows, part.columns] += 1
    assert (covered == 1).all()
    assert len(parts) > 2
    xyz, count = looked_at(described, job, small, settings)
    assert count == len(parts)
    assert xyz[..., 1].sum() == pytest.approx(whole.xyz[..., 1].sum(), rel=0.02)
    for part in parts:
        here = xyz[part.rows, part.columns, 1].sum()
        assert here == pytest.approx(whole.xyz[part.rows, part.columns, 1].sum(), rel=0.06)
    ratio = np.log(xyz[..., 1] / whole.xyz[..., 1])
    seam = max(part.columns.stop for part in parts if part.columns.stop < 120)
    left, right = ratio[:, seam - 4 : seam].mean(), ratio[:, seam : seam + 4].mean()
    assert abs(left - right) < 0.02


def test_water_mirrors_in_tiles_as_in_the_whole():
    described = scene(DROPS, "focal_mm = 20\naim = { azimuth_deg = 0, elevation_deg = 5 }\n", LAND)
    whole = render(described, "test", DRAFT)
    small = render(printing._sized(described, 30, 20), "test", DRAFT)
    assert small.mirror is not None
    xyz, _ = looked_at(described, build(described, "test"), small)
    assert np.array_equal(xyz, whole.xyz, equal_nan=True)


@pytest.fixture
def coarse(monkeypatch):
    """Print at a twelfth of the dots, so that a sheet takes a second."""
    from skyoptics.figures import print_sheet

    monkeypatch.setattr(print_sheet, "DPI", 25)


@pytest.mark.parametrize("picture", ["", "glare = 'eye'\n"])
def test_a_print_is_the_render_of_its_size(coarse, tmp_path, picture):
    described = scene(DROPS, picture=picture + "exposure_ev = 13\n")
    made = printing.printed(described, "test.toml", DRAFT, "a4")
    whole = render(printing._sized(described, *made.place.picture[::-1]), "test.toml", DRAFT)
    shown = made.sheet[made.place.rows, made.place.columns].astype(np.float64) / 255.0
    assert np.abs(decode(shown) - whole.developed.rgb).max() < 0.011  # dither: one step of 8 bits
    files = printing.write(made, tmp_path, "tried", ["skyoptics", "render", "tried.toml", "--print", "a4"])
    assert [file.name for file in files] == ["tried.a4.png", "tried.a4.json", "tried.a4.caption.txt"]
    report = json.loads(files[1].read_text(encoding="utf-8"))
    assert report["print"]["picture_px"] == list(made.place.picture[::-1])
    assert report["print"]["margin_mm"] == 12.0
    before = files[0].read_bytes()
    printing.write(made, tmp_path, "tried", ["skyoptics", "render", "tried.toml", "--print", "a4"])
    assert files[0].read_bytes() == before


def test_the_file_tells_its_size_and_its_colours(tmp_path):
    """PNG, third edition (W3C, 2025), §11.3: 300 dpi are 11811 pixels a metre; iCCP stands without sRGB, before the data."""
    sheet = np.full((20, 30, 3), 200, dtype=np.uint8)
    path = tmp_path / "sheet.png"
    printing.write_sheet(path, sheet, {"Title": "Überzähliger Bogen", "Software": "skyoptics"})
    data, place, chunks = path.read_bytes(), 8, []
    while place < len(data):
        length, kind = int.from_bytes(data[place : place + 4], "big"), data[place + 4 : place + 8]
        chunks.append((kind, data[place + 8 : place + 8 + length]))
        place += 12 + length
    kinds = [kind for kind, _ in chunks]
    assert b"sRGB" not in kinds
    assert kinds.index(b"iCCP") < kinds.index(b"IDAT")
    assert dict(chunks)[b"pHYs"] == (11811).to_bytes(4, "big") * 2 + b"\x01"
    with Image.open(path) as image:
        assert image.text["Title"] == "Überzähliger Bogen"
        assert np.array_equal(np.asarray(image), sheet)


def test_the_profile_is_that_of_srgb():
    """Greys and primaries through the profile, by Little CMS, against IEC 61966-2-1 and CIE 15 (L*a*b*, D50; from memory)."""
    source = ImageCms.ImageCmsProfile(BytesIO(printing.srgb_profile()))
    to_lab = ImageCms.buildTransform(source, ImageCms.createProfile("LAB"), "RGB", "LAB")
    for value in (10, 60, 128, 200, 255):
        pixel = ImageCms.applyTransform(Image.new("RGB", (1, 1), (value,) * 3), to_lab).getpixel((0, 0))
        y = float(decode(value / 255.0))
        lightness = 116.0 * np.cbrt(y) - 16.0 if y > (6 / 29) ** 3 else y * (29 / 3) ** 3
        assert pixel[0] * 100.0 / 255.0 == pytest.approx(lightness, abs=0.4)
        assert pixel[1:] == pytest.approx((128, 128), abs=1)  # a* and b* are counted from 128
    red = ImageCms.applyTransform(Image.new("RGB", (1, 1), (255, 0, 0)), to_lab).getpixel((0, 0))
    # CIE L*a*b* (D50) of sRGB red: 54.3, 80.8, 69.9 (B. Lindbloom's calculator, from memory)
    assert red[0] * 100.0 / 255.0 == pytest.approx(54.3, abs=0.4)
    assert red[1:] == pytest.approx((128 + 80.8, 128 + 69.9), abs=1.0)


def test_too_large_a_print_is_refused_before_work(monkeypatch):
    from skyoptics.rendering import memory

    def none(*_):
        raise AssertionError("something was rendered")

    monkeypatch.setattr(memory, "SHARE", 1e-6)
    monkeypatch.setattr(printing, "render", none)
    with pytest.raises(ResourceError, match=r"memory.*smaller paper"):
        printing.printed(scene(DROPS), "test", DRAFT, "a2")


def test_a_dry_run_tells_sizes(command, tiny):
    done = command("render", tiny, "--print", "A3", "--dry-run", "--json")
    assert done.code == 0
    told = json.loads(done.out)
    assert told["sheet_px"] == [4961, 3508]
    assert told["picture_px"][0] == pytest.approx(1.5 * told["picture_px"][1], abs=1.0)
    assert told["files"][0].endswith("tiny.a3.png")


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (["--print", "a5"], "a4, a3, a2"),
        (["--print", "a4", "--data"], "--data does not go with --print"),
        (["--print", "a4", "--vary", "air.1.radius_um=10,50"], "--print does not go with --vary"),
    ],
)
def test_wrong_usage_is_told(command, tiny, words, said):
    done = command("render", tiny, *words)
    assert done.code == 2
    assert said in done.err
