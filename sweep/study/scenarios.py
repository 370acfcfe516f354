"""Sections [scenarios] and [deviations]: what if it does not go as written."""

from collections.abc import Iterator
from typing import Any

from sweep.study import usual
from sweep.study.events import RESTORED, EventReader, kinds_set, set_tables
from sweep.study.model import LATEST, Change, Event, Feed, Reaction, Scenario, Species, differs
from sweep.study.reader import Reader

_KEYS = ("events", "set", "at", "worst_for")


def kinds_of(tables: dict[str, Any]) -> set[str]:
    """Return the kinds of cooling that scenarios switch to."""
    found: list[object] = []
    for table in tables.values():
        if isinstance(table, dict):
            found += [table.get("set"), *set_tables(table.get("events"))]
    return kinds_set(found)


def with_usual(
    reader: Reader, document: dict[str, Any], species: tuple[Species, ...], reactions: tuple[Reaction, ...], kind: str, written: dict[str, Any]
) -> dict[str, Any]:
    """Return the tables of [scenarios], those of the usual deviations before them where [deviations] asks for them."""
    tables, asked = reader.table(document, "scenarios", "scenarios"), reader.table(document, "deviations", "deviations")
    sizes = usual.read_sizes(reader, asked)
    if sizes is None:
        return tables
    found = usual.tables(sizes, species, reactions, kind, written)
    line = reader.lines.get("deviations", 1)
    for name in found:
        reader.lines.setdefault(f"scenarios.{name}", line)
    return {**found, **tables}


class ScenarioReader:
    """Reads scenarios into a Reader, after all that they deviate from."""

    def __init__(self, reader: Reader, names: set[str], can: dict[str, str], feeds: tuple[Feed, ...]) -> None:
        self.reader, self.names, self.can, self.feeds = reader, names, can, {feed.name for feed in feeds}

    def read(self, tables: dict[str, Any], responses: "Responses") -> tuple[Scenario, ...]:
        """Return the scenarios; `responses` tells which names a worst moment may be sought for."""
        return tuple(self._one(name, table, responses) for name, table in self.reader.names(tables, "scenarios").items())

    def _one(self, name: str, table: dict[str, Any], responses: "Responses") -> Scenario:
        reader, path = self.reader, f"scenarios.{name}"
        reader.only(table, path, _KEYS)
        if not table.get("events") and not table.get("set"):
            reader.fault(path, "nothing", "events, or set", "a scenario deviates in something")
        feed, edge, worst = self._moment(path, table, responses)
        events = EventReader(reader, self.names, self.can, f"{path}.at").read(table.get("events", []), f"{path}.events")
        given = reader.table(table, "set", f"{path}.set")
        sets, from_start = self._sets(path, given)
        if from_start:
            events = (Event(0.0, from_start, path, deviation=True), *events)
        if (feed or worst or f"{path}.at" in reader.values) and not any(event.when is None and event.since for event in events):
            reader.fault(f"{path}.at", table.get("at"), "an event by time", "nothing of it happens at a moment")
        return Scenario(name, events, sets, feed, edge, worst)

    def _moment(self, path: str, table: dict[str, Any], responses: "Responses") -> tuple[str | None, str, str | None]:
        """Return the feed, its edge, and the response, from whose moment the scenario's times are counted."""
        reader, at = self.reader, table.get("at")
        if "worst_for" in table and at != "worst":
            reader.fault(f"{path}.worst_for", table["worst_for"], 'at = "worst" beside it', "it names what the moment is worst for")
        if at == "worst":
            name = table.get("worst_for", "max_temperature")
            column = responses.column(str(name))
            if column is None:
                reader.fault(f"{path}.worst_for", repr(name), f"one of {', '.join(responses.known())}", "no response has this name")
            return None, "start", column
        if isinstance(at, dict):
            key = next((k for k in ("start_of", "end_of") if k in at), None)
            if key is None or len(at) != 1 or at[key] not in self.feeds:
                expected = '{ start_of = "..." } or { end_of = "..." } of ' + (", ".join(sorted(self.feeds)) or "a feed")
                reader.fault(f"{path}.at", repr(at), expected, "a moment is that of a feed of this recipe")
                return None, "start", None
            return str(at[key]), key.removesuffix("_of"), None
        if at is not None:
            reader.quantity(f"{path}.at", at, "time")
            reader.at_least(f"{path}.at", 0.0, False, "a batch begins at zero, and ends", LATEST)
        return None, "start", None

    def _sets(self, path: str, table: dict[str, Any]) -> tuple[dict[str, float | Change], dict[str, float | str | Change]]:
        """Return what holds from the start: what only the start can set, and what events can set too."""
        reader, place = self.reader, f"{path}.set"
        events = EventReader(reader, self.names, self.can, f"{path}.at")
        sets: dict[str, float | Change] = {}
        ours = {name: value for name, value in table.items() if name in self.can or name == "cooling.kind"}
        if any(value == RESTORED for value in ours.values()):
            reader.fault(place, RESTORED, "a value or a change", "nothing has failed yet at the start")
            return {}, {}
        for name in table.keys() - ours.keys():
            whole = f"{name}.equivalents" if f"{name}.equivalents" in reader.values else name
            known = whole in reader.values and differs(whole) and not whole.startswith(("events.", "scenarios."))
            if not known:
                if not reader.broken(name):
                    reader.only({name: 0}, place, [*self.can, *(p for p in reader.values if differs(p) and not p.startswith("events."))])
                continue
            one = events.value(f"{place}.{whole}", whole, table[name], reader.dimensions[whole])
            if one is not None:
                sets[whole] = one
        return dict(sorted(sets.items())), events.sets(place, ours) if ours else {}


class Responses:
    """The names of responses, and their columns."""

    def __init__(self, columns: dict[str, str]) -> None:
        self._columns = columns

    def column(self, name: str) -> str | None:
        """Return the column of a response; None where there is none of this name."""
        return self._columns.get(name)

    def known(self) -> Iterator[str]:
        """Yield the names."""
        yield from self._columns
