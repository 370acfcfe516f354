"""Sections [target], [limits], [variables], [plan], [window], [batch_time] and [failure]."""

from pathlib import Path
from typing import Any

from sweep.base.units import UnitFault, unit_of
from sweep.study.model import BatchTimeSettings, FailureSettings, Limit, Plan, Target, Variable, WindowSettings
from sweep.study.reader import Reader

_RESPONSES = {
    "max_temperature": ("max_temperature_K", "temperature"), "mtsr": ("mtsr_K", "temperature"), "tmr_ad": ("tmr_ad_s", "time"),
    "td24": ("td24_K", "temperature"), "cooling_duty": ("cooling_duty_W", "power"), "heat_release": ("heat_release_W", "power"),
    "accumulation": ("accumulation", "dimensionless"), "time_to_target": ("time_to_target_s", "time"),
    "cycle_time": ("cycle_time_s", "time"), "productivity": ("productivity_kg_per_m3_s", "productivity"),
    "criticality_class": ("criticality_class", "dimensionless"), "conversion": ("conversion", "dimensionless"),
}  # fmt: skip
_FAILURE = {"mtsr", "tmr_ad", "td24", "criticality_class"}
_PLANS = ("factorial", "latin-hypercube", "sobol", "list")


def read_target(reader: Reader, table: dict[str, Any] | None, species: set[str]) -> Target | None:
    """Read the target."""
    if table is None:
        return None
    reader.only(table, "target", ("species", "conversion", "product"))
    for key in ("species", "product"):
        if (key == "species" or key in table) and table.get(key) not in species:
            reader.fault(f"target.{key}", repr(table.get(key)), "a species of this study", "nothing else can be meant")
            return None
    if "conversion" in table:
        value = reader.quantity("target.conversion", table["conversion"], "dimensionless")
        if value is not None and not 0.0 < value < 1.0:
            reader.fault("target.conversion", f"{value:g}", "above 0 and below 1", "a conversion is a share of what is brought in")
    return Target(str(table["species"]), table.get("product"))


def read_limits(reader: Reader, tables: dict[str, Any], species: set[str], target: Target | None, decomposes: bool) -> tuple[Limit, ...]:
    """Read the limits."""
    result = []
    for name, table in tables.items():
        path = f"limits.{name}"
        known = _response(name, species)
        if known is None or not isinstance(table, dict):
            words = ", ".join([*_RESPONSES, "yield_X", "per_product_X", "fraction_X"])
            because = "not available yet" if name == "max_pressure" else "a limit is named after a response"
            reader.fault(path, name, f"one of {words}, as a table", because)
            continue
        if name.startswith("per_product_") and (target is None or target.product is None):
            reader.fault(path, name, "a [target] with its product", "the limit counts per mole of product")
        if name in ("tmr_ad", "td24", "criticality_class") and not decomposes:
            reader.fault(path, name, 'a reaction of purpose "decomposition"', "without one it is not assessed")
        reader.only(table, path, ("at_most", "at_least"))
        if not table:
            reader.fault(path, "nothing", "at_most or at_least", "a limit has a bound")
        for sense in ("at_most", "at_least"):
            if sense in table:
                reader.quantity(f"{path}.{sense}", table[sense], known[1])
                result.append(Limit(name, known[0], sense))
    return tuple(result)


def _response(name: str, species: set[str]) -> tuple[str, str] | None:
    for prefix in ("yield_", "per_product_", "fraction_"):
        if name.startswith(prefix) and name.removeprefix(prefix) in species:
            return name, "dimensionless"
    return _RESPONSES.get(name)


def read_variables(reader: Reader, tables: dict[str, Any]) -> tuple[Variable, ...]:
    """Read what the engineer may choose."""
    taken: dict[str, str] = {}
    found = [_variable(reader, name, table, taken) for name, table in tables.items() if isinstance(table, dict)]
    return tuple(v for v in found if v is not None)


