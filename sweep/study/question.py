"""What is asked: sections [target] [limits] [variables] [accuracy] [plan] [window] [batch_time] [failure]."""

import difflib
from dataclasses import replace
from pathlib import Path
from typing import Any

from sweep.base.units import UnitFault, kind_of, unit_of
from sweep.study.amount import converted
from sweep.study.model import FAILURE, LATEST, Limit, Scenario, Species, Target, Variable, differs
from sweep.study.reader import Reader
from sweep.study.settings import BatchTimeSettings, FailureSettings, Plan, WindowSettings
from sweep.study.uncertain import difference_of, read_tolerance

PLAIN = {
    "conversion": ("", "dimensionless"), "accumulation": ("", "dimensionless"), "criticality_class": ("", "dimensionless"),
    "max_temperature": ("_K", "temperature"), "mtsr": ("_K", "temperature"), "td24": ("_K", "temperature"),
    "mtt": ("_K", "temperature"), "tmr_ad": ("_s", "time"), "time_to_target": ("_s", "time"), "cycle_time": ("_s", "time"),
    "cooling_duty": ("_W", "power"), "heat_release": ("_W", "power"), "productivity": ("", "productivity"),
}  # fmt: skip
BY_SPECIES = ("yield_", "per_product_", "fraction_")
TAKEN = frozenset(
    (*PLAIN, *(name + ending for name, (ending, _) in PLAIN.items()), "status", "reason", "time_of_max_temperature_s", "mtsr_time_s",
     "tmr_ad_time_s", "tmr_ad_censored", "highest_conversion", "most_productive_time_s", "most_productive_conversion", "energy_balance_error")
)  # fmt: skip


def read_target(reader: Reader, table: dict[str, Any] | None, names: set[str], brought: set[str]) -> Target | None:
    """Return the target; its species has to be brought in."""
    if table is None:
        return None
    reader.only(table, "target", ("species", "conversion", "product"))
    for key in ("species", "product"):
        value = table.get(key)
        if (value is not None or key == "species") and (not isinstance(value, str) or value not in names):
            near = difflib.get_close_matches(str(value), sorted(names), 1)
            reader.fault(
                f"target.{key}",
                repr(value),
                near[0] if near else "a species of this study",
                "no such species is written",
            )
            return None
    if table["species"] not in brought and not reader.broken("recipe"):
        reader.fault(
            "target.species",
            table["species"],
            "a species that is charged or fed",
            "what is never brought in cannot be converted",
        )
    if "conversion" in table:
        reader.quantity("target.conversion", table["conversion"], "dimensionless")
    reader.needed("target.conversion", "a target is a conversion to reach")
    reader.at_least("target.conversion", 0.0, True, "a conversion is a share, and complete conversion takes for ever", 1.0)
    if table["species"] == table.get("product"):
        reader.fault("target.product", table["product"], "another species", "what is converted is not its own product")
    return Target(table["species"], table.get("product"))


def response_of(reader: Reader, name: str, counted: set[str], target: Target | None) -> tuple[str, str] | None:
    """Return the column and the dimension of a response; `counted`: the species that are neither solvent nor gas."""
    if name == "productivity":
        mass = target is not None and f"species.{target.product}.molar_mass" in reader.values
        unit = "kg/m^3/s" if mass else "mol/m^3/s"
        return f"productivity_{'kg' if mass else 'mol'}_per_m3_s", unit
    if name in PLAIN:
        ending, dimension = PLAIN[name]
        return name + ending, dimension
    for prefix in BY_SPECIES:
        if name.startswith(prefix) and name.removeprefix(prefix) in counted:
            of_itself = prefix == "per_product_" and target is not None and name.removeprefix(prefix) == target.product
            return None if of_itself else (name, "dimensionless")
    return None


