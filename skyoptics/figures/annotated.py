"""A labelled copy of a picture.

Texts stand in a left and a right column, so that they are read like a list, and straight leaders run to dots on the arcs
(`skyoptics.figures.placement`).
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from skyoptics.camera.overlay import AngleScale, CompassTick
from skyoptics.colour.images import dither_threshold
from skyoptics.errors import DomainError
from skyoptics.figures.lettering import Box, Point, check_glyphs, text_size
from skyoptics.figures.placement import Label, Placed, arrange
from skyoptics.figures.sheet import Sheet
from skyoptics.units import DEG, ArrayLike, FloatArray
from skyoptics.words.table import say


class Annotated(NamedTuple):
    """A labelled picture, uint8 (ny, nx, 3), the labels on it and the texts that found no room."""

    rgb: NDArray[np.uint8]
    placed: list[Placed]
    dropped: list[str]


class Arc(NamedTuple):
    """A thin line with a text on it.

    Parameters
    ----------
    points : ndarray, shape (n, 2)
        Column, row [pixel], parts divided by nan.
    text : str
        Set upon the line where there is room.
    """

    points: FloatArray
    text: str


def annotate(
    rgb: ArrayLike,
    labels: Sequence[Label],
    *,
    horizon: FloatArray | None = None,
    compass: Sequence[CompassTick] = (),
    sun: Point | None = None,
    antisolar: Point | None = None,
    scale: AngleScale | None = None,
    circles: Sequence[Arc] = (),
    title: str | None = None,
    by_moon: bool = False,
    lang: str = "en",
) -> Annotated:
    """Return a labelled copy of a picture, pixel by pixel the same where nothing is drawn.

    Parameters
    ----------
    rgb : array_like, shape (ny, nx, 3)
        Display-encoded: uint8, or float from 0 to 1 (dithered as by `skyoptics.colour.images.write_png`).
    labels : sequence of Label
        The most important first.
    horizon, compass, sun, antisolar, scale :
        From `skyoptics.camera.overlay`; what is missing is not drawn.
    circles : sequence of Arc
        Dotted, with their texts.
    title : str, optional
        Set at the top left; cut where it is too long.
    by_moon : bool
        Whether the moon stands at `sun`.
    lang : str
        Language of compass, marks and scale.

    Returns
    -------
    Annotated

    Raises
    ------
    DomainError
        For a picture of another shape, a language that is not there, and texts that the font has no letters for.
    """
    check_glyphs(title or "", *(label.text for label in labels), *(arc.text for arc in circles))
    picture = _eight_bits(rgb)
    shape = (picture.shape[0], picture.shape[1])
    sheet = Sheet(shape, text_size(shape))
    taken: list[Box] = []
    if title:
        taken.append(sheet.title(title))
    if scale is not None:
        taken.append(sheet.scale(scale.length, say("mark.scale", lang, angle=scale.angle / DEG)))
    if horizon is not None and len(horizon):
        sheet.line(horizon)
    for tick in compass:
        taken += sheet.tick(tick._replace(text=tick.text and say(f"compass.{tick.text}", lang)), taken)
    if sun is not None:
        taken += sheet.mark(sun, _capital(say("feature.moon" if by_moon else "feature.sun", lang)), True, taken)
    if antisolar is not None:
        opposite = say("feature.antilunar_point" if by_moon else "feature.antisolar_point", lang)
        taken += sheet.mark(antisolar, _capital(opposite), False, taken)
    for arc in circles:
        taken += sheet.arc(arc.points, arc.text, taken)
    placed, dropped = arrange(labels, shape, taken, horizon)
    for one in placed:
        sheet.leader(one.leader)
    for one in placed:
        sheet.text(one.lines, one.box, one.align)
    return Annotated(sheet.over(picture), placed, dropped)


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]


def _eight_bits(rgb: ArrayLike) -> NDArray[np.uint8]:
    """Return a picture as uint8, shape (ny, nx, 3), or refuse it."""
    picture = np.asarray(rgb)
    if picture.ndim != 3 or picture.shape[-1] != 3 or 0 in picture.shape:
        raise DomainError(f"a picture needs shape (ny, nx, 3), got {picture.shape}")
    if picture.dtype == np.uint8:
        return picture
    values = np.clip(np.nan_to_num(picture.astype(np.float32), nan=0.0), 0.0, 1.0)
    threshold = dither_threshold(np.arange(picture.shape[0]), np.arange(picture.shape[1]))
    return np.floor(values * 255.0 + threshold).astype(np.uint8)
