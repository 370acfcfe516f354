"""What nature chooses: sections [uncertain] [[correlations]] [risk] [sensitivity], and how well the plant holds a variable."""

import math
from collections.abc import Iterable
from pathlib import Path
from typing import Any

from sweep.base.units import UnitFault, kind_of, to_si, unit_of
from sweep.study.amount import converted
from sweep.study.drawn import read_column
from sweep.study.model import Correlation, Tolerance, Uncertain, Variable, differs
from sweep.study.reader import Reader
from sweep.study.settings import RiskSettings, SensitivitySettings

_KEYS = {  # distribution -> its own keys
    "normal": ("sd", "relative_sd"),
    "lognormal": ("relative_sd", "log_sd"),
    "uniform": ("low", "high", "relative_low", "relative_high"),
    "triangular": ("low", "mode", "high", "relative_low", "relative_mode", "relative_high"),
    "truncated-normal": ("sd", "relative_sd", "low", "high", "relative_low", "relative_high"),
    "table": ("file", "column"),
}
_FAR = 3.0  # standard deviations at which a draw is still to be expected
SAMPLINGS = ("latin-hypercube", "sobol", "random")


def read_tolerance(reader: Reader, place: str, given: object, sets: list[str]) -> Tolerance | None:
    """Return how well a variable is held; its control error becomes a quantity of the study, written as zero."""
    kinds = {"sd": ("normal", False), "relative_sd": ("normal", True), "plus_minus": ("uniform", False), "relative_plus_minus": ("uniform", True)}
    if not isinstance(given, dict) or len(given) != 1 or next(iter(given)) not in kinds:
        expected = '{ sd = "0.5 K" }, or relative_sd, plus_minus, relative_plus_minus in its place'
        reader.fault(place, repr(given), expected, "a tolerance is one number: a normal one's standard deviation, or the half-width of a uniform one")
        return None
    key, raw = next(iter(given.items()))
    kind, relative = kinds[key]
    if relative and not _shares(reader, f"{place}.{key}", sets[0]):
        return None
    dimension = difference_of(reader.dimensions[sets[0]])
    size = _number(reader, f"{place}.{key}", raw, sets[0], "dimensionless" if relative else dimension)
    if size is None or not _positive(reader, f"{place}.{key}", size):
        return None
    return Tolerance(kind, size, relative)


def difference_of(dimension: str) -> str:
    """Return the dimension of a difference: a temperature's does not count from a zero."""
    return "temperature difference" if dimension == "temperature" else dimension


def _number(reader: Reader, place: str, raw: object, of: str, dimension: str) -> float | None:
    """Return a quantity in the unit of the path `of` (SI) and keep it under its place; None with a fault."""
    if isinstance(raw, (int, float)) and not isinstance(raw, bool) and dimension == "dimensionless":
        return reader.quantity(place, raw, dimension)
    if not isinstance(raw, str):
        reader.fault(place, repr(raw), f"{kind_of(dimension)} with its unit in quotes", f"{of} is {kind_of(reader.dimensions[of])}")
        return None
    try:
        own = dimension == reader.dimensions[of]
        value = converted(of, raw, dimension, reader.values) if own else to_si(raw, dimension)
    except UnitFault as error:
        reader.fault(place, repr(raw), error.expected, f"{of} is {kind_of(reader.dimensions[of])}; {error.because}")
        return None
    return reader.keep(place, value, unit_of(raw), dimension)


def _positive(reader: Reader, place: str, value: float) -> bool:
    if not value > 0.0:
        reader.fault(place, f"{value:g} (SI)", "above 0", "a spread is a size; what is certain needs no entry")
    return value > 0.0


def _shares(reader: Reader, place: str, of: str) -> bool:
    """Tell whether a share of the written value means something; a fault where it does not."""
    if reader.dimensions[of] == "temperature":
        reader.fault(place, place.rpartition(".")[2], "a difference in K", f"{of} is a temperature, whose zero is far from every batch")
        return False
    if reader.values[of] == 0.0:
        reader.fault(place, place.rpartition(".")[2], "an absolute one", f"{of} is written as zero, and a share of nothing is nothing")
        return False
    return True


