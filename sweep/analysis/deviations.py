"""The deviation table: what each scenario does to one batch, the most dangerous first."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from sweep.base.units import show
from sweep.plant import Deviated, LimitRow, deviations_of, limits
from sweep.plant.told_events import cause_of, effect_of, set_of
from sweep.study.model import Study

_FIGURES = (
    "max_temperature_K", "time_of_max_temperature_s", "mtsr_K", "tmr_ad_s", "tmr_ad_censored", "criticality_class", "accumulation", "conversion",
)  # fmt: skip
AS_WRITTEN = "as written"


@dataclass(frozen=True)
class Deviations:
    """found: the batch as written and under each scenario; rows: the study's limits."""

    study: Study
    found: tuple[Deviated, ...]
    rows: tuple[LimitRow, ...]

    def lines(self) -> list[dict[str, Any]]:
        """Return a line for the recipe as written and for each scenario: those that did not come to their end first, then by the margin of
        the highest temperature to the lower of its limit and MTT, smallest first."""
        lines = [self._line(one) for one in self.found]

        def order(line: dict[str, Any]) -> tuple[bool, float]:
            margin = line["margin_K"] if line["margin_K"] is not None else -(line["max_temperature_K"] or 0.0)
            return line["status"] == "done", margin

        return sorted(lines, key=order)

    def _line(self, one: Deviated) -> dict[str, Any]:
        row, line = one.row, dict[str, Any]()
        line["scenario"] = AS_WRITTEN if one.scenario is None else one.scenario.name
        line["deviates"] = "" if one.scenario is None else "; ".join(set_of(self.study, one.scenario))
        line["begins_s"], line["status"], line["reason"] = one.begins, str(row["status"]), str(row["reason"])
        line.update({name: _plain(row.get(name)) for name in _FIGURES})
        product, worst = self._by_product(row)
        line["by_product"], line["per_product"] = product, worst
        line["reaches"] = [{"name": name, "temperature_K": level, "after_s": after} for name, level, after in one.reaches]
        line["margin_K"] = self._margin(one)
        line["events"] = self._events(one)
        line["broken"] = self._broken(one)
        line["holds"] = line["status"] == "done" and not line["broken"]
        return line

    def _margin(self, one: Deviated) -> float | None:
        """Return how far the highest temperature stays below the lower of its limit and MTT (K)."""
        highest, mtt = _plain(one.row["max_temperature_K"]), self.study.values.get("failure.mtt", np.inf)
        limit = self._limits(one).get(("max_temperature_K", "at_most"))
        lower = min(mtt, limit.bound) if limit is not None else mtt
        return lower - highest if np.isfinite(lower) and highest is not None else None

    def _limits(self, one: Deviated) -> dict[tuple[str, str], LimitRow]:
        """Return the limits that count: those on the scenario itself take the place of the recipe's own."""
        name = "" if one.scenario is None else f"{one.scenario.name}."
        own = {(row.response.removeprefix(name), row.sense): row for row in self.rows if name and row.response.startswith(name)}
        return {(row.response, row.sense): row for row in self.rows if "." not in row.response} | own

    def _by_product(self, row: pd.Series) -> tuple[str | None, float | None]:
        """Return the by-product of which there is most per mole of product, and how much."""
        target = self.study.target
        made = {s.name for r in self.study.reactions for s in self.study.species if r.stoichiometry.get(s.name, 0.0) > 0.0}
        kept = {str(name).removeprefix("per_product_"): _plain(value) for name, value in row.items() if str(name).startswith("per_product_")}
        own = {name: value for name, value in kept.items() if value is not None and name in made and not self._beside(name)}
        if target is None or not own:
            return None, None
        worst = max(own, key=lambda name: own[name] or 0.0)
        return worst, own[worst]

    def _beside(self, name: str) -> bool:
        """Tell whether a species comes with the product itself, in the reaction that makes it."""
        assert self.study.target is not None
        product = str(self.study.target.product)
        return any(r.stoichiometry.get(product, 0.0) > 0.0 and r.stoichiometry.get(name, 0.0) > 0.0 for r in self.study.reactions)

    def _events(self, one: Deviated) -> list[dict[str, Any]]:
        """Return what the recipe's own events by condition did: cause, effect, when they acted; those that did not fire too."""
        found = []
        for fired in one.fired:
            event = one.study.events[fired.event]
            if event.time is None:
                cause, effect = cause_of(self.study, event), effect_of(self.study, event)
                found.append({"cause": cause, "effect": effect, "met_s": fired.met, "acts_s": fired.acts})
        return found

    def _broken(self, one: Deviated) -> list[str]:
        """Return the limits that do not hold."""
        name, broken = "" if one.scenario is None else f"{one.scenario.name}.", []
        for (response, sense), row in self._limits(one).items():
            value = _plain(one.row.get(response))
            if value is None or (value < row.bound if sense == "at_least" else value > row.bound):
                broken.append(row.label.removeprefix(name))
        return broken

    def summary(self) -> dict[str, Any]:
        """Return the block deviations."""
        return {"table": self.lines()}

    def tables(self) -> dict[str, pd.DataFrame]:
        """Return the table with a line a scenario."""
        frame = []
        for line in self.lines():
            flat = {k: v for k, v in line.items() if k not in ("reaches", "events", "broken")}
            flat.update({f"after_{r['name'].replace(' ', '_')}_s": r["after_s"] for r in line["reaches"]})
            flat["events"] = "; ".join(f"{e['cause']}: {e['effect']} ({_when(e['acts_s'])})" for e in line["events"])
            flat["does_not_hold"] = ", ".join(line["broken"])
            frame.append(flat)
        return {"deviations": pd.DataFrame(frame)}


def _when(seconds: float | None) -> str:
    return "did not act" if seconds is None else f"after {show(seconds, 'min')}"


def _plain(value: Any) -> Any:
    if value is None or pd.isna(value):
        return None
    value = value.item() if hasattr(value, "item") else value
    return None if isinstance(value, float) and not np.isfinite(value) else value


def look_at_deviations(study: Study, point: Mapping[str, float]) -> Deviations:
    """March one batch (SI) as written and under each scenario."""
    return Deviations(study, deviations_of(study, point), limits(study))
