"""Sections [species] and [reactions]."""

from typing import Any

from sweep.base.units import UnitFault, to_si
from sweep.study.equation import parse
from sweep.study.model import Reaction, Species
from sweep.study.reader import Reader

_HIGHEST_BARRIER = 2e6  # J/mol; several times the strongest bond
_BALANCE = 1e-3  # relative; molar masses are rarely written with more digits


def _finite(x: object) -> bool:
    return isinstance(x, (int, float)) and not isinstance(x, bool) and abs(x) <= 1e300


def read_species(reader: Reader, tables: dict[str, Any]) -> tuple[Species, ...]:
    """Return the species; molar masses first, for what is given per mass needs them."""
    if not tables:
        reader.fault("species", "nothing", "at least one [species.NAME]", "a batch is made of something")
    named = reader.names(tables, "species")
    for name, table in named.items():
        path = f"species.{name}"
        if "molar_mass" in table:
            mass = reader.quantity(f"{path}.molar_mass", table["molar_mass"], "molar mass")
            reader.at_least(f"{path}.molar_mass", 0.0, True, "a mole of something weighs something")
            if mass:
                reader.molar_masses[name] = mass
    return tuple(_species(reader, name, table) for name, table in named.items())


def _species(reader: Reader, name: str, table: dict[str, Any]) -> Species:
    path = f"species.{name}"
    reader.only(table, path, ("molar_mass", "heat_capacity", "density", "role"))
    if "density" in table:
        reader.quantity(f"{path}.density", table["density"], "density")
        reader.at_least(f"{path}.density", 0.0, True, "a liquid has a density")
    role = table.get("role")
    if role is not None and role not in ("solvent", "gas"):
        reader.fault(f"{path}.role", repr(role), '"solvent" or "gas"', "no other role is known")
    return Species(name, role, _heat_capacity(reader, f"{path}.heat_capacity", name, table.get("heat_capacity")))


def _heat_capacity(reader: Reader, path: str, name: str, value: object) -> tuple[float, float, float, float] | None:
    if value is None:
        return None
    if not isinstance(value, dict):
        cp = reader.quantity(path, value, "molar heat capacity")
        reader.at_least(path, 0.0, True, "a heat capacity is positive")
        return None if cp is None else (cp, 0.0, 0.0, 0.0)
    reader.only(value, path, ("coefficients", "unit"))
    numbers, unit = value.get("coefficients"), value.get("unit", "")
    if not isinstance(numbers, list) or not 1 <= len(numbers) <= 4 or not all(_finite(x) for x in numbers):
        reader.fault(f"{path}.coefficients", repr(numbers), "one to four numbers", "a + bT + cT^2 + dT^3")
        return None
    try:
        scale = reader.in_si(path, f"1 {unit}", "molar heat capacity")
    except UnitFault as error:
        reader.fault(f"{path}.unit", repr(unit), error.expected, error.because)
        return None
    a, b, c, d = [float(x) * scale for x in numbers] + [0.0] * (4 - len(numbers))
    return a, b, c, d


def read_reactions(reader: Reader, tables: dict[str, Any], species: tuple[Species, ...]) -> tuple[Reaction, ...]:
    """Return the reactions."""
    names = {s.name for s in species}
    found = [_reaction(reader, name, table, names) for name, table in reader.names(tables, "reactions").items()]
    return tuple(r for r in found if r is not None)


def _known(reader: Reader, path: str, used: dict[str, float], names: set[str]) -> bool:
    import difflib

    unknown = [s for s in used if s not in names]
    for s in unknown:
        near = difflib.get_close_matches(s, names, 1)
        reader.fault(path, s, near[0] if near else "a species of this study", f"[species.{s}] is not written")
    return not unknown


def _balanced(reader: Reader, path: str, left: dict[str, float], right: dict[str, float], text: str) -> None:
    masses = reader.molar_masses
    if any(s not in masses for s in (*left, *right)):
        reader.warn(path, text, "a molar mass for each of its species", "without them its balance cannot be checked")
        return
    before, after = (sum(n * masses[s] for s, n in side.items()) for side in (left, right))
    if abs(before - after) > _BALANCE * max(before, after):
        reader.fault(
            path,
            f"{text}: {before * 1e3:.6g} g/mol becomes {after * 1e3:.6g} g/mol",
            "equal mass on both sides",
            "mass is conserved",
        )


