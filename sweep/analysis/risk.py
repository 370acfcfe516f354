"""Risk at the set-point: the probability that each limit holds, and what decides it, from draws of all that is uncertain."""

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sweep.base.seeds import stream
from sweep.chance import Driver, Rare, Share, drivers, rare_failure, share, upper_rank, wilson
from sweep.chance.drivers import DEFINITION
from sweep.plan import Draws, dimensions_of, draw, inputs_of, set_point
from sweep.plant import LimitRow, holds, limits, margins, responses
from sweep.study.model import Study
from sweep.study.settings import RiskSettings

Evaluate = Callable[[pd.DataFrame], pd.DataFrame]
RARE = 1e-3  # failures that are rarer are hardly seen in the draws
LEVELS = (0.01, 0.05, 0.25, 0.5, 0.75, 0.95, 0.99)
COVERAGE = 0.95  # of batches that are to reach the target within the time found
_CURVE = 201  # points of an exceedance curve
_TAILS = (
    "Draws show what the distributions written in the study imply; their tails are assumed, and what is not written as uncertain is taken as certain."
)


@dataclass(frozen=True)
class Risk:
    """drawn: N draws' inputs and responses; margin (N, L); rare: label -> failures that the draws hardly show."""

    study: Study
    settings: RiskSettings
    rows: tuple[LimitRow, ...]
    drawn: pd.DataFrame
    margin: NDArray[np.float64]
    rare: dict[str, Rare]

    def _share(self, holding: NDArray[np.bool_]) -> Share:
        return share(holding, self.settings.confidence, self.settings.interval)

    def _driven(self, holding: NDArray[np.bool_]) -> tuple[Driver, ...]:
        return drivers(self.drawn[list(inputs_of(self.study))], holding)

    @cached_property
    def _lines(self) -> list[tuple[dict[str, Any], NDArray[np.bool_], tuple[Driver, ...]]]:
        """Each limit, which draws hold it (N,), and what drives its failures."""
        holding = self.margin >= 0.0
        return [
            ({"label": row.label, "name": row.name, "sense": row.sense, "bound": row.bound, "unit": row.unit}, hold, self._driven(hold))
            for row, hold in zip(self.rows, holding.T, strict=True)
        ]

    def _limits(self) -> list[dict[str, Any]]:
        return [{**line, **self._share(hold).summary(), "drivers": _strongest(driven)} for line, hold, driven in self._lines]

    def batch_time(self) -> dict[str, Any] | None:
        """Return the time within which 95 % of batches reach the target: the draws' own quantile, and the order statistic that bounds it."""
        if self.study.target is None or "target.conversion" not in self.study.values:
            return None
        time = np.where(self.drawn["status"] == "done", self.drawn["time_to_target_s"].to_numpy(dtype=np.float64, na_value=np.nan), np.nan)
        ranked = np.sort(np.where(np.isnan(time), np.inf, time))
        rank = upper_rank(ranked.size, COVERAGE, self.settings.confidence)
        found = float(ranked[int(np.ceil(COVERAGE * ranked.size)) - 1])
        bound = np.inf if rank is None else float(ranked[rank - 1])
        reason = None
        if not np.isfinite(bound):
            never = int(np.isinf(ranked).sum())
            reason = f"{never} of {ranked.size} draws never reach the target within the time marched"
            reason = "too few draws for a bound" if rank is None else reason
        return {
            "coverage": COVERAGE, "confidence": self.settings.confidence, "time_s": found if np.isfinite(found) else None,
            "bound_s": bound if np.isfinite(bound) else None, "rank": rank, "draws": ranked.size,
            "never": int(np.isinf(ranked).sum()), "reason": reason,
        }  # fmt: skip

    def _cautions(self) -> list[str]:
        found = [_TAILS]
        failed = int((self.drawn["status"] == "failed").sum())
        if failed:
            reason = str(self.drawn.loc[self.drawn["status"] == "failed", "reason"].iloc[0])
            found.append(f"{failed} of {len(self.drawn)} draws could not be computed and count as not holding; the first: {reason}.")
        if self.settings.sampling == "sobol":
            found.append("The intervals are those of independent draws; a Sobol' sequence is usually, not provably, nearer to the truth than that.")
        return found

    def summary(self) -> dict[str, Any]:
        """Return the block risk."""
        settings = self.settings
        statuses = {status: int((self.drawn["status"] == status).sum()) for status in ("done", "runaway", "failed")}
        together = holds(self.margin) if self.rows else None
        return {
            "draws": len(self.drawn), "sampling": settings.sampling, "confidence": settings.confidence, "interval": settings.interval, **statuses,
            "inputs": list(inputs_of(self.study)), "limits": self._limits(),
            "all_hold": None if together is None else {**self._share(together).summary(), "drivers": _strongest(self._driven(together))},
            "batch_time": self.batch_time(), "rare": [{"label": label, **one.summary()} for label, one in self.rare.items()],
            "definition": DEFINITION, "cautions": self._cautions(),
        }  # fmt: skip

    def tables(self) -> dict[str, pd.DataFrame]:
        """Return probabilities, percentiles, exceedance curves and drivers."""
        shares = [{"label": line["label"], **self._share(hold).summary()} for line, hold, _ in self._lines]
        if self.rows:
            shares.append({"label": "all limits", **self._share(holds(self.margin)).summary()})
        columns = ["label", "holding", "draws", "probability", "low", "high"]
        found = [(line["label"], one.input, one.distance, one.shift, one.noise) for line, _, driven in self._lines for one in driven]
        return {
            "risk_limits": pd.DataFrame(shares, columns=columns),
            "risk_percentiles": percentiles(self.study, self.drawn),
            "risk_exceedance": self.exceedance(),
            "risk_drivers": pd.DataFrame(found, columns=["limit", "input", "distance", "shift", "noise"]),
        }

    def exceedance(self) -> pd.DataFrame:
        """Return for each limited response, over its values, how probable it is that the response lies beyond: above for a limit `at_most`,
        below for one `at_least`. A draw without a value lies beyond every one."""
        parts = []
        tail = np.geomspace(1.0 / max(len(self.drawn), 2), 0.5, _CURVE // 2)  # the curve is read where few draws lie beyond
        levels = np.unique(np.concatenate([tail, np.linspace(0.0, 1.0, _CURVE // 2)]))
        for k, row in enumerate(self.rows):
            size = self.margin[:, k]
            beyond = np.sort(np.where(np.isnan(size), -np.inf, size))
            known = beyond[np.isfinite(beyond)]
            if not known.size:
                continue
            at = np.unique(known[np.maximum(_rank(levels, known.size), 0)])
            counts = np.searchsorted(beyond, at, side="left")
            ends = np.array([wilson(int(c), beyond.size, self.settings.confidence) for c in counts])
            value = row.bound - at if row.sense == "at_most" else row.bound + at
            part = {"limit": row.label, "sense": row.sense, "value": value, "unit": row.unit, "bound": row.bound, "beyond": counts / beyond.size}
            parts.append(pd.DataFrame(part).assign(low=ends[:, 0], high=ends[:, 1]).sort_values("value", kind="stable"))
        columns = ["limit", "sense", "value", "unit", "bound", "beyond", "low", "high"]
        return pd.concat(parts, ignore_index=True) if parts else pd.DataFrame(columns=columns)


def _strongest(driven: tuple[Driver, ...]) -> list[dict[str, Any]]:
    """Return the inputs that drive a limit's failures beyond chance, the strongest first."""
    return [{"input": one.input, "distance": one.distance, "shift": one.shift} for one in driven if one.distance > one.noise]


def percentiles(study: Study, drawn: pd.DataFrame) -> pd.DataFrame:
    """Return percentiles of every response (SI, the unit in its name) over the draws that are done and have a value; the others are counted."""
    names = [one.column for one in responses(study) if one.kind in ("float", "int")]
    value = drawn.loc[drawn["status"] == "done", names].to_numpy(dtype=np.float64, na_value=np.nan)
    ranked = np.sort(np.where(np.isfinite(value), value, np.nan), axis=0)  # nulls last
    known = np.isfinite(ranked).sum(axis=0)
    found = {"response": names, "with_value": known, "without": len(drawn) - known}
    for level in LEVELS:
        place = np.maximum(_rank(level, known), 0)[None, :]
        cells = np.take_along_axis(ranked, place, axis=0)[0] if len(ranked) else np.full(len(names), np.nan)
        found[f"p{100 * level:02.0f}"] = cells
    return pd.DataFrame(found)


def _rank(level: float | NDArray[np.float64], count: int | NDArray[np.intp]) -> Any:
    """Return which of so many sorted values (from 0) is the quantile: the smallest that at least the share `level` does not exceed."""
    return np.ceil(level * np.asarray(count) - 1e-9).astype(np.intp) - 1


def assess_risk(study: Study, evaluate: Evaluate) -> Risk:
    """Draw what is uncertain and evaluate it at the set-point; failures that the draws hardly show are sought by subset simulation."""
    settings, point, rows = study.risk, set_point(study), limits(study)
    assert settings is not None
    drawn = evaluate(draw(study, settings.draws, settings.sampling, "risk").at(point))
    margin = margins(study, drawn)
    return Risk(study, settings, rows, drawn, margin, _rare(study, settings, evaluate, point, rows, margin))


def _rare(
    study: Study, settings: RiskSettings, evaluate: Evaluate, point: dict[str, float], rows: tuple[LimitRow, ...], margin: NDArray[np.float64]
) -> dict[str, Rare]:
    """Return the probabilities of failing that are below 1e-3 in the draws, sought for all limits together or for each."""
    failing = np.count_nonzero(~(margin >= 0.0), axis=0) / max(len(margin), 1)
    sought = {"all limits": np.arange(len(rows))} if settings.rare == "together" else {row.label: np.array([k]) for k, row in enumerate(rows)}
    if settings.rare == "none" or not rows:
        return {}
    if settings.rare == "together":
        failing = np.array([np.count_nonzero(~holds(margin)) / max(len(margin), 1)])
    spread = _spreads(margin, np.array([row.bound for row in rows]), study.values["accuracy.relative"])
    bound = 1.0 - share(np.ones(len(margin), dtype=bool), settings.confidence, settings.interval).low

    def least(which: NDArray[np.intp]) -> Callable[[NDArray[np.float64]], NDArray[np.float64]]:
        def margin_of(score: NDArray[np.float64]) -> NDArray[np.float64]:
            from scipy.special import ndtr

            found = margins(study, evaluate(Draws(study, ndtr(score)).at(point)))[:, which]
            scaled = np.where(spread[which] > 0.0, found / np.where(spread[which] > 0.0, spread[which], 1.0), np.where(found >= 0.0, np.inf, -np.inf))
            return np.asarray(np.where(np.isnan(found).any(axis=1), np.nan, scaled.min(axis=1)))

        return margin_of

    dimensions, found = len(dimensions_of(study)), dict[str, Rare]()
    for (label, which), seen in zip(sought.items(), failing, strict=True):
        if seen < RARE:
            one = rare_failure(least(which), dimensions, settings.rare_draws, settings.confidence, stream(study.seed, "rare", label))
            bounded = one.probability is None and seen == 0.0  # then the draws' own bound stands too
            found[label] = replace(one, high=min(one.high, bound)) if bounded else one
    return found


def _spreads(margin: NDArray[np.float64], bound: NDArray[np.float64], tolerance: float) -> NDArray[np.float64]:
    """Return by how much each margin (N, L) varies, (L,), so that limits in different units can be compared; 0 where one only holds or does not,
    as that of a target at which the batch is ended: it does not move beyond the march's tolerance."""
    found = np.zeros(margin.shape[1])
    for k in range(found.size):
        known = margin[np.isfinite(margin[:, k]), k]
        if known.size and np.ptp(known) > 10.0 * tolerance * abs(bound[k]):
            found[k] = known.std()
    return found
