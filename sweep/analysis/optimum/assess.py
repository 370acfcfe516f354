"""The optimum of a study as one record: what was found, rounded to what can be set, and verified with fresh draws."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sweep.analysis.optimum.aims import Floats, Problem, aims_of
from sweep.analysis.optimum.front import front_of, spread_out
from sweep.analysis.optimum.one import come_nearest, evolve, polish
from sweep.chance import Assured, Memory, lower_bound
from sweep.plan import draw
from sweep.plan.sides import Side, centre_of, nearby, sides_of, table_of
from sweep.plant import holds, margins
from sweep.study.model import Study
from sweep.study.settings import OptimumSettings

Evaluate = Callable[[pd.DataFrame], pd.DataFrame]
FINER = 4  # digits that are added before the optimum is written as found
TIGHTENED = 3  # times that more draws are asked to hold, where fresh ones do not bear the probability out
SHOWN = 24  # settings of a front that are verified


@dataclass(frozen=True)
class Verified:
    """Fresh draws at one setting: how many hold, of how many, and the objectives' percentiles (5, 50, 95) over those that have a value."""

    holding: int
    draws: int
    percentiles: tuple[tuple[float, float, float] | None, ...]


@dataclass(frozen=True)
class Optimum:
    """best: number of the setting to write down, None where none is acceptable; exact: before rounding; front: of two objectives;
    fresh: setting -> verified; work: how it was sought."""

    study: Study
    settings: OptimumSettings
    problem: Problem
    best: int | None
    exact: int | None
    front: NDArray[np.int64]
    fresh: dict[int, Verified]
    work: dict[str, Any]

    def _inputs(self, number: int) -> dict[str, Any]:
        row = table_of(self.problem.sides, self.problem.points[number][None, :]).iloc[0]
        return {s.name: {"value": float(row[s.name]), "unit": s.unit, "written": s.written(float(row[s.name]))} for s in self.problem.sides}

    def _limits(self, number: int) -> list[dict[str, Any]]:
        margin, _, _ = self.problem.judged(number)
        return [
            {"name": row.name, "label": row.label, "margin": float(m) if np.isfinite(m) else None, "unit": row.unit, "holds": bool(m >= 0.0)}
            for row, m in zip(self.problem.assured.rows, margin, strict=True)
        ]

    def _setting(self, number: int) -> dict[str, Any]:
        """Return one setting with its objectives and margins."""
        _, share, limit = self.problem.judged(number)
        aims, rows = self.problem.aims[number], self.problem.assured.rows
        drawn = self.problem.assured.draws is not None
        fresh = self.fresh.get(number)
        verified = None if fresh is None else {
            "holding": fresh.holding, "draws": fresh.draws, "probability": fresh.holding / fresh.draws,
            "low": lower_bound(fresh.holding, fresh.draws, self.settings.assurance.confidence),
            "percentiles": [None if three is None else list(three) for three in fresh.percentiles],
        }  # fmt: skip
        return {
            "inputs": self._inputs(number), "limits": self._limits(number), "nearest": rows[limit].label if rows else None,
            "objectives": [float(a) if np.isfinite(a) else None for a in aims], "share": share if drawn else None, "verified": verified,
        }  # fmt: skip

    def _reason(self) -> str | None:
        """Return why there is no optimum."""
        if self.best is not None or self.front.size:
            return None
        how = "" if self.problem.assured.draws is None else f" with a probability of {self.settings.assurance.probability:g}"
        _, _, limit = self.problem.judged(self._least_bad)
        label = self.problem.assured.rows[limit].label if self.problem.assured.rows else "the objective"
        return f"no setting was found that holds every limit{how}; at the one that comes nearest {label} is in the way"

    @property
    def _least_bad(self) -> int:
        return int(self.problem.least.argmax())

    def _cautions(self) -> list[str]:
        found = ["The best of what was searched: a search over the whole space can miss a narrow region, and no method proves that none is better."]
        p, confidence = self.settings.assurance.probability, self.settings.assurance.confidence
        short = [k for k, one in self.fresh.items() if p is not None and lower_bound(one.holding, one.draws, confidence) < p]
        if p is not None and short:
            which = "the setting" if self.front.size == 0 else f"{len(short)} of {len(self.fresh)} settings of the front"
            found.append(f"Fresh draws do not bear out a probability of {p:g} with a confidence of {confidence:g} for {which}; take more draws.")
        if self.front.size > len(self.fresh) > 0:
            found.append(f"{len(self.fresh)} of the {self.front.size} settings of the front were verified with fresh draws.")
        return found

    def summary(self) -> dict[str, Any]:
        """Return the block optimum."""
        assurance, reason = self.settings.assurance, self._reason()
        drawn = None
        if assurance.probability is not None:
            drawn = {"probability": assurance.probability, "confidence": assurance.confidence, "draws": self.problem.assured.count,
                     "need": self.problem.assured.need}  # fmt: skip
        return {
            "objectives": [{"name": self._named(k), "sense": one.sense, "unit": self._unit(k)} for k, one in enumerate(self.settings.objectives)],
            "variables": [s.name for s in self.problem.sides], "assurance": drawn, "reason": reason,
            "best": None if self.best is None else self._setting(self.best),
            "exact": None if self.exact is None or self.exact == self.best else self._setting(self.exact),
            "set_point": self._setting(0), "set_point_acceptable": bool(self.problem.least[0] >= 0.0),
            "least_bad": self._setting(self._least_bad) if reason else None,
            "front": [self._setting(int(k)) for k in self.front] if len(self.settings.objectives) > 1 else None,
            "search": {**self.work, "settings": len(self.problem.points), "marches": self.problem.assured.marches}, "cautions": self._cautions(),
        }  # fmt: skip

    def _named(self, k: int) -> str:
        one = self.settings.objectives[k]
        return f"margin_{one.name}" if one.kind == "margin" else one.name

    def _unit(self, k: int) -> str:
        one = self.settings.objectives[k]
        return next(row.unit for row in self.problem.assured.rows if row.name == one.name) if one.kind == "margin" else one.unit

    def tables(self) -> dict[str, pd.DataFrame]:
        """Return every setting that was judged, and the front of two objectives."""
        problem = self.problem
        table = table_of(problem.sides, problem.points)
        for k in range(len(self.settings.objectives)):
            table[self._named(k)] = problem.aims[:, k]
        table = table.assign(share=problem.shares(), least_scaled_margin=problem.least, acceptable=problem.least >= 0.0)
        found = {"optimum_search": table}
        if len(self.settings.objectives) > 1:
            front = table.iloc[self.front].drop(columns=["least_scaled_margin", "acceptable"]).reset_index(drop=True)
            sure = [self.fresh.get(int(k)) for k in self.front]
            low = [np.nan if one is None else lower_bound(one.holding, one.draws, self.settings.assurance.confidence) for one in sure]
            found["optimum_front"] = front.assign(probability_at_least=low)
        return found


