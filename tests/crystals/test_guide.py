import time
from dataclasses import replace
from functools import cache

import numpy as np
import pytest

from skyoptics.camera.frame import aim, photograph
from skyoptics.crystals import guide as guides
from skyoptics.crystals import tracing
from skyoptics.crystals.orientations import Orientation
from skyoptics.crystals.prepared import prepare
from skyoptics.crystals.shapes import hexagonal_prism
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import direction
from skyoptics.geometry.directions import Directions
from skyoptics.kernels.lanes import CHUNK
from skyoptics.kernels.sobol import DIMENSIONS, gather_chunk
from skyoptics.materials.index import ice
from skyoptics.units import DEG

# aspect, law, tilt [deg], height of the sun [deg]; azimuth (sun: 180) and elevation of a 200 mm lens [deg]
FRAMES = {
    "sundog": (0.2, "plate", 1.5, 15.0, 204.6, 15.0),
    "tangent arc": (2.0, "column", 1.0, 20.0, 180.0, 43.0),
    "parry arc": (2.0, "parry", 1.0, 20.0, 180.0, 46.0),
    "halo": (1.0, "random", 0.0, 20.0, 203.5, 20.0),
}
RADIUS = 0.2666 * DEG


def frame(name, columns=24):
    rotation = aim(FRAMES[name][4] * DEG, FRAMES[name][5] * DEG)
    return photograph("rectilinear", 0.2, (0.036, 0.024), (columns * 2 // 3, columns), rotation).packed()


def whole_sky():
    return Directions.cylindrical((90, 180), np.eye(3), (np.pi / 2, -1.5 * np.pi), (np.pi / 2, -np.pi / 2)).packed()


def prepared(name, edges=(500e-9, 520e-9), **options):
    aspect, law, tilt, height = FRAMES[name][:4]
    options = {"radius": RADIUS, "size": 1e-4, "spectral_bin": 3} | options
    shape, towards = hexagonal_prism(aspect), direction(np.pi, height * DEG)
    return prepare(shape, Orientation(law, tilt * DEG), ice(), edges, towards, **options)


@cache
def learnt(name, columns=24, seed=1):
    guide = guides.learn(prepared(name, (400e-9, 700e-9), spectral_bin=0), frame(name, columns), seed)
    assert guide is not None
    return guide


def batches(item, grid, count, rays):
    return np.array([tracing.trace_plane(item, grid, 5, k, rays, dtype=np.float64)[0] for k in range(count)])


# ---------------------------------------------------------------- expectation, bits, energy


def z_scores(name, count, rays, columns):
    """Guided less plain over the error of both, of pixels with light."""
    plain, guided = prepared(name), prepared(name, guide=learnt(name))
    grid = frame(name, columns)
    a, b = batches(plain, grid, count, rays), batches(guided, grid, count, rays)
    variance = (a.var(axis=0, ddof=1) + b.var(axis=0, ddof=1)) / count
    lit = (a > 0.0).mean(axis=0) > 0.8  # of the plain batches: elsewhere the scatter is no Gaussian's
    totals = [runs.sum(axis=(1, 2)) for runs in (a, b)]
    whole = (totals[1].mean() - totals[0].mean()) / np.sqrt(sum(t.var(ddof=1) for t in totals) / count)
    return ((b.mean(axis=0) - a.mean(axis=0))[lit] / np.sqrt(variance[lit])), whole


@pytest.mark.parametrize("name", FRAMES)
def test_guided_rays_make_the_same_picture_as_plain_ones(name):
    z, whole = z_scores(name, 32, 2**15, 12)
    assert len(z) > 15
    assert np.sqrt(np.mean(z**2)) == pytest.approx(1.0, abs=4.0 / np.sqrt(2 * len(z)))
    assert abs(z.mean()) < 4.0 / np.sqrt(len(z))
    assert abs(whole) < 4.0


@pytest.mark.slow
@pytest.mark.parametrize("name", FRAMES)
def test_guided_rays_make_the_same_picture_pixel_by_pixel(name):
    z, whole = z_scores(name, 60, 2**18, 36)
    assert len(z) > 180
    assert 0.9 < np.sqrt(np.mean(z**2)) < 1.1
    assert abs(z.mean()) < 0.25
    assert abs(whole) < 3.5


def test_bits_depend_on_seed_bin_and_batch_alone():
    grid = frame("sundog")
    again = guides.learn(prepared("sundog", (400e-9, 700e-9), spectral_bin=0), grid, 1)
    first = learnt("sundog")
    assert all(np.array_equal(getattr(first, name), getattr(again, name)) for name in ("sums", "boxes", "dimensions"))
    one = tracing.trace_plane(prepared("sundog", guide=first), grid, 1, 2, 8192)[0]
    assert np.array_equal(one, tracing.trace_plane(prepared("sundog", guide=again), grid, 1, 2, 8192)[0])
    for item, seed, k in (
        (prepared("sundog", guide=first), 1, 3),
        (prepared("sundog", guide=first), 2, 2),
        (prepared("sundog", guide=first, spectral_bin=4), 1, 2),
        (prepared("sundog"), 1, 2),
    ):
        assert not np.array_equal(one, tracing.trace_plane(item, grid, seed, k, 8192)[0])
    assert len(learnt("sundog", seed=2).sums) != len(first.sums)


@pytest.mark.parametrize("name", FRAMES)
def test_energy_is_kept_with_weights(name):
    item = prepared(name, guide=learnt(name))
    tallies = [tracing.trace_plane(item, frame(name), 1, k, 2**15)[1] for k in range(16)]
    for tally in tallies:
        assert tally.scattered + tally.absorbed == pytest.approx(tally.incident + tally.roulette, rel=2e-6)
        assert tally.rays == 2**15
    for values, expected in (
        ([tally.incident / tally.rays for tally in tallies], item.mean_incident),
        ([tally.roulette / tally.rays for tally in tallies], 0.0),
    ):
        assert abs(np.mean(values) - expected) < 4.5 * np.std(values, ddof=1) / np.sqrt(len(values)) + 1e-4


def test_scatter_between_guided_batches_is_an_honest_error():
    grid, item = frame("sundog", 12), prepared("sundog", guide=learnt("sundog"))
    runs = np.array(
        [[tracing.trace_plane(item, grid, s, k, 2**14, dtype=np.float64)[0] for k in range(4)] for s in range(30)]
    )
    means, stated = runs.mean(axis=1), runs.std(axis=1, ddof=1) / 2.0
    busy = (runs > 0.0).mean(axis=(0, 1)) > 0.9
    scatter = np.sqrt(np.mean((means - means.mean(axis=0))[:, busy] ** 2) * 30 / 29)
    assert busy.sum() > 15
    assert scatter / np.sqrt(np.mean(stated[:, busy] ** 2)) == pytest.approx(1.0, abs=0.1)


# ---------------------------------------------------------------- gain


def gain(columns, count, rays):
    """Variance · time of plain over guided rays, thread's time, batches taken in turn; and the same of lightness."""
    grid = frame("sundog", columns)
    items = [prepared("sundog"), prepared("sundog", guide=learnt("sundog", columns))]
    seconds, planes = [0.0, 0.0], ([], [])
    tracing.trace_plane(items[0], grid, 5, 0, 64)
    for k in range(count):
        for which, item in enumerate(items):
            start = time.thread_time()
            planes[which].append(tracing.trace_plane(item, grid, 5, k, rays)[0].astype(float))
            seconds[which] += time.thread_time() - start
    variance = [np.var(runs, axis=0, ddof=1) for runs in planes]
    light = np.mean(planes[1], axis=0).reshape(16, columns * 2 // 48, 24, columns // 24)
    light = light.mean(axis=(1, 3), keepdims=True) * np.ones(light.shape)
    light = light.reshape(variance[0].shape)
    shown = light > 0.02 * light.max()
    slope = (light / light[shown].mean() + 0.1) ** (
        -4.0 / 3.0
    )  # of lightness, squared: CIE 1976, a tenth is background
    costs = [(seconds[i] * variance[i][shown].sum(), seconds[i] * (variance[i] * slope)[shown].sum()) for i in range(2)]
    return costs[0][0] / costs[1][0], costs[0][1] / costs[1][1]


def test_guided_rays_need_less_time_for_a_sundog():
    plain, lightness = gain(96, 8, 2**17)  # a small picture has a small pilot
    assert plain > 2.0
    assert lightness > 2.0


@pytest.mark.slow
def test_guided_rays_need_a_fifth_of_the_time_for_a_sundog():
    plain, lightness = gain(1200, 12, 2**18)
    assert plain > 5.0
    assert lightness > 5.0


def test_wide_and_dark_frames_are_left_alone():
    assert guides.learn(prepared("halo"), whole_sky(), 1) is None
    assert guides.learn(prepared("sundog"), whole_sky(), 1) is None
    below = Directions.cylindrical((8, 8), np.eye(3), (0.1, 0.0), (-1.0, -1.1)).packed()
    assert guides.learn(prepared("sundog", radius=0.0), below, 1) is None  # not even the reflected sun


def test_rare_light_is_found_though_the_first_pilot_meets_next_to_none():
    grid = photograph("rectilinear", 0.6, (0.036, 0.024), (16, 24), aim(205 * DEG, 15 * DEG)).packed()
    item = prepared("tangent arc", (400e-9, 700e-9), spectral_bin=0)
    first, _ = tracing.trace_exits(item, 1, guides.LAST_BATCH, 2**12, directions=grid)
    assert len(first.ray) < 5
    guide = guides.learn(item, grid, 1)
    assert guide is not None
    lit = [
        np.count_nonzero(np.bincount(tracing.trace_exits(x, 1, 0, 2**15, directions=grid)[0].ray))
        for x in (item, replace(item, guide=guide))
    ]
    assert lit[1] > 20 * max(lit[0], 1)


def test_angle_tables_take_no_guide():
    with pytest.raises(DomainError, match="angle table"):
        tracing.trace_angles(prepared("halo", guide=learnt("halo")), 90, 1, 0, 4096)


# ---------------------------------------------------------------- boxes


def clouds(count=20000, seed=4):
    """Two clouds in the unit cube of three dimensions, and their moments."""
    random = np.random.default_rng(seed)
    a = random.normal((0.3, 0.7, 0.5), (0.02, 0.03, 0.4), (count, 3))
    b = random.normal((0.8, 0.2, 0.1), (0.01, 0.1, 0.03), (count // 4, 3))
    places = np.concatenate([a, b])
    return places[np.all((places > 0.0) & (places < 1.0), axis=1)]


def test_boxes_tile_the_cube_and_weights_keep_every_expectation():
    places = clouds()
    guide, promised = guides.grow(places, np.full(len(places), 1e-3), [3, 5, 0], 0.1)
    boxes = guide.boxes.reshape(-1, 7).astype(float)
    share, volume = np.diff(guide.sums), np.prod(boxes[:, 4:], axis=1)
    assert len(boxes) > 50
    assert promised > 20.0
    assert guide.sums[0] == 0.0
    assert guide.sums[-1] == 1.0
    assert volume.sum() == pytest.approx(1.0, abs=1e-6)
    assert boxes[:, 0] * share == pytest.approx(volume, rel=1e-5)
    assert boxes[:, 0].max() <= 10.0 * (1 + 1e-6)
    probes = np.random.default_rng(1).random((2000, 3))
    above = probes[:, None] >= boxes[:, 1:4]
    below = probes[:, None] < boxes[:, 1:4] + boxes[:, 4:]
    assert np.all((above & below).all(axis=2).sum(axis=1) == 1)
    # other hits of the same clouds: gain as promised
    fresh = clouds(seed=5)
    cell = ((fresh[:, None] >= boxes[:, 1:4]) & (fresh[:, None] < boxes[:, 1:4] + boxes[:, 4:])).all(axis=2).argmax(1)
    assert 0.75 * promised < 1.0 / boxes[cell, 0].mean() < 1.05 * promised


def test_even_hits_are_not_divided():
    places = np.random.default_rng(2).random((5000, 4))
    guide, promised = guides.grow(places, np.ones(5000), [0, 2, 3, 4], 0.1)
    assert len(guide.sums) < 20
    assert promised < 1.05


def test_points_go_to_boxes_by_their_shares():
    places = clouds()
    guide, _ = guides.grow(places, np.ones(len(places)), [3, 5, 0], 0.1)
    rays, cell = 2**14, 0
    weights, moved, met = np.zeros(CHUNK, np.float32), [], []
    random = np.random.default_rng(3)
    for first in range(0, rays, CHUNK):
        points = random.random(DIMENSIONS * CHUNK).astype(np.float32)
        before = points.copy()
        cell = gather_chunk(first, rays, 0.4, cell, guide.sums, guide.boxes, guide.dimensions, points, weights)
        used = points.reshape(DIMENSIONS, CHUNK)
        assert np.array_equal(np.delete(used, [0, 3, 5], 0), np.delete(before.reshape(DIMENSIONS, CHUNK), [0, 3, 5], 0))
        moved.append(used[[3, 5, 0]].T)
        met.append(weights.copy())
    assert cell == len(guide.sums) - 2
    moved, met = np.concatenate(moved), np.concatenate(met)
    boxes = guide.boxes.reshape(-1, 7)
    number = np.searchsorted(guide.sums, (np.arange(rays) + 0.4) / rays, side="right") - 1
    assert np.abs(np.bincount(number, minlength=len(boxes)) - rays * np.diff(guide.sums)).max() < 1.0 + 1e-6
    assert np.array_equal(met, boxes[number, 0])
    inside = (moved - boxes[number, 1:4]) / boxes[number, 4:]
    assert inside.min() > -1e-3
    assert inside.max() < 1.001
    assert moved.max() < 1.0
