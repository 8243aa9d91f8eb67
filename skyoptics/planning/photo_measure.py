"""Angular radius of a circle from points on it, and the radius of drops from the spacing of supernumeraries.

The noise of pointing is estimated from the points' own scatter about the circle; intervals are 95 % by Student's t. They hold
that noise alone: an error of the aim or the lens moves all points together and shows in no scatter.

References
----------
Student, Biometrika 6, 1 (1908). Maxima of a bow: van de Hulst, *Light Scattering by Small Particles* (1957), §13.2: they
stand at θ = θ_R ± h^(1/3) x^(−2/3) |a'ₖ| with a'ₖ the zeros of Ai' (Abramowitz & Stegun, Table 10.13).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.geometry.axes import angle_between
from skyoptics.geometry.directions import frame_about
from skyoptics.units import FloatArray

CONFIDENCE = 0.95
LEAST_BEND = 1e-3
"""Ratio of the points' spreads, across their line and along it, below which they fix no centre [1]."""
LEAST_STEP = 1e-5
"""Distance of neighbouring maxima, per unit of Airy's variable, that no drop makes [rad]."""
_STEPS, _CLOSE = 50, 1e-10


@dataclass(frozen=True, eq=False)
class Circle:
    """A measured circle.

    Parameters
    ----------
    centre : ndarray, shape (3,)
        Unit vector.
    radius : float
        [rad]
    half_width : float or None
        Half of the 95 % interval [rad]; None where the points leave no freedom.
    noise : float or None
        Standard deviation of a point across the circle [rad].
    count : int
        Number of points.
    freedom : int
        Degrees of freedom.
    span : float
        Stretch of the circle on which the points lie, as an angle about the centre [rad].
    """

    centre: FloatArray
    radius: float
    half_width: float | None
    noise: float | None
    count: int
    freedom: int
    span: float


@dataclass(frozen=True)
class DropSize:
    """Radius of drops.

    Parameters
    ----------
    radius : float
        [m]
    low, high : float or None
        Ends of the 95 % interval [m]; both None where the points leave no freedom, `high` None where there is no upper end.
    order : int
        p of the bow: 2 primary, 3 secondary.
    step : float
        Measured distance on the sky per unit of Airy's variable [rad].
    edge : float
        Where the line through the maxima puts the geometric bow, from the antisolar point [rad].
    edge_theory : float
        The same for the index that was taken [rad].
    index : float
        Of the water, relative to air.
    trusted : bool
        Whether Airy's theory holds for drops of that size up to the highest order measured.
    """

    radius: float
    low: float | None
    high: float | None
    order: int
    step: float
    edge: float
    edge_theory: float
    index: float
    trusted: bool


def known_centre(views: FloatArray, centre: FloatArray) -> Circle:
    """Return the mean distance of points from a known centre.

    Parameters
    ----------
    views : ndarray, shape (n, 3)
        Unit vectors, n ≥ 1.
    centre : ndarray, shape (3,)
        Unit vector.
    """
    away = angle_between(views, centre)
    count = len(away)
    radius = float(away.mean())
    if count < 2:
        return Circle(centre, radius, None, None, count, 0, 0.0)
    noise = float(away.std(ddof=1))
    half = student(count - 1) * noise / np.sqrt(count)
    return Circle(centre, radius, float(half), noise, count, count - 1, _span(views, centre))


def fitted_centre(views: FloatArray) -> Circle:
    """Return the circle that fits points best, its centre fitted too (least squares of distances, Gauss–Newton).

    Parameters
    ----------
    views : ndarray, shape (n, 3)
        Unit vectors, n ≥ 3. The interval comes from the covariance of the fit.

    Raises
    ------
    DomainError
        For fewer points, or points that fix no circle.
    """
    count = len(views)
    if count < 3:
        raise DomainError(f"a circle with its centre fitted needs 3 points, there are {count}")
    _, values, axes = np.linalg.svd(views - views.mean(axis=0))
    if not values[1] > LEAST_BEND * values[0]:
        raise DomainError(
            "the points lie too close to one great circle to fix a centre; take a longer stretch, or a known centre"
        )
    centre = axes[2] if axes[2] @ views.mean(axis=0) >= 0.0 else -axes[2]
    radius = float(angle_between(views, centre).mean())
    across = axes[:2]
    for _ in range(_STEPS):
        slopes, rest, across = _linear(views, centre, radius, across)
        change, *_ = np.linalg.lstsq(slopes, rest, rcond=None)
        centre = centre + change[:2] @ across
        centre /= np.linalg.norm(centre)
        radius += float(change[2])
        if np.abs(change).max() < _CLOSE:
            break
    slopes, rest, _ = _linear(views, centre, radius, across)
    freedom = count - 3
    if not 0.0 < radius < np.pi or not np.all(np.isfinite(centre)):
        raise DomainError("the points fix no circle; take a longer stretch, or a known centre")
    if freedom == 0:
        return Circle(centre, radius, None, None, count, 0, _span(views, centre))
    noise = float(np.sqrt(rest @ rest / freedom))
    covariance = noise**2 * np.linalg.inv(slopes.T @ slopes)
    half = student(freedom) * float(np.sqrt(covariance[2, 2]))
    return Circle(centre, radius, half, noise, count, freedom, _span(views, centre))


