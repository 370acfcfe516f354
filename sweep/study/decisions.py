"""What is to be decided: sections [ranges] and [optimum], and the map of [risk]."""

import difflib
import re
from collections.abc import Mapping
from typing import Any

from sweep.base.units import UnitFault, si_unit, to_si
from sweep.study.model import Limit, Species, Target, Variable
from sweep.study.question import BY_SPECIES, PLAIN, response_of
from sweep.study.reader import Reader
from sweep.study.settings import Assurance, MapSettings, Objective, OptimumSettings, RangesSettings, WindowSettings
from sweep.study.uncertain import confidence, whole

MOST_SIDES = 8  # of a box: its corners double with each
MOST_DRAWS = 65_536
VESSEL_TIME = "vessel_time"
_PRICE = re.compile(r"^\s*([+-]?[\d.]+(?:[eE][+-]?\d+)?)\s*([A-Za-z€$£]+)\s*/\s*(\S+)\s*$")


def read_map(reader: Reader, risk: dict[str, Any] | None, window: WindowSettings | None, drawn: bool) -> MapSettings | None:
    """Return how the probability that all limits hold is mapped; None where [risk] asks for no map."""
    if risk is None or "map" not in risk:
        return None
    table = reader.table(risk, "map", "risk.map")
    reader.only(table, "risk.map", ("steps", "draws", "confidence"))
    if window is None and not reader.broken("window"):
        reader.fault("risk.map", "no [window]", '[window] with its axes, such as ["start", "dosing_time"]', "the map lies over the window's axes")
    steps = whole(reader, table, "risk.map.steps", 40, 10)
    if steps % 10:
        reader.fault("risk.map.steps", steps, f"a multiple of ten, such as {10 * (steps // 10 + 1)}", "a coarse grid of ten steps lies within it")
    if steps > 200:
        reader.fault("risk.map.steps", steps, "at most 200", "contours are no smoother for more")
    return MapSettings(steps, _draws(reader, table, "risk.map.draws", 512, 16), confidence(reader, table, "risk.map"))


def _draws(reader: Reader, table: dict[str, Any], place: str, default: int, least: int) -> int:
    found = whole(reader, table, place, default, least)
    if found > MOST_DRAWS:
        reader.fault(place, found, f"at most {MOST_DRAWS}", "each setting looked at takes so many batches")
    return found


def _assurance(reader: Reader, table: dict[str, Any], place: str, drawn: bool, default: int) -> Assurance:
    """Return with which probability limits are to hold."""
    probability, sure = table.get("probability"), confidence(reader, table, place)
    draws = _draws(reader, table, f"{place}.draws", default, 16)
    if probability is None:
        for key in ("draws", "confidence"):
            if key in table:
                reader.fault(f"{place}.{key}", key, "probability beside it", "without a probability limits hold nominally, and nothing is drawn")
        return Assurance(None, draws, sure)
    if isinstance(probability, bool) or not isinstance(probability, (int, float)) or not 0.0 < probability < 1.0:
        because = "limits hold with a probability; certainty is not had from draws"
        reader.fault(f"{place}.probability", repr(probability), "a number between 0 and 1", because)
        return Assurance(None, draws, sure)
    if not drawn and not reader.uncertain:
        reader.fault(f"{place}.probability", probability, "[uncertain], or a variable with a tolerance", "without either nothing is left to chance")
    from sweep.study.enough import least_draws

    least = least_draws(float(probability), sure)
    if draws < least:
        reader.fault(
            f"{place}.draws", draws, f"at least {least}",
            f"with fewer, even if every draw holds, a probability of {probability:g} is not shown with a confidence of {sure:g}",
        )  # fmt: skip
    return Assurance(float(probability), draws, sure)


