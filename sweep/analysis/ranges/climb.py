"""Growing a box while the margins at places fixed along its sides stay above zero: a smooth problem in the ends of its sides.

D: sides; K: places; C: constraints at each.
"""

from collections.abc import Callable
from typing import Any

import numpy as np

from sweep.analysis.ranges.box import THIN, Box, Floats
from sweep.analysis.ranges.hunt import Judge

STEP = 1e-3  # of an axis, for slopes: the march's own error is far below what it shows
SPARE = 2e-5  # of a margin's spread, kept so that rounding does not end outside
_SHARES = np.linspace(1.0, 0.0, 17)


def fitted(judge: Judge, box: Box, core: Box, places: Floats) -> Box:
    """Return a box drawn together to its core until it is acceptable at all places (K, D)."""
    shares = _SHARES[:-1]
    points = np.concatenate([box.shrunk(core, share).at(places) for share in shares])
    good = judge(points).acceptable.reshape(len(shares), -1).all(axis=1)
    return box.shrunk(core, float(shares[good.argmax()]) if good.any() else 0.01)


def climb(judge: Judge, start: Box, whole: Box, core: Box, places: Floats, followed: int, rounds: int) -> Box:
    """Return a box of larger volume, acceptable at places (K, D) along its sides, by sequential quadratic programming.

    followed: of how many places, those with the smallest margins, slopes are taken; the others have room.
    """
    from scipy import optimize

    minimize: Any = optimize.minimize

    size = len(core.low)
    problem = _Problem(judge, places, followed)

    def negative(ends: Floats) -> float:
        return -float(np.log(np.maximum(ends[size:] - ends[:size], THIN)).sum())

    def slope(ends: Floats) -> Floats:
        each = 1.0 / np.maximum(ends[size:] - ends[:size], THIN)
        return np.concatenate([each, -each])

    first = np.concatenate([start.low, start.high])
    bounds = optimize.Bounds(np.concatenate([whole.low, core.high]), np.concatenate([core.low, whole.high]))
    found = minimize(
        negative, np.clip(first, bounds.lb, bounds.ub), jac=slope, method="SLSQP", bounds=bounds, options={"maxiter": rounds, "ftol": 1e-6},
        constraints=[{"type": "ineq", "fun": problem.values, "jac": problem.slopes}],
    )  # fmt: skip
    ends = np.clip(np.where(np.isfinite(found.x), found.x, first), bounds.lb, bounds.ub)
    return Box(ends[:size], ends[size:])


class _Problem:
    """The constraints of a box, (K C,), and their slopes by its 2 D ends."""

    def __init__(self, judge: Judge, places: Floats, followed: int) -> None:
        self._judge, self._places, self._followed = judge, places, followed
        self._known: dict[bytes, Floats] = {}

    def _once(self, ends: Floats, compute: Callable[[], Floats]) -> Floats:
        key = ends.tobytes()
        if key not in self._known:
            self._known[key] = compute()
        return self._known[key]

    def _matrix(self, ends: Floats) -> Floats:
        size = self._places.shape[1]
        return self._once(ends, lambda: self._judge(Box(ends[:size], ends[size:]).at(self._places)).value)

    def values(self, ends: Floats) -> Floats:
        """Return the constraints, at least zero where they hold."""
        return np.asarray(self._matrix(ends).ravel() - SPARE)

    def slopes(self, ends: Floats) -> Floats:
        """Return their slopes, (K C, 2 D), by one-sided differences taken inwards."""
        size, here = self._places.shape[1], self._matrix(ends)
        count, columns = here.shape
        chosen = np.argsort(here.min(axis=1), kind="stable")[: self._followed]
        at = Box(ends[:size], ends[size:]).at(self._places[chosen])
        middle = 0.5 * (ends[:size] + ends[size:])
        steps = np.where(at > middle, -STEP, STEP)
        moved = at[:, None, :] + steps[:, None, :] * np.eye(size)
        there = self._judge(moved.reshape(-1, size)).value.reshape(len(chosen), size, columns)
        gradient = (there - here[chosen, None, :]) / steps[:, :, None]  # (chosen, D, C)
        full = np.zeros((count, columns, 2 * size))
        share = self._places[chosen][:, :, None]
        full[chosen] = np.concatenate([gradient * (1.0 - share), gradient * share], axis=1).swapaxes(1, 2)
        return full.reshape(count * columns, 2 * size)
