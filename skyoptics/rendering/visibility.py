"""Whether a feature will be seen: its contrast along its length against the sky beside it.

- *Contrast* is Weber's, (L_on − L_beside) / L_beside. On it and beside it, a width away on both sides, are taken
  as `skyoptics.rendering.profiles` says, means over 1° along it: an even gradient of the sky cancels. The excess is held
  down to the light that the arc's own paths bring, so no arc is credited with another that crosses it.
- *Threshold*: 2 % for large objects by day (Koschmieder, Beitr. Phys. freien Atm. 12, 33 (1924); from memory), raised for
  small ones and dim surroundings as by Adrian's formula (Lighting Res. Technol. 21, 181 (1989); from memory), which
  stands on the measurements of Blackwell (J. Opt. Soc. Am. 36, 624 (1946)) among others. Size is the feature's width;
  that it is long helps a little more, and is left out.
- *Verdict*: contrast at the best place, less two standard errors, in units of the threshold. 2.5 thresholds are the 5 % of
  the meteorological optical range (WMO-No. 8, from memory), the contrast that observers ask for; 10 thresholds for
  "striking" are a choice (common practice, no source).
- *Colour*: ΔE2000, white with the chromaticity of the light and as bright as gives the surroundings L* = 50, the grey of
  the formula's reference conditions (CIE 142-2001, from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from skyoptics.colour.observer import weights
from skyoptics.crystals.arcs import feature
from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.geometry.directions import Directions
from skyoptics.rendering.build import Job
from skyoptics.rendering.expose import group_side
from skyoptics.rendering.features import Line, framed, lines, missing
from skyoptics.rendering.named import FURTHER, OTHER, binned, in_cells, own_light
from skyoptics.rendering.profiles import Measured, measure
from skyoptics.rendering.run import Result
from skyoptics.units import ARCMIN, DEG, ArrayLike, BoolArray, FloatArray

DAYLIGHT = 0.02
"""Threshold for large objects by day [1]."""
VERDICTS = ((10.0, "striking"), (2.5, "plain"), (1.0, "just visible"), (0.0, "invisible"))
"""Least contrast ÷ threshold, best first."""
DIFFUSE = 5.0
"""Factor on the threshold of light without an edge (common practice, no source)."""
LIGHTNESS_50 = ((50.0 + 16.0) / 116.0) ** 3
"""Luminance of L* = 50 ÷ that of white (CIE 15)."""
FAINT = 0.1 * DAYLIGHT
"""Share in the luminance below which an arc's own light is not looked at any further [1]."""

_APART = 2.5
_WORDS = tuple(word for _, word in VERDICTS)


def threshold(luminance: ArrayLike, width: ArrayLike) -> FloatArray:
    """Return the contrast from which something is seen.

    Parameters
    ----------
    luminance : array_like
        Of the surroundings, to which the eye is adapted [cd m⁻²]; scotopic luminance in the dark.
    width : array_like
        Angular diameter [rad].

    Returns
    -------
    ndarray
        Weber contrast [1], `DAYLIGHT` at least: that times Adrian's contrast ÷ its value for 121′ (the largest object of
        Blackwell) at 1000 cd m⁻².
    """
    return DAYLIGHT * np.maximum(adrian(luminance, width) / adrian(1000.0, 121.0 * ARCMIN), 1.0)


def adrian(luminance: ArrayLike, width: ArrayLike) -> FloatArray:
    """Return the contrast that half of young observers see in the laboratory, long looked at [1]; arguments as `threshold`.

    ΔL = (√φ / α + √L)², α in minutes of arc (Adrian, Lighting Res. Technol. 21, 181 (1989), from memory; its pieces meet
    within 1 %). Luminances are held to 1e-5 cd m⁻² from below.
    """
    light = np.maximum(np.asarray(luminance, dtype=np.float64), 1e-5)
    log = np.log10(light)
    middle, dark = light < 0.6, light <= 0.00418
    flux = np.log10(4.2841 * light**0.1556) + 0.1684 * light**0.5867
    flux = np.where(middle, 10.0 ** (-0.072 + 0.3372 * log + 0.0866 * log**2), flux)
    flux = np.where(dark, 10.0 ** (0.028 + 0.173 * log), flux)
    wide = np.where(middle, 10.0 ** (-1.256 + 0.319 * log), 0.05946 * light**0.466)
    wide = np.where(dark, 10.0 ** (-0.891 + 0.5275 * log + 0.0227 * log**2), wide)
    return np.asarray((flux / (np.asarray(width, dtype=np.float64) / ARCMIN) + wide) ** 2 / light)


