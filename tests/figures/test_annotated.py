"""Labels on a picture: order, room, legibility."""

import io
import itertools

import numpy as np
import png
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skyoptics.camera import overlay
from skyoptics.camera.frame import aim, photograph
from skyoptics.colour.images import png_bytes
from skyoptics.crystals import arcs
from skyoptics.errors import DomainError
from skyoptics.figures.annotated import annotate
from skyoptics.figures.lettering import CASING, INK, text_size
from skyoptics.figures.placement import Label, arrange, distance, place
from skyoptics.geometry.axes import direction
from skyoptics.units import DEG, MM

WORDS = st.sampled_from(
    ["22° halo", "Circumzenithal arc", "Parhelia (sundogs)", "Upper suncave Parry arc", "Sun pillar", "Greenler's arcs"]
)


def label(text, *points):
    return Label(text, np.array([(*point, 1.0)[:3] for point in points], dtype=float).reshape(-1, 3))


def cross(one, other):
    """Whether two segments have a point in common, by solving for it."""
    (a, b), (c, d) = np.array(one), np.array(other)
    matrix = np.column_stack([b - a, c - d])
    if abs(np.linalg.det(matrix)) < 1e-9:
        return False
    s, t = np.linalg.solve(matrix, c - a)
    return bool(0 <= s <= 1 and 0 <= t <= 1)


def through(leader, box):
    """Whether a leader has points inside a box, by walking along it."""
    start, end = np.array(leader)
    way = start + np.linspace(0, 1, 4001)[:, None] * (end - start)
    return bool(np.any(np.all((way > box[:2]) & (way < box[2:]), axis=1)))


def check(placed, shape):
    for one in placed:
        assert one.box[0] >= 0
        assert one.box[1] >= 0
        assert one.box[2] <= shape[1] - 1
        assert one.box[3] <= shape[0] - 1
        assert not through(one.leader, one.box)
    for one, other in itertools.combinations(placed, 2):
        assert not cross(one.leader, other.leader)
        left, right = one.box, other.box
        apart = left[2] <= right[0] or right[2] <= left[0] or left[3] <= right[1] or right[3] <= left[1]
        assert apart
        assert not through(one.leader, right)
        assert not through(other.leader, left)


@st.composite
def crowds(draw):
    shape = draw(st.sampled_from([(200, 300), (300, 200), (600, 600), (500, 1500), (900, 600)]))
    point = st.tuples(st.floats(-20, shape[1] + 20), st.floats(-20, shape[0] + 20), st.floats(0.0, 1.0))
    anchors = st.lists(point, min_size=0, max_size=4)
    texts = draw(st.lists(st.tuples(WORDS, anchors), min_size=1, max_size=14))
    return shape, [label(text, *points) for text, points in texts]


@settings(max_examples=80, deadline=None)
@given(crowds())
def test_leaders_do_not_cross_and_texts_do_not_overlap_anywhere(crowd):
    shape, labels = crowd
    placed, dropped = arrange(labels, shape)
    assert sorted([one.text for one in placed] + dropped) == sorted(one.text for one in labels)
    check(placed, shape)
    known = {tuple(point[:2]) for one in labels for point in one.anchors}
    assert all(one.leader[1] in known for one in placed)


@settings(max_examples=60, deadline=None)
@given(st.lists(st.tuples(st.floats(200, 400), st.floats(5, 595)), min_size=2, max_size=6, unique=True))
def test_placing_gives_the_shortest_leaders(points):
    slots = np.array([(x, y) for x in (150.0, 450.0) for y in (100.0, 250.0, 400.0)])
    chosen = place([np.array([point]) for point in points], [np.zeros(1)] * len(points), slots)
    length = sum(np.hypot(*(slots[slot] - point)) for (slot, _), point in zip(chosen, points, strict=True))
    best = min(
        sum(np.hypot(*(slots[slot] - point)) for slot, point in zip(order, points, strict=True))
        for order in itertools.permutations(range(len(slots)), len(points))
    )
    assert length == pytest.approx(best, rel=1e-12)
    assert len({slot for slot, _ in chosen}) == len(points)


