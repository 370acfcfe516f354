"""What only shows when the sections are seen together: limits and kinds of cooling without what they need, the vessel's fill."""

from collections.abc import Mapping
from itertools import product

from sweep.study.model import FAILURE, Charge, Feed, Limit, Reaction, Species, Target, Variable
from sweep.study.reader import Reader

_MOST_CORNERS = 10  # variables; beyond, only the set-point is looked at

def check_thermal(reader: Reader, species: tuple[Species, ...], reactions: tuple[Reaction, ...], isothermal: bool, why: str) -> None:
    """Fault heats, heat capacities and reference temperatures that an energy balance cannot do without."""
    if isothermal:
        for reaction in reactions:
            if reaction.reversible and any("recipe.charge.temperature" in key for key in reader.swept):
                reader.needed(f"reactions.{reaction.name}.heat.value", "its equilibrium moves with the swept temperature")
        return
    for one in species:
        if one.heat_capacity is None and not any(f.key.startswith(f"species.{one.name}.heat_capacity") for f in reader.faults):
            reader.fault(f"species.{one.name}.heat_capacity", "nothing", "a heat capacity", why)
    known = {s.name: s.heat_capacity for s in species}
    for reaction in reactions:
        reader.needed(f"reactions.{reaction.name}.heat.value", why)
        change = [sum(nu * (known.get(s) or (0.0,) * 4)[k] for s, nu in reaction.stoichiometry.items()) for k in range(4)]
        if any(abs(c) > 1e-9 for c in change):
            reader.needed(f"reactions.{reaction.name}.heat.at", "the heat moves with temperature, for the heat capacities differ")

def check_equilibria(reader: Reader, reactions: tuple[Reaction, ...]) -> None:
    """Fault an equilibrium constant that moves with temperature and has no temperature of its own."""
    for reaction in reactions:
        path = f"reactions.{reaction.name}"
        if reaction.reversible and f"{path}.heat.value" in reader.values:
            reader.needed(f"{path}.equilibrium_constant.at", "an equilibrium moves with temperature, by van 't Hoff")

def check_limits(reader: Reader, limits: tuple[Limit, ...], reactions: tuple[Reaction, ...], target: Target | None) -> None:
    """Fault limits without what they need."""
    decomposes = any(r.purpose == "decomposition" for r in reactions)
    for name in dict.fromkeys(limit.name for limit in limits):
        path = f"limits.{name}"
        tested = "failure.td24" in reader.values and name in ("td24", "criticality_class")
        if name in ("tmr_ad", "td24", "criticality_class") and not decomposes and not tested:
            reader.fault(path, name, 'a reaction with purpose = "decomposition"', "without one it is not assessed")
        if (name in ("time_to_target", "conversion") or name.startswith("yield_")) and target is None:
            reader.fault(path, name, "[target]", "it counts on the target species")
        if (name == "productivity" or name.startswith("per_product_")) and (target is None or target.product is None):
            reader.fault(path, name, "[target] with a product", "it counts on the product")
        if name == "productivity":
            reader.needed("vessel.volume", "productivity is per volume of vessel")
        if name in (*FAILURE, "accumulation", "cooling_duty", "heat_release"):
            for reaction in reactions:
                reader.needed(f"reactions.{reaction.name}.heat.value", f"the limit {name} needs the heats")
    bound, horizon = reader.values.get("limits.tmr_ad.at_least"), reader.values["failure.horizon"]
    if bound is not None and bound > horizon:
        reader.fault(
            "limits.tmr_ad.at_least",
            f"{bound:g} s",
            f"at most failure.horizon, {horizon:g} s",
            "what lies beyond the horizon is not seen",
        )

def _brought(values: Mapping[str, float], charge: Charge, feeds: tuple[Feed, ...]) -> tuple[float, float, float]:
    """Return charged volume, own volume of all but the balance, volume with feeds (m3); KeyError where something is missing."""

    def own(name: str) -> float:
        return values[f"species.{name}.molar_mass"] / values[f"species.{name}.density"]

    moles = {s: values[f"recipe.charge.amount.{s}"] for s in charge.amounts}
    volume = values.get("recipe.charge.volume")
    if volume is None:
        volume = sum(n * own(s) for s, n in moles.items())
    moles |= {s: values[f"recipe.charge.concentration.{s}"] * volume for s in charge.concentrations}
    parts = sum(n * own(s) for s, n in moles.items() if s != charge.balance) if charge.balance else 0.0
    total, fed = volume, 0.0
    plain = dict(moles)
    for feed in feeds:
        for s in feed.species:
            if s not in feed.equivalents:
                plain[s] = plain.get(s, 0.0) + values[f"recipe.feeds.{feed.name}.amount.{s}"]
    for feed in feeds:
        for s in feed.species:
            path = f"recipe.feeds.{feed.name}.amount.{s}"
            n = values[f"{path}.equivalents"] * plain.get(feed.equivalents[s], 0.0) if s in feed.equivalents else values[path]
            fed += n * own(s)
    return volume, parts, total + fed

