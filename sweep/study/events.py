"""Section [[events]], and the events of a scenario: what changes on the way, at a time or when a condition is met."""

from collections.abc import Iterable, Mapping
from typing import Any

from sweep.base.units import UnitFault, to_si
from sweep.study.equipment import _DIMENSIONS as COOLING
from sweep.study.equipment import KINDS
from sweep.study.model import LATEST, Change, Condition, Event, Feed, Reaction
from sweep.study.reader import Reader

_MORE = {"vessel.U": "heat transfer coefficient", "vessel.stirrer_power": "power", "vessel.heat_loss.ambient": "temperature",
         "vessel.heat_loss.UA": "heat loss"}  # fmt: skip
_WATCHED = {
    "temperature": "temperature", "jacket_temperature": "temperature", "volume": "volume", "conversion": "dimensionless",
    "heat_release": "power", "cooling_duty": "power",
}  # fmt: skip
_BY_SPECIES = {"n": "amount", "c": "concentration"}
RESTORED = "restored"  # of a deviation: from then on the recipe's own value counts again


def settable(reader: Reader, reactions: tuple[Reaction, ...], feeds: tuple[Feed, ...]) -> dict[str, str]:
    """Return what an event can set, path -> dimension."""
    found = {**COOLING, **_MORE}
    for reaction in reactions:
        path = f"reactions.{reaction.name}.rate_constant.value"
        if path in reader.dimensions:
            found[path] = reader.dimensions[path]
    for feed in feeds:
        path = f"recipe.feeds.{feed.name}.rate_factor"
        found[path] = "dimensionless"
        reader.at_least(path, 0.0, False, "a feed runs forward, or stands still")
    return found


def sorted_events(raw: object) -> list[tuple[int, Any]]:
    """Return events with their place in the file, by time; what cannot be read as a time stays where it is."""

    def when(entry: tuple[int, Any]) -> float:
        try:
            return to_si(str(entry[1].get("time")), "time") if isinstance(entry[1], dict) else 0.0
        except UnitFault:
            return 0.0

    return sorted(enumerate(raw if isinstance(raw, list) else []), key=when)


def kinds_set(tables: Iterable[object]) -> set[str]:
    """Return the kinds of cooling that are switched to in the `set` tables given."""
    return {str(t["cooling.kind"]) for t in tables if isinstance(t, dict) and "cooling.kind" in t} - {RESTORED}


def set_tables(raw: object) -> list[object]:
    """Return the `set` tables of a list of events as it stands in the file."""
    return [entry["set"] for entry in raw if isinstance(entry, dict) and "set" in entry] if isinstance(raw, list) else []


