"""Size distributions of drops, by radius, each normalised to one drop.

Every distribution answers `density` (drops per metre of radius, of one drop in all), `moment`, and `refinement`: nodes of
a rule whose finer levels add nodes to the coarser ones, so that an average can be refined until it no longer changes.
Amounts (how many drops in a cubic metre) are apart: `number_concentration` from liquid water content, and
`MarshallPalmer.concentration`, which the rain rate fixes.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import erf, exp, gamma, log, pi, sqrt
from typing import Protocol

import numpy as np

from skyoptics.errors import DomainError, nearest
from skyoptics.units import MM, UM, ArrayLike, BoolArray, FloatArray

WATER_DENSITY = 1000.0
"""Of drops, for liquid water content [kg m⁻³]; 0.2 % above the true value at 20 °C."""
TAIL = 1e-4
"""Share of the number below, and of the sixth moment above, the radii that quadratures visit."""
SMALLEST_RADIUS = 1e-9
"""No drop is smaller [m]."""
FLOOR = 1e-12
"""Quadratures of distributions without end go no lower: some 0.1 % of the number, nothing of the light [m]."""
COARSEST = 48
"""Intervals of the coarsest rule."""
LARGEST_RADIUS = 5.0 * MM
"""Raindrops break up below this (diameter 8–10 mm); larger ones are a mistake in units [m]."""


class SizeDistribution(Protocol):
    """What every distribution answers."""

    def density(self, radius: ArrayLike) -> FloatArray:
        """Return drops per metre of radius [m⁻¹], of one drop in all, same shape as radius [m]."""
        ...

    def moment(self, order: float) -> float:
        """Return the mean of radius**order [m**order]."""
        ...

    def refinement(self, level: int) -> tuple[float, FloatArray, FloatArray]:
        """Return (keep, radius, weight): sum at this level = keep · sum at the level before + Σ weight · f(radius)."""
        ...


def quadrature(distribution: SizeDistribution, level: int = 2) -> tuple[FloatArray, FloatArray]:
    """Return all radii [m], ascending, and their number weights (sum 1 but for the tails) at a level of refinement."""
    radius, weight = np.empty(0), np.empty(0)
    for step in range(level + 1):
        keep, new_radius, new_weight = distribution.refinement(step)
        radius = np.concatenate([radius, new_radius])
        weight = np.concatenate([keep * weight, new_weight])
    order = np.argsort(radius, kind="stable")
    return radius[order], weight[order]


def effective_radius(distribution: SizeDistribution) -> float:
    """Return ⟨r³⟩/⟨r²⟩ [m] (Hansen & Travis, Space Sci. Rev. 16, 527 (1974), eq. 2.53)."""
    return float(distribution.moment(3) / distribution.moment(2))


def effective_variance(distribution: SizeDistribution) -> float:
    """Return ⟨(r − r_eff)² r²⟩/(r_eff² ⟨r²⟩) [1] (Hansen & Travis eq. 2.54)."""
    return distribution.moment(4) * distribution.moment(2) / distribution.moment(3) ** 2 - 1.0


def number_concentration(distribution: SizeDistribution, liquid_water_content: float) -> float:
    """Return drops per volume [m⁻³] that make up a liquid water content [kg m⁻³]."""
    if not liquid_water_content >= 0.0:
        raise DomainError(f"liquid water content must be 0 or more, got {liquid_water_content:g} kg m-3")
    return liquid_water_content / (WATER_DENSITY * 4.0 / 3.0 * pi * distribution.moment(3))


def liquid_water_content(distribution: SizeDistribution, number_concentration: float) -> float:
    """Return the water [kg m⁻³] in a number of drops per volume [m⁻³]."""
    if not number_concentration >= 0.0:
        raise DomainError(f"number concentration must be 0 or more, got {number_concentration:g} m-3")
    return number_concentration * WATER_DENSITY * 4.0 / 3.0 * pi * distribution.moment(3)


@dataclass(frozen=True)
class Single:
    """Drops of one radius [m]."""

    radius: float

    def __post_init__(self) -> None:
        _check_radius("radius", self.radius)

    def density(self, radius: ArrayLike) -> FloatArray:
        """Return infinity at the radius, 0 elsewhere [m⁻¹]."""
        return np.where(np.asarray(radius, dtype=np.float64) == self.radius, np.inf, 0.0)

    def moment(self, order: float) -> float:
        """Return radius**order [m**order]."""
        return self.radius**order

    def refinement(self, level: int) -> tuple[float, FloatArray, FloatArray]:
        """Return the one node at level 0, nothing after."""
        if level == 0:
            return 0.0, np.array([self.radius]), np.array([1.0])
        return 1.0, np.empty(0), np.empty(0)


@dataclass(frozen=True)
class Cut:
    """Another distribution between two radii, again normalised to one drop: raindrops end at 8 mm diameter, say.

    Parameters
    ----------
    whole : SizeDistribution
        What is cut.
    smallest, largest : float
        Radii [m].
    """

    whole: SizeDistribution
    smallest: float
    largest: float

    def __post_init__(self) -> None:
        if not 0.0 <= self.smallest < self.largest:
            raise DomainError(f"a cut needs 0 <= smallest < largest, got {self.smallest:g} and {self.largest:g} m")
        if not self.share > 0.0:
            raise DomainError(f"no drops between {self.smallest:g} and {self.largest:g} m")

    @property
    def share(self) -> float:
        """Part of the whole's number that lies inside [1]."""
        radius, weight = quadrature(self.whole, 6)
        return float(np.sum(weight[self._inside(radius)]))

    def density(self, radius: ArrayLike) -> FloatArray:
        """Return drops per metre of radius [m⁻¹]."""
        return np.where(self._inside(radius), self.whole.density(radius) / self.share, 0.0)

    def moment(self, order: float) -> float:
        """Return the mean of radius**order [m**order], by quadrature."""
        radius, weight = quadrature(self.whole, 6)
        inside = self._inside(radius)
        return float(np.sum((weight * radius**order)[inside]) / np.sum(weight[inside]))

    def refinement(self, level: int) -> tuple[float, FloatArray, FloatArray]:
        """Return the whole's nodes that lie inside."""
        keep, radius, weight = self.whole.refinement(level)
        inside = self._inside(radius)
        return keep, radius[inside], weight[inside] / self.share

    def _inside(self, radius: ArrayLike) -> BoolArray:
        values = np.asarray(radius, dtype=np.float64)
        return np.asarray((values >= self.smallest) & (values <= self.largest))


