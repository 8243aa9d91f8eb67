"""Tables of flattened drops: the sphere's limit, energy, fringes at the top, canting, split bow, polarised light."""

from __future__ import annotations

import tracemalloc
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from functools import cache

import numpy as np
import pytest

from skyoptics.droplets import airy, debye, geometric, sizes
from skyoptics.droplets.flattened import SAMPLES, default_edges, flattened_scatterer, memory
from skyoptics.droplets.flattened_caustic import caustic_angle
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import direction
from skyoptics.optics import bows
from skyoptics.optics.bins import Bins
from skyoptics.optics.position_table import PositionTable
from skyoptics.optics.source import Disc, Source

DEG = np.pi / 180.0
WATER = 4.0 / 3.0
LINE = Bins.lines([600e-9])
EDGES = default_edges()
ANGLE = 0.5 * (EDGES[1:] + EDGES[:-1])
RING = -np.diff(np.cos(EDGES))


def water(wavelength):
    return np.full(np.shape(wavelength), WATER + 0j)


def sun(elevation, count=1, azimuth=180.0, stokes=(1.0, 0.0, 0.0, 0.0), disc=0.0):
    return Source(
        direction(azimuth * DEG, elevation * DEG),
        Disc(disc * DEG, Disc.point(count).darkening),
        np.ones(count),
        np.tile(np.array(stokes, float), (count, 1)),
    )


def make(distribution, elevation=20.0, law="thurai2007", canting=0.0, bins=LINE, index=water, **options):
    source = options.pop("source", sun(elevation, len(bins)))
    return flattened_scatterer(
        distribution, law, index, bins, source, canting * DEG, **{"position_step": 5 * DEG} | options
    )


@cache
def round_drops() -> PositionTable:
    return make(sizes.Single(0.25e-3))


@cache
def flat_drops() -> PositionTable:
    return make(sizes.Single(0.8e-3), 10.0)


def light(table, position):
    """Return I of one spectral bin at a position angle (deg), shape (nθ,)."""
    return table.values[np.argmin(np.abs(table.position - position * DEG)), :, 0, 0].astype(float)


def between(low, high):
    """Return which bins lie between two angles [deg]."""
    degrees = ANGLE / DEG
    return (degrees > low) & (degrees < high)


def mean(values, low, high):
    chosen = between(low, high)
    return np.sum((values * RING)[chosen]) / np.sum(RING[chosen])


def test_round_drops_look_alike_all_around():
    values = round_drops().values[..., 0, 0]
    for low, high in ((2, 60), (100, 137), (138, 150), (150, 175)):
        ring = [mean(row, low, high) for row in values]
        assert np.ptp(ring) < 0.005 * np.mean(ring)


def test_round_drops_have_the_ray_table_of_a_sphere_in_the_mean():
    table = geometric.scattering_table(water, 0.25e-3, LINE, edges=EDGES, relative_error=0.02)
    p11 = table.elements[:8, :, 0, 0].sum(axis=0) * 0.5 * table.albedo[0] / (4 * np.pi)
    p12 = table.elements[:8, :, 0, 1].sum(axis=0) * 0.5 * table.albedo[0] / (4 * np.pi)
    values = round_drops().values[..., 0, :].astype(float).mean(axis=0)
    # far from the bows' edges; between them Airy's light spreads into the dark band
    for low, high in ((1, 10), (10, 30), (30, 60), (60, 80), (85, 110), (110, 125), (137, 150), (150, 160), (160, 175)):
        assert mean(values[:, 0], low, high) == pytest.approx(mean(p11, low, high), rel=0.02)
        assert mean(values[:, 1], low, high) == pytest.approx(mean(p12, low, high), abs=0.015 * mean(p11, low, high))


