"""Sections [vessel], [cooling], [recipe] and [[events]]."""

from typing import Any

from sweep.study.model import Charge, Event, Feed
from sweep.study.reader import Reader

KINDS = ("adiabatic", "isothermal", "duty", "coolant", "jacket")
_VESSEL = {"volume": "volume", "heat_capacity": "heat capacity", "U": "heat transfer coefficient", "stirrer_power": "power"}
_COOLING = {
    "inlet": "temperature", "flow": "volume flow", "hold_up": "volume", "start": "temperature", "set_point": "temperature",
    "gain": "inverse temperature", "reset_time": "time", "duty": "power", "temperature": "temperature",
}  # fmt: skip
_NEEDS = {"duty": ("duty",), "coolant": ("temperature",), "jacket": ("inlet", "flow", "hold_up")}


def _plain(reader: Reader, path: str, table: dict[str, Any], dimensions: dict[str, str]) -> None:
    for key, dimension in dimensions.items():
        if key in table:
            reader.quantity(f"{path}.{key}", table[key], dimension)
            if dimension != "temperature":
                reader.at_least(f"{path}.{key}", 0.0, key in ("volume", "hold_up", "reset_time"), "it is not negative in any vessel")


def read_vessel(reader: Reader, table: dict[str, Any]) -> None:
    """Read the vessel."""
    reader.only(table, "vessel", (*_VESSEL, "area", "heat_loss"))
    _plain(reader, "vessel", table, _VESSEL)
    area = table.get("area")
    if isinstance(area, dict):
        reader.only(area, "vessel.area", ("full", "at_volume", "bottom"))
        _plain(reader, "vessel.area", area, {"full": "area", "at_volume": "volume", "bottom": "area"})
        reader.needed("vessel.area.full", "an area that moves with the fill has a full value")
        reader.needed("vessel.area.at_volume", "an area that moves with the fill says at which volume it is full")
    elif area is not None:
        reader.quantity("vessel.area", area, "area")
    loss = reader.table(table, "heat_loss", "vessel.heat_loss")
    reader.only(loss, "vessel.heat_loss", ("UA", "ambient"))
    _plain(reader, "vessel.heat_loss", loss, {"UA": "heat loss", "ambient": "temperature"})


def read_cooling(reader: Reader, table: dict[str, Any]) -> str | None:
    """Read the cooling; return its kind."""
    reader.only(table, "cooling", ("kind", "coolant", *_COOLING))
    _plain(reader, "cooling", table, _COOLING)
    coolant = reader.table(table, "coolant", "cooling.coolant")
    reader.only(coolant, "cooling.coolant", ("density", "heat_capacity"))
    _plain(reader, "cooling.coolant", coolant, {"density": "density", "heat_capacity": "specific heat capacity"})
    kind = table.get("kind", "isothermal")
    if kind not in KINDS:
        reader.fault("cooling.kind", repr(kind), "one of " + ", ".join(KINDS), "no other kind of cooling is known")
        return None
    for key in _NEEDS.get(kind, ()):
        reader.needed(f"cooling.{key}", f"cooling of kind {kind!r} works with it")
    if kind in ("coolant", "jacket"):
        reader.needed("vessel.U", "heat flows through the wall")
        if "vessel.area.full" not in reader.values:
            reader.needed("vessel.area", "heat flows through the wall")
    return str(kind)


def read_charge(reader: Reader, table: dict[str, Any], species: set[str]) -> Charge:
    """Read what is charged."""
    path = "recipe.charge"
    reader.only(table, path, ("temperature", "volume", "concentration", "amount", "balance"))
    _plain(reader, path, table, {"temperature": "temperature", "volume": "volume"})
    reader.needed(f"{path}.temperature", "the march starts from it")
    read = {}
    for key, dimension in (("concentration", "concentration"), ("amount", "amount")):
        part = reader.table(table, key, f"{path}.{key}")
        read[key] = tuple(s for s in part if _charged(reader, f"{path}.{key}.{s}", part[s], dimension, s in species))
    balance = table.get("balance")
    if balance is not None and balance not in species:
        reader.fault(f"{path}.balance", repr(balance), "a species of this study", "the balance is filled with it")
    if read["concentration"] or balance:
        reader.needed(f"{path}.volume", "a concentration, or a balance, is of a volume")
    if balance:
        for name in {balance, *read["amount"], *read["concentration"]} & species:
            reader.needed(f"species.{name}.density", "the balance is what the others' own volumes leave")
            reader.needed(f"species.{name}.molar_mass", "the balance is what the others' own volumes leave")
    elif f"{path}.volume" not in reader.values:
        for name in read["amount"]:
            reader.needed(f"species.{name}.density", "without recipe.charge.volume the volume is the sum of own volumes")
    return Charge(read["concentration"], read["amount"], balance)


