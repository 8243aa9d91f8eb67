"""Where the bow of a flattened drop stands: the fold of the traced map, by position angle.

The drop is an oblate spheroid with its axis upright (or canted by a given axis). Rays of order p that leave towards one
position angle about the antisolar point come from a curve on the drop; along it the scattering angle has an extremum,
the caustic. It is found on the map (entry → exit) itself, by Newton's method on

    position angle = the one asked for,   Jacobian of (scattering angle, position angle) by the entry's two angles = 0,

followed from the sphere, where both are known in closed form, in small steps of the axis ratio. No small-flattening
formula is used. The fold followed is the one that is the rainbow of the sphere. For strongly flattened drops (about 0.77
for the primary at the sides of a low sun's bow, n = 4/3) it meets a second caustic, a cusped one (Marston & Trinh, Nature
312, 529 (1984); Nye, ibid. 531, from memory); the fold goes on beyond, but then it is no longer the only bright line there.
"""

from __future__ import annotations

from math import ceil

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.geometry.axes import direction
from skyoptics.kernels.spheroid import directions
from skyoptics.optics import bows
from skyoptics.units import ArrayLike, FloatArray

LEAST_RATIO = 0.5
"""Flattest drop that is followed (the laws' largest drops have 0.53) [1]."""
_STEP = 0.01
_STENCIL = 2e-3
_CONVERGED = 1e-3
"""Last correction by Newton's method that still counts as arrived [rad]; a further one follows at the end."""
_LONGEST = 0.25
"""Largest move of the entry in one step of the axis ratio; a longer one is a leap to another fold [rad]."""
_GRAZING = 0.5 * np.pi - 3.0 * _STENCIL
_UPRIGHT = (0.0, 0.0, 1.0)


def caustic_angle(
    axis_ratio: ArrayLike,
    index: ArrayLike,
    sun_elevation: ArrayLike,
    position_angle: ArrayLike,
    order: int,
    axis: ArrayLike = _UPRIGHT,
) -> FloatArray:
    """Return the scattering angle of the bow of a flattened drop, by rays.

    Parameters
    ----------
    axis_ratio : array_like, broadcastable
        Height ÷ width, 0.5 … 1 [1].
    index : array_like, broadcastable
        Real, relative to the air, 1 < n < p [1].
    sun_elevation : array_like, broadcastable
        [rad]
    position_angle : array_like, broadcastable
        About the antisolar point, 0 towards the zenith, clockwise as seen by the observer [rad].
    order : int
        p: 2 primary, 3 secondary bow (up to 7).
    axis : array_like, shape (3,) or broadcastable with a last axis of 3
        The drop's axis for a sun in the north: east, north, up; upright if left out.

    Returns
    -------
    ndarray
        [rad], wrong by less than 1e-6; nan where the fold could not be followed: it ends where its ray grazes the drop, and where
        the bow has shrunk to the antisolar point.

    Raises
    ------
    DomainError
        If an argument lies outside what is said above.

    Notes
    -----
    For small flattening the top of the primary moves by 16 ρ sin r cos³r cos(2e − (180° − θ_R)), ρ = (1 − q)/(1 + q)
    (Möbius, Ann. Phys. 33, 1493 (1910), after Können, J. Opt. Soc. Am. A 4, 810 (1987)): see `moebius_shift`.
    """
    ratio, n, elevation, position = np.broadcast_arrays(
        *(np.asarray(value, dtype=np.float64) for value in (axis_ratio, index, sun_elevation, position_angle))
    )
    axes = np.broadcast_to(np.asarray(axis, dtype=np.float64), (*ratio.shape, 3))
    result = follow(ratio.reshape(1, -1), n.ravel(), elevation.ravel(), position.ravel(), order, axes.reshape(-1, 3))
    return result[0].reshape(ratio.shape)


def moebius_shift(axis_ratio: ArrayLike, index: ArrayLike, sun_elevation: ArrayLike) -> FloatArray:
    """Return Möbius' first-order shift of the scattering angle at the top of the primary bow [rad].

    16 ρ sin r cos³r cos(2e − (180° − θ_R)), from memory of Können, J. Opt. Soc. Am. A 4, 810 (1987); against `caustic_angle`
    good to 2 % at an axis ratio of 0.99, 10 % at 0.95 where the shift is not near its zero.
    """
    ratio = np.asarray(axis_ratio, dtype=np.float64)
    rho = (1.0 - ratio) / (1.0 + ratio)
    r, radius = bows.refraction(index, 2), np.pi - bows.scattering_angle(index, 2)
    return np.asarray(16.0 * rho * np.sin(r) * np.cos(r) ** 3 * np.cos(2.0 * np.asarray(sun_elevation) - radius))


