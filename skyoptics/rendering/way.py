"""Volumes of a scene on the way: rain shafts, cloud layers and the air between them dim what is behind, and light up."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import partial

import numpy as np

from skyoptics.crystals.layer import extinction_at
from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.light.air import Air
from skyoptics.optics.bins import Bins
from skyoptics.optics.source import Source
from skyoptics.rendering.clouds import CrystalSheet, mixed_extinction
from skyoptics.rendering.landscape import Landscape
from skyoptics.rendering.rain import EYE_HEIGHT, DropSheet
from skyoptics.sky.compose import Behind
from skyoptics.sky.ground import Ground
from skyoptics.sky.haze import LONGEST, Haze
from skyoptics.sky.shaft import Shaft
from skyoptics.sky.volumes import Layer, SeenThrough, Way, aloft, ambient
from skyoptics.units import DEG, FloatArray

RELIEF = 0.1 * DEG
"""Land that stands up higher hides rain behind it [rad]."""


@dataclass(frozen=True, eq=False)
class Surroundings:
    """Where the particles of a scene hang.

    Parameters
    ----------
    bins : Bins
        The nλ spectral bins.
    sources : sequence of Source
        The sun or moon as the observer on the ground sees it, and its mirror image.
    sky : Behind
        What lies behind all.
    air : Air or None
        What dims the light; None for none.
    haze : Haze or None
        Air near the ground.
    eye_height : float
        Of the observer above the ground [m].
    ground : Ground or None
        The land; None where the sky brings its own.
    pixel : float
        Width of the land's edge [rad].
    """

    bins: Bins
    sources: Sequence[Source]
    sky: Behind
    air: Air | None
    haze: Haze | None
    eye_height: float
    ground: Ground | None
    pixel: float

    def way(self, stops: Sequence[Shaft | Layer], ambient: FloatArray) -> Way:
        """Return volumes one behind the other."""
        sun_elevation = float(azimuth_elevation(self.sources[0].direction)[1])
        eye = max(self.eye_height, EYE_HEIGHT)
        return Way(self.bins, stops, self.haze, self.air, ambient, sun_elevation, eye)


def put_in_place(
    sheets: Sequence[DropSheet | CrystalSheet], around: Surroundings
) -> tuple[Behind, list[DropSheet | CrystalSheet]]:
    """Put volumes and land before each other and before the sky.

    Parameters
    ----------
    sheets : sequence of DropSheet or CrystalSheet
        All that scatters. Curtains and thin layers without a height are no volumes: they weaken nothing, but land hides
        them, save curtains that hang before it.
    around : Surroundings
        Sky, air, land.

    Returns
    -------
    background : Behind
        As it is seen.
    sheets : list
        With what is left of their light.
    """
    stops, of_sheet = _stops(sheets)
    hidden = [_behind_land(sheet, around.ground) for sheet in sheets]
    back = sorted({stop for number, stop in of_sheet.items() if hidden[number] or around.ground is None})
    front = [number for number in range(len(stops)) if number not in back]
    field = ambient(around.sky) if stops else np.zeros(len(around.bins))
    seen = around.sky
    ways: dict[int, tuple[Way, int]] = {}
    if back:
        far = around.way([stops[number] for number in back], field)
        seen = SeenThrough(seen, far)
        ways |= {number: (far, place) for place, number in enumerate(back)}
    land = None
    if around.ground is not None:
        seen = land = Landscape(seen, around.ground, around.pixel)
    near = None
    if front:
        near = around.way([stops[number] for number in front], field)
        seen = SeenThrough(seen, near)
        ways |= {number: (near, place) for place, number in enumerate(front)}
    result = []
    for number, sheet in enumerate(sheets):
        way = ways.get(of_sheet.get(number, -1))
        ratios = {}
        if isinstance(sheet, CrystalSheet) and sheet.height is not None and around.air is not None:
            ratios = {_key(source): aloft(around.air, around.bins, source, sheet.height) for source in around.sources}
        before = land if hidden[number] else None
        if way is None and before is None:
            result.append(sheet)
            continue
        veil = near if hidden[number] else None
        result.append(replace(sheet, fade=partial(_left, way=way, land=before, veil=veil, ratios=ratios)))
    return seen, result


def _left(
    azimuth: FloatArray,
    elevation: FloatArray,
    source: Source,
    way: tuple[Way, int] | None,
    land: Landscape | None,
    veil: Way | None,
    ratios: Mapping[tuple[float, ...], FloatArray],
) -> FloatArray:
    """Return what is left of a sheet's light, shape (…, nλ) or (…, 1)."""
    left: FloatArray = np.ones((*np.shape(elevation), 1))
    if way is not None:
        left = way[0].fade(way[1], elevation)
    if ratios:
        left = left * ratios[_key(source)]
    if veil is not None:
        left = left * veil.clear(elevation)
    if land is not None:
        left = left * (1.0 - land.covered(azimuth, elevation))[..., None]
    return left


def _stops(sheets: Sequence[DropSheet | CrystalSheet]) -> tuple[list[Shaft | Layer], dict[int, int]]:
    """Return the volumes, and which sheet is in which of them."""
    stops: list[Shaft | Layer] = []
    of_sheet: dict[int, int] = {}
    slab = tuple(sheet for sheet in sheets if isinstance(sheet, CrystalSheet) and sheet.scatterings)
    depth = sum(sheet.optical_depth for sheet in slab)
    of_slab = None
    for number, sheet in enumerate(sheets):
        if isinstance(sheet, DropSheet):
            if sheet.shaft is not None:
                of_sheet[number] = len(stops)
                stops.append(sheet.shaft)
        elif sheet.scatterings and depth > 0.0:
            if of_slab is None:
                of_slab = len(stops)
                stops.append(Layer(sheet.height, depth, partial(extinction_at, mixed_extinction(slab)), sheet.above))
            of_sheet[number] = of_slab
        elif sheet.height is not None:
            of_sheet[number] = len(stops)
            stops.append(Layer(sheet.height, 0.0, sheet.extinction, sheet.above))
    return stops, of_sheet


def _behind_land(sheet: DropSheet | CrystalSheet, ground: Ground | None) -> bool:
    """Return whether land hides a sheet: all that hangs farther away than the land, or ends at the horizon."""
    if ground is None:
        return False
    if isinstance(sheet, DropSheet) and sheet.shaft is not None:
        return ground.profile.highest > RELIEF and sheet.shaft.near >= ground.distance
    return not (sheet.before_land or (isinstance(sheet, CrystalSheet) and sheet.above))


def haze_of(air: Air | None, visual_range: float | None) -> Haze | None:
    """Return the haze near the ground: by its visual range, or as the air has it at the ground.

    Extinction on the ground is the vertical depth ÷ the scale height.
    """
    if visual_range is not None:
        exponent, height = (1.3, 2000.0) if air is None else (air.aerosol_exponent, air.aerosol_height)
        return Haze(min(visual_range, LONGEST), exponent, height)
    if air is None:
        return None
    return Haze.of(air)


def _key(source: Source) -> tuple[float, ...]:
    return tuple(float(part) for part in np.round(source.direction, 9))