def verdict(level: float) -> str:
    """Return contrast ÷ threshold in a word of `VERDICTS`."""
    return next((word for least, word in VERDICTS if level >= least), VERDICTS[-1][1])


def colour_difference(on: ArrayLike, beside: ArrayLike, white: ArrayLike) -> FloatArray:
    """Return ΔE2000 between a feature and its surroundings.

    Parameters
    ----------
    on, beside : array_like, shape (..., 3)
        XYZ [cd m⁻²].
    white : array_like, shape (3,)
        XYZ of the light, on any scale.

    Returns
    -------
    ndarray, shape (...)
        White as bright as makes the surroundings L* = 50; nan where they are dark.
    """
    from colour.difference import delta_E_CIE2000
    from colour.models import XYZ_to_Lab, XYZ_to_xy

    on, beside = np.asarray(on, dtype=np.float64), np.asarray(beside, dtype=np.float64)
    light = np.where(beside[..., 1:2] > 0.0, beside[..., 1:2] / LIGHTNESS_50, np.nan)
    chromaticity = XYZ_to_xy(np.asarray(white, dtype=np.float64))
    first, second = (XYZ_to_Lab(np.maximum(xyz, 0.0) / light, chromaticity) for xyz in (on, beside))
    return np.asarray(delta_E_CIE2000(first, second))


def visibility(result: Result) -> list[dict[str, Any]]:
    """Return how well each feature of a picture is seen.

    Parameters
    ----------
    result : Result
        Whole picture, not one name's light alone; as seen through its polariser, if it has one.

    Returns
    -------
    list of dict
        JSON types, best seen first. Always `feature`, `title` and `verdict`: a word of `VERDICTS`, "below the horizon",
        "outside the frame" or "does not form", these three with a sentence `why`. Features in the frame also have, at
        their best place, `contrast`, its standard error `noise`, `threshold`, `delta_e_2000`, `surroundings_cd_m2` and
        `best` (`azimuth_deg`, `elevation_deg`); `contrast_median` along the length; `share_visible` of `length_deg`, the
        length in the frame (of spots their number in the frame, of diffuse light its area) that is above the threshold
        and twice the noise; `width_deg` (None for diffuse light); `one_sided`,
        true where frame or horizon leave one side alone to compare with, so that a slope of the sky counts too. Arcs too
        faint to be looked at have `contrast` alone, their largest share in the luminance.
    """
    job = result.job
    white = job.sources[0].irradiance @ weights(job.bins)
    picture = np.asarray(result.xyz, dtype=np.float64)
    cells = _Cells.of(result)
    faint = cells.faint()
    rows: list[dict[str, Any]] = []
    for line in lines(job, without=faint):
        why = missing(line, job)
        if why is not None:
            rows.append({"feature": line.name, "title": line.title, "verdict": why[0], "why": why[1]})
            continue
        row = cells.diffuse(line) if line.kind == "diffuse" else _judged(line, job, picture, cells, white)
        if row is not None:
            rows.append({"feature": line.name, "title": line.title, **row})
    for name, share in faint.items():
        rows.append({"feature": name, "title": feature(name).title, "verdict": VERDICTS[-1][1], "contrast": share})
    return sorted(rows, key=_rank)


