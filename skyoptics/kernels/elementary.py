"""Elementary functions for lanes: float32 polynomials without branches, since libm calls do not vectorise.

Errors are absolute, measured over the whole range against float64 (`tests/kernels/test_elementary.py`).
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from skyoptics.kernels.lanes import F0, F1, F2, HALF

_PI = np.float32(np.pi)
_HALF_PI = np.float32(np.pi / 2.0)
_QUARTER_PI = np.float32(np.pi / 4.0)
# Taylor coefficients of sine and cosine: on [−π/2, π/2] the first term left out is below 6e-8
_S3, _S5, _S7 = np.float32(-1.0 / 6.0), np.float32(1.0 / 120.0), np.float32(-1.0 / 5040.0)
_S9, _S11 = np.float32(1.0 / 362880.0), np.float32(-1.0 / 39916800.0)
_C2, _C4, _C6 = np.float32(-1.0 / 2.0), np.float32(1.0 / 24.0), np.float32(-1.0 / 720.0)
_C8, _C10, _C12 = np.float32(1.0 / 40320.0), np.float32(-1.0 / 3628800.0), np.float32(1.0 / 479001600.0)
# Arc tangent on |z| ≤ tan π/8: least squares in float64, error 1.4e-8
_A3, _A5 = np.float32(-0.333328543), np.float32(0.199753405)
_A7, _A9 = np.float32(-0.138603238), np.float32(0.0801591511)
_TAN = np.float32(np.sqrt(2.0) - 1.0)
_TINY = np.float32(1e-30)
# artanh z / z in powers of z²
_L3, _L5, _L7 = np.float32(1.0 / 3.0), np.float32(1.0 / 5.0), np.float32(1.0 / 7.0)
_L9, _L11, _L13 = np.float32(1.0 / 9.0), np.float32(1.0 / 11.0), np.float32(1.0 / 13.0)
_MINUS_64 = np.float32(-64.0)
_SIXTEENTH = np.float32(1.0 / 16.0)
_E2, _E3, _E4, _E5 = np.float32(1.0 / 2.0), np.float32(1.0 / 6.0), np.float32(1.0 / 24.0), np.float32(1.0 / 120.0)
_LARGEST = np.float32(32.0)


@njit(cache=True, nogil=True, error_model="numpy")
def sine_cosine_turn(u: Any) -> Any:
    """Return sin and cos of 2πu for u in [0, 1]; error below 6e-7."""
    x = _PI * (u - HALF)
    z = x * x
    s = x + x * z * (_S3 + z * (_S5 + z * (_S7 + z * (_S9 + z * _S11))))
    c = F1 + z * (_C2 + z * (_C4 + z * (_C6 + z * (_C8 + z * (_C10 + z * _C12)))))
    return -F2 * s * c, s * s - c * c


@njit(cache=True, nogil=True, error_model="numpy")
def minus_log(u: Any) -> Any:
    """Return −ln u for u in [6e-8, 1]; error below 2e-5: five square roots, then the series of artanh."""
    y = np.sqrt(np.sqrt(np.sqrt(np.sqrt(np.sqrt(u)))))
    z = (y - F1) / (y + F1)
    w = z * z
    series = F1 + w * (_L3 + w * (_L5 + w * (_L7 + w * (_L9 + w * (_L11 + w * _L13)))))
    return _MINUS_64 * z * series


@njit(cache=True, nogil=True, error_model="numpy")
def decay(x: Any) -> Any:
    """Return exp(−x) for x ≥ 0; error below 2e-7 for x < 4 and 1e-5 beyond: (series at x / 16) to the 16th power."""
    x = x if x < _LARGEST else _LARGEST
    z = -x * _SIXTEENTH
    y = F1 + z * (F1 + z * (_E2 + z * (_E3 + z * (_E4 + z * _E5))))
    y = y * y
    y = y * y
    y = y * y
    return y * y


@njit(cache=True, nogil=True, error_model="numpy")
def arc_tangent(y: Any, x: Any) -> Any:
    """Return atan2(y, x) in [−π, π]; error below 4e-7; 0 for (0, 0)."""
    ax = abs(x)
    ay = abs(y)
    low = ax if ax < ay else ay
    high = (ay if ax < ay else ax) + _TINY
    steep = low > _TAN * high
    z = ((low - high) if steep else low) / ((low + high) if steep else high)
    w = z * z
    angle = z + z * w * (_A3 + w * (_A5 + w * (_A7 + w * _A9)))
    angle = angle + (_QUARTER_PI if steep else F0)
    angle = _HALF_PI - angle if ax < ay else angle
    angle = _PI - angle if x < F0 else angle
    return -angle if y < F0 else angle
