"""What a batch costs per amount of product, from prices in the study."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING

import numpy as np

from sweep.plant.charge import brought_in
from sweep.plant.chemistry import names
from sweep.plant.target import productivity_unit
from sweep.plant.values import Floats, values_of
from sweep.study.model import Study

if TYPE_CHECKING:
    import pandas as pd

VESSEL_TIME = "vessel_time"


def cost_of(study: Study, points: pd.DataFrame, table: pd.DataFrame, prices: Mapping[str, float]) -> Floats:
    """Return the cost per kg (mol without a molar mass) of product, (N,): all that is brought in and the vessel's cycle, at prices per mol and per s.

    points: inputs alone; table: their responses. NaN where no product is made or the point is not done.
    """
    values = values_of(study, points)
    brought = brought_in(study, values)
    total = brought.total()
    paid = sum((price * total[:, k] for k, name in enumerate(names(study)) if (price := prices.get(name)) is not None), np.zeros(len(points)))
    cycle = table["cycle_time_s"].to_numpy(dtype=np.float64, na_value=np.nan)
    made = table[f"productivity_{productivity_unit(study)}_per_m3_s"].to_numpy(dtype=np.float64, na_value=np.nan) * cycle
    made = made * values.get("vessel.volume", brought.volume + brought.feed_volume.sum(axis=1))
    done = (table["status"] == "done").to_numpy(dtype=bool) & (made > 0.0)
    return np.where(done, (paid + prices.get(VESSEL_TIME, 0.0) * cycle) / np.where(done, made, 1.0), np.nan)