@pytest.mark.parametrize("order", [2, 3])
def test_round_drops_have_the_bow_of_the_exact_waves(order):
    """Against the Debye term of the same order, which is exact; Airy's own scale drifts, rays of the table hold it."""
    table = make(sizes.Single(0.25e-3), orders=[order], batches=12)
    x = 2 * np.pi * 0.25e-3 / 600e-9
    found = light(table, 0.0)
    side = float(bows.side(WATER, order))
    away = side * (ANGLE - bows.scattering_angle(WATER, order)) / DEG
    near = (away > -0.5) & (away < 3.0)

    def strength(pair):
        return 0.5 * (np.abs(pair[0]) ** 2 + np.abs(pair[1]) ** 2)[near] / (x**2 * 2 * np.pi)

    s1, s2 = debye.amplitudes(WATER + 0j, x, np.cos(ANGLE), order)
    exact, ours = strength((s1[order], s2[order])), found[near]
    plain = strength(airy.amplitudes(WATER, x, ANGLE, order))
    main = away[near] < 1.5
    assert ours[main].sum() == pytest.approx(exact[main].sum(), rel=0.015)
    assert np.abs(ours - exact)[main].max() < 0.025 * exact.max()
    assert np.sqrt(np.mean((ours - exact) ** 2)) < 0.025 * exact.max()
    assert np.sqrt(np.mean((ours - exact) ** 2)) < {2: 1.0, 3: 0.4}[order] * np.sqrt(np.mean((plain - exact) ** 2))
    peak = ANGLE[near][np.argmax(ours)]
    assert peak == pytest.approx(float(airy.angle_at(WATER, x, 1.01879, order)), abs=0.1 * DEG)


@pytest.mark.parametrize("table", [round_drops, flat_drops])
def test_the_light_is_all_there(table):
    # the traced half of the extinction, less what is cut off after p = 7
    made = table()
    toward = made.extinction(np.array(np.sin(made.elevation)))[0]
    assert made.energy()[0] == pytest.approx(0.5 * toward * (1.0 - made.report["cut_off"]), rel=2e-3)
    assert sum(made.report["energy"].values()) + made.report["cut_off"] == pytest.approx(1.0, abs=1e-9)


def test_extinction_has_the_reference_as_its_mean():
    # Cauchy: the mean shadow of a convex body is a quarter of its surface
    cosine, weight = np.polynomial.legendre.leggauss(20)
    for made in (flat_drops(), make(sizes.Single(1e-3), canting=15.0, samples=16, batches=2, orders=[0])):
        mean_shadow = np.sum(0.5 * weight * made.extinction(cosine)[:, 0])
        assert mean_shadow == pytest.approx(1.0, abs=1e-3)
        assert made.extinction(np.array(1.0))[0] > made.extinction(np.array(0.0))[0]


@pytest.mark.parametrize("position", [0.0, 45.0, 90.0, 180.0])
@pytest.mark.parametrize("order", [2, 3])
def test_the_bow_stands_on_its_caustic(position, order):
    radius, table = 0.8e-3, flat_drops()
    ratio = table.report["least_axis_ratio"]
    caustic = float(caustic_angle(ratio, WATER, 10 * DEG, position * DEG, order))
    x = 2 * np.pi * radius / 600e-9
    shift = float(airy.angle_at(WATER, x, 1.01879, order)) - float(bows.scattering_angle(WATER, order))
    near = np.abs(ANGLE - caustic) < 1.0 * DEG
    peak = ANGLE[near][np.argmax(light(table, position)[near])]
    assert peak == pytest.approx(caustic + shift, abs=0.15 * DEG)


def test_rain_shows_supernumeraries_at_the_top_only():
    """Fraser (1983): many sizes put their fringes to one place at the top of a low sun's bow, and nowhere else."""
    rain = sizes.Cut(sizes.UlbrichGamma(0.8e-3, 4.0), 0.0, 3.5e-3)
    table = make(rain, 10.0, "beard-chuang1987", batches=3)
    ripple = []
    for position in (0.0, 90.0):
        curve = light(table, position)
        chosen = (ANGLE > 139.0 * DEG) & (ANGLE < 141.5 * DEG)
        line = np.polynomial.Polynomial.fit(ANGLE[chosen], np.log(curve[chosen]), 3)
        ripple.append(np.std(np.log(curve[chosen]) - line(ANGLE[chosen])))
    assert ripple[0] > 0.02
    assert ripple[0] > 4.0 * ripple[1]


