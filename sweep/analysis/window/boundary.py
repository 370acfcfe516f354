"""From answers at the nodes of a lattice, and crossings on its edges, to lines, area, pieces and holes (marching squares).

A cell's corners 0 to 3 run counter-clockwise from its lower left; its edge k joins corner k to corner k + 1. An edge of the lattice has the number
axis (n + 1)^2 + its lower node's number i (n + 1) + j; axis 0 runs with i, the first coordinate.
"""

from dataclasses import dataclass

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from sweep.analysis.window.forecast import Bools, Floats, Indices

_CORNERS = np.array([[0, 0], [1, 0], [1, 1], [0, 1]])


@dataclass(frozen=True)
class Line:
    """A stretch of the boundary: points (P, 2) in order, the safe side to the left; limits (P,): which binds. Closed: the first point ends it too."""

    points: Floats
    limits: Indices
    closed: bool


@dataclass(frozen=True)
class Cells:
    """C cells that the boundary passes: place (C, 2) lower left node; corners (C, 4) whether they hold; edges (C, 4) their numbers; joined (C,):
    the safe corners of a saddle are one piece; start, end (C, 2): edges that its one or two stretches join, -1 for none."""

    place: Indices
    corners: Bools
    edges: Indices
    joined: Bools
    start: Indices
    end: Indices


@dataclass(frozen=True)
class Boundary:
    """All that is known of it: answers (n + 1, n + 1) at the nodes; joined (n, n): saddles whose centre holds; crossings (edges, 2), NaN where
    there is none; limits (edges,): which binds there, -1 where there is none; cells that it passes."""

    answers: Bools
    joined: Bools
    crossings: Floats
    limits: Indices
    cells: Cells


def saddles(holds: Bools) -> Indices:
    """Return the cells, (Q, 2), whose opposite corners answer alike and neighbouring ones do not: the centre decides what they join."""
    low, right, up, left = holds[:-1, :-1], holds[1:, :-1], holds[1:, 1:], holds[:-1, 1:]
    return np.argwhere((low == up) & (right == left) & (low != right))


def passed_cells(holds: Bools, joined: Bools) -> Cells:
    """Return the cells that the boundary passes; joined (n, n): saddles whose centre holds."""
    size = len(holds)
    corner = np.stack([holds[:-1, :-1], holds[1:, :-1], holds[1:, 1:], holds[:-1, 1:]], axis=-1)
    place = np.argwhere(corner.any(axis=-1) & ~corner.all(axis=-1))
    i, j = place.T
    corners = corner[i, j]
    node = i * size + j
    edges = np.stack([node, size * size + node + size, node + 1, size * size + node], axis=-1)
    following = np.roll(corners, -1, axis=1)
    leaving, entering = corners & ~following, ~corners & following
    start, end = np.full((len(place), 2), -1), np.full((len(place), 2), -1)
    rows = np.arange(len(place))
    start[:, 0], end[:, 0] = edges[rows, leaving.argmax(axis=1)], edges[rows, entering.argmax(axis=1)]
    twice = leaving.sum(axis=1) == 2
    together = joined[i, j]
    first = leaving.argmax(axis=1)
    for which, shift in ((0, 0), (1, 2)):
        out = (first + shift) % 4
        into = np.where(together, out + 1, out - 1) % 4
        start[twice, which], end[twice, which] = edges[rows, out][twice], edges[rows, into][twice]
    return Cells(place, corners, edges, twice & together, start, end)


