"""The quick test of a lens against the exact one."""

from datetime import UTC, datetime

import pytest

from skyoptics.planning import features, framing, lens_filter, sensors
from skyoptics.planning.answers import Standing
from skyoptics.units import MM


@pytest.mark.parametrize(("name", "hold", "focal"), [("primary", "whole", 24.0), ("parhelia", "pair", 43.0)])
def test_same_as_the_exact_one(name, hold, focal):
    camera = framing.Camera("rectilinear", focal * MM, sensors.find("36x24"))
    feature = features.find(name)
    quick, exact = lens_filter.fits(feature, camera, hold), framing.fits_standing(feature, camera, hold)
    answers = []
    for k in range(14):
        at = Standing(datetime(2027, 5, 1, tzinfo=UTC), 100.0 + k, 0.03 + 3.13 * k, 0.0, 0.0, (), 0.5)
        answers.append(exact(at))
        assert quick(at) == answers[-1]
    assert {True, False} == set(answers)