def columns_of(reader: Reader, species: tuple[Species, ...], target: Target | None) -> dict[str, str]:
    """Return the column of every response that can be named."""
    counted = {s.name for s in species if s.role is None}
    names = ("productivity", *PLAIN, *(p + s for p in BY_SPECIES for s in sorted(counted)))
    return {name: found[0] for name in names if (found := response_of(reader, name, counted, target)) is not None}


def asked_of(scenarios: tuple[Scenario, ...], limits: tuple[Limit, ...]) -> tuple[Scenario, ...]:
    """Return the scenarios, each knowing whether a limit, or its worst moment, asks for a failure figure of it."""
    asked = {limit.name.split(".")[0] for limit in limits if limit.name.split(".")[-1] in FAILURE and "." in limit.name}
    columns = {name + PLAIN[name][0] for name in FAILURE}
    return tuple(replace(s, asks_failure=s.name in asked or s.worst in columns) for s in scenarios)


def _flat(table: dict[str, Any], scenarios: set[str]) -> dict[str, Any]:
    """Return limits by name; those on a scenario stand as NAME.response, be it written in quotes or as a table of its own."""
    found: dict[str, Any] = {}
    for name, bounds in table.items():
        if name in scenarios and isinstance(bounds, dict):
            found.update({f"{name}.{response}": inner for response, inner in bounds.items()})
        else:
            found[name] = bounds
    return found


def read_limits(
    reader: Reader, table: dict[str, Any], species: tuple[Species, ...], target: Target | None, scenarios: set[str]
) -> tuple[Limit, ...]:
    """Return the limits, one record a bound."""
    result = []
    counted = {s.name for s in species if s.role is None}
    for name, bounds in _flat(table, scenarios).items():
        path = f"limits.{name}"
        scenario, dot, response = name.rpartition(".")
        if dot and scenario not in scenarios:
            near = difflib.get_close_matches(scenario, sorted(scenarios), 1)
            reader.fault(path, scenario, near[0] if near else "a scenario of this study", f"[scenarios.{scenario}] is not written")
            continue
        found = response_of(reader, response, counted, target)
        if found is not None and dot:
            found = f"{scenario}.{found[0]}", found[1]
        if found is None:
            if name == "max_pressure":
                reader.fault(path, name, "a study without it", "not available yet")
                continue
            known = [*PLAIN, *(p + s for p in BY_SPECIES for s in sorted(counted) if response_of(reader, p + s, counted, target))]
            near = difflib.get_close_matches(response, known, 1)
            reader.fault(path, name, near[0] if near else "one of " + ", ".join(PLAIN), "no response has this name")
            continue
        if not isinstance(bounds, dict):
            reader.fault(path, repr(bounds), "{ at_most = ... } or { at_least = ... }", "a limit says on which side it stands")
            continue
        reader.only(bounds, path, ("at_most", "at_least"))
        if not bounds:
            reader.fault(path, "nothing", "{ at_most = ... } or { at_least = ... }", "a limit has a bound")
        for sense in ("at_least", "at_most"):
            if sense in bounds:
                reader.quantity(f"{path}.{sense}", bounds[sense], found[1])
                result.append(Limit(name, found[0], sense))
        low, high = (reader.values.get(f"{path}.{sense}") for sense in ("at_least", "at_most"))
        if low is not None and high is not None and low > high:
            reader.fault(path, f"{low:g} to {high:g} (SI)", "the lower bound first", "the range is upside down")
    return tuple(result)


def read_variables(reader: Reader, table: dict[str, Any]) -> tuple[Variable, ...]:
    """Return the variables; each sets what is written, and no two set the same."""
    owners: dict[str, str] = {}
    result = []
    for name, entry in reader.names(table, "variables").items():
        path = f"variables.{name}"
        reader.named.add(name)
        if name in TAKEN or name.startswith(BY_SPECIES):
            reader.fault(path, name, "another name", "a response has this name")
        reader.only(entry, path, ("sets", "from", "to", "levels", "tolerance"))
        sets = entry.get("sets")
        sets = [sets] if isinstance(sets, str) else sets
        if not isinstance(sets, list) or not sets or not all(isinstance(s, str) for s in sets):
            reader.fault(f"{path}.sets", repr(entry.get("sets")), "a path of this study, or a list", "a variable sets something")
            continue
        good = [s for s in sets if _settable(reader, f"{path}.sets", s, name, owners)]
        variable = _variable(reader, path, name, good, entry) if len(good) == len(sets) else None
        if variable is not None:
            result.append(variable)
    return tuple(result)


