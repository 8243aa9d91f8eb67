"""Where labels go.

Which text goes into which place of a left and a right column, and which of an arc's candidate points gets the dot, is
decided for all labels at once (`place`); that makes leaders free of crossings. An arc seen only under a column is named
beside its own point. Then everything is checked, and a label that still finds no room gives way (`arrange`).

Coordinates are (column, row); pixel centres are whole numbers. Labels are ordered from the most important on.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from skyoptics.figures.lettering import LINE, Box, Measure, Point, cut, drawn_width, meets, text_size
from skyoptics.units import FloatArray

_FAINT = 0.35
"""Candidates below this share of a label's strongest one are left out."""
_CANDIDATES = 64
_LINES = 3
_GAP = 0.45
"""Between a text and its leader, and least distance between leaders [em]."""
_ROOMY = 0.9
"""Distance of texts in a column where there is room for twice as many [em]."""
_WEAKNESS, _CROWDING = 0.4, 0.12
"""Length of leader that it is worth to avoid an anchor without strength, or a crowded one [side of the picture]."""
_ON_LINE = 2.0
"""The same for a text on the horizon [em]."""


@dataclass(frozen=True)
class Label:
    """A text and the points that it may be tied to.

    Parameters
    ----------
    text : str
    anchors : ndarray, shape (m, 3)
        Column, row [pixel], strength (own light ÷ displayed light, or any other measure of how well the arc is seen
        there); rows with nan or a strength of 0 are left out.
    """

    text: str
    anchors: FloatArray


class Placed(NamedTuple):
    """A label in its place.

    Parameters
    ----------
    text : str
        As given.
    lines : tuple of str
        As broken.
    box : tuple of float
        Of the text.
    align : {"left", "right"}
        Side of the box the lines are flush with.
    leader : tuple of tuple of float
        From the text to the anchor.
    """

    text: str
    lines: tuple[str, ...]
    box: Box
    align: str
    leader: tuple[Point, Point]


def arrange(
    labels: Sequence[Label],
    shape: tuple[int, int],
    taken: Sequence[Box] = (),
    line: FloatArray | None = None,
    measure: Measure | None = None,
) -> tuple[list[Placed], list[str]]:
    """Return where labels stand, and the texts of those that find no room.

    Parameters
    ----------
    labels : sequence of Label
        The most important first.
    shape : tuple of int
        Rows, columns.
    taken : sequence of tuple of float
        Boxes of what is in the picture already: no text comes upon them, and leaders keep off where they can.
    line : ndarray, shape (n, 2), optional
        Points of a line (the horizon) that no text should stand on where another place is as good.
    measure : callable, optional
        Width of a line of text [pixel]; default as drawn.

    Returns
    -------
    placed : list of Placed
        No two boxes overlap, no two leaders come near each other, no leader runs through a text, all inside the picture.
    dropped : list of str
    """
    size = text_size(shape)
    measure = measure or drawn_width(size)
    limit = max(0.15 * shape[1], 7.5 * size)
    texts = [_broken(label.text, measure, limit, 0.5 * shape[1] - 3.0 * size) for label in labels]
    widths = [max(map(measure, lines), default=0.0) for lines in texts]
    points = [_candidates(label.anchors, shape, size, taken) for label in labels]
    usable = [
        i for i in range(len(labels)) if len(points[i]) and texts[i] and len(texts[i]) * LINE * size < shape[0] - 2
    ]
    margin = _GAP * size
    strip = 2.0 * margin + max((widths[i] for i in usable), default=0.0)
    middle = (shape[1] - 1) / 2.0
    free = {i: points[i][np.abs(points[i][:, 0] - middle) < middle - strip - size] for i in usable}
    placed: dict[int, Placed] = {}
    for i in usable:
        if not len(free[i]):
            one = _beside(
                (labels[i].text, texts[i], widths[i]), points[i], shape, size, [*placed.values()], taken, line
            )
            placed |= {i: one} if one else {}
    kept = [i for i in usable if len(free[i])]
    high = max((len(texts[i]) for i in kept), default=1) * LINE * size
    full = [*taken, *(box for one in placed.values() for box in _covers(one))]
    slots = _slots(shape, strip, high, _ROOMY * size, full)
    if len(slots) < 2 * len(kept):
        slots = _slots(shape, strip, high, _GAP * size, full)
    price = _on_line(slots, strip, high, line) * _ON_LINE * size
    kept = kept[: len(slots)]
    penalty = _penalties([free[i] for i in kept], shape, size)
    spots = {i: np.column_stack([free[i][:, :2], penalty[k]]) for k, i in enumerate(kept)}
    while kept:
        chosen = place([spots[i][:, :2] for i in kept], [spots[i][:, 2] for i in kept], slots, price)
        trial = dict(placed)
        for i, (slot, anchor) in zip(kept, chosen, strict=True):
            leader = (_point(slots[slot]), _point(spots[i][anchor]))
            align = "right" if slots[slot, 0] < shape[1] / 2.0 else "left"
            trial[i] = _tied(labels[i].text, texts[i], widths[i], leader, align, size)
        fault = _fault(trial, {i: len(spots[i]) for i in kept}, taken, size)
        if fault is None:
            placed = trial
            break
        anchor = chosen[kept.index(fault)][1]
        spots[fault] = np.delete(spots[fault], anchor, axis=0)
        kept = [i for i in kept if len(spots[i])]
    return [placed[i] for i in sorted(placed)], [label.text for i, label in enumerate(labels) if i not in placed]