def table(rows: list[dict[str, Any]]) -> str:
    """Return rows of `visibility` as lines of text; a row's `polariser` (`skyoptics.rendering.polarised`) is told too."""
    names = [row["title"] for row in rows]
    wide = max((len(name) for name in names), default=0)
    found = []
    for name, row in zip(names, rows, strict=True):
        words = [row["verdict"] if "why" not in row else row["why"]]
        if row.get("contrast") is not None:
            words.append(f"contrast {100.0 * row['contrast']:.3g} %")
        if "threshold" in row:
            words[-1] += f" (threshold {100.0 * row['threshold']:.2g} %)"
            if row["delta_e_2000"] is not None:
                words.append(f"ΔE {row['delta_e_2000']:.1f}")
            words.append(f"{100.0 * row['share_visible']:.0f} % of it")
            best = row["best"]
            words.append(f"best at azimuth {round(best['azimuth_deg']) % 360}°, elevation {best['elevation_deg']:.0f}°")
        if "polariser" in row:
            through = row["polariser"]
            words.append(f"polariser at {through['angle_deg']:.0f}°: contrast times {through['gain']:.2f}")
        found.append(f"{name:<{wide}}  " + ", ".join(words))
    return "\n".join(found)


def _rank(row: dict[str, Any]) -> tuple[int, float]:
    """Return what puts the features best seen first."""
    word, contrast = row["verdict"], row.get("contrast")
    return (_WORDS.index(word) if word in _WORDS else len(_WORDS), -np.inf if contrast is None else -contrast)


def _judged(line: Line, job: Job, picture: FloatArray, cells: _Cells, white: FloatArray) -> dict[str, Any] | None:
    """Return the figures of a curve or of spots in the frame."""
    found = measure(line, job.directions, picture, job.sources[0])
    if found is None:
        return None
    around_it = found.beside[:, 1]
    excess = np.minimum(found.on[:, 1] - around_it, cells.most(line.name, found))
    dark = around_it <= 0.0
    contrast = np.where(dark, np.where(excess > 0.0, np.inf, 0.0), excess / np.where(dark, 1.0, around_it))
    limit = threshold(around_it, found.width)
    level = np.maximum(contrast - 2.0 * found.noise, 0.0) / limit
    if not found.peaked and line.name not in cells.own:  # no maximum and no light known as its own: a bend of the sky
        level = np.zeros_like(level)
    best = int(np.argmax(np.nan_to_num(contrast / limit, posinf=1e300)))
    # colour of the excess that is the feature's own, over the same surroundings
    share = np.clip(excess / np.maximum(found.on[:, 1] - around_it, 1e-300), 0.0, 1.0)[best]
    own = found.beside[best] + share * (found.on[best] - found.beside[best])
    return _row(
        contrast=contrast,
        level=level,
        limit=limit,
        best=best,
        one_sided=found.one_sided,
        view=found.views[best],
        weight=found.weight,
        length=float(found.weight.sum()) * (1.0 if line.kind == "spot" else 1.0 / DEG),
        noise=found.noise,
        delta=float(colour_difference(own, found.beside[best], white)),
        around_it=float(around_it[best]),
        width=found.width / DEG,
    )


def _row(
    contrast: FloatArray,
    level: FloatArray,
    limit: FloatArray,
    best: int,
    view: FloatArray,
    weight: FloatArray,
    length: float,
    noise: float,
    delta: float | None,
    around_it: float,
    width: float | None,
    one_sided: bool = False,
) -> dict[str, Any]:
    azimuth, elevation = azimuth_elevation(view)
    highest = float(contrast[best])
    order = np.argsort(contrast)
    middle = order[np.searchsorted(np.cumsum(weight[order]), 0.5 * weight.sum())]
    median = float(contrast[min(int(middle), len(contrast) - 1)])
    return {
        "verdict": verdict(float(level[best])),
        "contrast": highest if np.isfinite(highest) else None,
        "contrast_median": median if np.isfinite(median) else None,
        "noise": noise,
        "threshold": float(limit[best]),
        "delta_e_2000": delta if delta is not None and np.isfinite(delta) else None,
        "surroundings_cd_m2": around_it,
        "share_visible": float(weight[level >= 1.0].sum() / weight.sum()),
        "length_deg": length,
        "width_deg": width,
        "one_sided": one_sided,
        "best": {"azimuth_deg": float(azimuth / DEG), "elevation_deg": float(elevation / DEG)},
    }


