"""Circles, spots and diffuse regions, and how light of the same faces is shared out among features.

Closed forms, h the sun's elevation:

- least deviation D = 2 asin(n sin(A/2)) − A of a wedge A
- parhelia (Bravais 1847): azimuth 2 asin(n'/2) − 60°, n' = √(n² − sin²h) / cos h ≤ 2
- join of the tangent arcs: every level axis allows least deviation when 90° − h is no higher than the last parhelia,
  cos²h ≤ (4 − n²)/3
"""

from __future__ import annotations

import numpy as np

from skyoptics.crystals.arc_feature import Feature
from skyoptics.crystals.arc_loci import STEP
from skyoptics.crystals.faces import unfold
from skyoptics.geometry.axes import around, direction
from skyoptics.units import DEG, ArrayLike, BoolArray, FloatArray

ANTHELIC_RADIUS = 60.0 * DEG
"""Light farther from the anthelic point does not count as diffuse arcs [rad]."""
PILLAR_REACH = 3.5
"""Largest tilt of a pillar's faces in units of the tilt spread: Fisher's law leaves exp(−3.5²/2) = 0.2 % beyond."""
BAND = 1.0 * DEG
"""Half height of the region of the Liljequist parhelia [rad]."""


def circle_radius(sequence: tuple[int, ...], index: float) -> float:
    """Return least deviation [rad], nan where no light passes the wedge."""
    wedge = unfold(sequence).wedge
    sine = index * np.sin(wedge / 2.0)
    return float(2.0 * np.arcsin(sine) - wedge) if sine < 1.0 else float("nan")


def parhelion_azimuth(sun_elevation: float, index: float) -> float:
    """Return the azimuth of the parhelia from the sun [rad], nan where there are none."""
    square = index**2 - np.sin(sun_elevation) ** 2
    half = 0.5 * np.sqrt(square) / max(np.cos(sun_elevation), 1e-300)
    return float(2.0 * np.arcsin(half) - np.pi / 3.0) if half <= 1.0 else float("nan")


def tangent_join(index: float) -> float:
    """Return the sun's elevation from which the tangent arcs are one circumscribed halo [rad]; π/2 where they never are."""
    return float(np.arccos(np.sqrt(max(0.0, (4.0 - index**2) / 3.0)))) if index < 2.0 else np.pi / 2.0


def circle(sequence: tuple[int, ...], sun_elevation: float, index: float) -> list[FloatArray]:
    """Return the circle of least deviation about the sun, closed."""
    radius = circle_radius(sequence, index)
    if not np.isfinite(radius):
        return []
    count = int(np.ceil(2.0 * np.pi * np.sin(radius) / STEP)) + 1
    return [around(direction(0.0, sun_elevation), radius, np.linspace(0.0, 2.0 * np.pi, count))]


def spots(entry: Feature, sun_elevation: float, index: float) -> list[FloatArray]:
    """Return the points of a spot feature, each an array (1, 3), in order of azimuth."""
    offset = parhelion_azimuth(sun_elevation, index)
    lit = 0.0 < sun_elevation < np.pi / 2.0
    azimuth, elevation, there = {
        "parhelia": ((-offset, offset), sun_elevation, np.isfinite(offset)),
        "parhelia_44": ((-2.0 * offset, 2.0 * offset), sun_elevation, np.isfinite(offset)),
        "parhelia_120": ((-2.0 * np.pi / 3.0, 2.0 * np.pi / 3.0), sun_elevation, lit),
        "subsun": ((0.0,), -sun_elevation, sun_elevation > 0.0),
        "subparhelia": ((-offset, offset), -sun_elevation, np.isfinite(offset) and lit),
        "subparhelia_120": ((-2.0 * np.pi / 3.0, 2.0 * np.pi / 3.0), -sun_elevation, lit),
    }[entry.name]
    return [direction(angle, elevation)[None, :] for angle in azimuth] if there else []


