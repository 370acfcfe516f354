"""The failure of cooling, from results to numbers with labels."""

from collections.abc import Mapping
from typing import Any

import numpy as np
import pandas as pd

from sweep.report.curves import Absent, Array, Curves, Level, Line, Moment, Panel
from sweep.report.display import CELSIUS, HOURS, Scale, axis_times, duration, number, temperature, times, with_unit
from sweep.report.prepare_batch import limit_levels
from sweep.report.results import Results
from sweep.report.wording import reach_name

DIAGRAM = ("failure_diagram", "Were cooling lost: temperatures against the time of failure")
PATH = ("failure_path", "After the worst failure: temperature against time")
STILL = 0.05  # K below its highest: the path has come to rest
ABOVE = 20.0  # K of the path drawn above all that is marked
LIMITED = ("max_temperature", "mtsr")


def _td24(failure: Mapping[str, Any]) -> tuple[Level, ...]:
    if failure.get("td24_K") is None:
        return ()
    return (Level(f"T_D24 {temperature(failure['td24_K'], bool(failure.get('td24_censored')))}", CELSIUS.one(failure["td24_K"]), limit=False),)


def _levels(results: Results) -> tuple[Level, ...]:
    failure = results.block("failure")
    mtt = failure.get("mtt_K")
    own = () if mtt is None else (Level(f"MTT {temperature(mtt)}", CELSIUS.one(mtt), limit=False),)
    return (*limit_levels(results, LIMITED, CELSIUS), *own, *_td24(failure))


def _near(levels: tuple[Level, ...], lines: tuple[Line, ...]) -> tuple[tuple[Level, ...], str]:
    """Return the levels that leave the curves room, and a sentence about those far off."""
    drawn = np.concatenate([line.y[np.isfinite(line.y)] for line in lines])
    top = drawn.max() + 3.0 * max(float(np.ptp(drawn)), 20.0)
    low = drawn.min() - 0.5 * max(float(np.ptp(drawn)), 20.0)
    above = [level.name for level in levels if level.value > top]
    below = [level.name for level in levels if level.value < low]
    said = (f" Above the figure: {'; '.join(above)}." if above else "") + (f" Below it: {'; '.join(below)}." if below else "")
    return tuple(level for level in levels if low <= level.value <= top), said


def _worst(failure: Mapping[str, Any], scale: Scale) -> tuple[Moment, ...]:
    found = []
    if failure.get("mtsr_K") is not None and failure.get("mtsr_time_s") is not None:
        at = scale.one(failure["mtsr_time_s"])
        name = f"worst moment {scale.text(failure['mtsr_time_s'], digits=3)}: MTSR {temperature(failure['mtsr_K'])}"
        found.append(Moment(name, at, CELSIUS.one(failure["mtsr_K"])))
    if failure.get("tmr_ad_s") is not None and failure.get("tmr_ad_time_s") is not None and not failure.get("tmr_ad_censored"):
        name = f"shortest TMRad {scale.text(failure['tmr_ad_time_s'], digits=3)}: {duration(failure['tmr_ad_s'], digits=3)}"
        found.append(Moment(name, scale.one(failure["tmr_ad_time_s"])))
    return tuple(found)


def diagram(results: Results) -> Curves | Absent:
    """Return normal temperature and MTSR against the time at which cooling is lost, with the levels they are held against."""
    table = results.table("failure_times")
    why = results.why_not("failure")
    if why or table is None:
        return Absent(*DIAGRAM, why or "analyses/failure_times.csv is missing or empty")
    failure = results.block("failure")
    seconds = table["time_s"].to_numpy(dtype=np.float64)
    scale = axis_times(float(seconds[-1] - seconds[0]))
    named = (("temperature_K", "in normal operation"), ("mtsr_K", "MTSR, were cooling lost then"))
    lines = tuple(Line(name, CELSIUS.of(table[column])) for column, name in named if column in table)
    if not any(np.isfinite(line.y).any() for line in lines):
        return Absent(*DIAGRAM, "analyses/failure_times.csv holds no temperature")
    levels, beyond = _near(_levels(results), lines)
    caption = "Temperature in normal operation, and the highest the synthesis alone would reach were cooling lost at that time (MTSR)."
    caption += beyond + _censored(failure)
    description = "Two curves of temperature over the time of failure, with limits and characteristic temperatures as horizontal lines."
    x = scale.of(seconds)
    numbers = table.rename(columns={"accumulation": "accumulation (1)"}).copy()
    numbers["time_s"] = x
    if "tmr_ad_censored" in numbers:
        numbers["tmr_ad_censored"] = numbers["tmr_ad_censored"].map({1.0: "yes", 0.0: "no"}).fillna("")
    shown = {"time_s": f"time of failure ({scale.unit})", "temperature_K": "in normal operation (°C)", "mtsr_K": "MTSR (°C)", "tmr_ad_s": "TMRad (h)",
             "tmr_ad_censored": "TMRad is a lower bound"}  # fmt: skip
    for column, converted in (("temperature_K", CELSIUS), ("mtsr_K", CELSIUS), ("tmr_ad_s", HOURS)):
        if column in numbers:
            numbers[column] = converted.of(numbers[column])
    panel = Panel("Temperature (°C)", lines, levels)
    label = f"Time since the start of the batch at which cooling is lost ({scale.unit})"
    return Curves(*DIAGRAM, caption, description, label, x, (panel,), _worst(failure, scale), numbers.rename(columns=shown))