def read_uncertain(
    reader: Reader, table: dict[str, Any], variables: tuple[Variable, ...], taken: Iterable[str], folder: Path
) -> tuple[Uncertain, ...]:
    """Return the uncertain inputs; each is of its own path, which no variable sets. taken: names of responses."""
    owners: dict[str, str] = {}
    result = []
    for name, entry in reader.names(table, "uncertain").items():
        place = f"uncertain.{name}"
        reader.uncertain.add(name)
        if name in reader.named or name in taken or name.startswith(("yield_", "per_product_", "fraction_")):
            owner = "variable" if name in reader.named else "response"
            reader.fault(place, name, "another name", f"a {owner} has this name")
            continue
        of, kind = _of(reader, place, entry, name, owners, variables), entry.get("distribution")
        if not isinstance(kind, str) or kind not in _KEYS:
            reader.fault(f"{place}.distribution", repr(kind), " or ".join(f'"{k}"' for k in _KEYS), "draws follow a distribution")
            continue
        reader.only(entry, place, ("of", "distribution", *_KEYS[kind]))
        if of is not None and not any(f.key.startswith(place + ".") for f in reader.faults):
            found = _distributed(reader, place, name, of, kind, entry, folder)
            if found is not None:
                result.append(found)
    return tuple(result)


def _of(reader: Reader, place: str, entry: dict[str, Any], name: str, owners: dict[str, str], variables: tuple[Variable, ...]) -> str | None:
    """Return the path that an input is of, None with a fault."""
    of, key = entry.get("of"), f"{place}.of"
    if not isinstance(of, str):
        reader.fault(key, repr(of), "a path of this study", "an uncertain input is of a quantity that is written")
    elif of not in reader.values and reader.broken(of):
        pass  # it was faulted where it stands
    elif of not in reader.values:
        reader.fault(key, of, reader.near(of), "the uncertain input is of nothing")
    elif not differs(of):
        reader.fault(key, of, "a quantity of the batch", "it cannot differ from point to point")
    elif of in owners:
        reader.fault(key, of, "one uncertain input for it", f"{owners[of]} is of it already")
    elif owner := next((v.name for v in variables if of in v.sets), ""):
        because = f"the variable {owner} sets it: its value is chosen, and how well the plant holds it is a tolerance"
        reader.fault(key, of, f"variables.{owner}.tolerance", because)
    else:
        owners[of] = name
        return of
    return None


def _distributed(reader: Reader, place: str, name: str, of: str, kind: str, entry: dict[str, Any], folder: Path) -> Uncertain | None:
    """Return an input with its distribution's parameters in SI."""
    centre = reader.values[of]
    if kind == "table":
        return _tabled(reader, place, name, of, entry, folder)
    found = _parameters(reader, place, of, kind, entry)
    if any(f.key.startswith(place + ".") for f in reader.faults):
        return None
    if kind in ("normal", "truncated-normal") and "sd" not in found:
        reader.fault(f"{place}.sd", "nothing", "sd or relative_sd", f"a {kind} distribution has a standard deviation")
    elif kind == "lognormal" and len(found) != 1:
        reader.fault(f"{place}.relative_sd", "nothing" if not found else "two", "relative_sd or log_sd", "a lognormal distribution has one spread")
    elif kind == "lognormal" and centre <= 0.0:
        reader.fault(f"{place}.of", f"{centre:g} (SI)", "above 0", "the written value is the median of a lognormal distribution")
    elif _ordered(reader, place, of, kind, found):
        _doubt(reader, place, of, kind, found)
        return Uncertain(name, of, kind, centre, found, any(key.startswith("relative") for key in entry))
    return None


def _parameters(reader: Reader, place: str, of: str, kind: str, entry: dict[str, Any]) -> dict[str, float]:
    """Return sd, low, mode, high (SI), relative_sd, log_sd; relative ones of the written value turned absolute, but a lognormal's."""
    found: dict[str, float] = {}
    dimension, centre = reader.dimensions[of], reader.values[of]
    for key in _KEYS[kind]:
        if key not in entry:
            continue
        own, relative = key.removeprefix("relative_"), key.startswith("relative_")
        if relative and not _shares(reader, f"{place}.{key}", of):
            continue
        if relative and own in entry:
            reader.fault(f"{place}.{key}", key, f"{own} or {key}", "one of the two says it")
            continue
        without = relative or key == "log_sd"
        wanted = "dimensionless" if without else difference_of(dimension) if key == "sd" else dimension
        value = _number(reader, f"{place}.{key}", entry[key], of, wanted)
        if value is None or (key.endswith("sd") and not _positive(reader, f"{place}.{key}", value)):
            continue
        if relative and kind != "lognormal":
            value *= abs(centre) if own == "sd" else centre
        found[own if kind != "lognormal" else key] = value
    if centre < 0.0 and "relative_low" in entry and "relative_high" in entry and found.get("low", 0.0) > found.get("high", 0.0):
        found["low"], found["high"] = found["high"], found["low"]  # shares of a negative value
    return found


