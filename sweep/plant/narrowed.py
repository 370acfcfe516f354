"""The marches that close in on the worst moments: around each point's worst one, and around a second summit that is nearly as bad.

B brackets (a moment between two neighbours), K times in each.
"""

from dataclasses import dataclass

import numpy as np

from sweep.plant.marched import Moments, best_of, march_moments, score_of, shift_of, summits_of, together
from sweep.plant.onward import states_at
from sweep.plant.recipe import Charged
from sweep.plant.samples import Batch
from sweep.plant.values import Floats
from sweep.study.model import Study

CLOSE = 0.0025  # of the batch time; the marches left and right of the worst one are brought at least this near
FLANK = 0.9 * CLOSE  # how far from it the first two are
ROUNDS = 7  # of marches where they are not near: after the flanks each in thirds of the bracket before
NEARLY = (1.5, 0.1)  # K, and of the closed form's logarithm: a second summit that is lower by less is looked at as closely
GAIN = (3e-4, 1e-5)  # likewise: the top of the parabola is marched where it promises more than this


@dataclass(frozen=True)
class Brackets:
    """rows (B,): whose; time (B, 3) s ascending and score (B, 3): the highest moment between its neighbours."""

    rows: np.ndarray
    time: Floats
    score: Floats

    def at(self, which: np.ndarray) -> "Brackets":
        return Brackets(self.rows[which], self.time[which], self.score[which])

    def closed_in(self, which: np.ndarray, time: Floats, score: Floats) -> "Brackets":
        """Return brackets of which some (mask) were marched at more times (b, K)."""
        times, scores = (np.concatenate([a[which], b], axis=1) for a, b in ((self.time, time), (self.score, score)))
        order = np.argsort(times, axis=1, kind="stable")
        times, scores = np.take_along_axis(times, order, axis=1), np.take_along_axis(scores, order, axis=1)
        around = np.clip(scores.argmax(axis=1)[:, None] + np.array([-1, 0, 1]), 0, times.shape[1] - 1)
        every, highest = self.time.copy(), self.score.copy()
        every[which], highest[which] = np.take_along_axis(times, around, axis=1), np.take_along_axis(scores, around, axis=1)
        return Brackets(self.rows, every, highest)


def narrow(study: Study, plant: Charged, batch: Batch, marched: Moments, which: int, rough: float, worth: float) -> Moments:
    """Return the moments with more of them, by point and time, around the worst ones: MTSR (`which` 0) or TMRad (1)."""
    shift, more, over = shift_of(marched, plant.values.count), [marched], batch.over()
    found = _brackets(batch, marched, score_of(marched, which, shift), which)

    def march(brackets: Brackets, time: Floats, wanted: np.ndarray) -> Floats:
        """Return the scores (B, K) of those that are wanted (B, K) and -inf."""
        score, whose = np.full(time.shape, -np.inf), np.nonzero(wanted)
        if whose[0].size:
            state = _states(plant, batch, brackets.rows, time, rough)[wanted]
            usable = np.isfinite(state).all(axis=1)
            new = march_moments(study, plant, brackets.rows[whose[0]][usable], time[wanted][usable], state[usable], rough, worth)
            score[whose[0][usable], whose[1][usable]] = score_of(new, which, shift)
            more.append(new)
        return score

    for k in range(ROUNDS):
        wide = np.diff(found.time, axis=1) > CLOSE * over[found.rows][:, None]
        some = wide.any(axis=1)
        if not some.any():
            break
        these, wide = found.at(some), wide[some]
        time, wanted = _flanks(these, wide, over) if k == 0 else _thirds(these, wide)
        score = march(these, time, wanted)
        low = these.time[:, :1], these.score[:, :1]  # what was not marched is put where it changes nothing
        found = found.closed_in(some, np.where(wanted, time, low[0]), np.where(wanted, score, low[1]))
    top, gain = _vertex(found)
    better = gain > GAIN[which]
    march(found.at(better), top[better][:, None], np.ones((int(better.sum()), 1), dtype=bool))
    return together(*more)