@dataclass(frozen=True, eq=False)
class _Cells:
    """Own light of named arcs on the coarse grid of the films, and the picture's on the same."""

    grid: Directions
    luminance: FloatArray
    own: dict[str, FloatArray]
    whole: BoolArray
    cell: float

    @classmethod
    def of(cls, result: Result) -> _Cells:
        job = result.job
        side = group_side(job.directions.shape)
        luminance, whole = in_cells(job, result.xyz[..., 1], side)
        solid = binned(job.directions.solid_angle(), side)
        own = own_light(job, result.parted, side)
        cell = float(np.sqrt(np.median(solid[solid > 0.0])))
        return cls(job.directions.coarse(side), luminance, own, whole >= 0.99, cell)

    def faint(self) -> dict[str, float]:
        """Return the names whose light is in the picture, but nowhere above `FAINT`, with their largest share."""
        found = {}
        for name, light in self.own.items():
            share = np.divide(light, self.luminance, out=np.zeros_like(light), where=self.luminance > 0.0)
            if name not in (OTHER, FURTHER) and 0.0 < share.max(initial=0.0) < FAINT:
                found[name] = float(share.max())
        return found

    def most(self, name: str, found: Measured) -> FloatArray:
        """Return by how much at most a name's own light exceeds its own beside it; no bound where it is not told apart.

        The brightest of a cell and its neighbours, against the mean on both sides, at least `_APART` cells away; more where
        the feature is narrower than a cell.
        """
        if name not in self.own:
            return np.full(len(found.views), np.inf)
        from scipy.ndimage import maximum_filter

        apart = max(1.5 * found.width, _APART * self.cell)
        view, across = np.cos(apart) * found.views[:, None], np.sin(apart) * found.across
        beside = self._at(self.own[name], np.concatenate([view + across, view - across], axis=1)).mean(axis=1)
        excess = self._at(maximum_filter(self.own[name], 3), found.views) - beside
        return np.asarray(excess * max(1.0, self.cell / found.width))

    def _at(self, light: FloatArray, views: FloatArray) -> FloatArray:
        """Return the nearest cell's light in directions (…, 3); 0 outside the picture."""
        there = framed(self.grid, views)
        row, column = (np.rint(np.where(there, place, 0.0)).astype(int) for place in self.grid.project(views))
        rows, columns = light.shape
        found = light[np.clip(row, 0, rows - 1), np.clip(column, 0, columns - 1)]
        return np.asarray(np.where(there, found, 0.0))

    def diffuse(self, line: Line) -> dict[str, Any] | None:
        """Return the figures of diffuse light: its own over all the rest, where it has a tenth of its highest at least."""
        light = np.where(self.whole, self.own.get(line.name, 0.0), 0.0)
        views = self.grid.vectors()
        fair = self.whole & np.isfinite(views[..., 0]) & (self.luminance > 0.0)
        fair &= light > 0.1 * light.max(initial=0.0)
        if not fair.any():
            return None
        light, rest = light[fair], np.maximum(self.luminance[fair] - light[fair], 0.0)
        contrast = np.divide(light, rest, out=np.full_like(light, np.inf), where=rest > 0.0)
        limit = DIFFUSE * threshold(rest, 10.0 * DEG)
        best = int(np.argmax(np.nan_to_num(contrast / limit, posinf=1e300)))
        return _row(
            contrast=contrast,
            level=contrast / limit,
            limit=limit,
            best=best,
            view=views[fair][best],
            weight=np.ones(len(light)),
            length=float(len(light)) * (self.cell / DEG) ** 2,
            noise=0.0,
            delta=None,
            around_it=float(rest[best]),
            width=None,
        )