def _settable(reader: Reader, place: str, path: str, name: str, owners: dict[str, str]) -> bool:
    if path not in reader.values and reader.broken(path):
        return False  # it was faulted where it stands
    if path in reader.values and not differs(path):
        reader.fault(place, path, "a quantity of the batch", "it cannot differ from point to point")
        return False
    if path not in reader.values:
        reader.fault(place, path, reader.near(path), "the variable sets nothing")
        return False
    if path in owners:
        reader.fault(place, path, "one variable for it", f"{owners[path]} sets it already")
        return False
    owners[path] = name
    return True


def _variable(reader: Reader, path: str, name: str, sets: list[str], entry: dict[str, Any]) -> Variable | None:
    dimension = reader.dimensions[sets[0]]
    for other in sets[1:]:
        if reader.dimensions[other] != dimension:
            reader.fault(f"{path}.sets", other, kind_of(dimension), f"{sets[0]} is {kind_of(dimension)}")
            return None
    ends = []
    for key in ("from", "to"):
        text = str(entry[key]) if isinstance(entry.get(key), (int, float)) and not isinstance(entry[key], bool) else entry.get(key)
        if not isinstance(text, str):
            reader.fault(f"{path}.{key}", repr(text), kind_of(dimension), "a variable has a range")
            continue
        try:
            value = converted(sets[0], text, dimension, reader.values)
        except UnitFault as error:
            reader.fault(f"{path}.{key}", repr(text), error.expected, f"{sets[0]} is {kind_of(dimension)}; {error.because}")
            continue
        for one in sets:
            reader.within(f"{path}.{key}", one, value)
        ends.append(value)
    levels = entry.get("levels")
    if levels is not None and (not isinstance(levels, int) or isinstance(levels, bool) or not 2 <= levels <= 100_000):
        reader.fault(f"{path}.levels", repr(levels), "a whole number from 2", "a range has two ends")
        return None
    if len(ends) < 2:
        return None
    if ends[0] >= ends[1]:
        reader.fault(f"{path}.to", repr(entry["to"]), f"more than {entry['from']!r}", "the range is upside down")
        return None
    for one in sets:
        if not ends[0] - 1e-9 * abs(ends[0]) <= reader.values[one] <= ends[1] + 1e-9 * abs(ends[1]):
            reader.warn(
                one,
                f"{reader.values[one]:g} (SI)",
                f"{entry['from']} to {entry['to']}",
                f"the set-point lies outside the range of {name}",
            )
    held = read_tolerance(reader, f"{path}.tolerance", entry["tolerance"], sets) if "tolerance" in entry else None
    variable = Variable(name, tuple(sets), ends[0], ends[1], levels, unit_of(str(entry["from"])), held)
    if held is not None:
        reader.keep(variable.error, 0.0, "K" if dimension == "temperature" else variable.unit, difference_of(dimension))
    return variable


