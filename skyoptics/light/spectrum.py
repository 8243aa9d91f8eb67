"""The sun's spectrum above the air.

ASTM G173-03, *Standard Tables for Reference Solar Spectral Irradiances: Direct Normal and Hemispherical on 37° Tilted
Surface*, column "Etr": at 1 AU, 280 to 1100 nm in steps of 0.5 nm up to 400 nm and 1 nm above. The file beside this
module is made by ``docs/tools/bake_solar.py``. Its sum over all wavelengths belongs to a solar constant of
1366.1 W m⁻² (ASTM E490-00a); measurements since stand at 1361 W m⁻², 0.4 % lower.
"""

from __future__ import annotations

from functools import lru_cache
from importlib.resources import files

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.optics.bins import Bins
from skyoptics.units import NM, FloatArray

FILE = "solar_g173.npz"


@lru_cache(maxsize=1)
def samples() -> tuple[FloatArray, FloatArray]:
    """Return the spectrum as it is tabulated.

    Returns
    -------
    wavelength : ndarray, shape (m,)
        Ascending, 280 to 1100 nm [m]; read-only.
    irradiance : ndarray, shape (m,)
        On a surface facing the sun at 1 AU, above the air [W m⁻² nm⁻¹]; read-only.
    """
    with (files("skyoptics.light") / FILE).open("rb") as file, np.load(file, allow_pickle=False) as data:
        wavelength = data["wavelength_nm"] * NM
        irradiance = np.array(data["irradiance"])
    wavelength.setflags(write=False)
    irradiance.setflags(write=False)
    return wavelength, irradiance


def irradiance(bins: Bins) -> FloatArray:
    """Return the extraterrestrial solar irradiance as bin means.

    Parameters
    ----------
    bins : Bins
        Within 280 to 1100 nm.

    Returns
    -------
    ndarray, shape (nλ,)
        Exact means of the broken line through the samples [W m⁻² nm⁻¹].

    Raises
    ------
    DomainError
        If a bin leaves this range.
    """
    return bin_means(bins, np.ones(len(samples()[0])))


def bin_means(bins: Bins, transmission: FloatArray) -> FloatArray:
    """Return bin means of the solar irradiance times a transmission.

    Parameters
    ----------
    bins : Bins
        Within 280 to 1100 nm.
    transmission : ndarray, shape (m,)
        At the wavelengths of `samples`; so lines of the sun and slopes of the air are multiplied before they are averaged.

    Returns
    -------
    ndarray, shape (nλ,)
        [W m⁻² nm⁻¹]

    Raises
    ------
    DomainError
        If a bin leaves this range.
    """
    wavelength, values = samples()
    low, high = wavelength[0], wavelength[-1]
    slack = 1e-9 * high  # 1100 · 1e-9 and 1.1e-6 differ in the last bit
    if np.any(bins.edges < low - slack) or np.any(bins.edges > high + slack):
        raise DomainError(
            f"the solar spectrum is known from {low / NM:.0f} to {high / NM:.0f} nm, "
            f"got bins from {bins.edges.min() / NM:.6g} to {bins.edges.max() / NM:.6g} nm"
        )
    inside = Bins(np.clip(bins.edges, low, high))
    return inside.mean(wavelength, values * transmission)
