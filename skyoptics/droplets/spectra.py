"""Measured drop-size spectra from a CSV file.

Two layouts; fields parted by ``;``, tab or ``,``, decimals with a point or, unless fields are parted by ``,``, a comma;
lines that start with ``#`` are remarks.

*Long*, one bin a row, the header naming four things (``time`` may be left out)::

    time,diameter_lower_mm,diameter_upper_mm,concentration_per_m3_mm
    12:00,0.25,0.375,410

*Wide*, one time a row, one column a bin, and a remark that says what the numbers are::

    # quantity: log10_concentration_per_m3_mm
    time;diameter_0,25-0,375_mm;diameter_0,375-0,5_mm
    12:00;2,61;2,40

Bin limits: ``diameter`` or ``radius``, ``mm`` or ``um``, the same throughout. Quantities: ``concentration_per_m3`` and
``concentration_per_cm3`` (drops in the bin), ``concentration_per_m3_mm``, ``concentration_per_cm3_um`` (drops per mm or
µm of the bin's own measure, diameter or radius). With ``log10_`` in front the file holds decimal logarithms, where −9.99
and below mean no drops, the filler of some disdrometers; this has to be declared, it is never guessed.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from itertools import pairwise
from math import isfinite
from pathlib import Path
from typing import NamedTuple

import numpy as np

from skyoptics.droplets.sizes import LARGEST_RADIUS
from skyoptics.errors import DataFileError, DomainError, nearest
from skyoptics.units import MM, UM, ArrayLike, FloatArray

UNITS = {"mm": MM, "um": UM}
QUANTITIES = {
    "concentration_per_m3": (1.0, None),
    "concentration_per_cm3": (1e6, None),
    "concentration_per_m3_mm": (1.0, MM),
    "concentration_per_cm3_um": (1e6, UM),
}
"""Header name → factor to m⁻³, and the bin width it is per (None: per bin)."""
NO_DROPS_LOG10 = -9.99
_LIMIT = re.compile(r"(diameter|radius)_(lower|upper)_(\w+)")
_BIN = re.compile(r"(diameter|radius)_([0-9.,eE+]+)-([0-9.,eE+]+)_(\w+)")


@dataclass(frozen=True, eq=False)
class MeasuredSpectrum:
    """Drops counted in bins, evenly spread inside each; a distribution as those in `skyoptics.droplets.sizes`.

    Parameters
    ----------
    lower, upper : ndarray, shape (bins,)
        Radii, ascending, not overlapping [m].
    count : ndarray, shape (bins,)
        Drops per volume in each bin [m⁻³].
    """

    lower: FloatArray
    upper: FloatArray
    count: FloatArray

    def __post_init__(self) -> None:
        if len(self.lower) == 0 or not np.sum(self.count) > 0.0:
            raise DomainError("a measured spectrum needs at least one bin with drops in it")
        if np.any(self.count < 0.0) or np.any(self.lower < 0.0) or np.any(self.upper <= self.lower):
            raise DomainError("bins need 0 <= lower < upper, and counts of 0 or more")
        if np.any(self.lower[1:] < self.upper[:-1] * (1.0 - 1e-9)):
            raise DomainError("bins must ascend and not overlap")

    @property
    def concentration(self) -> float:
        """Drops per volume [m⁻³]."""
        return float(np.sum(self.count))

    def density(self, radius: ArrayLike) -> FloatArray:
        """Return drops per metre of radius [m⁻¹], of one drop in all."""
        radius = np.asarray(radius, dtype=np.float64)
        place = np.searchsorted(self.lower, radius, side="right") - 1
        inside = (place >= 0) & (radius < self.upper[place])
        height = self.count / (self.concentration * (self.upper - self.lower))
        return np.where(inside, height[place], 0.0)

    def moment(self, order: float) -> float:
        """Return the mean of radius**order, order > −1 [m**order]."""
        each = (self.upper ** (order + 1.0) - self.lower ** (order + 1.0)) / ((order + 1.0) * (self.upper - self.lower))
        return float(np.sum(each * self.count) / self.concentration)

    def refinement(self, level: int) -> tuple[float, FloatArray, FloatArray]:
        """Return new nodes: middles of 3, 9, 27 … equal parts of each bin, which hold those of the level before."""
        parts = 3 ** (level + 1)
        used = self.count > 0.0
        place = (np.arange(parts) + 0.5) / parts
        if level > 0:
            place = place[np.arange(parts) % 3 != 1]
        width = (self.upper - self.lower)[used]
        radius = self.lower[used, np.newaxis] + width[:, np.newaxis] * place
        weight = np.repeat(self.count[used] / (self.concentration * parts), len(place))
        return (1.0 / 3.0 if level else 0.0), radius.ravel(), weight


def read_spectrum(path: Path | str, time: str | None = None) -> MeasuredSpectrum:
    """Read a measured spectrum.

    Parameters
    ----------
    path : path
        CSV file, UTF-8.
    time : str, optional
        The time to pick, as the file spells it; by default all times are averaged, each with equal weight.

    Returns
    -------
    MeasuredSpectrum

    Raises
    ------
    DataFileError
        If the file cannot be read, is empty, or headers, units, bins or numbers are wrong; the text names file, line, what
        is allowed and in which unit.
    """
    path = Path(path)
    rows, quantity = _rows(path)
    header = [cell.strip() for cell in rows[0].cells]
    if any(_LIMIT.fullmatch(name) for name in header):
        table = _long(path, header, rows, quantity)
    else:
        table = _wide(path, header, rows, quantity)
    return _spectrum(path, table, time)


class _Row(NamedTuple):
    line: int
    cells: list[str]


class _Entry(NamedTuple):
    line: int
    lower: float
    upper: float
    value: float
    unit: str


def _fault(path: Path, line: int, text: str) -> DataFileError:
    return DataFileError(f"{path}:{line}: {text}")


def _rows(path: Path) -> tuple[list[_Row], str | None]:
    """Return rows of cells with line numbers, and the quantity a remark declares."""
    try:
        text = path.read_text(encoding="utf-8-sig")
    except (OSError, UnicodeDecodeError) as error:
        raise DataFileError(f"{path}: cannot be read as UTF-8 text: {error}") from error
    quantity = None
    lines = []
    for number, line in enumerate(text.splitlines(), 1):
        if line.lstrip().startswith("#"):
            declared = re.match(r"\s*#\s*quantity\s*:\s*(\S+)", line)
            quantity = declared.group(1) if declared else quantity
        elif line.strip(" ;,\t"):
            lines.append((number, line))
    if len(lines) < 2:
        raise DataFileError(f"{path}: no spectrum in it; a header line and at least one line of numbers are needed")
    head = lines[0][1]
    parting = next((mark for mark in (";", "\t") if mark in head), ",")
    rows = [_Row(number, line.split(parting)) for number, line in lines]
    for row in rows:
        if len(row.cells) != len(rows[0].cells):
            hint = "; numbers with a decimal comma need fields parted by ';'" if parting == "," else ""
            raise _fault(path, row.line, f"{len(row.cells)} fields, the header has {len(rows[0].cells)}{hint}")
    return rows, quantity


def _number(path: Path, line: int, text: str, what: str) -> float:
    """Return a finite number; a comma left in a field is a decimal comma."""
    try:
        value = float(text.strip().replace(",", "."))
    except ValueError:
        raise _fault(path, line, f"{what}: {text.strip()!r} is not a number") from None
    if not isfinite(value):
        raise _fault(path, line, f"{what}: {text.strip()!r} is not a finite number")
    return value


def _scale(path: Path, line: int, measure: str, unit: str) -> float:
    if unit not in UNITS:
        raise _fault(
            path, line, f"unit {unit!r} of {measure} is not known; allowed are mm and um{nearest(unit, UNITS)}"
        )
    return UNITS[unit] * (0.5 if measure == "diameter" else 1.0)


def _counts(path: Path, line: int, quantity: str, value: float, width: float) -> float:
    """Return drops per cubic metre in a bin; width in the file's measure [m]."""
    name = quantity.removeprefix("log10_")
    if name not in QUANTITIES:
        known = ", ".join(QUANTITIES)
        raise _fault(
            path, line, f"quantity {quantity!r} is not known; allowed are {known}, each also with log10_ before"
        )
    factor, per = QUANTITIES[name]
    if quantity != name:
        value = 10.0**value if value > NO_DROPS_LOG10 else 0.0
    elif value < 0.0:
        raise _fault(
            path, line, f"{quantity} = {value:g} must be 0 or more; if the file holds logarithms, declare log10_{name}"
        )
    return factor * value * (width / per if per else 1.0)


