"""Where rays are born for a narrow frame: a pilot learns which crystals send light there.

Few crystals of the whole sky's send light into a long lens. What decides is the orientation and the place of entry: up to
six dimensions of the Sobol points. A pilot lists exits in the frame, the unit cube of those dimensions is divided into boxes
where their light says so, and box c gets the share

    q_c = (1 − s) √(M_c V_c) / Σ √(M V) + s V_c,

V_c its volume, M_c the second moment of a plain ray's light from it: the shares of least variance for weights V_c / q_c
(Neyman, J. R. Stat. Soc. 97, 558 (1934); for boxes grown where they pay, Lepage, J. Comput. Phys. 27, 192 (1978)), mixed with
a share s of plain sampling, so that no weight passes 1/s and light the pilot did not meet is kept (Hesterberg, Technometrics
37, 185 (1995)). Each round of the pilot is guided by those before it.

Light counts as the eye sees it: CIE 1976 lightness goes with the cube root of luminance, so an exit into brightness Y counts
as power · Y^(−2/3). Bright parts of the frame get more rays than dim ones, but not in proportion.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from skyoptics.crystals.prepared import Guide, Prepared
from skyoptics.crystals.tracing import trace_exits
from skyoptics.kernels.crystal import OFFSET_DIMENSION
from skyoptics.kernels.lanes import CHUNK
from skyoptics.kernels.orient import AZIMUTH, ENTRY_FIRST, ENTRY_SECOND, SPIN, TILT, TILT_DIRECTION
from skyoptics.kernels.random import batch_key, uniform
from skyoptics.kernels.sobol import CHUNK_TABLE, DIMENSIONS, REVERSED_NUMBERS, scramble_seeds, sobol_chunk
from skyoptics.units import Float32Array, FloatArray

DIVIDED = (AZIMUTH, SPIN, TILT, TILT_DIRECTION, ENTRY_FIRST, ENTRY_SECOND)
"""Dimensions that boxes may divide, where a law uses them."""
ROUNDS = (0.25, 0.5, 1.0, 1.0)
"""Rays of the guided rounds of the pilot, in units of the last; the plain round before them has as many as the first."""
MOST_PLAIN_RAYS = 2**20
"""Plain rounds that meet fewer than a few rays grow up to this number of rays."""
PILOT_RAYS = (2**14, 2**18)
"""Least and most rays of the last round; between them as many as pixels, so that a small picture has a small pilot."""
PLAIN_SHARE = 0.08
"""s of the finished guide; rounds of the pilot take three times as much."""
LEAST_GAIN = 1.3
"""Variance of plain over guided rays below which rays stay plain."""
MOST_CELLS = 8192
LAST_BATCH = 2**32 - 1
"""Batch number of the pilot's first round; the others count down from it. Pictures count up from 0."""

_FEW = 32  # hits with which guiding starts
_ENOUGH = 200  # hits that show no gain: look no further
_PARTS = 8  # of a side, in looking for the place to cut
_NARROWEST = 2.0**-10  # of a side that is still cut: corners stay exact in float32
_SIGNIFICANT = 2.0  # times 1 / hits; chance alone makes 7/8 ± 0.5 of it in a dimension
_PRIOR = 0.5  # of a hit, spread over both halves of a box that is cut
_LEAST_PART = 1e-6  # of the whole, that a cut must gain
_BLOCKS = (16, 24)
_BELOW_ONE = 1.0 - 2.0**-53
_FLOOR = 0.25  # of the mean brightness of the frame's blocks, added to each


@dataclass(frozen=True, eq=False)
class _Hits:
    """Rays of a pilot that reached the frame: coordinates (m, k), second moment (m,) as for plain sampling."""

    places: FloatArray
    moments: FloatArray
    gain: float
    """Second moment of plain rays over that of the rays as they were guided."""

    @property
    def effective(self) -> float:
        """Number of equal hits that would tell as much."""
        squares = float((self.moments * self.moments).sum())
        return float(self.moments.sum()) ** 2 / squares if squares > 0.0 else 0.0


def parameters() -> list[Any]:
    """Return all that a guide depends on beside its arguments, for trace keys."""
    sizes = [ROUNDS, PILOT_RAYS, MOST_PLAIN_RAYS, LAST_BATCH, MOST_CELLS, PLAIN_SHARE, LEAST_GAIN]
    return [*sizes, _FEW, _ENOUGH, _PARTS, _NARROWEST, _SIGNIFICANT, _PRIOR, _LEAST_PART, _BLOCKS, _FLOOR]


