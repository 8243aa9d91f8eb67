"""The picture's radiance as a labelled dataset (CF names and units), for NetCDF files and the Python face."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from skyoptics.colour.images import replacing
from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.optics.polarisation import degree_of_linear_polarisation
from skyoptics.rendering.looking import look, stokes
from skyoptics.rendering.memory import blocks
from skyoptics.rendering.run import Result
from skyoptics.units import DEG, NM

if TYPE_CHECKING:
    import xarray


def dataset(result: Result, attributes: Mapping[str, str]) -> xarray.Dataset:
    """Return radiance with its directions and wavelengths.

    Parameters
    ----------
    result : Result
        A finished render; the radiance is looked up again from its tables.
    attributes : mapping
        Provenance: title, source, history, …

    Returns
    -------
    xarray.Dataset
        `radiance` (y, x, wavelength) [W m-2 sr-1 nm-1] float32, `azimuth`, `elevation` (y, x) [degree], `wavelength` [nm]
        with its bounds; row 0 on top.
    """
    import xarray as xr

    job = result.job
    values = np.empty((*job.directions.shape, len(job.bins)), dtype=np.float32)
    polarisation: dict[str, Any] = {}
    if job.stokes:
        degree, angle = np.empty_like(values), np.empty_like(values)
        for rows in blocks(job.directions.shape):
            seen = stokes(job, result.sheets, rows, result.mirror)
            degree[rows] = degree_of_linear_polarisation(seen)
            angle[rows] = 0.5 * np.arctan2(seen[..., 2], seen[..., 1]) / DEG
        polarisation = {
            "degree_of_polarisation": (
                ("y", "x", "wavelength"),
                degree,
                {"long_name": "degree of linear polarisation, without a polariser", "units": "1"},
            ),
            "polarisation_angle": (
                ("y", "x", "wavelength"),
                angle,
                {"long_name": "plane of the electric vector from growing elevation, clockwise", "units": "degree"},
            ),
        }
    azimuth = np.empty(job.directions.shape)
    elevation = np.empty(job.directions.shape)
    for rows, block in look(job, result.sheets, None, mirror=result.mirror):
        values[rows] = block
        azimuth[rows], elevation[rows] = azimuth_elevation(job.directions.vectors(rows))
    return xr.Dataset(
        data_vars={
            "radiance": (
                ("y", "x", "wavelength"),
                values,
                {"long_name": "spectral radiance, mean over the bin", "units": "W m-2 sr-1 nm-1"},
            ),
            "wavelength_bounds": (("wavelength", "edge"), job.bins.edges / NM, {"units": "nm"}),
            **polarisation,
        },
        coords={
            "azimuth": (("y", "x"), azimuth / DEG, {"long_name": "azimuth, clockwise from north", "units": "degree"}),
            "elevation": (("y", "x"), elevation / DEG, {"long_name": "elevation above the horizon", "units": "degree"}),
            "wavelength": (
                "wavelength",
                job.bins.centre / NM,
                {
                    "standard_name": "radiation_wavelength",
                    "long_name": "middle of the bin, in vacuum",
                    "units": "nm",
                    "bounds": "wavelength_bounds",
                },
            ),
        },
        attrs={"Conventions": "CF-1.11", **attributes},
    )


def write(data: xarray.Dataset, path: Path) -> None:
    """Write a dataset as compressed NetCDF-4, whole or not at all."""
    encoding: dict[str, dict[str, Any]] = {str(name): {"_FillValue": None} for name in data.variables}
    for name in ("radiance", "degree_of_polarisation", "polarisation_angle"):
        if name in encoding:
            encoding[name].update(zlib=True, complevel=1, shuffle=True)
    with replacing(path) as aside:
        data.to_netcdf(aside, engine="h5netcdf", encoding=encoding)
