"""One batch over time."""

from collections.abc import Mapping, Sequence

import numpy as np
import pandas as pd

from sweep.kernel import layout as at
from sweep.kernel.engine import march
from sweep.plant import states
from sweep.plant.recipe import charge_plant
from sweep.plant.values import values_of
from sweep.study.model import Study

DRAWN = 401  # times that draw well


def profile(study: Study, point: Mapping[str, float] | None = None, times: Sequence[float] | None = None) -> pd.DataFrame:
    """Return a batch at times (s), in their order: time, temperatures, volume, amounts, conversion, accumulation; SI."""
    point = dict(point or {})
    frame = pd.DataFrame({name: [value] for name, value in point.items()}, index=[0])
    plant = charge_plant(study, values_of(study, frame))
    final = float(plant.constants[0, at.T_FINAL])
    wanted = np.asarray(times, dtype=np.float64) if times is not None else np.union1d(np.linspace(0.0, final, DRAWN), plant.boundaries[0])
    order = np.argsort(wanted, kind="stable")
    ascending = wanted[order][None, :]
    marched = march(plant.program, plant.blocks, plant.starts, plant.constants, ascending, float(study.values["accuracy.relative"]))
    state, nz = marched.samples, plant.program.structure.sources.shape[0]
    moles = states.amounts(plant, state, ascending)[0]
    columns = {"time_s": ascending[0], "temperature_K": state[0, :, nz]}
    jacket = study.cooling_kind in ("jacket", "coolant")
    columns["jacket_temperature_K"] = state[0, :, nz + 1] if jacket else np.full(ascending.size, np.nan)
    share = plant.brought.share(ascending)[0]
    columns["volume_m3"] = plant.brought.volume[0] + plant.brought.feed_volume[0] @ share
    for i, species in enumerate(study.species):
        columns[f"n_{species.name}_mol"] = moles[:, i]
    if study.target is not None:
        k = [s.name for s in study.species].index(study.target.species)
        brought = plant.brought.charged[0, k] + plant.brought.fed[0, :, k] @ share
        columns["conversion"] = (brought - moles[:, k]) / plant.brought.total()[0, k]
    if study.reactions and all(plant.values.has(f"reactions.{r.name}.heat.value") for r in study.reactions):
        columns["accumulation"] = states.accumulation(study, plant, np.nan_to_num(state), ascending)[0]
    table = pd.DataFrame(columns)
    back = np.empty_like(order)
    back[order] = np.arange(order.size)
    return table.iloc[back].reset_index(drop=True)
