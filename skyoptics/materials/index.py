"""The complex refractive index that tracers and wave sums take.

Light is described by its vacuum wavelength everywhere. n is *relative to the medium around* the particle (air or
vacuum), since Snell's law needs the ratio. k is *not* divided: along a path L inside, radiance falls as
exp(−4π k L / vacuum wavelength). Dividing n by the index of air moves the primary bow by 0.05° and the secondary by
0.10°; the air is Ciddor's standard air (dry, 15 °C, 101 325 Pa), whose departure from the air of the day is far below
the uncertainty of the other data.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from functools import partial
from pathlib import Path

import numpy as np

from skyoptics.errors import DomainError, nearest
from skyoptics.materials import air as air_data
from skyoptics.materials import ice as ice_data
from skyoptics.materials import table
from skyoptics.materials import water as water_data
from skyoptics.materials.ranges import within
from skyoptics.units import CELSIUS_ZERO, NM, ArrayLike, ComplexArray, FloatArray

MEDIA = ("air", "vacuum")
"""What a particle may float in."""


@dataclass(frozen=True)
class RefractiveIndex:
    """Complex refractive index n + ik by wavelength; made by the functions below.

    Parameters
    ----------
    label : str
        For people: ``water at 20 °C, in air``.
    key : str
        Identity for content hashes: substance, data, temperature, medium, hash of a table. Equal keys mean equal values.
    minimum_wavelength, maximum_wavelength : float
        Closed range of vacuum wavelengths where it is known [m].
    evaluate : callable
        Unchecked index, array in, complex array out.
    """

    label: str
    key: str
    minimum_wavelength: float
    maximum_wavelength: float
    evaluate: Callable[[FloatArray], ComplexArray] = field(repr=False, compare=False)

    def __call__(self, wavelength: ArrayLike) -> ComplexArray:
        """Return the index.

        Parameters
        ----------
        wavelength : array_like
            Vacuum wavelength [m].

        Returns
        -------
        ndarray, complex
            n + ik, same shape; n relative to the medium, k ≥ 0 such that 4πk / vacuum wavelength is the absorption
            coefficient [m⁻¹].

        Raises
        ------
        DomainError
            Outside the range.
        """
        low, high = self.minimum_wavelength, self.maximum_wavelength
        # the limits' own rounding is let through by `within` and cut off here
        checked = within(f"wavelength for {self.label}", wavelength, low, high, "nm", NM)
        return self.evaluate(np.clip(checked, low, high))


def water(temperature: float, medium: str = "air") -> RefractiveIndex:
    """Return the index of liquid water at 1 atm.

    Parameters
    ----------
    temperature : float
        261.15 to 373.15 K [K]; absorption is that of 25 °C.
    medium : str
        ``air`` or ``vacuum``.

    Returns
    -------
    RefractiveIndex
        200 to 1100 nm in vacuum, 230 to 1100 nm in air.

    Raises
    ------
    DomainError
        For another temperature or medium.
    """
    temperature = float(
        within(
            "water temperature",
            temperature,
            water_data.MINIMUM_TEMPERATURE,
            water_data.MAXIMUM_TEMPERATURE,
            "°C",
            zero=CELSIUS_ZERO,
        )
    )
    low, high = _range(medium, water_data.MINIMUM_WAVELENGTH, water_data.MAXIMUM_WAVELENGTH, "water")
    return RefractiveIndex(
        f"water at {temperature - CELSIUS_ZERO:.4g} °C, in {medium}".replace("-", "−"),
        f"water:R9-97,SR6-08,Hale-Querry-1973;temperature={temperature!r};{_medium_key(medium)}",
        low,
        high,
        partial(_water, temperature=temperature, medium=medium),
    )


def ice(medium: str = "air") -> RefractiveIndex:
    """Return the index of ice at 266 K, without birefringence.

    Parameters
    ----------
    medium : str
        ``air`` or ``vacuum``.

    Returns
    -------
    RefractiveIndex
        350 to 1100 nm.

    Raises
    ------
    DomainError
        For another medium.
    """
    low, high = _range(medium, ice_data.MINIMUM_WAVELENGTH, ice_data.MAXIMUM_WAVELENGTH, "ice")
    return RefractiveIndex(
        f"ice at −7 °C, in {medium}",
        f"ice:Warren-Brandt-2008;{_medium_key(medium)}",
        low,
        high,
        partial(_ice, medium=medium),
    )


def shifted(index: RefractiveIndex, by: float) -> RefractiveIndex:
    """Return an index with a number added to its real part."""
    return RefractiveIndex(
        f"{index.label}, shifted by {by:g}",
        f"{index.key};shifted:{by!r}",
        index.minimum_wavelength,
        index.maximum_wavelength,
        lambda wavelength: index.evaluate(wavelength) + by,
    )


def constant(value: complex) -> RefractiveIndex:
    """Return one index for all wavelengths, relative to the medium as it stands.

    Parameters
    ----------
    value : float or complex
        n + ik with n > 0 and k ≥ 0.

    Returns
    -------
    RefractiveIndex
        At every positive wavelength.

    Raises
    ------
    DomainError
        For another value.
    """
    value = complex(value)
    if not (np.isfinite(value) and value.real > 0.0 and value.imag >= 0.0):
        raise DomainError(f"refractive index must be n + ik with n > 0 and k >= 0, got {value:g}")
    shown = f"{value.real:g}" if value.imag == 0.0 else f"{value.real:g} + {value.imag:g}i"
    key = f"constant:{value.real!r}+{abs(value.imag)!r}i"
    return RefractiveIndex(f"constant index {shown}", key, 0.0, float("inf"), partial(_constant, value=value))


def tabulated(path: str | Path, medium: str = "air") -> RefractiveIndex:
    """Return an index read from a CSV file, see `skyoptics.materials.table`.

    Parameters
    ----------
    path : str or Path
        The file; its values are relative to vacuum.
    medium : str
        ``air`` or ``vacuum``.

    Returns
    -------
    RefractiveIndex
        From the first to the last row (in air within 230 to 1690 nm); n linear between rows, ln k too where both rows
        absorb, else k.

    Raises
    ------
    DataFileError
        If the file cannot be used.
    DomainError
        For another medium, or in air for a table outside the range of the air formula.
    """
    data = table.read(path)
    name = Path(path).name
    low, high = _range(medium, float(data.wavelength[0]), float(data.wavelength[-1]), name)
    return RefractiveIndex(
        f"{name}, in {medium}",
        f"table:{data.digest};{_medium_key(medium)}",
        low,
        high,
        partial(_tabulated, data=data, medium=medium),
    )


def _range(medium: str, low: float, high: float, name: str) -> tuple[float, float]:
    """Return where both the substance and the medium are known."""
    if medium not in MEDIA:
        raise DomainError(f"medium must be {' or '.join(MEDIA)}, got {medium!r}{nearest(str(medium), MEDIA)}")
    if medium == "vacuum":
        return low, high
    bounds = max(low, air_data.MINIMUM_WAVELENGTH), min(high, air_data.MAXIMUM_WAVELENGTH)
    if bounds[0] > bounds[1]:
        raise DomainError(
            f"{name} covers {low / NM:g} to {high / NM:g} nm, the index of air {air_data.MINIMUM_WAVELENGTH / NM:g} to "
            f'{air_data.MAXIMUM_WAVELENGTH / NM:g} nm; use the medium "vacuum"'
        )
    return bounds


def _medium_key(medium: str) -> str:
    return f"medium={medium}" + (":Ciddor-1996" if medium == "air" else "")


def _relative(n: FloatArray, k: FloatArray, wavelength: FloatArray, medium: str) -> ComplexArray:
    """Divide n, and n alone, by the index of the medium."""
    return (n / air_data.standard(wavelength) if medium == "air" else n) + 1j * k


def _water(wavelength: FloatArray, temperature: float, medium: str) -> ComplexArray:
    n = water_data.index(wavelength, temperature)
    return _relative(n, water_data.absorption(wavelength), wavelength, medium)


def _ice(wavelength: FloatArray, medium: str) -> ComplexArray:
    return _relative(ice_data.index(wavelength), ice_data.absorption(wavelength), wavelength, medium)


def _constant(wavelength: FloatArray, value: complex) -> ComplexArray:
    return np.full(np.shape(wavelength), value, dtype=np.complex128)


def _tabulated(wavelength: FloatArray, data: table.IndexTable, medium: str) -> ComplexArray:
    return _relative(*data.interpolate(wavelength), wavelength, medium)