@dataclass(frozen=True)
class Two:
    """Small round drops and large flat ones, the same cross-section of each."""

    small: float
    large: float

    def density(self, radius):
        return np.where(np.isin(radius, (self.small, self.large)), np.inf, 0.0)

    def moment(self, order):
        return float(np.sum(np.array(self._share()) * np.array([self.small, self.large]) ** order))

    def refinement(self, level):
        if level:
            return 1.0, np.empty(0), np.empty(0)
        return 0.0, np.array([self.small, self.large]), self._share()

    def _share(self):
        share = np.array([self.small, self.large]) ** -2.0
        return share / share.sum()


def test_small_and_large_drops_split_the_bow():
    table = make(Two(0.3e-3, 0.9e-3), 20.0)
    ratio = table.report["least_axis_ratio"]
    for position, number in ((0.0, 2), (95.0, 1)):
        edges = [float(caustic_angle(q, WATER, 20 * DEG, position * DEG, 2)) for q in (1.0, ratio)]
        apart = abs(edges[1] - edges[0]) > 3.0 * DEG
        assert apart == (number == 2)
        # light averaged over half a degree behind each caustic, against the gap between
        curve = np.convolve(light(table, position), np.ones(5) / 5, "same")
        peaks = [curve[between(e / DEG, e / DEG + 0.8)].max() for e in edges]
        if number == 2:
            gap = curve[between(edges[0] / DEG + 1.5, edges[1] / DEG - 0.5)].min()
            assert min(peaks) > 1.5 * gap


def test_canting_blurs():
    drops = sizes.Gaussian(0.7e-3, 0.03)
    upright, canted = (make(drops, 10.0, canting=c, batches=3) for c in (0.0, 8.0))
    for position, at_least in ((180.0, 1.3), (0.0, 1.05)):
        bow = (ANGLE > 136 * DEG) & (ANGLE < 150 * DEG)
        first, second = light(upright, position)[bow], light(canted, position)[bow]
        assert first.max() > at_least * second.max()
        assert second.sum() == pytest.approx(first.sum(), rel=0.05)
    assert canted.energy() == pytest.approx(upright.energy(), rel=2e-3)


def test_a_polarised_source_is_half_of_an_unpolarised_one():
    two = [
        make(sizes.Single(0.6e-3), source=sun(15.0, stokes=s), batches=2)
        for s in ((1, 1, 0, 0), (1, -1, 0, 0), (1, 0, 0, 0))
    ]
    upright, level, plain = (t.values[..., 0, :].astype(float) for t in two)
    bright = plain[..., 0] > 0.02 * plain[:, ANGLE > 130 * DEG, 0].max()
    assert np.abs(0.5 * (upright + level) - plain)[bright].max() < 0.02 * plain[bright][:, 0].max()
    # the top of the bow reflects light polarised along the bow, that is level light
    top = (ANGLE > 140 * DEG) & (ANGLE < 143 * DEG)
    assert level[0, top, 0].sum() > 10.0 * upright[0, top, 0].sum()
    slanted = make(sizes.Single(0.6e-3), source=sun(15.0, stokes=(1, 0, 1, 0)), batches=2)
    assert not slanted.symmetric
    right, left = light(slanted, 45.0), light(slanted, -45.0)
    # U > 0 swings up and right for who looks at the sun, so up and left for who looks at the bow: along its right half
    assert right[top].sum() > 4.0 * left[top].sum()


def test_absorption_and_bins():
    black = make(sizes.Single(0.5e-3), index=lambda w: np.full(np.shape(w), WATER + 3e-5j))
    depth = 4 * np.pi * 3e-5 / 600e-9 * 2 * 2 * 0.5e-3 * np.cos(bows.refraction(WATER, 2))
    clear = make(sizes.Single(0.5e-3))
    bow = (ANGLE > 139 * DEG) & (ANGLE < 141 * DEG)
    inside = [light(t, 0.0)[bow].sum() for t in (black, clear)]
    outside = light(make(sizes.Single(0.5e-3), orders=[0], batches=2), 0.0)[bow].sum()
    assert (inside[0] - outside) / (inside[1] - outside) == pytest.approx(np.exp(-depth), rel=0.03)
    assert black.report["absorbed"] > 0.3
    wide = make(sizes.Gaussian(0.3e-3, 0.1), bins=Bins.adjoining(np.array([500e-9, 520e-9, 700e-9])), batches=2,
                index=lambda w: 1.335 - 1e5 * (np.asarray(w) - 5.5e-7) * 0.4)  # fmt: skip
    assert wide.values.shape == (37, len(ANGLE), 2, 4)
    top = []
    for band in (0, 1):
        curve = wide.values[0, :, band, 0] * between(136.0, 150.0)
        top.append(np.ptp(ANGLE[curve > 0.5 * curve.max()]))
    assert top[1] > 1.2 * top[0]  # a wide bin smears its bow


