"""The safe operating window of a study: a slice through two variables, what holds in it, and the set-point's way to each edge."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
import pandas as pd

from sweep.analysis.window.edges import Edges, edges
from sweep.analysis.window.forecast import Floats, Indices, holding
from sweep.analysis.window.trace import Trace, trace
from sweep.base.errors import SweepError
from sweep.base.units import si_unit, suffix
from sweep.study.model import Study, Variable

NOT_DONE = "failed or runaway"  # what ends the window where a point has no answer at all


class Limited(Protocol):
    """What is read of a limit: label, its name with its side where it has two; unit of its margin (SI)."""

    @property
    def label(self) -> str: ...
    @property
    def unit(self) -> str: ...


@dataclass(frozen=True)
class Axis:
    """A variable as an axis: low, high in its SI unit; column: its name in tables."""

    name: str
    low: float
    high: float
    unit: str
    column: str

    def value(self, share: Floats) -> Floats:
        """Return SI values of coordinates that run from 0 to 1 over the range."""
        inside = np.clip(self.low + share * (self.high - self.low), self.low, self.high)
        return np.where((share < 0.0) | (share > 1.0), self.low + share * (self.high - self.low), inside)

    def share(self, value: float) -> float:
        """Return the coordinate of an SI value; one that rounding alone keeps off an end is that end."""
        share = (value - self.low) / (self.high - self.low)
        return round(share) if abs(share - round(share)) < 1e-9 else share


@dataclass(frozen=True)
class NotAssessed:
    """There is no window, and why."""

    reason: str

    def summary(self) -> dict[str, Any]:
        """Return the reason."""
        return {"not_assessed": self.reason}

    def tables(self) -> dict[str, pd.DataFrame]:
        """Return no table."""
        return {}


@dataclass(frozen=True)
class Window:
    """A traced slice. at: the other variables (SI); labels, units: of the limits, a point's not being done last; point: the set-point's margins and
    distances; note: what about the set-point is not as written, None where it is."""

    axes: tuple[Axis, Axis]
    at: Mapping[str, float]
    labels: tuple[str, ...]
    units: tuple[str, ...]
    trace: Trace
    point: Edges
    note: str | None

    def summary(self) -> dict[str, Any]:
        """Return the `window` block: SI numbers, null for what has no value."""
        return {
            "axes": [axis.name for axis in self.axes],
            "at": dict(self.at),
            "safe_share": self.trace.safe_share,
            "marches": self.trace.marches + self.point.marches,
            "resolution": self.trace.resolution,
            "pieces": self.trace.pieces,
            "holes": self.trace.holes,
            "limits_binding": [{"name": self.labels[k], "share": share} for k, share in self.trace.binding_shares().items()],
            "set_point": self._set_point(),
        }

    def _set_point(self) -> dict[str, Any]:
        margins = zip(self.labels[:-1], self.point.margins[:-1].tolist(), self.units, strict=True)
        return {
            "holds": self.point.holds,
            "reason": "; ".join(part for part in (self.point.reason, self.note) if part) or None,
            "margins": [{"name": label, "margin": None if np.isnan(margin) else margin, "unit": unit} for label, margin, unit in margins],
            "distances": [
                {
                    "axis": self.axes[edge.axis].name,
                    "direction": edge.direction,
                    "distance": None if edge.distance is None else edge.distance * (self.axes[edge.axis].high - self.axes[edge.axis].low),
                    "limit": None if edge.limit is None else self.labels[edge.limit],
                    "unit": self.axes[edge.axis].unit,
                }
                for edge in (self.point.edges if self.point.reason is None else ())  # none was sought: `reason` says why
            ],
        }

    def tables(self) -> dict[str, pd.DataFrame]:
        """Return window_grid (every margin on the coarse grid) and window_boundary (a row a boundary point), in SI."""
        return {"window_grid": self._grid(), "window_boundary": self._boundary()}

    def _grid(self) -> pd.DataFrame:
        margins, names = self.trace.margins, np.array(self.labels, dtype=object)
        columns: dict[str, Any] = {axis.column: axis.value(self.trace.points[:, k]) for k, axis in enumerate(self.axes)}
        columns |= {f"margin_{label}": margins[:, k] for k, label in enumerate(self.labels[:-1])}
        return pd.DataFrame({**columns, "holds": holding(margins), "binding": names[nearest(margins)]})

    def _boundary(self) -> pd.DataFrame:
        lines, names = self.trace.lines, np.array(self.labels, dtype=object)
        points = np.concatenate([np.empty((0, 2)), *(line.points for line in lines)])
        counts = np.array([len(line.points) for line in lines], dtype=np.int64)
        limits = np.concatenate([np.empty(0, dtype=np.int64), *(line.limits for line in lines)])
        return pd.DataFrame(
            {
                "line": np.repeat(np.arange(len(lines)), counts),
                "order": np.concatenate([np.empty(0, dtype=np.int64), *(np.arange(count) for count in counts)]),
                **{axis.column: axis.value(points[:, k]) for k, axis in enumerate(self.axes)},
                "limit": names[limits],
            }
        )


def nearest(margins: Floats) -> Indices:
    """Return which limit is nearest to its bound, or furthest beyond it, (M,), as a share of its margin's spread over the points: margins (M, L).

    A limit without a value comes first; of several such the last, which is the point's not being done.
    """
    missing = np.isnan(margins)
    spread = np.where(missing, -np.inf, margins).max(axis=0) - np.where(missing, np.inf, margins).min(axis=0)
    scaled = np.where(missing, np.inf, margins) / np.where(np.isfinite(spread) & (spread > 0.0), spread, 1.0)
    scaled[:, -1] = np.inf
    last = margins.shape[1] - 1 - missing[:, ::-1].argmax(axis=1)
    found: Indices = np.where(missing.any(axis=1), last, scaled.argmin(axis=1))
    return found


def window(
    study: Study,
    evaluate: Callable[[pd.DataFrame], pd.DataFrame],
    margins: Callable[[Study, pd.DataFrame], Floats],
    limits: tuple[Limited, ...],
    axes: tuple[str, str] | None = None,
    at: Mapping[str, float] | None = None,
) -> Window | NotAssessed:
    """Trace the window over the study's two axes, or others, with the other variables at the set-point, or elsewhere.

    evaluate: variables (SI, a column each; one left out is as written) -> responses; margins: study and responses -> (N, L), NaN where a
    limit has no value; axes: two variables, for those of [window]; at: variable -> SI, over those of [window]. SweepError where they name
    no variable of the study.
    """
    if study.window is None and axes is None:
        return NotAssessed("the study has no [window]")
    if not limits:
        return NotAssessed("the study has no limits, so every setting is within them")
    names = axes or (study.window.axes if study.window else ())
    chosen = {**{name: value for name, value in (study.window.at if study.window else {}).items() if name not in names}, **(at or {})}
    pair = _axes(study, names, chosen)

    def respond(points: Floats) -> Floats:
        columns = {axis.name: axis.value(points[:, k]) for k, axis in enumerate(pair)}
        table = evaluate(pd.DataFrame({**columns, **{name: np.full(len(points), value) for name, value in chosen.items()}}))
        done = np.where(table["status"] == "done", 1.0, np.nan)
        return np.column_stack([margins(study, table), done])

    written = {variable.name: study.values[variable.sets[0]] for variable in study.variables}
    return Window(
        axes=pair,
        at={name: chosen.get(name, value) for name, value in written.items() if name not in names},
        labels=(*(limit.label for limit in limits), NOT_DONE),
        units=tuple(limit.unit for limit in limits),
        trace=trace(respond),
        point=edges(respond, np.array([axis.share(written[axis.name]) for axis in pair])),
        note=_note(study, names, chosen, written),
    )


def _axes(study: Study, names: tuple[str, ...], at: Mapping[str, float]) -> tuple[Axis, Axis]:
    variables = {variable.name: variable for variable in study.variables}
    for name in (*names, *at):
        if name not in variables:
            raise SweepError(f"{name} is no variable of this study; it has {', '.join(variables) or 'none'}")
    if len(set(names)) != 2 or len(names) != 2:
        raise SweepError(f"a window has two axes, found {', '.join(names)}")
    for name in names:
        if name in at:
            raise SweepError(f"{name} is an axis of the window and cannot be held at a value")
    first, second = (_axis(study, variables[name]) for name in names)
    return first, second


def _axis(study: Study, variable: Variable) -> Axis:
    unit = si_unit(study.dimensions[variable.sets[0]])
    return Axis(variable.name, variable.low, variable.high, unit, variable.name + suffix(unit))


def _note(study: Study, names: tuple[str, ...], at: Mapping[str, float], written: Mapping[str, float]) -> str | None:
    """Return in what the point judged as the set-point differs from the study as written, None where it does not."""
    moved = [name for name, value in at.items() if value != written[name]]
    apart = [v.name for v in study.variables if v.name in (*names, *at) and len({study.values[path] for path in v.sets}) > 1]
    parts = []
    if moved:
        parts.append(f"the slice does not pass through the set-point: {', '.join(moved)} held elsewhere")
    if apart:
        parts.append(f"as written the quantities that {', '.join(apart)} sets differ; here they all take the first one's value")
    return "; ".join(parts) or None
