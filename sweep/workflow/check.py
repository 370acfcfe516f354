"""`check`: what was understood of a study, in words and in the study's own units."""

from collections.abc import Iterator

from sweep.base.units import show, si_unit
from sweep.plan import planned
from sweep.plan.draws import log_sd
from sweep.plant.told_events import cause_of, effect_of, set_of
from sweep.plant.understood import FeedSeen, ReactionSeen, Understood, understood
from sweep.study.model import Correlation, Limit, Study, Tolerance, Uncertain, Variable
from sweep.study.settings import Assurance

_SENSE = {"at_most": "at most", "at_least": "at least"}


def told(study: Study) -> list[tuple[str, list[str]]]:
    """Return headed lists of sentences; SweepError where the set-point lacks a quantity."""
    seen = understood(study)
    parts = [
        ("Reactions", [_reaction(study, r) for r in seen.reactions]),
        ("Charge and feeds", [*_charge(study, seen), *(_feed(study, f) for f in seen.feeds)]),
        ("Batch", list(_batch(study))),
        ("Cooling", list(_cooling(study, seen))),
        ("Events", [f"{cause_of(study, event)}: {effect_of(study, event)}" for event in study.events]),
        ("Scenarios", [f"{scenario.name}: {'; '.join(set_of(study, scenario))}" for scenario in study.scenarios]),
        ("Target", list(_target(study))),
        ("Limits", [_limit(study, limit) for limit in study.limits]),
        ("Variables", [_variable(study, v) for v in study.variables]),
        ("Uncertain", [*(_uncertain(study, one) for one in study.uncertain), *(_correlation(one) for one in study.correlations)]),
        ("Asked for", list(_asked(study))),
    ]
    return [(title, lines) for title, lines in parts if lines]


def _in(study: Study, value: float, si: str, path: str, fallback: str = "") -> str:
    """Return an SI value in the unit in which the study writes a quantity of the same dimension."""
    unit = study.units.get(path) or fallback or si
    return show(value, unit)


def _reaction(study: Study, seen: ReactionSeen) -> str:
    heat = "heat not given"
    if seen.heat is not None:
        kind = "gives off" if seen.heat < 0.0 else "takes up"
        heat = f"{kind} {show(abs(seen.heat), study.units.get(f'reactions.{seen.name}.heat.value', 'kJ/mol'))}"
    rise = "" if seen.rise is None else f", adiabatic rise {seen.rise:.4g} K for {show(seen.extent, 'kmol')} of it"
    path = f"reactions.{seen.name}.rate_constant.value"
    k = show(seen.k_start, study.units.get(path) or si_unit(study.dimensions[path]))
    return f"{seen.name} ({seen.purpose}): {seen.equation}; {heat}{rise}; k = {k} at the charge temperature"


def _charge(study: Study, seen: Understood) -> Iterator[str]:
    temperature = _in(study, study.values["recipe.charge.temperature"], "K", "recipe.charge.temperature")
    yield f"charge: {_in(study, seen.fill[0][1], 'm3', 'recipe.charge.volume')} at {temperature}"
    room = study.values.get("vessel.volume")
    for time, volume in seen.fill[1:]:
        share = f", {100.0 * volume / room:.3g} % of the vessel" if room else ""
        yield f"fill at {_in(study, time, 's', 'recipe.batch_time', 'h')}: {_in(study, volume, 'm3', 'recipe.charge.volume')}{share}"
    if seen.capacity is not None:
        yield f"heat capacity of the whole fill and the wall: {show(seen.capacity, 'MJ/K')}"


def _feed(study: Study, feed: FeedSeen) -> str:
    unit = study.units.get(f"recipe.feeds.{feed.name}.duration", "h")
    mass = "" if feed.mass is None else f" ({show(feed.mass, 'kg')}, {show(feed.mass / (feed.end - feed.start), 'kg/h')})"
    heat = "" if feed.heat is None else f"; its synthesis heat, reacting as it comes in: {show(feed.heat, 'kW')}"
    return f"feed {feed.name}: {show(feed.amount, 'kmol')}{mass} from {show(feed.start, unit)} to {show(feed.end, unit)}{heat}"


def _cooling(study: Study, seen: Understood) -> Iterator[str]:
    yield f"kind: {study.cooling_kind or 'isothermal'}"
    if seen.ua_start is not None and seen.duty_start is not None:
        yield f"at the start U A = {show(seen.ua_start, 'kW/K')}; with the coldest coolant it carries {show(seen.duty_start, 'kW')}"
    elif seen.duty_start is not None:
        yield f"it carries at most {show(seen.duty_start, 'kW')}"


def _batch(study: Study) -> Iterator[str]:
    longest = _written(study, "batch_time.longest")
    if study.batch_to_target:
        yield "ends when the target is reached, never before its last feed ends" + (f"; at {longest} where it is not reached" if longest else "")
    else:
        yield f"ends after {_written(study, 'recipe.batch_time')}"
    turnaround = study.values["recipe.turnaround"]
    yield f"turnaround: {_written(study, 'recipe.turnaround')}" if turnaround > 0.0 else "turnaround: none, so that the cycle is the batch alone"


