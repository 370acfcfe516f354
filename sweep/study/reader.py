"""What reading a study collects: quantities by path, their units and dimensions, and every fault with its place."""

import difflib
import math
import re
from collections.abc import Iterable
from typing import Any

from sweep.base.errors import Fault
from sweep.base.units import UnitFault, kind_of, unit_of
from sweep.study.amount import converted
from sweep.study.lines import line_of
from sweep.study.model import HOTTEST, Bound, differs, unset

_PLANNED = """
    fit vessels
    recipe.phases rate pressure max_pressure
"""
LATER = frozenset(_PLANNED.split())  # keys that are planned and not there


_NAME = re.compile(r"^[A-Za-z_][A-Za-z0-9_]*$")
_LARGEST = 1e300


class Reader:
    """Collects quantities and faults while the sections are read."""

    def __init__(self, file: str, lines: dict[str, int]) -> None:
        self.file, self.lines = file, lines
        self.values: dict[str, float] = {}
        self.units: dict[str, str] = {}
        self.dimensions: dict[str, str] = {}
        self.bounds: dict[str, Bound] = {}
        self.molar_masses: dict[str, float] = {}
        self.swept: set[str] = set()
        self.named: set[str] = set()  # variables as written, those with faults too
        self.uncertain: set[str] = set()  # uncertain inputs as written, those with faults too
        self.faults: list[Fault] = []
        self.warnings: list[Fault] = []

    def fault(self, path: str, found: object, expected: str, because: str) -> None:
        """Note a fault."""
        self.faults.append(Fault(self.file, line_of(self.lines, path), path, str(found), expected, because))

    def warn(self, path: str, found: object, expected: str, because: str) -> None:
        """Note what is legal but doubtful."""
        self.warnings.append(Fault(self.file, line_of(self.lines, path), path, str(found), expected, because))

    def table(self, parent: dict[str, Any], key: str, path: str) -> dict[str, Any]:
        """Return a sub-table, empty where it is missing; a fault where something else stands there."""
        value = parent.get(key, {})
        if isinstance(value, dict):
            return value
        self.fault(path, repr(value), "a table", f"{path} holds keys of its own")
        return {}

    def only(self, table: dict[str, Any], path: str, known: Iterable[str]) -> None:
        """Refuse keys that are not known, with the nearest that is."""
        names = list(known)
        for key in table:
            if key in names:
                continue
            place = f"{path}.{key}" if path else key or '""'
            if key in LATER or place in LATER:
                self.fault(place, key, "a study without it", "not available yet")
                continue
            near = difflib.get_close_matches(key, names, 1)
            self.fault(place, key, f"{near[0]!r}" if near else "one of " + ", ".join(names), "the key is not known here")

    def quantity(self, path: str, value: object, dimension: str) -> float | None:
        """Read a quantity of a dimension and keep it under its path; None with a fault where it is none."""
        if isinstance(value, bool) or not isinstance(value, (str, int, float)):
            self.fault(path, repr(value), "a quantity with its unit in quotes", "it is neither text nor a number")
            return None
        if not isinstance(value, str):
            if dimension != "dimensionless":
                self.fault(path, value, f"{kind_of(dimension)} with its unit in quotes", "a bare number is dimensionless")
                return None
            if not abs(value) <= _LARGEST:
                self.fault(path, value, "a finite number", "nothing can be computed with it")
                return None
            return self.keep(path, float(value), "", dimension)
        try:
            return self.keep(path, self.in_si(path, value, dimension), unit_of(value), dimension)
        except UnitFault as error:
            self.fault(path, repr(value), error.expected, error.because)
            return None

    def in_si(self, path: str, text: str, dimension: str) -> float:
        """Return a text in SI; see `converted`."""
        return converted(path, text, dimension, self.values)

    def keep(self, path: str, value: float, unit: str, dimension: str) -> float:
        """Keep a quantity."""
        self.values[path], self.units[path], self.dimensions[path] = value, unit, dimension
        if dimension == "temperature" and path.startswith(("recipe.", "cooling.", "vessel.", "events.")):
            self.at_least(path, 0.0, True, "beyond that the model does not hold: a batch that gets there is a runaway", HOTTEST)
        return value

    def at_least(self, path: str, bound: float, strict: bool, because: str, below: float = math.inf) -> None:
        """Refuse a kept quantity outside a bound; the bound also holds for variables, events and points that set it."""
        self.bounds[path] = Bound(bound, strict, below, because)
        if path in self.values:
            self.within(path, path, self.values[path])

    def within(self, place: str, path: str, value: float) -> None:
        """Refuse a value that breaks the bound of a path."""
        bound = self.bounds.get(unset(path))
        if bound is not None and not bound.holds(value):
            self.fault(place, f"{value:g} (SI)", bound.words, bound.because)

    def near(self, path: str) -> str:
        """Return the written quantity whose path is nearest, of those that may differ from point to point."""
        near = difflib.get_close_matches(path, [known for known in self.values if differs(known)], 1)
        return near[0] if near else "a quantity that is written"

    def broken(self, start: str) -> bool:
        """Tell whether something of a section was faulted already, so that what follows from it is not said again."""
        return any(f.key == start or f.key.startswith(start + ".") for f in self.faults)

    def names(self, table: dict[str, Any], path: str) -> dict[str, dict[str, Any]]:
        """Return the sub-tables that carry a plain name; a fault for each of the others."""
        result = {}
        for name, value in table.items():
            if not _NAME.match(name):
                self.fault(f"{path}.{name}", repr(name), "letters, digits and _", "names are used in equations and columns")
            elif not isinstance(value, dict):
                self.fault(f"{path}.{name}", repr(value), "a table", f"{path}.{name} holds keys of its own")
            else:
                result[name] = value
        return result

    def choice(self, table: dict[str, Any], path: str, key: str, choices: tuple[str, ...], default: str) -> str:
        """Return one of a few words."""
        value = table.get(key, default)
        if isinstance(value, str) and value in choices:
            return value
        self.fault(f"{path}.{key}", repr(value), " or ".join(f'"{c}"' for c in choices), "no other word is known here")
        return default

    def needed(self, path: str, because: str) -> None:
        """Fault a quantity that is missing (and was not already faulted)."""
        if path not in self.values and not any(f.key == path for f in self.faults):
            self.fault(path, "nothing", "a quantity", because)
