"""Names of bows where they are seen in a picture, and circles about the antisolar point with their angle.

- A *bow* is named where it is brighter than the sky on both sides (`skyoptics.rendering.profiles`).
- The *dark band* is named where the sky between the bows is darker than inside the primary and outside the secondary, as
  far as the frame holds them; not for drops so small that waves fill it.
- *Supernumerary bows* are named where the luminance across the primary has further maxima inside it; drops shown by rays
  alone have none.
- *Glory and corona* are named where small drops brighten the sky about the antisolar point or the source.
- *Circles* have the radius of the bow's ray in closed form (`skyoptics.optics.bows`) at `features.WAVELENGTH`; waves shift
  the bows of small drops inwards from there.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from itertools import takewhile

import numpy as np

from skyoptics.camera import overlay
from skyoptics.figures.annotated import Arc
from skyoptics.figures.placement import Label
from skyoptics.geometry.axes import around, azimuth_elevation
from skyoptics.optics import bows
from skyoptics.rendering.build import Job
from skyoptics.rendering.features import REACH, SMALL_DROPS, WAVELENGTH, WIDTH, Line, framed, lines, missing
from skyoptics.rendering.profiles import measure, sampled
from skyoptics.rendering.rain import DropSheet
from skyoptics.rendering.run import Result
from skyoptics.units import DEG, BoolArray, FloatArray
from skyoptics.words.table import say

SEEN = 0.03
"""Contrast from which a bow, the dark band, a glory or a corona is named."""
RIPPLE = 0.015
"""Height of a supernumerary's maximum over the deeper hollow beside it, as a share, from which it counts."""
BESIDE = 3.0 * DEG
"""From the edge of the dark band to the sky that it is compared with [rad]."""
SHIFTED = 0.7 * DEG
"""Shift of a bow by waves from which its circle says that it is that of rays [rad]."""
FILLED = 2.0 * DEG
"""Shift from which waves fill the dark band [rad]."""

_WEIGHTS = {"primary_bow": 4.0, "moonbow": 4.0, "fogbow": 4.0, "secondary_bow": 2.0, "glory": 2.0, "corona": 2.0}
_TURNS = np.linspace(-np.pi, np.pi, 721)
_CIRCLE = np.linspace(-np.pi, np.pi, 2161)
_WIDE = 6.0 * DEG
_STEP = 0.05 * DEG


def bow_labels(result: Result, lang: str = "en") -> list[tuple[float, str, Label]]:
    """Return what is seen of bows in a picture: importance, name, label.

    Parameters
    ----------
    result : Result
        Of a scene with or without drops.
    lang : str
        Language of the labels.

    Returns
    -------
    list of (float, str, Label)
        Names are keys of the group "feature" of `skyoptics.words.table`. Importance is contrast, that of the bows
        themselves counting most.
    """
    if not any(isinstance(sheet, DropSheet) for sheet in result.job.sheets):
        return []
    luminance = np.asarray(result.xyz[..., 1:2], dtype=np.float64)
    found = []
    for name, anchors in _seen(result, luminance):
        text = say(f"feature.{name}", lang)
        weight = _WEIGHTS.get(name, 0.5) * float(anchors[:, 2].max())
        found.append((weight, name, Label(text[:1].upper() + text[1:], anchors)))
    return found


def bow_circles(job: Job, lang: str = "en") -> list[Arc]:
    """Return the circles of primary and secondary about the antisolar point that run through a picture.

    Parameters
    ----------
    job : Job
    lang : str
        Language of the angle.

    Returns
    -------
    list of Arc
        Points in pixels, and the angle of the bow's ray at `features.WAVELENGTH`.
    """
    found = []
    centre = -job.sources[0].direction
    for line in _bow_lines(job):
        radius = _ray_radius(job, line)
        if line.name.startswith("reflected") or not np.isfinite(radius):
            continue
        points = overlay.curve(job.directions, *azimuth_elevation(around(centre, radius, _CIRCLE)))
        if len(points):
            key = "mark.ray_angle" if line.reach - REACH > SHIFTED else "mark.angle"
            found.append(Arc(points, say(key, lang, angle=radius / DEG)))
    return found


