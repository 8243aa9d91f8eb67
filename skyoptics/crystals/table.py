"""Randomly oriented crystals: their scattering table, traced until it is good enough."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np

from skyoptics.crystals.orientations import Orientation
from skyoptics.crystals.prepared import IDEAL, Imperfections, Prepared, prepare
from skyoptics.crystals.shapes import Shape
from skyoptics.crystals.sorting import Sorter
from skyoptics.crystals.tracing import Tally, trace_angles
from skyoptics.errors import DomainError
from skyoptics.optics.batches import Executor, batches_needed, in_order
from skyoptics.optics.bins import Bins
from skyoptics.optics.table import ScatteringTable
from skyoptics.units import FloatArray

LEAST_BATCHES = 8
"""Batches of every spectral bin at least, so that their scatter tells the error."""
BATCH = 1 << 17
"""Rays of a batch."""
MOST_BINS = 180_000
UPWARDS = np.array([0.0, 0.0, 1.0])


def scattering_table(
    shape: Shape | Sequence[Shape],
    index: Callable[[FloatArray], Any],
    bins: Bins,
    *,
    size: float = 0.0,
    count: int = 3600,
    seed: int = 0,
    relative_error: float = 0.01,
    executor: Executor | None = None,
    progress: Callable[[int, int], None] | None = None,
    max_batches: int = 4096,
    imperfections: Imperfections = IDEAL,
    sorter: Sorter | None = None,
) -> ScatteringTable:
    """Trace randomly oriented crystals.

    Parameters
    ----------
    shape : Shape, or several
        The crystal; of several shapes equal numbers.
    index : callable
        Wavelengths [m] → refractive index n + ik relative to the air.
    bins : Bins
        Spectral bins; wavelengths are spread evenly inside each.
    size : float
        Diameter across corners [m], for absorption; 0 for none.
    count : int
        Number of equal angle bins between 0 and π.
    seed : int
        The same seed gives the same bits whatever the executor.
    relative_error : float
        Target for ∫σ dΩ / ∫P11 dΩ, in the worst spectral bin.
    executor : object with `submit`, optional
        Where batches run.
    progress : callable, optional
        Called with batches done and now thought to be needed.
    max_batches : int
        Of one spectral bin.
    imperfections : Imperfections
        Default none.
    sorter : Sorter, optional
        Keeps named halos apart.

    Returns
    -------
    ScatteringTable
        One part "rays", with a sorter one for each name that has light, ∫P11 dΩ = 4π over all, no diffraction; light that
        went straight on through parallel faces is in the first bin. `asymmetry` counts it. `report` states rays, reached
        error, absorbed, what the cut-off would have dropped and the share that went straight on.

    Raises
    ------
    DomainError
        If an argument is out of range.
    """
    if not 2 <= count <= MOST_BINS:
        raise DomainError(f"a table has 2 to {MOST_BINS} angle bins, not {count}")
    if max_batches < LEAST_BATCHES:
        raise DomainError(f"at least {LEAST_BATCHES} batches are needed for an error estimate, not {max_batches}")
    random = Orientation("random")
    prepared = [
        prepare(
            shape,
            random,
            index,
            edges,
            UPWARDS,
            size=size,
            spectral_bin=row,
            imperfections=imperfections,
            sorter=sorter,
        )
        for row, edges in enumerate(bins.edges)
    ]
    names = ("rays",) if sorter is None else sorter.names
    sums = np.zeros((len(bins), len(names), count, 6))
    squares = np.zeros((len(bins), len(names), count))
    whole = np.zeros((len(bins), count))
    tallies = [Tally(0, 0.0, 0.0, 0.0, 0.0, 0.0, 0, 0.0, 0.0) for _ in range(len(bins))]
    done, needed, error = 0, LEAST_BATCHES, np.inf
    while done < needed:
        tasks = ((prepared[row], count, seed, batch) for batch in range(done, needed) for row in range(len(bins)))
        for number, (table, tally) in enumerate(in_order(_batch, tasks, executor), start=done * len(bins)):
            row = number % len(bins)
            table = table.reshape(sums.shape[1:])
            sums[row] += table
            squares[row] += table[..., 0] ** 2
            whole[row] += table[..., 0].sum(axis=0) ** 2
            tallies[row] += tally
            if progress is not None:
                progress(number + 1, needed * len(bins))
        done = needed
        power = sums[..., 0].sum(axis=1)
        relative = _spread(whole, power, done).sum(axis=1) / power.sum(axis=1)
        error = float(relative.max())
        needed = batches_needed(done, error, relative_error, max_batches)
    edges = np.linspace(0.0, np.pi, count + 1)
    scattered = np.array([tally.scattered for tally in tallies])
    incident = np.array([tally.incident for tally in tallies])
    scale = 4.0 * np.pi / (power.sum(axis=1)[:, None] * (-2.0 * np.pi * np.diff(np.cos(edges))))
    scale = scale[:, None, :]
    spread = _spread(squares, sums[..., 0], done)
    lit = [number for number in range(len(names)) if sums[:, number, :, 0].any()]
    return ScatteringTable(
        angle=0.5 * (edges[1:] + edges[:-1]),
        wavelength=bins.centre,
        elements=np.moveaxis((sums * scale[..., None])[:, lit], 0, 2),
        error=np.moveaxis((spread * scale)[:, lit], 0, 2),
        albedo=scattered / (scattered + np.array([tally.absorbed for tally in tallies])),
        asymmetry=np.array([tally.cosine for tally in tallies]) / scattered,
        parts=tuple(names[number] for number in lit),
        edges=edges,
        report={
            "batches": done,
            "rays": int(sum(tally.rays for tally in tallies)),
            "relative_error": relative.tolist(),
            "target_reached": error <= relative_error,
            "scattered": (scattered / incident).tolist(),
            "absorbed": [tally.absorbed / tally.incident for tally in tallies],
            "cut_off": [0.0 for _ in tallies],
            "below_cutoff": [tally.below_cutoff / tally.incident for tally in tallies],
            "roulette": [tally.roulette / tally.incident for tally in tallies],
            "straight_on": [tally.forward / tally.incident for tally in tallies],
        },
    )


def _spread(squares: FloatArray, sums: FloatArray, batches: int) -> FloatArray:
    """Return one standard error of a sum over batches."""
    return np.asarray(np.sqrt(np.maximum(squares - sums**2 / batches, 0.0) * batches / (batches - 1.0)))


def _batch(prepared: Prepared, count: int, seed: int, batch: int) -> tuple[FloatArray, Tally]:
    return trace_angles(prepared, count, seed, batch, BATCH)
