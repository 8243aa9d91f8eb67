import subprocess
import sys
from xml.etree import ElementTree

import numpy as np
import pytest
from PIL import Image

from skyoptics.crystals.faces import face_labels
from skyoptics.crystals.habits import Habit, describe, shape
from skyoptics.errors import DomainError
from skyoptics.figures import crystal

UNEVEN = (1.0, 0.85, 1.1, 0.9, 1.05, 0.9)
HABITS = {
    "truncated": Habit("truncated-bipyramid"),
    "trigonal": Habit("trigonal"),
    "pyramid": Habit("pyramid"),
    "bipyramid": Habit("bipyramid"),
    "plate": Habit("prism", 0.05),
    "needle": Habit("prism", 100.0),
    "uneven": Habit("truncated-bipyramid", 0.6, 0.8, 0.3, face_distances=UNEVEN),
    "second": Habit("truncated-bipyramid", miller=(1, 1, -2, 2)),
}
ORDINARY = [name for name in HABITS if name != "needle"]


def parts(figure, left):
    """Return texts, edges seen and edges hidden of one of the two views."""
    axes = figure.axes[0]

    def here(x):
        return (x < crystal.SHEET[0] / 2.0) == left

    texts = [text for text in axes.texts if here(text.get_position()[0]) and text.get_text().isdigit()]
    edges = [line for line in axes.lines if line.get_zorder() in (2, 3) and here(np.mean(line.get_xdata()))]
    return texts, [e for e in edges if not e.is_dashed()], [e for e in edges if e.is_dashed()]


def corners_of(lines):
    """Return the distinct ends of lines on the sheet."""
    ends = np.concatenate([np.array(line.get_xydata()) for line in lines])
    kept = []
    for end in ends:
        if not kept or np.linalg.norm(np.array(kept) - end, axis=1).min() > 1e-6:
            kept.append(end)
    return kept


@pytest.fixture(scope="module", params=list(HABITS))
def drawn(request):
    body = shape(HABITS[request.param])
    return request.param, body, crystal.draw(body)


def test_every_edge_is_drawn_once_and_those_seen_bound_the_faces_seen(drawn):
    _, body, figure = drawn
    towards = crystal._turns(body)[0][2]
    _, seen, hidden = parts(figure, left=True)
    assert len(seen) + len(hidden) == describe(body)["edges"]
    assert len(hidden) > 0
    # what is seen of a convex body is one patch of faces: corners − edges + faces = 1 (Euler)
    faces = np.sum((body.face_normals @ towards > 0.0) & (body.face_areas > 0.0))
    assert len(corners_of(seen)) - len(seen) + faces == 1


def test_numbers_are_those_of_the_faces_seen(drawn):
    _, body, figure = drawn
    labels, there = np.array(face_labels(body.face_normals)), body.face_areas > 0.0
    for left, turn in zip((True, False), crystal._turns(body), strict=True):
        facing = body.face_normals @ turn[2]
        expected = sorted(labels[there & (facing > (1e-6 if left else -1e-6)) & (labels > 0)])
        assert sorted(int(text.get_text()) for text in parts(figure, left)[0]) == expected


def test_texts_keep_apart(drawn):
    _, _, figure = drawn
    renderer = figure.canvas.get_renderer()
    boxes = [text.get_window_extent(renderer) for text in figure.axes[0].texts if text.get_text()]
    inside = figure.bbox
    for number, box in enumerate(boxes):
        assert inside.x0 <= box.x0 < box.x1 <= inside.x1
        assert inside.y0 <= box.y0 < box.y1 <= inside.y1
        assert not any(box.overlaps(other) for other in boxes[:number])


@pytest.mark.parametrize("name", ORDINARY)
def test_a_number_stands_in_its_face_or_has_a_leader_there(name):
    from matplotlib.path import Path

    body = shape(HABITS[name])
    figure = crystal.draw(body)
    labels = face_labels(body.face_normals)
    towards = crystal._turns(body)[0][2]
    polygons = [patch for patch in figure.axes[0].patches if patch.get_zorder() == 1]
    faces = [face for face in np.flatnonzero(body.face_normals @ towards > 1e-6) if body.face_areas[face] > 0.0]
    leaders = [np.array(line.get_xydata()) for line in figure.axes[0].lines if line.get_zorder() == 4]
    for text in parts(figure, left=True)[0]:
        outline = Path(polygons[faces.index(labels.index(int(text.get_text())))].get_xy())
        x, y = text.get_position()
        ends = [end for start, end in leaders if abs(start[1] - y) < 1e-6 and abs(start[0] - x) < 20.0]
        assert outline.contains_point((x, y)) or any(outline.contains_point(end) for end in ends)


def test_png_and_svg_by_suffix(tmp_path):
    body = shape(HABITS["truncated"])
    crystal.draw(body, tmp_path / "a.png", title="A crystal")
    with Image.open(tmp_path / "a.png") as picture:
        size = picture.size
        pixels = np.asarray(picture.convert("L"))
    assert size == tuple(int(side / 72.0 * crystal.RESOLUTION) for side in crystal.SHEET)
    assert 0.1 < np.mean(pixels < 250) < 0.5
    crystal.draw(body, tmp_path / "a.svg", title="A crystal")
    assert ElementTree.parse(tmp_path / "a.svg").getroot().tag.endswith("svg")
    first = (tmp_path / "a.svg").read_bytes()
    crystal.draw(body, str(tmp_path / "b.SVG"), title="A crystal")
    assert (tmp_path / "b.SVG").read_bytes() == first


def test_other_files_are_refused(tmp_path):
    with pytest.raises(DomainError, match=r"\.png or \.svg file; got a\.pdf"):
        crystal.draw(shape(Habit()), tmp_path / "a.pdf")
    assert not list(tmp_path.iterdir())


def test_titles_are_set_and_cut():
    figure = crystal.draw(shape(Habit()), title="Plate")
    assert [text.get_text() for text in figure.axes[0].texts][-1] == "Plate"
    figure = crystal.draw(shape(Habit()), title="very long " * 40)
    assert [text.get_text() for text in figure.axes[0].texts][-1].endswith("…")


def test_parted_heights_move_no_more_than_needed():
    assert crystal._parted(np.array([0.0, 30.0, 60.0]), 13.0) == pytest.approx([0.0, 30.0, 60.0])
    assert crystal._parted(np.array([5.0, 5.0]), 13.0) == pytest.approx([-1.5, 11.5])
    moved = crystal._parted(np.array([0.0, 1.0, 2.0, 50.0]), 13.0)
    assert np.all(np.diff(moved) >= 13.0 - 1e-9)
    assert moved[:3].mean() == pytest.approx(1.0)
    assert len(crystal._parted(np.array([]), 13.0)) == 0


def test_drawing_needs_neither_pyplot_nor_renders():
    script = (
        "import sys; from skyoptics.figures import crystal; from skyoptics.crystals.habits import Habit, shape;"
        "print('matplotlib' in sys.modules); crystal.draw(shape(Habit()));"
        "print([n for n in sys.modules if n == 'matplotlib.pyplot' or n.startswith(('skyoptics.rend', 'skyoptics.cli'))])"
    )
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    assert done.stdout.split("\n")[:2] == ["False", "[]"]
