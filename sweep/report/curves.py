"""What a figure of curves holds before it is drawn: plain numbers in units for display, and their labels."""

from dataclasses import dataclass, field

import numpy as np
import pandas as pd
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Line:
    """A curve over the figure's x, both (N,); NaN where there is nothing to draw."""

    name: str
    y: Array


@dataclass(frozen=True)
class Level:
    """A horizontal line, labelled: a limit, a target or a characteristic temperature."""

    name: str
    value: float
    limit: bool = True


@dataclass(frozen=True)
class Moment:
    """A vertical line through all panels, labelled above the top one; with `y`, marked on the top panel's curve too."""

    name: str
    x: float
    y: float | None = None


@dataclass(frozen=True)
class Panel:
    """One set of axes."""

    label: str
    lines: tuple[Line, ...]
    levels: tuple[Level, ...] = ()
    top: float | None = None  # where the axis ends though a line runs on above it


@dataclass(frozen=True)
class Curves:
    """Stacked panels that share their x, and the numbers behind them."""

    name: str
    title: str
    caption: str
    description: str
    x_label: str
    x: Array
    panels: tuple[Panel, ...]
    moments: tuple[Moment, ...]
    numbers: pd.DataFrame
    logarithmic: bool = False


@dataclass(frozen=True)
class Boundary:
    """A piece of the window's edge: points (M,) along both axes, and the limit that ends it."""

    limit: str
    x: Array
    y: Array


@dataclass(frozen=True)
class Reach:
    """How far one axis may be changed from the set-point: the edge's place, or None where none was met in the range."""

    axis: int
    up: bool
    edge: float | None
    label: str


@dataclass(frozen=True)
class Ground:
    """The plane of two variables: names with units, grid values (n,) and (m,), the set-point if it is in the plane, the edge."""

    labels: tuple[str, str]
    x: Array
    y: Array
    set_point: tuple[float, float] | None
    boundaries: tuple[Boundary, ...]


def within(ground: Ground) -> bool:
    """Return whether the set-point lies in the range mapped."""
    at = ground.set_point
    return at is not None and all(values.min() <= place <= values.max() for place, values in zip(at, (ground.x, ground.y), strict=True))


@dataclass(frozen=True)
class WindowMap:
    """Where every limit holds: margins (n, m, L) scaled by their largest size, NaN where a point has none.

    `binding` (n, m) numbers the limit that binds at each point, -1 for none.
    """

    name: str
    title: str
    caption: str
    description: str
    ground: Ground
    limits: tuple[str, ...]
    margins: Array
    binding: NDArray[np.int64]
    reaches: tuple[Reach, ...]
    tables: dict[str, pd.DataFrame] = field(default_factory=dict)


@dataclass(frozen=True)
class Field:
    """A quantity over the plane, (n, m); NaN where it has no value, which `absent` explains."""

    title: str
    unit: str
    values: Array
    absent: str


@dataclass(frozen=True)
class ContourMap:
    """Quantities over the window's plane as labelled contours."""

    name: str
    title: str
    caption: str
    description: str
    ground: Ground
    fields: tuple[Field, ...]
    tables: dict[str, pd.DataFrame] = field(default_factory=dict)


@dataclass(frozen=True)
class Facet:
    """One response: how probable it is (%, with an interval) that it lies beyond a value, all (N,), and where its limit stands."""

    title: str
    x_label: str
    x: Array
    y: Array
    low: Array
    high: Array
    limit: float
    said: str


@dataclass(frozen=True)
class Facets:
    """Exceedance curves, a panel each, on a logarithmic scale of probability from `least` (%) to all."""

    name: str
    title: str
    caption: str
    description: str
    facets: tuple[Facet, ...]
    least: float
    tables: dict[str, pd.DataFrame] = field(default_factory=dict)


@dataclass(frozen=True)
class Ranking:
    """Inputs in order of their effect: bars with intervals, all (N,); marks: a second figure beside each bar, or None."""

    title: str
    labels: tuple[str, ...]
    size: Array
    low: Array
    high: Array
    marks: Array | None = None


@dataclass(frozen=True)
class Rankings:
    """Panels of ranked bars that share their scale."""

    name: str
    title: str
    caption: str
    description: str
    x_label: str
    panels: tuple[Ranking, ...]
    tables: dict[str, pd.DataFrame] = field(default_factory=dict)


@dataclass(frozen=True)
class ChanceField:
    """The probability (%) that all limits hold over the window's plane, (n, m), and the levels of its contours."""

    name: str
    title: str
    caption: str
    description: str
    ground: Ground
    values: Array
    levels: tuple[float, ...]
    tables: dict[str, pd.DataFrame] = field(default_factory=dict)


@dataclass(frozen=True)
class RangeBar:
    """One variable: places as shares of the range studied; studied, ends: what stands at the ends of that and of the acceptable range."""

    label: str
    set_point: float
    normal: tuple[float, float] | None
    acceptable: tuple[float, float]
    alone: tuple[float, float] | None
    studied: tuple[str, str]
    ends: tuple[str, str]


@dataclass(frozen=True)
class RangeBars:
    """The ranges of all variables, a bar each."""

    name: str
    title: str
    caption: str
    description: str
    rows: tuple[RangeBar, ...]
    tables: dict[str, pd.DataFrame] = field(default_factory=dict)


@dataclass(frozen=True)
class Front:
    """Two objectives of the settings that nothing betters in both, (N,) each; the set-point's, and whether it is acceptable."""

    name: str
    title: str
    caption: str
    description: str
    labels: tuple[str, str]
    x: Array
    y: Array
    set_point: tuple[float, float] | None
    acceptable: bool
    tables: dict[str, pd.DataFrame] = field(default_factory=dict)


@dataclass(frozen=True)
class Absent:
    """A figure that is not drawn, and why."""

    name: str
    title: str
    why: str


Prepared = Curves | WindowMap | ContourMap | Facets | Rankings | ChanceField | RangeBars | Front | Absent
