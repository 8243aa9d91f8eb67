"""Scatterers without axial symmetry about the light's direction: tables by scattering angle and position angle.

The position angle of a viewing direction is taken about the antisolar point (the direction opposite to the source): 0
towards the zenith, clockwise as seen by the observer. A table belongs to one height of the source.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.geometry.axes import angle_between, azimuth_elevation, direction
from skyoptics.geometry.directions import Directions
from skyoptics.optics.polarisation import plane_angle, rotation
from skyoptics.optics.source import Disc, Source
from skyoptics.units import DEG, Float32Array, FloatArray

_SAME_HEIGHT = 0.01 * DEG


@dataclass(frozen=True, eq=False)
class PositionTable:
    """A scatterer whose light depends on scattering angle and position angle.

    Parameters
    ----------
    angle : ndarray, shape (nθ,)
        Scattering angles, ascending [rad]: bin centres where `edges` are given, else nodes, linear between them.
    position : ndarray, shape (nφ,)
        Equally spaced nodes, 0 … π for a table symmetric about the vertical through the source, else −π … π [rad].
    values : ndarray, float32, shape (nφ, nθ, nλ, 4)
        Stokes vector of the light scattered from the source's own, differential scattering cross-section ÷ reference
        extinction cross-section, in the scattering frame of `skyoptics.optics.polarisation` [sr⁻¹].
    elevation : float
        Of the source [rad].
    cos_zenith, shadow : ndarray, shape (m,)
        Extinction towards directions ÷ reference, linear between values of |cos zenith angle| from 0 to 1.
    edges : ndarray, shape (nθ + 1,), optional
        Edges of angle bins [rad].
    report : dict
        How the table was made.
    """

    angle: FloatArray
    position: FloatArray
    values: Float32Array
    elevation: float
    cos_zenith: FloatArray
    shadow: FloatArray
    edges: FloatArray | None = None
    report: dict[str, Any] = field(default_factory=dict)

    @property
    def symmetric(self) -> bool:
        """Whether one half stands for both."""
        return bool(self.position[0] == 0.0)

    def phase(self, source: Source, directions: Directions, rows: slice = slice(None)) -> FloatArray:
        """Return differential scattering cross-section ÷ reference extinction cross-section.

        Parameters
        ----------
        source : Source
            At the height the table was made for; its disc and polarisation are in the table.
        directions : Directions
            Grid.
        rows : slice, optional
            Only these rows.

        Returns
        -------
        ndarray, shape (ny, nx, nλ)
            [sr⁻¹]; nan outside the image. A table of bins is averaged over each pixel's own width in scattering angle; a
            table of nodes is read at the pixel's centre.

        Raises
        ------
        DomainError
            If the source stands elsewhere than the table's.
        """
        return self._look_up(source, directions, rows, 1)[..., 0]

    def stokes(self, source: Source, directions: Directions, rows: slice = slice(None)) -> FloatArray:
        """Return the same as Stokes vectors in the picture's frame of elevation, shape (ny, nx, nλ, 4) [sr⁻¹]."""
        value = self._look_up(source, directions, rows, 4)
        # the scattering plane holds the source: its position angle at the viewing direction
        turn = rotation(-plane_angle(directions.vectors(rows), source.direction))
        return np.asarray(np.einsum("yxij,yxwj->yxwi", turn, value))

    def extinction(self, cos_zenith: FloatArray) -> FloatArray:
        """Return extinction towards directions ÷ reference, shape (…, nλ)."""
        value = np.interp(np.abs(np.asarray(cos_zenith, dtype=np.float64)), self.cos_zenith, self.shadow)
        return np.asarray(np.repeat(value[..., None], self.values.shape[2], axis=-1))

    def energy(self) -> FloatArray:
        """Return ∫ phase dΩ, shape (nλ,): ½ (1 − absorbed) · extinction towards the source, for all orders."""
        from_axis = np.cos(self.edges) if self.edges is not None else np.cos(_middles(self.angle))
        weight = np.full(len(self.position), self.position[1] - self.position[0])
        weight[[0, -1]] *= 0.5
        ring = np.einsum("ptw,p->tw", self.values[..., 0].astype(np.float64), weight)
        return np.asarray(-np.diff(from_axis) @ ring) * (2.0 if self.symmetric else 1.0)

    def over_disc(self, disc: Disc) -> PositionTable:
        """Return the table under a disc: its average over the disc's brightness, as nodes.

        The position angle is held over the disc, which is right to a per mille of the light at more than ten disc radii
        from the source and the antisolar point; nearer to them the table hardly depends on it.
        """
        if disc.radius == 0.0:
            return self
        from skyoptics.kernels.disc import disc_average

        columns, rows, bands, parts = self.values.shape
        angle = np.unique(np.concatenate([[0.0], self.angle, [np.pi]]))
        node, weight = np.polynomial.legendre.leggauss(12)
        packed = np.moveaxis(self.values, 0, 2).reshape(rows, bands, columns * parts)
        out = np.empty((len(angle), bands, columns * parts), dtype=np.float32)
        disc_average(
            angle,
            self.angle if self.edges is None else self.edges,
            self.edges is None,
            np.ascontiguousarray(packed),
            np.zeros((rows, bands)),
            disc.radius,
            np.ascontiguousarray(disc.darkening),
            0.5 * (node + 1.0),
            0.5 * weight,
            out,
            np.empty((len(angle), bands)),
        )
        values = np.ascontiguousarray(np.moveaxis(out.reshape(len(angle), bands, columns, parts), 2, 0))
        return replace(self, angle=angle, values=values, edges=None)

    def _look_up(self, source: Source, directions: Directions, rows: slice, parts: int) -> FloatArray:
        """Return the first Stokes components, shape (ny, nx, nλ, parts), in the scattering frame."""
        elevation = float(np.arcsin(np.clip(source.direction[2], -1.0, 1.0)))
        if abs(elevation - self.elevation) > _SAME_HEIGHT:
            raise DomainError(
                f"this table was made for a source at {self.elevation / DEG:.2f} degrees, not {elevation / DEG:.2f}"
            )
        view = directions.vectors(rows)
        theta = angle_between(source.direction, view)
        position = position_angle(source.direction, view)
        mirrored = np.where(position < 0.0, -1.0, 1.0)
        if self.symmetric:
            position = np.abs(position)
        outside = np.isnan(theta)
        step = self.position[1] - self.position[0]
        place = np.where(outside, 0.0, (position - self.position[0]) / step)
        column = np.clip(place.astype(np.int64), 0, len(self.position) - 2)
        part = np.clip(place - column, 0.0, 1.0)[..., None, None]
        if self.edges is None:
            first = _between(theta, self.angle, self.values[..., :parts], column)
            second = _between(theta, self.angle, self.values[..., :parts], column + 1)
        else:
            half = 0.5 * directions.pixel_size(rows)
            cosine = np.cos(self.edges)
            share = self.values[..., :parts] * -np.diff(cosine)[:, None, None]
            running = np.zeros((len(self.position), len(cosine), *share.shape[2:]))
            np.cumsum(share, axis=1, out=running[:, 1:])
            near = np.cos(np.clip(theta - half, 0.0, np.pi))
            far = np.cos(np.clip(theta + half, 0.0, np.pi))
            width = (near - far)[..., None, None]
            first = (_between(-far, -cosine, running, column) - _between(-near, -cosine, running, column)) / width
            column = column + 1
            second = (_between(-far, -cosine, running, column) - _between(-near, -cosine, running, column)) / width
        result = first + part * (second - first)
        if self.symmetric and parts > 2:
            result[..., 2:] *= mirrored[..., None, None]
        result[outside] = np.nan
        return np.asarray(result, dtype=np.float64)