def _entry(
    path: Path, line: int, measure: str, unit: str, lower: float, upper: float, quantity: str, value: float
) -> _Entry:
    """Check one bin and return it in radius and drops per cubic metre."""
    scale = _scale(path, line, measure, unit)
    if not 0.0 <= lower < upper:
        raise _fault(path, line, f"bin {lower:g} ... {upper:g} {unit}: limits must be 0 <= lower < upper")
    if upper * scale > LARGEST_RADIUS:
        top = LARGEST_RADIUS / scale
        raise _fault(
            path, line, f"bin ends at {measure} {upper:g} {unit}; drops end at {top:g} {unit}: is the unit right?"
        )
    count = _counts(path, line, quantity, value, (upper - lower) * UNITS[unit])
    return _Entry(line, lower * scale, upper * scale, count, unit)


def _long(path: Path, header: list[str], rows: list[_Row], declared: str | None) -> dict[str, list[_Entry]]:
    """Return the bins of each time from the long layout."""
    line = rows[0].line
    limits = {(m.group(1), m.group(2), m.group(3)): i for i, n in enumerate(header) if (m := _LIMIT.fullmatch(n))}
    kinds = {(measure, unit) for measure, _, unit in limits}
    if len(kinds) > 1:
        found = ", ".join(sorted(f"{measure} in {unit}" for measure, unit in kinds))
        raise _fault(path, line, f"mixed units: {found}; give both limits in one measure and one unit")
    measure, unit = kinds.pop()
    if {end for _, end, _ in limits} != {"lower", "upper"}:
        raise _fault(path, line, f"both {measure}_lower_{unit} and {measure}_upper_{unit} are needed")
    values = [i for i, name in enumerate(header) if "concentration" in name]
    if len(values) != 1:
        raise _fault(path, line, f"one column of {', '.join(QUANTITIES)} is needed, found {len(values)}")
    quantity = header[values[0]]
    if declared is not None and declared != quantity:
        raise _fault(path, line, f"mixed units: the column is {quantity}, the remark declares {declared}")
    clock = header.index("time") if "time" in header else None
    table: dict[str, list[_Entry]] = {}
    for row in rows[1:]:
        lower = _number(path, row.line, row.cells[limits[measure, "lower", unit]], f"{measure}_lower_{unit}")
        upper = _number(path, row.line, row.cells[limits[measure, "upper", unit]], f"{measure}_upper_{unit}")
        value = _number(path, row.line, row.cells[values[0]], quantity)
        entry = _entry(path, row.line, measure, unit, lower, upper, quantity, value)
        table.setdefault(row.cells[clock].strip() if clock is not None else "", []).append(entry)
    return table


