"""Water drops by ray optics: the scattering table of a sphere, traced by Monte Carlo.

Ray optics holds where drops are large beside the wavelength: bow angles and energies from a size parameter 2πa/λ of a few
thousand on (van de Hulst, *Light Scattering by Small Particles*, 1957, §13.2, asks for 5000; a radius of about 0.5 mm in
visible light). There are no supernumerary bows, no glory and no diffraction in it; the light is spread over the caustic's
lit side only.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from skyoptics.droplets.angles import default_edges
from skyoptics.errors import DomainError
from skyoptics.kernels import KERNEL_HASH, sphere
from skyoptics.kernels.random import batch_key
from skyoptics.optics.batches import Executor, batches_needed, in_order
from skyoptics.optics.bins import Bins
from skyoptics.optics.table import ScatteringTable
from skyoptics.units import ArrayLike, ComplexArray, FloatArray

PARTS = tuple(str(p) for p in range(sphere.ORDERS))
"""Names of the table's parts: p = 0 external reflection, 1 direct transmission, 2 primary bow, 3 secondary, … 10."""

LEAST_BATCHES = 8
"""Batches of every spectral bin at least: with fewer, their scatter tells the error too loosely."""
MOST_ABSORPTION = 0.01
"""Largest imaginary index: beyond it Fresnel's coefficients may no longer be taken at the real index alone."""

IndexLaw = Callable[[FloatArray], ArrayLike]
Progress = Callable[[int, int], None]

_MOST_NODES = 1025
_NODE_ERROR = (
    1e-7  # of the index, allowed between nodes of the table in a spectral bin: moves the bow of p = 10 by 1e-4°
)


def scattering_table(
    index: IndexLaw,
    radius: float,
    bins: Bins,
    *,
    edges: FloatArray | None = None,
    seed: int = 0,
    relative_error: float = 0.01,
    executor: Executor | None = None,
    progress: Progress | None = None,
    max_batches: int = 4096,
) -> ScatteringTable:
    """Trace rays through a sphere until the table is good enough.

    Parameters
    ----------
    index : callable
        Wavelengths [m] → complex index n + ik, relative to the air; n > 1, 0 ≤ k ≤ 0.01.
    radius : float
        Of the drop [m]: it matters for absorption alone.
    bins : Bins
        Spectral bins; wavelengths are spread evenly inside each.
    edges : ndarray, shape (nθ + 1,), optional
        Edges of angle bins from 0 to π [rad]; `default_edges` if left out.
    seed : int
        Of the random numbers; the same seed gives the same bits whatever the executor.
    relative_error : float
        Target for ∫σ dΩ / ∫P11 dΩ of all orders together, in the worst spectral bin; σ is one standard error of an angle
        bin, from the scatter of batches (pooled over five neighbouring bins).
    executor : object with `submit`, optional
        Where batches run; in this thread if left out.
    progress : callable, optional
        Called after each batch with the number done and the number now thought to be needed, over all spectral bins.
    max_batches : int
        Of one spectral bin; the report says whether the target was reached.

    Returns
    -------
    ScatteringTable
        Parts "0" … "10" (p), ∫P11 dΩ = 4π over all of them, no diffraction. `albedo` is the scattered share of the light
        that met the drop, `asymmetry` that of these parts (from cos θ of every ray). `report`: rays, batches, reached
        errors, energies as shares of the incident light, absorbed, cut off (still inside after p = 10), index at each
        bin's centre, kernel hash. Values are plain numbers, strings, lists.

    Raises
    ------
    DomainError
        If an argument lies outside what is said above.

    Notes
    -----
    For the size of drops for which ray optics holds see the top of this module. The index is linear between at least 17
    nodes in each bin; the report states the largest error of that (`index_error`), at most 1e-7 in bins within the visible.
    """
    validate(radius, relative_error, max_batches, edges)
    edges = default_edges(index, bins) if edges is None else np.asarray(edges, dtype=np.float64)
    real, depth, index_error = _nodes(index, radius, bins)
    first = sphere.first_bins(edges)
    sums = _Sums(len(bins), len(edges) - 1)
    needed = min(LEAST_BATCHES, max_batches)
    done = 0
    while done < needed:
        tasks = (
            (seed, row, batch, real[row], depth[row], edges, first)
            for batch in range(done, needed)
            for row in range(len(bins))
        )
        for number, result in enumerate(in_order(_batch, tasks, executor), start=done * len(bins)):
            sums.add(number % len(bins), result)
            if progress is not None:
                progress(number + 1, needed * len(bins))
        done = needed
        error = float(sums.relative_error(done).max())
        needed = batches_needed(done, error, relative_error, max_batches)
    table = sums.table(edges, bins, done)
    table.report.update(
        method="rays",
        radius=float(radius),
        seed=int(seed),
        relative_error_target=float(relative_error),
        target_reached=bool(error <= relative_error),
        index=[[value.real, value.imag] for value in _law(index, bins.centre).tolist()],
        index_error=index_error,
        angle_bins=len(edges) - 1,
        kernel_hash=KERNEL_HASH,
    )
    return table


