"""The horizon: a profile of elevation by azimuth, its dip and distance from a height, and profiles read from CSV files.

::

    # seen from the car park, with a theodolite
    azimuth_deg,elevation_deg
    0,0.4
    30,2.1
    55,1.2

One header line with ``azimuth_deg`` (clockwise from north, −180 to 360) and ``elevation_deg`` (−90 to 90) in any order; then
one row a point, in any order; the last point joins the first one round the north. Comma or semicolon between columns, point
in decimals; UTF-8, with or without byte order mark; lines that start with ``#`` and empty lines are skipped. Between points
the horizon is a straight line in azimuth and elevation.

Terrestrial refraction bends a level ray to `REFRACTION` of the earth's curvature, so the earth looks flatter than it is, with
a radius of R / (1 − k).
"""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from skyoptics import textfile
from skyoptics.errors import DataFileError, DomainError, nearest
from skyoptics.geometry.axes import azimuth_elevation
from skyoptics.units import DEG, ArrayLike, BoolArray, FloatArray

EARTH_RADIUS = 6.371e6
"""Mean radius of the earth [m]."""
REFRACTION = 1.0 / 6.0
"""Curvature of a level ray ÷ the earth's: over the sea, by day, on average. It makes the dip 1.76′ √(height / m), as N.
Bowditch, *American Practical Navigator*, has it (from memory); on a given day the real air differs by a tenth or more."""
WIDEST_GAP = 30.0 * DEG
"""Between neighbouring points of a file that a straight line may bridge [rad]."""
HIGHEST = 10.0e3
"""Height of the eye up to which `dip` and `distance` are offered [m]."""

_COLUMNS = ("azimuth_deg", "elevation_deg")
_LIMITS_DEG = {"azimuth_deg": (-180.0, 360.0), "elevation_deg": (-90.0, 90.0)}
_LARGEST_FILE = 10_000_000  # bytes
_FAULTS_SHOWN = 20
_SAME = 1e-9  # azimuths nearer than this are the same [rad]


@dataclass(frozen=True, eq=False)
class Profile:
    """Where the land ends and the sky begins, all round.

    Parameters
    ----------
    azimuths : ndarray, shape (m,)
        Ascending, in [0, 2π) [rad]; one point is a level horizon.
    elevations : ndarray, shape (m,)
        Of the horizon there, apparent [rad].

    Raises
    ------
    DomainError
        If the azimuths do not rise from 0 to below 2π, or an elevation lies outside −90° to 90°.
    """

    azimuths: FloatArray
    elevations: FloatArray
    _table: tuple[FloatArray, FloatArray] = field(init=False, repr=False)

    def __post_init__(self) -> None:
        azimuths = np.array(self.azimuths, dtype=np.float64)
        elevations = np.array(self.elevations, dtype=np.float64)
        if azimuths.ndim != 1 or azimuths.shape != elevations.shape or len(azimuths) == 0:
            raise DomainError("a horizon needs as many azimuths as elevations, one of each at least")
        if not (np.all(np.diff(azimuths) > 0.0) and azimuths[0] >= 0.0 and azimuths[-1] < 2.0 * np.pi):
            raise DomainError("azimuths of a horizon rise from point to point, from 0 to below 360 degrees")
        if not np.all(np.abs(elevations) <= 0.5 * np.pi):
            raise DomainError("elevations of a horizon lie between -90 and 90 degrees")
        turn = 2.0 * np.pi
        table = (
            np.concatenate([azimuths[-1:] - turn, azimuths, azimuths[:1] + turn]),
            np.concatenate([elevations[-1:], elevations, elevations[:1]]),
        )
        for array in (azimuths, elevations):
            array.setflags(write=False)
        object.__setattr__(self, "azimuths", azimuths)
        object.__setattr__(self, "elevations", elevations)
        object.__setattr__(self, "_table", table)

    @property
    def lowest(self) -> float:
        """Lowest elevation [rad]."""
        return float(self.elevations.min())

    @property
    def highest(self) -> float:
        """Highest elevation [rad]."""
        return float(self.elevations.max())

    def elevation(self, azimuth: ArrayLike) -> FloatArray:
        """Return the horizon's elevation.

        Parameters
        ----------
        azimuth : array_like
            Any number of turns [rad].

        Returns
        -------
        ndarray
            Same shape [rad]; on straight lines between the points; nan for nan.
        """
        azimuth = np.asarray(azimuth, dtype=np.float64)
        if len(self.elevations) == 1:
            return np.where(np.isnan(azimuth), np.nan, self.elevations[0])
        return np.asarray(np.interp(np.mod(azimuth, 2.0 * np.pi), *self._table))

    def clearance(self, vectors: ArrayLike) -> FloatArray:
        """Return by how much viewing directions stand above the horizon below them.

        Parameters
        ----------
        vectors : array_like, shape (..., 3)
            East, north, up.

        Returns
        -------
        ndarray, shape (...)
            Negative on the land [rad]; nan for nan.
        """
        azimuth, elevation = azimuth_elevation(vectors)
        return np.asarray(elevation - self.elevation(azimuth))

    def visible(self, vectors: ArrayLike) -> BoolArray:
        """Return whether viewing directions (..., 3) meet the sky, on the horizon included; False for nan."""
        return np.asarray(self.clearance(vectors) >= 0.0)


