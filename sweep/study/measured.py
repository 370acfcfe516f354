"""A measured batch from a CSV file, units in the header: `time [min], temperature [degC], conversion [%]`."""

from __future__ import annotations

import csv
import math
import re
from pathlib import Path
from typing import TYPE_CHECKING, NamedTuple

from sweep.base.errors import Fault, StudyError, SweepError
from sweep.base.units import UnitFault, suffix, to_si
from sweep.study.model import Study

if TYPE_CHECKING:
    import pandas as pd

_HEADER = re.compile(r"^\s*([A-Za-z_]\w*)\s*(?:\[\s*([^\]]*?)\s*\])?\s*$")
_QUANTITIES = {
    "time": ("time", "s"), "temperature": ("temperature", "K"), "jacket_temperature": ("temperature", "K"), "volume": ("volume", "m3"),
    "conversion": ("dimensionless", ""), "heat_release": ("power", "W"), "cooling_duty": ("power", "W"),
}  # fmt: skip
_LONGEST = 1_000_000  # lines


class _Column(NamedTuple):
    """A column: its name in SI, and what turns its numbers into SI: offset + factor x."""

    name: str
    offset: float
    factor: float
    absolute: bool


def _known(study: Study) -> dict[str, tuple[str, str]]:
    """Return what may be measured: name -> dimension, SI unit as a column ends with it."""
    found = dict(_QUANTITIES)
    for species in study.species:
        found[f"n_{species.name}"] = ("amount", "mol")
        found[f"c_{species.name}"] = ("concentration", "mol/m^3")
    return found


def _column(study: Study, file: Path, line: int, cell: str, faults: list[Fault]) -> _Column:
    """Return what a heading says; a fault where it says nothing that is known."""
    none = _Column("", 0.0, 1.0, False)
    found, known = _HEADER.match(cell), _known(study)
    if not found:
        faults.append(Fault(str(file), line, cell.strip(), repr(cell), "name [unit]", "a column is a measured quantity with its unit"))
        return none
    name, unit = found[1], found[2] or ""
    if name not in known:
        faults.append(Fault(str(file), line, name, name, "one of " + ", ".join(known), "nothing else is laid over the model"))
        return none
    dimension, si = known[name]
    try:
        zero, one = (to_si(f"{x} {unit}".strip(), dimension) for x in (0, 1))
    except UnitFault as error:
        faults.append(Fault(str(file), line, name, repr(unit), error.expected, error.because))
        return none
    return _Column(name + suffix(si), zero, one - zero, dimension == "temperature")


def read_measured(study: Study, file: str | Path) -> pd.DataFrame:
    """Return a measured batch, SI: time_s and a column per quantity, NaN where a cell is empty; named as in a profile.

    StudyError with every fault and its line; SweepError where the file cannot be read or holds nothing.
    """
    import pandas as pd

    path = Path(file)
    try:
        with open(path, newline="", encoding="utf-8-sig") as text:
            lines = [(number, line) for number, line in enumerate(csv.reader(text), 1) if any(cell.strip() for cell in line)]
    except (OSError, UnicodeDecodeError, csv.Error, ValueError) as error:
        raise SweepError(f"--data: {path} cannot be read: {getattr(error, 'strerror', None) or error}") from None
    if not 2 <= len(lines) <= _LONGEST:
        expected = "a header such as 'time [min],temperature [degC]' and a line a moment"
        raise SweepError(f"--data: {path} holds {max(len(lines) - 1, 0)} moments; expected {expected}, at most {_LONGEST}")
    faults: list[Fault] = []
    top = lines[0][0]
    columns = [_column(study, path, top, cell, faults) for cell in lines[0][1]]
    _check_columns(path, top, [column.name for column in columns], faults)
    if faults:
        raise StudyError(tuple(faults))
    rows = [_row(path, number, line, columns, faults) for number, line in lines[1:]]
    if not faults:
        _check_times(path, lines[1:], rows, [column.name for column in columns].index("time_s"), faults)
    if faults:
        raise StudyError(tuple(faults))
    return pd.DataFrame(rows, columns=[column.name for column in columns], dtype="float64")


def _check_columns(path: Path, line: int, names: list[str], faults: list[Fault]) -> None:
    for name in {n for n in names if n and names.count(n) > 1}:
        faults.append(Fault(str(path), line, name, f"{names.count(name)} columns", "one column", "two columns say the same thing"))
    if "time_s" not in names and not any(fault.key == "time" for fault in faults):
        faults.append(Fault(str(path), line, "time", "nothing", "a column such as 'time [min]'", "a batch is measured over time"))
    elif len(names) < 2:
        faults.append(Fault(str(path), line, "header", "time alone", "a measured quantity beside it", "there is nothing to lay over the model"))


def _row(path: Path, number: int, line: list[str], columns: list[_Column], faults: list[Fault]) -> list[float]:
    """Return one moment in SI; NaN for an empty cell."""
    if len(line) != len(columns):
        faults.append(Fault(str(path), number, "line", f"{len(line)} cells", f"{len(columns)} cells", "each column has a cell, if an empty one"))
        return []
    values = []
    for cell, column in zip(line, columns, strict=True):
        try:
            value = float(cell) if cell.strip() else math.nan
        except ValueError:
            value = math.inf
        value = column.offset + column.factor * value
        missing = math.isnan(value) and (column.name == "time_s" or cell.strip())
        if math.isinf(value) or missing:
            faults.append(Fault(str(path), number, column.name, repr(cell), "a number, the decimal sign a point", "its unit stands in the header"))
        elif column.absolute and value <= 0.0:
            faults.append(Fault(str(path), number, column.name, repr(cell), "a temperature above absolute zero", "it is below it"))
        values.append(value)
    return values


def _check_times(path: Path, lines: list[tuple[int, list[str]]], rows: list[list[float]], place: int, faults: list[Fault]) -> None:
    before = -math.inf
    for (number, line), row in zip(lines, rows, strict=True):
        if row[place] < 0.0:
            faults.append(Fault(str(path), number, "time", line[place], "zero or above", "times are counted from the batch's start"))
        elif row[place] <= before:
            faults.append(Fault(str(path), number, "time", line[place], "later than the line before", "a batch is measured in the order of time"))
        before = row[place]
