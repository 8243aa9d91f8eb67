"""The study as a labelled dataset: CF names, units, provenance."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

import skyoptics
from skyoptics.colour.images import replacing
from skyoptics.study.result import Study
from skyoptics.units import DEG

if TYPE_CHECKING:
    import xarray

CONVENTIONS = "CF-1.11"
AXES = {
    "radius_um": ("effective radius of the drops", "um"),
    "rain_mm_h": ("rain rate", "mm h-1"),
    "spread": ("relative standard deviation of the radius", "1"),
    "temperature_c": ("temperature of the water", "degree_Celsius"),
}


def provenance(title: str, question: Any, command: str = "") -> dict[str, str]:
    """Return the global attributes: what it is, what made it, how."""
    index = question.steps()[0].law.label
    return {
        "Conventions": CONVENTIONS,
        "title": title,
        "source": f"skyoptics {skyoptics.__version__}",
        "history": command or "skyoptics.study.run.run",
        "comment": "scattering angle is that between the directions of travel before and after; 180 degrees less it is the "
        "distance from the antisolar point",
        "refractive_index": index
        if question.sweep != "temperature_c"
        else f"water by temperature, in {question.medium}",
        "references": "Bohren & Huffman (1983) for Lorenz-Mie; Airy (1838), van de Hulst (1957) for Airy; ASTM G173-03 "
        "sunlight; CIE 1931 observer",
    }


def dataset(study: Study, command: str = "") -> xarray.Dataset:
    """Return metrics by method, step and wavelength, and maps by scattering angle.

    Returns
    -------
    xarray.Dataset
        Dimensions `method`, `step` (with coordinates radius, spread, temperature, rain rate), `wavelength`,
        `scattering_angle`, `tristimulus`, `number` (of supernumeraries).
    """
    import xarray as xr

    asked = study.question
    metric = ("method", "step", "wavelength")
    mapped = ("method", "step", "wavelength", "scattering_angle")
    by_name: dict[str, tuple[Any, str, str]] = {
        "bow_angle": (lambda one: one.bow_angle, "scattering angle of the primary bow's maximum", "degree"),
        "width": (lambda one: one.width, "full width at half height above the dark band", "degree"),
        "contrast": (lambda one: one.contrast, "(bow - dark band) / (bow + dark band)", "1"),
        "secondary_over_primary": (
            lambda one: one.secondary_over_primary,
            "height of secondary / primary maximum",
            "1",
        ),
        "polarization": (
            lambda one: one.polarization,
            "degree of linear polarisation at the bow angle, along the bow",
            "1",
        ),
        "secondary_angle": (
            lambda one: one.secondary_angle,
            "scattering angle of the secondary bow's maximum",
            "degree",
        ),
        "dark_band_angle": (
            lambda one: one.dark_angle,
            "scattering angle of the least intensity between the bows",
            "degree",
        ),
        "peak": (lambda one: one.peak, "differential scattering / extinction at the bow angle", "sr-1"),
        "dark_band": (lambda one: one.dark, "differential scattering / extinction, least between the bows", "sr-1"),
    }
    variables: dict[str, Any] = {
        name: (metric, study.metric(read), {"long_name": words, "units": units})
        for name, (read, words, units) in by_name.items()
    }
    count = 3
    variables["supernumerary_angle"] = (
        (*metric, "number"),
        np.stack([study.metric(lambda one, k=k: one.supernumerary(k)) for k in range(1, count + 1)], axis=-1),  # type: ignore[misc]
        {"long_name": "scattering angle of the supernumerary bows", "units": "degree"},
    )
    colour = np.array([[study.colour[m][s] for s in range(len(study.steps))] for m in range(len(asked.methods))])
    for k, (name, words) in enumerate(
        (("chromaticity_x", "CIE 1931 x"), ("chromaticity_y", "CIE 1931 y"), ("purity", "excitation purity"))
    ):
        note = {"long_name": f"{words} of the sunlit bow at this wavelength's bow angle", "units": "1"}
        variables[name] = (metric, colour[..., k], note)
    variables["average_error"] = (
        ("method", "step"),
        study.error,
        {"long_name": "relative error of the average over sizes, rms over angle", "units": "1"},
    )
    variables["intensity"] = (
        mapped,
        study.map_intensity.astype(np.float32),
        {"long_name": "differential scattering / extinction, unpolarised light", "units": "sr-1"},
    )
    variables["degree_of_polarization"] = (
        mapped,
        study.map_polarization.astype(np.float32),
        {"long_name": "(perpendicular - parallel) / (perpendicular + parallel) to the scattering plane", "units": "1"},
    )
    variables["xyz"] = (
        ("method", "step", "scattering_angle", "tristimulus"),
        study.map_xyz.astype(np.float32),
        {"long_name": "CIE 1931 XYZ under sunlight above the air, per unit optical depth", "units": "cd m-2"},
    )
    variables["delta_e"] = (
        ("method", "step", "scattering_angle"),
        study.difference.astype(np.float32),
        {"long_name": f"CIEDE2000 difference from {asked.methods[0]}", "units": "1"},
    )
    coordinates: dict[str, Any] = {
        "method": list(asked.methods),
        "wavelength": (
            "wavelength",
            np.array(asked.wavelength_nm),
            {"standard_name": "radiation_wavelength", "long_name": "wavelength in vacuum", "units": "nm"},
        ),
        "scattering_angle": (
            "scattering_angle",
            study.map_angle / DEG,
            {"standard_name": "scattering_angle", "long_name": "scattering angle", "units": "degree"},
        ),
        "tristimulus": ["X", "Y", "Z"],
        "number": ("number", np.arange(1, count + 1), {"long_name": "number of the supernumerary", "units": "1"}),
    }
    for name, (words, units) in AXES.items():
        held = np.array([getattr(step, name) for step in study.steps], dtype=np.float64)
        coordinates[name.removesuffix("_um").removesuffix("_c").removesuffix("_mm_h")] = (
            "step",
            held,
            {"long_name": words, "units": units},
        )
    title = f"skyoptics study of drops by {asked.sweep}"
    return xr.Dataset(variables, coordinates, provenance(title, asked, command))


def write(data: xarray.Dataset, path: Path) -> None:
    """Write a dataset as compressed NetCDF-4, whole or not at all."""
    with replacing(path) as aside:
        put(data, aside)


def put(data: xarray.Dataset, path: Path) -> None:
    """Write a dataset as compressed NetCDF-4."""
    encoding: dict[str, Mapping[str, Any]] = {}
    for name, variable in data.variables.items():
        packed = variable.ndim > 0 and variable.dtype.kind == "f" and str(name) not in data.coords
        encoding[str(name)] = {
            "_FillValue": None,
            **({"zlib": True, "complevel": 1, "shuffle": True} if packed else {}),
        }
    data.to_netcdf(path, engine="h5netcdf", encoding=encoding)