def _ordered(reader: Reader, place: str, of: str, kind: str, found: dict[str, float]) -> bool:
    """Tell whether the ends of a distribution are there and in order; a fault where they are not."""
    if kind in ("normal", "lognormal"):
        return True
    for key in ("low", "high") if kind in ("uniform", "triangular") else ():
        if key not in found:
            reader.fault(f"{place}.{key}", "nothing", f"{key} or relative_{key}", f"a {kind} distribution has two ends")
            return False
    if "low" not in found and "high" not in found:
        reader.fault(f"{place}.low", "nothing", "low, high or both", "without ends it is a normal distribution")
        return False
    low, high = found.get("low", -math.inf), found.get("high", math.inf)
    if low >= high:
        reader.fault(f"{place}.high", f"{high:g} (SI)", f"above low, {low:g}", "the range is upside down, or nothing is uncertain")
        return False
    middle = found.setdefault("mode", reader.values[of]) if kind == "triangular" else reader.values[of]
    if kind != "uniform" and not low <= middle <= high:
        said = "the mode" if kind == "triangular" else "the written value"
        key = "mode" if kind == "triangular" else "low" if middle < low else "high"
        reader.fault(f"{place}.{key}", f"{said} {middle:g} (SI)", f"between {low:g} and {high:g}", f"{said} lies between the ends")
        return False
    return True


def _doubt(reader: Reader, place: str, of: str, kind: str, found: dict[str, float]) -> None:
    """Fault ends that the path's bound forbids; warn where draws beyond the bound are to be expected."""
    centre, bound = reader.values[of], reader.bounds.get(of)
    for key in ("low", "high"):
        if key in found:
            reader.within(f"{place}.{key}", of, found[key])
    if kind == "normal" and bound is not None:
        for end in (centre - _FAR * found["sd"], centre + _FAR * found["sd"]):
            if not bound.holds(end):
                because = f"three standard deviations reach {end:g}: such draws cannot be computed and count as not holding"
                reader.warn(place, f"normal, sd {found['sd']:g} (SI)", f"{bound.words}: lognormal or truncated-normal", because)
    if kind in ("uniform", "triangular") and not found["low"] <= centre <= found["high"]:
        because = "the written value lies outside its own uncertainty"
        reader.warn(place, f"{found['low']:g} to {found['high']:g} (SI)", f"{of} = {centre:g} within", because)


def _tabled(reader: Reader, place: str, name: str, of: str, entry: dict[str, Any], folder: Path) -> Uncertain | None:
    """Return an input that is drawn from a column of a CSV file."""
    file, column = entry.get("file"), entry.get("column")
    if not isinstance(file, str) or not file:
        reader.fault(f"{place}.file", repr(file), '"draws.csv"', "a table of draws stands in a file beside the study")
        return None
    if column is not None and not isinstance(column, str):
        reader.fault(f"{place}.column", repr(column), "the name of a column", "it is looked for in the file's header")
        return None
    wanted = (column,) if column is not None else (name, of)
    numbers = read_column(reader, place, folder / file, wanted, of)
    return None if numbers is None else Uncertain(name, of, "table", reader.values[of], {}, False, numbers, file)


def read_correlations(reader: Reader, given: object, inputs: tuple[Uncertain, ...]) -> tuple[Correlation, ...]:
    """Return the correlations; together they have to be possible."""
    if not isinstance(given, list) or not all(isinstance(entry, dict) for entry in given):
        reader.fault("correlations", repr(given), "[[correlations]], one table a pair", "a correlation is between two inputs")
        return ()
    known = {one.name: one for one in inputs}
    found: list[Correlation] = []
    for k, entry in enumerate(given):
        one = _correlation(reader, f"correlations.{k}", entry, known)
        if one is None:
            continue
        if any(set(one.between) == set(other.between) for other in found):
            reader.fault(f"correlations.{k}.between", list(one.between), "one correlation a pair", "this pair has one already")
        else:
            found.append(one)
    if found and not reader.broken("correlations"):
        _possible(reader, tuple(found))
    return tuple(found)


