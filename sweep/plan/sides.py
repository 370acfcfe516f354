"""Variables as coordinates from 0 to 1 over their ranges: to SI and back, and round numbers in the study's own units.

D: variables; M: points.
"""

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sweep.base.units import from_si, si_unit, to_si
from sweep.study.model import Study, Variable

Floats = NDArray[np.float64]
_NOTHING = 1e-12  # of a range: rounding alone
_FINER = 8  # powers of ten by which digits are added before an end stays at the set-point itself


@dataclass(frozen=True)
class Side:
    """A variable, its value at the set-point and its range (SI); unit: its SI unit; own: the unit in which it is written."""

    variable: Variable
    value: float
    unit: str
    own: str

    @property
    def name(self) -> str:
        """Return the variable's name."""
        return self.variable.name

    def shown(self, value: float) -> float:
        """Return an SI value in the unit in which it is written."""
        return from_si(value, self.own, self.unit) if self.own else value

    def at(self, share: float) -> float:
        """Return the SI value of a coordinate, kept within the range."""
        v = self.variable
        return v.low if share <= 0.0 else v.high if share >= 1.0 else min(max(v.low + share * (v.high - v.low), v.low), v.high)

    def share(self, value: float) -> float:
        """Return the coordinate of an SI value."""
        return (value - self.variable.low) / (self.variable.high - self.variable.low)

    def si(self, number: float) -> float:
        """Return a value in the written unit in SI."""
        return to_si(f"{number!r} {self.own}", self.unit) if self.own else number

    def written(self, value: float) -> str:
        """Return an SI value as text in the written unit, all digits that it has."""
        return f"{float(f'{self.shown(value):.10g}'):.10g} {self.own}".strip()


def sides_of(study: Study, names: tuple[str, ...]) -> tuple[Side, ...]:
    """Return the sides; a unit that does not turn back into the study's SI value (an amount written as a mass) is shown in SI."""
    found = []
    for v in (v for v in study.variables if v.name in names):
        unit = si_unit(study.dimensions[v.sets[0]])
        own = study.units.get(v.sets[0]) or v.unit
        try:
            from_si(v.low, own, unit) if own else v.low
        except Exception:  # pint raises many kinds; what cannot be read back is shown in SI
            own = unit
        found.append(Side(v, study.values[v.sets[0]], unit, own))
    return tuple(found)


def centre_of(sides: tuple[Side, ...]) -> Floats:
    """Return the set-point in coordinates, (D,)."""
    return np.array([side.share(side.value) for side in sides])


def table_of(sides: tuple[Side, ...], points: Floats) -> pd.DataFrame:
    """Return points (M, D) as a column per variable (SI)."""
    columns = {}
    for k, side in enumerate(sides):
        low, high = side.variable.low, side.variable.high
        columns[side.name] = np.clip(low + points[:, k] * (high - low), low, high)
    return pd.DataFrame(columns)


def inward(
    sides: tuple[Side, ...], low: Floats, high: Floats, core: tuple[Floats, Floats] | None = None
) -> tuple[Floats, Floats]:
    """Return ranges (D,) whose ends are round numbers in the written units, none outside the given ones and none within the core (low, high), by
    default the set-point."""
    low, high = np.where(low < _NOTHING, 0.0, low), np.where(high > 1.0 - _NOTHING, 1.0, high)
    inner, ends = core or (centre_of(sides), centre_of(sides)), np.empty((len(sides), 2))
    for k, side in enumerate(sides):
        found = _rounded(side, *(side.at(float(share)) for share in (low[k], high[k])), *(side.at(float(part[k])) for part in inner))
        ends[k] = [side.share(value) for value in found]
    return np.maximum(np.minimum(ends[:, 0], inner[0]), low), np.minimum(np.maximum(ends[:, 1], inner[1]), high)


def nearby(sides: tuple[Side, ...], point: Floats, finer: int) -> Floats:
    """Return round settings around a point (D,), each side rounded down and up, (2^D, D); finer: by how many digits."""
    from itertools import product

    pairs = [[stepped(side, side.at(float(x)), finer, turn) for turn in (math.floor, math.ceil)] for side, x in zip(sides, point, strict=True)]
    return np.unique(np.array(list(product(*pairs))), axis=0)


def snapped(sides: tuple[Side, ...], points: Floats) -> Floats:
    """Return points (M, D) moved to the nearest round settings."""
    return np.array([[stepped(side, side.at(float(x)), 0, round) for side, x in zip(sides, point, strict=True)] for point in points])


def stepped(side: Side, value: float, finer: int, turn: Callable[[float], float]) -> float:
    """Return the coordinate of a value moved to a multiple of a power of ten, of at most a two-hundredth of the range, in its written unit."""
    width = abs(side.shown(side.variable.high) - side.shown(side.variable.low))
    power = math.floor(math.log10(width / 200.0)) - finer
    number = round(turn(round(side.shown(value) / 10.0**power, 6)) * 10.0**power, max(0, -power) + 1)
    return side.share(min(max(side.si(float(f"{number:.12g}")), side.variable.low), side.variable.high))


def _rounded(side: Side, low: float, high: float, inner_low: float, inner_high: float) -> tuple[float, float]:
    """Return both ends (SI) rounded inwards to a power of ten of at most a fiftieth of the width, finer where the inner range would be cut."""
    ends, inner = sorted((side.shown(low), side.shown(high))), sorted((side.shown(inner_low), side.shown(inner_high)))
    width = ends[1] - ends[0]
    if not width > 0.0:
        return inner_low, inner_high
    power = math.floor(math.log10(width / 50.0))
    found = list(inner)
    for k, (end, turn, sign) in enumerate(((ends[0], math.ceil, 1.0), (ends[1], math.floor, -1.0))):
        for finer in range(_FINER):
            step = 10.0 ** (power - finer)
            rounded = round(turn(end / step - sign * 1e-9) * step, finer - power + 1 if power - finer < 0 else 0)
            if sign * (inner[k] - rounded) >= 0.0:
                found[k] = rounded
                break
    lower, upper = sorted(side.si(float(f"{end:.12g}")) for end in found)
    return min(max(lower, low), inner_low), max(min(upper, high), inner_high)