@dataclass(frozen=True)
class Gaussian:
    """Normal distribution of radii, cut at five standard deviations and at 0.

    Parameters
    ----------
    radius : float
        Middle [m].
    spread : float
        Standard deviation ÷ `radius`, 0 < spread ≤ 0.5 [1]; for 0 take `Single`.
    """

    radius: float
    spread: float

    def __post_init__(self) -> None:
        _check_radius("radius", self.radius)
        if not 0.0 < self.spread <= 0.5:
            raise DomainError(f"relative spread must lie in 0 < spread <= 0.5, got {self.spread:g}; 0 is a single size")

    @property
    def limits(self) -> tuple[float, float]:
        """Smallest and largest radius [m]."""
        return self.radius * max(1.0 - 5.0 * self.spread, 1e-3), self.radius * (1.0 + 5.0 * self.spread)

    def density(self, radius: ArrayLike) -> FloatArray:
        """Return drops per metre of radius [m⁻¹]."""
        radius = np.asarray(radius, dtype=np.float64)
        low, high = self.limits
        sigma = self.radius * self.spread
        share = 0.5 * (erf((high - self.radius) / sigma / sqrt(2.0)) - erf((low - self.radius) / sigma / sqrt(2.0)))
        curve = np.exp(-0.5 * ((radius - self.radius) / sigma) ** 2) / (sqrt(2.0 * pi) * sigma * share)
        return np.where((radius >= low) & (radius <= high), curve, 0.0)

    def moment(self, order: float) -> float:
        """Return the mean of radius**order [m**order], by quadrature."""
        radius, weight = quadrature(self, 4)
        return float(np.sum(weight * radius**order))

    def refinement(self, level: int) -> tuple[float, FloatArray, FloatArray]:
        """Return new nodes, evenly spaced in radius."""
        position, width, keep = _nested(level)
        low, high = self.limits
        radius = np.clip(low + (high - low) * position, low, high)
        return keep, radius, width * (high - low) * self.density(radius)


