"""Cooling failure over a whole batch: MTSR and time to maximum rate at their worst moments, T_D24, rises, criticality class.

Estimates (`moments.py`) tell which moments are marched; all figures come from marches (`adiabatic.py`). N points.
"""

from dataclasses import dataclass, replace

import numpy as np

from sweep.plant import adiabatic, moments, states
from sweep.plant.criticality import classify
from sweep.plant.onward import states_at
from sweep.plant.rates import closed_form_tmr
from sweep.plant.recipe import Charged
from sweep.plant.samples import Batch
from sweep.plant.td24 import find_td24
from sweep.plant.values import Floats
from sweep.study.model import Study

WINDOWS = 4  # stretches of the batch, in each of which the most suspicious moment is marched; twice as many where reactions compete
WORTH = 0.5  # of the estimate's logarithm: a moment less urgent than the worst by more than this is not marched to its maximum rate
NONE = -1.0  # no moment is: near the worst one the closed form alone tells which is worse
NEARLY = (1.5, 0.1)  # K, and of the closed form's logarithm: a second summit that is lower by less is looked at as closely
LITTLE = 0.1  # likewise among all samples of a batch, to begin with
NUDGE = 1e-6  # of the closed form's logarithm, added to that of an equal bound
FIRST = 3  # moments of a point that are marched again: where the time to maximum rate jumps, the very worst may fall to either side
MEANINGLESS = 1e15  # s; a closed form beyond this says that nothing gives off heat, not how long it takes
CLOSE = 0.0025  # of the batch time; the marches left and right of the worst one are brought at least this near
ROUNDS = 6  # of marches where they are not: each in a third of the bracket before


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
    return _decompose(study, plant, found, ~(urgency < worst[rows] - worth), tolerance)


def _decompose(study: Study, plant: Charged, found: Moments, wanted: np.ndarray, tolerance: float) -> Moments:
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


def worst_moments(study: Study, plant: Charged, batch: Batch, tolerance: float) -> Moments:
    """Return the failures marched in search of the worst ones, several for every point; the last are the worst, at full tolerance.

    The search itself may be rougher: it decides only which moments are the worst, and those are marched again.
    """
    rough, autocatalytic = min(10.0 * tolerance, 1e-5), adiabatic.speeds_itself_up(study)
    rows = np.arange(batch.times.shape[0])
    found = [np.where(batch.inside, e, -np.inf) for e in moments.estimates(study, plant, rows, batch.times, batch.states)]
    astray = autocatalytic or may_mislead(study)
    worth, few = (np.inf, FIRST) if astray else (NONE, 1)
    marched = _march_samples(study, plant, batch, rough, autocatalytic) if astray else _march_estimated(study, plant, batch, rough, found)
    marched = marched.joined(_march_tops(study, plant, batch, rough, tolerance, found, worth))
    hot = urgent = _narrowed(study, plant, batch, marched, 0, rough, NONE)
    if astray:  # marches alone tell: what was not marched to its maximum rate is slower
        urgent = replace(marched, urgency=np.where(np.isinf(marched.tmr), -np.inf, marched.urgency))
    if adiabatic.purposes(study, "decomposition"):
        urgent = _narrowed(study, plant, batch, urgent, 1, rough, worth)
    return _again(study, plant, batch, hot, urgent, few, tolerance)


def may_mislead(study: Study) -> bool:
    """Tell whether completion on paper may end elsewhere than a march: reactions stop at equilibrium or take up heat, or feeds go on (and the
    highest temperature may come before the end). Where reactions only compete it is a good guide, and more moments are marched. Of the
    study as written: no point's search depends on its neighbours."""
    synthesis, settings = adiabatic.purposes(study, "synthesis"), study.failure
    feeds = settings is not None and (settings.feeds != "stop" or settings.feeds_stop_after > 0.0)
    cold = any(study.values.get(f"reactions.{study.reactions[j].name}.heat.value", 0.0) > 0.0 for j in synthesis)
    return feeds or cold or any(study.reactions[j].reversible for j in synthesis)


def _march_samples(study: Study, plant: Charged, batch: Batch, rough: float, autocatalytic: bool) -> Moments:
    """March the failure at every sample of the batches, and the decomposition where it may be the fastest of its batch.

    The closed form is shorter than the truth unless the decomposition speeds itself up: what it puts beyond the shortest march is slower.
    """
    rows, columns = np.nonzero(batch.inside)
    marched = march_moments(study, plant, rows, batch.times[rows, columns], batch.states[rows, columns], rough, LITTLE)
    fastest = -np.log(plant.values.get("failure.horizon"))
    known = ~marched.censored & np.isfinite(marched.tmr)
    np.maximum.at(fastest, rows[known], -np.log(np.maximum(marched.tmr[known], 1e-3)))
    return _decompose(study, plant, marched, np.isinf(marched.tmr) & (autocatalytic | (marched.urgency > fastest[rows] - WORTH)), rough)


