"""Where in a batch a cooling failure is worst: estimates from stoichiometry and closed forms that tell the marches where to look.

The estimates decide only which moments are marched; every figure that is reported comes from a march (`failure.py`).
N points, K times, R rows of state, I species.
"""

import itertools
from collections.abc import Callable

import numpy as np

from sweep.kernel import layout as at
from sweep.plant import rates, states
from sweep.plant.adiabatic import feeding_time, purposes
from sweep.plant.chemistry import R
from sweep.plant.onward import states_at
from sweep.plant.recipe import Charged
from sweep.plant.samples import Batch
from sweep.plant.values import Floats
from sweep.study.model import Study

FINE = 33  # times between the neighbours of the highest sample
COLDEST = 100.0  # K; an endothermic completion is estimated no colder


Estimate = Callable[[np.ndarray, Floats, Floats], Floats]  # points (M,), times (M, K), states (M, K, R) -> (M, K)


def synthesis_rise(study: Study, plant: Charged, rows: np.ndarray, times: Floats, state: Floats) -> tuple[Floats, dict[int, Floats], Floats]:
    """Return the temperature (N, K) that complete synthesis would reach after a failure, the moles left, (N, K) each, and the volume (m3)."""
    nz, values = plant.program.structure.sources.shape[0], plant.values
    moles, T = states.amounts_of(plant, rows, state, times), np.ascontiguousarray(state[:, :, nz])
    delay = np.stack([feeding_time(study, plant, rows, t) for t in times.T], axis=1)
    share = states.share_at(plant, rows, times + delay)
    if delay.any():
        coming = share - states.share_at(plant, rows, times)
        moles = {i: n + np.einsum("nfk,nf->nk", coming, plant.brought.fed[rows, :, i]) for i, n in moles.items()}
    heat, left = states.completed(study, moles, states.reference_heats(study, plant)[rows])
    wall = values.get("vessel.heat_capacity")[rows] * float(study.failure is not None and study.failure.wall)
    cp = plant.cp[rows]
    powers = range(1, plant.program.structure.cp_terms)
    capacity = wall[:, None] + np.zeros(T.shape)
    for i, n in moles.items():
        capacity += n * sum((cp[:, i, k, None] * T**k for k in powers), cp[:, i, 0, None])
    volume = plant.brought.volume[rows, None] + np.einsum("nfk,nf->nk", share, plant.brought.feed_volume[rows])
    return T + heat / capacity, left, volume


def log_urgency(study: Study, plant: Charged, rows: np.ndarray, T: Floats, moles: dict[int, Floats], volume: Floats) -> Floats:
    """Return minus the logarithm of the closed form of the time to maximum rate (N, K), up to a constant per point."""
    block = plant.blocks[rows, 0]
    terms, _, _ = rates.parts_of_block(plant, block)
    delta = plant.constants[rows, at.DELTA][:, None]
    total, k, given_off = np.zeros_like(T), 0, states.reference_heats(study, plant)[rows]
    T = np.maximum(T, COLDEST)
    inverse = 1.0 / volume
    with np.errstate(divide="ignore", over="ignore", invalid="ignore"):
        for j, reaction in enumerate(plant.program.structure.reactions):
            if study.reactions[j].purpose == "decomposition":
                energy = -terms[:, k, 1][:, None]
                rate = np.exp(np.clip(terms[:, k, 0][:, None] - energy / T, -700.0, 700.0)) * volume
                for factor in reaction[0].factors:
                    x = moles[factor.species] * inverse
                    rate = rate * np.maximum(x, 0.0) ** factor.power
                    if factor.extra != 0.0:
                        rate = rate * (np.abs(x) + delta) ** factor.extra
                total += np.maximum(rate * given_off[:, j][:, None], 0.0) * energy * R / T**2
            k += len(reaction)
        capacity = sum(n * plant.cp[rows, i, 0, None] for i, n in moles.items())
        found = np.log(total / np.where(capacity > 0.0, capacity, 1.0))
    return np.where(np.isnan(found), -np.inf, found)


