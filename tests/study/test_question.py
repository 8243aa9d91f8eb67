"""What a study may be asked, and what it says to the rest."""

from __future__ import annotations

import numpy as np
import pytest

from skyoptics.errors import DomainError
from skyoptics.study.question import Question, values


def test_sweeps():
    assert values("radius_um", "10:1000:3") == (10.0, 100.0, 1000.0)  # even ratios
    assert values("temperature_c", "0:20:3") == (0.0, 10.0, 20.0)  # even steps
    assert values("radius_um", "10:1000:1") == (10.0,)
    assert values("radius_um", "20,5,100") == (20.0, 5.0, 100.0)
    assert values("radius_um", [20, 40]) == (20.0, 40.0)
    assert values("spread", 0) == (0.0,)
    assert len(values("wavelength_nm", "400:700:31")) == 31


@pytest.mark.parametrize(
    ("name", "given", "said"),
    [
        ("radius_um", "0", "1 to 5000 µm is allowed"),
        ("radius_um", "1000000", "1 to 5000 µm is allowed"),
        ("radius_um", "-5", "allowed"),
        ("radius_um", "nan", "allowed"),
        ("radius_um", "10:1000:0", "0 steps"),
        ("radius_um", "10:1000:-2", "-2 steps"),
        ("radius_um", "10:1000:2.5", "whole number"),
        ("radius_um", "10:1000", "start:stop:steps"),
        ("radius_um", "ten", "give a number"),
        ("radius_um", "", "give a number"),
        ("radius_um", "10:10:3", "twice"),
        ("radius_um", [], "0 steps"),
        ("spread", "0.6", "0 to 0.5"),
    ],
)
def test_bad_sweeps(name, given, said):
    with pytest.raises(DomainError, match=said):
        values(name, given)


@pytest.mark.parametrize(
    ("asked", "said"),
    [
        ({}, "radius_um or rain_mm_h"),
        ({"radius_um": (10.0,), "rain_mm_h": (1.0,)}, "one of the two"),
        ({"radius_um": (10.0, 20.0), "spread": (0.0, 0.1)}, "radius_um and spread"),
        ({"rain_mm_h": (1.0,), "spread": (0.0, 0.1)}, "spectrum of its own"),
        ({"radius_um": (10.0,), "temperature_c": (1.0, 2.0), "index": 1.33}, "does not depend on temperature"),
        ({"radius_um": (10.0,), "methods": ("mie", "ary")}, "did you mean airy"),
        ({"radius_um": (10.0,), "methods": ("mie", "mie")}, "different"),
        ({"radius_um": (10.0,), "methods": ()}, "one or several"),
        ({"radius_um": (10.0,), "index": 2.5}, "between 1 and 2"),
        ({"radius_um": (10.0,), "map_deg": (150.0, 130.0)}, "90 to 179"),
        ({"radius_um": (3000.0,)}, r"mie allows 50000.*up to 2546"),
        ({"radius_um": (10.0,), "tolerance": 0.0}, "tolerance"),
        ({"radius_um": (10.0,), "wavelength_nm": (200.0,)}, "200"),
    ],
)
def test_bad_questions(asked, said):
    with pytest.raises(DomainError, match=said):
        Question(**asked)


def test_steps_carry_what_they_stand_for():
    steps = Question(radius_um=(50.0,), spread=(0.0, 0.1, 0.2)).steps()
    assert [step.value for step in steps] == [0.0, 0.1, 0.2]
    assert all(step.radius_um == 50.0 for step in steps)
    warm = Question(radius_um=(50.0,), temperature_c=(0.0, 30.0)).steps()
    assert warm[0].law(550e-9).real > warm[1].law(550e-9).real
    rain = Question(rain_mm_h=(1.0, 10.0), wavelength_nm=(550.0,)).steps()
    assert rain[1].radius_um > rain[0].radius_um > 300.0
    assert np.isnan(rain[0].spread)
    assert Question(rain_mm_h=(1.0, 10.0)).sweep == "rain_mm_h"
