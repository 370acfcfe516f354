"""Ranges of one variable at a time, all others at the set-point: the usual way, and why its box is not to be trusted."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from sweep.analysis.ranges.box import Box, Floats
from sweep.analysis.ranges.hunt import Judge

FINE = 1e-4  # of an axis
CUTS = 8


@dataclass(frozen=True)
class Alone:
    """box: the ranges side by side; limit (D, 2): which limit ends each, down and up; -1 where none does within the variable's range."""

    box: Box
    limit: NDArray[np.int64]


def alone(judge: Judge, centre: Floats, scanned: int) -> Alone:
    """Walk from the centre along each axis both ways to the first failure, all ways at once; scanned: steps each way before narrowing."""
    size = len(centre)
    axis, sign = np.repeat(np.arange(size), 2), np.tile([-1.0, 1.0], size)
    reach = np.where(sign > 0.0, 1.0 - centre[axis], centre[axis])
    low, high, limit = np.zeros(2 * size), reach.copy(), np.full(2 * size, -1)

    def at(distance: Floats, ways: NDArray[np.int64]) -> tuple[NDArray[np.bool_], NDArray[np.int64]]:
        """Judge distances (S, W) along ways (W,)."""
        points = np.broadcast_to(centre, (*distance.shape, size)).copy()
        row, column = np.indices(distance.shape)
        points[row, column, axis[ways]] += sign[ways] * distance
        judged = judge(np.clip(points.reshape(-1, size), 0.0, 1.0))
        return judged.acceptable.reshape(distance.shape), judged.limit.reshape(distance.shape)

    ways, steps = np.flatnonzero(reach > 0.0), scanned
    while ways.size:
        share = np.linspace(0.0, 1.0, steps + 1)[1:]
        distance = low[ways] + np.outer(share, high[ways] - low[ways])
        good, which = at(distance, ways)
        fails = ~good
        first = np.where(fails.any(axis=0), fails.argmax(axis=0), len(share))
        column = np.arange(len(ways))
        before = np.where(first > 0, distance[np.maximum(first - 1, 0), column], low[ways])
        met = first < len(share)
        limit[ways[met]] = which[first[met], column[met]]
        low[ways], high[ways] = before, np.where(met, distance[np.minimum(first, len(share) - 1), column], high[ways])
        low[ways[~met]] = high[ways[~met]]
        ways, steps = ways[met & (high[ways] - low[ways] > FINE)], CUTS
    return Alone(Box(centre - low[0::2], centre + low[1::2]), limit.reshape(size, 2))
