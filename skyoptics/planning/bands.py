"""The coloured bands that features draw on the sky: where each colour stands, with its true width.

A primary bow is red outside, a secondary red inside, halos are red towards the sun. Widths are those of the light's spread by
the index, without the sun's half degree: primary 40.65 to 42.37°, secondary 50.37 to 53.48° (handbook ch. 57, Table 57-1), ice
between its indices at 700 and 400 nm (`skyoptics.materials.index.ice`). What is only mirrored has no colours.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from skyoptics.crystals import arcs
from skyoptics.crystals.faces import unfold
from skyoptics.geometry.axes import around, direction
from skyoptics.materials.index import ice
from skyoptics.planning.curves import ZenithArc
from skyoptics.planning.features import Feature
from skyoptics.units import DEG, NM, FloatArray

SPECTRUM = ("#ff5a4a", "#ff9d3c", "#ffe45c", "#6fdc7a", "#45bdf2", "#6c86ff", "#b48bff")
"""Red to violet, as bright as a dark ground needs: to look at, not to measure by."""
WHITE = "#e9edf3"
"""Of what has no colours."""
PRIMARY_WIDTH, SECONDARY_WIDTH = 1.72 * DEG, 3.11 * DEG
"""Red to violet edge [rad]."""

_POINTS = 721
_STRIPS = 14
_LINE = (700.0 * NM, 400.0 * NM)


class Band(NamedTuple):
    """One stretch of a feature.

    Parameters
    ----------
    edges : ndarray, shape (s, n, 3)
        Unit vectors of s neighbouring lines from the red to the violet edge, point by point side by side; a single line, or
        spots of a single point each, where n is 1.
    colours : tuple of str
        Of the s − 1 strips between the lines; of the line or of each spot where there are no strips.
    diffuse : bool
        Whether the line is the outline of a glow.
    """

    edges: FloatArray
    colours: tuple[str, ...]
    diffuse: bool = False


def bands(feature: Feature, sun_azimuth: float, sun_elevation: float) -> list[Band]:
    """Return the bands of a feature; empty where it does not exist.

    Parameters
    ----------
    feature : Feature
        From `skyoptics.planning.features.find`.
    sun_azimuth, sun_elevation : float
        Of what lights it [rad].
    """
    if feature.about == "antisolar" and feature.radius_deg is not None:
        return [_bow(feature, -direction(sun_azimuth, sun_elevation))]
    entry = arcs.feature(feature.name)
    lines = _branches(*feature.outline(sun_azimuth, sun_elevation))
    if entry.kind == "diffuse" or unfold(entry.crystals[0].sequences[0]).wedge < 1e-6:
        return [Band(line[None], (WHITE,), entry.kind == "diffuse") for line in lines]
    index = ice()(np.array(_LINE)).real
    ends = [_outline(feature, sun_azimuth, sun_elevation, float(n)) for n in index]
    if len(ends[0]) != len(ends[1]):
        return [Band(line[None], (WHITE,)) for line in lines]
    return [_between(red, violet) for red, violet in zip(*ends, strict=True)]


def _bow(feature: Feature, antisolar: FloatArray) -> Band:
    """Return a bow, the radius being that of its outermost colour."""
    outer = (feature.radius_deg or 0.0) * DEG
    width = SECONDARY_WIDTH if feature.name == "secondary" else PRIMARY_WIDTH
    red, violet = (outer - width, outer) if feature.name == "secondary" else (outer, outer - width)
    turn = np.linspace(0.0, 2.0 * np.pi, _POINTS)
    radii = np.linspace(red, max(violet, 0.0), _STRIPS + 1)
    edges = np.stack([around(antisolar, radius, turn) for radius in radii])
    return Band(edges, (WHITE,) * _STRIPS if feature.name == "fogbow" else _colours(_STRIPS))


def _outline(feature: Feature, sun_azimuth: float, sun_elevation: float, index: float) -> list[FloatArray]:
    """Return the branches of a halo at another index."""
    if isinstance(feature.curve, ZenithArc):
        azimuth, elevation = ZenithArc(index, feature.curve.zenithal).outline(sun_elevation)
    else:
        azimuth, elevation = arcs.locus(feature.name, sun_elevation, index)
    return _branches(azimuth + sun_azimuth, elevation)


def _branches(azimuth: FloatArray, elevation: FloatArray) -> list[FloatArray]:
    """Return the branches of an outline as unit vectors (n, 3)."""
    there = np.isfinite(azimuth)
    starts = np.flatnonzero(there & ~np.concatenate([[False], there[:-1]]))
    ends = np.flatnonzero(there & ~np.concatenate([there[1:], [False]])) + 1
    return [direction(azimuth[a:b], elevation[a:b]) for a, b in zip(starts, ends, strict=True)]


def _between(red: FloatArray, violet: FloatArray) -> Band:
    """Return the strips between two lines; points are put side by side by their share of the length."""
    count = 1 if len(red) == len(violet) == 1 else _POINTS
    first, last = _resampled(red, count), _resampled(violet, count)
    if np.sum(first * last[::-1]) > np.sum(first * last):
        last = last[::-1]
    share = np.linspace(0.0, 1.0, _STRIPS + 1)[:, None, None]
    edges = (1.0 - share) * first + share * last
    edges /= np.linalg.norm(edges, axis=-1, keepdims=True)
    return Band(edges, _colours(_STRIPS + (count == 1)))


def _resampled(line: FloatArray, count: int) -> FloatArray:
    """Return evenly spaced points of a line."""
    if count == 1 or len(line) == 1:
        return np.repeat(line[:1], count, axis=0)
    along = np.concatenate([[0.0], np.cumsum(np.linalg.norm(np.diff(line, axis=0), axis=1))])
    places = np.linspace(0.0, along[-1], count)
    points = np.stack([np.interp(places, along, line[:, axis]) for axis in range(3)], axis=-1)
    points /= np.linalg.norm(points, axis=1, keepdims=True)
    return points


def _colours(count: int) -> tuple[str, ...]:
    """Return that many colours from red to violet."""
    stops = np.array([[int(word[k : k + 2], 16) for k in (1, 3, 5)] for word in SPECTRUM], dtype=float)
    places = np.linspace(0.0, len(SPECTRUM) - 1.0, count)
    rgb = np.stack([np.interp(places, np.arange(len(SPECTRUM)), stops[:, k]) for k in range(3)], axis=-1)
    return tuple("#" + "".join(f"{round(value):02x}" for value in row) for row in rgb)
