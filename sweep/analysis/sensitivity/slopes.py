"""Slopes at the set-point: what one step of each input alone does to each response."""

from __future__ import annotations

import numpy as np
import pandas as pd

from sweep.analysis.sensitivity.space import whole_numbers
from sweep.base.units import si_unit
from sweep.plan import set_point
from sweep.plan.draws import quantile
from sweep.study.model import Study

STEP = 0.1  # of an input's spread; at 1e-6 of the march the difference is still a thousand times its error
_OF_RANGE = 0.01  # of a variable's range
_SIDE = 0.8413447460685429  # a standard deviation above the median, as a probability


def inputs_at(study: Study) -> list[tuple[str, float, float, float, str]]:
    """Return what has a slope: name, value, step, spread (NaN for a variable) and unit, SI; the uncertain inputs and the variables."""
    found = []
    for one in study.uncertain:
        ends = np.quantile(one.table, [1.0 - _SIDE, _SIDE]) if one.table else quantile(one, np.array([1.0 - _SIDE, _SIDE]))
        spread = 0.5 * float(ends[1] - ends[0])
        if spread > 0.0:
            found.append((one.name, one.centre, STEP * spread, spread, si_unit(study.dimensions[one.of])))
    point = set_point(study)
    for v in study.variables:
        found.append((v.name, point[v.name], _OF_RANGE * (v.high - v.low), np.nan, si_unit(study.dimensions[v.sets[0]])))
    return found


def stepped(study: Study) -> pd.DataFrame:
    """Return the points: the set-point, then each input a step up, then each a step down; inputs at the written value else."""
    rows, point = inputs_at(study), set_point(study)
    base = {**point, **{one.name: one.centre for one in study.uncertain}}
    table = pd.DataFrame([base] * (2 * len(rows) + 1))
    for k, (name, value, step, _, _) in enumerate(rows):
        table.loc[1 + k, name] = value + step
        table.loc[1 + len(rows) + k, name] = value - step
    return table


def slopes(study: Study, table: pd.DataFrame, columns: dict[str, str]) -> pd.DataFrame:
    """Return for each response and input: slope (SI), elasticity (relative change over relative change; null where either is a temperature or
    zero), and the change by one spread of the input. table: `stepped`, evaluated."""
    rows, found = inputs_at(study), []
    for column, unit in columns.items():
        value = whole_numbers(table, column)
        up, down = value[1 : 1 + len(rows)], value[1 + len(rows) :]
        for k, (name, at, step, spread, own) in enumerate(rows):
            slope = float(up[k] - down[k]) / (2.0 * step)
            plain = "K" not in (unit, own) and at != 0.0 and value[0] != 0.0
            found.append((column, unit, name, own, slope, slope * at / float(value[0]) if plain else np.nan, slope * spread))
    return pd.DataFrame(found, columns=["response", "unit", "input", "input_unit", "slope", "elasticity", "by_one_spread"])
