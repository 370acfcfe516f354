"""The limits of a study, and by how much each point holds them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from sweep.plant.values import Floats

if TYPE_CHECKING:
    import pandas as pd
from sweep.study.model import Study


@dataclass(frozen=True)
class LimitRow:
    """One bound on one response (SI): name as in the study, response (column), sense "at_most" or "at_least", unit of the response ("": none)."""

    name: str
    response: str
    sense: str
    bound: float
    unit: str
    label: str


def limits(study: Study) -> tuple[LimitRow, ...]:
    """Return every bound of the study; the target counts as the limit `conversion`."""
    from sweep.plant.responses import responses

    units = {r.column: "" if r.unit == "1" else r.unit for r in responses(study)}
    both = {x.name for x in study.limits if sum(y.name == x.name for y in study.limits) > 1}
    rows = []
    if study.target is not None and "target.conversion" in study.values:
        label = "conversion at_least" if any(x.name == "conversion" and x.sense == "at_most" for x in study.limits) else "conversion"
        rows.append(LimitRow("conversion", "conversion", "at_least", study.values["target.conversion"], "", label))
    for limit in study.limits:
        target = limit.name == "conversion" and limit.sense == "at_least"
        label = f"{limit.name} {limit.sense}" if limit.name in both or (limit.name == "conversion" and rows) else limit.name
        bound = study.values[f"limits.{limit.name}.{limit.sense}"]
        if target and rows and rows[0].name == "conversion":
            rows[0] = LimitRow("conversion", "conversion", "at_least", max(bound, rows[0].bound), "", rows[0].label)
            continue
        rows.append(LimitRow(limit.name, limit.response, limit.sense, bound, units[limit.response], label))
    return tuple(rows)


def margins(study: Study, table: pd.DataFrame) -> Floats:
    """Return by how much each limit holds, (N, L) in the response's unit: positive or zero where it holds; NaN where the response
    is null or the point is not done."""
    rows = limits(study)
    result = np.full((len(table), len(rows)), np.nan)
    for k, row in enumerate(rows):
        scenario, dot, _ = row.response.partition(".")
        done = (table[f"{scenario}.status" if dot else "status"] == "done").to_numpy(dtype=bool)
        value = table[row.response].to_numpy(dtype=np.float64, na_value=np.nan)
        result[:, k] = np.where(done, value - row.bound if row.sense == "at_least" else row.bound - value, np.nan)
    return result


def holds(margin: Floats) -> np.ndarray:
    """Return where every limit holds, (N,), from margins (N, L)."""
    return np.asarray((margin >= 0.0).all(axis=1))