def check_fill(reader: Reader, charge: Charge, feeds: tuple[Feed, ...], variables: tuple[Variable, ...]) -> None:
    """Fault a fill above the vessel, or a charge without room for its balance, at the set-point and the variables' corners."""
    moving = [v for v in variables if any(p.startswith(("recipe.", "vessel.volume", "species.")) for p in v.sets)]
    corners = product(*([None, v.low, v.high] for v in moving)) if len(moving) <= _MOST_CORNERS // 2 else [(None,) * len(moving)]
    for corner in corners:
        sets = {p: x for v, x in zip(moving, corner, strict=True) if x is not None for p in v.sets}
        values = {**reader.values, **sets}
        where = ", ".join(f"{v.name} = {x:g} (SI)" for v, x in zip(moving, corner, strict=True) if x is not None) or "the set-point"
        try:
            volume, parts, fill = _brought(values, charge, feeds)
        except (KeyError, ZeroDivisionError):
            return
        room = values.get("vessel.volume")
        if parts > volume * (1.0 + 1e-9):
            reader.fault(
                "recipe.charge.balance",
                f"{parts:.6g} m3 of other species at {where}",
                f"at most {volume:.6g} m3",
                "nothing is left for the balance",
            )
            return
        if room is not None and fill > room * (1.0 + 1e-9):
            reader.fault(
                "vessel.volume",
                f"{fill:.6g} m3 of liquid at {where}",
                f"at most {room:.6g} m3",
                "the fill is above the vessel's volume",
            )
            return

def warn_ranges(reader: Reader, reactions: tuple[Reaction, ...], variables: tuple[Variable, ...]) -> None:
    """Warn where constants are used far from where they were found."""
    swept = [(v.low, v.high) for v in variables if "recipe.charge.temperature" in v.sets or "cooling.set_point" in v.sets]
    start = reader.values.get("recipe.charge.temperature")
    swept.append((start, start) if start is not None else (0.0, 0.0))
    low, high = min(x for x, _ in swept), max(x for _, x in swept)
    if start is None:
        return
    for reaction in reactions:
        path = f"reactions.{reaction.name}"
        at = reader.values.get(f"{path}.rate_constant.at")
        if at is not None and reaction.purpose == "synthesis" and not low - 60.0 <= at <= high + 60.0:
            reader.warn(
                f"{path}.rate_constant.at",
                f"{at:.2f} K",
                f"a temperature near {low:.2f} to {high:.2f} K",
                "its reference temperature lies more than 60 K from what is swept",
            )
        if reaction.valid is not None and reaction.purpose == "synthesis" and not (reaction.valid[0] <= low and high <= reaction.valid[1]):
            reader.warn(
                f"{path}.valid",
                f"{reaction.valid[0]:.2f} to {reaction.valid[1]:.2f} K",
                f"{low:.2f} to {high:.2f} K",
                "temperatures outside its range of validity are swept",
            )

def warn_jacket(reader: Reader, kind: str, reactions: tuple[Reaction, ...], charge: Charge, feeds: tuple[Feed, ...]) -> None:
    """Warn where the jacket at its coldest cannot carry the heat of a feed that reacts as it comes in."""
    values = reader.values
    hold = values.get("cooling.set_point", values.get("recipe.charge.temperature"))
    if kind != "jacket" or hold is None:
        return
    try:
        fill = _brought(values, charge, feeds)[2]
        area = values.get("vessel.area")
        if area is None:
            bottom = values.get("vessel.area.bottom", 0.0)
            area = bottom + (values["vessel.area.full"] - bottom) * fill / values["vessel.area.at_volume"]
        carried = values["vessel.U"] * area * (hold - values["cooling.inlet"])
        plain = {s: values[f"recipe.charge.amount.{s}"] for s in charge.amounts}
        plain |= {s: values[f"recipe.charge.concentration.{s}"] * values["recipe.charge.volume"] for s in charge.concentrations}
        for feed in feeds:
            for s in feed.species:
                path = f"recipe.feeds.{feed.name}"
                n = (
                    values[f"{path}.amount.{s}.equivalents"] * plain.get(feed.equivalents[s], 0.0)
                    if s in feed.equivalents
                    else values[f"{path}.amount.{s}"]
                )
                heats = [
                    -values.get(f"reactions.{r.name}.heat.value", 0.0) / r.left[s] for r in reactions if s in r.left and r.purpose == "synthesis"
                ]
                dosed = n / values[f"{path}.duration"] * max(heats, default=0.0)
                if dosed > carried:
                    reader.warn(
                        f"{path}.duration",
                        f"{dosed / 1e3:.4g} kW while {s} is dosed",
                        f"at most {carried / 1e3:.4g} kW, U A (set-point - inlet)",
                        "the jacket cannot carry the dosing heat",
                    )
    except (KeyError, ZeroDivisionError):
        return