def learn(prepared: Prepared, directions: Float32Array, seed: int) -> Guide | None:
    """Return where rays should be born to light a frame.

    Parameters
    ----------
    prepared : Prepared
        From `skyoptics.crystals.prepared.prepare`, for the whole spectrum at once.
    directions : ndarray
        The frame, `Directions.packed()`.
    seed : int
        Random seed; the guide is a function of the arguments.

    Returns
    -------
    Guide or None
        To be given to `prepare` of every bin; None where plain rays do about as well (gain below `LEAST_GAIN`), or where the
        pilot met no light.
    """
    prepared = replace(prepared, bodies=prepared.bodies[len(prepared.bodies) // 2 :][:1])  # one shape is typical enough
    dimensions = [dimension for dimension in DIVIDED if prepared.used >> dimension & 1]
    most = 1 << int(np.clip(np.ceil(np.log2(directions[1] * directions[2])), *np.log2(PILOT_RAYS)))
    found: list[_Hits] = []
    rays, number = int(ROUNDS[0] * most), 0
    while sum(len(hits.moments) for hits in found) < _FEW:  # plain rays, more of them while they meet next to nothing
        if rays > MOST_PLAIN_RAYS:
            return None
        found.append(_pilot(prepared, directions, seed, number, rays, dimensions))
        rays, number = 4 * rays, number + 1
    guide, promised = _grown(found, dimensions, 3.0 * PLAIN_SHARE)
    if promised < LEAST_GAIN and sum(hits.effective for hits in found) > _ENOUGH:
        return None
    for left, part in zip(range(len(ROUNDS) - 1, -1, -1), ROUNDS, strict=True):
        found.append(_pilot(replace(prepared, guide=guide), directions, seed, number, int(part * most), dimensions))
        guide, promised = _grown(found, dimensions, 3.0 * PLAIN_SHARE if left else PLAIN_SHARE)
        number += 1
    return guide if min(found[-1].gain, promised) > LEAST_GAIN else None


def _grown(found: list[_Hits], dimensions: list[int], plain_share: float) -> tuple[Guide, float]:
    """Return a guide from all rounds so far, each trusted by its number of effective hits; and the gain it promises."""
    trust = np.array([hits.effective for hits in found])
    moments = [hits.moments * share for hits, share in zip(found, trust / trust.sum(), strict=True)]
    return grow(np.concatenate([hits.places for hits in found]), np.concatenate(moments), dimensions, plain_share)


def grow(places: FloatArray, moments: FloatArray, dimensions: list[int], plain_share: float) -> tuple[Guide, float]:
    """Return a guide from hits, and the gain it promises.

    Parameters
    ----------
    places : ndarray, shape (m, k)
        Coordinates of hits in the unit cube.
    moments : ndarray, shape (m,)
        Second moment each stands for under plain sampling.
    dimensions : list of int, length k
        Their dimensions of the Sobol points.
    plain_share : float
        s.

    Returns
    -------
    guide : Guide
    gain : float
        Second moment of plain rays over that of guided ones, by the same hits (a little too good).
    """
    low, width, mass, smooth = _divide(places, moments)
    volume = np.prod(width, axis=1)
    wanted = np.sqrt(smooth * volume)
    share = (1.0 - plain_share) * wanted / np.cumsum(wanted)[-1] + plain_share * volume
    share /= np.cumsum(share)[-1]
    sums = np.concatenate([[0.0], np.cumsum(share)])
    sums[-1] = 1.0
    boxes = np.concatenate([(volume / np.diff(sums))[:, None], low, width], axis=1)
    gain = float(moments.sum() / (mass * volume / share).sum())
    return Guide(sums, boxes.astype(np.float32).ravel(), np.array(dimensions, dtype=np.int64)), gain


def _divide(places: FloatArray, moments: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Return lower corners (n, k), widths (n, k), moments (n,) and the same smoothed, of boxes in depth-first order.

    All boxes of a level are looked at together. A box is cut across the dimension in which a division in eight would lower
    Σ √(M V) most, at the one of the seven places that does most, if that is more than chance makes.
    """
    inside = np.ascontiguousarray(places.T)  # places in the box a hit lies in, 0 to 1
    k = len(inside)
    low, width = np.zeros((1, k)), np.ones((1, k))
    start, length = np.zeros(1), 1.0  # of a box in the order of boxes
    smooth = np.array([moments.sum()])
    least = _LEAST_PART * np.sqrt(smooth[0])
    box = np.zeros(len(moments), dtype=np.int64)
    done: list[tuple[FloatArray, ...]] = []
    cells = 1
    while len(low):
        n = len(low)
        squares = np.bincount(box, moments * moments, n)
        spot = box * _PARTS
        parts = np.stack(
            [np.bincount(spot + (x * _PARTS).astype(np.int64), moments, n * _PARTS).reshape(n, _PARTS) for x in inside],
            axis=1,
        )
        mass = parts[:, 0].sum(axis=1)
        hits = np.divide(mass * mass, squares, out=np.zeros(n), where=squares > 0.0)
        gains = 1.0 - np.sqrt(parts / _PARTS).sum(axis=2) / np.sqrt(np.maximum(mass, 1e-300))[:, None]
        gains[width < _NARROWEST * _PARTS] = 0.0
        best = gains.argmax(axis=1)
        gain = gains[np.arange(n), best]
        use = gain * np.sqrt(mass * np.prod(width, axis=1))
        cut = (gain * hits > _SIGNIFICANT) & (use > least)
        if cells + cut.sum() > MOST_CELLS:
            cut[np.argsort(np.where(cut, -use, 0.0), kind="stable")[MOST_CELLS - cells :]] = False
        cells += int(cut.sum())
        done.append((low[~cut], width[~cut], mass[~cut], smooth[~cut], start[~cut]))
        # Children: first all lower ones, then all upper ones
        rows = np.flatnonzero(cut)
        count = np.arange(len(rows))
        across = best[rows]
        fraction, lower = _place_of_cut(parts[rows, across], mass[rows])
        length /= 2.0
        at = low[rows, across] + fraction * width[rows, across]
        prior = _PRIOR * mass[rows] / hits[rows]
        low, width = np.tile(low[rows], (2, 1)), np.tile(width[rows], (2, 1))
        width[count, across] *= fraction
        width[len(rows) + count, across] *= 1.0 - fraction
        low[len(rows) + count, across] = at
        smooth = np.concatenate([lower + prior * fraction, mass[rows] - lower + prior * (1.0 - fraction)])
        start = np.concatenate([start[rows], start[rows] + length])
        # Hits go down with them
        number = np.full(n, -1)
        number[rows] = count
        parent = number[box]
        kept = parent >= 0
        inside, moments, parent = inside[:, kept], moments[kept], parent[kept]
        which, hit = across[parent], np.arange(len(parent))
        x, f = inside[which, hit], fraction[parent]
        upper = x >= f
        inside[which, hit] = np.minimum(np.where(upper, (x - f) / (1.0 - f), x / f), _BELOW_ONE)
        box = parent + len(rows) * upper
    low, width, mass, smooth, start = (np.concatenate(parts) for parts in zip(*done, strict=True))
    order = np.argsort(start, kind="stable")
    return low[order], width[order], mass[order], smooth[order]


def _place_of_cut(parts: FloatArray, mass: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return where to cut boxes of `parts` (n, _PARTS), as a fraction, and the moment below it."""
    below = np.cumsum(parts, axis=1)[:, :-1]
    share = np.arange(1, _PARTS) / _PARTS
    after = np.sqrt(below * share) + np.sqrt(np.maximum(mass[:, None] - below, 0.0) * (1.0 - share))
    at = after.argmin(axis=1)
    return share[at], np.minimum(below[np.arange(len(mass)), at], mass)


def _pilot(
    prepared: Prepared, directions: Float32Array, seed: int, number: int, rays: int, dimensions: list[int]
) -> _Hits:
    """Trace one round of the pilot; return what reached the frame."""
    batch = LAST_BATCH - number
    exits, _ = trace_exits(prepared, seed, batch, rays, directions=directions)
    power = exits.stokes[:, 0].astype(np.float64)
    rows, columns = int(directions[1]), int(directions[2])
    down, across = min(_BLOCKS[0], rows), min(_BLOCKS[1], columns)
    block = (exits.cell // columns * down // rows).astype(np.int64) * across + exits.cell % columns * across // columns
    light: Any = np.bincount(block, power, down * across)
    bright = light / max(float(light.mean()), 1e-300) + _FLOOR
    power = power / np.cbrt(bright * bright)[block]
    square: Any = np.bincount(exits.ray, power * power, rays)
    ray = np.flatnonzero(square)
    places, weight = _births(prepared, seed, batch, rays, ray, dimensions)
    guided, plain = square[ray], square[ray] / weight
    gain = float(plain.sum() / guided.sum()) if len(ray) else 1.0
    return _Hits(places, plain / rays, gain)


def _births(
    prepared: Prepared, seed: int, batch: int, rays: int, wanted: Any, dimensions: list[int]
) -> tuple[FloatArray, FloatArray]:
    """Return coordinates (m, k) and weights (m,) of some rays of a batch."""
    key = batch_key(seed, prepared.spectral_bin, batch)
    seeds = np.zeros(DIMENSIONS, dtype=np.uint32)
    scramble_seeds(*key, seeds)
    chunks = np.zeros((rays // CHUNK, DIMENSIONS * CHUNK), dtype=np.float32)
    for chunk in range(rays // CHUNK):
        sobol_chunk(chunk * CHUNK, True, seeds, prepared.used, REVERSED_NUMBERS, CHUNK_TABLE, chunks[chunk])
    points = chunks.reshape(-1, DIMENSIONS, CHUNK)
    places = np.stack([points[wanted // CHUNK, d, wanted % CHUNK] for d in dimensions], axis=1).astype(np.float64)
    guide = prepared.guide
    if not len(guide.dimensions):
        return places, np.ones(len(wanted))
    k = len(dimensions)
    offset = uniform(*key, np.uint32(0), np.uint32(OFFSET_DIMENSION))
    cell = np.searchsorted(guide.sums, (wanted + offset) / rays, side="right") - 1
    box = guide.boxes.reshape(-1, 1 + 2 * k)[cell.clip(0, len(guide.sums) - 2)].astype(np.float64)
    return box[:, 1 : 1 + k] + places * box[:, 1 + k :], box[:, 0]
