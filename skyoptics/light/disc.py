"""The sun's disc: size and limb darkening."""

from __future__ import annotations

import numpy as np

from skyoptics.optics.bins import Bins
from skyoptics.optics.source import Disc
from skyoptics.units import ARCMIN, NM

SUN_RADIUS = 959.63 / 60.0 * ARCMIN
"""Angular radius of the sun at 1 AU, 959.63″ (A. Auwers 1891, as in the almanacs) [rad]."""

# H. Neckel & D. Labs, Solar Phys. 153, 91 (1994), table 1: wavelength [nm], A_0 to A_5 of I(µ)/I(1) = Σ A_j µ^j
_NECKEL_LABS = """
401.970 0.12323 1.08648 -0.43974 0.45912 -0.32759 0.09850
445.125 0.15248 1.38517 -1.49615 1.99886 -1.48155 0.44119
492.905 0.20924 1.30798 -1.20411 1.21505 -0.67196 0.14381
541.760 0.26073 1.27428 -1.30352 1.47085 -0.96618 0.26384
579.880 0.28392 1.36896 -1.75998 2.22154 -1.56074 0.44630
610.975 0.30854 1.36620 -1.83572 2.33221 -1.63082 0.45959
640.970 0.33644 1.30590 -1.79238 2.45040 -1.89979 0.59943
700.875 0.37885 1.25553 -1.70908 2.19647 -1.59554 0.47378
"""
_ROWS = np.array(_NECKEL_LABS.split(), dtype=np.float64).reshape(-1, 7)
_OVER_DISC = 2.0 / (np.arange(6) + 2.0)
"""Mean of µ^j over the disc: ∫ µ^j 2ρ dρ with µ² = 1 − ρ²."""


def sun_disc(bins: Bins) -> Disc:
    """Return the sun's disc at 1 AU.

    Parameters
    ----------
    bins : Bins
        Spectral bins; the coefficients are linear in wavelength between 402 and 701 nm and constant beyond.

    Returns
    -------
    Disc
        Radius 959.63″; each row scaled so that the mean over the disc is 1.
    """
    edges = np.array([[1.0], [1e9]])  # so that bins beyond the rows meet the end rows
    wavelength = np.concatenate([edges[0], _ROWS[:, 0], edges[1]]) * NM
    rows = _ROWS[:, 1:]
    darkening = bins.mean(wavelength, np.concatenate([rows[:1], rows, rows[-1:]]))
    darkening /= (darkening @ _OVER_DISC)[:, np.newaxis]
    darkening.setflags(write=False)
    return Disc(SUN_RADIUS, darkening)
