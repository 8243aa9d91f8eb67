"""Where the features of a scene stand, whether the frame holds them, and what to say if it holds none."""

from __future__ import annotations

from collections.abc import Callable, Collection, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np

from skyoptics.crystals.arcs import feature, locus
from skyoptics.droplets import airy
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import angle_between, around, azimuth_elevation, direction
from skyoptics.geometry.directions import Directions
from skyoptics.optics import bows
from skyoptics.optics.source import Source
from skyoptics.rendering.build import Job
from skyoptics.rendering.clouds import CrystalSheet
from skyoptics.rendering.expose import sorter_of
from skyoptics.rendering.named import FURTHER, OTHER
from skyoptics.rendering.rain import DropSheet
from skyoptics.rendering.scatter import ICE_INDEX
from skyoptics.units import DEG, BoolArray, FloatArray

WAVELENGTH = 560e-9
"""Where bows are looked for [m]: the middle of the eye's range."""
SMALL_DROPS = 50e-6
"""Drops up to this radius show coronae and glories [m]."""
REACH = 1.5 * DEG
"""How far from a line its maximum is looked for, unless a wave shifts it [rad]."""
WIDTH = 1.0 * DEG
"""Width of a feature that cannot be measured [rad]."""

_BOWS = {2: ("primary_bow", "bow"), 3: ("secondary_bow", "secondary bow")}
_TOLD = 4


@dataclass(frozen=True, eq=False)
class Line:
    """Where a feature stands.

    Parameters
    ----------
    name, title : str
        Of the feature.
    kind : str
        "curve", "spot" or "diffuse".
    views : ndarray, shape (m, 3)
        Viewing directions, branches parted by nan; of a diffuse region its outline.
    centre : ndarray, shape (3,)
        Point about which it runs: the source, or the antisolar point.
    lit : callable
        Elevation [rad] → whether what makes the feature is there.
    reach : float
        How far from its line its maximum is looked for [rad].
    width : float
        Width that is taken where none can be measured [rad].
    """

    name: str
    title: str
    kind: str
    views: FloatArray
    centre: FloatArray
    lit: Callable[[FloatArray, FloatArray], BoolArray]
    reach: float = REACH
    width: float = WIDTH


def warning(job: Job) -> str | None:
    """Return what to say of a frame that holds no feature at all; None if it holds one.

    Parameters
    ----------
    job : Job
        Nothing needs to be traced.
    """
    found = []
    for sheet in job.sheets:
        if isinstance(sheet, DropSheet) and sheet.radius <= SMALL_DROPS:
            for view in (job.sources[0].direction, -job.sources[0].direction):
                if angle_between(view, _nearest(job.directions, view)) < 5.0 * DEG:
                    return None
    for line in lines(job):
        why = missing(line, job)
        if why is None:
            return None
        found.append(why[1])
    if not found:
        return None
    return "no feature stands in this frame: " + "; ".join(found[:_TOLD])


def lines(job: Job, without: Collection[str] = ()) -> Iterator[Line]:
    """Yield where the features of a job stand: bows of each source first, then halos of the first source.

    Parameters
    ----------
    job : Job
    without : collection of str, optional
        Halos that are not wanted.
    """
    for number, source in enumerate(job.sources):
        for order in _BOWS:
            sheets = [sheet for sheet in job.sheets if isinstance(sheet, DropSheet) and order in sheet.orders]
            if sheets:
                yield _bow(sheets, source, order, number > 0)
    source = job.sources[0]
    azimuth, elevation = azimuth_elevation(source.direction)
    held: dict[str, list[CrystalSheet]] = {}
    for sheet in job.sheets:
        if isinstance(sheet, CrystalSheet):
            for name in sorter_of(sheet, source).names:
                held.setdefault(name, []).append(sheet)
    for name in held:
        if name not in (OTHER, FURTHER, *without):
            entry = feature(name)
            away, height = locus(name, float(elevation), ICE_INDEX)
            views = direction(away + azimuth, height)
            kind = entry.kind if entry.kind in ("spot", "diffuse") else "curve"
            yield Line(name, entry.title, kind, views, source.direction, _lit(held[name], source))


def _bow(sheets: list[DropSheet], source: Source, order: int, mirrored: bool) -> Line:
    sheet = sheets[0]
    name, title = _BOWS[order]
    index = complex(np.atleast_1d(sheet.index(np.array([WAVELENGTH])))[0])
    angle = float(bows.scattering_angle(index.real, order))
    shift = 0.0
    try:
        place = float(airy.angle_at(complex(index.real), 2.0 * np.pi * sheet.radius / WAVELENGTH, 1.01879, order))
        angle, shift = place, abs(place - angle)
    except DomainError:  # no bow, or drops beyond Airy's range
        pass
    views = np.empty((0, 3))
    if np.isfinite(angle):
        views = around(-source.direction, np.pi - angle, np.linspace(-np.pi, np.pi, 3001))
    if mirrored:
        name, title = f"reflected_{name}", f"{title} of the light mirrored by water"
    width = max(WIDTH, 2.0 * shift)
    return Line(name, title, "curve", views, -source.direction, _lit(sheets, source), REACH + shift, width)


def _lit(sheets: list[Any], source: Source) -> Callable[[FloatArray, FloatArray], BoolArray]:
    def lit(azimuth: FloatArray, elevation: FloatArray) -> BoolArray:
        return np.any([np.any(sheet.amount(azimuth, elevation, source) > 0.0, axis=-1) for sheet in sheets], axis=0)

    return lit


def missing(line: Line, job: Job) -> tuple[str, str] | None:
    """Return why a feature is not in the frame: verdict and sentence; None if part of it is."""
    azimuth, height = (float(angle) / DEG for angle in azimuth_elevation(job.sources[0].direction))
    body = f"the {'moon' if job.by_moon else 'sun'} stands at {height:.0f}°"
    views = line.views[np.isfinite(line.views).all(axis=1)]
    several = line.title.endswith(("parhelia", "(sundogs)", "arcs"))
    name, verb = f"the {line.title}", "are" if several else "is"
    if not len(views):
        return "does not form", f"{name} {'do' if several else 'does'} not form: {body}"
    views = views[line.lit(*azimuth_elevation(views))]
    if not len(views):
        return "below the horizon", f"{name} {verb} below the horizon: {body}"
    if framed(job.directions, views).any():
        return None
    nearest = views[np.argmin(angle_between(views, _middle(job.directions)))]
    azimuth, height = (float(angle) / DEG for angle in azimuth_elevation(nearest))
    return (
        "outside the frame",
        f"{name} {verb} outside the frame, nearest at azimuth {round(azimuth) % 360}°, elevation {height:.0f}°",
    )


def _middle(grid: Directions) -> FloatArray:
    rows, columns = grid.shape
    return grid.unproject(np.array((rows - 1) / 2.0), np.array((columns - 1) / 2.0))


def _nearest(grid: Directions, view: FloatArray) -> FloatArray:
    """Return the direction of a coarse mesh over the picture that is nearest to one."""
    rows, columns = grid.shape
    mesh = grid.unproject(np.linspace(0, rows - 1, 25)[:, None], np.linspace(0, columns - 1, 25)[None, :])
    return np.asarray(mesh.reshape(-1, 3)[np.nanargmin(angle_between(mesh, view))])


def framed(grid: Directions, views: FloatArray) -> BoolArray:
    """Return which directions (…, 3) land in the picture, shape (…)."""
    row, column = grid.project(views)
    inside = (row >= -0.5) & (row <= grid.shape[0] - 0.5) & (column >= -0.5) & (column <= grid.shape[1] - 0.5)
    return np.asarray(inside)
