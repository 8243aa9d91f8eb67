"""Rainbow angles of a sphere in closed form: where rays of one order pile up, and how much light they carry.

`p` counts as in van de Hulst, *Light Scattering by Small Particles* (1957), ch. 13: 0 external reflection, 1 direct
transmission, 2 primary bow (one reflection inside), 3 secondary, … The formulas are Descartes'; see also J. D. Walker,
Am. J. Phys. 44, 421 (1976). A ray of incidence i and refraction r, sin i = n sin r, leaves with the total deviation
D = 2 (i − r) + (p − 1)(π − 2r). D is smallest at the bow ray, where cos²i = (n² − 1)/(p² − 1), hence R_s there does not
depend on n at all.

All functions broadcast `index` (real, relative to the surrounding medium) against `p`. Where there is no bow (n ≤ 1,
n ≥ p, p < 2) they return nan.
"""

from __future__ import annotations

import numpy as np

from skyoptics.units import ArrayLike, FloatArray


def impact(index: ArrayLike, p: ArrayLike) -> FloatArray:
    """Return the bow ray's impact parameter, sin i = √((p² − n²)/(p² − 1)), in units of the radius."""
    n, p = _with_bow(index, p)
    return np.sqrt((p**2 - n**2) / (p**2 - 1.0))


def incidence(index: ArrayLike, p: ArrayLike) -> FloatArray:
    """Return the bow ray's angle of incidence [rad]."""
    n, p = _with_bow(index, p)
    return np.arctan2(np.sqrt(p**2 - n**2), np.sqrt(n**2 - 1.0))


def refraction(index: ArrayLike, p: ArrayLike) -> FloatArray:
    """Return the bow ray's angle of refraction, tan i = p tan r [rad]."""
    n, p = _with_bow(index, p)
    return np.arctan2(np.sqrt(p**2 - n**2), p * np.sqrt(n**2 - 1.0))


def deviation(index: ArrayLike, p: ArrayLike) -> FloatArray:
    """Return the total deviation of the bow ray, not folded: the smallest of its order [rad]."""
    _, p = _with_bow(index, p)
    return 2.0 * incidence(index, p) - 2.0 * p * refraction(index, p) + (p - 1.0) * np.pi


def scattering_angle(index: ArrayLike, p: ArrayLike) -> FloatArray:
    """Return the scattering angle of the caustic, 0 … π [rad]."""
    return fold(deviation(index, p))


def fold(total: ArrayLike) -> FloatArray:
    """Return the scattering angle, 0 … π, that belongs to a total deviation [rad]."""
    turn = np.mod(np.asarray(total, dtype=np.float64), 2.0 * np.pi)
    return np.minimum(turn, 2.0 * np.pi - turn)


def side(index: ArrayLike, p: ArrayLike) -> FloatArray:
    """Return on which side of the caustic the light of its order lies.

    Returns
    -------
    ndarray
        +1 towards larger scattering angles (primary), −1 towards smaller ones (secondary): D has a minimum, and folding
        turns the axis round in every other half turn.
    """
    turn = np.mod(deviation(index, p), 2.0 * np.pi)
    return np.where(np.isnan(turn), np.nan, np.where(turn < np.pi, 1.0, -1.0))


def reflectances(index: ArrayLike, p: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Return the reflected shares of energy at each interface for the bow ray.

    Returns
    -------
    R_s, R_p : ndarray
        ((p − 1)/(p + 1))² and ((n² − p)/(n² + p))²: Fresnel's formulas with n cos r = p cos i.
    """
    n, p = _with_bow(index, p)
    there = np.where(np.isnan(n), np.nan, 1.0)
    return there * ((p - 1.0) / (p + 1.0)) ** 2, ((n**2 - p) / (n**2 + p)) ** 2


def energies(index: ArrayLike, p: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Return the share of energy the bow ray carries out, ε = (1 − R)² R^(p−1), for s and p polarisation."""
    reflected_s, reflected_p = reflectances(index, p)
    power = np.asarray(p, dtype=np.float64) - 1.0
    return (1.0 - reflected_s) ** 2 * reflected_s**power, (1.0 - reflected_p) ** 2 * reflected_p**power


def polarisation(index: ArrayLike, p: ArrayLike) -> FloatArray:
    """Return the degree of polarisation at the caustic, (ε_s − ε_p)/(ε_s + ε_p); positive means along the bow."""
    s, parallel = energies(index, p)
    return (s - parallel) / (s + parallel)


def sensitivity(index: ArrayLike, p: ArrayLike) -> FloatArray:
    """Return dD/dn of the total deviation, 2 p tan r / n (D being stationary, only r's own change counts) [rad]."""
    n, p = _with_bow(index, p)
    return 2.0 * p * np.tan(refraction(index, p)) / n


def angle_sensitivity(index: ArrayLike, p: ArrayLike) -> FloatArray:
    """Return dθ/dn of the folded scattering angle [rad]: `side` times `sensitivity`."""
    return side(index, p) * sensitivity(index, p)


def _with_bow(index: ArrayLike, p: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Return index and order as broadcast float arrays, the index nan where there is no bow."""
    n, order = np.broadcast_arrays(np.asarray(index, dtype=np.float64), np.asarray(p, dtype=np.float64))
    return np.where((n > 1.0) & (n < order) & (order >= 2.0), n, np.nan), order
