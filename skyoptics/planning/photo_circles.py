"""Measured circles of a photograph: their centres, their intervals, their names, and the drops that made them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.geometry.axes import angle_between
from skyoptics.geometry.directions import Directions
from skyoptics.materials import air
from skyoptics.materials import index as material
from skyoptics.planning import photo_known, photo_measure
from skyoptics.planning.photo_known import Centre
from skyoptics.planning.photo_points import Points
from skyoptics.units import CELSIUS_ZERO, DEG, NM, UM, FloatArray

EDGE_OFF = 1.0 * DEG
"""Distance of the extrapolated geometric bow from theory that is worth a word [rad]."""
NO_FREEDOM = "pointing noise cannot be estimated from so few points: no interval"


@dataclass(frozen=True)
class Measuring:
    """How to measure.

    Parameters
    ----------
    centre : {"sun", "antisolar"} or None
        About which; None for the nearer one.
    fit_centre : bool
        Whether the centre is fitted too.
    wavelength_nm : float
        In vacuum, of the colour that was pointed at.
    temperature_c : float
        Of the drops.
    index : float or None
        Of the drops relative to air; None for that of water.
    """

    centre: Centre | None = None
    fit_centre: bool = False
    wavelength_nm: float = 550.0
    temperature_c: float = 15.0
    index: float | None = None


class Measured(NamedTuple):
    """Measured circles and drop sizes as JSON types, and what to know of them."""

    circles: list[dict[str, Any]]
    drops: list[dict[str, Any]]
    notes: list[str]


def measure(groups: Sequence[Points], grid: Directions, sun: FloatArray, how: Measuring) -> Measured:
    """Return what points say.

    Parameters
    ----------
    groups : sequence of Points
        From `photo_points.read_points`.
    grid : Directions
        Of the photograph.
    sun : ndarray, shape (3,)
        Viewing direction of the sun or moon.
    how : Measuring

    Raises
    ------
    DomainError
        If a point is outside the lens's image, or the points fix no circle.
    """
    circles, sizes, notes = [], [], []
    views = [_views(group, grid) for group in groups]
    for group, seen in zip(groups, views, strict=True):
        circles.append(_circle(group, seen, sun, how))
    if groups:
        notes.append(
            "intervals are 95 % and hold pointing noise as seen in the points' own scatter; errors of aim, lens and time come "
            "on top"
        )
    for arc in dict.fromkeys(group.arc for group in groups):
        mine = [(group, seen) for group, seen in zip(groups, views, strict=True) if group.arc == arc]
        ordered = [(group.order, seen) for group, seen in mine if group.order is not None]
        if len(ordered) > 1 or any(order for order, _ in ordered):
            radii = np.concatenate([angle_between(seen, -sun) for _, seen in ordered])
            orders = np.concatenate([np.full(len(seen), order) for order, seen in ordered])
            sizes.append({"arc": arc, **_drops(radii, orders, how)})
    return Measured(circles, sizes, notes)


def _views(group: Points, grid: Directions) -> FloatArray:
    """Return the directions of points."""
    found = grid.unproject(group.xy[:, 1], group.xy[:, 0])
    lost = np.isnan(found).any(axis=1)
    if lost.any():
        x, y = group.xy[lost][0]
        raise DomainError(f"the point {x:g},{y:g} is outside the image of this lens; another --lens or focal length?")
    return found


def _circle(group: Points, views: FloatArray, sun: FloatArray, how: Measuring) -> dict[str, Any]:
    """Return one circle."""
    circle = photo_measure.fitted_centre(views) if how.fit_centre else photo_measure.known_centre(views, sun)
    centre: Centre
    if how.fit_centre:
        # a circle has two centres, opposite each other: the one that is near the sun or the antisolar point and inside
        nearer: Centre = "sun" if angle_between(circle.centre, sun) < np.pi / 2.0 else "antisolar"
        centre = how.centre or nearer
        other = centre != nearer
        radius = np.pi - circle.radius if other else circle.radius
        middle = -circle.centre if other else circle.centre
    else:
        centre = how.centre or ("sun" if circle.radius < np.pi / 2.0 else "antisolar")
        radius = circle.radius if centre == "sun" else np.pi - circle.radius
        middle = sun if centre == "sun" else -sun
    point = sun if centre == "sun" else -sun
    half = circle.half_width
    found = photo_known.match(radius / DEG, (half or 0.0) / DEG, centre)
    low, high = (None, None) if half is None else ((radius - half) / DEG, (radius + half) / DEG)
    entry: dict[str, Any] = {
        "arc": group.arc,
        "order": group.order,
        "points": circle.count,
        "centre": centre,
        "centre_fitted": how.fit_centre,
        "centre_off_deg": float(angle_between(middle, point)) / DEG if how.fit_centre else None,
        "radius_deg": radius / DEG,
        "half_width_deg": None if half is None else half / DEG,
        "low_deg": low,
        "high_deg": high,
        "degrees_of_freedom": circle.freedom,
        "noise_deg": None if circle.noise is None else circle.noise / DEG,
        "stretch_deg": circle.span / DEG,
        "verdict": found.verdict,
        "name": None if found.verdict == "none" else found.known.name,
        "nearest": found.known.name,
        "nearest_off_deg": found.off_deg,
        "also": [other.name for other in found.others],
        "words": found.words,
    }
    if group.order:
        entry |= {"verdict": "supernumerary", "name": None, "also": [], "words": f"supernumerary {group.order}"}
    return entry


def _drops(radii: FloatArray, orders: FloatArray, how: Measuring) -> dict[str, Any]:
    """Return a drop size."""
    wavelength = how.wavelength_nm * NM
    index = how.index
    if index is None:
        index = float(material.water(how.temperature_c + CELSIUS_ZERO)(np.array([wavelength]))[0].real)
    size = photo_measure.drops(radii, orders, wavelength, index, float(air.index(np.array([wavelength]))[0]))
    notes = []
    if size.low is None:
        notes.append(NO_FREEDOM)
    elif size.high is None:
        notes.append("the spacing is not told from none: the interval has no upper end")
    if not size.trusted:
        notes.append(
            "Airy's theory is rough for these drops or orders (Wang & van de Hulst 1991): take the size as an estimate"
        )
    if abs(size.edge - size.edge_theory) > EDGE_OFF:
        notes.append(
            f"the geometric bow comes out at {size.edge / DEG:.2f}°, theory has {size.edge_theory / DEG:.2f}°: another colour, a "
            "wrong aim or wrong orders?"
        )
    return {
        "radius_um": size.radius / UM,
        "low_um": None if size.low is None else size.low / UM,
        "high_um": None if size.high is None else size.high / UM,
        "bow": "primary" if size.order == 2 else "secondary",
        "wavelength_nm": how.wavelength_nm,
        "index": size.index,
        "step_deg": size.step / DEG,
        "geometric_bow_deg": size.edge / DEG,
        "geometric_bow_theory_deg": size.edge_theory / DEG,
        "points": len(radii),
        "notes": notes,
    }
