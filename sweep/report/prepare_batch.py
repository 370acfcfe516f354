"""The batch at its set-point and its batch time, from results to numbers with labels."""

from collections.abc import Mapping
from typing import Any

import numpy as np
import pandas as pd

from sweep.report.curves import Absent, Array, Curves, Level, Line, Moment, Panel
from sweep.report.display import CELSIUS, KILOWATT, PERCENT, Scale, axis_times, conversion, duration, scale_for
from sweep.report.results import Results
from sweep.report.wording import words

PROFILE = ("batch_profile", "The batch at its set-point")
FAR = 2.0  # the productivity is drawn up to so many times the latest choice
PRODUCTIVITY = ("batch_time", "Conversion and productivity against batch time")


def _column(table: pd.DataFrame, name: str) -> Array | None:
    """Return a column of numbers (N,), or None where it is missing or empty."""
    if name not in table or not pd.api.types.is_numeric_dtype(table[name]):
        return None
    found = table[name].to_numpy(dtype=np.float64)
    return found if np.isfinite(found).any() else None


def limit_levels(results: Results, names: tuple[str, ...], scale: Scale) -> tuple[Level, ...]:
    """Return the limits of these names as levels, in the order of the study."""
    found = []
    for limit in results.summary.get("limits") or ():
        if limit["name"].removesuffix(" at most").removesuffix(" at least") in names and limit["bound"] is not None:
            sense = "at least" if limit["sense"] == "at_least" else "at most"
            found.append(Level(f"limit: {words(limit['name'])} {sense} {scale.text(limit['bound'])}", scale.one(limit["bound"])))
    return tuple(found)


def _panel(table: pd.DataFrame, label: str, columns: Mapping[str, str], scale: Scale, levels: tuple[Level, ...] = ()) -> Panel | None:
    """Return a panel of the columns that are there; None where none is."""
    found = [Line(name, scale.of(values)) for column, name in columns.items() if (values := _column(table, column)) is not None]
    return Panel(f"{label} ({scale.unit})", tuple(found), levels) if found else None


def batch_end(results: Results) -> float | None:
    """Return when the batch ends (s); from its cycle and turnaround where batch times were not asked for; None where it is not known."""
    if results.block("batch_time").get("batch_time_s") is not None:
        return float(results.block("batch_time")["batch_time_s"])
    cycle, inputs = (results.block("set_point").get("responses") or {}).get("cycle_time_s"), results.table("inputs")
    if cycle is None or inputs is None or not {"path", "value_si"} <= set(inputs.columns):
        return None
    turnaround = inputs.loc[inputs["path"] == "recipe.turnaround", "value_si"]
    return float(cycle) - float(turnaround.iloc[0]) if len(turnaround) == 1 else None


def _target(results: Results) -> tuple[Level, ...]:
    limits = [limit["bound"] for limit in results.summary.get("limits") or () if limit["name"] == "conversion" and limit["sense"] == "at_least"]
    bound = results.block("batch_time").get("conversion_target", limits[0] if limits else None)
    return () if bound is None else (Level(f"target {conversion(bound)}", PERCENT.one(bound), limit=False),)


def _moments(results: Results, scale: Scale, end: float) -> tuple[Moment, ...]:
    batch = results.block("batch_time")
    crossing = batch.get("time_to_target_s", (results.block("set_point").get("responses") or {}).get("time_to_target_s"))
    named = (("target reached", crossing), ("batch ends", batch_end(results)))
    return tuple(Moment(f"{name}, {scale.text(at, digits=3)}", scale.one(at)) for name, at in named if at is not None and at <= end * (1 + 1e-9))


def _profile_panels(results: Results, table: pd.DataFrame) -> list[Panel]:
    temperatures = {"temperature_K": "contents", "jacket_temperature_K": "jacket"}
    heats = {"heat_release_W": "heat released", "cooling_duty_W": "heat removed"}
    made = (
        _panel(table, "Temperature", temperatures, CELSIUS, limit_levels(results, ("max_temperature",), CELSIUS)),
        _panel(table, "Conversion", {"conversion": "conversion"}, PERCENT, _target(results)),
        _panel(table, "Heat flow", heats, KILOWATT, limit_levels(results, ("cooling_duty", "heat_release"), KILOWATT)),
        _panel(table, "Accumulation", {"accumulation": "accumulation"}, PERCENT, limit_levels(results, ("accumulation",), PERCENT)),
    )
    return [panel for panel in made if panel is not None]