def _variables(reader: Reader, table: dict[str, Any], place: str, variables: tuple[Variable, ...]) -> tuple[str, ...]:
    """Return which variables are moved: those named, all by default."""
    known = [v.name for v in variables]
    given = table.get("variables", known)
    if not isinstance(given, list) or not all(isinstance(name, str) for name in given):
        reader.fault(f"{place}.variables", repr(given), "a list of variables", "they are what may be moved")
        return ()
    for name in given:
        if name not in known and name not in reader.named:
            near = difflib.get_close_matches(name, known, 1)
            expected = near[0] if near else "one of " + (", ".join(known) or "[variables]")
            reader.fault(f"{place}.variables", name, expected, "no variable has this name")
        if given.count(name) > 1:
            reader.fault(f"{place}.variables", name, "each variable once", "it cannot be moved twice")
    if not given and not reader.named:
        reader.fault(place, "no variables", "[variables]", "there is nothing to choose")
    return tuple(name for name in given if name in known)


def read_ranges(reader: Reader, table: dict[str, Any] | None, variables: tuple[Variable, ...], drawn: bool) -> RangesSettings | None:
    """Return how acceptable ranges are sought."""
    if table is None:
        return None
    reader.only(table, "ranges", ("probability", "draws", "confidence", "variables", "points"))
    sides = _variables(reader, table, "ranges", variables)
    if len(sides) > MOST_SIDES:
        reader.fault("ranges.variables", f"{len(sides)} variables", f"at most {MOST_SIDES}", "the corners of their box double with each")
    assurance = _assurance(reader, table, "ranges", drawn, 256)
    return RangesSettings(sides, assurance, whole(reader, table, "ranges.points", 256 if assurance.probability is None else 64, 16))


def read_optimum(
    reader: Reader, table: dict[str, Any] | None, variables: tuple[Variable, ...], species: tuple[Species, ...], target: Target | None,
    limits: tuple[Limit, ...], drawn: bool,
) -> OptimumSettings | None:  # fmt: skip
    """Return what is made least or largest, and how it is sought."""
    if table is None:
        return None
    known = ("minimise", "maximise", "variables", "probability", "draws", "confidence", "verify", "population", "generations", "prices")
    reader.only(table, "optimum", known)
    names = _variables(reader, table, "optimum", variables)
    prices, currency = _prices(reader, table, species)
    objectives = _objectives(reader, table, species, target, limits, currency, bool(prices))
    assurance = _assurance(reader, table, "optimum", drawn, 256)
    if "verify" in table and assurance.probability is None:
        reader.fault("optimum.verify", "verify", "probability beside it", "without a probability nothing is drawn")
    if prices and not any(one.kind == "cost" for one in objectives) and objectives:
        reader.fault("optimum.prices", ", ".join(prices), '"cost" as an objective', "prices make a cost, which is not asked for")
    return OptimumSettings(
        objectives, names, assurance, _draws(reader, table, "optimum.verify", 4 * assurance.draws, 16),
        whole(reader, table, "optimum.population", 24 if len(objectives) < 2 else 48, 8),
        whole(reader, table, "optimum.generations", 30 if len(objectives) < 2 else 40, 1), prices, currency,
    )  # fmt: skip


def _objectives(
    reader: Reader, table: dict[str, Any], species: tuple[Species, ...], target: Target | None, limits: tuple[Limit, ...], currency: str, priced: bool
) -> tuple[Objective, ...]:
    """Return the objectives in the order in which they are written."""
    found = []
    for sense in (key for key in table if key in ("minimise", "maximise")):
        given = table[sense]
        for name in given if isinstance(given, list) else [given]:
            one = _objective(reader, f"optimum.{sense}", sense, name, species, target, limits, currency, priced)
            if one is not None:
                found.append(one)
    if not any(key in table for key in ("minimise", "maximise")):
        reader.fault("optimum", "neither minimise nor maximise", 'minimise = "cycle_time", or another response', "an optimum is of something")
    if len(found) > 2:
        reader.fault("optimum", f"{len(found)} objectives", "one or two", "more cannot be read off one curve; hold the others by limits")
    if len({one.name for one in found}) < len(found):
        reader.fault("optimum", ", ".join(one.name for one in found), "two different objectives", "one thing cannot be sought twice")
    return tuple(found)