def elsewhere(batch: Batch, marched: Moments, score: Floats, which: int) -> Floats:
    """Return the score (M,) of summits away from their point's worst moment but nearly as bad; -inf for all else."""
    place, best = best_of(marched, score, batch.end.size)
    middle = np.where(place >= 0, marched.time[place], 0.0) if marched.time.size else np.zeros(batch.end.size)
    away = np.abs(marched.time - middle[marched.rows]) > 3.0 * CLOSE * batch.over()[marched.rows]
    return np.where(away & summits_of(marched, score) & (score > best[marched.rows] - NEARLY[which]), score, -np.inf)


def _brackets(batch: Batch, marched: Moments, score: Floats, which: int) -> Brackets:
    """Return the worst moment of each point, and its second summit where there is one, between their neighbours."""
    tops = [best_of(marched, s, batch.end.size)[0] for s in (score, elsewhere(batch, marched, score, which))]
    place = np.concatenate([top[top >= 0] for top in tops])
    rows, middle, last = marched.rows[place], marched.time[place], score.size - 1
    time, scores = [], []
    for step, edge in ((-1, np.zeros(rows.size)), (1, batch.over()[rows])):
        near = np.clip(place + step, 0, last)
        own = (marched.rows[near] == rows) & (near != place)
        time.append(np.where(own, marched.time[near], edge))
        scores.append(np.where(own, score[near], -np.inf))
    return Brackets(rows, np.stack([time[0], middle, time[1]], axis=1), np.stack([scores[0], score[place], scores[1]], axis=1))


def _flanks(brackets: Brackets, wide: np.ndarray, over: Floats) -> tuple[Floats, np.ndarray]:
    """Return times (B, 2) close to the middle on both sides, and which of them (B, 2) lie on a side that is wide."""
    middle, reach = brackets.time[:, 1:2], FLANK * over[brackets.rows][:, None]
    return np.where(wide, middle + reach * np.array([-1.0, 1.0]), middle), wide


def _thirds(brackets: Brackets, wide: np.ndarray) -> tuple[Floats, np.ndarray]:
    """Return times (B, 4) that cut both sides of the middle in thirds, and which of them (B, 4) lie on a side that is wide."""
    low, middle, high = (brackets.time[:, k : k + 1] for k in range(3))
    thirds = np.array([1.0, 2.0]) / 3.0
    return np.concatenate([low + thirds * (middle - low), middle + thirds * (high - middle)], axis=1), np.repeat(wide, 2, axis=1)


def _states(plant: Charged, batch: Batch, rows: np.ndarray, time: Floats, tolerance: float) -> Floats:
    """Return the states (M, K, R) at times (M, K) ascending, marched on from the sample before the first."""
    sample = np.maximum((batch.times[rows] <= time[:, :1]).sum(axis=1) - 1, 0)
    return states_at(plant, rows, batch.times[rows, sample], np.nan_to_num(batch.states[rows, sample], nan=300.0), time, tolerance)


def _vertex(found: Brackets) -> tuple[Floats, Floats]:
    """Return where the parabolas through brackets are highest, (B,) s, and by how much above the middle; nothing where there is none."""
    (low, middle, high), (at_low, top, at_high) = found.time.T, found.score.T
    with np.errstate(invalid="ignore", divide="ignore"):
        a, b = (middle - low) * (top - at_high), (middle - high) * (top - at_low)
        when = middle - 0.5 * ((middle - low) * a - (middle - high) * b) / (a - b)
        bend = ((at_high - top) / (high - middle) - (top - at_low) / (middle - low)) / (high - low)
        gain = -bend * (when - middle) ** 2
    inner = np.isfinite(when) & np.isfinite(gain) & (when > low) & (when < high)
    return np.where(inner, when, middle), np.where(inner, gain, 0.0)
