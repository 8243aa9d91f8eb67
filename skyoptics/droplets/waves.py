"""Scattering tables of water drops from waves, and the choice between Lorenz–Mie, Airy and rays.

*mie*: everything, diffraction and glory included, one part "mie", ∫ P11 dΩ = 4π with the forward peak in it.

*airy*: rays ("0", "1", "4" … "10", traced) with Airy's theory for the primary and the secondary bow ("2", "3") as far from
the bow as its fringes lie right (`airy.trusted_angle`), rays beyond. No diffraction in it: of the extinction 2πr² half is
scattered into the table, as with rays.

Both are absolute: `shares` gives what turns P11/4π into differential scattering ÷ reference extinction.
"""

from __future__ import annotations

from math import pi
from typing import Any, Literal, NamedTuple

import numpy as np

from skyoptics.droplets import airy, geometric, mie
from skyoptics.droplets.airy_table import with_bows
from skyoptics.droplets.angles import default_edges
from skyoptics.droplets.bin_averages import IndexLaw, Progress, average_bins
from skyoptics.droplets.sizes import SizeDistribution, effective_radius, quadrature
from skyoptics.droplets.wave_angles import nodes, typical_radius
from skyoptics.errors import DomainError, nearest
from skyoptics.optics.batches import Executor
from skyoptics.optics.bins import Bins
from skyoptics.optics.table import ScatteringTable
from skyoptics.units import DEG, NM, UM, ArrayLike, FloatArray

Method = Literal["mie", "airy", "rays"]

METHODS = ("mie", "airy", "rays")
REFERENCE = 550.0 * NM
"""Wavelength at which an optical depth is meant [m]."""
RESOLUTION = 0.53 * DEG
"""Angle over which the error of a Mie table is judged: the sun's disc [rad]."""
TERM_ANGLES_PER_SECOND = 1e9
"""Speed of the partial-wave sums on one core of 2026, for estimates; `benchmarks/waves.py` measures it."""
COSTLY = 60.0
"""Seconds of one core beyond which `choose_method` looks for something cheaper."""
USUAL_SIZES = 385
"""Drops summed for a table at the usual tolerance."""


class Choice(NamedTuple):
    """A method and, in one line, why."""

    method: Method
    reason: str


def scattering_table(
    distribution: SizeDistribution,
    index: IndexLaw,
    bins: Bins,
    *,
    method: str = "auto",
    angles: ArrayLike | None = None,
    tolerance: float = 0.02,
    resolution: float = RESOLUTION,
    largest_level: int = 5,
    seed: int = 0,
    executor: Executor | None = None,
    progress: Progress | None = None,
) -> ScatteringTable:
    """Return the Mueller elements of drops of many sizes, bin means.

    Parameters
    ----------
    distribution : SizeDistribution
        Of `skyoptics.droplets.sizes`, or a measured spectrum.
    index : callable
        Vacuum wavelengths [m] → complex index relative to the medium.
    bins : Bins
        Spectral bins; wavelengths are spread inside each, together with the sizes.
    method : {"auto", "mie", "airy", "rays"}
        "auto" asks `choose_method`.
    angles : array_like, shape (nθ,), optional
        Scattering angles of a Mie table, from 0 to π, ascending [rad], default `wave_angles.nodes`; edges of the bins of
        the other two, default `angles.default_edges`.
    tolerance : float
        Mie: root mean square over angles and bins of the relative change of P11, averaged over `resolution` in angle, by
        the last doubling of sizes;
        rays and the ray parts of Airy: light-weighted relative error [1].
    resolution : float
        [rad]
    largest_level : int
        Halvings of the size steps at most; `report` says whether the tolerance was reached.
    seed : int
        Of the traced parts.
    executor : optional
        Anything with `submit`. Results are the same bits.
    progress : callable, optional
        Told the work done and the work planned so far.

    Returns
    -------
    ScatteringTable
        Mie: nodes, part "mie". Airy and rays: bins, parts "0" … "10". `albedo` is scattered ÷ removed light (Mie) or the
        traced share of the light that met the drops. `error` of a Mie table is the last change of P11. `report`: method,
        reason, warnings, effective radius, mean cross-sections of a drop `extinction_m2` and `scattering_m2` (the traced
        half of it for rays and Airy), `reference_extinction_m2` at 550 nm, errors reached.

    Raises
    ------
    DomainError
        If a size is too large for the method, the method is unknown, or angles do not fit.
    """
    if method not in ("auto", *METHODS):
        raise DomainError(f"no method {method!r}; there are auto, mie, airy and rays{nearest(method, METHODS)}")
    choice = choose_method(distribution, index, bins) if method == "auto" else Choice(method, "asked for")  # type: ignore[arg-type]
    if choice.method == "mie":
        table = _mie(distribution, index, bins, angles, tolerance, resolution, largest_level, executor, progress)
    else:
        edges = default_edges(index, bins) if angles is None else np.asarray(angles, dtype=np.float64)
        radius = effective_radius(distribution)
        table = geometric.scattering_table(
            index, radius, bins, edges=edges, seed=seed, relative_error=tolerance, executor=executor, progress=progress
        )
        if choice.method == "airy":
            table = with_bows(table, distribution, index, bins, executor)
        extinction = np.full(len(bins), 2.0 * pi * float(distribution.moment(2)))
        table.report.update(
            extinction_m2=extinction.tolist(),
            scattering_m2=(0.5 * extinction * table.albedo).tolist(),
            reference_extinction_m2=float(extinction[0]),
        )
    table.report.update(
        method=choice.method,
        reason=choice.reason,
        warnings=list(warnings(choice.method, distribution, index, bins)),
        effective_radius_m=effective_radius(distribution),
        bins_nm=(bins.edges / NM).tolist(),
    )
    return table


