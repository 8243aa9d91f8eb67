"""How crystals stand in the air.

Every law is a pose, a uniform turn about the vertical, and a tilt by an angle θ in a uniform direction (formulas in
`skyoptics.kernels.orient`):

========  =================================================================================
random    all orientations alike
plate     c-axis upright
column    c-axis level, any spin about it
parry     c-axis level, two opposite side faces level
lowitz    a diagonal from edge to edge across the c-axis level, any spin about it
axis      any axis of the crystal at any inclination to the vertical, any spin about it
========  =================================================================================

The tilt spread σ is the standard deviation of each of the two components of tilt. Precisely, θ follows Fisher's law on the
sphere, density ∝ exp(cos θ / σ²) sin θ. σ = 0 is legal. Other laws of tilt: even in a cone of half angle σ, or a measured
table of the relative number of crystals by tilt.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from skyoptics.crystals.shapes import Shape
from skyoptics.errors import DataFileError, DomainError, nearest
from skyoptics.units import DEG, ArrayLike, Float32Array, FloatArray

LAWS = ("random", "plate", "column", "parry", "lowitz", "axis")
"""Names of the laws."""
TILT_LAWS = ("gaussian", "cone", "table")
"""Names of the laws of tilt."""

MAXIMUM_TILT = 90.0 * DEG
"""Largest tilt spread [rad]; with it a law is nearly the random one."""

_NODES = 24
_KNOTS = 1025
_KERNEL_LAW = {"random": 0, "plate": 1, "column": 2, "parry": 3, "lowitz": 4, "axis": 4}


@dataclass(frozen=True)
class Orientation:
    """An orientation law.

    Parameters
    ----------
    name : str
        One of `LAWS`.
    tilt : float
        Standard deviation σ of each component of tilt, or the half angle of the cone [rad]; not looked at by the random
        law, nor with a table.
    tilt_law : str
        One of `TILT_LAWS`.
    tilts : tuple of (float, float)
        With a table: tilt [rad], rising, and relative number of crystals per unit of tilt, joined by straight lines.
    axis : (float, float)
        With the law "axis": angle of the axis to the c-axis, and its azimuth in the crystal from the normal of a side face
        [rad].
    inclination : float
        With the law "axis": angle of that axis to the vertical, before tilt [rad].

    Raises
    ------
    DomainError
        If a name is unknown or a number out of range.
    """

    name: str
    tilt: float = 0.0
    tilt_law: str = "gaussian"
    tilts: tuple[tuple[float, float], ...] = ()
    axis: tuple[float, float] = (0.0, 0.0)
    inclination: float = 0.0

    def __post_init__(self) -> None:
        if self.name not in LAWS:
            raise DomainError(f"orientation is one of {', '.join(LAWS)}; got {self.name!r}{nearest(self.name, LAWS)}")
        if self.tilt_law not in TILT_LAWS:
            near = nearest(self.tilt_law, TILT_LAWS)
            raise DomainError(f"law of tilt is one of {', '.join(TILT_LAWS)}; got {self.tilt_law!r}{near}")
        if not 0.0 <= self.tilt <= MAXIMUM_TILT:
            raise DomainError(f"tilt spread is 0 to {MAXIMUM_TILT / DEG:g} degrees; got {self.tilt / DEG:g}")
        if self.tilt_law == "table":
            _check_tilts(self.tilts)
        if not all(np.isfinite(value) for value in (*self.axis, self.inclination)):
            raise DomainError("axis and inclination are finite angles")

    @property
    def law(self) -> int:
        """Number of the law in the kernels."""
        return _KERNEL_LAW[self.name]

    @property
    def tilted(self) -> bool:
        """Whether there is any tilt."""
        return self.name != "random" and (self.tilt_law == "table" or self.tilt > 0.0)

    @property
    def spread(self) -> float:
        """Typical tilt [rad]: root of half the mean square, which is σ for a small Gaussian one."""
        if not self.tilted or self.tilt_law == "gaussian":
            return self.tilt if self.tilted else 0.0
        theta, weight = self.tilt_nodes()
        return float(np.sqrt(0.5 * np.sum(weight * theta**2)))

    @property
    def key(self) -> list[Any]:
        """What tells laws apart, in JSON types."""
        if self.name == "random":
            return ["random"]
        how: list[Any] = [self.name, self.tilt_law, [list(row) for row in self.tilts] or self.tilt]
        return [*how, *self.axis, self.inclination] if self.name == "axis" else how

    def pose(self) -> Float32Array:
        """Return what `skyoptics.kernels.orient` takes for an axis of the crystal, shape (11,): A by rows, cos β, sin β."""
        polar, azimuth, incline = *self.axis, self.inclination
        if self.name == "lowitz":
            polar, azimuth, incline = np.pi / 2.0, np.pi / 2.0, np.pi / 2.0
        (s, c), (u, v) = (np.sin(polar), np.cos(polar)), (np.sin(azimuth), np.cos(azimuth))
        turn = [c * v, c * u, -s, -u, v, 0.0, s * v, s * u, c]
        return np.array([*turn, np.cos(incline), np.sin(incline)], dtype=np.float32)

    def tilt_table(self) -> Float32Array:
        """Return 1 − cos θ at equal steps of probability, its last entry twice; empty for Fisher's law or no tilt."""
        if not self.tilted or self.tilt_law == "gaussian":
            return np.zeros(0, dtype=np.float32)
        if self.tilt_law == "cone":
            w = np.linspace(0.0, 1.0 - np.cos(self.tilt), 2)
        else:
            theta = np.linspace(self.tilts[0][0], self.tilts[-1][0], 20001)
            density = np.interp(theta, *np.array(self.tilts).T)
            grown = np.concatenate([[0.0], np.cumsum(0.5 * (density[1:] + density[:-1]))])
            step = np.linspace(0.0, 1.0, _KNOTS)
            rising = np.append(True, np.diff(grown) > 0.0)
            w = 1.0 - np.cos(np.interp(step, grown[rising] / grown[-1], theta[rising]))
        return np.append(w, w[-1]).astype(np.float32)

    def tilt_nodes(self) -> tuple[FloatArray, FloatArray]:
        """Return tilts [rad] and weights of sum 1 of a quadrature over the law of tilt, both shape (m,)."""
        node, gauss = np.polynomial.legendre.leggauss(_NODES)
        if self.tilt_law == "gaussian":
            theta = 0.5 * min(np.pi, 7.0 * self.tilt) * (node + 1.0)
            weight = gauss * np.sin(theta) * np.exp((np.cos(theta) - 1.0) / self.tilt**2)
        elif self.tilt_law == "cone":
            theta = 0.5 * self.tilt * (node + 1.0)
            weight = gauss * np.sin(theta)
        else:
            table = self.tilt_table()
            place = (np.arange(96) + 0.5) / 96.0 * (len(table) - 2)
            theta = np.arccos(1.0 - np.interp(place, np.arange(len(table)), table.astype(np.float64)))
            weight = np.ones(96)
        return theta, weight / weight.sum()

    @property
    def inverse_kappa(self) -> float:
        """1/κ of Fisher's law, σ²; 0 for other laws of tilt."""
        return self.tilt**2 if self.tilted and self.tilt_law == "gaussian" else 0.0

    @property
    def span(self) -> float:
        """1 − e^(−2κ), the range of the sampler's logarithm."""
        return 1.0 if self.inverse_kappa == 0.0 else float(-np.expm1(-2.0 / self.inverse_kappa))


