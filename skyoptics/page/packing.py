"""Numbers small enough for a page: quantised arrays as base64, grids of directions as plain lists.

Values over many powers of ten become codes of sixteen bits, even in the logarithm: 0 stands for "none", code k for
lowest · (highest / lowest)^((k − 1) / 65534). Over twelve powers of ten a step is 0.04 %.
"""

from __future__ import annotations

from base64 import b64encode
from typing import Any

import numpy as np

from skyoptics.geometry.directions import Directions
from skyoptics.units import ArrayLike, FloatArray

CODES = 65534
"""Steps between the lowest and the highest value."""
DEEPEST = 1e-12
"""Least value that is told apart from the highest [1]."""


def text(values: ArrayLike, kind: str) -> str:
    """Return an array's bytes, little-endian, as base64.

    Parameters
    ----------
    values : array_like
        Any shape; written row by row.
    kind : str
        numpy type code such as ``u1`` or ``u2``.
    """
    return b64encode(np.ascontiguousarray(values, dtype=f"<{kind}").tobytes()).decode("ascii")


def limits(values: ArrayLike) -> tuple[float, float]:
    """Return the lowest and highest positive value; 1, 10 where there is none."""
    array = np.asarray(values, dtype=np.float64)
    positive = array[np.isfinite(array) & (array > 0.0)]
    if not positive.size:
        return 1.0, 10.0
    highest = float(positive.max())
    lowest = max(float(positive.min()), DEEPEST * highest)
    return (lowest, highest) if lowest < highest else (0.5 * highest, highest)


def codes(values: ArrayLike, lowest: float, highest: float) -> Any:
    """Return codes of sixteen bits, even in the logarithm.

    Parameters
    ----------
    values : array_like
        What is not finite or not positive becomes 0; beyond the limits it is held.
    lowest, highest : float
        From `limits`.

    Returns
    -------
    ndarray of uint16, as `values`
    """
    array = np.asarray(values, dtype=np.float64)
    there = np.isfinite(array) & (array > 0.0)
    share = np.log(np.where(there, array, lowest) / lowest) / np.log(highest / lowest)
    return np.where(there, 1 + np.rint(CODES * np.clip(share, 0.0, 1.0)), 0).astype(np.uint16)


def spectra(values: FloatArray) -> dict[str, Any]:
    """Return spectra (rows, columns, nλ) as the code of their peak and their shape in 255 steps of it."""
    peak = np.nan_to_num(values).max(axis=-1)
    lowest, highest = limits(peak)
    share = np.divide(values, peak[..., None], out=np.zeros_like(values), where=peak[..., None] > 0.0)
    return {
        "lowest": lowest,
        "highest": highest,
        "peaks": text(codes(peak, lowest, highest), "u2"),
        "shapes": text(np.rint(255.0 * np.clip(np.nan_to_num(share), 0.0, 1.0)), "u1"),
    }


def grid(directions: Directions) -> dict[str, Any]:
    """Return all that is needed to work out the direction of any place in a picture."""
    return {
        "kind": "cylindrical" if directions.kind else "radial",
        "height": directions.shape[0],
        "width": directions.shape[1],
        "rotation": directions.rotation.ravel().tolist(),
        "map": [float(value) for value in directions.map],
        "coefficients": directions.coefficients.tolist(),
    }
