import os
import subprocess
import sys

import numpy as np
import pytest
from scipy.stats import chisquare, kstest

from skyoptics.crystals import tracing
from skyoptics.crystals.orientations import LAWS, Orientation, projected_area
from skyoptics.crystals.prepared import prepare
from skyoptics.crystals.shapes import hexagonal_prism
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import direction
from skyoptics.geometry.directions import Directions
from skyoptics.kernels import entry, sobol
from skyoptics.kernels import lanes as L
from skyoptics.kernels.crystal import INVERSE_KAPPA, RADIUS, SCALE, SPAN
from skyoptics.kernels.orient import orient_chunk, polarise_chunk, source_chunk
from skyoptics.kernels.random import batch_key
from skyoptics.optics.polarisation import between_meridians
from skyoptics.units import DEG

INDEX = 1.31
GREEN = (550e-9, 550e-9)
RANDOM = Orientation("random")


def index(wavelength):
    return INDEX + 0.0 * wavelength


def prepared(aspect=1.0, law=RANDOM, elevation_deg=20.0, **options):
    towards = direction(0.0, elevation_deg * DEG)
    return prepare(hexagonal_prism(aspect), law, options.pop("index", index), GREEN, towards, **options)


def sky(shape=(90, 180)):
    return Directions.cylindrical(shape, np.eye(3), (np.pi / 2, -1.5 * np.pi), (np.pi / 2, -np.pi / 2))


def angles(item, count, batches, rays=2**17, polarised=False, seed=3):
    sums, tally = tracing.trace_angles(item, count, seed, 0, rays, polarised)
    for k in range(1, batches):
        more, other = tracing.trace_angles(item, count, seed, k, rays, polarised)
        sums, tally = sums + more, tally + other
    return sums, tally


# ---------------------------------------------------------------- energy, bits


@pytest.mark.parametrize("aspect", [0.1, 1.0, 10.0])
@pytest.mark.parametrize("k", [0.0, 1e-3])
def test_energy_is_kept(aspect, k):
    item = prepared(aspect, index=lambda w: INDEX + 1j * k + 0 * w, size=2e-5)
    shares, roulette = [], []
    for batch in range(8):
        _, tally = tracing.trace_angles(item, 90, 1, batch, 2**16, False)
        assert tally.scattered + tally.absorbed == pytest.approx(tally.incident + tally.roulette, rel=1e-6)
        shares.append((tally.scattered + tally.absorbed) / tally.incident - 1.0)
        roulette.append(tally.below_cutoff / tally.incident)
    error = np.std(shares, ddof=1) / np.sqrt(8)
    assert abs(np.mean(shares)) < max(3.0 * error, 1e-6)
    assert abs(np.mean(shares)) < 2e-4
    assert 0.001 < np.mean(roulette) < 0.2  # what a plain cut-off would have dropped


@pytest.mark.parametrize("law", LAWS)
def test_incident_power_is_the_projected_area(law):
    item = prepared(0.4, Orientation(law, 2 * DEG), elevation_deg=12.0)
    _, tally = tracing.trace_plane(item, sky().packed(), 1, 0, 2**17)
    assert tally.incident / tally.rays == pytest.approx(item.mean_incident, rel=1e-4)
    if law == "plate":
        assert item.mean_incident != pytest.approx(1.0, abs=0.1)


def test_bits_depend_on_seed_bin_and_batch_alone():
    first = tracing.trace_plane(prepared(), sky().packed(), 1, 2, 4096)[0]
    assert np.array_equal(first, tracing.trace_plane(prepared(), sky().packed(), 1, 2, 4096)[0])
    for other in (
        tracing.trace_plane(prepared(), sky().packed(), 2, 2, 4096)[0],
        tracing.trace_plane(prepared(), sky().packed(), 1, 3, 4096)[0],
        tracing.trace_plane(prepared(spectral_bin=1), sky().packed(), 1, 2, 4096)[0],
    ):
        assert not np.array_equal(first, other)


