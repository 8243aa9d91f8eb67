"""Metrics of a bow, read off one curve of intensity against scattering angle.

With I the unpolarised intensity at one wavelength, I⊥ and I∥ its parts across and in the scattering plane:

*bow angle*: place of the highest maximum in the window given for the primary bow. Place and height of a maximum are those
of a polynomial of degree 4 fitted by least squares to the points around it that exceed 85 % of the highest (at least 7
points), so that noise between neighbouring points does not move it.

*dark band*: the least intensity between the maxima of the secondary and the primary bow; where there is no secondary,
between the end of its window (halfway between both geometric bows for small drops) and the primary.

*width*: full width at half maximum, the distance between the nearest points on both sides of the bow angle where I falls
through (I_bow + I_dark)/2, straight lines between points.

*supernumeraries*: the maxima on the bright side of the bow, in order, from where the curve has first fallen below 85 % of
I_bow, with a prominence (height above the higher one of the lowest points between it and higher ground on either side) of
at least 2 % of I_bow in the curve smoothed by (1, 2, 1)/4; places by the same fit to the curve itself, over the points that
exceed the maximum less 30 % of its prominence.

*contrast*: (I_bow − I_dark)/(I_bow + I_dark).

*secondary over primary*: height of the maximum of the secondary bow ÷ I_bow, neither reduced by the dark band.

*polarisation*: (I⊥ − I∥)/(I⊥ + I∥) at the bow angle; positive along the bow.

What is not there is nan: no maximum inside the window, no half height on one side, too few supernumeraries.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import nan

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.units import FloatArray

TOP = 0.85
"""Share of a maximum's height above which points take part in the fit of its place [1]."""
LEAST_POINTS = 7
"""Points of a fit at least."""
PROMINENCE = 0.02
"""Of supernumeraries, ÷ height of the bow [1]."""
SHOULDER = 0.3
"""Of a supernumerary's prominence, below its top, that takes part in the fit of its place [1]."""


@dataclass(frozen=True)
class Window:
    """Where the maxima of both bows are looked for; scattering angles, in the unit of the curve."""

    primary: tuple[float, float]
    secondary: tuple[float, float]


@dataclass(frozen=True)
class BowMetrics:
    """Metrics of one curve; angles in its unit, the rest [1]; nan where something is not there."""

    bow_angle: float = nan
    width: float = nan
    supernumeraries: tuple[float, ...] = ()
    contrast: float = nan
    secondary_over_primary: float = nan
    polarization: float = nan
    peak: float = nan
    dark: float = nan
    dark_angle: float = nan
    secondary_angle: float = nan

    def supernumerary(self, number: int) -> float:
        """Return the place of the first, second, … supernumerary."""
        return self.supernumeraries[number - 1] if len(self.supernumeraries) >= number else nan


def measure(angle: FloatArray, perpendicular: FloatArray, parallel: FloatArray, window: Window) -> BowMetrics:
    """Return the metrics of one curve.

    Parameters
    ----------
    angle : ndarray, shape (nθ,)
        Scattering angle, ascending, any unit; at least some eight points across the bow.
    perpendicular, parallel : ndarray, shape (nθ,)
        I⊥ and I∥, any scale.
    window : Window
        Where to look for the maxima.

    Returns
    -------
    BowMetrics

    Raises
    ------
    DomainError
        If shapes differ, angles do not ascend, or a value is not finite.
    """
    angle = np.asarray(angle, dtype=np.float64)
    across, along = np.asarray(perpendicular, dtype=np.float64), np.asarray(parallel, dtype=np.float64)
    if angle.ndim != 1 or across.shape != angle.shape or along.shape != angle.shape:
        raise DomainError(
            f"angle, perpendicular and parallel need one shape (n,), got {angle.shape}, {across.shape}, {along.shape}"
        )
    if len(angle) < LEAST_POINTS or not np.all(np.diff(angle) > 0.0):
        raise DomainError(f"a curve needs {LEAST_POINTS} or more growing angles")
    if not (np.all(np.isfinite(across)) and np.all(np.isfinite(along))):
        raise DomainError("a curve holds values that are not finite")
    curve = across + along
    top = _highest(angle, curve, window.primary)
    if top is None:
        return BowMetrics()
    bow_angle, peak = maximum(angle, curve, top)
    second = _highest(angle, curve, window.secondary)
    secondary_angle, secondary = maximum(angle, curve, second) if second is not None else (nan, nan)
    start = int(np.searchsorted(angle, window.secondary[1])) if second is None else second
    between = slice(min(start, top), top + 1)
    lowest = between.start + int(np.argmin(curve[between]))
    dark = float(curve[lowest])
    i1, i2 = float(np.interp(bow_angle, angle, across)), float(np.interp(bow_angle, angle, along))
    return BowMetrics(
        bow_angle=bow_angle,
        width=width(angle, curve, top, 0.5 * (peak + dark)),
        supernumeraries=supernumeraries(angle, curve, top, peak),
        contrast=(peak - dark) / (peak + dark),
        secondary_over_primary=secondary / peak,
        polarization=(i1 - i2) / (i1 + i2),
        peak=peak,
        dark=dark,
        dark_angle=float(angle[lowest]),
        secondary_angle=secondary_angle,
    )


