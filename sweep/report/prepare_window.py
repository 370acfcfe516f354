"""The operating window and what lies over its plane, from results to numbers with labels."""

from collections.abc import Mapping
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sweep.base.units import unit_of
from sweep.report.curves import Absent, Array, Boundary, ContourMap, Field, Ground, Reach, WindowMap, within
from sweep.report.display import Scale, scale_as_written, scale_for, times
from sweep.report.results import Results
from sweep.report.wording import plain, words

MAP = ("window_map", "The window in which every limit holds")
CONTOURS = ("batch_time_map", "Time to target and productivity over the window")
PREFIX = "margin_"


def variable_scale(results: Results, name: str, unit: str = "") -> Scale:
    """Return the study's own unit of a variable; `unit` (SI), or a plain "SI", where the set-point does not name the variable."""
    given = (results.block("set_point").get("inputs") or {}).get(name)
    if not given:
        return scale_for(unit) if unit and unit != "s" else Scale(unit or "SI")
    own = given.get("written_unit") or unit_of(str(given.get("written") or ""))
    return scale_as_written(str(own or ""), str(given.get("unit") or ""))


def axis_label(results: Results, name: str) -> str:
    """Return a variable's name with its unit."""
    unit = variable_scale(results, name).unit
    return f"{plain(name)} ({unit})" if unit else plain(name)


def _columns(table: pd.DataFrame, axes: tuple[str, str]) -> tuple[str, str] | None:
    """Return the columns of the two axes, which stand first after the numbering: each the variable's name and its SI unit's suffix."""
    first = [str(name) for name in table.columns if name not in ("line", "order")][:2]
    right = len(first) == 2 and all(name == axis or name.startswith(f"{axis}_") for name, axis in zip(first, axes, strict=True))
    return (first[0], first[1]) if right else None


def axes_of(results: Results) -> tuple[str, str] | None:
    """Return the names of the window's two axes."""
    axes: list[str] = list(results.block("window").get("axes") or ())
    return (axes[0], axes[1]) if len(axes) == 2 else None


def _grid(table: pd.DataFrame, columns: tuple[str, str], value: str) -> Array:
    """Return a column as (n, m) over both axes in rising order; NaN where a pair is missing."""
    wide = table.pivot(index=columns[0], columns=columns[1], values=value)
    return pd.DataFrame(wide.sort_index().sort_index(axis=1)).to_numpy(dtype=np.float64)


def _set_point(results: Results, axes: tuple[str, str], scales: tuple[Scale, Scale]) -> tuple[float, float] | None:
    given = results.block("set_point").get("inputs") or {}
    values = [(given.get(axis) or {}).get("value") for axis in axes]
    return None if values[0] is None or values[1] is None else (scales[0].one(values[0]), scales[1].one(values[1]))


def _boundaries(results: Results, axes: tuple[str, str], scales: tuple[Scale, Scale]) -> tuple[Boundary, ...]:
    """Return the edge in pieces: a new one at each line and wherever another limit takes over, joined at their ends."""
    table = results.table("window_boundary")
    columns = None if table is None else _columns(table, axes)
    if table is None or columns is None:
        return ()
    found = []
    for _, line in table.sort_values(["line", "order"], kind="stable").groupby("line", sort=True):
        x, y = scales[0].of(line[columns[0]]), scales[1].of(line[columns[1]])
        limits = line["limit"].astype(str).to_numpy()
        starts = [0, *(np.flatnonzero(limits[1:] != limits[:-1]) + 1)]
        for start, stop in zip(starts, [*starts[1:], len(x)], strict=True):
            stop = min(stop + 1, len(x))
            found.append(Boundary(limits[start], x[start:stop], y[start:stop]))
    return tuple(found)


def ground(results: Results, table: pd.DataFrame) -> tuple[Ground, tuple[str, str], tuple[Scale, Scale]] | None:
    """Return the plane of the window's axes with edge and set-point, its two columns in a table, and their scales."""
    axes = axes_of(results)
    columns = None if axes is None else _columns(table, axes)
    if axes is None or columns is None:
        return None
    scales = (variable_scale(results, axes[0]), variable_scale(results, axes[1]))
    x, y = scales[0].of(np.unique(table[columns[0]])), scales[1].of(np.unique(table[columns[1]]))
    if len(x) < 2 or len(y) < 2:
        return None
    labels = (axis_label(results, axes[0]), axis_label(results, axes[1]))
    return Ground(labels, x, y, _set_point(results, axes, scales), _boundaries(results, axes, scales)), columns, scales


