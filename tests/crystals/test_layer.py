"""Layers of crystals: closed form, energy, and plain Monte Carlo transport written here."""

import numpy as np
import pytest
from scipy.stats import chi2

from skyoptics.crystals import tracing
from skyoptics.crystals.layer import PLANES, Layer, LayerKind, extinction_at, extinction_table, layer_kind, trace_layer
from skyoptics.crystals.orientations import LAWS, Orientation, relative_extinction
from skyoptics.crystals.prepared import Guide, prepare
from skyoptics.crystals.shapes import hexagonal_prism
from skyoptics.crystals.tracing import ExitList, Tally
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import direction
from skyoptics.geometry.directions import Directions
from skyoptics.kernels.layer import KNOTS
from skyoptics.sky.slab import rim, slab
from skyoptics.units import DEG

GREEN = (550e-9, 550e-9)
RANDOM = Orientation("random")
RAYS = 2**14


def prepared(aspect=1.0, law=RANDOM, elevation_deg=20.0, index=lambda w: 1.31 + 0.0 * w, **options):
    towards = direction(0.0, elevation_deg * DEG)
    return prepare(hexagonal_prism(aspect), law, index, GREEN, towards, **options)


def kind(aspect=1.0, law=RANDOM, share=1.0, **options):
    return layer_kind([prepared(aspect, law, **options)], hexagonal_prism(aspect), law, share)


def layer(depth, *kinds, **options):
    """Return a layer of a depth in events, half its optical depth."""
    return Layer(kinds or (kind(),), 2.0 * depth, **options)


def sky(rows=18, columns=36):
    return Directions.cylindrical((rows, columns), np.eye(3), (np.pi / 2, -1.5 * np.pi), (np.pi / 2, -np.pi / 2))


def traced(item, batches, rays=RAYS, grid=None, **options):
    """Return planes by batch ÷ (rays · solid angle), and tallies."""
    grid = grid or sky()
    solid = grid.solid_angle()[None]
    runs = [trace_layer(item, 0, grid.packed(), 5, k, rays, **options) for k in range(batches)]
    planes = np.array([plane for plane, _ in runs], dtype=np.float64)
    return planes / (rays * (solid if planes.ndim == 4 else solid[..., None])), [tally for _, tally in runs]


def mean_and_error(values):
    return np.mean(values, axis=0), np.std(values, axis=0, ddof=1) / np.sqrt(len(values))


def whole(tally):
    """Return all that became of the light ÷ incident, − 1."""
    out = tally.up.sum() + tally.down.sum()
    return (tally.unscattered + tally.absorbed + out + tally.left) / tally.incident - 1.0


# ---------------------------------------------------------------- a scatterer made here


def turned(travel, cosine, azimuth):
    """Return directions at given angles about others."""
    helper = np.where(np.abs(travel[:, :1]) < 0.7, [[1.0, 0.0, 0.0]], [[0.0, 1.0, 0.0]])
    a = np.cross(travel, helper)
    a /= np.linalg.norm(a, axis=1)[:, None]
    b = np.cross(travel, a)
    sine = np.sqrt(1.0 - cosine**2)[:, None]
    return cosine[:, None] * travel + sine * (np.cos(azimuth)[:, None] * a + np.sin(azimuth)[:, None] * b)


def henyey_greenstein(rng, count, g):
    """Cosine of the scattering angle (Henyey & Greenstein, Astrophys. J. 93, 70 (1941))."""
    u = rng.random(count)
    if g == 0.0:
        return 2.0 * u - 1.0
    return (1.0 + g * g - ((1.0 - g * g) / (1.0 - g + 2.0 * g * u)) ** 2) / (2.0 * g)