def _charged(reader: Reader, path: str, value: object, dimension: str, known: bool) -> bool:
    if not known:
        reader.fault(path, path.rpartition(".")[2], "a species of this study", "nothing else can be charged")
        return False
    reader.quantity(path, value, dimension)
    reader.at_least(path, 0.0, False, "nothing negative can be charged")
    return path in reader.values


def read_feeds(reader: Reader, tables: dict[str, Any], species: set[str]) -> tuple[Feed, ...]:
    """Read the feeds."""
    return tuple(_feed(reader, name, table, species) for name, table in tables.items() if isinstance(table, dict))


def _feed(reader: Reader, name: str, table: dict[str, Any], species: set[str]) -> Feed:
    path = f"recipe.feeds.{name}"
    reader.only(table, path, ("amount", "temperature", "start", "duration"))
    _plain(reader, path, table, {"temperature": "temperature", "start": "time", "duration": "time"})
    reader.needed(f"{path}.duration", "a feed takes its time")
    reader.at_least(f"{path}.duration", 0.0, True, "a feed takes some time")
    fed, equivalents = [], {}
    for s, value in reader.table(table, "amount", f"{path}.amount").items():
        place = f"{path}.amount.{s}"
        if s not in species:
            reader.fault(place, s, "a species of this study", "nothing else can be fed")
            continue
        if isinstance(value, dict):
            reader.only(value, place, ("equivalents", "of"))
            reader.quantity(f"{place}.equivalents", value.get("equivalents"), "dimensionless")
            if value.get("of") not in species:
                reader.fault(f"{place}.of", repr(value.get("of")), "a species of this study", "equivalents are counted against it")
                continue
            equivalents[s] = str(value["of"])
        else:
            reader.quantity(place, value, "amount")
            reader.at_least(place, 0.0, False, "nothing negative can be fed")
        fed.append(s)
        reader.needed(f"species.{s}.density", "what is fed adds its volume")
        reader.needed(f"species.{s}.molar_mass", "what is fed adds its volume")
    return Feed(name, tuple(fed), equivalents)


def read_events(reader: Reader, tables: list[Any]) -> tuple[Event, ...]:
    """Read the events by time."""
    events = [e for e in (_event(reader, k, table) for k, table in enumerate(tables)) if e is not None]
    return tuple(sorted(events, key=lambda event: event.time))


def _event(reader: Reader, k: int, table: Any) -> Event | None:
    path = f"events.{k}"
    if not isinstance(table, dict):
        reader.fault(path, repr(table), "a table", "an event has a time and what it sets")
        return None
    reader.only(table, path, ("time", "set"))
    from sweep.study.settable import dimension_of

    time = reader.quantity(f"{path}.time", table.get("time"), "time")
    reader.at_least(f"{path}.time", 0.0, False, "the batch starts at zero")
    sets: dict[str, float | str] = {}
    for target, value in reader.table(table, "set", f"{path}.set").items():
        if target == "cooling.kind":
            if value in KINDS:
                sets[target] = value
            else:
                reader.fault(f"{path}.set", repr(value), "one of " + ", ".join(KINDS), "no other kind of cooling is known")
            continue
        dimension = dimension_of(reader, target)
        if dimension is None or target.startswith("recipe."):
            reader.fault(f"{path}.set", target, "a quantity of vessel, cooling, species or reactions", "an event changes what can change during a batch")
            continue
        number = reader.quantity(f"{path}.set.{target}", value, dimension)
        if number is not None:
            sets[target] = number
    return None if time is None or not sets else Event(time, sets)
