"""The hunt for a counter-example in a box: its corners, its faces, its inside, and downhill from where margins are smallest."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from sweep.analysis.ranges.box import Box, Floats, corners
from sweep.chance import Judged
from sweep.plan.draws import cube

Judge = Callable[[Floats], Judged]
SEEDS = 3  # points from which each margin is followed downhill
ROUNDS = 14
_LEAST = 1e-3  # of a side: the last steps downhill


@dataclass(frozen=True)
class Hunt:
    """points (M, D), where from: looked at; value (M,): their smallest scaled margins; limit (M,): which; margin (M, L); share (M,)."""

    points: Floats
    value: Floats
    limit: NDArray[np.int64]
    margin: Floats
    share: Floats
    counts: dict[str, int]

    @property
    def failing(self) -> Floats:
        """The counter-examples, the worst first."""
        bad = np.flatnonzero(~(self.value >= 0.0))
        return np.asarray(self.points[bad[np.argsort(self.value[bad], kind="stable")]])

    @property
    def worst(self) -> int:
        """The number of the point with the smallest margin."""
        return int(self.value.argmin())


def hunt(judge: Judge, box: Box, count: int, generator: np.random.Generator) -> Hunt:
    """Look for a point of a box that fails; count: points spread over its inside, and as many over all its faces."""
    size = len(box.low)
    parts = {"corners": corners(size), "faces": _faces(size, count, generator) if size > 1 else np.empty((0, 1)),
             "inside": cube("sobol", 1 << max(4, (count - 1).bit_length()), size, generator)}  # fmt: skip
    relative = np.concatenate(list(parts.values()))
    found = [judge(box.at(relative))]
    points, counts = [box.at(relative)], {name: len(part) for name, part in parts.items()}
    down = _downhill(judge, box, relative, found[0])
    for at, judged in down:
        points.append(at)
        found.append(judged)
    counts["downhill"] = sum(len(at) for at, _ in down)
    return Hunt(
        np.concatenate(points), np.concatenate([one.least for one in found]), np.concatenate([one.limit for one in found]),
        np.concatenate([one.margin for one in found]), np.concatenate([one.share for one in found]), counts,
    )  # fmt: skip


def _faces(size: int, count: int, generator: np.random.Generator) -> Floats:
    """Return points spread over the faces of the unit cube, alike many on each."""
    each = 1 << max(2, (max(1, count // (2 * size)) - 1).bit_length())
    points = np.tile(cube("sobol", each, size, generator), (2 * size, 1))
    face = np.repeat(np.arange(2 * size), each)
    points[np.arange(len(points)), face // 2] = face % 2
    return points


def _downhill(judge: Judge, box: Box, relative: Floats, judged: Judged) -> list[tuple[Floats, Judged]]:
    """Follow each margin downhill by pattern search within the box, all seeds in one call a round."""
    size, columns = relative.shape[1], judged.value.shape[1]
    seeds = SEEDS if columns > 1 else 2 * SEEDS
    order = np.argsort(judged.value, axis=0, kind="stable")[:seeds].T.ravel()
    column = np.repeat(np.arange(columns), len(order) // columns)
    at, value, step = relative[order], judged.value[order, column], np.full(len(order), 0.25)
    moves = np.concatenate([np.eye(size), -np.eye(size)])
    found = []
    for _ in range(ROUNDS):
        going = np.flatnonzero(step > _LEAST)
        if not going.size:
            break
        tried = np.clip(at[going, None, :] + step[going, None, None] * moves, 0.0, 1.0)
        places = box.at(tried.reshape(-1, size))
        result = judge(places)
        found.append((places, result))
        values = result.value.reshape(len(going), len(moves), columns)[np.arange(len(going)), :, column[going]]
        best = values.argmin(axis=1)
        better = values[np.arange(len(going)), best] < value[going]
        moved = going[better]
        at[moved], value[moved] = tried[better, best[better]], values[better, best[better]]
        step[going[~better]] *= 0.35
    return found
