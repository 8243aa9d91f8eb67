"""From what is known of a photograph to its grid of directions: the scale of the lens, then where the camera looked.

The optical axis is taken in the middle of the picture and the lens as free of distortion.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import hypot
from typing import NamedTuple

import numpy as np

from skyoptics.camera.frame import aim, photograph
from skyoptics.errors import DomainError
from skyoptics.geometry.axes import angle_between, azimuth_elevation, direction
from skyoptics.geometry.directions import Directions
from skyoptics.planning.photo_exif import Exif
from skyoptics.units import DEG, MM, FloatArray

FILM_MM = (36.0, 24.0)
"""What equivalent focal lengths refer to; the diagonals are compared (CIPA DCG-001, from memory)."""
LEAST_APART = 1.0 * DEG
"""Distance of two marks below which they fix no roll [rad]."""
RESIDUAL, RESIDUAL_PIXELS = 0.2 * DEG, 3.0
"""Root mean square residual above which lens or marks are said to disagree [rad, pixel]; both must be passed."""
_SAME_ASPECT = 0.01


class Scale(NamedTuple):
    """Focal length in pixels, where it comes from, and what to know of it."""

    pixels: float
    source: str
    notes: list[str]


@dataclass(frozen=True, eq=False)
class Pose:
    """Where a camera looked.

    Parameters
    ----------
    rotation : ndarray, shape (3, 3)
        World → camera.
    source : str
        What it rests on.
    residual : float or None
        Root mean square angle between marks and where they should stand [rad].
    notes : tuple of str
        What to know of it.
    """

    rotation: FloatArray
    source: str
    residual: float | None = None
    notes: tuple[str, ...] = ()

    @property
    def angles_deg(self) -> tuple[float, float, float]:
        """Azimuth, elevation and roll [°]."""
        azimuth, elevation = (float(angle) for angle in azimuth_elevation(self.rotation[2]))
        upright = aim(azimuth, elevation)
        roll = float(np.arctan2(-self.rotation[0] @ upright[1], self.rotation[0] @ upright[0]))
        return azimuth / DEG, elevation / DEG, round(roll / DEG, 9) + 0.0  # no -0


def scale(
    shape: tuple[int, int],
    exif: Exif,
    focal_mm: float | None = None,
    sensor_mm: tuple[float, float] | None = None,
    equivalent_mm: float | None = None,
) -> Scale:
    """Return the focal length in pixels: from what is given, completed by EXIF entries.

    Parameters
    ----------
    shape : tuple of int
        Rows, columns.
    exif : Exif
        Of the file.
    focal_mm, sensor_mm, equivalent_mm : optional
        Focal length; sides of the sensor, in either order; focal length of the same diagonal field on 36 × 24 mm.

    Raises
    ------
    DomainError
        If they do not suffice, or say it twice.
    """
    if equivalent_mm is not None and (focal_mm is not None or sensor_mm is not None):
        raise DomainError("the equivalent focal length says all: leave out the focal length and the sensor, or it")
    diagonal = hypot(*shape) / hypot(*FILM_MM)
    focal, source = (focal_mm, "given") if focal_mm is not None else (exif.focal_mm, "EXIF")
    if equivalent_mm is not None:
        return Scale(equivalent_mm * diagonal, f"given: {equivalent_mm:g} mm on 36 × 24 mm", [])
    if focal is not None and sensor_mm is not None:
        long, short = max(sensor_mm), min(sensor_mm)
        # a crop of another aspect keeps one side of the sensor whole
        pitch = min(long / max(shape), short / min(shape))
        notes = []
        if abs(long / short / (max(shape) / min(shape)) - 1.0) > _SAME_ASPECT:
            notes.append(
                f"the picture's sides are not in the ratio of the sensor's {long:g} × {short:g} mm: taken as cut from the "
                "middle, with one side whole"
            )
        return Scale(focal / pitch, f"{source}: {focal:g} mm; sensor given: {long:g} × {short:g} mm", notes)
    if focal is not None and exif.sensor_width_mm is not None:
        notes = _resized(shape, exif)
        text = f"{source}: {focal:g} mm; EXIF: sensor {exif.sensor_width_mm:.2f} mm wide"
        return Scale(focal * max(shape) / exif.sensor_width_mm, text, notes)
    if exif.equivalent_mm is not None:
        equivalent = exif.equivalent_mm
        if focal_mm is not None and exif.focal_mm is not None:
            equivalent *= focal_mm / exif.focal_mm
        if focal_mm is None or exif.focal_mm is not None:
            notes = [
                f"EXIF rounds the equivalent focal length to whole mm: angles may err by {50.0 / equivalent:.1f} %"
            ]
            return Scale(equivalent * diagonal, f"EXIF: {equivalent:g} mm on 36 × 24 mm", notes + _resized(shape, exif))
    missing = (
        "no focal length" if focal is None else f"the focal length ({source}: {focal:g} mm) but not the sensor's size"
    )
    add = "--focal-mm 24 --sensor 36x24" if focal is None else "--sensor 36x24 (its sides in mm)"
    raise DomainError(f"the EXIF entries give {missing}: add {add}, or --equivalent-mm 24")


def grid(lens: str, pixels: float, shape: tuple[int, int]) -> Directions:
    """Return the grid of a lens in its own axes; `turned` aims it.

    Parameters
    ----------
    lens : str
        See `skyoptics.camera.lenses`.
    pixels : float
        Focal length [pixel].
    shape : tuple of int
        Rows, columns.
    """
    width = FILM_MM[0] * MM
    return photograph(lens, pixels * width / shape[1], (width, width * shape[0] / shape[1]), shape, np.eye(3))


def turned(own: Directions, pose: Pose) -> Directions:
    """Return a grid aimed."""
    return replace(own, rotation=pose.rotation)


def view(own: Directions, point: tuple[float, float], what: str) -> FloatArray:
    """Return the direction of a pixel (x, y) in the grid's axes, shape (3,).

    Raises
    ------
    DomainError
        If it is outside the picture, or outside the image that the lens throws.
    """
    rows, columns = own.shape
    x, y = point
    if not (-0.5 <= x <= columns - 0.5 and -0.5 <= y <= rows - 0.5):
        raise DomainError(
            f"{what}: pixel {x:g},{y:g} is outside the picture, which is {columns} × {rows} pixels: x from 0 to {columns - 1}, "
            f"y from 0 (top) to {rows - 1}"
        )
    found = own.unproject(np.array(y, dtype=np.float64), np.array(x, dtype=np.float64))
    if not np.all(np.isfinite(found)):
        raise DomainError(
            f"{what}: pixel {x:g},{y:g} is outside the image of this lens; another --lens or focal length?"
        )
    return np.asarray(found)


def by_aim(azimuth_deg: float, elevation_deg: float, roll_deg: float = 0.0) -> Pose:
    """Return the pose of a known aim."""
    rotation = aim(azimuth_deg * DEG, elevation_deg * DEG, roll_deg * DEG)
    return Pose(rotation, "aim given")


def by_pixel(seen: FloatArray, azimuth: float, elevation: float, roll: float, what: str = "the sun") -> Pose:
    """Return the pose that brings one known direction to where it is seen.

    Parameters
    ----------
    seen : ndarray, shape (3,)
        In the camera's axes.
    azimuth, elevation : float
        Where it is in the world [rad].
    roll : float
        Of the camera [rad].
    what : str
        Its name.

    Raises
    ------
    DomainError
        If no aim with this roll does it.
    """
    cosine, sine = np.cos(roll), np.sin(roll)
    x, y, z = cosine * seen[0] + sine * seen[1], cosine * seen[1] - sine * seen[0], seen[2]
    reach = float(np.hypot(y, z))
    height = float(np.sin(elevation)) / reach if reach > 0.0 else np.inf
    # y cos e + z sin e = sin(elevation): two aims, one on either side of the direction's own height
    found: list[float] = []
    if abs(height) <= 1.0 + 1e-12:
        middle, half = float(np.arctan2(z, y)), float(np.arccos(np.clip(height, -1.0, 1.0)))
        found = [e for e in (middle - half, middle + half) if abs(e) <= np.pi / 2.0 + 1e-9]
    if not found:
        raise DomainError(
            f"no aim with a roll of {roll / DEG:g}° shows {what}, {elevation / DEG:.2f}° high, at that pixel; give the roll "
            "with --roll-deg, or two known directions with --mark"
        )
    notes = []
    if len(found) == 2 and abs(found[0] - found[1]) > 1e-6:
        notes.append(
            f"an aim {found[1] / DEG:.1f}° high would show {what} there too (looking back over the zenith); taken is "
            f"{found[0] / DEG:.1f}°"
        )
    tilt = float(np.clip(found[0], -np.pi / 2.0, np.pi / 2.0))
    level = float(z * np.cos(tilt) - y * np.sin(tilt))
    return Pose(aim(azimuth - float(np.arctan2(x, level)), tilt, roll), f"pixel of {what}", None, tuple(notes))


def by_marks(seen: Sequence[FloatArray], world: Sequence[FloatArray], pixel: float) -> Pose:
    """Return the rotation that fits known directions best.

    Parameters
    ----------
    seen, world : sequence of ndarray, shape (3,)
        Unit vectors in the camera's axes, and the same directions in the world; two or more.
    pixel : float
        Size of a pixel, to judge the residual [rad].

    Returns
    -------
    Pose
        Least squares over the chords (G. Wahba, SIAM Rev. 7, 409 (1965); by singular values, F. L. Markley, J. Astronaut.
        Sci. 36, 245 (1988), from memory).

    Raises
    ------
    DomainError
        If all marks lie within `LEAST_APART` of each other, or of each other's opposite.
    """
    there, known = np.array(seen), np.array(world)
    for vectors, words in ((there, "pixels"), (known, "directions")):
        away = [float(angle_between(vectors[0], other)) for other in vectors[1:]]
        if max(min(angle, np.pi - angle) for angle in away) < LEAST_APART:
            raise DomainError(f"the {words} of the marks lie within 1° of one line of sight: take marks further apart")
    left, _, right = np.linalg.svd(there.T @ known)
    # right, up, forward are left-handed (skyoptics.camera.frame): a camera's determinant is -1
    handed = np.diag([1.0, 1.0, -np.linalg.det(left) * np.linalg.det(right)])
    rotation = left @ handed @ right
    miss = angle_between(there, known @ rotation.T)
    residual = float(np.sqrt(np.mean(miss**2)))
    notes = []
    if residual > max(RESIDUAL, RESIDUAL_PIXELS * pixel):
        notes.append(
            f"the marks miss their places by {residual / DEG:.2f}° ({residual / pixel:.0f} pixels) rms: the lens (focal "
            "length, projection) or a mark is wrong"
        )
    return Pose(rotation, f"{len(there)} marks", residual, tuple(notes))


def _resized(shape: tuple[int, int], exif: Exif) -> list[str]:
    """Return a note where the picture is not as it was recorded: a crop spoils the scale."""
    if exif.recorded is None or max(exif.recorded) == max(shape):
        return []
    was = max(exif.recorded), min(exif.recorded)
    return [
        f"the picture was {was[0]} × {was[1]} pixels when it was recorded: taken as made smaller, not cropped (for a crop give "
        "--focal-mm and --sensor of what is left)"
    ]


def unit(azimuth_deg: float, elevation_deg: float) -> FloatArray:
    """Return a unit vector from degrees."""
    return direction(azimuth_deg * DEG, elevation_deg * DEG)
