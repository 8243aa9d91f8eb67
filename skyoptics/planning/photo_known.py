"""Circles about the sun and about the point opposite it, and which of them a measured radius can be.

Bows reach from the red to the violet edge, closed forms at n = 1.331 and 1.343, the indices that give Table 57-1, "The first
20 orders of rainbows of water", in M. Bass (ed.), *Handbook of Optics*, 3rd ed. (2010), vol. V, ch. 57 (from memory which
edition). Halos reach from least deviation at 700 nm to that at 400 nm in ice. The fogbow is Airy's first maximum for drops of
5 to 30 µm at 550 nm. The sun's disc widens each by 0.27° on either side.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Literal

import numpy as np

from skyoptics.crystals.arc_regions import circle_radius
from skyoptics.crystals.arcs import feature, names
from skyoptics.materials import index
from skyoptics.optics import bows
from skyoptics.units import CELSIUS_ZERO, DEG, NM, UM

Centre = Literal["sun", "antisolar"]

DISC_DEG = 0.27
"""Angular radius of the sun or moon."""
RED_INDEX, VIOLET_INDEX = 1.331, 1.343
"""Of water at the edges of a bow."""
COMMON = ("primary", "secondary", "fogbow", "halo_22", "halo_46")
"""Circles that are taken before rarer ones of about their radius."""
_BOWS = (
    ("primary", "primary bow", 2),
    ("secondary", "secondary bow", 3),
    ("tertiary", "tertiary bow", 4),
    ("quaternary", "quaternary bow", 5),
    ("quinary", "bow of the fifth order", 6),
)
_FOG_UM, _FOG_NM = (5.0, 30.0), 550.0
_FOG_REACH = 1.018793  # |a'₁|, where Ai² is greatest (Abramowitz & Stegun, Table 10.13)


@dataclass(frozen=True)
class Known:
    """A circle that can be seen.

    Parameters
    ----------
    name, title : str
        Short and in words.
    centre : {"sun", "antisolar"}
        About which it runs.
    low_deg, high_deg : float
        Angular radii of its edges, of a point source.
    """

    name: str
    title: str
    centre: Centre
    low_deg: float
    high_deg: float

    def off(self, radius_deg: float) -> float:
        """Return how far a radius is outside the circle's width, the disc's included; 0 inside [°]."""
        return max(self.low_deg - DISC_DEG - radius_deg, radius_deg - self.high_deg - DISC_DEG, 0.0)


@dataclass(frozen=True)
class Match:
    """Which circle a radius is.

    Parameters
    ----------
    verdict : {"one", "ambiguous", "none"}
        How many common circles it fits; a rare one counts where no common one fits.
    known : Known
        The nearest.
    others : tuple of Known
        What fits too.
    off_deg : float
        How far the radius is outside the nearest one's width.
    """

    verdict: Literal["one", "ambiguous", "none"]
    known: Known
    others: tuple[Known, ...]
    off_deg: float

    @property
    def words(self) -> str:
        """What to say of it."""
        also = ", ".join(_shown(other) for other in self.others)
        if self.verdict == "none":
            return f"no known circle; the nearest is the {_shown(self.known)}, {self.off_deg:.2f}° away"
        if self.verdict == "ambiguous":
            return f"ambiguous: {_shown(self.known)}, or {also}"
        return _shown(self.known) + (f" (rarer ones that fit: {also})" if also else "")


@lru_cache(maxsize=1)
def table() -> tuple[Known, ...]:
    """Return all circles."""
    found: list[Known] = []
    for name, title, order in _BOWS:
        angles = [float(bows.scattering_angle(n, order)) / DEG for n in (RED_INDEX, VIOLET_INDEX)]
        centre: Centre = "antisolar" if angles[0] > 90.0 else "sun"
        low, high = sorted(180.0 - angle if centre == "antisolar" else angle for angle in angles)
        found.append(Known(name, title, centre, low, high))
    water = float(index.water(20.0 + CELSIUS_ZERO)(np.array([_FOG_NM * NM]))[0].real)
    low, high = (_fogbow_deg(water, radius_um) for radius_um in _FOG_UM)
    found.append(Known("fogbow", "fogbow", "antisolar", low, high))
    red, violet = (float(index.ice()(np.array([nm * NM]))[0].real) for nm in (700.0, 400.0))
    for name in names():
        entry = feature(name)
        if entry.kind == "circle":
            low, high = (float(circle_radius(entry.crystals[0].sequences[0], n)) / DEG for n in (red, violet))
            found.append(Known(name, entry.title, "sun", low, high))
    return tuple(found)


def match(radius_deg: float, half_width_deg: float, centre: Centre) -> Match:
    """Return which circle a radius is.

    Parameters
    ----------
    radius_deg, half_width_deg : float
        Measured, and half its interval.
    centre : {"sun", "antisolar"}
        About which it was measured.
    """
    alike = [known for known in table() if known.centre == centre]

    def order(known: Known) -> tuple[float, float]:
        return known.off(radius_deg), abs(radius_deg - 0.5 * (known.low_deg + known.high_deg))

    fits = sorted((known for known in alike if known.off(radius_deg) <= half_width_deg), key=order)
    common = [known for known in fits if known.name in COMMON]
    rare = [known for known in fits if known.name not in COMMON]
    if not fits:
        best = min(alike, key=order)
        return Match("none", best, (), best.off(radius_deg))
    taken = common or rare
    if len(taken) > 1:
        return Match("ambiguous", taken[0], tuple(taken[1:]), taken[0].off(radius_deg))
    return Match("one", taken[0], tuple(rare) if common else (), taken[0].off(radius_deg))


def _fogbow_deg(n: float, radius_um: float) -> float:
    """Return the radius of Airy's first maximum (van de Hulst 1957, §13.2) [°]."""
    h = 2.25 * np.sqrt(4.0 - n**2) / (n**2 - 1.0) ** 1.5
    x = 2.0 * np.pi * radius_um * UM / (_FOG_NM * NM)
    edge = np.pi - float(bows.scattering_angle(n, 2))
    return float(edge - _FOG_REACH * h ** (1.0 / 3.0) * x ** (-2.0 / 3.0)) / DEG


def _shown(known: Known) -> str:
    return f"{known.title} ({known.low_deg:.1f}° to {known.high_deg:.1f}°)"
