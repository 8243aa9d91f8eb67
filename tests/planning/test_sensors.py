"""Sensors, crops and equivalent focal lengths."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from skyoptics.camera.lenses import field_of_view
from skyoptics.errors import DomainError
from skyoptics.planning import sensors
from skyoptics.units import DEG, MM

SIDES = st.floats(1.0, 1000.0)


@pytest.mark.parametrize(
    ("text", "sides"),
    [
        ("36x24", (36.0, 24.0)),
        ("24x36", (24.0, 36.0)),
        ("23.6 × 15.7 mm", (23.6, 15.7)),
        ("Full Frame", (36.0, 24.0)),  # common practice, no source, as all names here
        ("micro_four_thirds", (17.3, 13.0)),
        ("APS-C", (23.6, 15.7)),
    ],
)
def test_find(text, sides):
    sensor = sensors.find(text)
    assert (sensor.width / MM, sensor.height / MM) == pytest.approx(sides)


def test_every_name_is_found_and_kept():
    for name in sensors.names():
        assert sensors.find(name).name == name
        assert sensors.find(name).orientation == "landscape"


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("fullfame", "did you mean full-frame"),
        ("0.5x24", "1 to 1000 mm"),
        ("36x", "such as 36x24"),
        ("nanx24", "such as 36x24"),
        ("", "such as 36x24"),
    ],
)
def test_refused(text, words):
    with pytest.raises(DomainError, match=words):
        sensors.find(text)


@given(SIDES, SIDES)
def test_held(width, height):
    sensor = sensors.Sensor(width * MM, height * MM)
    upright, level = sensor.held("portrait"), sensor.held("landscape")
    assert upright.height >= upright.width
    assert (level.width, level.height) == (upright.height, upright.width)
    with pytest.raises(DomainError, match="did you mean portrait"):
        sensor.held("portait")


@given(SIDES, SIDES, st.floats(1.0, 9.9))
def test_crop_is_the_largest_part(width, height, ratio):
    sensor = sensors.Sensor(width, height)
    part = sensor.cropped(f"{ratio:.6f}:1")
    short, long = sorted((part.width, part.height))
    assert long / short == pytest.approx(round(ratio, 6), rel=1e-9)
    assert part.width <= width * (1 + 1e-12)
    assert part.height <= height * (1 + 1e-12)
    # one side is kept whole, so no larger part has the aspect
    assert part.width == pytest.approx(width) or part.height == pytest.approx(height)


def test_crop_of_full_frame():
    part = sensors.find("36x24").cropped("16:9")
    assert (part.width / MM, part.height / MM) == pytest.approx((36.0, 20.25))
    part = sensors.find("36x24").held("portrait").cropped("16:9")
    assert (part.width / MM, part.height / MM) == pytest.approx((20.25, 36.0))


@pytest.mark.parametrize("aspect", ["16", "16:0", "a:b", "100:1"])
def test_crop_refused(aspect):
    with pytest.raises(DomainError):
        sensors.find("36x24").cropped(aspect)


def test_equivalent():
    # the same angle across the diagonal: 20 mm on 36 × 24 mm sees 94.5°: 2 atan(d / 2f), ray optics
    sensor = sensors.find("four-thirds")
    focal = sensors.from_equivalent(20.0 * MM, sensor)
    assert field_of_view("rectilinear", focal, sensor.diagonal) / DEG == pytest.approx(94.5, abs=0.05)
    assert focal / MM == pytest.approx(20.0 * math.hypot(17.3, 13.0) / math.hypot(36.0, 24.0))
    assert sensors.to_equivalent(focal, sensor) / MM == pytest.approx(20.0)
