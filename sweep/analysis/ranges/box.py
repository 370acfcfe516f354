"""Boxes around a point in the unit cube, and the largest that leave out points known to fail.

D: sides; B: points known to fail; W: boxes held at once.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import product

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
WIDTH = 48  # boxes that the search for the largest empty one holds at once
GAP = 1e-9  # of an axis between a box and a point that it leaves out
THIN = 1e-9


@dataclass(frozen=True)
class Box:
    """low, high (D,): the ends of its sides, in coordinates that run from 0 to 1 over each variable's range."""

    low: Floats
    high: Floats

    @property
    def volume(self) -> float:
        """The product of its widths: its share of the whole space."""
        return float(np.prod(self.high - self.low))

    @property
    def size(self) -> float:
        """The logarithm of its volume, in which thin boxes can still be compared."""
        return float(np.log(np.maximum(self.high - self.low, THIN)).sum())

    def at(self, relative: Floats) -> Floats:
        """Return points (M, D) of the box whose coordinates run from 0 to 1 along its sides."""
        return np.asarray(np.clip(self.low + relative * (self.high - self.low), self.low, self.high))

    def relative(self, points: Floats) -> Floats:
        """Return where points (M, D) lie along the sides, kept within 0 and 1."""
        return np.asarray(np.clip((points - self.low) / np.maximum(self.high - self.low, THIN), 0.0, 1.0))

    def inside(self, points: Floats) -> NDArray[np.bool_]:
        """Return which points (M, D) lie within or on its faces, (M,)."""
        return np.asarray(np.all((points >= self.low) & (points <= self.high), axis=1))

    def shrunk(self, core: Box, share: float) -> Box:
        """Return the box drawn together towards a smaller one (or a point) within it, to a share of the way between."""
        return Box(core.low + share * (self.low - core.low), core.high + share * (self.high - core.high))

    @property
    def centre(self) -> Floats:
        """The middle of the box, (D,)."""
        return np.asarray(0.5 * (self.low + self.high))


def corners(dimensions: int) -> Floats:
    """Return all corners of the unit cube, (2^D, D)."""
    return np.array(list(product((0.0, 1.0), repeat=dimensions)))


def skeleton(dimensions: int) -> Floats:
    """Return corners, centres of the faces, and the centre of the unit cube."""
    faces = np.full((2 * dimensions, dimensions), 0.5)
    faces[np.arange(2 * dimensions), np.arange(2 * dimensions) // 2] = np.arange(2 * dimensions) % 2
    return np.concatenate([corners(dimensions), faces, np.full((1, dimensions), 0.5)]) if dimensions > 1 else np.array([[0.0], [1.0], [0.5]])


def empty_boxes(whole: Box, core: Box, failing: Floats, wanted: int) -> list[Box]:
    """Return up to `wanted` of the largest boxes around a core (a point, or a small box without failures) that leave out points known to fail (B, D).

    A beam search: the point nearest to the core that a box holds is cut off by each of its possible faces; the largest boxes go on. The
    largest of all is found where the beam is wide enough for it; every box that is returned leaves out every point.
    """
    near = failing[np.argsort(np.abs(failing - core.centre).max(axis=1), kind="stable")] if len(failing) else failing
    beam, done = [whole], list[Box]()
    while beam:
        children: dict[bytes, Box] = {}
        for box in beam:
            held = near[box.inside(near)]
            if not len(held):
                done.append(box)
                continue
            for child in _cut(box, core, held[0]):
                children.setdefault(child.low.tobytes() + child.high.tobytes(), child)
        beam = sorted(children.values(), key=lambda one: -one.size)[:WIDTH]
        done = _apart(done, wanted)
        if len(done) == wanted:
            beam = [box for box in beam if box.size > done[-1].size]
    return done


def _cut(box: Box, core: Box, point: Floats) -> list[Box]:
    """Return the boxes that a point is cut off from, one for each axis in which it lies beyond the core."""
    found = []
    for axis in range(len(point)):
        if point[axis] > core.high[axis]:
            high = box.high.copy()
            high[axis] = max(point[axis] - GAP, core.high[axis])
            found.append(Box(box.low, high))
        elif point[axis] < core.low[axis]:
            low = box.low.copy()
            low[axis] = min(point[axis] + GAP, core.low[axis])
            found.append(Box(low, box.high))
    return found


def _apart(boxes: list[Box], wanted: int) -> list[Box]:
    """Return the largest boxes of which none is much the same as a larger one."""
    kept: list[Box] = []
    for box in sorted(boxes, key=lambda one: -one.size):
        apart = all(np.abs(np.append(box.low - other.low, box.high - other.high)).max() > 0.05 for other in kept)
        if apart and len(kept) < wanted:
            kept.append(box)
    return kept