def projected_area(shape: Shape, orientation: Orientation, cos_zenith: ArrayLike) -> FloatArray:
    """Return the area across a beam, mean over an orientation law.

    Parameters
    ----------
    shape : Shape
        Its lengths set the unit of area.
    orientation : Orientation
        The law.
    cos_zenith : array_like
        Cosine of the angle between the beam and the vertical; its sign does not matter.

    Returns
    -------
    ndarray
        Same shape as cos_zenith. Divided by `Shape.mean_projected_area` it is the extinction towards that direction in
        units of the reference.

    Notes
    -----
    The mean of max(0, d·m) over the azimuth of a face normal m is closed: with A = cos ζ cos γ, B = sin ζ sin γ, it is
    (A φ + B sin φ)/π, cos φ = −A/B, or max(A, 0) where |A| ≥ B. Tilt and spin by midpoint and Gauss rules; error below 1e-4
    of the area.
    """
    cosine = np.asarray(cos_zenith, dtype=np.float64)
    if np.any(~(np.abs(cosine) <= 1.0 + 1e-9)):
        raise DomainError("cosine of the zenith angle lies between -1 and 1")
    if orientation.name == "random":
        return np.full(cosine.shape, shape.mean_projected_area)
    flat = np.clip(cosine, -1.0, 1.0).ravel()
    vertical, weight = _vertical_components(shape.face_normals, orientation)
    total = np.zeros_like(flat)
    for face, area in enumerate(shape.face_areas):
        total += area * np.einsum("p,ps->s", weight, _azimuth_mean(vertical[face][:, None], flat[None, :]))
    return total.reshape(cosine.shape)


def relative_extinction(shapes: Sequence[Shape], orientation: Orientation, cos_zenith: ArrayLike) -> FloatArray:
    """Return extinction towards a direction ÷ the reference, of equal numbers of crystals of some shapes.

    Parameters
    ----------
    shapes : sequence of Shape
    orientation, cos_zenith :
        As in `projected_area`.

    Returns
    -------
    ndarray
        Same shape as cos_zenith; 1 for random orientation.
    """
    areas = [projected_area(shape, orientation, cos_zenith) for shape in shapes]
    return np.asarray(sum(areas) / sum(shape.mean_projected_area for shape in shapes))


