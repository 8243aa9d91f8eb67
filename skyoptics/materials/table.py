"""Index tables of other liquids and solids, from CSV files.

::

    # water at 20 °C, relative to vacuum
    wavelength_nm,n,k
    400,1.343560,1.86e-9
    700,1.330519,3.35e-8

One header line with ``wavelength_nm`` or ``wavelength_um``, ``n`` and, if wanted, ``k`` (0 where it is missing), in any
order; then one row a wavelength, ascending. Comma or semicolon between columns, point in decimals; UTF-8, with or
without byte order mark; lines that start with ``#`` and empty lines are skipped. n and k are relative to vacuum.
"""

from __future__ import annotations

from dataclasses import dataclass
from hashlib import sha256
from pathlib import Path

import numpy as np

from skyoptics import textfile
from skyoptics.errors import DataFileError, nearest
from skyoptics.units import NM, UM, FloatArray

_WAVELENGTH_UNITS = {"wavelength_nm": NM, "wavelength_um": UM}
_COLUMNS = (*_WAVELENGTH_UNITS, "n", "k")
_WAVELENGTH_LIMITS = (50e-9, 100e-6)  # [m]; outside, the unit in the header is most likely the wrong one
_INDEX_LIMITS = (0.1, 10.0)
_ABSORPTION_LIMITS = (0.0, 10.0)
_LARGEST_FILE = 10_000_000  # bytes
_FAULTS_SHOWN = 20


@dataclass(frozen=True, eq=False)
class IndexTable:
    """A complex index given at wavelengths.

    Parameters
    ----------
    wavelength : ndarray, shape (m,)
        Ascending vacuum wavelengths [m].
    index, absorption : ndarray, shape (m,)
        n and k relative to vacuum, k ≥ 0.
    digest : str
        Hash of the values, 16 hex digits: the same for files that differ in form only.
    """

    wavelength: FloatArray
    index: FloatArray
    absorption: FloatArray
    digest: str

    def interpolate(self, wavelength: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return n and k between the rows: n linear; ln k linear where both rows absorb, else k linear.

        Parameters
        ----------
        wavelength : ndarray
            Vacuum wavelengths inside the table [m].

        Returns
        -------
        n, k : ndarray
            Same shape.
        """
        n = np.interp(wavelength, self.wavelength, self.index)
        right = np.clip(np.searchsorted(self.wavelength, wavelength), 1, len(self.wavelength) - 1)
        low, high = self.absorption[right - 1], self.absorption[right]
        share = (wavelength - self.wavelength[right - 1]) / (self.wavelength[right] - self.wavelength[right - 1])
        absorbing = (low > 0.0) & (high > 0.0)
        tiny = np.finfo(np.float64).tiny  # keeps the branch that is not taken out of log(0)
        logarithmic = np.maximum(low, tiny) ** (1.0 - share) * np.maximum(high, tiny) ** share
        return n, np.where(absorbing, logarithmic, low + share * (high - low))


def read(path: str | Path) -> IndexTable:
    """Read an index table.

    Parameters
    ----------
    path : str or Path
        CSV file as described on top of this module.

    Returns
    -------
    IndexTable
        At least two rows.

    Raises
    ------
    DataFileError
        With every fault found (the first twenty), each with file, line and what is allowed.
    """
    lines = [
        (number, line.strip())
        for number, line in enumerate(textfile.read(path, _LARGEST_FILE, "an index table").split("\n"), start=1)
        if line.strip() and not line.lstrip().startswith("#")
    ]
    if not lines:
        raise DataFileError(f"{path}: no data; expected a header line such as wavelength_nm,n,k and rows below it")
    number, header = lines[0]
    separator = ";" if ";" in header else ","
    names = _header(f"{path}:{number}", header, separator)
    faults: list[str] = []
    rows: list[tuple[float, ...]] = []
    previous = 0.0
    for number, line in lines[1:]:
        values, found = _row(f"{path}:{number}", line, separator, names)
        faults += found
        if values and values[0] <= previous:
            word = "given twice" if values[0] == previous else "out of order"
            faults.append(f"{path}:{number}: wavelength {word}; rows must stand in ascending order of wavelength")
        if values:
            previous = values[0]
            rows.append(values)
    if len(lines) < 3:
        faults.append(f"{path}: {len(lines) - 1} row(s) of data; an index table needs at least 2")
    if faults:
        more = len(faults) - _FAULTS_SHOWN
        raise DataFileError("\n".join(faults[:_FAULTS_SHOWN] + ([f"{path}: and {more} more"] if more > 0 else [])))
    data = np.array(rows)
    data.setflags(write=False)
    digest = sha256(np.ascontiguousarray(data, dtype="<f8").tobytes()).hexdigest()[:16]
    return IndexTable(data[:, 0], data[:, 1], data[:, 2], digest)


def _header(where: str, header: str, separator: str) -> list[str]:
    """Return the column names, checked."""
    names = [name.strip().lower() for name in header.split(separator)]
    allowed = "wavelength_nm or wavelength_um, n, k"
    for name in names:
        if name not in _COLUMNS:
            shown = f"unknown column {name!r}" if name else "column without a name"
            raise DataFileError(f"{where}: {shown}{nearest(name, _COLUMNS)} (allowed: {allowed})")
        if names.count(name) > 1:
            raise DataFileError(f"{where}: column {name} given twice")
    wavelengths = [name for name in names if name in _WAVELENGTH_UNITS]
    if len(wavelengths) != 1:
        what = "no wavelength column" if not wavelengths else "two wavelength columns"
        raise DataFileError(f"{where}: {what}; give either wavelength_nm or wavelength_um")
    if "n" not in names:
        raise DataFileError(f"{where}: no column n (real index relative to vacuum)")
    return names


def _row(where: str, line: str, separator: str, names: list[str]) -> tuple[tuple[float, ...], list[str]]:
    """Return wavelength [m], n and k of a row, and its faults; no values where a fault leaves none."""
    cells = [cell.strip() for cell in line.split(separator)]
    if len(cells) != len(names):
        hint = "; write a decimal point, not a comma" if separator == "," and len(cells) > len(names) else ""
        return (), [f"{where}: {len(cells)} value(s) where the header names {len(names)} columns{hint}"]
    faults: list[str] = []
    values = {"k": 0.0}
    for name, cell in zip(names, cells, strict=True):
        try:
            value = float(cell) if "_" not in cell else float("nan")
        except ValueError:
            value = float("nan")
        if not np.isfinite(value):
            hint = "; write a decimal point, not a comma" if "," in cell else ""
            faults.append(f"{where}: {name} is {cell!r}; a finite number is needed{hint}")
            continue
        unit = _WAVELENGTH_UNITS.get(name, 1.0)
        low, high = _limits(name)
        key = "wavelength" if name in _WAVELENGTH_UNITS else name
        values[key] = value * unit
        if not low <= value * unit <= high:
            hint = "; is the unit in the header right?" if key == "wavelength" else ""
            hint = "; absorption is positive here (n + ik)" if key == "k" and value < 0.0 else hint
            faults.append(f"{where}: {name} is {cell}; allowed are {low / unit:g} to {high / unit:g}{hint}")
    if faults:
        return (), faults
    return (values["wavelength"], values["n"], values["k"]), faults


def _limits(name: str) -> tuple[float, float]:
    """Return what a column may hold, in SI."""
    return {"n": _INDEX_LIMITS, "k": _ABSORPTION_LIMITS}.get(name, _WAVELENGTH_LIMITS)
