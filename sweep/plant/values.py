"""The quantities of a study for many points at once: what is written, overlaid by each point's columns and by events."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from sweep.base.errors import SweepError
from sweep.study.model import Bound, Study, differs, unset

if TYPE_CHECKING:
    import pandas as pd

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Values:
    """Quantities by dotted path (SI): one number for all points, or one per point, shape (N,)."""

    count: int
    given: Mapping[str, float | Floats]
    refused: Mapping[int, str] = field(default_factory=dict)  # point -> why its values make no sense; the written ones stand in for them
    chosen: Mapping[str, float | Floats] = field(default_factory=dict)  # what a design point has where uncertain inputs or control errors differ

    def has(self, path: str) -> bool:
        """Tell whether a quantity is written."""
        return path in self.given

    def get(self, path: str, default: float | Floats = 0.0) -> Floats:
        """Return a quantity for every point, shape (N,)."""
        value = self.given.get(path, default)
        return value if isinstance(value, np.ndarray) else np.full(self.count, value)

    def need(self, path: str) -> Floats:
        """Return a quantity that the question cannot do without; SweepError where it is not written."""
        if path not in self.given:
            raise SweepError(f"{path} is not written in the study, and this question needs it")
        return self.get(path)

    def take(self, rows: NDArray[np.int_]) -> Values:
        """Return the quantities of some of the points."""

        def taken(values: Mapping[str, float | Floats]) -> dict[str, float | Floats]:
            return {path: value[rows] if isinstance(value, np.ndarray) else value for path, value in values.items()}

        return Values(int(rows.size), taken(self.given), chosen=taken(self.chosen))

    def overlaid(self, sets: Mapping[str, float | Floats]) -> Values:
        """Return these quantities with some replaced."""
        return Values(self.count, {**self.given, **sets}, self.refused, self.chosen)

    def as_chosen(self) -> Values:
        """Return the quantities before uncertain inputs and control errors acted: what equivalents are counted from."""
        return Values(self.count, {**self.given, **self.chosen}, self.refused)

    def refusing(self, refused: Mapping[int, str], written: Mapping[str, float]) -> Values:
        """Return these quantities with the written ones at the points that are refused."""
        rows = list(refused)

        def kept(values: Mapping[str, float | Floats]) -> dict[str, float | Floats]:
            found = dict(values)
            for path, value in values.items():
                if isinstance(value, np.ndarray):
                    found[path] = value.copy()
                    found[path][rows] = written[path]  # type: ignore[index]
            return found

        return Values(self.count, kept(self.given), refused, kept(self.chosen))


def values_of(study: Study, points: pd.DataFrame) -> Values:
    """Return the quantities of each point: columns are variables, uncertain inputs, control errors or dotted paths, SI.

    Variables and paths are the design point; uncertain inputs and control errors act on top of it, on the actual amounts.
    SweepError where a column is unknown, sets what another sets or what cannot differ, or holds what is no finite number. A finite
    number that makes no sense (a negative duration) refuses its own point only.
    """
    sets: dict[str, float | Floats] = {}
    drawn: dict[str, Floats] = {}
    owners: dict[str, str] = {}
    refused: dict[int, str] = {}
    uncertain = {one.name for one in study.uncertain}
    for place, column in enumerate(map(str, points.columns)):
        paths, array = study.paths_of(column), _numbers(points.iloc[:, place], column)
        for path in paths:
            if path in owners:
                raise SweepError(f"points: columns {owners[path]} and {column} both set {path}")
            if not differs(path):
                raise SweepError(f"points: {column} cannot differ from point to point; it is written in the study")
            owners[path] = column
            (drawn if column in uncertain else sets)[path] = _sensible(study, path, array, refused)
    drawn |= _held(study, sets, refused)
    chosen = {path: sets.get(path, study.values[path]) for path in drawn}
    return Values(len(points), {**study.values, **sets, **drawn}, refused, chosen)


def _held(study: Study, sets: Mapping[str, float | Floats], refused: dict[int, str]) -> dict[str, Floats]:
    """Return what the plant holds of the variables whose control errors (SI) are given: what was chosen, and the error."""
    found = {}
    for v in study.variables:
        if v.error in sets:
            for path in v.sets:
                actual = np.asarray(sets.get(path, study.values[path]) + sets[v.error], dtype=np.float64)
                found[path] = _sensible(study, path, actual, refused)
    return found


def _numbers(column: pd.Series, name: str) -> Floats:
    """Return a column as floats; SweepError where it holds something else, NaN or infinity, with the first row that does."""
    try:
        array: Floats = column.to_numpy(dtype=np.float64, copy=True)
    except (TypeError, ValueError) as error:
        raise SweepError(f"points: {name} is not a column of numbers ({error})") from None
    bad = np.flatnonzero(~np.isfinite(array))
    if bad.size:
        raise SweepError(f"points: {name} is {array[bad[0]]} in row {column.index[bad[0]]}; a finite number in SI is expected")
    return array


def _sensible(study: Study, path: str, array: Floats, refused: dict[int, str]) -> Floats:
    """Return a column with the written value where its own breaks the quantity's bound; note those points and why."""
    bound = study.bounds.get(unset(path))
    if bound is None and study.dimensions.get(path) == "temperature":
        bound = Bound(0.0, True, np.inf, "absolute zero is never reached")
    if bound is None:
        return array
    bad = [int(n) for n in np.flatnonzero(~((array > bound.low) if bound.strict else (array >= bound.low)) | (array >= bound.below))]
    for n in bad:
        refused.setdefault(n, f"{path} is {array[n]:.6g}, and should be {bound.words}: {bound.because}")
    array = array.copy()
    array[bad] = study.values[path]
    return array