def _vertical_components(normals: FloatArray, orientation: Orientation) -> tuple[FloatArray, FloatArray]:
    """Return vertical components of face normals over the law, shape (faces, points), and weights (points,)."""
    x, y, z = normals.T[:, :, None]
    if orientation.name == "plate":
        across, up = np.hypot(x, y), z  # what the azimuth makes of x and y does not matter
    elif orientation.name in ("lowitz", "axis"):
        steps = 96 if orientation.tilted else 360
        spin = 2.0 * np.pi * (np.arange(steps) + 0.5) / steps
        pose = orientation.pose().astype(np.float64)
        a, b, c = pose[:9].reshape(3, 3) @ normals.T
        up = pose[9] * c[:, None] - pose[10] * (np.cos(spin) * a[:, None] - np.sin(spin) * b[:, None])
        across = np.sqrt(np.clip(1.0 - up * up, 0.0, None))
    else:
        steps = 96 if orientation.tilted else 360  # a tilt rounds the corners off
        spin = 2.0 * np.pi * (np.arange(steps) + 0.5) / steps if orientation.name == "column" else np.zeros(1)
        up = np.cos(spin) * x - np.sin(spin) * y
        across = np.sqrt(np.clip(1.0 - up * up, 0.0, None))
    if not orientation.tilted:
        points = up.shape[1]
        return up, np.full(points, 1.0 / points)
    theta, density = orientation.tilt_nodes()
    alpha = np.pi * (np.arange(_NODES) + 0.5) / _NODES
    tilted = (
        up[:, :, None, None] * np.cos(theta)[:, None]
        + across[:, :, None, None] * np.sin(theta)[:, None] * np.cos(alpha)[None, :]
    )
    weight = np.broadcast_to(density[None, :, None], (up.shape[1], len(theta), _NODES)) / (up.shape[1] * _NODES)
    return tilted.reshape(len(normals), -1), weight.ravel()


def _azimuth_mean(vertical: FloatArray, cosine: FloatArray) -> FloatArray:
    """Return the mean over azimuth of max(0, d·m), m with a given vertical component."""
    a = vertical * cosine
    b = np.sqrt(np.clip((1.0 - vertical**2) * (1.0 - cosine**2), 0.0, None))
    ratio = np.clip(-a / np.maximum(b, 1e-300), -1.0, 1.0)
    phi = np.arccos(ratio)
    return np.where(np.abs(a) >= b, np.maximum(a, 0.0), (a * phi + b * np.sin(phi)) / np.pi)


def read_tilts(path: str | Path) -> tuple[tuple[float, float], ...]:
    """Return a measured table of tilts for `Orientation.tilts`.

    Parameters
    ----------
    path : path
        CSV file with a header and two columns, ``tilt_deg`` (0 to 180, rising) and ``number`` (relative number of crystals
        per degree of tilt, at least 0).

    Raises
    ------
    DataFileError
        If the file cannot be read or a row is wrong; names file and line.
    """
    import csv

    rows: list[tuple[float, float]] = []
    try:
        with Path(path).open(encoding="utf-8-sig", newline="") as file:
            reader = csv.reader(line for line in file if line.strip() and not line.startswith("#"))
            header = [cell.strip() for cell in next(reader, [])]
            if header != ["tilt_deg", "number"]:
                raise DataFileError(
                    f"{path}: the header of a table of tilts is tilt_deg,number; got {','.join(header)}"
                )
            for number, row in enumerate(reader, start=2):
                try:
                    tilt, count = (float(cell) for cell in row)
                except ValueError:
                    raise DataFileError(f"{path}: row {number} needs two numbers, got {','.join(row)!r}") from None
                rows.append((tilt * DEG, count))
    except (OSError, UnicodeDecodeError) as error:
        reason = getattr(error, "strerror", None) or "it is not UTF-8 text"
        raise DataFileError(f"cannot read the table of tilts {path}: {reason.lower()}") from error
    try:
        _check_tilts(tuple(rows))
    except DomainError as error:
        raise DataFileError(f"{path}: {error}") from error
    return tuple(rows)


def _check_tilts(tilts: tuple[tuple[float, float], ...]) -> None:
    table = np.array(tilts, dtype=np.float64).reshape(-1, 2)
    if len(table) < 2:
        raise DomainError("a table of tilts has two rows at least")
    if not np.all(np.isfinite(table)) or np.any(np.diff(table[:, 0]) <= 0.0):
        raise DomainError("tilts of a table are finite and rise from row to row")
    if table[0, 0] < 0.0 or table[-1, 0] > np.pi + 1e-12:
        raise DomainError("tilts of a table are 0 to 180 degrees")
    if np.any(table[:, 1] < 0.0) or not np.trapezoid(table[:, 1], table[:, 0]) > 0.0:
        raise DomainError("numbers of a table of tilts are at least 0, and not all of them 0")