def _censored(failure: Mapping[str, Any]) -> str:
    if failure.get("tmr_ad_s") is None or not failure.get("tmr_ad_censored"):
        return ""
    return f" TMRad is {duration(failure['tmr_ad_s'], at_least=True)} at every time of failure: no maximum rate within the horizon."


def _reached(failure: Mapping[str, Any], scale: Scale, first: float) -> tuple[Moment, ...]:
    path = failure.get("path") or {}
    found = []
    for reach in path.get("reaches") or ():
        after, kelvin = reach.get("after_s"), reach.get("temperature_K")
        if after is not None and after >= first:
            at = None if kelvin is None else CELSIUS.one(kelvin)
            found.append(Moment(f"{reach_name(reach['name'])}, {duration(after, digits=3)}", scale.one(after), at))
    return tuple(found)


def path(results: Results) -> Curves | Absent:
    """Return the adiabatic path after the worst failure: synthesis, then decomposition, over the time after the failure."""
    table = results.table("failure_path")
    why = results.why_not("failure")
    if why or table is None:
        return Absent(*PATH, why or "analyses/failure_path.csv is missing or empty")
    failure = results.block("failure")
    seconds, kelvin = table["time_after_failure_s"].to_numpy(dtype=np.float64), table["temperature_K"].to_numpy(dtype=np.float64)
    drawn = slice(0, 1 + int(np.argmax(kelvin >= kelvin.max() - STILL)))
    positive = seconds[drawn][seconds[drawn] > 0]
    logarithmic = bool(positive.size > 2 and positive[-1] > 50.0 * positive[0])
    scale = HOURS if logarithmic else times(float(seconds[drawn][-1]))
    stage = table["stage"].astype(str).to_numpy() if "stage" in table else np.full(len(table), "temperature")
    lines = _stages(np.append(stage[drawn][:-1], stage[drawn][-2:-1]), CELSIUS.of(kelvin[drawn]))  # at rest nothing leads
    x = scale.of(seconds)
    moments = _reached(failure, scale, float(positive[0]) if logarithmic else 0.0)
    levels, beyond = _near(_levels(results), lines)
    top, ends = _top(levels, moments, CELSIUS.one(float(kelvin.max())))
    numbers = pd.DataFrame({f"time after failure ({scale.unit})": x, "temperature (°C)": CELSIUS.of(kelvin), "stage": stage})
    caption = _path_caption(failure) + (" Time is on a logarithmic scale." if logarithmic else "") + ends + beyond
    description = "Temperature rising over the time after the failure, with the moments marked at which levels are reached."
    label = "Time after the failure" + ("" if logarithmic else f" ({scale.unit})")
    panel = Panel("Temperature (°C)", lines, levels, top)
    return Curves(*PATH, caption, description, label, x[drawn], (panel,), moments, numbers, logarithmic)


def _stages(stage: np.ndarray[Any, Any], celsius: Array) -> tuple[Line, ...]:
    """Return a line for each kind of reaction that leads."""
    named = {"synthesis": "synthesis leads", "decomposition": "decomposition leads"}
    return tuple(Line(named.get(key, key), np.where(_joined(stage, key), celsius, np.nan)) for key in dict.fromkeys(stage.tolist()))


def _top(levels: tuple[Level, ...], moments: tuple[Moment, ...], end: float) -> tuple[float | None, str]:
    """Return where the temperature axis ends (°C), above all that is marked, and a sentence where the path runs on above."""
    marked = [level.value for level in levels] + [moment.y for moment in moments if moment.y is not None]
    if not marked or end <= max(marked) + ABOVE:
        return None, ""
    return max(marked) + ABOVE, f" The path runs on above the figure, to {with_unit(number(end, 1), '°C')}."


def _path_caption(failure: Mapping[str, Any]) -> str:
    when = (failure.get("path") or {}).get("failure_time_s")
    lost = "at the worst moment" if when is None else f"{duration(when, digits=3)} after the start, the worst moment"
    return f"Cooling lost {lost}; no heat leaves the vessel, every reaction runs. {feeds(failure)}".strip()


def feeds(failure: Mapping[str, Any]) -> str:
    """Return what the feeds do when cooling fails."""
    if not failure.get("feeds"):
        return ""
    if failure["feeds"] == "stop":
        later = failure.get("feeds_stop_after_s") or 0.0
        return f"Feeds stop {duration(later)} after the failure." if later else "Feeds stop at the failure."
    return f"Feeds {failure['feeds']} at the failure."


def _joined(stage: np.ndarray[Any, Any], key: str) -> np.ndarray[Any, Any]:
    """Return where a stage is drawn: its own points and the last before it, so that the curve has no gap."""
    own = stage == key
    return np.asarray(own | np.append(own[1:], False))
