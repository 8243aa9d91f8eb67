"""Tables of drops by ray optics: bow angles, polarisation, energy, errors, the same bits."""

from __future__ import annotations

import json
from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest

from skyoptics.droplets import angles, geometric
from skyoptics.errors import DomainError
from skyoptics.kernels import sphere
from skyoptics.optics import bows
from skyoptics.optics.bins import Bins
from skyoptics.optics.polarisation import signed_polarisation

DEG = np.pi / 180.0
FIVE = Bins.lines(np.array([420.0, 486.0, 550.0, 610.0, 680.0]) * 1e-9)


def water(wavelength):
    """Distilled water at 20 °C: Daimon & Masumura, Appl. Opt. 46, 3811 (2007), Table 7; a faint absorption added."""
    squared = (np.asarray(wavelength) * 1e6) ** 2
    strength = (0.5684027565, 0.1726177391, 0.02086189578, 0.1130748688)
    pole = (0.005101829712, 0.01821153936, 0.02620722293, 10.69792721)
    return np.sqrt(1.0 + sum(a * squared / (squared - b) for a, b in zip(strength, pole, strict=True))) + 1e-9j


def constant(value):
    return lambda wavelength: np.full(np.shape(wavelength), complex(value))


def one(index=4.0 / 3.0, **options):
    return geometric.scattering_table(constant(index), 5e-4, Bins.lines(550e-9), **options)


@pytest.fixture(scope="module")
def five():
    return geometric.scattering_table(water, 5e-4, FIVE)


@pytest.fixture(scope="module")
def plain():
    return one()


def caustic_bin(table, part, row, expected):
    """Return lower and upper edge of the brightest bin of one order, within 3° of where it is expected [°]."""
    near = np.abs(table.angle - expected * DEG) < 3.0 * DEG
    light = np.where(near, table.elements[table.parts.index(part), :, row, 0], 0.0)
    best = int(np.argmax(light))
    return table.edges[best] / DEG, table.edges[best + 1] / DEG


@pytest.mark.parametrize("p", [2, 3, 4, 5, 6])
def test_bow_angle_is_the_caustics_bin(five, p):
    # closed form of Descartes (van de Hulst, Light Scattering by Small Particles, 1957, ch. 13) at the index of the run
    for row, (index, _) in enumerate(five.report["index"]):
        expected = float(bows.scattering_angle(index, p)) / DEG
        low, high = caustic_bin(five, str(p), row, expected)
        assert high - low <= 0.01
        assert 0.5 * (low + high) == pytest.approx(expected, abs=0.02)


@pytest.mark.parametrize("p", [2, 3, 4, 5, 6])
def test_dark_side_is_dark(five, p):
    part = five.parts.index(str(p))
    for row, (index, _) in enumerate(five.report["index"]):
        caustic, side = float(bows.scattering_angle(index, p)), float(bows.side(index, p))
        assert np.abs(five.edges - caustic).min() < 2e-12  # the caustic stands on an edge
        distance = (five.angle - caustic) * side
        light = five.elements[part, :, row, 0]
        dark = light[(distance < 0.0) & (distance > -3.0 * DEG)]
        lit = light[(distance > 0.0) & (distance < 0.02 * DEG)]
        assert len(dark) > 5
        if p < 4:
            assert not dark.any()
        else:  # nearly central rays of these orders go round past the axis and shine faintly here
            assert lit.max() > 20.0 * dark.max()
        assert lit.max() > 0.0


@pytest.mark.parametrize(
    ("index", "expected"),
    # "The first 20 orders of rainbows of water", Table 57-1 of a handbook of optics, at n = 1.331 (red) and 1.343 (violet)
    [
        (1.331, {2: 137.63, 3: 129.63, 4: 42.47, 5: 42.76, 6: 127.08}),
        (1.343, {2: 139.35, 3: 126.52, 4: 38.11, 5: 48.34, 6: 133.86}),
    ],
)
def test_table_of_orders_with_even_bins(index, expected):
    table = one(index, edges=angles.uniform_edges(0.01 * DEG), relative_error=1.0)
    for p, angle in expected.items():
        low, high = caustic_bin(table, str(p), 0, angle)
        # 0.005° of the printed digits, and at most the next bin but one holds more light than the caustic's own
        assert 0.5 * (low + high) == pytest.approx(angle, abs=0.02)


