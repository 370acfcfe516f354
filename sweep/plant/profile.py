"""One batch over time."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

import numpy as np

from sweep.kernel import layout as at
from sweep.kernel.engine import march
from sweep.plant import adiabatic, rates, states
from sweep.plant.course import charge_plant
from sweep.plant.onward import segment_at
from sweep.plant.recipe import Charged, has_heat_capacities
from sweep.plant.sense import one_point
from sweep.plant.target import product_mass, productivity_unit, vessel_volume
from sweep.plant.values import Floats
from sweep.study.model import Study

if TYPE_CHECKING:
    import pandas as pd

DRAWN = 401  # times that draw well


def profile(study: Study, point: Mapping[str, float] | None = None, times: Sequence[float] | None = None) -> pd.DataFrame:
    """Return a batch at times (s), in their order, or at times that draw well up to its end; NaN beyond the march's end. SI.

    Columns: time, temperatures, volume, amounts, conversion, heat release, cooling duty, accumulation, MTSR were cooling lost then.
    """
    import pandas as pd

    plant = charge_plant(study, one_point(study, point))
    wanted = np.asarray(times, dtype=np.float64) if times is not None else drawn_times(plant, float(study.values["accuracy.relative"]))
    order = np.argsort(wanted, kind="stable")
    ascending = wanted[order][None, :]
    marched = march(plant.program, plant.blocks, plant.starts, plant.constants, ascending, float(study.values["accuracy.relative"]))
    table = pd.DataFrame(_lines(study, plant, ascending, marched.samples))
    back = np.empty_like(order)
    back[order] = np.arange(order.size)
    return table.iloc[back].reset_index(drop=True)


def drawn_times(plant: Charged, tolerance: float) -> Floats:
    """Return times (s) that draw a batch well: even ones to its end, and the recipe's boundaries."""
    end = batch_end(plant, tolerance)
    times = np.union1d(np.linspace(0.0, end, DRAWN), plant.boundaries[0])
    return times[times <= end]


def batch_end(plant: Charged, tolerance: float) -> float:
    """Return when the batch ends (s)."""
    end = float(plant.constants[0, at.END_FIXED])
    if np.isfinite(end):
        return end
    out = march(plant.program, plant.blocks, plant.starts, plant.constants, None, tolerance).out[0]
    return float(out[at.OUT_END_TIME] if np.isfinite(out[at.OUT_END_TIME]) else out[at.OUT_TIME])


def batch_longest(study: Study, point: Mapping[str, float]) -> tuple[float, float]:
    """Return when the last feed ends and when the march ends (s): between them a batch may end."""
    plant = charge_plant(study, one_point(study, point))
    return float(plant.brought.last_feed()[0]), float(plant.constants[0, at.T_FINAL])


def productivity_of(study: Study, point: Mapping[str, float], table: pd.DataFrame) -> tuple[str, Floats]:
    """Return "kg" or "mol" and the productivity (per m3 and s) were the batch ended at each line of a profile; "" without a product."""
    if study.target is None or study.target.product is None:
        return "", np.zeros(0)
    values = one_point(study, point)
    plant = charge_plant(study, values)
    product = [s.name for s in study.species].index(study.target.product)
    formed = table[f"n_{study.target.product}_mol"].to_numpy() - plant.brought.total()[0, product]
    per = (product_mass(study) or 1.0) / vessel_volume(plant)[0]
    cycle = table["time_s"].to_numpy() + values.get("recipe.turnaround")[0]
    return productivity_unit(study), per * formed / np.where(cycle > 0.0, cycle, np.nan)


def _lines(study: Study, plant: Charged, times: Floats, state: Floats) -> dict[str, Floats]:
    """Return the columns of a profile from states (1, K, R) at times (1, K)."""
    nz, one, count = plant.program.structure.sources.shape[0], np.zeros(1, dtype=int), times.size
    T, T_jacket, known = state[0, :, nz], state[0, :, nz + 1], np.nan_to_num(state, nan=300.0)
    moles = np.where(np.isfinite(T)[:, None], states.amounts_at(plant, one, known, times)[0], np.nan)
    share = states.share_at(plant, one, times)[0]
    volume = plant.brought.volume[0] + plant.brought.feed_volume[0] @ share
    rows = np.zeros(count, dtype=int)
    block = plant.blocks[rows, segment_at(plant, rows, times[0])]
    begins = (block[:, at.JACKET_SET] > 0.5) & (times[0] <= block[:, at.T_START] * (1.0 + 1e-12))  # the sample is of the segment before
    T_jacket = np.where(begins & np.isfinite(T_jacket), block[:, at.JACKET_START], T_jacket)
    has_jacket = (block[:, [at.UA_CONSTANT, at.UA_PER_VOLUME, at.JACKET_CAPACITY_INVERSE]] > 0.0).any(axis=1)
    columns = {"time_s": times[0], "temperature_K": T, "jacket_temperature_K": np.where(has_jacket, T_jacket, np.nan), "volume_m3": volume}
    columns.update({f"n_{s.name}_mol": moles[:, i] for i, s in enumerate(study.species)})
    columns["conversion"] = _conversion(study, plant, share, moles) if study.target is not None else np.full(count, np.nan)
    heated = all(plant.values.has(f"reactions.{r.name}.heat.value") for r in study.reactions)
    now = rates.flow(plant, block, np.repeat(plant.constants[:, at.DELTA], count), np.nan_to_num(moles), np.nan_to_num(T, nan=300.0), volume)
    missing = np.isnan(T) | (not heated)
    columns["heat_release_W"] = np.where(missing, np.nan, now.heat.sum(axis=1))
    duty = rates.cooling_duty(block, now, np.nan_to_num(T, nan=300.0), np.nan_to_num(T_jacket, nan=300.0), volume)
    columns["cooling_duty_W"] = np.where(missing | (not has_heat_capacities(study, plant.values)), np.nan, duty)
    left = states.accumulation(study, plant, one, known, times)[0] if heated and study.reactions else np.full(count, np.nan)
    columns["accumulation"] = np.where(np.isnan(T), np.nan, left)
    columns["mtsr_K"] = _mtsr(study, plant, times[0], state[0]) if study.asks_failure else np.full(count, np.nan)
    return columns


def _mtsr(study: Study, plant: Charged, times: Floats, state: Floats) -> Floats:
    """Return the highest temperature (K) of the synthesis were cooling lost at each time."""
    known = np.flatnonzero(np.isfinite(state).all(axis=1))
    rows, result = np.zeros(known.size, dtype=int), np.full(times.size, np.nan)
    failed = adiabatic.fail(study, plant, rows, times[known], state[known])
    found = adiabatic.run_synthesis(study, plant, failed, float(study.values["accuracy.relative"]))
    result[known] = np.where(found.ok, found.temperature, np.nan)
    return result


def _conversion(study: Study, plant: Charged, share: Floats, moles: Floats) -> Floats:
    assert study.target is not None
    k = [s.name for s in study.species].index(study.target.species)
    brought = plant.brought.charged[0, k] + plant.brought.fed[0, :, k] @ share
    return np.asarray((brought - moles[:, k]) / plant.brought.total()[0, k])
