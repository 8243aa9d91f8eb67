"""Air between the observer and what he looks at: what it takes from that light and what it adds.

Over a distance s the part T = e^(−∫σ ds) comes through (front) and air of radiance J adds J (1 − T) (airlight): H.
Koschmieder, Beitr. Phys. freien Atm. 12, 33 (1924). J of evenly lit haze is the radiance of the horizon beside the picture's
subject, where T has become 0. Extinction lies on a flat earth, which is good for some tens of kilometres.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from skyoptics.light.air import Air, rayleigh_depth
from skyoptics.light.layers import MOLECULE_HEIGHT, TOP
from skyoptics.materials.ranges import within
from skyoptics.optics.bins import Bins
from skyoptics.units import DEG, NM, ArrayLike, FloatArray

CONTRAST = 0.02
"""Contrast at the visual range (Koschmieder; American Meteorological Society, *Glossary of Meteorology*)."""
LONGEST = float(-np.log(CONTRAST) * MOLECULE_HEIGHT / rayleigh_depth(550.0 * NM))
"""Visual range of pure air, 340 km [m]."""


@dataclass(frozen=True)
class Haze:
    """Haze and molecules near the ground.

    Parameters
    ----------
    visual_range : float
        Distance at which a black object keeps 2 % contrast at 550 nm, 10 m to 340 km [m]: ln 50 / extinction.
    exponent : float
        Ångström exponent of the haze, −1 to 4 [1]; near 0 for fog and mist, default 1.3 for dry haze (common practice).
    height : float
        Scale height of the haze, 100 m to 10 km [m]; default 2 km (common practice: 1 to 2 km).

    Raises
    ------
    DomainError
        Outside these ranges; beyond 340 km the molecules alone take away more.
    """

    visual_range: float
    exponent: float = 1.3
    height: float = 2000.0

    def __post_init__(self) -> None:
        within("visual range", self.visual_range, 10.0, LONGEST, "km", 1e3)
        within("haze exponent", self.exponent, -1.0, 4.0)
        within("scale height of haze", self.height, 100.0, 1e4, "m")

    @classmethod
    def of(cls, air: Air) -> Haze:
        """Return the haze that an atmosphere has at the ground: extinction is its vertical depth ÷ its scale height."""
        green = air.aerosol_depth_550 / air.aerosol_height + float(rayleigh_depth(550.0 * NM)) / MOLECULE_HEIGHT
        return cls(min(float(-np.log(CONTRAST)) / green, LONGEST), air.aerosol_exponent, air.aerosol_height)

    def extinction(self, bins: Bins, height: ArrayLike = 0.0) -> FloatArray:
        """Return the extinction of haze and molecules together, shape (…, nλ), at heights (…) [m⁻¹]."""
        haze, molecules = self._parts(bins)
        up = np.asarray(height, dtype=np.float64)[..., None]
        return haze * np.exp(-up / self.height) + molecules * np.exp(-up / MOLECULE_HEIGHT)

    def transmission(
        self, bins: Bins, elevation: ArrayLike, distance: ArrayLike, eye_height: float = 0.0
    ) -> FloatArray:
        """Return the share of light that comes through from a distance.

        Parameters
        ----------
        bins : Bins
            The nλ spectral bins; a bin's mean extinction is used.
        elevation, distance : array_like, shapes that broadcast to (…)
            Of the line of sight [rad]; along it [m].
        eye_height : float
            Of the observer above the ground [m].

        Returns
        -------
        ndarray, shape (…, nλ)
            1 at no distance [1].
        """
        sine = np.sin(np.asarray(elevation, dtype=np.float64))
        distance = np.asarray(distance, dtype=np.float64)
        depth = np.zeros(1)
        for part, scale in zip(self._parts(bins), (self.height, MOLECULE_HEIGHT), strict=True):
            length = distance * mean_exponential(distance * sine / scale) * np.exp(-eye_height / scale)
            depth = depth + part * length[..., None]
        return np.asarray(np.exp(-depth))

    def _parts(self, bins: Bins) -> tuple[FloatArray, FloatArray]:
        """Return bin means of the extinction at the ground of haze and of molecules, shapes (nλ,) [m⁻¹]."""
        wavelength = bins.at([0.125, 0.375, 0.625, 0.875])
        green = -np.log(CONTRAST) / self.visual_range - float(rayleigh_depth(550.0 * NM)) / MOLECULE_HEIGHT
        haze = max(green, 0.0) * (wavelength / (550.0 * NM)) ** -self.exponent
        return haze.mean(axis=1), rayleigh_depth(wavelength).mean(axis=1) / MOLECULE_HEIGHT


def layer_front(air: Air, bins: Bins, elevation: ArrayLike, height: float) -> FloatArray:
    """Return the share of light that comes from a cloud layer down to the observer through the air below it.

    Parameters
    ----------
    air : Air
        A clear atmosphere; `air.transmission` with the same height is its part above the layer.
    bins : Bins
        The nλ spectral bins, 250 to 1700 nm.
    elevation : array_like, shape (…)
        Of the line of sight [rad]; below the horizon, where the observer looks down on the layer, there is no air.
    height : float
        Of the layer above the observer, 0 to 100 km [m]; infinite for the whole atmosphere.

    Returns
    -------
    ndarray, shape (…, nλ)
        Bin means [1]; nan where the elevation is. From a table of 257 elevations, within 0.001.

    Raises
    ------
    DomainError
        Outside these ranges.
    """
    elevation = np.asarray(elevation, dtype=np.float64)
    nodes = np.linspace(0.0, 1.0, 257)
    wavelength = bins.at((np.arange(8) + 0.5) / 8.0)
    grid = (90.0 * DEG * nodes**2)[:, None, None]
    table = air.between(wavelength, grid, 0.0, min(height, TOP)).mean(axis=-1)
    place = np.sqrt(np.clip(elevation, 0.0, 90.0 * DEG) / (90.0 * DEG)) * (len(nodes) - 1)
    held = np.where(np.isnan(place), 0.0, place)
    cell = np.minimum(held.astype(np.int64), len(nodes) - 2)
    share = (held - cell)[..., None]
    front = table[cell] + share * (table[cell + 1] - table[cell])
    front[elevation < 0.0] = 1.0
    front[np.isnan(elevation)] = np.nan
    return np.asarray(front)


def split(sky: ArrayLike, front: ArrayLike, whole: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Divide the radiance of a clear sky into what comes from behind a layer and what from the air in front of it.

    Parameters
    ----------
    sky : array_like
        Radiance seen when the layer is not there [W m⁻² sr⁻¹ nm⁻¹].
    front, whole : array_like, broadcastable
        What comes through the air in front of the layer, and through all of the atmosphere [1], whole ≤ front.

    Returns
    -------
    behind : ndarray
        Radiance at the layer, so that front · behind + airlight is the sky again.
    airlight : ndarray
        sky · (1 − front) / (1 − whole): evenly lit air, as in Koschmieder's law.
    """
    sky, front, whole = (np.asarray(x, dtype=np.float64) for x in (sky, front, whole))
    lost = 1.0 - whole
    some = lost > 0.0
    share = np.where(some, np.clip((1.0 - front) / np.where(some, lost, 1.0), 0.0, 1.0), 0.0)
    airlight = sky * share
    lit = front > 0.0
    return np.where(lit, (sky - airlight) / np.where(lit, front, 1.0), 0.0), airlight


def mean_exponential(x: ArrayLike) -> FloatArray:
    """Return the mean of e^(−u) over u from 0 to x, (1 − e^(−x)) / x; 1 at 0."""
    x = np.asarray(x, dtype=np.float64)
    some = np.where(x == 0.0, 1.0, x)
    return np.where(x == 0.0, 1.0, -np.expm1(-some) / some)