def _march_estimated(study: Study, plant: Charged, batch: Batch, rough: float, found: list[Floats]) -> Moments:
    """March the failures that the estimates `found` point at, among the samples."""
    windows = WINDOWS if len(adiabatic.purposes(study, "synthesis")) < 2 else 2 * WINDOWS
    pairs = _coarse(batch, found, [e.argmax(axis=1) for e in found], windows)
    return march_moments(study, plant, pairs[:, 0], batch.times[tuple(pairs.T)], batch.states[tuple(pairs.T)], rough, WORTH)


def _march_tops(study: Study, plant: Charged, batch: Batch, rough: float, tolerance: float, found: list[Floats], worth: float) -> Moments:
    """March the failures between the samples where the estimates `found` are highest, and where they bend; and those at a second summit that
    is nearly as high."""
    every, times, states_there = [], [], []
    for which, estimate in enumerate(found):
        top, second, near = _summits(estimate, NEARLY[which])
        for rows, worst in ((np.arange(top.size), top), (np.flatnonzero(near), second[near])):
            if rows.size:
                time, state = moments.refine(plant, batch, _estimate(study, plant, which), rows, worst, tolerance)
                every.append(np.repeat(rows, time.shape[1]))
                times.append(time.ravel())
                states_there.append(state.reshape(-1, state.shape[2]))
    return _march_grid(study, plant, np.concatenate(every), np.concatenate(times)[:, None], np.concatenate(states_there)[:, None], rough, worth)


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
    end = np.where(batch.inside, batch.times, 0.0).max(axis=1)
    score = _score(urgent, 1)
    place, best = _best(urgent, score, end.size)
    away = np.abs(urgent.time - np.where(place >= 0, urgent.time[place], 0.0)[urgent.rows]) > 2.0 * CLOSE * end[urgent.rows]
    elsewhere = np.where(away & (score > best[urgent.rows] - NEARLY[1]), score, -np.inf)
    hottest, fastest = _first(hot, _score(hot, 0), 1), np.concatenate([_first(urgent, score, few), _first(urgent, elsewhere, 1)])
    rows, time = (np.concatenate([getattr(hot, of)[hottest], getattr(urgent, of)[fastest]]) for of in ("rows", "time"))
    begin = np.concatenate([hot.begin[hottest], urgent.begin[fastest]])
    _, once = np.unique(np.stack([rows, time]), axis=1, return_index=True)
    return march_moments(study, plant, rows[once], time[once], begin[once], tolerance)


def _first(marched: Moments, score: Floats, few: int) -> np.ndarray:
    """Return the places of each point's few highest scores."""
    order = np.lexsort((-marched.time, score, marched.rows))[::-1]
    rows = marched.rows[order]
    begins = np.flatnonzero(np.diff(rows, prepend=-1))
    rank = np.arange(rows.size) - np.repeat(begins, np.diff(begins, append=rows.size))
    found: np.ndarray = order[(rank < few) & np.isfinite(score[order])]
    return found


def _march_grid(
    study: Study, plant: Charged, rows: np.ndarray, time: Floats, state: Floats, rough: float, worth: float
) -> Moments:
    """March failures at times (M, K) from states (M, K, R) of points `rows` (M,), each time once."""
    every, flat = np.repeat(rows, time.shape[1]), state.reshape(-1, state.shape[2])
    _, first = np.unique(np.stack([every, time.ravel()]), axis=1, return_index=True)
    usable = first[np.isfinite(flat[first]).all(axis=1)]
    return march_moments(study, plant, every[usable], time.ravel()[usable], flat[usable], rough, worth)


def _estimate(study: Study, plant: Charged, which: int) -> moments.Estimate:
    return lambda rows, times, state: moments.estimates(study, plant, rows, times, state)[which]


def _coarse(batch: Batch, found: list[Floats], tops: list[np.ndarray], windows: int) -> np.ndarray:
    """Return (row, sample) pairs to march, without repeats: the top of each estimate in each stretch, and the tops' neighbours."""
    count = batch.times.shape[0]
    rows, last = np.arange(count), np.maximum(batch.inside.sum(axis=1) - 1, 0)
    end = batch.times[rows, last]
    share = batch.times / np.where(end > 0.0, end, 1.0)[:, None]
    stretch = np.minimum((share * windows).astype(int), windows - 1)
    columns = [np.where(stretch == part, e, -np.inf).argmax(axis=1) for e in found for part in range(windows)]
    columns += [np.clip(top + d, 0, last) for top in tops for d in (-1, 1)]
    pairs = np.unique(np.stack([np.tile(rows, len(columns)), np.concatenate(columns)], axis=1), axis=0)
    kept: np.ndarray = pairs[batch.inside[tuple(pairs.T)]]
    return kept