@pytest.mark.parametrize(("p", "expected"), [(2, 0.9247), (3, 0.8077)])
def test_polarisation_just_inside_the_caustic(plain, p, expected):
    # (ε_s − ε_p)/(ε_s + ε_p) at the bow ray, n = 4/3: 92 % and 81 %, from R_s = ((p−1)/(p+1))², R_p = ((n²−p)/(n²+p))²
    part = plain.select([str(p)])
    caustic = float(bows.scattering_angle(4.0 / 3.0, p))
    distance = (part.angle - caustic) * float(bows.side(4.0 / 3.0, p))
    first = int(np.argmin(np.where(distance > 0.0, distance, np.inf)))
    assert signed_polarisation(part.elements[0, first, 0]) == pytest.approx(expected, abs=0.01)


@pytest.mark.parametrize("index", [4.0 / 3.0, 1.343 + 1e-6j, 1.5 + 1e-4j])
def test_energy_and_normalisation(index):
    table = geometric.scattering_table(
        constant(index), 5e-4, Bins.lines([450e-9, 650e-9]), edges=angles.uniform_edges(DEG), relative_error=1.0
    )
    report = table.report
    whole = np.sum(list(report["energy"].values()), axis=0) + report["absorbed"] + report["cut_off"]
    np.testing.assert_allclose(whole, 1.0, atol=1e-12)
    np.testing.assert_allclose(table.energy().sum(axis=0), 1.0, atol=1e-12)
    np.testing.assert_allclose(table.albedo, 1.0 - np.add(report["absorbed"], report["cut_off"]), atol=1e-12)
    assert table.elements.shape == (11, 180, 2, 6)
    share = np.array(list(report["energy"].values())) / table.albedo
    np.testing.assert_allclose(table.energy(), share, atol=1e-12)


def test_asymmetry_of_rays(plain):
    # mean of cos θ over bins is the same to their width
    weight = plain.elements[:, :, 0, 0].sum(axis=0) * plain.solid_angle()
    assert plain.asymmetry[0] == pytest.approx(np.sum(weight * np.cos(plain.angle)) / weight.sum(), abs=1e-4)


def test_elements_fit_together(five):
    p11, p12, p22, p33, p34, p44 = np.moveaxis(five.elements, -1, 0)
    np.testing.assert_array_equal(p22, p11)
    np.testing.assert_array_equal(p44, p33)
    assert not p34.any()
    assert np.all(np.hypot(p12, p33) <= p11 * (1.0 + 1e-12))
    assert np.all(five.error >= 0.0)


def test_report_is_plain_and_reaches_its_target(five):
    report = json.loads(json.dumps(five.report))
    assert report["target_reached"]
    assert max(report["relative_error"]) <= 0.01
    assert report["rays"] == report["batches"] * sphere.RAYS * 5
    whole = np.sqrt(np.mean(np.square(report["relative_error"])))
    smaller = geometric.scattering_table(water, 5e-4, FIVE, relative_error=0.6 * whole)
    assert smaller.report["batches"] > report["batches"]
    assert smaller.report["target_reached"]
    few = geometric.scattering_table(water, 5e-4, FIVE, relative_error=1e-4, max_batches=17)
    assert not few.report["target_reached"]
    assert few.report["batches"] == 17


