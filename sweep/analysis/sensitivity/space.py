"""What is varied: the unit cube of the uncertain inputs, or of the variables over their ranges, and which inputs move together."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sweep.base.errors import SweepError
from sweep.plan import Draws, dimensions_of, groups_of, set_point
from sweep.plant import limits, responses
from sweep.study.model import Study

_Floats = NDArray[np.float64]
OUTER = 0.01  # of an unbounded distribution the screening leaves out so much at either end


@dataclass(frozen=True)
class Space:
    """D dimensions; labels: G groups that are varied together (one for most), group (D,): to which each dimension belongs;
    open (D,): whether a dimension reaches to infinity; points: cube (N, D) -> table to evaluate."""

    labels: tuple[str, ...]
    group: tuple[int, ...]
    open: NDArray[np.bool_]
    points: Callable[[_Floats], pd.DataFrame]

    @property
    def grouped(self) -> bool:
        """Tell whether some dimensions move together."""
        return len(self.labels) < len(self.group)

    @property
    def alone(self) -> bool:
        """Tell whether all that varies is one group: there is nothing to tell apart."""
        return self.grouped and len(self.labels) == 1

    def problem(self) -> dict[str, Any]:
        """Return the cube as SALib asks for it; groups by number, so that no name can collide."""
        size = len(self.group)
        found: dict[str, Any] = {"num_vars": size, "names": [f"x{k}" for k in range(size)], "bounds": [[0.0, 1.0]] * size}
        return {**found, "groups": [f"g{k:04d}" for k in self.group]} if self.grouped else found

    def within(self, cube: _Floats) -> _Floats:
        """Return a cube whose open dimensions keep clear of infinity."""
        return np.where(self.open, OUTER + (1.0 - 2.0 * OUTER) * cube, cube)


def space_of(study: Study, over: str) -> Space:
    """Return what is varied. Inputs that are correlated, or drawn from one file, form a group under a joint name."""
    if over == "variables":
        low, high = (np.array([getattr(v, end) for v in study.variables]) for end in ("low", "high"))
        names = tuple(v.name for v in study.variables)
        size = len(names)

        def chosen(cube: _Floats) -> pd.DataFrame:
            return pd.DataFrame(low + (high - low) * cube, columns=list(names))

        return Space(names, tuple(range(size)), np.zeros(size, dtype=bool), chosen)
    groups, names_of = groups_of(study), dimensions_of(study)
    if not names_of:
        raise SweepError("sensitivity: nothing is uncertain")
    labels = tuple(" + ".join(name for k in group for name in names_of[k]) for group in groups)
    group = np.empty(len(names_of), dtype=int)
    for g, members in enumerate(groups):
        group[list(members)] = g
    point = set_point(study)
    return Space(labels, tuple(int(g) for g in group), _open(study), lambda cube: Draws(study, cube).at(point))


def _open(study: Study) -> NDArray[np.bool_]:
    closed = {one.name for one in study.uncertain if one.distribution in ("uniform", "triangular", "table")}
    closed |= {one.name for one in study.uncertain if one.distribution == "truncated-normal" and {"low", "high"} <= set(one.parameters)}
    closed |= {v.error for v in study.variables if v.tolerance is not None and v.tolerance.distribution == "uniform"}
    return np.array([not set(names) <= closed for names in dimensions_of(study)], dtype=bool)


def asked_responses(study: Study) -> dict[str, str]:
    """Return the responses whose sensitivities are wanted, column -> unit: what is limited, the time to the target and the productivity."""
    units = {one.column: one.unit for one in responses(study) if one.kind in ("float", "int")}
    wanted = [row.response for row in limits(study)]
    wanted += [name for name in units if name == "time_to_target_s" or name.startswith("productivity_")] if study.target is not None else []
    return {name: units[name] for name in dict.fromkeys(wanted) if name in units} or {"max_temperature_K": "K"}


def whole_numbers(table: pd.DataFrame, column: str) -> _Floats:
    """Return a response as numbers (N,), NaN where it is null or the point is not done."""
    value = table[column].to_numpy(dtype=np.float64, na_value=np.nan)
    return np.where((table["status"] == "done").to_numpy(dtype=bool), value, np.nan)


def still(value: _Floats, tolerance: float) -> bool:
    """Tell whether a response does not move beyond what the march's tolerance lets it."""
    return bool(np.ptp(value) <= 10.0 * tolerance * np.abs(value).max()) if value.size else True
