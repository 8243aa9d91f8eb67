"""The picture of a frame, looked at by the pixel."""

import numpy as np
import pytest
from PIL import Image

from skyoptics.errors import ResourceError
from skyoptics.figures import lettering, palette
from skyoptics.geometry.axes import around, direction
from skyoptics.planning import features, preview, sensors, view
from skyoptics.planning.aiming import Aim
from skyoptics.planning.framing import Camera
from skyoptics.planning.preview_strokes import compass_ticks
from skyoptics.units import DEG, MM

FULL = sensors.find("36x24")
SUN = 270.0 * DEG, 8.0 * DEG
ANTISOLAR = -direction(*SUN)
EAST = Aim(90.0 * DEG, 8.0 * DEG)
CAMERA = Camera("rectilinear", 19.0 * MM, FULL)


@pytest.fixture(autouse=True)
def small(monkeypatch):
    monkeypatch.setattr(view, "LONG_PX", 560)


def asked(camera=CAMERA, aims=(EAST,), names=("primary", "secondary"), **more):
    seen = view.around_frame(camera, aims[0]) if len(aims) == 1 else view.around_frames(camera, aims)
    return preview.Preview(seen, camera, aims, tuple(map(features.find, names)), *SUN, "Title", ("Facts",), **more)


def look(picture, what, vectors):
    """Colours (n, 3) at directions; the title's strip is as high as the picture is higher than view and facts."""
    row, column = what.view.directions.project(vectors)
    above = _above(picture, what)
    return picture[np.round(row + above).astype(int), np.round(column).astype(int)].astype(int)


def _above(picture, what):
    size = lettering.text_size(what.view.shape)
    return round(lettering.LINE * 1.25 * size + 1.2 * size)


@pytest.fixture(scope="module")
def bow():
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(view, "LONG_PX", 560)
        what = asked(thirds=True, subject=(100.0 * DEG, 3.0 * DEG))
        return what, preview.draw(what)


def test_colours_stand_at_their_radii(bow):
    what, picture = bow
    turn = np.array([-50.0, -30.0, -20.0, 12.0, 35.0]) * DEG  # clear of labels
    red = look(picture, what, around(ANTISOLAR, 42.25 * DEG, turn))
    violet = look(picture, what, around(ANTISOLAR, 40.78 * DEG, turn))
    assert (red[:, 0] - red[:, 2] > 90).all()
    assert (violet[:, 2] - violet[:, 1] > 60).all()
    for radius in (43.1, 40.0, 46.0):  # beside it, and in the dark band
        beside = look(picture, what, around(ANTISOLAR, radius * DEG, turn))
        assert (np.ptp(beside, axis=1) < 60).all()
        assert (beside.max(axis=1) < 120).all()


def test_secondary_is_the_other_way_round(bow):
    what, picture = bow
    turn = np.array([-48.0, 48.0]) * DEG
    inner = look(picture, what, around(ANTISOLAR, 50.6 * DEG, turn))
    outer = look(picture, what, around(ANTISOLAR, 53.2 * DEG, turn))
    assert (inner[:, 0] > inner[:, 2]).all()
    assert (outer[:, 2] > outer[:, 1]).all()


def test_arcs_fade_below_the_horizon(bow):
    what, picture = bow
    turn = np.array([-120.0, 120.0]) * DEG
    below = around(ANTISOLAR, 41.5 * DEG, turn)
    assert (below[:, 2] < -0.02).all()
    assert (look(picture, what, below).max(axis=1) < 90).all()


def test_frame_edge_and_what_is_outside(bow):
    what, picture = bow
    edge = view.edge(CAMERA, EAST)
    above = _above(picture, what)
    row, column = what.view.directions.project(edge)
    white = 0
    for k in range(0, len(edge), 7):
        r, c = round(row[k] + above), round(column[k])
        white += picture[r - 2 : r + 3, c - 2 : c + 3].min(axis=-1).max() > 170
    assert white / len(range(0, len(edge), 7)) > 0.95
    # the same sky inside and outside the frame
    inside, outside = direction(np.array([90.0 - 30.0, 90.0 + 46.0]) * DEG, 6.0 * DEG)
    assert look(picture, what, inside[None]).sum() * 0.8 > look(picture, what, outside[None]).sum()


