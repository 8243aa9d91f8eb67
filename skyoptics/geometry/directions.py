"""A grid of directions: what a camera makes and a tracer fills.

A grid is `shape` (rows, columns), a rotation from the world to the grid's own axes, and one of two maps.

*Radial* (every lens): own axes x to the right, y up, z forward. With q = (1 − z)/2, a direction (x, y, z) lands at

    column = column_centre + scale · k(q) · x,    row = row_centre − scale · k(q) · y,

k a polynomial of degree ≤ 16, fitted from the lens formula over 0 ≤ q ≤ q_max. Directions with q > q_max, and pixels
further out than they reach, are outside the image. So a lens is data, and no kernel knows its name.

*Cylindrical* (panorama, whole-sky map, scattering-angle axis): longitude and latitude about the pole z,

    column = (longitude − longitude_first) / longitude_step,    row = (latitude_first − latitude) / latitude_step,

longitude atan2(y, x), counted so that the column falls into [−½, nx − ½) if any turn of it does.

Pixel coordinates: pixel centres are whole numbers, row 0 on top, column 0 on the left.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.polynomial import Chebyshev, Polynomial

from skyoptics.errors import DomainError
from skyoptics.units import Float32Array, FloatArray

RADIAL = 0
CYLINDRICAL = 1
DEGREE = 16
PACKED_LENGTH = 40
_AT_ONCE = 1 << 19
"""Pixels whose corners are held at once: a picture for print has tens of millions."""


@dataclass(frozen=True, eq=False)
class Directions:
    """A grid of viewing directions; build one with `radial` or `cylindrical`.

    Parameters
    ----------
    kind : int
        `RADIAL` or `CYLINDRICAL`.
    shape : tuple of int
        Rows, columns.
    rotation : ndarray, shape (3, 3)
        World → own axes.
    map : tuple of float
        Radial: scale [pixel], column_centre, row_centre [pixel], q_max. Cylindrical: longitude_first, longitude_step,
        latitude_first, latitude_step [rad].
    coefficients : ndarray, shape (DEGREE + 1,)
        Of k in powers of q / q_max (radial only; zeros else).
    """

    kind: int
    shape: tuple[int, int]
    rotation: FloatArray
    map: tuple[float, float, float, float]
    coefficients: FloatArray = field(default_factory=lambda: np.zeros(DEGREE + 1))

    @classmethod
    def radial(
        cls,
        shape: tuple[int, int],
        rotation: FloatArray,
        scale: float,
        k: Callable[[FloatArray], FloatArray],
        angle_max: float,
        centre: tuple[float, float] | None = None,
    ) -> Directions:
        """Return the grid of a lens.

        Parameters
        ----------
        shape : tuple of int
            Rows, columns.
        rotation : ndarray, shape (3, 3)
            World → own axes (right, up, forward).
        scale : float
            Focal length in pixels.
        k : callable
            Image radius / (scale · sin θ) as a function of the angle θ from the axis [rad].
        angle_max : float
            Largest angle from the axis that the image holds, below π [rad].
        centre : tuple of float, optional
            Row and column where the axis lands; default the middle of the grid.
        """
        if not 0.0 < angle_max < np.pi or not scale > 0.0:
            raise DomainError("a lens needs a focal length above 0 and an image of less than 180° from the axis")
        q_max = float(np.sin(angle_max / 2.0) ** 2)

        def on_unit(u: FloatArray) -> FloatArray:
            return k(2.0 * np.arcsin(np.sqrt(np.clip(u * q_max, 0.0, q_max))))

        fit = Chebyshev.interpolate(on_unit, DEGREE, domain=[0.0, 1.0]).convert(kind=Polynomial)
        coefficients = np.zeros(DEGREE + 1)
        coefficients[: len(fit.coef)] = fit.coef
        row, column = centre if centre is not None else ((shape[0] - 1) / 2.0, (shape[1] - 1) / 2.0)
        return cls(RADIAL, shape, np.asarray(rotation, float), (scale, column, row, q_max), coefficients)

    @classmethod
    def cylindrical(
        cls,
        shape: tuple[int, int],
        rotation: FloatArray,
        longitude: tuple[float, float],
        latitude: tuple[float, float],
    ) -> Directions:
        """Return a grid in longitude and latitude.

        Parameters
        ----------
        shape : tuple of int
            Rows, columns.
        rotation : ndarray, shape (3, 3)
            World → own axes; the third row is the pole.
        longitude : tuple of float
            At the left and the right *edge* of the grid [rad]; may run either way.
        latitude : tuple of float
            At the top and the bottom edge [rad], top above bottom.
        """
        longitude_step = (longitude[1] - longitude[0]) / shape[1]
        latitude_step = (latitude[0] - latitude[1]) / shape[0]
        if longitude_step == 0.0 or not latitude_step > 0.0:
            raise DomainError("a cylindrical grid needs a width, and its top edge above its bottom edge")
        first = (longitude[0] + longitude_step / 2.0, longitude_step, latitude[0] - latitude_step / 2.0, latitude_step)
        return cls(CYLINDRICAL, shape, np.asarray(rotation, float), first)

    @classmethod
    def scattering_axis(cls, source: FloatArray, count: int) -> Directions:
        """Return one column of `count` equal steps of scattering angle, 0 on top.

        Parameters
        ----------
        source : ndarray, shape (3,)
            Viewing direction of the source: the pole.
        count : int
            Number of bins between 0 and π.
        """
        return cls.cylindrical((count, 1), frame_about(source), (-np.pi, np.pi), (np.pi / 2.0, -np.pi / 2.0))

    def vectors(self, rows: slice = slice(None)) -> FloatArray:
        """Return the viewing directions of the pixel centres.

        Parameters
        ----------
        rows : slice, optional
            Only these rows.

        Returns
        -------
        ndarray, shape (ny, nx, 3)
            Unit vectors in world axes, nan outside the image.
        """
        row = np.arange(self.shape[0], dtype=np.float64)[rows, None]
        return self.unproject(row, np.arange(self.shape[1], dtype=np.float64)[None, :])

    def unproject(self, row: FloatArray, column: FloatArray) -> FloatArray:
        """Return the viewing directions at pixel coordinates (broadcast), nan outside the image; shape (..., 3)."""
        if self.kind == CYLINDRICAL:
            longitude_first, longitude_step, latitude_first, latitude_step = self.map
            longitude = longitude_first + column * longitude_step
            latitude = latitude_first - row * latitude_step
            longitude, latitude = np.broadcast_arrays(longitude, latitude)
            flat = np.cos(latitude)
            own = np.stack([flat * np.cos(longitude), flat * np.sin(longitude), np.sin(latitude)], axis=-1)
            own[np.abs(latitude) > np.pi / 2.0 + 1e-12] = np.nan
            return own @ self.rotation
        scale, column_centre, row_centre, _ = self.map
        x, y = np.broadcast_arrays((column - column_centre) / scale, (row_centre - row) / scale)
        q = self._invert(np.hypot(x, y))
        k = self._k(q)
        own = np.stack([x / k, y / k, 1.0 - 2.0 * q], axis=-1)
        return own @ self.rotation

    def project(self, vectors: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return where viewing directions land.

        Parameters
        ----------
        vectors : ndarray, shape (..., 3)
            Unit vectors in world axes.

        Returns
        -------
        row, column : ndarray, shape (...)
            Pixel coordinates, also beyond the edges of the grid; nan outside the image.
        """
        own = np.asarray(vectors, dtype=np.float64) @ self.rotation.T
        x, y, z = own[..., 0], own[..., 1], own[..., 2]
        if self.kind == CYLINDRICAL:
            longitude_first, longitude_step, latitude_first, latitude_step = self.map
            turn = 2.0 * np.pi / abs(longitude_step)
            column = (np.arctan2(y, x) - longitude_first) / longitude_step
            column = np.mod(column + 0.5, turn) - 0.5
            return (latitude_first - np.arctan2(z, np.hypot(x, y))) / latitude_step, column
        scale, column_centre, row_centre, q_max = self.map
        q = np.where(z > 0.0, 0.25 * (x * x + y * y) / np.maximum(0.5 * (1.0 + z), 0.25), 0.5 * (1.0 - z))
        k = np.where(q <= q_max * (1.0 + 1e-12), scale * self._k(np.minimum(q, q_max)), np.nan)
        return row_centre - k * y, column_centre + k * x

    def solid_angle(self, rows: slice = slice(None)) -> FloatArray:
        """Return the solid angle of each pixel, shape (ny, nx) [sr]; 0 outside the image.

        Cylindrical: exact. Radial: the area of the spherical quadrilateral between the pixel's corners, as two triangles
        (Van Oosterom & Strackee, IEEE Trans. Biomed. Eng. 30, 125 (1983)); a pixel cut by the rim of the image counts
        whole or not at all.
        """
        index = np.arange(self.shape[0], dtype=np.float64)[rows]
        if self.kind == CYLINDRICAL:
            _, longitude_step, latitude_first, latitude_step = self.map
            latitude = latitude_first - index * latitude_step
            top = np.clip(latitude + latitude_step / 2.0, -np.pi / 2.0, np.pi / 2.0)
            bottom = np.clip(latitude - latitude_step / 2.0, -np.pi / 2.0, np.pi / 2.0)
            band = abs(longitude_step) * (np.sin(top) - np.sin(bottom))
            return np.repeat(band[:, None], self.shape[1], axis=1)
        solid = np.empty((index.size, self.shape[1]))
        side = np.arange(self.shape[1] + 1, dtype=np.float64)[None, :] - 0.5
        step = max(1, _AT_ONCE // self.shape[1])
        for start in range(0, index.size, step):
            part = index[start : start + step]
            corner = self.unproject(np.concatenate([part - 0.5, part[-1:] + 0.5])[:, None], side)
            a, b, c, d = corner[:-1, :-1], corner[:-1, 1:], corner[1:, 1:], corner[1:, :-1]
            solid[start : start + step] = np.nan_to_num(_triangle(a, b, c) + _triangle(a, c, d))
        return solid

    def pixel_size(self, rows: slice = slice(None)) -> FloatArray:
        """Return the side of a square of each pixel's solid angle, shape (ny, nx) [rad].

        On the scattering-angle axis (one cylindrical column) it is the height of a row; a pixel cut by the rim of the
        image, which has no solid angle, gets the size on the axis.
        """
        solid = self.solid_angle(rows)
        if self.kind == CYLINDRICAL:
            return np.sqrt(solid) if self.shape[1] > 1 else np.full_like(solid, self.map[3])
        solid[~(solid > 0.0)] = self.map[0] ** -2
        np.sqrt(solid, out=solid)
        return solid

    def coarse(self, side: int) -> Directions:
        """Return the grid whose cells are side · side pixels of this one, the first with its corner in the first pixel."""
        shape = -(-self.shape[0] // side), -(-self.shape[1] // side)
        shift = 0.5 * (side - 1)
        if self.kind == CYLINDRICAL:
            longitude_first, longitude_step, latitude_first, latitude_step = self.map
            first, top = longitude_first + shift * longitude_step, latitude_first - shift * latitude_step
            return replace(self, shape=shape, map=(first, side * longitude_step, top, side * latitude_step))
        scale, column, row, q_max = self.map
        return replace(self, shape=shape, map=(scale / side, (column - shift) / side, (row - shift) / side, q_max))

    def crop(self, rows: slice, columns: slice) -> Directions:
        """Return the grid of some rows and columns of this one: the same directions under the same pixels.

        Parameters
        ----------
        rows, columns : slice
            Without a step; negative ends count from the end.

        Raises
        ------
        DomainError
            If nothing is left, or for a step.
        """
        spans = [part.indices(size) for part, size in zip((rows, columns), self.shape, strict=True)]
        (top, bottom, _), (left, right, _) = spans
        if bottom <= top or right <= left or {step for *_, step in spans} != {1}:
            raise DomainError("a part of a grid needs a row and a column at least, and no step")
        shape = bottom - top, right - left
        if self.kind == CYLINDRICAL:
            longitude_first, longitude_step, latitude_first, latitude_step = self.map
            first, high = longitude_first + left * longitude_step, latitude_first - top * latitude_step
            return replace(self, shape=shape, map=(first, longitude_step, high, latitude_step))
        scale, column, row, q_max = self.map
        return replace(self, shape=shape, map=(scale, column - left, row - top, q_max))

    def packed(self) -> Float32Array:
        """Return the grid as one float32 array for kernels.

        Returns
        -------
        ndarray, shape (PACKED_LENGTH,)
            [0] kind, [1] rows, [2] columns, [3:12] rotation by rows, [12:16] map, [16:33] coefficients in powers of
            q / q_max, rest 0.
        """
        result = np.zeros(PACKED_LENGTH, dtype=np.float32)
        result[0:3] = self.kind, *self.shape
        result[3:12] = self.rotation.ravel()
        result[12:16] = self.map
        result[16 : 16 + DEGREE + 1] = self.coefficients
        return result

    def _k(self, q: FloatArray) -> FloatArray:
        """Evaluate k by Horner's rule."""
        u = q / self.map[3]
        result = np.full_like(u, self.coefficients[-1])
        for coefficient in self.coefficients[-2::-1]:
            result = result * u + coefficient
        return result

    def _radius(self, q: FloatArray) -> FloatArray:
        """Return the image radius in units of the focal length."""
        return self._k(q) * 2.0 * np.sqrt(q * (1.0 - q))

    def _invert(self, radius: FloatArray) -> FloatArray:
        """Return q for image radii; nan beyond q_max.

        Linear between 65537 angles: wrong by less than 1e-9 rad, save within 1e-4 rad of a rim where the image stands
        still (orthographic), and there by less than 1e-5 rad.
        """
        theta = np.linspace(0.0, 2.0 * np.arcsin(np.sqrt(self.map[3])), 65537)
        table = self._radius(np.sin(theta / 2.0) ** 2)
        angle = np.interp(radius, table, theta)
        return np.where(radius <= table[-1] * (1.0 + 1e-12), np.sin(angle / 2.0) ** 2, np.nan)


def frame_about(pole: FloatArray) -> FloatArray:
    """Return a rotation, world → own axes, whose third axis is a given unit vector.

    Parameters
    ----------
    pole : ndarray, shape (3,)

    Returns
    -------
    ndarray, shape (3, 3)
        Right-handed; the first axis is horizontal where the pole is not vertical, else east.
    """
    pole = np.asarray(pole, dtype=np.float64)
    flat = np.hypot(pole[0], pole[1])
    first = np.array([pole[1], -pole[0], 0.0]) / flat if flat > 1e-12 else np.array([1.0, 0.0, 0.0])
    return np.stack([first, np.cross(pole, first), pole])


def _triangle(a: FloatArray, b: FloatArray, c: FloatArray) -> FloatArray:
    """Return solid angles of spherical triangles of unit vectors."""
    triple = np.abs(np.einsum("...i,...i", a, np.cross(b - a, c - a)))
    dots = np.einsum("...i,...i", a, b) + np.einsum("...i,...i", b, c) + np.einsum("...i,...i", c, a)
    result: FloatArray = 2.0 * np.arctan2(triple, 1.0 + dots)
    return result
