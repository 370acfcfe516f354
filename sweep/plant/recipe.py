"""The recipe as segments: between two changes (feeds, events, the batch's end) every quantity stands still. One block each."""

from dataclasses import dataclass, replace

import numpy as np

from sweep.kernel import layout as at
from sweep.kernel.program import Program, Watch, compile_tables
from sweep.plant import chemistry
from sweep.plant.charge import Brought, brought_in
from sweep.plant.feeding import feed_as_it_went
from sweep.plant.happenings import Happenings, NDKind, sets_any, settings_at
from sweep.plant.values import Floats, Values
from sweep.study.model import HOTTEST, Study

TOO_HOT = HOTTEST  # K; above it a point is a runaway
HOLD_TIME = 1.0  # s; how fast the ideal hold of a set-point closes what is left of the gap


@dataclass(frozen=True)
class Charged:
    """Everything the kernel needs for N points: tables, blocks (N, S, block), starts (N, rows), constants (N, 8)."""

    study: Study
    values: Values
    program: Program
    brought: Brought
    blocks: Floats
    starts: Floats
    constants: Floats
    cp: Floats
    heats: Floats
    extents: bool
    boundaries: Floats  # (N, S) s: the segments' ends
    happened: Happenings


def final_time(study: Study, values: Values, last_feed: Floats) -> tuple[Floats, Floats]:
    """Return when the batch ends (NaN: at the target) and when the march ends (s), each (N,)."""
    end = np.full(values.count, np.nan) if study.batch_to_target else np.maximum(values.need("recipe.batch_time"), last_feed)
    longest = study.batch_time.longest if study.batch_time is not None else None
    if longest is None:
        final = end if not study.batch_to_target else np.maximum(values.get("batch_time.longest", 7 * 86400.0), last_feed)
    else:
        final = np.fmax(np.maximum(values.get("batch_time.longest", longest), last_feed), end)
    return end, final


@dataclass(frozen=True)
class Since:
    """A batch on its way: the time (N,) s from which its segments are wanted, and the kind of cooling until then (N,)."""

    time: Floats
    kind: NDKind


def _boundaries(brought: Brought, happened: Happenings, end: Floats, final: Floats, since: Since | None) -> Floats:
    """Return the ends of the segments, ascending, (N, S); what does not fall inside the march is pushed to its end."""
    columns = [*brought.start.T, *brought.end.T, *happened.when.T, np.where(np.isnan(end), final, end), final]
    times = np.stack(columns, axis=1)
    first = 0.0 if since is None else since.time[:, None]
    times = np.sort(np.where((times > first) & (times < final[:, None]), times, final[:, None]), axis=1)
    return times if since is None else times[:, : int((times < final[:, None]).sum(axis=1).max(initial=0)) + 1]


def _cooling(block: Floats, values: Values, kind: NDKind, first: bool, was: NDKind, charge_T: Floats) -> None:
    """Fill in the cooling of one segment."""
    jacket, coolant, duty = kind == 4, kind == 3, kind == 2
    through = jacket | coolant
    bottom = values.get("vessel.area.bottom")
    slope = (values.get("vessel.area.full") - bottom) / values.get("vessel.area.at_volume", 1.0)
    plain = values.has("vessel.area")
    area_constant = values.get("vessel.area") if plain else bottom
    area_slope = np.zeros_like(slope) if plain else slope
    U = values.get("vessel.U")
    block[:, at.UA_CONSTANT] = np.where(through, U * area_constant, 0.0)
    block[:, at.UA_PER_VOLUME] = np.where(through, U * area_slope, 0.0)
    block[:, at.FREE] = kind != 1
    block[:, at.DUTY_ON], block[:, at.DUTY] = duty, values.get("cooling.duty")
    block[:, at.SET_POINT] = values.get("cooling.set_point", charge_T)
    block[:, at.HOLD_RATE] = 1.0 / HOLD_TIME
    hold_up = values.get("cooling.hold_up", 1.0)
    capacity = values.get("cooling.coolant.density", 998.0) * hold_up * values.get("cooling.coolant.heat_capacity", 4180.0)
    block[:, at.JACKET_CAPACITY_INVERSE] = np.where(jacket, 1.0 / capacity, 0.0)
    block[:, at.JACKET_RENEWAL] = np.where(jacket, values.get("cooling.flow") / hold_up, 0.0)
    block[:, at.INLET] = values.get("cooling.inlet", 298.15)
    controlled = values.has("cooling.gain") and values.has("cooling.set_point")
    block[:, at.GAIN] = np.where(jacket, values.get("cooling.gain"), 0.0) if controlled else 0.0
    reset = values.get("cooling.reset_time", np.inf)
    block[:, at.RESET_INVERSE] = np.where(jacket & controlled, 1.0 / reset, 0.0)
    block[:, at.OPENING] = 0.0 if controlled else 1.0
    starts = jacket & (first | (was != 4))
    block[:, at.JACKET_SET] = starts | coolant
    start = values.get("cooling.start", charge_T)
    block[:, at.JACKET_START] = np.where(coolant, values.get("cooling.temperature", charge_T), start)


