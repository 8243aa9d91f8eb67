"""What is on record about a named halo feature."""

from __future__ import annotations

from dataclasses import dataclass

from skyoptics.units import DEG

KINDS = ("circle", "curve", "fold", "spot", "diffuse")
"""Random crystals; image of one free angle; caustic of two; points; a region only."""

PARTS = ("all", "rising", "sinking", "anthelic")
"""Which light of its faces a feature keeps, see `skyoptics.crystals.arc_regions.in_part`."""

ANGLE_X = "Tape & Moilanen, Atmospheric Halos and the Search for Angle x (AGU 2006), from memory"
DERIVED = "from the faces"

PILLAR_TILT = 2.0 * DEG
"""Tilt spread for which the sun pillar is drawn [rad]."""
PILLAR_FROM = 0.5 * DEG
"""Tilt spread from which light mirrored by level faces is called a sun pillar, below it a subsun [rad]."""


@dataclass(frozen=True)
class Crystals:
    """Crystals that make a feature, and the faces its light meets.

    Parameters
    ----------
    law : str
        ``random``, ``plate``, ``column``, ``parry`` or ``lowitz`` (`skyoptics.crystals.passage`).
    sequences : tuple of tuple of int
        Faces in the order met, by the numbers of `skyoptics.crystals.faces`. Each stands for all sequences of the same
        effect on light and all that the symmetry of crystal and law makes of it.
    shape : str
        ``prism`` or ``truncated bipyramid``.
    aspect : float
        Length / diameter across corners of a typical crystal, used to tell which part of the arc is lit.
    """

    law: str
    sequences: tuple[tuple[int, ...], ...]
    shape: str = "prism"
    aspect: float = 1.0

    @property
    def free_angles(self) -> tuple[str, ...]:
        """Angles the law leaves free, each even over a turn (random: all three of a rotation)."""
        if self.law == "random":
            return ("azimuth", "inclination", "spin")
        return ("azimuth", "spin") if self.law in ("column", "lowitz") else ("azimuth",)


@dataclass(frozen=True)
class Feature:
    """A named halo feature.

    Parameters
    ----------
    name : str
        As in `skyoptics.crystals.arcs.names`.
    title : str
        For people.
    kind : str
        One of `KINDS`.
    crystals : tuple of Crystals
        The main kind first; the locus is that of the first.
    where : str
        Place in the sky.
    exists : str
        Sun elevations h at which it exists.
    told_apart : str
        How it is told from its neighbours.
    sources : tuple of str
        What this rests on.
    part : str
        One of `PARTS`.
    scatterings : int
        1, or 2 for what only light scattered by two crystals makes.
    tilt : float
        Tilt spread that the feature needs [rad].
    """

    name: str
    title: str
    kind: str
    crystals: tuple[Crystals, ...]
    where: str
    exists: str
    told_apart: str
    sources: tuple[str, ...]
    part: str = "all"
    scatterings: int = 1
    tilt: float = 0.0