def flat(dip: float = 0.0) -> Profile:
    """Return a level horizon.

    Parameters
    ----------
    dip : float
        How far it lies below the true horizontal, see `dip` [rad].
    """
    return Profile(np.zeros(1), np.array([-dip + 0.0]))


def dip(height: ArrayLike, refraction: float = REFRACTION) -> FloatArray:
    """Return how far the sea's horizon lies below the horizontal for an eye at some height.

    Parameters
    ----------
    height : array_like
        Of the eye above the sea or the plain, 0 to 10 km [m].
    refraction : float
        Curvature of rays ÷ the earth's, 0 (no air) to below 1 [1].

    Returns
    -------
    ndarray
        arccos(R′ / (R′ + h)), R′ = R / (1 − k); √(2h / R′) for small heights [rad].

    Raises
    ------
    DomainError
        Outside these ranges.
    """
    height, radius = _seen_from(height, refraction)
    return 2.0 * np.arcsin(np.sqrt(0.5 * height / (radius + height)))


def distance(height: ArrayLike, refraction: float = REFRACTION) -> FloatArray:
    """Return how far away the sea's horizon is, along the line of sight.

    Parameters
    ----------
    height, refraction
        As for `dip`.

    Returns
    -------
    ndarray
        √(h (2R′ + h)) [m]; 3.9 km √(height / m).

    Raises
    ------
    DomainError
        As for `dip`.
    """
    height, radius = _seen_from(height, refraction)
    return np.sqrt(height * (2.0 * radius + height))


def ground_distance(elevation: ArrayLike, height: float, refraction: float = REFRACTION) -> FloatArray:
    """Return how far away the ground or the sea is along lines of sight.

    Parameters
    ----------
    elevation : array_like
        Of the line of sight [rad]; above the sea's horizon, where nothing is met, the horizon's distance is given.
    height, refraction : float
        As for `dip`.

    Returns
    -------
    ndarray
        Same shape as `elevation` [m]; nan for nan.

    Raises
    ------
    DomainError
        As for `dip`.
    """
    up, radius = _seen_from(height, refraction)
    sine = -np.sin(np.asarray(elevation, dtype=np.float64))
    power = up * (2.0 * radius + up)  # of the eye about the circle: product of both distances
    half = (radius + up) * np.maximum(sine, 0.0)
    reach = half + np.sqrt(np.maximum(half * half - power, 0.0))
    low = half * half > power
    met = power / np.where(low, reach, 1.0)
    return np.asarray(np.where(np.isnan(sine), np.nan, np.where(low, met, np.sqrt(power))))


def _seen_from(height: ArrayLike, refraction: float) -> tuple[FloatArray, float]:
    """Return checked heights and the radius that the earth seems to have."""
    height = np.asarray(height, dtype=np.float64)
    if not np.all((height >= 0.0) & (height <= HIGHEST)):
        raise DomainError(f"the height of the eye above the plain must lie between 0 and {HIGHEST / 1e3:g} km")
    if not 0.0 <= refraction < 1.0:
        raise DomainError(f"the coefficient of terrestrial refraction lies between 0 and 1, got {refraction:g}")
    return height, EARTH_RADIUS / (1.0 - refraction)


