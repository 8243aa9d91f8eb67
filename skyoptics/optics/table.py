"""Scattering tables: what axisymmetric scatterers (spheres, randomly oriented crystals) are reduced to.

A table holds the six independent elements of the Mueller matrix of a macroscopically isotropic, mirror-symmetric medium
(Bohren & Huffman, *Absorption and Scattering of Light by Small Particles*, 1983, §13.3, with S14 = S24 = 0), by part (ray
order, Debye term, …), scattering angle and wavelength. All parts together have ∫ P11 dΩ = 4π.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from skyoptics.errors import DomainError
from skyoptics.units import FloatArray

ELEMENTS = ("P11", "P12", "P22", "P33", "P34", "P44")


@dataclass(frozen=True, eq=False)
class ScatteringTable:
    """Mueller elements by part, scattering angle and wavelength.

    Parameters
    ----------
    angle : ndarray, shape (nθ,)
        Scattering angles, ascending, uneven [rad]: bin centres where `edges` are given, else the nodes of a curve that is
        linear between them.
    wavelength : ndarray, shape (nλ,)
        Label of each spectral bin [m].
    elements : ndarray, shape (part, nθ, nλ, 6)
        P11 P12 P22 P33 P34 P44 [1]; means over the bin's solid angle where `edges` are given.
    error : ndarray, shape (part, nθ, nλ)
        One standard error of P11.
    albedo : ndarray, shape (nλ,)
        Scattered share of what was taken out of the beam (traced part only, where the table holds no diffraction).
    asymmetry : ndarray, shape (nλ,)
        Mean cosine of the scattering angle of the whole.
    parts : tuple of str
        Name of each part.
    edges : ndarray, shape (nθ + 1,), optional
        Edges of the bins [rad].
    report : dict
        Figures about how the table was made (rays, energies by part, absorbed, cut off, …).
    """

    angle: FloatArray
    wavelength: FloatArray
    elements: FloatArray
    error: FloatArray
    albedo: FloatArray
    asymmetry: FloatArray
    parts: tuple[str, ...]
    edges: FloatArray | None = None
    report: dict[str, Any] = field(default_factory=dict)

    def select(self, parts: Sequence[str]) -> ScatteringTable:
        """Return a table of some parts only; they keep their share (∫ P11 dΩ < 4π then)."""
        missing = [part for part in parts if part not in self.parts]
        if missing:
            raise DomainError(f"the table has no part {missing[0]!r}; it has {', '.join(self.parts)}")
        rows = [self.parts.index(part) for part in parts]
        return replace(self, elements=self.elements[rows], error=self.error[rows], parts=tuple(parts))

    def total(self) -> ScatteringTable:
        """Return a table of one part, the sum of all.

        The error of the sum is taken as the root of the summed squares.
        """
        return replace(
            self,
            elements=self.elements.sum(axis=0, keepdims=True),
            error=np.sqrt((self.error**2).sum(axis=0, keepdims=True)),
            parts=("all",),
        )

    def solid_angle(self) -> FloatArray:
        """Return the solid angle that belongs to each angle, shape (nθ,) [sr]; nodes get trapezoid weights."""
        if self.edges is not None:
            return 2.0 * np.pi * -np.diff(np.cos(self.edges))
        cosine = np.cos(self.angle)
        step = -np.diff(cosine)
        weight = np.zeros_like(cosine)
        weight[:-1] += 0.5 * step
        weight[1:] += 0.5 * step
        weight[0] += 1.0 - cosine[0]
        weight[-1] += 1.0 + cosine[-1]
        return 2.0 * np.pi * weight

    def energy(self) -> FloatArray:
        """Return ∫ P11 dΩ / 4π by part and wavelength, shape (part, nλ); 1 over all parts of a whole table."""
        return np.einsum("ptw,t->pw", self.elements[..., 0], self.solid_angle()) / (4.0 * np.pi)
