"""Glare: what the eye's optics spread around everything bright, and the sun's disc in the middle of it.

The point-spread function is the CIE's total glare function (J. J. Vos & T. J. T. P. van den Berg, CIE Collection 135/1
(1999); CIE 146:2002 gives its outer part as the disability glare equations; coefficients from memory): equivalent luminance
÷ illuminance at the eye, against the angle from the light, for an age and a pigmentation of the iris. The formula holds to
about 100°; here it fades between 80° and 100°, where brow and nose shade the eye (own rule), and is scaled so that it moves
light and makes none.

Light is spread in two ways. A small round disc (`add_disc`) by angle, which is exact in every lens. All else (`spread`) by
pixels at one scale, a convolution whose borders mirror: light that would leave the picture stays in it, and an even sky
stays even. Mirrored borders are what the discrete cosine transform implies (S. A. Martucci, IEEE Trans. Signal Process. 42,
1038 (1994)), so nothing is padded.
"""

from __future__ import annotations

from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from skyoptics.errors import DomainError
from skyoptics.geometry.axes import angle_between
from skyoptics.geometry.directions import Directions
from skyoptics.units import DEG, ArrayLike, FloatArray

AGE = 35.0
"""Of the observer [years]."""
PIGMENT = 0.5
"""Of the iris: 0 very dark, 0.5 brown, 1 light blue [1]."""
FADES = (80.0 * DEG, 100.0 * DEG)
"""Angle from the light at which glare begins to fade, and at which it is gone [rad]."""

_NEAR = 3
"""Pixels from the middle of the spread, within which it is averaged over each pixel."""
_AT_ONCE = 1 << 17
"""Points inside pixels looked at in one go."""
_FINEST = 1e-7
"""Angle within which next to no light is spread [rad]."""


def eye_spread(angle: ArrayLike, age: float = AGE, pigment: float = PIGMENT) -> FloatArray:
    """Return the point-spread function of the eye as published.

    Parameters
    ----------
    angle : array_like
        From the light, 0 to about 100° [rad].
    age : float
        0 to 100 years.
    pigment : float
        Of the iris, 0 (very dark) to 1.2 [1].

    Returns
    -------
    ndarray
        Equivalent luminance ÷ illuminance at the eye [sr⁻¹]; its integral is about 1.

    Raises
    ------
    DomainError
        For an age or a pigment outside these ranges.

    References
    ----------
    Vos & van den Berg (1999), the total glare function; θ in degrees.
    """
    if not (0.0 <= age <= 100.0 and 0.0 <= pigment <= 1.2):
        raise DomainError(f"an eye is 0 to 100 years old and has a pigment of 0 to 1.2, got {age:g} and {pigment:g}")
    square = (np.asarray(angle, dtype=np.float64) / DEG) ** 2
    old = (age / 70.0) ** 4
    core = 9.2e6 / (1.0 + square / 0.0046**2) ** 1.5 + 1.5e5 / (1.0 + square / 0.045**2) ** 1.5
    wide = 1.0 + square / 0.1**2
    lens = 400.0 / wide + 3e-8 * square
    wall = 1300.0 / wide**1.5 + 0.8 / np.sqrt(wide)
    return (1.0 - 0.08 * old) * core + (1.0 + 1.6 * old) * (lens + pigment * wall) + 2.5e-3 * pigment


def scaled_spread(angle: ArrayLike, age: float = AGE, pigment: float = PIGMENT) -> FloatArray:
    """Return `eye_spread`, faded out over `FADES` and scaled so that its integral over the sphere is 1 [sr⁻¹]."""
    angle = np.asarray(angle, dtype=np.float64)
    return eye_spread(angle, age, pigment) * (_fade(angle) / _whole(age, pigment))


def spread(xyz: ArrayLike, pixel: float, age: float = AGE, pigment: float = PIGMENT) -> NDArray[Any]:
    """Return a picture as the eye's optics spread it.

    Parameters
    ----------
    xyz : array_like, shape (ny, nx, 3)
        Linear [cd m⁻²]; nan outside the image.
    pixel : float
        Side of a pixel, one for the whole picture [rad].
    age, pigment : float
        As for `eye_spread`.

    Returns
    -------
    ndarray, shape (ny, nx, 3)
        Same type and sum; an even picture comes back even, nan stays nan.

    Raises
    ------
    DomainError
        If the shape is wrong or the pixel has no size.

    Notes
    -----
    Light that would fall outside the image stays where it came from. With a lens whose pixels differ in size the spread is
    too wide where pixels are smaller than `pixel`; its outer part, which goes as the inverse square of the angle, comes out
    right even there, since an angle and a solid angle that are both wrong cancel.
    """
    from scipy.fft import dctn, idctn

    xyz = np.asarray(xyz)
    if xyz.ndim != 3 or xyz.shape[-1] != 3 or 0 in xyz.shape or not pixel > 0.0:
        raise DomainError(f"a picture needs shape (ny, nx, 3) and pixels a size, got {xyz.shape} and {pixel:g} rad")
    transfer = _transfer((xyz.shape[0], xyz.shape[1]), pixel, age, pigment)

    def spread_out(plane: FloatArray) -> FloatArray:
        result: FloatArray = idctn(dctn(plane, 2) * transfer, 2)
        return result

    inside = np.isfinite(xyz).all(axis=-1)
    stays = None if inside.all() else 1.0 - spread_out(inside.astype(np.float64))
    result = np.full(xyz.shape, np.nan, dtype=xyz.dtype)
    for channel in range(3):
        plane = np.where(inside, xyz[..., channel], 0.0).astype(np.float64)
        moved = spread_out(plane)
        if stays is not None:
            moved += plane * stays
        # Rounding may leave a minute negative where there is no light at all.
        result[inside, channel] = np.maximum(moved, min(float(plane.min()), 0.0))[inside]
    return result


