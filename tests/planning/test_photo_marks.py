"""Arcs drawn on synthetic photographs: renders with EXIF entries, arcs where the rendered ones are.

A point sun, one wavelength and the primary alone: light begins at Descartes' angle (`skyoptics.optics.bows`), so the edge in
the picture is the arc's.
"""

import csv
from datetime import datetime

import numpy as np
import pytest
from PIL import Image
from PIL.TiffImagePlugin import IFDRational as Ratio

from skyoptics.camera.frame import aim, photograph
from skyoptics.colour.display import encode
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import around, direction
from skyoptics.light import position
from skyoptics.optics import bows
from skyoptics.planning import photo_marks
from skyoptics.planning.photo_report import Asked, answer
from skyoptics.rendering.run import Settings, render
from skyoptics.scene.load import from_text
from skyoptics.units import DEG, MM

TIME = "2027-05-12T19:10:00+02:00"
LATITUDE, LONGITUDE = 47.2, 8.9
WIDTH, HEIGHT = 360, 240


def rendered(path, lens, focal_mm, azimuth, elevation, roll, orientation=1):
    """Render a bow, write it as a photograph with EXIF entries; return its radius [rad] and the sun's direction."""
    sun = position.sun(LATITUDE, LONGITUDE, datetime.fromisoformat(TIME))
    scene = from_text(
        f"[light]\nazimuth_deg = {sun.azimuth_deg}\nelevation_deg = {sun.elevation_deg}\ndisc = 'point'\n"
        "[[air]]\nkind = 'drops'\nbelow_horizon = true\norders = [2]\n"
        f"[camera]\nlens = '{lens}'\nfocal_mm = {focal_mm}\nwidth_px = {WIDTH}\nheight_px = {HEIGHT}\n"
        f"aim = {{ azimuth_deg = {azimuth}, elevation_deg = {elevation}, roll_deg = {roll} }}\n"
        "[picture]\nwavelengths_nm = [550]\nbackground = 0.0\n"
    )
    result = render(scene, "test", Settings(quality="draft", seed=5, threads=1))
    picture = Image.fromarray(np.round(np.nan_to_num(encode(result.developed.rgb)) * 255.0).astype(np.uint8))
    if orientation == 6:  # a camera held upright records the picture lying on its side
        picture = picture.transpose(Image.Transpose.ROTATE_90)
    block = Image.Exif()
    block[0x0112] = orientation
    block[0x8769] = {
        0x920A: Ratio(round(focal_mm * 10), 10),
        0x9003: "2027:05:12 19:10:00",
        0x9011: "+02:00",
        0xA002: picture.width,
        0xA003: picture.height,
        0xA20E: Ratio(WIDTH * 1000, 36000),
        0xA210: 4,
    }
    block[0x8825] = {
        1: "N",
        2: (Ratio(47), Ratio(12), Ratio(0)),
        3: "E",
        4: (Ratio(8), Ratio(54), Ratio(0)),
    }
    picture.save(path, quality=97, subsampling=0, exif=block.tobytes())
    index = float(result.job.sheets[0].index(result.job.bins.centre).real[0])
    return np.pi - float(bows.scattering_angle(index, 2)), direction(sun.azimuth_deg * DEG, sun.elevation_deg * DEG)


def edges(light, points, inwards):
    """Return how far inside a line the first lit pixel has its middle.

    A caustic lights the pixel that it runs through, however little of it. So light is seen to rise, on the way in, at that
    pixel's outer edge; its middle lies half a pixel further.
    """
    from scipy.ndimage import map_coordinates

    steps = np.arange(-4.0, 4.01, 0.05)
    places = points[:, None, :] + steps[:, None] * inwards[:, None, :]
    profile = map_coordinates(light, [places[..., 1], places[..., 0]], order=1)
    rise = profile[:, 20:] - profile[:, :-20]
    return 0.5 * (steps[20:] + steps[:-20])[rise.argmax(axis=1)] + 0.5


