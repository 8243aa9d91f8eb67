"""Range checks that speak the user's units."""

from __future__ import annotations

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.units import ArrayLike, FloatArray

_SLACK = 1e-9  # relative; lets 1100 · 1e-9 pass where 1.1e-6 is the limit


def within(
    name: str, value: ArrayLike, low: float, high: float, unit: str = "", factor: float = 1.0, zero: float = 0.0
) -> FloatArray:
    """Return `value` as an array, or refuse it where it leaves a closed interval.

    Parameters
    ----------
    name : str
        What the value is, for the text.
    value : array_like
        Values in SI; nan lies in no interval.
    low, high : float
        Limits in SI.
    unit : str
        Unit of the text.
    factor, zero : float
        A number in `unit` is (SI value − zero) / factor.

    Returns
    -------
    ndarray
        Same shape as `value`.

    Raises
    ------
    DomainError
        With the first value outside, the limits and the unit.
    """
    array = np.asarray(value, dtype=np.float64)
    slack = _SLACK * max((abs(bound) for bound in (low, high) if np.isfinite(bound)), default=0.0)
    outside = ~((array >= low - slack) & (array <= high + slack) & np.isfinite(array))
    if np.any(outside):
        first, lowest, highest = ((float(x) - zero) / factor for x in (array[outside][0], low, high))
        limits = f"{lowest:.6g}", f"{highest:.6g}"
        got = f"{first:.6g}" if f"{first:.6g}" not in limits else repr(first)
        suffix = f" {unit}" if unit else ""
        raise DomainError(f"{name} must lie between {limits[0]} and {limits[1]}{suffix}, got {got}{suffix}")
    return array