def _wide(path: Path, header: list[str], rows: list[_Row], quantity: str | None) -> dict[str, list[_Entry]]:
    """Return the bins of each time from the wide layout."""
    line = rows[0].line
    bins = {i: m for i, name in enumerate(header) if (m := _BIN.fullmatch(name))}
    other = [name for i, name in enumerate(header) if i not in bins and name != "time"]
    if not bins or other:
        raise _fault(
            path,
            line,
            f"header {(other or header)[0]!r} is not known; a long file needs diameter_lower_mm, diameter_upper_mm and a "
            "concentration, a wide one time and columns such as diameter_0.25-0.375_mm (radius and um likewise)",
        )
    kinds = sorted({f"{m.group(1)} in {m.group(4)}" for m in bins.values()})
    if len(kinds) > 1:
        raise _fault(path, line, f"mixed units: {', '.join(kinds)}; give all bins in one measure and one unit")
    if quantity is None:
        raise _fault(
            path, line, f"say what the numbers are, with a line '# quantity: NAME', one of {', '.join(QUANTITIES)}"
        )
    clock = header.index("time") if "time" in header else None
    table: dict[str, list[_Entry]] = {}
    for row in rows[1:]:
        entries = table.setdefault(row.cells[clock].strip() if clock is not None else str(row.line), [])
        if entries:
            raise _fault(path, row.line, f"time {row.cells[clock or 0].strip()!r} is there twice")
        for column, m in bins.items():
            lower = _number(path, line, m.group(2), m.group(0))
            upper = _number(path, line, m.group(3), m.group(0))
            value = _number(path, row.line, row.cells[column], m.group(0))
            entries.append(_entry(path, row.line, m.group(1), m.group(4), lower, upper, quantity, value))
    return table


def _spectrum(path: Path, table: dict[str, list[_Entry]], time: str | None) -> MeasuredSpectrum:
    """Check the order of bins, then pick one time or average over all."""
    first = next(iter(table.values()))
    for label, entries in table.items():
        for before, after in pairwise(entries):
            if after.lower < before.upper * (1.0 - 1e-9):
                unit = UNITS[after.unit]
                raise _fault(
                    path,
                    after.line,
                    f"bins must ascend without overlap; one begins at radius {after.lower / unit:g} {after.unit}, "
                    f"the one before ends at {before.upper / unit:g} {before.unit}",
                )
        if [(e.lower, e.upper) for e in entries] != [(e.lower, e.upper) for e in first]:
            raise _fault(path, entries[0].line, f"time {label!r} has other bins than the first time in the file")
    if time is not None and time not in table:
        labels = ", ".join(list(table)[:5])
        raise DataFileError(f"{path}: no time {time!r} in it; it begins with {labels}{nearest(time, table)}")
    chosen = [table[time]] if time is not None else list(table.values())
    count = np.mean([[entry.value for entry in entries] for entries in chosen], axis=0)
    if not np.sum(count) > 0.0:
        raise DataFileError(f"{path}: no drops in any bin; nothing to scatter light")
    return MeasuredSpectrum(np.array([e.lower for e in first]), np.array([e.upper for e in first]), count)