@pytest.mark.parametrize(
    ("lens", "focal_mm", "elevation", "roll", "orientation"),
    [("rectilinear", 16.0, 12.0, 7.0, 1), ("equidistant", 12.5, 20.0, -15.0, 6)],
)
def test_a_drawn_arc_stands_on_the_rendered_one(tmp_path, lens, focal_mm, elevation, roll, orientation):
    sun = position.sun(LATITUDE, LONGITUDE, datetime.fromisoformat(TIME))
    azimuth = (sun.azimuth_deg + 186.0) % 360.0
    path = tmp_path / "bow.jpg"
    radius, view = rendered(path, lens, focal_mm, azimuth, elevation, roll, orientation)
    before = path.read_bytes()
    turned = aim(azimuth * DEG, elevation * DEG, roll * DEG)
    grid = photograph(lens, focal_mm * MM, (36 * MM, 24 * MM), (HEIGHT, WIDTH), turned)
    marks = {}
    if lens == "rectilinear":
        row, column = grid.project(-view)
        marks |= {"antisolar_pixel": (float(column), float(row)), "roll_deg": roll}
    else:
        places = [(azimuth - 30.0, 5.0), (azimuth + 25.0, 30.0)]
        pixels = [grid.project(direction(a * DEG, e * DEG)) for a, e in places]
        marks["marks"] = [
            (float(column), float(row), *there) for (row, column), there in zip(pixels, places, strict=True)
        ]
    found = answer(Asked(path, tmp_path / "out", lens=lens, features=("primary",), radius_deg=radius / DEG, **marks))
    assert found["size_px"] == [WIDTH, HEIGHT]
    assert found["camera"]["focal_px"] == pytest.approx(focal_mm * WIDTH / 36.0)
    assert (
        found["camera"]["azimuth_deg"],
        found["camera"]["elevation_deg"],
        found["camera"]["roll_deg"],
    ) == pytest.approx((azimuth, elevation, roll), abs=0.02)
    assert path.read_bytes() == before

    with (tmp_path / "out" / "bow-arcs.csv").open() as file:
        names = ("x", "y", "azimuth_deg", "elevation_deg")
        table = np.array([[float(line[name]) for name in names] for line in csv.DictReader(file)])
    points = table[:, :2]
    seen = direction(*table[:, 2:].T * DEG)
    assert np.stack(grid.project(seen)[::-1], axis=1) == pytest.approx(points, abs=0.05)
    towards = seen - 1e-3 * view
    inwards = np.stack(grid.project(towards / np.linalg.norm(towards, axis=1)[:, None])[::-1], axis=1) - points
    inwards /= np.linalg.norm(inwards, axis=1)[:, None]
    kept = (np.abs(points - [(WIDTH - 1) / 2, (HEIGHT - 1) / 2]) < [WIDTH / 2 - 6, HEIGHT / 2 - 6]).all(axis=1)
    inner = points[kept]
    assert len(inner) > 300
    with Image.open(path) as image:
        turn = image.transpose(Image.Transpose.ROTATE_270) if orientation == 6 else image
        light = np.asarray(turn.convert("L"), dtype=float)
    off = edges(light, inner, inwards[kept])
    assert np.abs(off).max() <= 1.0
    assert np.abs(np.median(off)) < 0.25

    # what is drawn stands where the table says
    with Image.open(tmp_path / "out" / "bow-arcs.jpg") as image:
        change = np.abs(np.asarray(image.convert("L"), dtype=float) - light)
    column, row = np.round(inner).astype(int).T
    assert np.mean(np.max([change[row, column + j] for j in (-1, 0, 1)], axis=0) > 40.0) > 0.97


def test_which_arcs_are_drawn_follows_from_the_side():
    sun = direction(200.0 * DEG, 20.0 * DEG)
    for azimuth, names in ((20.0, ("primary", "secondary")), (200.0, ("halo_22", "parhelia"))):
        grid = photograph("rectilinear", 20 * MM, (36 * MM, 24 * MM), (200, 300), aim(azimuth * DEG, 10.0 * DEG))
        assert photo_marks.default_names(grid, sun) == names


def test_halos_and_spots_in_a_picture():
    """The 22° halo at least deviation, 21.84° for n = 1.31; parhelia by Bravais (1847)."""
    sun = direction(200.0 * DEG, 20.0 * DEG)
    grid = photograph("equidistant", 15 * MM, (36 * MM, 24 * MM), (400, 600), aim(200.0 * DEG, 20.0 * DEG))
    halo, dogs, arc = photo_marks.arcs(grid, sun, ["halo_22", "parhelia", "circumhorizontal"])
    middle = np.array([299.5, 199.5])
    assert np.hypot(*(halo.points - middle).T) == pytest.approx(15 / 36 * 600 * 21.839 * DEG, abs=0.05)
    spots = dogs.sky[np.isfinite(dogs.sky[:, 0])] / DEG
    assert spots[:, 1] == pytest.approx([20.0, 20.0], abs=0.01)
    bravais = np.sqrt(1.31**2 - np.sin(20.0 * DEG) ** 2) / np.cos(20.0 * DEG)
    away = 2.0 * np.arcsin(bravais / 2.0) / DEG - 60.0
    assert np.sort(np.abs(spots[:, 0] - 200.0)) == pytest.approx([away, away], abs=0.01)
    assert not arc.exists
    assert not len(arc.points)
    picture = np.full((400, 600, 3), 90, dtype=np.uint8)
    drawn = photo_marks.draw(picture, grid, [halo, dogs, arc], sun, "sun", np.array([[100.0, 50.0]]))
    assert picture.min() == picture.max() == 90
    for x, y in dogs.points[np.isfinite(dogs.points[:, 0])]:  # a ring about each
        patch = drawn[int(y) - 8 : int(y) + 9, int(x) - 8 : int(x) + 9]
        assert patch.max() > 220
    changed = (drawn != 90).any(axis=2)
    assert 0.01 < changed.mean() < 0.2
    row, column = grid.project(around(sun, np.full(40, 21.839 * DEG), np.linspace(0.0, 6.0, 40)))
    assert changed[np.round(row).astype(int), np.round(column).astype(int)].all()


def test_a_radius_is_for_one_bow():
    grid = photograph("rectilinear", 20 * MM, (36 * MM, 24 * MM), (200, 300), aim(0.0, 0.0))
    with pytest.raises(DomainError, match="one bow"):
        photo_marks.arcs(grid, direction(3.0, 0.1), ["primary", "secondary"], 42.0)
    with pytest.raises(DomainError, match="primary"):
        photo_marks.arcs(grid, direction(3.0, 0.1), ["primari"])
