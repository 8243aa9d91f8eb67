"""What guiding rays into a narrow frame gains. See README.md beside this file.

python benchmarks/guide.py --json
"""

from __future__ import annotations

import argparse
import json
import time
from dataclasses import replace

import numpy as np

from skyoptics.camera.frame import aim, photograph
from skyoptics.crystals.guide import learn
from skyoptics.crystals.orientations import Orientation
from skyoptics.crystals.prepared import prepare
from skyoptics.crystals.shapes import hexagonal_prism
from skyoptics.crystals.tracing import trace_plane
from skyoptics.geometry.axes import direction
from skyoptics.materials.index import ice
from skyoptics.units import DEG

SUN_RADIUS = 0.2666 * DEG
RAYS = 2**18
BAND = 480e-9, 560e-9
SHAPE = 800, 1200
FRAMES = {  # aspect, law, tilt, height of the sun; azimuth (sun: 180) and elevation of the lens [deg]
    "sundog": (0.2, "plate", 1.5, 15.0, 204.6, 15.0),
    "tangent arc": (2.0, "column", 1.0, 20.0, 180.0, 43.0),
    "parry arc": (2.0, "parry", 1.0, 20.0, 180.0, 46.0),
    "circumzenithal arc": (0.2, "plate", 1.5, 15.0, 180.0, 62.0),
    "120 degree parhelion": (0.4, "plate", 1.5, 15.0, 300.0, 15.0),
    "22 degree halo": (1.0, "random", 0.0, 20.0, 203.5, 20.0),
}


def main() -> None:
    """Run the comparison and print it."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--focal-mm", type=float, default=200.0)
    parser.add_argument("--batches", type=int, default=16)
    parser.add_argument("--json", action="store_true")
    options = parser.parse_args()
    result = {name: measure(name, options.focal_mm, options.batches) for name in FRAMES}
    if options.json:
        print(json.dumps(result))
        return
    for name, values in result.items():
        print(name, ", ".join(f"{key} {value:.3g}" for key, value in values.items()))


def measure(name: str, focal_mm: float, batches: int) -> dict[str, float]:
    """Return the figures of one frame; plain and guided batches take turns."""
    aspect, law, tilt, height, azimuth, elevation = FRAMES[name]
    rotation = aim(azimuth * DEG, elevation * DEG)
    grid = photograph("rectilinear", focal_mm * 1e-3, (0.036, 0.024), SHAPE, rotation).packed()
    crystals = hexagonal_prism(aspect), Orientation(law, tilt * DEG), ice()
    sun = direction(np.pi, height * DEG)
    wide = prepare(*crystals, (400e-9, 700e-9), sun, radius=SUN_RADIUS, size=1e-4)
    trace_plane(wide, grid, 0, 0, 64)
    learn(wide, np.concatenate([grid[:1], [6.0, 6.0], grid[3:]]).astype(np.float32), 0)
    start = time.thread_time()
    guide = learn(wide, grid, 0)
    figures = {"learning_s": time.thread_time() - start}
    if guide is None:
        return figures
    plain = prepare(*crystals, BAND, sun, radius=SUN_RADIUS, size=1e-4, spectral_bin=1)
    items = plain, replace(plain, guide=guide)
    seconds, sums, squares = np.zeros(2), np.zeros((2, *SHAPE)), np.zeros((2, *SHAPE))
    for batch in range(batches):
        for which, item in enumerate(items):
            start = time.thread_time()
            plane = trace_plane(item, grid, 0, batch, RAYS)[0]
            seconds[which] += time.thread_time() - start
            sums[which] += plane
            squares[which] += plane.astype(np.float64) ** 2
    variance = (squares - sums**2 / batches) / (batches - 1)
    light = sums[1].reshape(SHAPE[0] // 20, 20, SHAPE[1] // 20, 20).mean(axis=(1, 3)).repeat(20, 0).repeat(20, 1)
    lit = light > 0.02 * light.max()
    slope = (light / light[lit].mean() + 0.1) ** (-4.0 / 3.0)
    power = variance[:, lit].sum(axis=1)
    lightness = (variance * slope)[:, lit].sum(axis=1)
    times = seconds[0] / seconds[1]
    return figures | {
        "cells": len(guide.sums) - 1,
        "variance_ratio": power[0] / power[1],
        "lightness_variance_ratio": lightness[0] / lightness[1],
        "time_ratio": times,
        "gain": times * power[0] / power[1],
        "lightness_gain": times * lightness[0] / lightness[1],
        "plain_ns": seconds[0] / batches / RAYS * 1e9,
        "guided_ns": seconds[1] / batches / RAYS * 1e9,
    }


if __name__ == "__main__":
    main()