def assess_optimum(study: Study, evaluate: Evaluate, memory: Memory | None = None) -> Optimum:
    """Return the best setting of a study within its limits, or the front between two objectives."""
    settings = study.optimum
    assert settings is not None
    assured = Assured(study, evaluate, settings.assurance, "optimum", memory, aims_of(study, settings.objectives))
    sides = sides_of(study, settings.variables)
    problem = Problem(assured, sides, settings.objectives)
    centre = centre_of(sides)
    problem.look(centre[None, :])
    if len(settings.objectives) > 1:
        return _two(study, evaluate, settings, problem, centre)
    work: dict[str, Any] = {"method": "differential evolution", "polished_by": None, "tightened": 0}
    work["generations"] = evolve(problem, centre, settings.population, settings.generations, study.seed)
    found = problem.best()
    if found is None:
        come_nearest(problem)
        found = problem.best()
    if found is None:
        return Optimum(study, settings, problem, None, None, np.array([], dtype=np.int64), {}, work)
    work["polished_by"] = polish(problem, found, assured.draws is None)
    best, exact = _rounded(problem)
    fresh: dict[int, Verified] = {}
    p = settings.assurance.probability
    for round_ in range(TIGHTENED + 1):
        if p is None:
            break
        fresh = {best: _verify(study, evaluate, settings, sides, problem.points[best], round_)}
        shown = lower_bound(fresh[best].holding, fresh[best].draws, settings.assurance.confidence)
        tighter = assured.need + max(1, round((p - shown) * assured.count))
        if shown >= p or round_ == TIGHTENED or tighter > assured.count:
            break
        again = _tightened(problem, centre, tighter, problem.points[np.argsort(-problem.least, kind="stable")])
        if again is None:
            break
        best, exact = again
        work["tightened"] += 1
    return Optimum(study, settings, problem, best, exact, np.array([], dtype=np.int64), fresh, work)


