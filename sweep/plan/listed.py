"""A list of points from a CSV file beside the study, units in the header: `dosing_time [h]`."""

from __future__ import annotations

import csv
import re
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from sweep.base.errors import Fault, StudyError, SweepError
from sweep.base.units import UnitFault, to_si
from sweep.study.model import Study

if TYPE_CHECKING:
    import pandas as pd

_HEADER = re.compile(r"^\s*([A-Za-z_][\w.]*)\s*(?:\[\s*([^\]]*?)\s*\])?\s*$")


def _dimension(study: Study, name: str) -> str:
    return study.dimensions[study.paths_of(name)[0]]


def _heading(study: Study, file: Path, cell: str, faults: list[Fault]) -> tuple[str, str]:
    """Return a column's name and unit."""
    found = _HEADER.match(cell)
    if not found:
        faults.append(Fault(str(file), 1, cell, repr(cell), "name [unit]", "a column is a variable or a path of the study, with its unit"))
        return "", ""
    name, unit = found[1], found[2] or ""
    try:
        to_si(f"1 {unit}".strip(), _dimension(study, name))
    except UnitFault as error:
        faults.append(Fault(str(file), 1, name, repr(unit), error.expected, error.because))
    except SweepError as error:
        faults.append(Fault(str(file), 1, name, name, "a variable or a path of the study", str(error)))
    return name, unit


def read_list(study: Study, file: Path) -> pd.DataFrame:
    """Return the points of a list (SI); StudyError with every fault, SweepError where it cannot be read or is empty."""
    import pandas as pd

    try:
        if file.exists() and not file.is_file():
            raise SweepError(f"plan.file: {file} is no file")  # a pipe or a device might never end
        with open(file, newline="", encoding="utf-8-sig") as text:
            lines = [(number, line) for number, line in enumerate(csv.reader(text), 1) if any(cell.strip() for cell in line)]
    except (OSError, ValueError, csv.Error) as error:
        raise SweepError(f"plan.file: {file} cannot be read: {getattr(error, 'strerror', None) or error}") from None
    if len(lines) < 2:
        raise SweepError(f"plan.file: {file} holds no points; expected a header such as 'dosing_time [h]' and a line a point")
    faults: list[Fault] = []
    headings = [_heading(study, file, cell, faults) for cell in lines[0][1]]
    names = [name for name, _ in headings]
    for name in {n for n in names if n and names.count(n) > 1}:
        faults.append(Fault(str(file), 1, name, f"{names.count(name)} columns", "one column", "two columns set the same thing"))
    if faults:
        raise StudyError(tuple(faults))
    rows = [_row(study, file, number, line, headings, faults) for number, line in lines[1:]]
    if faults:
        raise StudyError(tuple(faults))
    return pd.DataFrame(np.array(rows, dtype=np.float64), columns=names)


def _row(study: Study, file: Path, number: int, line: list[str], headings: list[tuple[str, str]], faults: list[Fault]) -> list[float]:
    """Return one point's values in SI."""
    if len(line) != len(headings):
        faults.append(Fault(str(file), number, "line", f"{len(line)} cells", f"{len(headings)} cells", "each column has a value"))
        return []
    values = []
    for cell, (name, unit) in zip(line, headings, strict=True):
        try:
            values.append(to_si(f"{cell.strip()} {unit}".strip(), _dimension(study, name)))
        except UnitFault as error:
            faults.append(Fault(str(file), number, name, repr(cell), error.expected, error.because))
    return values
