"""Fresnel coefficients of a smooth interface between two media with real index.

Signs are those of van de Hulst, *Light Scattering by Small Particles* (1957), §12.21: at normal incidence the two
reflection coefficients are equal and opposite, since the parallel axis turns with the ray. `index` is that of the medium
beyond the interface divided by that of the medium before it. The caller makes sure that no total reflection occurs
(both cosines real). Light that comes from the other side has −r and the same transmitted energy.
"""

from __future__ import annotations

from numba import njit


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def amplitudes(index: float, cos_i: float, cos_r: float) -> tuple[float, float, float, float]:
    """Return r_s, r_p, t_s, t_p (field ratios; s perpendicular, p parallel to the plane of incidence)."""
    s = 1.0 / (cos_i + index * cos_r)
    p = 1.0 / (index * cos_i + cos_r)
    return (cos_i - index * cos_r) * s, (index * cos_i - cos_r) * p, 2.0 * cos_i * s, 2.0 * cos_i * p


@njit(cache=True, nogil=True, error_model="numpy", inline="always")
def transmittances(index: float, cos_i: float, cos_r: float) -> tuple[float, float]:
    """Return the transmitted shares of energy T_s, T_p = (n cos r / cos i) t², never 1 − R: so energy can be checked."""
    s = cos_i + index * cos_r
    p = index * cos_i + cos_r
    product = 4.0 * index * cos_i * cos_r
    return product / (s * s), product / (p * p)
