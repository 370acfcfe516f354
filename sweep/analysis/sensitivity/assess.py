"""Sensitivities of a study, by screening, variance shares, slopes and halved spreads, as one record."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from sweep.analysis.sensitivity.methods import Found, screen, screening_cube, seed_from, shares_cube, variance_shares
from sweep.analysis.sensitivity.slopes import slopes, stepped
from sweep.analysis.sensitivity.space import Space, asked_responses, space_of, whole_numbers
from sweep.analysis.sensitivity.spread import halved_spreads
from sweep.base.seeds import stream
from sweep.chance import Share
from sweep.plant import limits
from sweep.study.model import Study
from sweep.study.settings import SensitivitySettings

Evaluate = Callable[[pd.DataFrame], pd.DataFrame]
_MANY_LOST = 0.05


@dataclass(frozen=True)
class Sensitivity:
    """units: response -> unit; screened, shared: response -> what was found; spread: probability, and its rise as each spread is halved."""

    study: Study
    settings: SensitivitySettings
    space: Space
    units: dict[str, str]
    screened: dict[str, Found]
    shared: dict[str, Found]
    local: pd.DataFrame
    spread: tuple[Share, pd.DataFrame] | None
    marches: int

    def summary(self) -> dict[str, Any]:
        """Return the block sensitivity."""
        found = [
            {
                "response": name, "unit": self.units[name], "undefined": one.undefined, "blocks": one.planned, "used": one.used,
                "shares": [] if one.undefined else one.rows.sort_values("total", ascending=False, kind="stable").to_dict("records"),
            }
            for name, one in self.shared.items()
        ]  # fmt: skip
        halved: dict[str, Any] = {"not_assessed": self._why_not_halved()}
        if self.spread is not None:
            halved = {**self.spread[0].summary(), "inputs": self.spread[1].to_dict("records")}
        return {
            "over": self.settings.over, "inputs": list(self.space.labels), "grouped": self.space.grouped, "confidence": self.settings.confidence,
            "responses": found, "halved_spread": halved, "marches": self.marches, "cautions": self._cautions(),
        }  # fmt: skip

    def _why_not_halved(self) -> str:
        if self.settings.over == "variables":
            return "the variables' ranges are no uncertainty"
        return "the study has no limits and no target: there is no probability that could rise"

    def _cautions(self) -> list[str]:
        found = []
        lost = max((1.0 - one.used / one.planned for one in (*self.screened.values(), *self.shared.values()) if one.planned), default=0.0)
        if lost > _MANY_LOST:
            found.append(f"up to {100.0 * lost:.3g} % of the blocks held a failed point or a null and were left out: shares are of the others only")
        if self.space.grouped:
            found.append("correlated inputs are varied together: their share is that of the group, and cannot be told apart without assumptions")
        return found

    def tables(self) -> dict[str, pd.DataFrame]:
        """Return screening, variance shares, slopes and halved spreads."""
        tables = {"sensitivity_local": self.local}
        columns = {
            "sensitivity_screening": ["input", "mean_size", "mean_size_interval", "mean", "deviation"],
            "sensitivity_shares": ["input", "first", "first_low", "first_high", "total", "total_low", "total_high"],
        }
        for name, found in (("sensitivity_screening", self.screened), ("sensitivity_shares", self.shared)):
            parts = [one.rows.assign(response=response, unit=self.units[response]) for response, one in found.items() if one.undefined is None]
            head = ["response", "unit", *columns[name]]
            tables[name] = pd.concat(parts, ignore_index=True)[head] if parts else pd.DataFrame(columns=head)
        return tables | ({} if self.spread is None else {"sensitivity_spread": self.spread[1]})


def assess_sensitivity(study: Study, evaluate: Evaluate) -> Sensitivity:
    """Return which inputs decide, from some (G + 1) trajectories, (G + 2) blocks and (inputs + 1) draws of evaluated points, G groups of inputs."""
    settings, units = study.sensitivity, asked_responses(study)
    assert settings is not None
    space, tolerance = space_of(study, settings.over), study.values["accuracy.relative"]
    seeds = {name: seed_from(stream(study.seed, "sensitivity", name)) for name in ("screening", "shares", "bootstrap")}
    marches = 0

    def counted(points: pd.DataFrame) -> pd.DataFrame:
        nonlocal marches
        marches += len(points)
        return evaluate(points)

    if space.alone:
        screened = shared = {name: Found(pd.DataFrame(), 0, 0, "all inputs are correlated: one group, which decides alone") for name in units}
    else:
        cube = screening_cube(space, settings.trajectories, seeds["screening"])
        table = counted(space.points(space.within(cube)))
        screened = {name: screen(space, cube, whole_numbers(table, name), settings.confidence, seeds["bootstrap"], tolerance) for name in units}
        table = counted(space.points(shares_cube(space, settings.blocks, seeds["shares"])))
        shared = {name: variance_shares(space, whole_numbers(table, name), settings.confidence, seeds["bootstrap"], tolerance) for name in units}
    local = slopes(study, counted(stepped(study)), units)
    halved = settings.over == "uncertain" and bool(limits(study))
    spread = halved_spreads(study, counted, settings.draws, settings.confidence) if halved else None
    return Sensitivity(study, settings, space, units, screened, shared, local.replace(np.inf, np.nan), spread, marches)
