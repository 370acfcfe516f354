"""Units, read once at the door: text with a unit to SI and back. The only importer of pint, and only when it is needed."""

import difflib
import math
import re
from functools import lru_cache
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import pint

_QUANTITY = re.compile(r"^\s*([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d{1,3})?)\s*(\S.*?)?\s*$")
_FACTOR = re.compile(r"([*/]?)\s*([A-Za-z%°µ]+|1)(?:\^?([+-]?[\d.]+))?")
_POWER = r"(?:\^|\*\*)\s*(?:[+-]?\d{1,2}(?:\.\d{1,12})?|\(\s*[+-]?\d{1,2}(?:\.\d{1,12})?(?:\s*/\s*\d{1,2})?\s*\))(?!\s*(?:\^|\*\*))"
_UNIT = re.compile(rf"(?:[A-Za-zµ°%][A-Za-z]*[23]?(?![\w.])|{_POWER}|(?<![\w.])1\s*(?=/)|[*/·()]|\s+)*")
_CUBED = re.compile(r"\b((?:[kdcmµun]|da)?m|ft|in|yd)([23])\b")
_PREFIXED = frozenset(
    ("meter", "gram", "second", "mole", "joule", "watt", "pascal", "kelvin", "liter", "bar", "calorie", "molar", "newton", "hertz", "meter_Hg",
     "watt_hour")
)  # fmt: skip
_LONGEST = 100  # characters of a quantity
_REFUSED = {
    "C": "degC (C is coulomb)", "R": "degR (R is the gas constant)", "k": "a full unit (k is not one)", "pct": "%",
    "barg": "bar, absolute", "psig": "psi, absolute", "ton": "t, for 1000 kg (ton is 2000 lb)",
}  # fmt: skip
_SI = {
    "temperature": "K", "temperature difference": "K", "time": "s", "volume": "m^3", "amount": "mol", "mass": "kg",
    "concentration": "mol/m^3", "energy per amount": "J/mol", "molar mass": "kg/mol", "density": "kg/m^3",
    "heat capacity": "J/K", "molar heat capacity": "J/mol/K", "specific heat capacity": "J/kg/K", "power": "W",
    "heat transfer coefficient": "W/m^2/K", "heat loss": "W/K", "area": "m^2", "volume flow": "m^3/s",
    "inverse temperature": "1/K", "dimensionless": "", "productivity": "kg/m^3/s", "pressure": "Pa",
}  # fmt: skip


class UnitFault(ValueError):
    """A text that is no quantity of the dimension asked for: `expected` and `because` say what would be right."""

    def __init__(self, expected: str, because: str) -> None:
        super().__init__(f"expected {expected}: {because}")
        self.expected, self.because = expected, because


def _names(error: "pint.UndefinedUnitError") -> str:
    names = error.unit_names
    return repr(names) if isinstance(names, str) else ", ".join(map(repr, sorted(names)))


@lru_cache(maxsize=1)
def _registry() -> "pint.UnitRegistry[Any]":
    """Return the one registry, its definitions from the user's cache where that can be written."""
    import pint

    try:
        registry: pint.UnitRegistry[Any] = pint.UnitRegistry(cache_folder=":auto:")
    except OSError:
        registry = pint.UnitRegistry()
    return registry


def _plain(unit: str) -> str:
    """Return a unit with its squares and cubes written out: dm3 is (dm)^3, and never a tenth of a cubic metre."""
    return _CUBED.sub(r"\1**\2", unit)


def si_unit(dimension: str) -> str:
    """Return the SI unit of a named dimension, or of one given as a unit itself."""
    return _SI.get(dimension, dimension)


def suffix(unit: str) -> str:
    """Return a unit as the end of a column's name: "K" -> "_K", "mol/m^3" -> "_mol_per_m3", "m**(1.5)*s**(-1)" -> "_m1.5_per_s", "" -> ""."""
    above: list[str] = []
    below: list[str] = []
    for divided, name, power in _FACTOR.findall(unit.replace("**", "^").replace("(", "").replace(")", "")):
        under = (divided == "/") != power.startswith("-")
        size = f"{abs(float(power or 1)):g}"
        if name != "1" and size != "0":
            (below if under else above).append(name if size == "1" else name + size)
    return "".join(f"_{part}" for part in [*above, *(["per", *below] if below else [])])


def _words(dimension: str) -> str:
    """Return a dimension in words, with an example where its name alone is none."""
    return f'{kind_of(dimension)}, such as "1 {si_unit(dimension)}"' if _SI.get(dimension) else kind_of(dimension)


def kind_of(dimension: str) -> str:
    """Return a dimension in words: "a time", "an area", "a quantity in m^3/mol/s", "a number without a unit"."""
    if dimension == "dimensionless":
        return "a number without a unit"
    if dimension in _SI:
        return f"{'an' if dimension[0] in 'aeiou' else 'a'} {dimension}"
    parts = re.findall(r"([a-z]+)\*\*\((-?)([\d.]+)\)", dimension)
    powers = [(sign, name if power == "1" else f"{name}^{power}") for name, sign, power in parts]
    above = "*".join(part for sign, part in powers if not sign) or "1"
    return "a quantity in " + (above + "".join(f"/{part}" for sign, part in powers if sign) if powers else dimension)