def test_penalties_move_the_anchor_and_prices_the_slot():
    slots = np.array([[0.0, 0.0], [0.0, 10.0]])
    anchors = [np.array([[10.0, 0.0], [20.0, 0.0]])]
    assert place(anchors, [np.array([0.0, 0.0])], slots) == [(0, 0)]
    assert place(anchors, [np.array([15.0, 0.0])], slots) == [(0, 1)]
    assert place(anchors, [np.array([0.0, 0.0])], slots, np.array([9.0, 0.0])) == [(1, 0)]


def test_distance_of_segments():
    assert distance(((0, 0), (10, 10)), ((0, 10), (10, 0))) == 0
    assert distance(((0, 0), (10, 0)), ((0, 3), (10, 3))) == 3
    assert distance(((0, 0), (10, 0)), ((13, 4), (20, 4))) == 5
    assert distance(((0, 0), (0, 0)), ((3, 4), (3, 4))) == 5


def test_labels_without_room_go_from_the_least_important_on():
    """In a small picture with one anchor after the other there are as many labels as places."""
    shape = (200, 300)
    labels = [label(f"arc {k}", (149.5, 10 + 180 * ((7 * k) % 40) / 39)) for k in range(40)]
    placed, dropped = arrange(labels, shape)
    check(placed, shape)
    assert len(placed) >= 12
    assert placed[0].text == "arc 0"
    full = [label(f"arc {k}", (149.5, 10 + 22 * k)) for k in range(8)]
    assert arrange(full, shape)[1] == []
    weights = {one.text: k for k, one in enumerate(labels)}
    assert min(weights[text] for text in dropped) >= 6


def test_an_arc_is_named_where_it_is_strong():
    shape = (600, 600)
    strong, weak = (300.0, 300.0, 1.0), (120.0, 500.0, 0.2)
    placed, _ = arrange([label("arc", weak, strong)], shape)
    assert placed[0].leader[1] == (300.0, 300.0)


def test_an_arc_is_named_away_from_where_others_are_strong():
    """Two arcs that touch in the middle: each gets its dot at its own far end."""
    shape = (600, 600)
    arms = [[(300 + sign * 20 * k, 300 + 5 * k, 1.0) for k in range(6)] for sign in (-1, 1)]
    placed, _ = arrange([label("left", *arms[0]), label("right", *arms[1])], shape)
    (left, right) = (one.leader[1][0] for one in placed)
    assert left <= 240
    assert right >= 360


def test_an_arc_seen_only_under_a_column_is_named_beside_its_point():
    shape = (600, 600)
    labels = [label("Infralateral arc", (12.0, 300.0)), *(label(f"{k}° halo", (300.0, 60.0 * k)) for k in range(1, 9))]
    placed, dropped = arrange(labels, shape)
    assert dropped == []
    check(placed, shape)
    assert placed[0].leader[1] == (12.0, 300.0)
    assert np.hypot(*np.subtract(*placed[0].leader)) < 5 * text_size(shape)


def test_anchors_that_are_nowhere_are_left_out():
    shape = (300, 400)
    nowhere = [
        label("none"),
        label("nan", (np.nan, 10.0)),
        label("dark", (200.0, 100.0, 0.0)),
        label("out", (500.0, 5.0)),
    ]
    placed, dropped = arrange([*nowhere, label("", (200.0, 50.0)), label("here", (200.0, 150.0))], shape)
    assert [one.text for one in placed] == ["here"]
    assert dropped == ["none", "nan", "dark", "out", ""]


@pytest.mark.parametrize("text", ["a very long name of an arc " * 8, "Sonnennebenhalbkreis" * 10, "x" * 500])
def test_long_texts_stay_in_the_picture(text):
    for shape in ((200, 300), (400, 250)):
        placed, dropped = arrange([label(text, (shape[1] / 2, 90.0)), label("b", (shape[1] / 2, 150.0))], shape)
        assert dropped == []
        check(placed, shape)
        assert len(placed[0].lines) <= 3
        assert "…" in placed[0].lines[-1]


