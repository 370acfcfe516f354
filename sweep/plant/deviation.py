"""Scenarios: the same points under a deviation. N points."""

from collections.abc import Callable, Mapping

import numpy as np

from sweep.plant.sense import impossible
from sweep.plant.values import Floats, Values
from sweep.study.model import Change, Scenario, Study

GRID = 13  # moments, from the start to the batch's end, between which the worst one is sought
INNER, ROUNDS = 4, 3  # moments in each narrower bracket, and how often it is narrowed
LOWEST = ("conversion", "yield_", "tmr_ad", "td24", "productivity", "mtt")  # responses that are worst where they are lowest
Respond = Callable[[Values], Floats]  # values (M points) -> a response (M,)


def under(study: Study, scenario: Scenario, values: Values) -> Values:
    """Return the quantities of each point as a scenario has them from the start, and the moment from which its times are counted.

    Equivalents are those of the recipe as written: what is fed does not follow a charge that went wrong. A point whose recipe cannot be carried
    out then is refused.
    """
    plain = values.overlaid(_moment(scenario, values))
    sets = {path: _changed(scenario, plain, path, value) for path, value in scenario.sets.items()}
    chosen = {**{path: plain.get(path) for path in sets}, **values.chosen}
    refused = dict(values.refused)
    for bad, sentence in impossible(study, Values(values.count, {**plain.given, **sets}, chosen=chosen)):
        for n in np.flatnonzero(bad):
            refused.setdefault(int(n), f"the recipe cannot be carried out under this scenario: {sentence}")
    rows = [n for n in refused if n not in values.refused]
    for path, column in sets.items():
        column[rows] = plain.get(path)[rows]
    return Values(values.count, {**plain.given, **sets}, refused, chosen)


def _moment(scenario: Scenario, values: Values) -> Mapping[str, Floats]:
    """Return the moment of a feed's start or end, where a scenario's times are counted from it."""
    if scenario.feed is None:
        return {}
    path = f"recipe.feeds.{scenario.feed}"
    start = values.get(f"{path}.start")
    return {f"{scenario.path}.at": start if scenario.edge == "start" else start + values.get(f"{path}.duration")}


def _changed(scenario: Scenario, values: Values, path: str, value: float | Change) -> Floats:
    """Return a quantity as a scenario sets it, (N,)."""
    place = f"{scenario.path}.set.{path}"
    if isinstance(value, Change):
        number = values.get(f"{place}.{value.how}")
        return values.get(path) * number if value.how == "times" else values.get(path) + number
    return np.array(values.get(place, float(value)))


def worst_moment(study: Study, scenario: Scenario, values: Values, end: Floats, respond: Respond) -> Floats:
    """Return the moment (s), (N,), at which a scenario is worst for the response it names, between the start and the batch's end (N,) s.

    A grid, then three narrower ones around the worst moment of each point; between the moments tried a spike can hide. A point where the
    response has no value is worst there.
    """
    sign = -1.0 if str(scenario.worst).startswith(LOWEST) else 1.0

    def at(moments: Floats) -> Floats:
        rows = np.repeat(np.arange(values.count), moments.shape[1])
        score = sign * respond(values.take(rows).overlaid({f"{scenario.path}.at": moments.ravel()}))
        return np.where(np.isnan(score), np.inf, score).reshape(moments.shape)

    moments = np.linspace(0.0, 1.0, GRID) * end[:, None]
    score = at(moments)
    every = np.arange(values.count)
    for _ in range(ROUNDS):
        top = score.argmax(axis=1)
        low, high = moments[every, np.maximum(top - 1, 0)], moments[every, np.minimum(top + 1, moments.shape[1] - 1)]
        inner = low[:, None] + (high - low)[:, None] * np.arange(1, INNER + 1) / (INNER + 1.0)
        moments, score = np.concatenate([moments, inner], axis=1), np.concatenate([score, at(inner)], axis=1)
        order = np.argsort(moments, axis=1, kind="stable")
        moments, score = np.take_along_axis(moments, order, axis=1), np.take_along_axis(score, order, axis=1)
    worst: Floats = moments[every, score.argmax(axis=1)]
    return worst
