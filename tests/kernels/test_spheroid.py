"""Rays through a spheroid: energy, the sphere's limit, reciprocity, lanes against plain fields, vector units."""

from __future__ import annotations

import platform
import re

import numpy as np
import pytest

from skyoptics.kernels import sphere, spheroid
from skyoptics.kernels.random import batch_key, hash32, uniform
from skyoptics.optics import bows

DEG = np.pi / 180.0
UPRIGHT = np.array([[0.0, 0.0, 1.0, 1.0]])
LOW_SUN = (0.0, -float(np.cos(0.3)), -float(np.sin(0.3)))
PLAIN = (1.0, 0.0, 0.0, 0.0)

compiled = pytest.mark.skipif(not hasattr(spheroid.trace, "py_func"), reason="numba is switched off")


def frame_of(light):
    """Up and right at the antisolar point, by hand: right is level, up × light... as seen along the light."""
    flat = np.hypot(light[0], light[1])
    right = np.array([light[1], -light[0], 0.0]) / flat
    return np.cross(right, light), right


def run(ratio, index=1.333, depth=0.0, light=LOW_SUN, stokes=PLAIN, axes=UPRIGHT, count=4096,
        key=(0, 0, 0), angle_bins=60, position_bins=24, distance_bins=32, frame=None):  # fmt: skip
    light = np.asarray(light, dtype=float)
    up, right = frame_of(light)
    caustics = np.repeat(bows.scattering_angle(index, np.array([2, 3]))[:, None], spheroid.KNOTS, axis=1)
    low, high = batch_key(*key)
    return spheroid.trace(
        low, high, count, float(index), float(ratio), float(depth), np.concatenate([light, -right]),
        np.concatenate([up, right] if frame is None else frame), np.array(stokes, dtype=float), np.asarray(axes, float),
        caustics, np.array([1.0, -1.0]), angle_bins, position_bins, distance_bins,
    )  # fmt: skip


@pytest.mark.parametrize("ratio", [1.0, 0.9, 0.7, 0.5])
@pytest.mark.parametrize("depth", [0.0, 1e-3, 0.4, 20.0])
@pytest.mark.parametrize("stokes", [PLAIN, (1.0, 0.6, -0.48, 0.64)])
def test_no_energy_is_lost(ratio, depth, stokes):
    light, near, energy, absorbed, cut_off = run(ratio, depth=depth, stokes=stokes)
    assert (energy.sum() + absorbed + cut_off) / 4096 == pytest.approx(1.0, abs=1e-12)
    assert light[..., 0].sum(axis=(1, 2)) == pytest.approx(energy, rel=1e-12)
    assert near[..., 0].sum(axis=(1, 2)) == pytest.approx(energy[2:4], rel=1e-12)
    assert np.all(np.hypot(light[..., 1], light[..., 2]) <= light[..., 0] * (1 + 1e-9))


def test_the_sphere_is_the_sphere():
    # same orders, same table as the closed-form kernel of a sphere, at another set of rays
    count = 1 << 16
    light, _, energy, _, _ = run(1.0, count=count, angle_bins=30)
    edges = np.linspace(0.0, np.pi, 31)
    low, high = batch_key(7, 0, 0)
    index = np.full(2, 1.333)
    sums, by_order, *_ = sphere.trace(low, high, count, index, np.zeros(2), edges, sphere.first_bins(edges))
    assert energy == pytest.approx(by_order[: spheroid.ORDERS], rel=2e-3)
    ours = light.sum(axis=2)
    there = sums[: spheroid.ORDERS, :, 0] > 2e-4 * count
    assert np.abs(ours[..., 0] / np.where(there, sums[:8, :, 0], 1.0) - 1.0)[there].max() < 0.03
    assert np.abs((ours[..., 1] - sums[:8, :, 1]) / np.where(there, sums[:8, :, 0], 1.0))[there].max() < 0.02
    assert np.abs(ours[..., 2:]).max() < 1e-3 * count / 100


