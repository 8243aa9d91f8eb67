"""The phase matrix of a population of crystals: four incident polarisations, the same rays."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from skyoptics.crystals.prepared import Prepared
from skyoptics.crystals.tracing import trace_plane
from skyoptics.geometry.directions import Directions
from skyoptics.units import FloatArray

STATES = ((1.0, 0.0, 0.0, 0.0), (1.0, 1.0, 0.0, 0.0), (1.0, 0.0, 1.0, 0.0), (1.0, 0.0, 0.0, 1.0))
"""Incident Stokes vectors: unpolarised, vertical, diagonal, circular."""


def phase_matrix(
    prepared: Prepared, directions: Directions, seed: int, batches: int, rays: int
) -> tuple[FloatArray, FloatArray]:
    """Return the phase matrix of a population on a grid of directions.

    Parameters
    ----------
    prepared : Prepared
        From `skyoptics.crystals.prepared.prepare`; its own polarisation is not looked at.
    directions : Directions
        Grid.
    seed, batches, rays : int
        As many independent batches (two at least), of so many rays, of each polarisation.

    Returns
    -------
    matrix : ndarray, shape (ny, nx, 4, 4)
        Differential scattering ÷ reference extinction cross-section [sr⁻¹], from the source's frame of elevation to that
        of each viewing direction (Q = I(vertical) − I(level)); nan outside the image.
    error : ndarray, shape (ny, nx, 4, 4)
        One standard error, from the scatter of batches.

    Notes
    -----
    M is read from the four incident states s_k (`STATES`): M s_0 is the first column, M (s_k − s_0) the others. Rays and
    random numbers are the same for all states, so differences are less noisy than their terms.
    """
    solid = directions.solid_angle()
    packed = directions.packed()
    factor = np.divide(1.0, 2.0 * rays * solid, out=np.full_like(solid, np.nan), where=solid > 0.0)
    found = np.empty((batches, *directions.shape, 4, 4))
    for batch in range(batches):
        for column, state in enumerate(STATES):
            arguments = prepared.arguments._replace(stokes=np.array(state, dtype=np.float32))
            lit = replace(prepared, arguments=arguments)
            plane, _ = trace_plane(lit, packed, seed, batch, rays, 4, np.float64)
            found[batch, ..., column] = plane * factor[..., None]
        found[batch, ..., 1:] -= found[batch, ..., :1]
    return found.mean(axis=0), found.std(axis=0, ddof=1) / np.sqrt(batches)
