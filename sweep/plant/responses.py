"""The responses of a batch: names, units, and how each comes from what a march left."""

from typing import NamedTuple

import numpy as np
import pandas as pd

from sweep.base.status import DONE, OUTCOMES, UNBALANCED
from sweep.kernel import layout as at
from sweep.kernel.engine import Marched, march
from sweep.plant import states
from sweep.plant.recipe import TOO_HOT, Charged, charge_plant, has_heat_capacities
from sweep.plant.values import Floats, values_of
from sweep.study.model import Study

ACCUMULATION_TIMES = 65  # evenly over the march, beside the recipe's own boundaries
BALANCE = 1e-3  # an energy balance worse than this is a failed point


class Response(NamedTuple):
    """A column of the table of responses; kind: float, bool, int or text."""

    column: str
    unit: str
    kind: str = "float"


def _product_mass(study: Study) -> float | None:
    """Return the product's molar mass (kg/mol), None where it is not written or there is no product."""
    if study.target is None or study.target.product is None:
        return None
    return study.values.get(f"species.{study.target.product}.molar_mass")


def productivity_unit(study: Study) -> str:
    """Return "kg", or "mol" where the product has no molar mass."""
    return "mol" if _product_mass(study) is None else "kg"


def counted(study: Study) -> list[str]:
    """Return the species that yields and fractions are counted for: all but solvent and gas."""
    return [s.name for s in study.species if s.role is None]


def responses(study: Study) -> tuple[Response, ...]:
    """Return the columns that follow the inputs, in order."""
    unit = productivity_unit(study)
    columns = [
        Response("status", "", "text"), Response("reason", "", "text"), Response("time_to_target_s", "s"), Response("conversion", "1"),
        Response("max_temperature_K", "K"), Response("time_of_max_temperature_s", "s"), Response("cooling_duty_W", "W"),
        Response("heat_release_W", "W"), Response("accumulation", "1"),
    ]  # fmt: skip
    if study.target is not None:
        columns += [Response(f"yield_{s}", "1") for s in counted(study)]
        if study.target.product is not None:
            columns += [Response(f"per_product_{s}", "1") for s in counted(study) if s != study.target.product]
    columns += [Response(f"fraction_{s}", "1") for s in counted(study)]
    columns.append(Response("cycle_time_s", "s"))
    if study.target is not None:
        columns.append(Response("highest_conversion", "1"))
        if study.target.product is not None:
            columns += [Response(f"productivity_{unit}_per_m3_s", f"{unit}/m3/s"), Response(f"at_target_{unit}_per_m3_s", f"{unit}/m3/s")]
            columns += [Response("most_productive_time_s", "s"), Response(f"most_productive_{unit}_per_m3_s", f"{unit}/m3/s")]
            columns.append(Response("most_productive_conversion", "1"))
    return (*columns, Response("energy_balance_error", "1"))


def evaluate(study: Study, points: pd.DataFrame) -> pd.DataFrame:
    """Return inputs and responses of each point, same index. points: a column per variable or dotted path, SI."""
    values = values_of(study, points)
    plant = charge_plant(study, values)
    times = _sample_times(plant)
    marched = march(
        plant.program, plant.blocks, plant.starts, plant.constants, times, float(study.values.get("accuracy.relative", 1e-6))
    )
    found = _respond(study, plant, marched, times)
    order = [r.column for r in responses(study)]
    return pd.concat([points, pd.DataFrame({name: found[name] for name in order}, index=points.index)], axis=1)


def _sample_times(plant: Charged) -> Floats:
    """Return when the accumulation is looked at, (N, K) s, ascending."""
    final = plant.constants[:, at.T_FINAL]
    even = np.linspace(0.0, 1.0, ACCUMULATION_TIMES) * final[:, None]
    return np.sort(np.concatenate([even, plant.boundaries], axis=1), axis=1)


def _respond(study: Study, plant: Charged, marched: Marched, times: Floats) -> dict[str, Floats | list[str]]:
    out, values = marched.out, plant.values
    end = np.where(np.isnan(out[:, at.OUT_END_TIME]), out[:, at.OUT_TIME], out[:, at.OUT_END_TIME])
    ended = np.where(np.isnan(out[:, [at.OUT_END_TIME]]), marched.at_last, marched.at_end)
    moles = states.amounts(plant, ended, end)
    code = out[:, at.OUT_STATUS].astype(int)
    reasons: list[list[str]] = [[] for _ in range(values.count)]
    found: dict[str, Floats | list[str]] = {
        "max_temperature_K": out[:, at.OUT_T_MAX],
        "time_of_max_temperature_s": out[:, at.OUT_T_MAX_TIME],
        "heat_release_W": out[:, at.OUT_HEAT_MAX],
        "cooling_duty_W": out[:, at.OUT_DUTY_MAX],
    }
    heated = all(values.has(f"reactions.{r.name}.heat.value") for r in study.reactions)
    full = heated and has_heat_capacities(study, values)
    if not heated:
        found["heat_release_W"] = np.full(values.count, np.nan)
    if not full:
        found["cooling_duty_W"] = np.full(values.count, np.nan)
    found["accumulation"] = _accumulation(study, plant, marched, times, end, heated)
    found["energy_balance_error"] = _balance(plant, marched, ended, moles) if full else np.full(values.count, np.nan)
    with np.errstate(invalid="ignore"):
        bad = (code == DONE) & (np.asarray(found["energy_balance_error"]) > BALANCE)
    code = np.where(bad, UNBALANCED, code)
    _by_species(study, plant, moles, found)
    _by_target(study, plant, marched, end, moles, found)
    _missing(found, reasons, heated, full)
    found["status"] = [OUTCOMES[c].status for c in code]
    found["reason"] = [
        "; ".join([OUTCOMES[c].sentence.format(time=t, limit=TOO_HOT)] * int(c != DONE) + r)
        for c, t, r in zip(code, out[:, at.OUT_TIME], reasons, strict=True)
    ]
    return found


