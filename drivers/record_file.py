"""Read a measured record of time, temperature and strain or stress from CSV."""

from __future__ import annotations

import csv
import io
import math
from dataclasses import dataclass
from pathlib import Path as FilePath

import numpy as np

from matlib.arrays import FloatArray
from matlib.card_schema import SMALLEST_NUMBER
from matlib.errors import Fault, FileError, UnknownNameError
from matlib.files import read_text, shown
from matlib.units import STRESS, TEMPERATURE, Unit, find_unit

__all__ = ["Record", "read_record"]

FAULTS_SHOWN = 20
LARGEST = {"time": 1e30, "temperature": 1e60, "strain": 1e3, "stress": 1e60}
"""As in a path file, in the units of the record."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Record:
    """A measured record in SI units.

    Parameters
    ----------
    time, temperature, value : ndarray, shape (n,)
        [s], [K], and a strain [-] or a stress [Pa].
    is_stress : bool
        Whether `value` is a stress.
    """

    time: FloatArray
    temperature: FloatArray
    value: FloatArray
    is_stress: bool


def _columns(header: list[str]) -> dict[str, tuple[int, str | None]]:
    """Column index and bracketed unit of each name."""
    columns: dict[str, tuple[int, str | None]] = {}
    for index, cell in enumerate(header):
        name, _, rest = cell.strip().partition("[")
        columns.setdefault(name.strip(), (index, rest.rstrip("] ").strip() or None))
    return columns


def read_record(file: str | FilePath, *, time: Unit, temperature: Unit, stress: Unit | None) -> Record:
    """Read a record.

    Parameters
    ----------
    file : str or Path
        CSV with a header row; columns ``time``, ``temperature`` and one of ``strain`` and ``stress``, in any order,
        others are passed over. A unit in brackets behind a name counts before the one given here.
    time, temperature, stress : Unit
        Units of columns that name none.

    Returns
    -------
    Record

    Raises
    ------
    FileError
        With every fault: a missing column, a cell that is no finite number, time that runs backwards.
    """
    name = str(file)
    try:
        reader = csv.reader(io.StringIO(read_text(file), newline=""), strict=True)
        rows = [(reader.line_num, row) for row in reader if any(cell.strip() for cell in row)]
    except csv.Error as error:
        raise FileError(name, [Fault(key="file", found=str(error), expected="a CSV file")]) from None
    columns = _columns(rows[0][1]) if rows else {}
    driven = [key for key in ("strain", "stress") if key in columns]
    faults = [
        Fault(key="header", found=", ".join(columns)[:60] or "nothing", expected=f"a column {key!r}")
        for key in ("time", "temperature")
        if key not in columns
    ]
    if len(driven) != 1:
        expected = "one of the columns 'strain' and 'stress'"
        faults.append(Fault(key="header", found=" and ".join(driven) or "neither", expected=expected))
    if faults:
        raise FileError(name, faults)
    if len(rows) < 3:
        expected = "at least 2 rows under the header"
        raise FileError(name, [Fault(key="rows", found=str(len(rows) - 1), expected=expected)])
    is_stress = driven == ["stress"]
    defaults = {"time": time, "temperature": temperature, "stress": stress}
    arrays = []
    for key in ("time", "temperature", driven[0]):
        index, unit_name = columns[key]
        values, wrong = _numbers(key, index, rows[1:])
        unit = _unit(key, unit_name, defaults.get(key), faults)
        arrays.append(values if unit is None else unit.to_si(values))
        faults += wrong
    if not faults:
        faults += _order_faults([line for line, _ in rows[1:]], *arrays[:2])
    if faults:
        hidden = len(faults) - FAULTS_SHOWN
        more = [Fault(key="rows", found=f"{hidden} more faults", expected="none")] if hidden > 0 else []
        raise FileError(name, faults[:FAULTS_SHOWN] + more)
    return Record(time=arrays[0], temperature=arrays[1], value=arrays[2], is_stress=is_stress)


def _unit(key: str, name: str | None, default: Unit | None, faults: list[Fault]) -> Unit | None:
    if key == "strain":
        if name not in (None, "-", "1"):
            faults.append(Fault(key="header", found=f"strain [{name}]", expected="strain without a unit"))
        return None
    if name is not None:
        try:
            return find_unit(key, name)
        except UnknownNameError as error:
            faults.append(Fault(key="header", found=f"{key} [{name}]", expected="one of " + ", ".join(error.known)))
            return None
    if default is None:
        expected = f"a unit in brackets ({', '.join(STRESS)}), or units.stress in the path"
        faults.append(Fault(key="header", found=key, expected=expected))
    return default


def _numbers(key: str, index: int, rows: list[tuple[int, list[str]]]) -> tuple[FloatArray, list[Fault]]:
    values, faults, largest = np.zeros(len(rows)), [], LARGEST[key]
    for k, (line, row) in enumerate(rows):
        cell = row[index].strip() if index < len(row) else ""
        try:
            value = math.nan if "_" in cell else float(cell)
        except ValueError:
            value = math.nan
        if abs(value) <= largest:
            values[k] = value if abs(value) >= SMALLEST_NUMBER else 0.0  # a measured 1e-300 is a zero
        else:
            expected = f"a number from {-largest:g} to {largest:g}" if math.isfinite(value) else "a finite number"
            faults.append(Fault(key=f"line {line}, {key}", found=shown(cell), expected=expected))
    return values, faults


def _order_faults(lines: list[int], time: FloatArray, temperature: FloatArray) -> list[Fault]:
    faults = []
    for k in np.flatnonzero(np.diff(time) < 0.0):
        expected = f">= {time[k]:g} s, the row before"
        faults.append(Fault(key=f"line {lines[k + 1]}, time", found=f"{time[k + 1]:g} s", expected=expected))
    for k in np.flatnonzero(temperature <= 0.0):
        found = f"{TEMPERATURE['K'].from_si(float(temperature[k])):g} K"
        faults.append(Fault(key=f"line {lines[k]}, temperature", found=found, expected="above absolute zero"))
    return faults