class EventReader:
    """Reads events into a Reader. names: the species; can: what can be set; since: of a scenario's events, where the moment stands from which
    their times are counted."""

    def __init__(self, reader: Reader, names: set[str], can: Mapping[str, str], since: str = "") -> None:
        self.reader, self.names, self.can, self.since, self.deviation = reader, names, can, since, bool(since)

    def read(self, raw: object, where: str) -> tuple[Event, ...]:
        """Return the events of a list, by time; `where`: its path."""
        reader = self.reader
        if not isinstance(raw, list):
            reader.fault(where, repr(raw), "[[events]]" if where == "events" else "[{ time = ..., set = { ... } }]", "events are a list")
            return ()
        lines = dict(reader.lines)
        result = []
        for place, (origin, entry) in enumerate(sorted_events(raw)):
            reader.lines[f"{where}.{place}"] = lines.get(f"{where}.{origin}", lines.get(where, 1))
            for key in ("time", "set", "when", "delay", "hysteresis", "once", "name", "after"):
                if f"{where}.{origin}.{key}" in lines:
                    reader.lines[f"{where}.{place}.{key}"] = lines[f"{where}.{origin}.{key}"]
            event = self._event(f"{where}.{place}", entry)
            if event is not None:
                result.append(event)
        self._clashes(result)
        self._order(result)
        return tuple(result)

    def _event(self, path: str, entry: object) -> Event | None:
        reader = self.reader
        if not isinstance(entry, dict):
            reader.fault(path, repr(entry), "a table with time and set", "an event changes something at a time")
            return None
        reader.only(entry, path, ("time", "when", "delay", "once", "hysteresis", "set", "name", "after"))
        name, after = self._names(path, entry)
        when, once = None, True
        if "when" in entry:
            when = self._condition(f"{path}.when", entry["when"])
            once = self._once(path, entry, when, after)
        elif after:
            self._once(path, entry, None, after)
        else:
            for key in ("delay", "once", "hysteresis"):
                if key in entry:
                    reader.fault(f"{path}.{key}", entry[key], "when or after beside it", f"{key} belongs to a condition")
        if "when" not in entry and not after:
            if "time" in entry:
                reader.quantity(f"{path}.time", entry["time"], "time")
            reader.needed(f"{path}.time", "an event happens at a time, or when a condition is met")
            reader.at_least(f"{path}.time", 0.0, False, "a batch begins at zero, and ends", LATEST)
        elif "time" in entry:
            reader.fault(f"{path}.time", entry["time"], "time or when or after", "an event has one cause")
        sets = self.sets(f"{path}.set", reader.table(entry, "set", f"{path}.set"))
        time = reader.values.get(f"{path}.time")
        if when is None and time is None and (not after or "when" in entry):
            return None
        return Event(time, sets, path, when, once, self.deviation, self.since, name, after)

    def _names(self, path: str, entry: dict[str, Any]) -> tuple[str, str]:
        """Return an event's own name, and that of the event it waits for."""
        for key in ("name", "after"):
            if key in entry and (not isinstance(entry[key], str) or not entry[key]):
                self.reader.fault(f"{path}.{key}", repr(entry[key]), "a text", "events are named for those that wait for them")
        return tuple(entry[key] if isinstance(entry.get(key), str) else "" for key in ("name", "after"))  # type: ignore[return-value]

    def _order(self, events: list[Event]) -> None:
        """Fault names that come twice, and events that wait for one that is not there, or for each other in a ring."""
        places: dict[str, Event] = {}
        for event in events:
            if event.name in places and event.name:
                self.reader.fault(f"{event.path}.name", event.name, "another name", "another event has it")
            places[event.name] = event
        for event in events:
            if not event.after:
                continue
            if event.after not in places:
                known = ", ".join(sorted(name for name in places if name)) or "the name of another event here"
                self.reader.fault(f"{event.path}.after", event.after, known, "no event of this list has that name")
                continue
            seen, one = set[str](), event
            while one.after in places and one.when is None and one.path not in seen:
                seen.add(one.path)
                one = places[one.after]
            if one.path in seen:
                self.reader.fault(f"{event.path}.after", event.after, "an event with a cause of its own", "they wait for each other")

    def _condition(self, path: str, table: object) -> Condition | None:
        """Return { temperature = { above = "75 degC" } } as a condition."""
        reader, example = self.reader, '{ temperature = { above = "75 degC" } }'
        if not isinstance(table, dict) or len(table) != 1 or not all(isinstance(side, dict) and len(side) == 1 for side in table.values()):
            reader.fault(path, repr(table), example, "a condition is one quantity, above or below one level")
            return None
        name, side = next(iter(table.items()))
        kind, _, species = name.partition("_")
        if kind in _BY_SPECIES and species in self.names:
            quantity, of, dimension = kind, species, _BY_SPECIES[kind]
        elif name in _WATCHED:
            quantity, of, dimension = name, None, _WATCHED[name]
        else:
            reader.only(table, path, (*_WATCHED, *(f"{k}_{s}" for k in _BY_SPECIES for s in sorted(self.names))))
            return None
        reader.only(side, f"{path}.{name}", ("above", "below"))
        sense, value = next(iter(side.items()))
        level = f"{path}.{name}.{sense}"
        if sense not in ("above", "below") or reader.quantity(level, value, dimension) is None:
            return None
        self._never(Condition(quantity, of, sense, level), str(value))
        return Condition(quantity, of, sense, level)

    def _never(self, when: Condition, written: str) -> None:
        """Warn where a level is one that the quantity cannot pass."""
        value, because = self.reader.values[when.path], "the event can never fire"
        if when.quantity == "conversion" and when.sense == "above" and value >= 1.0:
            self.reader.warn(when.path, written, "a share below 1", because)
        if when.quantity in ("conversion", "volume", "n", "c") and when.sense == "below" and value <= 0.0:
            self.reader.warn(when.path, written, "a level above 0", because)

    def _once(self, path: str, entry: dict[str, Any], when: Condition | None, after: str) -> bool:
        """Read delay, once and hysteresis; return whether the event fires once only."""
        reader, once = self.reader, entry.get("once", True)
        if after:
            for key in ("once", "hysteresis"):
                if key in entry:
                    reader.fault(f"{path}.{key}", entry[key], "no such key with after", "the event waits for another, and is armed by it each time")
                    return True
        if not isinstance(once, bool):
            reader.fault(f"{path}.once", repr(once), "true or false", "an event fires once, or is armed again")
            once = True
        if "delay" in entry:
            reader.quantity(f"{path}.delay", entry["delay"], "time")
            reader.at_least(f"{path}.delay", 0.0, False, "nothing acts before its cause", LATEST)
        if "hysteresis" in entry and once:
            reader.fault(f"{path}.hysteresis", entry["hysteresis"], "once = false beside it", "only an event that is armed again has a hysteresis")
        if not once and when is not None:
            dimension = reader.dimensions[when.path]
            if "hysteresis" in entry:
                reader.quantity(f"{path}.hysteresis", entry["hysteresis"], "temperature difference" if dimension == "temperature" else dimension)
            reader.needed(f"{path}.hysteresis", "an event is armed again when its quantity has gone back by the hysteresis")
            reader.at_least(f"{path}.hysteresis", 0.0, True, "without it the event would fire again at once")
        return once

    def sets(self, path: str, table: dict[str, Any]) -> dict[str, float | str | Change]:
        """Return what a table sets."""
        reader, found = self.reader, dict[str, float | str | Change]()
        reader.only(table, path, ("cooling.kind", *self.can))
        if not table:
            reader.fault(path, "nothing", '{ "cooling.set_point" = "60 degC" }', "an event sets something")
        for name, value in table.items():
            if self.deviation and value == RESTORED:
                found[name] = RESTORED
            elif name == "cooling.kind":
                found[name] = reader.choice(table, path, name, KINDS, "isothermal")
            elif name in self.can:
                one = self.value(f"{path}.{name}", name, value, self.can[name])
                if one is not None:
                    found[name] = one
        return found

    def value(self, place: str, name: str, value: object, dimension: str) -> float | Change | None:
        """Return what sets a quantity: a value, or { times = 0.5 } or { plus = "10 K" } of what it was."""
        reader, feed = self.reader, name.endswith(".rate_factor")
        if isinstance(value, dict):
            return self._change(place, name, value, dimension)
        number = reader.quantity(place, value, dimension)
        if name not in reader.values and not feed:
            if not reader.broken(name):
                reader.fault(place, name, f"{name} written in its section too", "before the event it has no value")
            return None
        if number is not None:
            reader.within(place, name, number)
        return number

    def _change(self, place: str, name: str, table: dict[str, Any], dimension: str) -> Change | None:
        reader = self.reader
        reader.only(table, place, ("times", "plus"))
        if len(table) != 1 or not {"times", "plus"} & set(table):
            reader.fault(place, repr(table), '{ times = 0.5 } or { plus = "10 K" }', "a change multiplies or adds")
            return None
        how = next(iter(table))
        other = "temperature difference" if dimension == "temperature" else dimension
        number = reader.quantity(f"{place}.{how}", table[how], "dimensionless" if how == "times" else other)
        before = 1.0 if name.endswith(".rate_factor") else reader.values.get(name)
        if before is None and not reader.broken(name):
            reader.fault(place, name, f"{name} written in its section too", "a change is of what was written")
        if number is None or before is None:
            return None
        reader.within(f"{place}.{how}", name, before * number if how == "times" else before + number)
        return Change(how)

    def _clashes(self, events: list[Event]) -> None:
        """Fault two events that set one thing to different values at one time, or on one condition."""
        seen: dict[tuple[object, str], tuple[int, object]] = {}
        values = self.reader.values
        for place, event in enumerate(events):
            cause: object = event.time if not event.after else (event.after, values.get(f"{event.path}.delay", 0.0))
            if event.when is not None:
                when = event.when
                cause = (when.quantity, when.species, when.sense, values[when.path], values.get(f"{event.path}.delay", 0.0), event.after)
            for path, value in event.sets.items():
                to: object = (value.how, values.get(f"{event.path}.set.{path}.{value.how}")) if isinstance(value, Change) else value
                first = seen.setdefault((cause, path), (place, to))
                if first[1] != to:
                    same = "time" if event.time is not None else "condition"
                    self.reader.fault(f"{event.path}.set.{path}", path, f"one event for it at one {same}", f"event {first[0] + 1} sets it too")
