"""The light of named arcs in a picture: how bright each is where, on the coarse grid of the films' groups."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from skyoptics.colour.observer import weights
from skyoptics.crystals.tracing import coarse_shape
from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.geometry.directions import Directions
from skyoptics.optics.axisymmetric import Axisymmetric, over_disc
from skyoptics.optics.source import Source
from skyoptics.optics.table import ScatteringTable
from skyoptics.rendering.build import Job
from skyoptics.rendering.clouds import CrystalSheet
from skyoptics.rendering.expose import Work
from skyoptics.units import ArrayLike, FloatArray

OTHER = "other"
"""Name of the light that belongs to no named arc."""
FURTHER = "further_scatterings"
"""Name of the light that met two crystals or more."""


@dataclass(frozen=True, eq=False)
class Parted:
    """The light of a sheet of crystals under a source, by name: a film with groups, or a table by parts."""

    sheet: CrystalSheet
    source: Source
    work: Work | None = None
    table: ScatteringTable | None = None
    copy: int = 0

    @property
    def names(self) -> tuple[str, ...]:
        """Names that the light may have."""
        if self.work is not None:
            return self.work.sorter.names
        assert self.table is not None
        return self.table.parts

    def scatterer(self, names: Sequence[str]) -> Axisymmetric:
        """Return the light of some names of a table as a scatterer."""
        assert self.table is not None
        part = self.table.select(names).total()
        return Axisymmetric(over_disc(part, self.source.disc), 0.5 * np.asarray(self.table.albedo))


def binned(values: FloatArray, side: int) -> FloatArray:
    """Return sums of a picture's values (ny, nx) over the cells of the coarse grid; nan counts as 0."""
    rows = np.add.reduceat(np.nan_to_num(values), np.arange(0, values.shape[0], side), axis=0)
    return np.asarray(np.add.reduceat(rows, np.arange(0, values.shape[1], side), axis=1))


def in_cells(job: Job, luminance: ArrayLike, side: int) -> tuple[FloatArray, FloatArray]:
    """Return a picture's luminance on the coarse grid, and how much of each cell lies on one side of the horizon.

    Parameters
    ----------
    job : Job
        Grid.
    luminance : array_like, shape (ny, nx)
        [cd m⁻²]; nan outside the image.
    side : int
        Pixels along the side of a cell.

    Returns
    -------
    luminance : ndarray, shape (rows, columns)
        Mean over solid angle [cd m⁻²]; 0 outside the image.
    whole : ndarray, shape (rows, columns)
        Share of the cell's pixels on the side of the horizon where most of them are: below 1 on the horizon and on rims,
        where own light misleads.
    """
    pixels = job.directions.solid_angle()
    solid, flux = binned(pixels, side), binned(np.asarray(luminance, dtype=np.float64) * pixels, side)
    mean = np.divide(flux, solid, out=np.zeros_like(flux), where=solid > 0.0)
    _, elevation = azimuth_elevation(job.directions.vectors())
    above = binned((elevation >= 0.0).astype(np.float64), side)
    below = binned((elevation < 0.0).astype(np.float64), side)
    return mean, np.maximum(above, below) / side**2


def own_light(job: Job, parted: Sequence[Parted], side: int) -> dict[str, FloatArray]:
    """Return the luminance of each name on the coarse grid, all sheets and sources together.

    Parameters
    ----------
    job : Job
        Grid, wavelengths.
    parted : sequence of Parted
        Sheets of crystals.
    side : int
        Pixels along the side of a cell.

    Returns
    -------
    dict of ndarray, shape (rows, columns)
        [cd m⁻²], 0 outside the image.
    """
    result: dict[str, FloatArray] = {}
    for name, light in _lights(job, parted, side):
        result[name] = result.get(name, 0.0) + light
    return result


def _lights(job: Job, parted: Sequence[Parted], side: int) -> Iterator[tuple[str, FloatArray]]:
    eye = weights(job.bins)[:, 1]
    grid: Directions = job.directions.coarse(side)
    azimuth, elevation = azimuth_elevation(grid.vectors())
    inside = np.isfinite(elevation)
    solid = binned(job.directions.solid_angle(), side)
    assert solid.shape == coarse_shape(job.directions.shape, side)
    for part in parted:
        light = eye * part.source.irradiance
        amount = part.sheet.amount(np.nan_to_num(azimuth), np.nan_to_num(elevation), part.source)
        amount = np.where(inside[..., None], amount, 0.0)
        if part.work is not None:
            film = part.work.film
            if film.groups is None:
                continue
            lit = np.moveaxis(np.broadcast_to(light * amount, (*solid.shape, len(light))), -1, 0)
            power = np.einsum("w,wyx,wgyx->gyx", film.scale(), lit, film.groups, optimize=True)
            per_solid = np.divide(1.0, solid, out=np.zeros_like(solid), where=solid > 0.0)
            yield from zip(film.names, power * per_solid, strict=True)
            continue
        for name in part.names:
            phase = part.scatterer([name]).phase(part.source, grid)
            yield name, np.nan_to_num(phase * amount) @ light
