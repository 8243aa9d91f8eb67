"""Bows and halos by name, as a planner needs them: where they stand for a sun of given height and azimuth.

Bows are circles about the antisolar point. Their radius is that of the upper edge: the outermost colour on the outer side.

=========  ======  ===================================================================================================
name       radius  why
=========  ======  ===================================================================================================
primary    42.37°  red edge, index 1.331 (table of the first 20 rainbow orders, handbook ch. 57, Table 57-1)
secondary  53.48°  violet edge, index 1.343 (same table); its red edge is at 50.37°
fogbow     42.37°  the same angle: in Airy's theory the light there is 0.44 of the maximum, Ai²(0)/Ai²(−1.0188), however
                   small the drops. The brightest part lies further in by 99.08° x^(−2/3), x = 2π a / λ: 4.5° for drops of
                   10 µm radius at 600 nm (G. B. Airy, Trans. Camb. Phil. Soc. 6, 379 (1838); constants for n = 4/3)
moonbow    42.37°  a primary by moonlight
=========  ======  ===================================================================================================

Halos go by the names of `skyoptics.crystals.arcs`, save what lies below the horizon whenever the sun is up. Circles, parhelia,
the parhelic circle, the circumzenithal and the circumhorizontal arc are closed forms. The rest is interpolated from a table with
a row every degree of sun height (two for the slowest, `docs/tools/bake_arc_standings.py`). Against loci at 328 sun heights drawn at
random, crowns are off by 0.002° in the median, 0.1° at the 95th and 0.8° at the 99th percentile, feet by 0.02° in the median and
0.2° at the 90th, shares by 0.02 at the 99th: the large ones where branches come or go within a row.
"""

from __future__ import annotations

from skyoptics.crystals import arcs
from skyoptics.crystals.arc_regions import circle_radius
from skyoptics.errors import DomainError, nearest
from skyoptics.planning.answers import Body
from skyoptics.planning.arc_table import INDEX
from skyoptics.planning.curves import Circle, Curve, Level, Tabulated, ZenithArc
from skyoptics.planning.feature import Feature
from skyoptics.units import DEG

__all__ = ["PRIMARY_RADIUS_DEG", "SECONDARY_RADIUS_DEG", "Feature", "find", "names", "tabulated"]

PRIMARY_RADIUS_DEG, SECONDARY_RADIUS_DEG = 42.37, 53.48
"""Of the upper edges."""

_BOWS = {
    "primary": ("Primary rainbow", PRIMARY_RADIUS_DEG),
    "secondary": ("Secondary rainbow", SECONDARY_RADIUS_DEG),
    "fogbow": ("Fogbow", PRIMARY_RADIUS_DEG),
    "moonbow": ("Moonbow", PRIMARY_RADIUS_DEG),
}
_BELOW = ("subsun", "subparhelia", "subparhelic_circle", "subparhelia_120", "subcircumzenithal", "subcircumhorizontal")
_LEVEL = ("parhelia", "parhelia_44", "parhelia_120", "parhelic_circle")


def names() -> tuple[str, ...]:
    """Return the names of all features of the planner."""
    return (*_BOWS, *(name for name in arcs.names() if name not in _BELOW))


def tabulated() -> tuple[str, ...]:
    """Return the names of those without a closed form."""
    closed = {*_BOWS, *_LEVEL, "circumzenithal", "circumhorizontal"}
    return tuple(name for name in names() if name not in closed and arcs.feature(name).kind != "circle")


def find(name: str, radius_deg: float | None = None, index: float = INDEX, body: Body | None = None) -> Feature:
    """Return a feature by name.

    Parameters
    ----------
    name : str
        One of `names`.
    radius_deg : float or None
        Angular radius of a bow in place of its own, 1 to 89.
    index : float
        Refractive index of ice relative to air for halos, 1.29 to 1.33; halos at another index than 1.31 are tabulated when
        asked for, which may take minutes.
    body : {"sun", "moon"} or None
        What lights it; None for the sun, and the moon for a moonbow.

    Returns
    -------
    Feature

    Raises
    ------
    DomainError
        For an unknown name, with the nearest one; for a radius of what is no bow, and outside these ranges.
    """
    if name not in names():
        hint = nearest(str(name), names())
        if name in _BELOW:
            hint = "; it lies below the horizon whenever the sun is up"
        known = "" if hint else f" (known: {', '.join(names())})"
        raise DomainError(f'no feature of the planner is called "{name}"{known}{hint}')
    if body not in (None, "sun", "moon"):
        raise DomainError(
            f'what lights a feature is "sun" or "moon", got "{body}"{nearest(str(body), ("sun", "moon"))}'
        )
    if name in _BOWS:
        return _bow(name, radius_deg, body)
    if radius_deg is not None:
        raise DomainError(f"a radius can be given for a bow only ({', '.join(_BOWS)}), not for {name}")
    if not 1.29 <= index <= 1.33:
        raise DomainError(f"the index of ice for planning must be between 1.29 and 1.33, got {index:g}")
    entry = arcs.feature(name)
    title = entry.title + (" by moonlight" if body == "moon" else "")
    curve, about, radius = _halo(name, float(index))
    return Feature(name, title, body or "sun", about, radius, float(index), curve)


def _bow(name: str, radius_deg: float | None, body: Body | None) -> Feature:
    title, radius = _BOWS[name]
    if name == "moonbow" and body == "sun":
        raise DomainError("a moonbow is lit by the moon; by the sun it is called primary")
    lit_by: Body = body or ("moon" if name == "moonbow" else "sun")
    if radius_deg is not None:
        radius = float(radius_deg)
        if not 1.0 <= radius <= 89.0:
            raise DomainError(f"the radius of a bow must be between 1 and 89 degrees, got {radius:g}")
    by_moon = " by moonlight" if lit_by == "moon" and name != "moonbow" else ""
    return Feature(name, title + by_moon, lit_by, "antisolar", radius, None, Circle(radius * DEG, antisolar=True))


def _halo(name: str, index: float) -> tuple[Curve, str, float | None]:
    """Return the curve of a halo, what it lies about and its radius."""
    if name in _LEVEL:
        return Level(name, index), "sun", None
    if name in ("circumzenithal", "circumhorizontal"):
        return ZenithArc(index, zenithal=name == "circumzenithal"), "zenith", None
    entry = arcs.feature(name)
    if entry.kind == "circle":
        radius = circle_radius(entry.crystals[0].sequences[0], index)
        return Circle(radius, antisolar=False), "sun", radius / DEG
    return Tabulated(name, index), "sun", None
