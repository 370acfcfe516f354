"""Whether limits hold at design points, nominally or with a probability that draws show: one signed margin for either.

M: points; L: limits; N: draws; C: constraints, L nominally and one (all together) with a probability.
"""

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sweep.base.seeds import stream
from sweep.chance.intervals import wilson
from sweep.plan import Draws, draw, set_point
from sweep.plan.draws import cube
from sweep.plant import LimitRow, limits, margins
from sweep.study.model import Study
from sweep.study.settings import Assurance

_Floats = NDArray[np.float64]
_Integers = NDArray[np.int64]
Evaluate = Callable[[pd.DataFrame], pd.DataFrame]
Also = Callable[[pd.DataFrame], _Floats]
ROWS = 32_768  # batches of one call
NONE = -1.0  # the scaled margin of a limit without a value: well outside, and finite
_SCANNED = 64  # points that show how much a margin varies
_FIRST = 4  # a point that fails too often in the first N/4 draws has failed


class Memory(Protocol):
    """Keeps what a long search has computed, so that an interrupted one goes on where it stopped."""

    def remembered(self, what: str, points: _Floats, compute: Callable[[], _Floats]) -> _Floats:
        """Return the array computed for these points before, or compute and keep it."""


class NoMemory:
    """Keeps nothing."""

    def remembered(self, what: str, points: _Floats, compute: Callable[[], _Floats]) -> _Floats:
        """Return what is computed."""
        return compute()


@dataclass(frozen=True)
class Judged:
    """M points. value (M, C): zero or above where they are acceptable, margins over their spreads; margin (M, L): of each limit in its own unit,
    nominally or such as the asked-for count of draws reaches; share (M,): of draws in which all hold (1 or 0 nominally); limit (M,): the one that is
    nearest to failing or fails most; also (M, E): what else was asked of each point, at the constants as written."""

    value: _Floats
    margin: _Floats
    share: _Floats
    limit: _Integers
    also: _Floats = field(default_factory=lambda: np.empty((0, 0)))

    @property
    def least(self) -> _Floats:
        """The smallest value of each point, (M,)."""
        return np.asarray(self.value.min(axis=1))

    @property
    def acceptable(self) -> NDArray[np.bool_]:
        """Where the points are acceptable, (M,)."""
        return self.least >= 0.0


