"""What a figure of scattering curves shows: lines, their colours and spreads, the colours of the light, the scale."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.figures.palette import CATEGORICAL, wavelength_colour
from skyoptics.units import DEG, NM, BoolArray, FloatArray
from skyoptics.words.table import say

SCALES = ("linear", "log")
DECADES = 6
"""Most that a logarithmic scale shows below its brightest point."""
FEWEST_COLOURS = 3
"""Wavelengths that a colour band needs at least; eight or more give true colours."""

_ENDS = 2.0 * DEG
_WHITE = 0.5
"""Luminance of the brightest direction [white of the paper]: at that of white no hue would be left."""
_DASHES = ("-", (0, (6, 2)), (0, (1.5, 1.5)), (0, (6, 2, 1.5, 2)))


@dataclass(frozen=True, eq=False)
class Plot:
    """What is drawn.

    Parameters
    ----------
    angle : ndarray, shape (nθ,)
        Scattering angles, rising [rad].
    wavelength : ndarray, shape (nλ,)
        [m]
    parts : mapping of str to ndarray, shape (nθ, nλ)
        Phase function by part; one part is drawn by wavelength, several by part (mean over wavelengths).
    errors : mapping of str to ndarray, shape (nθ, nλ), optional
        One standard error of each part, for shading; None for none.
    marks : sequence of (float, str)
        Angle [rad] and name of closed-form angles.
    title : str
    scale : str
        One of `SCALES`.
    polar : bool
        Around the particle: light comes from the left, 0° to the right, both halves alike.
    colour_band : bool
        Add the colours.
    lang : str
    """

    angle: FloatArray
    wavelength: FloatArray
    parts: dict[str, FloatArray]
    errors: dict[str, FloatArray] | None = None
    marks: Sequence[tuple[float, str]] = ()
    title: str = ""
    scale: str = "log"
    polar: bool = False
    colour_band: bool = False
    lang: str = "en"

    def __post_init__(self) -> None:
        if self.scale not in SCALES:
            raise DomainError(f"a scale is {' or '.join(SCALES)}; got {self.scale!r}")
        if self.colour_band and len(self.wavelength) < FEWEST_COLOURS:
            raise DomainError(
                f"a colour band needs {FEWEST_COLOURS} wavelengths at least, such as 450,550,650; got {len(self.wavelength)}"
            )

    @property
    def total(self) -> FloatArray:
        """The sum of all parts, shape (nθ, nλ)."""
        return np.asarray(np.sum(list(self.parts.values()), axis=0))


def colours(plot: Plot) -> FloatArray:
    """Return encoded sRGB of the light in each direction, shape (nθ, 3): in sunlight, as the eye adapted to it sees it.

    Brightness follows a logarithmic scale, 2 to 5 decades as the curve needs, so that faint directions show their hue too; the
    light next to straight on and straight back may be beyond its upper end.
    """
    from skyoptics.colour import display, gamut, observer
    from skyoptics.light import spectrum
    from skyoptics.optics.bins import Bins

    order = np.argsort(plot.wavelength)
    wavelength = plot.wavelength[order]
    between = 0.5 * (wavelength[1:] + wavelength[:-1])
    first, last = 1.5 * wavelength[0] - 0.5 * wavelength[1], 1.5 * wavelength[-1] - 0.5 * wavelength[-2]
    samples = spectrum.samples()
    edges = np.clip([first, *between, last], samples[0][0], samples[0][-1])
    bins = Bins.adjoining(np.asarray(edges))
    matrix = observer.weights(bins, light=samples) * spectrum.irradiance(bins)[:, np.newaxis]
    if not matrix.sum(axis=0).min() > 0.0:
        raise DomainError("these wavelengths make no colours: take some between 400 and 700 nm, such as 450,550,650")
    xyz = plot.total[:, order] @ matrix
    adapted = xyz @ display.adaptation(matrix.sum(axis=0)).T
    linear = display.linear_rgb(adapted)
    luminance = np.maximum(adapted[:, 1], 1e-300)
    brightest, dark = float(luminance[_open(plot)].max()), float(np.percentile(luminance[_open(plot)], 5.0))
    decades = np.clip(np.log10(brightest / dark) + 0.5, 2.0, 5.0)
    shown = 1.0 + np.log10(np.maximum(luminance / brightest, 1e-30)) / decades
    wanted = _WHITE * np.clip(shown, 0.05, 1.0) ** 2.2
    return np.asarray(np.clip(display.encode(gamut.to_gamut(linear / luminance[:, None] * wanted[:, None])), 0.0, 1.0))


def lines(plot: Plot) -> list[tuple[str, FloatArray, str, Any]]:
    """Return label, values (nθ,), colour and dash of each line."""
    if len(plot.parts) == 1:
        return [
            (
                say("curve.wavelength", plot.lang, wavelength=float(wavelength / NM)),
                plot.total[:, column],
                wavelength_colour(float(wavelength / NM)),
                _DASHES[column % len(_DASHES)],
            )
            for column, wavelength in enumerate(plot.wavelength)
        ]
    lines = [
        (name, values.mean(axis=1), CATEGORICAL[row % len(CATEGORICAL)], _DASHES[row % len(_DASHES)])
        for row, (name, values) in enumerate(plot.parts.items())
    ]
    return [line for line in lines if line[1].max() > 0.0]


def _open(plot: Plot) -> BoolArray:
    """Return which angles set the scale: those next to 0° and 180°, where light may pile up without limit, do not."""
    inside = (plot.angle > _ENDS) & (plot.angle < np.pi - _ENDS)
    return inside if inside.any() else np.ones_like(inside)


def limits(plot: Plot) -> tuple[float, float]:
    """Return the lowest and highest value shown on a logarithmic scale."""
    values = np.concatenate([line[1][_open(plot)] for line in lines(plot)] or [np.ones(1)])
    top = float(values.max())
    return max(float(values[values > 0.0].min(initial=top)), top * 10.0**-DECADES), top


def spreads(plot: Plot) -> list[tuple[FloatArray, FloatArray, str]]:
    """Return values, one standard error (nθ,) and colour of each line."""
    if plot.errors is None:
        return []
    if len(plot.parts) == 1:
        error = next(iter(plot.errors.values()))
        return [(line[1], error[:, k], line[2]) for k, line in enumerate(lines(plot))]
    count = len(plot.wavelength)
    return [(line[1], np.sqrt((plot.errors[line[0]] ** 2).sum(axis=1)) / count, line[2]) for line in lines(plot)]


def named(plot: Plot, apart: float) -> list[tuple[float, str]]:
    """Return marks in degrees with their names, names of marks too near each other put on one of them."""
    result: list[tuple[float, str]] = []
    for mark, name in sorted(plot.marks):
        if result and mark / DEG - result[-1][0] < apart:
            result[-1] = (result[-1][0], f"{result[-1][1]}, {name}")
        else:
            result.append((float(mark / DEG), name))
    return result