class Dust:
    """Kinds of grains: extinction by direction, asymmetry, albedo; each ray leaves as two of unequal power."""

    def __init__(self, kinds, elevation_deg):
        self.kinds, self.sun = kinds, -direction(0.0, elevation_deg * DEG)
        self.elevation_deg = elevation_deg

    def layer(self, depth, shares, **options):
        vertical = 1.0 - np.linspace(0.0, 1.0, KNOTS) ** 2
        item = prepared(elevation_deg=self.elevation_deg)
        kinds = [LayerKind((item,), k(vertical), share) for (k, _, _), share in zip(self.kinds, shares, strict=True)]
        return Layer(tuple(kinds), 2.0 * depth, **options)

    def __call__(self, kind, incoming, seed, batch, rays):
        k, g, albedo = self.kinds[kind]
        rng = np.random.default_rng([seed % 2**32, seed >> 32, batch])
        travel = np.tile(self.sun, (rays, 1)) if incoming is None else incoming.direction.astype(float)
        power = np.ones(rays) if incoming is None else incoming.stokes[:, 0].astype(float)
        power = power * k(np.abs(travel[:, 2]))
        rows, numbers = np.zeros((2 * rays, 14), dtype=np.float32), np.zeros((2 * rays, 6), dtype=np.uint32)
        for half, share in enumerate((0.7, 0.3)):
            at = slice(half, None, 2)
            rows[at, 0:3] = turned(travel, henyey_greenstein(rng, rays, g), 2.0 * np.pi * rng.random(rays))
            rows[at, 3] = albedo * share * power
            rows[at, 10:13] = travel
            numbers[at, 0] = np.arange(rays)
        rows[:, 7:10] = np.cross(rows[:, 0:3], [0.3, 0.5, 0.8])
        parts = (rows[:, 0:3], rows[:, 10:13], rows[:, 3:7], rows[:, 7:10])
        exits = ExitList(*parts, *(numbers[:, 0] for _ in range(5)))
        scattered = float(rows[:, 3].sum())
        return exits, Tally(rays, power.sum(), scattered, power.sum() - scattered, 0.0, 0.0, 0, 0.0, 0.0)


def plates(vertical):
    return 0.5 + 1.0 * vertical


def columns(vertical):
    return 1.2 - 0.4 * vertical**2


def ball(vertical):
    return np.ones_like(vertical)


def analogue(kinds, shares, depth, sun, rays, orders, rng):
    """Follow photons one by one through a level slab: shares up and down by order, absorbed and unscattered."""
    travel = np.tile(sun, (rays, 1))
    t = np.zeros(rays)
    up, down, absorbed, unscattered = np.zeros(orders), np.zeros(orders), 0, 0
    for order in range(orders + 1):
        parts = np.array([share * k(np.abs(travel[:, 2])) for (k, _, _), share in zip(kinds, shares, strict=True)])
        t = t - rng.exponential(size=len(t)) / parts.sum(axis=0) * travel[:, 2]
        if order == 0:
            unscattered = np.count_nonzero(t >= depth)
        else:
            up[order - 1], down[order - 1] = np.count_nonzero(t <= 0.0), np.count_nonzero(t >= depth)
        inside = (t > 0.0) & (t < depth)
        if order == orders:
            break
        t, travel, parts = t[inside], travel[inside], parts[:, inside]
        which = (rng.random(len(t)) > np.cumsum(parts / parts.sum(axis=0), axis=0)).sum(axis=0)
        alive = rng.random(len(t)) < np.array([albedo for _, _, albedo in kinds])[which]
        absorbed += np.count_nonzero(~alive)
        t, travel, which = t[alive], travel[alive], which[alive]
        cosine = np.zeros(len(t))
        for number, (_, g, _) in enumerate(kinds):
            cosine[which == number] = henyey_greenstein(rng, np.count_nonzero(which == number), g)
        travel = turned(travel, cosine, 2.0 * np.pi * rng.random(len(t)))
    return up / rays, down / rays, absorbed / rays, unscattered / rays


MIXED = ((plates, 0.7, 0.95), (columns, 0.0, 1.0), (ball, -0.3, 0.8))
SHARES = (0.5, 0.3, 0.2)


@pytest.mark.parametrize("depth", [0.1, 1.0, 3.0])
@pytest.mark.parametrize("elevation_deg", [65.0, -12.0])
def test_a_mixture_of_grains_agrees_with_photons_followed_one_by_one(depth, elevation_deg):
    """Three kinds, extinction by direction, absorption, light from above or below, four orders apart: 4 standard errors."""
    dust = Dust(MIXED, elevation_deg)
    _, tallies = traced(dust.layer(depth, SHARES), 6, 4096, orders=4, scatter=dust)
    photons = 100_000
    sun = np.abs(dust.sun) * [1.0, 1.0, -1.0]  # from above; light from below is its mirror image
    up, down, absorbed, unscattered = analogue(MIXED, SHARES, depth, sun, photons, 4, np.random.default_rng(8))
    if elevation_deg < 0.0:
        up, down = down, up
    for what, expected in (
        (lambda tally: tally.up[:4] / tally.incident, up),
        (lambda tally: tally.down[:4] / tally.incident, down),
        (lambda tally: tally.absorbed / tally.incident, absorbed),
        (lambda tally: tally.unscattered / tally.incident, unscattered),
    ):
        mean, error = mean_and_error([what(tally) for tally in tallies])
        chance = np.sqrt((np.asarray(expected) + 1.0 / photons) / photons)
        assert np.all(np.abs(mean - expected) <= 4.0 * np.hypot(error, chance) + 1e-6)
    assert whole(tallies[0]) == pytest.approx(0.0, abs=2e-5)  # no chance in the power of these grains