def test_same_bits_with_any_number_of_threads():
    bins = Bins.adjoining(np.array([500.0, 540.0, 580.0]) * 1e-9)
    calls = []
    serial = geometric.scattering_table(
        water, 5e-4, bins, relative_error=0.01, seed=3, progress=lambda done, needed: calls.append((done, needed))
    )
    assert calls[-1][0] == calls[-1][1] == len(calls)
    for workers in (1, 2):
        with ThreadPoolExecutor(workers) as pool:
            threaded = geometric.scattering_table(water, 5e-4, bins, relative_error=0.01, seed=3, executor=pool)
        assert threaded.elements.tobytes() == serial.elements.tobytes()
        assert threaded.error.tobytes() == serial.error.tobytes()
        assert threaded.report == serial.report
    other = geometric.scattering_table(water, 5e-4, bins, relative_error=0.01, seed=4)
    assert not np.array_equal(other.elements, serial.elements)


def honesty(seeds, edges):
    """Return the root mean square of (value − mean over seeds) / stated error, over bins and seeds."""
    tables = [one(edges=edges, seed=seed, relative_error=1.0) for seed in range(seeds)]
    values = np.stack([table.elements[..., 0] for table in tables])
    errors = np.stack([table.error for table in tables])
    # bins that few rays reach have no Gaussian scatter: take those lit in every seed and known to better than 30 %
    lit = np.all((values > 0.0) & (errors < 0.3 * values) & (errors > 0.0), axis=0)
    deviation = (values - values.mean(axis=0)) * np.sqrt(seeds / (seeds - 1.0))
    return np.sqrt(np.mean((deviation[:, lit] / errors[:, lit]) ** 2)), int(lit.sum())


def test_stated_errors_are_honest():
    ratio, bins = honesty(6, angles.uniform_edges(0.5 * DEG))
    assert bins > 500
    assert ratio == pytest.approx(1.0, abs=0.15)


@pytest.mark.slow
@pytest.mark.parametrize("edges", [None, angles.uniform_edges(0.5 * DEG)])
def test_stated_errors_are_honest_over_thirty_seeds(edges):
    ratio, bins = honesty(30, edges)
    assert bins > 500
    assert 0.9 < ratio < 1.1


def mie(index, size, cosine):
    """Amplitudes S1, S2 by miepython's coefficients and the angular functions of Bohren & Huffman (1983) §4.3, 4.8."""
    import miepython

    s1, s2 = np.zeros((2, len(cosine)), dtype=complex)
    before, current = np.zeros_like(cosine), np.ones_like(cosine)
    for n, (a, b) in enumerate(zip(*miepython.coefficients(index, size), strict=True), start=1):
        tau = n * cosine * current - (n + 1) * before
        factor = (2 * n + 1) / (n * (n + 1))
        s1 += factor * (a * current + b * tau)
        s2 += factor * (a * tau + b * current)
        before, current = current, ((2 * n + 1) * cosine * current - (n + 1) * before) / n
    return s1, s2


def test_rays_are_the_mean_of_waves():
    # differential cross-section per area of the drop, 10° means at 60 … 120°: no bow and no diffraction there
    size = 4000.0
    angle = np.arange(60.0, 120.0, 1.0 / 60.0) + 0.5 / 60.0
    s1, s2 = mie(1.333 + 0j, size, np.cos(angle * DEG))
    waves = np.stack(
        [np.abs(s1) ** 2 + np.abs(s2) ** 2, np.abs(s2) ** 2 - np.abs(s1) ** 2, 2.0 * (s1 * s2.conj()).real]
    )
    waves = waves.reshape(3, 6, -1).mean(axis=2) / (2.0 * np.pi * size**2)
    table = one(1.333, edges=angles.uniform_edges(DEG))
    rays = table.elements.sum(axis=0)[60:120, 0, :] * table.albedo[0] / (4.0 * np.pi)
    rays = rays[:, [0, 1, 3]].reshape(6, 10, 3).mean(axis=1).T
    np.testing.assert_allclose(waves[0] / rays[0], 1.0, atol=0.12)
    np.testing.assert_allclose(waves[1] / waves[0], rays[1] / rays[0], atol=0.1)
    np.testing.assert_allclose(waves[2] / waves[0], rays[2] / rays[0], atol=0.1)
    assert np.ptp(rays[2] / rays[0]) > 1.0  # from well above to well below 0: a wrong sign would show


