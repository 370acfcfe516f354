"""What only shows when the sections are seen together: limits and kinds of cooling without what they need, the vessel's fill."""

import math
from collections.abc import Mapping
from itertools import product
from typing import NamedTuple

from sweep.study.model import FAILURE, Charge, Event, Feed, Limit, Reaction, Species, Target, Variable
from sweep.study.reader import Reader
from sweep.study.settings import Objective

_MOST_CORNERS = 5  # variables; beyond, only the set-point is looked at


def check_thermal(reader: Reader, species: tuple[Species, ...], reactions: tuple[Reaction, ...], isothermal: bool, why: str) -> None:
    """Fault heats, heat capacities and reference temperatures that an energy balance cannot do without."""
    known = {s.name: s.heat_capacity for s in species}
    for reaction in reactions:
        path = f"reactions.{reaction.name}.heat"
        if not isothermal:
            reader.needed(f"{path}.value", why)
        elif reaction.reversible and "recipe.charge.temperature" in reader.swept:
            reader.needed(f"{path}.value", "its equilibrium moves with the swept temperature")
        change = [sum(nu * (known.get(s) or (0.0,) * 4)[k] for s, nu in reaction.stoichiometry.items()) for k in range(4)]
        if any(abs(c) > 1e-9 for c in change) and f"{path}.value" in reader.values:
            reader.needed(f"{path}.at", "the heat moves with temperature, for the heat capacities differ")
    for one in species:
        if not isothermal and one.heat_capacity is None and not reader.broken(f"species.{one.name}.heat_capacity"):
            reader.fault(f"species.{one.name}.heat_capacity", "nothing", "a heat capacity", why)


def temperatures(reader: Reader) -> tuple[float, float]:
    """Return the coldest and the hottest temperature (K) that the batch, its cooling and its limits name; ranges included."""
    named = [298.15]
    for path, value in reader.values.items():
        batch = path.startswith(("recipe.", "cooling.", "events.", "limits.", "vessel."))
        if batch and reader.dimensions.get(path) == "temperature":
            named.append(value)
    return min(named), max(named)


def check_heat_capacities(reader: Reader, species: tuple[Species, ...], variables: tuple[Variable, ...]) -> None:
    """Fault a heat capacity that is not positive between the coldest and the hottest temperature the study names."""
    low, high = temperatures(reader)
    for variable in variables:
        if reader.dimensions[variable.sets[0]] == "temperature":
            low, high = min(low, variable.low), max(high, variable.high)
    for one in species:
        a, b, c, d = one.heat_capacity or (1.0, 0.0, 0.0, 0.0)
        steps = [low + (high - low) * k / 200.0 for k in range(201)]
        bad = next((T for T in steps if a + T * (b + T * (c + T * d)) <= 0.0), None)
        if bad is not None and not reader.broken(f"species.{one.name}.heat_capacity"):
            value = a + bad * (b + bad * (c + bad * d))
            expected = f"above 0 from {low:.2f} to {high:.2f} K"
            reader.fault(f"species.{one.name}.heat_capacity", f"{value:.4g} J/mol/K at {bad:.2f} K", expected, "a heat capacity is positive")


def check_equilibria(reader: Reader, reactions: tuple[Reaction, ...]) -> None:
    """Fault an equilibrium constant that moves with temperature and has no temperature of its own."""
    for reaction in reactions:
        path = f"reactions.{reaction.name}"
        if reaction.reversible and f"{path}.heat.value" in reader.values:
            reader.needed(f"{path}.equilibrium_constant.at", "an equilibrium moves with temperature, by van 't Hoff")


def check_limits(
    reader: Reader, limits: tuple[Limit, ...], reactions: tuple[Reaction, ...], target: Target | None, objectives: tuple[Objective, ...] = ()
) -> None:
    """Fault limits and objectives without what they need."""
    decomposes = any(r.purpose == "decomposition" for r in reactions)
    places = {one.name: f"optimum.{one.sense}" for one in objectives if one.kind == "response"}
    for whole, path in {**places, **{limit.name: f"limits.{limit.name}" for limit in limits}}.items():
        name = whole.rpartition(".")[2]
        tested = "failure.td24" in reader.values and name in ("td24", "criticality_class")
        unread = any(f.key.startswith("reactions.") and f.key.endswith((".equation", ".orders")) for f in reader.faults)
        if name in ("tmr_ad", "td24", "criticality_class") and not decomposes and not tested and not unread:
            reader.fault(path, name, 'a reaction with purpose = "decomposition"', "without one it is not assessed")
        if (name in ("time_to_target", "conversion") or name.startswith("yield_")) and target is None:
            reader.fault(path, name, "[target]", "it counts on the target species")
        if (name == "productivity" or name.startswith("per_product_")) and (target is None or target.product is None):
            reader.fault(path, name, "[target] with a product", "it counts on the product")
        if name == "productivity":
            reader.needed("vessel.volume", "productivity is per volume of vessel")
        if name in (*FAILURE, "accumulation", "cooling_duty", "heat_release"):
            for reaction in reactions:
                reader.needed(f"reactions.{reaction.name}.heat.value", f"{name} needs the heats")
    horizon = reader.values["failure.horizon"]
    for name in {limit.name for limit in limits if limit.name.rpartition(".")[2] == "tmr_ad"}:
        bound = reader.values.get(f"limits.{name}.at_least")
        if bound is not None and bound > horizon:
            expected = f"at most failure.horizon, {horizon:g} s"
            reader.fault(f"limits.{name}.at_least", f"{bound:g} s", expected, "what lies beyond the horizon is not seen")