def test_threads_change_no_bit_and_the_disc_smooths():
    arguments = (sizes.Gaussian(0.4e-3, 0.1), 15.0)
    alone = make(*arguments, batches=2, samples=24)
    with ThreadPoolExecutor(2) as pool:
        both = make(*arguments, batches=2, samples=24, executor=pool)
    assert np.array_equal(alone.values, both.values)
    other = make(*arguments, batches=2, samples=24, seed=1)
    assert not np.array_equal(alone.values, other.values)
    under = make(*arguments, batches=2, samples=24, source=sun(15.0, disc=0.2666))
    assert under.edges is None
    bow = (ANGLE > 137 * DEG) & (ANGLE < 145 * DEG)
    assert light(alone, 90.0)[bow].max() > 1.1 * np.interp(ANGLE[bow], under.angle, light(under, 90.0)).max()
    assert under.energy() == pytest.approx(alone.energy(), rel=3e-3)
    # another azimuth is the same table
    turned = make(*arguments, batches=2, samples=24, source=sun(15.0, azimuth=71.0))
    assert turned.values == pytest.approx(alone.values, rel=0.2, abs=0.01 * float(alone.values[0, bow].max()))


def test_memory_is_told():
    bins = Bins.adjoining(np.linspace(400e-9, 700e-9, 9))
    tracemalloc.start()
    make(sizes.Single(0.5e-3), bins=bins, batches=2, samples=16)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < memory(bins, position_step=5 * DEG)
    assert SAMPLES <= 4096


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"law": "thurai"}, "thurai2007"),
        ({"canting": 40.0}, "30 degrees"),
        ({"position_step": 0.1}, None),
        ({"position_step": 1.0}, "steps of position angle"),
        ({"orders": []}, "orders"),
        ({"orders": [9]}, "0 ... 7"),
        ({"samples": 4}, "samples"),
        ({"edges": np.array([0.0, 1.0, 2.0])}, "180 degrees"),
        ({"edges": np.array([0.0, 2.0, 1.0, np.pi])}, "growing"),
        ({"index": lambda w: 0.9 + 0 * w}, "n > 1"),
        ({"index": lambda w: 2.4 + 0 * w}, "below 2"),
        ({"index": lambda w: 1.33 + 0.02j + 0 * w}, "too large for rays"),
        ({"distribution": sizes.Single(5e-6)}, "use Mie"),
        ({"distribution": sizes.Single(4.5e-3)}, "cut the distribution"),
    ],
)
def test_bad_input_is_told_in_words(change, words):
    arguments = {"distribution": sizes.Single(0.3e-3), "samples": 16, "batches": 2} | change
    if words is None:
        assert make(**arguments).values.shape[0] == 33
        return
    with pytest.raises(DomainError, match=words):
        make(**arguments)


@pytest.mark.slow
def test_a_rain_spectrum_keeps_its_light_and_blurs_with_size():
    rain = sizes.Cut(sizes.MarshallPalmer(25.0), 0.0, 4e-3)
    bins = Bins.adjoining(np.linspace(400e-9, 700e-9, 17))
    table = flattened_scatterer(rain, "thurai2007", water, bins, sun(20.0, 16, disc=0.2666), executor=None)
    toward = table.extinction(np.array(np.sin(20 * DEG)))
    assert table.energy() == pytest.approx(0.5 * toward * (1.0 - table.report["cut_off"]), rel=3e-3)
    # large drops leave the top, not the sides, in proportion
    bow = (table.angle > 137.5 * DEG) & (table.angle < 139.5 * DEG)
    assert table.values[30, bow, 8, 0].sum() > 1.3 * table.values[0, bow, 8, 0].sum()
