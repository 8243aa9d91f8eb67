"""One ray through a spherical drop: where it runs in the plane it stays in, and how its power is shared out.

Light travels along +x and meets the drop, of radius 1 about the origin, at y = b > 0. It turns clockwise: the ray of order p
(0 reflected from outside, 1 straight through, 2 primary bow, …) leaves turned by D = 2 (i − r) + (p − 1)(π − 2r), where
sin i = b = n sin r (Descartes; van de Hulst, *Light Scattering by Small Particles*, 1957, §12.21). The ray reflected from
outside turns by π − 2i the other way. At every meeting with the surface the same shares R and 1 − R are split off, of
each polarisation its own: order 0 takes R, order p ≥ 1 takes (1 − R)² R^(p−1). No inner reflection is total.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.optics import bows, interface
from skyoptics.units import DEG, FloatArray

HIGHEST = 5
"""Highest order drawn."""


@dataclass(frozen=True)
class Passage:
    """A ray in a drop.

    Parameters
    ----------
    index : float
        Refractive index relative to the air.
    impact : float
        Distance of the incoming ray from the axis, in radii.
    """

    index: float
    impact: float

    def __post_init__(self) -> None:
        if not 1.0 < self.index <= 3.0:
            raise DomainError(f"the index of a drop relative to the air is above 1 and at most 3; got {self.index:g}")
        if not 0.0 <= self.impact <= 1.0:
            raise DomainError(
                f"the impact parameter is 0 (through the centre) to 1 (grazing), in radii; got {self.impact:g}"
            )

    @property
    def incidence(self) -> float:
        """Angle i [rad]."""
        return float(np.arcsin(self.impact))

    @property
    def refraction(self) -> float:
        """Angle r [rad]."""
        return float(interface.refraction(self.index, self.incidence))

    def meeting(self, k: int) -> FloatArray:
        """Return where the surface is met, k = 0 on entry, shape (2,)."""
        polar = np.pi - self.incidence - k * (np.pi - 2.0 * self.refraction)
        return np.array([np.cos(polar), np.sin(polar)])

    def turned(self, p: int) -> float:
        """Return the total deviation of the light that leaves by order p, clockwise, not folded [rad].

        That of order 0 counts by its size, though it turns the other way.
        """
        if p == 0:
            return np.pi - 2.0 * self.incidence
        return 2.0 * (self.incidence - self.refraction) + (p - 1) * (np.pi - 2.0 * self.refraction)

    def leaving(self, p: int) -> FloatArray:
        """Return the direction of travel of the light that leaves by order p, shape (2,)."""
        angle = self.turned(p) if p == 0 else -self.turned(p)
        return np.array([np.cos(angle), np.sin(angle)])

    def reflected(self) -> FloatArray:
        """Return R of the s and p polarisation, the same at every meeting, shape (2,)."""
        return np.array([float(part) for part in interface.reflectances(self.index, self.incidence)])

    def shares(self, p: int) -> FloatArray:
        """Return the share of each polarisation's power that leaves by order p, shape (2,): s, p."""
        reflected = self.reflected()
        return reflected if p == 0 else (1.0 - reflected) ** 2 * reflected ** (p - 1)

    def share(self, p: int) -> float:
        """Return the share of the power of unpolarised light that leaves by order p."""
        return float(self.shares(p).mean())

    def inside(self, chord: int) -> float:
        """Return the share that runs along an inner chord, 1 for the first."""
        reflected = self.reflected()
        return float(((1.0 - reflected) * reflected ** (chord - 1)).mean())

    def numbers(self, orders: tuple[int, ...]) -> dict[str, Any]:
        """Return the figures as JSON types."""
        drawn = [self.share(p) for p in orders]
        reflected = self.reflected()
        exits = [
            {
                "order": p,
                "deviation_deg": self.turned(p) / DEG,
                "scattering_angle_deg": float(bows.fold(self.turned(p))) / DEG,
                "share": share,
                "share_s": float(self.shares(p)[0]),
                "share_p": float(self.shares(p)[1]),
            }
            for p, share in zip(orders, drawn, strict=True)
        ]
        return {
            "impact": self.impact,
            "index": self.index,
            "incidence_deg": self.incidence / DEG,
            "refraction_deg": self.refraction / DEG,
            "reflected_s": float(reflected[0]),
            "reflected_p": float(reflected[1]),
            "exits": exits,
            "share_drawn": sum(drawn),
            "share_rest": max(0.0, 1.0 - sum(drawn)),
        }