def test_texts_keep_off_what_is_in_the_picture_already():
    taken = [(0.0, 0.0, 180.0, 200.0), (400.0, 500.0, 599.0, 599.0)]
    placed, _ = arrange([label(f"arc {k}", (300.0, 40.0 * k)) for k in range(1, 14)], (600, 600), taken)
    assert len(placed) == 13
    for one, box in itertools.product(placed, taken):
        assert one.box[2] < box[0] or box[2] < one.box[0] or one.box[3] < box[1] or box[3] < one.box[1]


def luminance(colour):
    """Relative luminance of sRGB values 0 to 1 (W3C, WCAG 2.2, definition)."""
    linear = np.where(colour <= 0.04045, colour / 12.92, ((colour + 0.055) / 1.055) ** 2.4)
    return linear @ np.array([0.2126, 0.7152, 0.0722])


def contrast(one, other):
    """Contrast ratio (W3C, WCAG 2.2, definition)."""
    high, low = np.maximum(one, other), np.minimum(one, other)
    return (high + 0.05) / (low + 0.05)


def of_hex(text):
    return np.array([int(text[k : k + 2], 16) for k in (1, 3, 5)]) / 255.0


def test_ink_and_casing_have_the_contrast_that_text_needs():
    """At least 4.5 to 1 (W3C, WCAG 2.2, success criterion 1.4.3)."""
    assert contrast(luminance(of_hex(INK)), luminance(of_hex(CASING))) >= 4.5


@pytest.mark.parametrize("size", [300, 900])
def test_drawn_letters_stand_in_their_casing_on_white_and_on_black(size):
    """What does not depend on the picture is the print; each bright pixel of it has a dark one close by, 4.5 to 1."""
    one = [label("Circumzenithal arc", (size / 2, size / 2))]
    white, black = (annotate(np.full((size, size, 3), value, np.uint8), one) for value in (255, 0))
    left, top, right, bottom = (int(edge) for edge in white.placed[0].box)
    reach = int(np.ceil(0.3 * text_size((size, size))))
    solid = np.all(white.rgb == black.rgb, axis=-1)
    light = luminance(white.rgb / 255.0)
    ink = solid & (light > 0.75)
    rows, columns = np.nonzero(ink[top:bottom, left:right])
    assert len(rows) > 3 * text_size((size, size))
    ratios = []
    for row, column in zip(rows + top, columns + left, strict=True):
        near = (slice(row - reach, row + reach + 1), slice(column - reach, column + reach + 1))
        ratios.append(contrast(light[row, column], light[near][solid[near]].min()))
    assert min(ratios) >= 4.5


def drawn(shape, labels, **marks):
    """Return where something was drawn: dark or bright on mid grey."""
    result = annotate(np.full((*shape, 3), 128, np.uint8), labels, **marks)
    return result, np.any(result.rgb != 128, axis=-1)


@pytest.mark.parametrize("shape", [(200, 300), (333, 777), (1000, 701)])
def test_nothing_is_drawn_beyond_texts_and_leaders(shape):
    labels = [label(f"{k}° halo of stars", (shape[1] / 2, shape[0] * k / 7)) for k in range(1, 7)]
    result, touched = drawn(shape, labels)
    assert result.rgb.shape == (*shape, 3)
    assert result.rgb.dtype == np.uint8
    assert len(result.placed) == 6
    row, column = np.mgrid[: shape[0], : shape[1]]
    reach = 0.35 * text_size(shape) + 2.0
    allowed = np.zeros(shape, dtype=bool)
    for one in result.placed:
        left, top, right, bottom = one.box
        inside = (column > left - reach) & (column < right + reach) & (row > top - reach) & (row < bottom + reach)
        assert touched[inside].any()
        start, end = np.array(one.leader)
        share = np.clip(
            ((column - start[0]) * (end - start)[0] + (row - start[1]) * (end - start)[1])
            / ((end - start) @ (end - start)),
            0,
            1,
        )
        near = np.hypot(start[0] + share * (end - start)[0] - column, start[1] + share * (end - start)[1] - row) < reach
        allowed |= inside | near
        assert touched[round(end[1]), round(end[0])]
    assert not (touched & ~allowed).any()