def place(
    anchors: Sequence[FloatArray], penalties: Sequence[FloatArray], slots: FloatArray, price: FloatArray | None = None
) -> list[tuple[int, int]]:
    """Return the slot and the anchor of each label, for the least sum of leader lengths and penalties.

    Straight leaders of least total length do not cross: the four ends of two that cross are joined by shorter ones the
    other way round (triangle inequality). A penalty belongs to an anchor, whatever slot it is tied to, and a price to a slot, so
    that an exchange of slots leaves their sums alone, and the same holds when anchors are chosen from candidates.

    Parameters
    ----------
    anchors : sequence of ndarray, shape (m, 2)
        Candidates of each label [pixel], at least one.
    penalties : sequence of ndarray, shape (m,)
        Of each candidate [pixel].
    slots : ndarray, shape (s, 2)
        Where leaders may begin [pixel], at least as many as labels.
    price : ndarray, shape (s,), optional
        Of using each slot [pixel].

    Returns
    -------
    list of (int, int)
        Slot, candidate.
    """
    from scipy.optimize import linear_sum_assignment

    costs = [
        np.hypot(*np.moveaxis(points[None, :] - slots[:, None], -1, 0)) + penalty
        for points, penalty in zip(anchors, penalties, strict=True)
    ]
    _, chosen = linear_sum_assignment(
        np.array([cost.min(axis=1) for cost in costs]) + (0.0 if price is None else price)
    )
    return [(int(slot), int(np.argmin(cost[slot]))) for slot, cost in zip(chosen, costs, strict=True)]


def _candidates(anchors: FloatArray, shape: tuple[int, int], size: float, taken: Sequence[Box]) -> FloatArray:
    """Return the strong anchors inside the picture, at most `_CANDIDATES` and parted, strongest first, shape (m, 3).

    Those on what is in the picture already are left out if there are others.
    """
    points = np.asarray(anchors, dtype=np.float64).reshape(-1, 3)
    points = points[np.isfinite(points).all(axis=1) & (points[:, 2] > 0.0)]
    extent = np.array(shape[::-1])
    points = points[(np.abs(points[:, :2] - (extent - 1.0) / 2.0) <= extent / 2.0 - 0.5 * size).all(axis=1)]
    clear = np.ones(len(points), dtype=bool)
    for left, top, right, bottom in taken:
        column, row = points[:, 0], points[:, 1]
        clear &= (column < left) | (column > right) | (row < top) | (row > bottom)
    points = points[clear] if clear.any() else points
    points = points[np.argsort(-points[:, 2], kind="stable")]
    points = points[points[:, 2] >= _FAINT * points[:1, 2].sum()]
    found: list[FloatArray] = []
    while len(points) and len(found) < _CANDIDATES:
        found.append(points[0])
        points = points[np.hypot(*(points[:, :2] - points[0, :2]).T) > max(size, 0.02 * max(shape))]
    return np.array(found).reshape(-1, 3)


