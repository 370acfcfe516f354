"""Batches marched with samples on the way to their end, and the largest accumulation between the samples.

N points, K times, R rows of state.
"""

from dataclasses import dataclass

import numpy as np

from sweep.kernel import layout as at
from sweep.kernel.engine import Marched, march
from sweep.plant import states
from sweep.plant.onward import states_at
from sweep.plant.recipe import Charged
from sweep.plant.values import Floats
from sweep.study.model import Study

SAMPLES = 33  # evenly from the start to the batch's end, beside the recipe's own boundaries
SAME = 1e-9  # of the batch time; two moments closer than this are one
FINE = 33  # between the neighbours of the highest one


@dataclass(frozen=True)
class Batch:
    """times (N, K) s ascending, states (N, K, R), inside (N, K): up to the batch's end and marched; end (N,) s, at_end (N, R);
    hottest (N,) s: when its temperature is highest, peak (N,) K."""

    times: Floats
    states: Floats
    inside: np.ndarray
    end: Floats
    at_end: Floats
    hottest: Floats
    peak: Floats

    def last(self) -> np.ndarray:
        """Return the place (N,) of each batch's last sample inside."""
        return np.maximum(self.inside.sum(axis=1) - 1, 0)

    def over(self) -> Floats:
        """Return the time (N,) s of each batch's last sample inside."""
        return np.where(self.inside, self.times, 0.0).max(axis=1)


def march_batches(plant: Charged, tolerance: float) -> tuple[Marched, Batch]:
    """March batches from start to the longest time; return what that left, and samples up to each batch's end.

    A batch that runs to its target is marched twice: where it ends is not known before.
    """

    def marched_with(times: Floats | None) -> Marched:
        return march(plant.program, plant.blocks, plant.starts, plant.constants, times, tolerance)

    end = plant.constants[:, at.END_FIXED]
    if plant.study.batch_to_target:
        end = _end(marched_with(None))[0]
    times = _times(plant, end)
    marched = marched_with(times)
    end, at_end = _end(marched)
    inside = (times <= end[:, None]) & np.isfinite(marched.samples[:, :, 0])
    times = np.where(np.isnan(times), end[:, None], times)  # places without a sample, outside
    return marched, Batch(times, marched.samples, inside, end, at_end, marched.out[:, at.OUT_T_MAX_TIME], marched.out[:, at.OUT_T_MAX])


def _times(plant: Charged, end: Floats) -> Floats:
    """Return when batches that end at `end` (N,) s are looked at, (N, K) ascending, each time once; NaN last."""
    even = np.linspace(0.0, 1.0, SAMPLES) * end[:, None]
    times = np.sort(np.concatenate([even, np.where(plant.boundaries <= end[:, None], plant.boundaries, np.nan)], axis=1), axis=1)
    times[:, 1:][np.diff(times, axis=1) <= SAME * end[:, None]] = np.nan
    return np.sort(times, axis=1)


def _end(marched: Marched) -> tuple[Floats, Floats]:
    """Return when each batch ended (s), (N,), and its state then, (N, R): where the march broke off, if it did not come so far."""
    over = np.isfinite(marched.out[:, at.OUT_END_TIME])
    end = np.where(over, marched.out[:, at.OUT_END_TIME], marched.out[:, at.OUT_TIME])
    return end, np.where(over[:, None], marched.at_end, marched.at_last)


def largest_accumulation(study: Study, plant: Charged, batch: Batch, tolerance: float) -> Floats:
    """Return the largest accumulation up to the batch's end, (N,): the highest sample, refined between its neighbours."""

    def share(rows: np.ndarray, times: Floats, state: Floats) -> Floats:
        value = states.accumulation(study, plant, rows, state, times)
        return np.where(np.isfinite(value), value, -np.inf)

    rows = np.arange(plant.values.count)
    value = np.where(batch.inside, share(rows, batch.times, batch.states), -np.inf)
    worst, last = value.argmax(axis=1), batch.inside.sum(axis=1) - 1
    highest = value[rows, worst]
    rows = np.flatnonzero((worst > 0) & (worst < last) & np.isfinite(highest))
    if rows.size:
        low, high = worst[rows] - 1, worst[rows] + 1
        start, stop = batch.times[rows, low], batch.times[rows, high]
        fine = start[:, None] + np.linspace(0.0, 1.0, FINE) * (stop - start)[:, None]
        state = states_at(plant, rows, start, batch.states[rows, low], fine, tolerance)
        value = share(rows, fine, state)
        when = np.sort(start[:, None] + top_places(value) / (FINE - 1) * (stop - start)[:, None], axis=1)
        there = states_at(plant, rows, start, batch.states[rows, low], when, tolerance)
        highest[rows] = np.fmax(np.fmax(highest[rows], value.max(axis=1)), share(rows, when, there).max(axis=1))
    return np.where(np.isfinite(highest), highest, np.nan)


def top_places(value: Floats) -> Floats:
    """Return two places (M, 2) between the samples of curves (M, K) where they may be highest: the top of the parabola through the
    highest sample and its neighbours, and where the lines left and right of these meet (a reactant runs out there: a kink)."""
    rows, last = np.arange(value.shape[0]), value.shape[1] - 1
    k = np.clip(value.argmax(axis=1), 2, last - 2)
    v = [value[rows, k + d] for d in range(-2, 3)]
    with np.errstate(divide="ignore", invalid="ignore"):
        vertex = (v[1] - v[3]) / (2.0 * (v[1] - 2.0 * v[2] + v[3]))
        rising, falling = v[1] - v[0], v[4] - v[3]
        meet = (v[3] - v[1] - rising - falling) / (rising - falling)
    places = [k + np.where(np.isfinite(x) & (np.abs(x) <= 1.0), x, 0.0) for x in (vertex, meet)]
    return np.stack(places, axis=1)
