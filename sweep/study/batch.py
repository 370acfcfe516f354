"""Section [recipe]: what is brought in, and when."""

from typing import Any

from sweep.study.model import LATEST, Charge, Feed
from sweep.study.reader import Reader

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
