"""Airy's theory of the primary and the secondary bow, both polarisations, on an absolute scale.

G. B. Airy, Trans. Camb. Phil. Soc. 6, 379 (1838); H. C. van de Hulst, *Light Scattering by Small Particles* (1957), §13.2.
Near the bow ray (incidence i, refraction r, impact parameter b = sin i in drop radii) the deflection is
θ = θ_R + h (b − b_R)², and the light that leaves towards θ adds up to

    S_j = √(2π b_R / sin θ_R) x^(7/6) h^(−1/3) [F_j Ai(−ζ) − i G_j (x h)^(−1/3) Ai'(−ζ)],
    ζ = (θ − θ_R) x^(2/3) h^(−1/3),   h = (p² − 1)²/p² · √(p² − n²)/(n² − 1)^(3/2),

with F_j(b) = (1 − r_j²) r_j^(p−1) from Fresnel's r_j of the polarisation j, at b_R. sin θ stays at the bow, as all other
factors do: letting it alone follow θ is one of several terms of the same order, and moves the primary's peak the wrong way
(against the Debye term it doubles the error, against Lorenz–Mie it adds 0.02° at 50 µm). The scale follows from ray optics:
averaged over its oscillations |S|² is near the bow the sum of both rays, each x² F² b/(sin θ |dθ/db|). The second term is
what makes the polarisations differ in form: for light polarised in the scattering plane F changes sign at Brewster's angle,
3° from the bow ray, so its supernumeraries lie between those of the other (Können & de Boer, Appl. Opt. 18, 1961 (1979)).
It is the first order of the uniform asymptotics of two merging rays (Chester, Friedman & Ursell, Proc. Camb. Phil. Soc. 53,
599 (1957), from memory), worked out here: G = dF/db + F [1/(2 b_R) − (d³θ/db³)/(12 h)], the bracket being what the two rays
differ in apart from Fresnel. Against the Debye terms it leaves 1–2 % of the peak at x = 1000, p = 2, where dF/db alone
leaves more.

Limits: one order p alone (no other orders, no diffraction), small angle from the bow. See `trusted_angle`, and Wang & van
de Hulst, Appl. Opt. 30, 106 (1991), who find Airy's theory fairly good for 0.1 mm drops and right in all details for drops
of some millimetres.
"""

from __future__ import annotations

from math import asin, cos, pi, sin, sqrt

import numpy as np

from skyoptics.droplets.mie import LARGEST_SIZE_PARAMETER as LARGEST
from skyoptics.droplets.mie import checked
from skyoptics.errors import DomainError
from skyoptics.units import ArrayLike, ComplexArray, FloatArray

ORDERS = (2, 3)
"""p of the primary and the secondary bow."""
TRUSTED_SIZE_PARAMETER = 1000.0
"""Below it (radius 0.09 mm at 550 nm) the details depart from Lorenz–Mie; the broad bow stays good to about x = 100."""


def amplitudes(
    index: complex, size_parameter: float, angle: ArrayLike, order: int
) -> tuple[ComplexArray, ComplexArray]:
    """Return Airy's amplitudes of one bow.

    Parameters
    ----------
    index : complex
        n + ik, 1 < n < p; absorption dims by the bow ray's path inside [1].
    size_parameter : float
        2π radius/wavelength [1].
    angle : array_like, shape (...)
        Scattering angle, 0 < angle < π [rad].
    order : int
        p: 2 primary bow, 3 secondary bow.

    Returns
    -------
    S1, S2 : ndarray, complex, shape (...)
        Perpendicular and parallel amplitude, of dσ/dΩ = |S|²/(wavenumber)², up to a phase common to both [1].

    Raises
    ------
    DomainError
        If the order is not 2 or 3, the bow does not exist at this index, or as `skyoptics.droplets.mie.amplitudes`.
    """
    ray = _BowRay(index, order)
    x = _size_parameter(index, size_parameter)
    theta = np.asarray(angle, dtype=np.float64)
    if not np.all((theta > 0.0) & (theta < pi)):
        raise DomainError("scattering angle must lie between 0 and pi, without the ends")
    from scipy.special import airy

    function, slope, _, _ = airy(-reduced_angle(index, size_parameter, theta, order))
    scale = sqrt(2.0 * pi * ray.impact / sin(ray.angle)) * x ** (7.0 / 6.0) * ray.curvature ** (-1.0 / 3.0)
    scale *= np.exp(-2.0 * complex(index).imag * x * order * ray.cos_refraction)
    width = (x * ray.curvature) ** (-1.0 / 3.0)
    s1, s2 = (scale * (f * function - 1j * g * width * slope) for f, g in (ray.strength(0), ray.strength(1)))
    return s1, s2


