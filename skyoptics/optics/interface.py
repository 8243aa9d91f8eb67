"""A smooth interface between two transparent media: Fresnel's formulas on arrays.

Everywhere `index` is the index beyond the interface divided by the index before it: 1.333 from air into water, 1/1.333
from water into air. s means the electric vector perpendicular, p parallel to the plane of incidence. Signs of the
amplitudes: van de Hulst, *Light Scattering by Small Particles* (1957), §12.21, the same as in Born & Wolf, *Principles of
Optics*, §1.5.2; time factor exp(−iωt).
"""

from __future__ import annotations

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.units import ArrayLike, ComplexArray, FloatArray


def amplitudes(index: ArrayLike, incidence: ArrayLike) -> tuple[ComplexArray, ComplexArray, ComplexArray, ComplexArray]:
    """Return the ratios of the fields, total reflection included.

    Parameters
    ----------
    index : array_like
        Relative index, > 0 [1].
    incidence : array_like, broadcastable with `index`
        Angle of incidence, 0 … π/2 [rad].

    Returns
    -------
    r_s, r_p, t_s, t_p : ndarray of complex
        r_s = (cos i − n cos r)/(cos i + n cos r), r_p = (n cos i − cos r)/(n cos i + cos r),
        t_s = 2 cos i/(cos i + n cos r), t_p = 2 cos i/(n cos i + cos r). Beyond the critical angle cos r is positive
        imaginary, so the field dies away from the interface.

    Raises
    ------
    DomainError
        If an index is not positive or an angle lies outside 0 … π/2.

    References
    ----------
    Born & Wolf, *Principles of Optics*, §1.5.2 eqs. (20a), (21a).
    """
    n, i = _checked(index, incidence)
    cos_i = np.cos(i)
    cos_r: ComplexArray = np.sqrt((1.0 - (np.sin(i) / n) ** 2).astype(np.complex128))
    s: ComplexArray = cos_i + n * cos_r
    p: ComplexArray = n * cos_i + cos_r
    return (cos_i - n * cos_r) / s, (n * cos_i - cos_r) / p, 2.0 * cos_i / s, 2.0 * cos_i / p


def reflectances(index: ArrayLike, incidence: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Return the reflected shares of energy R_s, R_p; arguments and errors as for `amplitudes`."""
    r_s, r_p, _, _ = amplitudes(index, incidence)
    return np.abs(r_s) ** 2, np.abs(r_p) ** 2


def transmittances(index: ArrayLike, incidence: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Return the transmitted shares of energy T_s, T_p; arguments and errors as for `amplitudes`.

    T = 4 n cos i cos r / (denominator of t)², from the energy flux through the interface, not from 1 − R; 0 beyond the
    critical angle.
    """
    n, i = _checked(index, incidence)
    cos_i = np.cos(i)
    cos_r = np.sqrt(np.maximum(1.0 - (np.sin(i) / n) ** 2, 0.0))
    product = 4.0 * n * cos_i * cos_r
    s, p = (cos_i + n * cos_r) ** 2, (n * cos_i + cos_r) ** 2
    zero = np.zeros_like(product)
    return np.divide(product, s, out=zero.copy(), where=s > 0.0), np.divide(product, p, out=zero, where=p > 0.0)


def refraction(index: ArrayLike, incidence: ArrayLike) -> FloatArray:
    """Return the angle of refraction by Snell's law [rad]; nan beyond the critical angle."""
    n, i = _checked(index, incidence)
    sine = np.sin(i) / n
    return np.arcsin(np.where(sine <= 1.0, sine, np.nan))


def brewster_angle(index: ArrayLike) -> FloatArray:
    """Return the angle of incidence at which p-polarised light is not reflected, arctan n [rad]."""
    n, _ = _checked(index, 0.0)
    return np.arctan(n)


def critical_angle(index: ArrayLike) -> FloatArray:
    """Return the angle beyond which all light is reflected, arcsin n [rad]; nan where n ≥ 1 (there is none)."""
    n, _ = _checked(index, 0.0)
    return np.arcsin(np.where(n < 1.0, n, np.nan))


def total_reflection_phases(index: ArrayLike, incidence: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Return the phases of r_s and r_p in total reflection, for the time factor exp(−iωt).

    Parameters
    ----------
    index, incidence : array_like
        As for `amplitudes`.

    Returns
    -------
    phase_s, phase_p : ndarray
        −2 arctan(√(sin²i − n²)/cos i) and −2 arctan(√(sin²i − n²)/(n² cos i)), in −π … 0 [rad]; nan where the light is
        not totally reflected.

    References
    ----------
    Born & Wolf, *Principles of Optics*, §1.5.4 eq. (60).
    """
    n, i = _checked(index, incidence)
    excess = np.sin(i) ** 2 - n**2
    root = np.sqrt(np.where(excess >= 0.0, excess, np.nan))
    cos_i = np.cos(i)
    return -2.0 * np.arctan2(root, cos_i), -2.0 * np.arctan2(root, n**2 * cos_i)


def _checked(index: ArrayLike, incidence: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Return both as broadcast float arrays, or refuse in words."""
    n, i = np.broadcast_arrays(np.asarray(index, dtype=np.float64), np.asarray(incidence, dtype=np.float64))
    if not np.all(n > 0.0):
        raise DomainError("a relative index must be a positive real number")
    if not np.all((i >= 0.0) & (i <= np.pi / 2.0)):
        raise DomainError("an angle of incidence must lie between 0 and 90 degrees (given in radians)")
    return n, i
