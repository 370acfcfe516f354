"""What happens when: the events of each point as times, and the quantities that hold from a time on.

N points, H columns: an event by time has one, an event by condition as many as it fires.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sweep.plant.values import Floats, Values
from sweep.study.model import Change, Event, Study

NDKind = np.ndarray
KINDS = ("adiabatic", "isothermal", "duty", "coolant", "jacket")
SAME = 1.0 + 1e-12  # two times closer than this are one


@dataclass(frozen=True)
class Happenings:
    """columns (H,): which event of the study; when (N, H) s: from when it acts, infinite where it does not; fired (N, H) s: when its
    condition was met; restless (N,): its events fired more often than is followed."""

    columns: tuple[int, ...]
    when: Floats
    fired: Floats
    restless: np.ndarray

    def latest(self, event: int, time: Floats) -> Floats:
        """Return when an event acted last, up to a time (N,) s; minus infinity where it had not."""
        when = self.when[:, [h for h, k in enumerate(self.columns) if k == event]]
        found: Floats = np.where(when <= time[:, None] * SAME, when, -np.inf).max(axis=1, initial=-np.inf)
        return found

    def take(self, rows: np.ndarray) -> Happenings:
        """Return what happens to some of the points."""
        return Happenings(self.columns, self.when[rows], self.fired[rows], self.restless[rows])


def by_time(study: Study, values: Values) -> Happenings:
    """Return the events that happen at a written time; those by condition have not happened."""
    columns = tuple(k for k, event in enumerate(study.events) if event.time is not None)
    when = np.zeros((values.count, len(columns)))
    for h, k in enumerate(columns):
        event = study.events[k]
        when[:, h] = values.get(f"{event.path}.time", event.time or 0.0) + (values.get(event.since) if event.since else 0.0)
    return Happenings(columns, when, when, np.zeros(values.count, dtype=bool))


def with_fired(before: Happenings, event: int, fired: Floats, acts: Floats) -> Happenings:
    """Return the happenings with one more column: `event` met at `fired` (N,) s and acting from `acts` (N,) s on."""
    return Happenings(
        (*before.columns, event), np.column_stack([before.when, acts]), np.column_stack([before.fired, fired]), before.restless
    )  # fmt: skip


def _number(values: Values, event: Event, path: str, present: Floats) -> Floats:
    """Return what an event makes of a quantity that is `present` (N,)."""
    value = event.sets[path]
    if isinstance(value, Change):
        number = values.get(f"{event.path}.set.{path}.{value.how}")
        return present * number if value.how == "times" else present + number
    return values.get(f"{event.path}.set.{path}", float(value))


def written(values: Values, path: str) -> Floats:
    """Return a quantity as it is before any event, (N,)."""
    return values.get(path, 1.0 if path.endswith(".rate_factor") else np.nan)


class _Layer:
    """The quantities that the recipe's events, or a deviation's on top of them, set up to a time; `below`: what holds without."""

    def __init__(self, study: Study, values: Values, happened: Happenings, time: Floats) -> None:
        self.study, self.values, self.happened, self.time = study, values, happened, time
        self.sets: dict[str, Floats] = {}
        self.kind = np.full(values.count, KINDS.index(study.cooling_kind or "isothermal"))

    def lay(self, deviation: bool) -> None:
        """Set what the events of a layer set: per point the latest counts, of two at one time the later in the study."""
        below, kind = dict(self.sets), self.kind
        since: dict[str, Floats] = {}
        for k in dict.fromkeys(self.happened.columns):
            event = self.study.events[k]
            if event.deviation != deviation:
                continue
            when = self.happened.latest(k, self.time)
            for path, value in event.sets.items():
                last = since.setdefault(path, np.full(self.values.count, -np.inf))
                on = (when > -np.inf) & (when >= last)
                since[path] = np.where(on, when, last)
                if path == "cooling.kind":
                    self.kind = np.where(on, kind if value == "restored" else KINDS.index(str(value)), self.kind)
                    continue
                first = below.get(path, written(self.values, path)) if deviation else written(self.values, path)
                new = first if value == "restored" else _number(self.values, event, path, first)
                self.sets[path] = np.where(on, new, self.sets.get(path, first))


def settings_at(study: Study, values: Values, happened: Happenings, time: Floats) -> tuple[Values, NDKind]:
    """Return the quantities and the kind of cooling that hold from a time (N,) on. A deviation overrides the recipe's own events, whenever they
    act: what has failed is not repaired by an interlock."""
    layer = _Layer(study, values, happened, time)
    for deviation in (False, True):
        layer.lay(deviation)
    return values.overlaid(layer.sets), layer.kind


def sets_any(study: Study, start: str, end: str) -> bool:
    """Tell whether any event sets a path with this start and end."""
    return any(path.startswith(start) and path.endswith(end) for event in study.events for path in event.sets)
