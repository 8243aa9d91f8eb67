"""From the scene's crystals to physics: shapes, orientations, imperfections, and how much of each kind floats where."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields, replace
from functools import partial
from typing import Any

import numpy as np

from skyoptics.crystals import habits
from skyoptics.crystals.layer import extinction_at, extinction_table
from skyoptics.crystals.orientations import Orientation, read_tilts, relative_extinction
from skyoptics.crystals.prepared import IDEAL, Guide, Imperfections, Prepared, prepare
from skyoptics.crystals.shapes import Shape
from skyoptics.crystals.sorting import Sorter
from skyoptics.errors import DomainError
from skyoptics.materials import index as material
from skyoptics.optics.source import Source
from skyoptics.scene.model import Mixture
from skyoptics.scene.particles import Crystals
from skyoptics.sky.amount import curtain, layer
from skyoptics.sky.compose import Amount
from skyoptics.sky.slab import slab as slab_of
from skyoptics.units import FloatArray

SHAPES = 16
"""Shapes that stand for a spread of aspect or face distance."""
SHAPES_SEED = 5
"""Of their random face distances: the same crystals for every seed of the rays."""
BIREFRINGENCE = 0.0014
"""n_e − n_o of ice at 589 nm (Ehringhaus, N. Jahrb. Mineral. 41B, 342 (1917), from memory), taken for all wavelengths."""


@dataclass(frozen=True, eq=False)
class CrystalSheet:
    """Crystals of one kind, how they stand and where they hang.

    Parameters
    ----------
    name : str
        For reports.
    index : RefractiveIndex
        Of the ice, relative to what it floats in; the ordinary one of birefringent ice.
    shapes : tuple of Shape
        The crystals, equal numbers of each.
    orientation : Orientation
        Its law.
    diameter : float
        Across corners [m]; for absorption and diffraction.
    bare : callable
        Azimuth, elevation [rad], source → amount [1], of the crystals alone.
    imperfections : Imperfections
        What sets them apart from ideal ones.
    optical_depth : float
        Of the reference extinction: vertical (layer, slab) or along the line of sight (curtain).
    scatterings : int or str
        In a slab 1, 2 or "all"; 0 outside one.
    above : bool
        Whether a layer or slab is looked down on.
    height : float or None
        Of a layer or slab above the observer [m]; None where no air lies between.
    before_land : bool
        Whether a curtain hangs in front of the land.
    fade : callable or None
        Azimuth, elevation [rad], source → what land, air and nearer volumes leave of its light, (…, nλ); None: all.
    """

    name: str
    index: material.RefractiveIndex
    shapes: tuple[Shape, ...]
    orientation: Orientation
    diameter: float
    bare: Amount
    imperfections: Imperfections = IDEAL
    optical_depth: float = 0.0
    scatterings: int | str = 0
    above: bool = False
    height: float | None = None
    before_land: bool = False
    fade: Amount | None = None

    def amount(self, azimuth: FloatArray, elevation: FloatArray, source: Source) -> FloatArray:
        """Return the amount, with what happens to the light on its way, shape (…, nλ) or (…, 1) [1]."""
        bare = self.bare(azimuth, elevation, source)
        return bare if self.fade is None else bare * self.fade(azimuth, elevation, source)

    @property
    def cross_section(self) -> float:
        """Mean projected area of a crystal [m²]."""
        return float(np.mean([shape.mean_projected_area for shape in self.shapes])) * self.diameter**2

    def extinction(self, cos_zenith: FloatArray) -> FloatArray:
        """Return extinction towards a direction ÷ the reference."""
        return relative_extinction(self.shapes, self.orientation, cos_zenith)

    def prepared(
        self,
        source: Source,
        row: int,
        edges: FloatArray,
        spectral_bin: int,
        guide: Guide | None = None,
        sorter: Sorter | None = None,
    ) -> Prepared:
        """Return what the batches of one spectral bin, row `row` of the source, have in common."""
        return prepare(
            self.shapes,
            self.orientation,
            self.index,
            edges,
            source.direction,
            radius=source.disc.radius,
            darkening=source.disc.darkening[row],
            stokes=source.stokes[row],
            size=self.diameter,
            spectral_bin=spectral_bin,
            guide=guide,
            imperfections=self.imperfections,
            sorter=sorter,
        )


def habit_of(asked: Any) -> habits.Habit:
    """Return the kind of crystal asked for by an [[air]] table, or by the options of a curve: both name what a habit holds."""
    given = {field.name: getattr(asked, field.name) for field in fields(habits.Habit) if field.name != "name"}
    return habits.Habit(asked.shape, **given)


def shapes_of(asked: Any) -> tuple[Shape, ...]:
    """Return shapes that stand for the kind of crystal asked for and its spreads."""
    return habits.ensemble(habit_of(asked), SHAPES, SHAPES_SEED)


def crystal_sheet(particles: Crystals, name: str, index: material.RefractiveIndex) -> CrystalSheet:
    """Return the crystals of an [[air]] table; how much of them there is comes with `hang`."""
    orientation = Orientation(
        particles.orientation,
        particles.tilt,
        particles.tilt_law,
        read_tilts(particles.tilt_table) if particles.tilt_table is not None else (),
        particles.axis,
        particles.axis_inclination,
    )
    imperfections = Imperfections(
        particles.angle_spread, BIREFRINGENCE if particles.birefringence else 0.0, particles.diffraction
    )
    if particles.birefringence:  # the table's index is the mean of three: two ordinary, one extraordinary
        index = material.shifted(index, -BIREFRINGENCE / 3.0)
    return CrystalSheet(
        name,
        index,
        shapes_of(particles),
        orientation,
        particles.diameter,
        partial(curtain_amount, optical_depth=0.0, below_horizon=False),
        imperfections,
    )


def hang(
    sheets: Sequence[CrystalSheet], particles: Sequence[Crystals], mixture: Mixture | None
) -> tuple[CrystalSheet, ...]:
    """Return crystals with their optical depths and where they hang.

    Raises
    ------
    DomainError
        If shares and [mixture] do not go together, or tables of one slab disagree.
    """
    depths = shared_depths(sheets, particles, mixture)
    placed = [
        replace(
            sheet,
            optical_depth=depth,
            scatterings=what.scatterings if what.place == "slab" else 0,
            above=what.seen_from == "above",
            height=what.height,
            before_land=what.below_horizon,
        )
        for sheet, what, depth in zip(sheets, particles, depths, strict=True)
    ]
    slab = tuple(sheet for sheet in placed if sheet.scatterings)
    in_slab = [what for what in particles if what.place == "slab"]
    if len({(what.scatterings, what.seen_from, what.height_km) for what in in_slab}) > 1:
        raise DomainError(
            "all tables of a slab share one layer: give them the same scatterings, seen_from and height_km"
        )
    result = []
    total = sum(sheet.optical_depth for sheet in slab)
    table = mixed_extinction(slab) if total > 0.0 else np.ones(2)
    for sheet, what in zip(placed, particles, strict=True):
        amount: Amount
        if what.place == "curtain":
            amount = partial(curtain_amount, optical_depth=sheet.optical_depth, below_horizon=what.below_horizon)
        elif what.place == "layer":
            amount = partial(layer_amount, optical_depth=sheet.optical_depth, above=sheet.above)
        else:
            amount = partial(slab_amount, depth=sheet.optical_depth, total=total, table=table, above=sheet.above)
        result.append(replace(sheet, bare=amount))
    return tuple(result)


def shared_depths(
    sheets: Sequence[CrystalSheet], particles: Sequence[Crystals], mixture: Mixture | None
) -> list[float]:
    """Return the optical depth of each kind: its own, or its share in the mixture's.

    By number the reference extinction goes as share · mean projected area; by cross-section as the share itself; by optical
    depth as share ÷ (extinction towards the zenith ÷ reference).
    """
    sharing = [what.share is not None for what in particles]
    if not any(sharing):
        if mixture is not None:
            raise DomainError("no [[air]] table has a share in it; give one, or leave [mixture] out")
        return [what.optical_depth for what in particles]
    if mixture is None:
        raise DomainError("is missing: [[air]] tables with a share need a [mixture] with optical_depth and by")
    weights = np.zeros(len(sheets))
    for number, (sheet, what) in enumerate(zip(sheets, particles, strict=True)):
        if what.share is None:
            continue
        if "optical_depth" in what.model_fields_set:
            raise DomainError(f"{sheet.name} has a share and an optical_depth of its own; keep one of the two")
        factor = {
            "number": sheet.cross_section,
            "cross-section": 1.0,
            "optical-depth": 1.0 / float(sheet.extinction(np.ones(1))[0]),
        }[mixture.by]
        weights[number] = what.share * factor
    if not weights.sum() > 0.0:
        raise DomainError("the shares of its [[air]] tables add up to 0; give one of them a share above 0")
    scale = mixture.optical_depth
    if mixture.by == "optical-depth":  # the sum of vertical depths as they stand is the stated one
        scale /= sum(what.share or 0.0 for what in particles)
    else:
        scale /= weights.sum()
    return [
        float(weights[number] * scale) if shares else what.optical_depth
        for number, (what, shares) in enumerate(zip(particles, sharing, strict=True))
    ]


def curtain_amount(
    azimuth: FloatArray, elevation: FloatArray, source: Source, optical_depth: float, below_horizon: bool
) -> FloatArray:
    """Return the amount of a curtain, whatever the source."""
    return curtain(elevation, optical_depth, below_horizon)[..., None]


def layer_amount(
    azimuth: FloatArray, elevation: FloatArray, source: Source, optical_depth: float, above: bool = False
) -> FloatArray:
    """Return the amount of a thin layer, whatever the source; `above`: of one that is looked down on."""
    return layer(-elevation if above else elevation, optical_depth)[..., None]


def slab_amount(
    azimuth: FloatArray,
    elevation: FloatArray,
    source: Source,
    depth: float,
    total: float,
    table: FloatArray,
    above: bool,
) -> FloatArray:
    """Return the amount of one kind of crystals in a slab that all kinds of it weaken.

    Parameters
    ----------
    azimuth, elevation : ndarray
        Of lines of sight [rad].
    source : Source
        What lights the slab.
    depth, total : float
        Optical depth of the kind, and of all kinds of the slab.
    table : ndarray
        Extinction of all kinds together, from `mixed_extinction`.
    above : bool
        Whether the slab is looked down on.
    """
    if depth == 0.0:
        return np.zeros((*np.shape(elevation), 1))
    sun_elevation = float(np.arcsin(np.clip(source.direction[2], -1.0, 1.0)))
    amount = slab_of(elevation, sun_elevation, total, partial(extinction_at, table))
    return np.where(elevation <= 0.0 if above else elevation >= 0.0, depth / total * amount, 0.0)[..., None]


def mixed_extinction(sheets: Sequence[CrystalSheet]) -> FloatArray:
    """Return extinction ÷ reference of several kinds together, weighted by optical depth, at the knots of `extinction_at`."""
    parts = [sheet.optical_depth * extinction_table(sheet.shapes, sheet.orientation) for sheet in sheets]
    return np.asarray(sum(parts) / sum(sheet.optical_depth for sheet in sheets))
