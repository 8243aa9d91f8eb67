"""Caustics of crystals with two free angles, found as the zeros of the Jacobian J = v · (∂v/∂φ × ∂v/∂ψ).

Zeros are bracketed on the edges of a grid over azimuth φ and spin ψ and joined cell by cell. Where a line runs so near the
limit of what is possible that the grid loses it, its pieces are followed from their ends; then points are put in until their
images lie close enough. A line of zeros whose image is a point is no arc and is dropped.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from skyoptics.crystals.arc_loci import STEP, Branch, runs
from skyoptics.crystals.passage import image, rotations
from skyoptics.units import DEG, BoolArray, FloatArray

_TURN = 2.0 * np.pi
_CELLS = 180
_DIFFERENCE = 1e-5
_POINT_LIKE = 0.05 * DEG
_EXACT = 1e-7

Edge = tuple[int, int, int]
Map = Callable[[FloatArray], tuple[FloatArray, BoolArray]]


def fold(law: str, sequence: Sequence[int], sun_elevation: float, index: float) -> list[Branch]:
    """Return the caustics of a law of two free angles.

    Parameters
    ----------
    law : str
        ``column`` or ``lowitz``.
    sequence : sequence of int
        Faces in the order met.
    sun_elevation : float
        [rad]
    index : float
        Refractive index relative to the air.

    Returns
    -------
    list of Branch
        Neighbouring points at most `skyoptics.crystals.arc_loci.STEP` apart. Lines end where light grazes a face; there the
        last few degrees of azimuth, which carry next to no light, may be missing.
    """

    def at(angles: FloatArray) -> tuple[FloatArray, BoolArray]:
        return image(sequence, rotations(law, angles[..., 0], angles[..., 1]), sun_elevation, index)

    def jacobian(angles: FloatArray) -> FloatArray:
        offsets = _DIFFERENCE * np.array([[0.0, 0.0], [1.0, 0.0], [-1.0, 0.0], [0.0, 1.0], [0.0, -1.0]])
        view, possible = at(angles[None] + offsets.reshape(5, *(1,) * (angles.ndim - 1), 2))
        value = np.sum(view[0] * np.cross(view[1] - view[2], view[3] - view[4]), axis=-1) / (2.0 * _DIFFERENCE) ** 2
        return np.where(possible.all(axis=0), value, np.nan)

    branches: list[Branch] = []
    for line in _prolonged(jacobian, _zero_lines(jacobian)):
        angles, view = _fill(at, jacobian, line)
        distinct = np.concatenate([[True], np.linalg.norm(np.diff(view, axis=0), axis=1) > 1e-9])
        for branch in runs(view[distinct], angles[distinct], np.ones(int(distinct.sum()), dtype=bool)):
            if np.linalg.norm(np.diff(branch.view, axis=0), axis=1).sum() > _POINT_LIKE:
                branches.append(branch)
    return branches


def _zero_lines(jacobian: Callable[[FloatArray], FloatArray]) -> list[FloatArray]:
    """Return chains of zeros on the edges of a grid over the torus, each (m, 2), unwrapped."""
    # off the round angles, where symmetry puts zeros on the nodes
    axis = 0.00123 + np.arange(_CELLS) * _TURN / _CELLS
    nodes = np.stack(np.meshgrid(axis, axis, indexing="ij"), axis=-1)
    value = jacobian(nodes)
    found = _edge_zeros(jacobian, nodes, value)
    links: dict[Edge, list[Edge]] = {edge: [] for edge in found}
    beside = (((0, 0), (0, 1)), ((0, 0), (1, 0)))
    for i, j in {((i - a) % _CELLS, (j - b) % _CELLS) for side, i, j in found for a, b in beside[side]}:
        right, up = (i + 1) % _CELLS, (j + 1) % _CELLS
        around: list[Edge] = [(0, i, j), (1, right, j), (0, i, up), (1, i, j)]
        edges = [edge for edge in around if edge in found]
        pairs = [edges] if len(edges) == 2 else []
        if len(edges) == 4:
            centre = jacobian(nodes[i, j] + 0.5 * _TURN / _CELLS)
            first, second = (1, 3) if np.sign(centre) == np.sign(value[i, j]) else (3, 1)
            pairs = [[edges[0], edges[first]], [edges[2], edges[second]]]
        for one, other in pairs:
            links[one].append(other)
            links[other].append(one)
    chains = []
    for edge in sorted(links, key=lambda key: len(links[key])):
        walk = _walk(links, edge)
        if len(walk) > 1:
            points = np.array([found[item] for item in walk])
            turns = np.round(np.diff(points, axis=0) / _TURN)
            points[1:] -= _TURN * np.cumsum(turns, axis=0)
            chains.append(points)
    return chains


def _edge_zeros(
    jacobian: Callable[[FloatArray], FloatArray], nodes: FloatArray, value: FloatArray
) -> dict[Edge, FloatArray]:
    """Return the zeros on the edges of the grid, by bisection: side 0 runs along azimuth, 1 along spin, from node (i, j)."""
    found: dict[Edge, FloatArray] = {}
    for side in (0, 1):
        other = np.roll(value, -1, axis=side)
        rows, columns = np.nonzero(value * other < 0.0)
        start = nodes[rows, columns]
        low, high = np.zeros(len(start)), np.full(len(start), _TURN / _CELLS)
        sign = np.sign(value[rows, columns])
        unit = np.eye(2)[side]
        for _ in range(36):
            middle = 0.5 * (low + high)
            before = np.sign(jacobian(start + middle[:, None] * unit)) == sign
            low, high = np.where(before, middle, low), np.where(before, high, middle)
        points = start + (0.5 * (low + high))[:, None] * unit
        found.update({(side, int(i), int(j)): point for i, j, point in zip(rows, columns, points, strict=True)})
    return found


def _walk(links: dict[Edge, list[Edge]], start: Edge) -> list[Edge]:
    """Return and use up the chain that starts at an edge, closed ones with their first edge again at the end."""
    walk = [start]
    while links[walk[-1]]:
        here = walk[-1]
        there = links[here].pop()
        links[there].remove(here)
        walk.append(there)
    return walk


def _corrected(
    jacobian: Callable[[FloatArray], FloatArray], points: FloatArray, across: FloatArray, reach: FloatArray
) -> FloatArray:
    """Return the zeros nearest to points (m, 2) on the lines along `across` (m, 2), at most `reach` (m,) away, else nan."""
    position = np.zeros(len(points))
    while reach.max() > _EXACT:
        scan = position[:, None] + reach[:, None] * np.linspace(-1.0, 1.0, 13)
        value = jacobian(points[:, None, :] + scan[..., None] * across[:, None, :])
        change = value[:, 1:] * value[:, :-1] <= 0.0
        distance = np.where(change, np.abs(scan[:, 1:] + scan[:, :-1] - 2.0 * position[:, None]), np.inf)
        best = np.argmin(distance, axis=1)
        row = np.arange(len(points))
        good = np.isfinite(distance[row, best])
        position = np.where(good, 0.5 * (scan[row, best] + scan[row, best + 1]), np.nan)
        reach = reach / 11.0
    return np.asarray(points + position[:, None] * across)


def _prolonged(jacobian: Callable[[FloatArray], FloatArray], chains: list[FloatArray]) -> list[FloatArray]:
    """Return chains prolonged at both ends to where the light stops or another line is met; closed ones as they are."""
    chains = sorted(chains, key=len, reverse=True)
    for number, chain in enumerate(chains):
        if np.linalg.norm(_apart(chain[0], chain[-1])) < 1e-9:
            continue
        others = np.concatenate([np.empty((0, 2)), *chains[:number], *chains[number + 1 :]])
        for _ in range(2):
            chain = _follow(jacobian, chain[::-1], others)
        chains[number] = chain
    return chains


def _follow(jacobian: Callable[[FloatArray], FloatArray], chain: FloatArray, others: FloatArray) -> FloatArray:
    """Return a chain prolonged beyond its last point."""
    points = list(chain)
    cell = _TURN / _CELLS
    stride = 0.5 * cell
    while stride > _EXACT and len(points) < len(chain) + 4 * _CELLS:
        along = points[-1] - points[-2]
        along = along / max(float(np.linalg.norm(along)), 1e-300)
        across = np.array([[-along[1], along[0]]])
        new = _corrected(jacobian, (points[-1] + stride * along)[None], across, np.array([0.5 * stride]))[0]
        if not np.isfinite(new[0]):
            stride *= 0.5
            continue
        points.append(new)
        known = np.concatenate([others, np.array(points[:-4]).reshape(-1, 2)])
        gap = _apart(new, known)
        near = np.linalg.norm(gap, axis=1)
        if len(near) and near.min() < 0.55 * cell:
            points.append(new + gap[np.argmin(near)])
            break
    return np.array(points)


def _apart(here: FloatArray, there: FloatArray) -> FloatArray:
    """Return the shortest way from here to there on the torus."""
    return np.asarray((there - here + np.pi) % _TURN - np.pi)


def _fill(at: Map, jacobian: Callable[[FloatArray], FloatArray], angles: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return a chain with points put in until neighbours' images lie within STEP, and the images."""
    view, _ = at(angles)
    for _ in range(12):
        split = np.flatnonzero(np.linalg.norm(np.diff(view, axis=0), axis=1) > STEP)
        if not len(split):
            break
        first, second = angles[split], angles[split + 1]
        along = second - first
        width = np.linalg.norm(along, axis=1)
        across = np.stack([-along[:, 1], along[:, 0]], axis=1) / width[:, None]
        new = _corrected(jacobian, 0.5 * (first + second), across, 0.5 * width)
        good = np.isfinite(new[:, 0])
        if not good.any():
            break
        new = new[good]
        new_view, _ = at(new)
        angles = np.insert(angles, split[good] + 1, new, axis=0)
        view = np.insert(view, split[good] + 1, new_view, axis=0)
    return angles, view