def _variable(reader: Reader, name: str, table: dict[str, Any], taken: dict[str, str]) -> Variable | None:
    import difflib

    path = f"variables.{name}"
    reader.only(table, path, ("sets", "from", "to", "levels"))
    sets = table.get("sets", [])
    sets = [sets] if isinstance(sets, str) else sets
    if not isinstance(sets, list) or not sets or not all(isinstance(s, str) for s in sets):
        reader.fault(f"{path}.sets", repr(sets), "a path of this study, or a list of them", "the variable sets nothing")
        return None
    for target in sets:
        if target not in reader.values:
            near = difflib.get_close_matches(target, list(reader.values), 1)
            reader.fault(f"{path}.sets", target, near[0] if near else "the path of a quantity that is written", "the variable sets nothing there")
            return None
        if target in taken:
            reader.fault(f"{path}.sets", target, f"a path that {taken[target]} does not set", "two variables would set the same thing")
        taken[target] = name
    dimension, bounds = reader.dimensions[sets[0]], []
    for key in ("from", "to"):
        place = f"{path}.{key}"
        try:
            bounds.append(reader.in_si(sets[0], table[key], dimension) if isinstance(table.get(key), str) else _bare(reader, place, table.get(key), dimension))
        except UnitFault as error:
            reader.fault(place, repr(table[key]), error.expected, f"{sets[0]} is of that kind: {error.because}")
    if len(bounds) < 2 or None in bounds:
        return None
    low, high = float(bounds[0] or 0.0), float(bounds[1] or 0.0)
    if not low < high:
        reader.fault(f"{path}.from", table["from"], "the lower end first", "the range is upside down")
    levels = table.get("levels")
    if levels is not None and (not isinstance(levels, int) or isinstance(levels, bool) or levels < 2):
        reader.fault(f"{path}.levels", repr(levels), "a whole number from 2", "a range has two ends")
        levels = None
    if not low <= reader.values[sets[0]] <= high:
        reader.warn(f"{path}.from", reader.units.get(sets[0], ""), "a range that holds the set-point", "the set-point lies outside its own range")
    return Variable(name, tuple(sets), low, high, levels, unit_of(str(table["from"])))


def _bare(reader: Reader, path: str, value: object, dimension: str) -> float | None:
    if isinstance(value, (int, float)) and not isinstance(value, bool) and dimension == "dimensionless":
        return float(value)
    reader.fault(path, repr(value), f"a {dimension} with its unit in quotes", "a range has two ends of the kind it sets")
    return None


def read_plan(reader: Reader, table: dict[str, Any] | None, folder: Path) -> Plan | None:
    """Read how the space is covered."""
    if table is None:
        return None
    reader.only(table, "plan", ("kind", "points", "file"))
    kind, points, file = table.get("kind", "factorial"), table.get("points"), table.get("file")
    if kind not in _PLANS:
        reader.fault("plan.kind", repr(kind), "one of " + ", ".join(_PLANS), "no other plan is known")
    if kind in ("latin-hypercube", "sobol") and (not isinstance(points, int) or isinstance(points, bool) or points < 1):
        reader.fault("plan.points", repr(points), "a whole number from 1", f"a {kind} plan has a number of points")
    if kind == "list" and not isinstance(file, str):
        reader.fault("plan.file", repr(file), "a CSV file beside the study", "a list plan reads its points there")
    return Plan(str(kind), points, folder / str(file) if file else None)


def read_window(reader: Reader, table: dict[str, Any] | None, names: set[str]) -> WindowSettings | None:
    """Read the window's axes."""
    if table is None:
        return None
    reader.only(table, "window", ("axes",))
    axes = table.get("axes")
    if not isinstance(axes, list) or len(axes) != 2 or not set(axes) <= names or axes[0] == axes[1]:
        reader.fault("window.axes", repr(axes), "two variables of this study", "a window has two axes")
        return None
    return WindowSettings((str(axes[0]), str(axes[1])))


def read_batch_time(reader: Reader, table: dict[str, Any] | None) -> BatchTimeSettings | None:
    """Read how long the march may go on."""
    if table is None:
        return None
    reader.only(table, "batch_time", ("longest",))
    longest = reader.quantity("batch_time.longest", table["longest"], "time") if "longest" in table else None
    reader.at_least("batch_time.longest", 0.0, True, "a batch takes some time")
    return BatchTimeSettings(longest)


def read_failure(reader: Reader, table: dict[str, Any] | None, limits: tuple[Limit, ...]) -> FailureSettings | None:
    """Read the cooling failure's settings; they stand by themselves where a limit needs them."""
    if table is None and not any(limit.name in _FAILURE for limit in limits):
        return None
    table = table or {}
    reader.only(table, "failure", ("horizon", "wall", "td24", "mtt"))
    for key, dimension in (("horizon", "time"), ("td24", "temperature"), ("mtt", "temperature")):
        if key in table:
            reader.quantity(f"failure.{key}", table[key], dimension)
    wall = table.get("wall", False)
    if not isinstance(wall, bool):
        reader.fault("failure.wall", repr(wall), "true or false", "the wall counts or does not")
    horizon = reader.values.get("failure.horizon", 30 * 86400.0)
    bound = reader.values.get("limits.tmr_ad.at_least")
    if bound is not None and bound > horizon:
        reader.fault("limits.tmr_ad.at_least", f"{bound:g} s", f"at most the horizon, {horizon:g} s", "a longer time is never computed")
    return FailureSettings(horizon, wall is True, reader.values.get("failure.td24"), reader.values.get("failure.mtt"))
