"""Sections [recipe] and [[events]]: what is brought in, when, and what changes on the way."""

from typing import Any

from sweep.base.units import UnitFault, to_si
from sweep.study.equipment import _DIMENSIONS as COOLING
from sweep.study.equipment import KINDS
from sweep.study.model import LATEST, Charge, Event, Feed
from sweep.study.reader import Reader

_MORE = {"vessel.U": "heat transfer coefficient", "vessel.stirrer_power": "power", "vessel.heat_loss.ambient": "temperature",
         "vessel.heat_loss.UA": "heat loss"}  # fmt: skip
_SETTABLE = {**COOLING, **_MORE}
_SHORTEST = 1e-3  # s; what is shorter cannot be told from none beside the latest start


def read_recipe(reader: Reader, table: dict[str, Any], names: set[str]) -> tuple[Charge, tuple[Feed, ...], bool]:
    """Return charge, feeds, and whether the batch runs to its target."""
    reader.only(table, "recipe", ("batch_time", "turnaround", "charge", "feeds"))
    to_target = table.get("batch_time") == "to target"
    if not to_target:
        if "batch_time" in table:
            reader.quantity("recipe.batch_time", table["batch_time"], "time")
        reader.needed("recipe.batch_time", 'a batch has a time, or runs "to target"')
        reader.at_least("recipe.batch_time", 0.0, True, "a batch takes time, and ends", LATEST)
    if "turnaround" in table:
        reader.quantity("recipe.turnaround", table["turnaround"], "time")
    else:
        reader.keep("recipe.turnaround", 0.0, "s", "time")
    reader.at_least("recipe.turnaround", 0.0, False, "a turnaround is not negative, and ends", LATEST)
    charge = _charge(reader, reader.table(table, "charge", "recipe.charge"), names)
    written = reader.names(reader.table(table, "feeds", "recipe.feeds"), "recipe.feeds")
    feeds = tuple(_feed(reader, name, feed, names) for name, feed in written.items())
    _count_equivalents(reader, charge, feeds)
    return charge, feeds, to_target


def _count_equivalents(reader: Reader, charge: Charge, feeds: tuple[Feed, ...]) -> None:
    """Fault equivalents of what is not brought in by an amount of its own: they would count as nothing."""
    own = {*charge.amounts, *charge.concentrations, charge.balance}
    own |= {s for feed in feeds for s in feed.species if s not in feed.equivalents}
    for feed in feeds:
        for species, of in feed.equivalents.items():
            if of not in own and not reader.broken("recipe.charge"):
                place = f"recipe.feeds.{feed.name}.amount.{species}.of"
                reader.fault(place, repr(of), "a species that is charged, or fed by an amount", "equivalents of nothing are nothing")


def _species(reader: Reader, table: dict[str, Any], path: str, names: set[str]) -> list[str]:
    reader.only(table, path, sorted(names))
    return [name for name in table if name in names]


def _charge(reader: Reader, table: dict[str, Any], names: set[str]) -> Charge:
    path = "recipe.charge"
    reader.only(table, path, ("temperature", "volume", "concentration", "amount", "balance"))
    for key, dimension in (("temperature", "temperature"), ("volume", "volume")):
        if key in table:
            reader.quantity(f"{path}.{key}", table[key], dimension)
    reader.needed(f"{path}.temperature", "a batch starts at a temperature")
    reader.at_least(f"{path}.volume", 0.0, True, "a charge fills something")
    found: dict[str, list[str]] = {}
    for key, dimension in (("concentration", "concentration"), ("amount", "amount")):
        part = reader.table(table, key, f"{path}.{key}")
        found[key] = _species(reader, part, f"{path}.{key}", names)
        for name in found[key]:
            reader.quantity(f"{path}.{key}.{name}", part[name], dimension)
            reader.at_least(f"{path}.{key}.{name}", 0.0, False, "less than nothing cannot be charged")
    for name in set(found["amount"]) & set(found["concentration"]):
        reader.fault(f"{path}.amount.{name}", name, "an amount or a concentration", "both set the same thing")
    balance = table.get("balance")
    if balance is not None and (not isinstance(balance, str) or balance not in names):
        reader.fault(f"{path}.balance", repr(balance), "a species of this study", "it fills what the others' volumes leave")
        balance = None
    for key in ("amount", "concentration"):
        if balance in found[key]:
            reader.fault(f"{path}.balance", balance, f"a species without its own {key}", f"{path}.{key}.{balance} would not count")
    if not (found["amount"] or found["concentration"] or balance is not None or reader.broken(path)):
        reader.fault(path, "nothing", "a concentration, an amount, or a balance", "a batch is made of something")
    if found["concentration"] or balance is not None or not found["amount"]:
        reader.needed(f"{path}.volume", "a concentration, or a balance, is of a volume")
    own = [] if balance is None else [*found["amount"], *found["concentration"], balance]
    for name in own if f"{path}.volume" in reader.values else [*own, *found["amount"]]:
        _own_volume(reader, name, "its own volume counts in the charge")
    return Charge(tuple(found["concentration"]), tuple(found["amount"]), balance)


def _own_volume(reader: Reader, name: str, because: str) -> None:
    for key in ("molar_mass", "density"):
        reader.needed(f"species.{name}.{key}", because)