class Assured:
    """Judges design points of a study by its limits; the same draws at every point (common random numbers)."""

    def __init__(
        self, study: Study, evaluate: Evaluate, assurance: Assurance, name: str, memory: Memory | None = None, also: Also | None = None
    ) -> None:
        """memory: keeps what is judged; also: rows evaluated at the constants as written -> (M, E) of what else is wanted."""
        self.study, self.evaluate, self.assurance, self.name = study, evaluate, assurance, name
        self.rows: tuple[LimitRow, ...] = limits(study)
        self.draws: Draws | None = None if assurance.probability is None or not self.rows else draw(study, assurance.draws, "latin-hypercube", name)
        self.need = 1 if assurance.probability is None else needed(assurance.draws, assurance.probability, assurance.confidence)
        self.memory: Memory = memory or NoMemory()
        self.also = also
        self.marches = 0
        self.scale = self._scales()

    @property
    def count(self) -> int:
        """Batches a point."""
        return 1 if self.draws is None else len(self.draws)

    def _scales(self) -> _Floats:
        """Return by how much each margin varies over the variables' ranges, (L,), so that limits in different units can be compared."""
        names = [v.name for v in self.study.variables]
        low, high = (np.array([getattr(v, end) for v in self.study.variables]) for end in ("low", "high"))
        points = low + (high - low) * cube("sobol", _SCANNED, len(names), stream(self.study.seed, self.name, "scan"))
        table = pd.DataFrame(points, columns=names)
        margin = self.memory.remembered("scan", points, lambda: self._margins(table))
        self.marches += len(table)
        found = np.ones(len(self.rows))
        for k in range(len(self.rows)):
            known = margin[np.isfinite(margin[:, k]), k]
            size = float(known.std()) if known.size else 0.0
            found[k] = size if size > 0.0 else max(abs(self.rows[k].bound), 1e-300)
        return found

    def _evaluated(self, table: pd.DataFrame) -> list[pd.DataFrame]:
        return [self.evaluate(table.iloc[a : a + ROWS].reset_index(drop=True)) for a in range(0, len(table), ROWS)]

    def _margins(self, table: pd.DataFrame) -> _Floats:
        return np.concatenate([margins(self.study, rows) for rows in self._evaluated(table)])

    def at(self, points: pd.DataFrame) -> Judged:
        """Judge design points, a column per variable (SI); a variable left out is as written."""
        written = {name: np.full(len(points), value) for name, value in set_point(self.study).items()}
        whole = pd.DataFrame({**written, **points.reset_index(drop=True)})
        packed = self.memory.remembered(f"{self.name} {self.need}", whole.to_numpy(), lambda: self._judge(whole))
        size = len(self.rows)
        columns = size if self.draws is None and self.rows else 1
        parts = np.split(packed, np.cumsum([1, 1, 1, size, columns]), axis=1)
        self.marches += int(parts[0].sum())  # of what is remembered too: a search that goes on tells what an undisturbed one would
        return Judged(parts[4], parts[3], parts[1][:, 0], parts[2][:, 0].astype(np.int64), parts[5])

    def _judge(self, points: pd.DataFrame) -> _Floats:
        """Return batches marched, share, limit, margins (L), values (C) and what else is wanted (E) in one array, (M, 3 + L + C + E)."""
        if self.draws is None:
            rows = self._evaluated(points)
            margin = np.concatenate([margins(self.study, part) for part in rows])
            value = self._scaled(margin) if self.rows else np.ones((len(points), 1))  # without limits every setting is acceptable
            return np.column_stack([np.ones(len(points)), np.all(margin >= 0.0, axis=1), value.argmin(axis=1), margin, value, *self._others(rows)])
        found = np.concatenate([self._drawn(points.iloc[a : a + self._at_once]) for a in range(0, len(points), self._at_once)])
        found[:, 0] += 1.0 if self.also else 0.0
        return np.column_stack([found, *(self._others(self._evaluated(points)) if self.also else ())])

    def _others(self, rows: list[pd.DataFrame]) -> list[_Floats]:
        return [np.concatenate([self.also(part) for part in rows])] if self.also else []

    @property
    def _at_once(self) -> int:
        return max(1, ROWS // self.count)

    def _scaled(self, margin: _Floats) -> _Floats:
        value = margin / self.scale
        return np.where(np.isnan(value), np.minimum(NONE, np.nanmin(np.append(value, NONE))), value)

    def _drawn(self, points: pd.DataFrame) -> _Floats:
        """Judge points by the draws; those that fail too often in the first of them are given no more."""
        assert self.draws is not None
        first = max(1, self.count // _FIRST)
        early = self._paired(points, 0, first)
        failing = np.count_nonzero(~np.all(early >= 0.0, axis=2), axis=1)
        going = np.flatnonzero(failing <= self.count - self.need)
        found = np.empty((len(points), 4 + len(self.rows)))
        lost = np.flatnonzero(failing > self.count - self.need)
        if lost.size:
            found[lost] = self._ranked(early[lost], max(1, round(self.need * first / self.count)), failed=True)
        if going.size:
            late = self._paired(points.iloc[going], first, self.count)
            found[going] = self._ranked(np.concatenate([early[going], late], axis=1), self.need, failed=False)
        return found

    def _paired(self, points: pd.DataFrame, start: int, stop: int) -> _Floats:
        """Return the margins of each point with the draws from `start` to `stop`, (M, n, L)."""
        assert self.draws is not None
        number = stop - start
        if number <= 0:
            return np.empty((len(points), 0, len(self.rows)))
        repeated = points.loc[points.index.repeat(number)].reset_index(drop=True)
        which = np.tile(np.arange(start, stop), len(points))
        return self._margins(self.draws.paired(repeated, which)).reshape(len(points), number, len(self.rows))

    def _ranked(self, margin: _Floats, need: int, failed: bool) -> _Floats:
        """Return batches, share, limit, margins and value of points from their draws' margins (M, n, L): the `need`-th largest is zero or above
        where so many draws hold."""
        value = self._scaled(margin)
        together = np.sort(value.min(axis=2), axis=1)[:, ::-1][:, need - 1]
        each = -np.sort(-np.where(np.isnan(margin), -np.inf, margin), axis=1)[:, need - 1]
        fails = np.count_nonzero(~(margin >= 0.0), axis=1)
        nearest = np.sort(value, axis=1)[:, ::-1][:, need - 1]
        worst = np.lexsort((nearest, -fails), axis=1)[:, 0]
        share = np.all(margin >= 0.0, axis=2).mean(axis=1)
        batches = np.full(len(margin), margin.shape[1])
        together = np.minimum(together, -1e-6) if failed else together
        return np.column_stack([batches, share, worst, np.where(np.isfinite(each), each, np.nan), together])


def needed(draws: int, probability: float, confidence: float) -> int:
    """Return of how many draws all limits have to hold for the one-sided Wilson bound to reach a probability with a confidence."""
    low, high = 0, draws
    while low < high:
        middle = (low + high) // 2
        low, high = (low, middle) if lower_bound(middle, draws, confidence) >= probability else (middle + 1, high)
    return low


def lower_bound(count: int, draws: int, confidence: float) -> float:
    """Return the probability above which the truth lies with a confidence (one side of Wilson's interval)."""
    return wilson(count, draws, 2.0 * confidence - 1.0)[0]
