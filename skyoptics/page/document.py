"""From pictures to one HTML file that needs nothing else: no server, no network, no other file.

The Content-Security-Policy allows what is in the file and nothing more: pictures as data, one style sheet and one script,
both by their SHA-256 (W3C, Content Security Policy Level 3, §2.3.1). Texts are escaped; data stand in a block of JSON that
no text can leave.
"""

from __future__ import annotations

import json
from base64 import b64encode
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from hashlib import sha256
from html import escape
from importlib.resources import files
from string import Template
from typing import Any

import numpy as np

import skyoptics
from skyoptics.camera.overlay import POINTS
from skyoptics.colour.display import XYZ_TO_RGB, encode
from skyoptics.colour.gamut import to_gamut
from skyoptics.colour.metadata import strip_private
from skyoptics.colour.observer import weights
from skyoptics.errors import DomainError
from skyoptics.optics.bins import Bins
from skyoptics.page import packing
from skyoptics.page.cells import banded
from skyoptics.page.pictures import Picture, jpeg
from skyoptics.page.varied import Varied
from skyoptics.rendering.caption import rights
from skyoptics.units import DEG, NM, FloatArray
from skyoptics.words.table import DECIMAL, say

LIMIT = 10_000_000
"""Bytes that a page may have: a phone on a slow line still gets it."""
QUALITIES = (92, 87, 82, 76, 70, 62)
"""JPEG qualities tried, the best that fits is taken."""
LEAST = 0.012
"""Bytes a pixel of the emptiest picture as JPEG takes (measured on an even sky)."""
SCRIPTS = ("sky.js", "graphs.js", "page.js")
FINE = 0.03
"""Pixels smaller than this get readings of two decimals [degree]."""

_TEXT = 4.0 / 3.0  # base64 takes four letters for three bytes
_WORDS = ("azimuth", "elevation", "angle", "arc", "no_arc", "outside", "peak", "cross", "curve_axis", "curve_unit")
_STATIC = (
    "readings",
    "azimuth",
    "elevation",
    "angle",
    "arc",
    "spectrum",
    "curve",
    "curve_about",
    "curve_framed",
    "help",
)


@dataclass(frozen=True)
class Asked:
    """What a page is to say beside its pictures.

    Parameters
    ----------
    varied : Varied
        The quantity and its values, one a picture.
    lang : str
        Language.
    shared : bool
        Whether all pictures have one exposure.
    command : sequence of str
        The words that make the page again.
    """

    varied: Varied
    lang: str
    shared: bool
    command: Sequence[str]


def check_size(shapes: Sequence[tuple[int, int]]) -> None:
    """Refuse pictures, rows and columns given, that cannot fit into a page whatever they show.

    Raises
    ------
    DomainError
        Saying what to lower.
    """
    least = LEAST * _TEXT * sum(rows * columns for rows, columns in shapes)
    if least > LIMIT:
        raise _too_large(least, max(columns for _, columns in shapes), len(shapes), "at least ")


def check_first(picture: Picture, count: int) -> None:
    """Refuse a page by its first picture, before the other ones are rendered.

    Parameters
    ----------
    picture : Picture
        The first.
    count : int
        How many there will be.

    Raises
    ------
    DomainError
        If as many of this size, stored at their smallest, would be half as large again as a page may be.
    """
    about = count * len(b64encode(jpeg(picture, QUALITIES[-1])))
    if about > 1.5 * LIMIT:
        raise _too_large(about, picture.directions.shape[1], count, "about ")


def page(pictures: Sequence[Picture], asked: Asked) -> str:
    """Return the HTML text of a page.

    Parameters
    ----------
    pictures : sequence of Picture
        At least one; all with the same wavelengths or at least as many.
    asked : Asked
        Quantity, language, command.

    Raises
    ------
    DomainError
        If the page would have more than `LIMIT` bytes; the text says what to lower.
    """
    rest = _document(pictures, asked, ["" for _ in pictures])
    room = LIMIT - len(rest.encode())
    size = 0.0
    for quality in QUALITIES:
        coded = [b64encode(jpeg(picture, quality)).decode("ascii") for picture in pictures]
        size = sum(map(len, coded))
        if size <= room:
            return _document(pictures, asked, coded)
    raise _too_large(size + LIMIT - room, max(p.directions.shape[1] for p in pictures), len(pictures), "")


