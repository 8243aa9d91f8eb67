"""Ray light of spheroids by position angle: sums over batches, made into what a table needs."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi

import numpy as np

from skyoptics.droplets import airy
from skyoptics.kernels import spheroid
from skyoptics.kernels.random import batch_key
from skyoptics.optics import bows
from skyoptics.units import ComplexArray, FloatArray, IntArray

ANGLE_BINS = 360
"""Bins of scattering angle of the traced orders."""
POSITION_BINS = 36
"""Bins of position angle of the traced light, whole circle."""
DISTANCE_BINS = 64
"""Bins of √(distance from the caustic)."""


@dataclass(frozen=True, eq=False)
class Plan:
    """What the sums are for.

    Parameters
    ----------
    batches : int
        At each index and axis ratio.
    ends : ndarray, complex, shape (2,)
        Index at the ends of the spectrum.
    nodes : ndarray, shape (k,)
        Axis ratios traced.
    node, part, weight : ndarray, shape (samples,)
        Place of each sample between the nodes, and its share of number times r² [m²].
    orders : tuple of int
        p wanted.
    angle, position : ndarray, shape (nθ,), (nφ,)
        Of the table [rad].
    symmetric : bool
        Whether mirror images in the vertical through the source are alike.
    """

    batches: int
    ends: ComplexArray
    nodes: FloatArray
    node: IntArray
    part: FloatArray
    weight: FloatArray
    orders: tuple[int, ...]
    angle: FloatArray
    position: FloatArray
    symmetric: bool


class TracedLight:
    """Sums over batches: bows by distance and other orders by angle, at each index and axis ratio."""

    def __init__(self, plan: Plan, ends: int, tilted: bool) -> None:
        self.plan = plan
        shape = (ends, len(plan.nodes))
        self.tilted = tilted
        self.rays = 0
        self.sums = np.zeros((*shape, 2, DISTANCE_BINS, POSITION_BINS, 4))
        self.squares = np.zeros((*shape, 2, DISTANCE_BINS, POSITION_BINS))
        self.others = np.zeros((*shape, spheroid.ORDERS, ANGLE_BINS, POSITION_BINS, 4))
        self.energy_sums = np.zeros((*shape, spheroid.ORDERS))
        self.lost = np.zeros((*shape, 2))
        self.brightness = np.empty(0)
        self.smooth = np.empty(0)
        self.energy = np.empty(0)
        self.absorbed = self.cut_off = self.error = 0.0

    def add(self, code: int, part: tuple[FloatArray, FloatArray, FloatArray, float, float]) -> None:
        """Add a batch."""
        kind = code % 2
        end, row = divmod(code // 2, 64)
        light, near, energy, absorbed, cut_off = part
        if kind == 0:
            self.sums[end, row] += near
            self.squares[end, row] += near[..., 0] ** 2
            self.energy_sums[end, row] += energy
            self.lost[end, row] += absorbed, cut_off
        if kind == 1 or not self.tilted:
            self.others[end, row] += light

    def finish(self, same: bool) -> None:
        """Turn sums into factors by position angle (2 indices, 2 bows, nodes, nφ, DISTANCE_BINS, 4), and cross-sections."""
        plan = self.plan
        count = float(plan.batches * spheroid.RAYS)
        deviation = np.sqrt(np.maximum(self.squares - self.sums[..., 0] ** 2 / plan.batches, 0.0))
        self.error = float(deviation.sum() / self.sums[..., 0].sum() * np.sqrt(plan.batches / (plan.batches - 1.0)))
        incident = self.energy_sums.sum(axis=-1) + self.lost.sum(axis=-1)
        self.energy = (self.energy_sums / incident[..., None]).mean(axis=(0, 1))
        self.absorbed, self.cut_off = (self.lost / incident[..., None]).mean(axis=(0, 1)).tolist()
        root = np.linspace(0.0, np.sqrt(pi), DISTANCE_BINS + 1)
        sums = np.stack(
            [0.5 * (self.sums[..., 0] - self.sums[..., 1]), 0.5 * (self.sums[..., 0] + self.sums[..., 1])], axis=-1
        )
        sums = np.concatenate([sums, self.sums[..., 2:]], axis=-1) * (pi / count / (2.0 * pi / POSITION_BINS))
        for end in range(len(sums)):
            n = float(plan.ends[end].real)
            for bow, p in enumerate(spheroid.BOW_ORDERS):
                h = airy.curvature(n, p)
                squares = strength(n, p)
                scale = 0.5 * float(bows.impact(n, p)) / np.sqrt(h)
                first, third = 2.0 * np.diff(root), (2.0 / 3.0) * np.diff(root**3) / h
                s = scale * (squares[0] * first + squares[1] * third)
                q = scale * (squares[2] * first + squares[3] * third)
                sums[end, :, bow] /= np.stack([s, q, s + q, s + q], axis=-1)[:, None, :]
        sums = to_positions(sums, plan)
        cosine = np.cos(np.linspace(0.0, pi, ANGLE_BINS + 1))
        solid = -np.diff(cosine) * (2.0 * pi / POSITION_BINS)
        chosen = [p for p in plan.orders if p not in (0, *spheroid.BOW_ORDERS)]
        others = _pooled(self.others[:, :, chosen].sum(axis=2)) * (pi / count) / solid[:, None, None]
        others = to_positions(others, plan)
        if same:
            sums, others = np.repeat(sums, 2, axis=0), np.repeat(others, 2, axis=0)
        if len(plan.nodes) == 1:
            sums, others = np.repeat(sums, 2, axis=1), np.repeat(others, 2, axis=1)
        # (2, bow, node, nφ, distance, 4)
        self.brightness = np.ascontiguousarray(np.moveaxis(sums, (2, 4), (1, 3)))
        weight = np.zeros(others.shape[1])
        np.add.at(weight, plan.node, plan.weight * (1.0 - plan.part))
        np.add.at(weight, plan.node + 1, plan.weight * plan.part)
        mixed = np.einsum("nrapk,r->npak", others, weight)
        middle = (np.arange(ANGLE_BINS) + 0.5) * (pi / ANGLE_BINS)
        place = np.clip(np.searchsorted(middle, plan.angle) - 1, 0, ANGLE_BINS - 2)
        part = np.clip((plan.angle - middle[place]) / (middle[1] - middle[0]), 0.0, 1.0)[:, None]
        self.smooth = mixed[:, :, place] * (1.0 - part) + mixed[:, :, place + 1] * part


def strength(index: float, order: int) -> FloatArray:
    """Return F² and G² of `skyoptics.droplets.airy` for ⊥, then ∥, read off its amplitudes at the bow ray (ζ = 0)."""
    from scipy.special import airy as airy_functions

    x = 1000.0
    h, theta = airy.curvature(index, order), airy.bow_angle(index, order)
    function, slope, _, _ = airy_functions(0.0)
    scale = 2.0 * pi * float(bows.impact(index, order)) / np.sin(theta) * x ** (7.0 / 3.0) * h ** (-2.0 / 3.0)
    result = []
    for s in airy.amplitudes(complex(index), x, theta, order):
        result += [
            float(s.real) ** 2 / (scale * function**2),
            float(s.imag) ** 2 / (scale * slope**2) * (x * h) ** (2.0 / 3.0),
        ]
    return np.array(result)


def to_positions(values: FloatArray, plan: Plan) -> FloatArray:
    """Interpolate from bins of position angle (axis -2, Stokes-like axis -1) to the table's; mirror halves made one."""
    if plan.symmetric:
        mirrored = values[..., ::-1, :] * np.array([1.0, 1.0, -1.0, -1.0])
        values = 0.5 * (values + mirrored)
    place = (plan.position + pi) / (2.0 * pi) * POSITION_BINS - 0.5
    before = np.floor(place).astype(np.int64)
    part = (place - before)[:, None]
    first, second = values[..., before % POSITION_BINS, :], values[..., (before + 1) % POSITION_BINS, :]
    return np.asarray(first * (1.0 - part) + second * part)


