"""Names of columns and limits in the words of the trade."""

from collections.abc import Mapping
from typing import Any

_WORDS = {
    "conversion": "conversion", "max_temperature": "highest temperature", "cooling_duty": "largest cooling duty",
    "heat_release": "largest heat release", "mtsr": "MTSR", "tmr_ad": "TMRad", "td24": "T_D24", "mtt": "MTT",
    "accumulation": "largest accumulation", "time_to_target": "time to target", "cycle_time": "cycle time",
    "productivity": "productivity", "max_pressure": "highest pressure", "criticality_class": "criticality class",
    "time_of_max_temperature": "time of the highest temperature", "energy_balance_error": "energy balance error",
    "mtsr_time": "time of the highest MTSR", "tmr_ad_time": "time of the shortest TMRad", "tmr_ad_censored": "TMRad is a lower bound",
    "td24_censored": "T_D24 is a lower bound", "tmr_ad_closed_form": "TMRad by the closed form",
    "adiabatic_rise_synthesis": "adiabatic rise of the synthesis", "adiabatic_rise_decomposition": "adiabatic rise of the decomposition",
    "highest_conversion": "highest conversion within the time marched", "at_target": "productivity at the target",
    "most_productive": "highest productivity", "most_productive_time": "most productive batch time",
    "most_productive_conversion": "conversion at the most productive time",
}  # fmt: skip
_PARTS = (("yield_", "yield of "), ("fraction_", "mole fraction of "))
UNITS = (
    ("_kg_per_m3_s", "kg/m^3/s"), ("_mol_per_m3_s", "mol/m^3/s"), ("_mol_per_m3", "mol/m^3"), ("_kg_per_m3", "kg/m^3"),
    ("_K", "K"), ("_s", "s"), ("_W", "W"), ("_Pa", "Pa"), ("_mol", "mol"), ("_m3", "m^3"),
)  # fmt: skip
_SENSES = (" at least", " at most")


def words(name: str) -> str:
    """Return a response's or limit's name in words: "per_product_tar" as "tar per mole of product"."""
    for ending in _SENSES:
        if name.endswith(ending):
            return f"{words(name.removesuffix(ending))} ({ending.strip()})"
    if "." in name:
        scenario, response = name.split(".", 1)
        return f"{words(response)}, scenario {plain(scenario)}"
    if name in _WORDS:
        return _WORDS[name]
    if name.startswith("per_product_"):
        return f"{plain(name.removeprefix('per_product_'))} per mole of product"
    for start, said in _PARTS:
        if name.startswith(start):
            return said + plain(name.removeprefix(start))
    return plain(name)


def plain(name: str) -> str:
    """Return a name of the study with spaces for underscores."""
    return name.replace("_", " ")


def input_name(name: str) -> str:
    """Return an uncertain input, a control error, or a group of them, in words."""
    if name.startswith("variables.") and name.endswith(".error"):
        return f"control error of {plain(name.removeprefix('variables.').removesuffix('.error'))}"
    return " + ".join(input_name(part) for part in name.split(" + ")) if " + " in name else plain(name)


def split_unit(column: str) -> tuple[str, str]:
    """Return a column's name and its SI unit."""
    for ending, unit in UNITS:
        if column.endswith(ending) and len(column) > len(ending):
            return column.removesuffix(ending), unit
    return column, ""


def sentence(text: str) -> str:
    """Return text with a capital at its start and a full stop at its end."""
    text = text.strip().replace(" degC", "\u00a0°C")
    return text if not text else text[0].upper() + text[1:] + ("" if text[-1] in ".!?" else ".")


def pieces(window: Mapping[str, Any]) -> str:
    """Return how many parts a window has."""
    count, holes = window.get("pieces"), window.get("holes") or 0
    if count is None:
        return ""
    whole = "The window is in one piece" if count == 1 else f"The window is in {count} separate pieces" if count else "There is no window"
    inside = f", with {several(holes, 'hole')}" if holes else ", without holes" if count else ""
    return f"{whole}{inside}."


def several(count: int, one: str, many: str = "") -> str:
    """Return a count with its noun."""
    return f"{count} {one if count == 1 else many or one + 's'}"


def listed(items: list[str]) -> str:
    """Return words in a row: a, b and c."""
    return items[0] if len(items) == 1 else f"{', '.join(items[:-1])} and {items[-1]}" if items else ""


def reach_name(name: str) -> str:
    """Return the event of the path in words: "limit max_temperature" as "limit on highest temperature"."""
    return f"limit on {words(name.removeprefix('limit '))}" if name.startswith("limit ") else name