def _feeds(block: Floats, brought: Brought, cp: Floats, rate: Floats) -> None:
    """Fill in what the feeds bring in one segment; rate (N, F): shares of a whole feed per second."""
    flow = np.einsum("nf,nfi,nik->nfk", rate, brought.fed, cp)
    block[:, at.FEED_CP : at.FEED_CP + 4] = flow.sum(axis=1)
    powers = np.arange(1, 5)
    heat = flow * brought.temperature[:, :, None] ** powers / powers
    block[:, at.FEED_HEAT] = heat.sum(axis=(1, 2))


def plant_of(
    study: Study, values: Values, happened: Happenings, watches: tuple[Watch, ...] = (), since: Since | None = None
) -> Charged:
    """Return the arrays with which the kernel marches these points when their events happen as given; `since`: from a time on only."""
    structure = chemistry.structure_of(study)
    program = compile_tables(replace(structure, watches=watches))
    brought = feed_as_it_went(study, values, brought_in(study, values), happened)
    end, final = final_time(study, values, brought.last_feed())
    bounds = _boundaries(brought, happened, end, final, since)
    n, segments = bounds.shape
    blocks = np.zeros((segments, program.block, n)).transpose(2, 0, 1)  # a quantity's values side by side while they are written
    extents = chemistry.carries_extents(chemistry.stoichiometry(study)) or not study.reactions
    charge_T = values.get("recipe.charge.temperature", 298.15)
    cp, heats = _chemistry(study, values, program, blocks)
    was, begin = (np.full(n, -1), np.zeros(n)) if since is None else (since.kind, since.time)
    slowed = sets_any(study, "reactions.", "")
    for k in range(segments):
        block, stop = blocks[:, k, :], bounds[:, k]
        here, kind = settings_at(study, values, happened, begin)
        block[:, at.T_START], block[:, at.T_END] = begin, stop
        _contents(block, program, brought, cp, begin, stop, extents)
        _cooling(block, here, kind, k == 0 and since is None, was, charge_T)
        block[:, at.STIRRER] = here.get("vessel.stirrer_power")
        block[:, at.LOSS], block[:, at.AMBIENT] = here.get("vessel.heat_loss.UA"), here.get("vessel.heat_loss.ambient", 293.15)
        if slowed:
            terms = chemistry.rate_terms(study, here, heats, structure.rate_terms)
            block[:, program.integers[at.BLOCK_RATE] : program.integers[at.BLOCK_HEAT]] = _flat(terms)
        was, begin = np.where(stop > begin, kind, was), stop  # a segment of no length hands on what it follows
    starts = np.zeros((n, structure.rows))
    nz = structure.sources.shape[0]
    if not extents:
        starts[:, :nz] = brought.charged
    starts[:, nz] = starts[:, nz + 1] = charge_T
    constants = _constants(study, values, brought, end, final, starts, structure.target)
    return Charged(study, values, program, brought, np.ascontiguousarray(blocks), starts, constants, cp, heats, extents, bounds, happened)


