"""Transport in a layer, stage by stage, against plain numpy and the exponential law."""

import numpy as np
import pytest
from scipy.stats import binomtest, kstest

from skyoptics.geometry.directions import Directions
from skyoptics.kernels.layer import KNOTS, LEAST, begin, leave, pick
from skyoptics.kernels.projection import SPARE
from skyoptics.kernels.random import batch_key

KEY = batch_key(11, 0, 0)
SKY = Directions.cylindrical((36, 72), np.eye(3), (np.pi / 2, -1.5 * np.pi), (np.pi / 2, -np.pi / 2))


def plate(vertical):
    """A disc of no thickness, level: area ∝ |z|, with a trace of an edge."""
    return 1.8 * np.abs(vertical) + 0.2 * np.sqrt(1.0 - vertical**2)


def ball(vertical):
    return np.ones_like(vertical)


def tables(*kinds):
    vertical = 1.0 - np.linspace(0.0, 1.0, KNOTS) ** 2
    parts = np.array([share * k(vertical) for share, k in kinds])
    rows = np.concatenate([parts, parts.sum(axis=0, keepdims=True)])
    return np.concatenate([rows, rows[:, -1:]], axis=1)


MIXED = tables((0.6, plate), (0.4, ball))
SINGLE = tables((1.0, ball))


def total(vertical):
    return 0.6 * plate(vertical) + 0.4


def exits(count, seed=1, rays=500):
    """Return direction, Stokes, reference and ray, laid out as in an exit list."""
    rng = np.random.default_rng(seed)
    rows = np.zeros((count, 14), dtype=np.float32)
    direction = rng.normal(size=(count, 3))
    direction /= np.linalg.norm(direction, axis=1)[:, None]
    reference = np.cross(direction, rng.normal(size=(count, 3)))
    rows[:, 0:3], rows[:, 7:10] = direction, reference
    rows[:, 3] = rng.exponential(size=count) + 1e-3
    rows[:, 4:7] = 0.3 * rows[:, 3:4] * rng.uniform(-1.0, 1.0, (count, 3))
    numbers = np.zeros((count, 6), dtype=np.uint32)
    numbers[:, 0] = rng.integers(0, rays, count)
    return rows[:, 0:3], rows[:, 3:7], rows[:, 7:10], numbers[:, 0]


def left(what, depth, weight, table=MIXED, bottom=0.8, rim=0.0, stokes_count=1):
    """Run `leave`; return plane, again, totals, power."""
    plane = np.zeros((36 * 72 + SPARE) * stokes_count)
    again, totals, power = np.zeros(len(what[3])), np.zeros(len(table) - 1), np.zeros(2)
    leave(*what, depth, weight, table, bottom, rim, SKY.packed(), plane, stokes_count, again, totals, power)
    return plane, again, totals, power


# ---------------------------------------------------------------- first events


@pytest.mark.parametrize("above", [True, False])
@pytest.mark.parametrize("rim", [0.0, 0.05])
def test_first_event_follows_the_exponential_law_within_the_layer(above, rim):
    """Beer's law, conditioned on an event before the far side: distribution function (1 − e^(−x)) / (1 − e^(−X))."""
    count, bottom, vertical = 20000, 1.7, 0.3
    depth, weight = np.zeros(count), np.zeros(count)
    begin(np.full(count, -vertical), above, 0.7, MIXED, bottom, rim, *KEY, 0, depth, weight)
    mu = np.sqrt(vertical**2 + rim * (1.0 - vertical**2))
    rate = total(vertical) / mu
    assert weight == pytest.approx(0.7 * (1.0 - np.exp(-rate * bottom)) / rate, rel=1e-4)
    path = depth if above else bottom - depth
    assert path.min() >= 0.0
    assert path.max() <= bottom
    result = kstest(path, lambda x: (1.0 - np.exp(-rate * x)) / (1.0 - np.exp(-rate * bottom)))
    assert result.pvalue > 1e-3


def test_a_layer_of_no_depth_takes_nothing():
    depth, weight = np.ones(8), np.ones(8)
    begin(np.full(8, -0.5), True, 1.0, MIXED, 0.0, 0.0, *KEY, 0, depth, weight)
    assert np.all(weight == 0.0)
    assert np.all(depth == 0.0)


