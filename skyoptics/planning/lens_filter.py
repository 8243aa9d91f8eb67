"""Whether a feature fits a lens, asked for many instants: heights of the sun at which it does, worked out once."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from datetime import UTC, datetime
from functools import cache

from skyoptics.planning import framing
from skyoptics.planning.answers import Standing
from skyoptics.planning.features import Feature

STEP_DEG = 1.0
"""Between the sun's heights that are looked at first."""
PRECISION_DEG = 1e-4
"""Of the height at which it begins or ceases to fit: less than a tenth of a second of time."""

_ANY = Standing(datetime(2000, 1, 1, tzinfo=UTC), 0.0, 0.0, 0.0, 0.0, (), 0.0)


def fits(feature: Feature, camera: framing.Camera, hold: str = "whole") -> Callable[[Standing], bool]:
    """Return a test of standings: whether a camera, aimed at its best, holds the feature then.

    Parameters
    ----------
    feature : Feature
        Of `skyoptics.planning.features`.
    camera : Camera
        Lens, focal length and sensor.
    hold : {"whole", "feet", "pair"}
        What has to be held.

    Returns
    -------
    callable
        Standing → bool. It depends on the sun's height alone: an answer that is the same at two whole degrees holds between
        them too, else the height where it changes is found by halving. Where it changes twice within a degree, that
        is missed.
    """
    exact = framing.fits_standing(feature, camera, hold)

    @cache
    def at(height_deg: float) -> bool:
        return exact(replace(_ANY, sun_elevation_deg=height_deg))

    @cache
    def change(step: int) -> float:
        """Return where between two steps the answer changes [degrees]."""
        low, high = step * STEP_DEG, (step + 1) * STEP_DEG
        first = at(low)
        while high - low > PRECISION_DEG:
            middle = 0.5 * (low + high)
            low, high = (middle, high) if at(middle) == first else (low, middle)
        return 0.5 * (low + high)

    def test(standing: Standing) -> bool:
        height = standing.sun_elevation_deg
        step = math.floor(height / STEP_DEG)
        below, above = at(step * STEP_DEG), at((step + 1) * STEP_DEG)
        if below == above:
            return below
        return below if height < change(step) else above

    return test
