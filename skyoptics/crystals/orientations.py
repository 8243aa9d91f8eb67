"""How crystals stand in the air.

Every law is a pose, a uniform turn about the vertical, and a tilt by an angle θ in a uniform direction (formulas in
`skyoptics.kernels.orient`):

========  =============================================================
random    all orientations alike
plate     c-axis upright
column    c-axis level, any spin about it
parry     c-axis level, two opposite side faces level
========  =============================================================

The tilt spread σ is the standard deviation of each of the two components of tilt. Precisely, θ follows Fisher's law on the
sphere, density ∝ exp(cos θ / σ²) sin θ. σ = 0 is legal.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from skyoptics.crystals.shapes import Shape
from skyoptics.errors import DomainError, nearest
from skyoptics.units import DEG, ArrayLike, FloatArray

LAWS = ("random", "plate", "column", "parry")
"""Names of the laws; the place of a name is its number in the kernels."""

MAXIMUM_TILT = 90.0 * DEG
"""Largest tilt spread [rad]; with it a law is nearly the random one."""

_NODES = 24


@dataclass(frozen=True)
class Orientation:
    """An orientation law.

    Parameters
    ----------
    name : str
        One of `LAWS`.
    tilt : float
        Standard deviation σ of each component of tilt [rad]; not looked at by the random law.

    Raises
    ------
    DomainError
        If the name is unknown or the tilt is not 0 to `MAXIMUM_TILT`.
    """

    name: str
    tilt: float = 0.0

    def __post_init__(self) -> None:
        if self.name not in LAWS:
            raise DomainError(f"orientation is one of {', '.join(LAWS)}; got {self.name!r}{nearest(self.name, LAWS)}")
        if not 0.0 <= self.tilt <= MAXIMUM_TILT:
            raise DomainError(f"tilt spread is 0 to {MAXIMUM_TILT / DEG:g} degrees; got {self.tilt / DEG:g}")

    @property
    def law(self) -> int:
        """Number of the law in the kernels."""
        return LAWS.index(self.name)

    @property
    def inverse_kappa(self) -> float:
        """1/κ of Fisher's law, σ²."""
        return 0.0 if self.name == "random" else self.tilt**2

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


def _vertical_components(normals: FloatArray, orientation: Orientation) -> tuple[FloatArray, FloatArray]:
    """Return vertical components of face normals over the law, shape (faces, points), and weights (points,)."""
    x, y, z = normals.T[:, :, None]
    if orientation.name == "plate":
        across, up = np.hypot(x, y), z  # what the azimuth makes of x and y does not matter
    else:
        steps = 360 if orientation.tilt == 0.0 else 96  # a tilt rounds the corners off
        spin = 2.0 * np.pi * (np.arange(steps) + 0.5) / steps if orientation.name == "column" else np.zeros(1)
        up = np.cos(spin) * x - np.sin(spin) * y
        across = np.sqrt(np.clip(1.0 - up * up, 0.0, None))
    if orientation.tilt == 0.0:
        points = up.shape[1]
        return up, np.full(points, 1.0 / points)
    node, gauss = np.polynomial.legendre.leggauss(_NODES)
    theta_max = min(np.pi, 7.0 * orientation.tilt)
    theta = 0.5 * theta_max * (node + 1.0)
    density = gauss * np.sin(theta) * np.exp((np.cos(theta) - 1.0) / orientation.tilt**2)
    density /= density.sum()
    alpha = np.pi * (np.arange(_NODES) + 0.5) / _NODES
    tilted = (
        up[:, :, None, None] * np.cos(theta)[:, None]
        + across[:, :, None, None] * np.sin(theta)[:, None] * np.cos(alpha)[None, :]
    )
    weight = np.broadcast_to(density[None, :, None], (up.shape[1], _NODES, _NODES)) / (up.shape[1] * _NODES)
    return tilted.reshape(len(normals), -1), weight.ravel()


def _azimuth_mean(vertical: FloatArray, cosine: FloatArray) -> FloatArray:
    """Return the mean over azimuth of max(0, d·m), m with a given vertical component."""
    a = vertical * cosine
    b = np.sqrt(np.clip((1.0 - vertical**2) * (1.0 - cosine**2), 0.0, None))
    ratio = np.clip(-a / np.maximum(b, 1e-300), -1.0, 1.0)
    phi = np.arccos(ratio)
    return np.where(np.abs(a) >= b, np.maximum(a, 0.0), (a * phi + b * np.sin(phi)) / np.pi)