def _correlation(reader: Reader, place: str, entry: dict[str, Any], known: dict[str, Uncertain]) -> Correlation | None:
    reader.only(entry, place, ("between", "rank", "linear"))
    pair = entry.get("between")
    if isinstance(pair, list) and any(isinstance(name, str) and name in reader.uncertain and name not in known for name in pair):
        return None  # it was faulted where it stands
    if not isinstance(pair, list) or len(pair) != 2 or pair[0] == pair[1] or not all(isinstance(n, str) and n in known for n in pair):
        expected = "two of " + (", ".join(known) or "[uncertain]")
        reader.fault(f"{place}.between", repr(pair), expected, "a correlation is between two uncertain inputs")
        return None
    if any(known[name].distribution == "table" for name in pair):
        reader.fault(f"{place}.between", repr(pair), "inputs that are not of a table", "a table's rows hold their correlation already")
        return None
    kinds = [key for key in ("rank", "linear") if key in entry]
    if len(kinds) != 1:
        reader.fault(place, " and ".join(kinds) or "nothing", "rank or linear", "a correlation is of rank, or linear on the normal scale")
        return None
    value = entry[kinds[0]]
    if isinstance(value, bool) or not isinstance(value, (int, float)) or not -1.0 <= value <= 1.0:
        reader.fault(f"{place}.{kinds[0]}", repr(value), "a number from -1 to 1", "no correlation lies beyond")
        return None
    return Correlation((pair[0], pair[1]), kinds[0], float(value))


def _possible(reader: Reader, found: tuple[Correlation, ...]) -> None:
    """Fault correlations that no draws can have, with the nearest that some can."""
    from sweep.study.nearest import nearest_possible

    nearest = nearest_possible(found)
    if nearest is not None:
        said = ", ".join(f"{a} and {b} {value:g}" for (a, b), value in nearest.items())
        given = ", ".join(f"{c.between[0]} and {c.between[1]} {c.value:g}" for c in found)
        reader.fault("correlations", given, f"a possible matrix; the nearest: {said}", "no inputs can be correlated so all at once")


def whole(reader: Reader, table: dict[str, Any], place: str, default: int, least: int, power: bool = False) -> int:
    """Return a whole number from `least` to ten million, a power of two where asked."""
    value = table.get(place.rpartition(".")[2], default)
    if not isinstance(value, int) or isinstance(value, bool) or not least <= value <= 10_000_000:
        reader.fault(place, repr(value), f"a whole number from {least}", "it says how many are computed")
        return default
    if power and value & (value - 1):
        reader.fault(place, value, f"a power of two, such as {1 << value.bit_length()}", "a Sobol' sequence is balanced only then")
        return default
    return value


def confidence(reader: Reader, table: dict[str, Any], place: str) -> float:
    value = table.get("confidence", 0.95)
    if isinstance(value, bool) or not isinstance(value, (int, float)) or not 0.5 <= value < 1.0:
        reader.fault(f"{place}.confidence", repr(value), "a number from 0.5 to below 1", "an interval holds the truth with this probability")
        return 0.95
    return float(value)


def read_risk(reader: Reader, table: dict[str, Any] | None, drawn: bool) -> RiskSettings | None:
    """Return how risk is computed. drawn: something is uncertain."""
    if table is None:
        return None
    reader.only(table, "risk", ("draws", "sampling", "confidence", "interval", "rare", "rare_draws", "map"))
    if not drawn and not reader.uncertain:
        reader.fault("risk", "nothing uncertain", "[uncertain], or a variable with a tolerance", "without either nothing is at risk")
    sampling = reader.choice(table, "risk", "sampling", SAMPLINGS, "latin-hypercube")
    return RiskSettings(
        whole(reader, table, "risk.draws", 4096, 16, sampling == "sobol"), sampling, confidence(reader, table, "risk"),
        reader.choice(table, "risk", "interval", ("wilson", "clopper-pearson"), "wilson"),
        reader.choice(table, "risk", "rare", ("together", "each", "none"), "together"), whole(reader, table, "risk.rare_draws", 1000, 100),
    )  # fmt: skip


def read_sensitivity(reader: Reader, table: dict[str, Any] | None, drawn: bool, variables: tuple[Variable, ...]) -> SensitivitySettings | None:
    """Return how sensitivities are computed. drawn: something is uncertain."""
    if table is None:
        return None
    reader.only(table, "sensitivity", ("over", "trajectories", "blocks", "draws", "confidence"))
    over = reader.choice(table, "sensitivity", "over", ("uncertain", "variables"), "uncertain" if drawn or reader.uncertain else "variables")
    if over == "uncertain" and not drawn and not reader.uncertain:
        reader.fault("sensitivity.over", over, "[uncertain], or a variable with a tolerance", "nothing is uncertain")
    if over == "variables" and not variables and not reader.named:
        reader.fault("sensitivity", "nothing to vary", "[uncertain] or [variables]", "a sensitivity is to something")
    return SensitivitySettings(
        over, whole(reader, table, "sensitivity.trajectories", 20, 4), whole(reader, table, "sensitivity.blocks", 512, 16, True),
        whole(reader, table, "sensitivity.draws", 1024, 16), confidence(reader, table, "sensitivity"),
    )  # fmt: skip
