"""The responses of a batch: names, units, and how each comes from what a march left."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Literal, NamedTuple

import numpy as np

from sweep.base.status import CRASHED, DONE, OUTCOMES, RESTLESS, UNBALANCED
from sweep.kernel import layout as at
from sweep.kernel.engine import Marched
from sweep.plant import states
from sweep.plant.course import charge_plant
from sweep.plant.deviation import under, worst_moment
from sweep.plant.failure import failure_figures
from sweep.plant.recipe import TOO_HOT, Charged, has_heat_capacities
from sweep.plant.samples import Batch, largest_accumulation, march_batches
from sweep.plant.sense import blank, sensible_values
from sweep.plant.target import CAUSES, productivity_unit, target_columns, why_not
from sweep.plant.values import Floats, Values
from sweep.study.model import Scenario, Study

if TYPE_CHECKING:
    import pandas as pd

_TRACE = 1e-12  # of all that is brought in; less of a product than this is none
BALANCE = 1e-3  # an energy balance worse than this is a failed point


class Response(NamedTuple):
    """A column of the table of responses; kind: float, bool, int or text."""

    column: str
    unit: str
    kind: str = "float"


FAILURE = [
    Response("mtsr_K", "K"), Response("mtsr_time_s", "s"), Response("tmr_ad_s", "s"), Response("tmr_ad_censored", "", "bool"),
    Response("tmr_ad_time_s", "s"), Response("tmr_ad_closed_form_s", "s"), Response("td24_K", "K"), Response("td24_censored", "", "bool"),
    Response("mtt_K", "K"), Response("criticality_class", "", "int"), Response("adiabatic_rise_synthesis_K", "K"),
    Response("adiabatic_rise_decomposition_K", "K"),
]  # fmt: skip
_DTYPES: dict[str, Literal["str", "boolean", "Int64"]] = {"text": "str", "bool": "boolean", "int": "Int64"}


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
    columns += FAILURE if study.asks_failure else []
    if study.target is not None:
        columns.append(Response("highest_conversion", "1"))
        if study.target.product is not None:
            columns += [Response(f"productivity_{unit}_per_m3_s", f"{unit}/m3/s"), Response(f"at_target_{unit}_per_m3_s", f"{unit}/m3/s")]
            columns += [Response("most_productive_time_s", "s"), Response(f"most_productive_{unit}_per_m3_s", f"{unit}/m3/s")]
            columns.append(Response("most_productive_conversion", "1"))
    columns.append(Response("energy_balance_error", "1"))
    for scenario in study.scenarios:
        moment = [Response("at_s", "s")] if scenario.worst is not None else []
        columns += [r._replace(column=f"{scenario.name}.{r.column}") for r in (*responses(study.under(scenario)), *moment)]
    return tuple(columns)


def evaluate(study: Study, points: pd.DataFrame) -> pd.DataFrame:
    """Return inputs and responses of each point, same index. points: a column per variable or dotted path, SI."""
    import pandas as pd

    values = sensible_values(study, points)
    table, end = table_of(study, values, points.index)
    tables = [table]
    for scenario in study.scenarios:
        tables.append(deviate(study, scenario, values, end, points.index).add_prefix(f"{scenario.name}."))
    return pd.concat([points, *tables], axis=1)


def table_of(study: Study, values: Values, index: pd.Index) -> tuple[pd.DataFrame, Floats]:
    """Return the responses of the recipe, without scenarios, and when each batch ends (s)."""

    plant = charge_plant(study, values)
    tolerance = float(study.values.get("accuracy.relative", 1e-6))
    marched, batch = march_batches(plant, tolerance)
    found = _respond(study, plant, marched, batch, tolerance)
    plain = tuple(r for r in responses(study) if "." not in r.column)
    return blank(values, _table(plain, found, index)), batch.end


def deviate(
    study: Study, scenario: Scenario, values: Values, end: Floats, index: pd.Index, asks_failure: bool | None = None
) -> pd.DataFrame:
    """Return the responses of each point under a scenario; end (N,) s: of the batches as written; `asks_failure`: unlike its limits ask."""
    changed, own = under(study, scenario, values), study.under(scenario, asks_failure)
    if scenario.worst is None:
        return table_of(own, changed, index)[0]
    sought = study.under(scenario)

    def respond(tried: Values) -> Floats:
        import pandas as pd

        table = table_of(sought, tried, pd.RangeIndex(tried.count))[0]
        return np.where(table["status"] == "failed", np.nan, table[str(scenario.worst)].to_numpy(dtype=np.float64, na_value=np.nan))

    moment = worst_moment(study, scenario, changed, end, respond)
    table = table_of(own, changed.overlaid({f"{scenario.path}.at": moment}), index)[0]
    table["at_s"] = moment
    return table


def crashed(study: Study, points: pd.DataFrame) -> pd.DataFrame:
    """Return inputs and responses of points whose evaluation ended its process: failed, with the reason, and null for everything else."""
    import pandas as pd

    outcome = OUTCOMES[CRASHED]
    null: dict[str, Floats | list[Any]] = {"float": np.full(len(points), np.nan), "bool": [pd.NA] * len(points), "int": [pd.NA] * len(points)}
    text = {"status": [outcome.status] * len(points), "reason": [outcome.sentence] * len(points)}
    found = {r.column: text[r.column.rpartition(".")[2]] if r.kind == "text" else null[r.kind] for r in responses(study)}
    return pd.concat([points, _table(responses(study), found, points.index)], axis=1)


def _table(columns: tuple[Response, ...], found: dict[str, Floats | list[str]], index: pd.Index[Any]) -> pd.DataFrame:
    """Return the columns as a table: all floats as one array, which pandas looks at once, the others set between them."""
    import pandas as pd

    floats = [r.column for r in columns if r.kind == "float"]
    table = pd.DataFrame(np.array([found[name] for name in floats], dtype=np.float64).T, index=index, columns=floats)
    for place, r in enumerate(columns):
        if r.kind != "float":
            value: Any = found[r.column]
            table.insert(place, r.column, pd.array(value, dtype=_DTYPES[r.kind]))
    return table


def _respond(study: Study, plant: Charged, marched: Marched, batch: Batch, tolerance: float) -> dict[str, Floats | list[str]]:
    out, values, end, ended = marched.out, plant.values, batch.end, batch.at_end
    moles = states.amounts(plant, ended, end)
    code = out[:, at.OUT_STATUS].astype(int)
    reasons: list[list[str]] = [[] for _ in range(values.count)]
    found: dict[str, Floats | list[str]] = {
        "max_temperature_K": out[:, at.OUT_T_MAX],
        "time_of_max_temperature_s": out[:, at.OUT_T_MAX_TIME],
        "heat_release_W": out[:, at.OUT_HEAT_MAX],
        "cooling_duty_W": out[:, at.OUT_DUTY_MAX],
    }
    nothing = np.full(values.count, np.nan)
    heated = all(values.has(f"reactions.{r.name}.heat.value") for r in study.reactions)
    full = heated and has_heat_capacities(study, values)
    found["heat_release_W"] = out[:, at.OUT_HEAT_MAX] if heated else nothing
    found["cooling_duty_W"] = out[:, at.OUT_DUTY_MAX] if full else nothing
    found["energy_balance_error"] = _balance(plant, marched, ended, moles) if full else nothing
    with np.errstate(invalid="ignore"):
        bad = (code == DONE) & (np.asarray(found["energy_balance_error"]) > BALANCE)
    code = np.where(bad, UNBALANCED, code)
    code = np.where(plant.happened.restless, RESTLESS, code)
    found.update(target_columns(study, plant, marched, batch, moles))
    _by_species(study, plant, moles, found)
    _missing(found, reasons, why_not(study, plant, marched), heated, full)
    found["accumulation"] = largest_accumulation(study, plant, batch, tolerance) if heated and study.reactions else nothing
    if study.asks_failure:
        columns, why = failure_figures(study, plant, batch, out[:, at.OUT_T_MAX], tolerance)
        found.update(columns)
        for reason, more in zip(reasons, why, strict=True):
            reason.extend(more)
    for n in np.flatnonzero(code != DONE):
        reasons[n].insert(0, OUTCOMES[code[n]].sentence.format(time=out[n, at.OUT_TIME], limit=TOO_HOT))
    found["status"] = [OUTCOMES[c].status for c in code.tolist()]
    found["reason"] = ["; ".join(reason) for reason in reasons]
    return found


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
                    product = moles[:, index[study.target.product]]
                    made = product > _TRACE * brought.sum(axis=1)
                    found[f"per_product_{s}"] = np.where(made, moles[:, index[s]] / product, np.nan)


def _missing(found: dict[str, Floats | list[str]], reasons: list[list[str]], causes: np.ndarray, heated: bool, full: bool) -> None:
    """Write why a response has no value."""
    highest = found.get("highest_conversion")
    never = np.isnan(np.asarray(found["time_to_target_s"], dtype=np.float64))
    for n in np.flatnonzero(never):
        if highest is None:
            reasons[n].append("time_to_target, conversion: the study has no target")
        else:
            reasons[n].append(f"time_to_target: never reached, {CAUSES[causes[n]]}; the highest conversion is {np.asarray(highest)[n]:.6g}")
    shares = [name for name in found if name.startswith("per_product_")]
    for n in np.flatnonzero(np.isnan(np.asarray(found[shares[0]], dtype=np.float64))) if shares else ():
        reasons[n].append("per_product: there is no product")
    if not heated:
        for reason in reasons:
            reason.append("heat_release, cooling_duty, accumulation, energy_balance_error: heats of reaction are not given")
    elif not full:
        for reason in reasons:
            reason.append("cooling_duty, energy_balance_error: heat capacities are not given")