def _penalties(points: Sequence[FloatArray], shape: tuple[int, int], size: float) -> list[FloatArray]:
    """Return what choosing a weak anchor costs, or one near places where other arcs are strong [pixel]."""
    side = float(np.sqrt(shape[0] * shape[1]))
    result = []
    for i, mine in enumerate(points):
        crowd = np.zeros(len(mine))
        for j, other in enumerate(points):
            if i != j:
                apart = ((mine[:, None, :2] - other[None, :, :2]) ** 2).sum(axis=-1) / (3.0 * size) ** 2
                crowd += (np.exp(-apart) * other[:, 2] / other[0, 2]).max(axis=1)
        result.append(side * (_WEAKNESS * (1.0 - mine[:, 2] / mine[0, 2]) ** 2 + _CROWDING * crowd))
    return result


def _slots(shape: tuple[int, int], strip: float, high: float, gap: float, taken: Sequence[Box]) -> FloatArray:
    """Return where leaders may begin, shape (s, 2): ends of boxes `high` that stay `gap` off each other and off `taken`."""
    pitch = high + gap
    count = int((shape[0] - 1.0) / pitch)
    rows = (shape[0] - 1) / 2.0 + pitch * (np.arange(count) - (count - 1) / 2.0)
    found = []
    for row in rows:
        for left, right, end in ((0.0, strip, strip), (shape[1] - 1 - strip, shape[1] - 1.0, shape[1] - 1 - strip)):
            if not any(meets((left, row - high / 2.0, right, row + high / 2.0), box) for box in taken):
                found.append((end, row))
    return np.array(found).reshape(-1, 2)


def _on_line(slots: FloatArray, strip: float, high: float, line: FloatArray | None) -> FloatArray:
    """Return 1 for slots whose text could stand on a line, else 0, shape (s,)."""
    if line is None or not len(line) or not len(slots):
        return np.zeros(len(slots))
    across = np.abs(slots[:, None, 1] - line[None, :, 1]) < 0.6 * high
    outwards = np.where(slots[:, 0] == strip, -1.0, 1.0)[:, None] * (line[None, :, 0] - slots[:, None, 0])
    hit: FloatArray = np.any(across & (outwards > 0.0) & (outwards < strip), axis=1).astype(np.float64)
    return hit


def _tied(
    text: str, lines: tuple[str, ...], width: float, leader: tuple[Point, Point], align: str, size: float
) -> Placed:
    """Return a label whose text stands at the beginning of its leader: flush right on the left of it, else on the right."""
    (x, y), _ = leader
    half, gap = len(lines) * LINE * size / 2.0, _GAP * size
    left = x - gap - width if align == "right" else x + gap
    return Placed(text, lines, (left, y - half, left + width, y + half), align, leader)


def _beside(
    label: tuple[str, tuple[str, ...], float],
    points: FloatArray,
    shape: tuple[int, int],
    size: float,
    placed: Sequence[Placed],
    taken: Sequence[Box],
    line: FloatArray | None,
) -> Placed | None:
    """Return a label (text, lines, width) next to its own anchor, towards the middle of the picture, if there is room.

    Off the line if it can be.
    """
    resort: Placed | None = None
    for x, y, _ in points[:12].tolist():
        inwards, align = (1.0, "left") if x < shape[1] / 2.0 else (-1.0, "right")
        for lift in (0.0, -1.6, 1.6, -3.2, 3.2):
            one = _tied(*label, ((x + inwards * 1.6 * size, y + lift * size), (x, y)), align, size)
            left, top, right, bottom = one.box
            inside = left >= 0.0 and top >= 0.0 and right <= shape[1] - 1 and bottom <= shape[0] - 1
            clear = not any(meets(cover, box) for cover in _covers(one) for box in taken)
            if inside and clear and not any(_clash(one, other, size) for other in placed):
                resort = resort or one
                if line is None or not np.any(np.all((line > one.box[:2]) & (line < one.box[2:]), axis=1)):
                    return one
    return resort


