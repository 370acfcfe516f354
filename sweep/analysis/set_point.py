"""The set-point: its responses, the margin to each limit, and the limit that is nearest."""

from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from sweep.base.units import show, si_unit
from sweep.plan import set_point
from sweep.plant import LimitRow, limits, margins, profile, responses
from sweep.study.model import Study

Evaluate = Callable[[pd.DataFrame], pd.DataFrame]


@dataclass(frozen=True)
class SetPoint:
    """row: inputs and responses; rows: the limits; margin (L,): by how much each holds; spread (L,): interquartile range of its
    response over the plan."""

    study: Study
    point: dict[str, float]
    row: pd.Series
    rows: tuple[LimitRow, ...]
    margin: np.ndarray
    spread: np.ndarray
    profile: pd.DataFrame

    @property
    def holds(self) -> bool:
        """Tell whether every limit holds."""
        return bool((self.margin >= 0.0).all())

    def nearest(self) -> dict[str, Any] | None:
        """Return the limit with the smallest margin, counted in its response's interquartile range over the plan (in its bound without one).

        A batch that runs to its target meets the target by being ended there: that margin of nothing is the nearest only where there is no other.
        """
        scale = np.where(np.isfinite(self.spread) & (self.spread > 0.0), self.spread, [max(abs(r.bound), 1e-300) for r in self.rows])
        share = np.where(np.isnan(self.margin), -np.inf, self.margin / scale) if self.rows else np.zeros(0)
        if not self.rows:
            return None
        others = np.array([not self._met_by_ending(row, margin) for row, margin in zip(self.rows, self.margin, strict=True)])
        k = int(np.where(others | ~others.any(), share, np.inf).argmin())
        of = "the interquartile range of this response over the plan" if np.isfinite(self.spread[k]) and self.spread[k] > 0.0 else "its bound"
        row = self.rows[k]
        return {
            "name": row.name, "sense": row.sense, "label": row.label, "margin": _number(self.margin[k]), "unit": row.unit,
            "share": _number(share[k]), "of": of,
        }  # fmt: skip

    def _met_by_ending(self, row: LimitRow, margin: float) -> bool:
        target = self.study.values.get("target.conversion")
        return self.study.batch_to_target and margin >= 0.0 and (row.response, row.sense, row.bound) == ("conversion", "at_least", target)

    def limit_lines(self) -> list[dict[str, Any]]:
        """Return each limit with its value, margin, and whether it holds."""
        lines = []
        for row, margin in zip(self.rows, self.margin, strict=True):
            value = self.row[row.response]
            missing = pd.isna(value)
            reason = str(self.row["reason"]) if missing or self.row["status"] != "done" else ""
            lines.append({
                "name": row.name, "label": row.label, "sense": row.sense, "bound": row.bound, "value": None if missing else float(value),
                "margin": _number(margin), "unit": row.unit, "holds": bool(margin >= 0.0), "reason": reason,
            })  # fmt: skip
        return lines

    def inputs(self) -> dict[str, dict[str, Any]]:
        """Return what the point sets, SI and in the study's own unit: every variable, then the paths that were set by themselves.

        A path takes its variable's place where the variable sets it alone.
        """
        study, found = self.study, dict[str, dict[str, Any]]()
        own = {v.name: v.unit for v in study.variables}
        names = [v.name if v.name in self.point else v.sets[0] for v in study.variables]
        alone = {v.sets[0]: v.name for v in study.variables}
        for given in (*(name for name in names if name in self.point), *(name for name in self.point if name not in names)):
            name, path = alone.get(given, given), study.paths_of(given)[0]
            unit = si_unit(study.dimensions[path])
            written = show(self.point[given], study.units.get(path) or own.get(name) or unit)
            found[name] = {"value": self.point[given], "unit": unit, "written": written}
        return found

    def summary(self) -> dict[str, Any]:
        """Return the blocks set_point, limits and nearest_limit."""
        study = self.study
        found = {r.column: _plain(self.row[r.column]) for r in responses(study) if r.column not in ("status", "reason") and "." not in r.column}
        status, reason = str(self.row["status"]), str(self.row["reason"])
        block = {"inputs": self.inputs(), "status": status, "reason": reason, "responses": found, "holds": self.holds}
        return {"set_point": block, "limits": self.limit_lines(), "nearest_limit": self.nearest()}

    def tables(self) -> dict[str, pd.DataFrame]:
        """Return the profile and the limits."""
        return {"set_point_profile": self.profile, "limits": pd.DataFrame(self.limit_lines())}


def _number(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None


def _plain(value: Any) -> Any:
    if pd.isna(value):
        return None
    return value.item() if hasattr(value, "item") else value


def look_at_set_point(
    study: Study, evaluate: Evaluate, tables: Iterable[pd.DataFrame] = (), point: dict[str, float] | None = None
) -> SetPoint:
    """Evaluate the set-point, or another point (SI); `tables` are the plan's points, for the spread of each limited response."""
    point = set_point(study) if point is None else point
    frame = pd.DataFrame({name: [value] for name, value in point.items()}, index=[0])
    table = evaluate(frame)
    rows = limits(study)
    return SetPoint(study, point, table.iloc[0], rows, margins(study, table)[0], spread_of(rows, tables), profile(study, point))


def spread_of(rows: tuple[LimitRow, ...], tables: Iterable[pd.DataFrame]) -> np.ndarray:
    """Return the interquartile range of each limited response over the points that are done, (L,); NaN without points."""
    columns = [row.response for row in rows]
    parts = [t.loc[t["status"] == "done", columns].to_numpy(dtype=np.float64, na_value=np.nan) for t in tables] if columns else []
    values = np.concatenate(parts) if parts else np.zeros((0, len(rows)))
    spread = np.full(len(rows), np.nan)
    for k in range(len(rows)):
        known = values[np.isfinite(values[:, k]), k]
        if known.size > 1:
            low, high = np.quantile(known, [0.25, 0.75])
            spread[k] = high - low if high > low else np.nan
    return spread
