"""The probability that all limits hold, over the window's axes: the same draws at every node, marched only where their answer is not foreseen.

Each draw has its own edge in the plane. Its margins at the nodes of a coarse grid foretell its answers at the fine nodes between, but near that edge;
those near it are marched. So the draws are spent where their edges run, which is where the contours of the probability do.

n + 1: fine nodes an axis; c + 1: coarse ones; N: draws; L: limits.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sweep.base.seeds import stream
from sweep.base.units import suffix
from sweep.chance import Memory, NoMemory, wilson
from sweep.plan import Draws, draw, set_point
from sweep.plan.sides import Side, sides_of
from sweep.plant import LimitRow, limits, margins
from sweep.study.model import Study
from sweep.study.settings import MapSettings

Evaluate = Callable[[pd.DataFrame], pd.DataFrame]
Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]
COARSE = 10  # steps of the coarse grid
LEVELS = (0.5, 0.9, 0.95, 0.99)
SAFETY = 0.25  # of the second differences; linear interpolation of a smooth function is off by an eighth of them
ROWS = 32_768  # batches of one call
CHECKED = 512  # answers foreseen that are marched all the same


@dataclass(frozen=True)
class ChanceMap:
    """holding (n + 1, n + 1): how many draws hold all limits; nominal: whether the constants as written do; marched: batches; checked, wrong:
    answers foreseen that were marched all the same, and how many of them were wrong."""

    study: Study
    settings: MapSettings
    axes: tuple[Side, Side]
    at: Mapping[str, float]
    holding: NDArray[np.int64]
    nominal: Bools
    marched: int
    checked: int
    wrong: int

    @property
    def probability(self) -> Floats:
        """The share of draws that hold, (n + 1, n + 1)."""
        return self.holding / self.settings.draws

    def _levels(self) -> list[dict[str, Any]]:
        """Return how much of the plane has at least each probability, by the nodes, those on the border counted half."""
        weight = np.ones(len(self.holding))
        weight[[0, -1]] = 0.5
        both = np.outer(weight, weight)
        return [{"probability": p, "share": float((both * (self.probability >= p)).sum() / both.sum())} for p in LEVELS]

    def summary(self) -> dict[str, Any]:
        """Return the block probability_map."""
        nodes = self.holding.size
        held = self.nominal
        inside = self.probability[held]
        best = np.unravel_index(int(self.holding.argmax()), self.holding.shape)
        cautions = ["Between the nodes the map is interpolated; contours are as sharp as the draws: each node's interval stands in the table."]
        if self.wrong:
            cautions.append(f"{self.wrong} of {self.checked} answers that were foreseen and checked were wrong: read contours with so much doubt.")
        return {
            "axes": [s.name for s in self.axes], "at": dict(self.at), "steps": self.settings.steps, "draws": self.settings.draws,
            "confidence": self.settings.confidence, "levels": self._levels(), "nominal_share": float(held.mean()),
            "least_where_nominal_holds": float(inside.min()) if inside.size else None,
            "best": {"probability": float(self.probability[best]),
                     "at": {s.name: {"value": float(s.at(int(best[k]) / self.settings.steps)), "unit": s.unit} for k, s in enumerate(self.axes)}},
            "marches": self.marched, "brute_force": nodes * self.settings.draws, "checked": self.checked, "wrong": self.wrong, "cautions": cautions,
        }  # fmt: skip

    def tables(self) -> dict[str, pd.DataFrame]:
        """Return the probability at every node with its interval."""
        share = np.linspace(0.0, 1.0, self.settings.steps + 1)
        places = [np.array([side.at(float(s)) for s in share]) for side in self.axes]
        x, y = (grid.ravel() for grid in np.meshgrid(*places, indexing="ij"))
        counts, which = np.unique(self.holding.ravel(), return_inverse=True)
        ends = np.array([wilson(int(c), self.settings.draws, self.settings.confidence) for c in counts])[which]
        names = [side.name + suffix(side.unit) for side in self.axes]
        columns = {names[0]: x, names[1]: y, "probability": self.probability.ravel(), "low": ends[:, 0], "high": ends[:, 1]}
        return {"probability_map": pd.DataFrame({**columns, "nominal_holds": self.nominal.ravel()})}


def assess_map(study: Study, evaluate: Evaluate, memory: Memory | None = None) -> ChanceMap:
    """Return the probability that all limits hold over the window's axes."""
    settings, window = study.map, study.window
    assert settings is not None and window is not None
    axes = tuple(next(side for side in sides_of(study, (name,))) for name in window.axes)
    fixed = {name: value for name, value in {**set_point(study), **window.at}.items() if name not in window.axes}
    drawn = draw(study, settings.draws, "latin-hypercube", "map")
    plane = _Plane(study, evaluate, drawn, (axes[0], axes[1]), fixed, settings.steps, memory or NoMemory())
    holding = np.zeros((settings.steps + 1,) * 2, dtype=np.int64)
    block = max(1, ROWS // (COARSE + 1) ** 2)
    for start in range(0, settings.draws, block):
        holding += plane.answers(np.arange(start, min(start + block, settings.draws))).sum(axis=2)
    nominal = plane.nominal()
    return ChanceMap(study, settings, (axes[0], axes[1]), fixed, holding, nominal, plane.marched, plane.checked, plane.wrong)


class _Plane:
    """The window's plane, on which draws are marched and counted."""

    def __init__(
        self, study: Study, evaluate: Evaluate, drawn: Draws, axes: tuple[Side, Side], fixed: Mapping[str, float], steps: int, memory: Memory
    ) -> None:
        self.study, self.evaluate, self.drawn, self.axes, self.fixed, self.steps, self.memory = study, evaluate, drawn, axes, fixed, steps, memory
        self.rows = limits(study)
        self.marched = self.checked = self.wrong = 0

    def _points(self, nodes: NDArray[np.int64]) -> pd.DataFrame:
        """Return design points of fine nodes (M, 2)."""
        columns = {side.name: np.array([side.at(k / self.steps) for k in range(self.steps + 1)])[nodes[:, j]] for j, side in enumerate(self.axes)}
        return pd.DataFrame({**columns, **{name: np.full(len(nodes), value) for name, value in self.fixed.items()}})

    def _margins(self, nodes: NDArray[np.int64], which: NDArray[np.int64] | None) -> Floats:
        """Return margins (M, L) at nodes (M, 2), each with the draw numbered `which` (M,), or with the constants as written."""

        def compute() -> Floats:
            parts = [np.empty((0, len(self.rows)))]
            for a in range(0, len(nodes), ROWS):
                points = self._points(nodes[a : a + ROWS])
                parts.append(margins(self.study, self.evaluate(points if which is None else self.drawn.paired(points, which[a : a + ROWS]))))
            return np.concatenate(parts)

        self.marched += len(nodes)
        key = np.column_stack([nodes, np.full(len(nodes), -1) if which is None else which]).astype(np.float64)
        return self.memory.remembered("map", key, compute)

    def nominal(self) -> Bools:
        """Return whether the constants as written hold at every node, foreseen and marched alike."""
        return self._answers(None)[:, :, 0]

    def answers(self, draws: NDArray[np.int64]) -> Bools:
        """Return for draws (N,) whether all limits hold at every fine node, (n + 1, n + 1, N)."""
        return self._answers(draws)

    def _answers(self, draws: NDArray[np.int64] | None) -> Bools:
        count, every = 1 if draws is None else len(draws), self.steps // COARSE
        i, j, d = (grid.ravel() for grid in np.meshgrid(*[np.arange(COARSE + 1) * every] * 2, np.arange(count), indexing="ij"))
        coarse = self._margins(np.column_stack([i, j]), None if draws is None else draws[d])
        shape = (COARSE + 1, COARSE + 1, count, len(self.rows))
        holds, sure = foreseen(coarse.reshape(shape), every, self.rows)
        open_ = np.argwhere(~sure)
        found = self._margins(open_[:, :2], None if draws is None else draws[open_[:, 2]])
        holds[tuple(open_.T)] = np.all(found >= 0.0, axis=1)
        if draws is not None:
            self._check(holds, sure, draws, every)
        return holds

    def _check(self, holds: Bools, sure: Bools, draws: NDArray[np.int64], every: int) -> None:
        """March some of the answers that were foreseen, count those that were wrong and put them right."""
        told = sure.copy()
        told[::every, ::every] = False  # those were marched
        known = np.argwhere(told)
        number = min(len(known), max(1, CHECKED * len(draws) // len(self.drawn)))
        if not len(known):
            return
        chosen = known[stream(self.study.seed, "map", "check", int(draws[0])).choice(len(known), number, replace=False)]
        truth = np.all(self._margins(chosen[:, :2], draws[chosen[:, 2]]) >= 0.0, axis=1)
        self.checked += number
        self.wrong += int(np.count_nonzero(truth != holds[tuple(chosen.T)]))
        holds[tuple(chosen.T)] = truth


def foreseen(coarse: Floats, every: int, rows: tuple[LimitRow, ...]) -> tuple[Bools, Bools]:
    """Return whether fine nodes hold and whether that is sure, both (n + 1, n + 1, N), from margins at coarse nodes (c + 1, c + 1, N, L).

    A limit is sure where its interpolated margin is farther from zero than the second differences around let it be off; margins are taken as they
    are, and as logarithms of response over bound where both are positive: one of the two is mostly straight.
    """
    size = every * (len(coarse) - 1) + 1
    holds = np.ones((size, size, coarse.shape[2]), dtype=bool)
    fails = np.zeros_like(holds)
    for k, row in enumerate(rows):
        limit_holds, limit_fails = _sure(coarse[..., k], every)
        value = row.bound + coarse[..., k] if row.sense == "at_least" else row.bound - coarse[..., k]
        if row.bound > 0.0 and np.all(np.isnan(value) | (value > 0.0)):
            ratio = np.log(value / row.bound)
            more_holds, more_fails = _sure(ratio if row.sense == "at_least" else -ratio, every)
            conflict = (limit_holds & more_fails) | (limit_fails & more_holds)
            limit_holds, limit_fails = (limit_holds | more_holds) & ~conflict, (limit_fails | more_fails) & ~conflict
        holds &= limit_holds
        fails |= limit_fails
    sure = holds | fails
    exact = np.all(coarse >= 0.0, axis=-1)
    answer = holds & ~fails
    answer[::every, ::every], sure[::every, ::every] = exact, True
    return answer, sure


def _sure(margin: Floats, every: int) -> tuple[Bools, Bools]:
    """Return where one limit's margin, (c + 1, c + 1, N), is surely at least zero and where surely below, on the fine nodes; neither beside NaN,
    but surely below amid NaN."""
    missing = np.isnan(margin)
    filled = np.where(missing, 0.0, margin)
    bend = _bend(filled, 0) + _bend(filled, 1)
    cells = _cells(bend)
    off = _spread(SAFETY * cells, every)
    gone, some = _spread(_cells_all(missing), every), _spread(_cells_any(missing), every)
    expected = _between(_between(filled, every, 0), every, 1)
    return (expected - off >= 0.0) & ~some, np.where(some, gone, expected + off < 0.0)


def _bend(values: Floats, axis: int) -> Floats:
    """Return the size of second differences along an axis; at the ends that of the neighbour."""
    inner = np.abs(np.diff(values, 2, axis=axis))
    edge = [(1, 1) if k == axis else (0, 0) for k in range(values.ndim)]
    return np.pad(inner, edge, mode="edge")


def _cells(values: Floats) -> Floats:
    """Return the largest of each cell's four corners."""
    pairs = np.maximum(values[:-1], values[1:])
    return np.maximum(pairs[:, :-1], pairs[:, 1:])


def _cells_any(flags: Bools) -> Bools:
    pairs = flags[:-1] | flags[1:]
    return np.asarray(pairs[:, :-1] | pairs[:, 1:])


def _cells_all(flags: Bools) -> Bools:
    pairs = flags[:-1] & flags[1:]
    return np.asarray(pairs[:, :-1] & pairs[:, 1:])


def _spread(cells: Any, every: int) -> Any:
    """Return each cell's value at the fine nodes it owns: its lower left ones, the last cells their far border too."""
    number = np.minimum(np.arange(every * len(cells) + 1) // every, len(cells) - 1)
    return cells[number][:, number]


def _between(values: Floats, every: int, axis: int) -> Floats:
    """Return linear interpolation along an axis."""
    count = values.shape[axis]
    below, part = np.divmod(np.arange(every * (count - 1) + 1), every)
    above = np.minimum(below + 1, count - 1)
    share = (part / every).reshape([-1 if k == axis else 1 for k in range(values.ndim)])
    return np.asarray((1.0 - share) * np.take(values, below, axis) + share * np.take(values, above, axis))