def _reaches(results: Results, axes: tuple[str, str], scales: tuple[Scale, Scale]) -> tuple[Reach, ...]:
    window = results.block("window")
    given, found = results.block("set_point").get("inputs") or {}, []
    for distance in (window.get("set_point") or {}).get("distances") or ():
        if distance["axis"] not in axes:
            continue
        axis, up, far = axes.index(distance["axis"]), distance["direction"] == "up", distance["distance"]
        value, scale = (given.get(distance["axis"]) or {}).get("value"), scales[axis]
        edge = None if far is None or value is None else scale.one(value + (far if up else -far))
        label = "no edge in range" if far is None else f"{'+' if up else '−'}{scale.change(abs(far), digits=3)}"
        found.append(Reach(axis, up, edge, label))
    return tuple(found)


def _binding(table: pd.DataFrame, columns: tuple[str, str], labels: tuple[str, ...]) -> NDArray[np.int64]:
    """Return the number of the limit that binds at each grid point (n, m), -1 where none is named."""
    found = pd.Series(table["binding"].astype(str) if "binding" in table else "", index=table.index)
    numbered = table[list(columns)].assign(binding=found.map({label: k for k, label in enumerate(labels)}))
    return np.nan_to_num(_grid(numbered, columns, "binding"), nan=-1.0).astype(np.int64)


def _margins(table: pd.DataFrame, columns: tuple[str, str], labels: tuple[str, ...]) -> Array:
    """Return margins over their largest size, (n, m, L): limits of different units side by side; the sign decides."""
    raw = np.stack([_grid(table, columns, PREFIX + label) for label in labels], axis=-1)
    if "holds" in table:
        held = _grid(table.assign(holds=table["holds"].astype(str).str.lower().isin(["true", "1"]).astype(float)), columns, "holds")
        raw[(held != 1.0) & (np.nan_to_num(raw, nan=-1.0) >= 0.0).all(axis=-1)] = np.nan
    size = np.where(np.isfinite(raw), np.abs(raw), 0.0).max(axis=(0, 1))
    scaled: Array = raw / np.where(size > 0.0, size, 1.0)
    return scaled


def window(results: Results) -> WindowMap | Absent:
    """Return the window over its two axes: margins, the limit that binds, the edge, the set-point and its distances."""
    table = results.table("window_grid")
    why = results.why_not("window")
    if why or table is None:
        return Absent(*MAP, why or "analyses/window_grid.csv is missing or empty")
    plane = ground(results, table)
    labels = tuple(name.removeprefix(PREFIX) for name in table.columns if name.startswith(PREFIX))
    if plane is None or not labels:
        return Absent(*MAP, "analyses/window_grid.csv does not span the window's two axes" if labels else "there is no limit that could end a window")
    drawn, columns, scales = plane
    axes = axes_of(results)
    assert axes is not None
    binding = _binding(table, columns, labels)
    tables = {MAP[0]: _grid_numbers(results, table, columns, scales, drawn.labels), "window_boundary": _edge_numbers(drawn)}
    description = "A map of two variables: the region where every limit holds, its edge by the limit that ends it, the set-point inside or outside."
    reaches = _reaches(results, axes, scales)
    margins = _margins(table, columns, labels)
    return WindowMap(*MAP, _caption(drawn), description, drawn, labels, margins, binding, reaches, tables)


def _caption(drawn: Ground) -> str:
    text = "Plain: every limit holds. Hatched: at least one limit does not, by the one that is crossed first."
    text += " Arrows: from the set-point to the edge along each axis, the rest unchanged."
    return text + ("" if within(drawn) else " The set-point lies outside the range mapped.") + " Between the points computed the map is interpolated."


def _grid_numbers(
    results: Results, table: pd.DataFrame, columns: tuple[str, str], scales: tuple[Scale, Scale], labels: tuple[str, str]
) -> pd.DataFrame:
    units = {limit_label(limit, results): limit for limit in results.summary.get("limits") or ()}
    numbers = {labels[k]: scales[k].of(table[columns[k]]) for k in (0, 1)}
    for name in (column for column in table.columns if column.startswith(PREFIX)):
        label = name.removeprefix(PREFIX)
        limit: Mapping[str, Any] = units.get(label) or {}
        scale = scale_for(str(limit.get("unit") or ""), label, float(limit.get("bound") or np.inf))
        numbers[f"margin, {words(label)}{f' ({scale.step})' if scale.step else ''}"] = table[name].to_numpy(dtype=np.float64) * scale.factor
    numbers |= {name: table[name].to_numpy() for name in ("holds", "binding") if name in table}
    return pd.DataFrame(numbers)