class _Broad:
    """Shared by distributions over decades: nodes evenly spaced in log radius between the tails."""

    def density(self, radius: ArrayLike) -> FloatArray:
        raise NotImplementedError

    def moment(self, order: float) -> float:
        raise NotImplementedError

    @property
    def limits(self) -> tuple[float, float]:
        """Smallest and largest radius that quadratures visit [m]."""
        middle = log(self.moment(3)) / 3.0
        grid = np.linspace(middle - 40.0, middle + 20.0, 12_001)
        with np.errstate(over="ignore", under="ignore"):  # exp(-infinity) = 0 is meant
            number = self.density(np.exp(grid)) * np.exp(grid)
            sixth = number * np.exp(6.0 * (grid - middle))
        below = np.cumsum(number) / np.sum(number)
        above = np.cumsum(sixth[::-1])[::-1] / np.sum(sixth)
        low = float(np.exp(grid[np.searchsorted(below, TAIL)]))
        return max(low, FLOOR), float(np.exp(grid[np.flatnonzero(above > TAIL)[-1]]))

    def refinement(self, level: int) -> tuple[float, FloatArray, FloatArray]:
        """Return new nodes, evenly spaced in log radius."""
        position, width, keep = _nested(level)
        low, high = self.limits
        radius = low * (high / low) ** position
        return keep, radius, width * log(high / low) * radius * self.density(radius)


@dataclass(frozen=True)
class LogNormal(_Broad):
    """Log-normal distribution.

    Parameters
    ----------
    median_radius : float
        Median of the number [m].
    geometric_deviation : float
        Geometric standard deviation σ_g > 1 [1].
    """

    median_radius: float
    geometric_deviation: float

    def __post_init__(self) -> None:
        _check_radius("median_radius", self.median_radius)
        if not 1.0 < self.geometric_deviation <= 5.0:
            raise DomainError(f"geometric_deviation must lie in 1 < value <= 5, got {self.geometric_deviation:g}")

    def density(self, radius: ArrayLike) -> FloatArray:
        """Return drops per metre of radius [m⁻¹]."""
        radius = np.asarray(radius, dtype=np.float64)
        s = log(self.geometric_deviation)
        return np.asarray(np.exp(-0.5 * (np.log(radius / self.median_radius) / s) ** 2) / (sqrt(2.0 * pi) * s * radius))

    def moment(self, order: float) -> float:
        """Return the mean of radius**order [m**order]."""
        return self.median_radius**order * exp(0.5 * (order * log(self.geometric_deviation)) ** 2)


class _ModifiedGamma(_Broad):
    """Density ∝ r^α exp(−(r/s)^γ) (Deirmendjian's modified gamma form), α > −1."""

    @property
    def shape(self) -> tuple[float, float, float]:
        """α [1], γ [1] and the scale s [m]."""
        raise NotImplementedError

    def density(self, radius: ArrayLike) -> FloatArray:
        """Return drops per metre of radius [m⁻¹]."""
        alpha, power, scale = self.shape
        ratio = np.asarray(radius, dtype=np.float64) / scale
        curve = np.exp(alpha * np.log(ratio) - ratio**power)  # together: either factor alone may overflow
        return np.asarray(curve * power / (scale * gamma((alpha + 1.0) / power)))

    def moment(self, order: float) -> float:
        """Return the mean of radius**order [m**order]."""
        alpha, power, scale = self.shape
        return scale**order * gamma((alpha + order + 1.0) / power) / gamma((alpha + 1.0) / power)


@dataclass(frozen=True)
class UlbrichGamma(_ModifiedGamma):
    """Gamma distribution of diameters, N(D) ∝ D^µ exp(−ΛD) (Ulbrich, J. Climate Appl. Meteorol. 22, 1764 (1983)).

    Parameters
    ----------
    median_volume_diameter : float
        D_0, with Λ D_0 = 3.67 + µ [m].
    shape_parameter : float
        µ, −1 < µ ≤ 20 [1]; from −1 down the number of drops is not finite.
    """

    median_volume_diameter: float
    shape_parameter: float

    def __post_init__(self) -> None:
        _check_radius("half of median_volume_diameter", self.median_volume_diameter / 2.0)
        if not -1.0 < self.shape_parameter <= 20.0:
            raise DomainError(f"shape_parameter must lie in -1 < value <= 20, got {self.shape_parameter:g}")

    @property
    def shape(self) -> tuple[float, float, float]:
        """α [1], γ [1] and the scale [m] of radius."""
        return self.shape_parameter, 1.0, 0.5 * self.median_volume_diameter / (3.67 + self.shape_parameter)