def position_angle(source: FloatArray, view: FloatArray) -> FloatArray:
    """Return position angles about the antisolar point, −π … π, shape (...) [rad].

    Parameters
    ----------
    source : ndarray, shape (3,)
        Viewing direction of the source.
    view : ndarray, shape (..., 3)
        Viewing directions.
    """
    azimuth, elevation = azimuth_elevation(-np.asarray(source, dtype=np.float64))
    up = direction(azimuth, elevation + 0.5 * np.pi)
    right = np.array([np.cos(azimuth), -np.sin(azimuth), 0.0])
    return np.asarray(np.arctan2(view @ right, view @ up))


def _between(x: FloatArray, knots: FloatArray, values: Any, column: Any) -> FloatArray:
    """Interpolate values (nφ, n, …) at x (…) in given columns, held beyond the ends."""
    flat = np.nan_to_num(x, nan=0.0)
    cell = np.clip(np.searchsorted(knots, flat, side="right") - 1, 0, len(knots) - 2)
    fraction = np.clip((flat - knots[cell]) / (knots[cell + 1] - knots[cell]), 0.0, 1.0)[..., None, None]
    before = values[column, cell]
    return np.asarray(before + fraction * (values[column, cell + 1] - before))


def _middles(nodes: FloatArray) -> FloatArray:
    """Return edges half way between nodes, ends included."""
    return np.concatenate([nodes[:1], 0.5 * (nodes[1:] + nodes[:-1]), nodes[-1:]])