def _fault(trial: dict[int, Placed], spare: dict[int, int], taken: Sequence[Box], size: float) -> int | None:
    """Return the label that has to choose another anchor: of two in each other's way one with a choice, else the lesser."""
    order = sorted(trial)
    for k, first in enumerate(order):
        for second in order[k + 1 :]:
            if _clash(trial[first], trial[second], size):
                return max((i for i in (first, second) if i in spare), key=lambda i: (spare[i] > 1, i))
    for i, count in spare.items():
        if count > 1 and any(_runs_through(trial[i].leader, box) for box in taken):
            return i
    return None


def _clash(one: Placed, other: Placed, size: float) -> bool:
    """Return whether two labels are in each other's way."""
    return (
        meets(one.box, other.box)
        or _runs_through(one.leader, other.box)
        or _runs_through(other.leader, one.box)
        or distance(one.leader, other.leader) < _GAP * size
    )


def distance(one: tuple[Point, Point], other: tuple[Point, Point]) -> float:
    """Return the least distance of two segments; 0 where they cross."""
    (a, b), (c, d) = one, other

    def side(p: Point, q: Point, r: Point) -> float:
        return (q[0] - p[0]) * (r[1] - p[1]) - (q[1] - p[1]) * (r[0] - p[0])

    def to(p: Point, q: Point, r: Point) -> float:
        x, y = q[0] - p[0], q[1] - p[1]
        t = min(1.0, max(0.0, ((r[0] - p[0]) * x + (r[1] - p[1]) * y) / ((x * x + y * y) or 1.0)))
        return float(np.hypot(p[0] + t * x - r[0], p[1] + t * y - r[1]))

    if side(a, b, c) * side(a, b, d) < 0.0 and side(c, d, a) * side(c, d, b) < 0.0:
        return 0.0
    return min(to(a, b, c), to(a, b, d), to(c, d, a), to(c, d, b))


def _runs_through(leader: tuple[Point, Point], box: Box) -> bool:
    """Return whether a segment meets a box."""
    (x, y), (end_x, end_y) = leader
    left, top, right, bottom = box
    if left <= x <= right and top <= y <= bottom:
        return True
    corners = ((left, top), (right, top), (right, bottom), (left, bottom))
    sides = zip(corners, (*corners[1:], corners[0]), strict=True)
    return meets((min(x, end_x), min(y, end_y), max(x, end_x), max(y, end_y)), box) and (
        (left <= end_x <= right and top <= end_y <= bottom) or any(distance(leader, side) == 0.0 for side in sides)
    )


def _point(row: FloatArray) -> Point:
    return float(row[0]), float(row[1])


def _covers(one: Placed) -> tuple[Box, Box]:
    """Return boxes that hold a label's text and its leader."""
    (x, y), (end_x, end_y) = one.leader
    return one.box, (min(x, end_x), min(y, end_y), max(x, end_x), max(y, end_y))


def _broken(text: str, measure: Measure, limit: float, widest: float) -> tuple[str, ...]:
    """Return a text in up to `_LINES` lines of about `limit` and never more than `widest`, evenly filled."""
    words = [cut(word, measure, widest) for word in text.split()]

    def fill(most: float) -> list[str]:
        lines: list[str] = []
        for word in words:
            joined = f"{lines[-1]} {word}" if lines else word
            lines = [*lines[:-1], joined] if lines and measure(joined) <= most else [*lines, word]
        return lines

    lines = fill(limit)
    for share in np.arange(0.95, 0.4, -0.05):
        narrower = fill(share * limit)
        if len(narrower) > len(lines):
            break
        lines = narrower
    if len(lines) > _LINES:
        lines = [*lines[: _LINES - 1], cut(" ".join(lines[_LINES - 1 :]), measure, max(limit, *map(measure, lines)))]
    return tuple(line for line in lines if line)
