"""Equilibrium axis ratio (height ÷ width) of raindrops falling at terminal speed.

Laws, D the diameter of the sphere of equal volume:

- ``thurai2007``: Thurai et al., J. Atmos. Oceanic Technol. 24, 1019 (2007), from video disdrometers; 0 … 8 mm. The
  default: measured, and the only one that is round for small drops by its own definition.
- ``brandes2002``: Brandes, Zhang & Vivekanandan, J. Appl. Meteorol. 41, 674 (2002), a fit to several measurements;
  0 … 8 mm.
- ``beard-chuang1987``: Beard & Chuang, J. Atmos. Sci. 44, 1509 (1987), fit to their model; 0 … 7 mm.

The laws differ by 0.01–0.02. The two fits pass 1, or fall again, for drops below half a millimetre; there drops are
round. Oscillation and canting are not in these means.
"""

from __future__ import annotations

from types import MappingProxyType

import numpy as np

from skyoptics.errors import DomainError, nearest
from skyoptics.units import MM, ArrayLike, FloatArray

DEFAULT_LAW = "thurai2007"
LIMITS = MappingProxyType({"thurai2007": 8.0 * MM, "brandes2002": 8.0 * MM, "beard-chuang1987": 7.0 * MM})
"""Largest diameter of each law [m]."""

# ascending powers of D in millimetres
_BEARD_CHUANG = (1.0048, 5.7e-4, -2.628e-2, 3.682e-3, -1.677e-4)
_BRANDES = (0.9951, 0.0251, -0.03644, 0.005303, -0.0002492)
_BRANDES_TOP = 0.4127
"""Diameter where the fit is highest (0.99965); smaller drops are taken as round [mm]."""
_THURAI_MIDDLE = (1.173, -0.5165, 0.4698, -0.1317, -8.5e-3)
_THURAI_LARGE = (1.065, -6.25e-2, -3.99e-3, 7.66e-4, -4.095e-5)


def axis_ratio(diameter: ArrayLike, law: str = DEFAULT_LAW) -> FloatArray:
    """Return the mean axis ratio b/a.

    Parameters
    ----------
    diameter : array_like, shape (...)
        Of the sphere of equal volume [m].
    law : str
        One of `LIMITS`.

    Returns
    -------
    ndarray, shape (...)
        Vertical ÷ horizontal axis, at most 1 [1].

    Raises
    ------
    DomainError
        If the law is not known or a diameter lies outside its range.
    """
    if law not in LIMITS:
        raise DomainError(f"no axis ratio law {law!r}; there are {', '.join(LIMITS)}{nearest(law, LIMITS)}")
    size = np.asarray(diameter, dtype=np.float64) / MM
    top = LIMITS[law] / MM
    if not np.all((size >= 0.0) & (size <= top * (1.0 + 1e-12))):
        raise DomainError(f"axis ratio law {law} holds for diameters of 0 ... {top:g} mm")
    power = np.polynomial.polynomial.polyval
    if law == "beard-chuang1987":
        ratio = power(size, _BEARD_CHUANG)
    elif law == "brandes2002":
        ratio = np.where(size < _BRANDES_TOP, 1.0, power(size, _BRANDES))
    else:
        ratio = np.where(size < 1.5, power(size, _THURAI_MIDDLE), power(size, _THURAI_LARGE))
        ratio = np.where(size < 0.7, 1.0, ratio)
    return np.asarray(np.minimum(ratio, 1.0))
