"""Failures of cooling that were marched: each with its MTSR, its time to maximum rate, and how it ranks among those of its batch.

M failures, of N points.
"""

from dataclasses import dataclass, replace

import numpy as np

from sweep.plant import adiabatic
from sweep.plant.rates import closed_form_tmr
from sweep.plant.recipe import Charged
from sweep.plant.values import Floats
from sweep.study.model import Study

NUDGE = 1e-6  # of the closed form's logarithm, added to that of an equal bound


@dataclass(frozen=True)
class Moments:
    """M failures that were marched: rows (M,), time (M,) s, begin (M, R): the state then; mtsr (M,) K, tmr (M,) s (infinite where not
    marched, NaN where that march failed), censored (M,), urgency (M,): minus ln of the closed form; ok (M,): MTSR was found; mixture block
    (M, block) and state (M, R) where MTSR is reached."""

    rows: np.ndarray
    time: Floats
    begin: Floats
    mtsr: Floats
    tmr: Floats
    censored: np.ndarray
    urgency: Floats
    ok: np.ndarray
    block: Floats
    state: Floats

    def joined(self, other: "Moments") -> "Moments":
        """Return both together."""
        return Moments(*(np.concatenate([getattr(self, name), getattr(other, name)]) for name in self.__dataclass_fields__))


def march_moments(
    study: Study, plant: Charged, rows: np.ndarray, time: Floats, state: Floats, tolerance: float, worth: float = np.inf
) -> Moments:
    """March failures at times (M,) from states (M, R): the synthesis, then the decomposition of moments that may be among the worst.

    worth: of the closed form's logarithm; a moment less urgent by more than this than the most urgent one of its point is not marched to
    its maximum rate. Infinite: all are; negative: none is.
    """
    failed = adiabatic.fail(study, plant, rows, time, state)
    synthesis = adiabatic.run_synthesis(study, plant, failed, tolerance)
    block = adiabatic.mixture_block(study, plant, failed, synthesis)
    ok, urgency = synthesis.ok.copy(), np.full(rows.size, -np.inf)
    if adiabatic.purposes(study, "decomposition") and rows.size:
        urgency = np.where(ok, _urgency(study, plant, rows, block, synthesis.state), -np.inf)
    tmr, censored = np.full(rows.size, np.inf), np.zeros(rows.size, dtype=bool)
    found = Moments(rows, time, state, synthesis.temperature, tmr, censored, urgency, ok, block, synthesis.state)
    worst = np.full(plant.values.count, -np.inf)
    np.maximum.at(worst, rows, urgency)
    return decompose(study, plant, found, ~(urgency < worst[rows] - worth), tolerance)


def decompose(study: Study, plant: Charged, found: Moments, wanted: np.ndarray, tolerance: float) -> Moments:
    """March the decomposition of the moments that are wanted (M,)."""
    chosen = found.ok & wanted & bool(adiabatic.purposes(study, "decomposition"))
    if not chosen.any():
        return found
    rows, tmr, censored = found.rows[chosen], found.tmr.copy(), found.censored.copy()
    horizon = plant.values.get("failure.horizon")[rows]
    run = adiabatic.run_decomposition(study, plant, rows, found.block[chosen], found.state[chosen], horizon, tolerance)
    tmr[chosen], censored[chosen] = np.where(run.ok, run.tmr, np.nan), run.censored
    return replace(found, tmr=tmr, censored=censored)


def _urgency(study: Study, plant: Charged, rows: np.ndarray, block: Floats, state: Floats) -> Floats:
    """Return minus the logarithm of the closed form of the time to maximum rate, (M,)."""
    nz = plant.program.structure.sources.shape[0]
    now = adiabatic.flow_of(plant, rows, block, state)
    return -np.log(closed_form_tmr(now, adiabatic.purposes(study, "decomposition"), state[:, nz]))


def march_grid(
    study: Study, plant: Charged, rows: np.ndarray, time: Floats, state: Floats, rough: float, worth: float
) -> Moments:
    """March failures at times (M, K) from states (M, K, R) of points `rows` (M,), each time once."""
    every, flat = np.repeat(rows, time.shape[1]), state.reshape(-1, state.shape[2])
    _, first = np.unique(np.stack([every, time.ravel()]), axis=1, return_index=True)
    usable = first[np.isfinite(flat[first]).all(axis=1)]
    return march_moments(study, plant, every[usable], time.ravel()[usable], flat[usable], rough, worth)


