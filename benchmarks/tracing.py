"""How fast rays are traced through crystals: lanes against the plain loop. See README.md beside this file.

python benchmarks/tracing.py --aspect 0.5 --threads 1 --json
"""

from __future__ import annotations

import argparse
import json
import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

import numpy as np

from skyoptics.crystals.orientations import LAWS, Orientation
from skyoptics.crystals.prepared import Prepared, prepare
from skyoptics.crystals.shapes import Shape, hexagonal_prism
from skyoptics.crystals.tracing import Tally, plain_plane, trace_plane
from skyoptics.geometry.axes import direction
from skyoptics.geometry.directions import Directions
from skyoptics.kernels import lanes
from skyoptics.kernels.crystal import INVERSE_KAPPA, RADIUS, SCALE, SPAN
from skyoptics.kernels.entry import PATCH, enter_chunk
from skyoptics.kernels.orient import orient_chunk, polarise_chunk, source_chunk
from skyoptics.kernels.plain import step_faces, step_plain, step_slabs
from skyoptics.kernels.polyhedron import step_lanes
from skyoptics.kernels.random import batch_key
from skyoptics.kernels.sobol import CHUNK_TABLE, DIMENSIONS, REVERSED_NUMBERS, scramble_seeds, sobol_chunk
from skyoptics.materials.index import ice
from skyoptics.units import DEG

BINS = 16
SUN_RADIUS = 0.2666 * DEG
LANE_RAYS = 2**18
PLAIN_RAYS = 2**16
HITS = 8
"""Hits of the stepping comparison: few enough that no power falls among the subnormal numbers."""