def estimates(study: Study, plant: Charged, rows: np.ndarray, times: Floats, state: Floats) -> list[Floats]:
    """Return what is to be looked at, highest where a failure is worst, each (N, K): MTSR and, with a decomposition, its urgency."""
    T, moles, volume = synthesis_rise(study, plant, rows, times, state)
    found = [T]
    if purposes(study, "decomposition"):
        found.append(log_urgency(study, plant, rows, T, moles, volume))
    return found


def kinks(study: Study, plant: Charged, batch: Batch) -> list[tuple[np.ndarray, np.ndarray, Floats]]:
    """Return where the reactant that runs out first in a synthesis reaction changes: points (M,), the sample before (M,), time (M,) s.

    What two reactants are short of each other is untouched by their own reaction, so it moves with the feeds, evenly.
    """
    rows, index = np.arange(batch.times.shape[0]), {s.name: i for i, s in enumerate(study.species)}
    moles = states.amounts_of(plant, rows, batch.states, batch.times)
    found = []
    for j in purposes(study, "synthesis"):
        used = [(index[s], -n) for s, n in study.reactions[j].stoichiometry.items() if n < 0.0]
        for (a, nu_a), (b, nu_b) in itertools.combinations(used, 2):
            short = moles[a] / nu_a - moles[b] / nu_b
            crosses = (short[:, :-1] * short[:, 1:] < 0.0) & batch.inside[:, :-1] & batch.inside[:, 1:]
            at, before = np.nonzero(crosses)
            low, high = short[at, before], short[at, before + 1]
            start, stop = batch.times[at, before], batch.times[at, before + 1]
            found.append((at, before, start + (stop - start) * low / (low - high)))
    return found


def refine(plant: Charged, batch: Batch, of: Estimate, rows: np.ndarray, worst: np.ndarray, tolerance: float) -> tuple[Floats, Floats]:
    """Return four times (M, 4) near the highest estimate around sample `worst` (M,) of points `rows` (M,), and the states (M, 4, R)."""
    last = np.maximum(batch.inside[rows].sum(axis=1) - 1, 0)
    low, high = np.maximum(worst - 1, 0), np.minimum(worst + 1, last)
    start, stop, peak = (batch.times[rows, k] for k in (low, high, worst))
    begin = np.nan_to_num(batch.states[rows, low], nan=300.0)
    fine = start[:, None] + np.linspace(0.0, 1.0, FINE) * (stop - start)[:, None]
    fine = np.sort(np.concatenate([fine, peak[:, None]], axis=1), axis=1)
    state = states_at(plant, rows, start, begin, fine, tolerance)
    value = np.where(np.isfinite(state[:, :, 0]), of(rows, fine, state), -np.inf)
    times = _candidates(fine, value)
    return times, states_at(plant, rows, start, begin, times, tolerance)


def _candidates(t: Floats, value: Floats) -> Floats:
    """Return per row, ascending: the highest sample, its neighbours, and where the lines left and right of it meet (a kink)."""
    rows, last = np.arange(t.shape[0]), t.shape[1] - 1
    top = value.argmax(axis=1)
    k = np.clip(top, 2, last - 2)
    a, c = t[rows, k - 1], t[rows, k + 1]
    fa, fc = value[rows, k - 1], value[rows, k + 1]
    with np.errstate(divide="ignore", invalid="ignore"):
        rising = (fa - value[rows, k - 2]) / (a - t[rows, k - 2])
        falling = (value[rows, k + 2] - fc) / (t[rows, k + 2] - c)
        meet = (fc - fa + rising * a - falling * c) / (rising - falling)
    best = t[rows, top]
    kink = np.where(np.isfinite(meet) & (meet >= a) & (meet <= c), meet, best)
    near = [t[rows, np.clip(top + d, 0, last)] for d in (-1, 1)]
    return np.sort(np.stack([best, kink, *near], axis=1), axis=1)