def plain_tracer(index, ratio, axis, light, entry, depth, field):
    """Trace one ray with a complex field vector and the quadratic of an ellipsoid; yield (direction, field) by order.

    Fresnel's coefficients as in Born & Wolf, Principles of Optics, 7th ed. §1.5.2 eqs. (20), (21).
    """
    # x' M x = 1 with semi-axes 1, 1, q
    shape = np.eye(3) + (1.0 / ratio**2 - 1.0) * np.outer(axis, axis)
    place, d = entry, light
    inside = False
    n1, n2 = 1.0, index
    path = 0.0
    for _ in range(spheroid.ORDERS):
        normal = shape @ place
        normal /= np.linalg.norm(normal)
        normal = normal if inside else -normal  # along the ray
        ci = d @ normal
        ct = np.sqrt(complex(1.0 - (n1 / n2) ** 2 * (1.0 - ci**2)))
        s = np.cross(d, normal)
        s /= np.linalg.norm(s)
        p = np.cross(d, s)
        rs, rp = (n1 * ci - n2 * ct) / (n1 * ci + n2 * ct), (n2 * ci - n1 * ct) / (n2 * ci + n1 * ct)
        ts, tp = 2 * n1 * ci / (n1 * ci + n2 * ct), 2 * n1 * ci / (n2 * ci + n1 * ct)
        es, ep = field @ s, field @ p
        reflected = d - 2.0 * ci * normal
        # power through the surface, not field: √(n2 Re ct / n1 ci)
        beam = np.sqrt(max(n2 * ct.real / (n1 * ci), 0.0))
        total = ct.real == 0.0
        through = reflected if total else (n1 / n2) * d + (ct.real - n1 / n2 * ci) * normal
        # e∥ = d × e⊥ turns with the ray; r_p of Born & Wolf counts along it
        back = rs * es * s + rp * ep * np.cross(reflected, s)
        on = 0.0 * s if total else beam * (ts * es * s + tp * ep * np.cross(through, s))
        yield (through, on, total) if inside else (reflected, back, total)
        if inside:
            d, field = reflected, back
        else:
            d, field, inside, n1, n2 = through, on, True, index, 1.0
        t = -2.0 * (place @ shape @ d) / (d @ shape @ d)
        place = place + t * d
        path = depth * t
        field = field * np.exp(-0.5 * path)


@pytest.mark.parametrize(
    ("ratio", "index", "depth", "stokes"),
    [
        (0.95, 1.333, 0.0, "plain"),
        (0.6, 1.333, 0.2, "plain"),
        (0.6, 1.5, 0.05, "circular"),
        (0.75, 1.34, 0.3, "slanted"),
    ],
)
def test_lanes_agree_with_plain_fields(ratio, index, depth, stokes):
    """The same rays, one by one, with field vectors in float64: Stokes sums of every order."""
    count = 256
    light = np.array([0.3, -0.8, -0.4]) / np.linalg.norm([0.3, -0.8, -0.4])
    axis = np.array([0.1, -0.2, 1.0]) / np.linalg.norm([0.1, -0.2, 1.0])
    _, right = frame_of(light)
    across = -right
    along = np.cross(light, across)  # e∥ of the incident light
    # fields whose sum of Stokes vectors is the one asked for: (parallel, perpendicular)
    pairs = {
        "plain": [(np.sqrt(0.5), 0.0), (0.0, np.sqrt(0.5))],
        "circular": [(np.sqrt(0.5), 1j * np.sqrt(0.5))],
        "slanted": [(0.8, 0.6)],
    }[stokes]
    vector = np.zeros(4)
    for a, b in pairs:
        cross = a * np.conj(b)
        vector += [abs(a) ** 2 + abs(b) ** 2, abs(a) ** 2 - abs(b) ** 2, 2 * cross.real, -2 * cross.imag]
    low, high = batch_key(0, 0, 0)
    slide = uniform(low, high, np.uint32(count), np.uint32(0))
    shift = int(hash32(low, high, np.uint32(count), np.uint32(2)))
    stretch = np.eye(3) + (1.0 / ratio - 1.0) * np.outer(axis, axis)
    h = stretch @ light
    h /= np.linalg.norm(h)
    u = across - (across @ h) * h
    u /= np.linalg.norm(u)
    v = np.cross(h, u)
    sums = np.zeros((spheroid.ORDERS, 4))
    angle = np.zeros(spheroid.ORDERS)
    totals = 0
    for j in range(count):
        square = ((j + slide + uniform(low, high, np.uint32(j), np.uint32(0))) / count) % 1.0
        turn = (int(f"{j:032b}"[::-1], 2) ^ shift) / 2**32 + 0.5 * 2**-32
        # turn counts from the kernel's own half angle: sin and cos of 2π turn
        c, s = np.cos(2 * np.pi * turn), np.sin(2 * np.pi * turn)
        ball = np.sqrt(square) * (c * u + s * v) - np.sqrt(1.0 - square) * h
        entry = np.linalg.solve(stretch, ball)
        for a, b in pairs:
            field = a * along + b * across + 0j
            for p, (e, out, total) in enumerate(plain_tracer(index, ratio, axis, light, entry, depth, field)):
                m = np.cross(light, e)
                m /= np.linalg.norm(m)
                k = np.cross(e, m)
                ep, es = out @ k, out @ m
                cross = ep * np.conj(es)
                found = np.array(
                    [abs(ep) ** 2 + abs(es) ** 2, abs(ep) ** 2 - abs(es) ** 2, 2 * cross.real, -2 * cross.imag]
                )
                sums[p] += found
                angle[p] += found[0] * np.arccos(np.clip(light @ e, -1.0, 1.0))
                totals += total
    table, *_ = run(ratio, index, depth, light, vector, np.append(axis, 1.0)[None], count, angle_bins=1800)
    assert table.sum(axis=(1, 2)) == pytest.approx(sums, abs=1e-6 * count / 100)
    middle = (np.arange(1800) + 0.5) * np.pi / 1800
    mean = (table[..., 0].sum(axis=2) * middle).sum(axis=1)
    assert mean == pytest.approx(angle, abs=0.06 * DEG * count, rel=2e-4)
    assert totals > (50 if ratio < 0.9 else 0)  # total reflection is in the comparison


