"""What a picture holds cell by cell, for readings under the pointer: spectra, and the arc or bow that stands there."""

from __future__ import annotations

from collections.abc import Mapping
from concurrent.futures import ThreadPoolExecutor
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from skyoptics.crystals.arcs import feature
from skyoptics.figures.placement import Label
from skyoptics.geometry.axes import angle_between
from skyoptics.optics.bins import Bins
from skyoptics.rendering.expose import group_side
from skyoptics.rendering.features import SMALL_DROPS
from skyoptics.rendering.labels import AROUND, DIFFUSE_SEEN, SEEN
from skyoptics.rendering.looking import look
from skyoptics.rendering.named import FURTHER, OTHER, in_cells, own_light
from skyoptics.rendering.rain import DropSheet
from skyoptics.rendering.run import Result
from skyoptics.units import DEG, FloatArray

MOST_BANDS = 40
"""Spectral bins that a page keeps; more are averaged together."""
NONE = 0
"""Code of a cell without a named arc."""

_REACH = {"alexander_band": 3.0 * DEG, "supernumerary_bows": 0.7 * DEG}
_BOW = 1.3 * DEG
_FOGBOW = 4.0 * DEG
_RING = 2.5 * DEG
_BEHIND = ("alexander_band", "supernumerary_bows", "secondary_bow")  # first named, first painted over
_ANCHORS = 1500