# ---------------------------------------------------------------- on the way out


@pytest.mark.parametrize("rim", [0.0, 0.05])
def test_what_leaves_and_what_stays(rim):
    """Each exit on its own by e^(−K s/µ) in numpy, with the exact K in place of its table."""
    bottom, what = 0.8, exits(5000)
    rng = np.random.default_rng(2)
    depth, weight = rng.uniform(0.0, bottom, 500), rng.uniform(0.5, 2.0, 500)
    plane, again, totals, power = left(what, depth, weight, rim=rim)
    z = what[0][:, 2].astype(float)
    mu = np.maximum(np.sqrt(z**2 + rim * (1.0 - z**2)), LEAST)
    way = np.where(z > 0.0, depth[what[3]], bottom - depth[what[3]])
    light = weight[what[3]] * what[1][:, 0]
    through = np.exp(-total(z) * way / mu)
    assert again == pytest.approx(light * (1.0 - through), rel=2e-4, abs=1e-9)
    assert power.sum() + again.sum() == pytest.approx(light.sum(), rel=1e-12)
    assert power[0] == pytest.approx((light * through)[z > 0.0].sum(), rel=1e-4)
    assert totals.sum() == pytest.approx(again.sum(), rel=1e-12)
    assert totals[0] == pytest.approx((again * 0.6 * plate(z) / total(z)).sum(), rel=1e-4)
    row, column = SKY.project(-what[0].astype(float))
    spot = np.rint(row).astype(int) * 72 + np.rint(column).astype(int)
    expected = np.bincount(spot, light * through / mu, minlength=36 * 72)
    apart = np.abs(plane[: 36 * 72] - expected) > 1e-3 * expected + 1e-6
    assert np.count_nonzero(apart) <= 4  # directions on the edge between two pixels
    assert plane.sum() == pytest.approx(expected.sum(), rel=1e-4)


def test_stokes_plane_carries_the_same_power():
    """Degree of polarisation does not change on the way; its frame is that of `binning.add_stokes`."""
    what, depth = exits(1, rays=1), np.array([0.3])
    plane, *_ = left(what, depth, np.ones(1))
    stokes, *_ = left(what, depth, np.ones(1), stokes_count=4)
    i, q, u, v = stokes.reshape(-1, 4)[np.argmax(plane)]
    assert i == pytest.approx(plane.max(), rel=1e-6)
    before = what[1][0].astype(float)
    assert np.hypot(q, u) / i == pytest.approx(np.hypot(before[1], before[2]) / before[0], rel=1e-5)
    assert v / i == pytest.approx(before[3] / before[0], rel=1e-5)


def test_without_a_plane_the_rest_is_the_same():
    what, depth, weight = exits(300), np.full(500, 0.2), np.ones(500)
    _, again, totals, power = left(what, depth, weight)
    bare, sums, gained = np.zeros(300), np.zeros(2), np.zeros(2)
    leave(*what, depth, weight, MIXED, 0.8, 0.0, SKY.packed(), np.zeros(0), 1, bare, sums, gained)
    assert np.array_equal(again, bare)
    assert np.array_equal(totals, sums)
    assert np.array_equal(power, gained)


def test_level_light_is_finite():
    what = exits(4)
    what[0][:] = [1.0, 0.0, 0.0]
    plane, again, _, _ = left(what, np.full(500, 0.4), np.ones(500))
    assert np.all(np.isfinite(plane))
    assert again == pytest.approx(what[1][:, 0], rel=1e-6)  # all of it meets a crystal


# ---------------------------------------------------------------- the next order


def draw(what, depth, again, totals, counts, table=MIXED, bottom=0.8, key=KEY, levels=None):
    counts = np.asarray(counts)
    incoming, after = np.zeros((counts.sum(), 10), dtype=np.float32), np.full(counts.sum(), np.nan)
    sums, picked = np.zeros(len(counts)), np.zeros(len(counts), dtype=np.int64)
    levels = np.ones(len(counts)) if levels is None else levels
    half = len(again) // 2
    for part in (slice(0, half), slice(half, None)):  # list after list
        rows = tuple(each[part] for each in what)
        pick(
            *(*rows, depth, again[part], table, bottom, 0.0, levels, totals, counts, *key),
            *(sums, picked, incoming, after),
        )
    assert np.array_equal(picked, counts)
    return incoming, after


