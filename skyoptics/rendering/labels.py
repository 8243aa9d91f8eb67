"""An annotated copy of a render: arcs and bows named where their light is to be seen."""

from __future__ import annotations

from typing import Any

import numpy as np

from skyoptics.camera import overlay
from skyoptics.colour.display import encode
from skyoptics.colour.observer import weights
from skyoptics.crystals.arcs import feature, locus
from skyoptics.figures.annotated import Annotated, annotate
from skyoptics.figures.placement import Label
from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.rendering.bow_labels import bow_circles, bow_labels
from skyoptics.rendering.expose import group_side
from skyoptics.rendering.named import FURTHER, OTHER, in_cells, own_light
from skyoptics.rendering.run import Result
from skyoptics.rendering.scatter import ICE_INDEX
from skyoptics.units import FloatArray
from skyoptics.words.table import say

SEEN = 0.03
"""Contrast of an arc at its best, against its own surroundings, from which it is named."""
DIFFUSE_SEEN = 0.1
"""Share of diffuse light in the luminance from which it is named."""
AROUND = 5
"""Cells to each side that are an arc's surroundings."""
ANCHORS = 300
"""Candidate points of an arc, the strongest ones."""


def labels_by_name(result: Result, lang: str = "en") -> dict[str, Label]:
    """Return the labels of what is seen in a picture by the name of the feature, the strongest first.

    Parameters
    ----------
    result : Result
    lang : str
        Language of the labels.

    Returns
    -------
    dict of str to Label
        Names are keys of the group "feature" of `skyoptics.words.table`. Bows: `skyoptics.rendering.bow_labels`.
    """
    found = [*_arcs(result, lang), *(bow_labels(result, lang) if "only" not in result.report else [])]
    return {name: label for _, name, label in sorted(found, key=lambda entry: -entry[0])}


def arc_labels(result: Result, lang: str = "en") -> list[Label]:
    """Return the labels of what is seen in a picture, the strongest first."""
    return list(labels_by_name(result, lang).values())


def _arcs(result: Result, lang: str) -> list[tuple[float, str, Label]]:
    """Return importance, name and label of the arcs of crystals.

    An arc is seen where its own light stands out from its surroundings: by how much its share of the luminance exceeds the
    mean within `AROUND` cells. Diffuse light counts whole.
    """
    if not result.parted:
        return []
    from scipy.ndimage import uniform_filter

    job = result.job
    side = group_side(job.directions.shape)
    luminance, whole = in_cells(job, result.xyz[..., 1], side)
    luminance = np.where(whole == 1.0, luminance, 0.0)
    near = uniform_filter((luminance > 0.0).astype(np.float64), 2 * AROUND + 1)
    found: list[tuple[float, str, Label]] = []
    for name, light in own_light(job, result.parted, side).items():
        if name == OTHER:
            continue
        diffuse = name == FURTHER or feature(name).kind == "diffuse"
        share = np.divide(light, luminance, out=np.zeros_like(light), where=luminance > 0.0)
        if not diffuse:
            mean = np.divide(uniform_filter(share, 2 * AROUND + 1), near, out=np.zeros_like(share), where=near > 0.0)
            share = np.maximum(share - mean, 0.0)
        share = np.minimum(_steady(share), 1.0)
        if share.max(initial=0.0) < (DIFFUSE_SEEN if diffuse else SEEN):
            continue
        strength = share * np.sqrt(light / light.max())  # the dot goes where the arc is bright
        found.append((_weight(share), name, Label(_title(name, lang), _anchors(strength, side))))
    twice = _seen_twice(result, side, luminance, near, lang)
    return found if twice is None else [*found, twice]


def _title(name: str, lang: str) -> str:
    text = say(f"feature.{name}", lang)
    return text[:1].upper() + text[1:]


def _seen_twice(
    result: Result, side: int, luminance: FloatArray, near: FloatArray, lang: str
) -> tuple[float, str, Label] | None:
    """Return the label of the 44° parhelia where further scatterings show them: brighter there than around."""
    from scipy.ndimage import uniform_filter

    sheets = [sheet for sheet in result.sheets if sheet.name == FURTHER]
    if not sheets:
        return None
    job, source = result.job, result.job.sources[0]
    light = sheets[0].scatterers[0].phase(source, job.directions.coarse(side), slice(None))
    own = np.nan_to_num(light @ (weights(job.bins)[:, 1] * source.irradiance))
    share = np.divide(own, luminance, out=np.zeros_like(own), where=luminance > 0.0)
    mean = np.divide(uniform_filter(share, 2 * AROUND + 1), near, out=np.zeros_like(share), where=near > 0.0)
    azimuth, elevation = azimuth_elevation(source.direction)
    points = overlay.curve(job.directions, *_shifted("parhelia_44", float(azimuth), float(elevation)))
    points = points[np.isfinite(points).all(axis=1)]
    cells = np.floor(points / side).astype(int)
    strength = [float((share - mean)[row, column]) for column, row in cells]
    if not strength or max(strength) < SEEN:
        return None
    anchors = np.column_stack([points, np.maximum(strength, 0.0)])
    return max(strength), "parhelia_44", Label(_title("parhelia_44", lang), anchors)


def _shifted(name: str, azimuth: float, elevation: float) -> tuple[FloatArray, FloatArray]:
    """Return the locus of a feature with the sun's azimuth added."""
    offset, height = locus(name, elevation, ICE_INDEX)
    return offset + azimuth, height


def labelled(result: Result, lang: str = "en") -> FloatArray | Any:
    """Return a labelled copy of a picture, display-encoded, 0 to 1, shape (ny, nx, 3)."""
    return annotated(result, lang).rgb / 255.0


def annotated(result: Result, lang: str = "en") -> Annotated:
    """Return a labelled copy of a picture, in a language, and what became of the labels."""
    grid, source = result.job.directions, result.job.sources[0].direction
    return annotate(
        encode(result.developed.rgb),
        arc_labels(result, lang),
        circles=bow_circles(result.job, lang),
        horizon=overlay.horizon(grid),
        compass=overlay.compass(grid),
        sun=overlay.mark(grid, source),
        antisolar=overlay.mark(grid, -source),
        scale=overlay.angle_scale(grid),
        title=result.report["title"],
        by_moon=result.job.by_moon,
        lang=lang,
    )


def _steady(share: FloatArray) -> FloatArray:
    """Return shares as a median over each cell and its neighbours: a single noisy cell is no arc."""
    padded = np.pad(share, 1, mode="edge")
    rows, columns = share.shape
    near = [padded[i : i + rows, j : j + columns] for i in range(3) for j in range(3)]
    middle: FloatArray = np.median(np.array(near), axis=0)
    return np.where(share > 0.5, share, np.maximum(middle, np.minimum(share, 2.0 * middle)))


def _weight(share: FloatArray) -> float:
    """Return how important an arc is: its greatest share, and more where it is long."""
    return float(share.max() + 0.2 * np.log1p((share > SEEN).sum()))


def _anchors(share: FloatArray, side: int) -> FloatArray:
    """Return the strongest cells as (column, row, strength) in pixels."""
    best = np.argsort(share, axis=None)[::-1][:ANCHORS]
    best = best[share.ravel()[best] > 0.0]
    row, column = np.unravel_index(best, share.shape)
    middle = 0.5 * (side - 1)
    return np.stack([column * side + middle, row * side + middle, share.ravel()[best]], axis=1)
