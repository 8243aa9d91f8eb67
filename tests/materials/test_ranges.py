import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.materials.ranges import within
from skyoptics.units import NM


def test_values_come_back_as_an_array_of_the_same_shape():
    assert within("length", [[1, 2]], 0.0, 3.0).shape == (1, 2)
    assert within("length", 1, 0.0, 3.0).shape == ()


def test_rounding_of_a_limit_is_let_through():
    limit = 200 * NM
    assert limit != 2e-7, "the case this test is about"
    within("wavelength", limit, 2e-7, 1.1e-6)
    within("wavelength", 2e-7, limit, 1.1e-6)
    within("wavelength", limit, 1e-7, 2e-7)
    within("wavelength", 2e-7, 1e-7, limit)


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf, 1100.1 * NM, 199.9 * NM])
def test_outside_is_refused_in_the_users_unit(bad):
    with pytest.raises(DomainError, match=r"wavelength must lie between 200 and 1100 nm, got .* nm"):
        within("wavelength", [500 * NM, bad], 200 * NM, 1100 * NM, "nm", NM)


def test_shifted_units_and_values_close_to_the_limit():
    with pytest.raises(DomainError, match=r"between -12 and 100 °C, got -13 °C"):
        within("temperature", 260.15, 261.15, 373.15, "°C", zero=273.15)
    with pytest.raises(DomainError, match=r"between 0 and 1, got 1\.0000001"):
        within("share", 1.0000001, 0.0, 1.0)


def test_open_limits_still_refuse_infinity():
    assert within("angle", 1e9, -np.inf, np.inf) == 1e9
    with pytest.raises(DomainError):
        within("angle", np.inf, -np.inf, np.inf)
