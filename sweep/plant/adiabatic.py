"""What the contents do without cooling: the synthesis to its highest temperature, the decomposition to its largest dT/dt.

Definitions: DEVELOPERS.md, Equations. Both are marches of the same balances with the cooling, stirrer and losses
left out; the vessel's wall only where the study says so.
"""

from dataclasses import dataclass

import numpy as np

from sweep.base.status import DONE, RUNAWAY, STEP_TOO_SMALL
from sweep.kernel import layout as at
from sweep.kernel.engine import Marched
from sweep.plant import rates, states
from sweep.plant.chemistry import NO_RATE
from sweep.plant.onward import cut_segments, march_on, segment_at
from sweep.plant.recipe import Charged
from sweep.plant.values import Floats
from sweep.study.model import Study

LONG = 1e9  # s, some thirty years: by then a synthesis has done what it will do
FASTER = 1.01  # a largest dT/dt that is not this many times the first is "at once": no acceleration worth the name
STILL = 0.01  # K; a rise smaller than this is none
SMALL_RISE = 50.0  # K; below it a decomposition without an acceleration is no runaway (common practice, no source)


@dataclass(frozen=True)
class Failed:
    """M failures of cooling. rows (M,): which point each belongs to; time (M,) s of the failure; state (M, R) then;
    block (M, block): the segment without cooling and feeds, time counted from the failure."""

    rows: np.ndarray
    time: Floats
    state: Floats
    block: Floats


@dataclass(frozen=True)
class Synthesis:
    """temperature (M,) K: the highest on the path (MTSR); state (M, R): where it is reached; after (M,) s: how long after the failure that
    state is; ok (M,): it was found."""

    temperature: Floats
    state: Floats
    after: Floats
    ok: np.ndarray


@dataclass(frozen=True)
class Decomposition:
    """tmr (M,) s to the largest dT/dt, the horizon where `censored` (M,); ok (M,): the march came to an end."""

    tmr: Floats
    censored: np.ndarray
    ok: np.ndarray


def purposes(study: Study, purpose: str) -> list[int]:
    """Return which reactions serve a purpose."""
    return [j for j, reaction in enumerate(study.reactions) if reaction.purpose == purpose]


def speeds_itself_up(study: Study) -> bool:
    """Tell whether a decomposition makes what a decomposition's rate rises with (autocatalysis, or one that feeds another)."""
    reactions = [r for r in study.reactions if r.purpose == "decomposition"]
    made = {s for r in reactions for s, n in r.stoichiometry.items() if n > 0.0}
    return any(s in made and order > 0.0 for r in reactions for s, order in r.orders.items())


def _uncooled(block: Floats, wall: Floats) -> None:
    """Take cooling, stirrer and losses out of segment blocks (..., block); wall (...) J/K stays."""
    for name in (at.UA_CONSTANT, at.UA_PER_VOLUME, at.DUTY_ON, at.JACKET_CAPACITY_INVERSE, at.JACKET_RENEWAL, at.GAIN, at.RESET_INVERSE,
                 at.STIRRER, at.LOSS, at.JACKET_SET):  # fmt: skip
        block[..., name] = 0.0
    block[..., at.FREE] = 1.0
    block[..., at.WALL] = wall


def _unfed(plant: Charged, block: Floats, elapsed: Floats) -> None:
    """Stop the feeds of blocks (M, block) at `elapsed` (M,) s after their start; time is counted from there."""
    head = plant.program.integers
    feed, base = slice(head[at.BLOCK_FEED], head[at.BLOCK_BASE]), slice(head[at.BLOCK_BASE], head[at.BLOCK_RATE])
    block[:, base] += block[:, feed] * elapsed[:, None]
    block[:, at.VOLUME] += block[:, at.VOLUME_RATE] * elapsed
    block[:, feed] = 0.0
    block[:, at.VOLUME_RATE] = block[:, at.T_START] = block[:, at.FEED_HEAT] = 0.0
    block[:, at.FEED_CP : at.FEED_CP + 4] = 0.0


def _only(study: Study, plant: Charged, block: Floats, purpose: str | None) -> Floats:
    """Return blocks (..., block) in which no reaction of another purpose runs; all run where the purpose is None."""
    result = block.copy()
    if purpose is None:
        return result
    start, terms = plant.program.integers[at.BLOCK_RATE], plant.program.structure.rate_terms
    k = int(start)
    for reaction, directions in zip(study.reactions, plant.program.structure.reactions, strict=True):
        width = terms * len(directions)
        if reaction.purpose != purpose:
            result[..., k : k + width] = 0.0
            result[..., k : k + width : terms] = NO_RATE
        k += width
    return result


