"""Debye series of a sphere: the Mie amplitudes split by the number of chords inside the drop."""

from __future__ import annotations

import numpy as np

from skyoptics.droplets.mie import checked, sorted_cosines, terms_needed
from skyoptics.errors import DomainError
from skyoptics.kernels.debye import debye_coefficients
from skyoptics.kernels.mie import amplitude_sums
from skyoptics.units import ArrayLike, ComplexArray

SMALLEST_SIZE_PARAMETER = 1.0
"""Below it the split means nothing, and its terms cancel each other's digits."""


def amplitudes(
    index: complex, size_parameter: float, cos_angle: ArrayLike, last: int
) -> tuple[ComplexArray, ComplexArray]:
    """Return the scattering amplitudes of each Debye term p = 0 … last, and of all higher ones together.

    Parameters
    ----------
    index : complex
        n + ik relative to the medium, k ≥ 0 [1].
    size_parameter : float
        2π radius/wavelength [1].
    cos_angle : array_like, shape (nθ...)
        Cosine of the scattering angle [1].
    last : int
        Highest p asked for: 0 diffraction and external reflection, 1 direct transmission, 2 primary bow, 3 secondary …

    Returns
    -------
    S1, S2 : ndarray, complex, shape (last + 2, nθ...)
        One row a term, the last row the remainder in closed form; the rows add up to `skyoptics.droplets.mie.amplitudes`
        [1].

    Raises
    ------
    DomainError
        As `skyoptics.droplets.mie.amplitudes`, or if `last` is negative.

    Notes
    -----
    Partial waves beyond the edge of the drop (order > |index| x) touch it only through their evanescent tail; their split
    by p is formal and they decay exponentially. Amplitudes interfere: intensities of single terms do not add up to
    the whole except in an average over sizes.
    """
    m, x = checked(index, size_parameter)
    if m.shape != ():
        raise DomainError("one index and one size parameter at a time")
    if x < SMALLEST_SIZE_PARAMETER:
        raise DomainError(
            f"Debye series need a size parameter of {SMALLEST_SIZE_PARAMETER:g} or more, got {float(x):g}"
        )
    if last < 0:
        raise DomainError(f"last Debye term must be 0 or more, got {last}")
    order, cosine, first_backward, shape = sorted_cosines(cos_angle)
    count = int(terms_needed(x))
    a = np.empty((last + 2, count), dtype=np.complex128)
    b = np.empty_like(a)
    debye_coefficients(complex(m), float(x), a, b)
    s1 = np.empty((last + 2, cosine.size), dtype=np.complex128)
    s2 = np.empty_like(s1)
    sum1 = np.empty(cosine.size, dtype=np.complex128)
    sum2 = np.empty_like(sum1)
    for p in range(last + 2):
        amplitude_sums(a[p], b[p], cosine, first_backward, sum1, sum2)
        s1[p, order] = sum1
        s2[p, order] = sum2
    return s1.reshape((last + 2, *shape)), s2.reshape((last + 2, *shape))
