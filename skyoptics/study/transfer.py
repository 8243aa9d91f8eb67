"""Tables for radiative-transfer models: Mueller elements at Gauss–Legendre nodes, and their Legendre moments.

An element is P(µ) = Σ (2l + 1) χ_l P_l(µ), so χ_0 of P11 is 1 and χ_1 the asymmetry parameter; ∫ P11 dΩ = 4π, diffraction
included. All six elements are expanded in Legendre's own polynomials (not in generalised spherical functions). For
spheres P22 = P11 and P44 = P33, by nodes and by moments. Nodes and moments are as many as the largest drop needs for
every digit; a model that takes fewer moments has to treat the forward peak itself.
"""

from __future__ import annotations

from math import pi
from typing import TYPE_CHECKING

import numpy as np

from skyoptics.droplets import legendre
from skyoptics.droplets.averages import SizeAverage
from skyoptics.droplets.bin_averages import average_bins
from skyoptics.droplets.sizes import effective_radius, effective_variance, quadrature
from skyoptics.errors import DomainError
from skyoptics.optics.batches import Executor
from skyoptics.optics.bins import Bins
from skyoptics.optics.table import ELEMENTS
from skyoptics.study.question import Question, Step
from skyoptics.units import NM, UM, FloatArray

if TYPE_CHECKING:
    import xarray

LARGEST = 5000.0
"""Size parameter up to which tables are made: 10 000 moments, a minute a wavelength."""


def check(question: Question) -> None:
    """Refuse, before anything is computed, drops whose tables would be too long."""
    for step in question.steps():
        largest = _largest(step, question)
        if largest > LARGEST:
            allowed = step.radius_um * LARGEST / largest
            raise DomainError(
                f"radius_um is {step.radius_um:g}: tables for radiative transfer go up to size parameter {LARGEST:g}, the "
                f"largest drops here have {largest:.0f}; radius_um up to {allowed:.0f} is allowed with this spread"
            )


def average(
    question: Question, step: Step, executor: Executor | None = None
) -> tuple[SizeAverage, FloatArray, FloatArray]:
    """Return the Mie average of a step at Gauss–Legendre nodes, the nodes µ (ascending angle) and their weights."""
    count = legendre.nodes_needed(_largest(step, question) * 1.02)  # sizes may be moved within their steps
    nodes, weights = legendre.gauss_legendre(count)
    mean = average_bins(
        step.distribution,
        step.law,
        Bins.lines(question.wavelength),
        np.arccos(nodes),
        tolerance=question.tolerance,
        resolution=0.01,
        largest_level=5,
        executor=executor,
    )
    return mean, nodes, weights


def dataset(question: Question, step: Step, executor: Executor | None = None, command: str = "") -> xarray.Dataset:
    """Return the table of one step.

    Parameters
    ----------
    question, step
        What is asked; wavelengths, medium and accuracy are those of the study.
    executor : optional
        Where work runs.
    command : str
        For provenance.

    Returns
    -------
    xarray.Dataset
        `mueller` (wavelength, scattering_angle, element) and `legendre_moment` (wavelength, degree, element) [1],
        `quadrature_weight` (scattering_angle), `asymmetry`, `single_scattering_albedo`, mean cross-sections of a drop
        [m2].
    """
    import xarray as xr

    from skyoptics.study.dataset import provenance

    mean, nodes, weights = average(question, step, executor)
    elements = np.moveaxis(mean.elements, 1, 0)
    moments = np.moveaxis(legendre.moments(mean.elements, nodes, weights, len(nodes)), 1, 0)
    axis = ("wavelength",)
    data = {
        "mueller": (
            (*axis, "scattering_angle", "element"),
            elements,
            {"long_name": "elements of the scattering matrix, 4 pi over all directions", "units": "1"},
        ),
        "legendre_moment": (
            (*axis, "degree", "element"),
            moments,
            {"long_name": "Legendre moments: P = sum of (2 l + 1) moment(l) P_l(cos angle)", "units": "1"},
        ),
        "quadrature_weight": (
            ("scattering_angle",),
            weights,
            {"long_name": "Gauss-Legendre weight of the cosine", "units": "1"},
        ),
        "asymmetry": (axis, mean.asymmetry, {"long_name": "mean cosine of the scattering angle", "units": "1"}),
        "single_scattering_albedo": (axis, mean.albedo, {"long_name": "scattered / removed light", "units": "1"}),
        "extinction_cross_section": (axis, mean.extinction, {"long_name": "mean of a drop", "units": "m2"}),
        "scattering_cross_section": (axis, mean.scattering, {"long_name": "mean of a drop", "units": "m2"}),
        "refractive_index_real": (axis, np.real(step.law(question.wavelength)), {"units": "1"}),
        "refractive_index_imaginary": (axis, np.imag(step.law(question.wavelength)), {"units": "1"}),
    }
    coordinates = {
        "wavelength": (
            "wavelength",
            question.wavelength / NM,
            {"standard_name": "radiation_wavelength", "long_name": "wavelength in vacuum", "units": "nm"},
        ),
        "scattering_angle": (
            "scattering_angle",
            np.arccos(nodes) * 180.0 / pi,
            {"standard_name": "scattering_angle", "long_name": "scattering angle", "units": "degree"},
        ),
        "degree": ("degree", np.arange(len(nodes)), {"long_name": "degree of the Legendre polynomial", "units": "1"}),
        "element": list(ELEMENTS),
    }
    about = {
        "effective_radius_um": effective_radius(step.distribution) / UM,
        "effective_variance": max(effective_variance(step.distribution), 0.0),
        "average_error": float(np.sqrt(np.mean(mean.change**2, axis=1)).max()),
        "sizes": mean.sizes,
    }
    title = f"Lorenz-Mie scattering of drops, {question.sweep} = {step.value:g}"
    return xr.Dataset(data, coordinates, {**provenance(title, question, command), **about})


def name(question: Question, step: Step) -> str:
    """Return the file name of a step's table."""
    return f"transfer-{question.sweep.replace('_', '-')}-{step.value:.6g}.nc"


def _largest(step: Step, question: Question) -> float:
    return 2.0 * pi * float(quadrature(step.distribution, 0)[0].max()) / float(question.wavelength[0])