def _too_large(size: float, width: int, count: int, how: str) -> DomainError:
    share = 0.95 * LIMIT / size
    narrower = max(16, int(width * share**0.5) // 10 * 10)
    fewer = f", or take {max(1, int(count * share))} values instead of {count}" if count > 1 else ""
    return DomainError(
        f"the page would have {how}{size / 1e6:.1f} MB, and {LIMIT / 1e6:.0f} MB are allowed: lower camera.width_px "
        f"from {width} to about {narrower} (--set camera.width_px={narrower}){fewer}"
    )


def policy(style: str, script: str) -> str:
    """Return the Content-Security-Policy that lets in a style sheet, a script and pictures as data, and nothing else."""
    return (
        f"default-src 'none'; img-src data:; style-src '{_hash(style)}'; script-src '{_hash(script)}'; "
        "base-uri 'none'; form-action 'none'"
    )


def _hash(text: str) -> str:
    return "sha256-" + b64encode(sha256(text.encode()).digest()).decode("ascii")


def json_block(data: Any) -> str:
    """Return JSON that can stand in a script element: no text in it ends or opens markup."""
    text = json.dumps(data, ensure_ascii=False, separators=(",", ":"), allow_nan=False)
    for letter in "<>&\u2028\u2029":
        text = text.replace(letter, f"\\u{ord(letter):04x}")
    return text


def _file(name: str) -> str:
    return files("skyoptics.page").joinpath(name).read_text(encoding="utf-8")


def _document(pictures: Sequence[Picture], asked: Asked, coded: Sequence[str]) -> str:
    first, lang = pictures[0], asked.lang
    style = _file("page.css")
    body = "\n".join(_file(name) for name in SCRIPTS)
    script = f'"use strict";\n(() => {{\nconst DATA = JSON.parse(document.getElementById("data").textContent);\n{body}}})();\n'
    point = say(f"feature.{'antilunar' if first.by_moon else 'antisolar'}_point", lang)
    size = first.spectra_side * float(np.median(first.directions.coarse(8).pixel_size())) / 8.0 / DEG
    words = {f"words_{key}": escape(say(f"page.{key}", lang)) for key in _STATIC}
    words["words_opposite"] = escape(say("page.opposite", lang, point=point))
    words["words_spectrum_about"] = escape(say("page.spectrum_about", lang, size=size))
    return Template(_file("page.html")).substitute(
        lang=lang,
        policy=escape(policy(style, script), quote=True).replace("&#x27;", "'"),
        version=escape(skyoptics.__version__),
        title=escape(_title(first)),
        description=escape(first.report["alt_text"]),
        look_for=escape(say("page.look_for", lang, text=first.report["look_for"])),
        quantity=escape(asked.varied.title or say("page.picture", lang)),
        last=len(pictures) - 1,
        figures="\n".join(
            _figure(place, picture, asked, text)
            for place, (picture, text) in enumerate(zip(pictures, coded, strict=True))
        ),
        footer=_footer(pictures, asked),
        data=json_block(_data(pictures, asked)),
        style=style,
        script=script,
        **words,
    )


def _title(picture: Picture) -> str:
    return str(picture.report["title"] or picture.report["scene"])


def _label(place: int, picture: Picture, asked: Asked) -> str:
    return asked.varied.labels[place] or _title(picture)


def _figure(place: int, picture: Picture, asked: Asked, coded: str) -> str:
    rows, columns = picture.directions.shape
    label = _label(place, picture, asked)
    if asked.varied.key:
        label = f"{asked.varied.title}: {label}"
    return (
        f'<figure id="picture-{place + 1}">\n<div class="frame"><img src="data:image/jpeg;base64,{coded}" width="{columns}" '
        f'height="{rows}" alt="{escape(picture.report["alt_text"], quote=True)}"></div>\n'
        f"<figcaption><strong>{escape(label)}</strong> {escape(strip_private(picture.report['caption']))}</figcaption>\n"
        "</figure>"
    )


def _footer(pictures: Sequence[Picture], asked: Asked) -> str:
    report, lang = pictures[0].report, asked.lang
    lines = list(dict.fromkeys(text for picture in pictures for text in picture.report["cautions"]))
    if len(pictures) > 1:
        lines.append(say("page.exposure_shared" if asked.shared else "page.exposure_each", lang))
    lines += rights(report, lang).splitlines()
    about = {key: report[key] for key in ("scene", "seed", "quality")}
    lines.append(say("page.made", lang, version=skyoptics.__version__, **about))
    told = [f"<p>{escape(strip_private(line))}</p>" for line in lines]
    return "\n".join([*told, f"<p><code>{escape(strip_private(' '.join(asked.command)))}</code></p>"])


def _data(pictures: Sequence[Picture], asked: Asked) -> Mapping[str, Any]:
    """Return what the script reads."""
    names = list(dict.fromkeys(name for picture in pictures for name in picture.names))
    curves = [picture.curve for picture in pictures]
    lowest, highest = packing.limits(np.concatenate([curve.values.ravel() for curve in curves]))
    lowest = max(lowest, 1e-7 * highest)
    _, edges = banded(pictures[0].spectra, pictures[0].bins)
    said = [say(f"feature.{name}", asked.lang) for name in names]
    centre = pictures[0].bins.centre / NM
    return {
        "mark": DECIMAL[asked.lang],
        "words": {key: say(f"page.{key}", asked.lang) for key in _WORDS},
        "points": [say(f"compass.{point}", asked.lang) for point in POINTS],
        "names": ["", *(text[:1].upper() + text[1:] for text in said)],
        "bands": {"edges": np.round(edges / NM, 3).tolist(), "colours": _colours(edges)},
        "curve": {
            "wavelengths": [f"{centre[band]:.0f}" for band in curves[0].bands],
            "lowest": lowest,
            "highest": highest,
        },
        "pictures": [
            _picture(place, picture, asked, names, (lowest, highest)) for place, picture in enumerate(pictures)
        ],
    }


def _picture(
    place: int, picture: Picture, asked: Asked, names: list[str], limits: tuple[float, float]
) -> dict[str, Any]:
    values, _ = banded(picture.spectra, picture.bins)
    code = np.array([0, *(1 + names.index(name) for name in picture.names)], dtype=np.uint8)
    pixel = float(np.median(picture.directions.coarse(8).pixel_size())) / 8.0 / DEG
    lines = [packing.text(packing.codes(line, *limits), "u2") for line in picture.curve.values.T]
    return {
        "label": _label(place, picture, asked),
        "grid": packing.grid(picture.directions),
        "source": picture.source.tolist(),
        "digits": 2 if pixel < FINE else 1,
        "start": list(picture.start),
        "span": [angle / DEG for angle in picture.span],
        "cells": _shape(values, picture.spectra_side) | packing.spectra(values),
        "arcs": _shape(picture.arcs, picture.arcs_side) | {"codes": packing.text(code[picture.arcs], "u1")},
        "curve": {"framed": picture.curve.framed, "codes": lines},
    }


def _shape(cells: Any, side: int) -> dict[str, int]:
    return {"side": side, "rows": cells.shape[0], "columns": cells.shape[1]}


def _colours(edges: FloatArray) -> list[str]:
    """Return the display colour of each band, light of one power in all of them."""
    xyz = weights(Bins(edges))
    xyz = xyz / np.where(edges[:, 1] > edges[:, 0], edges[:, 1] - edges[:, 0], 1.0)[:, None]
    linear = np.clip(to_gamut(0.25 * xyz @ XYZ_TO_RGB.T / max(float(xyz.max()), 1e-30)), 0.0, None)
    levels = np.rint(255.0 * np.clip(encode(linear / max(float(linear.max()), 1e-30)), 0.0, 1.0)).astype(int)
    return ["#" + "".join(f"{level:02x}" for level in row) for row in levels]
