"""How far a point is from where limits stop to hold, along each axis up and down, and which limit stops first."""

from dataclasses import dataclass

import numpy as np

from sweep.analysis.window.forecast import Bools, Floats, Indices, holding, suspects
from sweep.analysis.window.trace import Margins, place_in

SCANNED = 128  # steps a direction; a dip between two of them is sought where the margins suggest one
CUTS = 8
TOLERANCE = 1e-4


@dataclass(frozen=True)
class Edge:
    """axis: its number; direction: "up" or "down"; distance: of the axis, 0 to 1, None where no edge lies within the range or none was sought;
    limit: the number of the one that stops first."""

    axis: int
    direction: str
    distance: float | None
    limit: int | None


@dataclass(frozen=True)
class Edges:
    """holds: whether the point itself does; margins (L,) there; edges: two an axis; reason: why no distance was sought, None where they were."""

    holds: bool
    margins: Floats
    edges: tuple[Edge, ...]
    marches: int
    reason: str | None


def edges(margins: Margins, at: Floats) -> Edges:
    """Seek the first edge from point `at` (D,) along each of D axes, up and down, within the unit cube.

    All directions are scanned in one call, then the first bracket of each is narrowed together until it is below 1e-4 of the axis. A distance is
    to the last point known to hold.
    """
    at = np.asarray(at, dtype=float)
    outside = bool(np.any((at < 0.0) | (at > 1.0)))
    ways = [] if outside else [(axis, sign) for axis in range(len(at)) for sign in (1, -1) if (at[axis] < 1.0 if sign > 0 else at[axis] > 0.0)]
    step = np.array([[sign * (axis == k) for k in range(len(at))] for axis, sign in ways], dtype=float).reshape(-1, len(at))
    reach = np.array([1.0 - at[axis] if sign > 0 else at[axis] for axis, sign in ways])
    search = _Search(margins, at, step)
    here = search.margins_at(np.zeros(1), np.zeros((1, len(at))))[0]
    holds, limits, distances = bool(holding(here)), {}, {}
    reason = "the point lies outside the axes' range" if outside else None if holds else "the point itself does not hold every limit"
    if reason is None and ways:
        found, distance, limit = search.first(here, reach)
        distances = {way: float(d) for way, d, yes in zip(ways, distance, found, strict=True) if yes}
        limits = {way: int(k) for way, k, yes in zip(ways, limit, found, strict=True) if yes}
    both = [(axis, sign) for axis in range(len(at)) for sign in (1, -1)]
    listed = tuple(Edge(axis, "up" if sign > 0 else "down", distances.get((axis, sign)), limits.get((axis, sign))) for axis, sign in both)
    return Edges(holds, here, listed, search.marches, reason)


class _Search:
    """W ways from one point: step (W, D) are their unit vectors."""

    def __init__(self, margins: Margins, at: Floats, step: Floats) -> None:
        self._margins, self._at, self._step = margins, at, step
        self.marches = 0

    def margins_at(self, distance: Floats, step: Floats) -> Floats:
        """Return margins (M, L) at distances (M,) along steps (M, D), in one call."""
        self.marches += len(distance)
        return np.asarray(self._margins(self._at + distance[:, None] * step), dtype=float)

    def first(self, here: Floats, reach: Floats) -> tuple[Bools, Floats, Indices]:
        """Return whether there is an edge within reach (W,) each way, how far it is and which limit it is, all (W,)."""
        share = np.arange(1, SCANNED + 1) / SCANNED
        ways = len(reach)
        scan = self.margins_at(np.outer(share, reach).ravel(), np.tile(self._step, (SCANNED, 1))).reshape(SCANNED, ways, -1)
        scan = np.concatenate([np.broadcast_to(here, (1, *scan.shape[1:])), scan])
        safe = np.where(holding(scan).all(axis=0), SCANNED, holding(scan).argmin(axis=0) - 1)  # the last node before the first that fails
        found = safe < SCANNED
        column = np.arange(ways)
        inner, outer = scan[safe, column], scan[np.minimum(safe + 1, SCANNED), column]
        low, high = safe / SCANNED, np.minimum(safe + 1, SCANNED) / SCANNED
        segment, way, cut = suspects(scan, CUTS)
        sooner = segment < safe[way]
        if sooner.any():
            segment, way, place = segment[sooner], way[sooner], (segment + cut / CUTS)[sooner] / SCANNED
            dip = self.margins_at(place * reach[way], self._step[way])
            for k in np.flatnonzero(~holding(dip))[::-1]:  # a handful; the nearest one last, so that it stays
                w = way[k]
                found[w], low[w], high[w], inner[w], outer[w] = True, segment[k] / SCANNED, place[k], scan[segment[k], w], dip[k]
        return self._narrowed(found, low * reach, high * reach, inner, outer)

    def _narrowed(self, found: Bools, low: Floats, high: Floats, inner: Floats, outer: Floats) -> tuple[Bools, Floats, Indices]:
        rows = np.flatnonzero(found)
        column = np.arange(len(rows))
        while np.any(high[rows] - low[rows] > TOLERANCE):
            ends = np.linspace(low[rows], high[rows], CUTS + 2)
            between = self.margins_at(ends[1:-1].ravel(), np.tile(self._step[rows], (CUTS, 1))).reshape(CUTS, len(rows), -1)
            values = np.concatenate([inner[rows][None], between, outer[rows][None]])
            fails = (~holding(values)).argmax(axis=0)
            low[rows], high[rows] = ends[fails - 1, column], ends[fails, column]
            inner[rows], outer[rows] = values[fails - 1, column], values[fails, column]
        limit = np.full(len(found), -1)
        limit[rows] = place_in(inner[rows], outer[rows])[1]
        return found, low, limit