def shares(table: ScatteringTable) -> tuple[FloatArray, FloatArray]:
    """Return what makes a table absolute, against the extinction at 550 nm.

    Parameters
    ----------
    table : ScatteringTable
        From `scattering_table`.

    Returns
    -------
    share : ndarray, shape (nλ,)
        ∫ phase dΩ of a whole table: scattered cross-section in it ÷ extinction at 550 nm [1]; for `Axisymmetric`.
    extinction : ndarray, shape (nλ,)
        Extinction ÷ extinction at 550 nm [1].
    """
    reference = table.report["reference_extinction_m2"]
    return (
        np.asarray(table.report["scattering_m2"]) / reference,
        np.asarray(table.report["extinction_m2"]) / reference,
    )


def choose_method(
    distribution: SizeDistribution, index: IndexLaw, bins: Bins, orders: tuple[int, ...] | None = None
) -> Choice:
    """Return the method that fits drops, angles and time, and why.

    Parameters
    ----------
    distribution, index, bins
        As `scattering_table`.
    orders : tuple of int, optional
        Orders p that are wanted alone; None for all the light. Only rays and Airy's theory part it.

    Returns
    -------
    Choice
        (method, reason); the reason is one line for people.
    """
    radius = typical_radius(distribution)
    middle = float(np.median(bins.centre))
    x = 2.0 * pi * radius / middle
    largest = 2.0 * pi * _largest(distribution) / float(bins.edges.min())
    n = np.real(np.asarray(index(np.array([middle])), dtype=np.complex128)).item()
    size = f"size parameter {x:.3g} (radius {radius / UM:.3g} µm)"
    coarse: Method = "airy" if 1.0 < n < 2.0 else "rays"
    if orders is not None and x >= airy.TRUSTED_SIZE_PARAMETER:
        return Choice(coarse, f"{size}: single orders are asked for, and from 1000 on their bows are Airy's")
    if largest > mie.LARGEST_SIZE_PARAMETER:
        return Choice(coarse, f"{size}: the largest drops reach {largest:.3g}, above Mie's limit of 50000")
    seconds = cost(distribution, index, bins)
    if seconds > COSTLY and x >= airy.TRUSTED_SIZE_PARAMETER:
        return Choice(
            coarse, f"{size}: Mie would take some {seconds:.0f} s of a core, and from 1000 on Airy's theory holds"
        )
    if orders is not None:
        return Choice("mie", f"{size}: below 1000 bows are no longer of one order; all the light together")
    why = "small drops need waves" if x < airy.TRUSTED_SIZE_PARAMETER else "exact, and affordable"
    return Choice("mie", f"{size}: {why} (some {max(seconds, 1.0):.0f} s of a core)")


def cost(distribution: SizeDistribution, index: IndexLaw, bins: Bins, angles: int | None = None) -> float:
    """Return a guess of the time that a Mie table takes [s of one core]."""
    count = len(nodes(distribution, index, bins)) if angles is None else angles
    radius, _ = quadrature(distribution, 0)
    x = 2.0 * pi * radius / float(np.mean(bins.centre))
    terms = float(np.mean(mie.terms_needed(np.minimum(x, mie.LARGEST_SIZE_PARAMETER))))
    alone = len(radius) == 1 and np.all(bins.width == 0.0)
    return terms * count * len(bins) * (1 if alone else USUAL_SIZES) / TERM_ANGLES_PER_SECOND


