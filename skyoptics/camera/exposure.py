"""What a camera's settings make of a luminance: f-number, exposure time and ISO speed.

The exposure value at ISO 100 is log2(N²/t · 100/S). Developing a picture at it shows 0.125 · 2^EV cd m⁻², what a
reflected-light meter with K = 12.5 cd s m⁻² would have set this camera for, as middle grey (`skyoptics.colour.display`).

Sources: ISO 2720:1974 (meters: N²/t = L S / K); ISO 12232:2019 (focal-plane exposure H = q L t / N² with q = 0.65;
saturation-based speed S = 78 lx s / H). Both from memory.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.units import ArrayLike, FloatArray

LENS_FACTOR = 0.65
"""q of ISO 12232 [1]: π/4 · transmission 0.9 · vignetting 0.98 · cos⁴ 10°, for a distant subject."""
SATURATION_EXPOSURE = 78.0
"""Focal-plane exposure at which a sensor of ISO 1 saturates by ISO 12232 [lx s]; at ISO S the S-th part of it."""


def exposure_value(aperture: float, exposure_time: float, iso: float = 100.0) -> float:
    """Return the exposure value at ISO 100 that a camera's settings stand for.

    Parameters
    ----------
    aperture : float
        f-number N, above 0 [1].
    exposure_time : float
        t, above 0 [s].
    iso : float
        ISO speed S, above 0 [1].

    Returns
    -------
    float
        log2(N²/t) − log2(S/100) [EV]: larger is darker, one more for half the light.

    Raises
    ------
    DomainError
        If one of them is not a finite number above 0.
    """
    _positive(aperture, exposure_time, iso)
    return 2.0 * math.log2(aperture) - math.log2(exposure_time) - math.log2(iso / 100.0)


def focal_plane_exposure(luminance: ArrayLike, aperture: float, exposure_time: float) -> FloatArray:
    """Return what falls on the sensor: H = 0.65 L t / N².

    Parameters
    ----------
    luminance : array_like
        [cd m⁻²]
    aperture, exposure_time : float
        As for `exposure_value`.

    Returns
    -------
    ndarray
        Same shape [lx s].

    Raises
    ------
    DomainError
        As for `exposure_value`.
    """
    _positive(aperture, exposure_time)
    return np.asarray(luminance, dtype=np.float64) * (LENS_FACTOR * exposure_time / aperture**2)


def saturation_luminance(aperture: float, exposure_time: float, iso: float = 100.0) -> float:
    """Return the luminance from which a sensor records no more: H = 78 lx s / S (ISO 12232).

    Parameters
    ----------
    aperture, exposure_time, iso : float
        As for `exposure_value`.

    Returns
    -------
    float
        [cd m⁻²]; 3.3 stops above the luminance that a meter would set the camera for.

    Raises
    ------
    DomainError
        As for `exposure_value`.
    """
    _positive(aperture, exposure_time, iso)
    return SATURATION_EXPOSURE / iso * aperture**2 / (LENS_FACTOR * exposure_time)


def chosen(
    exposure_ev: float | None,
    aperture: float | None,
    exposure_time: float | None,
    iso: float | None,
    metered: bool = False,
) -> float | None:
    """Return the exposure value that was asked for, by itself or by a camera's settings.

    Parameters
    ----------
    exposure_ev : float or None
        Asked for by itself [EV].
    aperture, exposure_time, iso : float or None
        Settings; all three or none.
    metered : bool
        Whether a rule of metering was asked for.

    Returns
    -------
    float or None
        At ISO 100 [EV]; None if it is to be metered.

    Raises
    ------
    DomainError
        If two things would decide it, or a setting is missing.
    """
    if aperture is None and exposure_time is None and iso is None:
        return exposure_ev
    if aperture is None or exposure_time is None or iso is None:
        raise DomainError("an exposure by the camera's settings needs all three: aperture, exposure_s and iso")
    value = exposure_value(aperture, exposure_time, iso)
    if exposure_ev is not None:
        raise DomainError(
            f"exposure_ev = {exposure_ev:g} cannot stand beside camera.aperture, exposure_s and iso, which come to "
            f"{value:.2f} EV; leave out one or the other"
        )
    if metered:
        raise DomainError(
            f"metering has nothing to decide beside camera.aperture, exposure_s and iso, which come to {value:.2f} EV; "
            "leave out one or the other"
        )
    return value


def _positive(*values: Any) -> None:
    """Refuse settings that no camera has."""
    for value in values:
        if not 0.0 < value < math.inf:
            raise DomainError(f"f-number, exposure time and ISO speed have to be finite and above 0, got {value:g}")