def drops(radii: FloatArray, orders: FloatArray, wavelength: float, index: float, air: float = 1.0) -> DropSize:
    """Return the radius of drops from distances of a bow and its supernumeraries from the antisolar point.

    Parameters
    ----------
    radii : ndarray, shape (n,)
        Distances of points of greatest brightness [rad].
    orders : ndarray, shape (n,)
        0 for the bow itself, 1 for its first supernumerary, …
    wavelength : float
        In vacuum [m].
    index : float
        Of the water, relative to air.
    air : float
        Index of the air.

    Raises
    ------
    DomainError
        For points of one order only, or maxima that do not go on in one sense.

    Notes
    -----
    A straight line is fitted through the distances against |a'ₖ|. Its slope gives the size: a = λ/(2π) (h^(1/3)/slope)^1.5.
    Its other end, the geometric bow, is left free, so that an error of the radius as a whole does no harm.
    """
    from scipy.special import ai_zeros

    from skyoptics.droplets import airy
    from skyoptics.droplets.mie import LARGEST_SIZE_PARAMETER

    orders = np.asarray(orders, dtype=np.int64)
    if len(np.unique(orders)) < 2:
        raise DomainError(
            "drop sizes need points of two orders at least, such as 0 (the bow) and 1 (its first supernumerary)"
        )
    reduced = -np.asarray(ai_zeros(int(orders.max()) + 1)[1])[orders]
    mean = reduced.mean()
    spread = float(np.sum((reduced - mean) ** 2))
    slope = float(np.sum((reduced - mean) * radii)) / spread
    edge = float(radii.mean() - slope * mean)
    bow = 2 if slope < 0.0 else 3
    step = abs(slope)
    if not step > LEAST_STEP:
        raise DomainError("the supernumeraries stand where the bow does: their orders are wrong")
    theory = np.pi - airy.bow_angle(index, bow)
    medium = wavelength / air / (2.0 * np.pi)
    third = airy.curvature(index, bow) ** (1.0 / 3.0)

    def size(distance: float) -> float:
        return float(medium * (third / distance) ** 1.5)

    freedom = len(radii) - 2
    low: float | None = None
    high: float | None = None
    if freedom > 0:
        rest = radii - edge - slope * reduced
        error = student(freedom) * float(np.sqrt(rest @ rest / freedom / spread))
        low, high = size(step + error), size(step - error) if step > error else None
    parameter = size(step) / medium
    trusted = parameter >= airy.TRUSTED_SIZE_PARAMETER
    if trusted and parameter < LARGEST_SIZE_PARAMETER:
        reach = abs(airy.trusted_angle(index, parameter, bow) - airy.bow_angle(index, bow))
        trusted = float(reduced.max()) * step <= reach
    return DropSize(size(step), low, high, bow, step, edge, float(theory), index, bool(trusted))


def student(freedom: int) -> float:
    """Return the quantile of Student's t that 95 % lie within on both sides."""
    from scipy.special import stdtrit

    return float(stdtrit(freedom, 0.5 + CONFIDENCE / 2.0))


def _linear(
    views: FloatArray, centre: FloatArray, radius: float, across: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return slopes (n, 3) by two shifts of the centre and the radius, what remains (n,), and the axes of the shifts."""
    across = across - (across @ centre)[:, None] * centre
    away = angle_between(views, centre)
    # a centre that moves towards a point comes nearer to it
    nearer = (views @ across.T) / np.maximum(np.sin(away), 1e-12)[:, None]
    return np.column_stack([nearer, np.ones(len(views))]), away - radius, across


def _span(views: FloatArray, centre: FloatArray) -> float:
    """Return the stretch of position angle that holds all points [rad]."""
    across = frame_about(centre)[:2] @ views.T
    angles = np.sort(np.mod(np.arctan2(across[1], across[0]), 2.0 * np.pi))
    gaps = np.diff(angles, append=angles[0] + 2.0 * np.pi)
    return float(2.0 * np.pi - gaps.max())
