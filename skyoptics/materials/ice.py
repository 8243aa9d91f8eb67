"""Ice Ih: real index and absorption.

S. G. Warren & R. E. Brandt, *Optical constants of ice from the ultraviolet to the microwave: A revised compilation*,
J. Geophys. Res. 113, D14220 (2008), doi 10.1029/2007JD009744: 266 K, one index for all directions in the crystal (the
two indices of the uniaxial crystal differ by 0.0014). Below 0.6 µm absorption is disputed (Picard, Libois & Arnaud, The
Cryosphere 10, 2655 (2016)); in a single crystal below 1 mm it takes less than 1e-4 either way.
"""

from __future__ import annotations

import numpy as np

from skyoptics.materials.ranges import within
from skyoptics.units import NM, ArrayLike, FloatArray

MINIMUM_WAVELENGTH = 0.35e-6
MAXIMUM_WAVELENGTH = 1.1e-6
"""Range of the rows kept here [m]; the published table goes further."""

# Warren & Brandt 2008, table 1: wavelength [nm], n, k
_WARREN_BRANDT = """
350 1.3249 2.000e-11     390 1.3203 2.000e-11     400 1.3194 2.365e-11     410 1.3185 2.669e-11
420 1.3177 3.135e-11     430 1.3170 4.140e-11     440 1.3163 6.268e-11     450 1.3157 9.239e-11
460 1.3151 1.325e-10     470 1.3145 1.956e-10     480 1.3140 2.861e-10     490 1.3135 4.172e-10
500 1.3130 5.889e-10     510 1.3126 8.036e-10     520 1.3121 1.076e-9      530 1.3117 1.409e-9
540 1.3114 1.813e-9      550 1.3110 2.289e-9      560 1.3106 2.839e-9      570 1.3103 3.461e-9
580 1.3100 4.159e-9      590 1.3097 4.930e-9      600 1.3094 5.730e-9      610 1.3091 6.890e-9
620 1.3088 8.580e-9      630 1.3085 1.040e-8      640 1.3083 1.220e-8      650 1.3080 1.430e-8
660 1.3078 1.660e-8      670 1.3076 1.890e-8      680 1.3073 2.090e-8      690 1.3071 2.400e-8
700 1.3069 2.900e-8      710 1.3067 3.440e-8      720 1.3065 4.030e-8      730 1.3062 4.300e-8
740 1.3060 4.920e-8      750 1.3059 5.870e-8      760 1.3057 7.080e-8      770 1.3055 8.580e-8
780 1.3053 1.020e-7      790 1.3051 1.180e-7      800 1.3049 1.340e-7      810 1.3047 1.400e-7
820 1.3046 1.430e-7      830 1.3044 1.450e-7      840 1.3042 1.510e-7      850 1.3040 1.830e-7
860 1.3039 2.150e-7      870 1.3037 2.650e-7      880 1.3035 3.350e-7      890 1.3033 3.920e-7
900 1.3032 4.200e-7      910 1.3030 4.440e-7      920 1.3028 4.740e-7      930 1.3027 5.110e-7
940 1.3025 5.530e-7      950 1.3023 6.020e-7      960 1.3022 7.550e-7      970 1.3020 9.260e-7
980 1.3019 1.120e-6      990 1.3017 1.330e-6      1000 1.3015 1.620e-6     1010 1.3014 2.000e-6
1020 1.3012 2.250e-6     1030 1.3010 2.330e-6     1040 1.3009 2.330e-6     1050 1.3007 2.170e-6
1060 1.3005 1.960e-6     1070 1.3003 1.810e-6     1080 1.3002 1.740e-6     1090 1.3000 1.730e-6
1100 1.2998 1.700e-6
"""
_ROWS = np.array(_WARREN_BRANDT.split(), dtype=np.float64).reshape(-1, 3)


def index(wavelength: ArrayLike) -> FloatArray:
    """Return the real index of ice, relative to vacuum.

    Parameters
    ----------
    wavelength : array_like
        Vacuum wavelength, 0.35 to 1.1 µm [m].

    Returns
    -------
    ndarray
        n at 266 K, linear between rows; printed to 1e-4, which leaves ±0.004° on the 22° halo and ±0.011° on the 46°
        halo. Rows stand 10 nm apart from 390 nm on; in the gap from 350 to 390 nm the straight line is up to 2e-4 high.

    Raises
    ------
    DomainError
        Outside this range.
    """
    return np.interp(_checked(wavelength), _ROWS[:, 0] * NM, _ROWS[:, 1])


def absorption(wavelength: ArrayLike) -> FloatArray:
    """Return the imaginary index k of ice.

    Parameters
    ----------
    wavelength : array_like
        Vacuum wavelength, 0.35 to 1.1 µm [m].

    Returns
    -------
    ndarray
        k ≥ 0 at 266 K, ln k linear between rows; the absorption coefficient is 4πk divided by the vacuum wavelength.

    Raises
    ------
    DomainError
        Outside this range.
    """
    return np.exp(np.interp(_checked(wavelength), _ROWS[:, 0] * NM, np.log(_ROWS[:, 2])))


def _checked(wavelength: ArrayLike) -> FloatArray:
    return within("wavelength in ice", wavelength, MINIMUM_WAVELENGTH, MAXIMUM_WAVELENGTH, "nm", NM)