def check_conditions(reader: Reader, events: tuple[Event, ...], reactions: tuple[Reaction, ...], target: Target | None, kinds: set[str]) -> None:
    """Fault conditions on what the batch does not have."""
    for event in events:
        when = event.when
        if when is None:
            continue
        name = when.path.rpartition(".")[0]
        if when.quantity == "conversion" and target is None:
            reader.fault(name, "conversion", "[target]", "it counts on the target species")
        if when.quantity == "jacket_temperature" and not kinds & {"jacket", "coolant"}:
            reader.fault(name, "jacket_temperature", 'cooling.kind "jacket" or "coolant"', "without a jacket it has no temperature")
        if when.quantity in ("heat_release", "cooling_duty"):
            for reaction in reactions:
                reader.needed(f"reactions.{reaction.name}.heat.value", f"the condition on {when.quantity} needs the heats")


class Brought(NamedTuple):
    """Charged volume, own volume of all but the balance, volume with feeds (m3); moles charged, and with feeds, by species."""

    volume: float
    parts: float
    fill: float
    charged: dict[str, float]
    moles: dict[str, float]


def brought(values: Mapping[str, float], charge: Charge, feeds: tuple[Feed, ...]) -> Brought:
    """Return what a recipe brings in; KeyError or ZeroDivisionError where something is missing."""

    def own(name: str) -> float:
        return values[f"species.{name}.molar_mass"] / values[f"species.{name}.density"]

    moles = {s: values[f"recipe.charge.amount.{s}"] for s in charge.amounts}
    volume = values.get("recipe.charge.volume")
    if volume is None:
        volume = sum(n * own(s) for s, n in moles.items())
    moles |= {s: values[f"recipe.charge.concentration.{s}"] * volume for s in charge.concentrations}
    parts = sum(n * own(s) for s, n in moles.items() if s != charge.balance) if charge.balance else 0.0
    if charge.balance:
        moles[charge.balance] = (volume - parts) / own(charge.balance)
    fill, plain = volume, dict(moles)
    for feed in feeds:
        for s in feed.species:
            if s not in feed.equivalents:
                plain[s] = plain.get(s, 0.0) + values[f"recipe.feeds.{feed.name}.amount.{s}"]
    whole = dict(plain)
    for feed in feeds:
        for s in feed.species:
            path = f"recipe.feeds.{feed.name}.amount.{s}"
            n = values[f"{path}.equivalents"] * plain.get(feed.equivalents[s], 0.0) if s in feed.equivalents else values[path]
            fill += n * own(s)
            if s in feed.equivalents:
                whole[s] = whole.get(s, 0.0) + n
    return Brought(volume, parts, fill, moles, whole)


def check_fill(reader: Reader, charge: Charge, feeds: tuple[Feed, ...], variables: tuple[Variable, ...], target: Target | None) -> None:
    """Fault what cannot be charged, at the set-point and at the variables' corners; the first corner that shows it is named."""
    moving = [v for v in variables if any(p.startswith(("recipe.", "vessel.volume", "species.")) for p in v.sets)]
    corners = product(*([None, v.low, v.high] for v in moving)) if len(moving) <= _MOST_CORNERS else [(None,) * len(moving)]
    for corner in corners:
        sets = {p: x for v, x in zip(moving, corner, strict=True) if x is not None for p in v.sets}
        where = ", ".join(f"{v.name} = {x:g} (SI)" for v, x in zip(moving, corner, strict=True) if x is not None) or "the set-point"
        try:
            found = brought({**reader.values, **sets}, charge, feeds)
        except (KeyError, ZeroDivisionError):
            return
        if _fault_fill(reader, found, {**reader.values, **sets}.get("vessel.volume", math.inf), target, where):
            return


def _fault_fill(reader: Reader, found: Brought, room: float, target: Target | None, where: str) -> bool:
    """Fault one corner; tell whether there was something."""
    if found.parts > found.volume * (1.0 + 1e-9):
        expected, because = f"at most {found.volume:.6g} m3", "nothing is left for the balance"
        reader.fault("recipe.charge.balance", f"{found.parts:.6g} m3 of other species at {where}", expected, because)
    elif found.fill > room * (1.0 + 1e-9):
        expected, because = f"at most {room:.6g} m3", "the fill is above the vessel's volume"
        reader.fault("vessel.volume", f"{found.fill:.6g} m3 of liquid at {where}", expected, because)
    elif not sum(found.charged.values()) > 0.0:
        reader.fault("recipe.charge", f"0 mol at {where}", "some amount above zero", "a batch is made of something")
    elif target is not None and found.moles.get(target.species, 0.0) <= 0.0 and not (reader.broken("target") or reader.broken("recipe")):
        expected, because = "an amount above zero", "what is never brought in cannot be converted"
        reader.fault("target.species", f"0 mol of {target.species} at {where}", expected, because)
    else:
        return False
    return True
