"""How long the batch must run: to its target, and to the most product per hour with turnaround counted; how both move over the window.

One march to the longest time answers every batch time and every target.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from sweep.base.units import si_unit, suffix
from sweep.plan import set_point
from sweep.plant import batch_longest, productivity_of, profile
from sweep.study.model import Study, Variable

Evaluate = Callable[[pd.DataFrame], pd.DataFrame]
GRID = 33  # levels an axis of the map
TIMES = 301  # times of the set-point's table
_MAP = ("time_to_target_s", "most_productive_time_s", "conversion", "cycle_time_s")


@dataclass(frozen=True)
class BatchTime:
    """row: the set-point's responses; lines: conversion and productivity against batch time; grid: both over the window's axes."""

    study: Study
    row: pd.Series
    unit: str
    lines: pd.DataFrame
    grid: pd.DataFrame | None

    def summary(self) -> dict[str, Any]:
        """Return the block batch_time."""
        row, study, unit = self.row, self.study, self.unit
        turnaround = study.values["recipe.turnaround"]
        reached = not pd.isna(row["time_to_target_s"])
        end = float(row["cycle_time_s"]) - turnaround if not pd.isna(row["cycle_time_s"]) else None
        block: dict[str, Any] = {
            "conversion_target": study.values.get("target.conversion"), "turnaround_s": turnaround, "batch_time_s": end,
            "cycle_time_s": _number(row["cycle_time_s"]), "time_to_target_s": _number(row["time_to_target_s"]),
            "highest_conversion": _number(row["highest_conversion"]), "why_not": None if reached else _why(str(row["reason"])),
            "options": self._options(end), "productivity_unit": f"{unit}/m3/s" if unit else None,
        }  # fmt: skip
        block["trade"] = _trade(block["options"])
        block["over_the_window"] = self._range()
        return block

    def _options(self, end: float | None) -> list[dict[str, Any]]:
        """Return the batch times to choose from, each with its cycle time, conversion and productivity."""
        row, unit = self.row, self.unit
        turnaround = self.study.values["recipe.turnaround"]
        target = self.study.values.get("target.conversion")
        last_feed = float(self.lines["time_s"].iloc[0])
        crossing = _number(row["time_to_target_s"])
        options = [("as written", end, _number(row["conversion"]), _number(row.get(f"productivity_{unit}_per_m3_s", np.nan)))]
        if crossing is not None:
            time = max(crossing, last_feed)
            conversion = target if time == crossing else float(np.interp(time, self.lines["time_s"], self.lines["conversion"]))
            options.append(("to target", time, conversion, _number(row.get(f"at_target_{unit}_per_m3_s", np.nan))))
        if unit and _number(row["most_productive_time_s"]) is not None:
            conversion, best = _number(row["most_productive_conversion"]), _number(row[f"most_productive_{unit}_per_m3_s"])
            options.append(("most productive", _number(row["most_productive_time_s"]), conversion, best))
        return [
            {"name": name, "time_s": time, "cycle_time_s": None if time is None else time + turnaround, "conversion": conversion,
             "productivity": productivity, "productivity_unit": f"{unit}/m3/s" if unit else None}
            for name, time, conversion, productivity in options
        ]  # fmt: skip

    def _range(self) -> dict[str, Any]:
        """Return the least and the greatest of both times over the map."""
        if self.grid is None:
            return {}
        found = {}
        for name in ("time_to_target_s", "most_productive_time_s"):
            if name in self.grid and self.grid[name].notna().any():
                found[name] = [float(self.grid[name].min()), float(self.grid[name].max())]
        return found

    def tables(self) -> dict[str, pd.DataFrame]:
        """Return the set-point's table, and the map where there are two axes."""
        return {"batch_time": self.lines} | ({} if self.grid is None else {"batch_time_map": self.grid})


def _number(value: Any) -> float | None:
    return None if pd.isna(value) else float(value)


def _why(reason: str) -> dict[str, str]:
    """Return the cause and the sentence out of a point's reason."""
    sentence = next((part for part in reason.split("; ") if part.startswith("time_to_target: ")), "").removeprefix("time_to_target: ")
    return {"cause": sentence.removeprefix("never reached, "), "sentence": reason}


def _trade(options: list[dict[str, Any]]) -> dict[str, Any]:
    """Return what the run to the target costs in productivity, and what the most productive time costs in conversion."""
    by = {o["name"]: o for o in options}
    target, best = by.get("to target"), by.get("most productive")
    if not target or not best or not best["productivity"] or target["productivity"] is None:
        return {}
    return {
        "productivity_lost_by_target": 1.0 - target["productivity"] / best["productivity"],
        "conversion_lost_by_most_productive": target["conversion"] - best["conversion"],
        "longer_to_target_s": target["time_s"] - best["time_s"],
    }


def _lines(study: Study, point: dict[str, float]) -> pd.DataFrame:
    """Return conversion and productivity were the batch ended at each time from its last feed to the longest."""
    first, last = batch_longest(study, point)
    table = profile(study, point, np.linspace(first, last, TIMES).tolist())
    columns = {"time_s": table["time_s"], "conversion": table["conversion"]}
    unit, values = productivity_of(study, point, table)
    if unit:
        columns[f"productivity_{unit}_per_m3_s"] = pd.Series(values)
    return pd.DataFrame(columns).dropna(subset=["conversion"]).reset_index(drop=True)


def _axes(study: Study) -> tuple[Variable, Variable] | None:
    """Return the window's axes, the first two variables where there is no window, None for fewer."""
    if study.window is not None:
        by = {v.name: v for v in study.variables}
        return by[study.window.axes[0]], by[study.window.axes[1]]
    return (study.variables[0], study.variables[1]) if len(study.variables) > 1 else None


def _grid(study: Study, evaluate: Evaluate, axes: tuple[Variable, Variable], unit: str) -> pd.DataFrame:
    """Return both times over a grid of the axes, the other variables at the slice of the window or the set-point."""
    x, y = (np.linspace(v.low, v.high, GRID) for v in axes)
    frame = pd.DataFrame({axes[0].name: np.repeat(x, GRID), axes[1].name: np.tile(y, GRID)})
    held = {**set_point(study), **(study.window.at if study.window is not None else {})}
    for name, value in held.items():
        if name not in frame:
            frame[name] = value
    table = evaluate(frame)
    names = {v.name: v.name + suffix(si_unit(study.dimensions[v.sets[0]])) for v in axes}
    more = (f"at_target_{unit}_per_m3_s", f"most_productive_{unit}_per_m3_s", f"productivity_{unit}_per_m3_s") if unit else ()
    kept = [c for c in (*_MAP, *more) if c in table]
    return table[[*names, *kept, "status"]].rename(columns=names)


def best_batch_time(study: Study, evaluate: Evaluate, row: pd.Series, point: dict[str, float] | None = None) -> BatchTime:
    """Return the batch times of the set-point (`row`: its responses) and, with two axes, of the window."""
    point = set_point(study) if point is None else point
    lines, axes = _lines(study, point), _axes(study)
    productivity = [c for c in lines.columns if c.startswith("productivity_")]
    unit = productivity[0].split("_")[1] if productivity else ""
    return BatchTime(study, row, unit, lines, _grid(study, evaluate, axes, unit) if axes else None)