def test_sinks_agree():
    item = prepared(0.6, Orientation("column", 2 * DEG), radius=0.005)
    grid = sky().packed()
    plane, tally = tracing.trace_plane(item, grid, 1, 0, 4096, dtype=np.float64)
    stokes, _ = tracing.trace_plane(item, grid, 1, 0, 4096, stokes_count=4, dtype=np.float64)
    exits, other = tracing.trace_exits(item, 1, 0, 4096)
    assert np.array_equal(plane, stokes[..., 0])
    assert plane.sum() == pytest.approx(tally.scattered, rel=1e-5)
    assert exits.stokes[:, 0].astype(float).sum() == pytest.approx(other.scattered, rel=1e-5)
    assert np.all(np.hypot(stokes[..., 1], stokes[..., 2]) <= stokes[..., 0] * (1 + 1e-5) + 1e-9)
    row, column = sky().project(-exits.direction.astype(float))
    again = np.zeros(sky().shape)
    np.add.at(
        again, (np.floor(row + 0.5).astype(int) % 90, np.floor(column + 0.5).astype(int) % 180), exits.stokes[:, 0]
    )
    assert np.abs(again - plane).sum() < 2e-3 * plane.sum()


@pytest.mark.parametrize("rays", [0, 100, 2**21])
def test_odd_batches_are_refused(rays):
    with pytest.raises(DomainError, match="multiple of"):
        tracing.trace_plane(prepared(), sky().packed(), 1, 0, rays)


def test_index_below_one_is_refused():
    with pytest.raises(DomainError, match="index"):
        prepared(index=lambda w: 0.9 + 0 * w)


# ---------------------------------------------------------------- samplers


