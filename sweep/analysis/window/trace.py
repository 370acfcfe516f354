"""Where every limit holds over the unit square, traced with few evaluations.

A coarse grid is evaluated; what it lets one expect of a lattice five times finer is only a guess of where to look. Then the lattice's nodes on
either side of each expected change are evaluated, and their neighbours wherever the answer was another than expected, until every edge of the
lattice whose ends answer differently has both of them evaluated. So the boundary is bracketed by evaluated points within one lattice step
everywhere; interpolation only places it within that bracket.

Letters: M points, L limits, n = 200 lattice steps an axis (0.5 %), K edges that the boundary crosses.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from sweep.analysis.window.boundary import Boundary, Line, boundary_lines, inside, passed_cells, pieces_and_holes, saddles, safe_area
from sweep.analysis.window.forecast import Bools, Floats, Indices, expected_answers, expected_margins, holding, suspects

COARSE, STEPS = 40, 5  # an island or hole of 5 % spans two coarse steps of 2.5 %: it holds a node whatever its place
RESOLUTION = 1.0 / (COARSE * STEPS)
AFFORDED = (COARSE * STEPS + 1) ** 2 // 10  # a tenth of the whole lattice: brackets are narrowed further only while this lasts
HALVINGS = 3
_APART = 1e-6  # crossings keep this share of an edge from its ends, so that no stretch of the boundary shrinks to a point without direction
_LARGEST = 1e200  # margins beyond it, infinity included, count as this, so that differences stay numbers

Margins = Callable[[Floats], Floats]


@dataclass(frozen=True)
class Trace:
    """The region where every limit holds. Coordinates run from 0 to 1 on both axes.

    lines: its boundary inside the square; safe_share: of the square's area; pieces: separate safe regions; holes: unsafe regions that safe ones
    enclose; marches: points evaluated, in `calls` calls; resolution: the boundary lies between evaluated points no further apart;
    points (1681, 2), margins (1681, L): the coarse grid, the second coordinate running fastest.
    """

    lines: tuple[Line, ...]
    safe_share: float
    pieces: int
    holes: int
    marches: int
    calls: int
    points: Floats
    margins: Floats
    boundary: Boundary
    resolution: float = RESOLUTION

    def holds(self, points: Floats) -> Bools:
        """Return whether the traced region holds points (M, 2) of the unit square; evaluates nothing."""
        return inside(self.boundary, np.asarray(points, dtype=float))

    def binding_shares(self) -> dict[int, float]:
        """Return which share of the boundary's length each limit makes, by its number; a stretch between two limits counts half for either."""
        length: dict[int, float] = {}
        for line in self.lines:
            piece = np.hypot(*np.diff(line.points, axis=0).T)
            for limits in (line.limits[:-1], line.limits[1:]):
                for limit in np.unique(limits).tolist():
                    length[limit] = length.get(limit, 0.0) + 0.5 * float(piece[limits == limit].sum())
        whole = sum(length.values())
        return {limit: part / whole for limit, part in sorted(length.items(), key=lambda item: -item[1])} if whole > 0.0 else {}


def _coordinates(nodes: Indices) -> Floats:
    return np.asarray(nodes / (COARSE * STEPS), dtype=np.float64)


class _Lattice:
    """What is known so far: margins (n + 1, n + 1, L) and which nodes were evaluated; answers start as expected ones."""

    def __init__(self, margins: Margins) -> None:
        self._margins = margins
        self.marches = self.calls = 0
        axis = np.arange(COARSE + 1) * STEPS
        nodes = np.stack(np.meshgrid(axis, axis, indexing="ij"), axis=-1).reshape(-1, 2)
        found = self.evaluate(_coordinates(nodes))
        size = COARSE * STEPS + 1
        self.coarse = found.reshape(COARSE + 1, COARSE + 1, -1)
        self.values = np.full((size, size, found.shape[1]), np.nan)
        self.known = np.zeros((size, size), dtype=bool)
        self.expected = expected_margins(self.coarse, STEPS)
        self.answers = expected_answers(self.coarse, STEPS)
        self._put(nodes, found)

    def evaluate(self, points: Floats) -> Floats:
        """Return margins (M, L) of points (M, 2), in one call."""
        self.marches += len(points)
        self.calls += 1
        found: Floats = np.clip(np.asarray(self._margins(points), dtype=float), -_LARGEST, _LARGEST)
        return found

    def _put(self, nodes: Indices, found: Floats) -> None:
        i, j = nodes.T
        self.values[i, j], self.known[i, j], self.answers[i, j] = found, True, holding(found)

    def look(self, nodes: Bools) -> None:
        """Evaluate the nodes marked (n + 1, n + 1)."""
        places = np.argwhere(nodes & ~self.known)
        if len(places):
            self._put(places, self.evaluate(_coordinates(places)))

    def hidden(self) -> Bools:
        """Return the nodes on coarse lines where the margins suggest a sliver, an island or a hole between two nodes that answer alike."""
        marked = np.zeros_like(self.known)
        segment, line, cut = suspects(self.coarse, STEPS)
        marked[segment * STEPS + cut, line * STEPS] = True
        segment, line, cut = suspects(np.swapaxes(self.coarse, 0, 1), STEPS)
        marked[line * STEPS, segment * STEPS + cut] = True
        return marked

    def front(self) -> Bools:
        """Return the nodes beside a change of answer."""
        marked = np.zeros_like(self.known)
        change = self.answers[:-1] != self.answers[1:]
        marked[:-1] |= change
        marked[1:] |= change
        change = self.answers[:, :-1] != self.answers[:, 1:]
        marked[:, :-1] |= change
        marked[:, 1:] |= change
        return marked