def _reaction(reader: Reader, name: str, table: dict[str, Any], names: set[str]) -> Reaction | None:
    path = f"reactions.{name}"
    known = ("equation", "rate_constant", "heat", "equilibrium_constant", "orders", "purpose", "source", "valid")
    reader.only(table, path, known)
    text = table.get("equation")
    try:
        left, right, reversible = parse(text if isinstance(text, str) else "")
    except ValueError as error:
        reader.fault(f"{path}.equation", repr(text), '"A + B -> C" or "A <=> B"', str(error))
        return None
    orders = table.get("orders", dict(left))
    if not isinstance(orders, dict) or not all(_finite(x) and x >= 0 for x in orders.values()):
        reader.fault(f"{path}.orders", repr(orders), "{ species = order, ... }", "an order is a number, zero or above")
        return None
    orders = {s: float(a) for s, a in orders.items()}
    understood = _known(reader, f"{path}.equation", {**left, **right}, names)
    understood &= "orders" not in table or _known(reader, f"{path}.orders", orders, names)
    if understood:
        _balanced(reader, f"{path}.equation", left, right, str(text))
    purpose = reader.choice(table, path, "purpose", ("synthesis", "decomposition"), "synthesis")
    reaction = Reaction(
        name,
        str(text),
        purpose,
        reversible,
        left,
        right,
        orders,
        str(table["source"]) if "source" in table else None,
        _valid(reader, f"{path}.valid", table),
    )
    _constants(reader, path, table, reaction)  # faults in them are told too where the equation is not understood
    return reaction if understood else None


def _valid(reader: Reader, path: str, table: dict[str, Any]) -> tuple[float, float] | None:
    if "valid" not in table:
        return None
    pair = table["valid"]
    if not isinstance(pair, list) or len(pair) != 2 or not all(isinstance(x, str) for x in pair):
        reader.fault(path, repr(pair), '["20 degC", "70 degC"]', "a validity range has two temperatures")
        return None
    try:
        low, high = (to_si(x, "temperature") for x in pair)
    except UnitFault as error:
        reader.fault(path, repr(pair), error.expected, error.because)
        return None
    if low >= high:
        reader.fault(path, repr(pair), "the lower temperature first", "the range is upside down")
    return low, high


def concentration_power(power: float, per_time: bool) -> str:
    """Return the SI unit of concentration to a power, per second or not."""
    parts = [] if power == 0.0 else [f"mol**({power:.12g})*m**({-3.0 * power:.12g})"]
    if per_time:
        parts.append("s**(-1)")
    return "*".join(parts) or "dimensionless"


def _constants(reader: Reader, path: str, table: dict[str, Any], reaction: Reaction) -> None:
    constant = reader.table(table, "rate_constant", f"{path}.rate_constant")
    reader.only(constant, f"{path}.rate_constant", ("value", "at", "activation_energy"))
    order = sum(reaction.orders.values())
    _read(reader, f"{path}.rate_constant", constant, concentration_power(1.0 - order, True))
    reader.needed(f"{path}.rate_constant.value", "a reaction has a rate")
    reader.at_least(f"{path}.rate_constant.value", 0.0, False, "a rate constant is not negative")
    if "activation_energy" in constant:
        reader.quantity(f"{path}.rate_constant.activation_energy", constant["activation_energy"], "energy per amount")
        reader.at_least(f"{path}.rate_constant.activation_energy", -_HIGHEST_BARRIER, False, "no reaction has such a barrier", _HIGHEST_BARRIER)
        reader.needed(f"{path}.rate_constant.at", "a rate constant that moves with temperature needs its own")
    heat = reader.table(table, "heat", f"{path}.heat")
    reader.only(heat, f"{path}.heat", ("value", "at"))
    _read(reader, f"{path}.heat", heat, "energy per amount")
    if reaction.purpose == "synthesis" and reader.values.get(f"{path}.heat.value", -1.0) > 0.0:
        reader.warn(
            f"{path}.heat.value",
            heat.get("value"),
            "a negative value where heat is given off",
            "an endothermic synthesis is legal, and rare",
        )
    if reaction.reversible:
        known = reader.table(table, "equilibrium_constant", f"{path}.equilibrium_constant")
        reader.only(known, f"{path}.equilibrium_constant", ("value", "at"))
        _read(
            reader,
            f"{path}.equilibrium_constant",
            known,
            concentration_power(sum(reaction.stoichiometry.values()), False),
        )
        reader.needed(f"{path}.equilibrium_constant.value", "a reversible reaction has an equilibrium")
        reader.at_least(f"{path}.equilibrium_constant.value", 0.0, True, "an equilibrium constant is positive")
        for s, nu in reaction.stoichiometry.items():
            if reaction.orders.get(s, 0.0) + nu < 0.0:
                reader.fault(
                    f"{path}.orders",
                    f"{s}: {reaction.orders.get(s, 0.0):g}",
                    f"at least {-nu:g}",
                    "the reverse rate would have a negative order",
                )
    elif "equilibrium_constant" in table:
        reader.fault(f"{path}.equilibrium_constant", "an equilibrium constant", "<=> in the equation", "-> runs one way")


def _read(reader: Reader, path: str, table: dict[str, Any], dimension: str) -> None:
    if "value" in table:
        value = table["value"]
        reader.quantity(f"{path}.value", value, "dimensionless" if dimension == "dimensionless" else dimension)
    if "at" in table:
        reader.quantity(f"{path}.at", table["at"], "temperature")
