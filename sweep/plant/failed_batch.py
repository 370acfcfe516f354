"""One batch and its cooling failures: MTSR and time to maximum rate against the time of failure, and the path after a failure."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from sweep.base.errors import SweepError
from sweep.kernel import layout as at
from sweep.kernel.engine import march
from sweep.plant import adiabatic, rates, states
from sweep.plant.course import charge_plant
from sweep.plant.marched import march_moments
from sweep.plant.onward import march_on
from sweep.plant.profile import batch_end
from sweep.plant.recipe import Charged
from sweep.plant.sense import one_point
from sweep.plant.values import Floats
from sweep.study.model import Study

if TYPE_CHECKING:
    import pandas as pd

DRAWN = 101  # moments that draw well
_PATH_TIMES = 241
_GRID = 4001  # times of a path to begin with
_STEEP = 2.0  # K; between times further apart than this a peak of the rate could hide
_CLOSER, _BETWEEN = 4, 65  # marches of a path, and times between two neighbours of what is sought
_STILL = 1e-9  # of the largest heat flow on a path; below, nothing is happening and the stage before goes on


@dataclass(frozen=True)
class FailurePath:
    """What happens after a cooling failure with every reaction running: lines over time, and when temperatures are reached.

    lines: time_after_failure_s, temperature_K, stage; reaches: (name, temperature K, seconds after the failure or None).
    """

    failure_time: float
    lines: pd.DataFrame
    reaches: tuple[tuple[str, float, float | None], ...]


def _one(study: Study, point: Mapping[str, float] | None) -> Charged:
    if not study.asks_failure:
        raise SweepError("[failure] is not written in the study, and no limit asks for a failure figure")
    return charge_plant(study, one_point(study, point))


def failure_times(study: Study, point: Mapping[str, float] | None = None, times: Sequence[float] | None = None) -> pd.DataFrame:
    """Return temperature, MTSR, time to maximum rate and accumulation were cooling lost at times (s) of a batch; SI.

    Times in any order; NaN beyond the batch's end. SweepError where the study asks for no failure.
    """
    import pandas as pd

    plant = _one(study, point)
    tolerance = float(study.values["accuracy.relative"])
    end = batch_end(plant, tolerance)
    wanted = np.asarray(times, dtype=np.float64) if times is not None else _drawn(plant, end)
    order = np.argsort(wanted, kind="stable")
    ascending = wanted[order][None, :]
    state = march(plant.program, plant.blocks, plant.starts, plant.constants, ascending, tolerance).samples
    good = np.isfinite(state[0]).all(axis=1) & (ascending[0] <= end * (1.0 + 1e-12))
    rows = np.zeros(int(good.sum()), dtype=int)
    marched = march_moments(study, plant, rows, ascending[0][good], state[0][good], tolerance)
    nz = plant.program.structure.sources.shape[0]
    share = states.accumulation(study, plant, np.zeros(1, dtype=int), np.nan_to_num(state, nan=300.0), ascending)[0]
    columns = {"time_s": ascending[0], "temperature_K": state[0, :, nz]}
    for name, values in (
        ("mtsr_K", np.where(marched.ok, marched.mtsr, np.nan)),
        ("tmr_ad_s", np.where(marched.ok & np.isfinite(marched.tmr), marched.tmr, np.nan)),
        ("tmr_ad_censored", marched.censored),
    ):
        columns[name] = np.full(wanted.size, np.nan)
        columns[name][good] = values
    columns["accumulation"] = np.where(good, share, np.nan)
    table = pd.DataFrame(columns)
    back = np.empty_like(order)
    back[order] = np.arange(order.size)
    return table.iloc[back].reset_index(drop=True)


def _drawn(plant: Charged, end: float) -> Floats:
    times = np.union1d(np.linspace(0.0, end, DRAWN), plant.boundaries[0])
    return times[times <= end]


def failure_path(study: Study, point: Mapping[str, float] | None, time: float, levels: Mapping[str, float]) -> FailurePath:
    """Return the path after cooling is lost at `time` (s), all reactions running, and when each level (K) is reached."""
    plant = _one(study, point)
    tolerance = float(study.values["accuracy.relative"])
    nz = plant.program.structure.sources.shape[0]
    when = np.array([[min(time, batch_end(plant, tolerance))]])
    state = march(plant.program, plant.blocks, plant.starts, plant.constants, when, tolerance).samples[:, 0]
    if not np.isfinite(state).all():
        raise SweepError(f"the batch does not reach {time:g} s, where its cooling was to fail")
    rows = np.zeros(1, dtype=int)
    failed = adiabatic.fail(study, plant, rows, when[:, 0], state)
    blocks = adiabatic.path_blocks(study, plant, failed, purpose=None)
    horizon = float(study.values["failure.horizon"])
    blocks[:, -1, at.T_END] = np.maximum(blocks[:, -1, at.T_START], 0.0) + horizon
    decomposes = adiabatic.purposes(study, "decomposition")
    fine = np.concatenate([[0.0], np.geomspace(1.0, horizon, _GRID)])
    fed = adiabatic.feeding_time(study, plant, rows, when[:, 0])
    for _ in range(_CLOSER):  # around what is sought the grid is made finer and the path marched again
        marched = march_on(plant, rows, blocks, state, tolerance, fine[None, :])
        T = marched.samples[0, :, nz]
        known = np.isfinite(T)
        now = _flow_along(plant, failed, marched.samples[0], np.minimum(fine, fed))
        rate = np.where(known, now.heat[:, decomposes].sum(axis=1) / now.capacity, -np.inf)
        sought = [int(rate.argmax()), *(int(np.argmax(known & (level <= T))) for level in levels.values())]
        near = [np.linspace(fine[max(k - 1, 0)], fine[min(k + 1, fine.size - 1)], _BETWEEN) for k in sought]
        steep = np.flatnonzero(np.abs(np.diff(T)) > _STEEP)
        near.append((fine[steep, None] + np.linspace(0.0, 1.0, 9) * (fine[steep + 1] - fine[steep])[:, None]).ravel())
        before, fine = fine, np.unique(np.concatenate([fine, *near]))
    reaches = [(name, level, _first(before[known], T[known], level)) for name, level in levels.items()]
    if decomposes:
        reaches.append(_fastest(before, T, rate))
    return FailurePath(float(when[0, 0]), _lines(before, T, _stages(study, now, known)), tuple(reaches))


def _flow_along(plant: Charged, failed: adiabatic.Failed, state: Floats, fed: Floats) -> rates.Flow:
    """Return rates and heats along a path of states (K, R), when what came in within `fed` (K,) s after the failure is in."""
    count = state.shape[0]
    rows = np.zeros(count, dtype=int)
    block = adiabatic.fed_by(plant, rows, np.repeat(failed.block, count, axis=0), failed.time[0] + fed)
    return adiabatic.flow_of(plant, rows, block, np.nan_to_num(state, nan=300.0))


def _stages(study: Study, now: rates.Flow, known: np.ndarray) -> np.ndarray:
    """Return which kind of reaction gives off more heat at each time."""
    import pandas as pd

    share = [now.heat[:, adiabatic.purposes(study, p)].sum(axis=1) for p in ("synthesis", "decomposition")]
    total = np.abs(share[0]) + np.abs(share[1])
    telling = known & (total > _STILL * total.max(initial=0.0))
    stage = pd.Series(np.where(share[0] < share[1], "decomposition", "synthesis"), dtype="object")
    return stage.where(telling).ffill().bfill().fillna("synthesis").to_numpy(dtype=str)


def _fastest(times: Floats, T: Floats, rate: Floats) -> tuple[str, float, float | None]:
    """Return when and where the decomposition heats fastest; no time where it is still speeding up at the end."""
    k = int(rate.argmax())
    last = int(np.flatnonzero(np.isfinite(T))[-1])
    if rate[k] <= 0.0 or k >= last:
        return "maximum rate", np.nan, None
    return "maximum rate", float(T[k]), float(times[k])


def _first(times: Floats, T: Floats, level: float) -> float | None:
    """Return when a level is first reached, by interpolation in a fine grid; None where it is not."""
    above = np.flatnonzero(T >= level)
    if not above.size:
        return None
    k = int(above[0])
    if k == 0:
        return 0.0
    share = (level - T[k - 1]) / (T[k] - T[k - 1])
    return float(times[k - 1] + share * (times[k] - times[k - 1]))


def _lines(times: Floats, T: Floats, stage: np.ndarray) -> pd.DataFrame:
    """Return some lines of the path that draw well: spread over time and over temperature."""
    import pandas as pd

    known = np.flatnonzero(np.isfinite(T))
    spread = np.interp(np.linspace(0.0, 1.0, _PATH_TIMES), np.linspace(0.0, 1.0, known.size), known).astype(int)
    rise = np.searchsorted(T[known], np.linspace(T[known[0]], T[known[-1]], _PATH_TIMES))
    picked = np.union1d(spread, known[np.minimum(rise, known.size - 1)])
    return pd.DataFrame({"time_after_failure_s": times[picked], "temperature_K": T[picked], "stage": stage[picked]})
