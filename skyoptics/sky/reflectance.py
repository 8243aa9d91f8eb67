"""How much light ground throws back, by wavelength: simple smooth spectra by name.

Common values from memory, drawn after field spectra as collected in spectral libraries and textbooks: the green bump and the
red edge of leaves (D. M. Gates et al., Appl. Opt. 4, 11 (1965)), soils that climb towards the red, clean snow (W. J. Wiscombe &
S. G. Warren, J. Atmos. Sci. 37, 2712 (1980)) with some dirt and roughness. Real ground strays from them by a factor of 1.5.
*sea* and *lake* are what comes out of clear blue and of greenish water, looking straight down, as a share of the light that
falls on it; what the surface mirrors is not in them.
"""

from __future__ import annotations

import numpy as np

from skyoptics.errors import DomainError, nearest
from skyoptics.materials.ranges import within
from skyoptics.optics.bins import Bins
from skyoptics.units import NM, ArrayLike, FloatArray

_KNOTS_NM = np.array([380, 400, 450, 500, 530, 550, 570, 600, 650, 680, 700, 720, 750, 800], dtype=np.float64)
SPECTRA: dict[str, tuple[float, ...]] = {
    "grass": (0.035, 0.037, 0.043, 0.055, 0.085, 0.100, 0.092, 0.075, 0.055, 0.050, 0.095, 0.22, 0.38, 0.45),
    "forest": (0.018, 0.019, 0.021, 0.026, 0.040, 0.047, 0.043, 0.034, 0.026, 0.024, 0.048, 0.12, 0.22, 0.27),
    "soil": (0.055, 0.060, 0.075, 0.098, 0.118, 0.135, 0.153, 0.175, 0.205, 0.220, 0.229, 0.237, 0.248, 0.265),
    "sand": (0.14, 0.16, 0.20, 0.25, 0.285, 0.31, 0.33, 0.355, 0.385, 0.40, 0.408, 0.415, 0.425, 0.44),
    "rock": (0.13, 0.14, 0.165, 0.185, 0.198, 0.205, 0.211, 0.218, 0.226, 0.230, 0.232, 0.234, 0.237, 0.24),
    "snow": (0.90, 0.91, 0.925, 0.93, 0.93, 0.93, 0.928, 0.922, 0.91, 0.902, 0.896, 0.89, 0.88, 0.865),
    "sea": (0.024, 0.027, 0.028, 0.020, 0.012, 0.009, 0.0065, 0.0025, 0.0012, 0.0009, 0.0007, 0.0004, 0.0002, 0.0001),
    "lake": (0.008, 0.009, 0.013, 0.021, 0.028, 0.030, 0.028, 0.014, 0.008, 0.006, 0.005, 0.003, 0.002, 0.0015),
}
"""Reflectance at the knots [1]; constant beyond both ends."""


def reflectance(kind: str | ArrayLike, bins: Bins) -> FloatArray:
    """Return the reflectance of ground as bin means.

    Parameters
    ----------
    kind : str, float or array_like
        A name of `SPECTRA`; one number for all bins, 0 to 1; or bin means, shape (nλ,).
    bins : Bins
        Spectral bins.

    Returns
    -------
    ndarray, shape (nλ,)
        [1]

    Raises
    ------
    DomainError
        For an unknown name, a number outside 0 to 1 or a wrong count of bin means.
    """
    if isinstance(kind, str):
        if kind not in SPECTRA:
            known = ", ".join(SPECTRA)
            raise DomainError(f"no ground {kind!r}{nearest(kind, SPECTRA)} (there are {known}, or a number 0 to 1)")
        values = np.array(SPECTRA[kind])
        wavelength = np.concatenate([[100.0], _KNOTS_NM, [5000.0]]) * NM
        return bins.mean(wavelength, np.concatenate([values[:1], values, values[-1:]]))
    values = within("reflectance of the ground", kind, 0.0, 1.0)
    if values.shape not in ((), (len(bins),)):
        raise DomainError(f"reflectance needs one number or {len(bins)} bin means, got shape {values.shape}")
    return np.clip(np.broadcast_to(values, (len(bins),)), 0.0, 1.0).copy()
