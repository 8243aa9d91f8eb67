"""Water vapour and oxygen: bands that take out red light from 690 nm up, and a weak one at 590 nm.

R. E. Bird & C. Riordan, *Simple Solar Spectral Model …*, SERI/TR-215-2436 (1984), doi 10.2172/5986936, table 2-1 and
equations 2-8 and 2-11 (the constant 118.3 is that of their C program; the report prints 118.93). A band's lines saturate
one by one, so its transmission is no exponential of the amount: amounts of successive legs are to be added *before* the
transmission is taken. The rows are means over some 10 nm. Between them coefficients are linear; the table has no rows
where a band begins and ends, so a second line of rows squares the bands off where ASTM G173-03 shows their edges.
"""

from __future__ import annotations

import numpy as np

from skyoptics.materials.ranges import within
from skyoptics.units import NM, ArrayLike, FloatArray

OXYGEN_PRESSURE = 101300.0
"""Surface pressure of one vertical column in equation 2-11 [Pa]."""

# wavelength [nm], coefficient [cm⁻¹]
_VAPOUR_ROWS = """
570 0      593 0.075  610 0      667.6 0    690 0.016  710 0.0125 718 1.8    724.4 2.5  740 0.061  752.5 0.0008
757.5 1e-4 762.5 1e-5 767.5 1e-5 780 0.0006 800 0.036  816 1.6    823.7 2.5  831.5 0.5  840 0.155  860 1e-5
880 0.0026 905 7      915 5      925 5      930 27     937 55     948 45     965 4      980 1.48   993.5 0.1
1040 1e-5  1070 1e-3  1100 3.2   1120 115   1130 70    1145 75    1161 10    1170 5     1200 2     1240 0.002
1270 0.002 1290 0.1   1320 4     1350 200   1395 1000  1442.5 185 1462.5 80  1477 80    1497 12    1520 0.16
1539 0.002 1558 5e-4  1578 1e-4  1592 1e-5  1610 1e-4  1630 0.001 1646 0.01  1678 0.036 1740 1.1
"""
_VAPOUR_EDGES = "586 0      588 0.075  597 0.075  600 0      716 0.0125 717 1.8"
# wavelength [nm], coefficient of the uniformly mixed gases (below 1.2 µm oxygen alone) [1]
_OXYGEN_ROWS = """
667.6 0    690 0.15   710 0      757.5 0    762.5 4      767.5 0.35 780 0       1240 0.05   1270 0.3  1290 0.02
1320 2e-4  1350 1.1e-4 1395 1e-5 1442.5 0.05 1462.5 0.011 1477 0.005 1497 6e-4   1520 0      1539 0.005
1558 0.13  1578 0.04  1592 0.06  1610 0.13  1630 0.001   1646 0.0014 1678 1e-4  1740 1e-5
"""
_OXYGEN_EDGES = "686 0      687 0.15   698 0      759 0      760 4      771 0      1200 0"


def vapour_transmission(wavelength: ArrayLike, column_cm: ArrayLike) -> FloatArray:
    """Return what water vapour lets through.

    Parameters
    ----------
    wavelength : array_like
        0.25 to 1.7 µm [m].
    column_cm : array_like, broadcastable
        Liquid water that the vapour of the whole slant path would make [cm].

    Returns
    -------
    ndarray
        exp(−0.2385 a W / (1 + 20.07 a W)^0.45) [1].

    Raises
    ------
    DomainError
        For wavelengths outside this range.

    References
    ----------
    Bird & Riordan (1984), equation 2-8 (after B. Leckner, Solar Energy 20, 143 (1978)).
    """
    x = _coefficient(wavelength, _VAPOUR) * np.asarray(column_cm, dtype=np.float64)
    return np.exp(-0.2385 * x / (1.0 + 20.07 * x) ** 0.45)


def oxygen_transmission(wavelength: ArrayLike, mass: ArrayLike) -> FloatArray:
    """Return what oxygen (beyond 1.2 µm: all uniformly mixed gases) lets through.

    Parameters
    ----------
    wavelength : array_like
        0.25 to 1.7 µm [m].
    mass : array_like, broadcastable
        Air on the slant path in vertical columns of `OXYGEN_PRESSURE` [1].

    Returns
    -------
    ndarray
        exp(−1.41 a M′ / (1 + 118.3 a M′)^0.45) [1].

    Raises
    ------
    DomainError
        For wavelengths outside this range.

    References
    ----------
    Bird & Riordan (1984), equation 2-11 (after B. Leckner, Solar Energy 20, 143 (1978)).
    """
    x = _coefficient(wavelength, _OXYGEN) * np.asarray(mass, dtype=np.float64)
    return np.exp(-1.41 * x / (1.0 + 118.3 * x) ** 0.45)


def _coefficient(wavelength: ArrayLike, rows: FloatArray) -> FloatArray:
    """Return the coefficient, linear between rows."""
    checked = within("wavelength for the air's extinction", wavelength, 0.25e-6, 1.7e-6, "nm", NM)
    return np.interp(checked, rows[:, 0] * NM, rows[:, 1])


def _rows(*texts: str) -> FloatArray:
    """Return the rows of several texts together, shape (rows, 2), by rising wavelength."""
    table = np.array(" ".join(texts).split(), dtype=np.float64).reshape(-1, 2)
    return table[np.argsort(table[:, 0])]


_VAPOUR = _rows(_VAPOUR_ROWS, _VAPOUR_EDGES)
_OXYGEN = _rows(_OXYGEN_ROWS, _OXYGEN_EDGES)
