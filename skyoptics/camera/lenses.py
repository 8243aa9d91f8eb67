"""Lens projections: image radius r against the angle θ from the axis, f the focal length.

================  =================  ==========================
lens              r / f              widest angle from the axis
================  =================  ==========================
rectilinear       tan θ              80°
equidistant       θ                  130°
equisolid         2 sin(θ/2)         130°
stereographic     2 tan(θ/2)         130°
orthographic      sin θ              90°
================  =================  ==========================

Formulas as in Kannala & Brandt, IEEE Trans. Pattern Anal. Mach. Intell. 28, 1335 (2006), eqs. 1–5. A grid of directions
wants k = r / (f sin θ) as a function of θ. Directions beyond the widest angle are outside the image.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from skyoptics.errors import DomainError, nearest
from skyoptics.units import DEG, FloatArray


@dataclass(frozen=True)
class Lens:
    """A projection: k(θ) = r / (f sin θ), and the widest angle from the axis that it is used for [rad]."""

    name: str
    k: Callable[[FloatArray], FloatArray]
    radius: Callable[[FloatArray], FloatArray]
    angle_max: float


def _equidistant(theta: FloatArray) -> FloatArray:
    return 1.0 / np.sinc(theta / np.pi)


LENSES: dict[str, Lens] = {
    lens.name: lens
    for lens in (
        Lens("rectilinear", lambda t: 1.0 / np.cos(t), np.tan, 80.0 * DEG),
        Lens("equidistant", _equidistant, lambda t: t, 130.0 * DEG),
        Lens("equisolid", lambda t: 1.0 / np.cos(t / 2.0), lambda t: 2.0 * np.sin(t / 2.0), 130.0 * DEG),
        Lens("stereographic", lambda t: 1.0 / np.cos(t / 2.0) ** 2, lambda t: 2.0 * np.tan(t / 2.0), 130.0 * DEG),
        Lens("orthographic", np.ones_like, np.sin, 90.0 * DEG),
    )
}


def lens(name: str) -> Lens:
    """Return a lens by name.

    Raises
    ------
    DomainError
        If there is no such lens.
    """
    if name not in LENSES:
        raise DomainError(f"no lens {name!r}; there are {', '.join(LENSES)}{nearest(name, LENSES)}")
    return LENSES[name]


def field_of_view(name: str, focal: float, size: float) -> float:
    """Return the full angle that a sensor side (or diagonal) through the axis sees.

    Parameters
    ----------
    name : str
        Lens.
    focal, size : float
        Focal length and length of the side [m].

    Returns
    -------
    float
        [rad]; cut at twice the lens's widest angle.
    """
    chosen = lens(name)
    theta = np.linspace(0.0, chosen.angle_max, 20001)
    return 2.0 * float(np.interp(size / (2.0 * focal), chosen.radius(theta), theta))