def _score(marched: Moments, which: int) -> Floats:
    """Return what is highest at the worst moment: MTSR (K), or minus ln TMRad; -inf where there is none.

    Where a decomposition was not marched, its closed form stands in, corrected as at the point's shortest one that was.
    """
    if which == 0:
        return np.where(marched.ok, marched.mtsr, -np.inf)
    known = marched.ok & np.isfinite(marched.tmr)
    exact = -np.log(np.maximum(np.where(known, marched.tmr, 1.0), 1e-3))
    exact += np.where(marched.censored, NUDGE * np.clip(marched.urgency, -1e3, 1e3), 0.0)  # among equal bounds the most urgent is the worst
    count = int(marched.rows.max(initial=0)) + 1
    place = _best(marched, np.where(known & ~marched.censored, exact, -np.inf), count)[0]
    shift, some = np.zeros(count), place >= 0
    shift[some] = marched.urgency[place[some]] - exact[place[some]]
    return np.where(known, exact, np.where(marched.ok, marched.urgency - shift[marched.rows], -np.inf))


def _best(marched: Moments, score: Floats, count: int) -> tuple[np.ndarray, Floats]:
    """Return for each point the place of its highest score (-1: none) and that score."""
    order = np.lexsort((-marched.time, score, marched.rows))
    place, best = np.full(count, -1), np.full(count, -np.inf)
    place[marched.rows[order]] = order
    known = place >= 0
    best[known] = score[place[known]]
    return np.where(np.isfinite(best), place, -1), best


def _narrowed(study: Study, plant: Charged, batch: Batch, marched: Moments, which: int, rough: float, worth: float) -> Moments:
    """March on around each point's worst moment until its neighbours are close, then at the top of the parabola through the three."""
    count = plant.values.count
    end = np.where(batch.inside, batch.times, 0.0).max(axis=1)
    for last in [False] * ROUNDS + [True]:
        score = _score(marched, which)
        place, best = _best(marched, score, count)
        rows = np.flatnonzero(place >= 0)
        middle = marched.time[place[rows]]
        low, high = _neighbours(marched, rows, middle, end)
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
            marched = marched.joined(_march_grid(study, plant, rows, time, _states(plant, batch, rows, time, rough), rough, worth))
    return marched


def _states(plant: Charged, batch: Batch, rows: np.ndarray, time: Floats, tolerance: float) -> Floats:
    """Return the states (M, K, R) at times (M, K) ascending, marched on from the sample before the first."""
    sample = np.maximum((batch.times[rows] <= time[:, :1]).sum(axis=1) - 1, 0)
    return states_at(plant, rows, batch.times[rows, sample], np.nan_to_num(batch.states[rows, sample], nan=300.0), time, tolerance)


def _vertex(marched: Moments, score: Floats, rows: np.ndarray, low: Floats, middle: Floats, high: Floats, best: Floats) -> Floats:
    """Return where the parabola through a worst moment and its neighbours is highest, (M,); the moment itself where there is none."""
    at_low, at_high = (_score_at(marched, score, rows, time) for time in (low, high))
    top = best[rows]
    with np.errstate(invalid="ignore", divide="ignore"):
        a, b = (middle - low) ** 2 * (top - at_high), (middle - high) ** 2 * (top - at_low)
        bend = (middle - low) * (top - at_high) - (middle - high) * (top - at_low)
        found = middle - 0.5 * (a - b) / bend
    return np.where(np.isfinite(found) & (found > low) & (found < high), found, middle)


def _score_at(marched: Moments, score: Floats, rows: np.ndarray, time: Floats) -> Floats:
    """Return the score of the failure of each of `rows` at a marched time, (M,)."""
    wanted = np.full(int(marched.rows.max(initial=0)) + 1, np.nan)
    wanted[rows] = time
    here = np.flatnonzero(marched.time == wanted[marched.rows])
    found = np.full(wanted.size, -np.inf)
    found[marched.rows[here]] = score[here]
    return found[rows]


def _neighbours(marched: Moments, rows: np.ndarray, middle: Floats, end: Floats) -> tuple[Floats, Floats]:
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