@pytest.mark.parametrize("edge", [0.0, rim()])
def test_isotropic_light_scattered_once_is_the_slab_formula(edge):
    """Phase ½ k0 / 4π (half the reference extinction is diffraction): radiance by elevation, both sides, to 4 standard errors."""
    dust = Dust(((plates, 0.0, 1.0), (columns, 0.0, 1.0)), 30.0)
    shares = (0.6, 0.4)
    grid = Directions.cylindrical((60, 1), np.eye(3), (-np.pi, np.pi), (30 * DEG, -30 * DEG))
    planes, _ = traced(dust.layer(0.5, shares, rim=edge), 12, 2 * RAYS, grid, orders=1, scatter=dust)
    mean, error = mean_and_error(planes[:, 0, :, 0])
    fine = (np.arange(60 * 64) + 0.5) / (60 * 64) * -60 * DEG + 30 * DEG
    height = 9e3 if edge else 1e-6
    amount = slab(fine, 30 * DEG, 1.0, lambda z: 0.6 * plates(z) + 0.4 * columns(z), height)
    expected = (amount * np.cos(fine)).reshape(60, 64).sum(axis=1) / np.cos(fine).reshape(60, 64).sum(axis=1)
    expected *= 0.5 * (0.6 * plates(0.5) + 0.4 * columns(0.5)) / (4.0 * np.pi)
    assert np.all(np.abs(mean - expected) < 5.0 * error)
    deviate = np.sum(((mean - expected) / error) ** 2 * 9.0 / 11.0)  # mean of t² with 11 degrees of freedom
    assert deviate < chi2.ppf(0.9999, 60)
    assert np.median(error / expected) < 0.02


# ---------------------------------------------------------------- crystals


@pytest.mark.parametrize("law", LAWS)
@pytest.mark.parametrize("tilt_deg", [0.0, 5.0])
def test_extinction_table_is_the_projected_area(law, tilt_deg):
    """The sum over all poses of `projected_area`; over all directions the mean is 1 (Cauchy 1832)."""
    shapes, orientation = [hexagonal_prism(0.3), hexagonal_prism(2.0)], Orientation(law, tilt_deg * DEG)
    table = extinction_table(shapes, orientation)
    vertical = np.array([0.0, -0.2, 0.5, 0.9, 0.999, 1.0])
    expected = relative_extinction(shapes, orientation, vertical)
    assert extinction_at(table, vertical) == pytest.approx(expected, rel=5e-4)
    middle = (np.arange(20000) + 0.5) / 20000
    assert extinction_at(table, middle).mean() == pytest.approx(1.0, abs=2e-5)


def two_kinds(elevation_deg=25.0):
    """Plates that lie still and prisms at random."""
    flat = Orientation("plate", 2.0 * DEG)
    return (
        kind(0.3, flat, 0.6, elevation_deg=elevation_deg),
        kind(1.0, RANDOM, 0.4, elevation_deg=elevation_deg),
    )


