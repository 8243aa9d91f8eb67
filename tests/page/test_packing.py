"""Numbers of a page survive their packing."""

from base64 import b64decode

import numpy as np
import pytest

from skyoptics.page import packing


def unpacked(text, kind):
    return np.frombuffer(b64decode(text), dtype=f"<{kind}")


def test_codes_keep_five_digits_over_six_powers_of_ten():
    values = np.geomspace(1e-3, 1e3, 1001)
    lowest, highest = packing.limits(values)
    code = packing.codes(values, lowest, highest)
    back = lowest * (highest / lowest) ** ((code.astype(float) - 1) / packing.CODES)
    assert back == pytest.approx(values, rel=1.1e-4)
    assert code[0] == 1
    assert code[-1] == 65535


def test_nothing_has_a_code_of_its_own():
    assert packing.codes([0.0, -1.0, np.nan, np.inf, 2.0], 1.0, 10.0).tolist()[:4] == [0, 0, 0, 0]
    assert packing.codes([2.0], 1.0, 10.0)[0] > 0


@pytest.mark.parametrize("values", [[], [0.0, np.nan], [3.0, 3.0]])
def test_limits_always_span_something(values):
    lowest, highest = packing.limits(values)
    assert 0.0 < lowest < highest


def test_spectra():
    values = np.array([[[0.0, 0.5, 1.0], [2.0, 4.0, 8.0]], [[np.nan] * 3, [0.0] * 3]])
    packed = packing.spectra(values)
    shapes = unpacked(packed["shapes"], "u1").reshape(2, 2, 3)
    peaks = unpacked(packed["peaks"], "u2").reshape(2, 2)
    assert shapes[0].tolist() == [[0, 128, 255], [64, 128, 255]]
    assert shapes[1].max() == 0
    assert peaks.tolist() == [[1, 65535], [0, 0]]