@pytest.mark.parametrize("counts", [(640, 256), (64, 0), (1, 1), (4096, 8192)])
def test_every_slot_is_filled_and_each_exit_drawn_as_often_as_it_should(counts):
    """Systematic resampling: an exit worth x picks is drawn floor(x) or ceil(x) times."""
    what, depth, weight = exits(3000), np.full(500, 0.3), np.ones(500)
    _, again, totals, _ = left(what, depth, weight)
    incoming, after = draw(what, depth, again, totals, counts)
    assert np.all(np.isfinite(after))
    assert np.linalg.norm(incoming[:, :3], axis=1) == pytest.approx(1.0, abs=1e-5)
    z = what[0][:, 2].astype(float)
    first = 0
    for kind, k in enumerate((lambda z: 0.6 * plate(z), lambda z: np.full_like(z, 0.4))):
        count = counts[kind]
        rows = incoming[first : first + count]
        first += count
        if count == 0:
            continue
        number = {tuple(row): place for place, row in enumerate(what[0].tolist())}
        times = np.bincount([number[tuple(row)] for row in rows[:, :3].tolist()], minlength=3000)
        wanted = again * k(z) / total(z) / totals[kind] * count
        assert np.all(np.abs(times - wanted) < 1.0 + 2e-3 * wanted)
        # a crystal's own area across the beam restores the mean: I = level / part
        assert rows[:, 3] == pytest.approx(1.0 / k(rows[:, 2].astype(float)), rel=1e-3)
        place = np.array([number[tuple(row)] for row in rows[:, :3].tolist()])
        ratio = what[1][place] / what[1][place, :1]
        assert rows[:, 3:7] / rows[:, 3:4] == pytest.approx(ratio, rel=1e-5, abs=1e-6)
        assert np.array_equal(rows[:, 7:10], what[2][place])


def test_next_event_lies_ahead_and_follows_the_exponential_law():
    bottom, depth = 0.8, np.full(1, 0.3)
    for z in (0.5, -0.5):
        what = exits(20, rays=1)
        what[0][:] = [np.sqrt(0.75), 0.0, z]
        _, again, totals, _ = left(what, depth, np.ones(1), SINGLE)
        _, after = draw(what, depth, again, totals, (8192,), SINGLE)
        path, way = (depth[0] - after, depth[0]) if z > 0.0 else (after - depth[0], bottom - depth[0])
        assert path.min() >= 0.0
        assert path.max() <= way
        result = kstest(path, lambda x, way=way: (1.0 - np.exp(-2.0 * x)) / (1.0 - np.exp(-2.0 * way)))
        assert result.pvalue > 1e-3


def test_draw_is_fair_over_keys():
    """An exit worth 0.37 of a pick is drawn in 37 % of the batches (binomial test, common practice)."""
    what, depth = exits(10, rays=1), np.full(1, 0.3)
    again = np.array([0.37, 0.63, 1.0, 0.5, 0.5, 0.2, 0.8, 1.0, 1.4, 1.6])
    table = SINGLE
    drawn = 0
    for batch in range(1000):
        incoming, _ = draw(what, depth, again, np.array([again.sum()]), (8,), table, key=batch_key(3, 0, batch))
        drawn += bool(np.any(np.all(incoming[:, :3] == what[0][0], axis=1)))
    assert binomtest(drawn, 1000, 0.37).pvalue > 1e-3


def test_neighbours_are_spread_over_the_list():
    """Picks next to each other stand far apart: a block of 64 of the list holds exits from everywhere."""
    what, depth, weight = exits(4096, rays=500), np.full(500, 0.3), np.ones(500)
    _, again, totals, _ = left(what, depth, weight, SINGLE)
    incoming, _ = draw(what, depth, again, totals, (2048,), SINGLE)
    number = {tuple(row): place for place, row in enumerate(what[0].tolist())}
    place = np.array([number[tuple(row)] for row in incoming[:, :3].tolist()])
    share = np.array([np.bincount(block // 1024, minlength=4) for block in place.reshape(-1, 64)])
    assert share.min() >= 8
    assert share.max() <= 24
