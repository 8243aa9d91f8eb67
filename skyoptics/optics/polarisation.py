"""Polarisation: the conventions, once, and the few matrices they need.

- Bohren & Huffman, *Absorption and Scattering of Light by Small Particles* (1983), §2.11, §3.2–3.3; time factor
  exp(−iωt), so an absorbing medium has the index n + ik with k > 0.
- A beam has two axes ∥ and ⊥ with ⊥ × ∥ = direction of travel. I = |E∥|² + |E⊥|², Q = |E∥|² − |E⊥|²,
  U = 2 Re(E∥ E⊥*), V = −2 Im(E∥ E⊥*). Seen by an observer who looks towards the source, ⊥ lies a quarter turn *clockwise*
  from ∥; light polarised at the angle χ clockwise from ∥ has Q = cos 2χ, U = sin 2χ; V > 0 when the electric vector
  turns clockwise ("right-handed" in optics).
- *Scattering frame*: ∥ lies in the scattering plane. Q < 0 (P12 < 0) then means polarised perpendicular to that plane,
  as the light of rainbows is, along the bow.
- *Meridian frame* of light seen in a viewing direction: ∥ along growing elevation, ⊥ along growing azimuth (to the
  right). Q > 0: electric vector upright; U > 0: tilted from upright to the right, χ being the position angle of
  `skyoptics.geometry.axes`. All Stokes vectors in pictures, and a source's own, are in this frame. At the zenith itself
  it follows the azimuth the direction is given, 0 (north) for a bare vector.
- A turn by 180° changes nothing, so planes need no sign.
"""

from __future__ import annotations

import numpy as np

from skyoptics.geometry.axes import azimuth_elevation, direction
from skyoptics.units import ArrayLike, FloatArray


def stokes(parallel: ArrayLike, perpendicular: ArrayLike) -> FloatArray:
    """Return the Stokes vector of a pair of complex amplitudes.

    Parameters
    ----------
    parallel, perpendicular : array_like of complex, broadcastable
        Field components E∥, E⊥.

    Returns
    -------
    ndarray, shape (..., 4)
        I, Q, U, V (Bohren & Huffman eq. 2.80).
    """
    a, b = np.asarray(parallel, dtype=np.complex128), np.asarray(perpendicular, dtype=np.complex128)
    cross = a * np.conj(b)
    first, second = np.abs(a) ** 2, np.abs(b) ** 2
    return np.stack(np.broadcast_arrays(first + second, first - second, 2.0 * cross.real, -2.0 * cross.imag), axis=-1)


def rotation(angle: ArrayLike) -> FloatArray:
    """Return the matrix that takes Stokes vectors into axes turned by an angle.

    Parameters
    ----------
    angle : array_like
        Turn of the axes, clockwise as seen looking towards the source (from ∥ towards ⊥) [rad].

    Returns
    -------
    ndarray, shape (..., 4, 4)
        Q' = Q cos 2χ + U sin 2χ, U' = −Q sin 2χ + U cos 2χ; I and V stay.
    """
    angle = np.asarray(angle, dtype=np.float64)
    cosine, sine = np.cos(2.0 * angle), np.sin(2.0 * angle)
    matrix = np.zeros((*angle.shape, 4, 4))
    matrix[..., 0, 0] = matrix[..., 3, 3] = 1.0
    matrix[..., 1, 1] = matrix[..., 2, 2] = cosine
    matrix[..., 1, 2] = sine
    matrix[..., 2, 1] = -sine
    return matrix


def elements_from_amplitudes(perpendicular: ArrayLike, parallel: ArrayLike) -> FloatArray:
    """Return the six Mueller elements of a scatterer with a diagonal amplitude matrix.

    Parameters
    ----------
    perpendicular, parallel : array_like of complex, broadcastable
        S1 and S2 of Bohren & Huffman (eq. 4.75).

    Returns
    -------
    ndarray, shape (..., 6)
        P11 = (|S2|² + |S1|²)/2, P12 = (|S2|² − |S1|²)/2, P22 = P11, P33 = Re(S2 S1*), P34 = Im(S2 S1*), P44 = P33
        (eq. 4.77), not normalised.
    """
    s1, s2 = np.asarray(perpendicular, dtype=np.complex128), np.asarray(parallel, dtype=np.complex128)
    one, two = np.abs(s1) ** 2, np.abs(s2) ** 2
    cross = s2 * np.conj(s1)
    sum_, difference = 0.5 * (two + one), 0.5 * (two - one)
    return np.stack(np.broadcast_arrays(sum_, difference, sum_, cross.real, cross.imag, cross.real), axis=-1)