@dataclass(frozen=True)
class MarshallPalmer(_ModifiedGamma):
    """Exponential rain spectrum N(D) = N0 exp(−ΛD), Λ = 4.1 R^−0.21 mm⁻¹ (Marshall & Palmer, J. Meteor. 5, 165 (1948)).

    Parameters
    ----------
    rain_rate : float
        R [mm h⁻¹], the unit of the law.
    """

    rain_rate: float

    def __post_init__(self) -> None:
        if not 0.01 <= self.rain_rate <= 500.0:
            raise DomainError(f"rain rate must lie in 0.01 ... 500 mm/h, got {self.rain_rate:g}")

    @property
    def slope(self) -> float:
        """Λ [m⁻¹ of diameter]."""
        return 4.1 * self.rain_rate**-0.21 / MM

    @property
    def concentration(self) -> float:
        """Drops per volume N0/Λ, N0 = 8000 m⁻³ mm⁻¹ [m⁻³]; most of them far smaller than the law was measured for."""
        return 8000.0 / MM / self.slope

    @property
    def shape(self) -> tuple[float, float, float]:
        """α [1], γ [1] and the scale [m] of radius."""
        return 0.0, 1.0, 0.5 / self.slope


@dataclass(frozen=True)
class HansenTravis(_ModifiedGamma):
    """Gamma distribution by effective radius and variance, n ∝ r^((1−3b)/b) exp(−r/(ab)) (Hansen & Travis 1974, eq. 2.56).

    Parameters
    ----------
    radius : float
        Effective radius a [m].
    variance : float
        Effective variance b, 0.01 ≤ b < 0.5 [1].
    """

    radius: float
    variance: float

    def __post_init__(self) -> None:
        _check_radius("radius", self.radius)
        if not 0.01 <= self.variance < 0.5:
            raise DomainError(f"effective variance must lie in 0.01 <= variance < 0.5, got {self.variance:g}")

    @property
    def shape(self) -> tuple[float, float, float]:
        """α [1], γ [1] and the scale [m] of radius."""
        return (1.0 - 3.0 * self.variance) / self.variance, 1.0, self.radius * self.variance


_CLOUDS = {"C1": (6.0, 1.0, 4.0 * UM), "C2": (8.0, 3.0, 4.0 * UM), "C3": (8.0, 3.0, 2.0 * UM)}


@dataclass(frozen=True)
class Deirmendjian(_ModifiedGamma):
    """Cloud models n(r) = a r^α exp(−b r^γ).

    D. Deirmendjian, *Electromagnetic Scattering on Spherical Polydispersions* (Elsevier 1969), from memory; with the
    book's factors a each integral comes to the stated 100 cm⁻³.

    Parameters
    ----------
    model : str
        "C1" (fair-weather cumulus, α 6, γ 1, mode 4 µm), "C2" (α 8, γ 3, 4 µm; corona) or "C3" (α 8, γ 3, 2 µm).
    """

    model: str

    concentration = 1e8
    """Drops per volume in each of the models [m⁻³]."""

    def __post_init__(self) -> None:
        if self.model not in _CLOUDS:
            raise DomainError(f"no cloud model {self.model!r}; there are C1, C2 and C3{nearest(self.model, _CLOUDS)}")

    @property
    def shape(self) -> tuple[float, float, float]:
        """α [1], γ [1] and the scale [m] of radius: mode (γ/α)^(1/γ)."""
        alpha, power, mode = _CLOUDS[self.model]
        return alpha, power, mode * (power / alpha) ** (1.0 / power)


def _nested(level: int) -> tuple[FloatArray, FloatArray, float]:
    """Return places in 0 … 1, weights and keep of the trapezoid rule: all at level 0, then the middles of the steps."""
    count = COARSEST << level
    if level == 0:
        weight = np.full(count + 1, 1.0 / count)
        weight[[0, -1]] *= 0.5
        return np.linspace(0.0, 1.0, count + 1), weight, 0.0
    return np.arange(1, count, 2) / count, np.full(count // 2, 1.0 / count), 0.5


def _check_radius(name: str, radius: float) -> None:
    if not SMALLEST_RADIUS <= radius <= LARGEST_RADIUS:
        raise DomainError(
            f"{name} must lie in {SMALLEST_RADIUS:g} ... {LARGEST_RADIUS:g} m, got {radius:g} m; larger drops break up"
        )
