"""What a cooling failure does to the set-point: the worst moments, the class, and the time there is to act."""

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from sweep.plan import set_point
from sweep.plant import FailurePath, class_sentence, failure_path, failure_times, limits
from sweep.study.model import Study

_FIGURES = (
    "mtsr_K", "mtsr_time_s", "tmr_ad_s", "tmr_ad_censored", "tmr_ad_time_s", "tmr_ad_closed_form_s", "td24_K", "td24_censored", "mtt_K",
    "criticality_class", "accumulation", "adiabatic_rise_synthesis_K", "adiabatic_rise_decomposition_K",
)  # fmt: skip
_TOO_LONG = 2.0  # a closed form so many times longer than the march is dangerous


@dataclass(frozen=True)
class CoolingFailure:
    """row: the set-point's responses; times: figures against the time of failure; path: after the worst one."""

    study: Study
    row: pd.Series
    times: pd.DataFrame
    path: FailurePath | None

    def summary(self) -> dict[str, Any]:
        """Return the block failure."""
        block = {name: _plain(self.row[name]) for name in _FIGURES}
        block["class_reason"] = class_sentence(block["criticality_class"], str(self.row["reason"]))
        settings = self.study.failure
        block["feeds"] = settings.feeds if settings else "stop"
        block["feeds_stop_after_s"] = settings.feeds_stop_after if settings else 0.0
        block["wall"] = settings.wall if settings else False
        block["horizon_s"] = self.study.values["failure.horizon"]
        block["max_temperature_K"] = _plain(self.row["max_temperature_K"])
        if self.path is not None:
            reaches = [{"name": name, "temperature_K": _plain(level), "after_s": after} for name, level, after in self.path.reaches]
            block["path"] = {"failure_time_s": self.path.failure_time, "reaches": reaches}
        block["cautions"] = self._cautions()
        return block

    def _cautions(self) -> list[str]:
        """Return what a reader of these figures must know."""
        closed, tmr = self.row["tmr_ad_closed_form_s"], self.row["tmr_ad_s"]
        if pd.isna(closed) or pd.isna(tmr) or bool(self.row["tmr_ad_censored"]) or float(closed) < _TOO_LONG * float(tmr):
            return []
        ratio = float(closed) / float(tmr) if float(tmr) > 0.0 else np.inf
        return [
            f"the usual closed form of the time to maximum rate is {ratio:.3g} times longer than the march: the decomposition speeds "
            "itself up (autocatalysis), and the closed form must not be used"
        ]

    def tables(self) -> dict[str, pd.DataFrame]:
        """Return figures against the time of failure, and the path after the worst."""
        return {"failure_times": self.times} | ({} if self.path is None else {"failure_path": self.path.lines})


def _plain(value: Any) -> Any:
    if pd.isna(value):
        return None
    return value.item() if hasattr(value, "item") else value


def levels_of(study: Study) -> dict[str, float]:
    """Return the temperatures (K) whose reaching after a failure is timed."""
    levels = {}
    if "failure.mtt" in study.values:
        levels["MTT"] = study.values["failure.mtt"]
    for row in limits(study):
        if row.response == "max_temperature_K" and row.sense == "at_most":
            levels[f"limit {row.label}"] = row.bound
    return levels


def fail_cooling(study: Study, row: pd.Series, point: dict[str, float] | None = None) -> CoolingFailure:
    """Return what a cooling failure does to the set-point, `row` being its responses."""
    point = set_point(study) if point is None else point
    worst = row["mtsr_time_s"]
    path = failure_path(study, point, float(worst), levels_of(study)) if not pd.isna(worst) and row["status"] == "done" else None
    return CoolingFailure(study, row, failure_times(study, point), path)