def _bow_lines(job: Job) -> list[Line]:
    """Return the lines of the bows, which come before all halos."""
    return list(takewhile(lambda line: line.name.endswith("_bow"), lines(job)))


def _ray_radius(job: Job, line: Line) -> float:
    """Return the angle of a bow's ray from the antisolar point [rad]; nan where there is no bow."""
    order = 3 if line.name.endswith("secondary_bow") else 2
    sheet = next(sheet for sheet in job.sheets if isinstance(sheet, DropSheet) and order in sheet.orders)
    index = complex(np.atleast_1d(sheet.index(np.array([WAVELENGTH])))[0])
    return float(np.pi - bows.scattering_angle(index.real, order))


def _seen(result: Result, luminance: FloatArray) -> Iterator[tuple[str, FloatArray]]:
    """Yield names and anchors (m, 3): column, row, contrast."""
    job = result.job
    there = {line.name: line for line in _bow_lines(job) if missing(line, job) is None}
    for name, line in there.items():
        anchors = _along(line, job, luminance)
        if len(anchors):
            yield _called(name, job), anchors
    waves = max((line.reach - REACH for line in there.values()), default=0.0)
    if there and waves < FILLED and {"primary_bow", "secondary_bow"} <= {line.name for line in _bow_lines(job)}:
        anchors = _dark_band(job, luminance)
        if len(anchors):
            yield "alexander_band", anchors
    if "primary_bow" in there and _fringed(result):
        anchors = _fringes(there["primary_bow"], job, luminance)
        if len(anchors):
            yield "supernumerary_bows", anchors
    for name, centre in (("glory", -job.sources[0].direction), ("corona", job.sources[0].direction)):
        anchors = _rings(centre, result, luminance)
        if len(anchors):
            yield name, anchors


def _called(name: str, job: Job) -> str:
    """Return the name under which a bow is known: of fog, of the moon."""
    if name != "primary_bow":
        return name
    radii = [sheet.radius for sheet in job.sheets if isinstance(sheet, DropSheet) and 2 in sheet.orders]
    if max(radii, default=1.0) <= SMALL_DROPS:
        return "fogbow"
    return "moonbow" if job.by_moon else name


def _along(line: Line, job: Job, luminance: FloatArray) -> FloatArray:
    if line.reach - REACH < FILLED:  # else the look across would reach into the other bow
        line = replace(line, width=WIDTH)
    found = measure(line, job.directions, luminance, job.sources[0], key=0)
    if found is None or not found.peaked:
        return np.empty((0, 3))
    return _anchors(job, found.views, _excess(found.on[:, 0], found.beside[:, 0]) - 2.0 * found.noise)


def _dark_band(job: Job, luminance: FloatArray) -> FloatArray:
    """Return anchors in the middle of the dark band, or as near to it as the frame lets."""
    primary, secondary = (line for line in _bow_lines(job) if not line.name.startswith("reflected"))
    inner, outer = _ray_radius(job, primary), _ray_radius(job, secondary)
    if not inner + 3.0 * DEG < outer:  # false for nan too
        return np.empty((0, 3))
    centre = -job.sources[0].direction
    grid = job.directions

    def ring(radius: float, above: BoolArray) -> FloatArray:
        """Return the luminance where the drops are lit, and sky is set against sky, ground against ground."""
        views = around(centre, radius, _TURNS)
        lit = primary.lit(*azimuth_elevation(views)) & secondary.lit(*azimuth_elevation(views))
        return np.where(lit & ((views[:, 2] > 0.0) == above), sampled(grid, luminance, views)[:, 0], np.nan)

    best = np.empty((0, 3))
    middle, half = 0.5 * (inner + outer), 0.5 * (outer - inner) - 1.5 * DEG
    for part in (0.0, 0.5, -0.5, 1.0, -1.0):
        radius = middle + part * half
        views = around(centre, radius, _TURNS)
        above = views[:, 2] > 0.0
        around_it = np.fmin(ring(inner - BESIDE, above), ring(outer + BESIDE, above))
        anchors = _anchors(job, views, _excess(around_it, ring(radius, above)))
        if len(anchors) > 1.5 * len(best):
            best = anchors
    return best