def fail(study: Study, plant: Charged, rows: np.ndarray, time: Floats, state: Floats) -> Failed:
    """Return failures of cooling at times (M,) and states (M, R) of points `rows` (M,)."""
    settings = study.failure
    wall = plant.values.get("vessel.heat_capacity")[rows] * float(settings is not None and settings.wall)
    block = plant.blocks[rows, segment_at(plant, rows, time)].copy()
    _uncooled(block, wall)
    _unfed(plant, block, time - block[:, at.T_START])
    return Failed(rows, time, state, block)


def feeding_time(study: Study, plant: Charged, rows: np.ndarray, time: Floats) -> Floats:
    """Return for how long (s) feeds run on after a failure, (M,)."""
    settings = study.failure
    left: Floats = np.maximum(plant.brought.last_feed()[rows] - time, 0.0)
    if settings is None:
        return np.zeros_like(left)
    return left if settings.feeds == "run on" else np.minimum(left, settings.feeds_stop_after)


def path_blocks(study: Study, plant: Charged, failed: Failed, purpose: str | None = "synthesis") -> Floats:
    """Return the blocks (M, S, block) of the path after a failure: first what is still fed, then to the end."""
    last = _only(study, plant, failed.block, purpose)
    last[:, at.T_END] = LONG
    feeding = feeding_time(study, plant, failed.rows, failed.time)
    if not (feeding > 0.0).any():
        return last[:, None, :]
    fed = cut_segments(plant, failed.rows, failed.time, failed.time + feeding)
    _uncooled(fed, last[:, None, at.WALL])
    rest = plant.blocks[failed.rows, segment_at(plant, failed.rows, failed.time + feeding)].copy()
    _uncooled(rest, last[:, at.WALL])
    _unfed(plant, rest, failed.time + feeding - rest[:, at.T_START])
    rest[:, at.T_START], rest[:, at.T_END] = feeding, feeding + LONG
    blocks = _only(study, plant, np.concatenate([fed, rest[:, None, :]], axis=1), purpose)
    none = ~(feeding > 0.0)
    blocks[none] = last[none][:, None, :]
    return blocks


def run_synthesis(study: Study, plant: Charged, failed: Failed, tolerance: float) -> Synthesis:
    """March the synthesis without cooling; return its highest temperature and the mixture there."""
    blocks = path_blocks(study, plant, failed)
    nz = plant.program.structure.sources.shape[0]
    marched = march_on(plant, failed.rows, blocks, failed.state, tolerance)
    out = marched.out
    top, when = out[:, at.OUT_T_MAX], out[:, at.OUT_T_MAX_TIME]
    state = marched.at_last.copy()
    ok = np.isin(out[:, at.OUT_STATUS].astype(int), (DONE, RUNAWAY))
    early = ok & (state[:, nz] < top - STILL)
    if early.any():
        times = np.maximum(when[early], 0.0)[:, None]
        again = march_on(plant, failed.rows[early], blocks[early], failed.state[early], tolerance, times)
        state[early] = np.where(np.isnan(again.samples[:, 0]), state[early], again.samples[:, 0])
    state[:, nz] = np.where(ok, np.maximum(top, failed.state[:, nz]), np.nan)
    return Synthesis(state[:, nz].copy(), state, np.where(early, when, out[:, at.OUT_TIME]), ok)


def held_at(plant: Charged, rows: np.ndarray, time: Floats) -> tuple[Floats, Floats]:
    """Return what points `rows` (M,) hold by times (M,) s but for reaction: moles (M, I) and volume (M,) m3."""
    share = states.share_at(plant, rows, time[:, None])[:, :, 0]
    base = np.einsum("mf,mfi->mi", share, plant.brought.fed[rows]) + (plant.brought.charged[rows] if plant.extents else 0.0)
    return base, plant.brought.volume[rows] + (share * plant.brought.feed_volume[rows]).sum(axis=1)


def fed_by(plant: Charged, rows: np.ndarray, block: Floats, time: Floats) -> Floats:
    """Return blocks (M, block) without feeds that hold what points `rows` (M,) have fed by times (M,) s."""
    head, block = plant.program.integers, block.copy()
    block[:, head[at.BLOCK_BASE] : head[at.BLOCK_RATE]], block[:, at.VOLUME] = held_at(plant, rows, time)
    return block