def read_plan(reader: Reader, table: dict[str, Any] | None, variables: tuple[Variable, ...], folder: Path) -> Plan | None:
    """Return the plan."""
    if table is None:
        return None
    reader.only(table, "plan", ("kind", "points", "file"))
    kind = reader.choice(table, "plan", "kind", ("factorial", "latin-hypercube", "sobol", "list"), "factorial")
    points, file = table.get("points"), table.get("file")
    for key, kinds in (("points", ("latin-hypercube", "sobol")), ("file", ("list",))):
        if key in table and kind not in kinds:
            reader.fault(f"plan.{key}", key, f"no such key with kind {kind!r}", f"a plan of kind {kind} does not use it")
    if kind in ("latin-hypercube", "sobol") and (not isinstance(points, int) or isinstance(points, bool) or not 1 <= points <= 100_000_000):
        reader.fault("plan.points", repr(points), "a whole number of points", f"a plan of kind {kind} has a size")
        points = None
    if kind == "list" and not isinstance(file, str):
        reader.fault("plan.file", repr(file), '"points.csv"', "a list stands in a file beside the study")
    if kind == "factorial":
        for variable in variables:
            if variable.levels is None:
                reader.fault(
                    f"variables.{variable.name}.levels",
                    "nothing",
                    "a whole number from 2",
                    "a factorial plan counts levels",
                )
    return Plan(kind, points, folder / file if kind == "list" and isinstance(file, str) else None)


def read_window(reader: Reader, table: dict[str, Any] | None, variables: tuple[Variable, ...]) -> WindowSettings | None:
    """Return the window's two axes and its slice."""
    if table is None:
        return None
    reader.only(table, "window", ("axes", "at"))
    names = [v.name for v in variables]
    axes = table.get("axes")
    if isinstance(axes, list) and any(isinstance(a, str) and a in reader.named and a not in names for a in axes):
        return None  # the variable was faulted where it stands
    if not isinstance(axes, list) or len(axes) != 2 or axes[0] == axes[1] or not all(isinstance(a, str) and a in names for a in axes):
        reader.fault("window.axes", repr(axes), "two of " + (", ".join(names) or "[variables]"), "a window has two axes")
        return None
    at: dict[str, float] = {}
    for name, text in reader.table(table, "at", "window.at").items():
        found = next((v for v in variables if v.name == name and name not in axes), None)
        if found is None:
            reader.fault(f"window.at.{name}", name, "a variable that is no axis", "a slice holds the other variables")
            continue
        value = reader.quantity(f"window.at.{name}", text, reader.dimensions[found.sets[0]])
        if value is not None:
            at[name] = value
            for path in found.sets:
                reader.within(f"window.at.{name}", path, value)
    return WindowSettings((axes[0], axes[1]), at)


def read_batch_time(reader: Reader, table: dict[str, Any] | None) -> BatchTimeSettings | None:
    """Return how far batch times are sought."""
    if table is None:
        return None
    reader.only(table, "batch_time", ("longest",))
    if "longest" in table:
        reader.quantity("batch_time.longest", table["longest"], "time")
        reader.at_least("batch_time.longest", 0.0, True, "a batch takes time, and ends", LATEST)
    return BatchTimeSettings(reader.values.get("batch_time.longest"))


def read_failure(reader: Reader, table: dict[str, Any] | None) -> FailureSettings | None:
    """Return how a failure of cooling is judged. The horizon is kept where it is not written too."""
    asked = table is not None
    table = table or {}
    reader.only(table, "failure", ("horizon", "wall", "td24", "mtt", "feeds", "feeds_stop_after"))
    reader.keep("failure.horizon", 2_592_000.0, "d", "time")
    for key, dimension in (
        ("horizon", "time"),
        ("td24", "temperature"),
        ("mtt", "temperature"),
        ("feeds_stop_after", "time"),
    ):
        if key in table:
            reader.quantity(f"failure.{key}", table[key], dimension)
    reader.at_least("failure.horizon", 0.0, True, "a horizon lies ahead", LATEST)
    reader.at_least("failure.feeds_stop_after", 0.0, False, "feeds stop with the cooling or later", LATEST)
    wall = table.get("wall", False)
    if not isinstance(wall, bool):
        reader.fault("failure.wall", repr(wall), "true or false", "the wall counts or it does not")
    feeds = reader.choice(table, "failure", "feeds", ("stop", "run on"), "stop")
    values = reader.values
    if not asked:
        return None
    return FailureSettings(values["failure.horizon"], wall is True, values.get("failure.td24"), values.get("failure.mtt"), feeds,
                           values.get("failure.feeds_stop_after", 0.0))  # fmt: skip