def mueller_matrix(elements: ArrayLike) -> FloatArray:
    """Return the Mueller matrix in the scattering frame.

    Parameters
    ----------
    elements : array_like, shape (..., 6)
        P11 P12 P22 P33 P34 P44.

    Returns
    -------
    ndarray, shape (..., 4, 4)
        [[P11, P12, 0, 0], [P12, P22, 0, 0], [0, 0, P33, P34], [0, 0, −P34, P44]] (Bohren & Huffman eq. 13.21 and §13.3).
    """
    elements = np.asarray(elements, dtype=np.float64)
    matrix = np.zeros((*elements.shape[:-1], 4, 4))
    matrix[..., 0, 0] = elements[..., 0]
    matrix[..., 0, 1] = matrix[..., 1, 0] = elements[..., 1]
    matrix[..., 1, 1] = elements[..., 2]
    matrix[..., 2, 2] = elements[..., 3]
    matrix[..., 2, 3] = elements[..., 4]
    matrix[..., 3, 2] = -elements[..., 4]
    matrix[..., 3, 3] = elements[..., 5]
    return matrix


def plane_angle(view: ArrayLike, other: ArrayLike) -> FloatArray:
    """Return the position angle, at one viewing direction, of the great circle towards another.

    Parameters
    ----------
    view, other : array_like, shape (..., 3), broadcastable
        Unit vectors, viewing.

    Returns
    -------
    ndarray, shape (...)
        0 towards growing elevation, clockwise as seen by the observer [rad]; 0 where the two coincide or are opposite.
    """
    view, other = np.asarray(view, dtype=np.float64), np.asarray(other, dtype=np.float64)
    azimuth, elevation = azimuth_elevation(view)
    up = direction(azimuth, elevation + np.pi / 2.0)
    right = direction(azimuth + np.pi / 2.0, np.zeros_like(azimuth))
    return np.arctan2(np.sum(right * other, axis=-1), np.sum(up * other, axis=-1))


def between_meridians(source: ArrayLike, view: ArrayLike, elements: ArrayLike) -> FloatArray:
    """Return the matrix from the source's Stokes vector to the seen one, both in their meridian frames.

    Parameters
    ----------
    source, view : array_like, shape (..., 3), broadcastable
        Viewing directions of the source and of the light seen.
    elements : array_like, shape (..., 6)
        P11 P12 P22 P33 P34 P44 at the scattering angle between the two.

    Returns
    -------
    ndarray, shape (..., 4, 4)
        L(−χ_view) P L(χ_source), χ the position angle of the scattering plane at each end.
    """
    into = rotation(plane_angle(source, view))
    back = rotation(-plane_angle(view, source))
    return np.asarray(back @ mueller_matrix(elements) @ into)


def degree_of_polarisation(stokes_vector: ArrayLike) -> FloatArray:
    """Return √(Q² + U² + V²)/I of Stokes vectors of shape (..., 4) [1]; nan where there is no light."""
    return _degree(stokes_vector, 4)


def degree_of_linear_polarisation(stokes_vector: ArrayLike) -> FloatArray:
    """Return √(Q² + U²)/I of Stokes vectors of shape (..., 4) [1]; nan where there is no light."""
    return _degree(stokes_vector, 3)


def signed_polarisation(elements: ArrayLike) -> FloatArray:
    """Return (I⊥ − I∥)/(I⊥ + I∥) = −P12/P11 for unpolarised light scattered [1]; nan where there is no light.

    Parameters
    ----------
    elements : array_like, shape (..., 6)
        P11 P12 P22 P33 P34 P44.
    """
    elements = np.asarray(elements, dtype=np.float64)
    intensity = elements[..., 0]
    return np.divide(-elements[..., 1], intensity, out=np.full_like(intensity, np.nan), where=intensity > 0.0)


def _degree(stokes_vector: ArrayLike, stop: int) -> FloatArray:
    """Return the length of the components 1 … stop − 1, relative to I."""
    vector = np.asarray(stokes_vector, dtype=np.float64)
    length = np.sqrt(np.sum(vector[..., 1:stop] ** 2, axis=-1))
    return np.divide(length, vector[..., 0], out=np.full_like(length, np.nan), where=vector[..., 0] > 0.0)