def spectra(result: Result, side: int, threads: int) -> FloatArray:
    """Return the mean spectral radiance of a picture's cells.

    Parameters
    ----------
    result : Result
        A finished render; its radiance is looked up again.
    side : int
        Pixels along the side of a cell.
    threads : int
        Worker threads.

    Returns
    -------
    ndarray, shape (rows, columns, nλ)
        Mean over the cell's pixels inside the image [W m⁻² sr⁻¹ nm⁻¹]; nan where there is none. Glare is not in it.
    """
    rows, columns = result.job.directions.shape
    total = np.zeros((-(-rows // side), -(-columns // side), len(result.job.bins)))
    count = np.zeros(total.shape[:2])
    starts = np.arange(0, columns, side)
    with ThreadPoolExecutor(threads) as executor:
        for part, block in look(result.job, result.sheets, executor, mirror=result.mirror):
            there = np.asarray(np.isfinite(block).all(axis=-1))
            row = np.arange(rows)[part] // side
            np.add.at(total, row, np.add.reduceat(np.where(there[..., None], block, 0.0), starts, axis=1))
            np.add.at(count, row, np.add.reduceat(there.astype(np.float64), starts, axis=1))
    return np.where(count[..., None] > 0.0, total / np.maximum(count, 1.0)[..., None], np.nan)


def bands(bins: Bins) -> list[slice]:
    """Return which bins are averaged together, so that at most `MOST_BANDS` are left."""
    edges = np.unique(np.linspace(0, len(bins), min(len(bins), MOST_BANDS) + 1).astype(int))
    return [slice(int(first), int(last)) for first, last in pairwise(edges)]


def banded(values: FloatArray, bins: Bins) -> tuple[FloatArray, FloatArray]:
    """Return values (…, nλ) averaged over `bands`, and the edges (n, 2) of these [m]."""
    width = np.where(bins.width > 0.0, bins.width, 1.0)
    parts = bands(bins)
    mean = np.stack([np.average(values[..., part], axis=-1, weights=width[part]) for part in parts], axis=-1)
    return mean, np.array([[bins.edges[part].min(), bins.edges[part].max()] for part in parts])


def arcs(result: Result, labels: Mapping[str, Label]) -> tuple[list[str], NDArray[np.uint8], int]:
    """Return which arc or bow stands in each cell of a picture.

    Parameters
    ----------
    result : Result
        A finished render.
    labels : mapping of str to Label
        What is seen in it (`skyoptics.rendering.labels.labels_by_name`).

    Returns
    -------
    names : list of str
        Names of features, code 1 the first.
    code : ndarray of uint8, shape (rows, columns)
        `NONE`, or the place of the name in the list, counted from 1.
    side : int
        Pixels along the side of a cell.
    """
    grid = result.job.directions
    side = group_side(grid.shape)
    names = list(labels)
    code = np.zeros((-(-grid.shape[0] // side), -(-grid.shape[1] // side)), dtype=np.uint8)
    bows = [name for name in (*_BEHIND, *labels) if name in labels and not _of_ice(name)]
    for name in dict.fromkeys(bows):
        code[_near(result, name, labels[name], side)] = 1 + names.index(name)
    own = _own(result, side)
    best = np.zeros(code.shape)
    for name, share in own.items():
        if name in names:
            better = share > np.maximum(best, DIFFUSE_SEEN if _diffuse(name) else SEEN)
            code[better] = 1 + names.index(name)
            best = np.where(better, share, best)
    return names, code, side


def _of_ice(name: str) -> bool:
    if name == FURTHER:
        return True
    try:
        feature(name)
    except ValueError:
        return False
    return True


def _diffuse(name: str) -> bool:
    return name == FURTHER or feature(name).kind == "diffuse"


def _near(result: Result, name: str, label: Label, side: int) -> NDArray[np.bool_]:
    """Return the cells (rows, columns) near the places where something made by drops is seen."""
    from scipy.spatial import cKDTree

    grid = result.job.directions
    anchors = label.anchors[:: max(1, -(-len(label.anchors) // _ANCHORS))]
    places = grid.unproject(anchors[:, 1], anchors[:, 0])
    cells = grid.coarse(side).vectors()
    inside = np.asarray(np.isfinite(cells).all(axis=-1))
    away, _ = cKDTree(places[np.isfinite(places).all(axis=-1)]).query(np.where(inside[..., None], cells, 9.0))
    reach = _reach(result, name)
    # the ground is no place for what hangs in the sky, nor the sky for what is seen against the ground
    anchored = np.sign(places[:, 2])
    same = np.isin(np.sign(cells[..., 2]), anchored)
    return np.asarray(inside & same & (away <= 2.0 * np.sin(0.5 * reach)))


def _reach(result: Result, name: str) -> float:
    """Return how far from its line a feature of drops is still called so [rad]."""
    if name in _REACH:
        return _REACH[name]
    if name in ("glory", "corona"):
        return _RING
    smallest = min(sheet.radius for sheet in result.job.sheets if isinstance(sheet, DropSheet))
    return _FOGBOW if smallest <= SMALL_DROPS else _BOW


def _own(result: Result, side: int) -> dict[str, FloatArray]:
    """Return by how much each arc of crystals stands out from its surroundings, as a share of the luminance."""
    if not result.parted:
        return {}
    from scipy.ndimage import median_filter, uniform_filter

    luminance, whole = in_cells(result.job, result.xyz[..., 1], side)
    luminance = np.where(whole == 1.0, luminance, 0.0)
    near = uniform_filter((luminance > 0.0).astype(np.float64), 2 * AROUND + 1)
    found = {}
    for name, light in own_light(result.job, result.parted, side).items():
        if name == OTHER:
            continue
        share = np.divide(light, luminance, out=np.zeros_like(light), where=luminance > 0.0)
        if not _diffuse(name):
            mean = np.divide(uniform_filter(share, 2 * AROUND + 1), near, out=np.zeros_like(share), where=near > 0.0)
            share = share - mean
        found[name] = np.where(share > 0.5, share, median_filter(share, 3))
    return found


def strongest(labels: Mapping[str, Label], result: Result) -> tuple[float, float]:
    """Return row and column of the best place of what is seen best; the middle where nothing is."""
    rows, columns = result.job.directions.shape
    for label in labels.values():
        anchors = label.anchors
        if len(anchors):
            middle = 0.5 * (columns - 1)
            # of equally good places the one nearest to the middle of the picture
            good = anchors[anchors[:, 2] >= 0.7 * anchors[:, 2].max()]
            best = good[np.argmin(np.hypot(good[:, 0] - middle, good[:, 1] - 0.35 * rows))]
            return float(best[1]), float(best[0])
    return 0.5 * (rows - 1), 0.5 * (columns - 1)


def span(result: Result) -> tuple[float, float]:
    """Return the least and the greatest scattering angle in a picture [rad], from a grid over it."""
    grid = result.job.directions
    cells = grid.coarse(max(1, max(grid.shape) // 200)).vectors()
    angle = angle_between(result.job.sources[0].direction, cells)
    return float(np.nanmin(angle)), float(np.nanmax(angle))