def fan(index: float, p: int, count: int) -> tuple[float, ...]:
    """Return impact parameters around the rainbow ray of an order, which is one of them.

    Raises
    ------
    DomainError
        If that order makes no bow at this index.
    """
    middle = rainbow_impact(index, p)
    below = (count - 1) // 2
    above = count - 1 - below
    # as even as the light itself falls on the drop: only so crowded rays mean bright light
    step = min((0.985 - middle) / max(above, 1), 0.30 / max(below, 1), middle / max(below, 1))
    return tuple(middle + step * k for k in range(-below, above + 1))


def rainbow_impact(index: float, p: int) -> float:
    """Return the impact parameter of the rainbow ray; errors as in `fan`."""
    middle = float(bows.impact(index, p))
    if not np.isfinite(middle):
        raise DomainError(
            f"order {p} makes no rainbow at index {index:g}: "
            + ("orders 0 and 1 never do; take 2 to 5" if p < 2 else f"the index must be below {p}")
        )
    return middle


@dataclass(frozen=True)
class DropRays:
    """What is asked for.

    Parameters
    ----------
    index : tuple of float
        Index at each wavelength.
    wavelength_nm : tuple of float
        One, or several for white light; empty where the index was given as a number.
    orders : tuple of int
        Orders p drawn to the end.
    impact : float, optional
        Impact parameter b; default that of the rainbow ray of the first order that has one, else 0.86.
    fan : int
        Rays around the rainbow ray; 0 for none.
    normals, angles, labels : bool
        Whether they are drawn; angles need normals and bring them along.
    lang : str
        Language of the words.
    """

    index: tuple[float, ...]
    wavelength_nm: tuple[float, ...] = ()
    orders: tuple[int, ...] = (2,)
    impact: float | None = None
    fan: int = 0
    normals: bool = False
    angles: bool = False
    labels: bool = True
    lang: str = "en"

    def __post_init__(self) -> None:
        if not self.orders or not all(0 <= p <= HIGHEST for p in self.orders):
            raise DomainError(f"orders are 0 to {HIGHEST}: 0 reflected outside, 1 straight through, 2 primary bow, …")
        if self.fan and (len(self.orders) > 1 or len(self.index) > 1):
            raise DomainError("a fan is drawn for one order and one wavelength; a fan of white light would hide itself")
        if self.fan and self.impact is not None:
            raise DomainError("a fan goes around the rainbow ray, whose impact parameter is known; leave the other out")

    def passages(self) -> list[Passage]:
        """Return the rays: of the fan, of the wavelengths, or one."""
        if self.fan:
            return [Passage(self.index[0], b) for b in fan(self.index[0], self.orders[0], self.fan)]
        middle = self.index[len(self.index) // 2]
        bow = next((p for p in self.orders if p > max(middle, 1.0)), None)
        default = 0.86 if bow is None else rainbow_impact(middle, bow)
        return [Passage(n, default if self.impact is None else self.impact) for n in self.index]

    def numbers(self) -> dict[str, Any]:
        """Return all figures as JSON types."""
        wavelengths = self.wavelength_nm * self.fan if self.fan else self.wavelength_nm
        rays = [one.numbers(self.orders) for one in self.passages()]
        for ray, wavelength in zip(rays, wavelengths, strict=False):
            ray["wavelength_nm"] = wavelength
        return {"particle": "drop", "orders": list(self.orders), "rays": rays}
