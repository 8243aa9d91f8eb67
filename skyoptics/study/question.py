"""What a study asks: one sweep, methods, wavelengths. Human units, as the command line gives them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import pi

import numpy as np

from skyoptics.droplets import mie
from skyoptics.droplets.sizes import (
    Cut,
    Gaussian,
    MarshallPalmer,
    Single,
    SizeDistribution,
    effective_radius,
    quadrature,
)
from skyoptics.errors import DomainError, nearest
from skyoptics.materials import index as material
from skyoptics.materials.index import RefractiveIndex
from skyoptics.units import CELSIUS_ZERO, MM, NM, UM, FloatArray

METHODS = ("mie", "airy", "rays")
DEFAULT_WAVELENGTHS = tuple(np.linspace(400.0, 700.0, 31).tolist())
"""[nm]"""
LARGEST_RAINDROP = 4.0 * MM
"""Radius at which rain spectra are cut: drops of 8 mm diameter break up [m]."""
MOST_STEPS = 1000

LIMITS = {
    "radius_um": (1.0, 5000.0, "µm"),
    "rain_mm_h": (0.01, 500.0, "mm/h"),
    "spread": (0.0, 0.5, "(relative standard deviation)"),
    "temperature_c": (-12.0, 99.0, "°C"),
    "wavelength_nm": (200.0, 1100.0, "nm"),
}
"""Smallest and largest value, and the unit."""
LOGARITHMIC = ("radius_um", "rain_mm_h")
"""Sweeps with even ratios; the others have even steps."""


def values(name: str, given: str | float | Sequence[float]) -> tuple[float, ...]:
    """Return the values of a sweep.

    Parameters
    ----------
    name : str
        A key of `LIMITS`.
    given : str, float or sequence of float
        One number, several (or parted by commas), or "start:stop:steps", the ends included; radius and rain rate in even
        ratios, others in even steps.

    Returns
    -------
    tuple of float

    Raises
    ------
    DomainError
        If that is no number, no step, or a value lies outside `LIMITS`.
    """
    low, high, unit = LIMITS[name]
    words = str(given).split(":") if isinstance(given, str) else []
    try:
        if len(words) == 3:
            start, stop, steps = float(words[0]), float(words[1]), int(words[2])
        elif len(words) > 1:
            raise ValueError
        else:
            row = given.split(",") if isinstance(given, str) else np.atleast_1d(given)
            found = tuple(float(word) for word in row)
            start, stop, steps = min(found, default=np.nan), max(found, default=np.nan), len(found)
    except (TypeError, ValueError):
        raise DomainError(
            f"{name} is {given!r}; give a number, numbers parted by commas, or start:stop:steps such as "
            f"{low if low > 0 else 0:g}:{high:g}:5 (steps a whole number)"
        ) from None
    if not 1 <= steps <= MOST_STEPS:
        raise DomainError(f"{name} has {steps} steps; 1 to {MOST_STEPS} are allowed")
    for value in (start, stop):
        if not low <= value <= high:
            raise DomainError(f"{name} is {value:g}; {low:g} to {high:g} {unit} is allowed")
    if len(words) == 3:
        line = np.geomspace if name in LOGARITHMIC else np.linspace
        found = (start,) if steps == 1 else tuple(float(f"{value:.10g}") for value in line(start, stop, steps))
    if len(set(found)) < len(found):
        raise DomainError(f"{name} holds a value twice; give start and stop apart, or one step")
    return found


@dataclass(frozen=True)
class Step:
    """One step of a sweep.

    Parameters
    ----------
    value : float
        Of the swept quantity, in its human unit.
    distribution : SizeDistribution
        Of the drops.
    law : RefractiveIndex
        Of the drops in the medium.
    radius_um, spread, temperature_c, rain_mm_h : float
        What the step stands for; `radius_um` is the effective radius for rain; nan where it does not apply.
    """

    value: float
    distribution: SizeDistribution
    law: RefractiveIndex
    radius_um: float
    spread: float
    temperature_c: float
    rain_mm_h: float


@dataclass(frozen=True)
class Question:
    """What a study asks; checked when made.

    Parameters
    ----------
    radius_um, rain_mm_h, spread, temperature_c : tuple of float
        At most one of them holds several values: the sweep. With rain the drops follow Marshall & Palmer (1948), and
        radius and spread are left out.
    methods : tuple of str
        Of `METHODS`; the first is what the others are compared with.
    wavelength_nm : tuple of float
        In vacuum, ascending.
    index : float or None
        Constant refractive index instead of that of water.
    medium : str
        "air" or "vacuum".
    disc : bool
        Whether curves are averaged over the sun's disc.
    map_deg : tuple of float
        Smallest and largest scattering angle of the colour maps.
    tolerance : float
        Relative error of size averages.
    """

    radius_um: tuple[float, ...] = ()
    rain_mm_h: tuple[float, ...] = ()
    spread: tuple[float, ...] = (0.05,)
    temperature_c: tuple[float, ...] = (20.0,)
    methods: tuple[str, ...] = ("mie", "airy")
    wavelength_nm: tuple[float, ...] = DEFAULT_WAVELENGTHS
    index: float | None = None
    medium: str = "air"
    disc: bool = False
    map_deg: tuple[float, float] = (130.0, 150.0)
    tolerance: float = 0.02

    def __post_init__(self) -> None:
        if bool(self.radius_um) == bool(self.rain_mm_h):
            raise DomainError("a study needs radius_um or rain_mm_h, one of the two")
        if not self.methods or len(set(self.methods)) < len(self.methods):
            raise DomainError(f"methods are {self.methods}; give one or several different ones of {', '.join(METHODS)}")
        for name in self.methods:
            if name not in METHODS:
                raise DomainError(f"no method {name!r}; there are {', '.join(METHODS)}{nearest(name, METHODS)}")
        if list(self.wavelength_nm) != sorted(self.wavelength_nm) or not self.wavelength_nm:
            raise DomainError("wavelengths must ascend")
        several = [
            name for name in ("radius_um", "rain_mm_h", "spread", "temperature_c") if len(getattr(self, name)) > 1
        ]
        if len(several) > 1:
            raise DomainError(f"{' and '.join(several)} both have several values; sweep one of them at a time")
        if self.rain_mm_h and "spread" in several:
            raise DomainError("rain has a spectrum of its own; a sweep of spread needs radius_um")
        if self.index is not None and "temperature_c" in several:
            raise DomainError("a constant index does not depend on temperature; leave one of the two out")
        if self.index is not None and not 1.0 < self.index < 2.0:
            raise DomainError(f"index is {self.index:g}; there are rainbows between 1 and 2 only")
        low, high = self.map_deg
        if not 90.0 <= low < high <= 179.0:
            raise DomainError(f"map_deg is {low:g} to {high:g}; 90 to 179 degrees is allowed")
        if not 1e-4 <= self.tolerance <= 0.5:
            raise DomainError(f"tolerance is {self.tolerance:g}; 0.0001 to 0.5 is allowed")
        self._check_sizes()

    @property
    def sweep(self) -> str:
        """Name of what is swept: that with several values, else the size."""
        for name in ("radius_um", "rain_mm_h", "spread", "temperature_c"):
            if len(getattr(self, name)) > 1:
                return name
        return "rain_mm_h" if self.rain_mm_h else "radius_um"

    @property
    def wavelength(self) -> FloatArray:
        """Wavelengths [m]."""
        return np.array(self.wavelength_nm) * NM

    def steps(self) -> tuple[Step, ...]:
        """Return the steps of the sweep."""
        return tuple(self._step(value) for value in getattr(self, self.sweep))

    def _step(self, value: float) -> Step:
        at = {
            name: (getattr(self, name) or (np.nan,))[0]
            for name in ("radius_um", "rain_mm_h", "spread", "temperature_c")
        }
        at[self.sweep] = value
        if self.index is not None:
            law = material.constant(self.index)
        else:
            law = material.water(at["temperature_c"] + CELSIUS_ZERO, self.medium)
        law(self.wavelength)
        drops: SizeDistribution
        if self.rain_mm_h:
            longest = mie.LARGEST_SIZE_PARAMETER * float(self.wavelength[0]) / (2.0 * pi) * (1.0 - 1e-9)
            drops = Cut(MarshallPalmer(at["rain_mm_h"]), 0.0, min(LARGEST_RAINDROP, longest))
            at["radius_um"], at["spread"] = effective_radius(drops) / UM, np.nan
        elif at["spread"] == 0.0:
            drops = Single(at["radius_um"] * UM)
        else:
            drops = Gaussian(at["radius_um"] * UM, at["spread"])
        return Step(value, drops, law, at["radius_um"], at["spread"], at["temperature_c"], at["rain_mm_h"])

    def _check_sizes(self) -> None:
        """Refuse drops too large for the method, before anything is computed."""
        limit = mie.LARGEST_SIZE_PARAMETER
        for step in self.steps():
            largest = 2.0 * pi * float(quadrature(step.distribution, 0)[0].max()) / float(self.wavelength[0])
            if "mie" in self.methods and largest > limit:
                allowed = step.radius_um * limit / largest
                raise DomainError(
                    f"radius_um is {step.radius_um:g} with spread {step.spread:g}: the largest drops have size parameter "
                    f"{largest:.0f} at {self.wavelength_nm[0]:g} nm; mie allows {limit:.0f}, which is radius_um up to "
                    f"{allowed:.0f} here; leave mie out of the methods for larger ones"
                )
            if largest > 10.0 * limit:
                raise DomainError(
                    f"radius_um is {step.radius_um:g}: size parameter {largest:.0f} is above {10 * limit:.0f}"
                )