def _pooled(values: FloatArray) -> FloatArray:
    """Average over neighbouring bins: three angles, and as many positions as make up the arc of three at the equator."""
    sine = np.sin((np.arange(ANGLE_BINS) + 0.5) * (pi / ANGLE_BINS))
    light = np.pad(values, [(0, 0)] * (values.ndim - 3) + [(1, 1), (0, 0), (0, 0)])
    solid = np.pad(sine, 1)
    three = np.add.reduce([light[..., k : k + ANGLE_BINS, :, :] for k in range(3)])
    share = sine / np.add.reduce([solid[k : k + ANGLE_BINS] for k in range(3)])
    values = three * share[:, None, None]
    out = np.empty_like(values)
    for row, s in enumerate(sine):
        half = min(round(1.0 / s), POSITION_BINS // 2)
        rolled = [np.roll(values[..., row, :, :], k, axis=-2) for k in range(-half, half + 1)]
        out[..., row, :, :] = sum(rolled) / len(rolled)
    return out


def trace_batch(
    key: tuple[int, int, int],
    index: float,
    ratio: float,
    depth: float,
    beam: FloatArray,
    frame: FloatArray,
    stokes: FloatArray,
    axes: FloatArray,
    caustics: FloatArray,
    sides: FloatArray,
) -> tuple[FloatArray, FloatArray, FloatArray, float, float]:
    """Trace one batch (a function of its own, so that it can be sent to another process)."""
    low, high = batch_key(*key)
    result: tuple[FloatArray, FloatArray, FloatArray, float, float] = spheroid.trace(
        low, high, spheroid.RAYS, index, ratio, depth, beam, frame, np.ascontiguousarray(stokes), axes, caustics, sides,
        ANGLE_BINS, POSITION_BINS, DISTANCE_BINS,
    )  # fmt: skip
    return result