def validate(radius: float, relative_error: float, max_batches: int, edges: FloatArray | None) -> None:
    """Refuse in words what `scattering_table` cannot work with; the index is looked at where it is evaluated."""
    if not (np.isfinite(radius) and radius > 0.0):
        raise DomainError(f"a drop's radius must be a positive number of metres, not {radius!r}")
    if not 1e-5 <= relative_error <= 1.0:
        raise DomainError(f"the relative error must lie between 0.00001 and 1, not {relative_error!r}")
    if max_batches < LEAST_BATCHES:
        raise DomainError(f"at least {LEAST_BATCHES} batches are needed for an error estimate, not {max_batches!r}")
    if edges is not None:
        edges = np.asarray(edges, dtype=np.float64)
        if edges.ndim != 1 or len(edges) < 2 or not np.all(np.diff(edges) > 0.0):
            raise DomainError("angle edges must be a list of at least two growing numbers")
        if edges[0] != 0.0 or abs(edges[-1] - np.pi) > 1e-9:
            raise DomainError("angle edges must reach from 0 to 180 degrees: the table holds all the light")


class _Sums:
    """Running sums over batches, in batch order."""

    def __init__(self, rows: int, angles: int) -> None:
        parts = sphere.ORDERS
        self.elements = np.zeros((rows, parts, angles, 3))
        self.squares = np.zeros((rows, parts, angles))
        self.whole_squares = np.zeros((rows, angles))
        self.energy = np.zeros((rows, parts))
        self.cosine = np.zeros((rows, parts))
        self.absorbed = np.zeros(rows)
        self.cut_off = np.zeros(rows)

    def add(self, row: int, result: tuple[FloatArray, FloatArray, FloatArray, float, float]) -> None:
        """Add one batch of one spectral bin."""
        elements, energy, cosine, absorbed, cut_off = result
        intensity = elements[..., 0]
        self.elements[row] += elements
        self.squares[row] += intensity**2
        self.whole_squares[row] += intensity.sum(axis=0) ** 2
        self.energy[row] += energy
        self.cosine[row] += cosine
        self.absorbed[row] += absorbed
        self.cut_off[row] += cut_off

    def errors(self, batches: int) -> tuple[FloatArray, FloatArray]:
        """Return one standard error of the summed P11, by part (nλ, part, nθ) and of all parts together (nλ, nθ)."""
        light = self.elements[..., 0]
        total = light.sum(axis=1)
        factor = batches / (batches - 1.0)
        by_part = _pooled((self.squares - light**2 / batches) * factor, light > 0.0)
        whole = _pooled((self.whole_squares - total**2 / batches) * factor, total > 0.0)
        return np.sqrt(by_part), np.sqrt(whole)

    def relative_error(self, batches: int) -> FloatArray:
        """Return ∫σ dΩ / ∫P11 dΩ of all parts together, shape (nλ,)."""
        return np.asarray(self.errors(batches)[1].sum(axis=1) / self.energy.sum(axis=1))

    def table(self, edges: FloatArray, bins: Bins, batches: int) -> ScatteringTable:
        """Return the normalised table."""
        by_part, whole = self.errors(batches)
        scattered = self.energy.sum(axis=1)
        incident = float(sphere.RAYS) * batches
        solid_angle = -2.0 * np.pi * np.diff(np.cos(edges))
        scale = 4.0 * np.pi / (scattered[:, None] * solid_angle)
        sums = np.moveaxis(self.elements, 0, 2) * scale.T[None, :, :, None]
        p11, p12, p33 = sums[..., 0], sums[..., 1], sums[..., 2]
        elements = np.stack([p11, p12, p11, p33, np.zeros_like(p11), p33], axis=-1)
        with np.errstate(invalid="ignore"):
            part_error = by_part.sum(axis=2) / self.energy
        report = {
            "batches": batches,
            "rays": batches * sphere.RAYS * len(bins),
            "relative_error": (whole.sum(axis=1) / scattered).tolist(),
            "relative_error_by_part": dict(zip(PARTS, np.nan_to_num(part_error.T).tolist(), strict=True)),
            "energy": dict(zip(PARTS, (self.energy.T / incident).tolist(), strict=True)),
            "absorbed": (self.absorbed / incident).tolist(),
            "cut_off": (self.cut_off / incident).tolist(),
        }
        return ScatteringTable(
            angle=0.5 * (edges[:-1] + edges[1:]),
            wavelength=bins.centre,
            elements=elements,
            error=np.moveaxis(by_part, 0, 2) * scale.T[None],
            albedo=scattered / incident,
            asymmetry=self.cosine.sum(axis=1) / scattered,
            parts=PARTS,
            edges=edges,
            report=report,
        )


