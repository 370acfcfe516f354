"""The figures of cooling failure, N points: MTSR and time to maximum rate at their worst moments, T_D24, rises, criticality class."""

import numpy as np

from sweep.plant import adiabatic, states
from sweep.plant.criticality import classify
from sweep.plant.marched import Moments, best_of, mixture_block, score_of
from sweep.plant.rates import closed_form_tmr
from sweep.plant.recipe import Charged
from sweep.plant.samples import Batch
from sweep.plant.td24 import find_td24
from sweep.plant.values import Floats
from sweep.plant.worst import worst_moments
from sweep.study.model import Study

MEANINGLESS = 1e15  # s; a closed form beyond this says that nothing gives off heat, not how long it takes


def failure_figures(study: Study, plant: Charged, batch: Batch, process: Floats, tolerance: float) -> tuple[dict[str, Floats], list[list[str]]]:
    """Return the failure columns, each (N,), and per point why one has no value. process: highest normal temperature (K)."""
    count = plant.values.count
    marched = worst_moments(study, plant, batch, tolerance)
    hot, mtsr = best_of(marched, score_of(marched, 0), count)
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
    block, state = mixture_block(study, plant, marched.at(at_worst)), marched.state[at_worst]
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