def main() -> None:
    """Run the comparison and print it."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--aspect", type=float, default=0.5)
    parser.add_argument("--orientation", choices=LAWS, default="random")
    parser.add_argument("--tilt-deg", type=float, default=1.0)
    parser.add_argument("--threads", type=int, default=1)
    parser.add_argument("--rounds", type=int, default=7)
    parser.add_argument("--json", action="store_true")
    options = parser.parse_args()
    shape = hexagonal_prism(options.aspect)
    result = measure(shape, Orientation(options.orientation, options.tilt_deg * DEG), options.threads, options.rounds)
    if options.json:
        print(json.dumps(result))
    else:
        for name, value in result.items():
            print(f"{name:32s} {value:10.3f}")


def measure(shape: Shape, orientation: Orientation, threads: int, rounds: int) -> dict[str, float]:
    """Return the figures; the best of several interleaved rounds of each."""
    index = ice()
    edges = np.linspace(400e-9, 700e-9, BINS + 1)
    grid = Directions.cylindrical((1024, 1024), np.eye(3), (-np.pi, np.pi), (np.pi / 2, -np.pi / 2)).packed()
    sun = direction(0.0, 20.0 * DEG)
    prepared = [
        prepare(shape, orientation, index, edges[b : b + 2], sun, radius=SUN_RADIUS, size=1e-4, spectral_bin=b)
        for b in range(BINS)
    ]
    clock = time.thread_time if threads == 1 else time.perf_counter
    for item in prepared[:1]:
        trace_plane(item, grid, 0, 0, 64)
        plain_plane(item, shape, grid, 0, 0, 64)
    step = Stepping(shape, prepared[0])
    lane, plain, roots = [], [], []
    steps: dict[str, list[float]] = {}
    for round_number in range(rounds):
        start = clock()
        tallies = _lanes(prepared, grid, round_number, threads)
        lane.append((clock() - start, tallies))
        start = time.thread_time()
        entered = sum(plain_plane(item, shape, grid, 0, round_number, PLAIN_RAYS // BINS)[1].rays for item in prepared)
        plain.append((time.thread_time() - start) / entered)
        for name, value in step.times().items():
            steps.setdefault(name, []).append(value)
        roots.append(_yardstick())
    hit = {name: min(values) for name, values in steps.items()}
    seconds, tallies = min(lane, key=lambda pair: pair[0])
    return {
        "entered_mrays_per_s": sum(t.rays for t in tallies) / seconds / 1e6,
        "live_msegments_per_s": sum(t.segments for t in tallies) / seconds / 1e6,
        "plain_entered_mrays_per_s": 1e-6 / min(plain),
        "stepping_ratio": hit["faces"] / hit["lanes"],
        "yardstick": max(roots),
        "pipeline_ratio_per_thread": min(plain) * sum(t.rays for t in tallies) / seconds / threads,
        "stepping_ratio_slabs": hit["slabs"] / hit["lanes"],
        "polarised_hit_ratio": hit["plain"] / hit["polarised"],
        "stepping_mhits_per_s": 1e-6 / hit["lanes"],
        "polarised_mhits_per_s": 1e-6 / hit["polarised"],
        "aspect": float(shape.offsets[-1].sum()),
        "threads": threads,
    }


class Stepping:
    """The same rays, inside, followed for HITS hits by lanes and by the plain loop: seconds a hit."""

    def __init__(self, shape: Shape, prepared: Prepared) -> None:
        slabs, patches = prepared.bodies[0]
        settings, law, pose, tilts, frame, disc, index, stokes, *_ = prepared.arguments
        self.state, codes = lanes.new_lanes()
        points = np.zeros(DIMENSIONS * lanes.CHUNK, np.float32)
        seeds = np.zeros(DIMENSIONS, np.uint32)
        sums = np.zeros((len(patches) // PATCH + 1) * lanes.CHUNK, np.float32)
        scramble_seeds(*batch_key(1, 0, 0), seeds)
        for first in range(0, lanes.WIDTH, lanes.CHUNK):
            part = self.state[first:]
            sobol_chunk(first, True, seeds, prepared.used, REVERSED_NUMBERS, CHUNK_TABLE, points)
            source_chunk(part, points, frame, settings[RADIUS], disc, index)
            orient_chunk(part, points, law, settings[INVERSE_KAPPA], settings[SPAN], pose, tilts)
            polarise_chunk(part, stokes, frame[:3])
            enter_chunk(part, codes[first:], first, points, patches, sums, settings[SCALE])
        self.start = self.state.copy()
        self.slabs = slabs
        rows = [lanes.PX, lanes.PY, lanes.PZ, lanes.DX, lanes.DY, lanes.DZ, lanes.SI, lanes.SQ, lanes.SU, lanes.SV]
        rows += [lanes.SX, lanes.SY, lanes.SZ]
        self.rays = np.stack([self.state[row : row + lanes.WIDTH] for row in rows], axis=1).astype(float)
        self.index = float(self.state[lanes.INDEX])
        self.times()

    def times(self) -> dict[str, float]:
        """Time lanes and plain loops, geometry alone (lanes, faces, slabs) and with polarisation (polarised, plain)."""
        slabs = self.slabs.astype(float)
        rows = slabs.reshape(-1, 5)
        normals = np.concatenate([rows[:, :3], -rows[:, :3]])
        distances = np.concatenate([rows[:, 3], rows[:, 4]])
        geometry = np.ascontiguousarray(self.rays[:, :6])
        index = self.index
        return {
            "lanes": _time(lambda: step_lanes(self.state, self.start, self.slabs, HITS, 1000, False), 1000),
            "faces": _time(lambda: [step_faces(normals, distances, geometry.copy(), HITS) for _ in range(50)], 50),
            "slabs": _time(lambda: [step_slabs(slabs, geometry.copy(), HITS) for _ in range(50)], 50),
            "polarised": _time(lambda: step_lanes(self.state, self.start, self.slabs, HITS, 1000, True), 1000),
            "plain": _time(lambda: [step_plain(slabs, index, self.rays.copy(), HITS) for _ in range(50)], 50),
        }


def _time(call: Callable[[], object], repeats: int) -> float:
    """Return seconds a hit."""
    start = time.thread_time()
    call()
    return (time.thread_time() - start) / (repeats * HITS * lanes.WIDTH)


def _lanes(prepared: list[Prepared], grid: np.ndarray, round_number: int, threads: int) -> list[Tally]:
    """Trace one batch a bin, on so many threads."""

    def job(item: Prepared) -> Tally:
        return trace_plane(item, grid, 0, round_number, LANE_RAYS)[1]

    if threads == 1:
        return [job(item) for item in prepared]
    with ThreadPoolExecutor(threads) as pool:
        return list(pool.map(job, prepared))


def _yardstick() -> float:
    """Return million float32 square roots a second by numpy on one thread."""
    values = np.linspace(0.5, 2.0, 16384, dtype=np.float32)
    out = np.empty_like(values)
    start = time.thread_time()
    for _ in range(500):
        np.sqrt(values, out=out)
    return 500 * len(values) / (time.thread_time() - start) / 1e6


if __name__ == "__main__":
    main()