@pytest.mark.parametrize("depth", [0.1, 1.0, 3.0])
def test_first_order_is_phase_times_amount(depth):
    """Σ over kinds of traced phase · closed form of the slab, pixel by pixel: chi-square."""
    item = layer(depth, *two_kinds(), rim=rim())
    grid, batches = sky(90, 8), 10
    planes, _ = traced(item, batches, 4 * RAYS, grid, orders=1)
    _, elevation = np.meshgrid(np.arange(8), (90.0 - 2.0 * (np.arange(90) + 0.5)) * DEG)
    fine = elevation[..., None] + np.linspace(-0.95, 0.95, 20) * DEG
    table = item.tables()[-1, :KNOTS]
    amount = slab(fine, 25 * DEG, 2.0 * depth, lambda z: extinction_at(table, z))
    amount = (amount * np.cos(fine)).sum(axis=-1) / np.cos(fine).sum(axis=-1)
    single = []
    for k in range(batches):
        phase = 0.0
        for each in item.kinds:
            plane, _ = tracing.trace_plane(each.prepared[0], grid.packed(), 77, k, 4 * RAYS)
            phase = phase + each.share * plane / (2.0 * 4 * RAYS * grid.solid_angle())
        single.append(phase * amount)
    a, da = mean_and_error(planes[:, 0])
    b, db = mean_and_error(single)
    held = (b > 2e-3 * b.max()) & (np.abs(elevation) < 84 * DEG)
    held &= np.abs(elevation) > 4 * DEG  # nearer the horizon amount and phase both change much within a pixel
    z2 = ((a - b)[held] / np.hypot(da, db)[held]) ** 2
    assert held.sum() > 150
    assert np.median(np.hypot(da, db)[held] / b[held]) < 0.08
    assert abs(np.sum((a - b) * grid.solid_angle()) / np.sum(b * grid.solid_angle())) < 0.01
    assert np.mean(np.minimum(z2, 25.0)) < 1.5


@pytest.mark.parametrize("depth", [0.1, 1.0, 3.0])
def test_light_is_kept(depth):
    """All orders + unscattered + absorbed + what is left = incident."""
    lossy = layer(depth, *(kind(0.5, law, 0.5, index=lambda w: 1.31 + 1e-4j + 0.0 * w, size=2e-5) for law in TWO_LAWS))
    for item in (layer(depth, *two_kinds()), lossy):
        _, tallies = traced(item, 6, 4096)
        mean, error = mean_and_error([whole(tally) for tally in tallies])
        assert abs(mean) < 4.0 * error + 1e-4
        assert abs(mean) < 3e-3
        total = sum(tallies[1:], tallies[0])
        assert total.left < 1.2e-4 * total.incident
        assert total.up.sum() > 0.0
    assert total.absorbed > 0.01 * total.incident * min(depth, 1.0)


TWO_LAWS = (Orientation("column", 1.0 * DEG), RANDOM)


@pytest.mark.slow
@pytest.mark.parametrize("depth", [0.1, 1.0, 3.0])
def test_light_is_kept_to_a_thousandth(depth):
    _, tallies = traced(layer(depth, *two_kinds()), 16, 2**16)
    mean, error = mean_and_error([whole(tally) for tally in tallies])
    assert error < 4e-4
    assert abs(mean) < 1e-3
    mean, error = mean_and_error([tally.roulette / tally.incident for tally in tallies])
    assert abs(mean) < 4.0 * error + 1e-6


def angle_table(aspect, count=1800, batches=4):
    """Return running sums of scattered power over scattering angle, from 0 to 1."""
    sums = [tracing.trace_angles(prepared(aspect), count, 9, k, 2**16, False)[0][:, 0] for k in range(batches)]
    running = np.concatenate([[0.0], np.cumsum(np.sum(sums, axis=0))])
    return running / running[-1]


def second_to_first(running, depth, elevation_deg, photons, rng):
    """Plain slab Monte Carlo, unpolarised: what left after two scatterings ÷ after one, and its standard error."""
    mu = np.sin(elevation_deg * DEG)
    angles = np.linspace(0.0, np.pi, len(running))
    t = -mu * np.log1p(rng.random(photons) * np.expm1(-depth / mu))
    travel = np.tile(-direction(0.0, elevation_deg * DEG), (photons, 1))
    out = []
    for _ in range(2):
        cosine = np.cos(np.interp(rng.random(len(t)), running, angles))
        travel = turned(travel, cosine, 2.0 * np.pi * rng.random(len(t)))
        after = t - travel[:, 2] * rng.exponential(size=len(t))
        inside = (after > 0.0) & (after < depth)
        out.append(np.count_nonzero(~inside))
        t, travel = after[inside], travel[inside]
    ratio = out[1] / out[0]
    return ratio, ratio * np.sqrt(1.0 / out[0] + 1.0 / out[1])


def ratios(tallies):
    return [(tally.up[1] + tally.down[1]) / (tally.up[0] + tally.down[0]) for tally in tallies]


