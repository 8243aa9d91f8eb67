"""Scene texts that the tests of scene files start from."""

import pytest

SHORTEST = """\
[light]
elevation_deg = 20

[[air]]
kind = "drops"
"""

FULL = """\
title = "Bow over the moor" # a comment with = and [brackets]
look_for = "The dark band between the bows."

[light]
elevation_deg = 20.5
azimuth_deg = -90
disc = "point"
attenuation = "none"
ozone_du = 250
aerosol_depth = 0.2
aerosol_exponent = 1
pressure_hpa = 900

[medium]
kind = "vacuum"

[[air]]
name = "rain"
kind = "drops"
radius_um = 250
temperature_c = 4
orders = [3, 2]
place = "curtain"
below_horizon = true
optical_depth = 0.3

[[air]]
kind = "drops"
index = 1.33
place = "layer"

[camera]
lens = "equidistant"
focal_mm = 12
sensor_mm = [24, 16]
height_px = 400
aim = { azimuth_deg = 90, elevation_deg = 10, roll_deg = 5 }

[picture]
wavelengths_nm = [
  450, # blue
  550,
  650,
]
exposure_ev = 12
background = 0.01
ground = 0.1
observer = "1964"
depth_bits = 16
"""

PANORAMA = """\
light.elevation_deg = 5
light."azimuth_deg" = 270
air = [ { kind = "drops", radius_um = 1000 } ]
[camera]
lens = "panorama"
width_deg = 90
height_deg = 45
aim = "sun"
[picture]
bin_nm = 10
"""


@pytest.fixture
def shortest() -> str:
    """The shortest scene there is."""
    return SHORTEST


@pytest.fixture
def full() -> str:
    """A scene with nearly every key."""
    return FULL


@pytest.fixture
def texts() -> list[str]:
    """Valid scenes written in several ways."""
    return [SHORTEST, FULL, PANORAMA]
