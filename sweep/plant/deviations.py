"""One batch under each of its scenarios: figures, which events fired, and how long there is to act."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from sweep.plant.course import charge_plant
from sweep.plant.deviation import under
from sweep.plant.fired import Fired, fired_in
from sweep.plant.profile import batch_end
from sweep.plant.responses import deviate, table_of
from sweep.plant.sense import one_point
from sweep.plant.values import Values
from sweep.study.model import Condition, Event, Scenario, Study

if TYPE_CHECKING:
    import pandas as pd

LEVELS = {"MTT": "failure.mtt", "limit max_temperature": "limits.max_temperature.at_most"}


@dataclass(frozen=True)
class Deviated:
    """A batch under a scenario (None: as written). row: its responses; study: the recipe with the scenario's events; begins: when the first
    of its own events acts (s; 0 where it deviates from the start), None where none of them does; fired: the events it saw; reaches: name,
    temperature (K) and how long after `begins` (s; None: never)."""

    scenario: Scenario | None
    row: pd.Series
    study: Study
    begins: float | None
    fired: tuple[Fired, ...]
    reaches: tuple[tuple[str, float, float | None], ...]


def deviations_of(study: Study, point: Mapping[str, float] | None = None) -> tuple[Deviated, ...]:
    """Return the batch as written, and under each scenario in the study's order; failure figures where the study asks for them."""
    import pandas as pd

    values, index = one_point(study, point), pd.RangeIndex(1)
    table, end = table_of(replace(study, scenarios=()), values, index)
    found = [_one(study, None, values, table)]
    for scenario in study.scenarios:
        asks = study.asks_failure or scenario.asks_failure
        table = deviate(study, scenario, values, end, index, asks)
        changed = under(study, scenario, values)
        if scenario.worst is not None:
            changed = changed.overlaid({f"{scenario.path}.at": table["at_s"].to_numpy()})
        found.append(_one(study, scenario, changed, table))
    return tuple(found)


def _one(study: Study, scenario: Scenario | None, values: Values, table: pd.DataFrame) -> Deviated:
    own = replace(study, scenarios=()) if scenario is None else study.under(scenario)
    levels = {name: path for name, path in LEVELS.items() if path in study.values}
    row = table.iloc[0]
    if values.refused:
        return Deviated(scenario, row, own, None, (), tuple((name, study.values[path], None) for name, path in levels.items()))
    watched = replace(own, events=(*own.events, *_reaching(levels)))
    plant = charge_plant(watched, values)
    fired = fired_in(watched, plant, batch_end(plant, float(study.values["accuracy.relative"])))
    count = len(own.events)
    met = {one.event - count: one.met for one in fired if one.event >= count}
    fired = tuple(one for one in fired if one.event < count)
    begins = 0.0 if scenario is None or scenario.sets else _begin(own, fired)
    reaches = tuple((name, study.values[path], _after(met.get(k), begins)) for k, (name, path) in enumerate(levels.items()))
    return Deviated(scenario, row, own, begins, fired, reaches)


def _reaching(levels: Mapping[str, str]) -> Iterator[Event]:
    """Yield an event that does nothing for each temperature, so that the search for events says when it is reached."""
    for name, path in levels.items():
        yield Event(None, {}, f"reached.{name}", Condition("temperature", None, "above", path))


def _begin(study: Study, fired: tuple[Fired, ...]) -> float | None:
    return min((one.acts for one in fired if one.acts is not None and study.events[one.event].deviation), default=None)


def _after(met: float | None, begins: float | None) -> float | None:
    return None if met is None else met - (begins or 0.0)