def _objective(
    reader: Reader, place: str, sense: str, name: object, species: tuple[Species, ...], target: Target | None, limits: tuple[Limit, ...],
    currency: str, priced: bool,
) -> Objective | None:  # fmt: skip
    counted = {s.name for s in species if s.role is None}
    labels = {limit.name for limit in limits} | ({"conversion"} if target is not None else set())
    if not isinstance(name, str):
        reader.fault(place, repr(name), '"cycle_time", or another response', "an objective is the name of a response, of a margin, or cost")
        return None
    if name == "cost":
        if not priced and not reader.broken("optimum.prices"):
            reader.fault(place, name, 'optimum.prices, such as { amine = "4.1 EUR/kg", vessel_time = "180 EUR/h" }', "a cost is made of prices")
        if target is None or target.product is None:
            reader.fault(place, name, "[target] with a product", "the cost is per amount of product")
            return None
        mass = f"species.{target.product}.molar_mass" in reader.values
        return Objective(name, sense, "cost", "", f"{currency}/{'kg' if mass else 'mol'}")
    if name.startswith("margin_"):
        label = name.removeprefix("margin_")
        if label in labels:
            return Objective(label, sense, "margin", "", "")
        near = difflib.get_close_matches(label, sorted(labels), 1)
        reader.fault(place, name, f"margin_{near[0]}" if near else "margin_ and the name of a limit", "no limit has this name")
        return None
    found = response_of(reader, name, counted, target)
    if found is None:
        known = [*PLAIN, "cost", *(f"margin_{label}" for label in labels), *(p + s for p in BY_SPECIES for s in sorted(counted))]
        near = difflib.get_close_matches(name, known, 1)
        reader.fault(place, name, near[0] if near else "one of " + ", ".join((*PLAIN, "cost")), "no response has this name")
        return None
    return Objective(name, sense, "response", found[0], si_unit(found[1]))


def _prices(reader: Reader, table: dict[str, Any], species: tuple[Species, ...]) -> tuple[Mapping[str, float], str]:
    """Return prices per mol of species and per s of the vessel's time, and their one currency."""
    names, found, currencies = {s.name for s in species}, dict[str, float](), dict[str, str]()
    for name, text in reader.table(table, "prices", "optimum.prices").items():
        place = f"optimum.prices.{name}"
        if name not in names and name != VESSEL_TIME:
            near = difflib.get_close_matches(name, [*sorted(names), VESSEL_TIME], 1)
            expected = near[0] if near else f"a species, or {VESSEL_TIME}"
            reader.fault(place, name, expected, "only what is brought in, and the vessel's time, has a price")
            continue
        parts = _PRICE.match(text) if isinstance(text, str) else None
        if parts is None:
            reader.fault(place, repr(text), '"180 EUR/h"' if name == VESSEL_TIME else '"4.1 EUR/kg"', "a price is a number, a currency, / and a unit")
            continue
        per = _per(reader, place, name, parts[3], name in names)
        if per is not None:
            found[name], currencies[name] = float(parts[1]) / per, parts[2]
    if len(set(currencies.values())) > 1:
        said = ", ".join(f"{name} in {currency}" for name, currency in currencies.items())
        reader.fault("optimum.prices", said, "one currency", "sums of two currencies mean nothing")
    return found, next(iter(currencies.values()), "")


def _per(reader: Reader, place: str, name: str, unit: str, is_species: bool) -> float | None:
    """Return the size of a price's unit: mol of a species, s of the vessel's time; None with a fault."""
    for dimension in ("amount", "mass") if is_species else ("time",):
        try:
            size = to_si(f"1 {unit}", dimension)
        except UnitFault:
            continue
        mass = reader.values.get(f"species.{name}.molar_mass") if dimension == "mass" else 1.0
        if mass is None:
            reader.fault(place, unit, f"a price per mol, or species.{name}.molar_mass", "a price per mass needs the molar mass")
            return None
        return size / mass
    reader.fault(place, unit, "kg, t, mol or kmol" if is_species else "h, min, s or d", "the price is per amount of the species" if is_species
                 else "the price is per time of the vessel")  # fmt: skip
    return None