def limit_label(limit: Mapping[str, Any], results: Results) -> str:
    """Return a limit's label: its name, and its sense where the study limits it both ways."""
    if limit.get("label"):
        return str(limit["label"])
    both = sum(other["name"] == limit["name"] for other in results.summary.get("limits") or ()) > 1
    return f"{limit['name']} {str(limit['sense']).replace('_', ' ')}" if both else str(limit["name"])


def _edge_numbers(drawn: Ground) -> pd.DataFrame:
    x, y = drawn.labels
    pieces = [pd.DataFrame({"piece": k, x: piece.x, y: piece.y, "limit": words(piece.limit)}) for k, piece in enumerate(drawn.boundaries, 1)]
    return pd.concat(pieces, ignore_index=True) if pieces else pd.DataFrame({"piece": [], x: [], y: [], "limit": []})


def contours(results: Results) -> ContourMap | Absent:
    """Return time to target and productivity over the window's plane."""
    table = results.table("batch_time_map")
    why = results.why_not("window") or results.why_not("batch_time")
    if why or table is None:
        return Absent(*CONTOURS, why or "analyses/batch_time_map.csv is missing or empty")
    plane = ground(results, table)
    if plane is None:
        return Absent(*CONTOURS, "analyses/batch_time_map.csv does not span the window's two axes")
    drawn, columns, scales = plane
    fields, numbers = _fields(table, columns), {drawn.labels[k]: scales[k].of(table[columns[k]]) for k in (0, 1)}
    if not fields:
        return Absent(*CONTOURS, "no point of the plane has a time to target or a productivity")
    for column, scale in _shown(table).items():
        numbers[f"{_title(column)} ({scale.unit})"] = scale.of(table[column])
    caption = "Contours over the window's axes, the window's edge over them (thick grey). " + _also(fields)
    description = f"Contour maps of two variables: {', '.join(field.title for field in fields)}."
    return ContourMap(*CONTOURS, caption, description, drawn, tuple(fields), {CONTOURS[0]: pd.DataFrame(numbers)})


def _also(fields: list[Field]) -> str:
    return f"{len(fields)} quantities, each with its unit above the map." if len(fields) > 1 else ""


def _title(column: str) -> str:
    named = {"time_to_target_s": "time to target", "most_productive_time_s": "most productive batch time", "conversion": "conversion"}
    productive = {"at_target": "productivity at the target", "most_productive": "highest productivity"}
    if column in named:
        return named[column]
    return next((said for start, said in productive.items() if column.startswith(start)), plain(column))


def _shown(table: pd.DataFrame) -> dict[str, Scale]:
    """Return the columns of the batch-time map with the unit each is shown in."""
    found: dict[str, Scale] = {}
    for column in table.columns:
        if column in ("time_to_target_s", "most_productive_time_s"):
            found[column] = times(min(float(np.nan_to_num(table[column], nan=0.0).max()), 95 * 3600.0))
        elif column.endswith(("_kg_per_m3_s", "_mol_per_m3_s")):
            found[column] = scale_for("kg/m^3/s" if "_kg_" in column else "mol/m^3/s")
        elif column == "conversion":
            found[column] = scale_for("", column)
    return found


def _fields(table: pd.DataFrame, columns: tuple[str, str]) -> list[Field]:
    """Return the two maps drawn: time to target, and productivity there (the highest where there is no target)."""
    shown, found = _shown(table), []
    time = "time_to_target_s" if "time_to_target_s" in table and table["time_to_target_s"].notna().any() else "most_productive_time_s"
    made = "at_target" if time == "time_to_target_s" else "most_productive_"
    wanted = [time, *(column for column in table.columns if column.startswith(made) and column.endswith("_m3_s"))]
    for column in wanted:
        if column in shown and table[column].notna().any():
            absent = "target not reached" if time == "time_to_target_s" else "no value"
            found.append(Field(_title(column), shown[column].unit, shown[column].of(_grid(table, columns, column)), absent))
    return found