def place_in(safe: Floats, unsafe: Floats) -> tuple[Floats, Indices]:
    """Return how far from the safe to the unsafe end the first limit is crossed, by straight lines, and which limit that is.

    safe, unsafe: (K, L). A limit without a value at the unsafe end is crossed at the safe one; of several such the last counts.
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        share = np.where(unsafe < 0.0, safe / (safe - unsafe), np.where(np.isnan(unsafe), 0.0, np.inf))
    missing = np.isnan(unsafe)
    last = missing.shape[1] - 1 - missing[:, ::-1].argmax(axis=1)
    limit = np.where(missing.any(axis=1), last, share.argmin(axis=1))
    return share[np.arange(len(share)), limit], limit


def _crossings(lattice: _Lattice) -> tuple[Floats, Indices]:
    """Return the crossing points (edges, 2), NaN where there is none, and the limits that bind there (edges,), -1 where there is none."""
    answers, size = lattice.answers, len(lattice.answers)
    lower, axis = [], []
    for a, change in enumerate((answers[:-1] != answers[1:], answers[:, :-1] != answers[:, 1:])):
        lower.append(np.argwhere(change))
        axis.append(np.full(len(lower[-1]), a))
    below, along = np.concatenate(lower), np.concatenate(axis)
    above = below + np.eye(2, dtype=np.int64)[along]
    swap = answers[below[:, 0], below[:, 1]][:, None]
    safe, unsafe = np.where(swap, below, above), np.where(swap, above, below)
    points, limits = np.full((2 * size * size, 2), np.nan), np.full(2 * size * size, -1)
    number = along * size * size + below[:, 0] * size + below[:, 1]
    points[number], limits[number] = _placed(lattice, safe, unsafe)
    return points, limits


def _placed(lattice: _Lattice, safe: Indices, unsafe: Indices) -> tuple[Floats, Indices]:
    """Return the crossings (K, 2) between nodes safe and unsafe (K, 2), and their limits (K,).

    A margin that the coarse grid foretold to a quarter of its change over the edge is straight enough: one secant step places the
    crossing. Any other (a jump, a kink, no value) is halved until its middle is what the ends foretell, up to three times; one that never
    is (a jump) is placed at the last point known to be safe.
    """
    inner, outer = lattice.values[safe[:, 0], safe[:, 1]], lattice.values[unsafe[:, 0], unsafe[:, 1]]
    share, limit = place_in(inner, outer)
    rows = np.arange(len(limit))
    surprise = np.zeros(len(limit))
    for nodes, found in ((safe, inner), (unsafe, outer)):
        surprise = np.maximum(surprise, np.abs(found - lattice.expected[nodes[:, 0], nodes[:, 1]])[rows, limit])
    straight = surprise <= 0.25 * (inner - outer)[rows, limit]
    start, end = _coordinates(safe), _coordinates(unsafe)
    rough = np.flatnonzero(~straight)
    if len(rough):
        share[rough], limit[rough] = _halved(lattice, start[rough], end[rough], inner[rough], outer[rough])
    return start + np.clip(share, _APART, 1.0 - _APART)[:, None] * (end - start), limit


def _halved(lattice: _Lattice, start: Floats, end: Floats, inner: Floats, outer: Floats) -> tuple[Floats, Indices]:
    """Narrow the brackets from start, known to hold, to end, known not to, (K, 2), with margins inner and outer (K, L); return as `place_in` does."""
    low, high, inner, outer = np.zeros(len(start)), np.ones(len(start)), inner.copy(), outer.copy()
    straight = np.zeros(len(start), dtype=bool)
    for _ in range(HALVINGS):
        rest = np.flatnonzero(~straight)
        if not len(rest) or lattice.marches + len(rest) > AFFORDED:
            break
        middle = 0.5 * (low[rest] + high[rest])
        found = lattice.evaluate(start[rest] + middle[:, None] * (end[rest] - start[rest]))
        limit = place_in(inner[rest], outer[rest])[1]
        surprise = np.abs(found - 0.5 * (inner[rest] + outer[rest]))[np.arange(len(rest)), limit]
        straight[rest] = surprise <= 0.1 * (inner[rest] - outer[rest])[np.arange(len(rest)), limit]
        safe = holding(found)
        low[rest[safe]], inner[rest[safe]] = middle[safe], found[safe]
        high[rest[~safe]], outer[rest[~safe]] = middle[~safe], found[~safe]
    share, limit = place_in(inner, outer)
    return low + np.where(straight, share, 0.0) * (high - low), limit


def trace(margins: Margins) -> Trace:
    """Trace the region of the unit square where every margin is zero or more; `margins`: points (M, 2) -> (M, L), NaN does not hold."""
    lattice = _Lattice(margins)
    lattice.look(lattice.hidden() | lattice.front())
    while np.any(lattice.front() & ~lattice.known):
        lattice.look(lattice.front())
    answers = lattice.answers
    joined = np.zeros((len(answers) - 1, len(answers) - 1), dtype=bool)
    centres = saddles(answers)
    if len(centres):
        joined[centres[:, 0], centres[:, 1]] = holding(lattice.evaluate(_coordinates(centres) + 0.5 * RESOLUTION))
    points, limits = _crossings(lattice)
    boundary = Boundary(answers, joined, points, limits, passed_cells(answers, joined))
    pieces, holes = pieces_and_holes(boundary)
    axis = _coordinates(np.arange(COARSE + 1) * STEPS)
    return Trace(
        lines=boundary_lines(boundary),
        safe_share=safe_area(boundary),
        pieces=pieces,
        holes=holes,
        marches=lattice.marches,
        calls=lattice.calls,
        points=np.stack(np.meshgrid(axis, axis, indexing="ij"), axis=-1).reshape(-1, 2),
        margins=lattice.coarse.reshape(len(axis) ** 2, -1),
        boundary=boundary,
    )
