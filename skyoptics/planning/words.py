"""Directions and angles in words and short figures, for people in the field."""

from __future__ import annotations

from skyoptics.planning.answers import Standing

POINTS = ("N", "NNE", "NE", "ENE", "E", "ESE", "SE", "SSE", "S", "SSW", "SW", "WSW", "W", "WNW", "NW", "NNW")
"""Of the compass, clockwise from north."""
BOWS = ("primary", "secondary", "fogbow", "moonbow")
"""Features that drops make; all others are made by ice."""


def point(azimuth_deg: float) -> str:
    """Return the nearest of the sixteen points of the compass.

    Parameters
    ----------
    azimuth_deg : float
        Clockwise from north.
    """
    return POINTS[round(azimuth_deg / 22.5) % 16]


def direction(azimuth_deg: float) -> str:
    """Return point and azimuth, such as ``ESE (112°)``."""
    return f"{point(azimuth_deg)} ({round(azimuth_deg) % 360}°)"


def degrees(value_deg: float) -> str:
    """Return an angle to a tenth of a degree, without minus zero."""
    return f"{round(value_deg, 1) + 0.0:.1f}°"


def feet(at: Standing) -> str:
    """Return where a feature meets the horizon, such as ``66° and 150°``; empty where it does not."""
    return " and ".join(f"{round(azimuth) % 360}°" for azimuth in at.foot_azimuths_deg)


def lit_by(body: str) -> str:
    """Return the body with its article."""
    return f"the {body}"