def lanes(law, count=2**15, radius=0.0, darkening=None, aspect=0.6, elevation_deg=25.0):
    """Return rotations, directions before, entry points and faces of many rays."""
    item = prepared(aspect, law, elevation_deg, radius=radius, darkening=darkening)
    (_, patches), (settings, number, pose, tilts, frame, disc, table, stokes, *_) = item.bodies[0], item.arguments
    state, codes = L.new_lanes()
    points = np.zeros(sobol.DIMENSIONS * L.CHUNK, np.float32)
    seeds = np.zeros(sobol.DIMENSIONS, np.uint32)
    sums = np.zeros((len(patches) // entry.PATCH + 1) * L.CHUNK, np.float32)
    sobol.scramble_seeds(*batch_key(2, 0, 0), seeds)
    found = []
    wanted = (L.R00, L.R01, L.R02, L.R10, L.R11, L.R12, L.R20, L.R21, L.R22, L.WX, L.WY, L.WZ, L.PX, L.PY, L.PZ)
    faces = []
    for ray in range(0, count, L.CHUNK):
        sobol.sobol_chunk(ray, True, seeds, item.used, sobol.REVERSED_NUMBERS, sobol.CHUNK_TABLE, points)
        source_chunk(state, points, frame, settings[RADIUS], disc, table)
        orient_chunk(state, points, number, settings[INVERSE_KAPPA], settings[SPAN], pose, tilts)
        polarise_chunk(state, stokes, frame[:3])
        entry.enter_chunk(state, codes, ray, points, patches, sums, settings[SCALE])
        found.append(np.stack([state[row : row + L.CHUNK] for row in wanted], axis=1).astype(float))
        faces.append(codes[L.PATH_LOW : L.PATH_LOW + L.CHUNK].astype(int) - 1)
    values = np.concatenate(found)
    return values[:, :9].reshape(-1, 3, 3), values[:, 9:12], values[:, 12:15], np.concatenate(faces)


def uniform(values, low, high, classes=32):
    """P-value of a chi-square test for an even spread (stratified points lie even closer than chance)."""
    counts = np.histogram(values, classes, (low, high))[0]
    assert counts.sum() == len(values)
    return chisquare(counts).pvalue


@pytest.mark.parametrize("law", LAWS)
def test_rotations_are_rotations(law):
    turn = lanes(Orientation(law, 3 * DEG), 1024)[0]
    assert np.einsum("nij,nkj->nik", turn, turn) == pytest.approx(np.broadcast_to(np.eye(3), turn.shape), abs=6e-6)
    assert np.linalg.det(turn) == pytest.approx(1.0, abs=6e-6)


def test_random_law_is_uniform_over_rotations():
    turn = lanes(RANDOM)[0]
    for vector in (
        turn[:, :, 2],
        turn[:, :, 0],
        turn[:, 2, :],
    ):  # c-axis, a-axis, zenith in the crystal: all even on the sphere
        assert uniform(vector[:, 2], -1.001, 1.001) > 1e-3
        assert uniform(np.arctan2(vector[:, 1], vector[:, 0]), -np.pi, np.pi) > 1e-3


@pytest.mark.parametrize("tilt_deg", [0.5, 5.0, 40.0])
def test_tilt_follows_fishers_law(tilt_deg):
    # Fisher, Proc. R. Soc. A 217, 295 (1953): 1 - cos theta is exponential, cut off at 2
    kappa = 1.0 / (tilt_deg * DEG) ** 2
    turn = lanes(Orientation("plate", tilt_deg * DEG))[0]
    if tilt_deg > 1.0:
        share = -np.expm1(-kappa * (1.0 - turn[:, 2, 2])) / -np.expm1(-2.0 * kappa)
    else:  # 1 - cos is lost to rounding: take the sine
        share = -np.expm1(-kappa * np.hypot(turn[:, 0, 2], turn[:, 1, 2]) ** 2 / 2.0)
    assert uniform(share, -1e-3, 1.001, 32) > 1e-3 or kstest(share, "uniform").pvalue > 1e-3
    assert uniform(np.arctan2(turn[:, 1, 2], turn[:, 0, 2]), -np.pi, np.pi) > 1e-3
    if tilt_deg < 10.0:  # each component of tilt is a Gaussian of this width
        assert np.std(turn[:, 0, 2]) == pytest.approx(tilt_deg * DEG, rel=0.01)


def test_column_lies_level_and_spins_freely():
    turn = lanes(Orientation("column"))[0]
    assert np.abs(turn[:, 2, 2]).max() < 1e-6
    assert uniform(np.arctan2(turn[:, 1, 2], turn[:, 0, 2]), -np.pi, np.pi) > 1e-3
    assert uniform(np.arctan2(turn[:, 2, 1], turn[:, 2, 0]), -np.pi, np.pi) > 1e-3
    tilted = lanes(Orientation("column", 4 * DEG))[0]
    assert np.std(tilted[:, 2, 2]) == pytest.approx(4 * DEG, rel=0.01)


def test_parry_holds_two_side_faces_level():
    turn = lanes(Orientation("parry"))[0]
    assert np.abs(turn[:, 2, 2]).max() < 1e-6
    assert turn[:, 2, 0] == pytest.approx(1.0, abs=1e-6)  # body x, normal of side face 0, is upright


@pytest.mark.parametrize("darkening", [None, (0.3, 0.93, -0.23, 0.0, 0.0, 0.0)])
def test_disc_points_follow_the_limb_darkening(darkening):
    radius = 0.02
    before = lanes(RANDOM, radius=radius, darkening=darkening)[1]
    centre = direction(0.0, 25.0 * DEG)
    away = 2.0 * np.arcsin(np.linalg.norm(-before - centre, axis=1) / 2.0)
    assert away.max() <= radius * (1 + 1e-4)
    mu = np.sqrt(np.clip(1.0 - (away / radius) ** 2, 0.0, None))
    a = np.array(darkening or (1.0,))
    power = np.arange(len(a)) + 2.0
    inside = (2.0 * a / power * mu[:, None] ** power).sum(axis=1) / (2.0 * a / power).sum()
    assert uniform(inside, -1e-4, 1.0001) > 1e-3
    east, up = before[:, 0], before @ np.cross(centre, [1.0, 0.0, 0.0])
    assert uniform(np.arctan2(east, up), -np.pi, np.pi) > 1e-3


@pytest.mark.parametrize("law", ["random", "plate"])
def test_entry_points_are_even_over_the_area_the_light_sees(law):
    shape = hexagonal_prism(0.6)
    turn, before, place, face = lanes(Orientation(law))
    inward = -np.einsum("nij,ni->nj", turn, before)
    lit = np.clip(inward @ shape.face_normals.T, 0.0, None) * shape.face_areas
    expected = (lit / lit.sum(axis=1, keepdims=True)).sum(axis=0)
    counts = np.bincount(face, minlength=8)
    used = expected > 0.0
    assert np.all(counts[~used] == 0)
    assert chisquare(counts[used], expected[used] * counts[used].sum() / expected[used].sum()).pvalue > 1e-3
    top = place[face == 6]  # upper base: even over the hexagon, so even in angle classes of 60 degrees and in area
    if len(top) > 500:
        sector = np.arctan2(top[:, 1], top[:, 0])
        assert uniform(sector, -np.pi, np.pi, 6) > 1e-3
        hexagonal = np.max(np.abs(top[:, :2] @ shape.normals[:3, :2].T), axis=1) / (np.sqrt(3) / 4)
        assert uniform(hexagonal**2, 0.0, 1.0001, 16) > 1e-3
    side = place[face == 0]
    assert uniform(side[:, 2], -0.3001, 0.3001, 16) > 1e-3
    assert uniform(side[:, 1], -0.2501, 0.2501, 16) > 1e-3


# ---------------------------------------------------------------- against the plain loop, against Python


@pytest.mark.parametrize("law", LAWS)
def test_lanes_and_plain_loop_make_the_same_film(law):
    shape = hexagonal_prism(0.5)
    item = prepared(0.5, Orientation(law, 3 * DEG), radius=0.005, index=lambda w: INDEX + 2e-4j + 0 * w, size=2e-5)
    grid = sky((18, 36)).packed()
    lane = [tracing.trace_plane(item, grid, 1, k, 2**15, dtype=np.float64) for k in range(8)]
    plain = [tracing.plain_plane(item, shape, grid, 1, k, 2**15) for k in range(8)]
    a, b = (np.array([plane / 2**15 for plane, _ in runs]) for runs in (lane, plain))
    variance = (a.var(axis=0, ddof=1) + b.var(axis=0, ddof=1)) / 8
    busy = (a.mean(axis=0) > 3e-4) & (variance > 0)
    z = (a.mean(axis=0) - b.mean(axis=0))[busy] / np.sqrt(variance[busy])
    assert busy.sum() > 100
    assert 0.7 < np.sqrt(np.mean(z**2)) < 1.45  # eight batches each: Student's t, 14 degrees of freedom, rms 1.08
    assert np.abs(z).max() < 6.5
    absorbed = [np.array([tally.absorbed / 2**15 for _, tally in runs]) for runs in (lane, plain)]
    error = np.sqrt(sum(x.var(ddof=1) / 8 for x in absorbed))
    assert abs(absorbed[0].mean() - absorbed[1].mean()) < 5 * error


_SCRIPT = """
import sys, numpy as np
from skyoptics.crystals import tracing
from skyoptics.crystals.orientations import Orientation
from skyoptics.crystals.prepared import prepare
from skyoptics.crystals.shapes import hexagonal_prism
from skyoptics.geometry.axes import direction
item = prepare(hexagonal_prism(0.8), Orientation("random"), lambda w: 1.31 + 1e-5j + 0 * w, (5e-7, 6e-7),
                       direction(0.2, 0.5), radius=0.005, size=1e-5, stokes=(1.0, 0.3, 0.2, 0.1))
exits, _ = tracing.trace_exits(item, 4, 0, int(sys.argv[2]))
np.savez(sys.argv[1], ray=exits.ray, path=exits.path, hits=exits.hits, direction=exits.direction, stokes=exits.stokes)
"""


def _compare_with_python(rays, tmp_path):
    found = []
    for disable in ("0", "1"):
        file = tmp_path / f"{disable}.npz"
        env = {**os.environ, "NUMBA_DISABLE_JIT": disable, "PYTHONWARNINGS": "ignore"}
        subprocess.run([sys.executable, "-c", _SCRIPT, str(file), str(rays)], check=True, env=env)
        with np.load(file) as data:
            found.append({key: data[key] for key in data})
    with_jit, without = found

    def exits(run):
        return zip(run["ray"], run["hits"], run["path"], run["direction"], run["stokes"], strict=True)

    table = {(ray, hits): (path, d, s) for ray, hits, path, d, s in exits(with_jit)}
    bad = set(with_jit["ray"]) ^ set(without["ray"])
    for ray, hits, path, d, s in exits(without):
        match = table.get((ray, hits))
        if match is None or match[0] != path or max(np.abs(match[1] - d).max(), np.abs(match[2] - s).max()) > 1e-5:
            bad.add(ray)
    return 1.0 - len(bad) / rays


def test_python_alone_traces_the_same_rays(tmp_path):
    assert _compare_with_python(192, tmp_path) > 0.99


@pytest.mark.slow
def test_python_alone_traces_the_same_2000_rays(tmp_path):
    assert _compare_with_python(2048, tmp_path) >= 0.999


# ---------------------------------------------------------------- physics


def test_halo_edges_stand_at_minimum_deviation():
    # D = 2 asin(n sin(A/2)) - A (Descartes; any optics book): lower edge of the light of the two face pairs, by path code
    item = prepared(1.0)
    exits, _ = tracing.trace_exits(item, 3, 0, 2**17)
    two = np.flatnonzero(exits.hits == 2)
    first, last = (exits.path[two] >> 5) - 1, (exits.path[two] & 31) - 1
    angle = np.arccos(np.clip(np.sum(exits.direction[two].astype(float) * exits.before[two], axis=1), -1, 1)) / DEG
    normals = hexagonal_prism(1.0).face_normals
    between = np.arccos(np.clip(np.sum(normals[first] * normals[last], axis=1), -1, 1)) / DEG
    for wedge in (60.0, 90.0):
        expected = 2 * np.arcsin(INDEX * np.sin(wedge / 2 * DEG)) / DEG - wedge
        pair = angle[np.isclose(between, 180.0 - wedge)]
        assert len(pair) > 200
        assert expected - 0.001 < pair.min() < expected + (0.05 if wedge == 60.0 else 0.4)
        if wedge == 60.0:
            counts = np.histogram(pair, np.arange(expected - 1.0, expected + 2.0, 0.05))[0]
            assert counts[:20].sum() == 0
            assert counts[20:22].sum() > 0


@pytest.mark.parametrize(
    ("aspect", "published"), [(1.0, 0.7704), (1.25, 0.7780), (2.0, 0.8155), (3.0, 0.8429), (4.6875, 0.8592)]
)
def test_asymmetry_parameter_of_random_prisms(aspect, published):
    # Takano & Liou, J. Atmos. Sci. 46, 3 (1989), 0.55 um; diffraction forward: g = (g_rt + 1) / 2
    item = prepared(aspect, index=lambda w: 1.311 + 0 * w)
    _, tally = angles(item, 180, 2)
    assert (tally.cosine / tally.scattered + 1.0) / 2.0 == pytest.approx(published, abs=0.004)
    assert 0.1 < tally.forward / tally.scattered < 0.5  # straight through parallel faces


@pytest.mark.parametrize(("height", "offset"), [(10, 22.483), (20, 24.576), (40, 36.324), (55, 66.039)])
def test_sundogs_stand_where_bravais_has_them(height, offset):
    # Bravais 1847: n' = sqrt(n^2 - sin^2 h) / cos h, offset = 2 asin(n'/2) - 60 degrees
    half = 3.0 * DEG
    azimuth, h = offset * DEG, height * DEG
    grid = Directions.cylindrical(
        (120, 120), np.eye(3), (np.pi / 2 - azimuth + half, np.pi / 2 - azimuth - half), (h + half, h - half)
    )
    plane, _ = tracing.trace_plane(prepared(0.3, Orientation("plate"), height), grid.packed(), 1, 0, 2**17)
    row, column = np.unravel_index(np.argmax(plane), plane.shape)
    found = offset - 3.0 + (column + 0.5) * 0.05
    assert found == pytest.approx(offset, abs=0.1)
    assert height + 3.0 - (row + 0.5) * 0.05 == pytest.approx(height, abs=0.06)


@pytest.mark.parametrize(("height", "altitude"), [(5, 58.288), (15, 62.242), (25, 71.065)])
def test_circumzenithal_arc_stands_where_snell_has_it(height, altitude):
    # sin e = sqrt(n^2 - cos^2 h)
    item = prepared(0.3, Orientation("plate"), height)
    grid = Directions.cylindrical(
        (120, 120), np.eye(3), (93 * DEG, 87 * DEG), ((altitude + 3) * DEG, (altitude - 3) * DEG)
    )
    plane, _ = tracing.trace_plane(item, grid.packed(), 1, 0, 2**17)
    row = np.unravel_index(np.argmax(plane), plane.shape)[0]
    assert altitude + 3.0 - (row + 0.5) * 0.05 == pytest.approx(altitude, abs=0.1)


def test_no_circumzenithal_arc_with_a_high_sun():
    # cos h >= sqrt(n^2 - 1) is needed: h <= 32.196 degrees for n = 1.31; top and side face, no more
    exits, _ = tracing.trace_exits(prepared(0.3, Orientation("plate"), 35.0), 1, 0, 2**14)
    two = exits.hits == 2
    first, last = (exits.path[two] >> 5) - 1, (exits.path[two] & 31) - 1
    assert not np.any((first == 6) & (last < 6))
    low, _ = tracing.trace_exits(prepared(0.3, Orientation("plate"), 25.0), 1, 0, 2**14)
    two = low.hits == 2
    assert np.any(((low.path[two] >> 5) - 1 == 6) & ((low.path[two] & 31) - 1 < 6))


def test_picture_and_table_tell_the_same_polarisation():
    # Random crystals: a polarised source seen in the meridian frame, once binned, once from the table of six elements
    incident = np.array([1.0, 0.5, -0.4, 0.6])
    count = 36
    sums, tally = angles(prepared(0.8), count, 8, polarised=True)
    edges = np.linspace(0.0, np.pi, count + 1)
    elements = sums * 4 * np.pi / (tally.scattered * 2 * np.pi * -np.diff(np.cos(edges)))[:, None]
    item = prepared(0.8, stokes=incident)
    grid = sky((36, 72))
    runs = np.array([tracing.trace_plane(item, grid.packed(), 9, k, 2**17, 4, np.float64)[0] / 2**17 for k in range(8)])
    solid = grid.solid_angle()[..., None]
    plane, error = runs.mean(axis=0) / solid * 4 * np.pi, runs.std(axis=0, ddof=1) / np.sqrt(8) / solid * 4 * np.pi
    views = grid.vectors()
    source = direction(0.0, 20 * DEG)
    theta = np.arccos(np.clip(views @ source, -1, 1))
    middle = 0.5 * (edges[1:] + edges[:-1])
    local = np.stack([np.interp(theta, middle, elements[:, e]) for e in range(6)], axis=-1)
    expected = np.einsum(
        "...ij,j->...i", between_meridians(np.broadcast_to(source, views.shape), views, local), incident
    )
    smooth = (theta > 60 * DEG) & (theta < 145 * DEG) & (np.abs(views[..., 2]) < 0.9)
    tolerance = np.sqrt(error[smooth] ** 2 + (0.06 * expected[smooth][:, :1]) ** 2)
    off = (plane[smooth] - expected[smooth]) / tolerance
    assert np.sqrt(np.mean(off**2, axis=0)) == pytest.approx(0.6, abs=0.6)
    for component in (1, 2, 3):  # signs: the two agree far better than the opposite sign would
        same = np.sum(plane[smooth][:, component] * expected[smooth][:, component])
        assert same / np.sum(expected[smooth][:, component] ** 2) == pytest.approx(1.0, abs=0.15)


def test_reciprocity():
    # Swap source and eye (van de Hulst 1957, chapter 5): light sent from height a to height b by a cloud that is its own
    # image under a turn about the vertical is that sent from -b to -a
    law = Orientation("plate", 6 * DEG)
    here, there = 15.0, 35.0

    def band(source_deg, view_deg):
        item = prepared(0.5, law, source_deg)
        top, bottom = (view_deg + 1.5) * DEG, (view_deg - 1.5) * DEG
        grid = Directions.cylindrical((1, 1), np.eye(3), (-np.pi, np.pi), (top, bottom)).packed()
        return np.array(
            [tracing.trace_plane(item, grid, 5, k, 2**16, dtype=np.float64)[0][0, 0] / 2**16 for k in range(8)]
        ) / (np.sin(top) - np.sin(bottom))

    for a, b in ((here, there), (here, -there), (-here, there)):
        one, two = band(a, b), band(-b, -a)
        error = np.sqrt((one.var(ddof=1) + two.var(ddof=1)) / 8)
        assert abs(one.mean() - two.mean()) < 4 * error + 0.01 * one.mean()


def test_left_and_right_of_the_sun_are_alike():
    # columns run from the sun's azimuth all round to it again; the disc keeps its straight-through light off their edge
    item = prepared(0.5, Orientation("column", 2 * DEG), radius=0.005)
    grid = sky((18, 36)).packed()
    runs = np.array([tracing.trace_plane(item, grid, 1, k, 2**15, dtype=np.float64)[0] for k in range(12)])
    difference = (runs - runs[:, :, ::-1]).mean(axis=0)
    error = (runs - runs[:, :, ::-1]).std(axis=0, ddof=1) / np.sqrt(12)
    busy = (runs.mean(axis=0) > 5.0) & (error > 0)
    z = difference[busy] / error[busy]
    assert busy.sum() > 100
    assert 0.6 < np.sqrt(np.mean(z**2)) < 1.5
    assert np.abs(z).max() < 8.0


def test_scatter_between_batches_is_an_honest_error():
    # the spread of means of four batches over 30 seeds against the error stated from those four
    grid = sky((18, 36)).packed()
    item = prepared(0.5, Orientation("plate", 2 * DEG), radius=0.005)
    runs = np.array(
        [[tracing.trace_plane(item, grid, s, k, 4096, dtype=np.float64)[0] for k in range(4)] for s in range(30)]
    )
    means, stated = runs.mean(axis=1), runs.std(axis=1, ddof=1) / 2.0
    busy = runs.mean(axis=(0, 1)) > 30.0
    scatter = np.sqrt(np.mean((means - means.mean(axis=0))[:, busy] ** 2) * 30 / 29)
    assert scatter / np.sqrt(np.mean(stated[:, busy] ** 2)) == pytest.approx(1.0, abs=0.1)


def test_projected_area_is_what_the_sky_sees():
    shape = hexagonal_prism(0.2)
    assert projected_area(shape, Orientation("plate"), 1.0) > 2.0 * projected_area(shape, Orientation("plate"), 0.0)