def _split(text: str, dimension: str) -> tuple[float, str]:
    wanted = _words(dimension)
    if re.match(r"^\s*[+-]?\d+,\d", text):
        raise UnitFault(wanted, "the decimal sign is a point; a comma is not read")
    found = _QUANTITY.match(text) if len(text) <= _LONGEST else None
    if not found:
        raise UnitFault(wanted, "a quantity is a number and its unit")
    number, unit = float(found[1]), found[2] or ""
    if not math.isfinite(number):
        raise UnitFault(wanted, "the number is not finite")
    for name in re.findall(r"[A-Za-zµ°]+", unit):
        if name in _REFUSED:
            raise UnitFault(_REFUSED[name], f"the unit {name!r} is not what it seems")
    if not _UNIT.fullmatch(unit):
        raise UnitFault(wanted, f"{unit!r} holds signs or numbers that no unit has")
    return number, unit


def _magnitude(quantity: Any, target: str) -> float:
    """Return a quantity's number in another unit; powers that differ by rounding alone are the same (L^0.7 and m^2.1)."""
    import pint

    try:
        return float(quantity.to(target).magnitude)
    except pint.DimensionalityError:
        own, other = quantity.to_base_units(), quantity.__class__(1.0, target).to_base_units()
        gap = own.dimensionality / other.dimensionality
        if any(abs(power) > 1e-9 for power in gap.values()):
            raise
        return float(own.magnitude / other.magnitude)


def to_si(text: str, dimension: str) -> float:
    """Return a quantity in SI; UnitFault where the text is none of that dimension (a name of `_SI`, or an SI unit)."""
    import pint

    number, unit = _split(text, dimension)
    target = si_unit(dimension)
    registry = _registry()
    if odd := _odd_prefix(unit):
        near = _nearest(unit) or target
        raise UnitFault(f"a unit, such as {near}", f"unknown unit {odd!r} in {unit!r}")
    if not unit and target:
        raise UnitFault(_words(dimension), "every quantity stands with its unit")
    try:
        value = _magnitude(registry.Quantity(number, _plain(unit)), target)
        zero = float(registry.Quantity(0.0, _plain(unit)).to(target).magnitude) if dimension == "temperature difference" else 0.0
    except pint.UndefinedUnitError as error:
        expected = f"a unit of {dimension}, such as {_nearest(unit) or target}" if dimension in _SI else _words(dimension)
        raise UnitFault(expected, f"unknown unit {_names(error)} in {unit!r}") from None
    except pint.DimensionalityError:
        raise UnitFault(_words(dimension), f"{unit or 'a bare number'} measures something else") from None
    except Exception:
        raise UnitFault(_words(dimension), f"{unit!r} cannot be read as a unit") from None
    if zero != 0.0:
        raise UnitFault("a difference in K", f"{unit} counts from a zero; a difference does not")
    if not math.isfinite(value):
        raise UnitFault(_words(dimension), "the number is not finite")
    if dimension == "temperature" and value < 0.0:
        raise UnitFault("a temperature above absolute zero", f"{text!r} is below it")
    return value


def _odd_prefix(unit: str) -> str:
    """Return a name that is no unit but for a prefix that nobody writes there ("hh", a hundred hours); "" where there is none."""
    for name in re.findall(r"[A-Za-zµ°%]+", _plain(unit)):
        read = _registry().parse_unit_name(name)
        if read and all(prefix and base not in _PREFIXED for prefix, base, _ in read):
            return str(name)
    return ""


def unit_of(text: str) -> str:
    """Return the unit as written in a quantity."""
    found = _QUANTITY.match(text)
    return (found[2] or "") if found else ""


def from_si(value: float, unit: str, dimension: str | None = None) -> float:
    """Return an SI value in another unit; SI is the dimension's own unit, or the base units of `unit`."""
    registry, unit = _registry(), _plain(unit)
    base = si_unit(dimension) if dimension is not None else registry.Quantity(1.0, unit).to_base_units().units
    return _magnitude(registry.Quantity(value, base), unit)


def show(value: float, unit: str, digits: int = 4) -> str:
    """Return an SI value as text in a unit, such as "45 degC"; a dimensionless one has none."""
    if not unit:
        return f"{value:.{digits}g}"
    return f"{from_si(value, unit):.{digits}g} {unit}"


def _nearest(unit: str) -> str:
    known = ("degC", "degF", "K", "s", "min", "h", "d", "mol", "kmol", "mmol", "g", "kg", "t", "L", "mL", "m3", "mol/L", "kmol/m3",
             "kJ/mol", "J/mol", "kcal/mol", "g/mol", "kg/mol", "kg/L", "kg/m3", "g/mL", "J/mol/K", "J/g/K", "kJ/kg/K", "W", "kW",
             "MW", "W/m2/K", "W/K", "kW/K", "J/K", "kJ/K", "MJ/K", "m2", "m3/h", "L/min", "L/h", "1/K", "1/s", "1/min", "1/h",
             "L/mol/s", "L/mol/min", "m3/mol/s", "bar", "Pa", "%")  # fmt: skip
    near = difflib.get_close_matches(unit, known, 1)
    return near[0] if near else ""