def read(path: str | Path, widest_gap: float = WIDEST_GAP) -> Profile:
    """Read a horizon.

    Parameters
    ----------
    path : str or Path
        CSV file as described on top of this module.
    widest_gap : float
        Between neighbouring points, all round [rad].

    Returns
    -------
    Profile

    Raises
    ------
    DataFileError
        With every fault found (the first twenty), each with file, line and what to do.
    """
    lines = [
        (number, line.strip())
        for number, line in enumerate(textfile.read(path, _LARGEST_FILE, "a horizon").split("\n"), start=1)
        if line.strip() and not line.lstrip().startswith("#")
    ]
    if not lines:
        raise DataFileError(f"{path}: no data; expected the header {','.join(_COLUMNS)} and rows below it")
    number, header = lines[0]
    separator = ";" if ";" in header else ","
    names = _header(f"{path}:{number}", header, separator)
    faults: list[str] = []
    points: list[tuple[float, float, int]] = []
    for number, line in lines[1:]:
        point, found = _row(f"{path}:{number}", line, separator, names)
        faults += found
        if point is not None:
            points.append((*point, number))
    points.sort(key=lambda point: (point[0], point[2]))
    points, found = _without_doubles(path, points)
    faults += found
    if not faults:  # a gap may be the trace of a faulty row
        faults += _gaps(path, points, widest_gap)
    if faults:
        more = len(faults) - _FAULTS_SHOWN
        raise DataFileError("\n".join(faults[:_FAULTS_SHOWN] + ([f"{path}: and {more} more"] if more > 0 else [])))
    table = np.array(points)
    return Profile(table[:, 0], table[:, 1])


def _header(where: str, header: str, separator: str) -> list[str]:
    """Return the column names, checked."""
    names = [name.strip().lower() for name in header.split(separator)]
    for name in names:
        if name not in _COLUMNS:
            shown = f"unknown column {name!r}" if name else "column without a name"
            hint = nearest(name, _COLUMNS)
            raise DataFileError(f"{where}: {shown}{hint}; the first line names the columns: {','.join(_COLUMNS)}")
        if names.count(name) > 1:
            raise DataFileError(f"{where}: column {name} given twice")
    for name in _COLUMNS:
        if name not in names:
            raise DataFileError(f"{where}: no column {name}; the first line names the columns: {','.join(_COLUMNS)}")
    return names


def _row(where: str, line: str, separator: str, names: list[str]) -> tuple[tuple[float, float] | None, list[str]]:
    """Return azimuth in [0, 2π) and elevation of a row [rad], None where a fault leaves none, and its faults."""
    cells = [cell.strip() for cell in line.split(separator)]
    if len(cells) != len(names):
        hint = "; write a decimal point, not a comma" if separator == "," and len(cells) > len(names) else ""
        return None, [f"{where}: {len(cells)} value(s) where the header names {len(names)} columns{hint}"]
    faults: list[str] = []
    values: dict[str, float] = {}
    for name, cell in zip(names, cells, strict=True):
        try:
            value = float(cell) if "_" not in cell else np.nan
        except ValueError:
            value = np.nan
        low, high = _LIMITS_DEG[name]
        if not np.isfinite(value):
            hint = "; write a decimal point, not a comma" if "," in cell else ""
            faults.append(f"{where}: {name} is {cell!r}; a finite number is needed{hint}")
        elif not low <= value <= high:
            faults.append(f"{where}: {name} is {cell}; allowed are {low:g} to {high:g}")
        values[name] = value
    if faults:
        return None, faults
    azimuth = float(np.mod(values["azimuth_deg"], 360.0)) * DEG
    return (0.0 if 2.0 * np.pi - azimuth < _SAME else azimuth, values["elevation_deg"] * DEG), []


def _without_doubles(
    path: str | Path, points: list[tuple[float, float, int]]
) -> tuple[list[tuple[float, float, int]], list[str]]:
    """Return the points with a repeated one (0° and 360°, say) taken once, and a fault for each two that disagree."""
    kept: list[tuple[float, float, int]] = []
    faults: list[str] = []
    for point in points:
        if kept and point[0] - kept[-1][0] < _SAME:
            first, second = kept[-1], point
            if abs(first[1] - second[1]) > _SAME:
                faults.append(
                    f"{path}:{second[2]}: azimuth {second[0] / DEG:.6g} stands in line {first[2]} too, with another "
                    "elevation; keep one of them, or move one a little for an upright edge"
                )
            continue
        kept.append(point)
    return kept, faults


def _gaps(path: str | Path, points: list[tuple[float, float, int]], widest: float) -> list[str]:
    """Return a fault for each stretch without points that is too wide."""
    if not points:
        return [f"{path}: no rows below the header; give points all round, at most {widest / DEG:.6g} degrees apart"]
    faults = []
    for first, second in zip(points, points[1:] + points[:1], strict=True):
        width = second[0] - first[0] + (2.0 * np.pi if second is points[0] else 0.0)
        if width > widest + _SAME:
            faults.append(
                f"{path}:{first[2]}: no point between azimuth {first[0] / DEG:.6g} and {second[0] / DEG:.6g} (line "
                f"{second[2]}), a gap of {width / DEG:.6g} degrees; add points there, at most {widest / DEG:.6g} degrees "
                "apart (0 for a level horizon)"
            )
    return faults
