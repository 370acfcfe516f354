"""A sparse LU made once per study: order of elimination, fill-in, and the operations as streams of integers. No pivoting."""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

Integers = NDArray[np.int64]


class Operations(NamedTuple):
    """slots: (rows, rows), place of each entry, -1 for none; total of slots; three streams, each line after its own length.

    factor: per pivot, [slot of the pivot, rows]; per row [slot of (row, pivot), columns], then pairs [slot of (row, column), slot of
    (pivot, column)]. forward: per row [row, entries], then pairs [column, slot]; ended by row -1. backward: per row, from the last,
    [row, slot of the pivot, entries], then pairs [column, slot].
    """

    slots: Integers
    total: int
    factor: list[int]
    forward: list[int]
    backward: list[int]


def elimination_order(pattern: NDArray[np.bool_]) -> list[int]:
    """Return the order of elimination: chemical states by Markowitz's count, then integral, jacket, temperature, energy."""
    nz = pattern.shape[0] - 4
    left, order, work = list(range(nz)), [], pattern.copy()
    while left:
        pivot = min(left, key=lambda k: (work[k, left].sum() - 1) * (work[left, k].sum() - 1))
        order.append(pivot)
        left.remove(pivot)
        work |= np.outer(work[:, pivot], work[pivot])
    return [*order, nz + 2, nz + 1, nz, nz + 3]


def _filled(pattern: NDArray[np.bool_], order: list[int]) -> NDArray[np.bool_]:
    """Return the pattern with what elimination fills in."""
    filled = pattern.copy()
    for step, k in enumerate(order):
        rest = order[step + 1 :]
        for i in rest:
            if filled[i, k]:
                filled[i, rest] |= filled[k, rest]
    return filled


def operations(pattern: NDArray[np.bool_]) -> Operations:
    """Return the LU of a matrix with this pattern, (rows, rows), as operations."""
    order = elimination_order(pattern)
    filled = _filled(pattern, order)
    slots = np.full(pattern.shape, -1, dtype=np.int64)
    slots[filled] = np.arange(filled.sum())
    factor: list[int] = []
    forward: list[int] = []
    backward: list[int] = []
    for step, k in enumerate(order):
        later = order[step + 1 :]
        rows, columns = [i for i in later if filled[i, k]], [j for j in later if filled[k, j]]
        factor += [slots[k, k], len(rows)]
        for i in rows:
            factor += [slots[i, k], len(columns)]
            for j in columns:
                factor += [slots[i, j], slots[k, j]]
        known = [j for j in order[:step] if filled[k, j]]
        if known:
            forward += [k, len(known)]
            for j in known:
                forward += [j, slots[k, j]]
        line = [k, slots[k, k], len(columns)]
        for j in columns:
            line += [j, slots[k, j]]
        backward = line + backward
    return Operations(slots, int(filled.sum()), factor, [*forward, -1], backward)