def add_disc(
    xyz: NDArray[Any],
    directions: Directions,
    rows: slice,
    pixel: FloatArray,
    towards: FloatArray,
    radius: float,
    brightness: FloatArray,
    glare: bool,
    upper: bool | None = None,
) -> None:
    """Add a round, limb-darkened disc, with or without its glare, to some rows of a picture.

    Parameters
    ----------
    xyz : ndarray, shape (ny, nx, 3)
        Changed in place [cd m⁻²].
    directions : Directions
        The whole picture's grid.
    rows : slice
        Which rows `xyz` holds; no step.
    pixel : ndarray, shape (ny, nx)
        Side of each of its pixels (`Directions.pixel_size`) [rad].
    towards : ndarray, shape (3,)
        Viewing direction of the disc's centre.
    radius : float
        Angular radius, above 0 [rad].
    brightness : ndarray, shape (3, 6)
        XYZ = Σ_j brightness[:, j] µ^j, µ² = 1 − (ρ / radius)² [cd m⁻²].
    glare : bool
        Whether the eye's optics spread it.
    upper : bool or None
        Whether only what lies above (True) or below (False) the horizon is added; None adds all.

    Notes
    -----
    Pixels on and near the disc are means over points inside them, down to 1/32 of the radius or 1/64 of a pixel apart.
    """
    view = directions.vectors(rows)
    angle = angle_between(towards, view)

    def light(apart: FloatArray, there: FloatArray) -> FloatArray:
        seen = disc_glare(apart, radius, brightness) if glare else disc_light(apart, radius, brightness)
        if upper is not None:
            seen *= ((there[..., 2] >= 0.0) == upper)[..., None]
        return seen

    near = np.nan_to_num(angle, nan=np.inf) < radius + 2.0 * pixel
    if glare:
        xyz[~near] += light(angle[~near], view[~near])
    row, column = np.nonzero(near)
    if row.size == 0:
        return
    points = int(np.clip(np.ceil(32.0 * pixel[near].max() / radius), 4, 64))
    inside = (np.arange(points) + 0.5) / points - 0.5
    down, across = (offset.ravel() for offset in np.meshgrid(inside, inside, indexing="ij"))
    step = max(1, _AT_ONCE // down.size)
    for start in range(0, row.size, step):
        here = row[start : start + step], column[start : start + step]
        there = directions.unproject((rows.start or 0) + here[0][:, None] + down, here[1][:, None] + across)
        # points beyond the rim of the image see nothing
        xyz[here] += np.nan_to_num(light(angle_between(towards, there), there)).mean(axis=1)


def disc_light(angle: ArrayLike, radius: float, brightness: FloatArray) -> FloatArray:
    """Return XYZ of a bare disc at angles from its centre [rad], shape (..., 3) [cd m⁻²]; 0 outside it."""
    share = np.asarray(angle, dtype=np.float64) / radius
    mu = np.sqrt(np.maximum(1.0 - share * share, 0.0))
    powers = np.where((share <= 1.0)[..., None], mu[..., None] ** np.arange(brightness.shape[1]), 0.0)
    return powers @ brightness.T


def disc_glare(
    angle: ArrayLike, radius: float, brightness: FloatArray, age: float = AGE, pigment: float = PIGMENT
) -> FloatArray:
    """Return XYZ of a disc spread by the eye, at angles from its centre.

    Parameters
    ----------
    angle : array_like
        [rad]; nan gives nan.
    radius, brightness
        As for `add_disc`.
    age, pigment : float
        As for `eye_spread`.

    Returns
    -------
    ndarray, shape (..., 3)
        [cd m⁻²]; its integral over the sphere is that of the bare disc, to 0.3 %.

    Notes
    -----
    Up to 2.5 radii the rings of the spread are laid over the disc; further out the spread is averaged over the disc. Between
    the angles of the table the logarithm is linear in the logarithm of the angle (far) or in the angle (near).
    """
    at, log_share = _disc_table(radius, age, pigment)
    angle = np.asarray(angle, dtype=np.float64)
    far = at[-1]
    clipped = np.clip(angle, 0.0, far)
    split = 2.5 * radius
    scale = np.where(at < split, at / split, 1.0 + np.log(np.maximum(at, split) / split))
    place = np.where(clipped < split, clipped / split, 1.0 + np.log(np.maximum(clipped, split) / split))
    with np.errstate(divide="ignore"):  # a colour that is not there at all
        log_light = np.log(np.maximum(np.exp(log_share) @ brightness.T, 0.0))
    columns = [np.exp(np.interp(place, scale, np.maximum(column, -700.0))) for column in log_light.T]
    return np.stack(columns, axis=-1) * _fade(angle)[..., None]


@lru_cache(maxsize=16)
def _disc_table(radius: float, age: float, pigment: float) -> tuple[FloatArray, FloatArray]:
    """Return angles (n,) and the logarithm of spread discs of brightness µ^j (n, 6), without the fading."""
    steps = np.geomspace(1e-4, 1.0, 80)
    near = np.unique(np.concatenate([[0.0], radius * (1.0 - steps), radius * (1.0 + 1.5 * steps)]))
    far = np.geomspace(2.5 * radius, FADES[1], 200)[1:]
    node, weight = np.polynomial.legendre.leggauss(24)
    node, weight = 0.5 * (node + 1.0), 0.5 * weight
    whole = _whole(age, pigment)
    table = np.empty((near.size + far.size, 6))
    power = np.arange(6)
    for number, theta in enumerate(near):
        # rings about the direction looked at, evenly in the logarithm of their radius, as far as the disc reaches
        ring = np.geomspace(_FINEST, theta + radius, 1500)
        cosine = (
            np.divide(theta**2 + ring**2 - radius**2, 2.0 * theta * ring) if theta > 0.0 else np.sign(ring - radius)
        )
        half = np.arccos(np.clip(cosine, -1.0, 1.0))  # the ring is on the disc within this angle of its centre
        turn = half[:, None] * node
        square = theta**2 + ring[:, None] ** 2 - 2.0 * theta * ring[:, None] * np.cos(turn)
        mu = np.sqrt(np.clip(1.0 - square / radius**2, 0.0, 1.0))
        mean = np.einsum("rnp,n->rp", mu[..., None] ** power, weight) * (half / np.pi)[:, None]
        density = 2.0 * np.pi * ring**2 * eye_spread(ring, age, pigment) / whole
        table[number] = np.trapezoid(density[:, None] * mean, np.log(ring), axis=0)
    # points on the disc, evenly in area
    rho = radius * np.sqrt(node)
    turn = np.pi * node
    apart = np.sqrt(
        far[:, None, None] ** 2 + rho[:, None] ** 2 - 2.0 * far[:, None, None] * rho[:, None] * np.cos(turn)
    )
    seen = np.einsum("frt,t->fr", eye_spread(apart, age, pigment), weight)
    table[near.size :] = np.pi * radius**2 / whole * (seen * weight) @ np.sqrt(1.0 - node)[:, None] ** power
    return np.concatenate([near, far]), np.log(table)


def _transfer(shape: tuple[int, int], pixel: float, age: float, pigment: float) -> FloatArray:
    """Return the factor of each cosine of a picture, shape (ny, nx)."""
    from scipy.fft import dctn

    down, right = np.ogrid[0.0 : shape[0] + 1, 0.0 : shape[1] + 1]
    kernel = scaled_spread(np.hypot(down, right) * pixel, age, pigment)
    node, weight = np.polynomial.legendre.leggauss(8)
    fine = 0.5 * node
    for row in range(min(_NEAR, shape[0]) + 1):
        for column in range(min(_NEAR, shape[1]) + 1):
            inside = np.hypot((row + fine)[:, None], column + fine) * pixel
            kernel[row, column] = 0.25 * weight @ scaled_spread(inside, age, pigment) @ weight
    kernel *= pixel**2
    kernel[0, 0] = 0.0
    # What does not go elsewhere stays.
    kernel[0, 0] = 1.0 - float(dctn(kernel, 1)[0, 0])
    transfer: FloatArray = dctn(kernel, 1)[: shape[0], : shape[1]]
    return transfer


@lru_cache(maxsize=16)
def _whole(age: float, pigment: float) -> float:
    """Return the integral of `eye_spread`, faded, over the sphere."""
    angle = np.geomspace(_FINEST, FADES[1], 20001)
    density = 2.0 * np.pi * np.sin(angle) * angle * eye_spread(angle, age, pigment) * _fade(angle)
    return float(np.trapezoid(density, np.log(angle)))


def _fade(angle: FloatArray) -> FloatArray:
    """Return 1 where glare is whole, 0 where it is gone."""
    gone = np.clip((np.asarray(angle) - FADES[0]) / (FADES[1] - FADES[0]), 0.0, 1.0)
    return 1.0 - gone * gone * (3.0 - 2.0 * gone)
