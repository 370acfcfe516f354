"""The search for the worst moments of a cooling failure in each batch: where MTSR is highest, where the time to maximum rate is least.

Estimates (`moments.py`) point, marches (`marched.py`) decide. N points, K samples.
"""

from dataclasses import replace

import numpy as np

from sweep.plant import adiabatic, moments
from sweep.plant.marched import Moments, best_of, decompose, first_of, march_grid, march_moments, neighbours, score_at, score_of, summits_of
from sweep.plant.onward import states_at
from sweep.plant.recipe import Charged
from sweep.plant.samples import Batch
from sweep.plant.values import Floats
from sweep.study.model import Study

WINDOWS = 4  # stretches of the batch, in each of which the most suspicious moment is marched
WORTH = 0.3  # of the closed form's logarithm: the truth is some 5 to 30 % longer, so a moment less urgent by more than this is not marched
NONE = -1.0  # no moment is: near the worst one the closed form alone tells which is worse
NEAR_PEAK = 5.0  # K
NEARLY = (1.5, 0.1)  # K, and of the closed form's logarithm: a second summit that is lower by less is looked at as closely
LITTLE = 0.1  # likewise among all samples of a batch, to begin with
FIRST = 3  # moments of a point that are marched again: where the time to maximum rate jumps, the very worst may fall to either side
CLOSE = 0.0025  # of the batch time; the marches left and right of the worst one are brought at least this near
ROUNDS = 6  # of marches where they are not: each in a third of the bracket before


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
    marched = marched.joined(_march_tops(study, plant, batch, rough, tolerance, found, worth))
    hot = urgent = _narrowed_twice(study, plant, batch, marched, 0, rough, NONE)
    if astray:  # marches alone tell: what was not marched to its maximum rate is slower
        urgent = replace(marched, urgency=np.where(np.isinf(marched.tmr), -np.inf, marched.urgency))
    if adiabatic.purposes(study, "decomposition"):
        urgent = _narrowed_twice(study, plant, batch, urgent, 1, rough, worth)
    return _again(study, plant, batch, hot, urgent, few, tolerance)


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

    At all samples where estimates may go astray; else where the estimates `found` are highest (`_suspicious`). The closed form is shorter
    than the truth unless the decomposition speeds itself up: what it puts beyond the shortest march is slower.
    """
    wanted = batch.inside.copy()
    if not astray:
        wanted &= _suspicious(batch, found, len(adiabatic.purposes(study, "synthesis")) > 1)
    rows, columns = np.nonzero(wanted)
    marched = march_moments(study, plant, rows, batch.times[rows, columns], batch.states[rows, columns], rough, LITTLE)
    fastest = -np.log(plant.values.get("failure.horizon"))
    known = ~marched.censored & np.isfinite(marched.tmr)
    np.maximum.at(fastest, rows[known], -np.log(np.maximum(marched.tmr[known], 1e-3)))
    return decompose(study, plant, marched, np.isinf(marched.tmr) & (autocatalytic | (marched.urgency > fastest[rows] - WORTH)), rough)


def _suspicious(batch: Batch, found: list[Floats], competing: bool) -> np.ndarray:
    """Return which samples (N, K) are worth a march: the top of each estimate in each stretch, its neighbours, the ends, and, where
    reactions compete, every other one."""
    count = batch.times.shape[0]
    rows, last = np.arange(count), np.maximum(batch.inside.sum(axis=1) - 1, 0)
    end = batch.times[rows, last]
    stretch = np.minimum((batch.times / np.where(end > 0.0, end, 1.0)[:, None] * WINDOWS).astype(int), WINDOWS - 1)
    wanted = np.zeros_like(batch.inside)
    wanted[:, ::2] = competing
    wanted[rows, last] = True
    for e in found:
        top = e.argmax(axis=1)
        for place in (np.maximum(top - 1, 0), np.minimum(top + 1, last)):
            wanted[rows, place] = True
        for part in range(WINDOWS):
            wanted[rows, np.where(stretch == part, e, -np.inf).argmax(axis=1)] = True
    return wanted


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
    return march_grid(study, plant, np.concatenate(every), np.concatenate(times)[:, None], np.concatenate(states_there)[:, None], rough, worth)


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


def _again(study: Study, plant: Charged, batch: Batch, hot: Moments, urgent: Moments, few: int, tolerance: float) -> Moments:
    """March the hottest and the most urgent moments of each point again, at full tolerance; and the most urgent one elsewhere in the batch
    where it is nearly so."""
    hottest = np.concatenate([first_of(hot, score, 1) for score in (score_of(hot, 0), _elsewhere(batch, hot, 0))])
    fastest = np.concatenate([first_of(urgent, score_of(urgent, 1), few), first_of(urgent, _elsewhere(batch, urgent, 1), 1)])
    rows, time = (np.concatenate([getattr(hot, of)[hottest], getattr(urgent, of)[fastest]]) for of in ("rows", "time"))
    begin = np.concatenate([hot.begin[hottest], urgent.begin[fastest]])
    _, once = np.unique(np.stack([rows, time]), axis=1, return_index=True)
    return march_moments(study, plant, rows[once], time[once], begin[once], tolerance)


def _estimate(study: Study, plant: Charged, which: int) -> moments.Estimate:
    return lambda rows, times, state: moments.estimates(study, plant, rows, times, state)[which]


def _narrowed_twice(study: Study, plant: Charged, batch: Batch, marched: Moments, which: int, rough: float, worth: float) -> Moments:
    """Narrow each point's worst moment, and the worst one elsewhere in the batch where it is nearly so."""
    first = _narrowed(study, plant, batch, marched, which, rough, worth)
    summit = _elsewhere(batch, first, which)
    some = np.unique(first.rows[np.isfinite(summit)])
    if not some.size:
        return first
    score, count = score_of(first, which), batch.times.shape[0]
    top, own = (first.time[best_of(first, of, count)[0]] for of in (summit, score))
    away = (first.time - own[first.rows]) * np.sign(top - own)[first.rows]  # from the worst moment towards the second summit
    between = np.isin(first.rows, some) & (away > 0.0) & (away < np.abs(top - own)[first.rows])
    valley = first.time[best_of(first, np.where(between, -score, -np.inf), count)[0]]
    mine = np.isin(first.rows, some) & (away > 0.0) & (away >= np.abs(valley - own)[first.rows])
    second = Moments(*(getattr(first, name)[mine] for name in Moments.__dataclass_fields__))
    return first.joined(_narrowed(study, plant, batch, second, which, rough, worth))


