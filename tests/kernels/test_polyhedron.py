import os
import platform
import re
import subprocess
import sys

import numpy as np
import pytest

from skyoptics.crystals.orientations import Orientation
from skyoptics.crystals.prepared import prepare
from skyoptics.crystals.shapes import hexagonal_prism
from skyoptics.geometry.axes import direction
from skyoptics.kernels import entry, polyhedron, sobol
from skyoptics.kernels import lanes as L
from skyoptics.kernels.crystal import INVERSE_KAPPA, RADIUS, SCALE, SPAN
from skyoptics.kernels.orient import orient_chunk, polarise_chunk, source_chunk
from skyoptics.kernels.random import batch_key
from skyoptics.optics import interface as fresnel

INDEX = 1.31


def born(shape, stokes=(1.0, 0.0, 0.0, 0.0), index=INDEX, size=0.0):
    """Return a pool with CHUNK rays just entered, and its kernel arguments."""
    prepared = prepare(
        shape,
        Orientation("random"),
        lambda w: index + 0.0 * w,
        (5.5e-7, 5.5e-7),
        direction(0.3, 0.4),
        stokes=stokes,
        size=size,
    )
    (slabs, patches), (settings, law, pose, tilts, frame, disc, table, incident, *_) = (
        prepared.bodies[0],
        prepared.arguments,
    )
    state, codes = L.new_lanes()
    points = np.zeros(sobol.DIMENSIONS * L.CHUNK, np.float32)
    seeds = np.zeros(sobol.DIMENSIONS, np.uint32)
    sums = np.zeros((len(patches) // entry.PATCH + 1) * L.CHUNK, np.float32)
    sobol.scramble_seeds(*batch_key(11, 0, 0), seeds)
    sobol.sobol_chunk(0, True, seeds, prepared.used, sobol.REVERSED_NUMBERS, sobol.CHUNK_TABLE, points)
    source_chunk(state, points, frame, settings[RADIUS], disc, table)
    orient_chunk(state, points, law, settings[INVERSE_KAPPA], settings[SPAN], pose, tilts)
    polarise_chunk(state, incident, frame[:3])
    entry.enter_chunk(state, codes, 0, points, patches, sums, settings[SCALE])
    return state, codes, slabs, frame


def rows(state, *names):
    return np.stack([state[name : name + L.CHUNK] for name in names], axis=-1).astype(float)


def split(field, travel, normal, index_before, index_after):
    """Return (reflected, refracted) of (field, direction): Fresnel on vectors, normal along the light's way."""
    ci = travel @ normal
    s = np.cross(travel, normal)
    s = s / np.linalg.norm(s)
    n = index_after / index_before
    rs, rp, ts, tp = fresnel.amplitudes(n, np.arccos(np.clip(ci, -1, 1)))
    reflected = travel - 2 * ci * normal
    p, pr = np.cross(travel, s), np.cross(reflected, s)
    a, b = field @ s, field @ p
    out = (rs * a * s + rp * b * pr, reflected)
    root = 1 - (1 - ci**2) / n**2
    if root <= 0:
        return out, None
    ct = np.sqrt(root)
    through = travel / n + (ct - ci / n) * normal
    flux = np.sqrt(n * ct / ci)  # field scaled so that its square is power
    return out, (flux * (ts * a * s + tp * b * np.cross(through, s)), through)


def stokes_of(fields, travel, reference):
    s = reference / np.linalg.norm(reference)
    p = np.cross(travel, s)
    total = np.zeros(4)
    for field in fields:
        par, per = field @ p, field @ s
        cross = par * np.conj(per)
        total += [abs(par) ** 2 + abs(per) ** 2, abs(par) ** 2 - abs(per) ** 2, 2 * cross.real, -2 * cross.imag]
    return total


@pytest.mark.parametrize("polarised", [False, True])
def test_stokes_follow_complex_fields_hit_by_hit(polarised):
    # An independent way: complex field vectors through the general Fresnel formula (Born & Wolf, 7th ed., section 1.5),
    # total reflection by complex cosines. Linear at 45 degrees exercises U and, through total reflection, V.
    state, _, slabs, frame = born(hexagonal_prism(0.7), (1.0, 0.0, 1.0, 0.0) if polarised else (1.0, 0.0, 0.0, 0.0))
    turn = rows(state, L.R00, L.R01, L.R02, L.R10, L.R11, L.R12, L.R20, L.R21, L.R22).reshape(-1, 3, 3)
    before = np.einsum("nij,ni->nj", turn, rows(state, L.WX, L.WY, L.WZ))
    level = np.einsum("nij,i->nj", turn, frame[:3].astype(float))
    outward = rows(state, L.NX, L.NY, L.NZ)
    power = rows(state, L.SI, L.EI).sum(axis=1)
    rays = []
    for k in range(L.CHUNK):
        s, p = level[k], np.cross(before[k], level[k])
        start = [(s + p) / np.sqrt(2)] if polarised else [s / np.sqrt(2), p / np.sqrt(2)]
        parts = [split(f * np.sqrt(power[k]) + 0j, before[k], -outward[k], 1.0, INDEX) for f in start]
        found = rows(state, L.EI, L.EQ, L.EU, L.EV)[k]
        expected = stokes_of([a[0] for a, _ in parts], parts[0][0][1], rows(state, L.SX, L.SY, L.SZ)[k])
        assert found == pytest.approx(expected, abs=2e-6)
        rays.append(([b[0] for _, b in parts], parts[0][1][1]))
    twisted = total = 0
    for _ in range(6):
        polyhedron.advance(state, L.CHUNK, slabs)
        polyhedron.interface(state, L.CHUNK)
        normal = rows(state, L.NX, L.NY, L.NZ) * np.sign(rows(state, L.COSINE))
        reference = rows(state, L.SX, L.SY, L.SZ)
        inner, outer = rows(state, L.SI, L.SQ, L.SU, L.SV), rows(state, L.EI, L.EQ, L.EU, L.EV)
        for k in range(L.CHUNK):
            fields, travel = rays[k]
            parts = [split(f, travel, normal[k], INDEX, 1.0) for f in fields]
            expected = stokes_of([a[0] for a, _ in parts], parts[0][0][1], reference[k])
            assert inner[k] == pytest.approx(expected, abs=5e-6)
            assert rows(state, L.DX, L.DY, L.DZ)[k] == pytest.approx(parts[0][0][1], abs=5e-6)
            if parts[0][1] is None:
                total += 1
                assert outer[k] == pytest.approx(0.0, abs=1e-12)
            else:
                assert rows(state, L.EX, L.EY, L.EZ)[k] == pytest.approx(parts[0][1][1], abs=2e-3)  # grazing exits
                expected = stokes_of([b[0] for _, b in parts], parts[0][1][1], reference[k])
                assert outer[k] == pytest.approx(expected, abs=5e-5)
            twisted += abs(inner[k, 3]) > 1e-3
            rays[k] = ([a[0] for a, _ in parts], parts[0][0][1])
    assert total > L.CHUNK  # the test has met total reflection often
    assert twisted > 20 or not polarised


def test_no_power_is_lost_at_a_hit():
    state, _, slabs, _ = born(hexagonal_prism(2.0))
    for _ in range(5):
        before = rows(state, L.SI)[:, 0]
        polyhedron.advance(state, L.CHUNK, slabs)
        polyhedron.interface(state, L.CHUNK)
        assert rows(state, L.SI, L.EI).sum(axis=1) == pytest.approx(before, rel=2e-6)


def test_absorption_is_exponential_along_the_way():
    # Lambert's law: alpha = 4 pi k / wavelength; size is the length of one body unit
    state, _, slabs, _ = born(hexagonal_prism(1.0), index=INDEX + 2e-3j, size=1e-5)
    before = rows(state, L.SI)[:, 0]
    polyhedron.advance(state, L.CHUNK, slabs)
    way = rows(state, L.LENGTH)[:, 0]
    polyhedron.interface(state, L.CHUNK)
    left = before * np.exp(-4 * np.pi * 2e-3 / 5.5e-7 * 1e-5 * way)
    assert rows(state, L.SI, L.EI).sum(axis=1) == pytest.approx(left, rel=1e-5, abs=1e-6)


@pytest.mark.parametrize("distances", [None, (1.0, 0.8, 1.1, 0.9, 1.05, 0.85)])
def test_positions_lie_on_the_face_met(distances):
    shape = hexagonal_prism(0.4, distances)
    state, codes, slabs, _ = born(shape)
    normals, reach = shape.face_normals, shape.offsets.ravel()
    entry = codes[L.PATH_LOW : L.PATH_LOW + L.CHUNK].astype(int) - 1
    trail = [[face] for face in entry]
    place = rows(state, L.PX, L.PY, L.PZ)
    assert np.einsum("ni,ni->n", place, normals[entry]) == pytest.approx(reach[entry], abs=1e-6)
    for _ in range(5):
        polyhedron.advance(state, L.CHUNK, slabs)
        polyhedron.interface(state, L.CHUNK)
        polyhedron.note_faces(state, codes, L.CHUNK)
        met = rows(state, L.MET)[:, 0].astype(int)
        place = rows(state, L.PX, L.PY, L.PZ)
        assert np.einsum("ni,ni->n", place, normals[met]) == pytest.approx(reach[met], abs=1e-6)
        assert np.all(place @ normals.T <= reach + 1e-6)
        for k in range(L.CHUNK):
            trail[k].append(met[k])
    for k in range(L.CHUNK):
        code = L.path_code(codes[L.PATH_LOW + k], codes[L.PATH_HIGH + k], codes[L.HITS + k])
        assert L.path_faces(code) == tuple(trail[k])


def test_long_paths_have_one_code():
    assert L.path_code(1, 1, 13) == L.LONGER
    assert L.path_faces(L.LONGER) is None


def test_roulette_keeps_the_mean_and_packing_keeps_the_living():
    state, codes = L.new_lanes()
    key = batch_key(5, 0, 0)
    kept = []
    for trial in range(400):
        state[L.SI : L.SI + L.WIDTH] = np.linspace(0.001, 0.2, L.WIDTH)
        state[L.PX : L.PX + L.WIDTH] = np.arange(L.WIDTH)
        codes[L.RAY : L.RAY + L.WIDTH] = np.arange(L.WIDTH) + trial * L.WIDTH
        codes[L.HITS : L.HITS + L.WIDTH] = 3
        polyhedron.roulette(state, codes, L.WIDTH, np.float32(0.1), *key)
        kept.append(state[L.SI : L.SI + L.WIDTH].copy())
    kept = np.array(kept, float)
    expected = np.linspace(0.001, 0.2, L.WIDTH)
    weak = expected < 0.1
    assert np.all(np.isclose(kept[:, weak], 0.1, rtol=1e-5) | (kept[:, weak] == 0.0))
    assert kept[:, ~weak] == pytest.approx(np.broadcast_to(expected[~weak], kept[:, ~weak].shape), rel=1e-6)
    error = np.sqrt(np.sum(expected[weak] * (0.1 - expected[weak])) / 400)
    assert abs(kept[:, weak].mean(axis=0).sum() - expected[weak].sum()) < 4 * error
    alive = set(np.flatnonzero(kept[-1] > 0.0))
    holes, movers = np.zeros(L.WIDTH + 1, np.uint32), np.zeros(L.WIDTH + 1, np.uint32)
    n = polyhedron.pack(state, codes, L.WIDTH, holes, movers)
    assert n == len(alive)
    assert set(state[L.PX : L.PX + n].astype(int)) == alive
    assert np.all(codes[L.RAY : L.RAY + n] - 399 * L.WIDTH == state[L.PX : L.PX + n])


@pytest.mark.skipif(platform.machine() not in ("x86_64", "AMD64"), reason="names of x86-64 registers")
@pytest.mark.parametrize(
    "kernel",
    ["interface", pytest.param("enter_chunk", marks=pytest.mark.slow), pytest.param("advance", marks=pytest.mark.slow)],
)
def test_kernels_are_vectorised(kernel, tmp_path):
    # design: the loop must hold packed square roots (divisions where there is no root), in the wide registers
    code = f"""
import numpy as np
from skyoptics.kernels import entry, polyhedron
p = entry if '{kernel}' == 'enter_chunk' else polyhedron
f4, u4 = np.zeros(9, np.float32), np.zeros(9, np.uint32)
types = dict(
    interface="(float32[::1], int64)",
    advance="(float32[::1], int64, float32[::1])",
    enter_chunk="(float32[::1], uint32[::1], int64, float32[::1], float32[::1], float32[::1], float32)",
)
p.{kernel}.compile(types["{kernel}"])
print("".join(p.{kernel}.inspect_asm().values()))
"""
    run = subprocess.run(
        [sys.executable, "-c", code],
        capture_output=True,
        text=True,
        check=True,
        env={**os.environ, "NUMBA_CACHE_DIR": str(tmp_path), "NUMBA_DISABLE_JIT": "0"},
    )
    operation = "vdivps" if kernel == "advance" else "vsqrtps"
    assert re.search(rf"{operation}\s.*[yz]mm", run.stdout)
