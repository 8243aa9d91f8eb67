import numpy as np
import pytest
from indicio_pages import page, table

from skyoptics.errors import DomainError
from skyoptics.materials import ice
from skyoptics.units import NM, UM

# Warren & Brandt, J. Geophys. Res. 113, D14220 (2008), doi 10.1029/2007JD009744, table 1
ROWS = [
    *[(350, 1.3249, 2.0e-11), (390, 1.3203, 2.0e-11), (400, 1.3194, 2.365e-11), (410, 1.3185, 2.669e-11)],
    *[(420, 1.3177, 3.135e-11), (430, 1.3170, 4.140e-11), (440, 1.3163, 6.268e-11), (450, 1.3157, 9.239e-11)],
    *[(460, 1.3151, 1.325e-10), (470, 1.3145, 1.956e-10), (480, 1.3140, 2.861e-10), (490, 1.3135, 4.172e-10)],
    *[(500, 1.3130, 5.889e-10), (510, 1.3126, 8.036e-10), (520, 1.3121, 1.076e-9), (530, 1.3117, 1.409e-9)],
    *[(540, 1.3114, 1.813e-9), (550, 1.3110, 2.289e-9), (560, 1.3106, 2.839e-9), (570, 1.3103, 3.461e-9)],
    *[(580, 1.3100, 4.159e-9), (590, 1.3097, 4.930e-9), (600, 1.3094, 5.730e-9), (610, 1.3091, 6.890e-9)],
    *[(620, 1.3088, 8.580e-9), (630, 1.3085, 1.040e-8), (640, 1.3083, 1.220e-8), (650, 1.3080, 1.430e-8)],
    *[(660, 1.3078, 1.660e-8), (670, 1.3076, 1.890e-8), (680, 1.3073, 2.090e-8), (690, 1.3071, 2.400e-8)],
    *[(700, 1.3069, 2.900e-8), (710, 1.3067, 3.440e-8), (720, 1.3065, 4.030e-8), (730, 1.3062, 4.300e-8)],
    *[(740, 1.3060, 4.920e-8), (750, 1.3059, 5.870e-8), (760, 1.3057, 7.080e-8), (770, 1.3055, 8.580e-8)],
    *[(780, 1.3053, 1.020e-7), (790, 1.3051, 1.180e-7), (800, 1.3049, 1.340e-7), (810, 1.3047, 1.400e-7)],
    *[(820, 1.3046, 1.430e-7), (830, 1.3044, 1.450e-7)],
]


@pytest.mark.parametrize(("nm", "n", "k"), ROWS)
def test_published_rows(nm, n, k):
    assert ice.index(nm * NM) == pytest.approx(n, abs=1e-12)
    assert ice.absorption(nm * NM) == pytest.approx(k, rel=1e-12)


def test_all_rows_against_the_database_copy():
    """Every row from 350 to 1100 nm as kept by refractiveindex.info (float32)."""
    entry = page("main", "H2O", "Warren-2008")
    wavelength, n = table(entry.n)
    _, k = table(entry.k)
    inside = (wavelength > 0.3499 * UM) & (wavelength < 1.1001 * UM)
    assert inside.sum() == 73
    wavelength = np.clip(wavelength[inside], ice.MINIMUM_WAVELENGTH, ice.MAXIMUM_WAVELENGTH)
    np.testing.assert_allclose(ice.index(wavelength), n[inside], rtol=0, atol=3e-7)
    np.testing.assert_allclose(ice.absorption(wavelength), k[inside], rtol=1e-5)


def test_interpolation_between_rows():
    assert ice.index(505 * NM) == pytest.approx((1.3130 + 1.3126) / 2, abs=1e-12)
    assert ice.absorption(505 * NM) == pytest.approx(np.sqrt(5.889e-10 * 8.036e-10), rel=1e-12)


def test_straight_lines_over_twice_the_step_still_meet_the_rows():
    """Leave every other row out: what is missed is the print's rounding (1e-4) and four times the curvature over 10 nm."""
    nm = np.arange(400, 831, 20)
    gap = (ice.index(nm[:-1] * NM) + ice.index(nm[1:] * NM)) / 2 - ice.index((nm[:-1] + 10) * NM)
    assert np.abs(gap).max() < 1.5e-4


def test_mean_of_the_two_axes_at_the_sodium_line():
    """(2 n_o + n_e)/3 from n_o 1.3091 and n_e 1.3105 (Hobbs, Ice Physics, 1974; from memory), tolerance 2e-4."""
    assert ice.index(589.3 * NM) == pytest.approx((2 * 1.3091 + 1.3105) / 3, abs=2e-4)


@pytest.mark.parametrize("nm", [349, 1101, np.nan])
@pytest.mark.parametrize("call", [ice.index, ice.absorption])
def test_outside_the_rows(call, nm):
    with pytest.raises(DomainError, match="between 350 and 1100 nm"):
        call(nm * NM)