def warnings(method: str, distribution: SizeDistribution, index: IndexLaw, bins: Bins) -> tuple[str, ...]:
    """Return, in words, where a method leaves the range in which it holds.

    Ranges: Mie, size parameter up to 50 000 and round drops; Airy, from 1000 on for details and from 100 on for the broad
    bow; rays, from 5000 on (van de Hulst, *Light Scattering by Small Particles*, 1957, §13.2). Drops above 0.5 mm radius
    are flattened when they fall.
    """
    radius = typical_radius(distribution)
    x = 2.0 * pi * radius / float(np.median(bins.centre))
    found = []
    if method == "airy" and x < 100.0:
        found.append(f"Airy's theory does not hold at size parameter {x:.3g} (below 100); use mie")
    elif method == "airy" and x < airy.TRUSTED_SIZE_PARAMETER:
        found.append(
            f"Airy's theory gives the broad bow alone at size parameter {x:.3g} (below 1000); mie has the details"
        )
    if method == "airy":
        n = np.real(np.asarray(index(bins.centre), dtype=np.complex128))
        if np.any((n <= 1.0) | (n >= 2.0)):
            found.append("no primary bow at this refractive index; it has to lie between 1 and 2")
    if method == "rays" and x < 5000.0:
        found.append(f"ray optics leaves out supernumerary bows and glory, which show at size parameter {x:.3g}")
    if radius > 500.0 * UM:
        found.append(f"drops of radius {radius / UM:.0f} µm are flattened when they fall; here they are round")
    if method == "mie" and len(distribution.refinement(1)[1]) == 0 and np.all(bins.width == 0.0) and x > 30.0:
        found.append("one size and one wavelength: the curve has a ripple that no sky shows; give a spread")
    return tuple(found)


def _largest(distribution: SizeDistribution) -> float:
    """Return the largest radius that an average meets [m]."""
    return float(quadrature(distribution, 0)[0].max())


def _mie(
    distribution: SizeDistribution,
    index: IndexLaw,
    bins: Bins,
    angles: ArrayLike | None,
    tolerance: float,
    resolution: float,
    largest_level: int,
    executor: Executor | None,
    progress: Progress | None,
) -> ScatteringTable:
    """Return the table of one part "mie"."""
    angle = nodes(distribution, index, bins) if angles is None else np.asarray(angles, dtype=np.float64)
    mean = average_bins(
        distribution,
        index,
        bins,
        angle,
        tolerance=tolerance,
        resolution=resolution,
        largest_level=largest_level,
        executor=executor,
        progress=progress,
    )
    elements = mean.elements[np.newaxis]
    reached = np.sqrt(np.mean(mean.change**2, axis=1))
    near = Bins.lines(np.clip(REFERENCE, *_known(index, bins)))
    reference = average_bins(
        distribution,
        index,
        near,
        np.array([1.0, 2.0]),
        tolerance=1e-3,
        least_level=2,
        largest_level=4,
        executor=executor,
    )
    report = {
        "extinction_m2": mean.extinction.tolist(),
        "scattering_m2": mean.scattering.tolist(),
        "reference_extinction_m2": float(reference.extinction[0]),
        "sizes": mean.sizes,
        "relative_error": reached.tolist(),
        "tolerance": tolerance,
        "resolution_deg": resolution / DEG,
        "target_reached": bool(np.sqrt(np.mean(reached**2)) <= tolerance and reached.max() <= 2.0 * tolerance),
        "angle_nodes": len(angle),
        "absorbed": (1.0 - mean.albedo).tolist(),
        "index": [[value.real, value.imag] for value in np.asarray(index(bins.centre), np.complex128).tolist()],
    }
    table = ScatteringTable(
        angle=angle,
        wavelength=bins.centre,
        elements=elements,
        error=mean.change.T[np.newaxis] * elements[..., 0],
        albedo=mean.albedo,
        asymmetry=mean.asymmetry,
        parts=("mie",),
        report=report,
    )
    report["integral"] = table.energy()[0].tolist()
    return table


def _known(index: Any, bins: Bins) -> tuple[float, float]:
    """Return the range of wavelengths in which an index is known [m]."""
    low = getattr(index, "minimum_wavelength", float(bins.edges.min()))
    high = getattr(index, "maximum_wavelength", float(bins.edges.max()))
    return max(low, 1e-12), high