def test_a_picture_without_labels_is_the_picture():
    rng = np.random.default_rng(5)
    picture = rng.integers(0, 256, (97, 131, 3), dtype=np.uint8)
    assert np.array_equal(annotate(picture, []).rgb, picture)


def test_a_float_picture_gets_the_bits_of_its_png():
    rng = np.random.default_rng(6)
    picture = rng.random((40, 50, 3)).astype(np.float32)
    picture[3, 4] = np.nan
    _, _, rows, _ = png.Reader(io.BytesIO(png_bytes(picture, encoded=True))).read()
    assert np.array_equal(annotate(picture, []).rgb, np.vstack(list(rows)).reshape(40, 50, 3))


def test_a_picture_of_another_shape_is_refused():
    with pytest.raises(DomainError, match="shape"):
        annotate(np.zeros((10, 10)), [])


def test_the_dot_is_at_the_anchor_to_half_a_pixel():
    """Across the leader the dot reaches equally far, along it no further than its own radius."""
    shape = (400, 400)
    result, touched = drawn(shape, [label("dot", (210.0, 137.0))])
    rows = np.flatnonzero(touched[:, 210])
    assert (rows.min() + rows.max()) / 2 == pytest.approx(137.0, abs=0.5)
    assert np.all(result.rgb[137, 210] > 240)
    away = np.sign(210.0 - result.placed[0].leader[0][0])
    beyond = np.flatnonzero(touched[137, 211:] if away > 0 else touched[137, 209::-1]) + 1
    assert beyond.max() == pytest.approx((rows.max() - rows.min()) / 2, abs=1.0)


SCENES = {
    "whole sky": ((500, 500), ("equidistant", 7.6, (24, 24), 90.0)),
    "wide": ((400, 600), ("rectilinear", 12.0, (36, 24), 32.0)),
    "small": ((200, 300), ("rectilinear", 14.0, (36, 24), 30.0)),
}


@pytest.mark.parametrize("name", SCENES)
def test_a_display_with_everything(name):
    shape, (lens, focal, sensor, elevation) = SCENES[name]
    grid = photograph(lens, focal * MM, (sensor[0] * MM, sensor[1] * MM), shape, aim(180 * DEG, elevation * DEG))
    sun = direction(180 * DEG, 20 * DEG)
    labels = []
    for arc in ("halo_22", "parhelia", "circumzenithal", "upper_tangent", "parhelic_circle", "supralateral"):
        azimuth, height = arcs.locus(arc, 20 * DEG, 1.31)
        line = overlay.curve(grid, azimuth + 180 * DEG, height)
        labels.append(Label(arcs.feature(arc).title, np.column_stack([line, np.ones(len(line))])))
    result, touched = drawn(
        shape,
        labels,
        horizon=overlay.horizon(grid),
        compass=overlay.compass(grid),
        sun=overlay.mark(grid, sun),
        antisolar=overlay.mark(grid, -sun),
        scale=overlay.angle_scale(grid),
        title="A display " * 20,
    )
    assert result.dropped == []
    check(result.placed, shape)
    column, row = (round(value) for value in overlay.mark(grid, sun))
    ring = 0.55 * text_size(shape)
    for turn in np.arange(0, 360, 30) * DEG:
        assert touched[round(row - ring * np.cos(turn)), round(column + ring * np.sin(turn))]
    horizon = overlay.horizon(grid)
    here = np.round(horizon[np.isfinite(horizon[:, 0])]).astype(int)
    here = here[(here >= 0).all(axis=1) & (here < np.array(shape[::-1])).all(axis=1)]
    assert touched[here[:, 1], here[:, 0]].mean() > 0.5
    scale = overlay.angle_scale(grid)
    strip = touched[round(shape[0] - 1 - text_size(shape)), :]
    end = round(shape[1] - 1 - text_size(shape))
    assert strip[round(end - scale.length) + 1 : end].all()
    assert not touched[:, 0].all()