@pytest.mark.parametrize(("angle", "position"), [(163.0, 30.0), (150.0, 150.0), (25.0, 100.0)])
def test_reciprocity(angle, position):
    """Light sent back along its path: dσ/dΩ(a → b) = dσ/dΩ(−b → −a) (van de Hulst 1957, §5.21)."""
    ratio, count, step = 0.9, 1 << 17, 4.0
    first = np.array([0.0, -np.cos(0.3), -np.sin(0.3)])
    up, right = frame_of(first)
    across = np.cos(position * DEG) * up + np.sin(position * DEG) * right
    leaving = np.cos(angle * DEG) * first - np.sin(angle * DEG) * across
    found = []
    for light, out in ((first, leaving), (-leaving, -first)):
        area = np.sqrt(ratio**2 * (1 - light[2] ** 2) + light[2] ** 2)
        toward = -out - (-out @ light) * light
        toward /= np.linalg.norm(toward)  # position angle 0 towards what is asked for
        frame = [toward, np.cross(light, toward)]
        total = 0.0
        for batch in range(4):
            table, *_ = run(
                ratio, light=light, count=count, key=(1, 0, batch), angle_bins=360, position_bins=360, frame=frame
            )
            low, high = round((angle - step / 2) * 2), round((angle + step / 2) * 2)
            total += table[:, low:high, 180 - 6 : 180 + 6, 0].sum() * area
        found.append(total)
    assert found[0] == pytest.approx(found[1], rel=0.03)


def test_batches_repeat_and_differ():
    first, again, other = run(0.8), run(0.8), run(0.8, key=(0, 0, 1))
    assert np.array_equal(first[0], again[0])
    assert not np.array_equal(first[0], other[0])


def test_canted_axes_carry_their_power():
    axes = np.array([[0.0, 0.0, 1.0, 2.0], [0.6, 0.0, 0.8, 1.0]])
    _, _, energy, absorbed, cut_off = run(0.8, depth=0.1, axes=axes)
    # a hash chooses: the mean power is 1.5 within 4 standard errors (0.5 / √4096)
    assert (energy.sum() + absorbed + cut_off) / 4096 == pytest.approx(1.5, abs=4 * 0.5 / 64)


def test_short_functions():
    u = np.linspace(0.0, 1.0, 1001)
    pairs = np.array([spheroid._sine_cosine_turn(x) for x in u])
    assert np.abs(pairs[:, 0] - np.sin(2 * np.pi * u)).max() < 5e-11
    assert np.abs(pairs[:, 1] - np.cos(2 * np.pi * u)).max() < 5e-11
    turn = np.linspace(-np.pi, np.pi, 1001)
    found = np.array([spheroid._arc_tangent(np.sin(x), np.cos(x)) for x in turn])
    assert np.abs(found - np.arctan2(np.sin(turn), np.cos(turn))).max() < 2e-9
    assert spheroid._arc_tangent(0.0, 0.0) == 0.0
    x = np.linspace(0.0, 40.0, 401)
    assert np.abs(np.array([spheroid._decay(v) for v in x]) - np.exp(-x)).max() < 1e-8


@compiled
@pytest.mark.skipif(platform.machine() not in {"x86_64", "AMD64"}, reason="x86 registers")
@pytest.mark.parametrize("stage", ["_enter", "_hit", "_leave"])
def test_stages_use_the_vector_units(stage):
    from llvmlite import binding
    from numba import njit

    if not binding.get_host_cpu_features().get("avx2"):
        pytest.skip("no AVX2 here")
    state = np.zeros(spheroid.ROWS * spheroid.STRIDE)
    state[spheroid._AZ : spheroid._AZ + spheroid.WIDTH] = 1.0
    beam, frame = np.array([0.0, -0.8, -0.6, -1.0, 0.0, 0.0]), np.array([0.0, -0.6, 0.8, -1.0, 0.0, 0.0])
    arguments = {
        "_enter": (state, beam, 1.33, 0.9, np.array(PLAIN)),
        "_hit": (state, 1.33, 0.9, 0.1),
        "_leave": (state, beam, frame),
    }[stage]
    # compiled anew: numba does not show the assembly of what it took from its cache
    fresh = njit(nogil=True, error_model="numpy")(getattr(spheroid, stage).py_func)
    fresh(*arguments)
    assembly = "".join(fresh.inspect_asm().values())
    assert re.search(r"vsqrtpd\s.*%[yz]mm", assembly)