@pytest.mark.parametrize("elevation_deg", [90.0, 20.0])
def test_second_order_of_a_thin_layer(elevation_deg):
    """Random prisms, depth 0.05 in events: 4–9 % of the first, and what photons followed one by one give (3 errors)."""
    item = layer(0.05, kind(0.3, elevation_deg=elevation_deg))
    _, tallies = traced(item, 8, orders=2)
    mean, error = mean_and_error(ratios(tallies))
    expected, chance = second_to_first(angle_table(0.3), 0.05, elevation_deg, 300_000, np.random.default_rng(4))
    assert 0.04 < mean < 0.09
    assert abs(mean - expected) < 3.0 * np.hypot(error, chance)
    assert np.hypot(error, chance) < 0.015 * mean


@pytest.mark.slow
@pytest.mark.parametrize("aspect", [0.3, 1.0])
@pytest.mark.parametrize("elevation_deg", [90.0, 50.0, 20.0])
def test_second_order_against_photons_with_full_statistics(aspect, elevation_deg):
    rng, running = np.random.default_rng(6), angle_table(aspect, 3600, 16)
    for depth in (0.05, 0.5):
        _, tallies = traced(layer(depth, kind(aspect, elevation_deg=elevation_deg)), 12, 2**16, orders=2)
        mean, error = mean_and_error(ratios(tallies))
        expected, chance = second_to_first(running, depth, elevation_deg, 2_000_000, rng)
        assert abs(mean - expected) < 3.0 * np.hypot(error, chance)
        assert np.hypot(error, chance) < 5e-3 * mean


@pytest.mark.slow
@pytest.mark.parametrize("elevation_deg", [90.0, 50.0, 20.0])
def test_second_order_goes_as_depth_times_its_logarithm(elevation_deg):
    """Ratio = depth (p ln(1/depth) + c): p the density of exits over their vertical component at the horizon.

    Light of vertical component µ that has s to go meets 1 − e^(−s/µ) events; ∫ p dµ of that over both sides of a layer, mean
    over s, is p · depth · ln(1/depth) to leading order (own derivation).
    """
    item = kind(0.3, elevation_deg=elevation_deg)
    depths = np.array([0.05, 0.0158, 0.005])
    means, errors = [], []
    for depth in depths:
        _, tallies = traced(layer(depth, item), 16, 2**16, orders=2)
        mean, error = mean_and_error(ratios(tallies))
        means.append(mean / depth)
        errors.append(error / depth)
    logarithm = np.log(1.0 / depths)
    slopes = np.diff(means) / np.diff(logarithm)
    error = np.hypot(errors[1:], errors[:-1]) / np.diff(logarithm)
    exits, _ = tracing.trace_exits(item.prepared[0], 2, 0, 2**19)
    near = np.abs(exits.direction[:, 2]) < 0.05
    density = exits.stokes[near, 0].sum() / exits.stokes[:, 0].sum() / 0.1
    assert np.all(np.abs(slopes - density) < 4.0 * error + 0.1 * density)
    assert means[0] < means[1] < means[2]


def test_parhelia_at_twice_the_distance():
    """Light of a parhelion makes one more of its own: 44° parhelia (Tape, *Atmospheric Halos*, 1994, from memory).

    Plates that lie dead level, sun at 15°: azimuth of least deviation φ, sin(30° + φ/2) = n' / 2 with Bravais' index
    n'² = (n² − sin² h) / cos² h.
    """
    still = Orientation("plate", 0.3 * DEG)
    h = 15.0 * DEG
    effective = np.sqrt(1.31**2 - np.sin(h) ** 2) / np.cos(h)
    phi = 2.0 * (np.arcsin(effective / 2.0) - 30 * DEG)
    grid = Directions.cylindrical((1, 140), np.eye(3), (160 * DEG, 20 * DEG), (17 * DEG, 13 * DEG))
    item = layer(0.3, kind(0.3, still, elevation_deg=15.0))
    planes, _ = traced(item, 4, 2**16, grid, orders=2)
    first, second = planes.mean(axis=0)[:2, 0]
    away = np.abs(90.0 - (160.0 - (np.arange(140) + 0.5)))  # from the sun in azimuth, 1° wide
    twice = np.abs(away - 2.0 * phi / DEG - 0.5) < 1.2
    beside = (np.abs(away - 2.0 * phi / DEG) > 4.0) & (np.abs(away - 2.0 * phi / DEG) < 7.0)
    assert second[twice].max() > 2.0 * second[beside].mean()
    assert first[twice].max() < 1.5 * first[beside].mean()