def test_marks(bow):
    what, picture = bow
    for vector in (ANTISOLAR, direction(100.0 * DEG, 3.0 * DEG)):
        row, column = what.view.directions.project(vector)
        r, c = round(float(row) + _above(picture, what)), round(float(column))
        assert picture[r - 14 : r + 15, c - 14 : c + 15].min(axis=-1).max() > 200


def test_compass():
    grid = asked().view.directions
    ticks = {tick.text: tick for tick in compass_ticks(grid)}
    assert "E 90°" in ticks
    assert "NE 45°" in ticks
    # x = f tan(Δaz) / cos(e) … by the axis' own geometry: tan of the angle in the frame's plane
    scale = CAMERA.focal / (what_width(asked()) / grid.shape[1])
    for text, degrees in (("60°", 60.0), ("120°", 120.0)):
        offset = (degrees - 90.0) * DEG
        own_x, own_z = np.sin(offset), np.cos(offset) * np.cos(EAST.elevation)
        expected = (grid.shape[1] - 1) / 2.0 + scale * own_x / own_z
        assert ticks[text].column == pytest.approx(expected, abs=0.05)
    narrow = view.around_frame(Camera("rectilinear", 200.0 * MM, FULL), Aim(112.0 * DEG, 2.0 * DEG))
    assert "ESE 112°" in {tick.text for tick in compass_ticks(narrow.directions)}


def what_width(what):
    return what.view.camera.sensor.width


def test_the_sun_side_is_marked():
    up = Aim(270.0 * DEG, 15.0 * DEG)
    what = asked(aims=(up,), names=("parhelia", "halo_22"))
    picture = preview.draw(what)
    row, column = what.view.directions.project(direction(*SUN))
    r, c = round(float(row) + _above(picture, what)), round(float(column))
    assert picture[r - 10 : r + 11, c - 10 : c + 11].min(axis=-1).max() > 200
    left = around(direction(*SUN), 21.75 * DEG, np.array([-60.0, 60.0]) * DEG)
    halo = look(picture, what, left)
    assert (halo[:, 0] > halo[:, 2]).all()  # red inside


def test_fisheye_and_high_aim():
    camera = Camera("equisolid", 8.0 * MM, FULL)
    up = Aim(270.0 * DEG, 70.0 * DEG)
    what = asked(camera=camera, aims=(up,), names=("circumzenithal", "halo_46"))
    picture = preview.draw(what)
    assert picture.shape[1] == 560
    middle = direction(270.0 * DEG, np.array([35.0]) * DEG)
    assert look(picture, what, middle).max() < 120


def test_panorama_holds_all_frames():
    aims = tuple(Aim(azimuth * DEG, 15.0 * DEG) for azimuth in (60.0, 90.0, 120.0))
    camera = Camera("rectilinear", 30.0 * MM, FULL.held("portrait"))
    what = asked(camera=camera, aims=aims)
    grid = what.view.directions
    for aim in aims:
        row, column = grid.project(view.edge(camera, aim))
        assert (column > 0.0).all()
        assert (column < grid.shape[1] - 1).all()
        assert (row > 0.0).all()
        assert (row < grid.shape[0] - 1).all()


def test_a_render_under_it_is_shown():
    what = asked()
    under = np.full((*what.view.shape, 3), 0.6)
    under[:, :5] = np.nan
    picture = preview.draw(what, under)
    assert look(picture, what, direction(90.0 * DEG, 20.0 * DEG)[None])[0] == pytest.approx([153] * 3, abs=1)
    assert tuple(picture[_above(picture, what) + 150, 2]) == tuple(np.round(np.array(preview.BESIDE) * preview.DIM))


def test_texts_are_legible():
    # WCAG 2.2, 1.4.3: at least 4.5 for text; every text has this casing around it
    assert palette.contrast(lettering.INK, lettering.CASING) >= 4.5
    beside = "#" + "".join(f"{value:02x}" for value in preview.BESIDE)
    assert palette.contrast(lettering.INK, beside) >= 4.5
    assert palette.contrast(preview.EDGE, "#" + "".join(f"{value:02x}" for value in preview.SKY)) >= 3.0


def test_file(tmp_path, bow):
    _, picture = bow
    preview.write(tmp_path / "plan.png", picture, "A bow, 19 mm – früh")
    with Image.open(tmp_path / "plan.png") as found:
        assert found.text["Title"] == "A bow, 19 mm – früh"
        assert (np.asarray(found) == picture).all()
    with pytest.raises(ResourceError, match="cannot be written"):
        preview.write(tmp_path / "none" / "plan.png", picture, "")
