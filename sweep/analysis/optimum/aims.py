"""What is sought, as numbers to be made small; and the points that were judged on the way.

M: points; D: variables; K: objectives; C: constraints.
"""

from collections.abc import Callable

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sweep.chance import Assured, Judged
from sweep.plan.sides import Side, table_of
from sweep.plant import cost_of, limits, margins
from sweep.study.model import Study
from sweep.study.settings import Objective

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]


def aims_of(study: Study, objectives: tuple[Objective, ...]) -> Callable[[pd.DataFrame], Floats]:
    """Return evaluated rows -> objectives in SI, (M, K); NaN where a point is not done or has none."""
    rows = limits(study)

    def found(table: pd.DataFrame) -> Floats:
        done = (table["status"] == "done").to_numpy(dtype=bool)
        columns = []
        for one in objectives:
            if one.kind == "cost":
                value = cost_of(study, table[[v.name for v in study.variables]], table, study.optimum.prices if study.optimum else {})
            elif one.kind == "margin":
                chosen = [k for k, row in enumerate(rows) if row.name == one.name]
                value = margins(study, table)[:, chosen].min(axis=1)
            else:
                value = table[one.column].to_numpy(dtype=np.float64, na_value=np.nan)
            columns.append(np.where(done, value, np.nan))
        return np.column_stack(columns)

    return found


class Problem:
    """Judges points of the unit cube, each once; remembers all of them in the order in which they came."""

    def __init__(self, assured: Assured, sides: tuple[Side, ...], objectives: tuple[Objective, ...]) -> None:
        self.assured, self.sides = assured, sides
        self.signs = np.array([1.0 if one.sense == "minimise" else -1.0 for one in objectives])
        self._known: dict[bytes, int] = {}
        self._points: list[Floats] = []
        self._judged: list[Judged] = []

    def start_again(self) -> None:
        """Forget what was judged: it is judged by another count of draws from now on."""
        self._known, self._points, self._judged = {}, [], []

    def look(self, points: Floats) -> NDArray[np.int64]:
        """Judge points (M, D) that are new; return the numbers of all of them."""
        points = np.clip(points, 0.0, 1.0) + 0.0
        keys = [point.tobytes() for point in points]
        new = list(dict.fromkeys(key for key in keys if key not in self._known))
        if new:
            fresh = np.array([np.frombuffer(key) for key in new])
            judged = self.assured.at(table_of(self.sides, fresh))
            start = len(self._known)
            self._known.update({key: start + k for k, key in enumerate(new)})
            self._points.append(fresh)
            self._judged.append(judged)
        return np.array([self._known[key] for key in keys], dtype=np.int64)

    @property
    def points(self) -> Floats:
        """All points so far, (M, D)."""
        return np.concatenate(self._points)

    def _all(self, what: Callable[[Judged], Floats]) -> Floats:
        return np.concatenate([what(one) for one in self._judged])

    @property
    def values(self) -> Floats:
        """Constraints of all points, zero or above where they hold, (M, C); a point whose objective has no value fails them all."""
        value, aim = self._all(lambda one: one.value), self.aims
        return np.where(np.any(np.isnan(aim), axis=1, keepdims=True), np.minimum(value, -1.0), value)

    @property
    def aims(self) -> Floats:
        """Objectives of all points in SI, (M, K)."""
        return self._all(lambda one: one.also)

    @property
    def costs(self) -> Floats:
        """Objectives to be made small, (M, K)."""
        return np.asarray(self.aims * self.signs)

    @property
    def least(self) -> Floats:
        """The smallest constraint of each point, (M,)."""
        return np.asarray(self.values.min(axis=1))

    def judged(self, number: int) -> tuple[Floats, float, int]:
        """Return margins (L,), share and limit of one point."""
        return self._all(lambda one: one.margin)[number], float(self._all(lambda one: one.share)[number]), int(
            np.concatenate([one.limit for one in self._judged])[number])  # fmt: skip

    def shares(self) -> Floats:
        """Return of all points the share of draws that hold, (M,)."""
        return self._all(lambda one: one.share)

    def best(self, among: NDArray[np.int64] | None = None) -> int | None:
        """Return the number of the best acceptable point by the first objective, None where there is none."""
        numbers = np.arange(len(self._known)) if among is None else np.unique(among)
        good = numbers[np.greater_equal(self.least[numbers], 0.0)]
        return int(good[self.costs[good, 0].argmin()]) if good.size else None
