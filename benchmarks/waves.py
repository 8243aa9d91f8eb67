"""Speed of the partial-wave sums: against miepython, and a colour map of the primary bow.

Run ``python benchmarks/waves.py`` (``--radii N`` for a smaller map). Medians of seven interleaved runs, one thread, since
other work on the machine moves single timings. The map is 300 radii × 31 wavelengths × 401 angles without the sun's
disc, on two threads.
"""

from __future__ import annotations

import os

os.environ["MIEPYTHON_USE_JIT"] = "1"  # read when miepython is imported

import argparse
import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from statistics import median

import numpy as np

from skyoptics.colour.observer import weights
from skyoptics.droplets import averages, mie
from skyoptics.droplets.sizes import Single
from skyoptics.light import spectrum
from skyoptics.light.disc import sun_disc
from skyoptics.optics.axisymmetric import over_disc
from skyoptics.optics.bins import Bins
from skyoptics.optics.table import ScatteringTable

RUNS = 7


def seconds(work: Callable[[], object]) -> float:
    """Return the wall time of one call [s]."""
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


def amplitude_speed(size_parameter: float = 5000.0, angles: int = 1801) -> dict[str, float]:
    """Time S1, S2 with coefficients included, ours and miepython's in turn."""
    import miepython

    cosine = np.cos(np.linspace(0.0, np.pi, angles))
    rivals: dict[str, Callable[[], object]] = {
        "skyoptics": lambda: mie.amplitudes(1.333, size_parameter, cosine),
        "miepython": lambda: miepython.S1_S2(1.333, size_parameter, cosine, norm="wiscombe"),
    }
    for work in rivals.values():
        work()
    times: dict[str, list[float]] = {name: [] for name in rivals}
    for _ in range(RUNS):
        for name, work in rivals.items():
            times[name].append(seconds(work))
    ours, theirs = median(times["skyoptics"]), median(times["miepython"])
    work_done = float(mie.terms_needed(size_parameter)) * angles
    return {"skyoptics_s": ours, "miepython_s": theirs, "ratio": theirs / ours, "term_angles_per_s": work_done / ours}


def colour_map(radii: int = 300, threads: int = 2) -> dict[str, float]:
    """Time a map of radius (10–1000 µm) by angle (137–145°, 0.02°): 31 wavelengths (400–700 nm), sun's disc, XYZ."""
    radius = np.geomspace(10e-6, 1000e-6, radii)
    wavelength = np.linspace(400e-9, 700e-9, 31)
    bins = Bins.lines(wavelength)
    disc = sun_disc(bins)
    shown = np.deg2rad(np.linspace(137.0, 145.0, 401))
    angle = np.deg2rad(np.linspace(136.7, 145.3, 431))  # wider by the disc's radius
    index = 1.3199 + 6.878e-15 / wavelength**2 * 0.45  # a smooth stand-in: the time does not depend on it
    matrix = weights(bins) * spectrum.irradiance(bins)[:, np.newaxis]
    terms = float(np.sum(mie.terms_needed(2.0 * np.pi * radius[:, np.newaxis] / wavelength)))

    def one(value: float) -> np.ndarray:
        found = averages.average(Single(value), index, wavelength, np.cos(angle), largest_level=0)
        elements = found.elements[np.newaxis]
        error, ones = np.zeros(elements.shape[:3]), np.ones(len(bins))
        table = ScatteringTable(angle, wavelength, elements, error, ones, ones, ("mie",))
        return np.asarray(over_disc(table, disc, shown).elements[0, ..., 0] @ matrix)

    one(radius[0])
    start = time.perf_counter()
    with ThreadPoolExecutor(threads) as pool:
        list(pool.map(one, radius[::-1]))  # large ones first: both threads end together
    taken = time.perf_counter() - start
    return {"seconds": taken, "term_angles_per_s": terms * len(angle) / taken}


if __name__ == "__main__":
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--radii", type=int, default=300)
    options = parser.parse_args()
    for title, result in (("amplitudes", amplitude_speed()), ("colour map", colour_map(options.radii))):
        print(title, {name: float(f"{value:.4g}") for name, value in result.items()})
