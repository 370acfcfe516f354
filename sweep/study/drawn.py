"""A table of draws: a CSV file beside the study, units in the header: `reactions.main.rate_constant.value [1/s]`."""

import csv
import math
import re
from pathlib import Path

from sweep.base.errors import Fault
from sweep.base.units import UnitFault
from sweep.study.amount import converted
from sweep.study.reader import Reader

_HEADER = re.compile(r"^\s*([A-Za-z_][\w.]*)\s*(?:\[\s*([^\]]*?)\s*\])?\s*$")
_MOST = 5  # faults of one column that are said


def _lines(reader: Reader, place: str, file: Path) -> list[tuple[int, list[str]]]:
    """Return the lines that hold something, with their numbers; a fault where there is no header or no row."""
    try:
        with open(file, newline="", encoding="utf-8-sig") as text:
            lines = [(number, line) for number, line in enumerate(csv.reader(text), 1) if any(cell.strip() for cell in line)]
    except (OSError, UnicodeDecodeError, csv.Error) as error:
        reason = getattr(error, "strerror", None) or str(error)
        reader.fault(f"{place}.file", f"{file}: {reason}", "a CSV file that can be read", "the draws stand in it")
        return []
    if len(lines) < 2:
        reader.fault(f"{place}.file", f"{file}: no rows", "a header with units and a line a draw", "there is nothing to draw from")
        return []
    return lines


def read_column(reader: Reader, place: str, file: Path, wanted: tuple[str, ...], of: str) -> tuple[float, ...] | None:
    """Return the column of one of the `wanted` names in SI of the path `of`; None with faults, those inside the file at its own lines."""
    lines = _lines(reader, place, file)
    if not lines:
        return None
    heads = [_HEADER.match(cell) for cell in lines[0][1]]
    names = [head[1] if head else "" for head in heads]
    k = next((names.index(name) for name in wanted if name in names), None)
    if k is None:
        said = f"columns {', '.join(cell.strip() for cell in lines[0][1])}"
        reader.fault(f"{place}.file", said, " or ".join(wanted), "the file has no such column")
        return None
    if names.count(names[k]) > 1:
        reader.fault(f"{place}.file", f"{names.count(names[k])} columns {names[k]}", "one column", "two columns hold the same thing")
        return None
    found, head = list[float](), heads[k]
    unit = (head[2] or "") if head else ""
    before = len(reader.faults)
    for number, line in lines[1:]:
        if len(line) != len(names):
            reader.faults.append(Fault(str(file), number, "line", f"{len(line)} cells", f"{len(names)} cells", "each column has a value"))
        elif (value := _cell(reader, file, number, line[k].strip(), unit, of, names[k])) is not None:
            found.append(value)
        if len(reader.faults) - before >= _MOST:
            break
    return tuple(found) if len(reader.faults) == before else None


def _cell(reader: Reader, file: Path, number: int, cell: str, unit: str, of: str, name: str) -> float | None:
    """Return one value in SI, None with a fault at its line."""
    try:
        value = converted(of, f"{cell} {unit}".strip(), reader.dimensions[of], reader.values)
    except UnitFault as error:
        reader.faults.append(Fault(str(file), number, name, f"{cell} {unit}".strip() or "nothing", error.expected, error.because))
        return None
    bound = reader.bounds.get(of)
    if bound is not None and not bound.holds(value):
        reader.faults.append(Fault(str(file), number, name, f"{value:g} (SI)", bound.words, bound.because))
        return None
    return value if math.isfinite(value) else None
