"""Failures of cooling that were marched: each with its MTSR, its time to maximum rate, and how it ranks among those of its batch.

M failures, of N points.
"""

from dataclasses import dataclass, replace

import numpy as np

from sweep.plant import adiabatic
from sweep.plant.recipe import Charged
from sweep.plant.values import Floats
from sweep.study.model import Study

NUDGE = 1e-6  # of the closed form's logarithm, added to that of an equal bound


@dataclass(frozen=True)
class Moments:
    """M failures that were marched: rows (M,), time (M,) s, begin (M, R): the state then; mtsr (M,) K, state (M, R) where it is reached and
    after (M,) s: how long after the failure; ok (M,): it was found; urgency (M,): minus ln of the closed form there; tmr (M,) s (infinite
    where not marched, NaN where that march failed), censored (M,)."""

    rows: np.ndarray
    time: Floats
    begin: Floats
    mtsr: Floats
    state: Floats
    after: Floats
    ok: np.ndarray
    urgency: Floats
    tmr: Floats
    censored: np.ndarray

    def at(self, places: np.ndarray) -> "Moments":
        """Return those at places, or where a mask says so."""
        return Moments(*(getattr(self, name)[places] for name in self.__dataclass_fields__))


def together(*parts: Moments) -> Moments:
    """Return all moments by point and time, each once: of two that are the same the one that stands in the earlier part."""
    every = [np.concatenate([getattr(part, name) for part in parts]) for name in Moments.__dataclass_fields__]
    rows, time = every[0], every[1]
    order = np.lexsort((time, rows))
    rows, time = rows[order], time[order]
    once = np.ones(rows.size, dtype=bool)
    once[1:] = (rows[1:] != rows[:-1]) | (time[1:] != time[:-1])
    return Moments(*(column[order[once]] for column in every))


def march_moments(
    study: Study, plant: Charged, rows: np.ndarray, time: Floats, state: Floats, tolerance: float, worth: float = np.inf
) -> Moments:
    """March failures at times (M,) from states (M, R): the synthesis, then the decomposition of moments that may be among the worst.

    worth: of the closed form's logarithm; a moment less urgent by more than this than the most urgent one of its point is not marched to
    its maximum rate. Infinite: all are; negative: none is.
    """
    failed = adiabatic.fail(study, plant, rows, time, state)
    synthesis = adiabatic.run_synthesis(study, plant, failed, tolerance)
    ok, urgency = synthesis.ok.copy(), np.full(rows.size, -np.inf)
    if adiabatic.purposes(study, "decomposition") and rows.size:
        urgency[ok] = -np.log(adiabatic.closed_form(study, plant, failed, synthesis.after, synthesis.state)[ok])
    tmr, censored = np.full(rows.size, np.inf), np.zeros(rows.size, dtype=bool)
    found = Moments(rows, time, state, synthesis.temperature, synthesis.state, synthesis.after, ok, urgency, tmr, censored)
    return decompose(study, plant, found, worthy(found, plant.values.count, worth), tolerance)


def worthy(found: Moments, count: int, worth: float) -> np.ndarray:
    """Return which moments (M,) are less urgent by no more than `worth` than the most urgent one of their point."""
    worst = np.full(count, -np.inf)
    np.maximum.at(worst, found.rows, found.urgency)
    return ~(found.urgency < worst[found.rows] - worth) if worth >= 0.0 else np.zeros(found.rows.size, dtype=bool)


def decompose(study: Study, plant: Charged, found: Moments, wanted: np.ndarray, tolerance: float) -> Moments:
    """March the decomposition of the moments that are wanted (M,)."""
    chosen = found.ok & wanted & bool(adiabatic.purposes(study, "decomposition"))
    if not chosen.any():
        return found
    these, tmr, censored = found.at(chosen), found.tmr.copy(), found.censored.copy()
    horizon = plant.values.get("failure.horizon")[these.rows]
    block = mixture_block(study, plant, these)
    run = adiabatic.run_decomposition(study, plant, these.rows, block, these.state, horizon, tolerance)
    tmr[chosen], censored[chosen] = np.where(run.ok, run.tmr, np.nan), run.censored
    return replace(found, tmr=tmr, censored=censored)


def mixture_block(study: Study, plant: Charged, found: Moments) -> Floats:
    """Return the blocks (M, block) of the mixtures left where MTSR is reached."""
    return adiabatic.mixture_block(study, plant, adiabatic.fail(study, plant, found.rows, found.time, found.begin), found.after)


def shift_of(marched: Moments, count: int) -> Floats:
    """Return by how much the closed form's logarithm is off at each point's shortest time to maximum rate that was marched, (N,)."""
    known = marched.ok & np.isfinite(marched.tmr)
    exact = _exact(marched, known)
    place = best_of(marched, np.where(known & ~marched.censored, exact, -np.inf), count)[0]
    shift, some = np.zeros(count), place >= 0
    shift[some] = marched.urgency[place[some]] - exact[place[some]]
    return shift


def _exact(marched: Moments, known: np.ndarray) -> Floats:
    """Return minus ln TMRad, (M,); among equal bounds the most urgent is the worst."""
    exact = -np.log(np.maximum(np.where(known, marched.tmr, 1.0), 1e-3))
    return exact + np.where(marched.censored, NUDGE * np.clip(marched.urgency, -1e3, 1e3), 0.0)


def score_of(marched: Moments, which: int, shift: Floats | None = None) -> Floats:
    """Return what is highest at the worst moment: MTSR (K), or minus ln TMRad; -inf where there is none.

    Where a decomposition was not marched, its closed form stands in, off by `shift` (N,), or as at the point's shortest one that was.
    """
    if which == 0:
        return np.where(marched.ok, marched.mtsr, -np.inf)
    known = marched.ok & np.isfinite(marched.tmr)
    shift = shift_of(marched, int(marched.rows.max(initial=0)) + 1) if shift is None else shift
    return np.where(known, _exact(marched, known), np.where(marched.ok, marched.urgency - shift[marched.rows], -np.inf))


def best_of(marched: Moments, score: Floats, count: int) -> tuple[np.ndarray, Floats]:
    """Return for each point the place of its highest score, the earliest of equals (-1: none), and that score."""
    place, best = np.full(count, -1), np.full(count, -np.inf)
    np.maximum.at(best, marched.rows, score)
    top = np.flatnonzero((score == best[marched.rows]) & np.isfinite(score))
    top = top[np.argsort(-marched.time[top], kind="stable")]
    place[marched.rows[top]] = top
    return place, best


def summits_of(marched: Moments, score: Floats) -> np.ndarray:
    """Return which moments (M,), by point and time, no neighbour of their own point exceeds."""
    same = marched.rows[1:] == marched.rows[:-1]
    found = np.ones(score.size, dtype=bool)
    found[1:] &= ~(same & (score[:-1] > score[1:]))
    found[:-1] &= ~(same & (score[1:] > score[:-1]))
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
