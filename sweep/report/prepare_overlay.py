"""A measured batch over the model, from results to numbers with labels."""

import numpy as np
import pandas as pd

from sweep.report.curves import Absent, Array, Curves, Line, Panel
from sweep.report.display import CELSIUS, KILOWATT, PERCENT, Scale, axis_times, scale_for
from sweep.report.results import Results
from sweep.report.wording import UNITS, plain

OVERLAY = ("measured", "The measured batch over the model")


def _scale(name: str) -> tuple[str, Scale]:
    """Return a quantity in words, and how it is shown."""
    if name == "conversion":
        return "conversion", PERCENT
    ending, unit = next(((ending, unit) for ending, unit in UNITS if name.endswith(ending)), ("", ""))
    said = plain(name.removesuffix(ending))
    if said.startswith(("n ", "c ")):
        said = f"{'amount' if said[0] == 'n' else 'concentration'} of {said[2:]}"
    return said, {"K": CELSIUS, "W": KILOWATT}.get(unit) or scale_for(unit, name)


def _joined(seconds: Array, values: Array) -> Array:
    """Return values with straight lines over the moments at which this quantity was not measured; none beyond its first and last."""
    known = np.flatnonzero(np.isfinite(values))
    if not known.size:
        return values
    return np.asarray(np.interp(seconds, seconds[known], values[known], left=np.nan, right=np.nan))


def _panels(table: pd.DataFrame, name: str) -> list[Panel]:
    """Return a panel of measured and computed, and one of their difference."""
    said, scale = _scale(name)
    seconds = table["time_s"].to_numpy(dtype=np.float64)
    measured, model, residual = (table[f"{name}_{part}"].to_numpy(dtype=np.float64) for part in ("measured", "model", "residual"))
    if not np.isfinite(residual).any():
        return []
    both = (Line("measured", scale.of(_joined(seconds, measured))), Line("model", scale.of(model)))
    label = said[:1].upper() + said[1:]
    gap = Line("measured less model", _joined(seconds, residual) * scale.factor)
    step = "points" if scale is PERCENT else scale.step  # room is short beside a panel
    return [Panel(f"{label} ({scale.unit})", both), Panel(f"Difference ({step})", (gap,))]


def _unit(panel: Panel) -> str:
    return panel.label.rsplit("(", 1)[-1].rstrip(")")


def overlay(results: Results) -> Curves | Absent:
    """Return the measured batch over the model, quantity by quantity, each with its residuals."""
    table = results.table("measured")
    if table is None:
        return Absent(*OVERLAY, "no measured batch was given")
    names = [str(column).removesuffix("_measured") for column in table.columns if str(column).endswith("_measured")]
    drawn = {name: _panels(table, name) for name in names}
    panels = [panel for several in drawn.values() for panel in several]
    if not panels:
        return Absent(*OVERLAY, "no measured moment lies within the batch")
    seconds = table["time_s"].to_numpy(dtype=np.float64)
    scale = axis_times(float(seconds[-1] - seconds[0]))
    x = scale.of(seconds)
    columns = {f"{_scale(name)[0]}: {line.name} ({_unit(panel)})": line.y for name in names for panel in drawn[name] for line in panel.lines}
    numbers = pd.DataFrame({f"time ({scale.unit})": x} | columns)
    caption = "Measured values, joined by straight lines, and the batch computed at the same moments; below each their difference."
    description = f"{len(panels)} panels over time: measured and computed values and their difference."
    return Curves(*OVERLAY, caption, description, f"Time since the start of the batch ({scale.unit})", x, tuple(panels), (), numbers)
