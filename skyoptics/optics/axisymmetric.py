"""Axisymmetric scatterers: a table seen from a source, averaged over its disc, looked up by direction."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from skyoptics.geometry.axes import angle_between
from skyoptics.geometry.directions import Directions
from skyoptics.optics.polarisation import plane_angle
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
    relative_extinction : ndarray, shape (nλ,), optional
        Extinction ÷ reference; 1 where the reference is the extinction of every wavelength alike, as in ray optics.
    """

    table: ScatteringTable
    share: FloatArray
    relative_extinction: FloatArray | None = None

    def phase(
        self, source: Source, directions: Directions, rows: slice = slice(None), stokes: bool = False
    ) -> FloatArray:
        """Return differential scattering cross-section ÷ reference extinction cross-section.

        Parameters
        ----------
        source : Source
            Its direction and polarisation are used here; its disc is in the table.
        directions : Directions
            Grid.
        rows : slice, optional
            Only these rows.
        stokes : bool, optional
            Whether all four Stokes components are wanted.

        Returns
        -------
        ndarray, shape (ny, nx, nλ) or (ny, nx, nλ, 4)
            [sr⁻¹]; nan outside the image. Q and U in the meridian frame of each direction. A table of bins is averaged over
            each pixel's own width in scattering angle, so that a caustic narrower than a pixel keeps its light; a table of
            nodes is read at the pixel's centre.
        """
        view = directions.vectors(rows)
        theta = angle_between(source.direction, view)
        half = 0.5 * directions.pixel_size(rows) if self.table.edges is not None else None
        polarised = bool(np.any(source.stokes[:, 1:]))
        if not polarised and not stokes:
            return self._look_up(theta, half, (0,))[0]
        p11, p12, p22, p33, p34, p44 = self._look_up(theta, half, range(6))
        turn = 2.0 * plane_angle(source.direction, view)[..., None]
        _, q, u, v = source.stokes.T
        q, u = q * np.cos(turn) + u * np.sin(turn), u * np.cos(turn) - q * np.sin(turn)
        intensity = p11 + p12 * q
        if not stokes:
            return intensity
        along, across = p12 + p22 * q, p33 * u + p34 * v
        turn = 2.0 * plane_angle(view, source.direction)[..., None]
        return np.stack(
            [
                intensity,
                along * np.cos(turn) - across * np.sin(turn),
                along * np.sin(turn) + across * np.cos(turn),
                p44 * v - p34 * u,
            ],
            axis=-1,
        )

    def _look_up(self, theta: FloatArray, half: FloatArray | None, columns: Sequence[int]) -> list[FloatArray]:
        """Return elements at scattering angles, each (…, nλ) [sr⁻¹]; means over θ ± half for a table of bins."""
        curves = self.table.elements.sum(axis=0) * (self.share / (4.0 * np.pi))[:, None]
        if self.table.edges is None or half is None:
            return [_interpolate(theta, self.table.angle, curves[..., column]) for column in columns]
        cosine = np.cos(self.table.edges)
        near = np.cos(np.clip(theta - half, 0.0, np.pi))
        far = np.cos(np.clip(theta + half, 0.0, np.pi))
        found = []
        for column in columns:
            running = np.zeros((len(cosine), curves.shape[1]))
            np.cumsum(curves[..., column] * -np.diff(cosine)[:, None], axis=0, out=running[1:])
            gain = _interpolate(-far, -cosine, running) - _interpolate(-near, -cosine, running)
            found.append(gain / (near - far)[..., None])
        return found

    def extinction(self, cos_zenith: FloatArray) -> FloatArray:
        """Return extinction towards directions ÷ reference, shape (…, nλ); the same in all directions."""
        value = np.ones(len(self.share)) if self.relative_extinction is None else self.relative_extinction
        return np.broadcast_to(value, (*np.shape(cos_zenith), len(self.share)))


def _interpolate(x: FloatArray, knots: FloatArray, values: FloatArray) -> FloatArray:
    """Interpolate columns of values (n, nλ) at x (…), held beyond the ends; nan stays nan."""
    flat = np.nan_to_num(x, nan=0.0)
    cell = np.clip(np.searchsorted(knots, flat, side="right") - 1, 0, len(knots) - 2)
    fraction = np.clip((flat - knots[cell]) / (knots[cell + 1] - knots[cell]), 0.0, 1.0)[..., None]
    result: FloatArray = values[cell] * (1.0 - fraction) + values[cell + 1] * fraction
    result[np.isnan(x)] = np.nan
    return result