def highest_at(study: Study, plant: Charged, failed: Failed, after: Floats) -> Floats:
    """Return when (s of the batch) the last was fed to mixtures whose highest temperature comes `after` (M,) s of their failure, (M,)."""
    return failed.time + np.clip(after, 0.0, feeding_time(study, plant, failed.rows, failed.time))


def mixture_block(study: Study, plant: Charged, failed: Failed, after: Floats) -> Floats:
    """Return the block (M, block) of the mixture left `after` (M,) s of a failure: what is fed by then and no more, decomposition alone."""
    return _only(study, plant, fed_by(plant, failed.rows, failed.block, highest_at(study, plant, failed, after)), "decomposition")


def closed_form(study: Study, plant: Charged, failed: Failed, after: Floats, state: Floats) -> Floats:
    """Return the closed form of the time to maximum rate (s) of mixtures in states (M, R) `after` (M,) s of a failure, (M,)."""
    nz, structure = plant.program.structure.sources.shape[0], plant.program.structure
    base, volume = held_at(plant, failed.rows, highest_at(study, plant, failed, after))
    moles = base + state[:, :nz] @ structure.amounts.T
    now = rates.flow(plant, failed.block, plant.constants[failed.rows, at.DELTA], moles, state[:, nz], volume)
    return rates.closed_form_tmr(now, purposes(study, "decomposition"), state[:, nz])


def mixture_amounts(plant: Charged, block: Floats, state: Floats) -> Floats:
    """Return moles (M, I) of states in blocks without feeds."""
    head, structure = plant.program.integers, plant.program.structure
    nz = structure.sources.shape[0]
    return block[:, head[at.BLOCK_BASE] : head[at.BLOCK_RATE]] + state[:, :nz] @ structure.amounts.T


def flow_of(plant: Charged, rows: np.ndarray, block: Floats, state: Floats) -> rates.Flow:
    """Return rates and heats (M, ...) at states in blocks without feeds."""
    nz = plant.program.structure.sources.shape[0]
    delta = plant.constants[rows, at.DELTA]
    return rates.flow(plant, block, delta, mixture_amounts(plant, block, state), state[:, nz], block[:, at.VOLUME])


def complete_rise(study: Study, plant: Charged, rows: np.ndarray, block: Floats, state: Floats, purpose: str) -> Floats:
    """Return the adiabatic rise (K) that completion of all reactions of a purpose would still bring, (M,)."""
    moles = mixture_amounts(plant, block, state)
    given_off = states.reference_heats(study, plant)[rows]
    heat = states.complete(study, moles, given_off, purpose)
    now = flow_of(plant, rows, block, state)
    return heat / now.capacity


def run_decomposition(
    study: Study, plant: Charged, rows: np.ndarray, block: Floats, state: Floats, horizon: Floats, tolerance: float
) -> Decomposition:
    """March the decomposition alone from mixtures (M, R) in blocks (M, block) to the largest dT/dt within a horizon (M,) s."""
    blocks = block[:, None, :].copy()
    blocks[:, 0, at.T_END] = horizon
    marched: Marched = march_on(plant, rows, blocks, state, tolerance)
    out = marched.out
    code, when = out[:, at.OUT_STATUS].astype(int), out[:, at.OUT_RATE_MAX_TIME]
    rise = complete_rise(study, plant, rows, block, state, "decomposition")
    last = np.nan_to_num(marched.at_last, nan=300.0)
    at_last = rates.heating_rate(flow_of(plant, rows, block, last))  # equal but for the rounding of two ways to work it out
    still_rising = (when >= out[:, at.OUT_TIME] * (1.0 - 1e-12)) | (at_last >= out[:, at.OUT_RATE_MAX] * (1.0 - 1e-9))
    hot = np.isin(code, (RUNAWAY, STEP_TOO_SMALL))  # an explosion faster than time can be told apart has reached its largest rate
    at_start = rates.heating_rate(flow_of(plant, rows, block, state))
    at_once = (when <= 0.0) | (out[:, at.OUT_RATE_MAX] <= FASTER * at_start)
    nothing = (rise < STILL) | (out[:, at.OUT_RATE_MAX] <= 0.0)
    tmr = np.where(hot & still_rising, out[:, at.OUT_TIME], when)
    censored = ~hot & (nothing | still_rising | (at_once & (rise < SMALL_RISE)))
    tmr = np.where(at_once & ~censored & ~(hot & still_rising), 0.0, tmr)
    return Decomposition(np.where(censored, horizon, np.minimum(tmr, horizon)), censored, (code == DONE) | hot)