def _numbers(x_name: str, x: Array, panels: list[Panel]) -> pd.DataFrame:
    columns = {x_name: x}
    for panel in panels:
        unit = panel.label.rsplit("(", 1)[-1].rstrip(")")
        columns.update({f"{line.name} ({unit})": line.y for line in panel.lines})
    return pd.DataFrame(columns)


def profile(results: Results) -> Curves | Absent:
    """Return the batch over time: temperature, conversion, heat released and removed, accumulation."""
    table = results.table("set_point_profile")
    if table is None:
        return Absent(*PROFILE, "analyses/set_point_profile.csv is missing or empty")
    last, end = float(table["time_s"].iloc[-1]), batch_end(results)
    if end is not None and end < last:  # what the march computes beyond the batch's end is no part of the batch
        table, last = table[table["time_s"] <= end * (1 + 1e-9)], end
    seconds = table["time_s"].to_numpy(dtype=np.float64)
    scale = axis_times(float(seconds[-1] - seconds[0]))
    panels = _profile_panels(results, table)
    if not panels:
        return Absent(*PROFILE, "analyses/set_point_profile.csv holds none of the quantities drawn")
    shown = ", ".join(panel.label.rsplit(" (", 1)[0].lower() for panel in panels)
    caption = f"Batch at the set-point: {shown} over time. Limits are the long-dashed lines." + _late_target(results, last)
    description = f"{len(panels)} panels over time, one above the other: {shown}."
    x = scale.of(seconds)
    moments = _moments(results, scale, last)
    numbers = _numbers(f"time ({scale.unit})", x, panels)
    return Curves(*PROFILE, caption, description, f"Time since the start of the batch ({scale.unit})", x, tuple(panels), moments, numbers)


def _late_target(results: Results, end: float) -> str:
    at = results.block("batch_time").get("time_to_target_s")
    return "" if at is None or at <= end * (1 + 1e-9) else f" The target is reached after the batch's end, at {duration(at)}."


def options(results: Results) -> list[Mapping[str, Any]]:
    """Return the batch times compared, those that have one."""
    return [option for option in results.block("batch_time").get("options") or () if option.get("time_s") is not None]


def productivity(results: Results) -> Curves | Absent:
    """Return conversion and productivity over the batch time chosen, with the choices marked."""
    table = results.table("batch_time")
    why = results.why_not("batch_time")
    if why or table is None:
        return Absent(*PRODUCTIVITY, why or "analyses/batch_time.csv is missing or empty")
    latest = max((float(option["time_s"]) for option in options(results)), default=np.inf)
    table = table[table["time_s"] <= max(FAR * latest, float(table["time_s"].iloc[0]))]
    seconds = table["time_s"].to_numpy(dtype=np.float64)
    scale = axis_times(float(seconds[-1]))
    panels = [_panel(table, "Conversion", {"conversion": "conversion"}, PERCENT, _target(results)), _made(table)]
    there = [panel for panel in panels if panel is not None]
    if not there:
        return Absent(*PRODUCTIVITY, "analyses/batch_time.csv holds neither conversion nor productivity")
    moments = tuple(Moment(f"{o['name']}, {scale.text(o['time_s'], digits=3)}", scale.one(o["time_s"])) for o in options(results))
    caption = "Were the batch ended at the time on the axis: conversion, and product per vessel volume and hour of cycle (turnaround included)."
    description = "Conversion and productivity as curves over the batch time, with the choices of batch time marked by vertical lines."
    x = scale.of(seconds)
    numbers = _numbers(f"batch time ({scale.unit})", x, there)
    return Curves(*PRODUCTIVITY, caption, description, f"Batch time ({scale.unit})", x, tuple(there), moments, numbers)


def _made(table: pd.DataFrame) -> Panel | None:
    for column, unit in (("productivity_kg_per_m3_s", "kg/m^3/s"), ("productivity_mol_per_m3_s", "mol/m^3/s")):
        if column in table:
            return _panel(table, "Productivity", {column: "productivity"}, scale_for(unit))
    return None
