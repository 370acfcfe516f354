"""Points that cannot be computed: each a failed row with its reason, and no number beside it.

A point is refused before it is marched; the written set-point stands in for it, so that its neighbours are marched as ever.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from sweep.base.errors import SweepError
from sweep.base.status import BAD_INPUT, OUTCOMES
from sweep.plant.charge import brought_in
from sweep.plant.chemistry import names
from sweep.plant.values import Values, values_of
from sweep.study.model import Study

if TYPE_CHECKING:
    import pandas as pd

SLACK = 1e-9  # relative; what a volume may exceed by rounding


def sensible_values(study: Study, points: pd.DataFrame) -> Values:
    """Return the quantities of each point, SI; `refused` holds the points that cannot be computed. SweepError as `values_of`."""
    values = values_of(study, points)
    refused = dict(values.refused)
    for bad, sentence in impossible(study, values):
        for n in np.flatnonzero(bad):
            refused.setdefault(int(n), sentence)
    return values.refusing(refused, study.values) if refused else values


def one_point(study: Study, point: Mapping[str, float] | None) -> Values:
    """Return the quantities of a single point, SI; SweepError where it cannot be computed."""
    import pandas as pd

    values = sensible_values(study, pd.DataFrame({name: [value] for name, value in (point or {}).items()}, index=[0]))
    for reason in values.refused.values():
        raise SweepError(f"this point cannot be computed: {reason}")
    return values


def impossible(study: Study, values: Values) -> list[tuple[NDArray[np.bool_], str]]:
    """Return masks (N,) of the points whose recipe cannot be carried out, each with its sentence."""
    brought = brought_in(study, values)
    amounts, fill = brought.charged, brought.volume + brought.feed_volume.sum(axis=1)
    masks = [
        (amounts.min(axis=1) < -SLACK * np.abs(amounts).sum(axis=1), "recipe.charge.balance: nothing is left for the balance"),
        (~(amounts.sum(axis=1) > 0.0), "recipe.charge: nothing is charged"),
    ]
    if values.has("vessel.volume"):
        masks.append((fill > values.get("vessel.volume") * (1.0 + SLACK), "vessel.volume: the fill is above the vessel's volume"))
    if study.target is not None:
        target = brought.total()[:, names(study).index(study.target.species)]
        masks.append((~(target > 0.0), f"target.species: no {study.target.species} is brought in"))
    return masks


def blank(values: Values, table: pd.DataFrame) -> pd.DataFrame:
    """Return responses with the refused points as failed rows: status, reason, and null for everything else."""
    import pandas as pd

    if not values.refused:
        return table
    outcome, refused = OUTCOMES[BAD_INPUT], pd.Series(np.isin(np.arange(values.count), list(values.refused)), index=table.index)
    result = table.mask(refused)
    why = [f"{outcome.sentence}: {values.refused[n]}" if n in values.refused else "" for n in range(values.count)]
    result["status"] = table["status"].mask(refused, outcome.status)
    result["reason"] = table["reason"].mask(refused, pd.Series(why, index=table.index))
    return result
