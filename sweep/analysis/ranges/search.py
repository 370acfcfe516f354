"""The search for the largest box that no counter-example is found in: grown, rounded, hunted through, cut, and grown again.

D: sides of the box.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from sweep.analysis.ranges.box import Box, Floats, empty_boxes, skeleton
from sweep.analysis.ranges.climb import climb, fitted
from sweep.analysis.ranges.hunt import Hunt, Judge, hunt
from sweep.base.seeds import stream
from sweep.plan.draws import cube

ROUNDS = 20
BETTER = 0.01  # by which the logarithm of a volume must be larger for another hunt to be worth its batches
SHADOWS = np.arange(1, 9) / 8.0  # of the way from the centre to a counter-example, along one axis
PROBE = 0.03  # of an axis by which a face is tried to be moved out before it is looked at closely
_CUTS = 0.5 ** np.arange(6)
_WORST = 4  # counter-examples of a round whose places along the sides are watched from then on


@dataclass(frozen=True)
class Effort:
    """pool: points at which the space is looked at first; starts: boxes that are grown; rounds: of each growth; followed: places whose slopes are
    taken; points: of a hunt."""

    pool: int
    starts: int
    rounds: int
    followed: int
    points: int


@dataclass(frozen=True)
class Found:
    """box: rounded; hunt: the one through it; rounds: how often a box was broken before; drawn_in: it had to be drawn together at the end."""

    box: Box
    hunt: Hunt
    rounds: int
    drawn_in: bool


class Search:
    """Knows all points that failed so far; every box that it proposes leaves them out, and holds its core: the set-point, or where it is held."""

    def __init__(self, judge: Judge, point: Floats, core: Box, effort: Effort, inward: Callable[[Box, Box], Box], seed: int) -> None:
        """point: the set-point, which holds; inward: a box and its core -> the box with round ends."""
        self.judge, self.point, self.core, self.effort, self._inward, self.seed = judge, point, core, effort, inward, seed
        self.whole = Box(np.zeros(len(core.low)), np.ones(len(core.low)))
        self.places = skeleton(len(core.low))
        self.failing = np.empty((0, len(core.low)))

    def _noted(self, points: Floats) -> None:
        """Judge points and keep those that fail."""
        if len(points):
            self._keep(points[~self.judge(points).acceptable])

    def inward(self, box: Box) -> Box:
        """Return a box with round ends that still holds the core."""
        return self._inward(box, self.core)

    def _keep(self, failing: Floats) -> None:
        """Keep points that fail; a core in which one turns up gives way to the set-point."""
        self.failing = np.concatenate([self.failing, failing])
        if self.core.inside(failing).any():
            self.core = Box(self.point, self.point)

    def _grown(self, box: Box) -> Box:
        """Return a box fitted and grown, then cut back from what is known to fail, and pushed out where a cut left room."""
        fits = fitted(self.judge, box, self.core, self.places)
        tall = climb(self.judge, fits, self.whole, self.core, self.places, self.effort.followed, self.effort.rounds)
        grown = self._cut(fitted(self.judge, tall, self.core, self.places))
        return max(self._cut(fits), grown, key=lambda one: one.size)

    def _cut(self, box: Box) -> Box:
        held = self.failing[box.inside(self.failing)]
        return box if not len(held) else empty_boxes(box, self.core, held, 1)[0]

    def _refitted(self) -> Box:
        """Return the largest box that leaves out all that is known to fail, drawn together until it holds at its corners and faces: where limits
        only hold or fail, what was learnt on the way makes better boxes than growth does."""
        whole = empty_boxes(self.whole, self.core, self.failing, 1)[0]
        return self._cut(fitted(self.judge, whole, self.core, self.places))

    def _pushed(self, box: Box, number: int) -> Box:
        """Return a box whose faces are moved out, one after another, as far as points on the slab beyond hold."""
        size = len(self.core.low)
        spread = cube("sobol", 16, size, stream(self.seed, "ranges", "push", number))
        relative = np.concatenate([skeleton(size), spread])
        for face in range(2 * size):
            axis, up = face // 2, bool(face % 2)
            room = (self.whole.high[axis] - box.high[axis]) if up else (box.low[axis] - self.whole.low[axis])
            if room <= 1e-6:
                continue
            if not self.judge(_slab(box, axis, up, min(room, PROBE)).at(skeleton(size))).acceptable.all():
                continue
            slabs = [_slab(box, axis, up, float(share * room)) for share in _CUTS]
            points = np.concatenate([slab.at(relative) for slab in slabs])
            good = self.judge(points).acceptable.reshape(len(slabs), -1).all(axis=1)
            good &= np.array([not slab.inside(self.failing).any() for slab in slabs])
            if good.any():
                slab = slabs[int(good.argmax())]
                box = Box(np.minimum(box.low, slab.low), np.maximum(box.high, slab.high))
        return box

    def _shadows(self, found: Hunt) -> Floats:
        """Return points between the worst counter-examples and the centre, one axis at a time: how far in the failure reaches."""
        worst = found.failing[:8]
        points = np.repeat(worst[:, None, None, :], len(self.core.low), axis=1).repeat(len(SHADOWS), axis=2)
        for axis in range(len(self.core.low)):
            points[:, axis, :, axis] = self.core.centre[axis] + SHADOWS * (worst[:, axis, None] - self.core.centre[axis])
        return points.reshape(-1, len(self.core.low))

    def largest(self, pool: Floats, first: Box | None = None) -> Found:
        """Return the largest box found. pool (P, D): points looked at first; first: a box to start from as well."""
        self._noted(pool)
        starts = [*empty_boxes(self.whole, self.core, self.failing, self.effort.starts), *([first] if first is not None else [])]
        boxes, kept = [self._grown(start) for start in starts], list[Found]()
        for number in range(ROUNDS):
            box = max(boxes, key=lambda one: one.size)
            rounded = self.inward(box)
            if kept and rounded.size <= kept[-1].box.size + BETTER:
                return kept[-1]
            seen = hunt(self.judge, rounded, self.effort.points, stream(self.seed, "ranges", "hunt", number))
            if not len(seen.failing):
                kept.append(Found(rounded, seen, number, False))
                boxes = [self._refitted(), self._pushed(rounded, number)]
                continue
            self._keep(seen.failing)
            self._noted(self._shadows(seen))
            self.places = np.unique(np.concatenate([self.places, rounded.relative(seen.failing[:_WORST])]), axis=0)
            boxes = [self._cut(one) for one in boxes]
            box = max(boxes, key=lambda one: one.size)
            boxes.append(self._grown(box))
            boxes.append(self._refitted())
            boxes.append(self._pushed(max(boxes, key=lambda one: one.size), number))
        return kept[-1] if kept else self._drawn_in(self.inward(max(boxes, key=lambda one: one.size)))

    def _drawn_in(self, box: Box) -> Found:
        """Draw a box together until a hunt through it finds nothing."""
        for number, share in enumerate(np.linspace(0.95, 0.0, 20)):
            small = self.inward(box.shrunk(self.core, float(share)))
            seen = hunt(self.judge, small, self.effort.points, stream(self.seed, "ranges", "draw in", number))
            if not len(seen.failing):
                return Found(small, seen, ROUNDS, True)
        return Found(small, seen, ROUNDS, True)


def _slab(box: Box, axis: int, up: bool, depth: float) -> Box:
    """Return what a box gains when one of its faces moves out by so much."""
    low, high = box.low.copy(), box.high.copy()
    if up:
        low[axis], high[axis] = box.high[axis], box.high[axis] + depth
    else:
        low[axis], high[axis] = box.low[axis] - depth, box.low[axis]
    return Box(low, high)
