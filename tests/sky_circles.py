"""Circles on the sky, straight from the conventions of `skyoptics.geometry.axes`: what tests of planning take for a feature."""

import numpy as np

from skyoptics.geometry.axes import around, azimuth_elevation, direction
from skyoptics.units import DEG


def circle(radius_deg, sun_azimuth_deg, sun_elevation_deg, centre=-1.0):
    """Azimuth and elevation of a bow (centre −1) or a halo (+1), 0.1° apart, below the horizon too [rad]."""
    middle = centre * direction(sun_azimuth_deg * DEG, sun_elevation_deg * DEG)
    return azimuth_elevation(around(middle, radius_deg * DEG, np.linspace(0.0, 2.0 * np.pi, 3601)))
