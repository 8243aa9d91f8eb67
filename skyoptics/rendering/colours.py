"""Colour without spectra in every pixel, where light depends on the scattering angle alone.

Where a sheet's amount is grey, its spectrum is brought to colour in the table instead of in every pixel: sum and look-up change
places, which is the same to rounding and a third of the work.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from functools import cached_property

import numpy as np

from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.geometry.directions import Directions
from skyoptics.optics.axisymmetric import Axisymmetric
from skyoptics.optics.source import Source
from skyoptics.rendering.build import Job
from skyoptics.rendering.memory import blocks
from skyoptics.rendering.skies import ColourSky
from skyoptics.sky.compose import Scatterer, Sheet
from skyoptics.units import Float32Array, FloatArray

ALONE = 2700
"""Rows of a product of matrices that one thread does alone: frames run side by side, threads of their own are in the way."""


class HeldGrid(Directions):
    """A grid that keeps its viewing directions and pixel sizes; frames under one camera share it."""

    @cached_property
    def _vectors(self) -> FloatArray:
        return super().vectors()

    @cached_property
    def _sizes(self) -> FloatArray:
        return super().pixel_size()

    @cached_property
    def _angles(self) -> tuple[FloatArray, FloatArray]:
        return azimuth_elevation(self._vectors)

    def angles(self, rows: slice = slice(None)) -> tuple[FloatArray, FloatArray]:
        """Return azimuth and elevation of the viewing directions [rad]."""
        azimuth, elevation = self._angles
        return azimuth[rows], elevation[rows]

    def vectors(self, rows: slice = slice(None)) -> FloatArray:
        """Return the viewing directions, as `Directions.vectors`."""
        return self._vectors[rows]

    def pixel_size(self, rows: slice = slice(None)) -> FloatArray:
        """Return the sides of the pixels, as `Directions.pixel_size`."""
        return self._sizes[rows]


def plainly_seen(job: Job, sheets: Sequence[Sheet]) -> bool:
    """Return whether all light depends on the scattering angle alone, comes unpolarised and is seen without devices."""
    natural = (
        job.polariser is None and job.cover == 0.0 and not any(np.any(source.stokes[:, 1:]) for source in job.sources)
    )
    return natural and all(isinstance(one, Axisymmetric) for sheet in sheets for one in sheet.scatterers)


def colours(job: Job, sheets: Sequence[Sheet], matrix: FloatArray, sky: ColourSky | None = None) -> Float32Array:
    """Return XYZ of a job whose light depends on the scattering angle alone, shape (ny, nx, 3) [cd m⁻²].

    Parameters
    ----------
    job : Job
        Without polariser, water and disc over the sun; unpolarised sources.
    sheets : sequence of Sheet
        With `Axisymmetric` scatterers.
    matrix : ndarray, shape (nλ, 3)
        From `skyoptics.colour.observer.weights`.
    sky : ColourSky, optional
        What lies behind, instead of the job's background.
    """
    grid = job.directions
    quick = [[_in_colour(one, source, matrix) for one, source in _pairs(sheet, job)] for sheet in sheets]
    xyz = np.empty((*grid.shape, 3), dtype=np.float32)
    for rows in blocks(grid.shape):
        vectors = grid.vectors(rows)
        azimuth, elevation = grid.angles(rows) if isinstance(grid, HeldGrid) else azimuth_elevation(vectors)
        total = _times(job.background.radiance(vectors), matrix) if sky is None else sky.radiance(vectors)
        for sheet, tables in zip(sheets, quick, strict=True):
            for (scatterer, source), table in zip(_pairs(sheet, job), tables, strict=True):
                amount = sheet.amount(azimuth, elevation, source)
                if amount.shape[-1] == 1:
                    total += _phase(table, source, grid, rows) * amount
                else:
                    total += _times(scatterer.phase(source, grid, rows) * source.irradiance * amount, matrix)
        xyz[rows] = total
    return xyz


def _pairs(sheet: Sheet, job: Job) -> list[tuple[Scatterer, Source]]:
    return list(zip(sheet.scatterers, job.sources, strict=True))


def _in_colour(scatterer: Scatterer, source: Source, matrix: FloatArray) -> Axisymmetric:
    """Return a scatterer whose three bands are X, Y, Z of the light of a source."""
    assert isinstance(scatterer, Axisymmetric)
    table = scatterer.table
    light = table.elements.sum(axis=0)[..., 0] * (scatterer.share * source.irradiance) @ matrix
    elements = np.zeros((1, len(light), 3, 6))
    elements[0, ..., 0] = light
    bands = np.full(3, np.nan)  # no wavelengths any more
    return Axisymmetric(
        replace(
            table,
            elements=elements,
            error=np.zeros(elements.shape[:3]),
            wavelength=bands,
            albedo=bands,
            asymmetry=bands,
        ),
        np.ones(3),
    )


def _phase(scatterer: Axisymmetric, source: Source, grid: Directions, rows: slice) -> FloatArray:
    """Return `Axisymmetric.phase` of three bands; quicker for a table of nodes, by the arc cosine (to 1e-8 rad)."""
    table = scatterer.table
    if table.edges is not None:
        return scatterer.phase(source, grid, rows)
    angle = np.arccos(np.clip(np.einsum("...i,i", grid.vectors(rows), source.direction), -1.0, 1.0))
    bands = (scatterer.share / (4.0 * np.pi)) * table.elements.sum(axis=0)[..., 0]
    return np.stack([np.interp(angle, table.angle, band) for band in bands.T], axis=-1)


def _times(block: FloatArray, matrix: FloatArray) -> FloatArray:
    """Return block @ matrix, shape (..., 3), in this thread alone."""
    flat = block.reshape(-1, block.shape[-1])
    result = np.empty((len(flat), 3))
    for start in range(0, len(flat), ALONE):
        np.matmul(flat[start : start + ALONE], matrix, out=result[start : start + ALONE])
    return result.reshape(*block.shape[:-1], 3)
