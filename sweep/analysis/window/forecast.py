"""What a coarse grid of margins lets one expect between its nodes: values by interpolation, and places that hide a change.

Letters: S nodes along a line, K lines side by side, L limits, n + 1 coarse nodes an axis, f fine steps to a coarse one.
"""

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]
Indices = NDArray[np.int64]


def holding(margins: Floats) -> Bools:
    """Return where every limit holds: margins (..., L) -> (...); equality holds, NaN does not."""
    answers: Bools = np.all(margins >= 0.0, axis=-1)
    return answers


def _stretched(values: Floats, steps: int) -> Floats:
    """Return linear interpolation along the first axis: (n + 1, ...) -> (steps n + 1, ...). Nodes keep their values bit for bit."""
    position = np.arange(steps * (len(values) - 1) + 1)
    below, part = np.divmod(position, steps)
    above = np.minimum(below + 1, len(values) - 1)
    share = (part / steps).reshape(-1, *(1,) * (values.ndim - 1))
    stretched: Floats = np.where(share == 0.0, values[below], (1.0 - share) * values[below] + share * values[above])
    return stretched


def expected_margins(coarse: Floats, steps: int) -> Floats:
    """Return bilinear margins on the fine lattice, each limit by itself: (n + 1, n + 1, L) -> (f n + 1, f n + 1, L); NaN beside NaN.

    Each limit apart, because it is smooth where their least is not: a corner or a sliver between two limits is then foreseen.
    """
    rows = _stretched(coarse, steps)
    return np.swapaxes(_stretched(np.swapaxes(rows, 0, 1), steps), 0, 1)


def expected_answers(coarse: Floats, steps: int) -> Bools:
    """Return whether each fine node is expected to hold, (f n + 1, f n + 1); beside NaN: the answer of the nearest coarse node."""
    margins = expected_margins(coarse, steps)
    nearest = np.rint(np.arange(len(margins)) / steps).astype(np.int64)
    there: Bools = holding(coarse)[nearest[:, None], nearest[None, :]]
    return np.where(np.isnan(margins).any(axis=-1), there, holding(margins))


def _continued(values: Floats) -> Floats:
    """Return values with one more node at either end, by the parabola through the last three."""
    first = 3.0 * values[0] - 3.0 * values[1] + values[2]
    last = 3.0 * values[-1] - 3.0 * values[-2] + values[-3]
    return np.concatenate([first[None], values, last[None]])


def suspects(values: Floats, steps: int) -> tuple[Indices, Indices, Indices]:
    """Return where two neighbours answer alike but a change may hide between them.

    Beyond each neighbour the line through it and the node behind it is drawn on. Two lines that rise towards each other meet in the highest peak
    that may stand there, two that fall meet in the lowest dip: for a kink exactly, for a curve with room to spare. A peak counts where
    every limit may reach zero, a dip where any limit may fall below it.

    Parameters
    ----------
    values: (S, K, L) margins at S equidistant nodes, S >= 3, of K lines.
    steps: into how many a segment is cut; the places asked about are the cuts.

    Returns
    -------
    segment (Q,), line (Q,), cut (Q,): the suspicious segments and in each the most telling cut, 1 to steps - 1.
    """
    whole = _continued(values)
    behind, left, right, beyond = whole[:-3], whole[1:-2], whole[2:-1], whole[3:]
    share = (np.arange(1, steps) / steps).reshape(-1, 1, 1, 1)
    straight = (1.0 - share) * left + share * right
    from_left = left + (left - behind) * share
    from_right = right + (right - beyond) * (1.0 - share)
    highest = np.fmax(straight, np.minimum(from_left, from_right)).min(axis=-1)
    lowest = np.fmin(straight, np.maximum(from_left, from_right)).min(axis=-1)
    holds = holding(values)
    both, neither = holds[:-1] & holds[1:], ~holds[:-1] & ~holds[1:]
    highest, lowest = np.where(np.isnan(highest), -np.inf, highest), np.where(np.isnan(lowest), np.inf, lowest)
    peak, dip = neither & (highest.max(axis=0) >= 0.0), both & (lowest.min(axis=0) < 0.0)
    cut = np.where(peak, highest.argmax(axis=0), lowest.argmin(axis=0)) + 1
    segment, line = np.nonzero(peak | dip)
    return segment, line, cut[segment, line]