def test_absorption_grows_with_the_drop():
    small, large = (
        geometric.scattering_table(
            constant(1.33 + 1e-5j), radius, Bins.lines(600e-9), edges=angles.uniform_edges(DEG), relative_error=1.0
        )
        for radius in (1e-5, 1e-3)
    )
    # Beer–Lambert along the chord of mean length 4a/3 · n²(1 − (1 − 1/n²)^1.5): leading term for weak absorption
    # (Bohren & Huffman 1983, §7.1, p. 167)
    n, radius = 1.33, 1e-5
    leading = 4.0 / 3.0 * radius * 4.0 * np.pi * 1e-5 / 600e-9 * n**2 * (1.0 - (1.0 - 1.0 / n**2) ** 1.5)
    assert small.report["absorbed"][0] == pytest.approx(leading, rel=0.02)
    assert large.report["absorbed"][0] > 30.0 * small.report["absorbed"][0]
    assert large.albedo[0] < small.albedo[0] < 1.0


def test_default_edges():
    bins = Bins.adjoining(np.linspace(380.0, 780.0, 41) * 1e-9)
    edges = angles.default_edges(water, bins) / DEG
    assert edges[0] == 0.0
    assert edges[-1] == pytest.approx(180.0)
    assert 1000 < len(edges) < 3000
    width, middle = np.diff(edges), 0.5 * (edges[1:] + edges[:-1])
    assert width.min() > 0.005
    assert width.max() <= 0.25
    index = water(np.array([380e-9, 780e-9])).real
    for p, most in ((2, 0.01), (3, 0.01), (4, 0.05), (5, 0.05), (6, 0.05)):
        ends = np.sort(bows.scattering_angle(index, p)) / DEG
        assert width[(middle > ends[0]) & (middle < ends[1])].max() <= most
    primary = bows.scattering_angle(index, 2).max() / DEG
    assert width[(middle > primary) & (middle < primary + 2.4)].max() <= 0.02
    assert width[0] < 0.03
    assert width[-1] < 0.03


def test_uniform_edges():
    edges = angles.uniform_edges(0.01 * DEG)
    assert len(edges) == 18001
    np.testing.assert_allclose(np.diff(edges), 0.01 * DEG, rtol=1e-9)


def test_wide_bins_get_more_nodes():
    # one bin over the whole visible range: the index between nodes must stay within 1e-7
    table = geometric.scattering_table(
        water, 5e-4, Bins.adjoining([380e-9, 780e-9]), edges=angles.uniform_edges(DEG), relative_error=1.0
    )
    assert 0.0 < table.report["index_error"] <= 1e-7


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"radius": 0.0}, "radius"),
        ({"radius": np.nan}, "radius"),
        ({"radius": -1e-3}, "radius"),
        ({"relative_error": 0.0}, "relative error"),
        ({"max_batches": 2}, "batches"),
        ({"index": constant(1.33 + 0.02j)}, "too large for rays"),
        ({"index": constant(1.33 - 0.001j)}, "negative"),
        ({"index": constant(0.75)}, "exceed 1"),
        ({"index": constant(np.nan)}, "not a number"),
        ({"edges": np.array([0.0, 1.0])}, "180 degrees"),
        ({"edges": np.array([0.0, 2.0, 1.0, np.pi])}, "growing"),
    ],
)
def test_faults_are_told(change, words):
    given = {"index": water, "radius": 5e-4, "bins": Bins.lines(550e-9), **change}
    index, radius, bins = (given.pop(name) for name in ("index", "radius", "bins"))
    with pytest.raises(DomainError, match=words):
        geometric.scattering_table(index, radius, bins, **given)


def test_a_step_out_of_range_is_refused():
    for step in (0.0, -1.0, np.nan, 4.0):
        with pytest.raises(DomainError, match="degrees wide"):
            angles.uniform_edges(step)