def follow(
    ratios: FloatArray,
    index: FloatArray,
    sun_elevation: FloatArray,
    position_angle: FloatArray,
    order: int,
    axis: FloatArray,
) -> FloatArray:
    """Return caustics for rows of axis ratios, each row followed from the one before.

    Parameters
    ----------
    ratios : ndarray, shape (k, m)
        Axis ratios; rows descending from 1 save time [1].
    index, sun_elevation, position_angle : ndarray, shape (m,)
        [1], [rad], [rad].
    order : int
        p.
    axis : ndarray, shape (m, 3)
        Unit vectors.

    Returns
    -------
    ndarray, shape (k, m)
        [rad]
    """
    if not 2 <= order <= 7:
        raise DomainError(f"bows are followed for p = 2 (primary) to 7, got {order}")
    if not np.all((ratios >= LEAST_RATIO) & (ratios <= 1.0)):
        raise DomainError(f"axis ratio (height / width) must lie in {LEAST_RATIO} ... 1")
    if not np.all((index > 1.0) & (index < order)):
        raise DomainError(f"a bow of p = {order} needs a refractive index between 1 and {order}")
    if not np.all(np.abs(sun_elevation) <= 0.5 * np.pi):
        raise DomainError("sun elevation must lie in -90 ... 90 degrees")
    map_ = _Map(index, sun_elevation, position_angle, order, axis)
    slant = np.array(bows.incidence(index, order))
    turn = position_angle + np.where(np.sin(bows.deviation(index, order)) > 0.0, 0.0, np.pi)
    result = np.empty(ratios.shape)
    before = np.ones(ratios.shape[1])
    lost = np.zeros(ratios.shape[1], dtype=bool)
    for row, ratio in enumerate(ratios):
        steps = max(ceil(float(np.abs(ratio - before).max(initial=0.0)) / _STEP), 1)
        for step in range(1, steps + 1):
            here = before + (ratio - before) * (step / steps)
            first_slant, first_turn = slant, turn
            for _ in range(3 if step < steps else 4):
                last_slant, last_turn = slant, turn
                slant, turn, result[row] = map_.newton(here, slant, turn)
            moved = np.hypot(slant - first_slant, turn - first_turn)
            correction = np.hypot(slant - last_slant, turn - last_turn)
            # written so that nan is lost as well
            lost |= ~((correction < _CONVERGED) & (moved < _LONGEST) & (slant < _GRAZING))
            slant, turn = np.where(lost, first_slant, slant), np.where(lost, first_turn, turn)
        result[row, lost] = np.nan
        before = ratio
    return result


class _Map:
    """Entry (slant, turn) → scattering angle, position angle relative to the one asked for."""

    def __init__(
        self, index: FloatArray, elevation: FloatArray, position: FloatArray, order: int, axis: FloatArray
    ) -> None:
        nine = np.stack(np.meshgrid([-1.0, 0.0, 1.0], [-1.0, 0.0, 1.0], indexing="ij"), axis=-1).reshape(9, 2)
        self.offset = nine * _STENCIL
        self.order = order
        # the sun stands in the north: light travels south and down, the antisolar point lies in the south
        zero = np.zeros_like(elevation)
        elevation = np.clip(elevation, -0.5 * np.pi + 1e-9, 0.5 * np.pi - 1e-9)  # in the zenith there is no north
        self.beam = -direction(zero, elevation)
        self.up = direction(zero + np.pi, -elevation + 0.5 * np.pi)
        self.position = position
        self.index = np.tile(index, 9)
        self.axes = np.tile(axis, (9, 1))
        self.beams = np.tile(self.beam, (9, 1))

    def newton(
        self, ratio: FloatArray, slant: FloatArray, turn: FloatArray
    ) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return the next entry, and the scattering angle of the quadratic model there."""
        h = _STENCIL
        slants = (slant + self.offset[:, :1]).ravel()
        turns = (turn + self.offset[:, 1:]).ravel()
        out = directions(self.index, np.tile(ratio, 9), self.axes, self.beams, slants, turns, self.order)
        e = out.reshape(9, -1, 3)
        cross = np.cross(self.beam, e)
        theta = np.arctan2(np.linalg.norm(cross, axis=-1), np.einsum("mi,kmi->km", self.beam, e))
        # seen towards -e; right of the antisolar point is west for a sun in the north
        seen = np.arctan2(e[..., 0], -np.einsum("mi,kmi->km", self.up, e))
        away = np.mod(seen - self.position + np.pi, 2.0 * np.pi) - np.pi
        f, g = _derivatives(theta, h), _derivatives(away, h)
        jacobian = f[1] * g[2] - f[2] * g[1]
        by_slant = f[3] * g[2] + f[1] * g[4] - f[4] * g[1] - f[2] * g[3]
        by_turn = f[4] * g[2] + f[1] * g[5] - f[5] * g[1] - f[2] * g[4]
        determinant = g[1] * by_turn - g[2] * by_slant
        with np.errstate(divide="ignore", invalid="ignore"):
            a = (-g[0] * by_turn + g[2] * jacobian) / determinant
            b = (-g[1] * jacobian + g[0] * by_slant) / determinant
        a, b = np.clip(a, -0.05, 0.05), np.clip(b, -0.1, 0.1)
        model = f[0] + f[1] * a + f[2] * b + 0.5 * f[3] * a * a + f[4] * a * b + 0.5 * f[5] * b * b
        return np.clip(slant + a, 0.05, _GRAZING), turn + b, model


def _derivatives(values: FloatArray, h: float) -> tuple[FloatArray, ...]:
    """Return value, two first and three second derivatives (aa, ab, bb) from a 3 × 3 stencil, rows along a first."""
    v = values.reshape(3, 3, -1)
    return (
        v[1, 1],
        (v[2, 1] - v[0, 1]) / (2.0 * h),
        (v[1, 2] - v[1, 0]) / (2.0 * h),
        (v[2, 1] - 2.0 * v[1, 1] + v[0, 1]) / h**2,
        (v[2, 2] - v[2, 0] - v[0, 2] + v[0, 0]) / (4.0 * h**2),
        (v[1, 2] - 2.0 * v[1, 1] + v[1, 0]) / h**2,
    )