def _written(study: Study, path: str) -> str:
    """Return a quantity in the unit it was written in; empty where it is not in the study."""
    return show(study.values[path], study.units[path]) if path in study.values else ""


def _target(study: Study) -> Iterator[str]:
    if study.target is not None:
        product = f", product {study.target.product}" if study.target.product else ""
        yield f"conversion of {study.target.species}: {study.values['target.conversion']:.6g}{product}"


def _limit(study: Study, limit: Limit) -> str:
    path = f"limits.{limit.name}.{limit.sense}"
    return f"{limit.name} {_SENSE[limit.sense]} {show(study.values[path], study.units[path])}"


def _variable(study: Study, v: Variable) -> str:
    unit = study.units.get(v.sets[0]) or v.unit
    now = study.values[v.sets[0]]
    levels = f", {v.levels} levels" if v.levels else ""
    held = "" if v.tolerance is None else f", held {_tolerance(study, v, v.tolerance)}"
    return f"{v.name}: {show(v.low, unit)} to {show(v.high, unit)}{levels}, now {show(now, unit)}{held}; sets {', '.join(v.sets)}"


def _spread(value: float, unit: str, dimension: str) -> str:
    """Return a difference in the unit of its quantity; of temperatures in K."""
    return f"{value:.4g} K" if dimension == "temperature" else show(value, unit)


def _tolerance(study: Study, v: Variable, held: Tolerance) -> str:
    size = f"{100.0 * held.size:.4g} %" if held.relative else _spread(held.size, study.units.get(v.sets[0]) or v.unit, study.dimensions[v.sets[0]])
    return f"with a standard deviation of {size}" if held.distribution == "normal" else f"within plus or minus {size}"


def _uncertain(study: Study, one: Uncertain) -> str:
    """Return an uncertain input in words: its distribution, in the unit in which its quantity is written."""
    unit, at = study.units.get(one.of) or si_unit(study.dimensions[one.of]), one.parameters
    ends = [show(at[key], unit) for key in ("low", "mode", "high") if key in at]
    if one.distribution == "table":
        said = f"{len(one.table):,} draws from {one.file}, {show(min(one.table), unit)} to {show(max(one.table), unit)}"
    elif one.distribution == "lognormal":
        said = f"lognormal, median {show(one.centre, unit)}, standard deviation of the logarithm {log_sd(one):.4g}"
    elif one.distribution in ("uniform", "triangular"):
        said = f"{one.distribution}, {', '.join(ends)}"
    else:
        said = f"normal, {show(one.centre, unit)}, standard deviation {_spread(at['sd'], unit, study.dimensions[one.of])}"
        said += "".join(f", {word} {show(at[key], unit)}" for key, word in (("low", "not below"), ("high", "not above")) if key in at)
    return f"{one.name}: {said}; of {one.of}"


def _correlation(one: Correlation) -> str:
    return f"{one.between[0]} and {one.between[1]}: correlation {'of rank' if one.kind == 'rank' else 'of normal scores'} {one.value:g}"


def _asked(study: Study) -> Iterator[str]:
    plan = planned(study)
    yield f"points: {plan.size:,} ({plan.kind})"
    if study.window is not None:
        units = {v.name: study.units.get(v.sets[0]) or v.unit for v in study.variables}
        held = [f"{name} {show(value, units[name])}" for name, value in study.window.at.items()]
        yield f"window over {study.window.axes[0]} and {study.window.axes[1]}" + (f", at {', '.join(held)}" if held else "")
    if study.batch_time is not None:
        longest = _written(study, "batch_time.longest")
        yield "batch time" + (f", sought up to {longest}" if longest else "")
    if study.failure is not None:
        yield f"cooling failure, horizon {show(study.values['failure.horizon'], study.units['failure.horizon'])}"
    if study.risk is not None:
        yield f"risk at the set-point: {study.risk.draws:,} draws ({study.risk.sampling})"
    if study.sensitivity is not None:
        what = "the uncertain inputs" if study.sensitivity.over == "uncertain" else "the variables, over their ranges"
        yield f"sensitivity to {what}: {study.sensitivity.trajectories} trajectories, {study.sensitivity.blocks:,} blocks"
    if study.map is not None:
        yield f"probability map: {study.map.steps} steps each way, {study.map.draws:,} draws"
    if study.ranges is not None:
        yield f"acceptable ranges of {', '.join(study.ranges.variables)}, limits holding {_sure(study.ranges.assurance)}"
    if study.optimum is not None:
        aims = " and ".join(f"{one.sense} {'margin_' if one.kind == 'margin' else ''}{one.name}" for one in study.optimum.objectives)
        yield f"optimum: {aims} over {', '.join(study.optimum.variables)}, limits holding {_sure(study.optimum.assurance)}"


def _sure(assurance: Assurance) -> str:
    if assurance.probability is None:
        return "nominally"
    return f"with a probability of {assurance.probability:g} ({assurance.draws:,} draws, confidence {assurance.confidence:g})"