def _feed(reader: Reader, name: str, table: dict[str, Any], names: set[str]) -> Feed:
    path = f"recipe.feeds.{name}"
    reader.only(table, path, ("amount", "temperature", "start", "duration"))
    for key, dimension in (("temperature", "temperature"), ("start", "time"), ("duration", "time")):
        if key in table:
            reader.quantity(f"{path}.{key}", table[key], dimension)
    if "start" not in table:
        reader.keep(f"{path}.start", 0.0, "s", "time")
    reader.at_least(f"{path}.start", 0.0, False, "a batch begins at zero, and ends", LATEST)
    reader.needed(f"{path}.duration", "a feed takes time")
    reader.at_least(f"{path}.duration", _SHORTEST, False, "a feed takes time; what comes at once belongs to the charge", LATEST)
    amount = reader.table(table, "amount", f"{path}.amount")
    fed = _species(reader, amount, f"{path}.amount", names)
    if not amount:
        reader.fault(f"{path}.amount", "nothing", '{ species = "4.4 kmol" }', "a feed brings something in")
    equivalents: dict[str, str] = {}
    for species in fed:
        place, value = f"{path}.amount.{species}", amount[species]
        if isinstance(value, dict):
            reader.only(value, place, ("equivalents", "of"))
            if "equivalents" in value:
                reader.quantity(f"{place}.equivalents", value["equivalents"], "dimensionless")
            reader.needed(f"{place}.equivalents", "an amount by equivalents has their number")
            reader.at_least(f"{place}.equivalents", 0.0, False, "less than nothing cannot be fed")
            of = value.get("of")
            if isinstance(of, str) and of in names and of != species:
                equivalents[species] = of
            else:
                reader.fault(f"{place}.of", repr(of), "another species of this study", "equivalents are counted against it")
        else:
            reader.quantity(place, value, "amount")
            reader.at_least(place, 0.0, False, "less than nothing cannot be fed")
        _own_volume(reader, species, f"feed {name} adds its volume")
    return Feed(name, tuple(fed), equivalents)


def sorted_events(raw: object) -> list[tuple[int, Any]]:
    """Return events with their place in the file, by time; what cannot be read as a time stays where it is."""

    def when(entry: tuple[int, Any]) -> float:
        try:
            return to_si(str(entry[1].get("time")), "time") if isinstance(entry[1], dict) else 0.0
        except UnitFault:
            return 0.0

    return sorted(enumerate(raw if isinstance(raw, list) else []), key=when)


def kinds_set(raw: object) -> set[str]:
    """Return the kinds of cooling that events switch to."""
    tables = [e["set"] for e in raw if isinstance(e, dict) and isinstance(e.get("set"), dict)] if isinstance(raw, list) else []
    return {str(t["cooling.kind"]) for t in tables if "cooling.kind" in t}


def read_events(reader: Reader, raw: object) -> tuple[Event, ...]:
    """Return the events by time; each sets a quantity of [cooling] or [vessel], or the kind of cooling."""
    if not isinstance(raw, list):
        reader.fault("events", repr(raw), "[[events]]", "events are a list")
        return ()
    lines = dict(reader.lines)
    result = []
    for place, (origin, entry) in enumerate(sorted_events(raw)):
        reader.lines[f"events.{place}"] = lines.get(f"events.{origin}", lines.get("events", 1))
        for key in ("time", "set"):
            if f"events.{origin}.{key}" in lines:
                reader.lines[f"events.{place}.{key}"] = lines[f"events.{origin}.{key}"]
        event = _event(reader, f"events.{place}", entry)
        if event is not None:
            result.append(event)
    return tuple(result)


def _event(reader: Reader, path: str, entry: object) -> Event | None:
    if not isinstance(entry, dict):
        reader.fault(path, repr(entry), "a table with time and set", "an event changes something at a time")
        return None
    reader.only(entry, path, ("time", "set"))
    if "time" in entry:
        reader.quantity(f"{path}.time", entry["time"], "time")
    if "when" not in entry:
        reader.needed(f"{path}.time", "an event happens at a time")
    reader.at_least(f"{path}.time", 0.0, False, "a batch begins at zero, and ends", LATEST)
    sets: dict[str, float | str] = {}
    table = reader.table(entry, "set", f"{path}.set")
    reader.only(table, f"{path}.set", ("cooling.kind", *_SETTABLE))
    if not table:
        reader.fault(f"{path}.set", "nothing", '{ "cooling.set_point" = "60 degC" }', "an event sets something")
    for name, value in table.items():
        if name == "cooling.kind":
            sets[name] = reader.choice(table, f"{path}.set", name, KINDS, "isothermal")
        elif name in _SETTABLE:
            number = reader.quantity(f"{path}.set.{name}", value, _SETTABLE[name])
            if name not in reader.values:
                if not reader.broken(name):
                    reader.fault(f"{path}.set.{name}", name, f"{name} written in its section too", "before the event it has no value")
            elif number is not None:
                reader.within(f"{path}.set.{name}", name, number)
                sets[name] = number
    time = reader.values.get(f"{path}.time")
    return None if time is None else Event(time, sets)
