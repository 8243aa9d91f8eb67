"""Live segments a second of other shapes than the regular prism, and what telling named arcs apart costs.

python benchmarks/shapes.py --json
"""

from __future__ import annotations

import argparse
import json
import time

import numpy as np

from skyoptics.crystals.habits import Habit, shape
from skyoptics.crystals.orientations import Orientation
from skyoptics.crystals.prepared import Prepared, prepare
from skyoptics.crystals.shapes import Shape, hexagonal_prism
from skyoptics.crystals.sorting import sorter
from skyoptics.crystals.tracing import trace_groups, trace_plane
from skyoptics.geometry.axes import direction
from skyoptics.geometry.directions import Directions
from skyoptics.units import DEG

RAYS = 2**19
SUN = 20.0 * DEG
PIXELS = 2000
SIDE = 16
"""Pixels along the side of a cell of named arcs, as a picture of that size has it."""
SHAPES = {
    "regular": hexagonal_prism(0.5),
    "irregular": hexagonal_prism(0.5, (1.0, 0.8, 1.1, 0.9, 1.05, 0.85)),
    "truncated_bipyramid": shape(Habit("truncated-bipyramid")),
}


def main() -> None:
    """Run the comparison and print it."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--rounds", type=int, default=10)
    parser.add_argument("--json", action="store_true")
    options = parser.parse_args()
    result = measure(options.rounds)
    if options.json:
        print(json.dumps(result))
        return
    for name, value in result.items():
        print(f"{name:40s} {value:8.3f}")


def measure(rounds: int) -> dict[str, float]:
    """Return the figures; the best of several interleaved rounds of each, one thread."""
    edge = np.pi / 2.0
    grid = Directions.cylindrical((PIXELS, PIXELS), np.eye(3), (-np.pi, np.pi), (edge, -edge)).packed()
    jobs: dict[str, tuple[Prepared, int]] = {}
    for name, body in SHAPES.items():
        jobs[name] = (_prepared(body, "random", False), 0)
    for law in ("random", "plate", "column"):
        jobs[f"{law} plain"] = (_prepared(SHAPES["regular"], law, False), 0)
        jobs[f"{law} groups"] = (_prepared(SHAPES["regular"], law, True), SIDE)
    jobs["bipyramid groups"] = (_prepared(SHAPES["truncated_bipyramid"], "random", True), SIDE)
    seconds = dict.fromkeys(jobs, np.inf)
    segments = dict.fromkeys(jobs, 0)
    for number in range(rounds):
        for name, (prepared, side) in jobs.items():
            start = time.thread_time()
            if side:
                tally = trace_groups(prepared, grid, 0, number, RAYS, side)[2]
            else:
                tally = trace_plane(prepared, grid, 0, number, RAYS)[1]
            seconds[name] = min(seconds[name], time.thread_time() - start)
            segments[name] = tally.segments
    rate = {name: segments[name] / seconds[name] / 1e6 for name in SHAPES}
    result = {f"{name}_msegments_per_s": rate[name] for name in SHAPES}
    result |= {f"{name}_over_regular": rate[name] / rate["regular"] for name in SHAPES if name != "regular"}
    result |= {
        f"{law}_groups_over_plain": seconds[f"{law} groups"] / seconds[f"{law} plain"]
        for law in ("random", "plate", "column")
    }
    result["bipyramid_groups_over_plain"] = seconds["bipyramid groups"] / seconds["truncated_bipyramid"]
    return result


def _prepared(body: Shape, law: str, named: bool) -> Prepared:
    arcs = sorter(body.face_normals, law, SUN, 1.31, DEG) if named else None
    return prepare(
        body,
        Orientation(law, DEG),
        lambda wavelength: 1.31 + 0.0 * wavelength,
        (5.0e-7, 5.1e-7),
        direction(0.0, SUN),
        radius=0.2666 * DEG,
        size=1e-4,
        sorter=arcs,
    )


if __name__ == "__main__":
    main()
