"""The search for the worst moments of a cooling failure in each batch: where MTSR is highest, where the time to maximum rate is least.

Estimates (`moments.py`) point, marches (`marched.py`, `narrowed.py`) decide. N points, K samples.
"""

from dataclasses import replace

import numpy as np

from sweep.plant import adiabatic, moments
from sweep.plant.marched import Moments, decompose, first_of, march_moments, score_of, together, worthy
from sweep.plant.narrowed import NEARLY, elsewhere, narrow
from sweep.plant.onward import states_at
from sweep.plant.recipe import Charged
from sweep.plant.samples import Batch
from sweep.plant.values import Floats
from sweep.study.model import Study

COARSE = 6  # of so many samples one is marched at first
CLEARLY = (0.02, 1e-3)  # K, and of the closed form's logarithm: a sample that may be worse by less is not marched
WORTH = 0.3  # of the closed form's logarithm: the truth is some 5 to 30 % longer, so a moment less urgent by more than this is not marched
NONE = -1.0  # no moment is: near the worst one the closed form alone tells which is worse
NEAR_PEAK = 5.0  # K
LITTLE = 0.1  # of the closed form's logarithm: among all samples of a batch, to begin with, and among the worst moments
FIRST = 3  # moments of a point that are marched again: where the time to maximum rate jumps, the very worst may fall to either side


def worst_moments(study: Study, plant: Charged, batch: Batch, tolerance: float) -> Moments:
    """Return the failures marched in search of the worst ones, several for every point; the last are the worst, at full tolerance.

    The search itself may be rougher: it decides only which moments are the worst, and those are marched again.
    """
    rough, autocatalytic = min(10.0 * tolerance, 1e-5), adiabatic.speeds_itself_up(study)
    rows = np.arange(batch.times.shape[0])
    found = [np.where(batch.inside, e, -np.inf) for e in moments.estimates(study, plant, rows, batch.times, batch.states)]
    astray = autocatalytic or may_mislead(study)
    worth, few = (np.inf, FIRST) if astray else (NONE, 1)
    rougher = rough if astray else min(100.0 * tolerance, 1e-4)
    marched = _march_samples(study, plant, batch, rougher, astray, autocatalytic, found)
    marched = together(marched, _march_tops(study, plant, batch, rough, tolerance, found, worth))
    hot = urgent = narrow(study, plant, batch, marched, 0, rough, NONE)
    if astray:  # marches alone tell: what was not marched to its maximum rate is slower
        urgent = replace(marched, urgency=np.where(np.isinf(marched.tmr), -np.inf, marched.urgency))
    if adiabatic.purposes(study, "decomposition"):
        urgent = narrow(study, plant, batch, urgent, 1, rough, worth)
    return _again(study, plant, batch, hot, urgent, few, tolerance, np.inf if astray else LITTLE)


def may_mislead(study: Study) -> bool:
    """Tell whether completion on paper may end elsewhere than a march: reactions stop at equilibrium or take up heat, or feeds go on (and the
    highest temperature may come before the end). Where reactions only compete it is a good guide, and more moments are marched. Of the
    study as written: no point's search depends on its neighbours."""
    synthesis, settings = adiabatic.purposes(study, "synthesis"), study.failure
    feeds = settings is not None and (settings.feeds != "stop" or settings.feeds_stop_after > 0.0)
    cold = any(study.values.get(f"reactions.{study.reactions[j].name}.heat.value", 0.0) > 0.0 for j in synthesis)
    return feeds or cold or any(study.reactions[j].reversible for j in synthesis)


def _march_samples(
    study: Study, plant: Charged, batch: Batch, rough: float, astray: bool, autocatalytic: bool, found: list[Floats]
) -> Moments:
    """March the failure at samples of the batches, and the decomposition where it may be the fastest of its batch.

    At all samples where estimates may go astray; else where the estimates `found`, corrected by the marches left and right of a sample,
    may still be the highest. The closed form is shorter than the truth unless the decomposition speeds itself up: what it puts beyond the
    shortest march is slower.
    """

    def march(wanted: np.ndarray) -> Moments:
        rows, columns = np.nonzero(wanted)
        return march_moments(study, plant, rows, batch.times[rows, columns], batch.states[rows, columns], rough, NONE)

    wanted = batch.inside.copy() if astray else _few(batch, found)
    marched = march(wanted)
    if not astray:
        marched = together(marched, march(batch.inside & ~wanted & _doubtful(wanted, marched, found)))
    count = plant.values.count
    marched = decompose(study, plant, marched, worthy(marched, count, LITTLE), rough)
    fastest = -np.log(plant.values.get("failure.horizon"))
    known = ~marched.censored & np.isfinite(marched.tmr)
    np.maximum.at(fastest, marched.rows[known], -np.log(np.maximum(marched.tmr[known], 1e-3)))
    more = np.isinf(marched.tmr) & (autocatalytic | (marched.urgency > fastest[marched.rows] - WORTH))
    return decompose(study, plant, marched, more, rough)


def _few(batch: Batch, found: list[Floats]) -> np.ndarray:
    """Return the samples (N, K) that are marched first: some, evenly; the top of each estimate and its neighbours; the end."""
    rows, last = np.arange(batch.times.shape[0]), batch.last()
    wanted = np.zeros_like(batch.inside)
    wanted[:, ::COARSE] = True
    wanted[rows, last] = True
    for e in found:
        top = e.argmax(axis=1)
        for place in (np.maximum(top - 1, 0), top, np.minimum(top + 1, last)):
            wanted[rows, place] = True
    return wanted & batch.inside