def _fringed(result: Result) -> bool:
    """Return whether some drops of a picture are shown by waves."""
    names = {sheet.name for sheet in result.job.sheets if isinstance(sheet, DropSheet)}
    return any(
        sheet["name"] in names and str(sheet.get("method", "rays")) != "rays" for sheet in result.report["sheets"]
    )


def _fringes(primary: Line, job: Job, luminance: FloatArray) -> FloatArray:
    """Return anchors on the first maximum inside the primary's own, where there is one."""
    from scipy.signal import find_peaks

    shift = primary.reach - REACH
    radius = float(np.arccos(np.clip(np.nanmean(primary.views @ primary.centre), -1.0, 1.0)))
    offset = np.arange(radius - _WIDE - 6.0 * shift, radius + REACH + shift, _STEP)
    offset = offset[offset > 2.0 * DEG]
    turns = _TURNS[::4]
    views = around(primary.centre, offset[:, None], turns[None, :])
    values = sampled(job.directions, luminance, views)[..., 0]
    above = around(primary.centre, radius, turns)[:, 2] > 0.0
    values = np.where(primary.lit(*azimuth_elevation(views)) & ((views[..., 2] > 0.0) == above), values, np.nan)
    found = []
    for number, turn in enumerate(turns):
        column = values[:, number]
        whole = np.flatnonzero(np.isfinite(column) & (column > 0.0))
        if len(whole) < 3 or np.any(np.diff(whole) > 1):
            continue
        log = np.log(column[whole])
        peaks, about = find_peaks(log, prominence=RIPPLE)
        own = [k for k in peaks if abs(offset[whole[k]] - radius) <= REACH + shift]
        if not own:
            continue
        main = max(own, key=lambda k: log[k])
        inside = [(about["prominences"][i], k) for i, k in enumerate(peaks) if k < main]
        if inside:
            prominence, k = inside[-1]
            found.append((around(primary.centre, offset[whole[k]], turn), float(prominence)))
    if not found:
        return np.empty((0, 3))
    return _anchors(job, np.array([view for view, _ in found]), np.array([height for _, height in found]), RIPPLE)


def _rings(centre: FloatArray, result: Result, luminance: FloatArray) -> FloatArray:
    """Return anchors on the first ring about the source or opposite to it, where small drops brighten it."""
    job = result.job
    small = [s for s in job.sheets if isinstance(s, DropSheet) and s.radius <= SMALL_DROPS]
    if not small or not _fringed(result) or not framed(job.directions, centre):
        return np.empty((0, 3))
    scale = 1.22 * WAVELENGTH / (2.0 * min(sheet.radius for sheet in small))  # first dark ring of a disc
    turns = _TURNS[::8]
    lit = small[0].amount

    def ring(radius: float) -> FloatArray:
        views = around(centre, radius, turns)
        there = np.any(lit(*azimuth_elevation(views), job.sources[0]) > 0.0, axis=-1)
        return np.where(there, sampled(job.directions, luminance, views)[:, 0], np.nan)

    contrast = _excess(ring(0.7 * scale), ring(3.5 * scale))
    return _anchors(job, around(centre, 0.7 * scale, turns), contrast)


def _excess(on: FloatArray, beside: FloatArray) -> FloatArray:
    """Return by how much one luminance exceeds another, as a share; 0 where one of them is missing."""
    good = np.isfinite(on) & np.isfinite(beside) & (np.nan_to_num(beside) > 0.0)
    return np.where(good, np.divide(on, beside, out=np.ones_like(on), where=good) - 1.0, 0.0)


def _anchors(job: Job, views: FloatArray, contrast: FloatArray, least: float = SEEN) -> FloatArray:
    """Return places in the picture as column, row, contrast, those above the least."""
    keep = np.isfinite(contrast) & (contrast >= least) & framed(job.directions, views)
    row, column = job.directions.project(views[keep])
    return np.column_stack([column, row, np.minimum(contrast[keep], 1.0)]).reshape(-1, 3)