def _elsewhere(batch: Batch, marched: Moments, which: int) -> Floats:
    """Return the score (M,) of summits away from their point's worst moment but nearly as bad; -inf for all else."""
    end = np.where(batch.inside, batch.times, 0.0).max(axis=1)
    score = score_of(marched, which)
    place, best = best_of(marched, score, end.size)
    middle = np.where(place >= 0, marched.time[place], 0.0) if marched.time.size else np.zeros(end.size)
    away = np.abs(marched.time - middle[marched.rows]) > 3.0 * CLOSE * end[marched.rows]
    return np.where(away & summits_of(marched, score) & (score > best[marched.rows] - NEARLY[which]), score, -np.inf)


def _narrowed(study: Study, plant: Charged, batch: Batch, marched: Moments, which: int, rough: float, worth: float) -> Moments:
    """March on around each point's worst moment until its neighbours are close, then at the top of the parabola through the three."""
    count = plant.values.count
    end = np.where(batch.inside, batch.times, 0.0).max(axis=1)
    for last in [False] * ROUNDS + [True]:
        score = score_of(marched, which)
        place, best = best_of(marched, score, count)
        rows = np.flatnonzero(place >= 0)
        middle = marched.time[place[rows]]
        low, high = neighbours(marched, rows, middle, end)
        if not last:
            wide = np.maximum(middle - low, high - middle) > CLOSE * end[rows]
            rows, middle, low, high = rows[wide], middle[wide], low[wide], high[wide]
            thirds = np.array([1.0, 2.0]) / 3.0
            left, right = low[:, None] + thirds * (middle - low)[:, None], middle[:, None] + thirds * (high - middle)[:, None]
            time = np.concatenate([left, right], axis=1)
        else:
            inner = (low < middle) & (high > middle)
            rows, middle, low, high = rows[inner], middle[inner], low[inner], high[inner]
            time = _vertex(marched, score, rows, low, middle, high, best)[:, None]
        if rows.size:
            marched = marched.joined(march_grid(study, plant, rows, time, _states(plant, batch, rows, time, rough), rough, worth))
    return marched


def _states(plant: Charged, batch: Batch, rows: np.ndarray, time: Floats, tolerance: float) -> Floats:
    """Return the states (M, K, R) at times (M, K) ascending, marched on from the sample before the first."""
    sample = np.maximum((batch.times[rows] <= time[:, :1]).sum(axis=1) - 1, 0)
    return states_at(plant, rows, batch.times[rows, sample], np.nan_to_num(batch.states[rows, sample], nan=300.0), time, tolerance)


def _vertex(marched: Moments, score: Floats, rows: np.ndarray, low: Floats, middle: Floats, high: Floats, best: Floats) -> Floats:
    """Return where the parabola through a worst moment and its neighbours is highest, (M,); the moment itself where there is none."""
    at_low, at_high = (score_at(marched, score, rows, time) for time in (low, high))
    top = best[rows]
    with np.errstate(invalid="ignore", divide="ignore"):
        a, b = (middle - low) ** 2 * (top - at_high), (middle - high) ** 2 * (top - at_low)
        bend = (middle - low) * (top - at_high) - (middle - high) * (top - at_low)
        found = middle - 0.5 * (a - b) / bend
    return np.where(np.isfinite(found) & (found > low) & (found < high), found, middle)