def _tightened(problem: Problem, centre: Floats, need: int, points: Floats) -> tuple[int, int] | None:
    """Ask more draws to hold and go on from the points of largest margin; None, and all as before, where none holds then."""
    before = problem.assured.need
    known = (problem._known, problem._points, problem._judged)
    good = points[: max(1, np.count_nonzero(problem.least >= 0.0))]
    numbers = problem.look(good)
    order = np.argsort(problem.costs[numbers, 0], kind="stable")
    problem.assured.need = need
    problem.start_again()
    problem.look(centre[None, :])
    problem.look(good[order][:64])
    found = problem.best()
    if found is None:
        problem.assured.need = before
        problem._known, problem._points, problem._judged = known
        return None
    polish(problem, found, False)
    return _rounded(problem)


def _rounded(problem: Problem) -> tuple[int, int]:
    """Return the best round setting near the best point that holds every limit, and the point itself; finer where none does."""
    exact = problem.best()
    assert exact is not None
    for finer in range(FINER):
        near = problem.best(problem.look(nearby(problem.sides, problem.points[exact], finer)))
        if near is not None:
            return near, exact
    return exact, exact


def _two(study: Study, evaluate: Evaluate, settings: OptimumSettings, problem: Problem, centre: Floats) -> Optimum:
    """Return the front between two objectives, its settings verified."""
    work: dict[str, Any] = {"method": "NSGA-II", "polished_by": None, "tightened": 0}
    work["generations"] = spread_out(problem, centre, settings.population, settings.generations, study.seed)
    if not (problem.least >= 0.0).any():
        come_nearest(problem)
    front = front_of(problem.costs, problem.least >= 0.0)
    fresh = {}
    if settings.assurance.probability is not None:
        for k in front[np.unique(np.linspace(0, len(front) - 1, min(SHOWN, len(front))).round().astype(int))] if front.size else ():
            fresh[int(k)] = _verify(study, evaluate, settings, problem.sides, problem.points[k], 0)
    return Optimum(study, settings, problem, None, None, front, fresh, work)


def _verify(study: Study, evaluate: Evaluate, settings: OptimumSettings, sides: tuple[Side, ...], point: Floats, round_: int) -> Verified:
    """Evaluate fresh draws at one setting."""
    row = table_of(sides, point[None, :]).iloc[0].to_dict()
    whole = {**{v.name: study.values[v.sets[0]] for v in study.variables}, **{str(name): float(value) for name, value in row.items()}}
    table = evaluate(draw(study, settings.verify, "latin-hypercube", "optimum", "fresh", round_).at(whole))
    aims = aims_of(study, settings.objectives)(table)
    parts: list[tuple[float, float, float] | None] = []
    for k in range(aims.shape[1]):
        known = aims[np.isfinite(aims[:, k]), k]
        five, half, most = np.quantile(known, [0.05, 0.5, 0.95], method="inverted_cdf") if known.size else (np.nan, np.nan, np.nan)
        parts.append((float(five), float(half), float(most)) if known.size else None)
    return Verified(int(np.count_nonzero(holds(margins(study, table)))), settings.verify, tuple(parts))
