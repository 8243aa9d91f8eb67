"""From the scene's drops to physics: sizes, amounts, and where they hang."""

from __future__ import annotations

from dataclasses import dataclass
from functools import partial

import numpy as np

from skyoptics.droplets import sizes as sizes_of
from skyoptics.droplets.sizes import SizeDistribution, effective_radius
from skyoptics.droplets.spectra import read_spectrum
from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.materials import index as material
from skyoptics.optics.source import Source
from skyoptics.rendering.clouds import curtain_amount, layer_amount
from skyoptics.scene.particles import Drops
from skyoptics.sky.compose import Amount
from skyoptics.sky.shaft import Shaft
from skyoptics.units import FloatArray

WATER_DENSITY = 1000.0
"""For turning liquid water content into a number of drops [kg m⁻³]."""
EYE_HEIGHT = 2.0
"""Least height of the eye above the ground for looking at rain [m]."""


@dataclass(frozen=True, eq=False)
class DropSheet:
    """Drops and where they hang.

    Parameters
    ----------
    name : str
        For reports.
    index : RefractiveIndex
        Of the drops, relative to what they float in.
    radius : float
        Effective radius [m].
    orders : tuple of int
        Orders p to show.
    bare : callable
        Azimuth, elevation [rad], source → amount [1], of the drops alone.
    method : str
        "rays", "mie", "airy" or "auto".
    sizes : SizeDistribution
        How the radius is spread; `radius` is its effective one.
    axis_ratios : str
        "round", or a law of `skyoptics.droplets.axis_ratio`.
    canting : float
        Spread of the tilt of flattened drops [rad].
    shaft : Shaft or None
        The volume they fill; None for a curtain or a thin layer.
    before_land : bool
        Whether a curtain hangs in front of the land.
    fade : callable or None
        Azimuth, elevation [rad], source → what land, air and nearer volumes leave of their light, (…, nλ); None: all.
    """

    name: str
    index: material.RefractiveIndex
    radius: float
    orders: tuple[int, ...]
    bare: Amount
    method: str
    sizes: SizeDistribution
    axis_ratios: str = "round"
    canting: float = 0.0
    shaft: Shaft | None = None
    before_land: bool = False
    fade: Amount | None = None

    def amount(self, azimuth: FloatArray, elevation: FloatArray, source: Source) -> FloatArray:
        """Return the amount, with what happens to the light on its way, shape (…, nλ) or (…, 1) [1]."""
        bare = self.bare(azimuth, elevation, source)
        return bare if self.fade is None else bare * self.fade(azimuth, elevation, source)


def drop_sheet(drops: Drops, name: str, index: material.RefractiveIndex, eye_height: float) -> DropSheet:
    """Return the drops of an [[air]] table.

    Parameters
    ----------
    drops : Drops
        The table.
    name : str
        For reports.
    index : RefractiveIndex
        Of the water, relative to what it floats in.
    eye_height : float
        Of the observer above the ground [m].
    """
    sizes = _sizes(drops)
    shaft = _shaft(drops, sizes, eye_height) if drops.place == "shaft" else None
    amount: Amount
    if shaft is not None:
        amount = partial(shaft_amount, shaft=shaft)
    elif drops.place == "curtain":
        amount = partial(curtain_amount, optical_depth=_depth(drops, sizes), below_horizon=drops.below_horizon)
    else:
        amount = partial(layer_amount, optical_depth=_depth(drops, sizes))
    radius = effective_radius(sizes)
    shape = (drops.axis_ratios, drops.canting, shaft, drops.below_horizon)
    return DropSheet(name, index, radius, drops.orders, amount, drops.method, sizes, *shape)


def _sizes(drops: Drops) -> SizeDistribution:
    match drops.sizes:
        case "lognormal":
            return sizes_of.LogNormal(drops.radius, drops.spread)
        case "effective":
            return sizes_of.HansenTravis(drops.radius, drops.effective_variance)
        case "gamma":
            return sizes_of.UlbrichGamma(2.0 * drops.radius, drops.gamma_shape)
        case "rain":
            return sizes_of.MarshallPalmer(drops.rain_mm_h)
        case "cloud":
            return sizes_of.Deirmendjian(drops.cloud)
        case "measured":
            assert drops.spectrum is not None
            return read_spectrum(drops.spectrum, drops.spectrum_time)
        case _:
            return (
                sizes_of.Gaussian(drops.radius, drops.spread) if drops.spread > 0.0 else sizes_of.Single(drops.radius)
            )


def _depth(drops: Drops, sizes: SizeDistribution) -> float:
    """Return the optical depth: as given, or 2π ⟨r²⟩ · number · path, extinction being twice the area of large drops."""
    if drops.path_m is None:
        return drops.optical_depth
    return 2.0 * np.pi * float(sizes.moment(2)) * _number(drops, sizes) * drops.path_m


def _number(drops: Drops, sizes: SizeDistribution) -> float:
    """Return the number of drops in a volume [m⁻³]."""
    if drops.concentration_per_m3 is not None:
        return drops.concentration_per_m3
    assert drops.liquid_water_g_m3 is not None
    return drops.liquid_water_g_m3 * 1e-3 / (WATER_DENSITY * 4.0 / 3.0 * np.pi * float(sizes.moment(3)))


def _shaft(drops: Drops, sizes: SizeDistribution, eye_height: float) -> Shaft:
    """Return a rain shaft: its extinction from drops in a volume, from the rain rate, or from an optical depth on the level."""
    near, far = drops.reach
    if drops.liquid_water_g_m3 is not None or drops.concentration_per_m3 is not None:
        extinction = 2.0 * np.pi * float(sizes.moment(2)) * _number(drops, sizes)
    elif isinstance(sizes, sizes_of.MarshallPalmer) and "optical_depth" not in drops.model_fields_set:
        extinction = 2.0 * np.pi * float(sizes.moment(2)) * sizes.concentration
    else:
        extinction = drops.optical_depth / (far - near)
    shade = True if drops.shade is None else drops.shade
    sunlit = 1.0 if drops.sunlit is None else drops.sunlit
    return Shaft(near, far, drops.top, extinction, max(eye_height, EYE_HEIGHT), drops.lit, sunlit, shade)


def shaft_amount(azimuth: FloatArray, elevation: FloatArray, source: Source, shaft: Shaft) -> FloatArray:
    """Return the amount of a rain shaft."""
    sun_azimuth, sun_elevation = (float(angle) for angle in azimuth_elevation(source.direction))
    return shaft.amount(elevation, azimuth - sun_azimuth - np.pi, sun_elevation)[..., None]