def bow_angle(index: complex, order: int) -> float:
    """Return the scattering angle of the geometric bow [rad], for p = 2 or 3 (Descartes)."""
    return _BowRay(index, order).angle


def curvature(index: complex, order: int) -> float:
    """Return h, half the second derivative of the deflection by impact parameter in radii (van de Hulst §13.2) [1]."""
    return _BowRay(index, order).curvature


def reduced_angle(index: complex, size_parameter: float, angle: ArrayLike, order: int) -> FloatArray:
    """Return ζ, positive on the bright side of the bow, shape (...) [1]; arguments as `amplitudes`.

    Maxima of the perpendicular light lie where Ai²(−ζ) has them, ζ = 1.01879, 3.24820 … (Abramowitz & Stegun, Table 10.13).
    """
    ray = _BowRay(index, order)
    bright = ray.bright_side * (np.asarray(angle, dtype=np.float64) - ray.angle)
    return np.asarray(bright * _size_parameter(index, size_parameter) ** (2.0 / 3.0) * ray.curvature ** (-1.0 / 3.0))


def angle_at(index: complex, size_parameter: float, reduced: ArrayLike, order: int) -> FloatArray:
    """Return the scattering angle at a given ζ, shape (...) [rad]: the inverse of `reduced_angle`."""
    ray = _BowRay(index, order)
    step = ray.curvature ** (1.0 / 3.0) * _size_parameter(index, size_parameter) ** (-2.0 / 3.0)
    return np.asarray(ray.angle + ray.bright_side * step * np.asarray(reduced, dtype=np.float64))


def trusted_angle(index: complex, size_parameter: float, order: int, fringe: float = 0.125) -> float:
    """Return how far into the bright side Airy's fringes lie right.

    Parameters
    ----------
    index, size_parameter, order
        As `amplitudes`.
    fringe : float
        Error allowed in the phase between the two rays, in periods [1].

    Returns
    -------
    float
        Scattering angle where the exact phase difference of the two rays and Airy's 4/3 ζ^1.5 part by `fringe` [rad], or
        where the outer of the two rays grazes the drop if that comes first.
    """
    ray = _BowRay(index, order)
    x = _size_parameter(index, size_parameter)
    n = complex(index).real
    outer = np.linspace(ray.impact, 1.0, 4001)[1:-1]
    target = _deflection(outer, n, order)
    inner_grid = np.linspace(0.0, ray.impact, 20001)
    inner_deflection = _deflection(inner_grid, n, order)  # falls towards the bow
    inside = target < inner_deflection[0]
    outer, target = outer[inside], target[inside]
    inner = np.interp(-target, -inner_deflection, inner_grid)
    away = target - ray.deflection
    # Van de Hulst §12.22: phase 2x (p n cos r - cos i) lags; its difference is exact at equal deflection
    exact = np.abs(_path(outer, n, order) - _path(inner, n, order)) * 2.0 * x
    airy = 4.0 / 3.0 * away**1.5 * x / sqrt(ray.curvature)
    wrong = np.flatnonzero(np.abs(exact - airy) > 2.0 * pi * fringe)
    limit = float(away[wrong[0]] if wrong.size else away[-1])
    return ray.angle + ray.bright_side * limit