def safe_area(boundary: Boundary) -> float:
    """Return the share of the square that is safe: whole cells, and polygons of those that are passed."""
    cells, holds = boundary.cells, boundary.answers
    steps = len(holds) - 1
    whole = holds[:-1, :-1] & holds[1:, :-1] & holds[1:, 1:] & holds[:-1, 1:]
    apart = (cells.start[:, 1] >= 0) & ~cells.joined
    corners = np.where(apart[:, None], ~cells.corners, cells.corners)
    ring = np.empty((len(cells.place), 8, 2))
    ring[:, 0::2] = (cells.place[:, None, :] + _CORNERS) / steps
    ring[:, 1::2] = boundary.crossings[cells.edges]
    used = np.empty(ring.shape[:2], dtype=bool)
    used[:, 0::2], used[:, 1::2] = corners, cells.corners != np.roll(cells.corners, -1, axis=1)
    order = np.argsort(~used, axis=1, kind="stable")
    order = np.where(np.take_along_axis(used, order, axis=1), order, order[:, :1])
    x, y = np.moveaxis(np.take_along_axis(ring, order[:, :, None], axis=1), 2, 0)
    x, y = x - x[:, :1], y - y[:, :1]
    part = 0.5 * np.sum(x * np.roll(y, -1, axis=1) - np.roll(x, -1, axis=1) * y, axis=1)
    part = np.where(apart, 1.0 / steps**2 - part, part)
    return float(whole.sum() / steps**2 + part.sum())


def boundary_lines(boundary: Boundary) -> tuple[Line, ...]:
    """Return the stretches joined: first those that begin at the square's border, then the closed ones."""
    cells = boundary.cells
    used = cells.start >= 0
    successor = dict(zip(cells.start[used].tolist(), cells.end[used].tolist(), strict=True))
    inner = set(successor.values())
    lines = []
    for first in [*(edge for edge in successor if edge not in inner), *successor]:
        if first not in successor:
            continue
        chain = [first]
        while chain[-1] in successor:
            chain.append(successor.pop(chain[-1]))
        lines.append(Line(boundary.crossings[chain], boundary.limits[chain], chain[-1] == first))
    return tuple(lines)


def pieces_and_holes(boundary: Boundary) -> tuple[int, int]:
    """Return how many separate safe pieces there are, and how many unsafe ones that touch no border of the square."""
    holds = boundary.answers
    node = np.arange(holds.size).reshape(holds.shape)
    flat = holds.ravel()
    i, j = saddles(holds).T
    falling = holds[i + 1, j] == boundary.joined[i, j]  # the diagonal whose corners answer as the centre does
    pairs = [
        (node[:-1], node[1:]),
        (node[:, :-1], node[:, 1:]),
        (np.where(falling, node[i + 1, j], node[i, j]), np.where(falling, node[i, j + 1], node[i + 1, j + 1])),
    ]
    a, b = (np.concatenate([pair[k].ravel() for pair in pairs]) for k in (0, 1))
    alike = flat[a] == flat[b]
    graph = coo_array((np.ones(alike.sum()), (a[alike], b[alike])), shape=(flat.size, flat.size))
    count, label = connected_components(graph, directed=False)
    safe = np.zeros(count, dtype=bool)
    safe[label] = flat
    open_ = np.zeros(count, dtype=bool)
    grid = label.reshape(holds.shape)
    for side in (grid[0], grid[-1], grid[:, 0], grid[:, -1]):
        open_[side] = True
    return int(safe.sum()), int((~safe & ~open_).sum())


def inside(boundary: Boundary, points: Floats) -> Bools:
    """Return whether points (M, 2) of the square lie on the safe side of the lines; a point on a line does not."""
    cells, holds = boundary.cells, boundary.answers
    steps = len(holds) - 1
    i, j = np.clip((points * steps).astype(np.int64), 0, steps - 1).T
    which_cell = np.full((steps, steps), -1)
    which_cell[cells.place[:, 0], cells.place[:, 1]] = np.arange(len(cells.place))
    cell = which_cell[i, j]
    answer: Bools = holds[i, j].copy()
    passed = cell >= 0
    cell, at = cell[passed], points[passed]
    left = np.zeros((len(cell), 2), dtype=bool)
    for which in (0, 1):
        start, end = (boundary.crossings[number[cell, which]] for number in (cells.start, cells.end))
        along, across = end - start, at - start
        left[:, which] = along[:, 0] * across[:, 1] - along[:, 1] * across[:, 0] > 0.0
    single = cells.start[cell, 1] < 0
    answer[passed] = np.where(single, left[:, 0], np.where(cells.joined[cell], left.all(axis=1), left.any(axis=1)))
    return answer