def score_of(marched: Moments, which: int) -> Floats:
    """Return what is highest at the worst moment: MTSR (K), or minus ln TMRad; -inf where there is none.

    Where a decomposition was not marched, its closed form stands in, corrected as at the point's shortest one that was.
    """
    if which == 0:
        return np.where(marched.ok, marched.mtsr, -np.inf)
    known = marched.ok & np.isfinite(marched.tmr)
    exact = -np.log(np.maximum(np.where(known, marched.tmr, 1.0), 1e-3))
    exact += np.where(marched.censored, NUDGE * np.clip(marched.urgency, -1e3, 1e3), 0.0)  # among equal bounds the most urgent is the worst
    count = int(marched.rows.max(initial=0)) + 1
    place = best_of(marched, np.where(known & ~marched.censored, exact, -np.inf), count)[0]
    shift, some = np.zeros(count), place >= 0
    shift[some] = marched.urgency[place[some]] - exact[place[some]]
    return np.where(known, exact, np.where(marched.ok, marched.urgency - shift[marched.rows], -np.inf))


def best_of(marched: Moments, score: Floats, count: int) -> tuple[np.ndarray, Floats]:
    """Return for each point the place of its highest score, the earliest of equals (-1: none), and that score."""
    place, best = np.full(count, -1), np.full(count, -np.inf)
    np.maximum.at(best, marched.rows, score)
    top = np.flatnonzero((score == best[marched.rows]) & np.isfinite(score))
    top = top[np.argsort(-marched.time[top], kind="stable")]
    place[marched.rows[top]] = top
    return place, best


def summits_of(marched: Moments, score: Floats) -> np.ndarray:
    """Return which moments (M,) no neighbour in time of their own point exceeds."""
    order = np.lexsort((marched.time, marched.rows))
    rows, ordered = marched.rows[order], score[order]
    same = rows[1:] == rows[:-1]
    before, after = np.full(rows.size, -np.inf), np.full(rows.size, -np.inf)
    before[1:][same], after[:-1][same] = ordered[:-1][same], ordered[1:][same]
    found = np.zeros(rows.size, dtype=bool)
    found[order] = (ordered >= before) & (ordered >= after)
    return found


def first_of(marched: Moments, score: Floats, few: int) -> np.ndarray:
    """Return the places of each point's few highest scores."""
    if few == 1:
        place, _ = best_of(marched, score, int(marched.rows.max(initial=-1)) + 1)
        return place[place >= 0]
    order = np.lexsort((-marched.time, score, marched.rows))[::-1]
    rows = marched.rows[order]
    begins = np.flatnonzero(np.diff(rows, prepend=-1))
    rank = np.arange(rows.size) - np.repeat(begins, np.diff(begins, append=rows.size))
    found: np.ndarray = order[(rank < few) & np.isfinite(score[order])]
    return found


def score_at(marched: Moments, score: Floats, rows: np.ndarray, time: Floats) -> Floats:
    """Return the score of the failure of each of `rows` at a marched time, (M,)."""
    wanted = np.full(int(marched.rows.max(initial=0)) + 1, np.nan)
    wanted[rows] = time
    here = np.flatnonzero(marched.time == wanted[marched.rows])
    found = np.full(wanted.size, -np.inf)
    found[marched.rows[here]] = score[here]
    return found[rows]


def neighbours(marched: Moments, rows: np.ndarray, middle: Floats, end: Floats) -> tuple[Floats, Floats]:
    """Return the marched times just below and above `middle` of each of `rows`; the batch's start and end (N,) s where there is none."""
    low, high = middle.copy(), middle.copy()
    place = np.full(int(marched.rows.max(initial=0)) + 1, -1)
    place[rows] = np.arange(rows.size)
    mine = place[marched.rows]
    times, mine = marched.time[mine >= 0], mine[mine >= 0]
    under, over = times < middle[mine], times > middle[mine]
    low[:], high[:] = -np.inf, np.inf
    np.maximum.at(low, mine[under], times[under])
    np.minimum.at(high, mine[over], times[over])
    return np.where(np.isfinite(low), low, 0.0), np.where(np.isfinite(high), high, end[rows])
