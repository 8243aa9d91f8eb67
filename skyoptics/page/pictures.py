"""The pictures of a page and all that is read from them: rendered one after the other, exposed together."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from io import BytesIO
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skyoptics.colour.develop import Developed, develop
from skyoptics.colour.display import encode
from skyoptics.geometry.directions import Directions
from skyoptics.optics.bins import Bins
from skyoptics.page import cells, curve
from skyoptics.rendering import alt_text, caption, output
from skyoptics.rendering.labels import labels_by_name
from skyoptics.rendering.run import Settings, render
from skyoptics.rendering.scatter import Progress, silent
from skyoptics.rendering.shows import BEYOND, TONED_DOWN
from skyoptics.scene.model import Scene
from skyoptics.units import Float32Array, FloatArray

APART = 2.5
"""Span of metered exposures from which one exposure for all does no picture justice [EV] (own judgement)."""


@dataclass(frozen=True, eq=False)
class Picture:
    """One picture and what is read from it.

    Parameters
    ----------
    xyz : ndarray of float32, shape (ny, nx, 3)
        [cd m⁻²]; nan outside the image.
    developed : Developed
        Display colours.
    directions : Directions
        Of the pixels.
    source : ndarray, shape (3,)
        Viewing direction of the sun or moon.
    bins : Bins
        Wavelength axis of the scene.
    spectra : ndarray, shape (rows, columns, n)
        Mean radiance of cells [W m⁻² sr⁻¹ nm⁻¹].
    spectra_side : int
        Pixels along the side of these cells.
    names : list of str
        Arcs and bows that are seen, the strongest first.
    arcs : ndarray of uint8, shape (rows, columns)
        Which of them stands in a cell, 0 none.
    arcs_side : int
        Pixels along the side of these cells.
    start : tuple of float
        Row and column where the cross stands first.
    span : tuple of float
        Least and greatest scattering angle [rad].
    curve : Curve
        Phase by scattering angle.
    by_moon : bool
        Whether the moon shines.
    report : dict
        Of the render, with caption and alt text.
    """

    xyz: Float32Array
    developed: Developed
    directions: Directions
    source: FloatArray
    bins: Bins
    spectra: FloatArray
    spectra_side: int
    names: list[str]
    arcs: NDArray[np.uint8]
    arcs_side: int
    start: tuple[float, float]
    span: tuple[float, float]
    curve: curve.Curve
    by_moon: bool
    report: dict[str, Any] = field(default_factory=dict)


def take(scene: Scene, where: str, settings: Settings, side: int, lang: str, progress: Progress = silent) -> Picture:
    """Render one picture and read it.

    Parameters
    ----------
    scene : Scene
        Checked description.
    where : str
        Name of its file.
    settings : Settings
        Quality, seed, threads.
    side : int
        Pixels along the side of a cell of spectra.
    lang : str
        Language of caption and alt text.
    progress : callable
        Told what goes on.
    """
    result = render(scene, where, settings, progress)
    output.describe(result, scene, lang)
    result.report["look_for"] = scene.look_for or caption.what_to_look_for(result.job, lang)
    result.report["cautions"] = caption.cautions(result.job, lang)
    labels = labels_by_name(result, lang)
    names, arcs, arcs_side = cells.arcs(result, labels)
    return Picture(
        xyz=result.xyz,
        developed=result.developed,
        directions=result.job.directions,
        source=result.job.sources[0].direction,
        bins=result.job.bins,
        spectra=cells.spectra(result, side, settings.threads),
        spectra_side=side,
        names=names,
        arcs=arcs,
        arcs_side=arcs_side,
        start=cells.strongest(labels, result),
        span=cells.span(result),
        curve=curve.curve(result),
        by_moon=result.job.by_moon,
        report=result.report,
    )


def together(pictures: Sequence[Picture], lang: str) -> list[Picture]:
    """Return pictures developed at one exposure, the median of those that were metered.

    Nothing is changed where scenes fix the exposure themselves.
    """
    if len(pictures) < 2 or not all(picture.developed.automatic for picture in pictures):
        return list(pictures)
    exposure_ev = float(np.median([picture.developed.exposure_ev for picture in pictures]))
    return [_developed(picture, exposure_ev, lang) for picture in pictures]


def exposures_apart(pictures: Sequence[Picture]) -> float:
    """Return the span of metered exposures [EV]; 0 where scenes fix them."""
    metered = [picture.developed.exposure_ev for picture in pictures if picture.developed.automatic]
    return max(metered) - min(metered) if metered else 0.0


def _developed(picture: Picture, exposure_ev: float, lang: str) -> Picture:
    developed = replace(develop(picture.xyz, exposure_ev, picture.developed.white), automatic=True)
    shares = {"toned_down": (developed.clipped, TONED_DOWN), "gamut": (developed.out_of_gamut, BEYOND)}
    shown = dict(picture.report["shows"])
    shown["unlike"] = [point for point in shown["unlike"] if point["key"] not in shares]
    shown["unlike"] += [{"key": key, "share": 100.0 * part} for key, (part, least) in shares.items() if part >= least]
    report = picture.report | {
        "shows": shown,
        "exposure_ev": exposure_ev,
        "rolled_off_share": developed.clipped,
        "out_of_gamut_share": developed.out_of_gamut,
    }
    report |= {"caption": caption.write(report, lang), "alt_text": alt_text.write(report, lang)}
    return replace(picture, developed=developed, report=report)


def jpeg(picture: Picture, quality: int) -> bytes:
    """Return a picture as JPEG, colours at full resolution.

    Parameters
    ----------
    picture : Picture
    quality : int
        1 to 95.
    """
    from PIL import Image

    levels = np.rint(255.0 * np.clip(encode(np.nan_to_num(picture.developed.rgb)), 0.0, 1.0)).astype(np.uint8)
    file = BytesIO()
    Image.fromarray(levels).save(file, "JPEG", quality=quality, subsampling=0, optimize=True, progressive=True)
    return file.getvalue()