def _accumulation(study: Study, plant: Charged, marched: Marched, times: Floats, end: Floats, heated: bool) -> Floats:
    """Return the largest accumulation up to the batch's end, (N,); NaN where heats are missing."""
    if not heated or not study.reactions:
        return np.full(plant.values.count, np.nan)
    share = states.accumulation(study, plant, np.nan_to_num(marched.samples), times)
    inside = (times <= end[:, None]) & ~np.isnan(marched.samples[:, :, 0])
    return np.where(inside, share, -np.inf).max(axis=1)


def _balance(plant: Charged, marched: Marched, ended: Floats, moles: Floats) -> Floats:
    """Return |enthalpy change - heats| over the heats' size, (N,)."""
    nz = plant.program.structure.sources.shape[0]
    before = states.enthalpy(plant, plant.brought.charged, plant.starts[:, nz])
    after = states.enthalpy(plant, moles, ended[:, nz])
    scale = marched.out[:, at.OUT_HEAT_SUM] + marched.out[:, at.OUT_BOUNDARY_SUM]
    gap = np.abs(after - before - ended[:, nz + 3])
    return np.where(scale > 0.0, gap / np.where(scale > 0.0, scale, 1.0), 0.0)


def _by_species(study: Study, plant: Charged, moles: Floats, found: dict[str, Floats | list[str]]) -> None:
    """Add yields, amounts per product and fractions."""
    index = {s.name: i for i, s in enumerate(study.species)}
    brought, names = plant.brought.total(), counted(study)
    everything = moles[:, [index[s] for s in names]].sum(axis=1)
    with np.errstate(divide="ignore", invalid="ignore"):
        for s in names:
            found[f"fraction_{s}"] = moles[:, index[s]] / everything
            if study.target is not None:
                found[f"yield_{s}"] = (moles[:, index[s]] - brought[:, index[s]]) / brought[:, index[study.target.species]]
                if study.target.product not in (None, s):
                    found[f"per_product_{s}"] = moles[:, index[s]] / moles[:, index[str(study.target.product)]]


def _by_target(study: Study, plant: Charged, marched: Marched, end: Floats, moles: Floats, found: dict[str, Floats | list[str]]) -> None:
    """Add conversion, times and productivities."""
    out, values = marched.out, plant.values
    turnaround = values.get("recipe.turnaround")
    found["time_to_target_s"] = out[:, at.OUT_CROSSED]
    crossed = np.isfinite(out[:, at.OUT_CROSSED])
    ok = crossed if study.batch_to_target else np.ones(values.count, dtype=bool)
    found["cycle_time_s"] = np.where(ok, end + turnaround, np.nan)
    if study.target is None:
        found["conversion"] = np.full(values.count, np.nan)
        return
    k = [s.name for s in study.species].index(study.target.species)
    weights, nz = plant.program.structure.target, plant.program.structure.sources.shape[0]
    brought = plant.brought.total()[:, k]
    at_start = plant.starts[:, :nz] @ weights
    fed = np.einsum("nf,nf->n", plant.brought.share(end), plant.brought.fed[:, :, k])
    found["conversion"] = (plant.brought.charged[:, k] + fed - moles[:, k]) / brought
    found["highest_conversion"] = (out[:, at.OUT_REACTED_MAX] - at_start) / brought
    if study.target.product is None:
        return
    unit, mass = productivity_unit(study), _product_mass(study)
    per = (mass or 1.0) / values.get("vessel.volume", plant.brought.volume + plant.brought.feed_volume.sum(axis=1))
    product = plant.program.structure.product
    p = [s.name for s in study.species].index(study.target.product)
    formed = moles[:, p] - plant.brought.total()[:, p]
    found[f"productivity_{unit}_per_m3_s"] = np.where(ok, per * formed / (end + turnaround), np.nan)
    at_target = marched.at_target[:, :nz] @ product - plant.starts[:, :nz] @ product
    when = np.maximum(out[:, at.OUT_CROSSED], plant.brought.last_feed())
    found[f"at_target_{unit}_per_m3_s"] = per * at_target / (when + turnaround)
    found["most_productive_time_s"] = out[:, at.OUT_BEST_TIME]
    found[f"most_productive_{unit}_per_m3_s"] = per * out[:, at.OUT_BEST]
    found["most_productive_conversion"] = (marched.at_best[:, :nz] @ weights - at_start) / brought


def _missing(found: dict[str, Floats | list[str]], reasons: list[list[str]], heated: bool, full: bool) -> None:
    """Write why a response has no value."""
    never = np.isnan(np.asarray(found["time_to_target_s"], dtype=np.float64))
    highest = found.get("highest_conversion")
    for n in np.flatnonzero(never):
        best = f"; the highest conversion is {np.asarray(highest)[n]:.6g}" if highest is not None else ""
        reasons[n].append(f"time_to_target: never reached{best}")
    if not heated:
        for reason in reasons:
            reason.append("heat_release, accumulation: heats of reaction are not given")
    elif not full:
        for reason in reasons:
            reason.append("cooling_duty, energy_balance_error: heat capacities are not given")