def _doubtful(wanted: np.ndarray, marched: Moments, found: list[Floats]) -> np.ndarray:
    """Return the samples (N, K) that may be worse than all that were marched (at those `wanted` (N, K), in their order).

    What a march adds to an estimate changes little from sample to sample: between two marches it is taken to be at most the larger of
    theirs and half as much more as they differ; what is known of one side only holds for both.
    """
    doubtful = np.zeros_like(wanted)
    place = np.arange(wanted.shape[1])
    left = np.maximum.accumulate(np.where(wanted, place, -1), axis=1)
    right = np.minimum.accumulate(np.where(wanted, place, wanted.shape[1])[:, ::-1], axis=1)[:, ::-1]
    left, right = np.where(left < 0, right, left), np.where(right >= wanted.shape[1], left, right)
    for which, estimate in enumerate(found):
        value = np.full(wanted.shape, -np.inf)
        value[wanted] = np.where(marched.ok, (marched.mtsr, marched.urgency)[which], -np.inf)
        with np.errstate(invalid="ignore"):
            off = value - estimate
        off[~np.isfinite(off)] = np.nan
        before, after = (np.take_along_axis(off, side, axis=1) for side in (left, right))
        most = estimate + np.fmax(before, after) + 0.5 * np.nan_to_num(np.abs(before - after))
        doubtful |= ~(most <= value.max(axis=1)[:, None] + CLEARLY[which]) & (estimate > -np.inf)
    return doubtful


def _march_tops(study: Study, plant: Charged, batch: Batch, rough: float, tolerance: float, found: list[Floats], worth: float) -> Moments:
    """March the failures between the samples where the estimates `found` are highest, and where they bend; and those at a second summit that
    is nearly as high; and where the reactant that runs out first changes, for there the curves have a kink; and where the batch itself is hottest."""
    every, times, states_there = [np.zeros(0, dtype=int)], [np.zeros(0)], [np.zeros((0, batch.states.shape[2]))]
    for which, estimate in enumerate(found):
        top, second, near = _summits(estimate, NEARLY[which])
        for rows, worst in ((np.arange(top.size), top), (np.flatnonzero(near), second[near])):
            if rows.size:
                time, state = moments.refine(plant, batch, _estimate(study, plant, which), rows, worst, tolerance)
                every.append(np.repeat(rows, time.shape[1]))
                times.append(time.ravel())
                states_there.append(state.reshape(-1, state.shape[2]))
    for rows, before, time in (*moments.kinks(study, plant, batch), _hottest(batch, found[0].max(axis=1))):
        state = states_at(plant, rows, batch.times[rows, before], batch.states[rows, before], time[:, None], tolerance)
        every.append(rows)
        times.append(time)
        states_there.append(state[:, 0])
    return _each_once(study, plant, np.concatenate(every), np.concatenate(times), np.concatenate(states_there), rough, worth)


def _each_once(study: Study, plant: Charged, rows: np.ndarray, time: Floats, state: Floats, rough: float, worth: float) -> Moments:
    """March failures at times (M,) from states (M, R), those that are known, each once."""
    order = np.lexsort((time, rows))
    once = np.ones(order.size, dtype=bool)
    once[1:] = (rows[order][1:] != rows[order][:-1]) | (time[order][1:] != time[order][:-1])
    usable = order[once & np.isfinite(state[order]).all(axis=1)]
    return march_moments(study, plant, rows[usable], time[usable], state[usable], rough, worth)


def _hottest(batch: Batch, mtsr: Floats) -> tuple[np.ndarray, np.ndarray, Floats]:
    """Return points (M,), the sample before, and when each is hottest (s), where that comes near the highest estimate `mtsr` (N,) of its
    samples: MTSR is nowhere below the temperature of the batch itself."""
    rows = np.flatnonzero((batch.peak > mtsr - NEAR_PEAK) & (batch.hottest > 0.0) & (batch.hottest < batch.end) & batch.inside[:, 0])
    before = np.maximum((batch.inside & (batch.times <= batch.hottest[:, None])).sum(axis=1) - 1, 0)
    return rows, before[rows], batch.hottest[rows]


def _summits(estimate: Floats, nearly: float) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return for each batch the sample where an estimate (N, K) is highest, that of its second summit, and whether this is nearly as high."""
    count, last = estimate.shape[0], estimate.shape[1] - 1
    rows, top = np.arange(count), estimate.argmax(axis=1)
    padded = np.pad(estimate, ((0, 0), (1, 1)), constant_values=-np.inf)
    summit = (estimate >= padded[:, :-2]) & (estimate >= padded[:, 2:]) & np.isfinite(estimate)
    apart = np.abs(np.arange(last + 1) - top[:, None]) > 1
    other = np.where(summit & apart, estimate, -np.inf)
    second = other.argmax(axis=1)
    return top, second, other[rows, second] > estimate[rows, top] - nearly


def _again(
    study: Study, plant: Charged, batch: Batch, hot: Moments, urgent: Moments, few: int, tolerance: float, worth: float
) -> Moments:
    """March the hottest and the most urgent moments of each point again, at full tolerance; and the most urgent one elsewhere in the batch
    where it is nearly so."""
    picked = []
    for which, (marched, most) in enumerate(((hot, 1), (urgent, few))):
        score = score_of(marched, which)
        picked += [marched.at(first_of(marched, score, most)), marched.at(first_of(marched, elsewhere(batch, marched, score, which), 1))]
    rows, time, begin = (np.concatenate([getattr(p, of) for p in picked]) for of in ("rows", "time", "begin"))
    return _each_once(study, plant, rows, time, begin, tolerance, worth)


def _estimate(study: Study, plant: Charged, which: int) -> moments.Estimate:
    return lambda rows, times, state: moments.estimates(study, plant, rows, times, state)[which]