def maximum(angle: FloatArray, curve: FloatArray, near: int, level: float | None = None) -> tuple[float, float]:
    """Return place and height of the maximum about point `near`, fitted over the points that exceed `level`."""
    level = TOP * float(curve[near]) if level is None else level
    low = high = near
    while low > 0 and curve[low - 1] > level:
        low -= 1
    while high < len(curve) - 1 and curve[high + 1] > level:
        high += 1
    missing = max(LEAST_POINTS - (high - low + 1), 0)
    low, high = max(low - (missing + 1) // 2, 0), min(high + (missing + 1) // 2, len(curve) - 1)
    half = 0.5 * (angle[high] - angle[low])
    place = (angle[low : high + 1] - angle[near]) / half
    fit = np.polynomial.Polynomial.fit(place, curve[low : high + 1] / curve[near], 4, domain=[-1.0, 1.0])
    roots = fit.deriv().roots()
    roots = roots.real[(np.abs(roots.imag) < 1e-9) & (roots.real >= place[0]) & (roots.real <= place[-1])]
    if len(roots) == 0:
        return float(angle[near]), float(curve[near])
    best = roots[np.argmax(fit(roots))]
    return float(angle[near] + half * best), float(fit(best) * curve[near])


def width(angle: FloatArray, curve: FloatArray, top: int, level: float) -> float:
    """Return the distance between the nearest crossings of `level` on both sides of point `top`; nan without them."""
    below = np.flatnonzero(curve < level)
    left, right = below[below < top], below[below > top]
    if len(left) == 0 or len(right) == 0:
        return nan
    i, j = int(left[-1]), int(right[0])
    start = angle[i] + (level - curve[i]) / (curve[i + 1] - curve[i]) * (angle[i + 1] - angle[i])
    stop = angle[j - 1] + (level - curve[j - 1]) / (curve[j] - curve[j - 1]) * (angle[j] - angle[j - 1])
    return float(stop - start)


def supernumeraries(angle: FloatArray, curve: FloatArray, top: int, peak: float) -> tuple[float, ...]:
    """Return the places of the maxima beyond the bow, towards larger angles, in order."""
    from scipy.signal import find_peaks

    beyond = curve[top:]
    smooth = np.convolve(np.pad(beyond, 1, mode="edge"), [0.25, 0.5, 0.25], mode="valid")
    left = int(np.argmax(smooth < TOP * peak))  # 0 where it never falls: nothing is found then
    found, about = find_peaks(smooth, prominence=PROMINENCE * peak)
    places = []
    for point, prominence in zip(found.tolist(), about["prominences"].tolist(), strict=True):
        if left == 0 or point < left:
            continue
        level = float(beyond[point]) - SHOULDER * prominence
        places.append(maximum(angle, curve, top + point, level)[0])
    return tuple(places)


def _highest(angle: FloatArray, curve: FloatArray, window: tuple[float, float]) -> int | None:
    """Return the highest point in a window if it is a maximum of the curve."""
    inside = np.flatnonzero((angle >= window[0]) & (angle <= window[1]))
    if len(inside) == 0:
        return None
    top = int(inside[np.argmax(curve[inside])])
    if top in (0, len(curve) - 1) or curve[top] < max(curve[top - 1], curve[top + 1]):
        return None
    return top