class _BowRay:
    """The ray of least deflection: its place and what Fresnel's formulas give there."""

    def __init__(self, index: complex, order: int) -> None:
        n = complex(index).real
        if order not in ORDERS:
            raise DomainError(f"Airy theory is here for p = 2 (primary) and 3 (secondary), got {order}")
        if not 1.0 < n < order:
            raise DomainError(f"a bow of p = {order} needs a refractive index between 1 and {order}, got {n:g}")
        self.index = n
        self.order = order
        self.impact = sqrt((order**2 - n**2) / (order**2 - 1.0))
        incidence = asin(self.impact)
        refraction = asin(self.impact / n)
        self.cos_incidence = cos(incidence)
        self.cos_refraction = cos(refraction)
        self.deflection = 2.0 * (incidence - refraction) + (order - 1) * (pi - 2.0 * refraction)
        self.curvature = (order**2 - 1.0) ** 2 / order**2 * sqrt(order**2 - n**2) / (n**2 - 1.0) ** 1.5
        folded = self.deflection % (2.0 * pi)
        self.angle = folded if folded <= pi else 2.0 * pi - folded
        self.bright_side = 1.0 if folded <= pi else -1.0

    def strength(self, parallel: int) -> tuple[float, float]:
        """Return F and G of the module's formula; parallel: 0 or 1."""
        factor, change = self.fresnel(parallel)
        b, n, p = self.impact, self.index, self.order
        third = 2.0 * (1.0 + 2.0 * b**2) / self.cos_incidence**5
        third -= 2.0 * p * (1.0 + 2.0 * (b / n) ** 2) / (n**3 * self.cos_refraction**5)
        return factor, change + factor * (0.5 / b - third / (12.0 * self.curvature))

    def fresnel(self, parallel: int) -> tuple[float, float]:
        """Return F = (1 − r²) r^(p−1) and dF/db at the bow ray; parallel: 0 or 1.

        r is outside reflection in the sign where both polarisations are opposite at normal incidence, as S1 and S2 are
        straight backwards: r_s = −sin(i − r)/sin(i + r), r_p = tan(i − r)/tan(i + r).
        """
        i, r = asin(self.impact), asin(self.impact / self.index)
        slope_i = 1.0 / self.cos_incidence
        slope_r = 1.0 / (self.index * self.cos_refraction)
        less, more = slope_i - slope_r, slope_i + slope_r
        s = -sin(i - r) / sin(i + r)
        ds = s * (less * cos(i - r) / sin(i - r) - more * cos(i + r) / sin(i + r))
        value, slope = s, ds
        if parallel:
            value = -s * cos(i + r) / cos(i - r)
            # product rule; cos(i + r) = 0 at Brewster's angle
            slope = -ds * cos(i + r) / cos(i - r)
            slope += s * (more * sin(i + r) * cos(i - r) - less * sin(i - r) * cos(i + r)) / cos(i - r) ** 2
        power = self.order - 1
        factor = (1.0 - value**2) * value**power
        change = (power * value ** (power - 1) - (power + 2) * value ** (power + 1)) * slope
        return factor, change


def _size_parameter(index: complex, size_parameter: float) -> float:
    """Return a checked size parameter; Airy's theory goes on where Lorenz–Mie sums get too long."""
    x = float(size_parameter)
    if LARGEST < x <= 10.0 * LARGEST:
        checked(index, LARGEST)
        return x
    return float(checked(index, x)[1])


def _deflection(impact: FloatArray, n: float, order: int) -> FloatArray:
    """Return the deflection of a ray [rad]."""
    return np.asarray(2.0 * np.arcsin(impact) - 2.0 * order * np.arcsin(impact / n) + (order - 1) * pi)


def _path(impact: FloatArray, n: float, order: int) -> FloatArray:
    """Return p n cos r − cos i, half the optical path in radii against the ray through the centre's plane."""
    return np.asarray(order * np.sqrt(n**2 - impact**2) - np.sqrt(1.0 - impact**2))