def _chemistry(study: Study, values: Values, program: Program, blocks: Floats) -> tuple[Floats, Floats]:
    """Fill in what no event changes: rate terms, heats, heat capacities, wall; return heat capacities (N, I, 4) and heats (N, J, 5)."""
    head, structure = program.integers, program.structure
    cp = chemistry.heat_capacities(study, values)
    heats = chemistry.heats(study, values, cp)
    terms = chemistry.rate_terms(study, values, heats, structure.rate_terms)
    parts = [_flat(terms), _flat(heats[:, :, : structure.heat_terms]), _flat(cp[:, :, : structure.cp_terms])]
    blocks[:, :, head[at.BLOCK_RATE] : head[at.BLOCK_LENGTH]] = np.concatenate(parts, axis=1)[:, None, :]
    wall = values.get("vessel.heat_capacity")
    if not has_heat_capacities(study, values):
        wall = np.where(wall > 0.0, wall, 1.0)
    blocks[:, :, at.WALL] = wall[:, None]
    return cp, heats


def _contents(block: Floats, program: Program, brought: Brought, cp: Floats, begin: Floats, stop: Floats, extents: bool) -> None:
    """Fill in volume, amounts and feeds of one segment, from `begin` to `stop` (N,) s."""
    head = program.integers
    share, rate = brought.share(begin), brought.rate_at(0.5 * (begin + stop))
    block[:, at.VOLUME] = brought.volume + (brought.feed_volume * share).sum(axis=1)
    block[:, at.VOLUME_RATE] = (brought.feed_volume * rate).sum(axis=1)
    fed = np.einsum("nf,nfi->ni", share, brought.fed)
    block[:, head[at.BLOCK_BASE] : head[at.BLOCK_RATE]] = fed + (brought.charged if extents else 0.0)
    if rate.any():
        block[:, head[at.BLOCK_FEED] : head[at.BLOCK_BASE]] = np.einsum("nf,nfi->ni", rate, brought.fed)
        _feeds(block, brought, cp, rate)


def _flat(table: Floats) -> Floats:
    """Return (N, a, b) as (N, a b), for no points too."""
    return table.reshape(table.shape[0], table.shape[1] * table.shape[2])


def has_heat_capacities(study: Study, values: Values) -> bool:
    """Tell whether every species has a heat capacity."""
    return all(s.heat_capacity is not None or values.has(f"species.{s.name}.heat_capacity") for s in study.species)


def _constants(study: Study, values: Values, brought: Brought, end: Floats, final: Floats, starts: Floats, weights: Floats) -> Floats:
    """Return what the kernel must know of each point beside its segments, (N, 8)."""
    result = np.zeros((values.count, at.N_CONSTANTS))
    total = brought.total()
    result[:, at.END_FIXED], result[:, at.END_EARLIEST], result[:, at.T_FINAL] = end, brought.last_feed(), final
    result[:, at.TARGET_AMOUNT] = np.inf
    if study.target is not None and values.has("target.conversion"):
        whole = total[:, chemistry.names(study).index(study.target.species)]
        reacted = starts[:, : weights.size] @ weights
        result[:, at.TARGET_AMOUNT] = values.get("target.conversion") * whole + reacted
    reactive = [k for k, s in enumerate(study.species) if s.role != "solvent"]
    moles = total[:, reactive].sum(axis=1) if reactive else total.sum(axis=1)
    result[:, at.TURNAROUND] = values.get("recipe.turnaround")
    result[:, at.ATOL_AMOUNT] = 1e-3 * np.where(moles > 0.0, moles, 1.0)
    result[:, at.TOO_HOT] = TOO_HOT
    result[:, at.DELTA] = 1e-3 * values.get("accuracy.relative", 1e-6) * np.where(moles > 0.0, moles, 1.0) / brought.volume
    return result
