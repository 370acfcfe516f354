"""Ranges, optimum and map in a line or two each: what to write down, and how sure it is."""

from collections.abc import Mapping
from typing import Any

from sweep.report.display import NONE, Scale, number, pretty, scale_for
from sweep.report.results import Results
from sweep.report.wording import plain, split_unit, words


def percent(value: float) -> str:
    """Return a probability in per cent, with the digits that tell it from none and from all."""
    away = min(value, 1.0 - value)
    return f"{number(100.0 * value, None, 3)} %" if away >= 1e-3 or away == 0.0 else f"{number(100.0 * value, 3)} %"


def sure(found: Mapping[str, Any]) -> str:
    """Return how limits are to hold: nominally, or with a probability."""
    asked = found.get("assurance")
    if not asked:
        return "nominally, at the constants as written"
    return f"with a probability of at least {percent(asked['probability'])} (confidence {percent(asked['confidence'])}, {asked['draws']:,} draws)"


def setting(inputs: Mapping[str, Mapping[str, Any]]) -> str:
    """Return a setting in the study's own units."""
    return ", ".join(f"{plain(name)} {pretty(one['written'])}" for name, one in inputs.items())


def aim_scale(objective: Mapping[str, Any], value: float | None) -> Scale:
    """Return how an objective is shown; a margin as a difference."""
    unit, name = str(objective["unit"]), str(objective["name"])
    if name == "cost":
        return Scale(unit)
    if name.startswith("margin_"):
        scale = scale_for(unit, name.removeprefix("margin_"), abs(value or 0.0))
        return Scale(scale.step, scale.factor)
    return scale_for(unit, name, abs(value or 0.0))


def aim_name(objective: Mapping[str, Any]) -> str:
    """Return an objective in words."""
    name = str(objective["name"])
    if name.startswith("margin_"):
        return f"margin of {words(name.removeprefix('margin_'))}"
    return "cost of product" if name == "cost" else words(split_unit(name)[0])


def aim(objective: Mapping[str, Any], value: float | None) -> str:
    """Return an objective's value with its unit."""
    return NONE if value is None else aim_scale(objective, value).text(value)


def ranges_lines(results: Results) -> tuple[str, ...]:
    """Return the acceptable ranges, a line each."""
    if why := results.why_not("ranges"):
        return (f"not assessed: {why}",)
    found = results.block("ranges")
    if found.get("reason"):
        return (f"none: {found['reason']}",)
    lines = []
    for one in found["variables"]:
        ends = one["acceptable"]
        lines.append(f"{plain(one['variable'])}: {pretty(ends['low_written'])} to {pretty(ends['high_written'])}")
    lines.append(f"in any combination, every limit holds {sure(found)}")
    worst = found.get("worst_setting")
    if worst:
        lines.append(f"at the worst setting found {percent(worst['probability'])} of fresh draws hold, at least {percent(worst['low'])}")
    return tuple(lines)


def optimum_lines(results: Results) -> tuple[str, ...]:
    """Return the best setting, or why there is none."""
    if why := results.why_not("optimum"):
        return (f"not assessed: {why}",)
    found = results.block("optimum")
    if found.get("reason"):
        return (str(found["reason"]), f"nearest to it: {setting(found['least_bad']['inputs'])}")
    aims = found["objectives"]
    if found.get("front") is not None:
        return (f"{len(found['front'])} settings trade {aim_name(aims[0])} against {aim_name(aims[1])}; see below",)
    best = found["best"]
    said = f"{setting(best['inputs'])}: {aim_name(aims[0])} {aim(aims[0], best['objectives'][0])}"
    here = aim(aims[0], found["set_point"]["objectives"][0])
    lines = [said, f"at the set-point: {here}" + ("" if found["set_point_acceptable"] else ", where not every limit holds so")]
    lines.append(f"every limit holds {sure(found)}")
    if best.get("verified"):
        lines.append(f"{percent(best['verified']['probability'])} of {best['verified']['draws']:,} fresh draws hold, at least "
                     f"{percent(best['verified']['low'])}")  # fmt: skip
    return tuple(lines)