def outline(entry: Feature, sun_elevation: float, index: float) -> list[FloatArray]:
    """Return the closed outlines of a diffuse region."""
    turn = np.linspace(0.0, 2.0 * np.pi, 4001)
    if entry.name == "greenler_diffuse":
        return [around(direction(np.pi, sun_elevation), ANTHELIC_RADIUS, turn)]
    if entry.name == "sun_pillar":
        tilt = PILLAR_REACH * entry.tilt
        normal = around(np.array([0.0, 0.0, 1.0]), tilt, turn)
        sun = direction(0.0, sun_elevation)
        return [sun - 2.0 * (normal @ sun)[:, None] * normal]
    stretch = liljequist_stretch(sun_elevation, index)
    if stretch is None:
        return []
    count = int(np.ceil((stretch[1] - stretch[0]) / STEP)) + 1
    azimuth = np.linspace(*stretch, count)
    low, high = max(sun_elevation - BAND, -np.pi / 2.0), min(sun_elevation + BAND, np.pi / 2.0)
    rise = np.linspace(low, high, 25)
    corner = np.concatenate([azimuth, np.full(25, stretch[1]), azimuth[::-1], np.full(25, stretch[0])])
    height = np.concatenate([np.full(count, low), rise, np.full(count, high), rise[::-1]])
    return [direction(-corner, height), direction(corner, height)]


def liljequist_stretch(sun_elevation: float, index: float) -> tuple[float, float] | None:
    """Return the azimuths between which two side reflections by 120° and the 60° wedge send light, None for none.

    From 120° + least deviation to 120° + largest deviation of the wedge, light then grazing one face: it enters at 90°
    across the c-axis and leaves at asin(n' sin(60° − asin(1/n'))).
    """
    offset = parhelion_azimuth(sun_elevation, index)
    if not np.isfinite(offset):
        return None
    bravais = 2.0 * np.sin((offset + np.pi / 3.0) / 2.0)
    grazing = np.pi / 2.0 + np.arcsin(min(1.0, bravais * np.sin(np.pi / 3.0 - np.arcsin(1.0 / bravais)))) - np.pi / 3.0
    low, high = 2.0 * np.pi / 3.0 + offset, 2.0 * np.pi / 3.0 + grazing
    return (float(low), float(min(high, np.pi))) if low < np.pi else None


def inside(entry: Feature, view: ArrayLike, sun_elevation: float, index: float) -> BoolArray:
    """Return which directions lie in a diffuse region, shape (...,)."""
    view = np.asarray(view, dtype=np.float64)
    sun = direction(0.0, sun_elevation)
    if entry.name == "greenler_diffuse":
        return np.asarray(view @ direction(np.pi, sun_elevation) >= np.cos(ANTHELIC_RADIUS))
    if entry.name == "sun_pillar":
        # a mirror's normal is the bisector of the sun and the point opposite the image
        normal = sun - view
        length = np.linalg.norm(normal, axis=-1)
        return np.asarray(np.abs(normal[..., 2]) >= np.cos(PILLAR_REACH * entry.tilt) * length)
    stretch = liljequist_stretch(sun_elevation, index)
    if stretch is None:
        return np.zeros(view.shape[:-1], dtype=bool)
    azimuth = np.abs(np.arctan2(view[..., 0], view[..., 1]))
    level = np.abs(np.arcsin(np.clip(view[..., 2], -1.0, 1.0)) - sun_elevation) <= BAND
    return np.asarray((azimuth >= stretch[0] - BAND) & (azimuth <= stretch[1] + BAND) & level)


def in_part(part: str, view: ArrayLike, sun_elevation: float) -> BoolArray:
    """Return which light a feature keeps of all that takes its faces.

    Parameters
    ----------
    part : str
        ``all``; ``rising`` or ``sinking``: turned upwards or downwards about the level c-axis; ``anthelic``: within
        `ANTHELIC_RADIUS` of the anthelic point.
    view : array_like, shape (..., 3)
        Viewing directions, sun at azimuth 0.
    sun_elevation : float
        [rad]

    Notes
    -----
    Light that keeps its component along a level c-axis shifts the image v − s across it, so the level direction u across
    the axis is that of the level part of v − s, taken towards the sun; the image has risen where it turned from u towards
    the zenith: s·u v_z − v·u s_z > 0.
    """
    view = np.asarray(view, dtype=np.float64)
    sun = direction(0.0, sun_elevation)
    if part == "all":
        return np.ones(view.shape[:-1], dtype=bool)
    if part == "anthelic":
        return np.asarray(view @ direction(np.pi, sun_elevation) >= np.cos(ANTHELIC_RADIUS))
    level = view[..., :2] - sun[:2]
    level = np.where(np.sum(level * sun[:2], axis=-1, keepdims=True) < 0.0, -level, level)
    turned = (level @ sun[:2]) * view[..., 2] - np.sum(level * view[..., :2], axis=-1) * sun[2]
    # straight above or below the sun the axis is square to the vertical plane
    short = np.linalg.norm(level, axis=-1) < 1e-12
    turned = np.where(short, view[..., 2] - sun[2], turned)
    return np.asarray(turned > 0.0 if part == "rising" else turned <= 0.0)