def _pooled(variance: FloatArray, lit: NDArray[np.bool_]) -> FloatArray:
    """Return the mean variance of each lit bin and its lit neighbours, two on either side, along the last axis.

    Strata leave a bin two or three possible numbers of rays a batch; now and then all batches agree by chance, and the
    bin's own scatter says 0. Neighbours have rays of nearly the same weight, hence the same true variance.
    """
    count = variance.shape[-1]
    pad = [(0, 0)] * (variance.ndim - 1) + [(2, 2)]
    values = np.pad(np.where(lit, np.maximum(variance, 0.0), 0.0), pad)
    weights = np.pad(lit.astype(np.float64), pad)
    sums = sum(values[..., shift : shift + count] for shift in range(5))
    number = sum(weights[..., shift : shift + count] for shift in range(5))
    return np.where(lit, sums / np.maximum(number, 1.0), 0.0)


def _batch(
    seed: int, row: int, batch: int, real: FloatArray, depth: FloatArray, edges: FloatArray, first: NDArray[np.int32]
) -> tuple[FloatArray, FloatArray, FloatArray, float, float]:
    """Trace one batch (a function of its own, so that it can be sent to another process)."""
    low, high = batch_key(seed, row, batch)
    result: tuple[FloatArray, FloatArray, FloatArray, float, float] = sphere.trace(
        low, high, sphere.RAYS, real, depth, edges, first
    )
    return result


def _law(index: IndexLaw, wavelength: FloatArray) -> ComplexArray:
    """Evaluate the index and refuse what rays cannot handle."""
    values = np.broadcast_to(np.asarray(index(wavelength), dtype=np.complex128), wavelength.shape)
    if not np.all(np.isfinite(values)):
        raise DomainError("the refractive index is not a number at some wavelengths of the bins")
    if np.any(values.real <= 1.0):
        raise DomainError(
            f"rays are traced through drops denser than what is around them; the relative index is {values.real.min():g},"
            " it must exceed 1"
        )
    if np.any(values.imag < 0.0):
        raise DomainError("the imaginary index must not be negative (n + ik, k > 0 absorbs)")
    if np.any(values.imag > MOST_ABSORPTION):
        raise DomainError(
            f"the imaginary index {values.imag.max():g} is too large for rays: above {MOST_ABSORPTION:g} the reflection at"
            " the surface is no longer that of a transparent medium; use Mie theory"
        )
    return values


def _nodes(index: IndexLaw, radius: float, bins: Bins) -> tuple[FloatArray, FloatArray, float]:
    """Return real index and optical depth of a diameter at the nodes, both (nλ, m), and the largest error between them."""
    count = 17
    while True:
        # twice as fine as the table, to see what lies between its nodes
        wavelength = bins.at(np.linspace(0.0, 1.0, 2 * count - 1))
        values = _law(index, wavelength.ravel()).reshape(wavelength.shape)
        middle = 0.5 * (values.real[:, :-2:2] + values.real[:, 2::2])
        error = float(np.abs(values.real[:, 1::2] - middle).max())
        if error <= _NODE_ERROR or count >= _MOST_NODES:
            break
        count = 2 * count - 1
    table = values[:, ::2]
    depth = 4.0 * np.pi * table.imag * 2.0 * radius / wavelength[:, ::2]
    return np.ascontiguousarray(table.real), np.ascontiguousarray(depth), error
