"""Axisymmetric scatterers: a table seen from a source, averaged over its disc, looked up by direction."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from skyoptics.geometry.axes import angle_between
from skyoptics.geometry.directions import Directions
from skyoptics.optics.source import Disc, Source
from skyoptics.optics.table import ScatteringTable
from skyoptics.units import FloatArray


def over_disc(table: ScatteringTable, disc: Disc, angle: FloatArray | None = None) -> ScatteringTable:
    """Return the table as seen under a disc: its exact two-dimensional average over the disc's brightness.

    Parameters
    ----------
    table : ScatteringTable
        Bins or nodes.
    disc : Disc
        Radius and limb darkening, one row a spectral bin of the table.
    angle : ndarray, optional
        Scattering angles wanted [rad]; default the table's own, with 0 and π.

    Returns
    -------
    ScatteringTable
        Nodes. Elements that rotate with the scattering plane are averaged as if the plane stood still over the disc,
        which changes P12 … P44 within a few disc radii of 0 and π only. A disc of no size gives the table back.
    """
    if disc.radius == 0.0:
        return table
    from skyoptics.kernels.disc import disc_average

    if angle is None:
        angle = np.unique(np.concatenate([[0.0], table.angle, [np.pi]]))
    node, weight = np.polynomial.legendre.leggauss(12)
    node, weight = 0.5 * (node + 1.0), 0.5 * weight
    knots = table.angle if table.edges is None else table.edges
    parts, _, bands, elements = table.elements.shape
    out = np.empty((parts, len(angle), bands, elements))
    variance = np.empty((parts, len(angle), bands))
    for part in range(parts):
        disc_average(
            angle,
            knots,
            table.edges is None,
            np.ascontiguousarray(table.elements[part]),
            np.ascontiguousarray(table.error[part] ** 2),
            disc.radius,
            np.ascontiguousarray(disc.darkening),
            node,
            weight,
            out[part],
            variance[part],
        )
    return replace(table, angle=angle, elements=out, error=np.sqrt(variance), edges=None)


@dataclass(frozen=True, eq=False)
class Axisymmetric:
    """A scatterer whose phase function depends on the scattering angle alone.

    Parameters
    ----------
    table : ScatteringTable
        Averaged over the source's disc already; its parts are summed.
    share : ndarray, shape (nλ,)
        ∫ phase dΩ of a table with ∫ P11 dΩ = 4π: scattered cross-section ÷ reference extinction cross-section. For ray
        optics ½ · albedo, the other half of the extinction being diffraction.
    """

    table: ScatteringTable
    share: FloatArray

    def phase(self, source: Source, directions: Directions, rows: slice = slice(None)) -> FloatArray:
        """Return differential scattering cross-section ÷ reference extinction cross-section.

        Parameters
        ----------
        source : Source
            Its direction is used here; its disc is in the table.
        directions : Directions
            Grid.
        rows : slice, optional
            Only these rows.

        Returns
        -------
        ndarray, shape (ny, nx, nλ)
            [sr⁻¹]; nan outside the image. A table of bins is averaged over each pixel's own width in scattering angle, so
            that a caustic narrower than a pixel keeps its light; a table of nodes is read at the pixel's centre.
        """
        theta = angle_between(source.direction, directions.vectors(rows))
        curve = self.table.elements[..., 0].sum(axis=0) * (self.share / (4.0 * np.pi))
        if self.table.edges is None:
            return _interpolate(theta, self.table.angle, curve)
        half = 0.5 * directions.pixel_size(rows)
        cosine = np.cos(self.table.edges)
        running = np.zeros((len(cosine), curve.shape[1]))
        np.cumsum(curve * -np.diff(cosine)[:, None], axis=0, out=running[1:])
        near = np.cos(np.clip(theta - half, 0.0, np.pi))
        far = np.cos(np.clip(theta + half, 0.0, np.pi))
        gain = _interpolate(-far, -cosine, running) - _interpolate(-near, -cosine, running)
        return gain / (near - far)[..., None]

    def extinction(self, cos_zenith: FloatArray) -> FloatArray:
        """Return extinction towards directions ÷ reference, shape (…, nλ): 1 for a scatterer without orientation."""
        return np.ones((*np.shape(cos_zenith), len(self.share)))


def _interpolate(x: FloatArray, knots: FloatArray, values: FloatArray) -> FloatArray:
    """Interpolate columns of values (n, nλ) at x (…), held beyond the ends; nan stays nan."""
    flat = np.nan_to_num(x, nan=0.0)
    cell = np.clip(np.searchsorted(knots, flat, side="right") - 1, 0, len(knots) - 2)
    fraction = np.clip((flat - knots[cell]) / (knots[cell + 1] - knots[cell]), 0.0, 1.0)[..., None]
    result: FloatArray = values[cell] * (1.0 - fraction) + values[cell + 1] * fraction
    result[np.isnan(x)] = np.nan
    return result