def test_polarised_planes_hold_the_same_light():
    item = layer(0.4, *two_kinds())
    plain, tally = trace_layer(item, 0, sky().packed(), 1, 0, RAYS, dtype=np.float64)
    stokes, other = trace_layer(item, 0, sky().packed(), 1, 0, RAYS, stokes_count=4, dtype=np.float64)
    assert plain.shape == (PLANES, 18, 36)
    assert stokes.shape == (PLANES, 18, 36, 4)
    assert np.array_equal(tally.up, other.up)
    assert stokes[..., 0] == pytest.approx(plain, rel=1e-9, abs=1e-12)
    assert np.all(np.linalg.norm(stokes[..., 1:], axis=-1) <= stokes[..., 0] * (1.0 + 1e-4) + 1e-9)


def test_first_order_keeps_the_polarisation_of_single_scattering():
    """Q of a thin layer = Q of the traced phase · amount, in a band around the sky at 40° of elevation, 4 errors."""
    item = layer(0.02, kind(1.0))
    grid = Directions.cylindrical((1, 8), np.eye(3), (np.pi / 2, -1.5 * np.pi), (42 * DEG, 38 * DEG))
    planes, _ = traced(item, 16, RAYS, grid, orders=1, stokes_count=4)
    q, dq = mean_and_error(planes[:, 0, 0, :, 1])
    amount = slab(np.array([40 * DEG]), 20 * DEG, 0.04, lambda z: np.ones_like(z), 1e-3)
    single = [
        tracing.trace_plane(item.kinds[0].prepared[0], grid.packed(), 6, k, 2**17, 4)[0][0, :, 1] for k in range(16)
    ]
    expected, error = mean_and_error(np.array(single) / (2.0 * 2**17 * grid.solid_angle()[0]) * amount)
    assert np.all(np.abs(q - expected) < 4.0 * np.hypot(dq, error))
    assert np.max(np.abs(expected) / error) > 8.0


def test_bits_depend_on_seed_and_batch_alone():
    item = layer(0.5, *two_kinds())
    first, tally = trace_layer(item, 0, sky().packed(), 3, 1, 4096)
    again, same = trace_layer(item, 0, sky().packed(), 3, 1, 4096)
    assert np.array_equal(first, again)
    assert np.array_equal(tally.down, same.down)
    for seed, batch in ((4, 1), (3, 2)):
        assert not np.array_equal(first, trace_layer(item, 0, sky().packed(), seed, batch, 4096)[0])


def test_several_shapes_and_a_disc():
    """Every shape of a kind meets the same light; a sun of some size is weakened ray by ray."""
    shapes = [hexagonal_prism(aspect) for aspect in (0.2, 1.0, 5.0)]
    law = Orientation("column", 1.0 * DEG)
    item = prepare(shapes, law, lambda w: 1.31 + 0.0 * w, GREEN, direction(0.0, 4 * DEG), radius=0.05)
    cloud = Layer((layer_kind([item], shapes, law),), 1.0)
    _, tallies = traced(cloud, 6, 192 * 40)
    assert tallies[0].traced % 192 == 0
    mean, error = mean_and_error([whole(tally) for tally in tallies])
    assert abs(mean) < 4.0 * error + 4e-3  # rays of the sun's lower limb, at 1°, meet more than the centre's


def test_a_guide_is_left_out():
    guide = Guide(np.array([0.0, 0.9, 1.0]), np.ones(6, dtype=np.float32), np.array([0]))
    assert len(kind(guide=guide).prepared[0].guide.dimensions) == 0


def test_an_empty_layer_lets_all_light_through():
    planes, tally = trace_layer(layer(0.0), 0, sky().packed(), 1, 0, 256)
    assert not planes.any()
    assert tally.unscattered == pytest.approx(tally.incident)
    assert tally.traced == 256


def test_bad_layers_are_refused():
    with pytest.raises(DomainError, match="add up to 1"):
        layer(0.1, kind(share=0.4), kind(share=0.4))
    with pytest.raises(DomainError, match="at least 0"):
        layer(-0.1)
    with pytest.raises(DomainError, match="same source"):
        trace_layer(layer(0.1, kind(share=0.5), kind(share=0.5, elevation_deg=9.0)), 0, sky().packed(), 1, 0, 64)
    with pytest.raises(DomainError, match="rim"):
        trace_layer(layer(0.1, kind(elevation_deg=0.0)), 0, sky().packed(), 1, 0, 64)
    with pytest.raises(DomainError, match="orders"):
        trace_layer(layer(0.1), 0, sky().packed(), 1, 0, 64, orders=0)