def failure_figures(study: Study, plant: Charged, batch: Batch, process: Floats, tolerance: float) -> tuple[dict[str, Floats], list[list[str]]]:
    """Return the failure columns, each (N,), and per point why one has no value. process: highest normal temperature (K)."""
    count = plant.values.count
    marched = worst_moments(study, plant, batch, tolerance)
    hot, mtsr = _best(marched, _score(marched, 0), count)
    known = hot >= 0
    found = {"mtsr_K": np.where(known, mtsr, np.nan), "mtsr_time_s": np.where(known, marched.time[hot], np.nan)}
    reasons: list[list[str]] = [[] for _ in range(count)]
    for n in np.flatnonzero(~known).tolist():
        reasons[n].append("mtsr, tmr_ad, td24, criticality_class: no march after a cooling failure came to an end")
    _urgent(study, plant, marched, known, found, tolerance)
    for n in marched.rows[np.isnan(marched.tmr)].tolist():
        reasons[n].append("tmr_ad, td24: a march after a cooling failure did not come to its end")
    _rises(study, plant, marched, hot, known, found)
    mtt = plant.values.get("failure.mtt", np.nan)
    td24 = plant.values.get("failure.td24") if plant.values.has("failure.td24") else None
    if td24 is not None:
        found["td24_K"], found["td24_censored"] = np.where(known, td24, np.nan), np.zeros(count)
    found["mtt_K"] = np.array(mtt)
    found["criticality_class"], why = classify(process, found["mtsr_K"], mtt, found["td24_K"])
    for text, reason in zip(why, reasons, strict=True):
        if text:
            reason.append(f"criticality_class: {text}")
    if not plant.values.has("failure.mtt"):
        for reason in reasons:
            reason.append("mtt: not given in [failure]")
    if not adiabatic.purposes(study, "decomposition"):
        for reason in reasons:
            reason.append("tmr_ad, td24: not assessed, no reaction has the purpose decomposition")
    return found, reasons


def _urgent(study: Study, plant: Charged, marched: Moments, known: np.ndarray, found: dict[str, Floats], tolerance: float) -> None:
    """Add the least time to maximum rate, its closed form, and T_D24 of the same mixture."""
    count = plant.values.count
    names: tuple[str, ...] = ("tmr_ad_s", "tmr_ad_censored", "tmr_ad_time_s", "tmr_ad_closed_form_s", "td24_K", "td24_censored")
    found.update({name: np.full(count, np.nan) for name in names})
    decomposes = adiabatic.purposes(study, "decomposition")
    if not decomposes or not known.any():
        return
    place = _most_urgent(marched, count)
    have = np.flatnonzero(known & (place >= 0))
    at_worst = place[have]
    found["tmr_ad_s"][have] = marched.tmr[at_worst]
    found["tmr_ad_censored"][have] = marched.censored[at_worst]
    found["tmr_ad_time_s"][have] = marched.time[at_worst]
    block, state = marched.block[at_worst], marched.state[at_worst]
    nz = plant.program.structure.sources.shape[0]
    closed = closed_form_tmr(adiabatic.flow_of(plant, have, block, state), decomposes, state[:, nz])
    found["tmr_ad_closed_form_s"][have] = np.where(closed < MEANINGLESS, closed, np.nan)
    if not plant.values.has("failure.td24"):
        found["td24_K"][have], found["td24_censored"][have] = find_td24(study, plant, have, block, state, tolerance)
    rise = adiabatic.complete_rise(study, plant, have, block, state, "decomposition")
    found["adiabatic_rise_decomposition_K"] = np.full(count, np.nan)
    found["adiabatic_rise_decomposition_K"][have] = rise


def _most_urgent(marched: Moments, count: int) -> np.ndarray:
    """Return for each point the place of the shortest time to maximum rate (-1: none); among equal bounds the most urgent one.

    A point of which one such march failed has none: what it would have shown is not known.
    """
    usable = np.flatnonzero(marched.ok & np.isfinite(marched.tmr))
    order = usable[np.lexsort((marched.urgency[usable], -marched.tmr[usable], marched.rows[usable]))]
    place = np.full(count, -1)
    place[marched.rows[order]] = order
    place[marched.rows[np.isnan(marched.tmr)]] = -1
    return place


def _rises(study: Study, plant: Charged, marched: Moments, hot: np.ndarray, known: np.ndarray, found: dict[str, Floats]) -> None:
    """Add the adiabatic rises of the whole synthesis, and of the decomposition of what the worst failure leaves."""
    total = plant.brought.total()
    given_off = states.reference_heats(study, plant)
    T = plant.values.get("recipe.charge.temperature")
    capacity = (total * sum(plant.cp[:, :, k] * T[:, None] ** k for k in range(4))).sum(axis=1)
    found["adiabatic_rise_synthesis_K"] = states.complete(study, total, given_off) / capacity
    found.setdefault("adiabatic_rise_decomposition_K", np.full(plant.values.count, np.nan))
